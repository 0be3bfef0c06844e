"""The doctor: exact results come out, and one that does not is told by the exit status."""

from __future__ import annotations

import json
import math
from dataclasses import replace

import pytest

from tests.conformal_maps import (
    centred_strip_capacitance,
    coupled_strip_capacitances,
    strip_over_plane_capacitance,
    trapezoid_capacitance,
)
from tests.test_command import command
from tests.test_solver_exact import exact_impedance
from tolerance.diagnosed import Reference
from tolerance.study.doctor import doctor


def test_all_is_well_here(capsys: pytest.CaptureFixture[str]) -> None:
    assert command("doctor", "--json") == 0
    found = json.loads(capsys.readouterr().out)
    assert found["well"]
    assert len(found["references"]) == 9
    assert all(one["source"] for one in found["references"])
    assert {"python", "numpy", "scipy", "tolerance"} <= set(found["versions"])
    assert min(found["sections_per_second"].values()) > 1.0
    assert found["cache"]["writable"]


def test_the_built_in_values_are_the_exact_ones(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("tolerance.study.doctor.TIMED", 4)
    expected = [one.expected for one in doctor().references]
    even, odd = coupled_strip_capacitances(width=0.5, gap=0.2, plane_spacing=1.0)
    exact = [
        exact_impedance(centred_strip_capacitance(width=0.5, plane_spacing=1.0)),
        exact_impedance(centred_strip_capacitance(width=1.0, plane_spacing=1.0)),
        exact_impedance(even), exact_impedance(odd),
        exact_impedance(strip_over_plane_capacitance(width_over_height=1.0)),
        exact_impedance(trapezoid_capacitance(foot=1.0, crest=0.8, thickness=0.2, below=0.5, above=0.9)),
    ]
    assert expected[:6] == pytest.approx(exact, abs=6e-6), "conformal maps, through scipy.special and scipy.integrate"
    assert expected[6] == 68.82387, "tests/reference_sections.json, by finite elements"
    assert expected[7] == pytest.approx(0.5 * (4.4 + 3.7), rel=1e-15)


def test_a_result_that_is_off_is_told(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    monkeypatch.setattr("tolerance.study.doctor.TIMED", 4)
    monkeypatch.setattr("tolerance.study.doctor.SOLVER", 1e-9)
    assert command("doctor") == 3
    shown = capsys.readouterr().out
    assert "OFF" in shown
    assert "NOT WELL" in shown
    assert max(len(line.rstrip()) for line in shown.splitlines()) <= 80


def test_what_is_no_number_never_holds() -> None:
    one = Reference("strip", "ohm", "exact", 50.0, 50.001, 0.01)
    assert one.holds
    assert not replace(one, found=50.02).holds
    assert not replace(one, found=math.nan).holds
