"""The least error a spot's position can have, and an estimator that reaches it.

Independent of the finder. The bound is the inverse of the Fisher information of nine
unknowns (height, centre, three of the width, plane background) summed over pixels.
Under speckle it is the quasi-likelihood bound: a pixel's variance then also holds
Ac C^2 signal^2, Ac = pi w^2 (w: 1/e half width of the grain's autocorrelation). The
oracle is least squares with the true weights, started at the true values.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from spot_frames import Scene, TrueSpot

from pitchsweep.analysis.camera_noise import CameraNoise

Array = NDArray[np.float64]
REACH_SIGMA = 6.0


@dataclass(frozen=True)
class Cell:
    """Pixels around a true spot: their box in the frame, coordinates, true light."""

    rows: slice
    columns: slice
    x: Array
    y: Array
    room_dn: Array


def cell_of(spot: TrueSpot, scene: Scene, time_ms: float) -> Cell:
    """The pixels within six radii, cut at the frame; room light in DN."""
    reach = int(REACH_SIGMA * max(spot.sigma)) + 1
    c0, r0 = round(spot.column_px), round(spot.row_px)
    left, right = max(c0 - reach, 0), min(c0 + reach + 1, scene.columns)
    top, bottom = max(r0 - reach, 0), min(r0 + reach + 1, scene.rows)
    column = np.arange(left, right)[None, :]
    row = np.arange(top, bottom)[:, None]
    across = 2.0 * column / (scene.columns - 1) - 1.0
    down = 2.0 * row / (scene.rows - 1) - 1.0
    slope = scene.gradient * (0.7 * across + 0.3 * down)
    return Cell(
        rows=slice(top, bottom),
        columns=slice(left, right),
        x=np.asarray(column - spot.column_px, dtype=np.float64),
        y=np.asarray(row - spot.row_px, dtype=np.float64),
        room_dn=scene.background_dn_per_ms * time_ms * (1.0 + slope),
    )


def _truth(spot: TrueSpot, time_ms: float) -> Array:
    """Height (DN), x, y, a, b, c, plane (left at zero)."""
    cosine, sine = np.cos(spot.angle_rad), np.sin(spot.angle_rad)
    # The mean over a pixel widens a Gaussian by a twelfth of a square pixel.
    i1, i2 = (1.0 / (s**2 + 1.0 / 12.0) for s in spot.sigma)
    narrower = np.sqrt(i1 * i2) * spot.sigma[0] * spot.sigma[1]
    a = cosine**2 * i1 + sine**2 * i2
    c = sine**2 * i1 + cosine**2 * i2
    height = spot.height * time_ms * narrower
    return np.array([height, 0.0, 0.0, a, cosine * sine * (i1 - i2), c, 0.0, 0.0, 0.0])


def _model(p: Array, cell: Cell) -> tuple[Array, Array]:
    """Signal (rows, columns) and its derivatives (9, pixels)."""
    u, v = cell.x - p[1], cell.y - p[2]
    unit = np.exp(-0.5 * (p[3] * u * u + 2.0 * p[4] * u * v + p[5] * v * v))
    s = p[0] * unit
    one = np.ones_like(s)
    rows = [
        unit,
        s * (p[3] * u + p[4] * v),
        s * (p[4] * u + p[5] * v),
        -0.5 * s * u * u,
        -s * u * v,
        -0.5 * s * v * v,
        one,
        one * cell.x,
        one * cell.y,
    ]
    plane = p[6] + p[7] * cell.x + p[8] * cell.y
    return s + plane, np.array([r.ravel() for r in rows])


def _weight(p: Array, cell: Cell, scene: Scene, noise: CameraNoise) -> Array:
    signal, _ = _model(p, cell)
    variance = noise.read_noise_dn**2 + noise.gain_dn_per_e * (signal + cell.room_dn)
    area = np.pi * (scene.grain_fwhm_px / 1.6651) ** 2 * scene.speckle_contrast**2
    return np.asarray(1.0 / (variance + area * signal**2))


def bound_px(
    spot: TrueSpot, scene: Scene, noise: CameraNoise, time_ms: float
) -> tuple[float, float]:
    """Least standard error of column and row from one exposure."""
    cell, p = cell_of(spot, scene, time_ms), _truth(spot, time_ms)
    _, jacobian = _model(p, cell)
    weight = _weight(p, cell, scene, noise).ravel()
    covariance = np.linalg.inv((jacobian * weight) @ jacobian.T)
    return float(covariance[1, 1] ** 0.5), float(covariance[2, 2] ** 0.5)


def oracle_error_px(
    spot: TrueSpot,
    scene: Scene,
    noise: CameraNoise,
    time_ms: float,
    frame: NDArray[np.uint16],
) -> tuple[float, float]:
    """Error of column and row of the oracle in ``frame``; hot pixels left out."""
    cell, p = cell_of(spot, scene, time_ms), _truth(spot, time_ms)
    data = frame[cell.rows, cell.columns] - noise.black_level_dn - cell.room_dn
    weight = _weight(p, cell, scene, noise)
    first, _ = _model(p, cell)
    quiet = (noise.read_noise_dn**2 + noise.gain_dn_per_e * cell.room_dn) ** 0.5
    brightest = 1.0 if scene.speckle_contrast == 0.0 else 12.0
    cold = data < brightest * first + 8.0 * quiet
    flat = np.where(cold, weight, 0.0).ravel()
    for _ in range(3):
        model, jacobian = _model(p, cell)
        weighted = jacobian * flat
        p = p + np.linalg.solve(
            weighted @ jacobian.T, weighted @ (data - model).ravel()
        )
    return float(p[1]), float(p[2])
