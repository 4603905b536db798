"""Static, fully developed speckle on the screen.

The pattern is the squared modulus of a filtered complex Gaussian field. The field is
made of tiles of white noise, each keyed by wavelength, angle and place, so that the
pattern is a fixed function of where, at which angle and with which laser the light
lands: repeats and exposures of a step see the same pattern.
"""

from dataclasses import dataclass

import numpy as np
from scipy.ndimage import correlate1d

from pitchsweep.drivers.twin.keyed_noise import keyed_generator
from pitchsweep.drivers.twin.rays import FloatArray

ANGLE_CELL_DEG = 0.05
"""Incidences within one cell see the same pattern."""

_TILE = 32
_FWHM_PER_SIGMA = 2.3548


@dataclass(frozen=True)
class SpeckleKey:
    """What a pattern depends on, beside the place: seed, mount, laser, angle cell."""

    seed: int
    mount: int
    laser: str
    angle_cell: int


def speckle_pattern(
    key: SpeckleKey,
    *,
    first_row: int,
    first_column: int,
    shape: tuple[int, int],
    grain_px: float,
) -> FloatArray:
    """Relative intensity, mean 1, at the pixels of a rectangle (rows, columns).

    ``grain_px`` is the full width at half maximum of the intensity's autocorrelation.
    """
    kernel = _kernel(grain_px / _FWHM_PER_SIGMA)
    margin = kernel.shape[0] // 2
    field = _white(
        key,
        (first_row - margin, first_column - margin),
        (shape[0] + 2 * margin, shape[1] + 2 * margin),
    )
    for axis in (1, 2):
        field = correlate1d(field, kernel, axis=axis, mode="nearest")
    inner = field[:, margin : margin + shape[0], margin : margin + shape[1]]
    return np.asarray(0.5 * np.sum(inner**2, axis=0))


def _kernel(sigma_px: float) -> FloatArray:
    """Gaussian weights that keep the variance of white noise."""
    half = max(1, int(np.ceil(4.0 * sigma_px)))
    weights = np.exp(-0.5 * (np.arange(-half, half + 1) / sigma_px) ** 2)
    return np.asarray(weights / np.sqrt(np.sum(weights**2)))


def _white(
    key: SpeckleKey, first: tuple[int, int], shape: tuple[int, int]
) -> FloatArray:
    """White noise (2, rows, columns), real and imaginary part, from keyed tiles."""
    rows = range(first[0] // _TILE, (first[0] + shape[0] - 1) // _TILE + 1)
    columns = range(first[1] // _TILE, (first[1] + shape[1] - 1) // _TILE + 1)
    tiles = [[_tile(key, row, column) for column in columns] for row in rows]
    whole = np.block(tiles)
    top, left = first[0] - rows[0] * _TILE, first[1] - columns[0] * _TILE
    return np.asarray(whole[:, top : top + shape[0], left : left + shape[1]])


def _tile(key: SpeckleKey, row: int, column: int) -> FloatArray:
    generator = keyed_generator(
        key.seed,
        f"speckle tile {row} {column}",
        mount=key.mount,
        laser=key.laser,
        step=key.angle_cell,
    )
    return generator.standard_normal((2, _TILE, _TILE))
