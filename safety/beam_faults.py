"""Whether each declared surface may be trusted with a beam of a given power. Pure."""

from dataclasses import dataclass

from pitchsweep.configs.bench_model import Laser
from pitchsweep.configs.enclosure_model import Surface
from pitchsweep.safety.exposure_limits import UNATTENDED_S, eye_limit
from pitchsweep.safety.surroundings import NOTHING, Surroundings

NO_STOP = "no stop is declared there"
DECLARE = "fit a stop there and declare it under enclosure.surfaces"


@dataclass(frozen=True)
class Fault:
    """What is wrong with a beam that meets a certain thing, and what to do."""

    reason: str
    remedy: str


NOTHING_THERE = Fault(NO_STOP, DECLARE)


@dataclass(frozen=True)
class Ray:
    """One laser's part of a beam and its power."""

    laser: Laser
    power_mw: float


Rays = tuple[Ray, ...]
"""What goes one way: one laser, or all that may be alight together."""


def faults_by_bit(around: Surroundings, rays: Rays) -> dict[int, Fault]:
    """The bits of all that a beam of ``rays`` must not meet, with their faults."""
    faults = {NOTHING: NOTHING_THERE}
    for place, surface in enumerate(around.surfaces):
        fault = _fault_of(surface, around, rays)
        if fault is not None:
            faults[around.bit_of(place)] = fault
    return faults


def _fault_of(surface: Surface, around: Surroundings, rays: Rays) -> Fault | None:
    fault = _overloaded(surface, rays)
    if fault is None and surface.acts_as == "mirror":
        return _mirror_fault(surface, around, rays)
    if fault is None and surface.what == "window":
        return _window_fault(surface, rays)
    return fault


def _overloaded(surface: Surface, rays: Rays) -> Fault | None:
    power_mw = sum(ray.power_mw for ray in rays)
    if surface.max_power_mw is None or power_mw <= surface.max_power_mw:
        return None
    return Fault(
        f"'{surface.name}' is declared for {surface.max_power_mw:g} mW, the beam may"
        f" have {power_mw:g} mW",
        "take a stop that bears it, or a weaker laser",
    )


def _window_fault(surface: Surface, rays: Rays) -> Fault | None:
    """Parts of the limits add up, whichever rule gives each: never too little."""
    density = surface.optical_density or 0.0
    behind_mw = [ray.power_mw * 10.0**-density for ray in rays]
    limits_mw = [_night_limit_mw(ray.laser) for ray in rays]
    if sum(b / m for b, m in zip(behind_mw, limits_mw, strict=True)) <= 1.0:
        return None
    lowest = " together is at least" if len(rays) > 1 else " is"
    return Fault(
        f"window '{surface.name}' of density {density:g} lets {sum(behind_mw):.2g} mW"
        f" through, the eye's limit for a night{lowest} {min(limits_mw):.2g} mW",
        "cover the window, or take a denser one",
    )


def _night_limit_mw(laser: Laser) -> float:
    return eye_limit(
        laser.vacuum_wavelength_nm, UNATTENDED_S, u_wavelength_nm=laser.u_wavelength_nm
    ).pupil_power_mw


def _mirror_fault(mirror: Surface, around: Surroundings, rays: Rays) -> Fault | None:
    if mirror.throws_into is None:
        return Fault(
            f"'{mirror.name}' is a mirror and does not say where it throws the beam",
            "cover it with a stop, or declare throws_into",
        )
    met = around.met_in_sector(mirror.throws_into)
    if met & NOTHING:
        return Fault(
            f"mirror '{mirror.name}' throws it where no stop is declared",
            "cover the mirror, or declare stops over the whole of its throws_into",
        )
    for place, surface in enumerate(around.surfaces):
        if not met & around.bit_of(place):
            continue
        if surface.acts_as == "mirror":
            return Fault(
                f"mirror '{mirror.name}' throws it onto mirror '{surface.name}'",
                "cover one of the two with a stop",
            )
        thrown = tuple(
            Ray(ray.laser, ray.power_mw * mirror.reflectance) for ray in rays
        )
        fault = _fault_of(surface, around, thrown)
        if fault is not None:
            return Fault(f"by mirror '{mirror.name}': {fault.reason}", fault.remedy)
    return None
