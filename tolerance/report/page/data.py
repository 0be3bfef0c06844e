"""What the page's script reads: one JSON object, every number in SI, ohm or as a share."""

from __future__ import annotations

import base64
import json
from collections.abc import Sequence
from typing import Any

import numpy as np

from tolerance.arrays import FloatArray, IntArray
from tolerance.paged import Form, Page, PagedLine, PagedProperty, PagedResin, PagedVariation, PowerTree, Sum
from tolerance.report.wording import METRES_IN, variable_words
from tolerance.results import Interval, LineResult
from tolerance.scenario.amounts import Amount
from tolerance.scenario.properties import matches

DIGITS = 10  # of factors and coefficients
LEVELS = 4  # factors of a term at most
LARGEST_GERM = 8.0  # a stored germ is a whole number of 16 bits
WIDTH_STEPS = {"um": (0.5e-6, 1e-6), "mil": (0.02 * 25.4e-6, 0.05 * 25.4e-6)}  # of narrow and of wide traces
WIDE = 250e-6
ROOM_BESIDE = 0.9  # of the axis of a spread outside the limits, of the half-width of the limits
DEVIATIONS_SHOWN = 4.5


def script_data(page: Page) -> str:
    """The object as text that may stand in a script element: no sign of it can end one."""
    text = json.dumps(page_data(page), ensure_ascii=True, separators=(",", ":"), allow_nan=False)
    return text.replace("<", "\\u003c").replace(">", "\\u003e").replace("&", "\\u0026")


def page_data(page: Page) -> dict[str, Any]:
    """Everything that the page computes with."""
    result = page.result
    return {
        "title": result.title, "lengths": page.lengths, "seed": result.seed, "coupons": result.coupons,
        "targetYield": result.target_yield, "together": _interval(result.inside),
        "draws": _draws(page),
        "properties": [_property(each) for each in page.properties],
        "variations": [_variation(page, number, each) for number, each in enumerate(page.variations)],
        "resins": [_resin(each) for each in page.resins],
        "lines": [_line(page, number) for number in range(len(page.lines))],
        "offers": [{"words": each.words, "cost": each.cost, "tolerances": [
            {"property": number, **_amount_values(amount)} for number, amount in each.tolerances.items()]}
            for each in page.offers],
        "pieces": [{"text": each.text, "slot": each.slot, "number": each.number} for each in page.pieces],
    }


def _property(each: PagedProperty) -> dict[str, Any]:
    table = each.measured
    return {"name": each.name, "column": each.column, "variation": each.variation, "nominal": each.nominal,
            "etch": each.is_etch, "measured": None if table is None else {
                "germs": _floats(table.germs), "values": _floats(table.values), "logarithmic": table.logarithmic,
                "mean": table.mean, "deviation": table.deviation}}


def members_of(page: Page, number: int) -> list[PagedProperty]:
    """The properties that a variation moves."""
    return [each for each in page.properties if each.variation == number]


def is_scalable(page: Page, number: int) -> bool:
    """Whether a variation's tolerance can be moved: of readings only where one property has them."""
    return page.variations[number].shape != "measured" or len(members_of(page, number)) == 1


def variation_words(variation: PagedVariation) -> str:
    """What a variation is called: what it names, or of properties drawn together all of them as one."""
    return variable_words(" + ".join(variation.of)) if variation.together else ", ".join(variation.of)


def _variation(page: Page, number: int, each: PagedVariation) -> dict[str, Any]:
    own = members_of(page, number)
    table = own[0].measured
    assert all(any(matches(text, one.name) for text in each.of) for one in own)
    return {
        "name": variation_words(each), "shape": each.shape, "tolerance": _amount(each.tolerance),
        "shift": _amount(each.shift), "sigmas": each.sigmas, "cpk": each.cpk, "low": each.low, "high": each.high,
        "measure": each.measure, "shiftRelative": each.shift_relative, "shiftReach": each.shift_reach,
        "anchor": each.anchor, "kept": each.kept, "nominal": own[0].nominal, "scalable": is_scalable(page, number),
        "readings": None if table is None else {"mean": table.mean, "deviation": table.deviation},
    }


def width_step(width: float, lengths: str) -> float:
    """By how much the slider of a drawn width moves it at a time [m]."""
    return WIDTH_STEPS[lengths][1 if width > WIDE else 0]


def width_steps(line: PagedLine, lengths: str) -> int:
    """How many steps a drawn width can be moved either way."""
    return int(line.width_reach / width_step(line.width, lengths) + 1e-9)


def _line(page: Page, number: int) -> dict[str, Any]:
    line, result = page.lines[number], page.result.lines[number]
    width, gap, ground_gap = page.drawn[number]
    return {
        "name": line.name, "width": width, "gap": gap, "groundGap": ground_gap,
        "widthStep": width_step(width, page.lengths), "ownLimit": page.own_limits[number], "limit": result.limit,
        "target": result.target, "axis": list(axis_of(result)), "run": _run(result),
        "inputs": [{"name": each.name, "nominal": each.nominal, "property": each.property, "drawn": each.drawn,
                    "resin": each.resin, "byResin": each.by_resin} for each in line.inputs],
        "forms": [_form(each) for each in line.forms], "dimensions": int(line.matrix.shape[1]),
        "matrix": [_floats(row) for row in line.matrix], "origin": _floats(line.origin), "tree": _tree(line.powers),
        "covered": [{"property": place, "low": low, "high": high} for place, (low, high) in line.covered.items()],
        "solvedAt": [_floats(row, 3) for row in line.solved_at], "errors": _floats(line.errors, 3),
        "error": line.error, "farthest": line.farthest,
    }


def axis_of(line: LineResult) -> tuple[float, float]:
    """The impedances [ohm] that the spread of a line is drawn over."""
    half = line.high_limit - line.target
    far = max((1.0 + ROOM_BESIDE) * half, abs(line.mean.value - line.target) + DEVIATIONS_SHOWN * line.deviation.value)
    return max(line.target - far, 0.0), line.target + far


def _run(line: LineResult) -> dict[str, Any]:
    run: dict[str, Any] = {
        "yield": _interval(line.inside), "below": line.below.value, "above": line.above.value,
        "mean": line.mean.value, "deviation": line.deviation.value,
    }
    return run if line.cpk is None else {**run, "cpk": line.cpk.value}


def _form(form: Form) -> dict[str, Any]:
    return {"sum": _sum(form.sum), "least": form.least, "leastIn": form.least_in, "logarithm": form.logarithm,
            "crest": None if form.crest is None else list(form.crest),
            "over": None if form.over is None else _sum(form.over)}


def _sum(each: Sum) -> dict[str, Any]:
    return {"constant": _number(each.constant, 16), "inputs": list(each.inputs), "factors": _floats(each.factors)}


def _tree(tree: PowerTree) -> dict[str, Any]:
    """Each level with where the children of its products begin on the next; the last entry: where they end."""
    names = ("first", "pairs", "triples", "fours")
    told: dict[str, Any] = {"constant": _number(tree.constant, DIGITS)}
    for level, name in enumerate(names):
        there = level < len(tree.coordinate)
        coordinate = tree.coordinate[level] if there else np.empty(0, dtype=np.int64)
        following = tree.parent[level + 1] if level + 1 < len(tree.parent) else np.empty(0, dtype=np.int64)
        told[name] = {
            "coordinate": coordinate.tolist(), "coefficient": _floats(tree.coefficient[level]) if there else [],
            "child": np.searchsorted(following, np.arange(len(coordinate) + 1)).tolist(),
        }
    return told


def _resin(each: PagedResin) -> dict[str, Any]:
    def source(known: tuple[int | None, float]) -> dict[str, Any]:
        return {"property": known[0], "nominal": known[1]}

    return {"content": source(each.content), "filled": [
        {"share": share, "copper": [source(one) for one in copper]} for share, copper in each.filled],
        "glass": each.glass, "resin": each.resin, "resinDk": each.resin_dk, "glassDk": each.glass_dk,
        "thickness": each.thickness, "dk": each.dk}


def _draws(page: Page) -> dict[str, Any]:
    draws = page.draws
    step = LARGEST_GERM / (2**15 - 1)
    stored = None
    if draws.stored is not None:
        whole = np.clip(np.rint(draws.stored / step), -(2**15) + 1, 2**15 - 1).astype("<i2")
        stored = base64.b64encode(np.asfortranarray(whole).tobytes(order="F")).decode("ascii")
    sobol = draws.sobol
    return {
        "replicates": draws.replicates, "block": draws.block, "variables": draws.variables, "stored": stored,
        "step": step, "roots": [{"columns": list(columns), "root": [_floats(row, 17) for row in root]}
                                for columns, root in draws.roots],
        "sobol": None if sobol is None else {
            "bits": sobol.bits_of_a_number, "shifts": sobol.shifts.tolist(), "directions": sobol.directions.tolist()},
    }


def _interval(interval: Interval) -> dict[str, float]:
    return {"value": interval.value, "low": interval.low, "high": interval.high}


def _amount(amount: Amount | None) -> dict[str, Any] | None:
    return None if amount is None else _amount_values(amount)


def _amount_values(amount: Amount) -> dict[str, Any]:
    return {"value": amount.value, "relative": amount.relative}


def _number(value: float, digits: int) -> float:
    return float(f"{value:.{digits}g}")


def _floats(values: Sequence[float] | FloatArray | IntArray, digits: int = DIGITS) -> list[float]:
    return [_number(float(value), digits) for value in values]


def metres_in(lengths: str) -> float:
    """What one unit of length is [m]."""
    return METRES_IN["mil" if lengths == "mil" else "um"]
