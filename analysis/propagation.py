"""The law of propagation of uncertainty (JCGM 100, 5.1 and 5.2) for any formula."""

from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import ArrayLike

from pitchsweep.analysis.records import FloatArray

Formula = Callable[[FloatArray], ArrayLike]


def slopes(formula: Formula, at: ArrayLike, steps: ArrayLike) -> FloatArray:
    """Derivatives (M, K) of a formula's M results by its K inputs at ``at`` (K,).

    ``steps`` (K,): by how much each input is moved, once and twice, to the side of its
    sign: an input at the end of its range can be moved away from it. Exact to second
    order in the steps.
    """
    base = np.asarray(at, dtype=np.float64)
    here = _results(formula, base)
    columns = []
    for index, step in enumerate(np.asarray(steps, dtype=np.float64)):
        moved = np.zeros_like(base)
        moved[index] = step
        once, twice = (_results(formula, base + n * moved) for n in (1.0, 2.0))
        columns.append((4.0 * once - 3.0 * here - twice) / (2.0 * step))
    return np.stack(columns, axis=1)


def propagated(
    slope: FloatArray, u: ArrayLike, correlation: ArrayLike | None = None
) -> FloatArray:
    """Covariance (M, M) of results whose derivatives by the inputs are (M, K).

    ``u`` (K,) standard uncertainties of the inputs, ``correlation`` (K, K) theirs;
    None: independent.
    """
    weighted = slope * np.asarray(u, dtype=np.float64)
    if correlation is None:
        return np.asarray(weighted @ weighted.T)
    return np.asarray(weighted @ np.asarray(correlation) @ weighted.T)


def _results(formula: Formula, inputs: Sequence[float] | FloatArray) -> FloatArray:
    values = formula(np.asarray(inputs, dtype=np.float64))
    return np.atleast_1d(np.asarray(values, dtype=np.float64))
