"""From a path to one merged document: the file, its encoding, its TOML, and the chain of files it extends."""

from __future__ import annotations

import os
from collections.abc import Iterable
from dataclasses import replace
from pathlib import Path

from tolerance.errors import InputError, Problem, ScenarioError
from tolerance.scenario.documents import Document, Finding, Place, outline
from tolerance.scenario.merging import merge
from tolerance.scenario.places import line_numbers
from tolerance.scenario.tables import FORMAT
from tolerance.scenario.toml_text import MOST_ITEMS, read_toml
from tolerance.scenario.trust import Trust

_LARGEST = 500_000  # bytes, with all it extends; a scenario is a short text
_NO_SCENARIO = ("must be a scenario; what stands there has tables or keys of its own, and nothing is told of it "
                "(to be told, allow its folder: --allow DIR)")
_LONGEST_CHAIN = 20  # scenarios that extend each other
_NOT_TEXT = ((b"PK\x03\x04", "is a workbook or an archive"), (b"\xd0\xcf\x11\xe0", "is an office document"),
             (b"%PDF", "is a PDF"), (b"\x89PNG", "is a picture"), (b"\x1f\x8b", "is an archive"))


def read_document(path: Path, *, allow: Iterable[Path] = ()) -> tuple[Document, list[Finding]]:
    """The scenario at `path` merged with all it extends, and what is wrong with the outlines.

    allow : folders in which tables of readings may stand, besides those of the scenarios that name them.
    Raises InputError when the file cannot be read, ScenarioError when it, or one it extends, is not UTF-8 TOML.
    """
    try:
        content = _bytes_of(path, _LARGEST)
    except InputError as problem:
        raise InputError(f"{path}: {problem}") from None
    return document_of(content, name=path.name, folder=path.parent, path=path, allow=allow)


def document_of(
    content: bytes, *, name: str, folder: Path, path: Path | None = None, allow: Iterable[Path] = (),
) -> tuple[Document, list[Finding]]:
    """As `read_document`, from the bytes of a scenario that stands (or would stand) in `folder` as `name`."""
    room = _LARGEST - len(content)
    seen = [_resolved(path)] if path is not None else []
    files = [path or folder / name]
    chain: list[Document] = []
    findings: list[Finding] = []
    place = Place(depth=0, line=0, number=0, file=name, folder=folder, trust=Trust.around(folder, allow))
    while True:
        before = len(findings)
        document = _parsed(content, place, findings)
        if chain and len(findings) > before and place.trust.why_not(folder, place.file):
            raise _refused(chain[-1], _NO_SCENARIO, findings[:before])
        chain.append(document)
        findings += _format_findings(document)
        if "extends" not in document.top.values:
            break
        base = _base_path(document, seen, findings)
        seen.append(_resolved(base))
        files.append(base)
        place = place._replace(depth=len(chain), file=_shown(base, folder), folder=base.parent)
        try:
            content = _bytes_of(base, room)
            room -= len(content)
        except InputError as problem:
            raise _refused(document, str(problem), findings) from None
    merged = chain.pop()
    while chain:
        merged = merge(merged, chain.pop())
    return replace(_in_proportion(merged, name), files=tuple(files)), findings


def _in_proportion(document: Document, name: str) -> Document:
    for table, entries in document.entries.items():
        if len(entries) > MOST_ITEMS:
            raise ScenarioError([Problem(file=name, table=f"[[{table}]]", allowed=f"has {len(entries)} entries with "
                                         f"those it extends; at most {MOST_ITEMS} are read")])
    return document


def _bytes_of(path: Path, room: int) -> bytes:
    """The content, of at most `room` bytes. Raises InputError with the reason alone."""
    try:
        if path.is_dir():
            raise InputError("is a folder; a scenario is a TOML file")
        if not path.exists():
            raise InputError("there is no such file")
        if not path.is_file():
            raise InputError("is not a regular file")
        if path.stat().st_size > room:
            raise InputError(f"is too large: a scenario, with all it extends, holds at most {_LARGEST // 1000} kB")
        return path.read_bytes()
    except OSError as problem:
        raise InputError(f"cannot be read: {problem.strerror or problem}") from None
    except ValueError:
        raise InputError("is not the path of a file") from None


def _parsed(content: bytes, place: Place, findings: list[Finding]) -> Document:
    """The outline of one file. Raises ScenarioError, with the findings so far, when it is not UTF-8 TOML."""
    try:
        text = _text_of(content)
        raw = read_toml(text)
    except InputError as problem:
        told = Problem(file=place.file, table="", allowed=str(problem))
        raise ScenarioError([*(finding.problem for finding in findings), told]) from None
    document, wrong = outline(raw, text=text, lines=line_numbers(text), origin=place)
    findings += wrong
    return document


def _text_of(content: bytes) -> str:
    for beginning, words in _NOT_TEXT:
        if content.startswith(beginning):
            raise InputError(f"{words}; a scenario is a TOML file, plain text")
    if content.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise InputError("must be UTF-8 text: it begins as UTF-16 does; save it as UTF-8")
    if b"\0" in content:
        raise InputError("must be UTF-8 text: it holds binary data; save it as UTF-8")
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as problem:
        line = content.count(b"\n", 0, problem.start) + 1
        raise InputError(f"must be UTF-8 text: line {line} holds a byte that is not; save it as UTF-8") from None
    text = text.replace("\r\n", "\n")
    if "\r" in text and "\n" not in text:
        raise InputError("has lines that end in a carriage return alone; save it with ordinary line ends")
    return text


def _format_findings(document: Document) -> list[Finding]:
    top = document.top
    value = top.values.get("format")
    if "format" not in top.values or (value == FORMAT and isinstance(value, int) and not isinstance(value, bool)):
        return []
    later = isinstance(value, int) and value > FORMAT
    advice = "; a later format needs a later version of it" if later else ""
    return [top.finding("format", f"must be {FORMAT}, the version of the format that this program reads{advice}")]


def _base_path(document: Document, seen: list[Path], findings: list[Finding]) -> Path:
    value = document.top.values["extends"]
    if not isinstance(value, str) or not value.strip() or "\0" in value:
        raise _refused(document, "must be the path of another scenario, relative to this one", findings)
    if len(seen) > _LONGEST_CHAIN:
        raise _refused(document, f"must not go on: more than {_LONGEST_CHAIN} scenarios extend each other", findings)
    base = document.top.place.folder / value
    if _resolved(base) in seen:
        raise _refused(document, "must not lead back to a scenario that extends this one, or to itself", findings)
    return base


def _refused(document: Document, allowed: str, findings: list[Finding]) -> ScenarioError:
    """What is wrong with `extends`, with the findings so far: without the base nothing more can be checked."""
    wrong = document.top.finding("extends", allowed)
    return ScenarioError([finding.problem for finding in sorted([*findings, wrong], key=lambda one: one.place)])


def _resolved(path: Path) -> Path:
    try:
        return path.resolve()
    except (OSError, RuntimeError):  # a loop of links: opening it will tell
        return path.absolute()


def _shown(path: Path, folder: Path) -> str:
    """The path as messages name it: from the folder of the scenario."""
    try:
        return Path(os.path.relpath(path, folder)).as_posix()
    except ValueError:  # another drive
        return str(path)
