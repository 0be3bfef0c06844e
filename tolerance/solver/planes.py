"""The series impedance that the metal of the reference planes makes of the currents of the traces."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import ComplexArray, FloatArray
from tolerance.sections.section import Metals, PlaneMetal
from tolerance.solver.assembly import System
from tolerance.solver.kernels import LAST_EXPONENT
from tolerance.solver.metal import PERMEABILITY, roughness_factor
from tolerance.solver.structure import Structure


@dataclass(frozen=True, slots=True)
class Sources:
    """Charges of copper in air, that is currents, and how far they are from the planes: all (sections, sources).

    to_lower, to_upper : distance [m]; None where there is no such plane.
    """

    across: FloatArray
    charges: FloatArray
    to_lower: FloatArray | None
    to_upper: FloatArray | None


def sources_of(system: System, parts: Structure, charges: FloatArray) -> Sources:
    """The sources of the right half of a mirrored section; far copper at its finer places."""
    across, height, weights, start = [], [], [], 0
    for nodes in system.nodes:
        stop = start + nodes.across.shape[1]
        if not nodes.edge.conducts:
            break
        across.append(nodes.places.far_across)
        height.append(nodes.places.far_height)
        weights.append(charges[:, start:stop] if nodes.spread is None else charges[:, start:stop] @ nodes.spread.T)
        start = stop
    heights = np.concatenate(height, axis=1)
    to_lower = heights + parts.below.depth[:, None] if parts.below.plane else None
    to_upper = None
    if parts.above is not None and parts.body_thickness is not None and parts.above.plane:
        to_upper = (parts.body_thickness + parts.above.depth)[:, None] - heights
    return Sources(np.concatenate(across, axis=1), np.concatenate(weights, axis=1), to_lower, to_upper)


def plane_impedance(
    sources: Sources, metals: Metals, *, parities: tuple[int, ...], frequency: float, wavenumbers: int,
) -> ComplexArray:
    """Power and stored energy in the planes as an impedance times current squared [ohm/m]: (sections,).

    parities : 1 and -1 for the even and odd parts of the sources about x = 0; of a mirrored section its own alone.

    For each wavenumber across, the vector potential a at the faces of the planes is what currents s induced in perfect
    planes make on the field inside the metal and between the planes; the sum of a s is the change of flux. With one
    thick plane and a filament this is J. R. Carson, "Wave propagation in overhead wires with ground return", Bell
    System Technical Journal, volume 5, pages 539-554, 1926. At small skin depth it is surface resistance times the
    square of the current density in the planes; towards direct current the return spreads and its resistance goes.
    """
    wavenumber, steps = _wavenumbers(sources, wavenumbers)
    planes = [plane for distance, plane in ((sources.to_lower, metals.lower), (sources.to_upper, metals.upper))
              if distance is not None]
    phase = wavenumber[:, None, :] * sources.across[:, :, None]
    result = np.zeros(len(wavenumber), dtype=np.complex128)
    for parity in parities:
        wave = (np.cos(phase) if parity > 0 else np.sin(phase)) * sources.charges[:, :, None]
        induced = _induced(wave, wavenumber, sources)
        for metal, flux in zip(planes, _flux(wavenumber, induced, planes, sources, frequency=frequency), strict=True):
            assert metal is not None
            part = 2j * frequency * PERMEABILITY * (flux * steps).sum(axis=1)
            rough = roughness_factor(roughness=metal.roughness, conductivity=metal.conductivity, frequency=frequency)
            result += rough * part.real + 1j * part.imag
    return result


def _induced(wave: FloatArray, wavenumber: FloatArray, sources: Sources) -> list[FloatArray]:
    """Currents in perfect planes by wavenumber, for each plane: (sections, k).

    A source induces exp(-k distance) in one plane alone, sinh(k (spacing - distance)) / sinh(k spacing) in one of two.
    """
    ways = [way for way in (sources.to_lower, sources.to_upper) if way is not None]
    k = wavenumber[:, None, :]
    decays = [np.exp(-k * way[:, :, None]) for way in ways]
    if len(ways) == 2:
        whole = np.expm1(-2.0 * k * (ways[0] + ways[1])[:, :, None])
        decays = [decay * np.expm1(-2.0 * k * other[:, :, None]) / whole
                  for decay, other in zip(decays, reversed(ways), strict=True)]
    return [np.asarray((wave * decay).sum(axis=1)) for decay in decays]


def _flux(
    wavenumber: FloatArray, induced: list[FloatArray], planes: list[PlaneMetal | None], sources: Sources, *,
    frequency: float,
) -> list[ComplexArray]:
    """Flux a s that each plane adds, by wavenumber: (sections, k)."""
    inside = []
    for metal in planes:
        if metal is None:
            raise ValueError("a plane without its metal, which losses need")
        inside.append(_growth_inside(wavenumber, metal, frequency=frequency))
    if sources.to_lower is None or sources.to_upper is None:
        return [np.asarray(induced[0] ** 2 / (inside[0] + wavenumber))]
    through = wavenumber * (sources.to_lower + sources.to_upper)[:, :1]
    straight, crossing = wavenumber / np.tanh(through), wavenumber / np.sinh(np.minimum(through, 300.0))
    lower, upper = (growth + straight for growth in inside)
    together = lower * upper - crossing**2
    low, high = induced
    return [np.asarray(low * (upper * low + crossing * high) / together),
            np.asarray(high * (lower * high + crossing * low) / together)]


def _growth_inside(wavenumber: FloatArray, metal: PlaneMetal, *, frequency: float) -> ComplexArray:
    """Slope over value of the vector potential at the face of a plane of finite thickness, air behind it [1/m]."""
    growth = np.sqrt(wavenumber**2 + 2j * np.pi * frequency * PERMEABILITY * metal.conductivity)
    through = np.tanh(growth * metal.thickness)
    return np.asarray(growth * (wavenumber + growth * through) / (growth + wavenumber * through))


def _wavenumbers(sources: Sources, count: int) -> tuple[FloatArray, FloatArray]:
    """Wavenumbers and their steps [1/m], each (sections, count), crowded towards nought."""
    nodes, weights = np.polynomial.legendre.leggauss(count)
    ways = [way.min(axis=1) for way in (sources.to_lower, sources.to_upper) if way is not None]
    last = 0.5 * LAST_EXPONENT / np.minimum.reduce(ways)
    near = 0.5 * (1.0 + nodes)
    return last[:, None] * near**3, last[:, None] * (1.5 * weights * near**2)
