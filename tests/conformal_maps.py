"""Exact capacitances by conformal mapping, to check the field solver: over vacuum permittivity, in air, single traces.

A trapezoid (or a strip) over one plane or between two: the right half of the section is mapped onto the upper half
plane by a Schwarz-Christoffel integral, whose parameters are found so that every edge gets its length; the
capacitance then is a ratio of complete elliptic integrals. Quadrature and root finding are scipy's, to about 1e-11.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt
from scipy.integrate import quad
from scipy.optimize import brentq, root
from scipy.special import ellipe, ellipeinc, ellipk, ellipkinc, ellipkm1

Floats = npt.NDArray[np.float64]


def centred_strip_capacitance(*, width: float, plane_spacing: float) -> float:
    """A strip without thickness midway between planes (Cohn 1954)."""
    x = 0.5 * np.pi * width / plane_spacing
    return float(4.0 * ellipkm1(np.cosh(x) ** -2.0) / ellipkm1(np.tanh(x) ** 2))


def coupled_strip_capacitances(*, width: float, gap: float, plane_spacing: float) -> tuple[float, float]:
    """Even and odd capacitance of one of two such strips side by side (Cohn 1955)."""
    inner, outer = np.tanh(0.5 * np.pi * np.array([width, width + gap]) / plane_spacing)
    even, odd = (4.0 * ellipk(k**2) / ellipkm1(k**2) for k in (inner * outer, inner / outer))
    return float(even), float(odd)


def trapezoid_capacitance(
    *, foot: float, crest: float, thickness: float, below: float, above: float | None = None,
) -> float:
    """Capacitance of a trapezoid `below` over a plane and, unless None, `above` (crest to plane) under another.

    The half section has its corners at, on the real axis: plane below x = 0 (`first`), middle of the foot (0), ends
    of foot and crest, middle of the crest (1), plane above x = 0 (`last`, at infinity without a plane).
    """
    side = np.hypot(thickness, 0.5 * (foot - crest))
    lengths = np.array([below, 0.5 * foot, side, 0.5 * crest])
    angle = np.arctan2(thickness, 0.5 * (foot - crest)) / np.pi  # inside the copper at its foot, over pi
    scale = 0.0 if above is None else (below + thickness + above) / np.pi

    def lengths_of(unknowns: Floats) -> Floats:
        corners, stretch = _corners(unknowns, strip=False, scale=scale)
        powers = [-0.5, -0.5, 1.0 - angle, angle, -0.5, -0.5][: len(corners)]
        return stretch * _edge_lengths(corners, powers)

    start = np.array([0.5, -0.2, 0.5, -0.2])
    return _solve(lengths_of, lengths, start, strip=False, scale=scale)


def strip_capacitance(*, width: float, below: float, above: float | None = None) -> float:
    """Capacitance of a strip without thickness, `below` over a plane and, unless None, `above` under another."""
    scale = 0.0 if above is None else (below + above) / np.pi

    def lengths_of(unknowns: Floats) -> Floats:
        corners, stretch = _corners(unknowns, strip=True, scale=scale)
        return stretch * _edge_lengths(corners, [-0.5, -0.5, 1.0, -0.5, -0.5][: len(corners)])

    return _solve(lengths_of, np.array([below, 0.5 * width, 0.5 * width]), np.array([0.5, 0.0, 0.5]), strip=True,
                  scale=scale)


def strip_over_plane_capacitance(*, width_over_height: float) -> float:
    """The same of a strip over one plane in closed form; exact to 1e-10 up to a ratio of 10.

    A. E. H. Love, "Some electrostatic distributions in two dimensions", Proc. London Math. Soc. 22 (1923), 337-369;
    written out here from the Schwarz-Christoffel integral.
    """
    def width_of(log_parameter: float) -> float:
        m = np.exp(log_parameter)  # k^2; the complementary parameter is n
        n = 1.0 - m
        sine = np.sqrt((1.0 - m * ellipkm1(m) / ellipe(n)) / n)
        phi = np.arcsin(sine)
        bracket = (ellipe(n) / ellipkm1(m) * ellipkinc(phi, n) - ellipeinc(phi, n)
                   + n * sine * np.cos(phi) / np.sqrt(1.0 - n * sine**2))
        return float(4.0 * ellipkm1(m) / np.pi * bracket)

    m = np.exp(brentq(lambda value: width_of(value) - width_over_height, -30.0, -1e-3, xtol=1e-14))
    return float(2.0 * ellipkm1(m) / ellipk(m))


def _corners(unknowns: Floats, *, strip: bool, scale: float) -> tuple[Floats, float]:
    """Corners on the real axis in order, and the factor of the map."""
    first = -np.exp(unknowns[0])
    last = [1.0 + np.exp(unknowns[-1])] if scale else []
    if strip:
        between = [_share(unknowns[1])]
    else:
        foot_end = _share(unknowns[1])
        between = [foot_end, foot_end + (1.0 - foot_end) * _share(unknowns[2])]
    stretch = scale or float(np.exp(unknowns[-1]))
    return np.array([first, 0.0, *between, 1.0, *last]), stretch


def _share(unknown: float) -> float:
    return float(1.0 / (1.0 + np.exp(-unknown)))


def _edge_lengths(corners: Floats, powers: list[float]) -> Floats:
    """Integral of the product of |x - corner|^power between neighbouring corners, up to the corner 1."""
    result = []
    for number in range(int(np.flatnonzero(corners == 1.0)[0])):
        start, stop = corners[number], corners[number + 1]
        others = [place for place in range(len(corners)) if place not in (number, number + 1)]

        def rest(x: float, others: list[int] = others) -> float:
            return float(np.prod([abs(x - corners[place]) ** powers[place] for place in others]))

        result.append(quad(rest, start, stop, weight="alg", wvar=(powers[number], powers[number + 1]),
                           epsabs=0.0, epsrel=1e-12, limit=400)[0])
    return np.array(result)


def _solve(
    lengths_of: Callable[[Floats], Floats], lengths: Floats, start: Floats, *, strip: bool, scale: float,
) -> float:
    def misfit(unknowns: Floats) -> Floats:
        return np.asarray(np.log(lengths_of(unknowns) / lengths))

    found = root(misfit, start, tol=1e-13)
    assert np.abs(found.fun).max() < 1e-9, found.message
    corners = _corners(found.x, strip=strip, scale=scale)[0]
    first, last = corners[0], corners[-1] if scale else np.inf
    outer = 1.0 if np.isinf(last) else (last - 1.0) / last
    parameter = -first * outer / (1.0 - first)  # k^2, a cross ratio of the four ends of the electrodes
    return float(2.0 * ellipkm1(parameter) / ellipk(parameter))
