"""A bare microstrip by finite elements with the general-purpose library scikit-fem (extra `benchmark`).

Half of the section by symmetry, a rectangular trace, a grounded box far off, quadratic triangles on a mesh that is
graded geometrically to both corners of the copper. Refined until the impedance changes by less than what is asked.
"""

from __future__ import annotations

import time
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from skfem import Basis, BilinearForm, ElementTriP0, ElementTriP2, MeshTri, condense, solve
from skfem.helpers import dot, grad

Floats = npt.NDArray[np.float64]
IMPEDANCE_OF_SPACE = 376.730313668  # [ohm], CODATA 2018
BOX = 150.0  # heights from the trace to the box: its effect falls with the square


@dataclass(frozen=True)
class FiniteElementResult:
    """The accepted solution: impedance [ohm], unknowns, seconds for it alone and for all refinements up to it."""

    impedance: float
    unknowns: int
    seconds: float
    seconds_with_coarser: float


def microstrip_by_finite_elements(
    *, width: float, thickness: float, height: float, dk: float, change: float,
) -> FiniteElementResult:
    """Impedance of the section, refined until it changes by less than `change`, a share. Raises RuntimeError."""
    before, start = np.inf, time.perf_counter()
    for level in range(1, 9):
        begun = time.perf_counter()
        mesh = _mesh(width=width, thickness=thickness, height=height, level=level)
        filled, air = (_energy(mesh, height=height, dk=value) for value in (dk, 1.0))
        impedance = IMPEDANCE_OF_SPACE / np.sqrt(filled * air)
        now = time.perf_counter()
        if abs(impedance / before - 1.0) < change:
            unknowns = int(Basis(mesh, ElementTriP2()).N)
            return FiniteElementResult(float(impedance), unknowns, now - begun, now - start)
        before = impedance
    raise RuntimeError("the finite elements did not settle")


def _mesh(*, width: float, thickness: float, height: float, level: int) -> MeshTri:
    half, top, far = 0.5 * width, height + thickness, BOX * height
    across = np.concatenate([_towards_end(half, level)[:-1], half + _away(far, height, level)])
    up = np.concatenate([_towards_end(height, level)[:-1], height + _towards_both(thickness, level)[:-1],
                         top + _away(far, height, level)])
    mesh = MeshTri.init_tensor(across, up)
    x, y = mesh.p[:, mesh.t].mean(axis=1)
    copper = np.flatnonzero((x < half) & (y > height) & (y < top))
    return mesh.remove_elements(copper).with_boundaries({
        "ground": lambda p: (p[1] < 1e-9 * height) | (p[0] > 0.999 * (half + far)) | (p[1] > 0.999 * (top + far)),
        "trace": lambda p: (p[0] <= half * (1 + 1e-9)) & (np.abs(p[1] - height - 0.5 * thickness)
                                                          <= 0.5 * thickness * (1 + 1e-9)),
    })


def _energy(mesh: MeshTri, *, height: float, dk: float) -> float:
    """Capacitance of the whole trace over vacuum permittivity, from the energy of half of the section."""
    @BilinearForm
    def form(u, v, w):  # type: ignore[no-untyped-def]  # the shape the library asks for
        return w["dk"] * dot(grad(u), grad(v))

    basis = Basis(mesh, ElementTriP2())
    below = mesh.p[1, mesh.t].mean(axis=0) < height
    flat = basis.with_element(ElementTriP0())
    stiffness = form.assemble(basis, dk=flat.interpolate(np.where(below, dk, 1.0)))
    potential = basis.zeros()
    trace = basis.get_dofs("trace").all()
    potential[trace] = 1.0
    potential = solve(*condense(stiffness, x=potential, D=np.union1d(trace, basis.get_dofs("ground").all())))
    return 2.0 * float(potential @ (stiffness @ potential))


def _shares(level: int) -> Floats:
    """Places on 0..1 that crowd geometrically towards 1: `level` steps each time the rest halves."""
    steps = np.arange(0, level * (4 + 2 * level) + 1)
    return np.concatenate([1.0 - 0.5 ** (steps / level), [1.0]])


def _towards_end(length: float, level: int) -> Floats:
    return length * _shares(level)


def _towards_both(length: float, level: int) -> Floats:
    half = 0.5 * length * (1.0 - _shares(level)[::-1])
    return np.concatenate([half, length - half[-2::-1]])


def _away(far: float, scale: float, level: int) -> Floats:
    """From 0 crowded there, to `far` in growing steps."""
    near = scale * (1.0 - _shares(level)[::-1])
    count = int(np.ceil(level * np.log2(far / scale)))
    return np.concatenate([near, scale * (far / scale) ** (np.arange(1, count + 1) / count)])
