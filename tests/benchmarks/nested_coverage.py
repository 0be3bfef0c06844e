"""How often the stated 95 % intervals hold the exact answer where coupons come in lots.

`python -m tests.benchmarks.nested_coverage [SEEDS]`. The response is linear and normal, its yields are integrals
(tests/nested_examples.py). 400 seeds gave 93.2 to 97.0 % for yields of 0.38 to 0.98, of coupons, panels and lots, on
one line and on two together, and 95 to 98.8 % where failures are rare (the binomial interval is cautious there).
"""

from __future__ import annotations

import sys

import numpy as np

from tests.nested_examples import SIZE, exact_yields, nested_process, response
from tolerance.process.draws import REPLICATES
from tolerance.process.lots import draw_lots
from tolerance.statistics.levels import judge_lots
from tolerance.statistics.yields import Limits, judge

CASES = ((46.5, 54.0), (45.0, 54.5), (43.0, 57.0))  # limits of the first line; the second's are 1 and 3 ohm higher
COUPONS = (2000, 8000)
NAMES = ("coupon", "panel", "lot", "coupon, both", "panel, both", "lot, both")


def coverage(low: float, high: float, coupons: int, seeds: int) -> dict[str, float]:
    """Share of the seeds whose interval holds the exact yield, by name."""
    limits = (Limits(low, high), Limits(low + 1.0, high + 3.0))
    exact = (*exact_yields(limits[0]), *exact_yields(Limits(low + 1.0, high)))
    held = np.zeros(len(NAMES))
    for seed in range(seeds):
        draws = draw_lots(nested_process(), SIZE, coupons=coupons, chance=np.random.default_rng(seed))
        impedance = np.stack([response(draws.germ)] * 2)
        possible = np.ones(impedance.shape, dtype=np.bool_)
        judged = judge(impedance, possible, limits, replicates=REPLICATES, cluster=SIZE.coupons)
        nested = judge_lots(impedance, possible, limits, SIZE, replicates=REPLICATES)
        intervals = (judged.lines[0].inside, nested.lines[0].panel, nested.lines[0].lot,
                     judged.inside, nested.every.panel, nested.every.lot)
        held += [each.low <= value <= each.high for each, value in zip(intervals, exact, strict=True)]
    return dict(zip(NAMES, (held / seeds).tolist(), strict=True))


def main() -> None:
    """Print a row for each case."""
    seeds = int(sys.argv[1]) if len(sys.argv) > 1 else 200
    for low, high in CASES:
        for coupons in COUPONS:
            held = coverage(low, high, coupons, seeds)
            print(f"{low:g} to {high:g} ohm, {coupons} coupons: "
                  + ", ".join(f"{name} {100.0 * share:.1f} %" for name, share in held.items()))


if __name__ == "__main__":
    main()
