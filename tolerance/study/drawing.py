"""The section of a line as it is drawn: to scale at the nominals, and where tolerances move its edges."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tolerance.process.draws import Process, ProcessDraws, columns_moving
from tolerance.sections.bands import bands_of
from tolerance.sections.drawing import Drawing, drawing_of, with_fills
from tolerance.sections.surroundings import properties_that_reach
from tolerance.solver.line import AnySection
from tolerance.study.lines import PreparedLine

DEVIATIONS = 3.0  # either way, of what moves: 99.7 % of the coupons


def draw_line(prepared: PreparedLine, process: Process) -> Drawing:
    """The nominal section, with a band on each edge that any tolerance alone moves, three deviations either way."""
    def drawn(section: AnySection) -> Drawing:
        return drawing_of(section, prepared.surroundings, prepared.line.layer)

    columns = columns_moving(process, properties_that_reach(prepared.surroundings, prepared.line))
    germ = np.zeros((2 * len(columns), len(process.variables)))
    for number, column in enumerate(columns):
        germ[2 * number : 2 * number + 2, column] = -DEVIATIONS, DEVIATIONS
    moved = prepared.section(ProcessDraws(process, germ))
    nominal = with_fills(drawn(prepared.nominal), prepared.surroundings, process.nominals)
    bands = bands_of(nominal, [drawn(moved.rows(slice(row, row + 1))) for row in np.flatnonzero(moved.possible)])
    return replace(nominal, bands=bands)
