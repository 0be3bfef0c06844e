"""Decisions as JSON text: shares are fractions of 1, lengths in um; no NaN or infinity is written."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from tolerance.decided import (
        Basis,
        CenterResult,
        CentredLine,
        Compared,
        CompareResult,
        Judged,
        Offers,
        OfferSet,
        PromiseResult,
        Tightening,
        TightenResult,
        YieldByLimit,
    )
    from tolerance.noted import NoteResult
    from tolerance.results import Interval

UM = 1e6  # micrometres in a metre


def tighten_json(result: TightenResult) -> str:
    """The result of `tolerance tighten` as one JSON object."""
    basis = result.basis
    return _text({
        **_basis(basis), **_judged(basis, result.now),
        "variations": [_variation(basis, one) for one in result.variations],
        **({} if result.offers is None else {"offers": _offers(basis, result.offers)}),
    })


def center_json(result: CenterResult) -> str:
    """The result of `tolerance center` as one JSON object."""
    basis, moved = result.basis, result.moved
    return _text({
        **_basis(basis), **_judged(basis, result.now), "centred": _judged(basis, result.centred),
        "built_to_impedance": {"yield": _interval(result.to_impedance), "centring_error": result.centring_error},
        "lines": [_centred(one) for one in result.lines],
        **({} if moved is None else {"moved": {
            "name": moved.name, "nominal_um": UM * moved.nominal, "best_um": UM * moved.best,
            "at_end": moved.at_end}}),
        "ways": [{"name": way.name, "reaches_target": way.reaches, "cost": way.cost, "offers": list(way.offers),
                  **({} if way.yields is None else _judged(basis, way.yields))} for way in result.ways],
    })


def promise_json(result: PromiseResult) -> str:
    """The result of `tolerance promise` as one JSON object; limits are shares of the target."""
    return _text({
        **_basis(result.basis),
        "lines": [{"name": one.name, "target_ohm": one.target, "limit": one.limit, **_promised(one.curve)}
                  for one in result.lines],
        "together": _promised(result.together.curve),
    })


def compare_json(result: CompareResult) -> str:
    """The result of `tolerance compare` as one JSON object; differences are against the first scenario."""
    return _text({
        "seed": int(result.seed), "coupons": int(result.coupons), "aim": result.aim,
        "solver_runs": int(result.solver_runs), "scenarios": [_compared(one) for one in result.scenarios],
    })


def note_json(result: NoteResult) -> str:
    """The drawing note as one JSON object."""
    return _text({"title": result.title, "lines": [{
        "name": one.name, "kind": one.kind, "mode": one.mode, "target_ohm": one.target, "limit": one.limit,
        "low_limit_ohm": one.low_limit, "high_limit_ohm": one.high_limit, "layer": one.layer, "partner": one.partner,
        "references": list(one.references), "width_um": UM * one.width, "gap_um": _um(one.gap),
        "ground_gap_um": _um(one.ground_gap), "most_width_change_um": UM * one.most_width_change,
    } for one in result.lines], "notes": list(result.notes)})


def _text(value: object) -> str:
    return json.dumps(value, indent=2, allow_nan=False)


def _interval(interval: Interval) -> dict[str, float]:
    return {"value": float(interval.value), "low": float(interval.low), "high": float(interval.high)}


def _um(length: float | None) -> float | None:
    return None if length is None else UM * length


def _basis(basis: Basis) -> dict[str, object]:
    return {"title": basis.title, "seed": int(basis.seed), "coupons": int(basis.coupons),
            "target_yield": float(basis.target_yield), "aim": basis.aim, "solver_runs": int(basis.solver_runs)}


def _judged(basis: Basis, yields: Judged) -> dict[str, object]:
    named = zip(basis.line_names, yields.lines, strict=True)
    return {"yield": _interval(yields.together),
            "line_yields": [{"name": name, **_interval(value)} for name, value in named]}


def _variation(basis: Basis, one: Tightening) -> dict[str, object]:
    return {
        "variation": one.name,
        "halved": {**_judged(basis, one.halved), "gain": _interval(one.gain)},
        "doubled": {**_judged(basis, one.doubled), "gain": _interval(one.loss)},
        "at_nought": _judged(basis, one.perfect),
        "needed_factor": one.needed, "relaxed_factor": one.relaxed,
        "curve": [{"factor": factor, "yield": together, "line_yields": lines} for factor, together, lines in zip(
            one.factors.tolist(), one.together.tolist(), one.lines.T.tolist(), strict=True)],
    }


def _offers(basis: Basis, offers: Offers) -> dict[str, object]:
    return {
        "coupons": int(offers.coupons), "sets": int(offers.sets), "sets_evaluated": int(offers.evaluated),
        "alone": [{"offer": one.name, "tolerance": one.tolerance, "cost": one.cost, **_judged(basis, one.yields),
                   "gain": _interval(one.gain)} for one in offers.offers],
        "front": [_set(basis, offers, one) for one in offers.front],
        "cheapest": None if offers.cheapest is None else _set(basis, offers, offers.cheapest),
    }


def _set(basis: Basis, offers: Offers, one: OfferSet) -> dict[str, object]:
    return {"offers": list(offers.names(one)), "cost": one.cost, "reaches_target": basis.reaches(one.yields),
            **_judged(basis, one.yields)}


def _centred(one: CentredLine) -> dict[str, object]:
    return {
        "name": one.name, "layer": one.layer, "width_um": UM * one.width, "gap_um": _um(one.gap),
        "best_width_um": UM * one.best, "best_gap_um": _um(one.gap_at_best),
        "on_target_width_um": _um(one.on_target), "at_end": one.at_end,
        "yield": _interval(one.now), "yield_at_best": _interval(one.at_best),
        "yield_on_target": None if one.at_on_target is None else _interval(one.at_on_target),
        "gain": _interval(one.gain), "yield_built_to_impedance": _interval(one.to_impedance),
        "gaps": [{"gap_um": UM * each.gap, "width_um": UM * each.width, "yield": _interval(each.inside)}
                 for each in one.gaps],
    }


def _promised(curve: YieldByLimit) -> dict[str, object]:
    return {
        "tightest_limit": None if curve.needed is None else _interval(curve.needed),
        "curve": [{"limit": limit, "value": value, "low": low, "high": high} for limit, value, low, high in zip(
            curve.limit.tolist(), curve.value.tolist(), curve.low.tolist(), curve.high.tolist(), strict=True)],
    }


def _compared(one: Compared) -> dict[str, object]:
    difference = one.difference
    lines = []
    for name, value, drivers in zip(one.line_names, one.yields.lines, one.drivers, strict=True):
        against = None if difference is None else difference.lines.get(name)
        lines.append({"name": name, "yield": _interval(value),
                      "difference": None if against is None else _interval(against),
                      "drivers": [{"variable": each.variable, "total": _interval(each.total)} for each in drivers]})
    return {
        "file": one.file, "title": one.title, "target_yield": float(one.target_yield),
        "yield": _interval(one.yields.together),
        "difference": None if difference is None else _interval(difference.together), "lines": lines,
        "cost": one.cost, "cost_offers": list(one.cost_offers),
    }
