"""The photons door: frames that agree with the spots and with the world's state."""

from typing import Any

import numpy as np
import pytest
import twin_scene as scene
from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.optics import trace_bundle, trace_orders
from pitchsweep.drivers.twin.photons_door import expected_electrons, pixel_of, render
from pitchsweep.drivers.twin.truth import Truth, draw_truth

STAGE_DEG = 9.0


def frame(truth: Truth, bench: Bench, **changes: Any) -> NDArray[np.uint16]:
    label = Label(0, "red", 0, changes.pop("step", 3), changes.pop("exposure", 0))
    values: dict[str, Any] = {
        "stage_deg": STAGE_DEG,
        "mount_deg": 0.0,
        "exposure_ms": 2.0,
        "light_on": True,
    }
    return render(truth, bench, label, **{**values, **changes})


@pytest.mark.parametrize("seed", [0, 1, 2, 3])
def test_centroid_of_the_light_is_where_the_spots_door_says(seed: int) -> None:
    bench = scene.bench(map_error_mm=0.5, distortion_mm=0.3)
    truth = draw_truth(bench, scene.part(1600.0), seed)
    steps = scene.steps(STAGE_DEG)
    landing = trace_orders(truth, bench, steps)
    image = expected_electrons(truth, bench, steps, exposure_ms=10.0)
    places = pixel_of(bench.camera, landing.place_mm[0])
    checked = 0
    for column, row in places[landing.visible[0]]:
        if not (40 < column < 1240 and 40 < row < 360):
            continue
        left, top = round(column) - 25, round(row) - 25
        patch = image[top : top + 51, left : left + 51]
        light = patch / patch.sum()
        assert abs(light.sum(axis=0) @ np.arange(left, left + 51) - column) < 0.02
        assert abs(light.sum(axis=1) @ np.arange(top, top + 51) - row) < 0.02
        checked += 1
    assert checked >= 2


def test_all_light_of_an_order_arrives_in_proportion_to_time_and_power() -> None:
    bench = scene.bench()
    truth = scene.ideal(bench, scene.part(320.0))
    steps = scene.steps(STAGE_DEG)
    landing = trace_orders(truth, bench, steps)
    share = landing.share[0, landing.order == 0][0]
    image = expected_electrons(truth, bench, steps, exposure_ms=7.0)
    assert bench.twin is not None
    total = bench.twin.light_e_per_ms_per_mw * 0.9 * 7.0 * share
    assert image.sum() == pytest.approx(total, rel=1e-3)


def test_bundle_at_normal_incidence_is_the_beam_itself() -> None:
    bench = scene.bench()
    truth = scene.ideal(bench, scene.part(320.0))
    landing, spread = trace_bundle(truth, bench, scene.steps(0.0))
    np.testing.assert_allclose(spread[0, landing.order == 0][0], np.eye(2), atol=1e-9)


def test_bundle_of_the_first_order_stretches_by_the_cosines() -> None:
    """Beam width along x: cos b / cos a from the grating, 1 / cos(a + b) on a screen,
    and a second 1 / cos(a + b) is none: the plane cut of a parallel bundle has one."""
    bench = scene.bench()
    truth = scene.ideal(bench, scene.part(1600.0))
    landing, spread = trace_bundle(truth, bench, scene.steps(20.0))
    a = np.radians(20.0)
    b = np.arcsin(np.sin(a) - truth.air_wavelength_mm("red") / 1600e-6)
    first = spread[0, landing.order == -1][0]
    expected = np.cos(b) / np.cos(a) / np.cos(a + b)
    assert abs(first[0, 0]) == pytest.approx(expected, rel=1e-6)


def test_same_key_gives_the_same_frame_and_another_step_other_noise() -> None:
    bench = scene.bench(speckle_contrast=1.0, hot_pixels=20)
    truth = draw_truth(bench, scene.part(), 5)
    np.testing.assert_array_equal(frame(truth, bench), frame(truth, bench))
    other = frame(truth, bench, step=4)
    assert np.mean(frame(truth, bench) != other) > 0.5


def test_no_light_gives_a_dark_frame() -> None:
    bench = scene.bench(speckle_contrast=1.0)
    truth = draw_truth(bench, scene.part(), 5)
    dark = frame(truth, bench, light_on=False).astype(float)
    camera = bench.camera
    noise = camera.read_noise_e * camera.gain_dn_per_e
    assert dark.mean() == pytest.approx(camera.black_level_dn, abs=0.02)
    assert dark.std() == pytest.approx(np.hypot(noise, np.sqrt(1 / 12)), rel=0.02)
    assert dark.max() < camera.black_level_dn + 7.0 * noise


def test_zero_order_saturates_in_the_long_exposure_only() -> None:
    bench = scene.bench()
    truth = draw_truth(bench, scene.part(), 5)
    assert frame(truth, bench, exposure_ms=2.0).max() < 4095
    assert frame(truth, bench, exposure_ms=20.0).max() == 4095


@pytest.mark.parametrize("bits", [8, 10, 12, 16])
def test_values_stop_at_full_scale(bits: int) -> None:
    bench = scene.bench(bits=bits)
    truth = draw_truth(bench, scene.part(), 5)
    assert frame(truth, bench, exposure_ms=5000.0).max() == 2**bits - 1


def test_speckle_is_the_same_for_two_exposures_of_one_place() -> None:
    speckled = scene.bench(speckle_contrast=1.0)
    smooth = scene.bench()
    truth = draw_truth(speckled, scene.part(), 5)
    steps = scene.steps(STAGE_DEG)
    short = expected_electrons(truth, speckled, steps, exposure_ms=2.0)
    long = expected_electrons(truth, speckled, steps, exposure_ms=20.0)
    plain = expected_electrons(truth, smooth, steps, exposure_ms=2.0)
    np.testing.assert_allclose(long, 10.0 * short, rtol=1e-12)
    assert np.abs(short - plain).max() > 0.5 * plain.max()


def test_light_on_the_hole_is_missing() -> None:
    bench = scene.bench()
    truth = scene.ideal(bench, scene.part(320.0))
    black = bench.camera.black_level_dn
    through = frame(truth, bench, stage_deg=0.0)
    beside = frame(truth, bench, stage_deg=2.0)
    assert through.max() < black + 40
    assert beside.max() > black + 400


def test_moving_stage_smears_the_light() -> None:
    bench = scene.bench()
    truth = draw_truth(bench, scene.part(), 5)
    steps = scene.steps(STAGE_DEG)
    still = expected_electrons(truth, bench, steps, exposure_ms=2.0)
    smeared = expected_electrons(truth, bench, steps, exposure_ms=2.0, motion_deg=1.0)
    assert smeared.max() < 0.5 * still.max()
    assert smeared.sum() == pytest.approx(still.sum(), rel=0.05)


def test_hot_pixels_stay_in_their_places() -> None:
    bench = scene.bench(hot_pixels=20)
    truth = draw_truth(bench, scene.part(), 5)
    hot = [
        set(np.flatnonzero(image > 200).tolist())
        for image in (
            frame(truth, bench, light_on=False, exposure_ms=200.0),
            frame(truth, bench, light_on=False, exposure_ms=200.0, step=9),
        )
    ]
    assert len(hot[0]) == 20
    assert hot[0] == hot[1]


def test_room_light_steps_up_at_its_own_time() -> None:
    bench = scene.bench(room_light_dn_per_s=100.0, room_light_step_dn_per_s=400.0)
    truth = draw_truth(bench, scene.part(), 5)
    levels = []
    for planned_s in (0.0, 201.0):
        label = Label(0, "red", 0, 3, 0, planned_s)
        image = render(
            truth,
            bench,
            label,
            stage_deg=STAGE_DEG,
            mount_deg=0.0,
            exposure_ms=100.0,
            light_on=False,
        )
        levels.append(float(np.mean(image[100:300, 100:500])) - 64.0)
    np.testing.assert_allclose(levels, [10.0, 50.0], atol=0.1)


def test_halo_and_lopsided_profile_keep_the_light_finite_and_positive() -> None:
    bench = scene.bench(halo_fraction=0.2, lopsided_fraction=0.8, ghost_fraction=0.05)
    truth = draw_truth(bench, scene.part(), 5)
    image = expected_electrons(truth, bench, scene.steps(STAGE_DEG), exposure_ms=2.0)
    assert np.all(np.isfinite(image))
    assert image.min() >= 0.0


def test_a_stage_that_shows_no_order_gives_no_light() -> None:
    bench = scene.bench(speckle_contrast=1.0)
    truth = draw_truth(bench, scene.part(), 5)
    image = expected_electrons(truth, bench, scene.steps(170.0), exposure_ms=2.0)
    assert image.max() == 0.0
