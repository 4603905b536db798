"""Light of one spot in another's window, and one scene seen by different exposures."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest
from spot_frames import Scene, TrueSpot, camera, expose

from pitchsweep.analysis.records import Spot
from pitchsweep.analysis.speckle_grain import NO_SPECKLE
from pitchsweep.analysis.spot_fit import Companion, Shape, fit_spot
from pitchsweep.analysis.spot_search import SearchSettings, find_spots
from pitchsweep.analysis.spot_window import FrameLayer, Plane, cut_window

MAIN = TrueSpot(300.3, 200.7, 60.0, (5.0, 4.5), 0.4)
RADIUS_PX = 4.8


def beside(radii: float, share: float) -> TrueSpot:
    """A spot as wide as ``MAIN``, so many radii off it."""
    return replace(
        MAIN,
        column_px=MAIN.column_px + 0.8 * radii * RADIUS_PX,
        row_px=MAIN.row_px + 0.6 * radii * RADIUS_PX,
        height=share * MAIN.height,
    )


def near(spots: Sequence[Spot], true: TrueSpot) -> Spot | None:
    """The found spot within a radius of the true one."""
    for spot in spots:
        off = spot.column_px - true.column_px, spot.row_px - true.row_px
        if np.hypot(*off) < RADIUS_PX:
            return spot
    return None


def off_over_u(spot: Spot, true: TrueSpot) -> list[float]:
    (cc, _), (_, rr) = spot.covariance_px2
    return [
        (spot.column_px - true.column_px) / cc**0.5,
        (spot.row_px - true.row_px) / rr**0.5,
    ]


def rms_pull(scene: Scene, wanted: Sequence[TrueSpot], seeds: int) -> float:
    out: list[float] = []
    for seed in range(seeds):
        exposures, dark = expose(scene, camera(12), (2.0, 20.0), seed)
        found = find_spots(exposures, dark, camera(12), 0).spots
        for true in wanted:
            spot = near(found, true)
            assert spot is not None
            out += off_over_u(spot, true)
    return float(np.sqrt(np.mean(np.square(out))))


@pytest.mark.parametrize("contrast", [0.0, 1.0])
@pytest.mark.parametrize(("radii", "share"), [(6.0, 1.0), (5.0, 0.3)])
def test_two_spots_in_each_others_windows_are_where_they_say(
    contrast: float, radii: float, share: float
) -> None:
    """24 normal pulls: their rms lies within 1 +- 0.43 (3 sigma)."""
    pair = (MAIN, beside(radii, share))
    scene = Scene(pair, speckle_contrast=contrast)
    assert rms_pull(scene, pair, 6) == pytest.approx(1.0, abs=0.43)


@pytest.mark.parametrize("contrast", [0.0, 1.0])
def test_a_faint_ghost_at_the_foot_is_taken_along(contrast: float) -> None:
    """16 normal pulls: within 1 +- 0.53 (3 sigma); the ghost is no spot of its own."""
    ghost = beside(4.5, 0.05)
    scene = Scene((MAIN, ghost), speckle_contrast=contrast)
    assert rms_pull(scene, (MAIN,), 8) < 1.53
    exposures, dark = expose(scene, camera(12), (2.0, 20.0), 0)
    assert near(find_spots(exposures, dark, camera(12), 0).spots, ghost) is None


def test_what_is_not_known_of_a_neighbour_widens_the_stated_error() -> None:
    pair = (MAIN, beside(4.0, 0.5))
    (exposure,), _ = expose(Scene(pair, hot_pixels=0), camera(12), (2.0,), 0)
    noise = camera(12)
    level = noise.black_level_dn + 2.0
    window = cut_window(
        [FrameLayer(exposure.frame, 2.0, noise)],
        [Plane(level, 0.0, 0.0)],
        None,
        centre=(MAIN.column_px, MAIN.row_px),
        half=(14.0, 14.0),
    )
    start, other = (
        Shape.round_spot(s.height, s.column_px, s.row_px, RADIUS_PX) for s in pair
    )
    u = [
        fit_spot(window, start, NO_SPECKLE, companions=[Companion(other, share)])
        .covariance.trace()
        .item()
        for share in (1e-3, 0.3)
    ]
    assert u[1] > 1.1 * u[0]


FIVE_HUNDRED = (
    TrueSpot(160.3, 120.6, 400.0, (4.0, 3.5), 0.4),
    TrueSpot(420.7, 250.2, 20.0, (5.0, 4.0), 1.2),
    TrueSpot(540.4, 90.8, 0.8, (3.0, 3.0)),
)


def test_orders_500_times_apart_do_not_depend_on_the_exposures_used() -> None:
    """Two brackets of the same scene without a frame in common: 60 normal pulls of
    their differences have an rms within 1 +- 0.27 (3 sigma)."""
    noise = camera(12)
    out: list[float] = []
    for seed in range(10):
        exposures, dark = expose(
            Scene(FIVE_HUNDRED), noise, (0.5, 2.0, 18.0, 20.0), seed
        )
        sets = [[exposures[0], exposures[3]], [exposures[1], exposures[2]]]
        found = [find_spots(bracket, dark, noise, 0).spots for bracket in sets]
        for true in FIVE_HUNDRED:
            one, other = (near(spots, true) for spots in found)
            assert one is not None and other is not None
            for k, (a, b) in enumerate(
                ((one.column_px, other.column_px), (one.row_px, other.row_px))
            ):
                u2 = one.covariance_px2[k][k] + other.covariance_px2[k][k]
                out.append((a - b) / u2**0.5)
    assert float(np.sqrt(np.mean(np.square(out)))) == pytest.approx(1.0, abs=0.27)


@pytest.mark.parametrize(
    "settings",
    [
        SearchSettings(threshold=3.5),
        SearchSettings(threshold=12.0),
        SearchSettings(factor=2),
        SearchSettings(factor=5),
    ],
)
@pytest.mark.parametrize("contrast", [0.0, 1.0])
def test_a_position_does_not_walk_with_threshold_or_first_window(
    settings: SearchSettings, contrast: float
) -> None:
    scene = Scene((MAIN,), speckle_contrast=contrast)
    exposures, dark = expose(scene, camera(12), (6.0,), 4)
    usual = near(find_spots(exposures, dark, camera(12), 0).spots, MAIN)
    other = near(
        find_spots(exposures, dark, camera(12), 0, settings=settings).spots, MAIN
    )
    assert usual is not None and other is not None
    u = usual.covariance_px2[0][0] ** 0.5, usual.covariance_px2[1][1] ** 0.5
    assert other.column_px == pytest.approx(usual.column_px, abs=0.3 * u[0])
    assert other.row_px == pytest.approx(usual.row_px, abs=0.3 * u[1])


def test_a_position_does_not_walk_with_brightness() -> None:
    """The same lopsided beam, 30 times brighter: 24 pulls of the differences."""
    out: list[float] = []
    for seed in range(12):
        places = []
        for height in (3.0, 90.0):
            spot = replace(MAIN, height=height, lopsided=0.01)
            exposures, dark = expose(Scene((spot,)), camera(12), (20.0,), seed)
            found = near(find_spots(exposures, dark, camera(12), 0).spots, MAIN)
            assert found is not None
            places.append(found)
        one, other = places
        for k, off in enumerate(
            (one.column_px - other.column_px, one.row_px - other.row_px)
        ):
            u2 = one.covariance_px2[k][k] + other.covariance_px2[k][k]
            out.append(off / u2**0.5)
    assert float(np.sqrt(np.mean(np.square(out)))) < 1.45


def test_wings_lopsided_by_a_percent_stay_within_the_stated_error() -> None:
    """Under speckle, as on a screen; 24 pulls, within 1 + 0.43 (3 sigma)."""
    spot = replace(MAIN, lopsided=0.01)
    scene = Scene((spot,), speckle_contrast=1.0)
    assert rms_pull(scene, (spot,), 12) < 1.43
