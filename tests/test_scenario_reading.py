"""Files, encodings, TOML, and scenarios that extend others."""

from __future__ import annotations

import codecs
import math
from pathlib import Path

import pytest

from tests.scenario_texts import BOARD, HEAD, LINES, SIX_LAYERS, VARIATIONS, changed
from tolerance.errors import InputError, ScenarioError, ToleranceError
from tolerance.scenario import Amount, LevelShares, load, parse
from tolerance.scenario.places import line_numbers


def write(folder: Path, name: str, text: str | bytes) -> Path:
    path = folder / name
    path.parent.mkdir(exist_ok=True)
    path.write_bytes(text if isinstance(text, bytes) else text.encode("utf-8"))
    return path


def refusal(path: Path) -> str:
    with pytest.raises(ToleranceError) as told:
        load(path)
    assert told.value.exit_status == 2
    return str(told.value)


def test_values_are_si() -> None:
    scenario = parse(BOARD)
    assert scenario.title == "Orchard gateway"
    assert scenario.layer("P1").thickness == 100e-6
    copper = scenario.layer("L1")
    assert (copper.foil, copper.plating, copper.etch_factor) == (18e-6, 25e-6, 3.0)
    assert copper.copper_thickness == pytest.approx(43e-6, rel=1e-15)
    feed, pair = scenario.lines
    assert (feed.width, feed.target, feed.gap, feed.is_pair) == (180e-6, 50.0, None, False)
    assert (pair.gap, pair.mode, pair.is_pair) == (150e-6, "differential", True)
    assert scenario.limit_of(feed) == 0.1
    assert scenario.variations[0].tolerance == Amount(0.1, relative=True)
    assert scenario.variations[1].tolerance == Amount(0.1, relative=False)


def test_defaults_are_those_of_the_format() -> None:
    scenario = parse(changed(BOARD, ("seed = 1\n", "")))
    evaluation = scenario.evaluation
    assert (evaluation.coupons, evaluation.target_yield, evaluation.seed) == (65536, 0.99, None)
    plane = scenario.layer("L2")
    assert (plane.plating, plane.etch_factor, plane.conductivity) == (0.0, math.inf, 58e6)
    variation = scenario.variations[0]
    assert (variation.shape, variation.sigmas_or_default, variation.together) == ("normal", 3.0, False)
    assert variation.level == LevelShares(coupon=1.0)
    assert scenario.report.lengths == "um"


def test_a_limit_of_its_own_wins() -> None:
    scenario = parse(changed(BOARD, ('width = "180 um"', 'width = "180 um"\nlimit = "7 %"')))
    assert [scenario.limit_of(line) for line in scenario.lines] == [0.07, 0.1]


def test_infinite_etch_factor_is_vertical_edges() -> None:
    assert math.isinf(parse(changed(BOARD, ("etch_factor = 3.0", "etch_factor = inf"))).layer("L1").etch_factor)


def test_a_scenario_cannot_be_changed() -> None:
    scenario = parse(BOARD)
    with pytest.raises(ValueError, match="frozen"):
        scenario.lines[0].width = 1e-4


def test_path_and_text_are_kept(tmp_path: Path) -> None:
    path = write(tmp_path, "orchard.toml", BOARD)
    scenario = load(path)
    assert (scenario.source, scenario.text) == (str(path), BOARD)
    assert load(str(path)) == scenario


@pytest.mark.parametrize("content", [
    codecs.BOM_UTF8 + BOARD.encode(), BOARD.replace("\n", "\r\n").encode(),
    BOARD.replace("Orchard", "Örchard µ").encode(),
], ids=["byte order mark", "carriage returns", "letters beyond ASCII"])
def test_ways_to_save_a_text(tmp_path: Path, content: bytes) -> None:
    scenario = load(write(tmp_path, "orchard.toml", content))
    assert scenario.layers == parse(BOARD).layers
    assert "\r" not in scenario.text


@pytest.mark.parametrize(("content", "part"), [
    (BOARD.encode("utf-16"), "orchard.toml: must be UTF-8 text: it begins as UTF-16 does"),
    (BOARD.replace("Orchard", "Örchard").encode("latin-1"), "orchard.toml: must be UTF-8 text: line 3 holds a byte"),
    (b"format = 1\ntitle = Orchard\n", "orchard.toml: is not valid TOML: "),
    (b"format = 1\nformat = 1\n", "is not valid TOML: a key or table stands twice (at line 2, column 11)"),
    (b"a = " + b"[" * 20_000, "nested too deeply"),
    (b"seed = " + b"9" * 5000, "orchard.toml: is not valid TOML: "),
    (b"\0", "orchard.toml: must be UTF-8 text: it holds binary data"),
])
def test_what_is_not_toml(tmp_path: Path, content: bytes, part: str) -> None:
    told = refusal(write(tmp_path, "orchard.toml", content))
    assert part in told
    assert "\n" not in told


def test_numbers_of_very_many_digits_are_told_shortly() -> None:
    with pytest.raises(ScenarioError) as told:
        parse(changed(BOARD, ("dk = 4.0", "dk = 0x" + "f" * 5000)))
    assert str(told.value).startswith('scenario.toml: [[layers]] "P1": dk = an integer of very many digits: must be')


def test_no_file_and_a_folder(tmp_path: Path) -> None:
    assert refusal(tmp_path / "nowhere.toml").endswith("nowhere.toml: there is no such file")
    assert refusal(tmp_path).endswith("is a folder; a scenario is a TOML file")
    assert refusal(tmp_path / "nowhere" / "deep.toml").endswith("there is no such file")
    with pytest.raises(InputError):
        load("with\0zero.toml")
    write(tmp_path, "large.toml", b"# " + b"x" * 5_000_000)
    assert "is too large: a scenario, with all it extends, holds at most 500 kB" in refusal(tmp_path / "large.toml")


def test_extends_merges_entries_of_the_same_name_key_by_key(tmp_path: Path) -> None:
    write(tmp_path, "base.toml", BOARD)
    path = write(tmp_path, "finer.toml", """
        format = 1
        title = "Finer"
        extends = "base.toml"
        [evaluation]
        coupons = 1024
        [[layers]]
        name = "P1"
        dk = 3.7
        [[lines]]
        name = "clock pair"
        gap = "120 um"
        [[lines]]
        name = "second feed"
        layer = "L1"
        width = "5 mil"
        target = "60 ohm"
        [[variations]]
        of = "P1.thickness"
        tolerance = "5 %"
        [[variations]]
        of = "L1.foil"
        tolerance = "8 %"
    """)
    base, finer = parse(BOARD), load(path)
    assert finer.title == "Finer"
    assert (finer.evaluation.coupons, finer.evaluation.limit, finer.evaluation.seed) == (1024, 0.1, 1)
    assert [layer.name for layer in finer.layers] == [layer.name for layer in base.layers]
    assert (finer.layer("P1").dk, finer.layer("P1").thickness) == (3.7, 100e-6)
    assert [line.name for line in finer.lines] == ["radio feed", "clock pair", "second feed"]
    assert (finer.lines[1].gap, finer.lines[1].width) == (120e-6, 100e-6)
    assert finer.lines[2].width == 127e-6  # 5 x 25.4 um
    assert [variation.of for variation in finer.variations] == [
        ("P1.thickness",), ("P*.dk",), ("L1.etch", "L3.etch"), ("L1.foil",)]
    assert finer.variations[0].tolerance == Amount(0.05, relative=True)
    assert BOARD in finer.text
    assert "extends = " in finer.text


def test_chains_of_extends_and_folders(tmp_path: Path) -> None:
    write(tmp_path, "stackups/six.toml", f"format = 1\n{SIX_LAYERS}")
    write(tmp_path, "stackups/process.toml", f'extends = "six.toml"\n{VARIATIONS}')
    head = changed(HEAD, ("format = 1", 'format = 1\nextends = "stackups/process.toml"'))
    path = write(tmp_path, "orchard.toml", head + LINES)
    assert load(path).layers == parse(BOARD).layers
    assert load(path).variations == parse(BOARD).variations


def test_a_problem_names_the_file_in_which_it_stands(tmp_path: Path) -> None:
    write(tmp_path, "stackups/six.toml", changed(SIX_LAYERS, ("dk = 4.0", "dk = 0.4"), ("dk = 4.2", "dk = 0.2")))
    path = write(tmp_path, "orchard.toml", f'{changed(HEAD, ("format = 1", EXTENDS_SIX))}{LINES}{VARIATIONS}'
                 '[[layers]]\nname = "C1"\ndk = -1\n[[layers]]\nname = "P2"\nthicknes = "200 um"\n')
    assert refusal(path).split("\n") == [
        'orchard.toml: [[layers]] "C1": dk = -1: must be a number from 1 up to 100',
        'orchard.toml: [[layers]] "P2": thicknes = "200 um": unknown key; did you mean "thickness"?',
        'stackups/six.toml: [[layers]] "P1": dk = 0.4: must be a number from 1 up to 100',
    ]


EXTENDS_SIX = 'format = 1\nextends = "stackups/six.toml"'


def test_a_half_width_gives_way_to_ends_and_a_shape_to_another(tmp_path: Path) -> None:
    write(tmp_path, "base.toml", changed(BOARD, ('thickness"\ntolerance = "10 %"',
                                                 'thickness"\ntolerance = "10 %"\nsigmas = 4')))
    path = write(tmp_path, "ends.toml", 'extends = "base.toml"\n[[variations]]\nof = "P1.thickness"\n'
                                        'shape = "uniform"\nlow = "95 um"\nhigh = "102 um"\n')
    variation = load(path).variations[0]
    assert (variation.low, variation.high, variation.tolerance, variation.sigmas) == (95e-6, 102e-6, None, None)
    again = write(tmp_path, "again.toml", 'extends = "ends.toml"\n[[variations]]\nof = ["P1.thickness"]\n'
                                          'tolerance = "3 um"\n')
    variation = load(again).variations[0]
    assert (variation.low, variation.tolerance, variation.shape) == (None, Amount(3e-6, relative=False), "uniform")


def test_correlations_are_known_by_their_pair(tmp_path: Path) -> None:
    pair = '[[correlations]]\nbetween = ["P1.thickness", "P1.dk"]\ncoefficient = -0.5\n'
    write(tmp_path, "base.toml", BOARD + pair)
    path = write(tmp_path, "other.toml", 'extends = "base.toml"\n[[correlations]]\n'
                                         'between = ["P1.dk", "P1.thickness"]\ncoefficient = -0.3\n')
    assert [one.coefficient for one in load(path).correlations] == [-0.3]


def test_new_layers_stand_below(tmp_path: Path) -> None:
    write(tmp_path, "base.toml", BOARD)
    path = write(tmp_path, "cover.toml", 'extends = "base.toml"\n[[layers]]\nname = "P3"\nkind = "prepreg"\n'
                                         'thickness = "60 um"\ndk = 3.6\n')
    assert [layer.name for layer in load(path).layers][-2:] == ["L4", "P3"]


def test_a_name_twice_in_the_extension_is_told(tmp_path: Path) -> None:
    write(tmp_path, "base.toml", BOARD)
    twice = '[[layers]]\nname = "P1"\nkind = "prepreg"\nthickness = "99 um"\ndk = 4\n'
    path = write(tmp_path, "twice.toml", f'extends = "base.toml"\n{twice}{twice}')
    assert refusal(path) == 'twice.toml: [[layers]] "P1": name = "P1": stands twice: every name once'


@pytest.mark.parametrize(("extends", "part"), [
    ('"nowhere.toml"', "orchard.toml: extends = \"nowhere.toml\": "),
    ('"orchard.toml"', "must not lead back"),
    ('"."', "is a folder"),
    ("7", "extends = 7: must be the path of another scenario"),
    ('""', "must be the path"),
])
def test_extends_that_leads_nowhere(tmp_path: Path, extends: str, part: str) -> None:
    told = refusal(write(tmp_path, "orchard.toml", f"format = 1\nextends = {extends}\n"))
    assert part in told
    assert "\n" not in told


def test_extends_in_a_circle(tmp_path: Path) -> None:
    write(tmp_path, "first.toml", 'extends = "second.toml"\n')
    write(tmp_path, "second.toml", 'extends = "first.toml"\n')
    told = refusal(tmp_path / "first.toml")
    assert told.startswith('second.toml: extends = "first.toml": must not lead back')


def test_a_base_of_another_format_and_one_that_is_not_toml(tmp_path: Path) -> None:
    write(tmp_path, "base.toml", changed(BOARD, ("format = 1", "format = 2")))
    path = write(tmp_path, "orchard.toml", 'format = 1\nextends = "base.toml"\n')
    assert refusal(path).startswith("base.toml: format = 2: must be 1")
    write(tmp_path, "base.toml", "what is this")
    assert refusal(path).startswith("base.toml: is not valid TOML")


def test_places_of_keys() -> None:
    text = 'title = """\n[[lines]]\n"""\n[[lines]]\nname = "a"\n\n[[ lines ]]\n"name" = "b"\nlevel.lot = 1\n' \
           '[report]\nlengths = "um"\n[[lines]]\n[lines.level]\nlot = 1\n'
    assert line_numbers(text) == {
        ("", 0, "title"): 1, ("lines", 0, ""): 4, ("lines", 1, ""): 4, ("lines", 1, "name"): 5,
        ("lines", 2, ""): 7, ("lines", 2, "name"): 8, ("lines", 2, "level"): 9, ("report", 0, ""): 10,
        ("report", 0, "lengths"): 11, ("lines", 3, ""): 12, ("lines", 3, "level"): 13,
    }
