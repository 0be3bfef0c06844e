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
from openpyxl import load_workbook

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
    "take", "reconcile", "sweep", "again", "doctor")])
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


def test_the_negotiation_hangs_together() -> None:
    """What its sentences and its scenarios say is what its commands say."""
    first, moved, agreed = (load(ROOT / "scenarios" / f"tram-stop-{name}.toml")
                            for name in ("display-4-layer", "moved-4-layer", "agreed-4-layer"))
    for one, other, file in ((first, moved, "scenarios/tram-stop-display-4-layer.toml"),
                             (moved, agreed, "talk/tram-stop-moved-4-layer-answered.toml")):
        shown = marked_block(TEXT, f'output: tolerance center {file} --grid "1 um"')
        for old, new in zip(one.lines, other.lines, strict=True):
            assert re.search(rf"^{old.name} +{old.width * 1e6:.0f} +{new.width * 1e6:.0f} ", shown, re.MULTILINE)
        widths = "{:.0f}, {:.0f} and {:.0f} um".format(*(line.width * 1e6 for line in other.lines))
        assert f"to {widths}" in " ".join(TEXT.split())
        for old, new in zip(one.lines, other.lines, strict=True):
            assert (old.gap or 0.0) + old.width == pytest.approx((new.gap or 0.0) + new.width) or old.gap is None
    center = marked_block(TEXT, 'output: tolerance center scenarios/tram-stop-display-4-layer.toml --grid "1 um"')
    prices = re.findall(r"^(?:Tighten|Both): reaches the target for ([0-9.]+) ", center, re.MULTILINE)
    assert f"for {prices[1]} instead of {prices[0]}." in " ".join(TEXT.split())
    promised = marked_block(TEXT, "output: tolerance promise talk/tram-stop-agreed-4-layer.toml")
    for line, before in zip(agreed.lines, first.lines, strict=True):
        found = re.search(rf"^{line.name} .* (\d+) +([0-9.]+)  \[.*\]  holds$", promised, re.MULTILINE)
        assert found is not None
        assert float(found[1]) == pytest.approx(100.0 * agreed.limit_of(line))
        assert float(found[2]) <= float(found[1]), "what is signed can be held"
        assert agreed.limit_of(line) < first.limit_of(before)


def test_the_filled_sheet_is_the_one_that_is_asked(tmp_path: Path) -> None:
    """The reply has the rows and columns of the sheet that `ask` writes now, and its answers are what was agreed on."""
    from tolerance.report.request import write_request
    from tolerance.study.exchange import ask, take

    path = ROOT / "scenarios" / "tram-stop-moved-4-layer.toml"
    asked = write_request(ask(load(path), coupons=256), tmp_path / "ask.xlsx")
    now, reply = (load_workbook(one)["Tolerances"] for one in (asked, ROOT / "scenarios" / "tram-stop-reply.xlsx"))
    assert [row[:7] for row in now.iter_rows(min_row=5, values_only=True)] == [
        row[:7] for row in reply.iter_rows(min_row=5, values_only=True)], "what is ours, left of the yellow columns"
    answered = take(load(path), ROOT / "scenarios" / "tram-stop-reply.xlsx", out=tmp_path / "answered.toml",
                    coupons=256).scenario
    assert answered is not None
    agreed = load(ROOT / "scenarios" / "tram-stop-agreed-4-layer.toml")
    offer = next(one for one in answered.offers if one.cost == 2.5)
    for before, after in zip(answered.variations, agreed.variations, strict=True):
        bought = {"tolerance": offer.tolerance} if before.of == offer.of else {}
        assert after == before.model_copy(update=bought)
