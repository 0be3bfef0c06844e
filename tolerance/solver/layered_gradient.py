"""The gradient of the impedance of traces on several layers: as gradient, for the solution of layered.

Within a layer it is that of near images and a spectral rest; between two layers the waves are differentiated.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray, NumberArray
from tolerance.sections.layered import LayeredSection
from tolerance.solver.assembly import Sent, System, sent_from
from tolerance.solver.gradient import Excited, gradient, shares_of_ends
from tolerance.solver.layered import (
    LayeredPlan,
    Waves,
    layer_images,
    layer_medium,
    layer_systems,
    stack_above,
    stack_below,
    through,
    trace_faces,
    waves_between,
    way_left,
    whole_matrix,
)
from tolerance.solver.media_gradient import StackGradient, add_first_reflection, add_reflection, add_rest


@dataclass(frozen=True, slots=True)
class LayeredExcited:
    """One medium with its solution: charges and minus the adjoint, both (sections, unknowns), layer by layer."""

    section: LayeredSection
    charges: NumberArray
    adjoint: NumberArray
    matrix: NumberArray


def layered_coordinates(section: LayeredSection) -> FloatArray:
    """All that the solution is told in: x and y of starts, of stops of the faces, layer by layer; then thicknesses and
    Dk of the layers: (sections, coordinates)."""
    values = []
    for layer in _layers(section):
        edges = [edge for number, trace in enumerate(section.traces) if trace.layer == layer
                 for edge in trace_faces(section, number)]
        values += [edge.start[axis] for axis in (0, 1) for edge in edges]
        values += [edge.stop[axis] for axis in (0, 1) for edge in edges]
    return np.stack([*values, *section.thicknesses, *section.dks], axis=1)


def solve_layered_mode(
    section: LayeredSection, plan: LayeredPlan, mode: int,
) -> tuple[tuple[FloatArray, FloatArray], NumberArray]:
    """Capacitance of a mode over vacuum permittivity, filled and in air, as solve_modes has it, and the gradient of
    -ln(product) / 2, which is that of ln Z, with respect to layered_coordinates."""
    systems = layer_systems(section, plan)
    solved, capacitances = [], []
    for medium in (section, section.in_air()):
        excited, capacitance = _excited(medium, plan, systems, mode)
        solved.append(excited)
        capacitances.append(capacitance)
    return (capacitances[0], capacitances[1]), layered_gradients(plan, systems, solved)


def _excited(
    section: LayeredSection, plan: LayeredPlan, systems: Mapping[int, System], mode: int,
) -> tuple[LayeredExcited, FloatArray]:
    """With the voltages of the mode, from 1 V on each trace; C = q' (charges) over what solve_modes says."""
    matrix = whole_matrix(section, plan, systems)
    owner = np.concatenate([np.full(nodes.across.shape[1], int(nodes.edge.name.split()[0]))
                            for system in systems.values() for nodes in system.nodes])
    belongs = (owner[:, None] == np.arange(len(section.traces))).astype(np.float64)
    wanted = np.broadcast_to(belongs, (section.count, *belongs.shape))
    charges, adjoints = -2.0 * np.pi * np.linalg.solve(matrix, wanted), np.linalg.solve(
        matrix.transpose(0, 2, 1), wanted)
    between = belongs.T @ charges
    if mode > 0:
        capacitance = 0.5 * between.sum(axis=(1, 2))
        left = right = np.ones(between.shape[:2])
        share = 0.25 / capacitance
    else:
        apart = np.broadcast_to(np.array([[1.0], [-1.0]]), (section.count, 2, 1))
        left, right = (np.linalg.solve(one, apart)[:, :, 0] for one in (between.transpose(0, 2, 1), between))
        capacitance = 2.0 / (right[:, 0] - right[:, 1])
        share = 0.25 * capacitance
    adjoint = (adjoints @ left[:, :, None])[:, :, 0] * share[:, None]
    return LayeredExcited(section, (charges @ right[:, :, None])[:, :, 0], adjoint, matrix), capacitance


def layered_gradients(
    plan: LayeredPlan, systems: Mapping[int, System], solved: list[LayeredExcited],
) -> NumberArray:
    """The gradient with respect to layered_coordinates; `solved`: the section as built, then the copper in air."""
    section = solved[0].section
    sums = _Sums(section)
    ends = np.cumsum([0] + [system.across.shape[1] for system in systems.values()])
    parts = {layer: slice(start, stop) for layer, start, stop in zip(systems, ends[:-1], ends[1:], strict=True)}
    faces = {layer: _add_layer(sums, plan, layer, system, solved, parts[layer]) for layer, system in systems.items()}
    for number, one in enumerate(solved):
        for low in systems:
            for high in (layer for layer in systems if layer > low):
                _add_waves(sums, plan, one, (low, systems[low], parts[low]), (high, systems[high], parts[high]),
                           faces, filled=number == 0)
    return np.concatenate([*(faces[layer].reshape(section.count, -1) for layer in systems),
                           np.stack(sums.thicknesses, axis=1), np.stack(sums.dks, axis=1)], axis=1)


class _Sums:
    """The gradient with respect to thickness and Dk of the layers."""

    def __init__(self, section: LayeredSection) -> None:
        zero = np.zeros(section.count)
        self.thicknesses: list[NumberArray] = [zero for _ in section.thicknesses]
        self.dks: list[NumberArray] = [zero for _ in section.dks]

    def add(self, layer: int, *, thickness: NumberArray | float = 0.0, dk: NumberArray | float = 0.0) -> None:
        """To one layer."""
        self.thicknesses[layer] = self.thicknesses[layer] + thickness
        self.dks[layer] = self.dks[layer] + dk

    def add_stack(self, layer: int, stack: StackGradient, *, up: bool, filled: bool) -> None:
        """A stack seen from `layer` upwards or downwards; its Dk only where the section is `filled`."""
        step = 1 if up else -1
        for number, (thickness, dk) in enumerate(zip(stack.thicknesses, stack.dks, strict=True), start=1):
            self.add(layer + step * number, thickness=thickness, dk=dk if filled else 0.0)
        if filled:
            self.add(layer, dk=stack.body_dk)


def _layers(section: LayeredSection) -> list[int]:
    return sorted({trace.layer for trace in section.traces})


def _add_layer(
    sums: _Sums, plan: LayeredPlan, layer: int, system: System, solved: list[LayeredExcited], part: slice,
) -> FloatArray:
    """The traces of one layer among themselves; returns the gradient with respect to the ends of their faces."""
    excited = [Excited(layer_medium(one.section, plan, layer), one.charges[:, part],
                       one.adjoint[:, part] / one.section.dks[layer][:, None], ()) for one in solved]
    found = gradient(system, layer_images(solved[0].section, layer), excited, sign=0)
    sums.add(layer, thickness=found.levels[:, 2])
    for number, (one, of_medium) in enumerate(zip(solved, found.media, strict=True)):
        dk, thickness = one.section.dks[layer], one.section.thicknesses[layer]
        stacks = stack_below(one.section, layer), stack_above(one.section, layer)
        below, above = (StackGradient.of(stack, dk) for stack in stacks)
        assert of_medium.rest is not None
        sums.add(layer, thickness=add_rest(
            below, above, stacks, dk, thickness, way_left(one.section, layer), plan.wavenumbers[layer, layer],
            of_medium.rest))
        for side, stack, column in ((below, stacks[0], 1), (above, stacks[1], 2)):
            add_first_reflection(side, stack, dk, of_medium.near[:, column])
            sums.add_stack(layer, side, up=column == 2, filled=number == 0)
        if number == 0:
            sent = (one.matrix[:, part, part] @ one.charges[:, part, None])[:, :, 0]
            sums.add(layer, dk=-(one.adjoint[:, part] * sent).sum(axis=1) / dk)
    return found.ends


def _add_waves(
    sums: _Sums, plan: LayeredPlan, one: LayeredExcited, lower: tuple[int, System, slice],
    upper: tuple[int, System, slice], faces: Mapping[int, FloatArray], *, filled: bool,
) -> None:
    """What the traces of two layers do to each other, both ways."""
    (low, at_low, low_part), (high, at_high, high_part) = lower, upper
    section, waves = one.section, waves_between(one.section, plan, low, high)
    k = waves.wavenumber
    back, up = (factor * through(section, layer, k) for factor, layer in ((waves.back[low], low), (waves.up, high)))
    (low_nodes, low_sent), (high_nodes, high_sent) = (
        _carriers(k, system, section.thicknesses[layer], mirrored, from_above=from_above)
        for layer, system, mirrored, from_above in ((low, at_low, back, True), (high, at_high, up, False)))
    strength = -waves.weight * waves.factor / section.dks[high][:, None]
    of_back, of_up, form = (np.zeros(k.shape, dtype=one.charges.dtype) for _ in range(3))
    for taken, sent, rows, charges in (
            (low_nodes, high_sent, one.adjoint[:, low_part], high_sent.spread(one.charges[:, high_part])),
            (low_sent, high_nodes, low_sent.spread(one.charges[:, low_part]), one.adjoint[:, high_part])):
        at_rows, at_charges = taken.sums(rows), sent.sums(charges)
        for way in (0, 1):  # cosine, sine
            form += at_rows[way] * at_charges[way]
            of_back += strength * at_rows[2 + way] * at_charges[way]
            of_up += strength * at_rows[way] * at_charges[2 + way]
        for layer, carriers, weights, other in ((low, taken, rows, at_charges), (high, sent, charges, at_rows)):
            run, rise = carriers.slopes(weights, [strength * other[way] for way in (0, 1)])
            edges = faces[layer].shape[2]
            for axis, slope in enumerate((run @ carriers.shares, rise @ carriers.shares)):
                faces[layer][:, axis] += slope[:, :edges]
                faces[layer][:, 2 + axis] += slope[:, edges:]
            sums.add(layer, thickness=carriers.of_thickness(weights, [strength * other[way] for way in (0, 1)]))
    _add_way(sums, section, waves, (low, high), strength * form, of_back, of_up, filled=filled)


class _Carriers:
    """The waves between two layers at places in one: (a + b c) times cosine or sine of k x.

    a, b : of the lower layer exp(-k (thickness - y)) and exp(-k y), of the upper one the other way round.
    mirrored : c, what comes back from beyond (sections, k).
    """

    def __init__(
        self, k: FloatArray, places: Sent, shares: FloatArray, thickness: FloatArray, mirrored: NumberArray, *,
        from_above: bool,
    ) -> None:
        self.k, self.shares, self.mirrored, self.from_above = k, shares, mirrored[:, None, :], from_above
        self._spread = places.spread
        phase = k[:, None, :] * places.across[:, :, None]
        self.cosine, self.sine = np.cos(phase), np.sin(phase)
        self.at_foot = np.exp(-k[:, None, :] * places.height[:, :, None])
        self.at_top = np.exp(-k[:, None, :] * (thickness[:, None] - places.height)[:, :, None])

    def spread(self, charges: NumberArray) -> NumberArray:
        """Charges at the places from those at the nodes."""
        return charges if self._spread is None else charges @ self._spread.T

    @property
    def _parts(self) -> tuple[FloatArray, FloatArray]:
        return (self.at_top, self.at_foot) if self.from_above else (self.at_foot, self.at_top)

    def sums(self, weights: NumberArray) -> list[NumberArray]:
        """Taken up with cosine and with sine, then the derivatives of both by c: each (sections, k)."""
        near, far = self._parts
        whole = near + self.mirrored * far
        return [np.asarray((weights[:, None, :] @ (carrier * wave))[:, 0])
                for carrier in (whole, far) for wave in (self.cosine, self.sine)]

    def slopes(self, weights: NumberArray, other: list[NumberArray]) -> tuple[FloatArray, FloatArray]:
        """Gradient with respect to x and y of the nodes; `other`: what stands opposite cosine and sine."""
        near, far = self._parts
        whole, rising = near + self.mirrored * far, near - self.mirrored * far
        cosine, sine = ((self.k * one)[:, :, None] for one in other)
        run = ((whole * self.cosine) @ sine - (whole * self.sine) @ cosine)[:, :, 0]
        rise = ((rising * self.cosine) @ cosine + (rising * self.sine) @ sine)[:, :, 0]
        return np.real(weights * run), np.real(weights * rise) * (1.0 if self.from_above else -1.0)

    def of_thickness(self, weights: NumberArray, other: list[NumberArray]) -> FloatArray:
        """Gradient with respect to the thickness of the layer, c held."""
        top = self.at_top if self.from_above else self.mirrored * self.at_top
        total = np.zeros(len(weights), dtype=np.result_type(weights, *other))
        for wave, one in ((self.cosine, other[0]), (self.sine, other[1])):
            total -= ((weights[:, None, :] @ (top * wave))[:, 0] * self.k * one).sum(axis=1)
        return np.asarray(np.real(total))


def _carriers(
    k: FloatArray, system: System, thickness: FloatArray, mirrored: NumberArray, *, from_above: bool,
) -> tuple[_Carriers, _Carriers]:
    """At the nodes, and where charges are seen from."""
    sent = sent_from(system, system.across.shape[1])
    at_nodes = _Carriers(k, Sent(system.across, system.height, None), shares_of_ends(
        [nodes.share for nodes in system.nodes]), thickness, mirrored, from_above=from_above)
    if sent.spread is None:
        return at_nodes, at_nodes
    shares = shares_of_ends([nodes.far_share for nodes in system.nodes])
    return at_nodes, _Carriers(k, sent, shares, thickness, mirrored, from_above=from_above)


def _add_way(
    sums: _Sums, section: LayeredSection, waves: Waves, layers: tuple[int, int], form: NumberArray,
    of_back: NumberArray, of_up: NumberArray, *, filled: bool,
) -> None:
    """What factors of waves and reflections add; `form` (sections, k) is with respect to the logarithm of the factor,
    `of_back` and `of_up` to what comes back from beyond the lower and the upper layer, with its way through it."""
    (low, high), k = layers, waves.wavenumber
    if filled:
        sums.add(high, dk=-form.sum(axis=1) / section.dks[high])
    gone = through(section, high, k)
    many = 1.0 - waves.down * waves.up * gone**2
    _add_reflection(sums, section, high, k, form * (1.0 / (1.0 + waves.down) + waves.up * gone**2 / many), up=False,
                    filled=filled)
    _add_reflection(sums, section, high, k, form * waves.down * gone**2 / many + of_up * gone, up=True, filled=filled)
    sums.add(high, thickness=-(k * (2.0 * form * waves.down * waves.up * gone**2 / many + of_up * waves.up * gone)
                               ).sum(axis=1))
    for layer, back in waves.back.items():
        gone = through(section, layer, k)
        many = 1.0 + back * gone**2
        inside = layer > low
        of_reflection = form * ((1.0 / (1.0 + back) if inside else 0.0) - gone**2 / many)
        of_gone = form * ((1.0 if inside else 0.0) - 2.0 * back * gone**2 / many)
        if not inside:
            of_reflection = of_reflection + of_back * gone
            of_gone = of_gone + of_back * back * gone
        _add_reflection(sums, section, layer, k, of_reflection, up=False, filled=filled)
        sums.add(layer, thickness=-(k * of_gone).sum(axis=1))


def _add_reflection(
    sums: _Sums, section: LayeredSection, layer: int, wavenumber: FloatArray, of_reflection: NumberArray, *, up: bool,
    filled: bool,
) -> None:
    stack, dk = stack_above(section, layer) if up else stack_below(section, layer), section.dks[layer]
    found = StackGradient.of(stack, dk)
    add_reflection(found, stack, wavenumber, dk, of_reflection)
    sums.add_stack(layer, found, up=up, filled=filled)
