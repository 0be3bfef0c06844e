"""What a result depends on besides its scenario: versions, the program's own text, how numbers are computed here."""

from __future__ import annotations

import hashlib
import platform
from functools import cache
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path

from threadpoolctl import threadpool_info

from tolerance.solver.plan import SolverSettings

PACKAGES = ("tolerance", "numpy", "scipy", "pandas", "SALib")


def versions() -> dict[str, str]:
    """Versions of what computes a result, by name."""
    return {"python": platform.python_version(), **{package: version_of(package) or "?" for package in PACKAGES}}


def version_of(package: str) -> str | None:
    """Version of an installed package; None where it is not installed."""
    try:
        return version(package)
    except PackageNotFoundError:
        return None


def settings_of(settings: SolverSettings) -> dict[str, str]:
    """The settings of the field solver, by name."""
    return {f"solver {name.replace('_', ' ')}": str(getattr(settings, name)) for name in settings.__slots__}


def machine() -> dict[str, str]:
    """What computes here: the same versions may differ in the last bits on another kind of processor."""
    algebra = sorted({f"{one.get('internal_api')} {one.get('version')} for {one.get('architecture')}"
                      for one in threadpool_info() if one.get("user_api") == "blas"})
    return {"system": platform.system(), "processor": platform.machine(), "linear algebra": ", ".join(algebra)}


@cache
def program_digest() -> str:
    """Digest of the program's own modules: another one may compute other figures under the same version."""
    root = Path(__file__).parents[1]
    digest = hashlib.sha256()
    for path in sorted(root.rglob("*.py")):
        digest.update(path.relative_to(root).as_posix().encode())
        digest.update(path.read_bytes())
    return digest.hexdigest()
