"""The drawing note: the impedance table and the numbered notes, as plain text and as a table for a sheet."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING

from tolerance.report.tables import Cell, Column, Table
from tolerance.report.wording import METRES_IN, LengthUnit, length_text, shorten, trimmed

if TYPE_CHECKING:
    from tolerance.noted import NotedLine, NoteResult

NOTE_WIDTH = 80
MODE_WORDS = {"single": "", "differential": " differential", "common": " common mode"}


def note_text(result: NoteResult, lengths: LengthUnit) -> str:
    """The note for the drawing as plain text: the impedance table, then numbered notes, 80 columns wide."""
    heads = ("line", "target [ohm]", "limits [ohm]", "layer, planes", f"width, gap [{lengths}]")
    rows = [heads, *(_note_row(one, lengths) for one in result.lines)]
    widths = [max(len(row[column]) for row in rows) for column in range(len(heads))]
    over = sum(widths) + 2 * (len(heads) - 1) - NOTE_WIDTH
    widths[0] = max(widths[0] - max(over, 0), 12)
    text = [f"IMPEDANCE TABLE: {result.title}", ""]
    for row in rows:
        text.append("  ".join(shorten(cell, width).ljust(width)
                              for cell, width in zip(row, widths, strict=True)).rstrip())
    text.append("")
    for number, note in enumerate(result.notes, start=1):
        text += textwrap.wrap(note, NOTE_WIDTH, initial_indent=f"{number}. ", subsequent_indent="   ")
    return "\n".join(text) + "\n"


def _note_row(one: NotedLine, lengths: LengthUnit) -> tuple[str, str, str, str, str]:
    drawn = [one.width, *(gap for gap in (one.gap, one.ground_gap) if gap is not None)]
    sizes = ", ".join(length_text(each, lengths).removesuffix(f" {lengths}") for each in drawn)
    sizes += " to ground" if one.ground_gap is not None else ""
    limits = f"{trimmed(100.0 * one.limit, 2)} %, {trimmed(one.low_limit, 2)} to {trimmed(one.high_limit, 2)}"
    place = ", ".join([_layer(one), *one.references])
    return one.name, f"{trimmed(one.target, 2)}{MODE_WORDS[one.mode]}", limits, place, sizes


def _layer(one: NotedLine) -> str:
    return one.layer if one.partner is None else f"{one.layer} over {one.partner}"


def note_table(result: NoteResult, lengths: LengthUnit) -> Table:
    """The impedance table with a number in each cell that holds one; lengths in the unit of the report."""
    digits = 1 if lengths == "um" else 2
    columns = (
        Column("name", "line"), Column("target", "target", "ohm", 2), Column("mode", "of a pair"),
        Column("limit", "limit, half-width", "share", 1), Column("low", "lowest", "ohm", 2),
        Column("high", "highest", "ohm", 2), Column("layer", "layer"), Column("planes", "reference planes"),
        Column("width", "width at the foot", lengths, digits), Column("gap", "gap", lengths, digits),
        Column("ground_gap", "gap to ground", lengths, digits),
        Column("change", "width may be altered by up to", lengths, digits),
    )
    rows: list[dict[str, Cell]] = [{
        "name": one.name, "target": one.target, "mode": MODE_WORDS[one.mode].strip() or None, "limit": one.limit,
        "low": one.low_limit, "high": one.high_limit, "layer": _layer(one), "planes": ", ".join(one.references),
        **{key: None if size is None else size / METRES_IN[lengths]
           for key, size in (("width", one.width), ("gap", one.gap), ("ground_gap", one.ground_gap),
                             ("change", one.most_width_change))},
    } for one in result.lines]
    filled = tuple(column for column in columns if any(row[column.key] is not None for row in rows))
    return Table.of(filled, rows)
