"""Lots and the impedance test in the JSON of a run: the contract's keys with levels, and [test] as `test`."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from tolerance.results import GuardBand, Interval, LineResult, LotAcceptance, NestedYield, ReadingRisks, RunResult


def run_keys(result: RunResult) -> dict[str, object]:
    """What stands beside the other keys of a run; nothing without levels and [test]."""
    keys: dict[str, object] = {}
    if result.lots is not None and result.nested is not None:
        keys |= {
            "lots": int(result.lots.lots), "panels_per_lot": int(result.lots.panels_per_lot),
            "coupons_per_panel": int(result.lots.coupons_per_panel), **_nested(result.nested),
        }
    test = _reading(result.reading)
    if result.acceptance is not None:
        test["lot_acceptance"] = _acceptance(result.acceptance)
    return keys | ({"test": test} if test else {})


def line_keys(line: LineResult) -> dict[str, object]:
    """What stands beside the other keys of a line; nothing without levels and [test]."""
    keys: dict[str, object] = {}
    if line.nested is not None and line.variance is not None:
        variance = line.variance
        keys |= {
            **_nested(line.nested),
            "variance_shares": {name: float(getattr(variance, name).value) for name in ("lot", "panel", "coupon")},
            "variance_share_intervals": {
                name: _interval(getattr(variance, name)) for name in ("lot", "panel", "coupon")},
            "level_drivers": [
                {"variable": driver.variable, **{
                    name: _interval(getattr(driver, name)) for name in ("lot", "panel", "coupon")}}
                for driver in variance.drivers],
        }
    return keys | ({"test": _reading(line.reading)} if line.reading is not None else {})


def _interval(interval: Interval) -> dict[str, float]:
    return {"value": float(interval.value), "low": float(interval.low), "high": float(interval.high)}


def _nested(nested: NestedYield) -> dict[str, object]:
    return {
        "panel_yield": _interval(nested.panel), "lot_yield": _interval(nested.lot),
        "lot_quantiles": [{"share_of_lots": float(share), "yield_at_most": float(value)}
                          for share, value in nested.quantiles],
    }


def _reading(risks: ReadingRisks | None) -> dict[str, object]:
    if risks is None:
        return {}
    reading = risks.reading
    return {
        "repeatability_ohm": float(reading.repeatability), "bias_ohm": float(reading.bias),
        "guard_band_ohm": float(reading.guard_band),
        "yield_as_read": _interval(risks.as_read), "accepted": _interval(risks.accepted),
        "false_accepts": _interval(risks.false_accepts), "false_rejects": _interval(risks.false_rejects),
        "guard_bands": [_guard_band(each) for each in risks.guard_bands],
    }


def _guard_band(each: GuardBand) -> dict[str, float]:
    return {
        "false_accepts_wanted": float(each.wanted), "guard_band_ohm": float(each.band.value),
        "guard_band_ohm_low": float(each.band.low), "guard_band_ohm_high": float(each.band.high),
        "false_accepts": float(each.false_accepts), "false_rejects": float(each.false_rejects),
    }


def _acceptance(acceptance: LotAcceptance) -> dict[str, object]:
    return {
        "sample_size": int(acceptance.plan.sample_size), "accept_number": int(acceptance.plan.accept_number),
        "panels_per_lot": int(acceptance.size.panels), "coupons_per_panel": int(acceptance.size.coupons_per_panel),
        "lots": int(acceptance.lots), "accepted": _interval(acceptance.accepted),
        "accepted_if_independent": float(acceptance.if_independent),
        "yield_of_accepted": None if acceptance.quality is None else _interval(acceptance.quality),
        "operating_characteristic": [
            {"failing_above": float(point.above), "failing_up_to": float(point.up_to),
             "share_of_lots": float(point.share_of_lots), "failing": float(point.failing),
             "accepted": _interval(point.accepted), "accepted_by_true_readings": float(point.as_known)}
            for point in acceptance.curve],
    }
