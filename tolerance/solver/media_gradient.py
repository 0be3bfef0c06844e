"""How what dielectrics make of images answers to thickness and Dk of the plies: the kernels differentiated.

Gradients with respect to factors, shifts and rests come in; gradients with respect to the plies of the stacks, to the
Dk and the thickness of the body go out. Everything is analytic in a Dk, which may be complex.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import FloatArray, NumberArray
from tolerance.solver.gradient import MediumGradient, RestGradient
from tolerance.solver.kernels import FlatStack, image_fit, spectral_quadrature
from tolerance.solver.structure import Structure, shortest_remaining_way


@dataclass(slots=True)
class StackGradient:
    """With respect to thicknesses and Dk of the plies of a stack, and to the Dk of the body: arrays (sections,)."""

    thicknesses: list[NumberArray]
    dks: list[NumberArray]
    body_dk: NumberArray

    @staticmethod
    def of(stack: FlatStack, body_dk: NumberArray) -> StackGradient:
        """Nought, for `stack`."""
        zero = np.zeros(body_dk.shape)
        return StackGradient([zero for _ in stack.thicknesses], [zero for _ in stack.dks], zero)


def add_reflection(
    sums: StackGradient, stack: FlatStack, wavenumber: FloatArray, body_dk: NumberArray, gradient: NumberArray,
) -> None:
    """The share of `gradient` (sections, k), with respect to the reflection at each wavenumber."""
    innermost = stack.dks[-1] if stack.dks else body_dk
    ending = -np.ones_like(body_dk) if stack.plane else (innermost - 1.0) / (innermost + 1.0)
    result: NumberArray = np.broadcast_to(ending[:, None], wavenumber.shape)
    uppers = (body_dk, *stack.dks)[: len(stack.dks)]
    passed = []
    for thickness, dk, upper in reversed(list(zip(stack.thicknesses, stack.dks, uppers, strict=True))):
        step = ((upper - dk) / (upper + dk))[:, None]
        wave = result * np.exp(-2.0 * wavenumber * thickness[:, None])
        passed.append((step, wave, np.exp(-2.0 * wavenumber * thickness[:, None])))
        result = (step + wave) / (1.0 + step * wave)
    for number, (step, wave, way) in enumerate(reversed(passed)):
        dk, upper = stack.dks[number], uppers[number]
        over = gradient / (1.0 + step * wave) ** 2
        of_step = (over * (1.0 - wave**2)).sum(axis=1) * 2.0 / (upper + dk) ** 2
        of_wave = over * (1.0 - step**2)
        sums.thicknesses[number] = sums.thicknesses[number] - 2.0 * (of_wave * wavenumber * wave).sum(axis=1)
        sums.dks[number] = sums.dks[number] - of_step * upper
        _add_dk(sums, number - 1, of_step * dk)
        gradient = of_wave * way
    if not stack.plane:
        _add_dk(sums, len(stack.dks) - 1, gradient.sum(axis=1) * 2.0 / (innermost + 1.0) ** 2)


def add_first_reflection(
    sums: StackGradient, stack: FlatStack, body_dk: NumberArray, gradient: NumberArray,
) -> None:
    """The share of `gradient` (sections,), with respect to the reflection of the nearest face."""
    if stack.dks:
        over = 2.0 * gradient / (body_dk + stack.dks[0]) ** 2
        sums.dks[0] = sums.dks[0] - over * body_dk
        sums.body_dk = sums.body_dk + over * stack.dks[0]
    elif not stack.plane:
        sums.body_dk = sums.body_dk + 2.0 * gradient / (body_dk + 1.0) ** 2


def _add_dk(sums: StackGradient, number: int, gradient: NumberArray) -> None:
    """To the Dk of ply `number`, or of the body for -1."""
    if number < 0:
        sums.body_dk = sums.body_dk + gradient
    else:
        sums.dks[number] = sums.dks[number] + gradient


def add_far_images(
    sums: StackGradient, stack: FlatStack, body_dk: NumberArray, multiples: Sequence[float], found: MediumGradient,
) -> None:
    """The share of far images by kernels.far_images."""
    scale = 2.0 * stack.thicknesses[0]
    first = (found.shifts * np.asarray(multiples)).sum(axis=1) * 2.0
    wavenumber, solve = image_fit(tuple(multiples))
    if len(multiples) == 1:
        of_nought, of_wanted = found.factors[:, 0], np.zeros((len(scale), wavenumber.size))
    else:
        of_wanted = (found.factors[:, :-1] - found.factors[:, -1:]) @ solve.T
        of_nought = found.factors[:, -1] - of_wanted @ np.exp(-wavenumber * multiples[-1])
    alone = StackGradient.of(stack, body_dk)
    add_reflection(alone, stack, wavenumber / scale[:, None], body_dk, of_wanted)
    add_first_reflection(alone, stack, body_dk, -of_wanted.sum(axis=1) - of_nought)
    for number, thickness in enumerate(stack.thicknesses):  # the wavenumbers go with the first thickness
        first = first - alone.thicknesses[number] * thickness / stack.thicknesses[0]
        sums.thicknesses[number] = sums.thicknesses[number] + alone.thicknesses[number]
        sums.dks[number] = sums.dks[number] + alone.dks[number]
    sums.thicknesses[0] = sums.thicknesses[0] + first
    sums.body_dk = sums.body_dk + alone.body_dk


def add_plane_image(sums: StackGradient, found: MediumGradient) -> None:
    """The share of the one image of a bare plane, kernels.plane_image."""
    sums.thicknesses = [thickness + 2.0 * found.shifts[:, 0] for thickness in sums.thicknesses]


def add_rest(
    below: StackGradient, above: StackGradient, stacks: tuple[FlatStack, FlatStack], body_dk: NumberArray,
    body_thickness: FloatArray, distance: FloatArray, count: int, found: RestGradient,
) -> NumberArray:
    """The share of kernels.spectral_rest at held `distance`; returns the gradient with respect to `body_thickness`."""
    wavenumber, weight = spectral_quadrature(distance, count)
    down, up = (stack.reflection(wavenumber, body_dk) for stack in stacks)
    crossing = np.exp(-wavenumber * body_thickness[:, None])
    round_trip = down * up * crossing
    square = weight / (1.0 - round_trip * crossing) ** 2
    lower, upper, cross = found.lower, found.upper, found.cross
    of_down = square * (lower + upper * (up * crossing) ** 2 + cross * up * crossing)
    of_up = square * (upper + lower * (down * crossing) ** 2 + cross * down * crossing)
    of_crossing = square * (2.0 * round_trip * (lower * down + upper * up) + cross * down * up * (
        1.0 + round_trip * crossing))
    of_level = (weight * np.exp(-wavenumber * distance[:, None]) * found.level).sum(axis=1) + found.compensation
    for sums, stack, of_reflection, own in ((below, stacks[0], of_down, lower), (above, stacks[1], of_up, upper)):
        add_reflection(sums, stack, wavenumber, body_dk, of_reflection)
        add_first_reflection(sums, stack, body_dk, of_level - (weight * own).sum(axis=1))
    return np.asarray(found.body_thickness - (of_crossing * wavenumber * crossing).sum(axis=1))


@dataclass(frozen=True, slots=True)
class MediaGradient:
    """With respect to the Dk and the thickness of the body, and to thicknesses, then Dk of the plies below and above:
    arrays (sections,)."""

    body_dk: NumberArray
    body_thickness: NumberArray
    below: list[NumberArray]
    above: list[NumberArray]


def media_gradient(
    parts: Structure, found: Sequence[MediumGradient], *, multiples: tuple[float, ...], wavenumbers: int,
) -> MediaGradient:
    """The share of all that structure.media makes; `found`: of the section as built, then of the copper in air."""
    one, zero = np.ones(parts.body_dk.shape), np.zeros(parts.body_dk.shape)
    above_filled = FlatStack((), (), plane=False) if parts.above is None else parts.above
    result: list[tuple[StackGradient, StackGradient]] = []
    body_thickness: NumberArray = zero
    for number, gradient in enumerate(found):
        below, above, dk = ((parts.below, above_filled, parts.body_dk) if number == 0
                            else (parts.below.in_air(), above_filled.in_air(), one))
        sums = StackGradient.of(below, dk), StackGradient.of(above, dk)
        if gradient.rest is None and number == 1:
            add_plane_image(sums[0], gradient)
        elif gradient.rest is None:
            add_far_images(sums[0], below, dk, multiples, gradient)
        else:
            assert parts.body_thickness is not None
            body_thickness = body_thickness + add_rest(
                *sums, (below, above), dk, parts.body_thickness, shortest_remaining_way(parts), wavenumbers,
                gradient.rest)
        for side, stack, column in ((sums[0], below, 1), (sums[1], above, 2)):
            if number == 0 and column < gradient.near.shape[1]:
                add_first_reflection(side, stack, dk, gradient.near[:, column])
        result.append(sums)
    (below_filled, above_sums), (below_air, above_air) = result
    return MediaGradient(
        body_dk=below_filled.body_dk + above_sums.body_dk, body_thickness=body_thickness,
        below=_both(below_filled, below_air), above=_both(above_sums, above_air))


def _both(filled: StackGradient, air: StackGradient) -> list[NumberArray]:
    return [*(one + other for one, other in zip(filled.thicknesses, air.thicknesses, strict=True)), *filled.dks]
