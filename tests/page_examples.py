"""Boards for the tests of the page, and the page's arithmetic written down once more with numpy and scipy."""

from __future__ import annotations

import json
import re
from collections.abc import Mapping, Sequence
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
from scipy.special import ndtri

from tolerance.arrays import FloatArray
from tolerance.paged import Form, Page, PagedDraws, PagedLine, Sum
from tolerance.report.page.document import page_text
from tolerance.scenario import Scenario, load, parse
from tolerance.study.page import page
from tolerance.study.run import run

SCENARIOS = Path(__file__).parents[1] / "scenarios"
HOSTILE = "</script><script>window.broken = true</script><!-- <b onclick='window.broken=1'>&amp; \"' ]]>"

SMALL = """format = 1
title = "Kite reel, 2 layers"

[evaluation]
limit = "10 %"
coupons = 1024
seed = 3

[[layers]]
name = "L1"
kind = "copper"
use = "signal"
foil = "35 um"

[[layers]]
name = "C1"
kind = "core"
thickness = "200 um"
dk = 4.2

[[layers]]
name = "L2"
kind = "copper"
use = "plane"
foil = "35 um"

[[lines]]
name = "beacon"
layer = "L1"
width = "380 um"
target = "50 ohm"

[[variations]]
of = "C1.thickness"
tolerance = "12 %"
"""

EVERY_SHAPE = """format = 1
title = "Every shape"

[evaluation]
limit = "9 %"
coupons = 8192
seed = 11

[[layers]]
name = "top mask"
kind = "mask"
thickness = "25 um"
over_copper = "14 um"
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
resin_content = "62 %"
glass_areal_weight = "48 g/m^2"
resin_dk = 3.2
glass_dk = 6.1

[[layers]]
name = "L2"
kind = "copper"
use = "plane"
foil = "30 um"
foot = "up"
copper_share = "70 %"

[[layers]]
name = "P2"
kind = "prepreg"
thickness = "180 um"
dk = 3.9

[[layers]]
name = "L3"
kind = "copper"
use = "signal"
foil = "30 um"
etch_factor = 4.0
foot = "up"

[[layers]]
name = "P3"
kind = "prepreg"
thickness = "180 um"
dk = 3.9

[[layers]]
name = "L4"
kind = "copper"
use = "signal"
foil = "30 um"
etch_factor = 4.0
foot = "down"

[[layers]]
name = "P4"
kind = "prepreg"
thickness = "180 um"
dk = 3.9

[[layers]]
name = "L5"
kind = "copper"
use = "plane"
foil = "30 um"

[[lines]]
name = "coated pair"
layer = "L1"
width = "110 um"
gap = "140 um"
target = "95 ohm"

[[lines]]
name = "coplanar feed"
layer = "L1"
width = "130 um"
ground_gap = "220 um"
target = "48 ohm"
limit = "8 %"

[[lines]]
name = "broadside pair"
layer = "L3"
partner = "L4"
width = "110 um"
target = "85 ohm"

[[variations]]
of = "L1.etch"
tolerance = "12 %"
shift = "-2 um"

[[variations]]
of = "L1.plating"
shape = "lognormal"
tolerance = "25 %"

[[variations]]
of = "L*.etch_factor"
shape = "triangular"
low = 2.6
high = 5.0

[[variations]]
of = "P1.resin_content"
tolerance = 0.02

[[variations]]
of = "L2.foil"
tolerance = "3 um"
sigmas = 2

[[variations]]
of = ["P2.thickness", "P3.thickness", "P4.thickness"]
tolerance = "8 %"
cpk = 1.2
together = true

[[variations]]
of = "P*.dk"
shape = "uniform"
tolerance = "3 %"

[[variations]]
of = ["top mask.thickness", "top mask.over_copper"]
shape = "truncated_normal"
tolerance = "6 um"
together = true

[[variations]]
of = ["L3.registration", "L4.registration"]
tolerance = "40 um"

[[correlations]]
between = ["L1.etch", "L1.plating"]
coefficient = 0.4

[[offers]]
of = "L1.etch"
tolerance = "8 %"
cost = 3.0

[[offers]]
of = ["P2.thickness", "P3.thickness", "P4.thickness"]
tolerance = "5 %"
cost = 1.5

[report]
lengths = "mil"
"""


def scenario_of(text: str) -> Scenario:
    """A checked scenario from its text."""
    return parse(text, name="example.toml", folder=SCENARIOS)


@cache
def example_page(text: str) -> Page:
    """The page of a scenario's text."""
    scenario = scenario_of(text)
    return page(scenario, run(scenario))


@cache
def board_page(name: str, coupons: int | None = None) -> Page:
    """The page of one of the scenarios that come with the program."""
    scenario = load(SCENARIOS / f"{name}.toml")
    return page(scenario, run(scenario, coupons=coupons))


def ten_layers() -> Page:
    """The page of eleven lines, of few coupons: how it looks and how large it is does not depend on their number."""
    return board_page("weir-module-10-layer", 1024)


def data_of(text: str) -> dict[str, Any]:
    """What the script of a written page reads."""
    found = re.search(r'<script type="application/json" id="data">(.*?)</script>', text, re.DOTALL)
    assert found is not None
    read: dict[str, Any] = json.loads(found.group(1))
    return read


def written(one: Page, folder: Path) -> Path:
    """The page as a file."""
    path = folder / "page.html"
    path.write_text(page_text(one), encoding="utf-8", newline="\n")
    return path


def germs_of(draws: PagedDraws) -> FloatArray:
    """The standard normals (coupons, variables) that the page comes to, replicate by replicate."""
    if draws.sobol is None:
        assert draws.stored is not None
        return draws.stored
    sobol, number = draws.sobol, np.arange(draws.block)
    gray = number ^ (number >> 1)
    points = np.repeat(sobol.shifts[:, np.newaxis, :], draws.block, axis=1)
    for bit in range(sobol.directions.shape[2]):
        chosen = ((gray >> bit) & 1)[np.newaxis, :, np.newaxis] == 1
        points ^= np.where(chosen, sobol.directions[:, np.newaxis, :, bit], 0)
    germ = np.asarray(ndtri((points + 0.5) / 2.0**sobol.bits_of_a_number)).reshape(-1, draws.variables)
    for columns, root in draws.roots:
        germ[:, columns] = germ[:, columns] @ root.T
    return germ


def impedance_of(line: PagedLine, values: Mapping[str, FloatArray]) -> FloatArray:
    """What the page makes of values [SI] of a line's inputs, by name: [ohm] (coupons,), nought where it cannot be."""
    inputs = [values[each.name] for each in line.inputs]
    rows: list[FloatArray] = []
    for form in line.forms:
        rows.append(_row(form, line.forms, rows, inputs))
    possible = np.ones(len(rows[0]), dtype=np.bool_)
    for form, row in zip(line.forms, rows, strict=True):
        if form.least is not None:
            possible &= (row >= form.least) if form.least_in else (row > form.least)
    dimensions = line.matrix.shape[1]
    logarithms = np.stack([np.log(np.where(possible, row, 1.0)) if form.logarithm else row
                           for form, row in zip(line.forms[:dimensions], rows, strict=False)])
    at = line.matrix @ logarithms - line.origin[:, np.newaxis]
    return np.where(possible, np.exp(line.powers.evaluate(np.clip(at, -line.farthest, line.farthest).T)), 0.0)


def _row(form: Form, forms: Sequence[Form], rows: Sequence[FloatArray], inputs: Sequence[FloatArray]) -> FloatArray:
    if form.crest is not None:
        foot, thickness, factor = form.crest
        return np.asarray(rows[foot] - 2.0 * _total(forms[thickness].sum, inputs) / inputs[factor])
    own = _total(form.sum, inputs)
    return own if form.over is None else np.asarray(0.5 * np.log1p((own / _total(form.over, inputs)) ** 2))


def _total(each: Sum, inputs: Sequence[FloatArray]) -> FloatArray:
    start = np.full(len(inputs[0]), each.constant)
    return sum((slope * inputs[place] for place, slope in zip(each.inputs, each.factors, strict=True)), start=start)
