"""`[[sweep]]`: one scenario as many, a value in the place of a key in each.

A key is named by its path, TABLE.KEY or TABLE.ENTRY.KEY; the entry by what names it in its own table (a layer or line
by its name, a variation by its `of`, a list of them joined by ", "), so that an entry's name may hold dots and blanks.
A value is laid over the scenario as an extending file would do it, and the whole is then checked as any other.
"""

from __future__ import annotations

import itertools
import math
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from types import MappingProxyType

from tolerance.errors import as_toml
from tolerance.measurements.tables import Cell, MeasuredTable, Row, TableError, is_blank, read_table
from tolerance.scenario.documents import ENTRY_TABLES, SINGLE_TABLES, Document, Entry, Finding, Place
from tolerance.scenario.drafts import Draft, kind_of
from tolerance.scenario.keys import Text, Texts, Word, close_match
from tolerance.scenario.merging import merge_entry
from tolerance.scenario.readings import file_finding
from tolerance.scenario.tables import (
    MOST_SWEPT,
    Correlation,
    Evaluation,
    ImpedanceTest,
    Layer,
    Line,
    Offer,
    Report,
    Sweep,
    Table,
    Variation,
)

_MODELS: Mapping[str, type[Table]] = MappingProxyType({
    "evaluation": Evaluation, "layers": Layer, "lines": Line, "variations": Variation, "correlations": Correlation,
    "offers": Offer, "test": ImpedanceTest, "report": Report,
})
_TOPS = ("title", "preset")
_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d{1,3})?|\+?inf")
_SHOWN_ROWS = 5  # of a table, in one message


@dataclass(frozen=True, slots=True)
class SweptKey:
    """Where one value goes; `table` is "" for the keys above all tables, `number` that of the entry in its table."""

    table: str
    number: int
    key: str


@dataclass(frozen=True, slots=True)
class Axis:
    """What one `[[sweep]]` gives: its columns, the keys that each stands for, and the values row by row."""

    names: tuple[str, ...]
    keys: tuple[tuple[SweptKey, ...], ...]
    rows: tuple[tuple[object, ...], ...]
    place: Place


def axes_of(document: Document, drafts: Sequence[Draft[Sweep]]) -> tuple[tuple[Axis, ...], list[Finding]]:
    """The axes of a document in their order, and what is wrong with them."""
    axes: list[Axis] = []
    findings: list[Finding] = []
    owners: dict[SweptKey, str] = {}
    for draft in drafts:
        wrong = list(_outline_findings(draft))
        axis = None if wrong or draft.bad or draft.model is None else _axis(document, draft, draft.model, wrong)
        findings += wrong
        if axis is None:
            continue
        axes.append(axis)
        for key in itertools.chain.from_iterable(axis.keys):
            if key in owners:
                findings.append(_at(draft, f"{_written(document, key)} is swept already"))
            owners[key] = draft.entry.label
    count = math.prod(len(axis.rows) for axis in axes)
    if count > MOST_SWEPT:
        findings.append(_at(drafts[-1], f"makes {count} scenarios with those above; must be {MOST_SWEPT} at most"))
    return tuple(axes), findings


def swept_documents(document: Document, axes: Sequence[Axis]) -> Iterator[tuple[dict[str, object], Document]]:
    """The values of each scenario by the names of the columns, and its document; the last axis goes fastest."""
    for rows in itertools.product(*(axis.rows for axis in axes)):
        changed, values = document, dict[str, object]()
        for axis, row in zip(axes, rows, strict=True):
            for name, keys, value in zip(axis.names, axis.keys, row, strict=True):
                values[name] = value
                for key in keys:
                    changed = _with(changed, key, value, axis.place)
        yield values, replace(changed, text=document.text + _as_comment(values))


def _as_comment(values: Mapping[str, object]) -> str:
    return "\n# ---- swept ----\n" + "".join(f"# {name} = {as_toml(value)}\n" for name, value in values.items())


def _with(document: Document, key: SweptKey, value: object, place: Place) -> Document:
    """The document with the value laid over one key."""
    def over(entry: Entry) -> Entry:
        return merge_entry(entry, Entry(key.table, {key.key: value}, entry.place, {key.key: place}))

    if not key.table:
        return replace(document, top=over(document.top))
    if key.table in SINGLE_TABLES:
        empty = Entry(table=key.table, values={}, place=place)
        return replace(document, tables={**document.tables, key.table: over(document.tables.get(key.table, empty))})
    entries = list(document.entries[key.table])
    entries[key.number] = over(entries[key.number])
    return replace(document, entries={**document.entries, key.table: tuple(entries)})


def _outline_findings(draft: Draft[Sweep]) -> Iterator[Finding]:
    given = set(draft.entry.values)
    if "file" in given:
        for key in ("of", "values"):
            if key in given:
                yield draft.entry.finding(key, "must not stand beside file, whose columns are headed by paths")
        wrong = file_finding(draft)
        if wrong is not None:
            yield wrong
    else:
        for key in ("of", "values"):
            if key not in given:
                yield draft.entry.finding(key, "missing; must stand in [[sweep]], or file instead of of and values")
        if "sheet" in given:
            yield draft.entry.finding("sheet", "must stand beside the file that has the sheet")


def _axis(document: Document, draft: Draft[Sweep], model: Sweep, findings: list[Finding]) -> Axis | None:
    if model.file is None:
        keys = _keys(document, draft, model.of or (), "of", findings)
        values: tuple[tuple[object, ...], ...] = tuple((value,) for value in model.values or ())
        return None if keys is None else Axis((", ".join(model.of or ()),), (keys,), values, draft.entry.places["of"])
    try:
        table = read_table(draft.entry.places["file"].folder / model.file, sheet=model.sheet)
        columns = [_keys(document, draft, (heading,), "file", findings) for heading in table.headings]
        if None in columns:
            return None
        keys_of = tuple(keys for keys in columns if keys is not None)
        rows = _rows(table, [_takes_text(keys[0]) for keys in keys_of])
    except TableError as problem:
        findings.append(draft.entry.finding("file", str(problem)))
        return None
    return Axis(table.headings, keys_of, rows, draft.entry.places["file"])


def _keys(
    document: Document, draft: Draft[Sweep], paths: Sequence[str], told_at: str, findings: list[Finding],
) -> tuple[SweptKey, ...] | None:
    """The keys that the paths name; None where one names nothing, which is told."""
    found: list[SweptKey] = []
    for path in paths:
        key = _key(document, path)
        if isinstance(key, SweptKey):
            found.append(key)
        else:
            named = "" if told_at == "of" and len(paths) == 1 else f"{as_toml(path)}: "
            findings.append(draft.entry.finding(told_at, f"{named}{key}"))
    return tuple(found) if len(found) == len(paths) else None


def _key(document: Document, path: str) -> SweptKey | str:
    """The key that a path names, or why it names none."""
    table, dot, rest = path.partition(".")
    if not dot:
        return SweptKey("", 0, path) if path in _TOPS else (
            f"must be the path of a key, TABLE.KEY or TABLE.ENTRY.KEY, or one of {' and '.join(_TOPS)}")
    if table not in _MODELS:
        return f'no table is named "{table}"{close_match(table, _MODELS)}'
    entry, dot, key = rest.rpartition(".")
    if key not in _MODELS[table].model_fields:
        return f'unknown key "{key}" of {_heading(table)}{close_match(key, _MODELS[table].model_fields)}'
    if table in SINGLE_TABLES:
        return f"must be {table}.KEY: {_heading(table)} has no entries" if dot else SweptKey(table, 0, key)
    labels = [one.label for one in document.entries.get(table, ())]
    if not dot:
        return f"must be {table}.ENTRY.KEY, such as {as_toml(f'{table}.{labels[0]}.{key}')}" if labels else \
            f"must be {table}.ENTRY.KEY, and there is no {_heading(table)}"
    if labels.count(entry) > 1:
        return f'{labels.count(entry)} entries of {_heading(table)} are named "{entry}"'
    if entry not in labels:
        return f'no entry of {_heading(table)} is named "{entry}"{close_match(entry, [one for one in labels if one])}'
    return SweptKey(table, labels.index(entry), key)


def _heading(table: str) -> str:
    return f"[[{table}]]" if table in ENTRY_TABLES else f"[{table}]"


def _written(document: Document, key: SweptKey) -> str:
    entry = f"{document.entries[key.table][key.number].label}." if key.table in ENTRY_TABLES else ""
    return as_toml(f"{key.table}.{entry}{key.key}" if key.table else key.key)


def _at(draft: Draft[Sweep], allowed: str) -> Finding:
    """A problem of the whole entry, told at what it sweeps."""
    return draft.entry.finding("of" if "of" in draft.entry.values else "file", allowed)


def _takes_text(key: SweptKey) -> bool:
    """Whether a number in a table is a text where it stands for this key."""
    return not key.table or isinstance(kind_of(_MODELS[key.table], key.key), (Text, Texts, Word))


def _rows(table: MeasuredTable, texts: Sequence[bool]) -> tuple[tuple[object, ...], ...]:
    """The values of every row. Raises TableError with the rows that have blanks."""
    if "" in table.headings or len(set(table.headings)) != len(table.headings):
        raise TableError("every column must be headed by the path of a key, each path once")
    if len(table.rows) > MOST_SWEPT:
        raise TableError(f"has {len(table.rows)} rows; must have {MOST_SWEPT} at most")
    short = [row.number for row in table.rows if any(is_blank(cell) for cell in _cells(row, len(texts)))]
    if short:
        more = f" and {len(short) - _SHOWN_ROWS} more" if len(short) > _SHOWN_ROWS else ""
        raise TableError(f"row {', '.join(str(number) for number in short[:_SHOWN_ROWS])}{more}: has a blank cell; "
                         "every column must hold a value in every row")
    return tuple(tuple(_value(cell, as_text=text) for cell, text in zip(_cells(row, len(texts)), texts, strict=True))
                 for row in table.rows)


def _cells(row: Row, count: int) -> tuple[Cell, ...]:
    return (*row.cells[:count], *[None] * (count - len(row.cells)))


def _value(cell: Cell, *, as_text: bool) -> object:
    """A cell as the scenario would have it: numbers and truth values as such, all else text."""
    if isinstance(cell, float):
        whole = int(cell) if cell.is_integer() else cell
        return f"{whole}" if as_text else whole
    text = str(cell).strip()
    if as_text:
        return text
    if text in ("true", "false"):
        return text == "true"
    if not _NUMBER.fullmatch(text):
        return text
    return int(text) if re.fullmatch(r"[+-]?\d{1,18}", text) else float(text)
