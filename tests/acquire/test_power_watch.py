"""The power read during light: above the limit it trips, through the guard itself."""

import threading
from pathlib import Path

import pytest
from acquire_fakes import QuietProgress
from guard_builders import POWER_MW, Rig
from twin_bench import short_job, unit_log

from pitchsweep.acquire.bench_session import open_twin_bench
from pitchsweep.acquire.bench_work import most_power_mw
from pitchsweep.acquire.power_watch import PERIOD_S, PowerWatch
from pitchsweep.acquire.sweep_plan import plan_sweep
from pitchsweep.acquire.sweep_session import sweep_job
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.sensor_model import PowerSensor
from pitchsweep.configs.twin_faults import TwinFault
from pitchsweep.drivers.driver_errors import NoAnswerInTime
from pitchsweep.safety.safety_errors import GateTripped


def with_sensor(job: Job, *faults: TwinFault) -> Job:
    assert job.bench.twin is not None
    twin = job.bench.twin.model_copy(update={"faults": faults})
    sensor = PowerSensor(name="power", u_relative=0.02)
    update = {"twin": twin, "power_sensor": sensor}
    return job.model_copy(update={"bench": job.bench.model_copy(update=update)})


def test_a_heartbeat_is_judged_when_it_comes_and_not_at_the_next_tick() -> None:
    rig = Rig().lit()
    rig.heartbeat(power_mw=POWER_MW)
    assert rig.state == "lit"
    rig.heartbeat(power_mw=1.01 * POWER_MW)
    assert (rig.state, rig.events[-1].event) == ("tripped", "power-above-limit")
    assert not rig.unit.lit


def test_the_limit_is_full_drive_and_what_a_sensor_may_be_off_by() -> None:
    job = short_job()
    plan = plan_sweep(job, "x")
    assert most_power_mw(plan, job.bench) == 0.9
    assert most_power_mw(plan, with_sensor(job).bench) == pytest.approx(0.9 * 1.06)
    laser = job.bench.lasers["red"].model_copy(update={"full_drive_mw": 3.0})
    bench = job.bench.model_copy(update={"lasers": {"red": laser}})
    assert most_power_mw(plan, bench) == 3.0


def test_it_reads_when_light_begins_and_again_while_it_lasts() -> None:
    told: list[float] = []
    third = threading.Event()

    def tell(power_mw: float) -> None:
        told.append(power_mw)
        if len(told) == 3:
            third.set()

    with PowerWatch(lambda laser: {"red": 0.8}[laser], tell) as watch:
        watch.lit("red")
        assert told == [0.8]
        assert third.wait(20.0)
        watch.dark()
    assert not threading.Event().wait(PERIOD_S) and set(told) == {0.8}


def test_a_sensor_that_says_nothing_tells_nothing() -> None:
    told: list[float] = []

    def read(laser: str) -> float:
        raise NoAnswerInTime("sensor", "meter", 1.0)

    with PowerWatch(read, told.append) as watch:
        watch.lit("red")
        watch.dark()
    assert told == []


def test_a_laser_that_grows_stronger_makes_the_sweep_dark(tmp_path: Path) -> None:
    rise = TwinFault(at="light", nth=3, does="power-rise")
    job = with_sensor(short_job(), rise)
    with pytest.raises(GateTripped, match="power at the part 1.35 mW") as caught:
        sweep_job(job, tmp_path / "runs", QuietProgress(), open_twin_bench)
    assert caught.value.event == "power-above-limit"
    (run,) = (tmp_path / "runs").iterdir()
    rows = unit_log(run / "twin")
    lights = [row["value"] for row in rows if row["what"] == "light"]
    assert lights[-1] == "off" and 3 <= lights.count("on") <= 4


def test_a_power_that_stays_where_it_should_trips_nothing(tmp_path: Path) -> None:
    folder = sweep_job(
        with_sensor(short_job()), tmp_path / "runs", QuietProgress(), open_twin_bench
    )
    lights = [r["value"] for r in unit_log(folder.twin) if r["what"] == "light"]
    assert lights.count("on") >= 5
