"""The catalogue of bad input: texts in `bad_input/`, a case in each paragraph.

    # what is wrong
    $ run board.toml                      the command; this one where none is given
    - dk = 4.0                            replaced in the board of `scenario_texts` ...
    + dk = 0.4                            ... by this
    & [report]                            put below the board
    = format = 1                          the whole of the file, instead of the board
    @ press.csv                           the = lines that follow are another file
    > [[layers]] "P1": dk = 0.4: must be  the lines on standard error, all of them

A line that begins with ">> " is told with the name of the scenario before it.
"""

from __future__ import annotations

import shlex
from dataclasses import dataclass, field
from pathlib import Path

from tests.scenario_texts import BOARD, changed

FOLDER = Path(__file__).parent / "bad_input"
SCENARIO = "board.toml"


@dataclass(slots=True)
class Case:
    """One spoiled input: the files it consists of, the command, and the lines that it must bring."""

    title: str
    command: list[str] = field(default_factory=lambda: ["run", SCENARIO, "--out", "result"])
    files: dict[str, str] = field(default_factory=dict)
    told: list[str] = field(default_factory=list)


def cases(name: str) -> list[Case]:
    """The cases of one text of the catalogue."""
    paragraphs = (FOLDER / name).read_text(encoding="utf-8").strip("\n").split("\n\n")
    return [case_of(paragraph.split("\n")) for paragraph in paragraphs]


def case_of(lines: list[str]) -> Case:
    """The case that the lines of a paragraph tell."""
    case = Case(lines[0].removeprefix("# "))
    changes: list[tuple[list[str], list[str]]] = []
    below: list[str] = []
    whole: dict[str, list[str]] = {}
    current = SCENARIO
    before = "#"
    for line in lines[1:]:
        mark, text = line[:1], line[2:]
        if mark == "$":
            case.command = shlex.split(text)
        elif mark == "@":
            current = text
            whole[current] = []
        elif mark == "=":
            whole.setdefault(current, []).append(text)
        elif mark == "&":
            below.append(text)
        elif mark == ">":
            case.told.append(f"{SCENARIO}: {line[3:]}" if line.startswith(">> ") else text)
        elif mark == "-":
            if before != "-":
                changes.append(([], []))
            changes[-1][0].append(text)
        elif mark == "+":
            changes[-1][1].append(text)
        else:
            raise ValueError(f"{case.title}: {line}")
        before = mark
    board = changed(BOARD, *(("\n".join(old), "\n".join(new)) for old, new in changes))
    board += "".join(f"{line}\n" for line in below)
    case.files = {SCENARIO: board} | {name: "".join(f"{line}\n" for line in text) for name, text in whole.items()}
    return case
