"""Faces of a trace put together to its outline, places on it by share of charge, and field lines from there."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import BoolArray, ComplexArray, FloatArray
from tolerance.solver.sources import Face


@dataclass(frozen=True, slots=True)
class Outline:
    """A trace once round, against the clock: ends of the pieces (pieces + 1,) as x + iy [m], charge on each."""

    ends: ComplexArray
    charges: FloatArray

    @property
    def normals(self) -> ComplexArray:
        """Outward unit normals, (pieces,)."""
        run = np.diff(self.ends)
        return np.asarray(-1j * run / np.abs(run))

    @property
    def density(self) -> FloatArray:
        """Share of the trace's charge over length [1/m]: (pieces,)."""
        return np.asarray(self.charges / self.charges.sum() / np.abs(np.diff(self.ends)))

    def places(self, count: int) -> tuple[ComplexArray, ComplexArray]:
        """`count` places with the same charge between neighbours, and the outward normals there."""
        cumulative = np.concatenate([[0.0], np.cumsum(np.abs(self.charges))])
        wanted = (np.arange(count) + 0.5) / count * cumulative[-1]
        piece = np.clip(np.searchsorted(cumulative, wanted) - 1, 0, self.charges.size - 1)
        share = (wanted - cumulative[piece]) / (cumulative[piece + 1] - cumulative[piece])
        return self.ends[piece] + share * np.diff(self.ends)[piece], self.normals[piece]


def outline_of(faces: Sequence[Face]) -> Outline:
    """The faces of one trace in one round; a strip without thickness has one face and no inside."""
    ends, charges, left = faces[0].ends, faces[0].charges, list(faces[1:])
    small = 1e-6 * float(np.abs(np.ptp(ends.real)) + np.abs(np.ptp(ends.imag)))
    while left:
        face, turned = _next(left, complex(ends[-1]), small)
        left.remove(face)
        way = slice(None, None, -1) if turned else slice(None)
        ends = np.concatenate([ends, face.ends[way][1:]])
        charges = np.concatenate([charges, face.charges[way]])
    area = float(np.sum(ends[:-1].real * np.diff(ends.imag) - ends[:-1].imag * np.diff(ends.real)))
    return Outline(ends, charges) if area >= 0.0 else Outline(ends[::-1], charges[::-1])


def _next(faces: Sequence[Face], end: complex, small: float) -> tuple[Face, bool]:
    for face in faces:
        for turned in (False, True):
            if abs(face.ends[-1 if turned else 0] - end) < small:
                return face, turned
    raise ValueError("the faces do not make one outline")


def follow(
    starts: ComplexArray, directions: Callable[[ComplexArray], ComplexArray],
    inside: Callable[[ComplexArray], BoolArray], *, step: float, most: int,
) -> list[ComplexArray]:
    """Lines along the field from `starts`, as long as `inside` holds, by Runge-Kutta steps of length `step` [m].

    directions : unit vectors as x + iy at points.  The last point of a line is the first that is not inside.
    """
    places, going = [starts], np.ones(starts.shape, dtype=np.bool_)
    lengths = np.ones(starts.shape, dtype=np.int64)
    for _ in range(most):
        here = places[-1]
        first = directions(here)
        middle = directions(here + 0.5 * step * first)
        places.append(np.where(going, here + step * middle, here))
        lengths += going
        going = going & inside(places[-1])
        if not going.any():
            break
    table = np.array(places)
    return [table[: lengths[line], line] for line in range(starts.size)]
