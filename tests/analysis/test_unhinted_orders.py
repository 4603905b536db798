"""Orders without a nominal pitch, and everything that must be called ambiguous."""

from dataclasses import replace

import numpy as np
import pytest
from builders import TwinSweep, demo_job, twin_sweep
from unhinted import (
    Unhinted,
    air_of,
    judged,
    judged_before_fit,
    only_orders,
    overlaid,
    random_sweep,
)

from pitchsweep.analysis.analysis_errors import (
    AmbiguousOrders,
    InputRefused,
    NoResult,
)
from pitchsweep.analysis.fit_problem import fit_problem
from pitchsweep.analysis.measure import measure_pitch
from pitchsweep.analysis.order_tracking import mirrored
from pitchsweep.analysis.records import PitchResult
from pitchsweep.analysis.spot_directions import spot_directions
from pitchsweep.analysis.unhinted_orders import UnhintedOrders, orders_without_hint
from pitchsweep.configs.job_model import Job

WHOLE_PITCH = {"twin": {"pitch_off_percent": 20.0}}
COARSE = {"recipe": {"start_deg": -75.0, "stop_deg": 75.0, "step_deg": 3.0}}


def blind(job: Job, sweep: TwinSweep, nominal_nm: float = 740.0) -> UnhintedOrders:
    part = job.part.model_copy(update={"nominal_pitch_nm": nominal_nm})
    return orders_without_hint(
        sweep.table,
        bench=job.bench,
        parts=(part,),
        air=air_of(job),
        nominal_counts=False,
    )


def measured(job: Job, sweep: TwinSweep, *, trust: bool = True) -> PitchResult:
    return measure_pitch(
        sweep.table, bench=job.bench, part=job.part, trust_nominal=trust
    )


def test_random_benches_and_pitches_are_right_or_refused() -> None:
    """The benchmark orders_without_hints.py runs a thousand of them."""
    verdicts = [
        judged_before_fit(random_sweep(seed, step_deg=4.0)) for seed in range(60)
    ]
    assert [text for verdict, text in verdicts if verdict == "wrong"] == []
    assert sum(verdict == "refused" for verdict, _ in verdicts) <= 1


def test_directions_are_the_grating_equation_of_the_textbook() -> None:
    """sin b = sin a + m lambda / d (E. Hecht, Optics, gratings; from memory).

    Places on an ideal screen: x = D tan(a + b), y = 0, a 600 nm grating at 405 nm.
    """
    job = demo_job("track-740-violet", **COARSE)
    sweep = twin_sweep(job, 0)
    rows = []
    for step, a_deg in enumerate(np.arange(-20.0, 21.0, 2.0)):
        a = np.deg2rad(a_deg)
        for order in (-1, 0, 1):
            sin_b = np.sin(a) + order * 404.9 / 600.0
            if abs(sin_b) > 0.99:
                continue
            b = np.arcsin(sin_b)
            x = job.bench.screen.distance_mm * np.tan(a + b)
            if abs(x) < 200.0 and abs(x) > 6.0:
                rows.append((step, a_deg, order, x))
    columns = np.array(rows)
    table = replace(
        sweep.table.take(np.arange(len(rows))),
        step=columns[:, 0].astype(np.int64),
        stage_deg=columns[:, 1],
        mount_deg=np.zeros(len(rows)),
        x_mm=columns[:, 3],
        y_mm=np.zeros(len(rows)),
        brightness=None,
    )
    part = job.part.model_copy(update={"nominal_pitch_nm": 600.0})
    problem = fit_problem(table, job.bench, (part,), air_of(job))
    seen = spot_directions(problem)
    assert np.allclose(seen.ratio, columns[:, 2], atol=2e-3)
    assert seen.on_track.all()


@pytest.mark.parametrize("name", ["track-1600-violet", "track-320-violet"])
def test_a_nominal_pitch_off_by_twenty_percent_needs_no_help(name: str) -> None:
    job = demo_job(name, **WHOLE_PITCH, **COARSE)
    for seed in (1, 2, 3):
        sweep = twin_sweep(job, seed)
        result = measured(job, sweep)
        assert abs(result.pitch_nm - sweep.truth.pitch_nm) < 4.0 * result.u_pitch_nm
        assert any("is it this part" in text for text in result.warnings)


def test_without_trust_the_result_is_the_same() -> None:
    job = demo_job("track-740-red", **COARSE)
    sweep = twin_sweep(job, 4)
    with_it, without = measured(job, sweep), measured(job, sweep, trust=False)
    assert without.pitch_nm == pytest.approx(with_it.pitch_nm, rel=1e-7)
    assert without.orders_used == with_it.orders_used
    assert any("without the nominal pitch" in text for text in without.warnings)


def test_absent_even_orders_do_not_double_the_fundamental() -> None:
    job = demo_job("track-1600-violet", **WHOLE_PITCH, **COARSE)
    sweep = twin_sweep(job, 5)
    odd = only_orders(sweep, (sweep.true_order == 0) | (sweep.true_order % 2 != 0))
    found = blind(job, odd)
    assert found.pitch_nm == pytest.approx(odd.truth.pitch_nm, rel=1e-3)


def test_absent_first_orders_could_be_two_gratings() -> None:
    job = demo_job("track-1600-violet", **COARSE)
    sweep = twin_sweep(job, 5)
    kept = only_orders(sweep, np.isin(np.abs(sweep.true_order), (0, 2, 3)))
    with pytest.raises(AmbiguousOrders, match="two gratings"):
        blind(job, kept)


def test_half_or_whole_is_not_guessed_where_brightness_is_unknown() -> None:
    job = demo_job("track-740-red", **COARSE)
    sweep = twin_sweep(job, 6)
    dark = replace(sweep, table=replace(sweep.table, brightness=None))
    with pytest.raises(AmbiguousOrders, match=r"or 2 times that.*brightness"):
        blind(job, dark)


def test_half_or_whole_is_not_guessed_where_the_light_is_too_faint() -> None:
    """Every order as faint as the faintest spot: those in between could be fainter."""
    job = demo_job("track-740-red", **COARSE)
    sweep = twin_sweep(job, 6)
    even = np.ones(len(sweep.table))
    flat = replace(sweep, table=replace(sweep.table, brightness=even))
    with pytest.raises(AmbiguousOrders, match="too faint to be seen"):
        blind(job, flat)


def test_faint_orders_in_between_double_the_pitch() -> None:
    """A superstructure: two parts in a thousand of the light, but where it must be."""
    job = demo_job("track-1600-red", **COARSE)
    sweep = twin_sweep(job, 7)
    odd = sweep.true_order % 2 != 0
    light = np.where(odd, 2e-3, 1.0) * sweep.table.brightness
    weak = replace(sweep, table=replace(sweep.table, brightness=light))
    found = blind(job, weak)
    assert found.pitch_nm == pytest.approx(sweep.truth.pitch_nm, rel=1e-3)


def test_only_even_orders_under_the_nominal_pitch_are_refused() -> None:
    job = demo_job("track-1600-red", **COARSE)
    sweep = twin_sweep(job, 8)
    even = only_orders(sweep, sweep.true_order % 2 == 0)
    with pytest.raises(AmbiguousOrders, match="multiple of 2"):
        measured(job, even)


def two_gratings(seed: int, other_nm: float) -> tuple[Job, TwinSweep]:
    job = demo_job("track-740-violet", **COARSE)
    other = demo_job("track-740-violet", **COARSE, part={"nominal_pitch_nm": other_nm})
    first, second = twin_sweep(job, seed), twin_sweep(other, seed)
    second = only_orders(second, second.true_order != 0)
    table = overlaid(first.table, second.table)
    order = np.concatenate([first.true_order, second.true_order])
    return job, replace(first, table=table, true_order=order)


@pytest.mark.parametrize("other_nm", [1110.0, 880.0, 517.0])
def test_a_second_grating_is_named_not_guessed(other_nm: float) -> None:
    job, sweep = two_gratings(9, other_nm)
    with pytest.raises(AmbiguousOrders, match="grating"):
        blind(job, sweep)


@pytest.mark.parametrize("other_nm", [880.0, 517.0])
def test_a_second_grating_is_warned_of_where_the_nominal_decides(
    other_nm: float,
) -> None:
    job, sweep = two_gratings(9, other_nm)
    result = measured(job, sweep)
    assert abs(result.pitch_nm - sweep.truth.pitch_nm) < 5.0 * result.u_pitch_nm
    assert any("second grating" in text for text in result.warnings)


def test_ghosts_are_no_second_grating() -> None:
    job = demo_job("track-740-violet", **COARSE, effects={"ghost_fraction": 0.05})
    sweep = twin_sweep(job, 10)
    found = blind(job, sweep)
    assert found.pitch_nm == pytest.approx(sweep.truth.pitch_nm, rel=1e-3)


def test_without_a_zero_order_nothing_is_counted() -> None:
    job = demo_job("track-740-red", **COARSE)
    sweep = twin_sweep(job, 11)
    with pytest.raises(NoResult, match="zero order"):
        blind(job, only_orders(sweep, sweep.true_order != 0))


def test_orders_closer_than_the_zero_order_is_known_are_refused() -> None:
    """At 9000 nm orders stand 16 mm apart, and the zero order is known to 9 mm."""
    job = demo_job("track-740-red", **COARSE, part={"nominal_pitch_nm": 9000.0})
    for seed in (1, 4, 8):
        with pytest.raises(NoResult, match="zero order"):
            blind(job, twin_sweep(job, seed))


def test_a_nominal_pitch_far_off_never_leaves_an_unsettled_fit() -> None:
    """Rough sweeps: wild spots, missing ones and ghosts."""
    case = random_sweep(66, step_deg=4.0)
    nominal_nm = 0.83 * case.sweep.truth.pitch_nm
    part = case.job.part.model_copy(update={"nominal_pitch_nm": nominal_nm})
    job = case.job.model_copy(update={"part": part})
    assert judged(Unhinted(job, case.sweep), trust_nominal=True)[0] == "right"


def test_a_fit_that_keeps_to_a_few_spots_is_refused() -> None:
    """Eleven spots beside the zero order, several of them wild: the fit held to three
    that agreed, 8.6 u from the truth."""
    verdict, why = judged(random_sweep(722))
    assert verdict == "refused" and "agree in the joint fit" in why


def test_a_few_angles_are_refused_not_guessed() -> None:
    job = demo_job(
        "track-740-red", recipe={"start_deg": 4.0, "stop_deg": 8.0, "step_deg": 2.0}
    )
    sweep = twin_sweep(job, 12)
    with pytest.raises(NoResult):
        blind(job, sweep)


def test_a_mirrored_table_is_named_as_such_without_a_pitch() -> None:
    job = demo_job("track-740-red", **COARSE)
    sweep = twin_sweep(job, 13)
    with pytest.raises(InputRefused, match="mirrored"):
        blind(job, replace(sweep, table=mirrored(sweep.table)))


def test_stray_light_alone_has_no_fundamental() -> None:
    job = demo_job("track-740-red", **COARSE)
    sweep = twin_sweep(job, 14)
    random = np.random.default_rng(14)
    stray = np.flatnonzero(sweep.true_order != 0)
    x = sweep.table.x_mm.copy()
    x[stray] = random.uniform(-190.0, 190.0, stray.size)
    with pytest.raises(NoResult, match="no one fundamental"):
        blind(job, replace(sweep, table=replace(sweep.table, x_mm=x)))


def test_given_orders_settle_what_light_cannot() -> None:
    job = demo_job("track-740-red", **COARSE)
    sweep = twin_sweep(job, 15)
    table = replace(sweep.table, brightness=None, order=sweep.true_order)
    found = blind(job, replace(sweep, table=table), nominal_nm=1300.0)
    assert found.pitch_nm == pytest.approx(sweep.truth.pitch_nm, rel=1e-3)
