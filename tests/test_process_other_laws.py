"""Laws that are scaled, narrowed and moved: every quantile goes where the scenario format says it must."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from tests.process_examples import process, variable
from tolerance.arrays import FloatArray
from tolerance.process import remembered as module
from tolerance.process.draws import Process, ProcessDraws, draw_process
from tolerance.process.laws import Law, quantile
from tolerance.process.other_laws import moved, narrowed, scaled, seen_by_line, with_laws, with_variable
from tolerance.process.remembered import FEWEST, Remembered
from tolerance.scenario.amounts import Amount
from tolerance.scenario.properties import Property

GERM = np.linspace(-4.0, 4.0, 41)
LAWS = (
    Law("normal", 4.0, tolerance=Amount(0.1, relative=True), shift=Amount(0.05, relative=False)),
    Law("normal", 4.0, tolerance=Amount(0.3, relative=False), cpk=1.33, shift=Amount(0.1, relative=False)),
    Law("truncated_normal", 4.0, tolerance=Amount(0.2, relative=False), sigmas=2.0),
    Law("uniform", 4.0, low=3.9, high=4.3),
    Law("triangular", 4.0, low=3.9, high=4.3),
    Law("triangular", 4.0, tolerance=Amount(0.3, relative=False)),
)
MIDDLES = (4.05, 4.1, 4.0, 4.1, 4.0, 4.0)  # what stays: the peak, of a uniform law the middle


@pytest.mark.parametrize(("law", "stays"), list(zip(LAWS, MIDDLES, strict=True)))
@pytest.mark.parametrize("factor", [0.0, 0.5, 1.0, 2.0])
def test_a_scaled_law_spreads_by_its_factor_about_what_stays(law: Law, stays: float, factor: float) -> None:
    before, after = (quantile(each, GERM, reference=4.0) for each in (law, scaled(law, factor)))
    assert after - stays == pytest.approx(factor * (before - stays), abs=1e-12)


def test_a_lognormal_law_keeps_its_median() -> None:
    law = Law("lognormal", 25.0, tolerance=Amount(0.3, relative=True))
    half = quantile(scaled(law, 0.5), GERM, reference=25.0)
    assert half == pytest.approx(25.0 * np.exp(np.log(1.15) / 3.0 * GERM), rel=1e-12)


def test_an_offer_narrows_and_never_widens() -> None:
    law = LAWS[0]
    assert narrowed(law, 0.5) == law
    assert quantile(narrowed(law, 0.2), GERM, reference=4.0) == pytest.approx(4.05 + 0.2 / 3.0 * GERM, rel=1e-12)
    with_cpk = quantile(narrowed(LAWS[1], 0.2), GERM, reference=4.0)
    assert with_cpk == pytest.approx(4.1 + (0.2 - 0.1) / (3.0 * 1.33) * GERM, rel=1e-12)
    assert quantile(narrowed(LAWS[3], 0.1), np.array([-np.inf, np.inf]), reference=4.0) == pytest.approx([4.0, 4.2])


@pytest.mark.parametrize("law", LAWS)
def test_a_moved_centre_moves_every_quantile_alike(law: Law) -> None:
    absolute = Law("normal", 4.0, tolerance=Amount(0.4, relative=False)) if law is LAWS[0] else law
    before, after = (quantile(each, GERM, reference=4.0) for each in (absolute, moved(absolute, 0.07, nominal=False)))
    assert after == pytest.approx(before + 0.07, rel=1e-12)


def test_a_moved_nominal_takes_its_relative_tolerance_along() -> None:
    after = quantile(moved(Law("normal", 4.0, tolerance=Amount(0.1, relative=True)), 1.0, nominal=True), GERM,
                     reference=5.0)
    assert after == pytest.approx(5.0 * (1.0 + 0.1 / 3.0 * GERM), rel=1e-12)


def known_process() -> Process:
    return process(variable("L1.etch", 0.0, tolerance=0.12), variable("P1.dk", 4.0, tolerance=0.1),
                   variable("P2.dk", 4.0, tolerance=0.1))


def test_a_line_sees_its_own_etch_in_absolute_terms() -> None:
    known = known_process()
    draws = draw_process(known, coupons=256, chance=np.random.default_rng(0))
    own = seen_by_line(known, {"L1.etch", "P1.dk"}, width=200e-6)
    assert ProcessDraws(own, draws.germ).etch("L1", width=1.0) == pytest.approx(draws.etch("L1", width=200e-6))
    assert own.variables[2].members == ()


def test_a_property_that_stands_still_gets_a_column_of_its_own() -> None:
    wide = with_variable(known_process(), Property("C1.dk", "C1", "dk", 3.5))
    assert wide.correlation.shape == (4, 4)
    draws = draw_process(wide, coupons=256, chance=np.random.default_rng(0))
    nominals = replace_nominals(wide, {"C1.dk": 3.5})
    assert ProcessDraws(nominals, draws.germ).value("C1.dk") == pytest.approx(np.full(256, 3.5))


def replace_nominals(known: Process, more: dict[str, float]) -> Process:
    return Process(known.variables, {**known.nominals, **more}, known.correlation)


@pytest.mark.parametrize("shape", [
    {}, {"shape": "lognormal"}, {"shape": "uniform"}, {"shape": "triangular"}, {"shape": "truncated_normal"},
    {"shape": "truncated_normal", "sigmas": 2.0, "shift": Amount(0.05, relative=False)},
    {"shape": "triangular", "tolerance": None, "low": 3.9, "high": 4.2}, {"cpk": 1.33},
], ids=str)
def test_remembered_draws_are_the_draws(shape: dict[str, Any], monkeypatch: pytest.MonkeyPatch) -> None:
    tolerance = Amount(0.2, relative=False)
    law = Law(**{"shape": "normal", "nominal": 4.0, "tolerance": tolerance, **shape})
    known = process(variable("L1.etch", 0.0, tolerance=Amount(0.1, relative=True)))
    known = with_laws(with_variable(known, Property("P1.dk", "P1", "dk", 4.0)), {"P1.dk": law})
    known = replace_nominals(known, {"P1.dk": 4.0, "P2.dk": 3.0})
    germ = draw_process(known, coupons=FEWEST, chance=np.random.default_rng(0)).germ
    remembered, asked = Remembered(germ), list[str]()
    for name in ("triangular", "cut_normal"):
        monkeypatch.setattr(module, name, counted(getattr(module, name), asked))
    for other in (law, scaled(law, 0.5), moved(law, 0.1, nominal=True), scaled(law, 0.0), scaled(law, 2.0)):
        changed = with_laws(known, {"P1.dk": other})
        plain = ProcessDraws(changed, germ)
        for rows in (slice(0, 1000), slice(1000, FEWEST)):
            quick = remembered.draws(changed, rows)
            assert quick.value("P1.dk") == pytest.approx(plain.value("P1.dk")[rows], rel=1e-11)
            assert np.array_equal(plain.value("P2.dk")[rows], quick.value("P2.dk"))
            for width in (1e-4, 2e-4):
                assert np.array_equal(plain.etch("L1", width=width)[rows], quick.etch("L1", width=width))
    assert len(asked) == (1 if law.shape in ("triangular", "truncated_normal") else 0)


def counted(made: Callable[..., FloatArray], asked: list[str]) -> Callable[..., FloatArray]:
    """`made` that notes down each time that it is asked."""
    def noting(germ: FloatArray, **ends: float) -> FloatArray:
        asked.append(f"{ends}")
        return made(germ, **ends)

    return noting
