"""What stands in one cell of a filled sheet: numbers as people type them, with decimal commas, units, and signs."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from datetime import date, datetime, time

from tolerance.errors import as_toml
from tolerance.sheet.layout import ABSOLUTE, BASES, CPK, LIMITS, PERCENT, THREE_SIGMA, is_length_unit, plain

_NUMBER = re.compile(r"(?P<sign>\+-|\+/-|[+-]?)\s*(?P<digits>[0-9]+(?:[.,][0-9]*)?|[.,][0-9]+)"
                     r"(?P<power>[eE][+-]?[0-9]{1,3})?\s*(?P<unit>[^\s0-9.,+-][^0-9]*)?")
_THOUSANDS = re.compile(r"[1-9][0-9]{0,2},[0-9]{3}")
_UNITS = {"µm": "um", "μm": "um", "micron": "um", "microns": "um", "in": "inch", '"': "inch", "mils": "mil",
          "percent": PERCENT, "abs": ABSOLUTE}
_BASES = {
    **dict.fromkeys(("limits", "limit", "hard limits", "min/max", "min max", "range"), LIMITS),
    **dict.fromkeys(("3 sigma", "3sigma", "3 σ", "3σ", "3s", "3 s", "three sigma", "sigma 3"), THREE_SIGMA),
    **dict.fromkeys(("cpk", "cp k", "capability"), CPK),
}
_LONGEST = 200


class CellError(Exception):
    """A cell that cannot be read; the text says why, as it follows the address."""


@dataclass(frozen=True, slots=True)
class SeenCell:
    """A cell as a workbook stores it. formula: whether it holds one; then `value` is what was last computed."""

    address: str
    value: object
    number_format: str = "General"
    formula: bool = False

    @property
    def blank(self) -> bool:
        empty = self.value is None or (isinstance(self.value, str) and not self.value.strip())
        return empty and not self.formula


@dataclass(frozen=True, slots=True)
class Typed:
    """A number as typed, with its unit; `unit` "" where neither the cell nor the row says one."""

    number: float
    unit: str

    @property
    def text(self) -> str:
        """As a scenario writes it: "8 um" in quotes, or a plain number."""
        digits = f"{self.number:.15g}"
        return digits if self.unit in ("", ABSOLUTE) else f'"{digits} {self.unit}"'


def typed_of(cell: SeenCell) -> Typed:
    """The number and unit in a cell. Raises CellError where there is no number, or one that reads in two ways."""
    value = cell.value
    if value is None:
        raise CellError("holds a formula without a stored value: type the number itself")
    if isinstance(value, (bool, date, datetime, time)):
        what = "a truth value" if isinstance(value, bool) else "a date (a spreadsheet program may have made it one)"
        raise CellError(f"holds {what}; a number is wanted")
    if isinstance(value, (int, float)):
        if not math.isfinite(value):
            raise CellError("does not hold a finite number")
        percent = "%" in cell.number_format
        return Typed(float(f"{100.0 * value:.12g}"), PERCENT) if percent else Typed(float(value), "")
    return _from_text(str(value))


def _from_text(text: str) -> Typed:
    shown = as_toml(text.strip())
    tidy = text.strip().replace("\N{MINUS SIGN}", "-").replace("\N{PLUS-MINUS SIGN}", "+-").replace("\u00a0", " ")
    match = _NUMBER.fullmatch(tidy) if len(tidy) <= _LONGEST else None
    if match is None:
        raise CellError(f"holds {shown}, which is not a number")
    digits = match["digits"]
    if _THOUSANDS.fullmatch(digits):
        raise CellError(f"holds {shown}: is that {digits.replace(',', '.')} or {digits.replace(',', '')}?")
    sign = -1.0 if match["sign"] == "-" else 1.0
    number = sign * float(digits.replace(",", ".") + (match["power"] or ""))
    if not math.isfinite(number):
        raise CellError(f"holds {shown}, which is not a finite number")
    return Typed(number, unit_named(match["unit"] or ""))


def unit_named(text: str) -> str:
    """The unit meant by a text, as a scenario spells it; the text itself where it is none of ours."""
    tidy = text.strip()
    unit = _UNITS.get(tidy.casefold(), tidy)
    for known in (PERCENT, ABSOLUTE):
        unit = known if unit.casefold().startswith(known) else unit
    return unit.casefold() if is_length_unit(unit.casefold()) else unit


def basis_named(text: str) -> tuple[str, Typed | None]:
    """Which basis a text names, and the capability where it says one ("Cpk 1.33"). Raises CellError."""
    tidy = text.strip().casefold()
    if tidy in _BASES:
        return _BASES[tidy], None
    match = re.fullmatch(r"c_?pk\s*(?:=|>=|of|≥)?\s*([0-9.,]+)", tidy)
    if match:
        return CPK, _from_text(match[1])
    if plain(text) in (plain(basis) for basis in BASES):
        return next(basis for basis in BASES if plain(basis) == plain(text)), None
    raise CellError(f"holds {as_toml(text)}; it is to be one of: {', '.join(BASES)}")
