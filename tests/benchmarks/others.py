"""The same work by general-purpose libraries, for the benchmark of the statistics: SALib whole, and OpenTURNS.

OpenTURNS is asked for a polynomial chaos of degree 3 by least angle regression with its corrected leave-one-out error
(as many runs as ours, far fewer than terms), and for the Sobol' indices that follow from it. SALib draws its own sample
of the same size as ours, is given the fitted polynomial to evaluate it, and analyses it with its own intervals.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from tolerance.arrays import FloatArray

DEGREE = 3


def chaos_and_indices(coordinates: FloatArray, values: FloatArray) -> tuple[Callable[[], object], FloatArray] | None:
    """What fits and gives the indices once, and the total indices (inputs,); None where OpenTURNS is not installed.

    coordinates : (runs, inputs), each from -1 to 1.  values : (runs,).
    """
    try:
        import openturns as ot
    except ImportError:
        return None
    runs, inputs = coordinates.shape
    order = ot.LinearEnumerateFunction(inputs)
    basis = ot.OrthogonalProductPolynomialFactory([ot.LegendreFactory()] * inputs, order)
    terms = order.getBasisSizeFromTotalDegree(DEGREE)
    box = ot.JointDistribution([ot.Uniform(-1.0, 1.0)] * inputs)
    given, found = ot.Sample(coordinates), ot.Sample(values.reshape(runs, 1))

    def work() -> FloatArray:
        selection = ot.LeastSquaresMetaModelSelectionFactory(ot.LARS(), ot.CorrectedLeaveOneOut())
        algorithm = ot.FunctionalChaosAlgorithm(given, found, box, ot.FixedStrategy(basis, terms),
                                                ot.LeastSquaresStrategy(selection))
        algorithm.run()
        indices = ot.FunctionalChaosSobolIndices(algorithm.getResult())
        return np.array([indices.getSobolTotalIndex(each) for each in range(inputs)])

    return work, work()


def sampled_indices(
    model: Callable[[FloatArray], FloatArray], inputs: int, points: int,
) -> tuple[Callable[[], object], FloatArray]:
    """What draws SALib's sample, evaluates and analyses it once, and the total indices (inputs,)."""
    from SALib.analyze import sobol as analysis
    from SALib.sample import sobol as sampling

    problem = {"num_vars": inputs, "names": [f"input {each}" for each in range(inputs)],
               "bounds": [[-1.0, 1.0]] * inputs}

    def work() -> FloatArray:
        sample = sampling.sample(problem, points, calc_second_order=False, seed=1)
        found = analysis.analyze(problem, model(sample), calc_second_order=False, seed=1)
        return np.asarray(found["ST"], dtype=np.float64)

    return work, work()
