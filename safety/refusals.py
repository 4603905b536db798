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
from pitchsweep.safety.hazard_figures import full_drive_mw
from pitchsweep.safety.laser_class import estimate_class
from pitchsweep.safety.safety_errors import OutsideHazardLimits


@dataclass(frozen=True)
class Refusal:
    """Why light is refused and what to do about it, each in one sentence."""

    what: str
    remedy: str


def refuse_outright(job: Job) -> tuple[Refusal, ...]:
    """Every reason to refuse the job's lasers, the recipe's first in its order.

    All lasers of the recipe are judged at full drive; empty when nothing stands against
    them here (which permits nothing by itself).
    """
    return tuple(
        refusal for name in job.recipe.lasers for refusal in _of_laser(job.bench, name)
    )


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


def _by_class(bench: Bench, name: str, laser: Laser) -> Iterator[Refusal]:
    found = estimate_class(
        laser.vacuum_wavelength_nm,
        full_drive_mw(laser),
        bench.beam.diameter_mm,
        u_wavelength_nm=laser.u_wavelength_nm,
    )
    enclosed = bench.enclosure is not None and bench.enclosure.declared_class == 1
    if found.laser_class == "4":
        yield Refusal(
            f"laser '{name}' is estimated as class 4 ({found.reason})",
            "class 4 is never run from here: take a weaker laser",
        )
    elif found.laser_class == "3B" and not enclosed:
        yield Refusal(
            f"laser '{name}' is estimated as class 3B ({found.reason}) and the bench"
            " declares no class 1 enclosure",
            "enclose the bench and declare it (enclosure.declared_class), or take a"
            " weaker laser",
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
