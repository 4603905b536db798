"""Before the first step: the hour, a steady part, instruments due. Acts (clock)."""

from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

from pitchsweep.acquire.bench_devices import BenchDevices
from pitchsweep.acquire.night_schedule import (
    EVERY_S,
    days_until,
    is_steady,
    seconds_until,
    slope_K_per_h,
)
from pitchsweep.acquire.progress import clock_text
from pitchsweep.acquire.run_journal import RunJournal
from pitchsweep.acquire.stop_signals import StopSignals
from pitchsweep.acquire.sweep_reporter import SweepReporter
from pitchsweep.configs.job_model import Job

SLICE_S = 30.0
DUE_SOON_DAYS = 30
SOAKED = "soaked_s"
ENDS = "ends_bench_s"


@dataclass(frozen=True)
class Start:
    """What the steps need to know of the start: settling time, latest bench time."""

    soaked_s: float = 0.0
    ends_bench_s: float | None = None


def make_ready(
    job: Job,
    devices: BenchDevices,
    journal: RunJournal,
    stop: StopSignals,
    report: SweepReporter,
) -> Start:
    """Waits, dark, for the hour and for a steady part; a resumed run waits for none.

    Raises StopRequested. What was waited and when it ends stand in the journal.
    """
    schedule, clock = job.schedule, devices.clock
    facts = journal.meta()
    if SOAKED in facts:
        ends = facts.get(ENDS)
        return Start(float(facts[SOAKED]), None if ends is None else float(ends))
    warn_of_due_dates(job, report)
    began_s, now = clock.now_s(), datetime.now(UTC)
    left_s, ends_s = 0.0, None
    if schedule.not_before is not None:
        left_s = max(0.0, seconds_until(schedule.not_before, now))
    if schedule.stop_by is not None:
        first = now + timedelta(seconds=left_s)
        ends_s = began_s + left_s + seconds_until(schedule.stop_by, first)
        journal.set_meta(ENDS, repr(ends_s))
    if left_s > 0.0:
        report.say(f"waiting, dark, until {schedule.not_before}: {clock_text(left_s)}")
        report.state("waiting", until=schedule.not_before)
        _wait(devices, stop, left_s)
    soaked_s = 0.0
    if schedule.steady_K_per_h is not None:
        _settle(job, devices, stop, report, schedule.steady_K_per_h)
        soaked_s = clock.now_s()
    journal.set_meta(SOAKED, repr(soaked_s))
    return Start(soaked_s, ends_s)


def warn_of_due_dates(job: Job, report: SweepReporter) -> None:
    """Says which instruments and certificates are due, or soon will be."""
    now = datetime.now(UTC)
    for what, due in due_dates(job):
        days = days_until(due, now)
        if days < 0:
            report.warning(None, f"{what} was due on {due}: have it renewed")
        elif days < DUE_SOON_DAYS:
            report.say(f"{what} is due in {days} days")


def due_dates(job: Job) -> list[tuple[str, str]]:
    """What has a date by which it must be renewed, and the date."""
    bench = job.bench
    found = [
        (f"the calibration of {sensor.name}", sensor.calibration_due)
        for sensor in (bench.air_sensor, bench.power_sensor)
        if sensor is not None
    ]
    found += [
        (
            f"the wavelength calibration of laser {name}",
            bench.lasers[name].wavelength_due,
        )
        for name in job.recipe.lasers
    ]
    certified = [part.certified for part in job.parts if part.certified is not None]
    found += [(f"certificate {c.certificate}", c.certificate_due) for c in certified]
    return [(what, due) for what, due in found if due is not None]


def _settle(
    job: Job,
    devices: BenchDevices,
    stop: StopSignals,
    report: SweepReporter,
    limit_K_per_h: float,
) -> None:
    readings: list[tuple[float, float]] = []
    began_s = devices.clock.now_s()
    longest_s = 60.0 * job.schedule.steady_within_min
    laser = job.recipe.lasers[0]
    report.state("settling")
    while True:
        now_s = devices.clock.now_s()
        air = devices.world.sense(laser, now_s).air
        if air is None:
            report.warning(None, "no temperature is read: the part may not be steady")
            return
        readings.append((now_s, air.part_temperature_C))
        if is_steady(readings, limit_K_per_h):
            waited = clock_text(now_s - began_s)
            report.say(f"the part is steady after {waited}")
            return
        if now_s - began_s >= longest_s:
            slope = slope_K_per_h(readings)
            text = "unknown" if slope is None else f"{slope:+.2f} K/h"
            report.warning(
                None,
                f"the part still changes by {text} after {clock_text(longest_s)}; the "
                "sweep begins all the same",
            )
            return
        _wait(devices, stop, EVERY_S)


def _wait(devices: BenchDevices, stop: StopSignals, seconds: float) -> None:
    left_s = seconds
    while left_s > 0.0:
        devices.clock.wait(min(left_s, SLICE_S))
        left_s -= SLICE_S
        stop.check()
