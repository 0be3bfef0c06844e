"""Potential and its gradient at any point of a section, from the solved charges: for pictures and checks.

Transformed along x with wavenumber k, the potential of a unit charge in layer s is 1 / (2 k Dk) times waves that flat
faces reflect and let through (standard theory of layered media, see kernels). What touches the charge or its own layer
is taken as images, each short piece of charge integrated exactly; the smooth rest is a quadrature over k.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import ComplexArray, FloatArray
from tolerance.solver.kernels import LAST_EXPONENT
from tolerance.solver.sources import Layers, Sources

BLOCK = 2000  # points at a time
MOST_WAVENUMBERS = 3000


@dataclass(frozen=True, slots=True)
class FieldValues:
    """At points: potential (points,) and its gradient as d/dx, d/dy (points, 2) [1/m]; Dk (points,)."""

    potential: FloatArray
    gradient: FloatArray
    dk: FloatArray


def field_at(sources: Sources, *, across: FloatArray, height: FloatArray) -> FieldValues:
    """The field at points (points,) [m]; in copper it is the potential of the copper.

    A point on a face between layers counts to the upper one; below a plane or above one there is no field.
    Good to 1e-3 of the voltage as close to copper as the corners' pieces are long, and better elsewhere.
    """
    points = np.asarray(across) + 1j * np.asarray(height)
    layers = sources.layers
    inner = layers.faces[1:-1]
    number = np.searchsorted(inner, points.imag, side="right")
    value, gradient = np.zeros(points.shape), np.zeros((points.size, 2))
    for layer in np.unique(number):
        rows = np.flatnonzero(number == layer)
        for source_layer in np.unique(sources.layer):
            chosen = sources.layer == source_layer
            part = _Part(layers, sources.starts[chosen], sources.stops[chosen], sources.charges[chosen],
                         int(source_layer), int(layer), float(np.abs(points.real).max()))
            for start in range(0, rows.size, BLOCK):
                block = rows[start : start + BLOCK]
                added, slope = part.field(points[block])
                value[block] += added
                gradient[block] += slope
    return FieldValues(value, gradient, layers.dks[number])


@dataclass(frozen=True, slots=True)
class _Part:
    """What the charges of one layer `here` do in one layer `there`; `reach` : farthest point sideways [m]."""

    layers: Layers
    starts: ComplexArray
    stops: ComplexArray
    charges: FloatArray
    here: int
    there: int
    reach: float

    def field(self, points: ComplexArray) -> tuple[FloatArray, FloatArray]:
        """Potential (points,) and gradient (points, 2)."""
        value, slope = self._rest(points)
        for factor, level in self._images():
            starts, stops = self.starts, self.stops
            if level is not None:
                starts, stops = starts.conj() + 2j * level, stops.conj() + 2j * level
            added, along = _of_pieces(points, starts, stops, self.charges)
            value -= factor * added
            slope -= factor * along
        scale = 1.0 / (2.0 * np.pi * self.layers.dks[self.here])
        return scale * value, scale * np.stack([slope.real, -slope.imag], axis=1)

    def _images(self) -> list[tuple[float, float | None]]:
        """Factor of each image, and the height at which it is mirrored (None: the charge itself)."""
        down, up = first_steps(self.layers, self.here)
        faces = self.layers.faces
        if self.there == self.here:
            return [(1.0, None), (down, float(faces[self.here])), (up, float(faces[self.here + 1]))]
        if abs(self.there - self.here) == 1:
            return [(1.0 + (down if self.there < self.here else up), None)]
        return []

    def _rest(self, points: ComplexArray) -> tuple[FloatArray, ComplexArray]:
        """What the images leave, as d/dx - i d/dy for the slope."""
        middle = 0.5 * (self.starts + self.stops)
        distance = float(np.min(np.diff(self.layers.faces)))
        reach = self.reach + float(np.abs(middle.real).max())
        count = min(MOST_WAVENUMBERS, int(40.0 + 0.6 * LAST_EXPONENT * reach / distance))
        nodes, weights = np.polynomial.legendre.leggauss(count)
        k = LAST_EXPONENT / distance * (0.5 * (1.0 + nodes)) ** 2
        low, high = self.layers.faces[self.here], self.layers.faces[self.here + 1]
        phase = self.charges * np.exp(-1j * np.outer(k, middle.real))
        sent = [(phase * np.exp(-np.outer(k, way))).sum(axis=1)
                for way in (middle.imag - low, high - middle.imag, np.zeros(middle.size))]
        factor = sum(factor for factor, _ in self._images())
        level = factor * np.exp(-k * distance) * sent[2]
        waves = _waves(self.layers, self.here, self.there, k, sent[0], sent[1])
        weight = weights * 2.0 / (1.0 + nodes) * np.exp(1j * np.outer(points.real, k))
        bottom, top = self.layers.faces[self.there], self.layers.faces[self.there + 1]
        rising = waves[0] * weight * np.exp(-np.outer(points.imag - bottom, k))
        falling = waves[1] * weight * np.exp(-np.outer(top - points.imag, k))
        flat = level * weight
        value = (rising + falling + flat).sum(axis=1).real
        right = (1j * k * (rising + falling + flat)).sum(axis=1).real
        upward = (k * (falling - rising)).sum(axis=1).real
        run = points.real[:, None] - middle.real
        square = run * run + distance * distance
        value += 0.5 * factor * (np.log(square) @ self.charges)
        right += factor * ((run / square) @ self.charges)
        return value, right - 1j * upward


def first_steps(layers: Layers, layer: int) -> tuple[float, float]:
    """Reflection at the lower and the upper face of a layer, of these faces alone; 0 where it goes on for ever."""
    dks, last = layers.dks, layers.dks.size - 1
    down = (-1.0 if layers.bottom_plane else 0.0) if layer == 0 else _step(dks[layer], dks[layer - 1])
    up = (-1.0 if layers.top_plane else 0.0) if layer == last else _step(dks[layer], dks[layer + 1])
    return down, up


def _step(here: float, beyond: float) -> float:
    return float((here - beyond) / (here + beyond))


def _reflections(layers: Layers, k: FloatArray, way: int) -> list[FloatArray]:
    """Reflection at the lower (`way` -1) or upper (1) face of every layer, with all that lies beyond: (k,) each."""
    count = layers.dks.size
    order = range(count) if way < 0 else range(count - 1, -1, -1)
    found: dict[int, FloatArray] = {}
    for layer in order:
        step = first_steps(layers, layer)[0 if way < 0 else 1]
        beyond = layer + way
        if beyond not in found:
            found[layer] = np.full(k.shape, step)
            continue
        wave = found[beyond] * np.exp(-2.0 * k * (layers.faces[beyond + 1] - layers.faces[beyond]))
        found[layer] = (step + wave) / (1.0 + step * wave)
    return [found[layer] for layer in range(count)]


def _waves(
    layers: Layers, here: int, there: int, k: FloatArray, down: ComplexArray, up: ComplexArray,
) -> tuple[ComplexArray, ComplexArray]:
    """Amplitudes (k,) of the wave that rises from the lower and that falls from the upper face of layer `there`.

    Without what the images already have.  down, up : what the charges send to both faces of their layer.
    """
    below, above = _reflections(layers, k, -1), _reflections(layers, k, 1)
    through = np.exp(-k * np.diff(layers.faces)[:, None])
    first_down, first_up = first_steps(layers, here)
    many = 1.0 / (1.0 - below[here] * above[here] * through[here] ** 2)
    arriving = ((down + above[here] * up * through[here]) * many, (up + below[here] * down * through[here]) * many)
    if there == here:
        return below[here] * arriving[0] - first_down * down, above[here] * arriving[1] - first_up * up
    way = -1 if there < here else 1
    back = below if way < 0 else above
    value = (1.0 + back[here]) * arriving[0 if way < 0 else 1]
    for layer in range(here + way, there, way):
        value = value * through[layer] * (1.0 + back[layer]) / (1.0 + back[layer] * through[layer] ** 2)
    onward = value / (1.0 + back[there] * through[there] ** 2)
    returning = onward * back[there] * through[there]
    if abs(there - here) == 1:
        onward = onward - (1.0 + (first_down if way < 0 else first_up)) * (down if way < 0 else up)
    return (returning, onward) if way < 0 else (onward, returning)


def _of_pieces(
    points: ComplexArray, starts: ComplexArray, stops: ComplexArray, charges: FloatArray,
) -> tuple[FloatArray, ComplexArray]:
    """Sum of charge times mean ln r over each straight piece, and its derivative as d/dx - i d/dy: (points,) each."""
    run = stops - starts
    place = (points[:, None] - starts) / run
    with np.errstate(divide="ignore", invalid="ignore"):
        first, last = np.log(place), np.log(place - 1.0)
        mean = np.where(place == 0.0, 0.0, place * first) - np.where(place == 1.0, 0.0, (place - 1.0) * last)
        slope = np.nan_to_num((first - last) / run, posinf=0.0, neginf=0.0)
    return (mean.real - 1.0 + np.log(np.abs(run))) @ charges, slope @ charges
