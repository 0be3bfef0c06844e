"""The drawing note: the impedance table and the text that go on a fabrication drawing. Nothing is solved for it."""

from __future__ import annotations

from dataclasses import dataclass

from tolerance.noted import NotedLine, NoteResult
from tolerance.scenario.tables import Line, Scenario
from tolerance.solver.plan import SolverSettings
from tolerance.study.lines import prepare
from tolerance.units import write_quantity

WIDTH_CHANGE = 0.10  # of the drawn width, that the fabricator may alter: common practice is 10 to 20 %, no source
THICKNESS_CHANGE = 0.10  # of a pressed or core thickness: common practice, no source
METHOD = "IPC-TM-650 2.5.5.7"  # characteristic impedance of lines on printed boards by time domain reflectometry


@dataclass(frozen=True, slots=True)
class Allowance:
    """What the fabricator may alter to meet the impedances, shares of what is drawn."""

    width: float = WIDTH_CHANGE
    thickness: float = THICKNESS_CHANGE


def note(scenario: Scenario, allowance: Allowance | None = None) -> NoteResult:
    """Impedance table and note text of a checked scenario."""
    allowed = allowance or Allowance()
    lines = tuple(_noted(scenario, line, allowed) for line in scenario.lines)
    return NoteResult(scenario.title, lines, _notes(scenario, lines, allowed))


def _noted(scenario: Scenario, line: Line, allowed: Allowance) -> NotedLine:
    prepared = prepare(scenario, line, SolverSettings())
    return NotedLine(
        name=line.name, kind=prepared.kind, mode=prepared.mode, target=line.target, limit=scenario.limit_of(line),
        low_limit=prepared.low_limit, high_limit=prepared.high_limit, layer=line.layer, partner=line.partner,
        references=prepared.surroundings.references, width=line.width, gap=line.gap, ground_gap=line.ground_gap,
        most_width_change=allowed.width * line.width,
    )


def _notes(scenario: Scenario, lines: tuple[NotedLine, ...], allowed: Allowance) -> tuple[str, ...]:
    width, thickness = write_quantity(allowed.width, "share"), write_quantity(allowed.thickness, "share")
    pairs = any(line.gap is not None for line in lines)
    notes = [
        "Controlled impedance. The lines in the table shall have the impedance and limits given there; both ends of "
        "the limits pass. Widths and gaps in the table are finished dimensions at the foot of the trace.",
        f"To meet the impedances the fabricator may alter the widths of the listed lines by up to {width} of the drawn "
        f"width and the thickness of prepreg and core by up to {thickness}. The listed lines are, within that, exempt "
        "from the width tolerance of other copper. "
        + ("Pairs keep their pitch: what the width gains the gap loses. " if pairs else "")
        + "The thickness of the board stays within its own tolerance. Anything beyond is an engineering query before "
        "the first lot; no laminate is changed for one of another Dk without it.",
        f"Test: {METHOD} (time domain reflectometry), on coupons. Every panel carries at least one coupon with every "
        "listed line, made with the board's own artwork widths, gaps, layers and reference planes; alterations of the "
        "board are made on the coupon alike.",
        _acceptance(scenario),
        "Report with each lot: for every coupon and line the target, the limits, the reading, and pass or fail; the "
        "lowest, mean and highest reading of the lot; the widths and thicknesses as altered; the thickness and Dk of "
        "each dielectric as built in; the instrument, its last calibration, and where on the trace it was read.",
    ]
    if scenario.evaluation.frequency is not None:
        notes.append(f"Dk and Df are meant at {write_quantity(scenario.evaluation.frequency, 'frequency')}.")
    return tuple(notes)


def _acceptance(scenario: Scenario) -> str:
    test = scenario.test
    if test is None or test.sample_size is None:
        return "Every panel is tested. A panel with a coupon outside the limits is rejected."
    guard = f" Limits are drawn in by a guard band of {test.guard_band:g} ohm." if test.guard_band else ""
    return (f"Of each lot at least {test.sample_size} coupons are tested, spread over its panels; the lot is rejected "
            f"with more than {test.accept_number or 0} of them outside the limits.{guard}")
