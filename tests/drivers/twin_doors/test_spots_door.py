"""The spots door: readings with their stated error, repeated by their key."""

import numpy as np
import pytest
import twin_scene as scene

from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.optics import trace_orders
from pitchsweep.drivers.twin.spots_door import (
    GHOST_ORDER,
    HOLE_MARGIN_MM,
    spots,
    sweep_spots,
)
from pitchsweep.drivers.twin.truth import draw_truth

ANGLES = [float(a) for a in range(-75, 76)]


def test_sweep_equals_the_door_step_by_step() -> None:
    bench = scene.with_reading(
        scene.bench(wild_fraction=0.1, missing_fraction=0.1), 0.1
    )
    truth = draw_truth(bench, scene.part(), 4)
    sweep = sweep_spots(truth, bench, scene.steps(ANGLES))
    for step in (60, 75, 90):
        label = Label(0, "red", 0, step, 0)
        door = spots(truth, bench, label, stage_deg=ANGLES[step], mount_deg=0.0)
        rows = sweep.step == step
        assert sorted(sweep.x_mm[rows].tolist()) == [s.x_mm for s in door]


def test_reading_errors_have_the_stated_spread() -> None:
    bench = scene.with_reading(scene.bench(), 0.1)
    truth = draw_truth(bench, scene.part(), 4)
    steps = scene.steps(ANGLES)
    landing = trace_orders(truth, bench, steps)
    sweep = sweep_spots(truth, bench, steps)
    column = np.searchsorted(landing.order, sweep.order)
    true = landing.place_mm[sweep.step, column]
    errors = np.stack((sweep.x_mm, sweep.y_mm), axis=1) - true
    assert errors.size > 500
    assert np.std(errors) == pytest.approx(0.1, rel=0.12)
    assert np.all(sweep.ux_mm == 0.1)
    assert np.all(sweep.uy_mm == 0.1)


def test_same_label_reads_the_same_and_another_step_does_not() -> None:
    bench = scene.with_reading(scene.bench(), 0.1)
    truth = draw_truth(bench, scene.part(), 4)
    first, again, other = (
        spots(truth, bench, Label(0, "red", 0, n, 0), stage_deg=9.0, mount_deg=0.0)
        for n in (5, 5, 6)
    )
    assert first == again
    assert all(a.x_mm != b.x_mm for a, b in zip(first, other, strict=True))


def test_spots_lie_on_the_screen_and_off_the_hole() -> None:
    bench = scene.bench()
    truth = draw_truth(bench, scene.part(), 1)
    sweep = sweep_spots(truth, bench, scene.steps(ANGLES))
    away = np.hypot(sweep.x_mm, sweep.y_mm)
    assert np.abs(sweep.x_mm).max() < 200.0
    assert np.abs(sweep.y_mm).max() < 50.0
    assert away.min() >= 4.0 + HOLE_MARGIN_MM - 1e-6


def test_missing_and_wild_spots_come_in_their_fractions() -> None:
    whole = scene.bench()
    truth = draw_truth(whole, scene.part(), 2)
    steps = scene.steps(ANGLES)
    holes = scene.bench(missing_fraction=0.2)
    wild = scene.bench(wild_fraction=0.1)
    all_spots = sweep_spots(truth, whole, steps)
    left = sweep_spots(truth, holes, steps)
    astray = sweep_spots(truth, wild, steps)
    kept = left.x_mm.size / all_spots.x_mm.size
    off = np.abs(astray.x_mm - all_spots.x_mm) > 1e-3
    assert kept == pytest.approx(0.8, abs=0.07)
    assert np.mean(off) == pytest.approx(0.1, abs=0.06)
    assert np.abs(astray.x_mm - all_spots.x_mm).max() <= 10.0 + 1e-6


def test_ghosts_are_weak_copies_beside_their_orders() -> None:
    bench = scene.bench(ghost_fraction=0.02)
    truth = draw_truth(bench, scene.part(), 2)
    sweep = sweep_spots(truth, bench, scene.steps(10.0))
    ghosts = sweep.order == GHOST_ORDER
    assert 0 < ghosts.sum() <= (~ghosts).sum() + 1
    brightest = sweep.brightness.max()
    assert sweep.brightness[ghosts].max() == pytest.approx(0.02 * brightest)


def test_orders_differ_in_brightness_by_ten_to_five_hundred() -> None:
    bench = scene.bench()
    for seed in range(10):
        truth = draw_truth(bench, scene.part(), seed)
        light = sweep_spots(truth, bench, scene.steps(8.0)).brightness
        assert 10.0 < light.max() / light.min() < 500.0
