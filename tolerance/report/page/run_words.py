"""What the page says of the run that it starts from, and of what it does not compute anew."""

from __future__ import annotations

from dataclasses import dataclass

from tolerance.paged import Page
from tolerance.report.tables import ranking_name
from tolerance.report.wording import share_range_text, share_text, share_with_range, trimmed
from tolerance.results import RunResult


@dataclass(frozen=True, slots=True)
class RunWords:
    """The headline, whether all is well, and sentences about the run; `stays` are those that no slider moves."""

    inside: str
    inside_range: str
    target: str
    meets: bool
    coupons: str
    page_coupons: str
    ranking: str
    stays: tuple[str, ...]
    solver_runs: str
    page_runs: str
    versions: str


def run_words(page: Page) -> RunWords:
    """All of it."""
    result = page.result
    return RunWords(
        inside=share_text(result.inside), inside_range=share_range_text(result.inside),
        target=f"{trimmed(100.0 * result.target_yield, 3)} %", meets=not result.misses_target,
        coupons=f"{result.coupons:,}", page_coupons=f"{page.draws.block * page.draws.replicates:,}",
        ranking=ranking_name(result.lines), stays=tuple(_stays(result)),
        solver_runs=f"{result.record.solver_runs:,}", page_runs=f"{sum(line.solver_runs for line in page.lines):,}",
        versions=", ".join(f"{name} {number}" for name, number in result.record.versions.items()),
    )


def _stays(result: RunResult) -> list[str]:
    """Answers of the run that the page shows as they are."""
    told = ["The ranking of the drivers is that of the run: it changes little with means and widths, and follows the "
            "tolerances roughly as their squares."]
    if result.lots is not None and result.nested is not None:
        nested = result.nested
        told.append(f"Panels and lots: of {result.lots.lots:,} lots of {result.lots.panels_per_lot} panels with "
                    f"{result.lots.coupons_per_panel} coupons each, {share_with_range(nested.panel)} of the panels and "
                    f"{share_with_range(nested.lot)} of the lots have every coupon inside, as run. Yields that follow "
                    "the sliders are those of coupons.")
    if result.reading is not None:
        reading = result.reading
        told.append(f"The test, as run: read as inside {share_with_range(reading.as_read)}, accepted "
                    f"{share_with_range(reading.accepted)}, false accepts {share_text(reading.false_accepts)}, false "
                    f"rejects {share_text(reading.false_rejects)}. Yields that follow the sliders are those of the "
                    "true impedance, without reading and guard band.")
    if result.acceptance is not None:
        told.append("The chance that a lot is accepted stands in the workbook of the run; no slider moves it.")
    if result.measured:
        told.append("What the number of readings leaves open is in the intervals of the run; the page carries it along "
                    "as it is.")
    if any(line.tail is not None for line in result.lines):
        told.append("Where hardly any coupon fails the run integrates; the page counts what a change adds or takes "
                    "away, and cannot resolve less than one coupon.")
    return told
