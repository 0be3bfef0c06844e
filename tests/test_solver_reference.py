"""Nominal impedances, effective Dk and derivatives against an independent finite-element calculation.

The numbers stand in reference_sections.json: independent finite-element calculation with scikit-fem, which bounds
the energy from both sides (impedance to +-0.0045 % or better, derivatives to 0.06 %). Not a publication.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from tests.section_examples import EVEN, ODD, microstrip, solve, stripline
from tolerance.sections.section import Section
from tolerance.solver.line import ModeSolution
from tolerance.solver.plan import plan_for

REFERENCE: dict[str, Any] = json.loads((Path(__file__).parent / "reference_sections.json").read_text(encoding="utf-8"))
SOURCE = REFERENCE["source"]
SECTIONS: dict[str, dict[str, Any]] = {case["name"]: case for case in REFERENCE["sections"]}
MODES = {"impedance": EVEN, "even_impedance": EVEN, "odd_impedance": ODD,
         "effective_dk": EVEN, "even_effective_dk": EVEN, "odd_effective_dk": ODD}
#: Relative step of the central differences: large enough for round-off, their own error is below 0.01 %.
STEP = 2e-3


def section_of(case: dict[str, Any], *, moved: str = "", by: float = 0.0) -> Section:
    """The section of a reference case in micrometres, one value `moved` by a share of itself."""
    size = {**case["dimensions"], **case["dk"]}
    if moved == "width":  # foot and crest together, by a share of the foot
        size["crest_width"] += by * size["foot_width"]
        size["foot_width"] *= 1.0 + by
    elif moved:
        size[moved] *= 1.0 + by
    thickness, gap = size["thickness"], size.get("gap")
    if "core_height" in size:
        return stripline(foot=size["foot_width"], crest=size["crest_width"], thickness=thickness, gap=gap,
                         core=(size["core_height"], size["dk_core"]),
                         prepreg=(size["prepreg_height"] - thickness, size["dk_prepreg"]))
    mask = (size["mask_on_laminate"], size["mask_on_trace"], size["dk_mask"]) if "dk_mask" in size else None
    cover = (size["cover_height"] - thickness, size["dk_cover"]) if "dk_cover" in size else None
    return microstrip(foot=size["foot_width"], crest=size["crest_width"], thickness=thickness, gap=gap,
                      height=size["height"], dk=size["dk_laminate"], mask=mask, cover=cover)


@pytest.mark.parametrize("name", SECTIONS)
def test_impedance_and_effective_dk(name: str) -> None:
    case = SECTIONS[name]
    solved = solve(section_of(case))
    for result, expected in case["results"].items():
        mode = solved[MODES[result]]
        found, relative = (mode.effective_dk, 5e-4) if result.endswith("dk") else (mode.impedance, 2e-4)
        assert found[0] == pytest.approx(expected, rel=relative), f"{result}: {SOURCE}"


@pytest.mark.parametrize(("name", "of", "by", "expected"), [
    pytest.param(case["section"], row["of"], row["by"], row["value"], id=f"{case['section']}-{row['of']}-{row['by']}")
    for case in REFERENCE["derivatives"] for row in case["rows"]
])
def test_derivative(name: str, of: str, by: str, expected: float) -> None:
    case = SECTIONS[name]
    size = {**case["dimensions"], **case["dk"]}
    plan = plan_for(section_of(case))
    low, high = (wanted(of, solve(section_of(case, moved=by, by=way * STEP), plan=plan)) for way in (-1.0, 1.0))
    nominal = size["foot_width"] if by == "width" else size[by]
    assert (high - low) / (2.0 * STEP * nominal) == pytest.approx(expected, rel=5e-3), SOURCE


def wanted(of: str, solved: dict[int, ModeSolution]) -> float:
    """The impedance [ohm] by name: of the line, or differential or common of the pair."""
    if of == "differential_impedance":
        return 2.0 * float(solved[ODD].impedance[0])
    return float(solved[EVEN].impedance[0]) * (0.5 if of == "common_impedance" else 1.0)
