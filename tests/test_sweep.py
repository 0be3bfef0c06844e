"""A sweep: its rows, what is kept, and that nothing depends on who computes them."""

from __future__ import annotations

import csv
import json
import math
import multiprocessing
import os
from importlib.util import find_spec
from multiprocessing.process import BaseProcess
from pathlib import Path

import pandas as pd
import pytest
from openpyxl import load_workbook

from tests.sweep_examples import LINE, SWEEP, THICKNESSES, VANE, python, write
from tests.test_command import command
from tolerance.errors import InputError, UnfinishedError
from tolerance.report.json_text import run_json
from tolerance.report.sheet_text import plain_cell
from tolerance.report.swept_text import sweep_json
from tolerance.scenario import load
from tolerance.scenario.checking import sweep_of
from tolerance.study.run import run
from tolerance.sweeps.crew import by_processes
from tolerance.sweeps.kept import KeptRows
from tolerance.sweeps.sweep import sweep
from tolerance.sweeps.work import Outcome, Task, do, program
from tolerance.swept import SweepResult, SweptRow


@pytest.fixture(scope="module")
def swept(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, SweepResult]:
    """The six scenarios, done by two workers: their file, with the finished rows in the folder `one` beside it."""
    path = write(tmp_path_factory.mktemp("vane"), SWEEP)
    return path, sweep([path], path.parent / "one", workers=2)


class Killer(dict[str, str]):
    """What ends the worker that compares it with what computes there."""

    def __ne__(self, _other: object) -> bool:
        os._exit(9)


def tasks_of(path: Path) -> list[Task]:
    _, variants = sweep_of(path)
    return [Task(str(number), one.scenario(), 1, None, program()) for number, one in enumerate(variants)]


def test_a_row_is_what_run_gives(swept: tuple[Path, SweepResult]) -> None:
    path, result = swept
    _, variants = sweep_of(path)
    for row, variant in zip(result.rows, variants, strict=True):
        assert row.swept == variant.swept
        assert json.dumps(row.result, indent=2) == run_json(run(variant.scenario()))


def test_the_tables_say_the_same(swept: tuple[Path, SweepResult]) -> None:
    _, result = swept
    for row, shown in zip(result.rows, result.table.to_dict("records"), strict=True):
        assert row.result is not None
        line = row.result["lines"][0]
        assert shown["layers.P1.thickness"] == row.swept["layers.P1.thickness"]
        assert [shown[key] for key in ("yield", "yield_low", "yield_high")] == list(row.result["yield"].values())
        assert [shown[f"radio feed: yield{end}"] for end in ("", "_low", "_high")] == list(line["yield"].values())
        assert shown["radio feed: mean_ohm"] == line["mean_ohm"]
        assert shown["solver_runs"] == row.result["solver_runs"]
        assert not shown["failed"]
    assert list(result.line_table["row"]) == [1, 2, 3, 4, 5, 6]
    assert set(result.line_table["largest_driver"]) == {"P1.thickness"}


def test_one_worker_gives_the_same_bits(swept: tuple[Path, SweepResult]) -> None:
    path, result = swept
    assert sweep_json(sweep([path], path.parent / "two", workers=1)) == sweep_json(result)


def test_finished_rows_are_not_computed_again(swept: tuple[Path, SweepResult]) -> None:
    path, result = swept
    rows = sorted((path.parent / "one" / "rows").iterdir())
    assert len(rows) == 6
    rows[0].unlink()
    rows[1].write_text('{"record": 1', encoding="utf-8")  # torn
    altered = json.loads(rows[2].read_text(encoding="utf-8"))
    del altered["result"]["lines"][0]["mean_ohm"]
    rows[2].write_text(json.dumps(altered), encoding="utf-8")
    computed: list[int] = []

    def note(number: int, _row: SweptRow, outcome: Outcome) -> None:
        if outcome.worker:
            computed.append(number)

    again = sweep([path], path.parent / "one", workers=1, on_row=note)
    assert len(computed) == 3
    assert sweep_json(again) == sweep_json(result)
    assert sorted((path.parent / "one" / "rows").iterdir()) == rows


def test_a_worker_that_is_killed_costs_nothing(swept: tuple[Path, SweepResult]) -> None:
    path, result = swept
    killed: list[BaseProcess] = []

    def kill_one(_number: int, _row: SweptRow, _outcome: Outcome) -> None:
        if len(killed) < 2:
            killed.append(multiprocessing.active_children()[0])
            killed[-1].kill()

    again = sweep([path], path.parent / "three", workers=2, on_row=kill_one)
    assert len(killed) == 2
    assert sweep_json(again) == sweep_json(result)


def test_a_scenario_that_kills_its_worker_fails_alone(tmp_path: Path) -> None:
    first, *rest = tasks_of(write(tmp_path, VANE + THICKNESSES))
    deadly = Task("deadly", first.scenario, 1, None, Killer(first.program))
    done = {task.key: outcome for task, outcome in by_processes([first, deadly, *rest], workers=2)}
    assert set(done) == {"0", "1", "2", "deadly"}
    assert "worker process died" in done["deadly"].message
    assert not done["deadly"].lasting
    assert [done[key].result == do(task).result for key, task in zip("012", [first, *rest], strict=True)] == [True] * 3


def test_a_script_that_sweeps_is_run_once(tmp_path: Path) -> None:
    path = write(tmp_path, VANE)
    script = write(tmp_path, "print('once')\nfrom tolerance.sweeps.sweep import sweep\n"
                             f"print(sweep([{str(path)!r}], {str(tmp_path / 'out')!r}, workers=2).failed)\n", "job.py")
    ended = python(script, cwd=tmp_path).communicate()
    assert ended == ("once\n0\n", "")


def test_workers_end_with_the_sweep(tmp_path: Path) -> None:
    coming = by_processes(tasks_of(write(tmp_path, SWEEP)), workers=2)
    next(coming)
    workers = multiprocessing.active_children()
    assert len(workers) == 2
    coming.close()
    assert not any(worker.is_alive() for worker in workers)


def test_a_scenario_without_a_seed_keeps_the_one_that_was_drawn(tmp_path: Path) -> None:
    path = write(tmp_path, VANE.replace("seed = 1\n", ""))
    first, second = (sweep([path], tmp_path / "out", workers=1) for _ in range(2))
    assert sweep_json(first) == sweep_json(second)
    (tmp_path / "out" / "sweep.json").write_text("{}", encoding="utf-8")
    assert KeptRows(tmp_path / "out").seed() == KeptRows(tmp_path / "out").seed()


@pytest.mark.parametrize("content", ["", "[]", '{"record": 1, "seed": -4}', '{"record": 1, "seed": true}', "\x00"])
def test_a_seed_that_is_not_ours_is_drawn_anew(tmp_path: Path, content: str) -> None:
    (tmp_path / "sweep.json").write_text(content, encoding="utf-8")
    assert KeptRows(tmp_path).seed() >= 0


def test_a_worker_of_another_version_is_told(tmp_path: Path) -> None:
    task = tasks_of(write(tmp_path, VANE))[0]
    other = Task(task.key, task.scenario, 1, None, {**task.program, "numpy": "0.1", "text of the program": "x"})
    outcome = do(other)
    assert outcome.result is None
    assert not outcome.lasting
    assert f"numpy {task.program['numpy']} instead of 0.1, another state of the program" in outcome.message


def test_a_defect_is_a_row_with_its_trace(tmp_path: Path) -> None:
    task = tasks_of(write(tmp_path, VANE))[0]
    outcome = do(Task("", None, 1, None, task.program))  # type: ignore[arg-type]
    assert outcome.message.startswith("a defect of the program: AttributeError")
    assert "Traceback" in outcome.trace
    assert not outcome.lasting


def test_files_and_folders(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    boards = tmp_path / "boards"
    boards.mkdir()
    write(boards, VANE, "b.toml")
    write(boards, VANE.replace('"180 um"', '"180"'), "c.toml")
    write(boards, VANE + LINE.replace("radio feed", "=cmd").replace("180", "190"), "a.toml")
    write(boards, "no scenario", "notes.txt")
    assert command("sweep", boards, "--out", tmp_path / "out", "--workers", 2, "--log", tmp_path / "log") == 3
    shown = capsys.readouterr()
    assert "2 of 3 scenarios done" in shown.out
    assert 'FAILED, scenario 3' in shown.out
    assert max(len(line) for line in shown.out.splitlines()) <= 80
    with (tmp_path / "out" / "sweep.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert [Path(row["scenario"]).name for row in rows] == ["a.toml", "b.toml", "c.toml"]
    assert [row["failed"] for row in rows] == ["no", "no", "yes"]
    assert 'width = "180"' in rows[2]["message"]
    assert {name for name in rows[0] if "=cmd" in name} == {name for name in rows[0] if name.startswith("'=cmd")}
    book = load_workbook(tmp_path / "out" / "sweep.xlsx")
    assert book.sheetnames == ["Scenarios", "Lines"]
    assert [cell.data_type for cell in book["Scenarios"][1]] == ["s"] * book["Scenarios"].max_column
    logged = [json.loads(line) for line in (tmp_path / "log").read_text(encoding="utf-8").splitlines()]
    assert [one["event"] for one in logged if one["event"] != "step"] == [
        "began", *["row"] * 3, "ended"]
    assert {one["row"]: one["failed"] for one in logged if one["event"] == "row"} == {1: False, 2: False, 3: True}


def test_parquet_where_it_can_be_written(swept: tuple[Path, SweepResult]) -> None:
    path, result = swept
    assert command("sweep", path, "--out", path.parent / "one", "--quiet") == 0
    written = {one.name for one in (path.parent / "one").iterdir()}
    parquet = path.parent / "one" / "sweep.parquet"
    assert (parquet.name in written) == (find_spec("pyarrow") is not None)
    if parquet.exists():
        assert list(pd.read_parquet(parquet)["yield"]) == list(result.table["yield"])


def test_nothing_to_run_is_bad_input(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "empty").mkdir()
    write(tmp_path, VANE.replace('"180 um"', '"180"'), "bad.toml")
    for given, told in (("none.toml", "there is no such file or folder"), ("empty", "holds no scenario"),
                        ("bad.toml", 'width = "180"')):
        assert command("sweep", tmp_path / given, "--out", tmp_path / "out") == 2
        assert told in capsys.readouterr().err
    assert not (tmp_path / "out").exists()
    with pytest.raises(InputError):
        sweep([tmp_path / "none.toml"], tmp_path / "out")


@pytest.mark.parametrize(("options", "told"), [
    (("--workers", 0), "--workers 0: must be from 1"), (("--coupons", 100), "must be a power of two"),
    (("--workers", 2, "--scheduler", "tcp://127.0.0.1:1"), "not with --scheduler"),
])
def test_options_out_of_range(
    tmp_path: Path, options: tuple[object, ...], told: str, capsys: pytest.CaptureFixture[str],
) -> None:
    assert command("sweep", write(tmp_path, VANE), *options) == 2
    assert told in capsys.readouterr().err


def test_a_folder_that_takes_no_files_is_told_before_anything_is_computed(tmp_path: Path) -> None:
    (tmp_path / "out").write_text("a file", encoding="utf-8")
    with pytest.raises(UnfinishedError, match=r"could not write .*sweep\.json"):
        sweep([write(tmp_path, VANE)], tmp_path / "out")


def test_the_last_row_is_told_as_progress(tmp_path: Path) -> None:
    told: list[tuple[str, int, int]] = []
    sweep([write(tmp_path, VANE)], tmp_path / "out", workers=1, on_progress=lambda *step: told.append(step))
    assert told == [("sweep", 0, 1), ("sweep", 1, 1)]


@pytest.mark.parametrize(("text", "cell"), [
    ("=1+1", "'=1+1"), ("+cmd|x", "'+cmd|x"), ("@SUM(A)", "'@SUM(A)"), ("-2+3", "'-2+3"), ("-3 um", "-3 um"),
    ("-3.5 %", "-3.5 %"), ("plain", "plain"), ("", ""), ("\t=1", "'\t=1"), ("-1e-3", "-1e-3"),
])
def test_no_text_becomes_a_formula(text: str, cell: str) -> None:
    assert plain_cell(text) == cell


def test_numbers_of_a_table_read_back_to_the_bit(swept: tuple[Path, SweepResult]) -> None:
    path, result = swept
    assert command("sweep", path, "--out", path.parent / "one", "--quiet") == 0
    with (path.parent / "one" / "sweep.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert [float(row["radio feed: std_ohm"]) for row in rows] == list(result.table["radio feed: std_ohm"])
    assert all(math.isfinite(float(row["yield_low"])) for row in rows)
    assert [load(path).title] * 6 == [row["title"] for row in rows]


def test_a_sweep_of_nothing_but_dead_workers_is_unfinished(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("tolerance.sweeps.sweep.program", lambda: Killer(program()))
    assert command("sweep", write(tmp_path, VANE), "--out", tmp_path / "out", "--quiet") == 3
    assert not list(tmp_path.glob("out/rows/*"))
    monkeypatch.undo()
    assert command("sweep", write(tmp_path, VANE), "--out", tmp_path / "out", "--quiet") == 0
