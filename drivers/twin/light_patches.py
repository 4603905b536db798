"""Patches of light on the camera's pixels: profile, halo and speckle of one order.

A patch is a small rectangle of expected electrons. Its profile is the beam's Gaussian
cross-section as the traced bundle spreads it over the screen, widened by the screen's
depth and the camera's focus.
"""

from dataclasses import dataclass

import numpy as np

from pitchsweep.configs.twin_model import TwinEffects
from pitchsweep.drivers.twin.rays import FloatArray
from pitchsweep.drivers.twin.speckle import SpeckleKey, speckle_pattern

_REACH_SIGMA = 5.0
_HALO_WIDER = 6.0
_HALO_REACH_SIGMA = 3.0


@dataclass(frozen=True)
class Blob:
    """One blob of light: centre (column, row) and covariance (2, 2) in pixels.

    ``electrons`` is what the whole blob gives the camera.
    """

    column: float
    row: float
    covariance_px2: FloatArray
    electrons: float
    speckle: SpeckleKey


@dataclass(frozen=True)
class _Window:
    """A rectangle of whole pixels within the frame; ends are not included."""

    first_row: int
    end_row: int
    first_column: int
    end_column: int

    def shape(self) -> tuple[int, int]:
        return self.end_row - self.first_row, self.end_column - self.first_column


def add_blob(image: FloatArray, blob: Blob, effects: TwinEffects) -> None:
    """Adds the blob's expected electrons to ``image`` (rows, columns), in place."""
    halo = effects.halo_fraction
    _add(image, blob, effects, share=1.0 - halo, wider=1.0, reach=_REACH_SIGMA)
    if halo > 0.0:
        wider = _HALO_WIDER
        _add(image, blob, effects, share=halo, wider=wider, reach=_HALO_REACH_SIGMA)


def _add(
    image: FloatArray,
    blob: Blob,
    effects: TwinEffects,
    *,
    share: float,
    wider: float,
    reach: float,
) -> None:
    covariance = blob.covariance_px2 * wider**2
    window = _window(image.shape, blob, reach * np.sqrt(np.diag(covariance)))
    if min(window.shape()) <= 0:
        return
    light = _profile(blob, covariance, window, effects.lopsided_fraction)
    contrast = effects.speckle_contrast
    if contrast > 0.0:
        pattern = speckle_pattern(
            blob.speckle,
            first_row=window.first_row,
            first_column=window.first_column,
            shape=window.shape(),
            grain_px=effects.speckle_grain_px,
        )
        light = light * (1.0 + contrast * (pattern - 1.0))
    target = image[
        window.first_row : window.end_row, window.first_column : window.end_column
    ]
    target += share * blob.electrons * light


def _window(shape: tuple[int, ...], blob: Blob, reach_px: FloatArray) -> _Window:
    wide, high = float(reach_px[0]), float(reach_px[1])
    return _Window(
        first_row=max(0, int(np.floor(blob.row - high))),
        end_row=min(shape[0], int(np.ceil(blob.row + high)) + 1),
        first_column=max(0, int(np.floor(blob.column - wide))),
        end_column=min(shape[1], int(np.ceil(blob.column + wide)) + 1),
    )


def _profile(
    blob: Blob, covariance: FloatArray, window: _Window, lopsided: float
) -> FloatArray:
    """Share of the light per pixel: a Gaussian, leaning to +column if lopsided."""
    x = np.arange(window.first_column, window.end_column)[None, :] - blob.column
    y = np.arange(window.first_row, window.end_row)[:, None] - blob.row
    (a, b), (_, c) = np.linalg.inv(covariance)
    norm = 2.0 * np.pi * np.sqrt(np.linalg.det(covariance))
    light = np.exp(-0.5 * (a * x * x + 2.0 * b * x * y + c * y * y)) / norm
    if lopsided > 0.0:
        u = x / np.sqrt(covariance[0, 0])
        light = light * (1.0 + lopsided * u / np.sqrt(1.0 + u * u))
    return np.asarray(light)
