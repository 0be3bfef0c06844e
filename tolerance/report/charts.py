"""Charts that a spreadsheet draws itself, from the cells of the other sheets: to be restyled by whoever wants to."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from openpyxl.chart import BarChart, Reference, ScatterChart, Series
from openpyxl.chart.shapes import GraphicalProperties
from openpyxl.chart.text import RichText
from openpyxl.drawing.line import LineProperties
from openpyxl.drawing.text import CharacterProperties, Paragraph, ParagraphProperties
from openpyxl.worksheet.properties import PageSetupProperties

from tolerance.report.sheet_text import clean_text
from tolerance.report.wording import shorten

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from openpyxl.worksheet.worksheet import Worksheet

    from tolerance.report.tables import Table

BODY, BODY_EDGE, FAIL, FAIL_FILL, GRID = "8FA3C4", "4A5F86", "A3184B", "E9B8C8", "D8DAE2"
COLOURS = ("1D2433", "4A5F86", "A3184B", "E59A1C", "6B7285", "8FA3C4")  # of lines; all together comes first
DASHES = ("solid", "dash", "sysDot", "dashDot")
WIDTH, LEAST_HEIGHT = 17.0, 7.0  # centimetres, of a chart
ROW_HEIGHT = 0.75  # centimetres, of a bar with its room
PLACES = ("A", "K")  # columns where charts begin, two abreast
CELL_HEIGHT = 0.53  # centimetres
DRIVERS_SHOWN = 6
NAME_LENGTH = 44
HIGHEST_START = 0.9  # of the scale of yields
LEAST_REACH = 1e-3  # of a scale
TITLE_POINTS, LABEL_POINTS = 12, 9


@dataclass(frozen=True, slots=True)
class Placed:
    """A table in a sheet: its headings stand in row `top`."""

    sheet: Worksheet
    table: Table
    top: int

    def column(self, key: str) -> int:
        """The number of a column in the sheet."""
        return [column.key for column in self.table.columns].index(key) + 1

    def cells(self, key: str, *, first: int = 0, count: int | None = None) -> Any:
        """A column's cells, from row `first` of the table on."""
        start = self.top + 1 + first
        end = start + (len(self.table.rows) if count is None else count) - 1
        return Reference(self.sheet, min_col=self.column(key), min_row=start, max_row=end)


def draw_charts(sheet: Worksheet, *, summary: Placed, drivers: Placed, by_limit: Placed, target: str) -> None:
    """Yields, what fails, yield against the limit, and the drivers of each line."""
    sheet.sheet_view.showGridLines = False
    sheet.page_setup.orientation, sheet.page_setup.fitToHeight = "portrait", 0
    sheet.sheet_properties.pageSetUpPr = PageSetupProperties(fitToPage=True)
    charts = [
        _bars(f"Yield of each line (target {target})", summary, ("yield",), (BODY,), "0%"),
        _bars("Share that fails", summary, ("below", "above"), (BODY_EDGE, FAIL_FILL), "0.0%"),
        _limit_chart(by_limit),
        *_driver_charts(drivers),
    ]
    row = 1
    for abreast in [charts[:2], charts[2:3], *(charts[start : start + 2] for start in range(3, len(charts), 2))]:
        for chart, column in zip(abreast, PLACES, strict=False):
            sheet.add_chart(chart, f"{column}{row}")
        row += int(max(chart.height for chart in abreast) / CELL_HEIGHT) + 2


def _bars(title: str, placed: Placed, keys: Sequence[str], colours: Sequence[str], form: str) -> Any:
    """One bar a line of the summary, stacked where there are several keys."""
    chart = _bar_chart(title, len(placed.table.rows), form)
    for key, colour in zip(keys, colours, strict=True):
        _add_series(chart, placed.cells(key), placed.table.columns[placed.column(key) - 1].heading, colour)
    chart.set_categories(placed.cells("name"))
    columns = [placed.column(key) - 1 for key in keys]
    totals = [sum(float(row[column] or 0.0) for column in columns) for row in placed.table.rows]
    chart.y_axis.majorUnit = _step(max(totals, default=1.0))
    if len(keys) > 1:
        chart.grouping, chart.overlap = "stacked", 100
        chart.legend.position = "b"
    else:
        chart.legend = None
        lowest = min((float(row[placed.column(keys[0]) - 1] or 0.0) for row in placed.table.rows), default=0.0)
        chart.y_axis.scaling.min = min(math.floor(10.0 * lowest) / 10.0, HIGHEST_START)
        chart.y_axis.scaling.max = 1.0
        chart.y_axis.majorUnit = _step(1.0 - chart.y_axis.scaling.min)
    return chart


def _driver_charts(placed: Placed) -> Iterator[Any]:
    """The largest drivers of each line, whose rows stand together."""
    keys = [column.key for column in placed.table.columns]
    key = "shapley" if "shapley" in keys else "total"
    names = [str(row[keys.index("line")]) for row in placed.table.rows]
    for first in (number for number, name in enumerate(names) if number == 0 or names[number - 1] != name):
        count = min(names[first:].count(names[first]), DRIVERS_SHOWN)
        measure = placed.table.columns[keys.index(key)].heading
        chart = _bar_chart(f"{shorten(names[first], NAME_LENGTH)}: {measure}", count, "0%")
        _add_series(chart, placed.cells(key, first=first, count=count), measure, BODY)
        chart.set_categories(placed.cells("variable", first=first, count=count))
        chart.y_axis.majorUnit = _step(float(placed.table.rows[first][keys.index(key)] or 0.0))
        chart.legend = None
        yield chart


def _limit_chart(placed: Placed) -> Any:
    chart: Any = ScatterChart()
    _dress(chart, "Yield against the limit", 2 * LEAST_HEIGHT)
    chart.width, chart.scatterStyle = 2 * WIDTH, "lineMarker"
    for number, column in enumerate(placed.table.columns[1:]):
        series: Any = Series(placed.cells(column.key), placed.cells(placed.table.columns[0].key),
                             title=clean_text(shorten(column.heading, NAME_LENGTH)))
        series.marker.symbol, series.smooth = "none", False
        dash: Any = DASHES[number // len(COLOURS) % len(DASHES)]
        series.graphicalProperties = GraphicalProperties(ln=LineProperties(
            solidFill=COLOURS[number % len(COLOURS)], prstDash=dash, w=31_750 if number == 0 else 19_050))
        chart.series.append(series)
    chart.x_axis.title, chart.y_axis.title = "limit, half-width, of the target", "yield"
    chart.x_axis.number_format, chart.y_axis.number_format = "0%", "0%"
    chart.x_axis.scaling.min, chart.y_axis.scaling.min, chart.y_axis.scaling.max = 0.0, 0.0, 1.0
    chart.legend.position = "r"
    return chart


def _step(reach: float) -> float:
    """A round step of a scale that goes about so far: it takes three to seven of them."""
    wanted = max(reach, LEAST_REACH) / 5.0
    power = 10.0 ** math.floor(math.log10(wanted))
    return next(factor * power for factor in (1.0, 2.0, 5.0, 10.0) if factor * power >= 0.7 * wanted)


def _bar_chart(title: str, bars: int, form: str) -> Any:
    chart: Any = BarChart()
    _dress(chart, title, max(LEAST_HEIGHT, 2.5 + ROW_HEIGHT * bars))
    chart.type, chart.gapWidth = "bar", 45
    chart.x_axis.scaling.orientation, chart.y_axis.crosses = "maxMin", "max"  # the first line on top, numbers below
    chart.y_axis.number_format = form
    chart.y_axis.scaling.min = 0.0
    return chart


def _dress(chart: Any, title: str, height: float) -> None:
    chart.title = clean_text(title)
    chart.title.tx.rich.p[0].pPr = ParagraphProperties(defRPr=CharacterProperties(sz=100 * TITLE_POINTS, b=True))
    chart.width, chart.height = WIDTH, height
    for axis in (chart.x_axis, chart.y_axis):
        axis.delete = False
        letters = ParagraphProperties(defRPr=CharacterProperties(sz=100 * LABEL_POINTS))
        axis.txPr = RichText(p=[Paragraph(pPr=letters, endParaRPr=CharacterProperties())])
    chart.y_axis.majorGridlines.spPr = GraphicalProperties(ln=LineProperties(solidFill=GRID))


def _add_series(chart: Any, cells: Any, title: str, colour: str) -> None:
    series: Any = Series(cells, title=title)
    series.graphicalProperties = GraphicalProperties(solidFill=colour, ln=LineProperties(solidFill=BODY_EDGE))
    chart.series.append(series)
