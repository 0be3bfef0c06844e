"""The scenario to start from: a commented 4-layer board that runs as it is."""

from __future__ import annotations

import os
from importlib import resources
from pathlib import Path

from tolerance.errors import InputError


def starter_text() -> str:
    """The text of the starter scenario."""
    return resources.files("tolerance.scenario").joinpath("starter.toml").read_text(encoding="utf-8")


def write_starter(path: str | os.PathLike[str]) -> None:
    """Write the starter scenario to a new file.

    Raises InputError when there is something at `path` already (which stays as it is), or when it cannot be written.
    """
    try:
        place = Path(path)
        with place.open("x", encoding="utf-8", newline="\n") as file:
            whole = False
            try:
                file.write(starter_text())
                file.flush()
                whole = True
            finally:
                if not whole:
                    place.unlink()
    except FileExistsError:
        raise InputError(f"{path}: is there already; it was left as it is") from None
    except OSError as problem:
        raise InputError(f"{path}: cannot be written: {problem.strerror or problem}") from None
    except ValueError:
        raise InputError(f"{str(path)!r}: is not the path of a file") from None
