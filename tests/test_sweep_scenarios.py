"""`[[sweep]]`: which scenarios one stands for, and what is told of a wrong one."""

from __future__ import annotations

from pathlib import Path

import pytest
from openpyxl import Workbook

from tests.scenario_texts import messages
from tests.sweep_examples import SWEEP, VANE, write
from tolerance.errors import ScenarioError
from tolerance.scenario import Scenario, load
from tolerance.scenario.checking import sweep_of
from tolerance.scenario.fingerprint import fingerprint


def scenarios(path: Path) -> list[tuple[dict[str, object], Scenario]]:
    count, variants = sweep_of(path)
    found = [(one.swept, one.scenario()) for one in variants]
    assert len(found) == count
    return found


def of(path: str, values: str = '["1 %"]') -> str:
    return f"{VANE}[[sweep]]\nof = {path}\nvalues = {values}\n"


def test_entries_multiply_out_and_the_last_goes_fastest(tmp_path: Path) -> None:
    found = scenarios(write(tmp_path, SWEEP))
    assert [tuple(values.values()) for values, _ in found] == [
        ("95 um", "8 %"), ("95 um", "12 %"), ("100 um", "8 %"), ("100 um", "12 %"), ("105 um", "8 %"),
        ("105 um", "12 %")]
    for values, scenario in found:
        tolerance = scenario.variations[0].tolerance
        assert tolerance is not None
        assert f"{1e6 * scenario.layer('P1').thickness:.0f} um" == values["layers.P1.thickness"]  # type: ignore[operator]
        assert f"{100 * tolerance.value:.0f} %" == values["variations.P1.thickness.tolerance"]


def test_every_kind_of_path(tmp_path: Path) -> None:
    text = VANE + """
[[lines]]
name = "a.b c"
layer = "L1"
width = "200 um"
target = "50 ohm"
""" + "".join(f"[[sweep]]\nof = {path}\nvalues = [{value}]\n" for path, value in (
        ('"title"', '"Other"'), ('"evaluation.limit"', '"7 %"'), ('"test.bias"', '"1 ohm"'),
        ('["lines.a.b c.width", "lines.radio feed.width"]', '"190 um"'), ('"layers.P1.dk"', "3.9"),
        ('"variations.P1.thickness.shape"', '"uniform"')))
    (values, scenario), = scenarios(write(tmp_path, text))
    assert values["lines.a.b c.width, lines.radio feed.width"] == "190 um"
    assert scenario.title == "Other"
    assert scenario.evaluation.limit == pytest.approx(0.07)
    assert scenario.test is not None
    assert scenario.test.bias == 1.0
    assert [line.width for line in scenario.lines] == [pytest.approx(190e-6)] * 2
    assert (scenario.layer("P1").dk, scenario.variations[0].shape) == (3.9, "uniform")


def test_a_table_goes_row_by_row(tmp_path: Path) -> None:
    (tmp_path / "grid.csv").write_text(
        "layers.P1.thickness;evaluation.seed;variations.P1.thickness.tolerance;title\n"
        "95 um;3;8 %;2027\n\n105 um;4;2.5 um;second\n", encoding="utf-8")
    found = scenarios(write(tmp_path, VANE + '[[sweep]]\nfile = "grid.csv"\n'))
    assert [(scenario.evaluation.seed, scenario.title) for _, scenario in found] == [(3, "2027"), (4, "second")]
    assert [scenario.layer("P1").thickness for _, scenario in found] == [pytest.approx(95e-6), pytest.approx(105e-6)]


def test_a_sheet_of_a_workbook_goes_row_by_row(tmp_path: Path) -> None:
    book = Workbook()
    sheet = book.active
    assert sheet is not None
    for row in (("layers.P1.dk", "evaluation.coupons"), (3.9, 512), (4.1, 1024)):
        sheet.append(row)
    book.save(tmp_path / "grid.xlsx")
    found = scenarios(write(tmp_path, VANE + '[[sweep]]\nfile = "grid.xlsx"\n'))
    assert [(one.layer("P1").dk, one.evaluation.coupons) for _, one in found] == [(3.9, 512), (4.1, 1024)]


def test_without_sweep_a_file_is_one_scenario(tmp_path: Path) -> None:
    (values, scenario), = scenarios(write(tmp_path, VANE))
    assert values == {}
    assert fingerprint(scenario) == fingerprint(load(tmp_path / "vane.toml"))


def test_a_bad_value_is_the_problem_of_its_scenario_alone(tmp_path: Path) -> None:
    _, variants = sweep_of(write(tmp_path, of('"layers.P1.thickness"', '["95 um", "95 kg", "105 um"]')))
    first, second, third = variants
    assert first.scenario().title == third.scenario().title
    with pytest.raises(ScenarioError, match=r'vane.toml: \[\[layers\]\] "P1": thickness = "95 kg": must be a length'):
        second.scenario()


@pytest.mark.parametrize(("text", "told"), [
    (of('"layer.P1.dk"'), 'of = "layer.P1.dk": no table is named "layer"; did you mean "layers"?'),
    (of('"layers.P9.dk"'), 'no entry of [[layers]] is named "P9"; known are L1, P1, L2, C1, L3, P2 and L4'),
    (of('"layers.P1.thicknes"'), 'unknown key "thicknes" of [[layers]]; did you mean "thickness"?'),
    (of('"layers.dk"'), 'must be layers.ENTRY.KEY, such as "layers.L1.dk"'),
    (of('"offers.P1.dk"'), 'unknown key "dk" of [[offers]]; known are of, tolerance and cost'),
    (of('"evaluation.P1.limit"'), "must be evaluation.KEY: [evaluation] has no entries"),
    (of('"format"'), "must be the path of a key, TABLE.KEY or TABLE.ENTRY.KEY, or one of title and preset"),
    (of('"evaluation.limit"', "[]"), "values = []: must be a list of 1 to 10000 values"),
    (of('"evaluation.limit"', '"1 %"'), 'values = "1 %": must be a list of 1 to 10000 values'),
    (of("7"), "of = 7: must be paths of keys"),
    (of('"evaluation.limit"') + '[[sweep]]\nof = "evaluation.limit"\nvalues = ["2 %"]\n',
     '"evaluation.limit" is swept already'),
    (VANE + '[[sweep]]\nof = "evaluation.limit"\n', "values: missing; must stand in [[sweep]], or file instead"),
    (VANE + "[[sweep]]\n", "[[sweep]] number 1: of: missing"),
    (of('"evaluation.limit"') + 'sheet = "a"\n', 'sheet = "a": must stand beside the file that has the sheet'),
    (of('"evaluation.limit"') + 'file = "a.csv"\n', "of = \"evaluation.limit\": must not stand beside file"),
    (VANE + '[[sweep]]\nfile = "a.csv"\n', "must be the path of a file"),
    (VANE + '[[sweep]]\nfile = "../a.csv"\n', "must stand beside the scenario"),
    (VANE + '[[sweep]]\nfile = "a.txt"\n', "its name must end in .csv or .xlsx"),
    (of('"evaluation.seed"', f"[{', '.join(map(str, range(150)))}]")
     + f'[[sweep]]\nof = "evaluation.limit"\nvalues = [{", ".join(["1"] * 100)}]\n',
     "makes 15000 scenarios with those above; must be 10000 at most"),
])
def test_a_wrong_sweep_is_one_line(text: str, told: str) -> None:
    found = [line for line in messages(text) if told in line]
    assert len(found) == 1, messages(text)
    assert found[0].startswith("orchard.toml: [[sweep]]")


@pytest.mark.parametrize(("table", "told"), [
    ("layers.P1.dk,layers.P8.dk\n4,4\n", '"layers.P8.dk": no entry of [[layers]] is named "P8"'),
    ("layers.P1.dk,evaluation.seed\n4,\n", "row 2: has a blank cell; every column must hold a value in every row"),
    ("layers.P1.dk,layers.P1.dk\n4,4\n", "each path once"),
    ("layers.P1.dk\n", "has headings and no readings below them"),
    ("", "is empty"),
])
def test_a_wrong_table_is_one_line(tmp_path: Path, table: str, told: str) -> None:
    (tmp_path / "grid.csv").write_text(table, encoding="utf-8")
    with pytest.raises(ScenarioError) as refused:
        sweep_of(write(tmp_path, VANE + '[[sweep]]\nfile = "grid.csv"\n'))
    assert [told in str(one) for one in refused.value.problems] == [True]


def test_an_extension_replaces_the_values_of_its_base(tmp_path: Path) -> None:
    write(tmp_path, SWEEP, "base.toml")
    text = 'format = 1\nextends = "base.toml"\n[[sweep]]\nof = "layers.P1.thickness"\nvalues = ["90 um"]\n'
    assert [tuple(values.values()) for values, _ in scenarios(write(tmp_path, text))] == [
        ("90 um", "8 %"), ("90 um", "12 %")]


def test_what_a_fingerprint_holds(tmp_path: Path) -> None:
    plain = fingerprint(load(write(tmp_path, VANE)))
    assert fingerprint(load(write(tmp_path, f"# a remark\n{VANE}", "other.toml"))) == plain
    assert fingerprint(load(write(tmp_path, VANE.replace("180 um", "0.18 mm")))) == plain
    for old, new in (("180 um", "181 um"), ("dk = 4.0", "dk = 4.01"), ("Weather", "Wind"), ("10 %", "9 %")):
        assert fingerprint(load(write(tmp_path, VANE.replace(old, new)))) != plain
