"""What a scenario may not say, and how it is told: one message for each mistake, all of them in one go."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.scenario_texts import BOARD, HEAD, LINES, SIX_LAYERS, VARIATIONS, changed, messages
from tolerance.errors import ScenarioError
from tolerance.scenario import parse


def test_the_board_itself_is_fine() -> None:
    assert messages(BOARD) == []


def test_five_different_mistakes_are_five_messages_in_the_order_of_the_file() -> None:
    text = changed(
        BOARD, ('over_copper = "15 um"', 'over_coper = "15 um"'), ('foil = "18 um"', "foil = 18"),
        ('layer = "L3"', 'layer = "L7"'), ('gap = "150 um"', 'gap = "-4 mil"'), ('of = "P1.thickness"', 'of = "P1.dk"'),
    )
    assert messages(text) == [
        'orchard.toml: [[layers]] "top mask": over_coper = "15 um": unknown key; did you mean "over_copper"?',
        'orchard.toml: [[layers]] "L1": foil = 18: must be a length above 0 um and up to 500 um, '
        'a text with its unit, such as "18 um"',
        'orchard.toml: [[lines]] "clock pair": layer = "L7": must be the name of a layer; known are L1 and L3',
        'orchard.toml: [[lines]] "clock pair": gap = "-4 mil": must be a length above 0 um and up to 5000 um',
        'orchard.toml: [[variations]] "P*.dk": of = "P*.dk": must not name what another variation names: "P1.dk" '
        '(also in "P1.dk")',
    ]


def test_the_error_ends_with_status_two() -> None:
    with pytest.raises(ScenarioError) as told:
        parse(changed(BOARD, ("dk = 3.5", "dk = 0.5")))
    assert told.value.exit_status == 2
    assert len(told.value.problems) == 1


# (part of the message, (old, new)...): each a board with one mistake, which must bring one message and no other
ONE_MISTAKE = [
    # the file as a whole
    ("format: missing; must be 1", ("format = 1\n", "")),
    ("format = 2: must be 1", ("format = 1", "format = 2")),
    ("format = true: must be 1", ("format = 1", "format = true")),
    ("format = 1.0: must be 1", ("format = 1", "format = 1.0")),
    ("title: missing", ('title = "Orchard gateway"\n', "")),
    ("title = 7: must be a title", ('"Orchard gateway"', "7")),
    ("evaluaton: unknown table; did you mean \"evaluation\"?", ("[evaluation]", "[evaluaton]")),
    ("weather: unknown table", ("[evaluation]", "[weather]\n[evaluation]")),
    ("colour = 1: unknown key", ("format = 1", "format = 1\ncolour = 1")),
    ("report: must be a table headed [report]", ("[evaluation]", "[[report]]\n[evaluation]")),
    ("offers: must be a list of tables, each headed [[offers]]", ("[evaluation]", "[offers]\n[evaluation]")),
    # units, types, ranges
    ('limit = 10: must be a percentage above 0 % and below 100 %, a text with its unit, such as "10 %"',
     ('"10 %"', "10")),
    ('limit = "10": must be a percentage above 0 % and below 100 % (the unit is missing: %)', ('"10 %"', '"10"')),
    ('limit = "100 %"', ('"10 %"', '"100 %"')),
    ('thickness = "100 parsec": must be a length above 0 um and up to 5000 um (the unit must be um, mm, mil or inch)',
     ('"100 um"', '"100 parsec"')),
    ('thickness = "3 oz"', ('"100 um"', '"3 oz"')),
    ("thickness = true", ('"100 um"', "true")),
    ("thickness = []", ('"100 um"', "[]")),
    ("thickness = 1979-05-27", ('"100 um"', "1979-05-27")),
    ("dk = true: must be a number from 1 up to 100", ("dk = 4.0", "dk = true")),
    ("dk = nan", ("dk = 4.0", "dk = nan")),
    ("dk = inf", ("dk = 4.0", "dk = inf")),
    ('dk = "4.0"', ("dk = 4.0", 'dk = "4.0"')),
    ("etch_factor = -inf", ("etch_factor = 3.0", "etch_factor = -inf")),
    ("etch_factor = nan", ("etch_factor = 3.0", "etch_factor = nan")),
    ("etch_factor = 0: must be a number above 0 and up to 1000, or inf", ("etch_factor = 3.0", "etch_factor = 0")),
    ("seed = -1: must be a whole number from 0 up", ("seed = 1", "seed = -1")),
    ("seed = 1.0", ("seed = 1", "seed = 1.0")),
    ("seed = true", ("seed = 1", "seed = true")),
    ("coupons = 1000: must be a power of two from 256 to 16777216, such as 512 or 1024",
     ("seed = 1", "coupons = 1000")),
    ("coupons = 128", ("seed = 1", "coupons = 128")),
    ("coupons = 33554432", ("seed = 1", "coupons = 33554432")),
    ("target_yield = \"0 %\"", ("seed = 1", 'target_yield = "0 %"')),
    ('kind = "foil": must be "mask", "copper", "prepreg" or "core"', ('kind = "core"', 'kind = "foil"')),
    ('use = "ground": must be "signal" or "plane"', ('use = "plane"', 'use = "ground"')),
    ('lengths = "cm": must be "um" or "mil"', ("[evaluation]", '[report]\nlengths = "cm"\n[evaluation]')),
    # layers
    ('[[layers]] "P1": thickness: missing; must be a length', ('thickness = "100 um"\n', "")),
    ('[[layers]] "L1": foil: missing', ('foil = "18 um"\n', "")),
    ('[[layers]] "L1": use: missing; must be "signal" or "plane"', ('use = "signal"\n', "")),
    ('[[layers]] number 3: name: missing; must be a name', ('name = "P1"\n', "")),
    ("dk = 4: not a key of copper, which has use, foil,", ('foil = "18 um"', 'foil = "18 um"\ndk = 4')),
    ('name = "top mask": stands twice', ("[[lines]]", SIX_LAYERS[:SIX_LAYERS.index('[[layers]]\nname = "L1"')]
                                         + "[[lines]]")),
    ('[[layers]] "top mask": kind = "mask": only outermost',
     ("[[layers]]", '[[layers]]\nname = "cover"\nkind = "core"\nthickness = "50 um"\ndk = 3\n[[layers]]')),
    ('[[layers]] "L2": kind = "copper": must not lie on copper: put a prepreg or core between it and "extra"',
     ('[[layers]]\nname = "L2"', '[[layers]]\nname = "extra"\nkind = "copper"\nuse = "plane"\nfoil = "1 oz"\n'
                                 '[[layers]]\nname = "L2"')),
    ('foot = "up": must be "down", or left out', ('foil = "18 um"', 'foil = "18 um"\nfoot = "up"')),
    ('[[layers]] "L3": foot: missing; must be "up" or "down", because the copper lies between two prepregs',
     ('kind = "core"', 'kind = "prepreg"')),
    ('[[layers]] "L3": foot: missing; must be "up" or "down", because the copper lies between two cores',
     ('name = "P2"\nkind = "prepreg"', 'name = "P2"\nkind = "core"')),
    # lines
    ('[[lines]] number 2: name = 7', ('name = "clock pair"', "name = 7")),
    ('name = "radio feed": stands twice', ('"clock pair"', '"radio feed"')),
    ('[[lines]] "radio feed": width: missing', ('width = "180 um"\n', "")),
    ('[[lines]] "radio feed": limit: missing here and in [evaluation]',
     ('limit = "10 %"\n', ""), ('gap = "150 um"', 'gap = "150 um"\nlimit = "10 %"')),
    ('layer = "P1": must be a copper layer; this one is prepreg', ('layer = "L3"', 'layer = "P1"')),
    ('layer = "L2": must be a layer with use = "signal"; this one is a plane', ('layer = "L3"', 'layer = "L2"')),
    ('width = "20 um": must be above 28.6667 um, which an etch factor of 3 takes off the crest of 43 um copper',
     ('width = "180 um"', 'width = "20 um"')),
    ('width = "19 mm": must be up to 6000 um, 200 times what "P1" is thick',
     ('width = "180 um"', 'width = "19 mm"'), ('"100 um"', '"30 um"')),
    ('width = "19 mm": must be up to 4000 um, 2000 times what "top mask" is thick over copper',
     ('width = "180 um"', 'width = "19 mm"'), ('over_copper = "15 um"', 'over_copper = "2 um"')),
    ('mode = "common": only for pairs', ('width = "180 um"', 'width = "180 um"\nmode = "common"')),
    ('offset = "5 um": only together with partner', ('width = "180 um"', 'width = "180 um"\noffset = "5 um"')),
    ('references = ["L1"]: must name planes; "L1" is not copper with use = "plane"',
     ('width = "180 um"', 'width = "180 um"\nreferences = ["L1"]')),
    ('references = ["L9"]: no layer is called "L9"', ('width = "180 um"', 'width = "180 um"\nreferences = ["L9"]')),
    ("references = []: must be a list", ('width = "180 um"', 'width = "180 um"\nreferences = []')),
    ('references = ["L2", "L4"]: must name at most one plane on each side; below the line are 2',
     ('width = "180 um"', 'width = "180 um"\nreferences = ["L2", "L4"]')),
    # variations
    ('[[variations]] "P9.thickness": of = "P9.thickness": no layer is called "P9"; known are top mask, L1, P1,',
     ("P1.thickness", "P9.thickness")),
    ('of = "P1.tickness": prepreg varies in thickness, dk, df and resin_content; did you mean "thickness"?',
     ("P1.thickness", "P1.tickness")),
    ('of = "L2.plating": "L2" gives no plating that could vary', ('"P1.thickness"', '"L2.plating"')),
    ('of = "L2.etch_factor": "L2" gives no etch_factor', ('"P1.thickness"', '"L2.etch_factor"')),
    ('of = "X*.dk": must match at least one property that varies', ('"P*.dk"', '"X*.dk"')),
    ('of = "thickness": must be LAYER.PROPERTY', ('"P1.thickness"', '"thickness"')),
    ("of = 3: must be a LAYER.PROPERTY name or pattern", ('"P1.thickness"', "3")),
    ('"L2.ech": copper varies in', ('"L3.etch"]', '"L2.ech"]')),
    ('of = "P1.dk": must not name what another variation names: "P1.dk" (also in "P*.dk")',
     ("together = true", 'together = true\n[[variations]]\nof = "P1.dk"\ntolerance = "1 %"')),
    ("tolerance: missing; must be a half-width", ("tolerance = 0.1\n", "")),
    ("tolerance = -0.1: must be a half-width above 0", ("tolerance = 0.1", "tolerance = -0.1")),
    ("tolerance = 0: must be a half-width above 0", ("tolerance = 0.1", "tolerance = 0")),
    ("tolerance = nan: must be a half-width above 0", ("tolerance = 0.1", "tolerance = nan")),
    ("tolerance = inf: must be a half-width above 0", ("tolerance = 0.1", "tolerance = inf")),
    ("shift = nan: must be a shift of the mean", ("tolerance = 0.1", "tolerance = 0.1\nshift = nan")),
    ('tolerance = "5 um": P1.dk: must be a half-width above 0: a percentage of the nominal or a number',
     ("tolerance = 0.1", 'tolerance = "5 um"')),
    ('tolerance = 5: P1.thickness: must be a half-width above 0: a percentage of the nominal or a length in um',
     ('thickness"\ntolerance = "10 %"', 'thickness"\ntolerance = 5')),
    ('tolerance = "1 oz": P1.thickness', ('thickness"\ntolerance = "10 %"', 'thickness"\ntolerance = "1 oz"')),
    ('tolerance = "5 %": L1.registration: must not be a percentage, because the nominal is 0',
     ('"P1.thickness"\ntolerance = "10 %"', '"L1.registration"\ntolerance = "5 %"')),
    ("tolerance = 5.0: P1.dk: must leave the lower end above 0; it is -1", ("tolerance = 0.1", "tolerance = 5.0")),
    ("sigmas = 3: only with shape = \"normal\", \"truncated_normal\" or \"lognormal\"",
     ("tolerance = 0.1", 'tolerance = 0.1\nshape = "uniform"\nsigmas = 3')),
    ('cpk = 1.33: only with shape = "normal"',
     ("tolerance = 0.1", 'tolerance = 0.1\nshape = "triangular"\ncpk = 1.33')),
    ('cpk = 1.33: only with shape = "normal"',
     ("tolerance = 0.1", 'tolerance = 0.1\nshape = "lognormal"\ncpk = 1.33')),
    ("cpk = 1.33: not together with sigmas", ("tolerance = 0.1", "tolerance = 0.1\nsigmas = 3\ncpk = 1.33")),
    ("cpk = 1.33: P1.dk: needs a half-width above the shift; they are 0.1 and 0.1",
     ("tolerance = 0.1", "tolerance = 0.1\nshift = -0.1\ncpk = 1.33")),
    ("low = 3: only with shape = \"truncated_normal\", \"uniform\" or \"triangular\"",
     ("tolerance = 0.1", "low = 3\ntolerance = 0.1")),
    ("tolerance = 0.1: not together with low and high",
     ("tolerance = 0.1", 'shape = "uniform"\nlow = 3.5\nhigh = 4.5\ntolerance = 0.1')),
    ("high: missing; low and high stand together", ("tolerance = 0.1", 'shape = "uniform"\nlow = 3.5')),
    ("high = 3.5: must be above low", ("tolerance = 0.1", 'shape = "uniform"\nlow = 3.5\nhigh = 3.5')),
    ('low = "3.5 um": P1.dk: must be a value of the property: a number',
     ("tolerance = 0.1", 'shape = "uniform"\nlow = "3.5 um"\nhigh = 4.5')),
    ("shift = 0.1: not together with the low and high of a uniform",
     ("tolerance = 0.1", 'shape = "uniform"\nlow = 3.5\nhigh = 4.5\nshift = 0.1')),
    ("low = 3.95: P2.dk: low and high must have the peak",
     ("tolerance = 0.1", 'shape = "triangular"\nlow = 3.95\nhigh = 4.5')),
    ("low = 6: P1.dk: low and high must lie within 8 deviations",
     ("tolerance = 0.1", 'shape = "truncated_normal"\nlow = 6\nhigh = 6.6')),
    ('shape = "lognormal": L1.etch: not "lognormal", because the nominal is 0',
     ('"L3.etch"]', '"L3.etch"]\nshape = "lognormal"')),
    ("shift = -4.5: P1.dk: must leave the median, nominal + shift, above 0; it is -0.5",
     ("tolerance = 0.1", 'tolerance = 0.1\nshape = "lognormal"\nshift = -4.5')),
    ('shape = "gaussian": must be "normal",', ("tolerance = 0.1", 'tolerance = 0.1\nshape = "gaussian"')),
    ("together = 1: must be true or false", ("together = true", "together = 1")),
    ('level = "board": must be "lot", "panel", "coupon", or shares', ("together = true", 'level = "board"')),
    ("(they add up to 0.9)", ("together = true", "level = { lot = 0.5, coupon = 0.4 }")),
    ("level = { coupon = true }", ("together = true", "level = { coupon = true }")),
    ('file = "press.csv": only with shape = "measured"', ("together = true", 'file = "press.csv"')),
    # correlations
    ('"P2.thickness" is not a variable: no variation names it',
     ("[[lines]]", '[[correlations]]\nbetween = ["P1.thickness", "P2.thickness"]\ncoefficient = 0.5\n[[lines]]')),
    ('must be two different variables; both are "P1.dk + P2.dk"',
     ("[[lines]]", '[[correlations]]\nbetween = ["P1.dk", "P2.dk"]\ncoefficient = 0.5\n[[lines]]')),
    ("coefficient = 1: must be a number above -1 and below 1",
     ("[[lines]]", '[[correlations]]\nbetween = ["P1.dk", "P1.thickness"]\ncoefficient = 1\n[[lines]]')),
    ("must be a list of 2 different names of variables",
     ("[[lines]]", '[[correlations]]\nbetween = ["P1.dk"]\ncoefficient = 0.5\n[[lines]]')),
    ("coefficient: missing", ("[[lines]]", '[[correlations]]\nbetween = ["P1.dk", "L1.etch"]\n[[lines]]')),
    ("stands twice: every pair once",
     ("[[lines]]", '[[correlations]]\nbetween = ["P1.dk + P2.dk", "L1.etch"]\ncoefficient = 0.1\n'
                   '[[correlations]]\nbetween = ["L1.etch", "P2.dk"]\ncoefficient = 0.1\n[[lines]]')),
]


@pytest.mark.parametrize(("part", "changes"), [(row[0], row[1:]) for row in ONE_MISTAKE],
                         ids=[str(row[0])[:60] for row in ONE_MISTAKE])
def test_one_mistake_is_one_message(part: str, changes: tuple[tuple[str, str], ...]) -> None:
    told = messages(changed(BOARD, *changes))
    assert len(told) == 1, told
    assert part in told[0]
    assert told[0].startswith("orchard.toml: ")


def test_no_plane_is_told_of_each_line() -> None:
    told = messages(BOARD.replace('use = "plane"', 'use = "signal"'))
    assert len(told) == 2
    assert all("must have a reference plane above or below" in one for one in told)


def test_correlations_that_contradict_each_other_are_named() -> None:
    """Three variables at -0.6 each: the smallest eigenvalue is 1 - 2 x 0.6 = -0.2 (equicorrelated matrix, exact)."""
    names = ("P1.thickness", "L1.etch", "L3.etch")
    text = BOARD + "".join(
        f'[[correlations]]\nbetween = ["{names[first]}", "{names[second]}"]\ncoefficient = -0.6\n'
        for first, second in ((0, 1), (0, 2), (1, 2)))
    told = messages(text)
    assert len(told) == 1
    assert all(f'"{name}"' in told[0] for name in names)
    assert "positive definite" in told[0]
    assert '"P1.dk + P2.dk"' not in told[0]
    assert messages(text.replace("-0.6", "-0.49")) == []  # 1 - 2 x 0.49 = 0.02: positive definite


def test_percent_of_etch_is_of_the_width() -> None:
    """cpk needs half-width above the shift: 10 % of the 100 um line is less than 15 um, of the 180 um line more."""
    etch = '"L3.etch"]\ntolerance = "10 %"'
    with_shift = changed(BOARD, (etch, '"L3.etch"]\nshift = "15 um"\ncpk = 1.33\ntolerance = "10 %"'))
    assert ["L3.etch: needs a half-width above the shift; they are 10 um and 15 um" in one
            for one in messages(with_shift)] == [True]
    only_wide = changed(with_shift, ('["L1.etch", "L3.etch"]', '"L1.etch"'))
    assert messages(only_wide) == []


def test_shares_of_levels_may_miss_one_by_a_billionth() -> None:
    """The scenario format: within 1e-9."""
    for lot, fine in ((0.3 + 0.9e-9, True), (0.3 + 1.5e-9, False)):
        told = messages(changed(BOARD, ("together = true", f"level = {{ lot = {lot!r}, coupon = 0.7 }}")))
        assert (told == []) is fine


def test_correlated_variables_have_the_same_level_shares() -> None:
    text = changed(BOARD, ("together = true", 'level = "lot"')) + (
        '[[correlations]]\nbetween = ["P1.dk", "P1.thickness"]\ncoefficient = 0.5\n')
    assert any("two variables of the same level shares" in one for one in messages(text))


def test_coupons_need_no_power_of_two_with_levels() -> None:
    told = messages(changed(BOARD, ("together = true", 'level = "lot"'), ("seed = 1", "coupons = 1000")))
    assert [one for one in told if "coupons" in one and "power of two" in one] == []


def test_a_wrong_layer_does_not_bring_messages_about_what_names_it() -> None:
    text = changed(BOARD, ('thickness = "100 um"', 'thickness = "0 um"')) + (
        '[[correlations]]\nbetween = ["P1.thickness", "P1.dk"]\ncoefficient = -0.5\n')
    told = messages(text)
    assert len(told) == 1
    assert 'thickness = "0 um"' in told[0]


def test_a_layer_without_a_name_does_not_bring_messages_about_what_names_it() -> None:
    told = messages(changed(BOARD, ('name = "L3"\n', "")))
    assert len(told) == 1
    assert "[[layers]] number 6: name: missing" in told[0]


def test_a_variation_of_nothing_does_not_bring_messages_about_correlations() -> None:
    text = BOARD + '[[correlations]]\nbetween = ["P1.thickness", "P1.dk"]\ncoefficient = -0.5\n'
    told = messages(changed(text, ('of = "P1.thickness"', 'of = "P1.thicknes"')))
    assert len(told) == 1
    assert "[[variations]]" in told[0]


def test_a_misspelled_table_beside_the_right_one() -> None:
    told = messages(BOARD + '[[line]]\nname = "third"\n')
    assert told == ['orchard.toml: line: unknown table; did you mean "lines"?']


def test_a_frequency_needs_the_loss_of_each_dielectric() -> None:
    told = messages(changed(BOARD, ("seed = 1", 'frequency = "1 GHz"')))
    assert [one.split(": ")[1] for one in told if "df: missing" in one] == [
        '[[layers]] "top mask"', '[[layers]] "P1"', '[[layers]] "C1"', '[[layers]] "P2"']
    assert len(told) == 4


@pytest.mark.parametrize(("part", "keys"), [
    ("file: missing", 'column = "P1 um"'),
    ("column: missing", 'file = "press.csv"'),
    ('file = "absent.csv": must be the path of a file, from the folder of orchard.toml: there is none',
     'file = "absent.csv"\ncolumn = "P1 um"'),
    ('file = "press.txt": must be the path of a CSV or XLSX file', 'file = "press.txt"\ncolumn = "P1 um"'),
    ('sheet = "Press": only with an XLSX file', 'file = "press.csv"\ncolumn = "P1 um"\nsheet = "Press"'),
    ("sigmas = 3: not with shape", 'file = "press.csv"\ncolumn = "P1 um"\nsigmas = 3'),
])
def test_measured_variations_are_checked(tmp_path: Path, part: str, keys: str) -> None:
    (tmp_path / "press.csv").write_text("P1 um\n99.5\n99\n98\n101\n100\n", encoding="utf-8")
    text = changed(BOARD, ('tolerance = "10 %"', f'shape = "measured"\n{keys}'))
    with pytest.raises(ScenarioError) as told:
        parse(text, name="orchard.toml", folder=tmp_path)
    lines = str(told.value).split("\n")
    assert len(lines) == 1, lines
    assert part in lines[0]


def test_foreign_text_stays_on_one_line() -> None:
    told = messages(changed(BOARD, ("dk = 4.0", 'dk = 4.0\n"a\\nb" = 1')))
    assert len(told) == 1
    assert "a\\nb = 1: unknown key" in told[0]
    told = messages(changed(BOARD, ('name = "P1"', 'name = "P\\n1"')))
    assert len(told) == 1
    assert '"P\\n1"' in told[0]


@pytest.mark.parametrize(("part", "table"), [
    ("accept_number: missing; sample_size and accept_number stand together", "sample_size = 8"),
    ("sample_size: missing", "accept_number = 0"),
    ("sample_size = 41: must be at most the 40 coupons of a lot", "sample_size = 41\naccept_number = 0"),
    ("accept_number = 8: must be below sample_size, 8", "sample_size = 8\naccept_number = 8"),
    ('guard_band = "5 ohm": must be below the half-width of the limits of every line; of "radio feed" it is 5 ohm',
     'guard_band = "5 ohm"'),
    ('repeatability = "-1 ohm"', 'repeatability = "-1 ohm"'),
    ("panels_per_lot = 0", "panels_per_lot = 0"),
])
def test_the_impedance_test_is_checked(part: str, table: str) -> None:
    told = messages(f"{BOARD}\n[test]\n{table}\n")
    assert any(part in one for one in told), told


@pytest.mark.parametrize(("part", "offer"), [
    ('none names "P2.thickness"', 'of = "P2.thickness"\ntolerance = "5 %"\ncost = 4.0'),
    ("cost = -4.0: must be a number from 0 up", 'of = "P1.thickness"\ntolerance = "5 %"\ncost = -4.0'),
    ("tolerance = 5: P1.thickness: must be a half-width", 'of = "P1.thickness"\ntolerance = 5\ncost = 4.0'),
    ("cost: missing", 'of = "P1.thickness"\ntolerance = "5 %"'),
])
def test_offers_are_checked(part: str, offer: str) -> None:
    assert messages(BOARD + '\n[[offers]]\nof = "P1.thickness"\ntolerance = "5 %"\ncost = 4.0\n') == []
    told = messages(f"{BOARD}\n[[offers]]\n{offer}\n")
    assert any(part in one for one in told), told


def test_empty_boards_are_told_what_is_missing() -> None:
    told = messages("")
    assert [one.split(": ")[1] for one in told] == ["format", "title", "[[layers]]", "[[lines]]"]
    assert messages(HEAD + SIX_LAYERS + VARIATIONS) == [
        "orchard.toml: [[lines]]: missing; must be one entry for each line"]
    assert messages(HEAD + SIX_LAYERS + LINES) == []
