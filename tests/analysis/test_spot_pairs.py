"""Two spots that touch are told apart; beams of an odd form are not cut in two."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest
from spot_frames import Scene, TrueSpot, camera, expose

from pitchsweep.analysis.records import Spot
from pitchsweep.analysis.spot_search import find_spots

MAIN = TrueSpot(300.3, 200.7, 60.0, (5.0, 4.5), 0.4)
AWAY = TrueSpot(520.4, 90.8, 30.0, (5.0, 4.5), 0.4)
RADIUS_PX = 4.8


def beside(main: TrueSpot, radii: float, share: float = 1.0) -> TrueSpot:
    """A spot as wide as ``main``, so many radii off it."""
    return replace(
        main,
        column_px=main.column_px + 0.8 * radii * RADIUS_PX,
        row_px=main.row_px + 0.6 * radii * RADIUS_PX,
        height=share * main.height,
    )


def found_in(scene: Scene, seed: int) -> tuple[Spot, ...]:
    exposures, dark = expose(scene, camera(12), (2.0, 20.0), seed)
    return find_spots(exposures, dark, camera(12), 0).spots


def matched(spots: Sequence[Spot], true: TrueSpot) -> list[Spot]:
    """What lies within a radius of the true spot."""
    return [
        s
        for s in spots
        if np.hypot(s.column_px - true.column_px, s.row_px - true.row_px) < RADIUS_PX
    ]


def pulls(spot: Spot, true: TrueSpot) -> list[float]:
    (cc, _), (_, rr) = spot.covariance_px2
    return [
        (spot.column_px - true.column_px) / cc**0.5,
        (spot.row_px - true.row_px) / rr**0.5,
    ]


@pytest.mark.parametrize("share", [1.0, 0.4])
@pytest.mark.parametrize("radii", [2.5, 3.0, 4.0, 5.0])
def test_two_spots_that_touch_are_both_where_they_say(
    radii: float, share: float
) -> None:
    """16 normal pulls: their rms lies within 1 +- 0.53 (3 sigma)."""
    pair = (MAIN, beside(MAIN, radii, share))
    out: list[float] = []
    for seed in range(4):
        spots = found_in(Scene((*pair, AWAY)), seed)
        assert len(spots) == 3
        for true in pair:
            (spot,) = matched(spots, true)
            out += pulls(spot, true)
    assert float(np.sqrt(np.mean(np.square(out)))) == pytest.approx(1.0, abs=0.53)


def test_a_faint_pair_alone_in_the_frame_is_two_spots_too() -> None:
    """A twentieth of the light, nothing beside it: 24 pulls, within 1 +- 0.43."""
    main = replace(MAIN, height=3.0)
    pair = (main, beside(main, 3.0))
    out: list[float] = []
    for seed in range(6):
        spots = found_in(Scene(pair), seed)
        assert len(spots) == 2
        for true in pair:
            out += pulls(matched(spots, true)[0], true)
    assert float(np.sqrt(np.mean(np.square(out)))) == pytest.approx(1.0, abs=0.43)


@pytest.mark.parametrize("radii", [4.0, 5.0])
def test_under_speckle_a_pair_is_told_apart_where_grains_allow_it(
    radii: float,
) -> None:
    """32 pulls with few grains a spot: their rms lies within 1 +- 0.5."""
    pair = (MAIN, beside(MAIN, radii))
    out: list[float] = []
    for seed in range(8):
        spots = found_in(Scene((*pair, AWAY), speckle_contrast=1.0), seed)
        assert len(spots) == 3
        for true in pair:
            (spot,) = matched(spots, true)
            out += pulls(spot, true)
    assert float(np.sqrt(np.mean(np.square(out)))) == pytest.approx(1.0, abs=0.5)


@pytest.mark.parametrize("grain", [2.0, 4.0])
@pytest.mark.parametrize("sigma", [3.0, 6.0])
def test_speckle_does_not_cut_a_spot_in_two(sigma: float, grain: float) -> None:
    spots = [
        TrueSpot(90.3 + 150 * k, 80.6 + 120 * j, 60.0 / (1 + k), (sigma, 0.9 * sigma))
        for k in range(4)
        for j in range(3)
    ]
    scene = Scene(spots, speckle_contrast=1.0, grain_fwhm_px=grain)
    for seed in range(2):
        assert len(found_in(scene, seed)) <= len(spots)


@pytest.mark.parametrize(
    "odd",
    [
        replace(MAIN, sigma=(8.0, 8.0), lopsided=0.3),
        replace(MAIN, sigma=(8.0, 8.0), lopsided=0.05, height=400.0),
        replace(MAIN, sigma=(15.0, 3.0)),
        replace(MAIN, sigma=(9.0, 4.0), lopsided=0.6),
    ],
)
def test_lopsided_and_long_beams_stay_one_spot(odd: TrueSpot) -> None:
    for seed in range(3):
        assert len(found_in(Scene((odd, AWAY)), seed)) == 2


def test_a_form_that_all_orders_share_is_no_pair() -> None:
    """Three orders of a beam with two lobes are not six orders."""
    orders = [
        replace(MAIN, column_px=120.4 + 180 * k, height=60.0 / (1 + k))
        for k in range(3)
    ]
    lobed = [spot for one in orders for spot in (one, beside(one, 3.0, 0.6))]
    for seed in range(3):
        assert len(found_in(Scene(lobed), seed)) <= 3
