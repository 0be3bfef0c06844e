"""Measured data and resin content from the scenario to the answer."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from openpyxl import load_workbook
from rich.console import Console

from tests.scenario_texts import BOARD, changed
from tolerance.errors import ScenarioError
from tolerance.report.json_text import run_json
from tolerance.report.terminal import print_run
from tolerance.report.workbook import workbook
from tolerance.results import LineResult, RunResult
from tolerance.scenario import load, parse
from tolerance.study.run import run

MEASURED = changed(
    BOARD, ('of = "P1.thickness"\ntolerance = "10 %"',
            'of = "P1.thickness"\nshape = "measured"\nfile = "press.csv"\ncolumn = "P1 um"'),
    ("seed = 1", "seed = 1\ncoupons = 4096"),
)


def table(folder: Path, count: int, *, deviation: float = 3.0, seed: int = 1) -> None:
    values = 100.0 + deviation * np.random.default_rng(seed).standard_normal(count)
    (folder / "press.csv").write_text("P1 um\n" + "\n".join(f"{value:.4f}" for value in values), encoding="utf-8")


def told(folder: Path, text: str) -> list[str]:
    (folder / "orchard.toml").write_text(text, encoding="utf-8")
    with pytest.raises(ScenarioError) as refused:
        load(folder / "orchard.toml")
    return str(refused.value).split("\n")


@pytest.mark.parametrize(("file", "part"), [
    ("../press.csv", 'must stand beside the scenario, in its folder or below (to'),
    ("data/../../press.csv", "must stand beside the scenario"),
    ("/etc/press.csv", "must stand beside the scenario"),
    ("C:/press.csv", "must stand beside the scenario"),
    ("\\\\\\\\server\\\\press.csv", "must stand beside the scenario"),
    ("pres.csv", "must be the path of a file, from the folder of orchard.toml: there is none"),
    ("press.ods", "its name must end in .csv or .xlsx"),
    ("link.csv", "it is a link to somewhere else"),
])
def test_the_file_stands_beside_the_scenario(file: str, part: str, tmp_path: Path) -> None:
    folder = tmp_path / "inside"
    folder.mkdir()
    table(folder, 20)
    table(tmp_path, 20)
    (folder / "link.csv").symlink_to(tmp_path / "press.csv")
    lines = told(folder, MEASURED.replace('"press.csv"', f'"{file}"'))
    assert len(lines) == 1
    assert lines[0].startswith('orchard.toml: [[variations]] "P1.thickness": file = ')
    assert part in lines[0]


@pytest.mark.parametrize(("content", "part"), [
    ("P1 um\n98\n\nx\n101\n100\n99\n98\n", 'column = "P1 um": press.csv: row 4 holds "x", which is not a number'),
    ("P1 um,b\n98,1\n,1\n101,1\n100,1\n99,1\n98,1\n", "press.csv: row 3 is blank"),
    ("P1 mm\n98\n99\n", 'must be the heading of a column; of "P1 um" there is none (headings: "P1 mm")'),
    ("P1 um\n98\n99\n97\n100\n", "press.csv: has 4 readings; at least 5 are needed"),
    ("P1 um\n98\n99\n97\n-4\n100\n", "P1.thickness must be above 0 um and up to 5000 um; there are -4 um in row 5"),
    ("P1 um\n3.9\n4.0\n4.1\n4.0\n3.9\n", "the median of the readings, 4 um, is far from the nominal of P1.thickness"),
])
def test_what_is_wrong_in_the_table_is_told(content: str, part: str, tmp_path: Path) -> None:
    (tmp_path / "press.csv").write_text(content, encoding="utf-8")
    lines = told(tmp_path, MEASURED)
    assert len(lines) == 1
    assert part in lines[0]


def answer(folder: Path, text: str = MEASURED, direct: int = 0) -> RunResult:
    return run(parse(text, folder=folder), direct=direct)


def first(result: RunResult) -> LineResult:
    return result.lines[0]


@pytest.fixture
def few(tmp_path: Path) -> RunResult:
    table(tmp_path, 12, seed=2)
    return answer(tmp_path)


def test_few_readings_leave_more_doubt_than_many(few: RunResult, tmp_path: Path) -> None:
    widths = [first(few).deviation.high - first(few).deviation.low]
    for count in (48, 400):
        table(tmp_path, count)
        line = first(answer(tmp_path))
        widths.append(line.deviation.high - line.deviation.low)
        assert line.inside.low <= line.inside.value <= line.inside.high
    assert widths[0] > 1.5 * widths[1] > 2.0 * widths[2]


def test_very_many_readings_of_a_normal_are_that_normal(tmp_path: Path) -> None:
    table(tmp_path, 20_000, deviation=10.0 / 3.0)
    by_readings = first(answer(tmp_path, direct=32))
    by_tolerance = first(answer(tmp_path, changed(BOARD, ("seed = 1", "seed = 1\ncoupons = 4096"))))
    assert by_readings.direct is not None
    assert by_readings.direct.largest < 0.05
    assert by_readings.inside.value == pytest.approx(by_tolerance.inside.value, abs=0.006)
    assert by_readings.deviation.value == pytest.approx(by_tolerance.deviation.value, rel=0.02)
    assert by_readings.mean.value == pytest.approx(by_tolerance.mean.value, abs=0.03)


def test_the_same_seed_gives_the_same_answer(few: RunResult, tmp_path: Path) -> None:
    assert run_json(few) == run_json(answer(tmp_path))


def test_the_answer_tells_what_was_taken(few: RunResult, tmp_path: Path) -> None:
    told_json = json.loads(run_json(few))["measured"]
    assert [(one["of"], one["file"], one["column"], one["readings"], one["unit"]) for one in told_json] == [
        ("P1.thickness", "press.csv", "P1 um", 12, "um")]
    assert told_json[0]["law"].startswith("a normal fitted (test of a normal: p 0.")
    console = Console(width=80, record=True)
    print_run(few, console)
    words = " ".join(console.export_text().split())
    assert 'P1.thickness: 12 readings of "P1 um" in press.csv; a normal fitted' in words
    assert "intervals of the computation and of the number of readings" in words
    sheet = workbook(few, parse(MEASURED, folder=tmp_path))["Measured data"]
    assert [cell.value for cell in sheet[2]][:4] == ["P1.thickness", "press.csv", "P1 um", 12]


def test_an_xlsx_gives_the_same_as_a_csv(few: RunResult, tmp_path: Path) -> None:
    from openpyxl import Workbook

    book = Workbook()
    sheet = book.create_sheet("press")
    for line in (tmp_path / "press.csv").read_text(encoding="utf-8").split("\n"):
        sheet.append([float(line) if line[0].isdigit() else line])
    book.save(tmp_path / "press.xlsx")
    assert load_workbook(tmp_path / "press.xlsx").sheetnames == ["Sheet", "press"]
    text = MEASURED.replace('file = "press.csv"', 'file = "press.xlsx"\nsheet = "press"')
    assert answer(tmp_path, text).inside == few.inside


def test_resin_content_reaches_the_impedance(tmp_path: Path) -> None:
    """The prediction against the field solver on the coupons themselves, and the driver by its name."""
    resin = 'resin_dk = 3.2\nglass_dk = 6.1\nresin_content = "65 %"\nglass_areal_weight = "56 g/m^2"'
    text = changed(BOARD, ('thickness = "100 um"\ndk = 4.0', resin), ("seed = 1", "seed = 1\ncoupons = 4096"),
                   ('of = "P1.thickness"\ntolerance = "10 %"', 'of = "P1.resin_content"\ntolerance = 0.03'),
                   ('of = "P*.dk"', 'of = "P2.dk"'))
    line = first(answer(tmp_path, text, direct=64))
    assert line.direct is not None
    assert line.direct.largest < 0.05
    assert [driver.variable for driver in line.drivers] == ["P1.resin_content", "L1.etch"]
    assert line.drivers[0].total.value > 0.4
