"""Fabrication-tolerance Monte Carlo analyzer for controlled-impedance lines on printed circuits.

    scenario = tolerance.load("board.toml")
    tolerance.check(scenario)            # nominal impedance of each line
    result = tolerance.run(scenario)     # yield and drivers
    result.line_table                    # a pandas DataFrame
    tolerance.ask(scenario)              # what to ask the fabricator, the most important first
    tolerance.take(scenario, "reply.xlsx")  # what the reply changes, old and new yield
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from tolerance.scenario import load as load
    from tolerance.study.center import center as center
    from tolerance.study.check import check as check
    from tolerance.study.decide import compare as compare
    from tolerance.study.decide import promise as promise
    from tolerance.study.decide import tighten as tighten
    from tolerance.study.exchange import ask as ask
    from tolerance.study.exchange import take as take
    from tolerance.study.note import note as note
    from tolerance.study.reconcile import reconcile as reconcile
    from tolerance.study.run import run as run
    from tolerance.study.solved import user_cache as user_cache
    from tolerance.sweeps.sweep import sweep as sweep

__all__ = ["ask", "center", "check", "compare", "load", "note", "promise", "reconcile", "run", "sweep", "take",
           "tighten", "user_cache"]

_HOMES = {
    "load": "tolerance.scenario", "check": "tolerance.study.check", "run": "tolerance.study.run",
    "tighten": "tolerance.study.decide", "promise": "tolerance.study.decide", "compare": "tolerance.study.decide",
    "center": "tolerance.study.center", "note": "tolerance.study.note",
    "ask": "tolerance.study.exchange", "take": "tolerance.study.exchange",
    "reconcile": "tolerance.study.reconcile", "sweep": "tolerance.sweeps.sweep",
    "user_cache": "tolerance.study.solved",
}


def __getattr__(name: str) -> Any:
    """Load a public function when it is first asked for, so that importing the package costs nothing."""
    if name not in _HOMES:
        raise AttributeError(f"module 'tolerance' has no attribute {name!r}")
    from importlib import import_module

    return getattr(import_module(_HOMES[name]), name)
