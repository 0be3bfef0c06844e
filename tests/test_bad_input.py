"""Every spoiled input of the catalogue brings exactly the lines that stand there, exit status 2, and no file."""

from __future__ import annotations

import os
import re
from pathlib import Path

import pytest

from tests.bad_files import FILES, TABLES, BadFile
from tests.catalogue import FOLDER, SCENARIO, Case, case_of, cases
from tests.scenario_texts import BOARD, changed
from tolerance.command import main
from tolerance.scenario import load

TEXTS = sorted(path.name for path in FOLDER.glob("*.txt"))
CATALOGUE = [(name, case) for name in TEXTS for case in cases(name)]


def told_by(arguments: list[str], capsys: pytest.CaptureFixture[str]) -> list[str]:
    """The lines on standard error of a command that must end with status 2 and write nothing."""
    before = sorted(os.listdir())
    with pytest.raises(SystemExit) as ended:
        main(arguments)
    shown = capsys.readouterr()
    assert ended.value.code == 2, shown.err
    assert shown.out == ""
    assert sorted(os.listdir()) == before
    return shown.err.removesuffix("\n").split("\n")


@pytest.mark.parametrize("case", [case for _, case in CATALOGUE],
                         ids=[f"{name.removesuffix('.txt')}: {case.title}" for name, case in CATALOGUE])
def test_bad_input_is_told(
    case: Case, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.chdir(tmp_path)
    for name, text in case.files.items():
        (tmp_path / name).write_text(text, encoding="utf-8")
    assert told_by(case.command, capsys) == case.told


@pytest.mark.parametrize("bad", FILES, ids=[bad.title for bad in FILES])
def test_a_file_that_is_no_scenario_is_told(
    bad: BadFile, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.chdir(tmp_path)
    bad.make(tmp_path / SCENARIO)
    assert told_by(["run", SCENARIO, "--out", "result"], capsys) == [f"{SCENARIO}: {bad.told}"]
    assert told_by(["check", SCENARIO], capsys) == [f"{SCENARIO}: {bad.told}"]


@pytest.mark.parametrize("bad", TABLES, ids=[bad.title for bad in TABLES])
def test_a_file_that_is_no_table_is_told(
    bad: BadFile, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str],
) -> None:
    """The same words from a measured variation, from `fit`, and of measured coupons; of a workbook also as a reply."""
    monkeypatch.chdir(tmp_path)
    name = f"press.{bad.ending}"
    bad.make(tmp_path / name)
    given = f'shape = "measured"\nfile = "{name}"\ncolumn = "P1 um"'
    (tmp_path / SCENARIO).write_text(changed(BOARD, ('tolerance = "10 %"', given)), encoding="utf-8")
    (tmp_path / "plain.toml").write_text(BOARD, encoding="utf-8")
    assert told_by(["fit", name], capsys) == [f"{name}: {bad.told}"]
    assert told_by(["reconcile", "plain.toml", name], capsys) == [f"{name}: {bad.told}"]
    if (tmp_path / name).is_file():
        told = told_by(["run", SCENARIO], capsys)
        assert told == [f'{SCENARIO}: [[variations]] "P1.thickness": column = "P1 um": {name}: {bad.told}']
    if bad.is_reply:
        assert told_by(["take", "plain.toml", name], capsys) == [f"{name}: {bad.told}"]


@pytest.mark.parametrize("arguments", [
    [], ["frobnicate"], ["run"], ["check"], ["compare"], ["take", SCENARIO], ["reconcile", SCENARIO], ["fit"], ["new"],
    ["run", SCENARIO, "--frobnicate"], ["run", SCENARIO, "another.toml"], ["run", SCENARIO, "--seed"],
    ["run", SCENARIO, "--seed", "one"], ["run", SCENARIO, "--seed", "1.5"], ["run", SCENARIO, "--seed", "9" * 5000],
    ["run", SCENARIO, "--coupons", "1e4"], ["run", SCENARIO, "--coupons", "nan"], ["run", SCENARIO, "--direct", "x"],
    ["run", SCENARIO, "--figures", "bmp"], ["check", SCENARIO, "--figures", "\x1b[31m"], ["run", SCENARIO, "--json=1"],
    ["ask", SCENARIO, "--hide", "everything"], ["run", SCENARIO, "--\x1b]0;gone\x07"], ["\x1b[2J"],
], ids=lambda arguments: " ".join(arguments)[:40].encode("unicode_escape").decode() or "nothing")
def test_a_command_that_is_none_is_told_with_its_usage(
    arguments: list[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / SCENARIO).write_text(BOARD, encoding="utf-8")
    told = told_by(arguments, capsys)
    assert told[0].startswith("usage: tolerance")
    assert re.match(r"tolerance( \w+)?: error: ", told[-1])
    assert all(line.isprintable() for line in told)


def test_the_catalogue_is_large_and_every_title_stands_once_in_its_text() -> None:
    assert len(CATALOGUE) + len(FILES) + len(TABLES) >= 350
    for name in TEXTS:
        titles = [case.title for case in cases(name)]
        assert len(set(titles)) == len(titles), name
    assert all(case.told for _, case in CATALOGUE)


def test_a_case_is_read_as_its_text_says() -> None:
    case = case_of(["# thin", "$ check board.toml", "- dk = 4.0", "+ dk = 4.1", "+ df = 0", "& [report]",
                    "@ other.toml", "= a", "=", ">> told", "> other.toml: told"])
    assert case.command == ["check", "board.toml"]
    assert "dk = 4.1\ndf = 0\n" in case.files["board.toml"]
    assert case.files["board.toml"].endswith("[report]\n")
    assert case.files["other.toml"] == "a\n\n"
    assert case.told == ["board.toml: told", "other.toml: told"]


@pytest.mark.parametrize("content", [b"\xef\xbb\xbf" + BOARD.encode(), BOARD.replace("\n", "\r\n").encode()],
                         ids=["a byte order mark", "carriage returns before line ends"])
def test_what_editors_do_to_a_text_is_no_mistake(content: bytes, tmp_path: Path) -> None:
    (tmp_path / SCENARIO).write_bytes(content)
    assert load(tmp_path / SCENARIO).title == "Orchard gateway"
