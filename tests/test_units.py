"""Quantities with units against the definitions of those units."""

from __future__ import annotations

import pytest

from tolerance.units import MeasureName, QuantityError, read_quantity, unit_names, write_quantity


@pytest.mark.parametrize(("text", "measure", "expected", "source"), [
    ("1 mil", "length", 25.4e-6, "a thousandth of an inch, exact"),
    ("1 inch", "length", 0.0254, "inch of 25.4 mm, exact, agreement of 1959"),
    ("4.3 mil", "length", 109.22e-6, "4.3 x 25.4, exact"),
    ("110 um", "length", 110e-6, "SI prefix, exact"),
    ("1.6 mm", "length", 1.6e-3, "SI prefix, exact"),
    ("1 oz", "copper length", 34.3e-6, "IPC-4562, copper of one ounce per square foot"),
    ("0.5 oz", "copper length", 17.15e-6, "half of IPC-4562's 34.3 um"),
    ("50 ohm", "resistance", 50.0, "SI"),
    ("1 GHz", "frequency", 1e9, "SI prefix, exact"),
    ("250 MHz", "frequency", 250e6, "SI prefix, exact"),
    ("3 kHz", "frequency", 3e3, "SI prefix, exact"),
    ("7 Hz", "frequency", 7.0, "SI"),
    ("10 %", "share", 0.1, "a hundredth, exact"),
    ("58 MS/m", "conductivity", 58e6, "SI prefix, exact; annealed copper, IEC 60028"),
    ("46.8 g/m^2", "areal weight", 0.0468, "SI prefix, exact"),
])
def test_value_of_a_quantity(text: str, measure: MeasureName, expected: float, source: str) -> None:
    assert read_quantity(text, measure) == expected, source  # the nearest float, to the last bit


@pytest.mark.parametrize("text", ["110um", " 110 um ", "110 µm", "110 μm", "+110um", "1.1e2 um", "110. um", "0.11 mm"])
def test_spellings_of_the_same_length(text: str) -> None:
    assert read_quantity(text, "length") == 110e-6


@pytest.mark.parametrize(("text", "reason"), [
    ("110", "the unit is missing: um, mm, mil or inch"),
    ("4 parsec", "the unit must be um, mm, mil or inch"),
    ("4 UM", "the unit must be um, mm, mil or inch"),
    ("1 oz", "the unit must be um, mm, mil or inch"),
    ("1 ohm", "the unit must be um, mm, mil or inch"),
    ("1e999 um", "the number is too large"),
])
def test_what_is_not_a_length_is_told(text: str, reason: str) -> None:
    with pytest.raises(QuantityError) as told:
        read_quantity(text, "length")
    assert str(told.value) == reason


@pytest.mark.parametrize("text", [
    "", "um", "nan um", "inf um", "4,3 um", "4 - 3 um", "1e9999999999 um", "٣ um", "0x10 um", "1 um mm",
    "9" * 70 + "um",
])
def test_what_is_no_quantity_is_refused(text: str) -> None:
    with pytest.raises(QuantityError):
        read_quantity(text, "length")


def test_ounces_are_for_copper_alone() -> None:
    assert "oz" in unit_names("copper length")
    assert "oz" not in unit_names("length")


def test_written_as_a_scenario_writes_it() -> None:
    assert write_quantity(110e-6, "length") == "110 um"
    assert write_quantity(25.4e-6, "length", "mil") == "1 mil"
    assert write_quantity(0.1, "share") == "10 %"
    assert write_quantity(4.2, "number") == "4.2"
