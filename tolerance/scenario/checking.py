"""A scenario read and checked whole: every problem in one go, or a Scenario that nobody needs to check again."""

from __future__ import annotations

import math
import os
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from tolerance.errors import ScenarioError
from tolerance.scenario.documents import Document, Finding
from tolerance.scenario.drafts import Draft, Drafts, Model, draft_tables
from tolerance.scenario.entry_rules import entry_findings
from tolerance.scenario.mixtures import with_mixtures
from tolerance.scenario.presets import Applied, with_preset
from tolerance.scenario.reading import document_of, read_document
from tolerance.scenario.readings import readings_of
from tolerance.scenario.stack_rules import stack_findings
from tolerance.scenario.sweeping import axes_of, swept_documents
from tolerance.scenario.tables import FORMAT, Readings, Report, Scenario
from tolerance.scenario.variation_rules import variation_findings


def load(path: str | os.PathLike[str], *, allow: Iterable[str | os.PathLike[str]] = ()) -> Scenario:
    """The scenario in the TOML file at `path`, with all it extends.

    allow : folders, besides that of the scenario and those below it, in which files may stand that it names.
    Raises InputError when there is no such file to read, ScenarioError with every problem of its text otherwise.
    """
    folders = tuple(map(Path, allow))
    document, findings = read_document(Path(path), allow=folders)
    return _checked(document, findings, source=str(path), allow=folders)


@dataclass(frozen=True, slots=True)
class Swept:
    """One scenario of a sweep: values by the paths of their keys, and the scenario, checked when it is asked for."""

    swept: dict[str, object]
    source: str
    _document: Document = field(repr=False)
    _allow: tuple[Path, ...] = ()

    def scenario(self) -> Scenario:
        """Raises ScenarioError with every problem that these values bring."""
        return _checked(self._document, [], source=self.source, allow=self._allow)


def sweep_of(
    path: str | os.PathLike[str], *, allow: Iterable[str | os.PathLike[str]] = (),
) -> tuple[int, Iterator[Swept]]:
    """How many scenarios the file stands for, and each of them: one without values where it has no [[sweep]].

    Raises InputError when there is no such file to read; ScenarioError when its outline or its [[sweep]] is bad, with
    every other problem of its text besides.
    """
    folders = tuple(map(Path, allow))
    document, findings = read_document(Path(path), allow=folders)
    drafts, _ = draft_tables(document)
    axes, wrong = axes_of(document, drafts.sweep)
    if findings or wrong or any(draft.model is None for draft in drafts.sweep):
        _checked(document, findings, source=str(path), allow=folders)
    count = math.prod(len(axis.rows) for axis in axes)
    return count, (Swept(swept, str(path), one, folders) for swept, one in swept_documents(document, axes))


def parse(
    text: str, *, name: str = "scenario.toml", folder: str | os.PathLike[str] = ".",
    allow: Iterable[str | os.PathLike[str]] = (),
) -> Scenario:
    """The scenario in a text, as if it stood in the file `name` in `folder`. Raises ScenarioError."""
    content = text.encode("utf-8", errors="surrogatepass")
    folders = tuple(map(Path, allow))
    document, findings = document_of(content, name=name, folder=Path(folder), allow=folders)
    return _checked(document, findings, source=name, allow=folders)


def _checked(document: Document, findings: Sequence[Finding], *, source: str, allow: Sequence[Path]) -> Scenario:
    """The document as a Scenario. Raises ScenarioError with all problems, sorted by place."""
    drafts, found = draft_tables(document)
    drafts, unmixed = with_mixtures(drafts)
    drafts, applied, unknown = with_preset(document, drafts)
    problems = [*findings, *found, *unmixed, *unknown, *entry_findings(drafts)]
    readings, unread = readings_of(drafts)
    problems += [*stack_findings(drafts), *variation_findings(drafts), *unread,
                 *axes_of(document, drafts.sweep)[1]]
    problems = _one_for_each_key(problems)
    if problems:
        raise ScenarioError([finding.problem for finding in sorted(problems, key=lambda finding: finding.place)])
    return _scenario(document, drafts, readings, applied, source, allow)


def _one_for_each_key(findings: Iterable[Finding]) -> list[Finding]:
    """The first problem of every key; names in lists may each have one.

    Of a misspelled key it is the first that the key has as the one that is meant.
    """
    kept: dict[tuple[object, ...], Finding] = {}
    for finding in findings:
        problem = finding.problem
        several = problem.allowed if problem.key in ("of", "between", "references", "file") else ""
        key = (finding.place, problem.table, problem.entry, problem.key, several)
        if key not in kept or problem.allowed.startswith(f"{kept[key].problem.allowed} As "):
            kept[key] = finding
    return list(kept.values())


def _scenario(
    document: Document, drafts: Drafts, readings: tuple[Readings, ...], applied: Applied | None, source: str,
    allow: Sequence[Path],
) -> Scenario:
    return Scenario(
        format=FORMAT, title=document.top.values["title"], evaluation=_model(drafts.evaluation),
        layers=_models(drafts.layers), lines=_models(drafts.lines), variations=_models(drafts.variations),
        correlations=_models(drafts.correlations), offers=_models(drafts.offers), sweep=_models(drafts.sweep),
        test=None if drafts.test is None else _model(drafts.test),
        report=_model(drafts.report) if "report" in document.tables else Report(),
        readings=readings, source=source, allowed=tuple(map(str, allow)),
        origins={} if applied is None else dict(applied.origins),
        text=document.text if applied is None else _with_preset_text(document.text, applied),
    )


def _with_preset_text(text: str, applied: Applied) -> str:
    return f"{text.rstrip()}\n\n# ---- preset {applied.preset.name} ----\n{applied.preset.text}"


def _models(drafts: Iterable[Draft[Model]]) -> tuple[Model, ...]:
    return tuple(_model(draft) for draft in drafts)


def _model(draft: Draft[Model]) -> Model:
    if draft.model is None:
        raise AssertionError("a table without a model has a problem, and that was told")
    return draft.model
