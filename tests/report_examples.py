"""Made-up results for the tests of the report: they test how numbers are shown, the numbers themselves are invented."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tolerance.arrays import FloatArray, read_only
from tolerance.nominal import CheckResult, NominalLine
from tolerance.results import (
    Certificate,
    Conductor,
    DirectCheck,
    Drawing,
    Driver,
    Group,
    Interval,
    Lever,
    Levers,
    LineResult,
    Prediction,
    Record,
    Region,
    RunResult,
    Spread,
    Tail,
    YieldByLimit,
)
from tolerance.scenario.checking import parse
from tolerance.scenario.tables import Scenario

SCENARIO_TEXT = """format = 1
title = "Orchard gateway, 6 layers"   # an invented board

[evaluation]
limit = "7 %"
seed = 1

[[layers]]
name = "top mask"
kind = "mask"
thickness = "25 um"
over_copper = "15 um"
dk = 3.5

[[layers]]
name = "L1"
kind = "copper"
use = "signal"
foil = "18 um"
plating = "25 um"
etch_factor = 3.0

[[layers]]
name = "P1"
kind = "prepreg"
thickness = "100 um"
dk = 4.0

[[layers]]
name = "L2"
kind = "copper"
use = "plane"
foil = "17 um"

[[layers]]
name = "C1"
kind = "core"
thickness = "0.8 mm"
dk = 4.2

[[layers]]
name = "L3"
kind = "copper"
use = "plane"
foil = "17 um"

[[lines]]
name = "radio feed"
layer = "L1"
width = "180 um"
target = "50 ohm"

[[lines]]
name = "display pair"
layer = "L1"
width = "120 um"
gap = "150 um"
target = "100 ohm"
limit = "10 %"

[[variations]]
of = "L1.etch"
tolerance = "10 %"

[[variations]]
of = "P1.thickness"
tolerance = "8 um"
cpk = 1.33
shift = "2 um"

[[variations]]
of = "*.dk"
shape = "uniform"
tolerance = "5 %"

[[variations]]
of = ["top mask.thickness", "top mask.over_copper"]
shape = "truncated_normal"
sigmas = 2
tolerance = "10 um"
together = true

[report]
lengths = "um"
"""
LONG_NAME = "differential camera link from the front connector to the image processor, channel"
WIDE = 4e-3


def made_up_scenario(lengths: str = "um") -> Scenario:
    """The scenario that the text above says."""
    return parse(SCENARIO_TEXT.replace('lengths = "um"', f'lengths = "{lengths}"'))


def rectangle(left: float, right: float, bottom: float, top: float) -> FloatArray:
    """Corners of a rectangle [m]."""
    return read_only([(left, bottom), (right, bottom), (right, top), (left, top)])


def trace(centre: float, foot: float, crest: float, bottom: float, top: float, name: str = "L1") -> Conductor:
    """A trapezoidal trace with its foot down [m]."""
    return Conductor(name, "trace", read_only([(centre - foot / 2, bottom), (centre + foot / 2, bottom),
                                               (centre + crest / 2, top), (centre - crest / 2, top)]))


def microstrip_drawing(*, width: float = 180e-6, gap: float | None = None, height: float = 100e-6) -> Drawing:
    """A mask-coated microstrip, or a pair with its mask mesas apart."""
    copper, flat, over = 43e-6, 25e-6, 15e-6
    centres = (0.0,) if gap is None else (-(width + gap) / 2, (width + gap) / 2)
    mask: list[tuple[float, float]] = [(-WIDE, 0.0)]
    for centre in centres:
        left, right = centre - width / 2 - flat, centre + width / 2 + flat
        mask += [(left, flat), (left, copper + over), (right, copper + over), (right, flat)]
    outline = [(-WIDE, 0.0), (WIDE, 0.0), (WIDE, flat), *mask[:0:-1], (-WIDE, flat)]
    return Drawing(
        regions=(Region("top mask", "mask", 3.5, read_only(outline)),
                 Region("P1", "prepreg", 4.0, rectangle(-WIDE, WIDE, -height, 0.0))),
        conductors=(*(trace(centre, width, width - 29e-6, 0.0, copper) for centre in centres),
                    Conductor("L2", "plane", rectangle(-WIDE, WIDE, -height - 17e-6, -height))),
    )


def stripline_drawing(*, width: float = 110e-6, gap: float | None = None) -> Drawing:
    """A stripline on its core under two plies of prepreg."""
    copper = 16e-6
    centres = (0.0,) if gap is None else (-(width + gap) / 2, (width + gap) / 2)
    return Drawing(
        regions=(Region("P3", "prepreg", 3.8, rectangle(-WIDE, WIDE, copper + 70e-6, copper + 140e-6)),
                 Region("P2", "prepreg", 4.1, rectangle(-WIDE, WIDE, 0.0, copper + 70e-6)),
                 Region("C1", "core", 4.2, rectangle(-WIDE, WIDE, -100e-6, 0.0))),
        conductors=(*(trace(centre, width, width - 10e-6, 0.0, copper, "L3") for centre in centres),
                    Conductor("L2", "plane", rectangle(-WIDE, WIDE, copper + 140e-6, copper + 156e-6)),
                    Conductor("L4", "plane", rectangle(-WIDE, WIDE, -116e-6, -100e-6))),
    )


def around(value: float, half_width: float, *, low: float = -np.inf, high: float = np.inf) -> Interval:
    """An interval about the value, cut at the ends given."""
    return Interval(value, max(value - half_width, low), min(value + half_width, high))


def share(value: float, half_width: float = 0.0008) -> Interval:
    """An interval about a share."""
    return around(value, half_width, low=0.0, high=1.0)


def some_drivers(count: int = 5, *, shapley: bool = False) -> tuple[Driver, ...]:
    """Ranked drivers with falling shares."""
    names = ("P1.thickness", "L1.etch", "P1.dk", "top mask.over_copper", "L1.plating", "L1.foil", "top mask.dk",
             "L1.etch_factor", "P2.thickness + P3.thickness + P4.thickness", "top mask.thickness", "C1.dk")
    total = [0.52 * 0.62 ** rank for rank in range(count)]
    return tuple(Driver(names[rank % len(names)], share(0.96 * value, 0.006), share(value, 0.008),
                        share(1.02 * value, 0.01) if shapley else None) for rank, value in enumerate(total))


def made_up_line(name: str = "radio feed", *, target: float = 50.0, limit: float = 0.07, mean: float = 50.2,
                 deviation: float = 1.6, kind: str = "mask-coated microstrip", drawing: Drawing | None = None,
                 drivers: tuple[Driver, ...] | None = None, impossible: int = 0) -> LineResult:
    """One line, its impedance drawn as a normal one."""
    low, high = target * (1 - limit), target * (1 + limit)
    impedance = np.random.default_rng(5).normal(mean, deviation, size=65536)
    counts, edges = np.histogram(impedance, bins=80)
    below, above = float(np.mean(impedance < low)), float(np.mean(impedance > high))
    cpk = min(high - mean, mean - low) / (3 * deviation)
    return LineResult(
        name=name, kind=kind, layer="L1", mode="single", references=("L2",), target=target, low_limit=low,
        high_limit=high, nominal=mean - 0.1, mean=around(mean, 0.01), deviation=around(deviation, 0.008),
        below=share(below), above=share(above), inside=share(1 - below - above),
        cp=around((high - low) / (6 * deviation), 0.005), cpk=around(cpk, 0.006), impossible=impossible,
        drivers=some_drivers() if drivers is None else drivers,
        spread=Spread(edges=read_only(edges), counts=counts.astype(np.int64)),
        by_limit=some_curve(np.abs(impedance / target - 1.0)),
        prediction=Prediction(solver_runs=96, degree=2, terms=28, leave_one_out_error=0.004, held_out_error=0.0037,
                              held_out_largest=0.011),
        certificate=Certificate(certified=True, solved=41, needed=41, cap=4096, multiple=6.0, error=0.005),
        drawing=microstrip_drawing() if drawing is None else drawing,
    )


def some_curve(off_target: FloatArray) -> YieldByLimit:
    """Yield against the limit of coupons that lie so far off their target."""
    limits = 0.005 * np.arange(41)
    value = np.array([np.mean(off_target <= limit) for limit in limits])
    return YieldByLimit(read_only(limits), read_only(value), read_only(np.maximum(value - 0.002, 0.0)),
                        read_only(np.minimum(value + 0.002, 1.0)), around(float(np.quantile(off_target, 0.99)), 0.001))


def made_up_result(lines: tuple[LineResult, ...] | None = None, *, title: str = "Orchard gateway, 6 layers",
                   impossible: int = 0) -> RunResult:
    """A run of the lines given, by default one single line."""
    lines = (made_up_line(),) if lines is None else lines
    return RunResult(
        title=title, seed=1, coupons=65536, target_yield=0.99,
        inside=share(min(line.inside.value for line in lines)), impossible=impossible, lines=lines,
        by_limit=min((line.by_limit for line in lines), key=lambda curve: float(curve.value.sum())),
        record=Record(scenario_text=SCENARIO_TEXT, scenario_path="orchard.toml",
                      versions={"tolerance": "0.1.0", "numpy": "2.4.0"}, replicates=8, solver_runs=96 * len(lines),
                      settings={"elements_per_edge": "24"}, seconds={"solver": 1.25, "drivers": 0.5}),
    )


def many_lines(count: int, *, long_names: bool = False) -> tuple[LineResult, ...]:
    """Lines of several kinds, some meeting the target and some not."""
    kinds = (
        ("radio feed", 50.0, 1.1, "mask-coated microstrip", microstrip_drawing()),
        ("display pair", 100.0, 2.4, "mask-coated microstrip pair", microstrip_drawing(width=120e-6, gap=150e-6)),
        ("memory clock", 40.0, 0.7, "stripline", stripline_drawing()),
        ("camera pair", 90.0, 2.9, "stripline pair", stripline_drawing(width=95e-6, gap=130e-6)),
    )
    lines = []
    for number in range(count):
        name, target, deviation, kind, drawing = kinds[number % len(kinds)]
        name = LONG_NAME if long_names else name
        lines.append(made_up_line(f"{name} {number + 1}", target=target, mean=target * (1 + 0.004 * (number % 5)),
                                  deviation=deviation, kind=kind, drawing=drawing,
                                  drivers=some_drivers(4 + number % 8)))
    return tuple(lines)


def with_direct_check(line: LineResult) -> DirectCheck:
    """What `--direct` would add to the line."""
    return DirectCheck(coupons=500, largest=0.012, root_mean_square=0.003, verdicts_that_differ=1,
                       share_inside_solved=line.inside.value, share_inside_predicted=line.inside.value)


def made_up_check(lines: int = 2, *, long_names: bool = False) -> CheckResult:
    """A check with a single line and pairs."""
    rows = []
    for number in range(lines):
        pair = number % 2 == 1
        name = f"{LONG_NAME if long_names else 'line'} {number + 1}"
        rows.append(NominalLine(
            name=name, kind="mask-coated microstrip pair" if pair else "mask-coated microstrip", layer="L1",
            references=("L2",), target=100.0 if pair else 50.0, impedance=98.734 if pair else 50.123,
            effective_dk=2.95, delay=5.79e-9, common_mode=31.4 if pair else None,
            even_effective_dk=3.3 if pair else None,
            dimensions=(("width", 180e-6), *((("gap", 150e-6),) if pair else ()))))
    return CheckResult("Orchard gateway, 6 layers", tuple(rows))


def with_weights(line: LineResult) -> LineResult:
    """The line with what weighs on its yield, and with failures too rare to be counted."""
    levers = tuple(Lever(driver.variable, share(0.004 / rank, 1e-4), around(0.001, 1e-4), around(-0.008 / rank, 1e-4),
                         0.97) for rank, driver in enumerate(line.drivers, start=1))
    rare = Interval(1.71e-8, 1.63e-8, 1.79e-8)
    tail = Tail(below=Interval(0.0, 0.0, 1e-19), above=rare, failing=rare, monotone=True, solver_runs=24,
                largest_difference=0.005)
    groups = (Group("L1", "layer", ("L1.etch", "L1.plating"), share(0.4)),
              Group("copper", "material", ("L1.etch", "L1.plating"), share(0.4)))
    return replace(line, levers=Levers(line.inside, levers), tail=tail, groups=groups)
