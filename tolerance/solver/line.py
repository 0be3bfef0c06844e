"""Impedance of a batch of cross-sections by the boundary-element solution, lossless and static."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray, IntArray
from tolerance.sections.section import Section
from tolerance.solver.assembly import charge, near_system
from tolerance.solver.plan import Plan
from tolerance.solver.structure import media, structure, topology
from tolerance.solver.transmission import SPEED_OF_LIGHT

#: Impedance of free space [ohm], CODATA 2018.
FREE_SPACE_IMPEDANCE = 376.730313668


@dataclass(frozen=True, slots=True)
class ModeSolution:
    """One mode of a batch: capacitance to the planes over vacuum permittivity, filled and in air; (sections,).

    For a pair it is the capacitance of one trace with the other at the same (even) or opposite (odd) potential.
    """

    capacitance: FloatArray
    capacitance_in_air: FloatArray

    @property
    def impedance(self) -> FloatArray:
        """Characteristic impedance [ohm] of the mode."""
        return np.asarray(FREE_SPACE_IMPEDANCE / np.sqrt(self.capacitance * self.capacitance_in_air))

    @property
    def effective_dk(self) -> FloatArray:
        """Effective Dk [-]."""
        return np.asarray(self.capacitance / self.capacitance_in_air)

    @property
    def delay(self) -> FloatArray:
        """Delay a metre [s/m]."""
        return np.asarray(np.sqrt(self.effective_dk) / SPEED_OF_LIGHT)


def solve_modes(section: Section, plan: Plan, *, modes: tuple[int, ...]) -> dict[int, ModeSolution]:
    """Solve for even (1) and odd (-1) excitation; a single line has mode 1 only.

    Every section must be possible (see Section.possible). The result does not depend on how sections are batched.
    """
    count = section.count
    filled = {mode: np.empty(count) for mode in modes}
    air = {mode: np.empty(count) for mode in modes}
    for part in batches(section, plan):
        for mode, (in_medium, in_air) in _solve_batch(section.rows(part), plan, modes).items():
            filled[mode][part], air[mode][part] = in_medium, in_air
    return {mode: ModeSolution(filled[mode], air[mode]) for mode in modes}


def batches(section: Section, plan: Plan) -> Iterator[IntArray]:
    """Rows of the section in batches of one topology that fit the cache."""
    kinds = topology(section)
    for kind in np.unique(kinds):
        rows = np.flatnonzero(kinds == kind)
        size = _batch_size(section.rows(rows[:1]), plan)
        for start in range(0, rows.size, size):
            yield rows[start : start + size]


def _solve_batch(section: Section, plan: Plan, modes: tuple[int, ...]) -> dict[int, tuple[FloatArray, FloatArray]]:
    parts = structure(section)
    filled, air = media(parts, multiples=plan.multiples, wavenumbers=plan.wavenumbers)
    system = near_system(parts.edges, parts.images, counts=[plan.count(edge) for edge in parts.edges])
    halves = 2.0 if section.gap is None else 1.0
    one = np.ones(section.count)
    return {mode: (halves * charge(system, filled, body_dk=parts.body_dk, sign=mode),
                   halves * charge(system, air, body_dk=one, sign=mode, air=True)) for mode in modes}


def _batch_size(section: Section, plan: Plan) -> int:
    """Sections at a time, so that a matrix of the batch stays in cache."""
    counts = [plan.count(edge) for edge in structure(section).edges]
    unknowns, fine = sum(count[0] for count in counts), sum(count[1] for count in counts)
    return max(1, 60_000 // (unknowns * fine // 8 + 1))
