"""The deciding commands as their users meet them: what is printed, where, and what is written."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from openpyxl import load_workbook

from tests.scenario_texts import BOARD
from tests.test_command import command
from tests.test_study_decide import OFFERS

JOBS = ("tighten", "center", "promise", "compare")


@pytest.fixture
def board(tmp_path: Path) -> Path:
    path = tmp_path / "board.toml"
    path.write_text(BOARD + OFFERS, encoding="utf-8")
    return path


def arguments(job: str, board: Path) -> list[object]:
    return [job, board, *([board] if job == "compare" else []), "--coupons", 256]


@pytest.mark.parametrize("job", JOBS)
def test_a_decision_is_printed_in_80_columns_and_writes_nothing(
    job: str, board: Path, capsys: pytest.CaptureFixture[str],
) -> None:
    assert command(*arguments(job, board)) == 0
    shown = capsys.readouterr()
    assert "radio feed" in shown.out
    assert max(len(line.rstrip()) for line in shown.out.splitlines()) <= 80
    assert shown.err == ""
    assert [path.name for path in board.parent.iterdir()] == ["board.toml"]


@pytest.mark.parametrize("job", JOBS)
def test_out_gets_a_workbook_and_a_figure(job: str, board: Path, tmp_path: Path) -> None:
    assert command(*arguments(job, board), "--out", tmp_path / "out", "--quiet") == 0
    book = load_workbook(tmp_path / "out" / f"{job}.xlsx")
    assert all(sheet.max_row > 1 for sheet in book.worksheets)
    assert (tmp_path / "out" / f"{job}.png").stat().st_size > 10_000


@pytest.mark.parametrize("job", JOBS)
def test_json_stands_alone(job: str, board: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert command(*arguments(job, board), "--json") == 0
    assert json.loads(capsys.readouterr().out)["coupons"] == 256


def test_the_note_tells_all_that_a_drawing_needs(
    board: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str],
) -> None:
    assert command("note", board, "--width-change", "8 %", "--out", tmp_path / "out") == 0
    shown = capsys.readouterr().out
    assert (tmp_path / "out" / "note.txt").read_text(encoding="utf-8") == shown
    text = " ".join(shown.split())
    for words in ("clock pair", "100 differential", "10 %, 90 to 110", "L3, L2, L4", "100, 150", "by up to 8 %",
                  "IPC-TM-650 2.5.5.7", "Every panel carries at least one coupon", "Report with each lot"):
        assert words in text, words
    assert max(len(line) for line in shown.splitlines()) <= 80


def test_the_note_as_json(board: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert command("note", board, "--json") == 0
    note = json.loads(capsys.readouterr().out)
    assert note["lines"][1]["references"] == ["L2", "L4"]
    assert note["lines"][1]["most_width_change_um"] == pytest.approx(10.0)
    assert note["lines"][0]["low_limit_ohm"] == pytest.approx(45.0)


@pytest.mark.parametrize(("words", "said"), [
    (["--grid", "1"], "--grid"), (["--grid", "0 um"], "above 0 um"), (["--reach", "80 %"], "from 0 to 50 %"),
    (["--reach", "0 %"], "--reach"), (["--move", "L1.foil"], "--move"), (["--gaps", "110"], "--gaps"),
    (["--centring-error", "2"], "--centring-error"), (["--coupons", "100"], "power of two"), (["--seed", "-1"], "seed"),
])
def test_an_option_out_of_range_is_said_in_one_line(
    words: list[str], said: str, board: Path, capsys: pytest.CaptureFixture[str],
) -> None:
    assert command("center", board, *words) == 2
    shown = capsys.readouterr()
    assert shown.out == ""
    assert said in shown.err
    assert len(shown.err.strip().splitlines()) == 1


def test_pairs_get_a_width_for_each_gap(board: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert command("center", board, "--coupons", 256, "--gaps", "130 um, 170 um", "--json") == 0
    feed, pair = json.loads(capsys.readouterr().out)["lines"]
    assert feed["gaps"] == []
    assert [each["gap_um"] for each in pair["gaps"]] == pytest.approx([130.0, 170.0])
    assert pair["gaps"][0]["width_um"] < pair["gaps"][1]["width_um"], "a wider gap takes a wider trace"


def test_the_drawing_note_is_in_the_report_of_a_run(
    board: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str],
) -> None:
    assert command("run", board, "--coupons", 256, "--out", tmp_path / "out", "--quiet") == 0
    assert command("note", board) == 0
    text = " ".join(capsys.readouterr().out.split())
    sheet = load_workbook(tmp_path / "out" / "tolerance.xlsx")["Drawing note"]
    rows = [[cell for cell in row if cell is not None] for row in sheet.iter_rows(values_only=True)]
    assert rows[2][:3] == ["line", "target [ohm]", "of a pair"]
    assert rows[3] == ["radio feed", 50, 0.1, 45, 55, "L1", "L2", pytest.approx(180), pytest.approx(18)]
    assert rows[4] == ["clock pair", 100, "differential", 0.1, 90, pytest.approx(110), "L3", "L2, L4",
                       pytest.approx(100), pytest.approx(150), pytest.approx(10)]
    notes = [str(row[0]) for row in rows[5:] if row]
    assert len(notes) == 5
    assert all(note in text for note in notes), "word for word what `note` prints"
