"""Where there may be spots: components above the noise in averaged-down frames."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import cv2
import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.frame_background import Float32Array
from pitchsweep.analysis.records import FloatArray
from pitchsweep.analysis.small_frames import LightMap
from pitchsweep.analysis.spot_shape import Shape

_CORE = 0.2
_REACH, _LEFT_OVER = 6.0, 0.2
_WIDEN = 1.294
"""1/sqrt(0.597): rms of a Gaussian from the rms of its part above a fifth."""


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
    boxes = [_box(shape, light) for shape in shapes]
    own = [_own_light(*pair, light) for pair in zip(shapes, boxes, strict=True)]
    # Other spots in a box can only lower what is left there.
    if not any(
        _left_over(light, box, signal, threshold).any()
        for box, signal in zip(boxes, own, strict=True)
    ):
        return []
    left, noise = light.light.copy(), light.noise.copy()
    for signal, box in zip(own, boxes, strict=True):
        left[box] -= signal
        noise[box] = np.hypot(noise[box], np.float32(_LEFT_OVER) * signal)
    mask = np.zeros(left.shape, dtype=np.uint8)
    for box in boxes:
        mask[box] = left[box] > noise[box] * np.float32(threshold)
    rest = LightMap(light.factor, light.unit_ms, left, noise)
    return _patches(rest, mask, threshold, at_most)


def _left_over(
    light: LightMap, box: tuple[slice, slice], signal: Float32Array, threshold: float
) -> NDArray[np.bool_]:
    """Where light stands out of a box without the spot whose ``signal`` it holds."""
    noise = np.hypot(light.noise[box], np.float32(_LEFT_OVER) * signal)
    left = light.light[box] - signal
    return np.asarray(left > noise * np.float32(threshold), dtype=np.bool_)


def _own_light(shape: Shape, box: tuple[slice, slice], light: LightMap) -> Float32Array:
    """The light of a spot in its box, DN."""
    rows, columns = light.light.shape
    x = _places(np.arange(columns)[None, box[1]], light.factor)
    y = _places(np.arange(rows)[box[0], None], light.factor)
    return (shape.signal(x, y) * light.unit_ms).astype(np.float32)


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
    count, labels = cv2.connectedComponentsWithAlgorithm(
        bridged, 8, cv2.CV_32S, cv2.CCL_GRANA
    )
    boxes = _boxes(np.asarray(labels), np.flatnonzero(bridged.view(np.bool_)), count)
    found = []
    order = np.argsort(-boxes[1:, 4], kind="stable")[: 4 * at_most]
    for label in order + 1:
        left, top, right, bottom, area = (int(v) for v in boxes[label])
        box = (slice(top, bottom), slice(left, right))
        own = labels[box] == label
        best = float((light.light[box] / light.noise[box])[own].max())
        if area < 2 and best < 2.0 * threshold:
            continue
        patch = np.where(own, _smoothed(light.light, box), 0.0)
        item = _measured(patch, best, (left, top), light.factor)
        found.append(replace(item, height=item.height / light.unit_ms))
    found.sort(key=lambda c: -c.height)
    return found[:at_most]


def _boxes(
    labels: NDArray[np.int32], places: NDArray[np.int64], count: int
) -> NDArray[np.int64]:
    """Left, top, right, bottom (these two past the end) and area, (count, 5).

    ``places`` are the flat indices of what has a label: these are few, and looking at
    them alone is quicker than OpenCV's own statistics. Label 0 has area 0.
    """
    rows, columns = np.divmod(places, labels.shape[1])
    own = labels.ravel()[places]
    out = np.zeros((count, 5), dtype=np.int64)
    out[:, :2] = max(labels.shape)
    np.minimum.at(out[:, 0], own, columns)
    np.minimum.at(out[:, 1], own, rows)
    np.maximum.at(out[:, 2], own, columns + 1)
    np.maximum.at(out[:, 3], own, rows + 1)
    out[:, 4] = np.bincount(own, minlength=count)
    return out


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
