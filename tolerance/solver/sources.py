"""The solved charges of one section as short straight pieces of level charge: what a field or a picture is made of.

Lengths in metres, heights counted as in the structure that was solved. Charges are over vacuum permittivity, for a
potential of 1 on the traces; odd: 1 on the right-hand one and -1 on the other.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tolerance.arrays import ComplexArray, FloatArray, IntArray, read_only
from tolerance.sections.layered import LayeredSection
from tolerance.sections.section import Section
from tolerance.solver.assembly import near_system, node_charges
from tolerance.solver.edges import GRADING, Edge, Nodes
from tolerance.solver.layered import LayeredPlan, TraceCharges, trace_charges, trace_faces
from tolerance.solver.plan import Plan
from tolerance.solver.rules import graded_positions, ground_positions, piece_charges, tail_positions
from tolerance.solver.structure import media, structure

PIECES = 40  # on each edge


@dataclass(frozen=True, slots=True)
class Layers:
    """Flat layers from the bottom up: heights of their faces (layers + 1,) [m], Dk (layers,).

    A layer of air that goes on for ever is told with a great thickness. bottom_plane, top_plane : what ends them.
    """

    faces: FloatArray
    dks: FloatArray
    bottom_plane: bool
    top_plane: bool


@dataclass(frozen=True, slots=True)
class Face:
    """One face of a trace: ends of its pieces (pieces + 1,) as x + iy [m], charge on each piece (pieces,)."""

    trace: int
    name: str
    ends: ComplexArray
    charges: FloatArray

    @property
    def density(self) -> FloatArray:
        """Charge over length [1/m]: (pieces,)."""
        return np.asarray(self.charges / np.abs(np.diff(self.ends)))


@dataclass(frozen=True, slots=True)
class Sources:
    """All charges of a section, those of grounded copper and of dielectric faces too, and the layers they lie in.

    starts, stops : x + iy of each piece [m].  charges : of each piece.  layer : number of the layer each lies in.
    faces : of the traces, in order round each.
    """

    layers: Layers
    starts: ComplexArray
    stops: ComplexArray
    charges: FloatArray
    layer: IntArray
    faces: tuple[Face, ...]


def charged(section: Section, plan: Plan, *, mode: int, air: bool = False) -> Sources:
    """Charges of the first section, even (1) or odd (-1); `air`: every Dk 1."""
    one = section.rows(slice(0, 1))
    parts = structure(one)
    filled, in_air = media(parts, multiples=plan.multiples, wavenumbers=plan.wavenumbers)
    system = near_system(parts.edges, parts.images, counts=[plan.count(edge) for edge in parts.edges])
    body_dk = np.ones(1) if air else parts.body_dk
    charges = node_charges(system, in_air if air else filled, body_dk=body_dk, sign=mode, air=air)[0]
    pieces, faces, start = [], [], 0
    for nodes in system.nodes:
        stop = start + nodes.across.shape[1]
        if start >= charges.size:
            break
        ends, on_pieces = _pieces(nodes, charges[start:stop])
        start = stop
        copies = [(ends, on_pieces)] if nodes.edge.folded else [(ends, on_pieces), (-ends.conj(), mode * on_pieces)]
        pieces += copies
        if nodes.edge.conducts and nodes.edge.role != "ground":
            faces += [Face(number, nodes.edge.name, *copy) for number, copy in enumerate(copies)] if (
                section.gap is not None) else [Face(0, nodes.edge.name, *copy) for copy in copies]
    below, above = parts.below, parts.above
    layers = _layers((*below.thicknesses[::-1], parts.body_thickness, *(above.thicknesses if above else ())),
                     (*below.dks[::-1], parts.body_dk, *(above.dks if above else ())),
                     below.plane, above is not None and above.plane, body=len(below.dks), air=air)
    return _joined(layers, pieces, [len(below.dks) + (not below.plane)] * len(pieces), faces)


def charged_broadside(section: LayeredSection, plan: LayeredPlan, *, mode: int, air: bool = False) -> Sources:
    """The same of traces on several layers; heights from the bottom of the stack.

    Odd: charges equal and opposite, a voltage of 2 between the traces. Even: 1 on both, tied.
    """
    one = section.rows(slice(0, 1))
    found = trace_charges(one.in_air() if air else one, plan)
    charges = _unit_potentials(found, mode)
    layers = _layers(one.thicknesses, one.dks, one.bottom_plane, one.top_plane, body=None, air=air)
    lifted = int(not one.bottom_plane)
    pieces: list[tuple[ComplexArray, FloatArray]] = []
    faces, numbers = [], []
    for number, name in enumerate(found.edge_names):
        trace, face = int(name.split()[0]), name.split(" ", 1)[1]
        edge = next(edge for edge in trace_faces(one, trace) if edge.name == name)
        base = layers.faces[one.traces[trace].layer + lifted]
        ends, on_pieces = _pieces_along(edge, charges[found.edge == number])
        pieces.append((ends + 1j * base, on_pieces))
        numbers.append(one.traces[trace].layer + lifted)
        faces.append(Face(trace, face, *pieces[-1]))
    return _joined(layers, pieces, numbers, faces)


def _unit_potentials(found: TraceCharges, mode: int) -> FloatArray:
    """Charges (unknowns,) for a potential of 1 on both traces (mode 1), or for equal and opposite charges and a
    voltage of 2 between the traces (mode -1)."""
    voltages = np.ones(2)
    if mode < 0:
        voltages = np.linalg.solve(found.matrix[0], np.array([1.0, -1.0]))
        voltages = voltages * 2.0 / (voltages[0] - voltages[1])
    return np.asarray(found.charges[0] @ voltages)


def _layers(
    thicknesses: Sequence[FloatArray | None], dks: Sequence[FloatArray], bottom_plane: bool, top_plane: bool, *,
    body: int | None, air: bool,
) -> Layers:
    """Layers with air, or a body without end (thickness None), beyond an open side; the body's lower face at 0."""
    known = [0.0 if part is None else float(part[0]) for part in thicknesses]
    endless = 1e4 * sum(known)
    heights = [endless if part is None else value for part, value in zip(thicknesses, known, strict=True)]
    values = [1.0 if air else float(dk[0]) for dk in dks]
    zero = sum(heights[:body]) if body is not None else 0.0
    if not bottom_plane:
        heights, values, zero = [endless, *heights], [1.0, *values], zero + endless
    if not top_plane and thicknesses[-1] is not None:
        heights, values = [*heights, endless], [*values, 1.0]
    faces = np.concatenate([[0.0], np.cumsum(heights)]) - zero
    return Layers(read_only(faces), read_only(values), bottom_plane, top_plane)


def _pieces(nodes: Nodes, charges: FloatArray) -> tuple[ComplexArray, FloatArray]:
    if nodes.edge.folded:
        charges = np.concatenate([charges[::-1], charges])
    return _pieces_along(nodes.edge, charges)


def _pieces_along(edge: Edge, charges: FloatArray) -> tuple[ComplexArray, FloatArray]:
    """Ends (pieces + 1,) and charges of the pieces of an edge from the charges at all of its nodes."""
    start, stop = (complex(float(end[0][0]), float(end[1][0])) for end in (edge.start, edge.stop))
    if edge.tail:
        positions = ground_positions(PIECES) if edge.conducts else tail_positions(PIECES)
        ends = start + (stop - start) * positions
    else:
        ends = 0.5 * (start + stop) + 0.5 * (stop - start) * graded_positions(PIECES, GRADING[edge.role])
    return np.asarray(ends, dtype=np.complex128), np.asarray(piece_charges(charges.size, PIECES) @ charges)


def _joined(
    layers: Layers, pieces: Sequence[tuple[ComplexArray, FloatArray]], numbers: Sequence[int], faces: Sequence[Face],
) -> Sources:
    return Sources(
        layers, np.concatenate([ends[:-1] for ends, _ in pieces]), np.concatenate([ends[1:] for ends, _ in pieces]),
        np.concatenate([charges for _, charges in pieces]), np.repeat(numbers, PIECES), tuple(faces))
