"""The figures of a run as files: all lines, yield against the limit, and a page for each line.

PNG by default; SVG and PDF hold the same pages as curves and letters that a drawing program can take up.
"""

from __future__ import annotations

from functools import partial
from io import BytesIO
from typing import TYPE_CHECKING, Any, Literal

import matplotlib as mpl
import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.image import imsave

from tolerance.cores import on_all_cores, silent
from tolerance.report.files import file_names, put_in_place
from tolerance.report.letters import fitted, missing_glyphs_allowed, width_of
from tolerance.report.limit_plot import draw_yield_by_limit
from tolerance.report.looks import FAIL, FAINT_INK, INK, LARGE, MEDIUM, PAGE, RESOLUTION, SMALL, TITLE, our_looks
from tolerance.report.lots_plot import draw_acceptance, draw_levels, draw_lots
from tolerance.report.plots import draw_drivers, draw_overview, draw_spread
from tolerance.report.section_plot import draw_section
from tolerance.report.tables import MISSES, verdict
from tolerance.report.wording import LengthUnit, headline_text, place_words, share_range_text, trimmed

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence
    from pathlib import Path

    from tolerance.results import Interval, LineResult, NestedYield, RunResult

    Page = tuple[str, Callable[[], Figure]]  # its file name and what draws it

FigureFormat = Literal["png", "svg", "pdf"]

OVERVIEW, AGAINST_LIMIT, LOTS = "all-lines", "yield-against-limit", "lots"
ROW_OF_OVERVIEW = 0.5  # inches at least
ROW_OF_LEVELS = 0.8
PANELS_ABREAST = 4  # of the page of yields against the limit
ROW_OF_PANELS = 2.45  # inches
LIMITS_REMARK = ("Yield were the limits wider or closer; band: 95 % interval of the computation. Dashed, dot: as it is."
                 " Shaded: under the target yield.")
MARGIN = 0.025  # of the page's width
PACKING = 1  # of the PNG files: quick, a few per cent larger
METADATA: dict[str, dict[str, str | None]] = {
    "svg": {"Creator": "tolerance", "Date": None}, "pdf": {"Creator": "tolerance", "CreationDate": None},
}


def write_figures(result: RunResult, folder: Path, lengths: LengthUnit,
                  on_progress: Callable[[str, int, int], None] | None = None, *,
                  figure_format: FigureFormat = "png") -> list[Path]:
    """Write all figures of a run into `folder` (made if missing) and return their paths.

    Raises UnfinishedError where a file cannot be written.
    """
    return save_pages(run_pages(result, lengths), folder, figure_format=figure_format, on_progress=on_progress)


def save_pages(pages: Sequence[Page], folder: Path, *, figure_format: FigureFormat,
               on_progress: Callable[[str, int, int], None] | None = None) -> list[Path]:
    """Draw each page and write it under its name; see write_figures."""
    jobs = page_jobs(pages, folder, figure_format=figure_format)
    return on_all_cores(lambda job: job(), jobs, "figures", on_progress or silent)


def page_jobs(pages: Sequence[Page], folder: Path, *, figure_format: FigureFormat) -> list[Callable[[], Path]]:
    """For each page what draws it, writes it under its name and returns the path; see write_figures."""
    return [partial(_save, name, draw, folder, figure_format) for name, draw in pages]


def _save(name: str, draw: Callable[[], Figure], folder: Path, figure_format: FigureFormat) -> Path:
    page = draw()
    content = picture(page) if figure_format == "png" else _curves(page, figure_format, name)
    return put_in_place(folder / f"{name}.{figure_format}", content)


def run_pages(result: RunResult, lengths: LengthUnit) -> list[Page]:
    """The pages of a run, those of all lines first."""
    def page_of(line: LineResult) -> Callable[[], Figure]:
        return lambda: line_page(line, target_yield=result.target_yield, lengths=lengths)

    names = file_names([line.name for line in result.lines], taken=(OVERVIEW, AGAINST_LIMIT, LOTS))
    nested = result.nested
    of_lots = [] if nested is None else [(LOTS, lambda: lots_page(result, nested))]
    return [(OVERVIEW, lambda: overview_page(result)), (AGAINST_LIMIT, lambda: limits_page(result)), *of_lots,
            *((name, page_of(line)) for name, line in zip(names, result.lines, strict=True))]


def line_page(line: LineResult, *, target_yield: float, lengths: LengthUnit) -> Figure:
    """One line on a page: spread and drivers above, the cross-section below."""
    with our_looks():
        page = _page(PAGE[1])
        layers = dict.fromkeys(part.name for part in line.drawing.conductors if part.role == "trace")
        where = place_words(" and ".join(layers), line.references)
        _head(page, line.name, f"{line.kind}; {where}", line.inside, target_yield)
        draw_spread(page.add_axes((0.065, 0.505, 0.43, 0.31)), line, target_yield=target_yield)
        draw_drivers(page.add_axes((0.56, 0.505, 0.40, 0.31)), line)
        draw_section(page.add_axes((0.065, 0.085, 0.69, 0.29)), line, lengths=lengths)
    return page


def overview_page(result: RunResult) -> Figure:
    """All lines on a page, the yield of all together at its head."""
    height = max(PAGE[1], 2.0 + ROW_OF_OVERVIEW * len(result.lines))
    with our_looks():
        page = _page(height)
        _head_of_all(page, result)
        axes = page.add_axes((0.225, 0.65 / height, 0.495, 1.0 - 1.95 / height))
        draw_overview(axes, result, result.lines)
    return page


def limits_page(result: RunResult) -> Figure:
    """Yield against the limit: a panel for each line, and where there are several one for all together."""
    together = [] if len(result.lines) == 1 else [("all lines held to one limit", result.by_limit, None, None)]
    curves = [*together, *((line.name, line.by_limit, line.limit, line.inside) for line in result.lines)]
    panels = len(curves)
    abreast = min(PANELS_ABREAST, panels)
    rows = -(-panels // abreast)
    height = max(PAGE[1], 1.4 + ROW_OF_PANELS * rows)
    with our_looks():
        page = _page(height)
        _head_of_all(page, result)
        page.text(MARGIN, 1.0 - 1.12 / height, LIMITS_REMARK, fontsize=SMALL, color=FAINT_INK, va="center")
        grid = page.add_gridspec(rows, abreast, left=0.065, right=0.975, top=1.0 - 1.9 / height, bottom=0.65 / height,
                                 wspace=0.28, hspace=0.85 if rows > 1 else 0.0)
        for number, (name, curve, limit, inside) in enumerate(curves):
            axes = page.add_subplot(grid[number // abreast, number % abreast])
            draw_yield_by_limit(axes, curve, name=name, target_yield=result.target_yield, limit=limit, inside=inside)
            if number % abreast:
                axes.set_ylabel("")
            if number + abreast < panels:
                axes.set_xlabel("")
    return page


def lots_page(result: RunResult, nested: NestedYield) -> Figure:
    """Levels and lots on a page: variance by level, lots by their failing coupons, and their acceptance by sample."""
    height = max(PAGE[1], 2.0 + ROW_OF_LEVELS * len(result.lines))
    lots = result.lots
    drawn = "" if lots is None else (f"{lots.lots:,} lots of {lots.panels_per_lot} panels with "
                                     f"{lots.coupons_per_panel} coupons, seed {result.seed}")
    with our_looks():
        page = _page(height)
        _head(page, result.title, drawn, result.inside, result.target_yield, judged=False)
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


def _head_of_all(page: Figure, result: RunResult) -> None:
    _head(page, result.title, f"all lines, {result.coupons:,} coupons, seed {result.seed}", result.inside,
          result.target_yield, judged=False)


def _head(page: Figure, title: str, subtitle: str, inside: Interval, target_yield: float, *,
          judged: bool = True) -> None:
    """Title on the left, the yield with its interval and the verdict on the right."""
    height = page.get_figheight()
    first, second = 1.0 - 0.42 / height, 1.0 - 0.78 / height
    word = verdict(inside.value, target_yield)
    color = FAIL if judged and word == MISSES else INK
    aim = f"{trimmed(100.0 * target_yield, 3)} %"
    judged_by = target_yield if judged else None
    answer = f"yield {headline_text(inside, target=judged_by)}"
    remark = f"{word} the target of {aim}" if judged else f"all lines of a coupon pass; target of each line {aim}"
    remark = f"95 % interval {share_range_text(inside, target=judged_by)} %; {remark}"
    page.text(1.0 - MARGIN, first, answer, fontsize=TITLE, weight="bold", va="center", ha="right", color=color)
    page.text(1.0 - MARGIN, second, remark, fontsize=MEDIUM, va="center", ha="right", color=color)
    room = 72.0 * PAGE[0] * (1.0 - 2.0 * MARGIN) - 24.0
    words, size = fitted(title, room - width_of(answer, TITLE, bold=True), (TITLE, 18.0, LARGE), bold=True)
    page.text(MARGIN, first, words, fontsize=size, weight="bold", va="center")
    words, size = fitted(subtitle, room - width_of(remark, MEDIUM), (MEDIUM, SMALL))
    page.text(MARGIN, second, words, fontsize=size, color=FAINT_INK, va="center")


def picture(page: Figure) -> Callable[[Path], object]:
    """The page drawn as points of red, green, blue and opacity; what writes them to a file."""
    canvas: Any = FigureCanvasAgg(page)  # its drawing is not typed
    with our_looks(), missing_glyphs_allowed():
        canvas.draw()
    points = np.array(canvas.buffer_rgba(), dtype=np.uint8)
    return lambda beside: imsave(beside, points, format="png", dpi=RESOLUTION, metadata={"Software": "tolerance"},
                                 pil_kwargs={"compress_level": PACKING})


def _curves(page: Figure, figure_format: FigureFormat, name: str) -> Callable[[Path], object]:
    """The page as curves and letters; what writes them to a file.

    The same page gives the same file: it holds no date, and its parts are named after `name`.
    """
    content = BytesIO()
    with our_looks(), mpl.rc_context({"svg.hashsalt": name, "pdf.fonttype": 42}), missing_glyphs_allowed():
        page.savefig(content, format=figure_format, metadata=METADATA[figure_format])
    return lambda beside: beside.write_bytes(content.getvalue())
