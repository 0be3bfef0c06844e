"""What an edge does to itself, integrated once: against scipy's adaptive quadrature, a general-purpose library."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from scipy.integrate import quad

from tolerance.solver.rules import graded_rule, refinement, self_potential


def _from(node: float, side: float, position: Callable[[float], float], density: int) -> float:
    """Integral from the node to one end, with s = node + side u^2, which takes the logarithm's edge off."""
    def integrand(u: float) -> float:
        s = node + side * u * u
        return float(2.0 * u * np.log(abs(position(s) - position(node)) or 1.0) * s**density)

    return float(quad(integrand, 0.0, np.sqrt(1.0 - side * node), limit=400, epsabs=1e-11)[0])


@pytest.mark.parametrize(("count", "power"), [(8, 3), (20, 3), (44, 3), (8, 2), (48, 2)])
def test_self_potential(count: int, power: int) -> None:
    """Charges w * tau with tau = 1 and tau = s^6: integral of ln |position(s_i) - position(s)| tau(s) ds."""
    rule, matrix = graded_rule(count, power), self_potential(count, power)

    def position(s: float) -> float:
        return (15 * s - 10 * s**3 + 3 * s**5) / 8 if power == 3 else (3 * s - s**3) / 2

    for row in (0, count // 2, count - 2):
        node = float(rule.nodes[row])
        for density in (0, 6):
            expected = sum(_from(node, side, position, density) for side in (-1.0, 1.0))
            found = matrix[row] @ (rule.weights * rule.nodes**density)
            assert found == pytest.approx(expected, abs=2e-8)


def test_refinement_carries_every_polynomial_exactly() -> None:
    coarse, fine = graded_rule(8, 3), graded_rule(20, 3)
    for power in range(8):
        carried = refinement(8, 20) @ (coarse.weights * coarse.nodes**power)
        assert carried == pytest.approx(fine.weights * fine.nodes**power, abs=1e-13)
