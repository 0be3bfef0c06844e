"""Results as JSON text: the contract's keys to the letter, and the same text for the same run.

Nothing that differs between two equal runs goes in: no times, no versions. No NaN or infinity is written: a
capability that has no finite value (a line that nothing moves) stands as null.
"""

from __future__ import annotations

import json
import math
from typing import TYPE_CHECKING

from tolerance.nominal import CheckResult, FormulaOpinion, LossFigures, NominalLine, ReadingRise, ShareFigures
from tolerance.report.lots_json import line_keys, run_keys
from tolerance.report.measured import measured_object
from tolerance.report.weights import in_ppm

if TYPE_CHECKING:
    from tolerance.results import (
        Certificate,
        DirectCheck,
        Driver,
        Group,
        Interval,
        Lever,
        LineResult,
        RunResult,
        Tail,
    )

PICOSECONDS_PER_MILLIMETRE = 1e9  # of a delay in seconds per metre


def run_json(result: RunResult) -> str:
    """The result of `tolerance run` as one JSON object. ValueError where a number is not finite."""
    return _text(run_object(result))


def check_json(result: CheckResult) -> str:
    """The result of `tolerance check` as one JSON object. ValueError where a number is not finite."""
    return _text({"title": result.title, "lines": [_nominal_line(line) for line in result.lines]})


def run_object(result: RunResult) -> dict[str, object]:
    """The same as plain Python values."""
    measured = {"measured": [measured_object(one) for one in result.measured]} if result.measured else {}
    return {
        "title": result.title,
        "seed": int(result.seed),
        "coupons": int(result.coupons),
        **({} if result.frequency is None else {"frequency_hz": float(result.frequency)}),
        "target_yield": float(result.target_yield),
        "yield": _interval(result.inside),
        "impossible": int(result.impossible),
        "solver_runs": int(result.record.solver_runs),
        **run_keys(result),
        **measured,
        "lines": [_line(line) for line in result.lines],
    }


def _text(value: object) -> str:
    return json.dumps(value, indent=2, allow_nan=False)


def _interval(interval: Interval) -> dict[str, float]:
    return {"value": float(interval.value), "low": float(interval.low), "high": float(interval.high)}


def _flat(name: str, interval: Interval) -> dict[str, float]:
    return {name: float(interval.value), f"{name}_low": float(interval.low), f"{name}_high": float(interval.high)}


def _capability(name: str, interval: Interval | None) -> dict[str, float | None]:
    if interval is None:
        return {name: None, f"{name}_low": None, f"{name}_high": None}
    return {key: value if math.isfinite(value) else None for key, value in _flat(name, interval).items()}


def _line(line: LineResult) -> dict[str, object]:
    values: dict[str, object] = {
        "name": line.name, "kind": line.kind, "layer": line.layer, "mode": line.mode,
        "references": list(line.references),
        "target_ohm": float(line.target),
        "low_limit_ohm": float(line.low_limit), "high_limit_ohm": float(line.high_limit),
        "nominal_ohm": float(line.nominal),
        **_flat("mean_ohm", line.mean), **_flat("std_ohm", line.deviation),
        **_flat("below", line.below), **_flat("above", line.above),
        **_capability("cp", line.cp), **_capability("cpk", line.cpk),
        **_capability("needed_limit", line.by_limit.needed),
        "yield": _interval(line.inside),
        "impossible": int(line.impossible),
        "solver_runs": int(line.prediction.solver_runs),
        "held_out_error_ohm": float(line.prediction.held_out_error),
        "certificate": _certificate(line.certificate),
        "drivers": [_driver(driver) for driver in line.drivers],
        "groups": [_group(group) for group in line.groups],
        "yield_levers": None if line.levers is None else [_lever(lever) for lever in line.levers.each],
        "rare_failures": None if line.tail is None else _tail(line.tail),
    }
    if line.direct is not None:
        values["direct"] = _direct(line.direct)
    if line.rise is not None:
        values["reading_rise"] = _rise(line.rise)
    return values | line_keys(line)


def _certificate(certificate: Certificate) -> dict[str, object]:
    return {
        "certified": bool(certificate.certified),
        "coupons_solved": int(certificate.solved),
        "coupons_near_limits": int(certificate.needed),
        "most_coupons": int(certificate.cap),
        "errors_from_limit": float(certificate.multiple),
        "error_ohm": float(certificate.error),
    }


def _driver(driver: Driver) -> dict[str, object]:
    values: dict[str, object] = {
        "variable": driver.variable, **_flat("first", driver.first), **_flat("total", driver.total),
    }
    if driver.shapley is not None:
        values.update(_flat("shapley", driver.shapley))
    return values


def _group(group: Group) -> dict[str, object]:
    return {"name": group.name, "of": group.of, "variables": list(group.variables), **_flat("total", group.total)}


def _lever(lever: Lever) -> dict[str, object]:
    return {
        "variable": lever.variable, **_flat("gain_if_halved", lever.halved), **_flat("by_mean", lever.by_mean),
        **_flat("by_log_deviation", lever.by_deviation), "order_probability": float(lever.order),
    }


def _tail(tail: Tail) -> dict[str, object]:
    return {
        "failing_ppm": _interval(in_ppm(tail.failing)), "below_ppm": _interval(in_ppm(tail.below)),
        "above_ppm": _interval(in_ppm(tail.above)), "monotone": bool(tail.monotone),
        "solver_runs": int(tail.solver_runs), "largest_difference_ohm": float(tail.largest_difference),
    }


def _direct(direct: DirectCheck) -> dict[str, object]:
    return {
        "coupons": int(direct.coupons),
        "largest_ohm": float(direct.largest),
        "root_mean_square_ohm": float(direct.root_mean_square),
        "verdicts_that_differ": int(direct.verdicts_that_differ),
        "yield_solved": float(direct.share_inside_solved),
        "yield_predicted": float(direct.share_inside_predicted),
    }


def _nominal_line(line: NominalLine) -> dict[str, object]:
    values: dict[str, object] = {
        "name": line.name, "kind": line.kind, "layer": line.layer, "references": list(line.references),
        "impedance_ohm": float(line.impedance),
        "target_ohm": float(line.target),
        "effective_dk": float(line.effective_dk),
        "delay_ps_per_mm": float(line.delay) * PICOSECONDS_PER_MILLIMETRE,
        "common_mode_ohm": None if line.common_mode is None else float(line.common_mode),
        "even_effective_dk": None if line.even_effective_dk is None else float(line.even_effective_dk),
    }
    if line.losses is not None:
        values |= _losses(line.losses)
    if line.coupling is not None:
        values["coupling"] = {"inductive": float(line.coupling.inductive),
                              "capacitive": float(line.coupling.capacitive),
                              "backward_crosstalk": float(line.coupling.backward)}
    if line.shares is not None:
        values |= _shares(line.shares)
    if line.rise is not None:
        values["reading_rise"] = _rise(line.rise)
    if line.formulas is not None:
        values["formulas"] = [_opinion(opinion, line.impedance) for opinion in line.formulas.opinions]
        values["formulas_none_because"] = line.formulas.why_none or None
    return values


def _losses(losses: LossFigures) -> dict[str, object]:
    return {
        "frequency_hz": float(losses.frequency),
        "impedance_real_ohm": float(losses.complex_impedance.real),
        "impedance_imaginary_ohm": float(losses.complex_impedance.imag),
        "resistance_ohm_per_m": float(losses.resistance), "inductance_h_per_m": float(losses.inductance),
        "conductance_s_per_m": float(losses.conductance), "capacitance_f_per_m": float(losses.capacitance),
        "conductor_loss_db_per_m": float(losses.conductor_loss),
        "dielectric_loss_db_per_m": float(losses.dielectric_loss),
    }


def _shares(shares: ShareFigures) -> dict[str, object]:
    return {
        "charge_shares": {face: float(charge) for face, charge, _ in shares.faces},
        "current_shares": {face: float(current) for face, _, current in shares.faces},
        "fringe_share": None if shares.fringe is None else float(shares.fringe),
    }


def _rise(rise: ReadingRise) -> dict[str, object]:
    return {"position_mm": 1e3 * float(rise.position),
            "direct_current_resistance_ohm_per_m": float(rise.resistance), "rise_ohm": float(rise.rise)}


def _opinion(opinion: FormulaOpinion, solved: float) -> dict[str, object]:
    said = opinion.impedance
    return {
        "formula": opinion.formula, "source": opinion.source,
        "impedance_ohm": None if said is None else float(said),
        "difference_percent": None if said is None else 100.0 * (float(said) / float(solved) - 1.0),
        "claimed_percent": None if opinion.claimed is None else 100.0 * opinion.claimed,
        "remark": opinion.remark,
    }
