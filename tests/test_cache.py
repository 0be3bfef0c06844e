"""The cache of solved sections: the same bits with it and without, no solver run twice, and nothing that can harm."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Callable
from dataclasses import fields, replace
from importlib.resources import files
from pathlib import Path

import numpy as np
import pytest

from tests.scenario_texts import BOARD, changed
from tests.section_examples import stripline
from tests.test_command import command
from tolerance.cache import ENDING, UNFINISHED, Cache
from tolerance.decided import TightenResult
from tolerance.report.decisions_json import center_json, promise_json, tighten_json
from tolerance.report.json_text import run_json
from tolerance.results import RunResult
from tolerance.scenario import load, parse
from tolerance.scenario.tables import Scenario
from tolerance.sections.section import Ply, Section
from tolerance.solver.plan import SolverSettings, plan_for
from tolerance.study import lines, solved
from tolerance.study.center import Wishes, center
from tolerance.study.decide import promise, tighten
from tolerance.study.exchange import ask
from tolerance.study.lines import prepare
from tolerance.study.run import run
from tolerance.study.solved import SolvedCache, key_of, solved_in, solver_digest, user_cache

COUPONS = 1024
NUMBERS = np.array([1.0, -0.0, 1e-300, np.pi]), np.arange(6.0).reshape(2, 3)
SCENARIOS = Path(__file__).parents[1] / "scenarios"


def entries(folder: Path) -> list[Path]:
    return sorted(folder.glob(f"*{ENDING}"))


def test_what_is_kept_comes_back_bit_for_bit(tmp_path: Path) -> None:
    Cache(tmp_path / "made" / "here").write("key", NUMBERS)
    found = Cache(tmp_path / "made" / "here").read("key")
    assert found is not None
    assert [array.tobytes() for array in found] == [array.tobytes() for array in NUMBERS]
    assert [array.shape for array in found] == [(4,), (2, 3)]
    assert Cache(tmp_path / "made" / "here").read("other") is None
    assert Cache(tmp_path / "made" / "here", fresh=True).read("key") is None


@pytest.mark.parametrize("damage", [
    lambda content: content[:0], lambda content: content[:-1], lambda content: content + b"\0",
    lambda content: content[:60] + bytes([content[60] ^ 1]) + content[61:],
    lambda content: content[:-3] + bytes([content[-3] ^ 128]) + content[-2:],
    lambda content: b"\x80\x04" + content, lambda content: content[::-1],
], ids=["empty", "cut short", "longer", "a bit of the shape", "a bit of a number", "before it", "back to front"])
def test_a_damaged_entry_is_dropped(tmp_path: Path, damage: Callable[[bytes], bytes]) -> None:
    cache = Cache(tmp_path)
    cache.write("key", NUMBERS)
    (path,) = entries(tmp_path)
    path.write_bytes(damage(path.read_bytes()))
    assert cache.read("key") is None
    assert entries(tmp_path) == []


def test_an_entry_of_another_key_is_damaged(tmp_path: Path) -> None:
    cache = Cache(tmp_path)
    cache.write("one", NUMBERS)
    entries(tmp_path)[0].rename(tmp_path / f"other{ENDING}")
    assert cache.read("other") is None
    assert entries(tmp_path) == []


def test_the_oldest_are_dropped_and_what_is_used_is_not_old(tmp_path: Path) -> None:
    cache = Cache(tmp_path, most=8)
    for number in range(8):
        cache.write(f"{number}", NUMBERS)
        os.utime(tmp_path / f"{number}{ENDING}", (number, number))
    (tmp_path / f"left{UNFINISHED}").write_bytes(b"half")
    os.utime(tmp_path / f"left{UNFINISHED}", (0, 0))
    cache.trim()
    assert len(entries(tmp_path)) == 8
    assert not (tmp_path / f"left{UNFINISHED}").exists()
    assert cache.read("0") is not None
    cache.write("00 looks how many there are", NUMBERS)
    assert [path.name.removesuffix(ENDING) for path in entries(tmp_path)] == [
        "0", "00 looks how many there are", "4", "5", "6", "7"]


WRITE_AND_READ = """
import sys
from pathlib import Path
import numpy as np
from tolerance.cache import Cache
cache, wrong = Cache(Path(sys.argv[1]), most=10), 0
for number in range(300):
    key, values = f"{number % 30:02d}", np.full(2000, float(number % 30))
    cache.write(key, [values])
    found = cache.read(key)
    wrong += found is not None and not np.array_equal(found[0], values)
print(wrong)
"""


def test_processes_write_read_and_drop_at_once(tmp_path: Path) -> None:
    workers = [subprocess.Popen([sys.executable, "-c", WRITE_AND_READ, str(tmp_path)], stdout=subprocess.PIPE)
               for _ in range(3)]
    assert [worker.communicate()[0].strip() for worker in workers] == [b"0"] * 3
    assert [worker.returncode for worker in workers] == [0] * 3
    assert [path.name for path in tmp_path.iterdir() if path.suffix != ENDING] == []
    assert all(Cache(tmp_path).read(path.stem) is not None for path in entries(tmp_path))


def test_a_folder_that_cannot_be_written_keeps_nothing(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("in the way")
    cache = Cache(tmp_path / "file" / "below")
    assert not cache.is_writable()
    cache.write("key", NUMBERS)
    assert cache.read("key") is None
    assert Cache(tmp_path / "new").is_writable()


def section() -> Section:
    return stripline(foot=np.array([1e-4, 1.1e-4, 1.2e-4]), crest=9e-5, thickness=17e-6, core=(1e-4, 4.0),
                     prepreg=(2e-4, 3.8))


def changes_of(one: Section) -> list[tuple[str, object]]:
    """Each field of a section with something else in it, a number changed in its last bit."""
    def other(value: object) -> object:
        if isinstance(value, np.ndarray):
            return np.where(np.arange(value.size) == 1, np.nextafter(value, np.inf), value)
        if isinstance(value, bool):
            return not value
        if isinstance(value, tuple):
            ply = value[0]
            assert isinstance(ply, Ply)
            return (replace(ply, dk=np.nextafter(ply.dk, np.inf)), *value[1:])
        return np.ones(3)

    return [(part.name, other(getattr(one, part.name))) for part in fields(one)]


def test_everything_of_a_section_enters_the_key() -> None:
    plan = plan_for(section(), SolverSettings())
    changed_ones = [replace(section(), **{name: value}) for name, value in changes_of(section())]  # type: ignore[arg-type]
    assert len(changed_ones) == len(fields(Section))
    entering: list[object] = [(one, plan, None, 1) for one in (section(), *changed_ones)]
    entering += [(section(), replace(plan, counts={**plan.counts, "foot": (10, 20, 10)}), None, 1),
                 (section(), replace(plan, settings=SolverSettings(copper_nodes=10)), None, 1),
                 (section(), plan, 1e9, 1), (section(), plan, None, -1), (section().rows(slice(0, 2)), plan, None, 1)]
    assert len({key_of(one) for one in entering}) == len(entering)
    assert key_of(entering[0]) == key_of((section(), plan_for(section(), SolverSettings()), None, 1))


def test_keys_do_not_run_into_each_other() -> None:
    alike = [("ab", "c"), ("a", "bc"), (1, 2), (12,), ("1", 2), (1.0, 2), (True, 2), ((1,), 2), ((1, 2),), {1: 2},
             np.array([1.0, 2.0]), np.array([1, 2]), np.array([[1.0], [2.0]]), np.array([[1.0, 2.0]]), None, "None"]
    assert len({key_of(one) for one in alike}) == len(alike)
    with pytest.raises(TypeError):
        key_of(lambda: 0)


def test_another_solver_has_other_keys(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    now = solver_digest()
    assert now == solver_digest()
    for room in solved.SOLVING:
        (tmp_path / f"tolerance.{room}").mkdir()
        for file in files(f"tolerance.{room}").iterdir():
            if file.name.endswith(".py"):
                (tmp_path / f"tolerance.{room}" / file.name).write_bytes(file.read_bytes())
    monkeypatch.setattr(solved, "files", lambda name: tmp_path / name)
    assert now == solver_digest()
    edited = tmp_path / "tolerance.solver" / "kernels.py"
    edited.write_bytes(edited.read_bytes() + b"\n")
    assert now != solver_digest()


def boards() -> list[Scenario]:
    return [parse(BOARD), load(SCENARIOS / "ferry-beacon-6-layer.toml"),
            load(SCENARIOS / "tide-gauge-radio-4-layer-at-frequency.toml")]


@pytest.mark.parametrize("number", range(3), ids=["plain", "broadside and coplanar", "at a frequency"])
def test_a_run_is_the_same_with_the_cache_and_without(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, number: int,
) -> None:
    scenario = boards()[number]
    plain = run(scenario, coupons=COUPONS, seed=3)
    first = run(scenario, coupons=COUPONS, seed=3, cache=solved_in(tmp_path))
    without_solver(monkeypatch)
    second = run(scenario, coupons=COUPONS, seed=3, cache=solved_in(tmp_path))
    assert run_json(plain) == run_json(first) == run_json(second)
    assert (plain.record.from_cache, first.record.from_cache) == (0, 0)
    assert second.record.from_cache == second.record.solver_runs == plain.record.solver_runs


@pytest.mark.parametrize("number", range(2), ids=["at a frequency", "pair"])
def test_mode_frequency_and_plan_are_told_apart(tmp_path: Path, number: int) -> None:
    scenario = boards()[2 if number == 0 else 0]
    line = scenario.lines[0 if number == 0 else 1]
    prepared = prepare(scenario, line, SolverSettings(), solved_in(tmp_path))
    finer = prepare(scenario, line, SolverSettings(copper_nodes=12)).plan
    others = [replace(prepared, plan=finer)]
    others += [replace(prepared, frequency=1e8)] if prepared.frequency else []
    others += [replace(prepared, line=line.model_copy(update={"mode": "common"}))] if line.is_pair else []
    assert len(others) == 2
    for one in (prepared, *others):
        found, known = (each.impedance(prepared.nominal) for each in (one, replace(one, solved=None)))
        assert found.tobytes() == known.tobytes()
    assert len(entries(tmp_path)) == 3


def test_gradients_are_kept_too(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    scenario = parse(BOARD)
    prepared = prepare(scenario, scenario.lines[1], SolverSettings(), solved_in(tmp_path))
    known = replace(prepared, solved=None).impedance_and_gradient(prepared.nominal)
    first = prepared.impedance_and_gradient(prepared.nominal)
    monkeypatch.setattr(lines, "solve_with_derivatives", None)
    second = prepared.impedance_and_gradient(prepared.nominal)
    assert [part.tobytes() for part in known] == [part.tobytes() for part in first]
    assert [part.tobytes() for part in known] == [part.tobytes() for part in second]


def without_solver(monkeypatch: pytest.MonkeyPatch) -> None:
    """From here on the field solver refuses."""
    def refuse(*_: object, **__: object) -> None:
        raise AssertionError("the solver was asked")

    monkeypatch.setattr(lines, "solve_modes", refuse)
    monkeypatch.setattr(lines, "solve_lossy", refuse)


def test_decisions_after_a_run_ask_the_solver_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    scenario, cache = parse(BOARD), solved_in(tmp_path)
    known = tighten(scenario, coupons=COUPONS), promise(scenario, coupons=COUPONS)
    before = run(scenario, coupons=COUPONS, cache=cache)
    moved = center(scenario, Wishes(), coupons=COUPONS, cache=cache)
    without_solver(monkeypatch)
    found = tighten(scenario, coupons=COUPONS, cache=cache), promise(scenario, coupons=COUPONS, cache=cache)
    assert tighten_json(found[0]) == tighten_json(known[0])
    assert promise_json(found[1]) == promise_json(known[1])
    tails = sum(line.tail.solver_runs for line in before.lines if line.tail)
    for one in found:
        assert one.basis.from_cache == one.basis.solver_runs == before.record.solver_runs - tails
    asked = ask(scenario, coupons=COUPONS, cache=cache).result.record
    assert asked.from_cache == asked.solver_runs == before.record.solver_runs
    again = center(scenario, Wishes(), coupons=COUPONS, cache=cache)
    assert center_json(again) == center_json(moved)
    assert moved.basis.from_cache == len(scenario.lines)  # the nominal sections
    assert moved.basis.solver_runs <= before.record.solver_runs
    assert again.basis.from_cache == moved.basis.solver_runs


def test_fresh_solves_anew_and_keeps_it(tmp_path: Path) -> None:
    def tightened(cache: SolvedCache) -> TightenResult:
        return tighten(parse(BOARD), coupons=COUPONS, cache=cache)

    tightened(solved_in(tmp_path))
    for path in entries(tmp_path):
        path.write_bytes(b"old")
    assert tightened(solved_in(tmp_path, fresh=True)).basis.from_cache == 0
    found = tightened(solved_in(tmp_path))
    assert found.basis.from_cache == found.basis.solver_runs


def test_damaged_entries_are_made_again(tmp_path: Path) -> None:
    def once() -> RunResult:
        return run(parse(BOARD), coupons=COUPONS, cache=solved_in(tmp_path))

    first, names = once(), entries(tmp_path)
    for path in names[1:]:
        path.write_bytes(path.read_bytes()[:-8])
    second, third = once(), once()
    assert run_json(first) == run_json(second) == run_json(third)
    assert 0 < second.record.from_cache < second.record.solver_runs == third.record.from_cache
    assert entries(tmp_path) == names


def test_an_entry_with_too_few_numbers_is_not_taken(tmp_path: Path) -> None:
    line = solved_in(tmp_path).for_line()
    line.arrays("question", (1,), lambda: (np.ones(3),), sections=3)
    assert line.arrays("question", (1,), lambda: (np.ones(4),), sections=4)[0].size == 4
    assert line.reused == 0


def test_python_keeps_nothing_unless_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv(solved.FOLDER_VARIABLE, str(tmp_path / "cache"))
    run(parse(BOARD), coupons=256)
    tighten(parse(BOARD), coupons=256)
    assert not (tmp_path / "cache").exists()
    told = user_cache()
    assert told is not None
    run(parse(BOARD), coupons=256, cache=told)
    assert entries(tmp_path / "cache")


def test_where_the_users_cache_is(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv(solved.FOLDER_VARIABLE, "")
    assert user_cache() is None
    monkeypatch.delenv(solved.FOLDER_VARIABLE)
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path))
    found = user_cache(fresh=True)
    assert found is not None
    assert found.cache.fresh
    assert found.cache.folder.parts[-2:] == ("tolerance", "solved-sections")
    if sys.platform.startswith("linux"):  # freedesktop.org, XDG Base Directory Specification
        assert found.cache.folder.parent.parent == tmp_path


def test_a_user_without_a_home_has_no_cache(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv(solved.FOLDER_VARIABLE)
    monkeypatch.setattr("platformdirs.user_cache_path", lambda *_, **__: Path("~") / ".cache" / "tolerance")
    monkeypatch.chdir(tmp_path)
    assert user_cache() is None
    assert list(tmp_path.iterdir()) == []


@pytest.fixture
def board(tmp_path: Path) -> Path:
    path = tmp_path / "board.toml"
    path.write_text(changed(BOARD, ("seed = 1", "seed = 1\ncoupons = 256")), encoding="utf-8")
    return path


def test_a_command_says_on_a_terminal_what_was_solved_before(
    board: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.setenv(solved.FOLDER_VARIABLE, str(tmp_path / "cache"))

    def told(*options: str) -> tuple[str, str]:
        with monkeypatch.context() as patch:
            patch.setattr(sys.stderr, "isatty", lambda: True)
            assert command("run", board, "--json", *options) == 0
        shown = capsys.readouterr()
        return shown.out, "\n".join(line for line in shown.err.splitlines() if "cache" in line)

    first, second, fresh, quiet = told(), told(), told("--fresh"), told("--quiet")
    assert first[0] == second[0] == fresh[0] == quiet[0]
    assert first[1] == fresh[1] == quiet[1] == ""
    assert second[1].endswith(" solver runs came from the cache.")
    assert command("run", board, "--json") == 0
    assert capsys.readouterr().err == ""  # no terminal


def test_one_note_where_nothing_can_be_kept(
    board: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.setenv(solved.FOLDER_VARIABLE, str(board / "below a file"))
    assert command("tighten", board) == 0
    shown = capsys.readouterr()
    assert shown.err.splitlines() == [f"Note: {board / 'below a file'} cannot be written; what is solved is not kept."]
    assert "radio feed" in shown.out
    assert command("tighten", board, "--quiet") == 0
    assert capsys.readouterr().err == ""
