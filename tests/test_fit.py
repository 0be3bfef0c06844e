"""`tolerance fit`: figures of a table, limits, levels, the text to paste, and what is told of bad input."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path

import numpy as np
import pytest

from tests.scenario_texts import BOARD, changed
from tests.test_tolerance_intervals import DYESTUFF, TURNIPS
from tolerance.command import main
from tolerance.errors import InputError
from tolerance.report.fit_text import fit_json
from tolerance.scenario import load
from tolerance.study.fit import fit


def turnips(folder: Path, heading: str = "P1.thickness um") -> Path:
    path = folder / "turnips.csv"
    rows = [f"{plant},{leaf},A,{97.0 + value}" for plant, leaves in enumerate(TURNIPS)
            for leaf, values in enumerate(leaves) for value in values]
    path.write_text(f"Lot,panel,operator,{heading}\n" + "\n".join(rows), encoding="utf-8")
    return path


def test_levels_of_a_published_table(tmp_path: Path) -> None:
    """Snedecor and Cochran's turnip greens, 97 added to each: components 0.3652, 0.1611, 0.0067 (from memory)."""
    result = fit(turnips(tmp_path))
    (column,) = result.columns
    assert [one.variance for one in column.components] == pytest.approx([0.3652, 0.1611, 0.0067], abs=6e-5)
    assert [name for name, _ in column.shares] == ["lot", "panel", "coupon"]
    assert result.left_out == ("Lot", "panel", "operator")
    assert column.mean.value == pytest.approx(97.0 + np.mean(TURNIPS))
    assert column.deviation.value == pytest.approx(np.std(TURNIPS, ddof=1))


def test_limits_of_a_published_table(tmp_path: Path) -> None:
    """Dyestuff (Davies; from memory): mean 1527.5, deviation 63.03 (by numpy); limits in the unit of the heading."""
    path = tmp_path / "yield.csv"
    path.write_text("g\n" + "\n".join(str(value) for row in DYESTUFF for value in row), encoding="utf-8")
    (column,) = fit(path, lower="1440", upper="1640").columns
    assert column.limits is not None
    assert column.limits.cp is not None
    assert column.limits.cpk is not None
    deviation = np.std(DYESTUFF, ddof=1)
    assert column.limits.cp.value == pytest.approx(200.0 / (6.0 * deviation))
    assert column.limits.cpk.value == pytest.approx(87.5 / (3.0 * deviation))
    assert column.limits.outside == 0
    assert column.limits.share_outside.high == pytest.approx(1.0 - 0.025 ** (1 / 30)), "exact for none outside"


@pytest.mark.parametrize(("lower", "upper"), [("90", "110"), ("90 um", "0.11 mm"), (" 90um ", "1.1e2")])
def test_limits_have_the_unit_of_the_column_or_their_own(lower: str, upper: str, tmp_path: Path) -> None:
    limits = fit(turnips(tmp_path), lower=lower, upper=upper).columns[0].limits
    assert limits is not None
    assert [limits.low, limits.high] == pytest.approx([90.0, 110.0])


def test_the_suggestion_is_a_variation(tmp_path: Path) -> None:
    column = fit(turnips(tmp_path)).columns[0]
    parsed = tomllib.loads(column.suggestion)["variations"][0]
    assert parsed["level"] == {"lot": 0.685, "panel": 0.302, "coupon": 0.013}
    path = tmp_path / "orchard.toml"
    path.write_text(changed(BOARD, ('[[variations]]\nof = "P1.thickness"\ntolerance = "10 %"\n', column.suggestion)),
                    encoding="utf-8")
    assert load(path).readings_of("P1.thickness").values[0] == pytest.approx(100.28e-6)
    (tmp_path / "own.csv").write_text("RC %\n64\n65\n63\n66\n", encoding="utf-8")
    own = fit(tmp_path / "own.csv").columns[0].suggestion
    assert 'of     = "LAYER.PROPERTY"   # put in what this column is' in own
    assert f"tolerance = {0.03 * np.std([64, 65, 63, 66], ddof=1):.4g} " in own, "of a share, an absolute one"


@pytest.mark.parametrize(("content", "options", "part"), [
    ("P1 um\n98\nx\n97\n", {}, 'column "P1 um": row 3 holds "x"'),
    ("P1 um\n98\n\n97\n", {}, "at least 3 readings are needed; it has 2"),
    ("lot,name\n1,a\n2,b\n", {}, "has no column of readings"),
    ("a um,b um\n1,2\n2,3\n3,4\n", {"lower": "1"}, "several columns of readings; say with --column"),
    ("P1 um\n98\n99\n97\n", {"column": "P2 um"}, 'of "P2 um" there is none'),
    ("P1 um\n98\n99\n97\n", {"lower": "1 kg"}, '--lower "1 kg": must be a number in the unit of the column'),
    ("P1 um\n98\n99\n97\n", {"lower": "nan"}, "--lower nan: must be finite"),
    ("P1 um\n98\n99\n97\n", {"lower": "3", "upper": "2"}, "--upper must be above --lower"),
    ("", {}, "is empty"),
])
def test_what_is_wrong_is_told(content: str, options: dict[str, str], part: str, tmp_path: Path) -> None:
    path = tmp_path / "press.csv"
    path.write_text(content, encoding="utf-8")
    with pytest.raises(InputError) as refused:
        fit(path, column=options.get("column"), lower=options.get("lower"), upper=options.get("upper"))
    assert part in str(refused.value)


def test_equal_readings_have_no_capability_and_no_nan(tmp_path: Path) -> None:
    path = tmp_path / "flat.csv"
    path.write_text("lot,Dk\n1,4.1\n1,4.1\n2,4.1\n2,4.1\n", encoding="utf-8")
    result = fit(path, lower="4", upper="5")
    assert result.columns[0].limits is not None
    assert result.columns[0].limits.cpk is None
    assert "NaN" not in fit_json(result)


def test_the_command(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = turnips(tmp_path)
    with pytest.raises(SystemExit) as ended:
        main(["fit", str(path), "--lower", "97 um", "--upper", "103 um"])
    assert ended.value.code == 0
    words = " ".join(capsys.readouterr().out.split())
    assert "P1.thickness um: 24 readings Mean 100.012 um" in words
    assert "lot 0.604 um (69 % of the variance), panel 0.401 um (30 %" in words
    assert "[[variations]] of = \"P1.thickness\"" in words
    with pytest.raises(SystemExit):
        main(["fit", str(path), "--json"])
    said = json.loads(capsys.readouterr().out)
    assert said["columns"][0]["readings"] == 24
    assert [one["level"] for one in said["columns"][0]["levels"]] == ["lot", "panel", "coupon"]
    with pytest.raises(SystemExit) as ended:
        main(["fit", str(tmp_path / "absent.csv")])
    assert ended.value.code == 2
    assert "there is no such file" in capsys.readouterr().err
