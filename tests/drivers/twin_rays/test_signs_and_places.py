"""Where orders land on an ideal bench, against the scalar grating equation."""

from dataclasses import replace

import numpy as np
import pytest
import twin_scene as scene

from pitchsweep.drivers.twin.optics import possible_orders, trace_orders
from pitchsweep.drivers.twin.truth import BeamTruth

DISTANCE_MM = 250.0


def scalar_x_mm(incidence_deg: float, ratio: float) -> float:
    """x on a screen at 250 mm from sin b = sin a + m lambda/d, angle a + b."""
    a = np.radians(incidence_deg)
    b = np.arcsin(np.sin(a) + ratio)
    return float(DISTANCE_MM * np.tan(a + b))


@pytest.mark.parametrize("direction", [1, -1])
@pytest.mark.parametrize("incidence_deg", [-70.0, -20.0, 7.0, 33.0])
def test_places_follow_the_scalar_grating_equation(
    direction: int, incidence_deg: float
) -> None:
    bench = scene.bench(direction)
    truth = scene.ideal(bench, scene.part(740.0))
    ratio = truth.air_wavelength_mm("violet") / truth.grating_period_mm()
    stage_deg = direction * incidence_deg + 90.0
    landing = trace_orders(
        truth, bench, scene.steps(stage_deg, "violet", mount_deg=90.0)
    )
    seen = np.flatnonzero(landing.visible[0])
    assert seen.size > 0
    for i in seen:
        expected = scalar_x_mm(incidence_deg, int(landing.order[i]) * ratio)
        np.testing.assert_allclose(landing.place_mm[0, i], [expected, 0.0], atol=1e-6)


def test_zero_order_moves_to_plus_x_by_twice_the_angle() -> None:
    bench = scene.bench()
    truth = scene.ideal(bench, scene.part())
    landing = trace_orders(truth, bench, scene.steps([0.0, 1.0]))
    x = landing.place_mm[:, landing.order == 0, 0][:, 0]
    np.testing.assert_allclose(
        x, [0.0, DISTANCE_MM * np.tan(np.radians(2.0))], atol=1e-7
    )


def test_zero_order_moves_to_minus_x_where_the_stage_counts_the_other_way() -> None:
    bench = scene.bench(-1)
    truth = scene.ideal(bench, scene.part())
    landing = trace_orders(truth, bench, scene.steps(1.0))
    assert landing.place_mm[0, landing.order == 0, 0][0] < -8.0


def test_positive_orders_lie_on_the_plus_x_side_of_the_zero_order() -> None:
    bench = scene.bench()
    truth = scene.ideal(bench, scene.part())
    landing = trace_orders(truth, bench, scene.steps([-10.0, 0.0, 10.0]))
    for row in range(3):
        seen = landing.visible[row]
        assert np.all(np.diff(landing.place_mm[row, seen, 0]) > 0.0)
        assert landing.order[seen].min() < 0 < landing.order[seen].max()


def test_raised_beam_lands_high_and_upward_beam_higher() -> None:
    bench = scene.bench()
    truth = scene.ideal(bench, scene.part())
    up = replace(truth, beam=BeamTruth(0.0, 0.0, 2.0))
    steep = replace(truth, beam=BeamTruth(0.004, 0.0, 0.0))
    steps = scene.steps(10.0)
    zero = int(np.flatnonzero(possible_orders(truth, "red") == 0)[0])
    assert trace_orders(up, bench, steps).place_mm[0, zero, 1] == pytest.approx(2.0)
    path = DISTANCE_MM / np.cos(np.radians(20.0))
    rise = trace_orders(steep, bench, steps).place_mm[0, zero, 1]
    assert rise == pytest.approx(0.004 * path, rel=1e-3)


def test_part_turned_away_shows_nothing_and_raises_no_warning() -> None:
    bench = scene.bench(part_radius_m=10.0, cover_thickness_mm=0.6)
    truth = scene.ideal(bench, scene.part())
    angles = [-180.0, -135.0, -90.0, 90.0, 120.0, 180.0]
    landing = trace_orders(truth, bench, scene.steps(angles))
    assert not landing.visible.any()
    assert np.all(np.isfinite(landing.place_mm))


@pytest.mark.parametrize("laser", ["red", "green", "violet"])
@pytest.mark.parametrize("pitch_nm", [1600.0, 740.0, 320.0])
def test_eight_of_nine_combinations_show_first_orders(
    pitch_nm: float, laser: str
) -> None:
    """0.32 um at 635 nm has a first order only beyond 79.9 deg of incidence."""
    bench = scene.bench()
    truth = scene.ideal(bench, scene.part(pitch_nm))
    angles = [float(a) for a in range(-75, 76)]
    landing = trace_orders(truth, bench, scene.steps(angles, laser))
    first = landing.visible[:, np.abs(landing.order) == 1]
    on_screen = np.abs(landing.place_mm[:, np.abs(landing.order) == 1, 0]) < 200.0
    count = int(np.sum(first & on_screen))
    if (pitch_nm, laser) == (320.0, "red"):
        assert count == 0
    else:
        assert count > 50
