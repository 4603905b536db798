"""What a night needs beside the steps: the hour, policies, room, news, one owner."""

import json
import subprocess
import sys
import time
from datetime import UTC, datetime
from pathlib import Path
from typing import get_args

import numpy as np
import pytest
from acquire_fakes import FakeBench, QuietProgress, opener, small_job

from pitchsweep.acquire import bench_lock, live_fit
from pitchsweep.acquire.acquire_errors import FaultMet, JobRefused, RunRefused
from pitchsweep.acquire.bench_lock import (
    file_system_of,
    refuse_network_folder,
    take_bench_lock,
)
from pitchsweep.acquire.fault_policy import MOST_PAUSES, fault_kind, reaction
from pitchsweep.acquire.frame_checks import FrameChecks
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.night_schedule import is_steady, seconds_until, slope_K_per_h
from pitchsweep.acquire.run_table import input_from_run, read_run
from pitchsweep.acquire.status_file import STATUS
from pitchsweep.acquire.sweep_plan import incidence_grid_deg, plan_sweep
from pitchsweep.acquire.sweep_session import resume_run, sweep_job
from pitchsweep.acquire.telling import Teller
from pitchsweep.configs.fault_policies import FAULT_KINDS, FaultPolicies, Policy
from pitchsweep.configs.schedule_model import Schedule
from pitchsweep.drivers.devices import BenchReading, Label
from pitchsweep.drivers.driver_errors import (
    DeviceRefused,
    LineBroke,
    NoAnswerInTime,
)

NOW = datetime(2026, 3, 29, 0, 30, tzinfo=UTC)
"""The night in which clocks in Europe go forward."""


def test_moments_are_utc_and_a_time_of_day_is_the_next_one() -> None:
    assert seconds_until("01:30Z", NOW) == 3600.0
    assert seconds_until("00:00Z", NOW) == 23.5 * 3600.0
    assert seconds_until("2026-03-29T06:00Z", NOW) == 5.5 * 3600.0
    assert seconds_until("2026-03-28T06:00Z", NOW) < 0.0


def test_a_part_is_steady_when_half_an_hour_says_so() -> None:
    def warming(rate_K_per_h: float) -> list[tuple[float, float]]:
        return [(300.0 * i, 20.0 + rate_K_per_h * i / 12.0) for i in range(9)]

    assert slope_K_per_h(warming(0.3)[:6]) is None
    assert slope_K_per_h(warming(0.3)) == pytest.approx(0.3)
    assert is_steady(warming(-0.09), 0.1) and not is_steady(warming(-0.11), 0.1)


def test_every_fault_has_a_policy_and_every_policy_ends() -> None:
    policies = FaultPolicies()
    for kind in FAULT_KINDS:
        assert getattr(policies, kind) in get_args(Policy)
        for wanted in get_args(Policy):
            for then in ("skip", "pause", "stop"):
                chosen = FaultPolicies.model_validate({kind: wanted, "then": then})
                last = reaction(chosen, kind, policies.retries + MOST_PAUSES).does
                assert last in ("skip", "stop", "note"), (kind, wanted, then)


def test_retries_are_counted_and_then_the_last_policy_holds() -> None:
    policies = FaultPolicies(retries=2, then="pause", camera_black="retry")
    does = [reaction(policies, "camera_black", n).does for n in range(3)]
    assert does == ["retry", "retry", "pause"]
    assert reaction(policies, "camera_black", 2).words == "pause, after 2 times retry"


def test_errors_are_told_apart_by_device_and_reason() -> None:
    assert fault_kind(DeviceRefused("stage", "stalled", "")) == "stage_stalled"
    assert fault_kind(NoAnswerInTime("camera", "expose", 1.0)) == "camera_no_frame"
    assert fault_kind(LineBroke("camera", "exposing", "gone")) == "camera_gone"
    assert fault_kind(FaultMet("air_missing", "")) == "air_missing"
    assert fault_kind(NoAnswerInTime("twin", "now", 1.0)) is None
    assert fault_kind(ValueError()) is None


def test_frames_that_cannot_be_right_are_named() -> None:
    camera = small_job().bench.camera
    checks = FrameChecks(camera)
    noise = np.random.default_rng(0)
    shape = (camera.height_px, camera.width_px)

    def frame() -> "np.ndarray[tuple[int, int], np.dtype[np.uint16]]":
        return noise.integers(60, 70, shape).astype(np.uint16)

    def label(step: int) -> Label:
        return Label(0, "red", 0, step, 0)

    good = frame()
    checks.check(good, label(0))
    checks.check(good, label(0))
    for bad, reason in (
        (good, "identical"),
        (frame()[:50], "wrong-frame"),
        (frame() << 8, "wrong-frame"),
        (np.zeros(shape, np.uint16), "black"),
        (np.full(shape, 4095, np.uint16), "white"),
    ):
        with pytest.raises(DeviceRefused) as caught:
            checks.check(bad.astype(np.uint16), label(1))
        assert caught.value.reason == reason


def test_repeats_shift_the_whole_grid_and_cover_every_laser_and_mount() -> None:
    job = small_job(repeats=3, repeat_shift_deg=0.2, mounts_deg=(0.0, 90.0))
    first, second = (incidence_grid_deg(job.recipe, r) for r in (0, 1))
    assert second[0] == pytest.approx(first[0] + 0.2)
    plan = plan_sweep(job, "x")
    places = [(s.mount, s.repeat, s.stage_deg) for s in plan.steps]
    assert len(set(places)) == len(places)
    assert {s.repeat for s in plan.steps} == {0, 1, 2}
    assert [s.planned_s for s in plan.steps] == sorted(s.planned_s for s in plan.steps)


def test_a_mount_waits_dark_for_a_person_and_says_who(tmp_path: Path) -> None:
    job = small_job(
        mounts_deg=(0.0, 90.0), start_deg=-10.0, stop_deg=10.0, step_deg=10.0
    )
    fake = FakeBench(job)
    run = sweep_job(job, tmp_path, QuietProgress(), opener(fake)).path
    assert fake.log.index("person") < fake.log.index("seat 1")
    with open_journal(run / "run.db", read_only=True) as journal:
        (row,) = [r for r in journal.gate_events() if r.event == "person"]
    assert "somebody: seat the part for mount 2" in row.detail


def test_a_sweep_stops_by_the_hour_and_still_gives_its_result(tmp_path: Path) -> None:
    job = small_job()
    fake = FakeBench(job)

    def late(what: str) -> None:
        if what == "spots 5":
            fake.clock_s += 90000.0

    fake.on_call = late
    job = job.model_copy(update={"schedule": Schedule(stop_by="06:00Z")})
    run = sweep_job(job, tmp_path, QuietProgress(), opener(fake)).path
    given = input_from_run(read_run(run))
    assert any("stop by 06:00Z" in warning for warning in given.warnings)
    assert json.loads((run / STATUS).read_text())["state"] == "done"


def test_precision_enough_ends_a_sweep_alike_whether_resumed_or_not(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(live_fit, "FEWEST_STEPS", 1000)  # no look in between
    job = small_job(step_deg=1.0, repeats=4)
    job = job.model_copy(update={"schedule": Schedule(enough_relative_u=0.05)})
    whole = sweep_job(
        job, tmp_path / "whole", QuietProgress(), opener(FakeBench(job))
    ).path
    table = input_from_run(read_run(whole)).table
    assert table.step.max() == 2 * 41 - 1 - 1  # the second grid is one step shorter
    fake = FakeBench(job, fail_at=400, failure=KeyboardInterrupt)
    with pytest.raises(KeyboardInterrupt):
        sweep_job(job, tmp_path / "cut", QuietProgress(), opener(fake))
    (cut,) = (tmp_path / "cut").iterdir()
    resume_run(cut, QuietProgress(), opener(FakeBench(job)))
    again = input_from_run(read_run(cut)).table
    assert np.array_equal(table.x_mm, again.x_mm)


def test_a_missing_air_sensor_is_noted_once_and_the_file_serves(tmp_path: Path) -> None:
    from pitchsweep.configs.sensor_model import AirSensor

    job = small_job()
    bench = job.bench.model_copy(update={"air_sensor": AirSensor(name="a")})
    job = job.model_copy(update={"bench": bench})
    fake = FakeBench(job)
    fake.sense = lambda laser, planned_s: BenchReading()  # type: ignore[method-assign]
    record = read_run(sweep_job(job, tmp_path, QuietProgress(), opener(fake)).path)
    (fault,) = record.faults
    assert (fault.what, fault.policy) == ("air missing", "note")
    assert input_from_run(record).measured == (None,)


def test_what_the_sensors_read_reaches_the_fit(tmp_path: Path) -> None:
    from pitchsweep.acquire.measured_state import surroundings
    from pitchsweep.configs.sensor_model import AirSensor

    job = small_job()
    sensor = AirSensor(name="a", u_part_temperature_C=0.2)
    bench = job.bench.model_copy(update={"air_sensor": sensor})
    job = job.model_copy(update={"bench": bench})
    run = sweep_job(job, tmp_path, QuietProgress(), opener(FakeBench(job))).path
    around = surroundings(input_from_run(read_run(run)))
    assert around.bench.air.pressure_hPa == 1013.0
    assert around.bench.air.u_pressure_hPa == sensor.u_pressure_hPa
    assert around.part.material.u_temperature_C == pytest.approx(0.2)


def test_a_command_that_hangs_or_fails_never_holds_anything_up(tmp_path: Path) -> None:
    said: list[str] = []
    slow = Schedule(
        tell=(sys.executable, "-c", "import time; time.sleep(60)"), tell_within_s=60.0
    )
    teller = Teller(slow, "run", said.append)
    began_s = time.monotonic()
    for number in range(200):
        teller.tell("fault", str(number))
    assert time.monotonic() - began_s < 1.0
    assert any("queue is full" in text for text in said)
    missing = Teller(Schedule(tell=("/no/such/command",)), "run", said.append)
    missing.tell("finish", "x")
    missing.end()
    assert any("No such file" in text for text in said)


def test_a_command_gets_one_json_message_on_its_input(tmp_path: Path) -> None:
    out = tmp_path / "told"
    script = f"import sys; open({str(out)!r}, 'a').write(sys.stdin.read())"
    schedule = Schedule(tell=(sys.executable, "-c", script))
    teller = Teller(schedule, "night", lambda text: None)
    teller.tell("pause", "seat the part")
    teller.end()
    message = json.loads(out.read_text())
    assert (message["what"], message["run"]) == ("pause", "night")


def test_a_second_sweep_on_the_bench_is_refused_naming_the_first(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(bench_lock.tempfile, "gettempdir", lambda: str(tmp_path))
    bench = small_job().bench
    lock = take_bench_lock(tmp_path, bench, print)
    with pytest.raises(RunRefused, match="in use by another sweep: pid .* on "):
        take_bench_lock(tmp_path, bench, print)
    take_bench_lock(tmp_path / "elsewhere", bench, print).release()
    lock.release()
    take_bench_lock(tmp_path, bench, print).release()


def test_a_lock_left_by_a_killed_sweep_is_taken_over_and_said(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(bench_lock.tempfile, "gettempdir", lambda: str(tmp_path))
    bench = small_job().bench
    killed = (
        "import os, sys, pathlib, tempfile\n"
        "from pitchsweep.acquire import bench_lock\n"
        f"bench_lock.tempfile.gettempdir = lambda: {str(tmp_path)!r}\n"
        "from pitchsweep.configs.bench_model import Bench\n"
        "bench = Bench.model_validate_json(sys.stdin.read())\n"
        f"bench_lock.take_bench_lock(pathlib.Path({str(tmp_path)!r}), bench, print)\n"
        "os._exit(9)\n"
    )
    subprocess.run(
        [sys.executable, "-c", killed],
        input=bench.model_dump_json(),
        text=True,
        check=False,
    )
    said: list[str] = []
    take_bench_lock(tmp_path, bench, said.append).release()
    assert len(said) == 1 and "did not end by itself" in said[0]


def test_a_network_folder_is_refused_with_advice(tmp_path: Path) -> None:
    mounts = tmp_path / "mounts"
    mounts.write_text(
        f"/dev/a / ext4 rw 0 0\nserver:/x {tmp_path}/far nfs4 rw 0 0\n"
        f"/dev/b {tmp_path}/far/near ext4 rw 0 0\n"
    )
    assert file_system_of(tmp_path / "far" / "runs", mounts) == "nfs4"
    refuse_network_folder(tmp_path / "far" / "near", mounts)
    with pytest.raises(RunRefused, match=r"network folder \(nfs4\)[\s\S]*local disk"):
        refuse_network_folder(tmp_path / "far" / "runs", mounts)


def test_too_small_a_disk_is_foretold(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    from pitchsweep.acquire import sweep_session

    monkeypatch.setattr(sweep_session, "free_bytes", lambda folder: 1_000_000)
    job = small_job(record="frames")
    with pytest.raises(JobRefused, match="GB are free, the sweep needs up to"):
        sweep_job(job, tmp_path / "runs", QuietProgress(), opener(FakeBench(job)))
    assert not list((tmp_path / "runs").iterdir())


def test_what_is_due_is_told_and_what_is_overdue_is_a_warning(tmp_path: Path) -> None:
    from datetime import timedelta

    from pitchsweep.configs.part_model import Certified

    job = small_job()
    soon = (datetime.now(UTC) + timedelta(days=9, hours=1)).date().isoformat()
    lasers = {
        name: laser.model_copy(update={"wavelength_due": soon})
        for name, laser in job.bench.lasers.items()
    }
    certified = Certified(
        pitch_nm=830.0,
        u_pitch_nm=0.01,
        certificate="invented-7",
        certificate_due="2020-02-29",
    )
    job = job.model_copy(
        update={
            "bench": job.bench.model_copy(update={"lasers": lasers}),
            "part": job.part.model_copy(update={"certified": certified}),
        }
    )
    progress = QuietProgress()
    record = read_run(sweep_job(job, tmp_path, progress, opener(FakeBench(job))).path)
    assert any(
        "wavelength calibration of laser red is due in" in t for t in progress.said
    )
    (fault,) = record.faults
    assert (
        fault.what == "warning" and "invented-7 was due on 2020-02-29" in fault.detail
    )
