"""The table of unknowns: scopes, names, what several parts, lasers and runs share."""

from collections import Counter
from dataclasses import replace

import numpy as np
import pytest
from builders import demo_job, twin_sweep

from pitchsweep.acquire.fit_input import FitInput, joined
from pitchsweep.analysis.air_index import AirState
from pitchsweep.analysis.fit_parameters import Kind, Parameter, Scope, Source
from pitchsweep.analysis.fit_scene import fit_scene
from pitchsweep.analysis.measure import measure_pitch
from pitchsweep.analysis.parameter_table import parameter_table
from pitchsweep.configs.bench_model import Hole, Screen
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.part_model import Certified

AIR = AirState(20.0, 1013.25, 50.0)


def unknowns(name: str = "shims-spots", **columns: np.ndarray) -> tuple[Parameter, ...]:
    job = demo_job(name)
    table = replace(twin_sweep(job, 1).table, **columns)
    return parameter_table(fit_scene(table, job.bench, (job.part,), AIR))


def test_names_are_unique_and_scopes_are_declared() -> None:
    table = unknowns("shims-four-mounts")
    assert max(Counter(p.name for p in table).values()) == 1
    assert {p.scope for p in table} <= set(Scope)
    assert table[0].kind is Kind.LOG_RATIO and np.isinf(table[0].u_prior)


def test_every_unknown_but_the_pitch_has_a_prior() -> None:
    assert all(0.0 < p.u_prior < 1e3 for p in unknowns()[1:])


def test_a_mount_has_a_seat_of_its_own() -> None:
    seats = [p for p in unknowns("shims-four-mounts") if p.source is Source.SEAT]
    assert len(seats) == 4 * 4
    total = sum(np.abs(p.coefficient) for p in seats if "zero" in p.name)
    np.testing.assert_array_equal(total, np.ones_like(total))


def test_a_run_drifts_by_itself() -> None:
    job = demo_job("shims-spots")
    n = len(twin_sweep(job, 1).table)
    run = (np.arange(n) >= n // 2).astype(np.int64)
    drifts = [p for p in unknowns(run=run) if p.source is Source.DRIFT]
    alone = [p for p in unknowns() if p.source is Source.DRIFT]
    assert len(drifts) == 2 * len(alone)
    first = next(p for p in drifts if p.name.endswith("run 1"))
    assert not first.coefficient[run == 1].any()


def test_worm_period_is_carried_where_the_bench_declares_one() -> None:
    job = demo_job("shims-spots")
    stage = job.bench.stage.model_copy(update={"worm_per_turn": 180})
    bench = job.bench.model_copy(update={"stage": stage})
    sweep = twin_sweep(job, 1)
    table = parameter_table(fit_scene(sweep.table, bench, (job.part,), AIR))
    assert sum(p.source is Source.WORM for p in table) == 2


def test_a_stage_without_recorded_closure_costs_in_the_budget() -> None:
    job = demo_job("shims-spots")
    table = twin_sweep(job, 1).table
    stage = job.bench.stage.model_copy(
        update={"closure_recorded_on": None, "u_scale_ppm": 1000.0}
    )
    bench = job.bench.model_copy(update={"stage": stage})
    closed = measure_pitch(table, bench=job.bench, part=job.part)
    unclosed = measure_pitch(table, bench=bench, part=job.part)
    assert unclosed.u_pitch_nm > closed.u_pitch_nm


def test_a_reference_carries_the_wavelength_of_a_diode() -> None:
    """A diode known to 0.5 nm leaves the pitch at 8e-4; a reference mends that."""
    job = demo_job("shims-spots")
    red = job.bench.lasers["red"].model_copy(update={"u_wavelength_nm": 0.5})
    bench = job.bench.model_copy(update={"lasers": {"red": red}})
    job = job.model_copy(update={"bench": bench})
    mine = twin_sweep(job, 5, first_mount=1, first_step=100)
    known = demo_job("shims-spots", part={"nominal_pitch_nm": 1000.0, "part": "known"})
    theirs = twin_sweep(known.model_copy(update={"bench": bench}), 5)
    certified = Certified(
        pitch_nm=theirs.truth.pitch_nm, u_pitch_nm=0.005, certificate="invented"
    )
    reference = known.part.model_copy(update={"certified": certified})
    alone = measure_pitch(mine.table, bench=bench, part=job.part)
    given = joined(
        [
            FitInput("reference", theirs.table, bench, reference, 0.95),
            FitInput("part", mine.table, bench, job.part, 0.95),
        ]
    )
    assert given.part == job.part and given.references == (reference,)
    result = measure_pitch(
        given.table, bench=bench, part=given.part, references=given.references
    )
    assert alone.u_pitch_nm / alone.pitch_nm > 7e-4
    assert result.u_pitch_nm / result.pitch_nm < 2.5e-4
    assert abs(result.pitch_nm - mine.truth.pitch_nm) < 4.0 * result.u_pitch_nm
    laser = next(n for n in result.nuisance if n.name == "wavelength of red")
    true_nm = mine.truth.vacuum_wavelength_nm["red"]
    assert laser.u < 0.2 and abs(laser.value - true_nm) < 4.0 * laser.u


def test_two_parts_without_certificate_are_not_joined() -> None:
    one, other = demo_job("shims-spots"), demo_job("track-740-red")
    bench = one.bench
    a = FitInput("a", twin_sweep(one, 0).table, bench, one.part, 0.95)
    b = FitInput("b", twin_sweep(one, 1).table, bench, other.part, 0.95)
    with pytest.raises(ValueError, match="different parts"):
        joined([a, b])


def test_parts_of_a_sweep_that_disagree_enlarge_u_or_are_carried() -> None:
    """The pitch jumps by 2e-3 half-way: only jumps of the wavelength explain that."""
    job = demo_job("shims-spots", twin={"spot_reading_mm": 0.02})
    early = twin_sweep(job, 3)
    shifted = demo_job("shims-spots", twin={"spot_reading_mm": 0.02, "seed": 3})
    table = early.table
    late = table.step > np.median(table.step)
    orders = early.true_order
    x_mm = table.x_mm + np.where(late, 0.4 * np.sign(orders), 0.0)
    spoilt = replace(table, x_mm=x_mm)
    result = measure_pitch(spoilt, bench=shifted.bench, part=job.part)
    honest = measure_pitch(table, bench=job.bench, part=job.part)
    assert result.u_pitch_nm > honest.u_pitch_nm
    assert abs(result.pitch_nm - early.truth.pitch_nm) < 3.0 * result.u_pitch_nm
    assert result.warnings


def test_a_stage_scale_that_the_spots_contradict_is_named() -> None:
    """A closure said to hold to 1 ppm on a stage that is off by 300."""
    wide = {"start_deg": -75.0, "stop_deg": 75.0}
    twin, effects = {"spot_reading_mm": 0.03}, {"scale_ppm": 300.0}
    job = demo_job("shims-four-mounts", recipe=wide, twin=twin, effects=effects)
    result = measure_pitch(twin_sweep(job, 1).table, bench=job.bench, part=job.part)
    (warning,) = (w for w in result.warnings if w.startswith("stage scale"))
    assert "known to 1 ppm" in warning
    honest = demo_job("shims-four-mounts", recipe=wide, twin=twin)
    table = twin_sweep(honest, 1).table
    result = measure_pitch(table, bench=honest.bench, part=honest.part)
    assert not result.warnings
    assert any("closure recorded" in item for item in result.assumed_absent)


def disc(**changes: float) -> Job:
    """A disc read through 0.6 mm, in the twin as in its part file."""
    covered = {
        "read_side": "through-cover",
        "cover_mm": 0.6,
        "u_cover_mm": 0.02,
        "u_cover_wedge_mrad": 1.0,
    }
    coarse = {"start_deg": -60.0, "stop_deg": 60.0, "step_deg": 2.0}
    return demo_job("track-740-red", part={**covered, **changes}, recipe=coarse)


@pytest.mark.parametrize("seed", [1, 2])
def test_a_disc_read_through_its_cover_is_measured(seed: int) -> None:
    job = disc()
    sweep = twin_sweep(job, seed)
    assert 0.5 < sweep.truth.part.cover_mm < 0.7
    result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
    assert abs(result.pitch_nm - sweep.truth.pitch_nm) < 3.0 * result.u_pitch_nm
    assert result.u_pitch_nm < 3e-4 * result.pitch_nm
    names = {n.name for n in result.nuisance}
    assert {"cover index", "cover wedge across the grooves"} <= names
    assert any("rms radius of the beam" in name for name in names)


def test_half_a_turn_in_its_own_plane_tells_the_wedge_of_a_cover() -> None:
    """The wedge turns with the part and the stage's errors do not."""
    job = disc(u_cover_wedge_mrad=5.0)
    known = {}
    for faces in ((0.0, 0.0), (0.0, 180.0)):
        sweep = twin_sweep(job, 3, mounts_deg=(0.0, 0.001), faces_deg=faces)
        result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
        assert abs(result.pitch_nm - sweep.truth.pitch_nm) < 4.0 * result.u_pitch_nm
        (wedge,) = (n for n in result.nuisance if "wedge across" in n.name)
        assert wedge.value == pytest.approx(
            1e3 * sweep.truth.part.wedge_across_rad, abs=4.0 * wedge.u
        )
        known[faces] = wedge.u
        seats = [n.name for n in result.nuisance if n.name.startswith("zero offset")]
        assert len(seats) == 2
    seen = {s.subset for s in result.pitches_seen}
    assert {"face 0 deg", "face 180 deg"} <= seen
    assert known[(0.0, 180.0)] < 0.3 * known[(0.0, 0.0)]


def test_leftover_backlash_is_found_and_the_ways_are_compared() -> None:
    effects, fine = {"leftover_backlash_arcsec": 12.0}, {"spot_reading_mm": 0.02}
    job = demo_job("shims-spots", effects=effects, twin=fine)
    sweep = twin_sweep(job, 4)
    result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
    (lag,) = (n for n in result.nuisance if n.name == "leftover backlash")
    # Steps from above have a run-up of 0.5 of the 2 degrees over which it unwinds.
    assert lag.value == pytest.approx(12.0 * np.exp(-0.25), abs=4.0 * lag.u)
    assert lag.u < 3.0
    assert "steps come to from above" in {s.subset for s in result.pitches_seen}
    assert abs(result.pitch_nm - sweep.truth.pitch_nm) < 3.0 * result.u_pitch_nm


def test_a_camera_at_infinity_measures_too() -> None:
    """A lens of 60 mm on a sensor of 36 x 24 mm, no screen."""
    screen = Screen(
        kind="camera-at-infinity",
        distance_mm=60.0,
        u_distance_mm=0.6,
        u_tilt_mrad=10.0,
        u_offset_mm=0.5,
        width_mm=36.0,
        height_mm=24.0,
        u_map_mm=0.01,
        u_lens_distortion_mm=0.1,
        hole=Hole(diameter_mm=0.5),
    )
    twin = {"spot_reading_mm": 0.005}
    effects = {"map_error_mm": 0.01, "distortion_mm": 0.05}
    plan = {"start_deg": -70.0, "stop_deg": 70.0}
    job = demo_job(
        "shims-spots", bench={"screen": screen}, twin=twin, effects=effects, recipe=plan
    )
    for seed in (1, 2):
        sweep = twin_sweep(job, seed)
        result = measure_pitch(sweep.table, bench=job.bench, part=job.part)
        off = result.pitch_nm - sweep.truth.pitch_nm
        assert abs(off) < 3.0 * result.u_pitch_nm
        assert result.u_pitch_nm < 2e-3 * result.pitch_nm
        (lens,) = (n for n in result.nuisance if n.name.startswith("lens distortion"))
        assert lens.value == pytest.approx(0.05, abs=4.0 * lens.u)
        (focal,) = (n for n in result.nuisance if n.name == "focal length")
        true_mm = sweep.truth.screen.distance_mm
        assert focal.value == pytest.approx(true_mm, abs=4.0 * focal.u)
