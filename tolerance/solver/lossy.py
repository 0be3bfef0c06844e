"""A batch of cross-sections at a frequency: resistance, inductance, conductance and capacitance a metre of each mode.

Capacitance and conductance come from one solution with complex Dk; inductance and resistance from the charges of the
copper in air, which are also its currents (see current, planes).
"""

from __future__ import annotations

import numpy as np

from tolerance.arrays import ComplexArray, FloatArray, NumberArray
from tolerance.sections.layered import LayeredSection
from tolerance.sections.section import Metals, Section
from tolerance.solver.assembly import charge, near_system, node_charges
from tolerance.solver.current import face_currents, layered_face_currents, trace_impedance
from tolerance.solver.dielectric import at_frequency, layered_at_frequency
from tolerance.solver.layered import LayeredPlan, TraceCharges, capacitance_matrix, trace_charges
from tolerance.solver.line import AnyPlan, AnySection, batches, layered_batches, mode_capacitance
from tolerance.solver.plan import Plan
from tolerance.solver.planes import Sources, plane_impedance, sources_of
from tolerance.solver.structure import media, structure
from tolerance.solver.transmission import SPEED_OF_LIGHT, LineParameters

#: Permittivity of free space [F/m], CODATA 2018.
PERMITTIVITY = 8.8541878128e-12


def solve_lossy(
    section: AnySection, plan: AnyPlan, *, modes: tuple[int, ...], frequency: float,
) -> dict[int, LineParameters]:
    """Solve for even (1) and odd (-1) excitation at `frequency` [Hz]; a single line has mode 1 only.

    Modes as of solve_modes: twice the odd mode's voltage for the same current is the differential line, half the even
    mode's the common one. Every section must be possible, its dielectrics have a df and its copper `metals`:
    ValueError where one has none.
    """
    values = {mode: np.empty((4, section.count)) for mode in modes}
    if isinstance(section, LayeredSection):
        assert isinstance(plan, LayeredPlan)
        for chosen in layered_batches(section, plan):
            for mode, found in _solve_layered_batch(section.rows(chosen), plan, modes, frequency).items():
                values[mode][:, chosen] = found
    else:
        assert isinstance(plan, Plan)
        for rows in batches(section, plan):
            for mode, found in _solve_batch(section.rows(rows), plan, modes, frequency).items():
                values[mode][:, rows] = found
    return {mode: LineParameters(frequency, *values[mode]) for mode in modes}


def cross_section(section: AnySection, trace: int = 0) -> FloatArray:
    """Area of a trace [m^2]: (sections,)."""
    shape = section.traces[trace] if isinstance(section, LayeredSection) else section
    return 0.5 * shape.thickness * (shape.foot_width + shape.crest_width)


def _solve_batch(
    section: Section, plan: Plan, modes: tuple[int, ...], frequency: float,
) -> dict[int, FloatArray]:
    """Resistance, inductance, conductance, capacitance: (4, sections) by mode."""
    metals = _metals(section)
    parts = structure(at_frequency(section, frequency))
    filled, air = media(parts, multiples=plan.multiples, wavenumbers=plan.wavenumbers)
    system = near_system(parts.edges, parts.images, counts=[plan.count(edge) for edge in parts.edges])
    halves, one = 2.0 if section.gap is None else 1.0, np.ones(section.count)
    result = {}
    for mode in modes:
        capacitance = halves * charge(system, filled, body_dk=parts.body_dk, sign=mode)
        in_air = np.asarray(node_charges(system, air, body_dk=one, sign=mode, air=True))
        total = in_air[:, : system.trace].sum(axis=1)
        metal = trace_impedance(face_currents(system, in_air, halves=halves), metals.traces[0],
                                cross_section=cross_section(section), frequency=frequency)
        in_planes = plane_impedance(sources_of(system, parts, in_air), metals, parities=(mode,), frequency=frequency,
                                    wavenumbers=plan.plane_wavenumbers)
        metal = metal + in_planes * 2.0 / (halves * total**2)  # both halves of the field, for 1 A in a trace
        result[mode] = _stack(metal, capacitance, halves * total, frequency)
    return result


def _solve_layered_batch(
    section: LayeredSection, plan: LayeredPlan, modes: tuple[int, ...], frequency: float,
) -> dict[int, FloatArray]:
    metals = _metals(section)
    filled = capacitance_matrix(layered_at_frequency(section, frequency), plan)
    air = trace_charges(section.in_air(), plan)
    result = {}
    for mode in modes:
        charges = mode_charges(air, mode)
        metal = _layered_metal(section, air, charges, metals, plan, frequency)
        result[mode] = _stack((2.0 if mode > 0 else 0.5) * metal, mode_capacitance(filled, mode),
                              np.asarray(mode_capacitance(air.matrix, mode)), frequency)
    return result


def mode_charges(found: TraceCharges, mode: int) -> FloatArray:
    """Charges (sections, nodes) of two tied traces that make 1 together (mode 1), or of 1 and -1 (mode -1)."""
    matrix = found.matrix
    if mode > 0:
        voltages = np.ones(matrix.shape[:2]) / matrix.sum(axis=(1, 2))[:, None]
    else:
        wanted = np.broadcast_to(np.array([[1.0], [-1.0]]), (len(matrix), 2, 1))
        voltages = np.linalg.solve(matrix, wanted)[:, :, 0]
    return np.asarray(np.einsum("sut,st->su", found.charges, voltages))


def _layered_metal(
    section: LayeredSection, air: TraceCharges, charges: FloatArray, metals: Metals, plan: LayeredPlan,
    frequency: float,
) -> ComplexArray:
    """Series impedance [ohm/m] for 1 A in the loop, or in both tied traces together: (sections,)."""
    result = np.zeros(section.count, dtype=np.complex128)
    for trace, metal in enumerate(metals.traces):
        current = charges[:, air.owner == trace].sum(axis=1)
        series = trace_impedance(layered_face_currents(air, charges, trace), metal,
                                 cross_section=cross_section(section, trace), frequency=frequency)
        result += current**2 * series
    spacing = np.asarray(sum(section.thicknesses))
    sources = Sources(air.across, charges, air.height if section.bottom_plane else None,
                      spacing[:, None] - air.height if section.top_plane else None)
    return result + plane_impedance(sources, metals, parities=(1, -1), frequency=frequency,
                                    wavenumbers=plan.plane_wavenumbers)


def _stack(
    metal: ComplexArray, capacitance: NumberArray, capacitance_in_air: FloatArray, frequency: float,
) -> FloatArray:
    """From the metal's impedance and the complex capacitance over vacuum permittivity: (4, sections)."""
    omega = 2.0 * np.pi * frequency
    external = 1.0 / (SPEED_OF_LIGHT**2 * PERMITTIVITY * capacitance_in_air)
    admitted = PERMITTIVITY * capacitance
    return np.stack([metal.real, external + metal.imag / omega, -omega * admitted.imag, admitted.real])


def _metals(section: AnySection) -> Metals:
    if section.metals is None:
        raise ValueError("a section without its metals, which losses need")
    return section.metals
