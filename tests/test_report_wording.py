"""How numbers and names are worded."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as some

from tolerance.report.files import file_names
from tolerance.report.wording import (
    doubt_text,
    fixed,
    headline_text,
    length_text,
    share_with_range,
    shorten,
    trimmed,
    two_rows,
    variable_words,
)
from tolerance.results import Interval


@pytest.mark.parametrize(("interval", "expected"), [
    (Interval(0.98432, 0.98384, 0.98480), "98.43 % [98.38, 98.48]"),
    (Interval(0.93, 0.928, 0.932), "93.0 % [92.8, 93.2]"),
    (Interval(0.97, 0.9681, 0.9719), "97.00 % [96.81, 97.19]"),
    (Interval(0.5, 0.46, 0.54), "50 % [46, 54]"),
    (Interval(1.0, 0.99994, 1.0), "100.000 % [99.994, 100.000]"),
    (Interval(0.0, 0.0, 0.0000008), "0.000 % [0.000, 0.000]"),  # no wider than a table takes
    (Interval(65535 / 65536, 0.99996, 1.0), "99.998 % [99.996, 100.000]"),  # one coupon of 65,536 fails: not "100 %"
])
def test_a_share_shows_the_digits_that_its_interval_allows(interval: Interval, expected: str) -> None:
    assert share_with_range(interval) == expected


@pytest.mark.parametrize(("interval", "expected"), [
    (Interval(0.98432, 0.98384, 0.98480), "[98.38, 98.48]"),
    (Interval(0.99998, 0.99991, 1.0), "[99.991, 100.000]"),
    (Interval(1.0 - 26.33e-6, 1.0 - 26.42e-6, 1.0 - 26.24e-6), "26.3 ppm fail"),
    (Interval(1.0 - 1.827e-8, 1.0 - 1.873e-8, 1.0 - 1.781e-8), "0.0183 ppm fail"),
    (Interval(1.0, 1.0 - 1e-7, 1.0), "under 0.1 ppm fail"),
    (Interval(0.0, 0.0, 1e-7), "[0.000, 0.000]"),
])
def test_an_interval_too_narrow_to_read_is_told_by_what_fails(interval: Interval, expected: str) -> None:
    assert doubt_text(interval) == expected


@pytest.mark.parametrize(("interval", "target", "expected"), [
    (Interval(0.98432, 0.98384, 0.98480), None, "98.43 %"),
    (Interval(1.0, 0.99994, 1.0), None, "above 99.99 %"),
    (Interval(0.99998, 0.99991, 1.0), None, "above 99.99 %"),
    (Interval(0.99998, 0.99991, 0.999999), None, "99.998 %"),
    (Interval(0.99999998, 0.99999997, 0.99999999), None, "above 99.99 %"),  # never "100.000 %"
    (Interval(1.0, 0.9857, 1.0), None, "above 98 %"),
    (Interval(0.98828, 0.97, 1.0), 0.99, "98.8 %"),  # not "99 %", which would miss a target of 99 %
    (Interval(0.5, 0.0, 1.0), None, "50 %"),
])
def test_a_headline_claims_no_more_than_its_interval(interval: Interval, target: float | None, expected: str) -> None:
    assert headline_text(interval, target=target) == expected


@pytest.mark.parametrize(("name", "words"), [
    ("top mask.thickness + top mask.over_copper", "top mask.thickness + over_copper"),
    ("C1.dk + C2.dk", "C1.dk + C2.dk"), ("P1.thickness", "P1.thickness"),
    ("core 0.1 mm.dk + core 0.1 mm.thickness + L2.foil", "core 0.1 mm.dk + thickness + L2.foil"),
])
def test_a_driver_names_a_layer_once_where_its_members_share_it(name: str, words: str) -> None:
    assert variable_words(name) == words


def test_numbers_without_a_value_and_negative_zeros_are_not_shown_as_such() -> None:
    assert fixed(float("nan"), 2) == "-"
    assert fixed(float("inf"), 2) == "-"
    assert fixed(None, 2) == "-"
    assert fixed(-0.0004, 2) == "0.00"
    assert trimmed(50.0, 2) == "50"
    assert trimmed(100.0, 0) == "100"


def test_lengths_in_the_unit_of_the_report() -> None:
    assert length_text(180e-6, "um") == "180 um"
    assert length_text(4.3 * 25.4e-6, "mil") == "4.3 mil"  # 1 mil is 25.4 um exactly


@given(some.text(), some.integers(8, 80))
def test_shortened_text_keeps_its_ends_and_its_width(text: str, width: int) -> None:
    short = shorten(text, width)
    words = " ".join(text.split())
    assert len(short) <= width
    assert short == words or "..." in short
    rows = two_rows(text, width).splitlines()
    assert len(rows) <= 2 or "\n" not in two_rows(text, width)
    assert all(len(row) <= width for row in two_rows(text, width).split("\n"))


def test_a_name_cut_to_two_rows_keeps_what_tells_it_apart() -> None:
    rows = two_rows("differential camera link from the front connector, channel 12", 15).split("\n")
    assert rows[0] == "differential"
    assert rows[1].endswith("channel 12")


@given(some.lists(some.text(max_size=90), max_size=12))
def test_file_names_are_safe_and_unique_whatever_the_lines_are_called(names: list[str]) -> None:
    made = file_names(names, taken=("all-lines",))
    assert len({name.casefold() for name in [*made, "all-lines"]}) == len(names) + 1
    for name in made:
        assert name
        assert all(sign.isalnum() or sign == "-" for sign in name)
        assert name.casefold() not in ("con", "nul", "aux", "prn", "com1")
        assert len(name) < 80


def test_file_names_stay_readable() -> None:
    assert file_names(["radio feed", "Radio/feed", "con", "**", "clock (2.4 GHz)"], taken=()) == [
        "radio-feed", "Radio-feed-2", "con-line", "line-4", "clock-2-4-GHz"]
