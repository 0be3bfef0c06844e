"""Who may import whom: the layout is one-way, and this table holds it.

A module may import from its own row and from rows above it; imports inside functions count as well. The command line
and the package's front door come last. Heavy libraries stay out of what must start fast.
"""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "tolerance"

#: The rooms from first to last step; what shares a row may import each other only inside the same room.
ROWS: list[list[str]] = [
    ["errors", "arrays", "hypertext"],
    ["cores"],
    ["units", "laminate", "cache"],
    ["measurements"],
    ["scenario"],
    ["process", "sheet"],
    ["sections"],
    ["solver"],
    ["formulas"],
    ["surrogate"],
    ["statistics"],
    ["decisions"],
    ["nominal", "noted", "results", "fitted", "decided", "pictures", "diagnosed"],
    ["exchanged", "reconciled", "swept", "paged"],
    ["study"],
    ["report"],
    ["records", "sweeps"],
    ["logbook"],
    ["screen"],
    ["decision_commands", "talk_commands", "page_command"],
    ["many_commands"],
    ["command"],
    ["__main__"],
]
ROW_OF = {room: number for number, row in enumerate(ROWS) for room in row}

#: room -> rooms above it that it must not know although they come earlier: physics, statistics and presentation apart.
FORBIDDEN = {
    "solver": {"scenario", "process", "units"},
    "formulas": {"scenario", "process", "units", "solver"},
    "surrogate": {"solver", "sections", "formulas"},
    "statistics": {"solver", "sections", "formulas", "scenario"},
    "decisions": {"solver", "sections", "formulas", "scenario", "surrogate", "units"},
    "report": {"solver", "surrogate", "process"},
}


def modules() -> list[Path]:
    return sorted(path for path in PACKAGE.rglob("*.py") if path != PACKAGE / "__init__.py")


def room_of(path: Path) -> str:
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


def imported_rooms(path: Path) -> set[str]:
    rooms = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        names: list[str] = []
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import"
            names = [node.module or ""]
        for name in names:
            parts = name.split(".")
            if parts[0] == "tolerance" and len(parts) > 1:
                rooms.add(parts[1])
            assert name != "tolerance", f"{path}: imports the front door"
    return rooms


@pytest.mark.parametrize("path", modules(), ids=lambda path: str(path.relative_to(PACKAGE)))
def test_a_module_imports_only_from_earlier_steps(path: Path) -> None:
    room = room_of(path)
    for other in imported_rooms(path) - {room}:
        assert ROW_OF[other] < ROW_OF[room], f"{room} must not import {other}"
        assert other not in FORBIDDEN.get(room, set()), f"{room} must not know {other}"


@pytest.mark.parametrize("path", modules(), ids=lambda path: str(path.relative_to(PACKAGE)))
def test_a_module_takes_nothing_private_of_another(path: Path) -> None:
    taken = [node for node in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
             if isinstance(node, ast.ImportFrom) and (node.module or "").startswith("tolerance")]
    assert [alias.name for node in taken for alias in node.names if alias.name.startswith("_")] == []


def test_every_room_stands_in_the_table() -> None:
    assert {room_of(path) for path in modules()} <= set(ROW_OF)


@pytest.mark.parametrize(("modules_loaded", "heavy"), [
    ("tolerance.command", ("numpy", "pandas", "scipy", "matplotlib", "openpyxl", "SALib", "pydantic", "rich")),
    ("tolerance.study.note", ("pandas", "scipy.special", "scipy.stats", "matplotlib", "openpyxl", "SALib")),
    ("tolerance.study.check", ("pandas", "scipy.special", "scipy.stats", "matplotlib", "openpyxl", "SALib")),
])
def test_what_must_start_fast_loads_nothing_heavy(modules_loaded: str, heavy: tuple[str, ...]) -> None:
    code = f"import sys, {modules_loaded}; print(*sys.modules)"
    loaded = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout.split()
    assert not set(heavy) & set(loaded)
