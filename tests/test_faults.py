"""Interrupted, killed, no room, no folder: nothing half, nothing lost, a clear message, the status of the contract."""

from __future__ import annotations

import contextlib
import json
import os
import random
import resource
import shutil
import signal
import subprocess
import time
from pathlib import Path

import pytest

from tests.sweep_examples import SWEEP, VANE, start, write
from tests.test_command import command
from tolerance.errors import UnfinishedError
from tolerance.report.files import put_in_place, remove_left_over
from tolerance.report.swept_text import sweep_json
from tolerance.sweeps.sweep import sweep
from tolerance.sweeps.work import Outcome
from tolerance.swept import SweptRow

WEIR = Path(__file__).parents[1] / "scenarios" / "weir-module-10-layer.toml"
SECONDS_TO_END = 5.0  # after an interruption, on a machine that runs other tests beside; else it is a fraction of one


def wait_until_logged(log: Path, event: str) -> None:
    for _ in range(600):
        if log.exists() and f'"event": "{event}"' in log.read_text(encoding="utf-8"):
            return
        time.sleep(0.05)
    raise AssertionError(f"no {event} in {log}")


def end_of_group(process: subprocess.Popen[str]) -> None:
    """Wait until every process of the group is gone; the last must not stay for long."""
    for _ in range(100):
        try:
            os.killpg(process.pid, 0)
        except ProcessLookupError:
            return
        time.sleep(0.05)
    os.killpg(process.pid, signal.SIGKILL)
    raise AssertionError("processes are left over")


def names(folder: Path) -> list[str]:
    return sorted(str(path.relative_to(folder)) for path in folder.rglob("*") if path.is_file())


@pytest.mark.parametrize("whole_group", [True, False], ids=["keyboard", "one process"])
def test_an_interrupted_run_ends_at_once_and_writes_nothing(tmp_path: Path, *, whole_group: bool) -> None:
    process = start("run", WEIR, "--fresh", "--out", "out", "--log", "log", cwd=tmp_path)
    wait_until_logged(tmp_path / "log", "step")
    time.sleep(0.3)  # into the solver
    asked = time.monotonic()
    (os.killpg if whole_group else os.kill)(process.pid, signal.SIGINT)
    out, err = process.communicate(timeout=60)
    assert (process.returncode, out, err) == (130, "", "interrupted\n")
    assert time.monotonic() - asked < SECONDS_TO_END
    end_of_group(process)
    assert names(tmp_path) == ["log"]


def test_an_interrupted_sweep_keeps_what_is_finished(tmp_path: Path) -> None:
    path = write(tmp_path, SWEEP)
    process = start("sweep", path, "--out", "out", "--log", "log", "--workers", 2, cwd=tmp_path)
    wait_until_logged(tmp_path / "log", "row")
    asked = time.monotonic()
    os.killpg(process.pid, signal.SIGINT)
    _, err = process.communicate(timeout=60)
    assert process.returncode == 130
    assert time.monotonic() - asked < SECONDS_TO_END
    kept = names(tmp_path / "out" / "rows")
    assert err == f"{len(kept)} finished rows are kept in out: the same command goes on from there\ninterrupted\n"
    assert 1 <= len(kept) < 6
    end_of_group(process)
    computed: list[str] = []

    def note(_number: int, _row: SweptRow, outcome: Outcome) -> None:
        computed.extend([outcome.worker] if outcome.worker else [])

    assert sweep([path], tmp_path / "out", workers=2, on_row=note).failed == 0
    assert len(computed) == 6 - len(kept)


def test_a_sweep_killed_again_and_again_comes_to_the_same(tmp_path: Path) -> None:
    """SIGKILL at random moments, each time after another stretch of work; then once to its end. (Ten times, of 200
    scenarios: tests/benchmarks/sweep.py.)"""
    values = ", ".join(f'"{thickness} um"' for thickness in range(97, 104))
    path = write(tmp_path, f'{VANE}[[sweep]]\nof = "layers.P1.thickness"\nvalues = [{values}]\n')
    chance = random.Random(7)
    for _ in range(3):
        process = start("sweep", path, "--out", "out", "--workers", 2, "--quiet", cwd=tmp_path)
        before = len(names(tmp_path / "out"))
        rows = chance.randrange(3)
        for _ in range(200):
            if len(names(tmp_path / "out")) > before + rows or process.poll() is not None:
                break
            time.sleep(0.05)
        time.sleep(0.2 * chance.random())
        process.kill()
        process.communicate()
        end_of_group(process)
    assert command("sweep", path, "--out", tmp_path / "out", "--quiet") == 0
    assert not [name for name in names(tmp_path) if name.endswith(".part")]
    assert command("sweep", path, "--out", tmp_path / "undisturbed", "--quiet") == 0
    for name in ("sweep.csv", "sweep-lines.csv"):
        assert (tmp_path / "out" / name).read_bytes() == (tmp_path / "undisturbed" / name).read_bytes()
    assert names(tmp_path / "out" / "rows") == names(tmp_path / "undisturbed" / "rows")


@pytest.mark.parametrize(("words", "bytes_", "file"), [
    (("run", "vane.toml", "--quiet", "--out", "out"), 3_000, "out/"),
    (("tighten", "vane.toml", "--quiet", "--out", "out"), 3_000, "out/tighten.xlsx"),
    (("ask", "vane.toml", "--quiet"), 1_000, "vane-ask.xlsx"),
    (("sweep", "vane.toml", "--quiet", "--out", "out"), 1_000, "out/rows/"),
    (("new", "new.toml"), 1_000, "new.toml"),
])
def test_no_room_is_told_and_leaves_nothing_half(
    tmp_path: Path, words: tuple[str, ...], bytes_: int, file: str,
) -> None:
    """A limit on the size of files stands for a full disk: writing fails in the middle, as it does there."""
    write(tmp_path, VANE)
    process = start(*words, cwd=tmp_path, preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (bytes_,) * 2))
    out, err = process.communicate(timeout=120)
    assert process.returncode == (2 if words[0] == "new" else 3)
    assert out == ""
    assert f"could not write {file}" in err or "new.toml: cannot be written" in err
    assert "File too large" in err
    assert "Traceback" not in err
    assert [name for name in names(tmp_path) if name not in ("vane.toml", "out/sweep.json")] == []


def test_standard_output_that_takes_nothing_is_told(tmp_path: Path) -> None:
    write(tmp_path, VANE)
    process = start("run", "vane.toml", "--json", cwd=tmp_path)
    process.communicate()
    with Path("/dev/full").open("w") as full:
        ended = subprocess.run(process.args, cwd=tmp_path, stdout=full, stderr=subprocess.PIPE, text=True, check=False,
                               env={**os.environ, "PYTHONPATH": str(Path(__file__).parents[1])})
    assert ended.returncode == 3
    assert ended.stderr == "could not be finished: [Errno 28] No space left on device\n"


def test_a_folder_that_vanishes_in_a_sweep_is_made_again_or_told(tmp_path: Path) -> None:
    path, out = write(tmp_path, SWEEP), tmp_path / "out"
    expected = sweep_json(sweep([path], tmp_path / "undisturbed", workers=2))

    def remove(_number: int, _row: SweptRow, _outcome: Outcome) -> None:
        shutil.rmtree(out, ignore_errors=True)

    assert sweep_json(sweep([path], out, workers=2, on_row=remove)) == expected

    def block(_number: int, _row: SweptRow, _outcome: Outcome) -> None:
        shutil.rmtree(out)
        out.write_text("in the way", encoding="utf-8")

    shutil.rmtree(out, ignore_errors=True)
    with pytest.raises(UnfinishedError, match="could not write"):
        sweep([path], out, workers=2, on_row=block)


@pytest.mark.parametrize("job", ["run", "sweep", "tighten", "reconcile"])
def test_a_folder_that_takes_no_files_is_told(
    tmp_path: Path, job: str, capsys: pytest.CaptureFixture[str],
) -> None:
    path = write(tmp_path, VANE)
    (tmp_path / "lot.csv").write_text("line,value\n" + "radio feed,50 ohm\n" * 5, encoding="utf-8")
    measured = [tmp_path / "lot.csv"] if job == "reconcile" else []
    assert command(job, path, *measured, "--out", "/proc/nowhere") == 3
    shown = capsys.readouterr().err
    assert "could not write /proc/nowhere" in shown
    assert "Traceback" not in shown


def test_what_dead_processes_left_is_removed_and_nothing_else(tmp_path: Path) -> None:
    dead = subprocess.Popen(["true"])
    dead.wait()
    host = os.uname().nodename
    for name in (f".a.txt.{host}-{dead.pid}.part", f".b.txt.{host}-{dead.pid}.part",
                 f".a.txt.{host}-{os.getppid()}.part", f".a.txt.elsewhere-{dead.pid}.part", ".a.txt.part", "mine.part"):
        (tmp_path / name).touch()
    put_in_place(tmp_path / "a.txt", lambda beside: beside.touch())
    assert names(tmp_path) == sorted([
        "a.txt", f".b.txt.{host}-{dead.pid}.part", f".a.txt.{host}-{os.getppid()}.part",
        f".a.txt.elsewhere-{dead.pid}.part", ".a.txt.part", "mine.part"])
    remove_left_over(tmp_path)
    assert f".b.txt.{host}-{dead.pid}.part" not in names(tmp_path)
    assert len(names(tmp_path)) == 5


def test_a_log_that_takes_nothing_stops_nothing(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = write(tmp_path, VANE)
    assert command("run", path, "--json", "--log", "/dev/full") == 0
    shown = capsys.readouterr()
    assert json.loads(shown.out)["coupons"] == 256
    assert shown.err == "--log /dev/full: could not be written, going on without: No space left on device\n"
    assert command("run", path, "--json", "--log", tmp_path / "no" / "folder") == 3
    assert "cannot be written" in capsys.readouterr().err


def test_the_log_tells_steps_times_and_runs(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path, log = write(tmp_path, VANE), tmp_path / "log"
    for _ in range(2):
        assert command("run", path, "--json", "--log", log) == 0
    result = json.loads(capsys.readouterr().out.partition("}\n{")[0] + "}")
    assert command("run", tmp_path / "none.toml", "--log", log) == 2
    lines = [json.loads(line) for line in log.read_text(encoding="utf-8").splitlines()]
    assert [line["status"] for line in lines if line["event"] == "ended"] == [0, 0, 2]
    assert [line["solver_runs"] for line in lines if line["event"] == "result"] == [result["solver_runs"]] * 2
    cache = [line for line in lines if line["event"] == "cache"]
    assert cache[1]["hits"] > 0
    assert {line["step"] for line in lines if line["event"] == "timing"} >= {"draws", "solving and prediction", "yield"}
    steps = [line for line in lines if line["event"] == "step"]
    assert [line["state"] for line in steps] == ["begun", "finished"] * (len(steps) // 2)
    assert all({"time", "elapsed", "event"} <= set(line) for line in lines)
    assert "there is no such file" in next(line["message"] for line in lines if line["event"] == "failed")
    with contextlib.suppress(KeyError):
        assert all(line["seconds"] >= 0.0 for line in lines)
