"""`check --formulas`: published formulas beside the field solver, on the terminal and as JSON."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from tests.scenario_texts import BOARD, SIX_LAYERS, changed
from tolerance.command import main
from tolerance.scenario import parse
from tolerance.study.check import check

TOP_MASK = SIX_LAYERS[: SIX_LAYERS.index('[[layers]]\nname = "L1"')]
#: The board without its mask, with less plating, and with its inner layer midway between planes in one Dk.
PLAIN = changed(BOARD, (TOP_MASK, "\n"), ('plating = "25 um"', 'plating = "12 um"'),
                ('thickness = "300 um"\ndk = 3.9', 'thickness = "120 um"\ndk = 4.2'),
                ('width = "100 um"\ngap = "150 um"', 'width = "120 um"\ngap = "150 um"'))


def shown(text: str, tmp_path: Path, capsys: pytest.CaptureFixture[str], *options: str) -> str:
    path = tmp_path / "board.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(SystemExit) as ended:
        main(["check", str(path), *options])
    assert ended.value.code == 0
    return capsys.readouterr().out


def lines(text: str, tmp_path: Path, capsys: pytest.CaptureFixture[str], *options: str) -> list[dict[str, Any]]:
    answer: list[dict[str, Any]] = json.loads(shown(text, tmp_path, capsys, "--json", *options))["lines"]
    return answer


def test_json_sets_each_formula_beside_the_solver(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    feed, pair = lines(PLAIN, tmp_path, capsys, "--formulas")
    said = {one["formula"]: one for one in feed["formulas"]}
    assert set(said) == {"Hammerstad and Jensen 1980", "Wheeler 1977"}
    for one in said.values():
        assert abs(one["difference_percent"]) < 2.0, "Wheeler's claim, from memory, with a sloping side on top"
        assert one["difference_percent"] == pytest.approx(100.0 * (one["impedance_ohm"] / feed["impedance_ohm"] - 1.0))
    assert said["Wheeler 1977"]["claimed_percent"] == pytest.approx(2.0)
    assert said["Hammerstad and Jensen 1980"]["claimed_percent"] is None
    strips = {one["formula"]: one for one in pair["formulas"]}
    assert strips["Cohn 1955, thin"]["impedance_ohm"] is None
    assert "thickness" in strips["Cohn 1955, thin"]["remark"]
    spoken = strips["Cohn 1955, thick"]
    assert spoken["impedance_ohm"] is not None
    assert abs(spoken["difference_percent"]) < 4.5  # the differential impedance: twice the odd mode on both sides


def test_common_mode_is_compared_with_half_the_even_mode() -> None:
    text = changed(PLAIN, ('target = "100 ohm"', 'target = "30 ohm"\nmode = "common"'))
    pair = check(parse(text), formulas=True).lines[1]
    assert pair.formulas is not None
    spoken = [one.impedance for one in pair.formulas.opinions if one.impedance is not None]
    assert spoken == [pytest.approx(pair.impedance, rel=0.02)]


def test_json_tells_why_there_is_none(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    feed, pair = lines(BOARD, tmp_path, capsys, "--formulas")
    assert (feed["formulas"], feed["formulas_none_because"]) == ([], "solder mask covers it")
    assert (pair["formulas"], pair["formulas_none_because"]) == ([], "dielectrics of different Dk")


def test_without_the_option_nothing_is_said(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert all("formulas" not in line for line in lines(PLAIN, tmp_path, capsys))
    assert "Wheeler" not in shown(PLAIN, tmp_path, capsys)


@pytest.mark.parametrize("text", [PLAIN, BOARD], ids=["plain", "board"])
def test_the_table_fits_80_columns(text: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    table = shown(text, tmp_path, capsys, "--formulas")
    assert all(len(row) <= 80 for row in table.split("\n"))
    assert ("Hammerstad and Jensen 1980" in table) == (text is PLAIN)
    assert ("solder mask" in table) == (text is BOARD)
    assert "no result uses them" in " ".join(table.split())


def test_formulas_leave_the_impedance_alone() -> None:
    scenario = parse(PLAIN)
    assert [line.impedance for line in check(scenario, formulas=True).lines] == [
        line.impedance for line in check(scenario).lines]
