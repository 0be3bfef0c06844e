"""Losses of the field solution: skin effect, Wheeler's rule, direct current, dielectrics carried to a frequency.

Expected values: textbook formulas, exact limits, scikit-rf (general-purpose), an independent finite-element calculation
with scikit-fem, and where it says so an independent boundary-element calculation, which is not a publication.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from scipy.special import jv
from skrf import Frequency
from skrf.media import DistributedCircuit, MLine

from tests.conformal_maps import coupled_strip_capacitances
from tests.section_examples import EVEN, ODD, microstrip, solve, stripline
from tolerance.sections.layered import LayeredSection, PlacedTrace
from tolerance.sections.section import Metals, PlaneMetal, Section, TraceMetal
from tolerance.solver.current import FaceCurrents, trace_impedance
from tolerance.solver.dielectric import complex_dk
from tolerance.solver.layered import plan_layered
from tolerance.solver.line import plan_line
from tolerance.solver.lossy import PERMITTIVITY, solve_lossy
from tolerance.solver.metal import (
    PERMEABILITY,
    roughness_factor,
    skin_depth,
    sphere_roughness_factor,
    surface_resistance,
)
from tolerance.solver.plan import SolverSettings, plan_for
from tolerance.solver.planes import Sources, plane_impedance
from tolerance.solver.shares import coupling, face_shares
from tolerance.solver.transmission import DECIBELS, SPEED_OF_LIGHT, LineParameters

COPPER = 1.0 / 1.724e-8  # [S/m], the resistivity of annealed copper
UM = 1e-6
BOUNDARY_ELEMENTS = "independent boundary-element calculation, not a publication"


def lossy(
    section: Section, *, frequency: float, mode: int = EVEN, df: float = 0.0, roughness: float = 0.0,
    settings: SolverSettings | None = None,
) -> LineParameters:
    """The section, lengths in micrometres, as copper and dielectric of one loss tangent."""
    section = in_metres(section)
    plane = PlaneMetal(COPPER, 35 * UM, roughness)
    loss = np.full(section.count, df)
    section = replace(
        section, foot_side=tuple(replace(ply, df=loss) for ply in section.foot_side),
        crest_side=tuple(replace(ply, df=loss) for ply in section.crest_side),
        mask=section.mask and replace(section.mask, df=loss),
        metals=Metals((TraceMetal(COPPER, roughness, roughness),), plane if section.foot_plane else None,
                      plane if section.crest_plane else None),
    )
    return solve_lossy(section, plan_for(section, settings), modes=(mode,), frequency=frequency)[mode]


def in_metres(section: Section) -> Section:
    mask = section.mask
    return replace(
        section, foot_width=UM * section.foot_width, crest_width=UM * section.crest_width,
        thickness=UM * section.thickness, gap=None if section.gap is None else UM * section.gap,
        foot_side=tuple(replace(ply, thickness=UM * ply.thickness) for ply in section.foot_side),
        crest_side=tuple(replace(ply, thickness=UM * ply.thickness) for ply in section.crest_side),
        ground_gap=None if section.ground_gap is None else UM * section.ground_gap,
        mask=mask and replace(mask, on_laminate=UM * mask.on_laminate, over_copper=UM * mask.over_copper),
    )


def outer_line() -> Section:
    return microstrip(foot=190.0, crest=190.0, thickness=45.0, height=100.0, dk=4.0)


def inner_line() -> Section:
    return stripline(foot=83.0, crest=83.0, thickness=16.0, core=(100.0, 4.0), prepreg=(100.0, 4.0))


# --- metal


@pytest.mark.parametrize(("frequency", "micrometres"), [
    (1e6, 66.1), (1e7, 20.9), (1e8, 6.61), (1e9, 2.09), (1e10, 0.661),
])
def test_skin_depth_of_copper(frequency: float, micrometres: float) -> None:
    """Textbook values for 1.724e-8 ohm m."""
    assert skin_depth(conductivity=COPPER, frequency=frequency) / UM == pytest.approx(micrometres, rel=2e-3)


def test_roughness_factor_at_its_limits_and_between() -> None:
    """Hammerstad and Bekkadal 1975: smooth 1, very rough 2, and 1 + (2 / pi) arctan 1.4 where roughness is a depth."""
    def factor(roughness: float) -> float:
        return roughness_factor(roughness=roughness, conductivity=COPPER, frequency=1e9)

    depth = skin_depth(conductivity=COPPER, frequency=1e9)
    assert factor(0.0) == 1.0
    assert factor(depth) == pytest.approx(1.0 + 2.0 / math.pi * math.atan(1.4), rel=1e-12)
    assert factor(100.0 * depth) == pytest.approx(2.0, abs=1e-3)


def test_spheres_lose_nothing_at_low_frequency_and_by_their_area_at_high() -> None:
    """Limits of the formula as recalled: 1 + 3/2 of the area of all spheres over the flat area."""
    def factor(frequency: float) -> float:
        return sphere_roughness_factor(sphere_radius=0.5 * UM, spheres_per_area=1e11, conductivity=COPPER,
                                       frequency=frequency)

    assert factor(1e3) == pytest.approx(1.0, abs=1e-4)
    assert factor(1e20) == pytest.approx(1.0 + 1.5 * 1e11 * 4.0 * math.pi * (0.5 * UM) ** 2, rel=1e-4)


@pytest.mark.parametrize("radius_over_depth", [0.01, 0.5, 1.0, 2.0, 4.0, 30.0])
def test_a_round_wire_at_any_frequency(radius_over_depth: float) -> None:
    """Textbook: a wire's internal impedance by Bessel functions. Exact at both ends, within a tenth between."""
    radius, frequency = 100 * UM, 1e7
    depth = radius / radius_over_depth
    conductivity = 1.0 / (math.pi * frequency * PERMEABILITY * depth**2)
    around = FaceCurrents({"crest": np.array([1.0 / (2.0 * math.pi * radius)])}, {})
    got = trace_impedance(around, TraceMetal(conductivity), cross_section=np.array([math.pi * radius**2]),
                          frequency=frequency)[0]
    inward = np.sqrt(-2j) / depth
    exact = inward / (2.0 * math.pi * radius * conductivity) * jv(0, inward * radius) / jv(1, inward * radius)
    close = 1e-4 if radius_over_depth < 0.1 else 0.02 if radius_over_depth > 20.0 else 0.1
    assert got.real == pytest.approx(exact.real, rel=close)
    assert got.imag == pytest.approx(exact.imag, rel=close)


# --- traces


def receded(outline: Callable[[float], Section], mode: int, frequency: float) -> float:
    """Resistance [ohm/m] by Wheeler 1942: omega times the change of inductance as all metal recedes by half a depth."""
    depth = skin_depth(conductivity=COPPER, frequency=frequency) / UM
    less, more = (1.0 / (SPEED_OF_LIGHT**2 * PERMITTIVITY * solve(outline(by))[mode].capacitance_in_air[0])
                  for by in (-0.5 * depth, 0.5 * depth))
    return float(math.pi * frequency * (more - less))


def outer(by: float, *, gap: float | None = None, ground_gap: float | None = None) -> Section:
    section = microstrip(foot=190 - 2 * by, crest=190 - 2 * by, thickness=45 - 2 * by, height=100 + 2 * by, dk=4.0,
                         gap=None if gap is None else gap + 2 * by)
    return section if ground_gap is None else replace(section, ground_gap=np.array([ground_gap + 2 * by]))


def etched(by: float) -> Section:
    """A trapezoid with etch factor 3 whose four faces recede: corners of base angle arctan 3 move along bisectors."""
    angle = math.atan(3.0)
    return microstrip(foot=160 - 2 * by / math.tan(angle / 2), crest=130 - 2 * by * math.tan(angle / 2),
                      thickness=45 - 2 * by, height=100 + 2 * by, dk=4.0)


def inner(by: float, *, gap: float | None = None) -> Section:
    return stripline(foot=83 - 2 * by, crest=83 - 2 * by, thickness=16 - 2 * by, core=(100 + 2 * by, 4.0),
                     prepreg=(180 + 2 * by, 3.6), gap=None if gap is None else gap + 2 * by)


@pytest.mark.parametrize(("outline", "mode"), [
    (outer, EVEN), (etched, EVEN), (lambda by: outer(by, gap=130.0), EVEN), (lambda by: outer(by, gap=130.0), ODD),
    (lambda by: outer(by, ground_gap=150.0), EVEN), (inner, EVEN), (lambda by: inner(by, gap=100.0), EVEN),
    (lambda by: inner(by, gap=100.0), ODD),
], ids=["microstrip", "etched", "pair even", "pair odd", "coplanar", "stripline", "strip pair even", "strip pair odd"])
def test_resistance_and_internal_inductance_obey_wheelers_rule(
    outline: Callable[[float], Section], mode: int,
) -> None:
    """The rule holds where the skin depth is small; at 100 GHz it is 0.2 um."""
    frequency = 1e11
    got = lossy(outline(0.0), frequency=frequency, mode=mode)
    by_rule = receded(outline, mode, frequency)
    assert got.resistance[0] == pytest.approx(by_rule, rel=0.01)
    external = 1.0 / (SPEED_OF_LIGHT**2 * PERMITTIVITY * solve(outline(0.0))[mode].capacitance_in_air[0])
    internal = 2.0 * math.pi * frequency * (got.inductance[0] - external)
    assert internal == pytest.approx(by_rule, rel=0.02)


@pytest.mark.parametrize("section", [outer_line(), inner_line(), outer(0.0, gap=130.0), outer(0.0, ground_gap=150.0)],
                         ids=["microstrip", "stripline", "pair", "coplanar"])
def test_direct_current_fills_the_cross_section(section: Section) -> None:
    """Exact: resistivity over area; infinite planes have none."""
    area = 0.5 * UM**2 * float(section.thickness[0] * (section.foot_width[0] + section.crest_width[0]))
    assert lossy(section, frequency=1e-4).resistance[0] == pytest.approx(1.0 / (COPPER * area), rel=1e-6)


@pytest.mark.parametrize(("width", "thickness", "below", "above", "frequency", "resistance", "inductance"), [
    (83, 16, 100, 100, 1e6, 12.985, 368.98), (83, 16, 100, 100, 1e7, 13.301, 367.71),
    (83, 16, 100, 100, 5e7, 16.522, 357.25), (83, 16, 100, 100, 1e8, 19.996, 351.49),
    (190, 45, 100, 400, 1e6, 2.036, 299.10), (190, 45, 100, 400, 1e7, 2.781, 286.49),
    (190, 45, 100, 400, 1e8, 7.742, 267.30),
])
def test_transition_to_direct_current_against_finite_elements(
    width: float, thickness: float, below: float, above: float, frequency: float, resistance: float, inductance: float,
) -> None:
    """Independent finite-element calculation with scikit-fem: current in the trace alone, planes without loss; nH/m."""
    section = stripline(foot=width, crest=width, thickness=thickness, core=(below, 1.0), prepreg=(above, 1.0))
    section = in_metres(section)
    perfect = PlaneMetal(1e30, 1.0)
    zero = np.zeros(1)
    section = replace(section, metals=Metals((TraceMetal(COPPER),), perfect, perfect),
                      foot_side=(replace(section.foot_side[0], df=zero),),
                      crest_side=(replace(section.crest_side[0], df=zero),))
    got = solve_lossy(section, plan_for(section), modes=(EVEN,), frequency=frequency)[EVEN]
    assert got.resistance[0] == pytest.approx(resistance, rel=0.05)
    assert 1e9 * got.inductance[0] == pytest.approx(inductance, rel=0.012)


def test_resistance_and_inductance_are_smooth_through_the_transition() -> None:
    """Resistance grows and inductance falls all the way, and neither jumps (the root of causal impedance)."""
    frequencies = np.logspace(4.0, 10.0, 61)
    found = [lossy(inner_line(), frequency=float(frequency)) for frequency in frequencies]
    resistance, inductance = (np.log([float(getattr(one, name)[0]) for one in found])
                              for name in ("resistance", "inductance"))
    assert np.all(np.diff(resistance) > 0.0)
    assert np.all(np.diff(inductance) < 0.0)
    assert np.abs(np.diff(resistance, 2)).max() < 0.02
    assert np.abs(np.diff(inductance, 2)).max() < 0.02


# --- planes


def filament(height: float, *, frequency: float, upper: float | None = None) -> complex:
    """Plane impedance [ohm/m] of a filament over one thick plane, or between two."""
    up = None if upper is None else np.array([[upper]])
    thick = PlaneMetal(COPPER, 1e6)
    sources = Sources(np.zeros((1, 1)), np.ones((1, 1)), np.array([[height]]), up)
    return complex(plane_impedance(sources, Metals((), thick, None if up is None else thick), parities=(1, -1),
                                   frequency=frequency, wavenumbers=200)[0])


def test_a_filament_over_a_plane_at_high_frequency() -> None:
    """Textbook: the current density falls as a Lorentzian of half width h, so its square integrates to 1 / (2 pi h)."""
    expected = surface_resistance(conductivity=COPPER, frequency=1e12) / (2.0 * math.pi * 1e-3)
    got = filament(1e-3, frequency=1e12)
    assert got.real == pytest.approx(expected, rel=1e-3)
    assert got.imag == pytest.approx(expected, rel=1e-3)


def test_a_filament_over_a_plane_at_low_frequency() -> None:
    """Carson 1926: the resistance of thick ground tends to omega mu / 8, whatever the height."""
    frequency = 1.0
    assert filament(1e-4, frequency=frequency).real == pytest.approx(2.0 * math.pi * frequency * PERMEABILITY / 8.0,
                                                                     rel=0.02)


def test_a_filament_midway_between_planes() -> None:
    """Textbook: density 1 / (2 b cosh(pi x / b)) in each plane, its square integrating to 1 / (2 pi b)."""
    frequency, spacing = 1e12, 1e-3
    expected = 2.0 * surface_resistance(conductivity=COPPER, frequency=frequency) / (2.0 * math.pi * spacing)
    assert filament(0.5 * spacing, upper=0.5 * spacing, frequency=frequency).real == pytest.approx(expected, rel=1e-3)


def test_a_filament_in_a_slit_in_thick_metal_at_low_frequency() -> None:
    """Textbook: in metal all round, j omega mu K0(r (1 + j) / depth) / (2 pi), of real part omega mu / 8."""
    got = filament(1e-4, upper=1e-4, frequency=1.0)
    assert got.real == pytest.approx(2.0 * math.pi * PERMEABILITY / 8.0, rel=0.02)


# --- dielectrics


@pytest.mark.parametrize("frequency", [1e5, 1e8, 1e9, 3e9, 1e10, 1e11])
def test_dk_and_df_at_another_frequency_against_scikit_rf(frequency: float) -> None:
    medium = MLine(Frequency.from_f([frequency], unit="hz"), w=2e-4, h=1e-4, t=None, ep_r=4.0, tand=0.02, rho=None,
                   diel="djordjevicsvensson", f_low=1e3, f_high=1e13, f_epr_tand=1e9)
    got = complex_dk(dk=np.array([4.0]), df=np.array([0.02]), dk_frequency=1e9, frequency=frequency)
    assert got[0] == pytest.approx(medium.ep_r_f[0], rel=1e-9)


def test_dk_at_its_own_frequency_is_as_given() -> None:
    for anchor in (None, 2e9):
        got = complex_dk(dk=np.array([3.7]), df=np.array([0.011]), dk_frequency=anchor, frequency=2e9)
        assert got[0].real == 3.7
        assert -got[0].imag / got[0].real == pytest.approx(0.011, rel=1e-15)
    assert complex_dk(dk=np.array([3.7]), df=np.array([0.0]), dk_frequency=1e6, frequency=1e10)[0] == 3.7


def test_dk_falls_by_the_textbook_slope() -> None:
    """Causality of a level loss tangent: -(2 / pi) ln 10 Dk Df = -1.466 Dk Df a decade; Df 0.02 gives -2.9 %."""
    low, high = (complex_dk(dk=np.array([4.0]), df=np.array([0.02]), dk_frequency=1e8, frequency=each)[0]
                 for each in (1e8, 1e9))
    assert (high.real - low.real) / (4.0 * 0.02) == pytest.approx(-1.466, rel=2e-3)
    assert high.real / low.real == pytest.approx(1.0 - 0.029, abs=5e-4)


def test_loss_and_dk_obey_the_kramers_kronig_relation() -> None:
    """eps' - eps_inf = (2 / pi) int w eps'' / (w^2 - w0^2) dw, by its difference between two frequencies."""
    logarithm, step = np.linspace(math.log(1e-2), math.log(1e18), 400_001, retstep=True)
    points = np.exp(logarithm)

    def dk_at(frequency: float) -> complex:
        return complex(complex_dk(dk=np.array([4.0]), df=np.array([0.02]), dk_frequency=1e9, frequency=frequency)[0])

    loss = -np.imag([dk_at(float(point)) for point in points[::200]])
    loss = np.interp(logarithm, logarithm[::200], loss)

    def by_loss(frequency: float) -> float:
        near = -dk_at(frequency).imag
        return float(2.0 / math.pi * step * np.sum((points * loss - frequency * near) / (points**2 - frequency**2)
                                                   * points))

    shift = np.exp(0.5 * step)  # no point of the sum falls on the pole
    one, other = 1e7 * shift, 1e10 * shift
    assert by_loss(one) - by_loss(other) == pytest.approx(dk_at(one).real - dk_at(other).real, rel=2e-3)


@pytest.mark.parametrize(("section", "mode"), [
    (inner_line(), EVEN),
    (stripline(foot=83, crest=70, thickness=16, core=(100, 3.7), prepreg=(180, 3.7), gap=90), ODD),
])
def test_a_homogeneous_line_has_exactly_the_loss_of_its_dielectric(section: Section, mode: int) -> None:
    """Exact: G / (omega C) = tan delta; attenuation pi f sqrt(Dk) tan delta / c, metal apart (low loss)."""
    df, frequency = 0.02, 3e9
    found = lossy(section, frequency=frequency, mode=mode, df=df)
    assert found.conductance[0] / (2.0 * math.pi * frequency * found.capacitance[0]) == pytest.approx(df, rel=1e-9)
    dk = float(section.foot_side[0].dk[0])
    in_air = solve(section)[mode].capacitance_in_air * PERMITTIVITY
    alone = LineParameters(frequency, np.zeros(1), 1.0 / (SPEED_OF_LIGHT**2 * in_air), found.conductance,
                           found.capacitance)
    expected = DECIBELS * math.pi * frequency * math.sqrt(dk) * df / SPEED_OF_LIGHT
    assert alone.dielectric_loss[0] == pytest.approx(expected, rel=df**2)
    assert alone.propagation.real[0] * DECIBELS == pytest.approx(alone.dielectric_loss[0], rel=1e-12)


def test_conductance_of_a_mixed_line_is_the_slope_of_capacitance_over_dk() -> None:
    """Exact to first order in the loss: G / omega = sum of Dk Df dC/dDk, here by central differences, mask included."""
    def masked(*, dk: float, mask_dk: float) -> Section:
        return microstrip(foot=120, crest=100, thickness=40, height=100, dk=dk, gap=130, mask=(25, 12, mask_dk))

    df, frequency, step = 0.01, 1e9, 1e-3
    slopes = [(solve(masked(**(at | {name: at[name] * (1 + step)})))[ODD].capacitance[0]
               - solve(masked(**(at | {name: at[name] * (1 - step)})))[ODD].capacitance[0]) / (2 * step)
              for at in [{"dk": 4.0, "mask_dk": 3.5}] for name in at]
    found = lossy(masked(dk=4.0, mask_dk=3.5), frequency=frequency, mode=ODD, df=df)
    expected = 2.0 * math.pi * frequency * PERMITTIVITY * df * sum(slopes)
    assert found.conductance[0] == pytest.approx(expected, rel=1e-4)


# --- the whole line


def test_impedance_and_propagation_against_scikit_rf() -> None:
    values = {"resistance": 35.0, "inductance": 300e-9, "conductance": 1e-2, "capacitance": 120e-12}
    for frequency in (1e5, 1e9):
        reference = DistributedCircuit(Frequency.from_f([frequency], unit="hz"), R=35.0, L=300e-9, G=1e-2, C=120e-12)
        line = LineParameters(frequency, **{name: np.array([value]) for name, value in values.items()})
        assert line.complex_impedance[0] == pytest.approx(reference.z0_characteristic[0], rel=1e-12)
        assert line.impedance[0] == pytest.approx(abs(reference.z0_characteristic[0]), rel=1e-12)
        assert line.propagation[0] == pytest.approx(reference.gamma[0], rel=1e-12)
        assert line.conductor_loss[0] + line.dielectric_loss[0] == pytest.approx(
            DECIBELS * reference.gamma[0].real, rel=1e-12)
        assert line.delay[0] == pytest.approx(reference.gamma[0].imag / (2.0 * math.pi * frequency), rel=1e-12)


@pytest.mark.parametrize(("section", "frequency", "percent"), [
    (outer_line(), 1e8, 3.3), (outer_line(), 3e8, 1.9), (outer_line(), 1e9, 1.03), (outer_line(), 1e10, 0.33),
    (inner_line(), 1e9, 1.7), (inner_line(), 1e10, 0.54),
])
def test_internal_inductance_raises_the_impedance(section: Section, frequency: float, percent: float) -> None:
    """Independent boundary-element calculation, not a publication."""
    still = solve(section)[EVEN].impedance[0]
    rise = 100.0 * (lossy(section, frequency=frequency).impedance[0] / still - 1.0)
    assert rise == pytest.approx(percent, abs=0.06), BOUNDARY_ELEMENTS


@pytest.mark.parametrize(("section", "ohm_per_metre"), [(outer_line(), 35.0), (inner_line(), 70.0)])
def test_resistance_at_one_gigahertz(section: Section, ohm_per_metre: float) -> None:
    assert lossy(section, frequency=1e9).resistance[0] == pytest.approx(ohm_per_metre, rel=0.01), BOUNDARY_ELEMENTS


def test_current_flows_all_round_the_trace() -> None:
    shares = face_shares(outer_line(), plan_for(outer_line()), mode=EVEN)
    current = {face: 100.0 * share[0] for face, share in shares.current.items()}
    assert current["foot"] == pytest.approx(50.0, abs=0.6), BOUNDARY_ELEMENTS
    assert current["crest"] == pytest.approx(22.0, abs=0.6), BOUNDARY_ELEMENTS
    assert current["left side"] + current["right side"] == pytest.approx(27.0, abs=0.6), BOUNDARY_ELEMENTS
    assert sum(current.values()) == pytest.approx(100.0, rel=1e-12)
    assert sum(share[0] for share in shares.charge.values()) == pytest.approx(1.0, rel=1e-12)


@pytest.mark.parametrize(("section", "percent"), [
    (microstrip(foot=178, crest=178, thickness=40, height=100, dk=4.0), 45.0),
    (stripline(foot=374, crest=374, thickness=70, core=(465, 4.0), prepreg=(465, 4.0)), 58.0),
])
def test_about_half_of_the_capacitance_of_fifty_ohms_is_fringe(section: Section, percent: float) -> None:
    fringe = face_shares(section, plan_for(section), mode=EVEN).fringe
    assert fringe is not None
    assert solve(section)[EVEN].impedance[0] == pytest.approx(50.0, rel=0.005), BOUNDARY_ELEMENTS
    assert 100.0 * fringe[0] == pytest.approx(percent, abs=1.0), BOUNDARY_ELEMENTS


@pytest.mark.parametrize(("width", "gap"), [(0.2, 0.1), (0.5, 0.2), (1.0, 0.5)])
def test_coupling_of_strips_in_one_dielectric(width: float, gap: float) -> None:
    """Exact, Cohn 1955: in one dielectric both are (odd - even) / (odd + even) of the modes' capacitances."""
    strip = stripline(foot=width, crest=width, thickness=0.0, core=(0.5, 3.0), prepreg=(0.5, 3.0), gap=gap)
    even, odd = coupled_strip_capacitances(width=width, gap=gap, plane_spacing=1.0)
    found = coupling(strip, plan_for(strip))
    expected = (odd - even) / (odd + even)
    assert found.inductive[0] == pytest.approx(expected, rel=1e-3)
    assert found.capacitive[0] == pytest.approx(expected, rel=1e-3)
    assert found.backward[0] == pytest.approx(0.5 * expected, rel=1e-3)


def test_roughness_raises_resistance_alone() -> None:
    smooth, rough = (lossy(inner_line(), frequency=1e9, roughness=each) for each in (0.0, 50 * UM))
    assert rough.resistance[0] == pytest.approx(2.0 * smooth.resistance[0], rel=2e-3)  # saturates at 2
    assert rough.inductance[0] == smooth.inductance[0]


def as_layers(section: Section) -> LayeredSection:
    """The same pair between planes as two traces of a stack without mirror."""
    assert section.gap is not None
    core, prepreg = section.foot_side[0], section.crest_side[0]
    shift = 0.5 * (section.gap + section.foot_width)
    assert core.df is not None
    assert prepreg.df is not None
    assert section.metals is not None
    return LayeredSection(
        (core.thickness, prepreg.thickness + section.thickness), (core.dk, prepreg.dk), True, True,
        tuple(PlacedTrace(1, False, section.foot_width, section.crest_width, section.thickness, side * shift)
              for side in (-1.0, 1.0)),
        dfs=(core.df, prepreg.df), metals=replace(section.metals, traces=section.metals.traces * 2))


def test_a_pair_without_mirror_is_the_same_pair() -> None:
    """The way of broadside pairs gives what the mirrored way gives, mode by mode: an invariant."""
    section = in_metres(stripline(foot=90, crest=80, thickness=16, core=(100, 4.0), prepreg=(150, 3.6), gap=110))
    plane = PlaneMetal(COPPER, 35 * UM, 1 * UM)
    section = replace(section, foot_side=(replace(section.foot_side[0], df=np.array([0.02]), dk_frequency=1e10),),
                      crest_side=(replace(section.crest_side[0], df=np.array([0.01])),),
                      metals=Metals((TraceMetal(COPPER, 1 * UM, 0.5 * UM),), plane, plane))
    layered = replace(as_layers(section), dk_frequencies=(1e10, None))
    for frequency in (1e6, 1e9):
        mirrored = solve_lossy(section, plan_for(section), modes=(EVEN, ODD), frequency=frequency)
        free = solve_lossy(layered, plan_layered(layered, SolverSettings()), modes=(EVEN, ODD), frequency=frequency)
        for mode in (EVEN, ODD):
            for name in ("resistance", "inductance", "conductance", "capacitance"):
                assert getattr(free[mode], name)[0] == pytest.approx(getattr(mirrored[mode], name)[0], rel=1e-8)
    near, far = coupling(section, plan_line(section, SolverSettings())), coupling(
        layered, plan_line(layered, SolverSettings()))
    assert far.backward[0] == pytest.approx(near.backward[0], rel=1e-8)


def test_sections_without_losses_are_refused() -> None:
    section = in_metres(inner_line())
    with pytest.raises(ValueError, match="metals"):
        solve_lossy(section, plan_for(section), modes=(EVEN,), frequency=1e9)
    with pytest.raises(ValueError, match="df"):
        solve_lossy(replace(section, metals=Metals((TraceMetal(COPPER),))), plan_for(section), modes=(EVEN,),
                    frequency=1e9)
