"""Where there may be spots: components above the noise in averaged-down frames."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import cv2
import numpy as np
from numpy.typing import NDArray

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
from pitchsweep.analysis.records import FloatArray
from pitchsweep.analysis.smear_stripes import has_stripes, stripe_profile
from pitchsweep.analysis.spot_shape import Shape
from pitchsweep.analysis.spot_window import FrameLayer, Plane

_CORE = 0.2
_REACH, _LEFT_OVER = 6.0, 0.2
_WIDEN = 1.294
"""1/sqrt(0.597): rms of a Gaussian from the rms of its part above a fifth."""


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


@dataclass(frozen=True)
class Candidate:
    """A bright patch: place and rms radius in full-frame px, height DN a ms."""

    column_px: float
    row_px: float
    sigma_px: float
    height: float
    snr: float


_BLURRED = 1.0 / 12.0 + 0.5
"""Variance that the mean over a small pixel and the 3 x 3 kernel add, small px^2."""


def small_frame(layer: FrameLayer, factor: int) -> SmallFrame:
    """``layer`` averaged down by ``factor`` with background and noise."""
    small = averaged_down(layer.frame, factor)
    background = background_map(small)
    excess = np.subtract(small, background, out=small)
    noise = _noise_map(background, excess, layer.noise)
    stripes = None
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
        clipped=_clipped_share(layer, factor),
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


def candidates(
    light: LightMap, *, threshold: float = 5.0, at_most: int = 60
) -> list[Candidate]:
    """Patches above ``threshold`` times the noise, brightest first.

    Each patch is measured in the part above a fifth of its own height that hangs
    together with its brightest place; gaps of a small pixel or two are bridged.
    """
    mask = np.greater(light.light, light.noise * np.float32(threshold))
    return _patches(light, mask.view(np.uint8), threshold, at_most)


def late_candidates(
    light: LightMap,
    shapes: Sequence[Shape],
    *,
    threshold: float = 5.0,
    at_most: int = 60,
) -> list[Candidate]:
    """What is left around spots when they are taken off, brightest first.

    Within six radii of each of ``shapes``; a fifth of their light counts as noise.
    """
    rows, columns = light.light.shape
    left, noise = light.light.copy(), light.noise.copy()
    boxes = [_box(shape, light) for shape in shapes]
    for shape, box in zip(shapes, boxes, strict=True):
        x = _places(np.arange(columns)[None, box[1]], light.factor)
        y = _places(np.arange(rows)[box[0], None], light.factor)
        signal = (shape.signal(x, y) * light.unit_ms).astype(np.float32)
        left[box] -= signal
        noise[box] = np.hypot(noise[box], np.float32(_LEFT_OVER) * signal)
    mask = np.zeros((rows, columns), dtype=np.uint8)
    for box in boxes:
        mask[box] = left[box] > noise[box] * np.float32(threshold)
    rest = LightMap(light.factor, light.unit_ms, left, noise)
    return _patches(rest, mask, threshold, at_most)


def _places(index: NDArray[np.int64], factor: int) -> FloatArray:
    """Where small pixels lie in the full frame, px."""
    return np.asarray(index * float(factor) + (factor - 1) / 2.0)


def _box(shape: Shape, light: LightMap) -> tuple[slice, slice]:
    """The small pixels within six radii of a spot."""
    wide, high = shape.half_sides(_REACH)
    return (
        _slice(shape.row_px, high, light.factor),
        _slice(shape.column_px, wide, light.factor),
    )


def _slice(centre: float, half: float, factor: int) -> slice:
    low = max(int((centre - half) / factor), 0)
    return slice(low, max(int((centre + half) / factor) + 2, low))


def _patches(
    light: LightMap, mask: NDArray[np.uint8], threshold: float, at_most: int
) -> list[Candidate]:
    """The connected parts of ``mask``, measured."""
    if not mask.any():
        return []
    bridged = cv2.morphologyEx(mask, cv2.MORPH_CLOSE, np.ones((3, 3), np.uint8))
    count, labels, stats, _ = cv2.connectedComponentsWithStatsWithAlgorithm(
        bridged, 8, cv2.CV_32S, cv2.CCL_GRANA
    )
    found = []
    order = np.argsort(-stats[1:count, cv2.CC_STAT_AREA], kind="stable")[: 4 * at_most]
    for label in order + 1:
        left, top, wide, high, area = (int(v) for v in stats[label])
        box = (slice(top, top + high), slice(left, left + wide))
        own = labels[box] == label
        best = float((light.light[box] / light.noise[box])[own].max())
        if area < 2 and best < 2.0 * threshold:
            continue
        patch = np.where(own, _smoothed(light.light, box), 0.0)
        item = _measured(patch, best, (left, top), light.factor)
        found.append(replace(item, height=item.height / light.unit_ms))
    found.sort(key=lambda c: -c.height)
    return found[:at_most]


def _smoothed(light: Float32Array, box: tuple[slice, slice]) -> Float32Array:
    """``light`` in ``box``, blurred by 3 x 3 with what is around it."""
    above, before = min(box[0].start, 1), min(box[1].start, 1)
    wider = light[
        box[0].start - above : box[0].stop + 1, box[1].start - before : box[1].stop + 1
    ]
    smooth = cv2.GaussianBlur(wider, (3, 3), 0)[above:, before:]
    rows, columns = box[0].stop - box[0].start, box[1].stop - box[1].start
    return np.asarray(smooth[:rows, :columns], dtype=np.float32)


def _measured(
    patch: Float32Array, snr: float, corner: tuple[int, int], factor: int
) -> Candidate:
    peak = float(patch.max())
    _, labels = cv2.connectedComponents(
        (patch > _CORE * peak).astype(np.uint8), connectivity=8
    )
    row, column = np.unravel_index(int(np.argmax(patch)), patch.shape)
    core = np.where(labels == labels[row, column], patch, 0.0)
    total = float(core.sum())
    rows = np.arange(core.shape[0]) - 0.0
    columns = np.arange(core.shape[1]) - 0.0
    along, down = core.sum(axis=0) / total, core.sum(axis=1) / total
    x, y = float(along @ columns), float(down @ rows)
    spread = float(along @ (columns - x) ** 2 + down @ (rows - y) ** 2) / 2.0
    variance = factor**2 * max(spread * _WIDEN**2 - _BLURRED, 0.1)
    lowered = 1.0 + min(factor**2 * _BLURRED / variance, 1.0)
    middle = (factor - 1) / 2.0
    return Candidate(
        column_px=(x + corner[0]) * factor + middle,
        row_px=(y + corner[1]) * factor + middle,
        sigma_px=variance**0.5,
        height=peak * lowered,
        snr=snr,
    )


def _noise_map(
    background: Float32Array, excess: Float32Array, noise: CameraNoise
) -> Float32Array:
    """Noise of each small pixel: the model's shape, the frame's own size."""
    model = background - np.float32(noise.black_level_dn)
    np.maximum(model, np.float32(0.0), out=model)
    model *= np.float32(noise.gain_dn_per_e)
    model += np.float32(noise.read_noise_dn**2)
    np.sqrt(model, out=model)
    size = robust_width(excess[::4, ::4] / model[::4, ::4])
    # The median of 3 x 3 leaves about 1/2.5 of the noise to dither the rounding.
    read = max(noise.read_noise_dn**2 - ROUNDING_VARIANCE_DN2, 0.0) ** 0.5
    least = correlated_rounding_dn(read / 2.5)
    model *= np.float32(size)
    np.maximum(model, np.float32(max(least, 1e-3)), out=model)
    return np.asarray(model, dtype=np.float32)


def _clipped_share(layer: FrameLayer, factor: int) -> Float32Array | None:
    """Share of saturated pixels in each small pixel; None if there is none."""
    frame = layer.frame
    if float(frame.max()) < layer.noise.saturation_dn:
        return None
    rows, columns = frame.shape[0] // factor, frame.shape[1] // factor
    mask = frame[: rows * factor, : columns * factor] >= layer.noise.saturation_dn
    light = mask.astype(np.float32)
    share = cv2.resize(light, (columns, rows), interpolation=cv2.INTER_AREA)
    return np.asarray(share, dtype=np.float32)
