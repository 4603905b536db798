"""The pixels around one candidate, from every exposure, ready for the fit.

Each exposure is a layer: light over its background a millisecond, a variance model
and which pixels count. Layers are fused pixel by pixel with the weights that the
current model of the spot gives: a sufficient statistic of the joint likelihood.
Speckle is not part of these weights; all exposures share it.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.camera_noise import (
    ROUNDING_VARIANCE_DN2,
    CameraNoise,
    correlated_rounding_dn,
)
from pitchsweep.analysis.records import FloatArray

BoolArray = NDArray[np.bool_]


@dataclass(frozen=True)
class Plane:
    """A background near a place: ``level`` DN there, slopes in DN a pixel."""

    level: float
    per_column: float
    per_row: float


@dataclass(frozen=True)
class Layer:
    """One exposure in the window, arrays (rows, columns).

    ``rate`` is DN a millisecond over background; ``good`` pixels are neither
    saturated nor hot; ``clipped`` ones are saturated. Variance of ``rate`` at signal
    s (DN a ms) is (quiet + gain * exposure_ms * s) / exposure_ms^2.
    """

    exposure_ms: float
    rate: FloatArray
    good: BoolArray
    clipped: BoolArray
    quiet_variance: float
    gain: float


@dataclass(frozen=True)
class Window:
    """Layers and the pixel coordinates of the window: ``x`` (1, W), ``y`` (H, 1).

    ``trusted_to``: the share of the height down to which the model is believed.
    """

    x: FloatArray
    y: FloatArray
    binning: int
    layers: tuple[Layer, ...]
    trusted_to: float = 0.0

    def clipped(self) -> BoolArray:
        """Pixels saturated in every exposure."""
        out = self.layers[0].clipped
        for layer in self.layers[1:]:
            out = out & layer.clipped
        return out


@dataclass(frozen=True)
class Fused:
    """What all layers say of each pixel: rate, its variance, and weight 0 or 1."""

    rate: FloatArray
    variance: FloatArray
    used: FloatArray


@dataclass(frozen=True)
class FrameLayer:
    """A whole exposure as the cutter needs it.

    ``stripes`` (columns,) is smear along the columns in DN, to be taken off.
    """

    frame: NDArray[np.uint16]
    exposure_ms: float
    noise: CameraNoise
    stripes: NDArray[np.float32] | None = None


def cut_window(
    layers: Sequence[FrameLayer],
    planes: Sequence[Plane],
    hot: BoolArray | None,
    *,
    centre: tuple[float, float],
    half: tuple[float, float],
    binning: int = 1,
) -> Window:
    """The window of half sides ``half`` around ``centre`` (both column, row), px.

    ``planes`` holds each layer's background at ``centre``; ``hot`` (rows, columns)
    marks pixels known to be bad. The frame cuts the window. ``binning`` > 1 averages
    binning x binning pixels, for spots that are wide enough for it.
    """
    rows, columns = layers[0].frame.shape
    left, right = _span(centre[0], half[0], columns, binning)
    top, bottom = _span(centre[1], half[1], rows, binning)
    box = (slice(top, bottom), slice(left, right))
    x = np.arange(left, right, dtype=np.float64)[None, :]
    y = np.arange(top, bottom, dtype=np.float64)[:, None]
    bad = hot[box] if hot is not None else None
    cut = tuple(
        _layer(layer, box, plane, (x - centre[0], y - centre[1]), bad, binning)
        for layer, plane in zip(layers, planes, strict=True)
    )
    middle = (binning - 1) / 2.0
    return Window(
        x=x[:, ::binning] + middle, y=y[::binning] + middle, binning=binning, layers=cut
    )


def fuse(window: Window, signal: FloatArray) -> Fused:
    """The layers joined with the variances that ``signal`` (DN a ms) predicts."""
    if len(window.layers) == 1:
        return _alone(window.layers[0], signal)
    information = np.zeros_like(signal)
    weighted = np.zeros_like(signal)
    for layer in window.layers:
        time = layer.exposure_ms
        share = (time * time) / (layer.quiet_variance + layer.gain * time * signal)
        share = np.where(layer.good, share, 0.0)
        information += share
        weighted += share * layer.rate
    used = information > 0.0
    variance = 1.0 / np.where(used, information, 1.0)
    return Fused(
        rate=weighted * variance, variance=variance, used=used.astype(np.float64)
    )


def _alone(layer: Layer, signal: FloatArray) -> Fused:
    """A single layer: no weights between exposures are needed."""
    time = layer.exposure_ms
    variance = signal * (layer.gain / time)
    variance += layer.quiet_variance / time**2
    return Fused(layer.rate, variance, layer.good.astype(np.float64))


def shared_rounding(window: Window, signal: FloatArray) -> FloatArray:
    """rms of the rounding error that neighbouring pixels share, DN a ms, (H, W).

    Taken from the longest exposure that is usable in a pixel.
    """
    out = np.zeros_like(signal)
    for layer in reversed(window.layers):
        time = layer.exposure_ms
        variance = layer.quiet_variance + layer.gain * time * signal
        dither = np.maximum(variance * window.binning**2 - ROUNDING_VARIANCE_DN2, 0.0)
        out = np.where(layer.good, correlated_rounding_dn(dither**0.5) / time, out)
    return out


def _span(centre: float, half: float, size: int, binning: int) -> tuple[int, int]:
    low = int(min(max(np.floor(centre - half), 0), size - 1))
    high = int(min(max(np.ceil(centre + half) + 1, low + 1), size))
    length = max((high - low) // binning, 1) * binning
    low = min(low, size - length)
    return low, low + length


def _layer(
    source: FrameLayer,
    box: tuple[slice, slice],
    plane: Plane,
    away: tuple[FloatArray, FloatArray],
    hot: BoolArray | None,
    binning: int,
) -> Layer:
    raw = source.frame[box]
    noise = source.noise
    clipped = raw >= noise.saturation_dn
    excess = raw.astype(np.float64)
    excess -= plane.level + plane.per_column * away[0] + plane.per_row * away[1]
    if source.stripes is not None:
        excess -= source.stripes[box[1]]
    quiet = noise.variance_dn2(plane.level)
    good = ~clipped & ~_isolated(excess, quiet**0.5)
    if hot is not None:
        good &= ~hot
    if binning > 1:
        excess, good, clipped = _binned(excess, good, clipped, binning)
        quiet /= binning**2
    return Layer(
        exposure_ms=source.exposure_ms,
        rate=excess / source.exposure_ms,
        good=good,
        clipped=clipped,
        quiet_variance=quiet,
        gain=noise.gain_dn_per_e / binning**2,
    )


_NEIGHBOURS = np.array([[1, 1, 1], [1, 0, 1], [1, 1, 1]], dtype=np.uint8)


def _isolated(excess: FloatArray, noise_dn: float) -> BoolArray:
    """Hot pixels: far above the noise and three times above all eight neighbours."""
    around = cv2.dilate(excess, _NEIGHBOURS, borderType=cv2.BORDER_REFLECT_101)
    lone = excess > 7.0 * noise_dn + 3.0 * np.maximum(around, 0.0)
    return np.asarray(lone, dtype=np.bool_)


def _binned(
    excess: FloatArray, good: BoolArray, clipped: BoolArray, binning: int
) -> tuple[FloatArray, BoolArray, BoolArray]:
    size = (excess.shape[1] // binning, excess.shape[0] // binning)

    def mean(values: NDArray[np.generic]) -> FloatArray:
        share = cv2.resize(
            values.astype(np.float64), size, interpolation=cv2.INTER_AREA
        )
        return np.asarray(share, dtype=np.float64)

    if good.all() and not clipped.any():
        everywhere = np.ones(size[::-1], dtype=np.bool_)
        return mean(excess), everywhere, ~everywhere
    kept = mean(good)
    any_clipped = mean(clipped) > 0.0
    # A bin half lost to clipping would be pulled to its darker half.
    whole = (kept > 0.7) & ~any_clipped
    light = mean(np.where(good, excess, 0.0)) / np.maximum(kept, 1.0 / binning**2)
    return light, np.asarray(whole, np.bool_), np.asarray(any_clipped, np.bool_)
