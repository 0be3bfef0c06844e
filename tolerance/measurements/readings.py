"""From the cells of a column to numbers: the unit in the heading or in the cell, decimal points or decimal commas."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence

from tolerance.errors import as_toml
from tolerance.measurements.tables import Cell, TableError, is_blank
from tolerance.units import MeasureName, QuantityError, read_quantity, unit_factor, unit_names

MOST_TOLD = 5  # rows named in one message
ANY_MEASURE: tuple[MeasureName, ...] = ("length", "share", "resistance", "frequency")

_NO_UNIT = "has no unit"
_LAST_WORD = re.compile(r"(?:(?P<name>.*?)[\s_/,([]+)?(?P<unit>[^\s_/,()\[\]]+)[)\]]?", re.DOTALL)
_SPELLINGS = {"µm": "um", "μm": "um", "Ω": "ohm", "Ohm": "ohm", "ohms": "ohm"}
_NUMBER = re.compile(r"[+-]?(?:[0-9]+(?:[.,][0-9]*)?|[.,][0-9]+)(?:[eE][+-]?[0-9]{1,3})?")


def unit_of(heading: str, measure: MeasureName) -> str | None:
    """The unit at the end of a heading ("P1 um", "P1 [um]", "P1_um"); None where there is none of this measure."""
    match = _LAST_WORD.fullmatch(heading.strip())
    if match is None:
        return None
    unit = _SPELLINGS.get(match["unit"], match["unit"])
    return unit if unit and unit in unit_names(measure) else None


def measure_of(heading: str) -> tuple[MeasureName, str]:
    """What a heading says its column is measured in, and the unit; a plain number where it names no unit."""
    for measure in ANY_MEASURE:
        unit = unit_of(heading, measure)
        if unit:
            return measure, unit
    return "number", ""


def numbers_of(column: Sequence[tuple[int, Cell]], *, heading: str, measure: MeasureName) -> tuple[float, ...]:
    """The readings in SI, in the order of the rows. Raises TableError with every row that holds no reading.

    A share without a unit is a fraction of 1, as in a scenario.
    """
    unit = unit_of(heading, measure)
    bare = measure in ("number", "share") or unit is not None
    factor = float(unit_factor(unit, measure)) if unit else 1.0
    values: list[float] = []
    wrong: list[str] = []
    mark = ""
    unitless: list[int] = []
    for row, cell in column:
        reason, value, used = _read(cell, factor, measure, bare=bare)
        if not reason and mark and used and used != mark:
            names = {",": "comma", ".": "point"}
            reason = f"has a decimal {names[used]}, where rows before it have a decimal {names[mark]}"
        mark = mark or used
        values.append(value)
        if reason == _NO_UNIT:
            unitless.append(row)
        elif reason:
            wrong.append(f"row {row} {reason}")
    if unitless:
        also = f", and {len(unitless) - 1} more rows" if len(unitless) > 1 else ""
        wrong.insert(0, f"the heading must end in a unit, {', '.join(unit_names(measure))}, or every reading have its "
                        f"own: row {unitless[0]} has none{also}")
    if wrong:
        more = f"; and {len(wrong) - MOST_TOLD} more rows" if len(wrong) > MOST_TOLD else ""
        raise TableError("; ".join(wrong[:MOST_TOLD]) + more)
    return tuple(values)


def _read(cell: Cell, factor: float, measure: MeasureName, *, bare: bool) -> tuple[str, float, str]:
    """(what is wrong or "", the reading, the decimal mark it uses or "")."""
    if is_blank(cell):
        return "is blank", 0.0, ""
    if isinstance(cell, str):
        text = cell.strip().replace("\N{MINUS SIGN}", "-")
        if _NUMBER.fullmatch(text) is None:
            return _with_unit(text, measure)
        mark = "," if "," in text else "." if "." in text else ""
        number = float(text.replace(",", "."))
    else:
        number, mark = float(cell or 0.0), ""
    if not bare:
        return _NO_UNIT, 0.0, mark
    value = number * factor
    return ("" if math.isfinite(value) else f"holds {as_toml(cell)}, which is not a finite number"), value, mark


def _with_unit(text: str, measure: MeasureName) -> tuple[str, float, str]:
    """A cell that says its unit itself: "98.4 um"."""
    mark = "," if "," in text else "." if "." in text else ""
    try:
        return "", read_quantity(text.replace(",", ".") if text.count(",") == 1 and "." not in text else text,
                                 measure), mark
    except QuantityError:
        return f"holds {as_toml(text)}, which is not a number", 0.0, ""
