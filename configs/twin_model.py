"""Sizes of what the simulated bench does to a sweep; each effect has its own size.

Zero switches an effect off. What the fit carries (distance, tilts, offsets, zero,
harmonics, map, repeatability) is drawn by the twin from the bench's own priors.
"""

from typing import Annotated, Literal

from pydantic import Field

from pitchsweep.configs.settings_base import Fraction, NonNegative, Settings
from pitchsweep.configs.twin_faults import TwinFault

Seed = Annotated[int, Field(ge=0, le=2**63 - 1)]
Arcsec = Annotated[float, Field(ge=0.0, le=3600.0)]


class TwinEffects(Settings):
    """Effects that can be switched on, each alone, with its size.

    ``leftover_backlash_arcsec`` is what is left of the backlash where the stage turned
    upwards over less than about ``run_up_deg`` after having come down.
    ``cover_thickness_mm`` and ``track_radius_mm`` stand in place of what is drawn for
    the part, ``cover_wedge_mrad`` adds to it. ``part_edge_mm``: the part ends so far
    from the stage axis, on the side to which negative orders go.
    """

    stage_harmonics_arcsec: tuple[Arcsec, Arcsec, Arcsec, Arcsec] = (
        60.0,
        10.0,
        10.0,
        10.0,
    )
    worm_arcsec: Arcsec = 0.0
    worm_per_turn: Annotated[int, Field(ge=2, le=1000)] = 180
    backlash_deg: Annotated[float, Field(ge=0.0, le=5.0)] = 0.05
    leftover_backlash_arcsec: Arcsec = 0.0
    run_up_deg: Annotated[float, Field(gt=0.0, le=30.0)] = 2.0
    wobble_arcsec: Arcsec = 0.0
    scale_ppm: Annotated[float, Field(ge=-10000.0, le=10000.0)] = 0.0
    map_error_mm: Annotated[float, Field(ge=0.0, le=20.0)] = 0.5
    screen_bow_mm: Annotated[float, Field(ge=-20.0, le=20.0)] = 0.0
    distortion_mm: Annotated[float, Field(ge=-20.0, le=20.0)] = 0.0
    camera_shift_um_per_h: Annotated[float, Field(ge=-1e5, le=1e5)] = 0.0
    camera_scale_ppm_per_h: Annotated[float, Field(ge=-1e5, le=1e5)] = 0.0
    pointing_urad_per_h: Annotated[float, Field(ge=-1e5, le=1e5)] = 0.0
    wavelength_drift_pm_per_h: Annotated[float, Field(ge=-1e5, le=1e5)] = 0.0
    air_drift_K_per_h: Annotated[float, Field(ge=-10.0, le=10.0)] = 0.0
    pressure_drift_hPa_per_h: Annotated[float, Field(ge=-20.0, le=20.0)] = 0.0
    part_warm_K: Annotated[float, Field(ge=-20.0, le=20.0)] = 0.0
    part_settle_h: Annotated[float, Field(gt=0.0, le=24.0)] = 0.5
    laser_power_percent_per_h: Annotated[float, Field(ge=-50.0, le=50.0)] = 0.0
    feedback_percent: Annotated[float, Field(ge=-90.0, le=100.0)] = 0.0
    mode_hop_pm: Annotated[float, Field(ge=-1000.0, le=1000.0)] = 100.0
    part_radius_m: Annotated[float, Field(ge=0.0, le=1e6)] = 0.0
    cover_thickness_mm: Annotated[float, Field(ge=0.0, le=10.0)] = 0.0
    cover_index: Annotated[float, Field(ge=1.0, le=3.0)] = 1.55
    cover_wedge_mrad: Annotated[float, Field(ge=-50.0, le=50.0)] = 0.0
    track_radius_mm: Annotated[float, Field(ge=0.0, le=1000.0)] = 0.0
    part_edge_mm: Annotated[float, Field(ge=0.0, le=1000.0)] = 0.0
    screen_blur_mm: Annotated[float, Field(ge=0.0, le=50.0)] = 0.8
    speckle_contrast: Fraction = 1.0
    speckle_grain_px: Annotated[float, Field(gt=0.0, le=50.0)] = 2.0
    halo_fraction: Fraction = 0.0
    lopsided_fraction: Fraction = 0.0
    ghost_fraction: Fraction = 0.0
    mark_e_per_ms: Annotated[float, Field(ge=0.0, le=1e6)] = 60.0
    smear_fraction: Fraction = 0.0
    reflection_fraction: Fraction = 0.0
    hot_pixels: Annotated[int, Field(ge=0, le=100000)] = 20
    room_light_dn_per_s: NonNegative = 20.0
    room_light_step_dn_per_s: NonNegative = 0.0
    missing_fraction: Fraction = 0.0
    wild_fraction: Fraction = 0.0
    wild_mm: Annotated[float, Field(ge=0.0, le=1000.0)] = 10.0


class TwinSettings(Settings):
    """How the twin runs: its seed, its clock, the size of every effect, its faults.

    ``person_min`` is the bench time that its person takes for what is asked of them.
    ``prepared`` frames reuse noise made beforehand, for timing alone. With
    ``repeated_noise: fresh`` a step taken again, after a kill say, sees other noise.
    """

    seed: Seed = 0
    speed: Literal["rehearsal", "real"] = "rehearsal"
    pitch_off_percent: Annotated[float, Field(ge=0.0, le=20.0)] = 1.0
    spot_reading_mm: Annotated[float, Field(gt=0.0, le=20.0)] = 0.1
    person_min: Annotated[float, Field(ge=0.0, le=600.0)] = 3.0
    frames: Literal["rendered", "prepared"] = "rendered"
    repeated_noise: Literal["same", "fresh"] = "same"
    light_e_per_ms_per_mw: Annotated[float, Field(gt=0.0, le=1e9)] = 6e4
    effects: TwinEffects = TwinEffects()
    faults: Annotated[tuple[TwinFault, ...], Field(max_length=100)] = ()
