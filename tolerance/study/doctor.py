"""`doctor`: what is installed, how fast the field solver is here, and whether exact results come out.

Every reference value is from outside this program and stands here as a number with its source, so that a library that
computes wrongly on this machine cannot hide.
"""

from __future__ import annotations

import os
import time
from collections.abc import Iterator

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.cores import plain_algebra
from tolerance.diagnosed import Diagnosis, Reference, Speed
from tolerance.results import RunResult
from tolerance.scenario import parse
from tolerance.sections.section import Ply, Section
from tolerance.solver.line import solve_modes
from tolerance.solver.plan import plan_for
from tolerance.study.run import run
from tolerance.study.solved import SolvedCache
from tolerance.study.versions import machine, version_of, versions

EVEN, ODD = 1, -1
EXTRAS = ("distributed", "pyarrow")
TIMED, REPEATS = 512, 3  # sections
SOLVER = 2e-4  # share of an impedance that the field solver promises
SAMPLED = 2e-3  # of a yield, on as many coupons as here

_Value = float | FloatArray
_Layer = tuple[_Value, _Value]
_SANDWICH = """
format = 1
title = "A strip in one dielectric"
[evaluation]
limit = "4 %"
coupons = 4096
seed = 1
[[layers]]
name = "L1"
kind = "copper"
use = "plane"
foil = "17 um"
[[layers]]
name = "C1"
kind = "core"
thickness = "200 um"
dk = 4.0
[[layers]]
name = "L2"
kind = "copper"
use = "signal"
foil = "17 um"
[[layers]]
name = "P1"
kind = "prepreg"
thickness = "200 um"
dk = 4.0
[[layers]]
name = "L3"
kind = "copper"
use = "plane"
foil = "17 um"
[[lines]]
name = "strip"
layer = "L2"
width = "150 um"
target = "52 ohm"
[[variations]]
of = ["C1.dk", "P1.dk"]
shape = "uniform"
low = 3.6
high = 4.4
together = true
"""


@plain_algebra
def doctor(cache: SolvedCache | None = None) -> Diagnosis:
    """Look at this installation. cache : that of the user, to tell where it is; nothing is taken from it."""
    first, second = (run(parse(_SANDWICH)) for _ in range(2))
    return Diagnosis(
        versions=versions(), optional={name: version_of(name) for name in EXTRAS}, machine=machine(),
        cores=os.cpu_count() or 1,
        cache=None if cache is None else (str(cache.cache.folder), cache.cache.is_writable()),
        speeds=tuple(_speeds()), references=(*_sections(), _yield(first)),
        same_again=_figures(first) == _figures(second),
    )


def _sections() -> Iterator[Reference]:
    """Cross-sections with exact impedances, and one that finite elements solved."""
    def impedance(name: str, source: str, expected: float, section: Section, mode: int = EVEN) -> Reference:
        found = float(solve_modes(section, plan_for(section), modes=(mode,))[mode].impedance[0])
        return Reference(name, "ohm", source, expected, found, SOLVER * expected)

    yield impedance("strip midway between planes, in air, as wide as half their distance",
                    "S. B. Cohn 1954, exact", 100.43245, _strip(0.5))
    yield impedance("the same, as wide as their distance", "S. B. Cohn 1954, exact", 65.35363, _strip(1.0))
    coupled = _strip(0.5, gap=0.2)
    yield impedance("two such strips, even mode", "S. B. Cohn 1955, exact", 117.08650, coupled)
    yield impedance("two such strips, odd mode", "S. B. Cohn 1955, exact", 80.10344, coupled, ODD)
    yield impedance("strip in air over a plane, as wide as its height", "A. E. H. Love 1923, exact", 126.42387,
                    _section(foot=1.0, crest=1.0, thickness=0.0, below=(1.0, 1.0)))
    yield impedance("trace of trapezoidal section between planes, in air", "Schwarz-Christoffel map, exact", 69.94957,
                    _section(foot=1.0, crest=0.8, thickness=0.2, below=(0.5, 1.0), above=(0.9, 1.0)))
    yield impedance("trace on laminate over a plane", "independent finite-element calculation with scikit-fem, energy "
                    "bounded from both sides", 68.82387,
                    _section(foot=75.0, crest=75.0, thickness=15.0, below=(60.0, 3.0)))
    two = _section(foot=0.5, crest=0.5, thickness=0.0, below=(0.5, 4.4), above=(0.5, 3.7))
    found = float(solve_modes(two, plan_for(two), modes=(EVEN,))[EVEN].effective_dk[0])
    yield Reference("effective Dk of a strip midway between Dk 4.4 and 3.7", "", "exact: the mean, by symmetry", 4.05,
                    found, SOLVER * 4.05)


def _yield(result: RunResult) -> Reference:
    """In one dielectric the impedance goes with one over the root of its Dk, so its yield is exact."""
    line = result.lines[0]
    ends = [4.0 * (line.nominal / limit) ** 2 for limit in (line.high_limit, line.low_limit)]
    low, high = np.clip(ends, 3.6, 4.4)
    return Reference("yield of a strip in one dielectric whose Dk is uniform from 3.6 to 4.4", "share",
                     "exact: impedance goes with one over the root of Dk", float(high - low) / 0.8,
                     line.inside.value, SAMPLED)


def _figures(result: RunResult) -> list[float]:
    return [figure for line in result.lines for figure in (
        line.nominal, line.mean.value, line.deviation.low, line.inside.value, line.drivers[0].total.high)]


def _speeds() -> Iterator[Speed]:
    """Each kind of section with all its dimensions spread, so that nothing is solved twice."""
    chance = np.random.default_rng(1)
    spread = 1.0 + 0.05 * chance.uniform(-1.0, 1.0, (6, TIMED))
    trace = {"foot": 180.0 * spread[0], "crest": 150.0 * spread[1], "thickness": 40.0 * spread[2]}
    below, gap = (100.0 * spread[3], 4.0 * spread[4]), 150.0 * spread[5]
    for kind, section, modes in (
        ("bare microstrip", _section(**trace, below=below), (EVEN,)),
        ("stripline", _section(**trace, below=below, above=below), (EVEN,)),
        ("bare microstrip pair, both modes", _section(**trace, below=below, gap=gap), (EVEN, ODD)),
    ):
        plan = plan_for(section)
        seconds = []
        for _ in range(REPEATS):
            start = time.perf_counter()
            solve_modes(section, plan, modes=modes)
            seconds.append(time.perf_counter() - start)
        yield Speed(kind, TIMED / min(seconds))


def _strip(width: float, gap: float | None = None) -> Section:
    """A strip without thickness (or two) midway between planes at distance 1, in air."""
    return _section(foot=width, crest=width, thickness=0.0, below=(0.5, 1.0), above=(0.5, 1.0), gap=gap)


def _section(
    *, foot: _Value, crest: _Value, thickness: _Value,
    below: _Layer, above: _Layer | None = None, gap: _Value | None = None,
) -> Section:
    """A trace over a plane, `below` = (thickness, Dk); with `above` between planes. Lengths in any one unit."""
    def array(value: _Value) -> FloatArray:
        return np.atleast_1d(np.asarray(value, dtype=np.float64))

    crest_side = () if above is None else (Ply(array(above[0]), array(above[1])),)
    return Section(array(foot), array(crest), array(thickness), None if gap is None else array(gap),
                   (Ply(array(below[0]), array(below[1])),), True, crest_side, above is not None)
