"""From tables to pitches: the twin's truth, and everything that must be refused."""

from dataclasses import replace

import numpy as np
import pytest
from builders import demo_job, twin_sweep

from pitchsweep.acquire.fit_input import FitInput, joined
from pitchsweep.analysis.analysis_errors import InputRefused, NoResult
from pitchsweep.analysis.measure import measure_pitch
from pitchsweep.analysis.order_tracking import mirrored
from pitchsweep.analysis.records import OrderTable, PitchResult, Rejection

EIGHT = [
    f"track-{pitch}-{colour}"
    for pitch in (1600, 740, 320)
    for colour in ("red", "green", "violet")
    if (pitch, colour) != (320, "red")
]


def ruler_table(
    rows: list[tuple[float, int, float]], u_mm: float = 0.5, laser: str = "red"
) -> OrderTable:
    """Rows (stage_deg, order, x_mm) typed with a ruler, all at y = 0."""
    stage, order, x = (np.array(column) for column in zip(*rows, strict=True))
    n = len(rows)
    return OrderTable(
        step=np.zeros(n, dtype=np.int64),
        stage_deg=stage.astype(np.float64),
        mount_deg=np.zeros(n),
        laser=np.zeros(n, dtype=np.int64),
        laser_names=(laser,),
        order=order.astype(np.int64),
        x_mm=x.astype(np.float64),
        y_mm=np.zeros(n),
        ux_mm=np.full(n, u_mm),
        uy_mm=np.full(n, u_mm),
        cxy_mm2=np.zeros(n),
    )


@pytest.mark.parametrize("name", EIGHT)
def test_each_combination_measures_within_four_u(name: str) -> None:
    job = demo_job(name)
    for seed in (3, 11):
        sweep = twin_sweep(job, seed)
        result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
        off = result.pitch_nm - sweep.truth.pitch_nm
        assert abs(off) < 4.0 * result.u_pitch_nm
        assert result.u_pitch_nm / result.pitch_nm < 3e-4
        assert 0.5 < result.reduced_chi2 < 1.6


def pooled_pulls(name: str, seeds: range) -> np.ndarray:
    job = demo_job(name)
    pulls = []
    for seed in seeds:
        sweep = twin_sweep(job, seed)
        result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
        pulls.append((result.pitch_nm - sweep.truth.pitch_nm) / result.u_pitch_nm)
    return np.array(pulls)


def test_pulls_of_many_sweeps_have_unit_rms() -> None:
    pulls = pooled_pulls("shims-spots", range(40))
    assert np.sqrt(np.mean(pulls**2)) == pytest.approx(1.0, abs=3 / np.sqrt(80))


def test_four_mounts_beat_one_by_far() -> None:
    one, four = demo_job("shims-spots"), demo_job("shims-four-mounts")
    single = twin_sweep(one, 2)
    every = twin_sweep(four, 2)
    alone = measure_pitch(single.table, bench=one.bench, part=one.part)
    joint = measure_pitch(every.table, bench=four.bench, part=four.part)
    assert joint.u_pitch_nm < 0.5 * alone.u_pitch_nm
    assert abs(joint.pitch_nm - every.truth.pitch_nm) < 4.0 * joint.u_pitch_nm
    assert len({n.name for n in joint.nuisance if "zero offset" in n.name}) == 4


def test_mirrored_table_is_named_as_such() -> None:
    job = demo_job("shims-spots")
    table = mirrored(twin_sweep(job, 4).table)
    with pytest.raises(InputRefused, match="mirrored"):
        measure_pitch(table, bench=job.bench, part=job.part)


def test_mirrored_table_with_orders_is_named_as_such() -> None:
    job = demo_job("shims-spots")
    sweep = twin_sweep(job, 4)
    table = mirrored(replace(sweep.table, order=sweep.true_order))
    with pytest.raises(InputRefused, match="mirrored"):
        measure_pitch(table, bench=job.bench, part=job.part)


def test_a_stage_that_turns_the_other_way_is_followed() -> None:
    job = demo_job("shims-spots")
    stage = job.bench.stage.model_copy(update={"direction": -1})
    job = demo_job("shims-spots", bench={"stage": stage})
    sweep = twin_sweep(job, 5)
    result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
    assert abs(result.pitch_nm - sweep.truth.pitch_nm) < 4.0 * result.u_pitch_nm


def test_five_rows_typed_with_a_ruler_give_percents_and_say_so() -> None:
    """740 nm and 1600 nm disc pitches (ECMA-267, ECMA-130) at normal incidence."""
    job = demo_job("track-1600-red")
    lam, pitch = 635.0, 1600.0
    rows = []
    for order in (-2, -1, 1, 2):
        angle = np.arcsin(order * lam / pitch)
        rows.append((0.0, order, round(250.0 * np.tan(angle), 0)))
    rows = [row for row in rows if abs(row[2]) < 200.0] + [(6.0, 0, 53.0)]
    rows += [
        (
            6.0,
            1,
            round(
                250.0
                * np.tan(
                    np.deg2rad(6.0) + np.arcsin(np.sin(np.deg2rad(6.0)) + lam / pitch)
                ),
                0,
            ),
        )
    ]
    result = measure_pitch(ruler_table(rows), bench=job.bench, part=job.part)
    assert abs(result.pitch_nm / pitch - 1.0) < 0.02
    assert 0.001 < result.u_pitch_nm / result.pitch_nm < 0.05
    assert any("percent-level" in warning for warning in result.warnings)


def test_a_single_order_at_normal_incidence_rests_on_the_screen_distance() -> None:
    job = demo_job("track-740-violet")
    x = 250.0 * np.tan(np.arcsin(405.0 / 740.0))
    rows = [(0.0, 1, round(x, 0)), (0.0, -1, -round(x, 0))]
    result = measure_pitch(
        ruler_table(rows, 1.0, "violet"), bench=job.bench, part=job.part
    )
    assert result.u_pitch_nm / result.pitch_nm == pytest.approx(0.0145, rel=0.3)
    assert result.decision.outcome in ("undecided", None)


def test_pitch_below_half_the_wavelength_is_refused_with_its_angle() -> None:
    """0.32 um at 635.0 nm: the first order leaves only beyond 79.9 degrees."""
    job = demo_job("track-320-red")
    sweep = twin_sweep(job, 0)
    with pytest.raises(NoResult, match=r"79\.9"):
        measure_pitch(sweep.table, bench=job.bench, part=job.part)


def test_wild_and_missing_spots_do_not_steer() -> None:
    job = demo_job(
        "shims-spots",
        effects={"wild_fraction": 0.1, "missing_fraction": 0.15, "wild_mm": 20.0},
    )
    for seed in range(5):
        sweep = twin_sweep(job, seed)
        result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
        assert abs(result.pitch_nm - sweep.truth.pitch_nm) < 4.0 * result.u_pitch_nm
        assert len(result.rejected) >= 0.04 * len(sweep.table)
        # None is left out without a reason.
        assert result.spots_used + len(result.rejected) == len(sweep.table)
        assert {r.reason for r in result.rejected} <= set(Rejection)


def test_clean_sweeps_lose_fewer_than_one_spot_in_a_hundred() -> None:
    job = demo_job("shims-spots")
    lost, every = 0, 0
    for seed in range(10):
        sweep = twin_sweep(job, seed)
        result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
        lost += len(result.rejected)
        every += len(sweep.table)
    assert lost < 0.01 * every


def test_readings_worse_than_stated_enlarge_u_and_warn() -> None:
    job = demo_job("shims-spots")
    table = twin_sweep(job, 6).table
    boastful = replace(table, ux_mm=table.ux_mm / 4.0, uy_mm=table.uy_mm / 4.0)
    honest = measure_pitch(table, bench=job.bench, part=job.part)
    result = measure_pitch(boastful, bench=job.bench, part=job.part)
    assert any("stated uncertainty" in warning for warning in result.warnings)
    assert result.u_pitch_nm > 0.8 * honest.u_pitch_nm


def test_zero_order_alone_supports_no_pitch() -> None:
    job = demo_job("shims-spots")
    sweep = twin_sweep(job, 7)
    only = sweep.table.take(sweep.true_order == 0)
    with pytest.raises(NoResult, match="zero order"):
        measure_pitch(only, bench=job.bench, part=job.part)


def test_another_part_on_the_bench_is_not_measured_silently() -> None:
    job, other = demo_job("track-740-red"), demo_job("track-1600-red")
    sweep = twin_sweep(other, 8)
    try:
        result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
    except NoResult:
        return
    assert result.warnings


def test_laser_not_on_the_bench_is_refused() -> None:
    job = demo_job("shims-spots")
    table = replace(twin_sweep(job, 0).table, laser_names=("blue",))
    with pytest.raises(InputRefused, match="blue"):
        measure_pitch(table, bench=job.bench, part=job.part)


def test_result_does_not_depend_on_the_order_of_rows() -> None:
    job = demo_job("shims-spots")
    table = twin_sweep(job, 9).table
    turned = table.take(np.random.default_rng(0).permutation(len(table)))
    one = measure_pitch(table, bench=job.bench, part=job.part)
    two = measure_pitch(turned, bench=job.bench, part=job.part)
    assert two.pitch_nm == pytest.approx(one.pitch_nm, rel=1e-10)


def shares(result: PitchResult) -> dict[str, float]:
    return {line.source: line.u_nm for line in result.budget}


def test_budget_names_every_source_once_and_adds_up() -> None:
    job = demo_job("shims-spots")
    result = measure_pitch(twin_sweep(job, 1).table, bench=job.bench, part=job.part)
    names = [line.source for line in result.budget]
    assert len(set(names)) == len(names)
    for needed in ("spot positions", "laser wavelength", "air index", "screen map"):
        assert needed in names
    total = np.sqrt(sum(u**2 for u in shares(result).values()))
    assert total == pytest.approx(result.u_pitch_nm, rel=1e-12)
    wavelength = shares(result)["laser wavelength"] / result.pitch_nm
    assert wavelength == pytest.approx(0.00095 / 632.9908, rel=0.02)


def test_pitch_is_brought_to_twenty_degrees() -> None:
    """Nickel, 13.3e-6 /K (from memory): 2 K above, the part is 2.66e-5 longer."""
    job = demo_job("shims-spots")
    table = twin_sweep(job, 1).table
    warm = job.part.material.model_copy(update={"temperature_C": 22.0})
    part = job.part.model_copy(update={"material": warm})
    cold = measure_pitch(table, bench=job.bench, part=job.part)
    result = measure_pitch(table, bench=job.bench, part=part)
    assert cold.pitch_nm / result.pitch_nm - 1.0 == pytest.approx(2.66e-5, rel=1e-3)


def test_a_table_in_centimetres_is_refused_with_the_distance_it_would_need() -> None:
    job = demo_job("shims-spots")
    table = twin_sweep(job, 7).table
    small = replace(table, x_mm=table.x_mm / 10.0, y_mm=table.y_mm / 10.0)
    with pytest.raises(NoResult, match=r"unit of x_mm|determine|nominal"):
        measure_pitch(small, bench=job.bench, part=job.part)


def test_a_table_in_metres_is_refused_without_a_fault() -> None:
    job = demo_job("shims-spots")
    table = twin_sweep(job, 7).table
    tiny = replace(table, x_mm=table.x_mm / 1000.0, y_mm=table.y_mm / 1000.0)
    with pytest.raises(NoResult):
        measure_pitch(tiny, bench=job.bench, part=job.part)


def test_lengths_a_third_too_large_are_warned_of_or_refused() -> None:
    job = demo_job("shims-spots")
    table = twin_sweep(job, 7).table
    large = replace(table, x_mm=table.x_mm * 1.3, y_mm=table.y_mm * 1.3)
    try:
        result = measure_pitch(large, bench=job.bench, part=job.part)
    except NoResult as error:
        assert "screen distance" in str(error)
        return
    assert any("screen distance" in warning for warning in result.warnings)


def test_swapped_columns_are_refused_or_warned_of() -> None:
    job = demo_job("shims-spots")
    table = twin_sweep(job, 7).table
    swapped = replace(table, x_mm=table.y_mm, y_mm=table.x_mm)
    try:
        result = measure_pitch(swapped, bench=job.bench, part=job.part)
    except NoResult:
        return
    assert result.warnings


def test_a_table_mirrored_with_its_orders_is_named_as_such() -> None:
    """As a person facing the screen sees it: x and the signs of the orders turned."""
    job = demo_job("shims-spots")
    sweep = twin_sweep(job, 4)
    table = mirrored(replace(sweep.table, order=-sweep.true_order))
    with pytest.raises(InputRefused, match="mirrored"):
        measure_pitch(table, bench=job.bench, part=job.part)


def test_orders_with_turned_signs_are_named_as_such() -> None:
    job = demo_job("shims-spots")
    sweep = twin_sweep(job, 4)
    table = replace(sweep.table, order=-sweep.true_order)
    with pytest.raises(InputRefused, match="orders' signs"):
        measure_pitch(table, bench=job.bench, part=job.part)


def test_the_same_spots_are_not_counted_twice() -> None:
    job = demo_job("shims-spots")
    given = FitInput("a", twin_sweep(job, 1).table, job.bench, job.part, 0.95)
    with pytest.raises(ValueError, match="same spots"):
        joined([given, replace(given, name="b")])
