"""Speckle: its contrast and grain, and what it costs a position.

The intensity of a spot on a diffusing screen is the smooth spot times (1 + C s), s with
unit variance and autocorrelation exp(-r^2 / w^2), w = FWHM / 1.665. Its correlation
area is Ac = pi w^2: averaged over many grains, speckle acts like independent pixel
noise of variance Ac C^2 signal^2 (px^2 areas).
"""

from dataclasses import dataclass
from functools import lru_cache

import cv2
import numpy as np

from pitchsweep.analysis.records import FloatArray

FWHM_PER_W = 1.6651092223153954


@dataclass(frozen=True)
class Speckle:
    """Contrast (0 none, 1 fully developed) and grain, FWHM of the autocorrelation."""

    contrast: float
    grain_fwhm_px: float

    @property
    def w_px(self) -> float:
        """The 1/e half width of the autocorrelation."""
        return self.grain_fwhm_px / FWHM_PER_W

    def noise_area(self, binning: int = 1) -> float:
        """Ac C^2 in units of (binned) pixels: the factor of signal^2.

        Ac is the sum of the autocorrelation over pixels: pi w^2, at least one pixel.
        """
        if self.contrast == 0.0:
            return 0.0
        return (_correlated_px(self.w_px) * self.contrast) ** 2 / binning**2


@lru_cache(maxsize=64)
def _correlated_px(w_px: float) -> float:
    """Sum of the autocorrelation over pixels along one axis."""
    lags = np.arange(-30.0, 31.0)
    return float(np.exp(-((lags / max(w_px, 1e-3)) ** 2)).sum())


NO_SPECKLE = Speckle(0.0, 2.0)
TYPICAL_SPECKLE = Speckle(0.8, 2.0)


def position_covariances(
    influence: FloatArray,
    variance: FloatArray,
    signal: FloatArray,
    speckle: Speckle,
    binning: int,
) -> tuple[FloatArray, FloatArray]:
    """Covariances (2, 2) of column and row from noise and from speckle, px^2.

    ``influence`` (2, H, W) is what a unit of light in a pixel moves the position by;
    ``variance`` (H, W) shot and read noise; ``signal`` (H, W) the spot.
    """
    flat = influence.reshape(2, -1)
    private = (flat * variance.ravel()) @ flat.T
    if speckle.contrast == 0.0:
        return private, np.zeros((2, 2))
    w = speckle.w_px / binning
    pulled = influence * signal
    width = w / np.sqrt(2.0)
    blurred = np.stack([cv2.GaussianBlur(p, (0, 0), max(width, 0.1)) for p in pulled])
    shared = pulled.reshape(2, -1) @ blurred.reshape(2, -1).T
    return private, speckle.noise_area(binning) * 0.5 * (shared + shared.T)
