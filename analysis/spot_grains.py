"""Speckle of a step, measured in the residuals of its brightest fits (pure)."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from pitchsweep.analysis.speckle_grain import NO_SPECKLE, Speckle
from pitchsweep.analysis.speckle_measure import GrainSample, measure_speckle
from pitchsweep.analysis.spot_judgement import light_over_noise
from pitchsweep.analysis.spot_scene import FittedCandidate
from pitchsweep.analysis.spot_window import shared_rounding

_COARSEST_GRAIN_PX = 8.0


def speckle_seen(found: Sequence[FittedCandidate]) -> Speckle | None:
    """Speckle from the four brightest fits; None where there is too little light.

    In binned windows the grain is seen in bins; contrast and grain of bins stand for
    the same noise per area.
    """
    good = [f for f in found if _shows_grain(f)]
    good.sort(key=lambda f: -light_over_noise(f.fit))
    binning = good[0].fit.binning if good else 1
    good = [f for f in good if f.fit.binning == binning]
    seen = measure_speckle([_sample(f) for f in good[:4]])
    if seen is None:
        return None
    seen = replace(seen, grain_fwhm_px=seen.grain_fwhm_px * binning)
    minor = [f.fit.shape.widths()[1] for f in good[:4]]
    # Coarse, or pale and as wide as the spots: no grain, but beams of another form.
    pale = seen.contrast < 0.3 and minor
    wide = pale and seen.grain_fwhm_px > 0.8 * float(np.median(minor))
    return NO_SPECKLE if wide or seen.grain_fwhm_px > _COARSEST_GRAIN_PX else seen


def _shows_grain(item: FittedCandidate) -> bool:
    """Whether a fit is a clear spot, not a streak, a leftover or cut by the frame.

    What the frame cuts is no Gaussian, and its misfit passes for grain.
    """
    if not item.fit.converged or light_over_noise(item.fit) < 20.0:
        return False
    shape, x, y = item.fit.shape, item.window.x, item.window.y
    major, minor, _ = shape.widths()
    room = min(
        shape.column_px - x[0, 0],
        x[0, -1] - shape.column_px,
        shape.row_px - y[0, 0],
        y[-1, 0] - shape.row_px,
    )
    return bool(major < 4.0 * minor and room > 2.0 * major)


def _sample(item: FittedCandidate) -> GrainSample:
    fit = item.fit
    bright = (fit.weight > 0.0) & (fit.signal > 0.05 * fit.shape.height)
    root = np.sqrt(fit.weight)
    return GrainSample(
        residual=root * fit.residual,
        signal=root * fit.light,
        noise=fit.weight * fit.variance,
        rounding=root * shared_rounding(item.window, fit.signal),
        modes=fit.modes,
        bright=bright.astype(np.float64),
    )
