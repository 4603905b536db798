"""Synthetic frames with known spots, for tests and benchmarks of the spot finder.

Independent of the finder: own pixel integration by sub-sampling, own speckle from a
filtered complex field (negative exponential intensity), own noise.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.camera_noise import CameraNoise
from pitchsweep.analysis.spot_search import Exposure


@dataclass(frozen=True)
class TrueSpot:
    """A Gaussian spot: centre and radii in px, height in DN a ms, turn in rad."""

    column_px: float
    row_px: float
    height: float
    sigma: tuple[float, float]
    angle_rad: float = 0.0
    lopsided: float = 0.0


@dataclass(frozen=True)
class Scene:
    """What the camera looks at."""

    spots: Sequence[TrueSpot]
    columns: int = 640
    rows: int = 400
    background_dn_per_ms: float = 1.0
    gradient: float = 0.5
    hot_pixels: int = 30
    speckle_contrast: float = 0.0
    grain_fwhm_px: float = 2.0


def camera(bits: int) -> CameraNoise:
    """A 12 or 8 bit camera of the same sensor."""
    scale = 2.0 ** (bits - 12)
    read = 0.4 * 4.0 * scale
    return CameraNoise(
        gain_dn_per_e=0.4 * scale,
        read_noise_dn=float(np.hypot(read, (1 / 12) ** 0.5)),
        black_level_dn=64.0 * scale,
        saturation_dn=2.0**bits - 1,
    )


def expose(
    scene: Scene, noise: CameraNoise, times_ms: Sequence[float], seed: int
) -> tuple[list[Exposure], NDArray[np.float32]]:
    """Exposures of ``scene`` (same speckle and hot pixels in all) and a mean dark."""
    rng = np.random.default_rng(seed)
    light = spot_light(scene, rng)
    room = _room(scene)
    hot = np.zeros((scene.rows, scene.columns))
    places = rng.integers(0, hot.size, scene.hot_pixels)
    hot.flat[places] = rng.uniform(0.05, 0.8, scene.hot_pixels) * noise.saturation_dn
    read = float(np.sqrt(max(noise.read_noise_dn**2 - 1 / 12, 0.0)))
    out = []
    for time in times_ms:
        electrons = rng.poisson((light + room) * time / noise.gain_dn_per_e)
        value = electrons * noise.gain_dn_per_e + noise.black_level_dn + hot
        value += rng.normal(0.0, read, value.shape)
        whole = np.clip(np.rint(value), 0, noise.saturation_dn).astype(np.uint16)
        out.append(Exposure(whole, time))
    dark = noise.black_level_dn + hot + rng.normal(0, read / 4, hot.shape)
    return out, dark.astype(np.float32)


def spot_light(scene: Scene, rng: np.random.Generator) -> NDArray[np.float64]:
    """Light of the spots, DN a ms, with fully drawn speckle."""
    light = np.zeros((scene.rows, scene.columns))
    for spot in scene.spots:
        reach = int(6 * max(spot.sigma)) + 2
        c0, r0 = int(spot.column_px), int(spot.row_px)
        rows = np.arange(max(r0 - reach, 0), min(r0 + reach + 1, scene.rows))
        columns = np.arange(max(c0 - reach, 0), min(c0 + reach + 1, scene.columns))
        patch = _pixel_means(spot, columns, rows)
        if scene.speckle_contrast > 0.0:
            grains = speckle(patch.shape, scene.grain_fwhm_px, rng)
            patch *= 1.0 + scene.speckle_contrast * (grains - 1.0)
        light[rows[0] : rows[-1] + 1, columns[0] : columns[-1] + 1] += patch
    return light


def speckle(
    shape: tuple[int, ...], grain_fwhm_px: float, rng: np.random.Generator
) -> NDArray[np.float64]:
    """Fully developed speckle, mean 1: |Gaussian-filtered complex noise|^2.

    The intensity's autocorrelation is exp(-r^2/w^2), w = FWHM / 1.665, so that of the
    field has twice its variance.
    """
    rows, columns = shape[0] + 32, shape[1] + 32
    w = grain_fwhm_px / 1.6651
    fy, fx = np.fft.fftfreq(rows)[:, None], np.fft.fftfreq(columns)[None, :]
    # Field autocorrelation exp(-r^2/(2 w^2)) has the power spectrum exp(-2 (pi w f)^2).
    root = np.exp(-((np.pi * w) ** 2) * (fx**2 + fy**2))
    white = rng.normal(size=(rows, columns)) + 1j * rng.normal(size=(rows, columns))
    field = np.fft.ifft2(np.fft.fft2(white) * root)
    mean = 2.0 * float(np.mean(root**2))
    grains: NDArray[np.float64] = np.abs(field[: shape[0], : shape[1]]) ** 2 / mean
    return grains


def _pixel_means(
    spot: TrueSpot, columns: NDArray[np.int64], rows: NDArray[np.int64]
) -> NDArray[np.float64]:
    """The spot averaged over each pixel by 3 x 3 sub-samples."""
    total = np.zeros((rows.size, columns.size))
    cosine, sine = np.cos(spot.angle_rad), np.sin(spot.angle_rad)
    for oy in (-1 / 3, 0.0, 1 / 3):
        for ox in (-1 / 3, 0.0, 1 / 3):
            dx = columns[None, :] + ox - spot.column_px
            dy = rows[:, None] + oy - spot.row_px
            u = (cosine * dx + sine * dy) / spot.sigma[0]
            v = (-sine * dx + cosine * dy) / spot.sigma[1]
            skew = 1.0 + spot.lopsided * np.tanh(u)
            total += np.exp(-0.5 * (u**2 + v**2)) * skew
    return spot.height * total / 9.0


def _room(scene: Scene) -> NDArray[np.float64]:
    x = np.linspace(-1.0, 1.0, scene.columns)[None, :]
    y = np.linspace(-1.0, 1.0, scene.rows)[:, None]
    slope = scene.gradient * (0.7 * x + 0.3 * y)
    return scene.background_dn_per_ms * (1.0 + slope)
