"""The figures of a run as PNG files: a page of all lines, and a page for each line: spread, drivers, cross-section."""

from __future__ import annotations

import warnings
from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.image import imsave

from tolerance.report.files import file_names, put_in_place
from tolerance.report.looks import FAIL, FAINT_INK, INK, MEDIUM, PAGE, RESOLUTION, TITLE, our_looks
from tolerance.report.lots_plot import draw_acceptance, draw_levels, draw_lots
from tolerance.report.plots import draw_drivers, draw_overview, draw_spread
from tolerance.report.section_plot import draw_section
from tolerance.report.tables import MISSES, verdict
from tolerance.report.wording import LengthUnit, share_range_text, share_text, shorten, trimmed

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from tolerance.results import Interval, LineResult, NestedYield, RunResult

Picture = npt.NDArray[np.uint8]

OVERVIEW = "all-lines"
LOTS = "lots"
NAME_LENGTH = 48
ROW_OF_OVERVIEW = 0.5  # inches at least
ROW_OF_LEVELS = 0.8
PACKING = 1  # of the PNG files: quick, a few per cent larger


def write_figures(result: RunResult, folder: Path, lengths: LengthUnit,
                  on_progress: Callable[[str, int, int], None] | None = None) -> list[Path]:
    """Write all figures of a run into `folder` (made if missing) and return their paths.

    Raises UnfinishedError where a file cannot be written.
    """
    names = file_names([line.name for line in result.lines], taken=(OVERVIEW, LOTS))
    with ThreadPoolExecutor(max_workers=1) as writer:  # packs one picture while the next is drawn
        jobs = [writer.submit(_write, _drawn(overview_page(result)), folder / f"{OVERVIEW}.png")]
        if result.nested is not None:
            jobs.append(writer.submit(_write, _drawn(lots_page(result, result.nested)), folder / f"{LOTS}.png"))
        for number, (name, line) in enumerate(zip(names, result.lines, strict=True), start=1):
            page = line_page(line, target_yield=result.target_yield, lengths=lengths)
            jobs.append(writer.submit(_write, _drawn(page), folder / f"{name}.png"))
            if on_progress is not None:
                on_progress("figures", number, len(names))
        return [job.result() for job in jobs]


def line_page(line: LineResult, *, target_yield: float, lengths: LengthUnit) -> Figure:
    """One line on a page: spread and drivers above, the cross-section below."""
    with our_looks():
        page = _page(PAGE[1])
        _head(page, shorten(line.name, NAME_LENGTH), f"{line.kind} on {line.layer}{_over(line.references)}",
              line.inside, target_yield)
        draw_spread(page.add_axes((0.065, 0.505, 0.43, 0.31)), line, target_yield=target_yield)
        draw_drivers(page.add_axes((0.56, 0.505, 0.40, 0.31)), line)
        draw_section(page.add_axes((0.065, 0.085, 0.69, 0.29)), line, lengths=lengths)
    return page


def overview_page(result: RunResult) -> Figure:
    """All lines on a page, the yield of all together at its head."""
    height = max(PAGE[1], 2.0 + ROW_OF_OVERVIEW * len(result.lines))
    with our_looks():
        page = _page(height)
        _head(page, shorten(result.title, NAME_LENGTH), f"all lines, {result.coupons:,} coupons, seed {result.seed}",
              result.inside, result.target_yield, judged=False)
        axes = page.add_axes((0.225, 0.65 / height, 0.52, 1.0 - 1.95 / height))
        draw_overview(axes, result, result.lines)
    return page


def lots_page(result: RunResult, nested: NestedYield) -> Figure:
    """Levels and lots on a page: variance by level, lots by their failing coupons, and their acceptance by sample."""
    height = max(PAGE[1], 2.0 + ROW_OF_LEVELS * len(result.lines))
    lots = result.lots
    drawn = "" if lots is None else (f"{lots.lots:,} lots of {lots.panels_per_lot} panels with "
                                     f"{lots.coupons_per_panel} coupons, seed {result.seed}")
    with our_looks():
        page = _page(height)
        _head(page, shorten(result.title, NAME_LENGTH), drawn, result.inside, result.target_yield, judged=False)
        low, reach = 0.65 / height, 1.0 - 2.05 / height
        draw_levels(page.add_axes((0.03, low, 0.42, reach)), result.lines)
        if result.acceptance is None:
            draw_lots(page.add_axes((0.53, low, 0.445, reach)), nested)
        else:
            each = 0.5 * (reach - 1.35 / height)
            draw_lots(page.add_axes((0.53, low + reach - each, 0.445, each)), nested)
            draw_acceptance(page.add_axes((0.53, low, 0.445, each)), result.acceptance)
    return page


def _page(height: float) -> Figure:
    return Figure(figsize=(PAGE[0], height), dpi=RESOLUTION)


def _over(references: tuple[str, ...]) -> str:
    return f", reference {' and '.join(references)}" if references else ""


def _head(page: Figure, title: str, subtitle: str, inside: Interval, target_yield: float, *,
          judged: bool = True) -> None:
    """Title on the left, the yield with its interval and the verdict on the right."""
    height = page.get_figheight()
    first, second = 1.0 - 0.42 / height, 1.0 - 0.78 / height
    page.text(0.025, first, title, fontsize=TITLE, weight="bold", va="center")
    page.text(0.025, second, subtitle, fontsize=MEDIUM, color=FAINT_INK, va="center")
    word = verdict(inside.value, target_yield)
    color = FAIL if judged and word == MISSES else INK
    aim = f"{trimmed(100.0 * target_yield, 3)} %"
    page.text(0.975, first, f"yield {share_text(inside)}", fontsize=TITLE, weight="bold", va="center", ha="right",
              color=color)
    remark = f"{word} the target of {aim}" if judged else f"all lines of a coupon pass; target of each line {aim}"
    page.text(0.975, second, f"95 % interval {share_range_text(inside)} %; {remark}", fontsize=MEDIUM, va="center",
              ha="right", color=color)


def _drawn(page: Figure) -> Picture:
    """The page as points of red, green, blue and opacity, shape (rows, columns, 4)."""
    canvas: Any = FigureCanvasAgg(page)  # its drawing is not typed
    with our_looks(), warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")  # drawn as an empty box
        canvas.draw()
    return np.array(canvas.buffer_rgba(), dtype=np.uint8)


def _write(picture: Picture, path: Path) -> Path:
    return put_in_place(path, lambda beside: imsave(
        beside, picture, format="png", dpi=RESOLUTION, metadata={"Software": "tolerance"},
        pil_kwargs={"compress_level": PACKING}))
