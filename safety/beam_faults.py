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


def faults_by_bit(
    around: Surroundings, laser: Laser, power_mw: float
) -> dict[int, Fault]:
    """The bits of all that a beam of ``power_mw`` must not meet, with their faults."""
    faults = {NOTHING: NOTHING_THERE}
    for place, surface in enumerate(around.surfaces):
        fault = _fault_of(surface, around, laser, power_mw)
        if fault is not None:
            faults[around.bit_of(place)] = fault
    return faults


def _fault_of(
    surface: Surface, around: Surroundings, laser: Laser, power_mw: float
) -> Fault | None:
    fault = _overloaded(surface, power_mw)
    if fault is None and surface.acts_as == "mirror":
        return _mirror_fault(surface, around, laser, power_mw)
    if fault is None and surface.what == "window":
        return _window_fault(surface, laser, power_mw)
    return fault


def _overloaded(surface: Surface, power_mw: float) -> Fault | None:
    if surface.max_power_mw is None or power_mw <= surface.max_power_mw:
        return None
    return Fault(
        f"'{surface.name}' is declared for {surface.max_power_mw:g} mW, the beam may"
        f" have {power_mw:g} mW",
        "take a stop that bears it, or a weaker laser",
    )


def _window_fault(surface: Surface, laser: Laser, power_mw: float) -> Fault | None:
    density = surface.optical_density or 0.0
    limit_mw = eye_limit(
        laser.vacuum_wavelength_nm, UNATTENDED_S, u_wavelength_nm=laser.u_wavelength_nm
    ).pupil_power_mw
    behind_mw = power_mw * 10.0**-density
    if behind_mw <= limit_mw:
        return None
    return Fault(
        f"window '{surface.name}' of density {density:g} lets {behind_mw:.2g} mW"
        f" through, the eye's limit for a night is {limit_mw:.2g} mW",
        "cover the window, or take a denser one",
    )


def _mirror_fault(
    mirror: Surface, around: Surroundings, laser: Laser, power_mw: float
) -> Fault | None:
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
        fault = _fault_of(surface, around, laser, power_mw * mirror.reflectance)
        if fault is not None:
            return Fault(f"by mirror '{mirror.name}': {fault.reason}", fault.remedy)
    return None
