"""The page without a browser: what it is made of, against the field solver, the program's own draws, and the rules."""

from __future__ import annotations

import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from tests.page_examples import (
    EVERY_SHAPE,
    HOSTILE,
    SCENARIOS,
    SMALL,
    board_page,
    data_of,
    example_page,
    germs_of,
    impedance_of,
    scenario_of,
    ten_layers,
)
from tolerance.arrays import FloatArray
from tolerance.command import main
from tolerance.process.draws import ProcessDraws, process_of
from tolerance.process.other_laws import laws_of, scaled, with_laws
from tolerance.report.page.data import script_data
from tolerance.report.page.document import LARGEST_FILE, page_text
from tolerance.scenario import load
from tolerance.scenario.writing import scenario_pieces
from tolerance.solver.plan import SolverSettings
from tolerance.study.lines import prepare
from tolerance.study.lots import draw
from tolerance.surrogate.wide import fit_wide

BOARDS = sorted(path.stem for path in SCENARIOS.glob("*.toml"))


@pytest.mark.parametrize("name", BOARDS)
def test_a_scenario_written_anew_says_the_same(name: str) -> None:
    scenario = load(SCENARIOS / f"{name}.toml")
    evaluation = scenario.evaluation
    assert evaluation.seed is not None
    text = "".join(each.text for each in scenario_pieces(scenario, seed=evaluation.seed, coupons=evaluation.coupons))
    left_out = {"text", "source", "origins", "sweep"}  # a state is one scenario, not the many of a sweep
    assert scenario_of(text).model_dump(exclude=left_out) == scenario.model_dump(exclude=left_out)


def test_every_key_of_a_scenario_is_written_anew() -> None:
    text = EVERY_SHAPE + """
[test]
repeatability = "0.4 ohm"
bias = "-0.1 ohm"
reading = { position = "75 mm" }
sample_size = 5
accept_number = 1
"""
    text = text.replace('of = "L2.foil"', 'of = "L2.foil"\nlevel = { lot = 0.25, coupon = 0.75 }')
    text = text.replace('tolerance = 0.02', 'tolerance = 0.02\nlevel = "coupon"')
    text = text.replace('title = "Every shape"', r'title = "Every \"shape\" \\ of # them"')
    scenario = scenario_of(text)
    again = scenario_of("".join(each.text for each in scenario_pieces(scenario, seed=11, coupons=8192)))
    left_out = {"text", "source", "origins"}
    assert again.model_dump(exclude=left_out) == scenario.model_dump(exclude=left_out)
    assert [each.has_level for each in again.variations] == [each.has_level for each in scenario.variations]


@pytest.mark.parametrize("text", [SMALL, EVERY_SHAPE], ids=["small", "every shape"])
def test_the_page_has_the_draws_of_the_run(text: str) -> None:
    scenario, one = scenario_of(text), example_page(text)
    draws = draw(scenario, process_of(scenario), coupons=one.result.coupons,
                 chance=np.random.default_rng(one.result.seed).spawn(1)[0])
    assert germs_of(one.draws) == pytest.approx(draws.germ, abs=1e-12)


def test_draws_in_lots_are_carried_as_they_are() -> None:
    one = board_page("fire-lookout-4-layer")
    scenario = load(SCENARIOS / "fire-lookout-4-layer.toml")
    draws = draw(scenario, process_of(scenario), coupons=one.result.coupons,
                 chance=np.random.default_rng(one.result.seed).spawn(1)[0])
    own = draws.germ.reshape(draws.replicates, -1, draws.germ.shape[1])[:, : one.draws.block]
    assert np.array_equal(germs_of(one.draws), own.reshape(-1, draws.germ.shape[1]))
    assert len(page_text(one).encode()) < LARGEST_FILE


@pytest.mark.parametrize(("factor", "largest"), [(1.0, 0.004), (0.5, 0.004), (2.0, 0.03)])
def test_impedances_are_the_field_solvers(factor: float, largest: float) -> None:
    """Root mean square error on 64 solved coupons, of the half-width of the limits.

    0.004 of it would misjudge some 0.1 % of coupons one way where a quarter of them lie near a limit, were all errors
    of one sign; at twice the tolerances a few sections hardly exist.
    """
    scenario, one = scenario_of(EVERY_SHAPE), example_page(EVERY_SHAPE)
    process = process_of(scenario)
    laws = {name: scaled(law, factor) for name, law in laws_of(process).items() if not name.endswith("etch_factor")}
    chance = np.random.default_rng(8)
    rows = chance.integers(0, one.result.coupons, 64)
    draws = ProcessDraws(with_laws(process, laws), germs_of(one.draws)[rows])
    for line, paged in zip(scenario.lines, one.lines, strict=True):
        prepared = prepare(scenario, line, SolverSettings())
        section = prepared.section(draws)
        solvable = np.flatnonzero(section.possible)
        values = {each.name: draws.etch(each.name.rpartition(".")[0], width=line.width) if each.drawn
                  else draws.value(each.name) for each in paged.inputs}
        found = impedance_of(paged, values)
        assert np.array_equal(found > 0.0, section.possible), line.name
        error = found[solvable] - prepared.impedance(section.rows(solvable))
        half = line.target * scenario.limit_of(line)
        assert np.sqrt(np.mean(error**2)) < largest * half, line.name


def test_a_moved_width_is_a_redrawn_line() -> None:
    """The pair 10 um wider at the same pitch, solved anew, against the page's fit with 10 um more foot."""
    scenario, one = scenario_of(EVERY_SHAPE), example_page(EVERY_SHAPE)
    line, paged = scenario.lines[0], one.lines[0]
    assert line.gap is not None
    wider = line.model_copy(update={"width": line.width + 10e-6, "gap": line.gap - 10e-6})
    draws = ProcessDraws(process_of(scenario), germs_of(one.draws)[:64])
    prepared = prepare(scenario, wider, SolverSettings())
    values = {each.name: draws.etch("L1", width=wider.width) + 10e-6 if each.drawn else draws.value(each.name)
              for each in paged.inputs}
    solved = prepared.impedance(prepared.section(draws))
    error = impedance_of(paged, values) - solved
    assert np.sqrt(np.mean(error**2)) < 0.004 * 0.09 * line.target


def test_the_page_needs_nothing_from_outside_and_nothing_can_be_fetched() -> None:
    text = page_text(example_page(EVERY_SHAPE))
    assert "default-src 'none'" in text
    assert not re.findall(r"""(?:src|href|action)\s*=\s*["'](?!#)""", text)
    outside = [each for each in re.findall(r"https?://[^\s\"'<>]+", text) if each != "http://www.w3.org/2000/svg"]
    assert not outside
    assert "unsafe" not in text
    assert not re.search(r'\sstyle="|\son\w+="', text)


def test_hostile_text_stays_text() -> None:
    escaped = HOSTILE.replace("\\", "\\\\").replace('"', '\\"')
    text = SMALL.replace("Kite reel, 2 layers", escaped).replace('"beacon"', f'"{escaped}"').replace(
        '"C1"', f'"{escaped.replace("*", "")}"').replace("C1.thickness", f"{escaped}.thickness")
    one = example_page(text)
    page = page_text(one)
    assert page.count("<script") == 2
    assert page.count("</script>") == 2
    assert "<b onclick" not in page
    assert "<" not in script_data(one)
    data = data_of(page)
    assert data["title"] == HOSTILE
    assert data["lines"][0]["name"] == HOSTILE


def test_a_page_of_ten_layers_stays_small() -> None:
    one = ten_layers()
    assert len(page_text(one).encode()) < LARGEST_FILE


def test_no_script_has_a_dimension_that_is_a_letter_with_a_digit() -> None:
    folder = Path(__file__).parents[1] / "tolerance" / "report" / "page"
    for path in folder.glob("*.js"):
        assert not re.findall(r"\b(?:const|let|function) [a-zA-Z]\d+\b", path.read_text(encoding="utf-8")), path.name


def test_the_polynomial_of_degree_four_is_exact_for_one() -> None:
    """Exact: a polynomial of degree 4 in three coordinates, from more points than it has terms."""
    chance = np.random.default_rng(2)
    at = chance.uniform(-1.0, 1.0, (120, 3))

    def truth(x: FloatArray) -> FloatArray:
        return np.asarray(3.9 + 0.2 * x[:, 0] - 0.1 * x[:, 1] * x[:, 2]
                          + 0.05 * x[:, 0] ** 3 * x[:, 1] - 0.03 * x[:, 2] ** 4)

    fitted = fit_wide(at, truth(at))
    fresh = chance.uniform(-1.0, 1.0, (50, 3))
    assert fitted.tree.evaluate(fresh) == pytest.approx(truth(fresh), abs=2e-5)
    assert np.abs(fitted.leave_one_out).max() < 2e-5


def test_the_command_writes_one_file(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    file = tmp_path / "kite.toml"
    file.write_text(SMALL, encoding="utf-8")
    with pytest.raises(SystemExit) as status:
        main(["page", str(file), "--out", str(tmp_path / "out")])
    assert status.value.code == 0
    assert [path.name for path in (tmp_path / "out").iterdir()] == ["page.html"]
    assert "page.html" in capsys.readouterr().out


def test_run_writes_the_page_where_it_is_asked_for(tmp_path: Path) -> None:
    file = tmp_path / "kite.toml"
    file.write_text(SMALL, encoding="utf-8")
    for options, there in ((["--page"], True), ([], False)):
        with pytest.raises(SystemExit) as status:
            main(["run", str(file), "--out", str(tmp_path / "out"), "--quiet", *options])
        assert status.value.code == 0
        assert (tmp_path / "out" / "page.html").exists() is there  # a page of an earlier run does not belong any more


def test_a_page_beside_json_needs_a_folder(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    file = tmp_path / "kite.toml"
    file.write_text(SMALL, encoding="utf-8")
    with pytest.raises(SystemExit) as status:
        main(["run", str(file), "--page", "--json"])
    assert status.value.code == 2
    assert "--out" in capsys.readouterr().err


def test_nothing_that_varies_makes_a_page_too() -> None:
    text = SMALL[: SMALL.index("[[variations]]")]
    one = example_page(text)
    assert one.variations == ()
    assert page_text(replace(one)).startswith("<!DOCTYPE html>")
