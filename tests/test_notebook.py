"""What a notebook shows of results: tables that say the same as the terminal, safe whatever things are called."""

from __future__ import annotations

from html.parser import HTMLParser

import pytest

from tests.report_examples import made_up_check, made_up_line, made_up_result, many_lines, some_drivers
from tolerance.hypertext import hypertext


class Cells(HTMLParser):
    """Texts of cells, and all tags that were met."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.cells: list[str] = []
        self.tags: list[str] = []
        self.open: list[str] = []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:  # noqa: ARG002
        self.tags.append(tag)
        self.open.append(tag)
        if tag in ("td", "th"):
            self.cells.append("")

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        if self.open[-1] in ("td", "th"):
            self.cells[-1] += data


def test_a_run_shows_yields_with_intervals_verdicts_and_drivers() -> None:
    result = made_up_result((*many_lines(3), made_up_line("still", drivers=()),
                             made_up_line("correlated", drivers=some_drivers(2, shapley=True))))
    shown = Cells(result._repr_html_())
    assert shown.open == []
    assert shown.tags.count("tr") == 1 + len(result.lines)
    assert "97.08 % [97.00, 97.16]" in shown.cells
    assert {"MISSES", "meets"} <= set(shown.cells)
    assert "P1.thickness 52 %, L1.etch 32 %, P1.dk 20 %" in shown.cells
    assert "P1.thickness 53 %, L1.etch 33 %" in shown.cells  # Shapley effects, where there are any
    assert "none" in shown.cells
    assert "limits [ohm]" in shown.cells


def test_a_check_shows_nominals_with_units() -> None:
    shown = Cells(made_up_check(2)._repr_html_())
    for cell in ("50.12", "+0.2", "98.73", "-1.3", "2.950", "5.79", "delay [ps/mm]"):
        assert cell in shown.cells


def test_names_never_become_markup() -> None:
    name = "<script>alert(1)</script> & \"co\""
    shown = Cells(made_up_result((made_up_line(name),), title="<b>board</b>")._repr_html_())
    assert name in shown.cells
    assert not {"script", "b"} & set(shown.tags)


def test_a_row_that_does_not_fit_its_headings_is_refused() -> None:
    with pytest.raises(ValueError, match="as many cells"):
        hypertext("", [], ("one", "two"), [("1",)])
