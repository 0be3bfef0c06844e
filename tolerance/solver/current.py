"""Where the current flows: on the faces of the copper and in the planes, and what series impedance that makes.

At frequencies of interest the current keeps to the surface and is distributed like the charge of the same copper in
air, the loss-free wave's current. Power and stored energy in the metal follow from it by surface impedance. This is
H. A. Wheeler, "Formulas for the skin effect", Proceedings of the IRE, volume 30, pages 412-424, 1942, with the
current solved for instead of the inductance differentiated; tests hold the two against each other.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import ComplexArray, FloatArray
from tolerance.sections.section import Metals, PlaneMetal, Section
from tolerance.solver.assembly import System
from tolerance.solver.kernels import LAST_EXPONENT
from tolerance.solver.metal import PERMEABILITY, roughness_factor, surface_resistance
from tolerance.solver.structure import Structure


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
    """Current on each face from the charges (sections, nodes) of the copper in air.

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


def trace_impedance(section: Section, currents: FaceCurrents, *, frequency: float) -> ComplexArray:
    """Series impedance [ohm/m] of the metal of a trace (of a coplanar line: and of the copper beside it): (sections,).

    The root of the sum of squares of direct-current resistance and skin-effect impedance, (1 + j) times surface
    resistance times current concentration. Exact where the skin depth is small, exact for direct current (resistivity
    over area), and for a round wire exact in its inductance at both ends; in between within 5 % of finite elements in
    resistance and 1 % in the line's inductance, for rectangles two to five times as wide as thick. Roughness raises the
    resistance alone. Grounded copper beside a trace is wide: it adds its skin-effect impedance, which goes towards
    direct current.
    """
    metals = _metals(section)
    rough = {face: roughness_factor(roughness=metals.roughness_foot if face.endswith("foot")
                                    else metals.roughness_crest, conductivity=metals.conductivity, frequency=frequency)
             for face in currents.concentration}
    per_square = (1.0 + 1.0j) * surface_resistance(conductivity=metals.conductivity, frequency=frequency)
    result = np.zeros(section.count, dtype=np.complex128)
    for ground in (False, True):
        faces = [face for face in currents.concentration if face.startswith("ground") == ground]
        if not faces:
            continue
        smooth = np.asarray(sum(currents.concentration[face] for face in faces))
        roughened = np.asarray(sum(rough[face] * currents.concentration[face] for face in faces))
        direct = 0.0 if ground else direct_current_resistance(section)
        metal = np.sqrt(direct**2 + (smooth * per_square) ** 2)
        result += metal.real * roughened / smooth + 1j * metal.imag
    return result


def cross_section(section: Section) -> FloatArray:
    """Area of one trace [m^2]: (sections,)."""
    return 0.5 * section.thickness * (section.foot_width + section.crest_width)


def direct_current_resistance(section: Section) -> FloatArray:
    """Resistance [ohm/m] of one trace to direct current: (sections,). Planes have none: they are infinite."""
    return np.asarray(1.0 / (_metals(section).conductivity * cross_section(section)))


def plane_impedance(
    system: System, charges: FloatArray, parts: Structure, metals: Metals, *, sign: int, halves: float,
    frequency: float, wavenumbers: int,
) -> ComplexArray:
    """Series impedance [ohm/m] of the metal of the planes, for the currents of the traces: (sections,).

    For each wavenumber across, the vector potential a at the faces of the planes is what currents s induced in perfect
    planes make on the field inside the metal and between the planes; the sum of a s is the change of flux. With one
    thick plane and a filament this is J. R. Carson, "Wave propagation in overhead wires with ground return", Bell
    System Technical Journal, volume 5, pages 539-554, 1926. At small skin depth it is surface resistance times the
    square of the current density in the planes; towards direct current the return spreads and its resistance goes.
    """
    below, above = _plane_distances(parts)
    across, height, weights = _sources(system, charges)
    wavenumber, steps = _wavenumbers(system, below, above, wavenumbers)
    phase = wavenumber[:, None, :] * across[:, :, None]
    wave = (np.cos(phase) if sign > 0 else np.sin(phase)) * weights[:, :, None]

    def induced(distance: FloatArray, other: FloatArray) -> FloatArray:
        """Sum over the charges of sinh(k (spacing - distance)) / sinh(k spacing), `other` = spacing - distance."""
        decay = np.exp(-wavenumber[:, None, :] * distance[:, :, None])
        if np.all(np.isfinite(other)):
            spacing = distance + other
            decay *= np.expm1(-2.0 * wavenumber[:, None, :] * other[:, :, None])
            decay /= np.expm1(-2.0 * wavenumber[:, None, :] * spacing[:, :, None])
        return np.asarray((wave * decay).sum(axis=1))

    far = np.full_like(height, np.inf)
    to_lower = far if below is None else height + below[:, None]
    to_upper = far if above is None else above[:, None] - height
    lower = None if below is None else (induced(to_lower, to_upper), metals.foot_plane)
    upper = None if above is None else (induced(to_upper, to_lower), metals.crest_plane)
    spacing = None if below is None or above is None else below + above
    flux = _flux(wavenumber, [plane for plane in (lower, upper) if plane is not None], spacing, frequency=frequency)
    total = charges[:, : system.trace].sum(axis=1)
    scale = 4.0 * frequency * PERMEABILITY * 1j / (halves * total**2)
    result = np.zeros(total.shape, dtype=np.complex128)
    for (_, metal), potential in zip([p for p in (lower, upper) if p is not None], flux, strict=True):
        assert metal is not None
        part = scale * (potential * steps).sum(axis=1)
        rough = roughness_factor(roughness=metal.roughness, conductivity=metal.conductivity, frequency=frequency)
        result += rough * part.real + 1j * part.imag
    return result


def _flux(
    wavenumber: FloatArray, planes: list[tuple[FloatArray, PlaneMetal | None]], spacing: FloatArray | None, *,
    frequency: float,
) -> list[ComplexArray]:
    """Flux a s that each plane adds, per wavenumber: (sections, k)."""
    inside = []
    for _, metal in planes:
        if metal is None:
            raise ValueError("a plane without its metal, which losses need")
        inside.append(_growth_inside(wavenumber, metal, frequency=frequency))
    if spacing is None:
        (induced, _), = planes
        return [np.asarray(induced**2 / (inside[0] + wavenumber))]
    through = wavenumber * spacing[:, None]
    straight, crossing = wavenumber / np.tanh(through), wavenumber / np.sinh(np.minimum(through, 300.0))
    lower, upper = (growth + straight for growth in inside)
    (low, _), (high, _) = planes
    together = lower * upper - crossing**2
    return [np.asarray(low * (upper * low + crossing * high) / together),
            np.asarray(high * (lower * high + crossing * low) / together)]


def _growth_inside(wavenumber: FloatArray, metal: PlaneMetal, *, frequency: float) -> ComplexArray:
    """Slope over value of the vector potential at the face of a plane of finite thickness, air behind it [1/m]."""
    growth = np.sqrt(wavenumber**2 + 2j * np.pi * frequency * PERMEABILITY * metal.conductivity)
    through = np.tanh(growth * metal.thickness)
    return np.asarray(growth * (wavenumber + growth * through) / (growth + wavenumber * through))


def _plane_distances(parts: Structure) -> tuple[FloatArray | None, FloatArray | None]:
    """Planes below and above, from the lower face of the body [m]; None where there is none."""
    below = parts.below.depth if parts.below.plane else None
    if parts.above is None or parts.body_thickness is None or not parts.above.plane:
        return below, None
    return below, np.asarray(parts.body_thickness + parts.above.depth)


def _sources(system: System, charges: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Places and charges that the planes see, (sections, sources): tails at their finer places."""
    across, height, weights, start = [], [], [], 0
    for nodes in system.nodes:
        stop = start + nodes.across.shape[1]
        if not nodes.edge.conducts:
            break
        finer = nodes.edge.tail
        across.append(nodes.fine_across if finer else nodes.across)
        height.append(nodes.fine_height if finer else nodes.height)
        weights.append(charges[:, start:stop] @ nodes.refine.T if finer else charges[:, start:stop])
        start = stop
    return np.concatenate(across, axis=1), np.concatenate(height, axis=1), np.concatenate(weights, axis=1)


def _wavenumbers(
    system: System, below: FloatArray | None, above: FloatArray | None, count: int,
) -> tuple[FloatArray, FloatArray]:
    """Wavenumbers and their steps [1/m], each (sections, count), crowded towards nought."""
    nodes, weights = np.polynomial.legendre.leggauss(count)
    ways = []
    if below is not None:
        ways.append(below + system.height[:, : system.copper].min(axis=1))
    if above is not None:
        ways.append(above - system.height[:, : system.copper].max(axis=1))
    last = 0.5 * LAST_EXPONENT / np.minimum.reduce(ways)
    near = 0.5 * (1.0 + nodes)
    return last[:, None] * near**3, last[:, None] * (1.5 * weights * near**2)


def _metals(section: Section) -> Metals:
    if section.metals is None:
        raise ValueError("a section without its metals, which losses need")
    return section.metals
