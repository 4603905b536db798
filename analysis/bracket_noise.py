"""A camera's noise from a run's own bracket and dark frame (pure).

Two exposures of one still scene differ by noise alone once the shorter is compared
with its share r of the longer one: speckle, spots and stray light are those of both.
With l the light of the longer exposure over the dark level, EMVA 1288's linear model
gives the difference S - r L the variance gain * r (1 + r) * l + read^2 (1 + r^2): a
line over l. Light that varied between the exposures shifts the mean of each level, not
its variance.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import cv2
import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.camera_noise import (
    ROUNDING_VARIANCE_DN2,
    CameraNoise,
)

_LEVELS, _LEAST_PIXELS = 16, 60
_LEAST_SPAN = 6.0
_CLEARLY, _AT_LEAST = 4.0, 0.2
_BESIDE = np.array([[0.5, 0.0, 0.5]], dtype=np.float32)


@dataclass(frozen=True)
class BracketNoise:
    """Gain (DN per electron) with its standard uncertainty, read noise, dark level."""

    gain_dn_per_e: float
    u_gain: float
    read_noise_dn: float
    dark_level_dn: float


def bracket_noise(
    frames: Sequence[tuple[NDArray[np.uint16], float]],
    dark: NDArray[np.float32] | None,
    stated: CameraNoise,
) -> BracketNoise | None:
    """The camera that the longest and the shortest of ``frames`` show.

    ``frames`` are (frame, exposure_ms) of one step; ``dark`` tells dark level and hot
    pixels. None where there is one exposure, no dark or too little light to tell.
    """
    ordered = sorted(frames, key=lambda item: item[1])
    if len(ordered) < 2 or dark is None or ordered[0][1] >= ordered[-1][1]:
        return None
    (short, short_ms), (long, long_ms) = ordered[0], ordered[-1]
    level = float(np.median(dark[::2, ::2]))
    read_dn = _dark_noise_dn(dark[::2])
    # Only rows that are lit somewhere tell anything.
    lit = long.max(axis=1) > level + 4.0 * _LEAST_SPAN * read_dn
    if not lit.any():
        return None
    first, second, still = long[lit], short[lit], dark[lit]
    light = first.astype(np.float32) - np.float32(level)
    share = short_ms / long_ms
    off = second.astype(np.float32) - np.float32(level) - np.float32(share) * light
    # The level is told by a pixel's neighbours: its own noise must not choose it.
    around = cv2.filter2D(light, -1, _BESIDE, borderType=cv2.BORDER_REFLECT_101)
    full = np.maximum(first, second).astype(np.float32)
    spread = cv2.dilate(full, np.ones((1, 3), np.uint8))
    good = (spread < stated.saturation_dn) & (np.abs(still - level) < 8.0 * read_dn)
    good &= around > _LEAST_SPAN * read_dn
    line = _line(around[good], light[good], off[good], share, read_dn)
    if line is None:
        return None
    return BracketNoise(line[0], line[1], read_dn, level)


def camera_seen(stated: CameraNoise, seen: BracketNoise | None) -> CameraNoise:
    """``stated``, or what was ``seen`` where the two clearly differ.

    Clearly: the gain by more than four of its u and by more than a fifth.
    """
    if seen is None:
        return stated
    off = abs(seen.gain_dn_per_e - stated.gain_dn_per_e)
    if off <= max(_CLEARLY * seen.u_gain, _AT_LEAST * stated.gain_dn_per_e):
        return stated
    return replace(
        stated,
        gain_dn_per_e=seen.gain_dn_per_e,
        read_noise_dn=seen.read_noise_dn,
        black_level_dn=seen.dark_level_dn,
    )


def _dark_noise_dn(dark: NDArray[np.float32]) -> float:
    """rms of a dark frame without its hot pixels, rounding in it."""
    rms = float(_calm(dark.ravel()).std())
    return max(rms, float(ROUNDING_VARIANCE_DN2**0.5))


def _calm(values: NDArray[np.float32]) -> NDArray[np.float64]:
    """``values`` (n,) without what lies beyond six robust widths: hot pixels."""
    off = np.abs(values - np.median(values))
    reach = 6.0 * (1.4826 * float(np.median(off)) + 0.5)
    return np.asarray(values[off < reach], dtype=np.float64)


def _line(
    around: NDArray[np.float32],
    light: NDArray[np.float32],
    off: NDArray[np.float32],
    share: float,
    read_dn: float,
) -> tuple[float, float] | None:
    """Gain and its u from the levels that stand clear of the read noise."""
    top = float(around.max(initial=0.0))
    least = _LEAST_SPAN * read_dn
    if top < 4.0 * least:
        return None
    edges = np.geomspace(least, top, _LEVELS + 1)
    place = np.digitize(around, edges)
    quiet = read_dn**2 * (1.0 + share**2)
    mean, variance, count = [], [], []
    for k in range(1, _LEVELS + 1):
        here = place == k
        pixels = int(np.count_nonzero(here))
        if pixels < _LEAST_PIXELS:
            continue
        mean.append(share * (1.0 + share) * float(light[here].mean()))
        variance.append(_calm(off[here]).var(ddof=1) - quiet)
        count.append(pixels)
    if len(mean) < 2:
        return None
    x, y, n = np.array(mean), np.array(variance), np.array(count)
    gain = float(n @ y) / float(n @ x)
    for _ in range(3):
        # Weights from the line, not from the bins: a bin that came out low by chance
        # would weigh more.
        weight = n / (2.0 * np.square(quiet + max(gain, 0.0) * x))
        power = float(weight @ x**2)
        gain = float(weight @ (x * y)) / power
    scatter = float(weight @ (y - gain * x) ** 2) / max(x.size - 1, 1)
    if gain <= 0.0:
        return None
    return gain, (max(scatter, 1.0) / power) ** 0.5
