"""Speckle of many steps together, and what it changes in a step's covariances (pure).

The speckle part of a covariance grows with the noise area Ac C^2 of the grain.
"""

from collections.abc import Sequence

import numpy as np

from pitchsweep.analysis.speckle_grain import NO_SPECKLE, Speckle

_TRIM = 0.1
_MOST_CHANGE = 4.0


def pooled_speckle(seen: Sequence[Speckle]) -> Speckle | None:
    """One speckle from measurements of single steps; None for an empty list.

    Means of C^2 and of w^2 with a tenth cut off at either end: single measurements
    scatter by a fifth and their medians lie low. ``NO_SPECKLE`` where more than half
    saw none.
    """
    if not seen:
        return None
    some = [s for s in seen if s.contrast > 0.0]
    if 2 * len(some) < len(seen):
        return NO_SPECKLE
    contrast_2 = _trimmed_mean([s.contrast**2 for s in some])
    grain_2 = _trimmed_mean([s.grain_fwhm_px**2 for s in some])
    return Speckle(contrast_2**0.5, grain_2**0.5)


def restated_share(own: Speckle | None, pooled: Speckle | None) -> float:
    """The factor of the speckle part of covariances stated under ``own``.

    1 where one of them is not known or without contrast, at most 4 either way.
    """
    if own is None or pooled is None or 0.0 in (own.contrast, pooled.contrast):
        return 1.0
    factor = pooled.noise_area() / own.noise_area()
    return min(max(factor, 1.0 / _MOST_CHANGE), _MOST_CHANGE)


def _trimmed_mean(values: Sequence[float]) -> float:
    ordered = np.sort(np.asarray(values, dtype=np.float64))
    cut = int(_TRIM * ordered.size)
    return float(ordered[cut : ordered.size - cut].mean())
