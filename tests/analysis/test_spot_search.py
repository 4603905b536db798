"""Spots of synthetic frames: where they are, what is stated, what is refused."""

from collections.abc import Sequence
from dataclasses import replace

import cv2
import numpy as np
import pytest
from numpy.typing import NDArray
from spot_frames import Scene, TrueSpot, camera, expose

from pitchsweep.analysis.records import Rejection, Spot, SpotSearch
from pitchsweep.analysis.speckle_grain import Speckle
from pitchsweep.analysis.spot_judgement import SpotLimits
from pitchsweep.analysis.spot_search import Exposure, SearchSettings, find_spots

TIMES_MS = (2.0, 20.0)
BRIGHT = TrueSpot(200.3, 100.6, 400.0, (4.0, 3.5), 0.4)
MIDDLE = TrueSpot(420.7, 250.2, 20.0, (5.0, 4.0), 1.2)
FAINT = TrueSpot(540.4, 90.8, 0.8, (3.0, 3.0))
THREE = Scene((BRIGHT, MIDDLE, FAINT))


def search(scene: Scene, bits: int = 12, seed: int = 0) -> SpotSearch:
    noise = camera(bits)
    exposures, dark = expose(scene, noise, TIMES_MS, seed)
    return find_spots(exposures, dark, noise, 7)


def nearest(found: SpotSearch, spot: TrueSpot) -> Spot:
    def away(s: Spot) -> float:
        return float(np.hypot(s.column_px - spot.column_px, s.row_px - spot.row_px))

    best = min(found.spots, key=away)
    assert away(best) < 3.0
    return best


def pulls(spot: Spot, true: TrueSpot) -> tuple[float, float]:
    (cc, _), (_, rr) = spot.covariance_px2
    return (
        (spot.column_px - true.column_px) / cc**0.5,
        (spot.row_px - true.row_px) / rr**0.5,
    )


def test_spots_five_hundred_times_apart_are_found_in_one_bracket() -> None:
    found = search(THREE)
    assert len(found.spots) == 3
    for true in THREE.spots:
        spot = nearest(found, true)
        assert max(map(abs, pulls(spot, true))) < 4.0
        assert spot.peak_dn_per_ms == pytest.approx(true.height, rel=0.15)
        assert spot.sigma_px[0] == pytest.approx(true.sigma[0], rel=0.2)


def test_the_exposure_named_is_the_longest_in_which_the_core_is_not_clipped() -> None:
    found = search(THREE)
    assert nearest(found, BRIGHT).exposure_ms == 2.0
    assert nearest(found, FAINT).exposure_ms == 20.0
    assert not any(spot.saturated for spot in found.spots)


def test_turn_of_the_major_axis_is_from_column_towards_row() -> None:
    spot = nearest(search(Scene((replace(MIDDLE, sigma=(6.0, 3.0)),))), MIDDLE)
    assert np.cos(2 * (spot.angle_rad - MIDDLE.angle_rad)) > 0.99


def rms_pull(scene: Scene, bits: int, seeds: int) -> float:
    out: list[float] = []
    for seed in range(seeds):
        found = search(scene, bits, seed)
        for true in scene.spots:
            near = [
                s
                for s in found.spots
                if np.hypot(s.column_px - true.column_px, s.row_px - true.row_px) < 8
            ]
            out += pulls(near[0], true) if near else ()
    assert len(out) >= 0.97 * 2 * seeds * len(scene.spots)
    return float(np.sqrt(np.mean(np.square(out))))


@pytest.mark.parametrize("bits", [12, 8])
def test_stated_error_is_the_scatter_without_speckle(bits: int) -> None:
    """150 pulls: the rms of a normal quantity lies within 1 +- 0.17 (3 sigma)."""
    scale = 2.0 ** (bits - 12)
    spots = tuple(replace(s, height=max(s.height * scale, 0.3)) for s in THREE.spots)
    scene = Scene(spots, background_dn_per_ms=scale)
    assert rms_pull(scene, bits, 25) == pytest.approx(1.0, abs=0.17)


@pytest.mark.parametrize(("contrast", "grain"), [(1.0, 2.0), (0.7, 3.0)])
def test_stated_error_is_the_scatter_under_speckle_nobody_told(
    contrast: float, grain: float
) -> None:
    """Within 15 % and two sigma of 150 pulls."""
    scene = replace(THREE, speckle_contrast=contrast, grain_fwhm_px=grain)
    assert rms_pull(scene, 12, 25) == pytest.approx(1.0, abs=0.25)


def test_speckle_is_measured_in_the_frame() -> None:
    scene = replace(
        THREE,
        spots=tuple(
            TrueSpot(80.0 + 120 * k, 60.0 + 70 * k, 60.0, (6.0, 5.5)) for k in range(5)
        ),
        speckle_contrast=1.0,
        grain_fwhm_px=2.5,
    )
    seen = [search(scene, seed=seed) for seed in range(6)]
    assert all(s.speckle_measured for s in seen)
    assert np.median([s.speckle_contrast for s in seen]) == pytest.approx(1.0, abs=0.1)
    assert np.median([s.grain_fwhm_px for s in seen]) == pytest.approx(2.5, rel=0.12)


def test_no_speckle_is_seen_where_there_is_none() -> None:
    for seed in range(5):
        found = search(THREE, seed=seed)
        assert found.speckle_measured and found.speckle_contrast == 0.0


def test_centre_agrees_with_opencv_moments() -> None:
    """Outside check: the intensity-weighted centroid, coarse but independent.

    Source: OpenCV's image moments (Apache-2.0 library), run here.
    """
    noise = camera(12)
    exposures, _ = expose(Scene((MIDDLE,), hot_pixels=0), noise, (20.0,), 3)
    box = exposures[0].frame[225:276, 395:446].astype(np.float64)
    edge = np.concatenate([box[0], box[-1], box[:, 0], box[:, -1]])
    moments = cv2.moments(box - edge.mean())
    column = 395 + moments["m10"] / moments["m00"]
    row = 225 + moments["m01"] / moments["m00"]
    found = find_spots(exposures, None, noise, 0)
    spot = nearest(found, MIDDLE)
    assert spot.column_px == pytest.approx(column, abs=0.3)
    assert spot.row_px == pytest.approx(row, abs=0.3)


def test_positions_do_not_depend_on_which_exposures_were_used() -> None:
    noise = camera(12)
    exposures, dark = expose(Scene((MIDDLE,)), noise, (2.0, 6.0), 1)
    both = nearest(find_spots(exposures, dark, noise, 0), MIDDLE)
    for one in exposures:
        alone = nearest(find_spots([one], dark, noise, 0), MIDDLE)
        u = alone.covariance_px2[0][0] ** 0.5
        assert alone.column_px == pytest.approx(both.column_px, abs=4 * u)


def test_order_of_exposures_does_not_matter() -> None:
    noise = camera(12)
    exposures, dark = expose(THREE, noise, TIMES_MS, 2)
    one = find_spots(exposures, dark, noise, 0)
    other = find_spots(exposures[::-1], dark, noise, 0)
    assert one == other


def test_frames_are_not_modified_and_answers_repeat() -> None:
    noise = camera(12)
    exposures, dark = expose(THREE, noise, TIMES_MS, 2)
    kept = [e.frame.copy() for e in exposures]
    first = find_spots(exposures, dark, noise, 0)
    assert find_spots(exposures, dark, noise, 0) == first
    for before, after in zip(kept, exposures, strict=True):
        assert np.array_equal(before, after.frame)


CLIPPED = replace(BRIGHT, height=6000.0)


def test_a_spot_clipped_in_every_exposure_is_fitted_from_its_wings_and_says_so() -> (
    None
):
    out: list[float] = []
    for seed in range(8):
        spot = nearest(search(Scene((CLIPPED, MIDDLE)), seed=seed), CLIPPED)
        assert spot.saturated
        out += pulls(spot, CLIPPED)
    # 16 normal pulls: their rms lies within 1 +- 0.55 (3 sigma).
    assert float(np.sqrt(np.mean(np.square(out)))) == pytest.approx(1.0, abs=0.55)


def test_a_clipped_spot_is_refused_where_that_is_wished() -> None:
    noise = camera(12)
    exposures, dark = expose(Scene((CLIPPED, MIDDLE)), noise, TIMES_MS, 0)
    strict = SearchSettings(limits=SpotLimits(accept_saturated=False))
    found = find_spots(exposures, dark, noise, 7, settings=strict)
    assert [s for s in found.spots if abs(s.row_px - BRIGHT.row_px) < 5] == []
    assert Rejection.SATURATED in [r.reason for r in found.rejected]
    assert all(r.score > 0.0 for r in found.rejected)
    nearest(found, MIDDLE)


def test_a_ghost_at_the_foot_of_a_spot_hardly_pulls_it() -> None:
    """5 % of the light five radii away; the wings alone would pull it by a radius."""
    main = TrueSpot(300.0, 200.0, 60.0, (2.7, 2.5))
    ghost = TrueSpot(291.6, 209.8, 3.0, (2.7, 2.5))
    scene = Scene((main, ghost), speckle_contrast=1.0, grain_fwhm_px=2.0)
    off: list[float] = []
    pulled: list[float] = []
    for seed in range(8):
        spot = search(scene, seed=seed).spots[0]
        off += [spot.column_px - main.column_px, spot.row_px - main.row_px]
        pulled += pulls(spot, main)
    assert float(np.median(np.abs(off))) < 0.5
    assert float(np.sqrt(np.mean(np.square(pulled)))) < 2.0


def test_a_spot_cut_by_the_edge_is_refused() -> None:
    found = search(Scene((TrueSpot(3.0, 200.0, 50.0, (4.0, 4.0)), MIDDLE)))
    assert len(found.spots) == 1
    assert Rejection.EDGE in [r.reason for r in found.rejected]
    assert all(r.step == 7 and r.unit == "px" for r in found.rejected)


def test_an_empty_scene_has_no_spots() -> None:
    for seed in range(5):
        assert search(Scene((), hot_pixels=60), seed=seed).spots == ()


@pytest.mark.parametrize("value", [0, 64, 4095])
def test_a_frame_of_one_value_is_no_trouble(value: int) -> None:
    frame = np.full((200, 320), value, dtype=np.uint16)
    found = find_spots([Exposure(frame, 2.0)], None, camera(12), 0)
    assert found.spots == ()


@pytest.mark.parametrize("size", [(64, 64), (65, 131), (70, 67)])
def test_small_and_odd_frames_work(size: tuple[int, int]) -> None:
    scene = Scene(
        (TrueSpot(30.2, 32.7, 50.0, (3.0, 3.0)),), columns=size[1], rows=size[0]
    )
    assert len(search(scene).spots) == 1


def test_frames_of_pure_noise_at_full_range_do_not_crash() -> None:
    rng = np.random.default_rng(0)
    frame = rng.integers(0, 4096, (128, 128)).astype(np.uint16)
    find_spots([Exposure(frame, 1.0)], None, camera(12), 0)


def test_a_lopsided_beam_is_stated_with_more_uncertainty() -> None:
    even = Scene((TrueSpot(200.0, 200.0, 100.0, (8.0, 8.0)),))
    odd = Scene((TrueSpot(200.0, 200.0, 100.0, (8.0, 8.0), lopsided=0.3),))

    def u(scene: Scene) -> float:
        return search(scene).spots[0].covariance_px2[0][0] ** 0.5

    assert u(odd) > 3.0 * u(even)


def test_hot_pixels_do_not_pull_a_spot() -> None:
    noise = camera(12)
    exposures, dark = expose(Scene((MIDDLE,), hot_pixels=0), noise, (20.0,), 5)
    clean = nearest(find_spots(exposures, dark, noise, 0), MIDDLE)
    frame = exposures[0].frame.copy()
    hot_dark = dark.copy()
    for dy, dx in ((3, 4), (-5, 2), (8, -7), (1, 9)):
        frame[250 + dy, 420 + dx] += 1500
        hot_dark[250 + dy, 420 + dx] += 1500
    u = clean.covariance_px2[0][0] ** 0.5
    hot = nearest(find_spots([Exposure(frame, 20.0)], hot_dark, noise, 0), MIDDLE)
    assert hot.column_px == pytest.approx(clean.column_px, abs=0.5 * u)
    assert hot.row_px == pytest.approx(clean.row_px, abs=0.5 * u)


@pytest.mark.parametrize(
    "frames", [[], [np.zeros((64, 64), np.uint16), np.zeros((64, 65), np.uint16)]]
)
def test_no_frame_or_frames_of_two_shapes_are_an_error(
    frames: Sequence[NDArray[np.uint16]],
) -> None:
    with pytest.raises(ValueError, match="one shape"):
        find_spots([Exposure(f, 1.0) for f in frames], None, camera(12), 0)


def test_given_speckle_is_used_and_named() -> None:
    noise = camera(12)
    exposures, dark = expose(THREE, noise, TIMES_MS, 0)
    plain = nearest(find_spots(exposures, dark, noise, 0), BRIGHT)
    told = find_spots(exposures, dark, noise, 0, speckle=Speckle(1.0, 2.0))
    assert (told.speckle_contrast, told.grain_fwhm_px) == (1.0, 2.0)
    assert not told.speckle_measured
    assert nearest(told, BRIGHT).covariance_px2[0][0] > plain.covariance_px2[0][0]
