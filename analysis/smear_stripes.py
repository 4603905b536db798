"""Stripes along columns that a camera's read-out draws through bright spots (pure).

A frame-transfer camera is still lit while it shifts its rows: each column gets a share
of its own light all along. A median down the columns sees that and no spot.
"""

import cv2
import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.camera_noise import (
    ROUNDING_VARIANCE_DN2,
    correlated_rounding_dn,
)
from pitchsweep.analysis.frame_background import Float32Array

_ROWS_LOOKED_AT, _CLEAR, _ROWS_A_MEAN = 32, 6.0, 8
_UNDITHERED_DN = 0.02
_MEDIAN_NOISE = 1.2533
"""The scatter of a median of normal quantities over that of their mean."""


def has_stripes(excess: Float32Array, noise: Float32Array, noise_dn: float) -> bool:
    """Whether columns of an averaged-down frame stand out of the noise as a whole.

    ``excess`` and ``noise`` (rows, columns) as in a SmallFrame; some rows tell.
    ``noise_dn`` is the noise of a pixel of the full frame, rounding included.
    """
    step = max(excess.shape[0] // _ROWS_LOOKED_AT, 1)
    some, scatter = excess[::step], noise[::step]
    if some.shape[0] < 8:
        return False
    limit = _CLEAR * _MEDIAN_NOISE / some.shape[0] ** 0.5 * scatter.mean(axis=0)
    limit += _rounding_step_dn(noise_dn)
    # A sort down the columns takes a sixth of the time of a median.
    ordered, half = np.sort(some, axis=0), some.shape[0] // 2
    middle = 0.5 * (ordered[half] + ordered[-half - 1])
    return bool((middle > limit).any())


def _rounding_step_dn(noise_dn: float) -> float:
    """How far rounding alone may part two columns whatever the rows averaged, DN.

    The median of 3 x 3 leaves about 1/2.5 of the noise to dither the rounding. Where
    that does not do it, medians and the background made of them are whole numbers,
    a step apart; else pixels of one level share the bias that is left.
    """
    dither = max(noise_dn**2 - ROUNDING_VARIANCE_DN2, 0.0) ** 0.5 / 2.5
    bias = float(correlated_rounding_dn(dither))
    return 1.0 if bias > _UNDITHERED_DN else 2.0 * 2.0**0.5 * bias


def stripe_profile(
    frame: NDArray[np.uint16], background: Float32Array, noise_dn: float
) -> Float32Array:
    """Light of the stripes in each column of ``frame`` (rows, columns), DN, (columns,).

    ``background`` is that of the frame averaged down. Zero where a column shows no
    more than the noise of its median and the rounding that its pixels share;
    ``noise_dn`` is the noise of a pixel, rounding included.
    """
    columns, means = frame.shape[1], max(frame.shape[0] // _ROWS_A_MEAN, 1)
    size = (columns, means)
    rows = cv2.resize(frame.astype(np.float32), size, interpolation=cv2.INTER_AREA)
    room = cv2.resize(background, size, interpolation=cv2.INTER_LINEAR)
    profile = np.median(rows - room, axis=0)
    profile -= np.median(profile)
    scatter = _MEDIAN_NOISE * noise_dn / frame.shape[0] ** 0.5
    # Next to a stripe its flank counts too: steps would be seen as edges of spots.
    clear = cv2.dilate(
        (profile > 5.0 * scatter).astype(np.uint8)[None], np.ones((1, 5))
    )
    return np.asarray(np.where(clear[0] > 0, profile, 0.0), dtype=np.float32)
