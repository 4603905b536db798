"""Contrast and grain of speckle, measured in the residuals of fitted spots.

The fit takes the long waves of speckle for a change of the spot, so the residuals'
autocorrelation is lower than that of the speckle. What it takes is computed from the
fit's own modes: with weighted residuals z = (1 - Q Q^T) W^(1/2) e and Cov e known for
a trial grain, the expected products at every lag are convolutions.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.records import FloatArray
from pitchsweep.analysis.speckle_grain import FWHM_PER_W, NO_SPECKLE, Speckle

_LAGS = 6
_CENTRE = (0, _LAGS)
_MOST_CONTRAST = 1.2
"""Fully developed speckle has 1; few grains may show a little more."""
_SEEN_SHARE = 0.12
"""What speckle of contrast 0.7 and grain 2 px leaves in neighbours, of its power: half
lies in their correlation, half of that is taken by the fit."""
_GRID_W = np.geomspace(0.6, 5.0, 50)
_ROUNDS = 3
_DOWN, _RIGHT = np.mgrid[0 : _LAGS + 1, -_LAGS : _LAGS + 1].astype(np.float64)
_SQUARE = _DOWN**2 + _RIGHT**2
_ONCE = np.where((_DOWN == 0) & (_RIGHT < 0), 0.0, 1.0)
"""Each pair of pixels counts once."""


@dataclass(frozen=True)
class GrainSample:
    """What one fitted spot shows of speckle; arrays (H, W), all weighted by W^(1/2).

    ``residual`` data minus model, ``signal`` the spot, ``noise`` the variance of shot
    and read noise (times W), ``rounding`` rms of rounding errors that neighbours
    share; ``modes`` (P, H, W) the orthonormal basis of what the fit can follow;
    ``bright`` 1 where the spot is bright enough to count, else 0.
    """

    residual: FloatArray
    signal: FloatArray
    noise: FloatArray
    rounding: FloatArray
    modes: FloatArray
    bright: FloatArray


@dataclass(frozen=True)
class _Nearest:
    """Sums over pixels and over pairs of neighbours: products of the light, products
    seen beyond the noise, square of the error of these; and the shared rounding."""

    here: tuple[float, float, float]
    beside: tuple[float, float, float]
    rounding: float


def measure_speckle(samples: Sequence[GrainSample]) -> Speckle | None:
    """Speckle of the pooled ``samples``; None if they hold too little light to tell.

    ``NO_SPECKLE`` if there is enough light and neighbours show nothing in common above
    four standard deviations of the noise and the shared rounding.
    """
    if not samples:
        return None
    lit = [_cut(sample, _box(sample.bright)[1:]) for sample in samples]
    beside = [_nearest(sample) for sample in lit]
    light, seen_0, error_0 = (sum(b.here[k] for b in beside) for k in range(3))
    if light <= 0.0 or error_0**0.5 > 0.2 * light:
        return None
    in_common, near, error_1 = (sum(b.beside[k] for b in beside) for k in range(3))
    alone = seen_0 < max(0.03 * light, 4.0 * error_0**0.5)
    least = 4.0 * error_1**0.5 + 4.0 * sum(b.rounding for b in beside)
    if near < least and alone:
        return NO_SPECKLE if least < _SEEN_SHARE * in_common else None
    seen = np.sum([_pairs((s.bright * s.residual)[None]) for s in lit], axis=0)
    seen[_CENTRE] -= sum(float((s.bright * s.noise).sum()) for s in lit)
    signal = np.sum([_pairs((s.bright * s.signal)[None]) for s in lit], axis=0)
    return _fitted(samples, seen, signal)


def _nearest(sample: GrainSample) -> _Nearest:
    quiet = sample.bright * sample.noise
    seen = _here_and_beside(sample.bright * sample.residual)
    light = _here_and_beside(sample.bright * sample.signal)
    error = _here_and_beside(quiet)
    return _Nearest(
        here=(light[0], seen[0] - float(quiet.sum()), 2.0 * error[0]),
        beside=(light[1], seen[1], error[1]),
        rounding=float(((sample.bright * sample.rounding) ** 2).sum()),
    )


def _here_and_beside(image: FloatArray) -> tuple[float, float]:
    """Sums over pixels of its square, and of its products with the next ones."""
    right = np.vdot(image[:, 1:], image[:, :-1])
    down = np.vdot(image[1:], image[:-1])
    return float(np.vdot(image, image)), float(right + down)


def _fitted(
    samples: Sequence[GrainSample], seen: FloatArray, signal: FloatArray
) -> Speckle:
    """Contrast and grain that explain the products, the fit's share put back."""
    # Noise of dim pixels reaches bright ones through the fit, at all lags.
    seen = seen + np.sum([_taken(s, s.noise * s.modes) for s in samples], axis=0)
    answer = _best(seen, signal, np.zeros_like(seen), 1.0)
    lit = [_cut(s, _lit(s)) for s in samples]
    for _ in range(_ROUNDS):
        w = answer.w_px
        loss = np.sum([_loss(sample, w) for sample in lit], axis=0)
        answer = _best(seen, signal, loss, w)
        if abs(answer.w_px - w) < 0.01 * w:
            break
    return answer


def _best(
    seen: FloatArray, signal: FloatArray, loss: FloatArray, loss_w: float
) -> Speckle:
    """Least squares of seen = C^2 (rho signal - loss) over a grid of w.

    ``loss`` was computed for ``loss_w`` and is taken to grow with the grain's area.
    """
    w = _GRID_W[:, None, None]
    shape = np.exp(-_SQUARE / w**2) * signal - loss * (w / loss_w) ** 2
    weighted = _ONCE * shape
    power = (weighted * seen).sum(axis=(1, 2)) / (weighted * shape).sum(axis=(1, 2))
    power = np.minimum(power, _MOST_CONTRAST**2)
    off = seen - power[:, None, None] * shape
    left = np.where(power > 0.0, (_ONCE * off * off).sum(axis=(1, 2)), np.inf)
    best = int(np.argmin(left))
    if not np.isfinite(left[best]):
        return NO_SPECKLE
    return Speckle(float(np.sqrt(power[best])), float(_GRID_W[best] * FWHM_PER_W))


def _cut(sample: GrainSample, box: tuple[slice, slice]) -> GrainSample:
    """The sample within ``box``."""
    return GrainSample(
        sample.residual[box],
        sample.signal[box],
        sample.noise[box],
        sample.rounding[box],
        sample.modes[:, box[0], box[1]],
        sample.bright[box],
    )


def _lit(sample: GrainSample) -> tuple[slice, slice]:
    """The part of a sample in which there is light for speckle to show in."""
    return _box(sample.signal > 2e-3 * sample.signal.max())[1:]


def _loss(sample: GrainSample, w: float) -> FloatArray:
    """What the fit takes from the products at contrast 1 and grain ``w``."""
    # Cov e = signal_i rho_ij signal_j; the blur is rho over its own sum.
    area = np.exp(-((np.arange(-30.0, 31.0) / w) ** 2)).sum() ** 2
    pulled = sample.signal * sample.modes
    width = max(w / 2.0**0.5, 0.1)
    blurred = np.stack([cv2.GaussianBlur(p, (0, 0), width) for p in pulled])
    return _taken(sample, area * sample.signal * blurred)


def _taken(sample: GrainSample, moved: FloatArray) -> FloatArray:
    """Products lost by the projection (1 - Q Q^T), given ``moved`` = Cov(e) Q."""
    modes, mask = sample.modes, sample.bright
    flat = modes.reshape(modes.shape[0], -1)
    inner = flat @ moved.reshape(modes.shape[0], -1).T
    own = ((0.25 * (inner + inner.T)) @ flat).reshape(modes.shape)
    box = _box(mask)
    # Cov Q Q^T + Q Q^T Cov - Q (Q^T Cov Q) Q^T, both terms as products with Q.
    return _pairs((mask * (moved - own))[box], (mask * modes)[box])


def _box(mask: NDArray[Any]) -> tuple[slice, slice, slice]:
    """The part of a stack of images where the mask (rows, columns) is not zero."""
    rows, columns = np.nonzero(mask.sum(axis=1))[0], np.nonzero(mask.sum(axis=0))[0]
    if rows.size == 0:
        return slice(None), slice(0, 1), slice(0, 1)
    return (
        slice(None),
        slice(int(rows[0]), int(rows[-1]) + 1),
        slice(int(columns[0]), int(columns[-1]) + 1),
    )


def _pairs(images: FloatArray, others: FloatArray | None = None) -> FloatArray:
    """Sum over images and pixels of image[i] image[i + lag]; lags (0..L, -L..L).

    With ``others``: image[i] other[i + lag] + other[i] image[i + lag].
    """
    rows, columns = images.shape[1:]
    shape = (
        cv2.getOptimalDFTSize(rows + _LAGS),
        cv2.getOptimalDFTSize(columns + 2 * _LAGS),
    )
    one = np.fft.rfft2(images, shape)
    if others is None:
        power = (np.abs(one) ** 2).sum(axis=0)
    else:
        power = 2.0 * (one * np.conj(np.fft.rfft2(others, shape))).real.sum(axis=0)
    full = np.fft.irfft2(power, shape)[: _LAGS + 1]
    return np.concatenate([full[:, -_LAGS:], full[:, : _LAGS + 1]], axis=1)
