"""The page as one HTML file: a template filled with a run, its style and scripts inside it, and nothing from outside.

What a scenario says is text that somebody else may have written: the template escapes all of it, the data cannot end
the element that they stand in, and the page's own policy lets no script run but those whose digests it names, and
nothing be fetched at all.
"""

from __future__ import annotations

import base64
import hashlib
from dataclasses import dataclass
from importlib.resources import files
from pathlib import Path

from jinja2 import Environment, PackageLoader, StrictUndefined

from tolerance.paged import Page
from tolerance.report.files import put_in_place
from tolerance.report.page.data import (
    is_scalable,
    members_of,
    script_data,
    variation_words,
    width_steps,
)
from tolerance.report.page.run_words import RunWords, run_words
from tolerance.report.page.section import SectionPicture, section_picture
from tolerance.report.tables import line_words, ranking
from tolerance.report.wording import CAUTION, percent, place_words, variable_words
from tolerance.results import LineResult

SCRIPTS = ("arithmetic.js", "process.js", "board.js", "judging.js", "words.js", "pictures.js", "view.js")
DRIVERS_SHOWN = 6
LARGEST_FILE = 3_000_000  # bytes


@dataclass(frozen=True, slots=True)
class DriverBar:
    """A driver of a line: its name, its share in words and of the widest bar."""

    name: str
    share: str
    length: float


@dataclass(frozen=True, slots=True)
class LineView:
    """What the template shows of a line."""

    number: int
    name: str
    place: str
    words: object
    drivers: tuple[DriverBar, ...]
    section: SectionPicture


@dataclass(frozen=True, slots=True)
class Slider:
    """A control: its number, what it is called, and how far it goes in steps."""

    number: int
    name: str
    detail: str
    can_scale: bool = True
    can_move: bool = True
    steps: int = 0


def page_text(page: Page) -> str:
    """The whole file."""
    environment = Environment(loader=PackageLoader("tolerance.report", "page"), autoescape=True, trim_blocks=True,
                              lstrip_blocks=True, undefined=StrictUndefined)
    own = files("tolerance.report") / "page"
    style = (own / "page.css").read_text(encoding="utf-8")
    script = "\n".join((own / name).read_text(encoding="utf-8") for name in SCRIPTS)
    return environment.get_template("template.html").render(
        page=page, result=page.result, run=_run(page), lines=[_line(page, number) for number in range(len(page.lines))],
        variations=_variations(page), widths=_widths(page), own_limits=_own_limits(page),
        shared_limit=not all(page.own_limits), data=script_data(page), style=style, script=script,
        style_digest=_digest(style), script_digest=_digest(script), caution=CAUTION,
    )


def write_page(page: Page, path: Path) -> Path:
    """Write the page to `path`, whole or not at all. Raises UnfinishedError."""
    text = page_text(page)
    return put_in_place(path, lambda beside: beside.write_text(text, encoding="utf-8", newline="\n"))


def _digest(text: str) -> str:
    return "sha256-" + base64.b64encode(hashlib.sha256(text.encode("utf-8")).digest()).decode("ascii")


def _run(page: Page) -> RunWords:
    return run_words(page)


def _line(page: Page, number: int) -> LineView:
    line = page.result.lines[number]
    return LineView(number, line.name, f"{line.kind}, {place_words(line.layer, line.references)}",
                    line_words(line, page.result.target_yield), _drivers(line),
                    section_picture(line.drawing, "mil" if page.lengths == "mil" else "um"))


def _drivers(line: LineResult) -> tuple[DriverBar, ...]:
    shown = line.drivers[:DRIVERS_SHOWN]
    widest = max((ranking(driver).value for driver in shown), default=1.0) or 1.0
    return tuple(DriverBar(variable_words(driver.variable), percent(ranking(driver).value, 0),
                           round(100.0 * max(ranking(driver).value, 0.0) / widest, 1)) for driver in shown)


def _variations(page: Page) -> list[Slider]:
    sliders = []
    for number, each in enumerate(page.variations):
        named = {one.name for one in members_of(page, number)}
        detail = each.shape.replace("_", " ") + ("" if len(named) == 1 else f", {len(named)} properties")
        sliders.append(Slider(number, variation_words(each), detail, is_scalable(page, number),
                              each.shift_reach > 0.0))
    return sliders


def _widths(page: Page) -> list[Slider]:
    return [Slider(number, line.name, "keeps its pitch" if page.drawn[number][1] is not None else "",
                   steps=width_steps(line, page.lengths)) for number, line in enumerate(page.lines)]


def _own_limits(page: Page) -> list[Slider]:
    return [Slider(number, line.name, "") for number, line in enumerate(page.lines) if page.own_limits[number]]
