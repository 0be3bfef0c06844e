"""Which tables a scenario may name: those in its own folder, or in that of the scenario that was asked for, and below.

A scenario may come from a stranger, and a table that it names is read, and in part told. So its path may not lead out
of these folders, neither by `..`, nor from the root, nor by a link, unless whoever runs it allows another folder. What
it extends may stand anywhere: only a scenario is accepted there, and of anything else nothing is told.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path, PurePosixPath, PureWindowsPath

_OPTION = "to read from another folder, allow it: --allow DIR"


@dataclass(frozen=True, slots=True)
class Trust:
    """Folders, resolved: that of the scenario that was asked for, and those allowed besides."""

    own: Path
    allowed: tuple[Path, ...] = ()

    @staticmethod
    def around(folder: Path, allowed: Iterable[Path] = ()) -> Trust:
        """For a scenario in `folder`. A folder that cannot be resolved allows nothing."""
        return Trust(_resolved(folder), tuple(_resolved(each) for each in allowed))

    def why_not(self, folder: Path, name: str) -> str:
        """Why the file that a scenario in `folder` names may not be read; "" where it may."""
        try:
            target = (folder / name).resolve()
        except (OSError, RuntimeError, ValueError):
            return "must be the path of a file that can be read"
        if any(target.is_relative_to(each) for each in self.allowed):
            return ""
        windows = PureWindowsPath(name)
        if PurePosixPath(name).is_absolute() or windows.drive or windows.root:
            return f"must stand beside the scenario: a relative path, in its folder or below ({_OPTION})"
        if target.is_relative_to(self.own) or target.is_relative_to(_resolved(folder)):
            return ""
        by = "" if ".." in windows.parts else "; it is a link to somewhere else"
        return f"must stand beside the scenario, in its folder or below{by} ({_OPTION})"


def _resolved(path: Path) -> Path:
    try:
        return path.resolve()
    except (OSError, RuntimeError):  # a loop of links: opening it will tell
        return path.absolute()
