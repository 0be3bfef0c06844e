"""An invented board that is quick to run, and sweeps of it."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
from pathlib import Path

from tests.scenario_texts import SIX_LAYERS

HEAD = """
format = 1
title = "Weather vane"

[evaluation]
limit = "10 %"
coupons = 256
seed = 1
"""
LINE = """
[[lines]]
name = "radio feed"
layer = "L1"
width = "180 um"
target = "50 ohm"
"""
VARIATION = """
[[variations]]
of = "P1.thickness"
tolerance = "10 %"
"""
BARE = SIX_LAYERS.split("[[layers]]", 2)[2]  # without the mask
VANE = HEAD + "[[layers]]" + BARE + LINE + VARIATION
THICKNESSES = """
[[sweep]]
of = "layers.P1.thickness"
values = ["95 um", "100 um", "105 um"]
"""
TOLERANCES = """
[[sweep]]
of = "variations.P1.thickness.tolerance"
values = ["8 %", "12 %"]
"""
SWEEP = VANE + THICKNESSES + TOLERANCES


def write(folder: Path, text: str, name: str = "vane.toml") -> Path:
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def heed_interrupts() -> None:
    """In a process that is to be interrupted: a job in the background, and so its tests, would else ignore it."""
    signal.signal(signal.SIGINT, signal.SIG_DFL)


def start(*arguments: object, cwd: Path, **more: object) -> subprocess.Popen[str]:
    """The command line in a process (group) of its own."""
    return python("-m", "tolerance", *arguments, cwd=cwd, **more)


def python(*arguments: object, cwd: Path, **more: object) -> subprocess.Popen[str]:
    """Python in a process (group) of its own."""
    words = [sys.executable, *(str(one) for one in arguments)]
    path = os.pathsep.join([str(Path(__file__).parents[1]), os.environ.get("PYTHONPATH", "")])
    return subprocess.Popen(  # type: ignore[call-overload, no-any-return]
        words, cwd=cwd, env={**os.environ, "PYTHONPATH": path}, text=True, stdout=subprocess.PIPE,
        stderr=subprocess.PIPE, start_new_session=True, **{"preexec_fn": heed_interrupts, **more})
