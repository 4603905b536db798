"""Benches, parts and truths for tests of the twin's rays and doors."""

from dataclasses import replace
from typing import Any

import numpy as np

from pitchsweep.configs.bench_model import Beam, Bench, Camera, Laser, Screen, Stage
from pitchsweep.configs.part_model import Material, Part
from pitchsweep.configs.twin_model import TwinEffects, TwinSettings
from pitchsweep.drivers.twin.effects import Steps
from pitchsweep.drivers.twin.truth import (
    BeamTruth,
    MountTruth,
    ScreenTruth,
    Truth,
    draw_truth,
)

QUIET: dict[str, Any] = {
    "stage_harmonics_arcsec": (0.0, 0.0, 0.0, 0.0),
    "backlash_deg": 0.0,
    "map_error_mm": 0.0,
    "hot_pixels": 0,
    "room_light_dn_per_s": 0.0,
    "speckle_contrast": 0.0,
}
WAVELENGTHS_NM = {"red": 635.0, "green": 532.2, "violet": 405.0}


def bench(direction: int = 1, bits: int = 12, **effects: Any) -> Bench:
    """A bench with every effect off but those named."""
    return Bench(
        bench="test-bench",
        screen=Screen(distance_mm=250.0, width_mm=400.0, height_mm=100.0),
        beam=Beam(),
        stage=Stage(direction=-1 if direction < 0 else 1, u_repeatability_arcsec=1e-9),
        camera=Camera(
            width_px=1280,
            height_px=400,
            bits=bits,  # type: ignore[arg-type]
            mm_per_px=0.3125,
            centre_column_px=639.5,
            centre_row_px=199.5,
        ),
        lasers={
            name: Laser(vacuum_wavelength_nm=nm, u_wavelength_nm=1e-3, power_mw=0.9)
            for name, nm in WAVELENGTHS_NM.items()
        },
        twin=TwinSettings(
            spot_reading_mm=1e-9, effects=TwinEffects(**{**QUIET, **effects})
        ),
    )


def with_reading(bench_: Bench, spot_reading_mm: float) -> Bench:
    """The same bench with another reading error at the spots door."""
    assert bench_.twin is not None
    twin = bench_.twin.model_copy(update={"spot_reading_mm": spot_reading_mm})
    return bench_.model_copy(update={"twin": twin})


def part(pitch_nm: float = 1600.0) -> Part:
    """A part of nickel, nothing certified."""
    return Part(
        part="test-part",
        serial="1",
        lot="a",
        side="front",
        place="centre",
        nominal_pitch_nm=pitch_nm,
        material=Material(
            name="nickel", expansion_per_K=13.4e-6, u_expansion_per_K=1e-6
        ),
    )


def ideal(bench_: Bench, part_: Part) -> Truth:
    """A truth in which everything sits where it is said to sit."""
    zeros = (0.0,) * 18
    return replace(
        draw_truth(bench_, part_, 0),
        pitch_nm=part_.nominal_pitch_nm,
        part_temperature_C=20.0,
        screen=ScreenTruth(
            bench_.screen.distance_mm, 0.0, 0.0, 0.0, 0.0, 0.0, zeros, zeros
        ),
        beam=BeamTruth(0.0, 0.0, 0.0),
        mounts=(MountTruth(0.0, 0.0, 0.0, 0.0),) * 8,
    )


def steps(
    stage_deg: float | list[float],
    laser: str = "red",
    *,
    mount: int = 0,
    mount_deg: float = 0.0,
    repeat: int = 0,
    hours: float = 0.0,
    from_above: bool = False,
) -> Steps:
    """Steps at the given stage readings, numbered from 0, all planned at ``hours``."""
    angles = np.atleast_1d(np.asarray(stage_deg, dtype=np.float64))
    return Steps(
        mount=mount,
        mount_deg=mount_deg,
        laser=laser,
        repeat=repeat,
        step=np.arange(angles.size),
        stage_deg=angles,
        planned_s=np.full(angles.shape, 3600.0 * hours),
        from_above=from_above,
    )
