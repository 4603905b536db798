"""Each effect moves the spots by what an independent estimate says."""

from dataclasses import replace

import numpy as np
import pytest
import twin_scene as scene

from pitchsweep.drivers.twin.effects import periodic_error_deg, true_stage_deg
from pitchsweep.drivers.twin.optics import trace_orders
from pitchsweep.drivers.twin.rays import FloatArray, dot, meet_sphere
from pitchsweep.drivers.twin.truth import BeamTruth

DISTANCE_MM = 250.0


def zero_order_mm(angle_deg: float, hours: float = 0.0, **effects: float) -> FloatArray:
    bench = scene.bench(**effects)
    truth = scene.ideal(bench, scene.part())
    landing = trace_orders(truth, bench, scene.steps(angle_deg, hours=hours))
    place: FloatArray = landing.place_mm[0, landing.order == 0][0]
    return place


def test_cover_shifts_the_exit_point_by_t_tan_a_plus_tan_b() -> None:
    """t (tan a' + tan b') along the surface; here a = b, refracted by index 1.55."""
    a = np.radians(20.0)
    inner = np.arcsin(np.sin(a) / 1.55)
    along_surface = 2.0 * 0.6 * np.tan(inner)
    point = along_surface * np.array([np.cos(a), -np.sin(a)])
    expected = point[0] + (DISTANCE_MM - point[1]) * np.tan(2 * a)
    moved = zero_order_mm(20.0, cover_thickness_mm=0.6)
    np.testing.assert_allclose(moved, [expected, 0.0], atol=1e-9)


def test_screen_bow_brings_the_edge_nearer() -> None:
    flat, bowed = zero_order_mm(15.0), zero_order_mm(15.0, screen_bow_mm=2.0)
    depth = 2.0 * (flat[0] / 200.0) ** 2
    assert bowed[0] - flat[0] == pytest.approx(depth * np.tan(np.pi / 6), rel=0.02)


def test_lens_distortion_has_its_size_at_the_half_width() -> None:
    flat, bent = zero_order_mm(15.0), zero_order_mm(15.0, distortion_mm=1.0)
    assert bent[0] - flat[0] == pytest.approx((flat[0] / 200.0) ** 3)


def test_camera_shift_grows_with_planned_time() -> None:
    start = zero_order_mm(10.0, camera_shift_um_per_h=50.0)
    later = zero_order_mm(10.0, hours=2.0, camera_shift_um_per_h=50.0)
    assert float(np.linalg.norm(later - start)) == pytest.approx(0.1)


def test_camera_scale_grows_with_planned_time() -> None:
    start = zero_order_mm(10.0)
    later = zero_order_mm(10.0, hours=1.0, camera_scale_ppm_per_h=100.0)
    np.testing.assert_allclose(later, start * 1.0001)


def test_pointing_drift_moves_the_zero_order_by_angle_times_path() -> None:
    start = zero_order_mm(0.0)
    later = zero_order_mm(0.0, hours=1.0, pointing_urad_per_h=100.0)
    assert float(np.linalg.norm(later - start)) == pytest.approx(0.025, rel=1e-3)


def test_wavelength_drift_moves_the_first_order_only() -> None:
    bench = scene.bench(wavelength_drift_pm_per_h=1000.0)
    truth = scene.ideal(bench, scene.part(1600.0))
    places = [
        trace_orders(truth, bench, scene.steps(5.0, hours=h)).place_mm[0]
        for h in (0.0, 1.0)
    ]
    order = trace_orders(truth, bench, scene.steps(5.0)).order
    moved = places[1][:, 0] - places[0][:, 0]
    assert moved[order == 0][0] == 0.0
    a = np.radians(5.0)
    b = np.arcsin(np.sin(a) + truth.air_wavelength_mm("red") / 1600e-6)
    slope = DISTANCE_MM / np.cos(a + b) ** 2 / np.cos(b) / 1600.0
    assert abs(moved[order == 1][0]) == pytest.approx(slope, rel=2e-3)


def test_part_curvature_turns_the_normal_where_the_beam_lands_aside() -> None:
    bench = scene.bench(part_radius_m=10.0)
    truth = replace(scene.ideal(bench, scene.part()), beam=BeamTruth(0.0, 0.5, 0.0))
    landing = trace_orders(truth, bench, scene.steps(0.0))
    x = landing.place_mm[0, landing.order == 0, 0][0]
    assert x == pytest.approx(0.5 + DISTANCE_MM * 2.0 * 0.5 / 1e4, rel=1e-4)


def test_points_on_a_sphere_lie_on_it() -> None:
    apex, normal = np.array([0.1, 0.2, 0.3]), np.array([0.0, 0.6, 0.8])
    beam = np.array([0.0, 0.0, -1.0])
    point = meet_sphere(np.array([3.0, 2.0, 9.0]), beam, apex, normal, 1.0 / 50.0)
    centre = apex - 50.0 * normal
    assert float(np.linalg.norm(point - centre)) == pytest.approx(50.0)
    flat = meet_sphere(np.array([3.0, 2.0, 9.0]), beam, apex, normal, 0.0)
    assert float(dot(flat - apex, normal)[0]) == pytest.approx(0.0, abs=1e-12)


def test_wobble_moves_a_spot_by_twice_its_size_at_most() -> None:
    still = zero_order_mm(10.0)
    moved = zero_order_mm(10.0, wobble_arcsec=60.0) - still
    path = DISTANCE_MM / np.cos(np.radians(20.0))
    assert 0.0 < np.linalg.norm(moved) < 2.2 * np.radians(60.0 / 3600.0) * path


@pytest.mark.parametrize("k", [1, 2, 3, 4])
def test_a_stage_harmonic_has_its_size_and_its_period(k: int) -> None:
    sizes = tuple(30.0 if i == k else 0.0 for i in range(1, 5))
    bench = scene.bench(stage_harmonics_arcsec=sizes)
    truth = scene.ideal(bench, scene.part())
    turn = np.arange(360.0)
    error = periodic_error_deg(truth, bench, turn) * 3600.0
    spectrum = np.abs(np.fft.rfft(error)) / 180.0
    assert spectrum[k] == pytest.approx(30.0)
    assert np.delete(spectrum, k).max() < 1e-9


def test_scale_error_grows_with_the_angle() -> None:
    bench = scene.bench(scale_ppm=1000.0)
    truth = scene.ideal(bench, scene.part())
    np.testing.assert_allclose(
        periodic_error_deg(truth, bench, np.array([0.0, 50.0])), [0.0, 0.05]
    )


def test_backlash_shows_only_when_the_angle_was_approached_from_above() -> None:
    bench = scene.bench(backlash_deg=0.05)
    truth = scene.ideal(bench, scene.part())
    below = true_stage_deg(truth, bench, scene.steps(12.0))
    above = true_stage_deg(truth, bench, scene.steps(12.0, from_above=True))
    np.testing.assert_allclose([below[0], above[0]], [12.0, 12.05], atol=1e-8)


def test_step_errors_have_the_stated_spread_and_repeat_with_their_key() -> None:
    quiet = scene.bench()
    stage = quiet.stage.model_copy(update={"u_repeatability_arcsec": 5.0})
    bench = quiet.model_copy(update={"stage": stage})
    truth = scene.ideal(bench, scene.part())
    angles = [float(a) for a in np.linspace(-75, 75, 2000)]
    errors = true_stage_deg(truth, bench, scene.steps(angles)) - np.array(angles)
    again = true_stage_deg(truth, bench, scene.steps(angles)) - np.array(angles)
    other = true_stage_deg(truth, bench, scene.steps(angles, repeat=1))
    np.testing.assert_array_equal(errors, again)
    assert np.std(errors) * 3600.0 == pytest.approx(5.0, rel=0.06)
    assert np.all(other - np.array(angles) != errors)


def test_a_part_that_ends_under_the_beam_leaves_half_of_it() -> None:
    """The mean of the half of a Gaussian above its middle: rms * sqrt(2 / pi)."""
    bench = scene.bench(part_edge_mm=1e-6)
    truth = scene.ideal(bench, scene.part())
    whole = trace_orders(truth, scene.bench(), scene.steps(0.0))
    half = trace_orders(truth, bench, scene.steps(0.0))
    zero = whole.order == 0
    light = half.share[0, zero][0] / whole.share[0, zero][0]
    assert light == pytest.approx(0.5, abs=0.03)
    rms_mm = bench.beam.diameter_mm / 4.0
    expected = rms_mm * float(np.sqrt(2.0 / np.pi))
    assert half.place_mm[0, zero, 0][0] == pytest.approx(expected, rel=0.05)


def test_half_a_turn_in_the_parts_plane_moves_the_cut_to_the_other_side() -> None:
    bench = scene.bench(part_edge_mm=1e-6)
    truth = scene.ideal(bench, scene.part())
    turned = replace(scene.steps(0.0), face_deg=180.0)
    places = [trace_orders(truth, bench, s) for s in (scene.steps(0.0), turned)]
    x = [p.place_mm[0, p.order == 0, 0][0] for p in places]
    assert x[0] > 0.1 and x[1] == pytest.approx(-x[0])


def test_what_is_left_of_the_backlash_falls_off_with_the_run_up() -> None:
    bench = scene.bench(leftover_backlash_arcsec=36.0, run_up_deg=1.0)
    truth = scene.ideal(bench, scene.part())
    steps = scene.steps([0.0, 4.0, 2.0, 3.0])
    left = 3600.0 * (true_stage_deg(truth, bench, steps) - steps.stage_deg)
    approach = bench.stage.approach_deg
    expected = [0.0, *(36.0 * np.exp(-np.array([4.0, 0.0, 1.0]) - approach))]
    np.testing.assert_allclose(left, expected, atol=1e-4)
