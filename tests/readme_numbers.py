"""The numbers that README.md quotes from a run, and how to bring them up to date.

`python -m tests.readme_numbers` runs the scenario of the README's Python example and rewrites the numbers in place.
"""

from __future__ import annotations

import contextlib
import io
import os
import re
import shlex
import shutil
from pathlib import Path
from tempfile import TemporaryDirectory

from rich.console import Console

from tolerance.report.terminal import print_run
from tolerance.report.wording import fixed, percent, share_range_text, share_text
from tolerance.results import Driver, LineResult, RunResult

ROOT = Path(__file__).parents[1]
README = ROOT / "README.md"
_OUTPUT = r"^<!-- (output: (?:(first|last) (\d+) lines of )?tolerance (.+)) -->$"
_NUMBER = r"(\[?[0-9][0-9., ]*\]?)"


def marked_block(text: str, mark: str) -> str:
    """What stands in the fenced block that follows the comment `mark`."""
    return _block(text, mark).group("inside")


def python_example(text: str) -> RunResult:
    """Run the README's Python example from the root of the repository; its `result`."""
    names: dict[str, RunResult] = {}
    with contextlib.chdir(ROOT), contextlib.redirect_stdout(io.StringIO()):
        exec(compile(marked_block(text, "python"), "README.md", "exec"), names)
    return names["result"]


def terminal_text(result: RunResult) -> str:
    """What `run` prints where the output is no terminal."""
    written = io.StringIO()
    print_run(result, Console(file=written, width=80))
    return "\n".join(line.rstrip() for line in written.getvalue().splitlines()) + "\n"


def refreshed(text: str, result: RunResult) -> str:
    """The README with every quoted number as `result` has it. ValueError where a sentence is not found once."""
    block = _block(text, "output: job")
    text = text[: block.start("inside")] + terminal_text(result) + text[block.end("inside"):]
    for sentence, numbers in _sentences(result):
        text = _with_numbers(text, sentence, numbers)
    with TemporaryDirectory() as folder, contextlib.chdir(folder):
        _lay_out(Path(folder))
        for mark, end, count, words in re.findall(_OUTPUT, text, re.MULTILINE):
            block = _block(text, mark)
            shown = command_output(shlex.split(words)).splitlines(keepends=True)
            inside = "".join(shown[-int(count):] if end == "last" else shown[: int(count)] if end else shown)
            text = text[: block.start("inside")] + inside + text[block.end("inside"):]
    return text


def _lay_out(folder: Path) -> None:
    """What the README's commands find: the scenarios, and the copy of some that the README has made."""
    shutil.copytree(ROOT / "scenarios", folder / "scenarios")
    (folder / "talk").mkdir()
    for path in (folder / "scenarios").glob("tram-stop*"):
        shutil.copy(path, folder / "talk")


def command_output(words: list[str]) -> str:
    """What a command prints where the output is no terminal, run where we are. ValueError where it does not succeed."""
    from tolerance.command import main

    written = io.StringIO()
    try:
        with contextlib.redirect_stdout(written):
            main(words)
    except SystemExit as ended:
        if ended.code:
            raise ValueError(f"tolerance {shlex.join(words)}: exit status {ended.code}") from ended
    return "\n".join(line.rstrip() for line in written.getvalue().splitlines()) + "\n"


def _sentences(result: RunResult) -> list[tuple[str, tuple[str, ...]]]:
    """Sentences of the README, with {} for each number, and the numbers that belong there."""
    line = result.lines[0]
    thickness, etch = _driver(line, "P1.thickness"), _driver(line, "L1.etch")
    limit = 100.0 * (line.high_limit / line.target - 1.0)
    return [
        ("**: {} ohm within {} %, so a coupon passes from {} to {} ohm",
         (f"{line.target:g}", f"{limit:.6g}", f"{line.low_limit:g}", f"{line.high_limit:g}")),
        ("at its nominal, the line has {} ohm", (fixed(line.nominal, 2),)),
        ("the mean is {} ohm and the standard deviation {} ohm",
         (fixed(line.mean.value, 2), fixed(line.deviation.value, 2))),
        ("**yield**: {} % of the coupons", (_bare(share_text(line.inside)),)),
        ("The brackets, {}, say", (share_range_text(line.inside),)),
        ("**below, above**: {} % of the coupons", (_bare(percent(line.below.value, 2)),)),
        ("too thin), {} % too high", (_bare(percent(line.above.value, 2)),)),
        ("**Cpk**: the distance from the mean to the nearer limit, in units of three deviations. At {} that",
         (fixed(line.cpk.value if line.cpk else None, 2),)),
        ("`target_yield`, here {} %", (f"{100.0 * result.target_yield:g}",)),
        ("stands at {} %, the etch at {} %",
         (_bare(percent(thickness.total.value, 0)), _bare(percent(etch.total.value, 0)))),
        ("A perfect etch would take only {} % off the deviation, a perfect prepreg {} %",
         (_taken_off(etch), _taken_off(thickness))),
        ("error**: {} cross-sections", (str(line.prediction.solver_runs),)),
        ("it was off by {} ohm", (fixed(line.prediction.held_out_error, 4),)),
        ("**All lines together**: on {} % of the coupons", (_bare(share_text(result.inside)),)),
        ("(P1.thickness: {} and {} %)",
         (fixed(100.0 * thickness.first.value, 1), fixed(100.0 * thickness.total.value, 1))),
    ]


def _driver(line: LineResult, name: str) -> Driver:
    return next(driver for driver in line.drivers if driver.variable == name)


def _taken_off(driver: Driver) -> str:
    """By how many percent the deviation falls when this driver, which acts on its own, stands still."""
    return _bare(percent(1.0 - (1.0 - driver.total.value) ** 0.5, 0))


def _bare(words: str) -> str:
    return words.removesuffix(" %")


def _with_numbers(text: str, sentence: str, numbers: tuple[str, ...]) -> str:
    """The text with `numbers` in the places of `sentence`; the ends of lines stay where they are."""
    parts = [r"\s+".join(re.escape(word) for word in part.split(" ")) for part in sentence.split("{}")]
    found = list(re.finditer(_NUMBER.join(parts), text))
    if len(found) != 1:
        raise ValueError(f"README.md has this sentence {len(found)} times, not once: {sentence}")
    for number, value in reversed(list(enumerate(numbers, start=1))):
        start, end = found[0].span(number)
        text = text[:start] + value + text[end:]
    return text


def _block(text: str, mark: str) -> re.Match[str]:
    found = re.search(rf"^<!-- {re.escape(mark)} -->\n```[a-z]*\n(?P<inside>.*?)^```$", text, re.DOTALL | re.MULTILINE)
    if found is None:
        raise ValueError(f"README.md has no fenced block marked <!-- {mark} -->")
    return found


def main() -> None:
    """Bring README.md up to date."""
    os.environ.setdefault("NO_COLOR", "1")
    text = README.read_text(encoding="utf-8")
    README.write_text(refreshed(text, python_example(text)), encoding="utf-8")


if __name__ == "__main__":
    main()
