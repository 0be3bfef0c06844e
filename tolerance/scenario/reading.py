"""From a path to one merged document: the file, its encoding, its TOML, and the chain of files it extends."""

from __future__ import annotations

import os
import tomllib
from pathlib import Path
from typing import Any

from tolerance.errors import InputError, Problem, ScenarioError
from tolerance.scenario.documents import Document, Finding, Place, outline
from tolerance.scenario.merging import merge
from tolerance.scenario.places import line_numbers
from tolerance.scenario.tables import FORMAT

_LARGEST_FILE = 4_000_000  # bytes; a scenario is a short text


def read_document(path: Path) -> tuple[Document, list[Finding]]:
    """The scenario at `path` merged with all it extends, and what is wrong with the outlines.

    Raises InputError when the file cannot be read, ScenarioError when it, or one it extends, is not UTF-8 TOML.
    """
    return document_of(bytes_of(path), name=path.name, folder=path.parent, path=path)


def document_of(
    content: bytes, *, name: str, folder: Path, path: Path | None = None,
) -> tuple[Document, list[Finding]]:
    """As `read_document`, from the bytes of a scenario that stands (or would stand) in `folder` as `name`."""
    seen = [_resolved(path)] if path is not None else []
    chain: list[Document] = []
    findings: list[Finding] = []
    place = Place(depth=0, line=0, number=0, file=name, folder=folder)
    while True:
        document = _parsed(content, place, findings)
        chain.append(document)
        findings += _format_findings(document)
        if "extends" not in document.top.values:
            break
        base = _base_path(document, seen, findings)
        seen.append(_resolved(base))
        place = Place(depth=len(chain), line=0, number=0, file=_shown(base, folder), folder=base.parent)
        try:
            content = bytes_of(base)
        except InputError as problem:
            raise _refused(document, str(problem), findings) from None
    merged = chain.pop()
    while chain:
        merged = merge(merged, chain.pop())
    return merged, findings


def bytes_of(path: Path) -> bytes:
    """The content of a scenario file. Raises InputError."""
    try:
        if path.is_dir():
            raise InputError(f"{path}: is a folder; a scenario is a TOML file")
        if not path.exists():
            raise InputError(f"{path}: there is no such file")
        if not path.is_file():
            raise InputError(f"{path}: is not a regular file")
        if path.stat().st_size > _LARGEST_FILE:
            raise InputError(f"{path}: is larger than {_LARGEST_FILE // 1_000_000} MB; a scenario is a short text")
        return path.read_bytes()
    except OSError as problem:
        raise InputError(f"{path}: cannot be read: {problem.strerror or problem}") from None
    except ValueError:
        raise InputError(f"{str(path)!r}: is not the path of a file") from None


def _parsed(content: bytes, place: Place, findings: list[Finding]) -> Document:
    """The outline of one file. Raises ScenarioError, with the findings so far, when it is not UTF-8 TOML."""
    try:
        text = text_of(content)
        raw = _toml(text)
    except InputError as problem:
        told = Problem(file=place.file, table="", allowed=str(problem))
        raise ScenarioError([*(finding.problem for finding in findings), told]) from None
    document, wrong = outline(raw, text=text, lines=line_numbers(text), origin=place)
    findings += wrong
    return document


def text_of(content: bytes) -> str:
    """The content as text, with plain line ends. Raises InputError where it is not UTF-8."""
    if content.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise InputError("must be UTF-8 text: it begins as UTF-16 does; save it as UTF-8")
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as problem:
        line = content.count(b"\n", 0, problem.start) + 1
        raise InputError(f"must be UTF-8 text: line {line} holds a byte that is not; save it as UTF-8") from None
    return text.replace("\r\n", "\n")


def _toml(text: str) -> dict[str, Any]:
    try:
        return tomllib.loads(text)
    except RecursionError:
        raise InputError("is not a scenario: its lists or tables are nested too deeply") from None
    except ValueError as problem:  # TOMLDecodeError, and numbers of too many digits
        reason = str(problem).replace("Cannot overwrite a value", "a key or table stands twice")
        raise InputError(f"is not valid TOML: {reason}") from None


def _format_findings(document: Document) -> list[Finding]:
    top = document.top
    value = top.values.get("format")
    if "format" not in top.values or (value == FORMAT and isinstance(value, int) and not isinstance(value, bool)):
        return []
    return [top.finding("format", f"must be {FORMAT}, the version of the format that this program reads")]


def _base_path(document: Document, seen: list[Path], findings: list[Finding]) -> Path:
    value = document.top.values["extends"]
    if not isinstance(value, str) or not value.strip() or "\0" in value:
        raise _refused(document, "must be the path of another scenario, relative to this one", findings)
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
