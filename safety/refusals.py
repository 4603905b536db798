"""What is refused outright, whatever stands around the part. Pure.

Class 4; class 3B outside an enclosure declared class 1; any laser above the bench
file's power ceiling; wavelengths within their u of the ends of the hazard limits; a
doubled laser without a declared infrared filter and what was measured behind it.
"""

from collections.abc import Iterator
from dataclasses import dataclass

from pitchsweep.configs.bench_model import Bench, Laser
from pitchsweep.configs.job_model import Job
from pitchsweep.safety.exposure_limits import worst_wavelength_nm
from pitchsweep.safety.hazard_figures import class_together, full_drive_mw
from pitchsweep.safety.laser_class import ClassEstimate, estimate_class
from pitchsweep.safety.lasers_alight import (
    lasers_alight,
    may_be_together,
    strongest_mw,
)
from pitchsweep.safety.safety_errors import OutsideHazardLimits


@dataclass(frozen=True)
class Refusal:
    """Why light is refused and what to do about it, each in one sentence."""

    what: str
    remedy: str


def refuse_outright(job: Job) -> tuple[Refusal, ...]:
    """Every reason to refuse the job's lasers, the recipe's first in its order.

    All lasers that may be alight are judged at full drive, and all of them together
    where that may be; empty when nothing stands against them here (which permits
    nothing by itself).
    """
    names = lasers_alight(job)
    each = tuple(r for name in names for r in _of_laser(job.bench, name))
    return each or (tuple(_together(job)) if may_be_together(job) else ())


def _of_laser(bench: Bench, name: str) -> Iterator[Refusal]:
    laser = bench.lasers[name]
    try:
        worst_wavelength_nm(laser.vacuum_wavelength_nm, laser.u_wavelength_nm)
    except OutsideHazardLimits as error:
        yield Refusal(
            f"laser '{name}': the hazard limits cover {error.allowed},"
            f" not {error.value}",
            "have its wavelength measured, or take another laser",
        )
        return
    yield from _by_class(bench, name, laser)
    yield from _by_ceiling(bench, name, laser)
    if laser.frequency_doubled and laser.infrared_filter is None:
        yield Refusal(
            f"laser '{name}' is frequency-doubled and declares no infrared filter",
            f"fit one, measure what is left behind it, and enter lasers.{name}."
            "infrared_filter",
        )


def _together(job: Job) -> Iterator[Refusal]:
    """What stands against the sum of lasers none of which is refused alone."""
    bench, names = job.bench, lasers_alight(job)
    what = f"lasers {', '.join(names)} may be alight together and are"
    one = "let one at a time through and declare it (emission.lasers_at_once: one)"
    yield from _for_class(bench, what, class_together(bench, names), one)
    if bench.enclosure is not None:
        ceiling_mw = bench.enclosure.power_ceiling_mw
        if strongest_mw(job) > ceiling_mw:
            yield Refusal(
                f"lasers {', '.join(names)} together give {strongest_mw(job):g} mW at"
                f" full drive, above the bench's ceiling of {ceiling_mw:g} mW"
                " (enclosure.power_ceiling_mw)",
                f"{one}, or have the officer raise the ceiling",
            )


def _by_class(bench: Bench, name: str, laser: Laser) -> Iterator[Refusal]:
    found = estimate_class(
        laser.vacuum_wavelength_nm,
        full_drive_mw(laser),
        bench.beam.diameter_mm,
        u_wavelength_nm=laser.u_wavelength_nm,
    )
    yield from _for_class(bench, f"laser '{name}' is", found, "take a weaker laser")


def _for_class(
    bench: Bench, what: str, found: ClassEstimate, weaker: str
) -> Iterator[Refusal]:
    enclosed = bench.enclosure is not None and bench.enclosure.declared_class == 1
    if found.laser_class == "4":
        yield Refusal(
            f"{what} estimated as class 4 ({found.reason})",
            f"class 4 is never run from here: {weaker}",
        )
    elif found.laser_class == "3B" and not enclosed:
        yield Refusal(
            f"{what} estimated as class 3B ({found.reason}) and the bench"
            " declares no class 1 enclosure",
            f"enclose the bench and declare it (enclosure.declared_class), or {weaker}",
        )


def _by_ceiling(bench: Bench, name: str, laser: Laser) -> Iterator[Refusal]:
    if bench.enclosure is None:
        return
    power_mw, ceiling_mw = full_drive_mw(laser), bench.enclosure.power_ceiling_mw
    if power_mw > ceiling_mw:
        yield Refusal(
            f"laser '{name}' gives {power_mw:g} mW at full drive, above the bench's"
            f" ceiling of {ceiling_mw:g} mW (enclosure.power_ceiling_mw)",
            "take a weaker laser, or have the officer raise the ceiling",
        )
