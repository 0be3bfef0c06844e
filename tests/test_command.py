"""The command line as its users meet it: exit statuses, what goes where, and that nothing is half-written."""

from __future__ import annotations

import json
import re
import subprocess
import sys
from pathlib import Path

import pytest

from tests.scenario_texts import BOARD, changed
from tolerance.command import main
from tolerance.report.files import NOTE

FIVE_MISTAKES = (
    ('foil = "18 um"', 'foil = "18"'),
    ('dk = 4.0', 'dk = "four"'),
    ('width = "180 um"', 'widht = "180 um"\nwidth = "180 um"'),
    ('layer = "L3"', 'layer = "L9"'),
    ('tolerance = 0.1', 'tolerance = -0.1'),
)


@pytest.fixture
def board(tmp_path: Path) -> Path:
    path = tmp_path / "board.toml"
    path.write_text(BOARD, encoding="utf-8")
    return path


def command(*arguments: object) -> int:
    with pytest.raises(SystemExit) as ended:
        main([str(argument) for argument in arguments])
    assert isinstance(ended.value.code, int)
    return ended.value.code


def test_five_mistakes_are_five_messages_and_nothing_is_written(
    tmp_path: Path, capsys: pytest.CaptureFixture[str],
) -> None:
    path = tmp_path / "orchard.toml"
    path.write_text(changed(BOARD, *FIVE_MISTAKES), encoding="utf-8")
    assert command("run", path, "--out", tmp_path / "result") == 2
    shown = capsys.readouterr()
    assert shown.out == ""
    lines = shown.err.strip().split("\n")
    assert len(lines) == 5
    assert all(line.startswith("orchard.toml: ") for line in lines)
    assert "Traceback" not in shown.err
    assert [entry.name for entry in tmp_path.iterdir()] == ["orchard.toml"]


def test_json_stands_alone_on_standard_output_and_writes_no_files(
    board: Path, capsys: pytest.CaptureFixture[str],
) -> None:
    assert command("run", board, "--json", "--coupons", 256, "--seed", 7) == 0
    shown = capsys.readouterr()
    result = json.loads(shown.out)
    assert (result["seed"], result["coupons"]) == (7, 256)
    assert {"title", "yield", "lines"} <= set(result)
    assert shown.err == ""
    assert [entry.name for entry in board.parent.iterdir()] == ["board.toml"]


def test_run_writes_workbook_and_figures(board: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = board.parent / "result"
    assert command("run", board, "--coupons", 256, "--out", folder) == 0
    names = {path.suffix for path in folder.iterdir()}
    assert names == {".xlsx", ".png", ".json"}  # the last: a note of what was written
    assert "estimate" in capsys.readouterr().out


def test_a_line_that_is_renamed_leaves_no_old_figure_behind_and_what_is_not_ours_stays(board: Path) -> None:
    folder = board.parent / "result"
    assert command("run", board, "--coupons", 256, "--quiet", "--out", folder) == 0
    names = {path.name for path in folder.iterdir()}
    assert command("run", board, "--coupons", 256, "--quiet", "--out", folder) == 0  # figures the same, byte for byte
    assert {path.name for path in folder.iterdir()} == names
    (folder / "notes.png").write_bytes(b"mine")
    (folder / "clock-pair.png").write_bytes(b"changed by hand")
    board.write_text(changed(BOARD, ("radio feed", "antenna feed"), ("clock pair", "clock")), encoding="utf-8")
    assert command("run", board, "--coupons", 256, "--quiet", "--out", folder) == 0
    assert {path.name for path in folder.iterdir() if not path.name.startswith(".")} == {
        "tolerance.xlsx", "all-lines.png", "yield-against-limit.png", "antenna-feed.png", "clock.png", "notes.png",
        "clock-pair.png", "run-record.json"}
    assert command("run", board, "--coupons", 256, "--quiet", "--out", folder, "--figures", "svg") == 0
    assert {path.name for path in folder.glob("*.png")} == {"notes.png", "clock-pair.png"}
    assert {path.name for path in folder.glob("*.svg")} == {
        "all-lines.svg", "yield-against-limit.svg", "antenna-feed.svg", "clock.svg"}


@pytest.mark.parametrize("note", ["", "[1, 2]", '{"run": {"../board.toml": "x"}}', '{"run": 3}'])
def test_a_note_that_is_not_ours_removes_nothing(board: Path, note: str) -> None:
    folder = board.parent / "result"
    folder.mkdir()
    (folder / NOTE).write_text(note, encoding="utf-8")
    (folder / "kept.png").touch()
    assert command("run", board, "--coupons", 256, "--quiet", "--out", folder) == 0
    assert board.exists()
    assert (folder / "kept.png").exists()


def test_quiet_says_nothing(board: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert command("run", board, "--coupons", 256, "--quiet", "--out", board.parent / "result") == 0
    shown = capsys.readouterr()
    assert shown.out == shown.err == ""


def test_strict_tells_a_missed_target_by_its_status(board: Path) -> None:
    tight = board.with_name("tight.toml")
    tight.write_text(changed(BOARD, ('limit = "10 %"', 'limit = "1 %"')), encoding="utf-8")
    assert command("run", tight, "--json", "--coupons", 256) == 0
    assert command("run", tight, "--json", "--coupons", 256, "--strict") == 1


@pytest.mark.parametrize("option", [("--coupons", 1000), ("--coupons", 0), ("--seed", -1), ("--direct", -5)])
def test_numbers_out_of_range_are_refused(
    board: Path, option: tuple[str, int], capsys: pytest.CaptureFixture[str],
) -> None:
    assert command("run", board, *option) == 2
    assert re.search(rf"{option[0]} {option[1]}: must be", capsys.readouterr().err)


def test_check_gives_nominal_impedances(board: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert command("check", board, "--json") == 0
    lines = json.loads(capsys.readouterr().out)["lines"]
    assert [line["name"] for line in lines] == ["radio feed", "clock pair"]
    assert lines[0]["common_mode_ohm"] is None
    assert lines[1]["common_mode_ohm"] > 0
    assert command("check", board) == 0
    assert "radio feed" in capsys.readouterr().out


def test_new_writes_a_starter_that_runs_and_refuses_to_overwrite(
    tmp_path: Path, capsys: pytest.CaptureFixture[str],
) -> None:
    path = tmp_path / "starter.toml"
    assert command("new", path) == 0
    before = path.read_bytes()
    assert command("new", path) == 2
    assert path.read_bytes() == before
    assert command("check", path) == 0
    assert command("run", path, "--json", "--coupons", 256) == 0
    capsys.readouterr()


def test_schema_is_json(capsys: pytest.CaptureFixture[str]) -> None:
    assert command("schema") == 0
    assert json.loads(capsys.readouterr().out)["$schema"].startswith("https://json-schema.org/")


@pytest.mark.parametrize("given", ["missing.toml", "."])
def test_a_file_that_cannot_be_read_is_told(tmp_path: Path, given: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert command("run", tmp_path / given) == 2
    assert "Traceback" not in capsys.readouterr().err


def test_a_reader_that_stops_reading_is_no_defect(board: Path) -> None:
    ended = subprocess.run(
        f"{sys.executable} -m tolerance schema | true", shell=True, capture_output=True, text=True, check=False,
        cwd=board.parent)
    assert "Traceback" not in ended.stderr
