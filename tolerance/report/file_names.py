"""Names of files made from names that a user gave: safe on every system, unique, still readable."""

from __future__ import annotations

from collections.abc import Sequence

LONGEST = 60
RESERVED = {"con", "prn", "aux", "nul", *(f"{port}{number}" for port in ("com", "lpt") for number in range(10))}


def file_names(names: Sequence[str], *, taken: Sequence[str] = ()) -> list[str]:
    """One file name (without its ending) for each name; none of them `taken`, upper and lower case being the same.

    Letters and digits stay, a run of anything else becomes one hyphen.
    """
    used = {name.casefold() for name in taken}
    unique = []
    for number, name in enumerate(names, start=1):
        stem = _safe(name) or f"line-{number}"
        candidate, repeat = stem, 1
        while candidate.casefold() in used:
            repeat += 1
            candidate = f"{stem}-{repeat}"
        used.add(candidate.casefold())
        unique.append(candidate)
    return unique


def _safe(name: str) -> str:
    words = "".join(sign if sign.isalnum() else " " for sign in name).split()
    stem = "-".join(words)[:LONGEST].strip("-")
    return f"{stem}-line" if stem.casefold() in RESERVED else stem
