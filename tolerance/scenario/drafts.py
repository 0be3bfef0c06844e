"""Entries as models where they can be, and what each key by itself has wrong, in our words."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any, Generic, TypeVar

from pydantic import ValidationError
from pydantic.fields import FieldInfo

from tolerance.scenario.documents import Document, Entry, Finding, unknown_key
from tolerance.scenario.keys import FROM_FILE, Kind, RefusedError, Text, close_match, meant_by
from tolerance.scenario.layer_keys import LAYER_KEYS
from tolerance.scenario.tables import (
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

Model = TypeVar("Model", bound=Table)


@dataclass(frozen=True, slots=True)
class Draft(Generic[Model]):
    """One entry and, where every key of it reads well, its model; `bad` are the keys already told of."""

    entry: Entry
    model: Model | None
    bad: frozenset[str]

    def given(self, key: str) -> bool:
        """Whether the key stands there and reads well."""
        return key in self.entry.values and key not in self.bad

    def text(self, key: str) -> str | None:
        """The key's value where it is a text that reads well."""
        value = self.entry.values.get(key)
        return value if isinstance(value, str) and key not in self.bad else None


@dataclass(frozen=True, slots=True)
class Drafts:
    """All tables of a scenario; a table that does not stand there is drafted from nothing."""

    evaluation: Draft[Evaluation]
    layers: tuple[Draft[Layer], ...]
    lines: tuple[Draft[Line], ...]
    variations: tuple[Draft[Variation], ...]
    correlations: tuple[Draft[Correlation], ...]
    offers: tuple[Draft[Offer], ...]
    sweep: tuple[Draft[Sweep], ...]
    test: Draft[ImpedanceTest] | None
    report: Draft[Report]


def draft_tables(document: Document) -> tuple[Drafts, list[Finding]]:
    """Every table of the document read key by key."""
    findings = _top_findings(document.top, document)

    def single(name: str, model: type[Model]) -> Draft[Model]:
        empty = Entry(table=name, values={}, place=document.top.place)
        return _draft(document.tables.get(name, empty), model, findings)

    def several(name: str, model: type[Model]) -> tuple[Draft[Model], ...]:
        return tuple(_draft(entry, model, findings) for entry in document.entries.get(name, ()))

    drafts = Drafts(
        evaluation=single("evaluation", Evaluation), layers=several("layers", Layer), lines=several("lines", Line),
        variations=several("variations", Variation), correlations=several("correlations", Correlation),
        offers=several("offers", Offer), sweep=several("sweep", Sweep),
        test=single("test", ImpedanceTest) if "test" in document.tables else None,
        report=single("report", Report),
    )
    return drafts, findings


def kind_of(model: type[Table], key: str) -> Kind:
    """What the key of the table may hold."""
    return _kind(model.model_fields[key])


def _kind(info: FieldInfo) -> Kind:
    for item in info.metadata:
        if isinstance(item, Kind):
            return item
    raise TypeError("every key of a table says what it may hold")


def _draft(written: Entry, model: type[Model], findings: list[Finding]) -> Draft[Model]:
    entry = _as_meant(written, model, findings)
    try:
        return Draft(entry, model.model_validate(dict(entry.values), context=dict(FROM_FILE)), frozenset())
    except ValidationError as problems:
        found = {str(error["loc"][0]): _words(model, str(error["loc"][0]), error) for error in problems.errors()}
    findings += [entry.finding(key, words) for key, words in found.items()]
    return Draft(entry, None, frozenset(found))


def _as_meant(entry: Entry, model: type[Table], findings: list[Finding]) -> Entry:
    """The entry without unknown keys, each told; a misspelled key is read as the one that is meant."""
    known = _known_keys(entry, model)
    values, places, misspelled = dict(entry.values), dict(entry.places), dict[str, str]()
    for key in entry.values:
        if key in model.model_fields:
            continue
        meant = meant_by(key, known)
        findings.append(entry.finding(key, f"unknown key{close_match(key, known)}" if meant is None
                                      else unknown_key(meant)))
        value, place = values.pop(key), places.pop(key)
        if meant is not None and meant not in values:
            values[meant], places[meant], misspelled[meant] = value, place, key
    return replace(entry, values=values, places=places, misspelled=misspelled)


def _known_keys(entry: Entry, model: type[Table]) -> tuple[str, ...]:
    """The keys that may be meant: of a layer those of its kind, where it says one."""
    kind = entry.values.get("kind")
    if model is Layer and isinstance(kind, str) and kind in LAYER_KEYS:
        return ("name", "kind", *LAYER_KEYS[kind].needed, *LAYER_KEYS[kind].taken)
    return tuple(model.model_fields)


def _words(model: type[Table], key: str, error: Mapping[str, Any]) -> str:
    """What is allowed, instead of pydantic's own message."""
    if error["type"] == "missing":
        return f"missing; must be {kind_of(model, key).allowed}"
    context = error.get("ctx", {})
    return str(context.get("allowed", f"must be {kind_of(model, key).allowed}"))


def _top_findings(top: Entry, document: Document) -> list[Finding]:
    """The keys above the tables, and the tables that no scenario can do without."""
    findings: list[Finding] = []
    if "format" not in top.values:
        findings.append(top.finding("format", "missing; must be 1, the version of the format"))
    title = Text("a title")
    try:
        if "title" not in top.values:
            findings.append(top.finding("title", f"missing; must be {title.allowed}"))
        else:
            title.read(top.values["title"], from_file=True)
    except RefusedError as reason:
        findings.append(top.finding("title", f"must be {reason}"))
    needed = {"layers": "one entry for each layer, top to bottom", "lines": "one entry for each line"}
    for name, what in needed.items():
        if not document.entries.get(name) and name not in document.misplaced:
            findings.append(Entry(table=name, values={}, place=top.place._replace(line=10**9)).finding(
                "", f"missing; must be {what}"))
    return findings
