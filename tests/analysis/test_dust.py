"""Dust on screen or sensor: no spots of its own, none pulled beyond what is stated."""

from collections.abc import Callable

import numpy as np
import pytest
from numpy.typing import NDArray
from spot_frames import Scene, TrueSpot, camera, spot_light

from pitchsweep.analysis.spot_search import Exposure, find_spots

ROWS, COLUMNS, SIGMA_PX, EXPOSURE_MS = 160, 240, 5.0, 20.0
Light = NDArray[np.float64]
Dust = Callable[[Light, float, float, np.random.Generator], Light]


def away_from(column: float, row: float) -> Light:
    """Distance of every pixel from a place, px."""
    y, x = np.mgrid[0:ROWS, 0:COLUMNS]
    return np.asarray(np.hypot(x - column, y - row))


def shade(light: Light, x: float, y: float, rng: np.random.Generator) -> Light:
    """A grain of 1.5 px radius that takes 40 % of the light."""
    return np.asarray(light * (1.0 - 0.4 * np.exp(-0.5 * (away_from(x, y) / 1.5) ** 2)))


def ring(light: Light, x: float, y: float, rng: np.random.Generator) -> Light:
    """A grain out of focus: a diffraction ring of 6 px radius, 30 % deep."""
    phase = (away_from(x, y) - 6.0) / 1.2
    return np.asarray(light * (1.0 - 0.3 * np.exp(-0.5 * phase**2) * np.cos(phase)))


def specks(light: Light, x: float, y: float, rng: np.random.Generator) -> Light:
    """Twenty grains that scatter room light, each about a pixel."""
    for _ in range(20):
        place = rng.uniform(10, COLUMNS - 10), rng.uniform(10, ROWS - 10)
        radius = rng.uniform(0.3, 0.6)
        bright = rng.uniform(2.0, 20.0)
        light = light + bright * np.exp(-0.5 * (away_from(*place) / radius) ** 2)
    return light


@pytest.mark.parametrize("dust", [shade, ring, specks])
def test_dust_is_no_spot_and_pulls_none_beyond_what_is_stated(dust: Dust) -> None:
    """The grain lies anywhere within 0.3 to 1.2 radii of the middle of the spot."""
    pulls: list[float] = []
    for seed in range(8):
        rng = np.random.default_rng([seed, 7])
        column, row = 120.0 + rng.uniform(-0.5, 0.5), 80.0 + rng.uniform(-0.5, 0.5)
        spot = TrueSpot(column, row, 40.0, (SIGMA_PX, SIGMA_PX))
        scene = Scene([spot], columns=COLUMNS, rows=ROWS)
        turn, away = rng.uniform(0, 2 * np.pi), SIGMA_PX * rng.uniform(0.3, 1.2)
        x, y = column + away * np.cos(turn), row + away * np.sin(turn)
        light = dust(spot_light(scene, rng) + 1.0, x, y, rng)
        noise = camera(12)
        electrons = rng.poisson(light * EXPOSURE_MS / noise.gain_dn_per_e)
        value = electrons * noise.gain_dn_per_e + noise.black_level_dn
        value += rng.normal(0.0, 1.6, value.shape)
        frame = np.clip(np.rint(value), 0, 4095).astype(np.uint16)
        (found,) = find_spots([Exposure(frame, EXPOSURE_MS)], None, noise, 0).spots
        (u_column_2, _), (_, u_row_2) = found.covariance_px2
        pulls += [
            (found.column_px - column) / u_column_2**0.5,
            (found.row_px - row) / u_row_2**0.5,
        ]
    assert np.abs(pulls).max() < 4.0
    assert np.sqrt(np.mean(np.square(pulls))) < 2.0
