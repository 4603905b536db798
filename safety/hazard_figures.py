"""The hazard figures of a bench's lasers, and several lasers together. Pure.

They describe the undivided beam at full drive, as if an eye were in it; what reaches
an eye is the enclosure's business. Skin limits are compared with the beam's mean
irradiance over its own 1/e2 disc.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from pitchsweep.configs.bench_model import Bench, Laser
from pitchsweep.safety.exposure_limits import (
    BLINK_S,
    LONG_LOOK_S,
    TIMES_S,
    UNATTENDED_S,
    EyeLimit,
    blink_counts,
    eye_limit,
    skin_limit_w_m2,
)
from pitchsweep.safety.hazard_distances import (
    diffraction_limit_mrad,
    diffuse_distance_m,
    direct_distance_m,
    disc_irradiance_w_m2,
    lens_distance_m,
    one_over_e,
    optical_density,
    power_through_mw,
    pupil_irradiance_w_m2,
)
from pitchsweep.safety.hazard_records import CHECK
from pitchsweep.safety.laser_class import ClassEstimate, estimate_class

LENS_FOCAL_MM = 50.0
EYEWEAR = (
    "optical density alone does not choose eyewear: what it withstands, fit, colour"
    " vision and the officer's judgement belong to it"
)
SMALL_SOURCE = "a small source is assumed (at most 1.5 mrad)"


@dataclass(frozen=True)
class TimeFigures:
    """One exposure: its limits, the density needed, and how far the hazard reaches.

    ``times_limit`` is the irradiance over 7 mm as a multiple of the eye's limit,
    ``skin_times_limit`` the beam's own irradiance as a multiple of the skin's. The
    distances are 0 where the whole beam in one pupil stays within the limit; the lens
    has a focal length of 50 mm, the matt surface throws everything back.
    """

    exposure_s: float
    eye: EyeLimit
    skin_limit_w_m2: float
    times_limit: float
    skin_times_limit: float
    density: float
    direct_m: float
    lens_m: float
    diffuse_m: float


@dataclass(frozen=True)
class HazardFigures:
    """The figures of one laser at full drive.

    ``beam_mm`` and ``divergence_mrad`` are 1/e2 values; ``divergence_assumed`` says
    that the smallest possible one stands in for an unknown one. ``accidental_s`` is the
    exposure that an accidental look is judged by, ``times`` has one entry for each of
    ``TIMES_S``.
    """

    laser: str
    wavelength_nm: float
    power_mw: float
    beam_mm: float
    divergence_mrad: float
    divergence_assumed: bool
    pupil_power_mw: float
    pupil_irradiance_w_m2: float
    estimate: ClassEstimate
    accidental_s: float
    times: tuple[TimeFigures, ...]
    remarks: tuple[str, ...] = (SMALL_SOURCE, EYEWEAR, CHECK)

    def at(self, exposure_s: float) -> TimeFigures:
        """The figures of one exposure of ``TIMES_S``. KeyError for another."""
        for figures in self.times:
            if figures.exposure_s == exposure_s:
                return figures
        raise KeyError(f"no figures for {exposure_s:g} s; there are {TIMES_S}")

    @property
    def unattended(self) -> TimeFigures:
        """The figures of an unattended night: 30 000 s."""
        return self.at(UNATTENDED_S)


@dataclass(frozen=True)
class SummedHazard:
    """Several lasers into one eye: sums of irradiance over limit, rule by rule.

    Heat adds to heat and blue light to blue light; ``skin`` likewise. Above 1 the
    limit is passed; ``worst`` is the larger of the eye's two, ``density`` what a filter
    equally dense at all of them would need.
    """

    exposure_s: float
    thermal: float
    photochemical: float
    skin: float

    @property
    def worst(self) -> float:
        """The larger of the two sums for the eye."""
        return max(self.thermal, self.photochemical)

    @property
    def density(self) -> float:
        """Optical density that brings the worst sum down to 1."""
        return optical_density(self.worst, 1.0)


def full_drive_mw(laser: Laser) -> float:
    """What the laser gives at the part at full drive."""
    return laser.power_mw if laser.full_drive_mw is None else laser.full_drive_mw


def laser_figures(bench: Bench, name: str) -> HazardFigures:
    """The figures of laser ``name`` of ``bench``.

    Raises KeyError for an unknown laser, OutsideHazardLimits for a wavelength that the
    limits do not cover.
    """
    laser, beam_mm = bench.lasers[name], bench.beam.diameter_mm
    wavelength_nm, u_nm = laser.vacuum_wavelength_nm, laser.u_wavelength_nm
    power_mw = full_drive_mw(laser)
    counts = blink_counts(wavelength_nm, u_nm)
    return HazardFigures(
        laser=name,
        wavelength_nm=wavelength_nm,
        power_mw=power_mw,
        beam_mm=beam_mm,
        divergence_mrad=_divergence_mrad(laser, beam_mm),
        divergence_assumed=laser.divergence_mrad is None,
        pupil_power_mw=power_through_mw(power_mw, beam_mm),
        pupil_irradiance_w_m2=pupil_irradiance_w_m2(power_mw, beam_mm),
        estimate=estimate_class(wavelength_nm, power_mw, beam_mm, u_wavelength_nm=u_nm),
        accidental_s=BLINK_S if counts else LONG_LOOK_S,
        times=tuple(_time_figures(laser, beam_mm, time_s) for time_s in TIMES_S),
    )


def class_together(bench: Bench, names: Sequence[str]) -> ClassEstimate:
    """The class of all of ``names`` in one beam: the sum at the shortest wavelength.

    Limits are lowest there, so this is never too low. Raises as laser_figures.
    """
    lasers = [bench.lasers[name] for name in names]
    worst = min(lasers, key=lambda one: one.vacuum_wavelength_nm - one.u_wavelength_nm)
    return estimate_class(
        worst.vacuum_wavelength_nm,
        sum(full_drive_mw(laser) for laser in lasers),
        bench.beam.diameter_mm,
        u_wavelength_nm=worst.u_wavelength_nm,
    )


def summed_hazard(
    bench: Bench, names: Sequence[str], exposure_s: float
) -> SummedHazard:
    """All of ``names`` at once at full drive into one eye. Raises as laser_figures."""
    thermal = photochemical = skin = 0.0
    for name in names:
        laser, beam_mm = bench.lasers[name], bench.beam.diameter_mm
        limit, skin_w_m2 = _limits(laser, exposure_s)
        seen = pupil_irradiance_w_m2(full_drive_mw(laser), beam_mm)
        thermal += seen / limit.thermal_w_m2
        if limit.photochemical_w_m2 is not None:
            photochemical += seen / limit.photochemical_w_m2
        skin += disc_irradiance_w_m2(full_drive_mw(laser), beam_mm) / skin_w_m2
    return SummedHazard(exposure_s, thermal, photochemical, skin)


def _time_figures(laser: Laser, beam_mm: float, exposure_s: float) -> TimeFigures:
    limit, skin_w_m2 = _limits(laser, exposure_s)
    eye_w_m2, power_mw = limit.irradiance_w_m2, full_drive_mw(laser)
    narrow_mm = one_over_e(beam_mm)
    harmless = power_mw <= limit.pupil_power_mw
    seen = pupil_irradiance_w_m2(power_mw, beam_mm)
    return TimeFigures(
        exposure_s=exposure_s,
        eye=limit,
        skin_limit_w_m2=skin_w_m2,
        times_limit=seen / eye_w_m2,
        skin_times_limit=disc_irradiance_w_m2(power_mw, beam_mm) / skin_w_m2,
        density=optical_density(seen, eye_w_m2),
        direct_m=0.0
        if harmless
        else direct_distance_m(
            power_mw,
            eye_w_m2,
            divergence_mrad=one_over_e(_divergence_mrad(laser, beam_mm)),
            beam_mm=narrow_mm,
        ),
        lens_m=0.0
        if harmless
        else lens_distance_m(
            power_mw, eye_w_m2, focal_mm=LENS_FOCAL_MM, beam_mm=narrow_mm
        ),
        diffuse_m=0.0 if harmless else diffuse_distance_m(power_mw, eye_w_m2),
    )


def _limits(laser: Laser, exposure_s: float) -> tuple[EyeLimit, float]:
    wavelength_nm, u_nm = laser.vacuum_wavelength_nm, laser.u_wavelength_nm
    return (
        eye_limit(wavelength_nm, exposure_s, u_wavelength_nm=u_nm),
        skin_limit_w_m2(wavelength_nm, exposure_s, u_wavelength_nm=u_nm),
    )


def _divergence_mrad(laser: Laser, beam_mm: float) -> float:
    if laser.divergence_mrad is not None:
        return laser.divergence_mrad
    return diffraction_limit_mrad(laser.vacuum_wavelength_nm, beam_mm)
