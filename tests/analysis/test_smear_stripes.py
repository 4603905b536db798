"""Stripes that the read-out draws through bright spots, and a room that changes."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from spot_frames import Scene, TrueSpot, camera, expose

from pitchsweep.analysis.smear_stripes import stripe_profile
from pitchsweep.analysis.spot_search import Exposure, find_spots, look

BRIGHT = TrueSpot(300.3, 80.6, 150.0, (5.0, 5.0))
BESIDE = TrueSpot(307.7, 300.2, 12.0, (4.5, 4.0))
TIME_MS = 20.0
SHARE = 0.1


def smeared(scene: Scene, seed: int) -> NDArray[np.uint16]:
    """A frame in which each column also holds a share of its mean light.

    The smear is made from a frame without noise worth speaking of, so that it is the
    same light that a longer frame would show; its own shot noise is left out.
    """
    noise = camera(12)
    clean = replace(scene, hot_pixels=0)
    strong = replace(noise, gain_dn_per_e=1e-4, read_noise_dn=0.3, saturation_dn=65535)
    (light,), _ = expose(clean, strong, (TIME_MS,), 1000)
    over = light.frame - noise.black_level_dn - TIME_MS * scene.background_dn_per_ms
    (exposure,), _ = expose(scene, noise, (TIME_MS,), seed)
    frame = exposure.frame + SHARE * over.mean(axis=0)
    rounded = np.rint(
        frame + np.random.default_rng(seed).uniform(-0.5, 0.5, frame.shape)
    )
    return np.clip(rounded, 0, noise.saturation_dn).astype(np.uint16)


def test_a_stripe_through_a_window_does_not_pull_its_spot() -> None:
    """24 normal pulls: their rms lies within 1 +- 0.43 (3 sigma)."""
    scene = Scene((BRIGHT, BESIDE), gradient=0.0)
    pulls: list[float] = []
    for seed in range(12):
        frame = smeared(scene, seed)
        found = find_spots([Exposure(frame, TIME_MS)], None, camera(12), 0)
        spot = min(
            found.spots, key=lambda s: abs(s.row_px - BESIDE.row_px), default=None
        )
        assert spot is not None
        (cc, _), (_, rr) = spot.covariance_px2
        pulls += [
            (spot.column_px - BESIDE.column_px) / cc**0.5,
            (spot.row_px - BESIDE.row_px) / rr**0.5,
        ]
    assert float(np.sqrt(np.mean(np.square(pulls)))) == pytest.approx(1.0, abs=0.43)


def test_the_profile_is_the_share_of_the_light_that_was_smeared() -> None:
    scene = Scene((BRIGHT,), gradient=0.0, hot_pixels=0)
    noise = camera(12)
    level = noise.black_level_dn + TIME_MS
    background = np.full((100, 160), level, dtype=np.float32)
    width = noise.variance_dn2(level) ** 0.5
    profile = stripe_profile(smeared(scene, 0), background, width)
    # A Gaussian's column sum: sqrt(2 pi) sigma times its height.
    peak = SHARE * TIME_MS * BRIGHT.height * 5.0 * (2.0 * np.pi) ** 0.5 / scene.rows
    assert float(profile.max()) == pytest.approx(peak, rel=0.1)
    assert np.count_nonzero(profile[:240]) == 0


def test_a_frame_without_stripes_has_no_profile() -> None:
    noise = camera(12)
    (exposure,), _ = expose(Scene((BESIDE,), gradient=0.0), noise, (TIME_MS,), 3)
    level = noise.black_level_dn + TIME_MS
    background = np.full((100, 160), level, dtype=np.float32)
    width = noise.variance_dn2(level) ** 0.5
    profile = stripe_profile(exposure.frame, background, width)
    assert np.count_nonzero(profile) == 0


@pytest.mark.parametrize("bits", [8, 12])
def test_rounding_that_pixels_share_is_no_stripe(bits: int) -> None:
    """Eight bits round a calm background in steps as wide as its noise."""
    scale = 2.0 ** (bits - 12)
    spot = replace(BESIDE, height=BESIDE.height * scale)
    scene = Scene((spot,), columns=1200, rows=900, background_dn_per_ms=scale)
    for seed in range(4):
        (exposure,), _ = expose(scene, camera(bits), (TIME_MS,), seed)
        seen = look([exposure], None, camera(bits))
        assert seen.scene.smalls[0].stripes is None


def test_exposures_under_changing_room_light_agree() -> None:
    """Each exposure has its own background: a step of the room between them is none
    of the spot's business. 24 normal pulls, within 1 +- 0.43 (3 sigma)."""
    noise = camera(12)
    pulls: list[float] = []
    for seed in range(12):
        dim, _ = expose(Scene((BESIDE,)), noise, (6.0,), seed)
        lit, _ = expose(
            Scene((BESIDE,), background_dn_per_ms=8.0), noise, (20.0,), seed + 100
        )
        found = find_spots([*dim, *lit], None, noise, 0)
        (spot,) = found.spots
        (cc, _), (_, rr) = spot.covariance_px2
        pulls += [
            (spot.column_px - BESIDE.column_px) / cc**0.5,
            (spot.row_px - BESIDE.row_px) / rr**0.5,
        ]
    assert float(np.sqrt(np.mean(np.square(pulls)))) == pytest.approx(1.0, abs=0.43)
