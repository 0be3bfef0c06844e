"""Impedance of a batch of cross-sections by the boundary-element solution, lossless and static."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray, IntArray, NumberArray
from tolerance.sections.layered import LayeredSection
from tolerance.sections.section import Section
from tolerance.solver.assembly import charge, near_system
from tolerance.solver.layered import LayeredPlan, layer_systems, plan_layered, trace_charges
from tolerance.solver.plan import Plan, SolverSettings, plan_for
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


AnySection = Section | LayeredSection
AnyPlan = Plan | LayeredPlan


def plan_line(section: AnySection, settings: SolverSettings) -> AnyPlan:
    """The plan for a line whose nominal section is the first of `section`."""
    return plan_layered(section, settings) if isinstance(section, LayeredSection) else plan_for(section, settings)


def solve_modes(section: AnySection, plan: AnyPlan, *, modes: tuple[int, ...]) -> dict[int, ModeSolution]:
    """Solve for even (1) and odd (-1) excitation; a single line has mode 1 only.

    Of a broadside pair, whose traces may be unequal, odd stands for equal and opposite charges (twice the capacitance
    1 / (q' C^-1 q), q = (1, -1)), even for both traces tied (half of their capacitance), so that the differential
    impedance is twice the odd mode's and the common one half the even mode's, as for any pair.
    Every section must be possible (see Section.possible). The result does not depend on how sections are batched.
    """
    if isinstance(section, LayeredSection):
        assert isinstance(plan, LayeredPlan)
        return _solve_layered(section, plan, modes)
    assert isinstance(plan, Plan)
    filled = {mode: np.empty(section.count) for mode in modes}
    air = {mode: np.empty(section.count) for mode in modes}
    for part in batches(section, plan):
        for mode, (in_medium, in_air) in _solve_batch(section.rows(part), plan, modes).items():
            filled[mode][part], air[mode][part] = in_medium, in_air
    return {mode: ModeSolution(filled[mode], air[mode]) for mode in modes}


def batches(section: Section, plan: Plan, *, largest: int | None = None) -> Iterator[IntArray]:
    """Rows that are solved together: of one topology, and so few that a matrix of them stays in cache.

    largest : no more rows than this at a time.
    """
    kinds = topology(section)
    for kind in np.unique(kinds):
        rows = np.flatnonzero(kinds == kind)
        size = min(_batch_size(section.rows(rows[:1]), plan), largest or rows.size)
        for start in range(0, rows.size, size):
            yield rows[start : start + size]


def _solve_layered(section: LayeredSection, plan: LayeredPlan, modes: tuple[int, ...]) -> dict[int, ModeSolution]:
    parts: dict[int, list[tuple[FloatArray, FloatArray]]] = {mode: [] for mode in modes}
    for rows in layered_batches(section, plan):
        batch = section.rows(rows)
        systems = layer_systems(batch, plan)
        matrices = [trace_charges(one, plan, systems).matrix for one in (batch, batch.in_air())]
        for mode in modes:
            parts[mode].append((mode_capacitance(matrices[0], mode), mode_capacitance(matrices[1], mode)))
    return {mode: ModeSolution(*(np.concatenate(column) for column in zip(*parts[mode], strict=True)))
            for mode in modes}


def layered_batches(section: LayeredSection, plan: LayeredPlan) -> Iterator[slice]:
    """Rows of the section in batches that fit the cache."""
    unknowns = sum(count[0] for count in plan.counts.values())
    size = max(1, 200_000 // unknowns**2)
    for start in range(0, section.count, size):
        yield slice(start, start + size)


def mode_capacitance(matrix: NumberArray, mode: int) -> NumberArray:
    """Capacitance of a mode, see solve_modes, from the matrix of two traces (sections, 2, 2): (sections,)."""
    if mode > 0:
        return np.asarray(0.5 * matrix.sum(axis=(1, 2)))
    inverse = np.linalg.inv(matrix)
    return np.asarray(2.0 / (inverse[:, 0, 0] + inverse[:, 1, 1] - inverse[:, 0, 1] - inverse[:, 1, 0]))


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
