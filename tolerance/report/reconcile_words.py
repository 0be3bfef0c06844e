"""What is said of measured coupons, in sentences and as JSON."""

from __future__ import annotations

from typing import TYPE_CHECKING

from tolerance.report.talk_json import interval, text
from tolerance.report.wording import METRES_IN, LengthUnit, percent, trimmed, variable_words

if TYPE_CHECKING:
    from tolerance.reconciled import LotFit, MovedProperty, PossibleCause, Reconciled

LENGTH_MEASURES = ("length", "copper length")
MOST_NAMED = 4  # causes or pairs in one sentence


def verdict_sentence(result: Reconciled, lengths: LengthUnit) -> str:
    """What can be said of the cause."""
    if result.verdict == "none":
        return "No shift of the process is needed to explain the readings."
    if result.verdict == "mixture":
        return ("No single shift explains the readings: several things have moved, or something that the scenario does "
                "not vary. The table shows the most plausible shifts together.")
    named = [f"{variable_words(cause.variable)} ({moved_words(cause.members[0], lengths)})"
             for cause in result.causes]
    if result.verdict == "one":
        nearest = next((other for other in result.others if other.explains), None)
        beside = "; nothing else alone explains them" if nearest is None else \
            f"; next is {variable_words(nearest.variable)}, {odds_words(nearest.odds)} less plausible"
        return f"Most plausible cause: {named[0]}{beside}."
    more = f" and {len(named) - MOST_NAMED} more" if len(named) > MOST_NAMED else ""
    return (f"Cannot be told apart by these readings: {'; '.join(named[:MOST_NAMED])}{more}. Each alone explains them; "
            "a microsection (--sections) of one of them would decide.")


def odds_words(odds: float) -> str:
    """ "25 times"; large odds are only said to be so."""
    return "more than 1000 times" if odds > 1000.0 else f"{odds:.2g} times"


def moved_words(moved: MovedProperty, lengths: LengthUnit) -> str:
    """ "+6.1 um [5.2, 7.0]"."""
    if moved.measure in LENGTH_MEASURES:
        unit, digits, scale = f" {lengths}", 1 if lengths == "um" else 2, METRES_IN[lengths]
    elif moved.measure == "share":
        unit, digits, scale = " %", 2, 0.01
    else:
        unit, digits, scale = "", 3, 1.0
    value, low, high = (trimmed(each / scale, digits) for each in (moved.value, moved.low, moved.high))
    return f"{'+' if moved.value > 0.0 and value != '0' else ''}{value}{unit} [{low}, {high}]"


def fit_sentence(lot: LotFit) -> str:
    """Whether a lot fits."""
    chance = "less than 0.1 %" if lot.chance < 0.001 else percent(lot.chance, 1)
    words = "fits the prediction" if lot.fits else "DOES NOT FIT the prediction"
    name = f"{lot.lot[:1].upper()}{lot.lot[1:]}"
    return f"{name} {words}: a lot of this process would be as far off or farther in {chance} of all cases."


def tied_sentence(result: Reconciled) -> str:
    """Shifts of which only a combination is known; "" where there are none."""
    if not result.tied:
        return ""
    pairs = [f"{variable_words(one)} with {variable_words(other)}" for one, other, _ in result.tied[:MOST_NAMED]]
    return f"Known only in combination, one can stand for the other: {'; '.join(pairs)}."


def reconciled_json(result: Reconciled) -> str:
    """The result of `tolerance reconcile` as one JSON object; values of properties in SI."""
    return text({
        "title": result.title, "seed": int(result.seed), "readings": int(result.readings),
        "repeatability_ohm": float(result.repeatability),
        "lots": [_lot(lot) for lot in result.lots], "all_readings": _lot(result.everything),
        "verdict": result.verdict, "causes": [_cause(cause) for cause in result.causes],
        "other_causes": [_cause(cause) for cause in result.others],
        "shifts": [{"variable": shift.variable, "deviations": float(shift.germ.value),
                    "deviations_low": float(shift.germ.low), "deviations_high": float(shift.germ.high),
                    "learned": float(shift.learned), "members": [_moved(member) for member in shift.members]}
                   for shift in result.shifts],
        "known_in_combination": [{"between": [one, other], "correlation": float(size)}
                                 for one, other, size in result.tied],
        "scatter": float(result.scatter),
        "yields": [{"name": each.name, "given": interval(each.given), "alike": interval(each.alike),
                    "shifted": interval(each.shifted)} for each in result.yields],
    })


def _lot(lot: LotFit) -> dict[str, object]:
    return {"name": lot.lot, "fits": bool(lot.fits), "chance": float(lot.chance), "misfit": float(lot.misfit),
            "lines": [{"name": line.line, "readings": int(line.readings), "mean_ohm": float(line.mean),
                       "off_ohm": float(line.off.value), "off_ohm_low": float(line.off.low),
                       "off_ohm_high": float(line.off.high), "score": float(line.score)} for line in lot.lines]}


def _cause(cause: PossibleCause) -> dict[str, object]:
    return {"variable": cause.variable, "times_less_plausible": float(cause.odds), "explains": bool(cause.explains),
            "members": [_moved(member) for member in cause.members]}


def _moved(moved: MovedProperty) -> dict[str, object]:
    return {"property": moved.name, "shift": float(moved.value), "shift_low": float(moved.low),
            "shift_high": float(moved.high)}
