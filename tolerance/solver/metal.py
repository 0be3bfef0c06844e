"""What metal does to a wave along its face: skin depth, surface resistance, roughness."""

from __future__ import annotations

import numpy as np

#: Permeability of free space [H/m], CODATA 2018; copper has the same.
PERMEABILITY = 1.25663706212e-6


def skin_depth(*, conductivity: float, frequency: float) -> float:
    """Depth [m] at which the current density in thick metal has fallen to 1/e: conductivity [S/m], frequency [Hz].

    Textbook: sqrt(2 / (omega mu sigma)); good conductors, any frequency of circuits.
    """
    return float(1.0 / np.sqrt(np.pi * frequency * PERMEABILITY * conductivity))


def surface_resistance(*, conductivity: float, frequency: float) -> float:
    """Resistance [ohm] of a square of thick, smooth metal: 1 / (conductivity * skin depth)."""
    return 1.0 / (conductivity * skin_depth(conductivity=conductivity, frequency=frequency))


def roughness_factor(*, roughness: float, conductivity: float, frequency: float) -> float:
    """By how much a face of rms `roughness` [m] loses more than a smooth one: from 1 to 2.

    1 + (2 / pi) arctan(1.4 (roughness / depth)^2), a fit to calculations of S. P. Morgan 1949 for grooves; good to
    about 1 um and to a few GHz on rougher foil, where it saturates at 2.
    Source: E. Hammerstad, F. Bekkadal, "Microstrip Handbook", ELAB report STF44 A74169, Trondheim, 1975.
    """
    depth = skin_depth(conductivity=conductivity, frequency=frequency)
    return float(1.0 + 2.0 / np.pi * np.arctan(1.4 * (roughness / depth) ** 2))


def sphere_roughness_factor(
    *, sphere_radius: float, spheres_per_area: float, conductivity: float, frequency: float, flat_factor: float = 1.0,
) -> float:
    """The same for a face of snowball-like nodules: `spheres_per_area` [1/m^2] of `sphere_radius` [m].

    flat_factor + 3/2 * spheres_per_area 4 pi radius^2 / (1 + depth / radius + depth^2 / (2 radius^2)). Needs what only
    a micrograph tells, so no scenario key leads here: the format has rms roughness. As recalled from P. G. Huray and
    others, "Fundamentals of a 3-D snowball model for surface roughness power losses", IEEE Workshop on Signal
    Propagation on Interconnects, 2007.
    """
    ratio = skin_depth(conductivity=conductivity, frequency=frequency) / sphere_radius
    covered = spheres_per_area * 4.0 * np.pi * sphere_radius**2
    return float(flat_factor + 1.5 * covered / (1.0 + ratio + 0.5 * ratio**2))
