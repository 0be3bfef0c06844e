"""How many sections a second the field solver takes on one core: `python -m tests.benchmarks.solver`.

Beside each kind of line stands what its linear algebra alone costs (numpy.linalg.solve of the same sizes): the floor;
and what all partial derivatives of one mode cost on top of its solution, in solutions.
At the end scikit-fem solves one bare microstrip to 0.02 % in the same run, where it is installed.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Callable
from functools import partial

import numpy as np

from tests.section_examples import EVEN, ODD, microstrip, stripline
from tolerance.arrays import FloatArray
from tolerance.sections.section import Section
from tolerance.solver.derivatives import impedance_slopes
from tolerance.solver.line import solve_modes
from tolerance.solver.plan import Plan, plan_for
from tolerance.solver.structure import structure

SINGLE_THREAD = dict.fromkeys(
    ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "VECLIB_MAXIMUM_THREADS"), "1")
INSIDE = "--inside"
REPEATS = 3
SECTIONS = 512
ACCURACY = 2e-4  # asked of the finite elements, as a share
#: independent finite-element calculation with scikit-fem, energy bounded from both sides: 68.823871 ohm +-0.0045 %
REFERENCE = {"width": 75.0, "thickness": 15.0, "height": 60.0, "dk": 3.0}


def main() -> None:
    """Measure in a child process whose linear algebra keeps to one thread."""
    if INSIDE not in sys.argv:
        command = [sys.executable, "-m", "tests.benchmarks.solver", INSIDE]
        sys.exit(subprocess.run(command, env={**os.environ, **SINGLE_THREAD}, check=False).returncode)
    print(f"{'default accuracy, one core, batched':<42}{'sections/s':>11}{'ms each':>9}{'unknowns':>10}{'floor/s':>9}"
          f"{'derivatives':>13}")
    for name, section, modes in examples():
        measure(name, section, modes)
    beside_finite_elements()


def examples() -> list[tuple[str, Section, tuple[int, ...]]]:
    """Sections of every kind, each dimension spread by 5 % (uniform, seeded)."""
    chance = np.random.default_rng(1)

    def spread(value: float) -> FloatArray:
        return np.asarray(value * (1.0 + 0.05 * chance.uniform(-1.0, 1.0, SECTIONS)))

    foot, crest, thickness, height, dk = (spread(value) for value in (180.0, 150.0, 40.0, 100.0, 4.0))
    over_plane = partial(microstrip, foot=foot, crest=crest, thickness=thickness, height=height, dk=dk)
    gap, mask, cover = spread(150.0), (spread(25.0), spread(15.0), spread(3.5)), (spread(60.0), spread(3.5))
    two_dk = stripline(foot=foot, crest=crest, thickness=0.4 * thickness, core=(spread(150.0), spread(4.4)),
                       prepreg=(spread(180.0), spread(3.7)))
    return [
        ("bare microstrip", over_plane(), (EVEN,)),
        ("embedded microstrip", over_plane(cover=cover), (EVEN,)),
        ("stripline between two Dk", two_dk, (EVEN,)),
        ("bare microstrip pair, both modes", over_plane(gap=gap), (EVEN, ODD)),
        ("mask-coated microstrip", over_plane(mask=mask), (EVEN,)),
        ("mask-coated microstrip pair, both modes", over_plane(mask=mask, gap=gap), (EVEN, ODD)),
    ]


def measure(name: str, section: Section, modes: tuple[int, ...]) -> None:
    """Print one row."""
    plan = plan_for(section)
    seconds = shortest(lambda: solve_modes(section, plan, modes=modes)) / section.count
    edges = structure(section.rows(slice(0, 1))).edges
    counts = [(edge.conducts, plan.count(edge)[0] // (2 if edge.folded else 1)) for edge in edges]
    unknowns, copper = sum(count for _, count in counts), sum(count for conducts, count in counts if conducts)
    floor = len(modes) * (linear_algebra(unknowns) + linear_algebra(copper))
    print(f"{name:<42}{1.0 / seconds:>11,.0f}{1e3 * seconds:>9.3f}{unknowns:>10}{1.0 / floor:>9,.0f}"
          f"{derivatives_cost(section, plan, modes[-1]):>+13.2f}")


def derivatives_cost(section: Section, plan: Plan, mode: int) -> float:
    """What the derivatives of one mode cost beside its solution, in solutions."""
    alone = shortest(lambda: solve_modes(section, plan, modes=(mode,)))
    return shortest(lambda: impedance_slopes(section, plan, mode=mode)) / alone - 1.0


def linear_algebra(unknowns: int, batch: int = 64) -> float:
    """Seconds for one dense solution of this size, in a batch."""
    chance = np.random.default_rng(2)
    matrix = chance.standard_normal((batch, unknowns, unknowns)) + 10.0 * np.eye(unknowns)
    wanted = np.ones((batch, unknowns, 1))
    return shortest(lambda: np.linalg.solve(matrix, wanted)) / batch


def shortest(work: Callable[[], object]) -> float:
    """Processor seconds of the quickest of a few repeats, after one to warm up."""
    work()
    seconds = []
    for _ in range(REPEATS):
        start = time.process_time()
        work()
        seconds.append(time.process_time() - start)
    return min(seconds)


def beside_finite_elements() -> None:
    """The same section by finite elements, to the accuracy that the solver promises."""
    try:
        from tests.benchmarks.finite_elements import microstrip_by_finite_elements
    except ImportError as missing:
        print(f"\nscikit-fem is left out: {missing}. It comes with the extra `benchmark`.")
        return
    size = REFERENCE
    section = microstrip(foot=size["width"], crest=size["width"], thickness=size["thickness"], height=size["height"],
                         dk=size["dk"])
    plan = plan_for(section)
    ours = solve_modes(section, plan, modes=(EVEN,))[EVEN].impedance[0]
    seconds = shortest(lambda: solve_modes(section, plan, modes=(EVEN,)))
    found = microstrip_by_finite_elements(**size, change=ACCURACY)
    print(f"\nOne bare microstrip ({', '.join(f'{name} {value:g}' for name, value in size.items())}):")
    print(f"  this solver, alone    {ours:.4f} ohm in {1e3 * seconds:9.2f} ms")
    print(f"  scikit-fem, to {100 * ACCURACY:g} % {found.impedance:.4f} ohm in {1e3 * found.seconds:9.2f} ms "
          f"({found.unknowns:,} unknowns; {1e3 * found.seconds_with_coarser:.0f} ms with the coarser meshes)")


if __name__ == "__main__":
    main()
