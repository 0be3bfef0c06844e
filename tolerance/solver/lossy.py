"""A batch of cross-sections at a frequency: resistance, inductance, conductance and capacitance a metre of each mode.

Capacitance and conductance come from one solution with complex Dk; inductance and resistance from the charges of the
copper in air, which are also its currents (see current).
"""

from __future__ import annotations

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.sections.section import Section
from tolerance.solver.assembly import charge, near_system, node_charges
from tolerance.solver.current import face_currents, plane_impedance, trace_impedance
from tolerance.solver.dielectric import at_frequency
from tolerance.solver.line import batches
from tolerance.solver.plan import Plan
from tolerance.solver.structure import media, structure
from tolerance.solver.transmission import SPEED_OF_LIGHT, LineParameters

#: Permittivity of free space [F/m], CODATA 2018.
PERMITTIVITY = 8.8541878128e-12


def solve_lossy(
    section: Section, plan: Plan, *, modes: tuple[int, ...], frequency: float,
) -> dict[int, LineParameters]:
    """Solve for even (1) and odd (-1) excitation at `frequency` [Hz]; a single line has mode 1 only.

    Of a pair the parameters are those of one trace with the other at the same or the opposite voltage. Every section
    must be possible, its dielectrics have a df and its copper `metals`: ValueError where one has none.
    """
    values = {mode: np.empty((4, section.count)) for mode in modes}
    for rows in batches(section, plan):
        for mode, found in _solve_batch(section.rows(rows), plan, modes, frequency).items():
            values[mode][:, rows] = found
    return {mode: LineParameters(frequency, *values[mode]) for mode in modes}


def _solve_batch(
    section: Section, plan: Plan, modes: tuple[int, ...], frequency: float,
) -> dict[int, FloatArray]:
    """Resistance, inductance, conductance, capacitance: (4, sections) by mode."""
    if section.metals is None:
        raise ValueError("a section without its metals, which losses need")
    parts = structure(at_frequency(section, frequency))
    filled, air = media(parts, multiples=plan.multiples, wavenumbers=plan.wavenumbers)
    system = near_system(parts.edges, parts.images, counts=[plan.count(edge) for edge in parts.edges])
    halves, omega, one = 2.0 if section.gap is None else 1.0, 2.0 * np.pi * frequency, np.ones(section.count)
    result = {}
    for mode in modes:
        admitted = halves * PERMITTIVITY * charge(system, filled, body_dk=parts.body_dk, sign=mode)
        in_air = np.asarray(node_charges(system, air, body_dk=one, sign=mode, air=True).real)
        capacitance_in_air = halves * PERMITTIVITY * in_air[:, : system.trace].sum(axis=1)
        metal = trace_impedance(section, face_currents(system, in_air, halves=halves), frequency=frequency)
        metal = metal + plane_impedance(system, in_air, parts, section.metals, sign=mode, halves=halves,
                                        frequency=frequency, wavenumbers=plan.plane_wavenumbers)
        inductance = 1.0 / (SPEED_OF_LIGHT**2 * capacitance_in_air) + metal.imag / omega
        result[mode] = np.stack([metal.real, inductance, -omega * admitted.imag, admitted.real])
    return result
