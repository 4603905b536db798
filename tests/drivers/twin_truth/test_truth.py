"""Truths: drawn from the priors, by the seed alone."""

import json
from dataclasses import replace

import numpy as np
import pytest
import twin_scene as scene

from pitchsweep.drivers.twin.keyed_noise import keyed_generator
from pitchsweep.drivers.twin.truth import draw_truth, twin_settings


def test_same_seed_gives_the_same_truth_and_another_seed_another() -> None:
    bench, part = scene.bench(), scene.part()
    assert draw_truth(bench, part, 7) == draw_truth(bench, part, 7)
    assert draw_truth(bench, part, 7).pitch_nm != draw_truth(bench, part, 8).pitch_nm


def test_truth_is_plain_json_with_the_pitch_at_20_c() -> None:
    truth = draw_truth(scene.bench(map_error_mm=0.5), scene.part(), 3)
    document = json.loads(json.dumps(truth.to_json()))
    assert document["pitch_nm"] == truth.pitch_nm
    assert len(document["mounts"]) == 8
    assert len(document["screen"]["map_x"]) == 18


def test_grating_is_longer_when_the_part_is_warmer() -> None:
    truth = draw_truth(scene.bench(), scene.part(), 0)
    warm = replace(truth, part_temperature_C=30.0, expansion_per_K=1e-5)
    cold = replace(truth, part_temperature_C=20.0)
    assert cold.grating_period_mm() == pytest.approx(truth.pitch_nm * 1e-6)
    ratio = warm.grating_period_mm() / cold.grating_period_mm()
    assert ratio == pytest.approx(1.0001, rel=1e-9)


def test_draws_have_the_spread_of_the_priors() -> None:
    bench, part = scene.bench(map_error_mm=0.5), scene.part()
    truths = [draw_truth(bench, part, seed) for seed in range(400)]
    off = np.array([t.pitch_nm / 1600.0 - 1.0 for t in truths])
    distance = np.array([t.screen.distance_mm - 250.0 for t in truths])
    zero = np.array([m.zero_offset_deg for t in truths for m in t.mounts])
    red = np.array([t.vacuum_wavelength_nm["red"] - 635.0 for t in truths])
    assert np.abs(off).max() <= 0.01
    assert np.std(off) == pytest.approx(0.01 / np.sqrt(3.0), rel=0.15)
    assert np.std(distance) == pytest.approx(5.0, rel=0.15)
    assert np.std(zero) == pytest.approx(0.5, rel=0.08)
    assert np.std(red) == pytest.approx(1e-3, rel=0.15)


def test_bench_with_ports_has_no_truth() -> None:
    bench = scene.bench().model_copy(update={"twin": None})
    with pytest.raises(ValueError, match="has ports, not a twin"):
        twin_settings(bench)


def test_every_part_of_the_key_changes_the_draw() -> None:
    base = keyed_generator(1, "x").random()
    others = [
        keyed_generator(2, "x").random(),
        keyed_generator(1, "y").random(),
        keyed_generator(1, "x", mount=1).random(),
        keyed_generator(1, "x", laser="red").random(),
        keyed_generator(1, "x", repeat=1).random(),
        keyed_generator(1, "x", step=1).random(),
        keyed_generator(1, "x", exposure=1).random(),
    ]
    assert keyed_generator(1, "x").random() == base
    assert len({base, *others}) == 8


def test_a_key_gives_the_numbers_it_always_gave() -> None:
    """The hash of a key must not depend on the process or on the Python version."""
    draw = keyed_generator(5, "spot reading", laser="red", step=3).random(2)
    pinned = [0.582236606869066, 0.3003636245118071]
    np.testing.assert_allclose(draw, pinned, rtol=1e-12)
