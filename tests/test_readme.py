"""README.md against the program: its commands, its scenario, its Python, and every number it quotes."""

from __future__ import annotations

import contextlib
import difflib
import re
import subprocess
import tomllib
from pathlib import Path

import jsonschema
import pytest
from matplotlib.axes import Axes

from tests.readme_numbers import README, ROOT, marked_block, python_example, refreshed
from tolerance.results import RunResult
from tolerance.scenario import json_schema, load
from tolerance.scenario.properties import VARYING
from tolerance.study.check import check

TEXT = README.read_text(encoding="utf-8")

@pytest.fixture(scope="module")
def result() -> RunResult:
    return python_example(TEXT)


@pytest.fixture
def example(tmp_path: Path) -> Path:
    path = tmp_path / "example.toml"
    path.write_text(TEXT.split("```toml\n", 1)[1].split("```", 1)[0], encoding="utf-8")
    return path


def test_the_quoted_numbers_are_what_the_tool_gives(result: RunResult) -> None:
    now = refreshed(TEXT, result)
    difference = difflib.unified_diff(TEXT.split("\n"), now.split("\n"), "README.md", "the tool", lineterm="", n=0)
    changes = "\n".join(difference)
    assert not changes, f"README.md quotes old numbers; `python -m tests.readme_numbers` refreshes them:\n{changes}"


def test_the_example_of_figures_runs(result: RunResult, tmp_path: Path) -> None:
    names: dict[str, object] = {"result": result}
    with contextlib.chdir(tmp_path):
        exec(compile(marked_block(TEXT, "python: figures"), "README.md", "exec"), names)
    assert isinstance(names["axes"], Axes)
    assert [path.name for path in tmp_path.iterdir()] == ["antenna-feed.svg"]


def test_the_python_example_runs_the_scenario_of_the_first_command(result: RunResult) -> None:
    file = marked_block(TEXT, "command: job").split()[-1]
    scenario = load(ROOT / file)
    assert f'tolerance.load("{file}")' in marked_block(TEXT, "python")
    assert (result.title, result.seed, result.coupons) == (
        scenario.title, scenario.evaluation.seed, scenario.evaluation.coupons)


def test_the_scenario_example_is_a_scenario_near_its_targets(example: Path) -> None:
    for line in check(load(example)).lines:
        assert line.impedance == pytest.approx(line.target, rel=0.015), line.name
    schema = jsonschema.Draft202012Validator(json_schema())
    assert [error.message for error in schema.iter_errors(tomllib.loads(example.read_text(encoding="utf-8")))] == []


def test_every_property_shape_and_refusal_is_told() -> None:
    shapes = json_schema()["$defs"]["variations"]["properties"]["shape"]["enum"]
    assert {shape for shape in shapes if f"| `{shape}`" not in TEXT} == set()
    for names in VARYING.values():
        assert all(f"`{name}`" in TEXT for name in names)
    assert "**Not acted on yet.** A broadside pair with a trace under solder mask" in TEXT


def test_every_scenario_is_in_the_table() -> None:
    named = set(re.findall(r"^\| `(scenarios/[^`]+)`", TEXT, re.MULTILINE))
    assert named == {f"scenarios/{path.name}" for path in (ROOT / "scenarios").glob("*.toml")}


@pytest.mark.parametrize("words", [[word] for word in (
    "run", "check", "fit", "new", "presets", "schema", "tighten", "center", "promise", "compare", "note", "ask",
    "take", "reconcile", "sweep")])
def test_every_option_is_told(words: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    from tolerance.command import main

    with pytest.raises(SystemExit):
        main([*words, "--help"])
    options = set(re.findall(r"--[a-z-]*[a-z]", capsys.readouterr().out)) - {"--help"}
    assert f"| `tolerance {words[0]}" in TEXT
    assert all(re.search(rf"^\| .*`{option}[ `].*\|.*{words[0]}", TEXT, re.MULTILINE) for option in options)


def test_the_check_runs_the_two_commands_as_they_stand(tmp_path: Path) -> None:
    """`.ci/run` in a copy whose commands only tell that they ran."""
    copy = tmp_path / "clone"
    (copy / ".ci").mkdir(parents=True)
    script = copy / ".ci" / "run"
    script.write_bytes((ROOT / ".ci" / "run").read_bytes())
    text = TEXT
    for mark in ("job", "tests"):
        text = text.replace(marked_block(TEXT, f"command: {mark}"), f"echo ran {mark} && test ! -t 0\n")
    (copy / "README.md").write_text(text, encoding="utf-8")
    done = subprocess.run(["bash", str(script)], capture_output=True, text=True, check=False, stdin=subprocess.DEVNULL)
    assert done.returncode == 0, done.stderr
    assert [line for line in done.stdout.splitlines() if line.startswith("ran")] == ["ran job", "ran tests"]
    (copy / "README.md").write_text(text.replace("echo ran job", "false"), encoding="utf-8")
    assert subprocess.run(["bash", str(script)], capture_output=True, check=False).returncode != 0
    (copy / "README.md").write_text(text.replace("<!-- command: tests -->", ""), encoding="utf-8")
    assert subprocess.run(["bash", str(script)], capture_output=True, check=False).returncode != 0
