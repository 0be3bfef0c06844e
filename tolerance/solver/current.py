"""Where the current flows on the faces of the traces, and what series impedance the metal of the traces makes of it.

At frequencies of interest the current keeps to the surface and is distributed like the charge of the same copper in
air, the loss-free wave's current. Power and stored energy in the metal follow from it by surface impedance. This is
H. A. Wheeler, "Formulas for the skin effect", Proceedings of the IRE, volume 30, pages 412-424, 1942, with the
current solved for instead of the inductance differentiated; tests hold the two against each other. For planes see
planes.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import ComplexArray, FloatArray
from tolerance.sections.section import TraceMetal
from tolerance.solver.assembly import System
from tolerance.solver.layered import TraceCharges
from tolerance.solver.metal import roughness_factor, surface_resistance


@dataclass(frozen=True, slots=True)
class FaceCurrents:
    """Of one mode, for 1 A in a trace: every array of shape (sections,).

    concentration : by face, the integral of current density squared along it [1/m], both sides together; a resistance
        a metre is surface resistance times it.
    share : by face, the share of the trace's current [-].
    """

    concentration: Mapping[str, FloatArray]
    share: Mapping[str, FloatArray]


def face_currents(system: System, charges: FloatArray, *, halves: float) -> FaceCurrents:
    """Current on each face from the charges (sections, nodes) of the copper in air; faces by the name of their edge.

    halves : 2 for a single line, of which the nodes are one half, 1 for a pair.
    """
    total = charges[:, : system.trace].sum(axis=1)
    concentration, share, start = {}, {}, 0
    for nodes in system.nodes:
        stop = start + nodes.across.shape[1]
        if not nodes.edge.conducts:
            break
        on_face = charges[:, start:stop]
        concentration[nodes.edge.name] = (on_face**2 / nodes.jacobian).sum(axis=1) / (halves * total**2)
        share[nodes.edge.name] = on_face.sum(axis=1) / total
        start = stop
    return FaceCurrents(concentration, share)


def layered_face_currents(found: TraceCharges, charges: FloatArray, trace: int) -> FaceCurrents:
    """The same of one of several traces between flat plies, for 1 A in it; `charges` (sections, nodes) of the mode."""
    total = charges[:, found.owner == trace].sum(axis=1)
    concentration, share = {}, {}
    for number, name in enumerate(found.edge_names):
        owner, face = name.split(" ", 1)
        if int(owner) == trace:
            here = found.edge == number
            concentration[face] = (charges[:, here] ** 2 / found.jacobian[:, here]).sum(axis=1) / total**2
            share[face] = charges[:, here].sum(axis=1) / total
    return FaceCurrents(concentration, share)


def trace_impedance(
    currents: FaceCurrents, metal: TraceMetal, *, cross_section: FloatArray, frequency: float,
) -> ComplexArray:
    """Series impedance [ohm/m] of the metal of a trace, and of grounded copper beside it: (sections,).

    The root of the sum of squares of direct-current resistance and skin-effect impedance, (1 + j) times surface
    resistance times current concentration. Exact where the skin depth is small, exact for direct current (resistivity
    over `cross_section` [m^2]), and for a round wire exact in its inductance at both ends; in between within 5 % of
    finite elements in resistance and 1 % in the line's inductance, for rectangles four and five times as wide as
    thick. Roughness raises the resistance alone; sides are as rough as the crest, since what roughens the one before
    pressing roughens the other. Grounded copper beside a trace is wide: it adds its skin-effect impedance alone,
    which goes to nought towards direct current.
    """
    rough = {face: roughness_factor(roughness=metal.roughness_foot if face.endswith("foot") else metal.roughness_crest,
                                    conductivity=metal.conductivity, frequency=frequency)
             for face in currents.concentration}
    per_square = (1.0 + 1.0j) * surface_resistance(conductivity=metal.conductivity, frequency=frequency)
    result = np.zeros(cross_section.shape, dtype=np.complex128)
    for ground in (False, True):
        faces = [face for face in currents.concentration if face.startswith("ground") == ground]
        if not faces:
            continue
        smooth = np.asarray(sum(currents.concentration[face] for face in faces))
        roughened = np.asarray(sum(rough[face] * currents.concentration[face] for face in faces))
        direct = 0.0 if ground else direct_current_resistance(metal, cross_section=cross_section)
        series = np.sqrt(direct**2 + (smooth * per_square) ** 2)
        result += series.real * roughened / smooth + 1j * series.imag
    return result


def direct_current_resistance(metal: TraceMetal, *, cross_section: FloatArray) -> FloatArray:
    """Resistance [ohm/m] of a trace to direct current: resistivity over area [m^2]. Planes have none."""
    return np.asarray(1.0 / (metal.conductivity * cross_section))
