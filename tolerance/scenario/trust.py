"""Which files a scenario may name: those in the folder of the scenario that was asked for, and below it.

A scenario may come from a stranger, and what it names is read, and in part told. So a path may not lead out of that
folder, neither by `..`, nor from the root, nor by a link, unless whoever runs it allows another folder.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path, PurePosixPath, PureWindowsPath

_OPTION = "to read from another folder, allow it: --allow DIR"


@dataclass(frozen=True, slots=True)
class Trust:
    """Folders, resolved: that of the scenario, and those allowed besides."""

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
        if target.is_relative_to(self.own):
            return ""
        by = "" if ".." in windows.parts else "; it is a link to somewhere else"
        return f"must stand beside the scenario, in its folder or below{by} ({_OPTION})"


def _resolved(path: Path) -> Path:
    try:
        return path.resolve()
    except (OSError, RuntimeError):  # a loop of links: opening it will tell
        return path.absolute()
