"""A microstrip of eight varying inputs in closed form, and what is known of its yield: a case for the statistics.

Drawn width, etch, two plies and their Dk, foil and plating; the width is drawn width - etch, the plies lie in series.
Impedance by E. Hammerstad and O. Jensen, "Accurate models for microstrip computer-aided design", IEEE MTT-S
International Microwave Symposium Digest, 1980, pages 407-409, with their correction for thickness.

The reference values are no publication: they were measured beforehand, with 16 x 2^20 scrambled Sobol' points on an
expansion of degree 5 whose largest error is 4e-6 ohm; limits 45 and 55 ohm.
"""

from __future__ import annotations

import math

import numpy as np

from tolerance.arrays import FloatArray
from tolerance.process.changes import Change, Moments

NAMES = ("drawn width", "etch", "ply 1", "ply 2", "dk 1", "dk 2", "foil", "plating")
NOMINAL = np.array([0.200, 0.020, 0.055, 0.055, 4.2, 3.9, 0.018, 0.025])  # lengths in mm
TOLERANCE = np.array([0.05, 0.10, 0.10, 0.10, 0.05, 0.05, 0.10, 0.10])
LOW, HIGH = 45.0, 55.0

YIELD_NORMAL = 0.9885682  # deviation = tolerance / 2
YIELD_UNIFORM = 0.977181  # standard error 1.4e-5
HALVED = (0.99561, 0.98890, 0.99447, 0.99505, 0.98968, 0.98985, 0.98865, 0.98872)  # yields, in the order of NAMES
BY_LOG_DEVIATION = (-0.0224, -0.0009, -0.0180, -0.0201, -0.0031, -0.0036, -0.0002, -0.0004)
BY_MEAN = (0.0172, -0.0034, -0.0154, -0.0163, 0.0061, 0.0066, 0.0016, 0.0022)  # of yield, for each deviation


def impedance(inputs: FloatArray) -> FloatArray:
    """Impedance [ohm] (points,) of inputs (points, 8)."""
    drawn, etch, one, two, dk_one, dk_two, foil, plating = inputs.T
    height, width, thickness = one + two, drawn - etch, foil + plating
    dk = height / (one / dk_one + two / dk_two)
    u, t = width / height, thickness / height
    wider = t / np.pi * np.log1p(4.0 * math.e / (t / np.tanh(np.sqrt(6.517 * u)) ** 2))
    u = u + 0.5 * (1.0 + 1.0 / np.cosh(np.sqrt(dk - 1.0))) * wider
    f = 6.0 + (2.0 * np.pi - 6.0) * np.exp(-((30.666 / u) ** 0.7528))
    in_air = 376.730313668 / (2.0 * np.pi) * np.log(f / u + np.sqrt(1.0 + 4.0 / u**2))
    a = 1.0 + np.log((u**4 + (u / 52.0) ** 2) / (u**4 + 0.432)) / 49.0 + np.log1p((u / 18.1) ** 3) / 18.7
    b = 0.564 * ((dk - 0.9) / (dk + 3.0)) ** 0.053
    effective = 0.5 * (dk + 1.0) + 0.5 * (dk - 1.0) * (1.0 + 10.0 / u) ** (-a * b)
    return np.asarray(in_air / np.sqrt(effective), dtype=np.float64)


def normal(points: FloatArray, change: Change | None = None, *, sigmas: float = 2.0) -> FloatArray:
    """Impedance [ohm] at independent standard normals (points, 8); `sigmas`: deviations that a tolerance covers."""
    inputs = NOMINAL * (1.0 + TOLERANCE / sigmas * points)
    if change is not None:
        inputs = np.column_stack([change.of(name, column) for name, column in zip(NAMES, inputs.T, strict=True)])
    return impedance(inputs)


def normal_moments() -> list[dict[str, Moments]]:
    """What each input moves: itself."""
    return [{name: Moments(float(nominal), float(nominal * tolerance / 2.0), logarithmic=False)}
            for name, nominal, tolerance in zip(NAMES, NOMINAL, TOLERANCE, strict=True)]
