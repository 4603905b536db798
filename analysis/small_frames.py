"""Exposures averaged down: background, light over it, noise and what is saturated."""

from collections.abc import Sequence
from dataclasses import dataclass

import cv2
import numpy as np

from pitchsweep.analysis.camera_noise import (
    ROUNDING_VARIANCE_DN2,
    CameraNoise,
    correlated_rounding_dn,
)
from pitchsweep.analysis.frame_background import (
    Float32Array,
    averaged_down,
    background_map,
    robust_width,
)
from pitchsweep.analysis.smear_stripes import has_stripes, stripe_profile
from pitchsweep.analysis.spot_window import FrameLayer, Plane

_COARSER = 4


@dataclass(frozen=True)
class SmallFrame:
    """One exposure averaged down: background and light over it, DN; noise, DN.

    ``stripes`` (columns of the full frame,): smear that was taken off, DN.
    """

    factor: int
    exposure_ms: float
    background: Float32Array
    excess: Float32Array
    noise: Float32Array
    clipped: Float32Array | None
    stripes: Float32Array | None = None

    def level(self) -> float:
        """The middle of the background, DN."""
        return float(np.median(self.background[::4, ::4]))

    def plane_at(self, column_px: float, row_px: float, reach_px: float) -> Plane:
        """The background around a place of the full frame, from samples at reach."""
        reach = max(reach_px, 2.0 * self.factor)
        left, right = column_px - reach, column_px + reach
        up, down = row_px - reach, row_px + reach
        return Plane(
            level=self._sample(column_px, row_px),
            per_column=(self._sample(right, row_px) - self._sample(left, row_px))
            / (2.0 * reach),
            per_row=(self._sample(column_px, down) - self._sample(column_px, up))
            / (2.0 * reach),
        )

    def _sample(self, column_px: float, row_px: float) -> float:
        rows, columns = self.background.shape
        row = min(max(int(row_px / self.factor), 0), rows - 1)
        column = min(max(int(column_px / self.factor), 0), columns - 1)
        return float(self.background[row, column])


@dataclass(frozen=True)
class LightMap:
    """All exposures in one averaged-down map, DN of an exposure of ``unit_ms``.

    Where an exposure is saturated the next shorter one stands; ``noise`` is that of
    the exposure that stands.
    """

    factor: int
    unit_ms: float
    light: Float32Array
    noise: Float32Array


def small_frame(layer: FrameLayer, factor: int) -> SmallFrame:
    """``layer`` averaged down by ``factor`` with background and noise."""
    brightest = int(layer.frame.max())
    small = averaged_down(layer.frame, factor, brightest)
    background = background_map(small)
    excess = np.subtract(small, background, out=small)
    noise = _noise_map(background, excess, layer.noise)
    stripes = None
    clipped = None
    if brightest >= layer.noise.saturation_dn:
        clipped = _clipped_share(layer, factor)
    level = float(np.median(background[::4, ::4]))
    noise_dn = layer.noise.variance_dn2(level) ** 0.5
    if has_stripes(excess, noise, noise_dn):
        stripes = stripe_profile(layer.frame, background, noise_dn)
        columns = excess.shape[1]
        excess -= stripes[: columns * factor].reshape(columns, factor).mean(axis=1)
    return SmallFrame(
        factor=factor,
        exposure_ms=layer.exposure_ms,
        background=background,
        excess=excess,
        noise=noise,
        clipped=clipped,
        stripes=stripes,
    )


def light_map(smalls: Sequence[SmallFrame]) -> LightMap:
    """The exposures, longest first, joined into one map."""
    first = smalls[0]
    light, noise, clipped = first.excess, first.noise, first.clipped
    for small in smalls[1:]:
        if clipped is None:
            break
        lost, longer = clipped > 0.0, np.float32(first.exposure_ms / small.exposure_ms)
        light = np.where(lost, small.excess * longer, light)
        noise = np.where(lost, small.noise * longer, noise)
        clipped = None if small.clipped is None else small.clipped * lost
    return LightMap(first.factor, first.exposure_ms, light, noise)


def _noise_map(
    background: Float32Array, excess: Float32Array, noise: CameraNoise
) -> Float32Array:
    """Noise of each small pixel: the model's shape, the frame's own size."""
    rows, columns = background.shape
    # The background is smooth: every fourth element both ways tells its noise.
    coarse = (max(columns // _COARSER, 1), max(rows // _COARSER, 1))
    model = np.asarray(
        cv2.resize(background, coarse, interpolation=cv2.INTER_LINEAR), np.float32
    )
    model -= np.float32(noise.black_level_dn)
    np.maximum(model, np.float32(0.0), out=model)
    model *= np.float32(noise.gain_dn_per_e)
    model += np.float32(noise.read_noise_dn**2)
    np.sqrt(model, out=model)
    some = excess[::_COARSER, ::_COARSER][: coarse[1], : coarse[0]]
    size = robust_width(some / model)
    # The median of 3 x 3 leaves about 1/2.5 of the noise to dither the rounding.
    read = max(noise.read_noise_dn**2 - ROUNDING_VARIANCE_DN2, 0.0) ** 0.5
    least = correlated_rounding_dn(read / 2.5)
    model *= np.float32(size)
    np.maximum(model, np.float32(max(least, 1e-3)), out=model)
    full = cv2.resize(model, (columns, rows), interpolation=cv2.INTER_LINEAR)
    return np.asarray(full, dtype=np.float32)


def _clipped_share(layer: FrameLayer, factor: int) -> Float32Array:
    """Share of saturated pixels in each small pixel."""
    frame = layer.frame
    rows, columns = frame.shape[0] // factor, frame.shape[1] // factor
    mask = frame[: rows * factor, : columns * factor] >= layer.noise.saturation_dn
    light = mask.astype(np.float32)
    share = cv2.resize(light, (columns, rows), interpolation=cv2.INTER_AREA)
    return np.asarray(share, dtype=np.float32)
