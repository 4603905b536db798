"""What the stage, the beam and the laser do beside what they are told.

Pure functions of the truth, the sizes in the bench's ``twin.effects`` and the place
or the planned time; random parts are keyed by the step.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.air import air_index
from pitchsweep.drivers.twin.keyed_noise import keyed_generator
from pitchsweep.drivers.twin.truth import AirTruth, Truth, twin_settings

FloatArray = NDArray[np.float64]
ARCSEC_DEG = 1.0 / 3600.0
ARCSEC_RAD = float(np.radians(ARCSEC_DEG))
S_PER_H = 3600.0


@dataclass(frozen=True)
class LaserState:
    """What faults did to the laser: wavelength shift, power as a share of nominal."""

    shift_pm: float = 0.0
    power: float = 1.0


NO_FAULT = LaserState()


@dataclass(frozen=True)
class Steps:
    """Steps of one mount and one laser, as the sweep sees them.

    ``step``, ``stage_deg`` (what the stage reads) and ``planned_s`` have length S.
    ``from_above`` is true where the last motion went down, so that the backlash is on
    the other side. ``face_deg`` is how far the part is turned in its own plane.
    """

    mount: int
    mount_deg: float
    laser: str
    repeat: int
    step: NDArray[np.int64]
    stage_deg: FloatArray
    planned_s: FloatArray
    from_above: bool = False
    laser_state: LaserState = LaserState()
    face_deg: float = 0.0


def face_side(steps: Steps) -> float:
    """1, or -1 where the part is turned by half a turn in its own plane."""
    return float(np.round(np.cos(np.radians(steps.face_deg))))


def single_step(
    label: Label,
    *,
    stage_deg: float,
    mount_deg: float,
    from_above: bool = False,
    laser_state: LaserState = NO_FAULT,
) -> Steps:
    """The one step that ``label`` names, at what the stage reads."""
    return Steps(
        mount=label.mount,
        mount_deg=mount_deg,
        laser=label.laser,
        repeat=label.repeat,
        step=np.array([label.step], dtype=np.int64),
        stage_deg=np.array([stage_deg], dtype=np.float64),
        planned_s=np.array([label.planned_s], dtype=np.float64),
        from_above=from_above,
        laser_state=laser_state,
        face_deg=label.face_deg,
    )


def ghost_shift_mm(truth: Truth) -> FloatArray:
    """Where the second surface's weak copy of an order lies beside it, mm (2,)."""
    away = 2.0 * truth.phases.ghost_wedge_rad * truth.screen.distance_mm
    return away * np.array([np.cos(truth.phases.ghost), np.sin(truth.phases.ghost)])


def periodic_error_deg(truth: Truth, bench: Bench, stage_deg: FloatArray) -> FloatArray:
    """Harmonics 1-4, worm and scale error in degrees at what the stage reads (S,)."""
    effects = twin_settings(bench).effects
    angle = np.radians(stage_deg)
    total = effects.scale_ppm * 1e-6 * stage_deg
    pairs = zip(effects.stage_harmonics_arcsec, truth.phases.harmonics, strict=True)
    for k, (size, phase) in enumerate(pairs, start=1):
        total = total + size * ARCSEC_DEG * np.sin(k * angle + phase)
    worm = np.sin(effects.worm_per_turn * angle + truth.phases.worm)
    return np.asarray(total + effects.worm_arcsec * ARCSEC_DEG * worm)


def true_stage_deg(truth: Truth, bench: Bench, steps: Steps) -> FloatArray:
    """Where the stage really is at each step, degrees (S,)."""
    sd = bench.stage.u_repeatability_arcsec * ARCSEC_DEG
    noise = np.array([_step_noise(truth.seed, steps, int(step)) for step in steps.step])
    lag = twin_settings(bench).effects.backlash_deg if steps.from_above else 0.0
    errors = periodic_error_deg(truth, bench, steps.stage_deg)
    left = left_backlash_deg(bench, steps.stage_deg)
    return np.asarray(steps.stage_deg + errors + sd * noise + lag + left)


def left_backlash_deg(bench: Bench, stage_deg: FloatArray) -> FloatArray:
    """What is left of the backlash at places gone to one after the other, each from
    below (S,); nothing at a single place, whose past the stage itself knows.
    """
    effects, left = twin_settings(bench).effects, np.zeros(stage_deg.shape)
    run_up_deg = bench.stage.approach_deg
    for i, turned in enumerate(np.diff(stage_deg), start=1):
        on = run_up_deg + float(turned)
        run_up_deg = on if turned > 0.0 else bench.stage.approach_deg
        left[i] = np.exp(-run_up_deg / effects.run_up_deg)
    return np.asarray(effects.leftover_backlash_arcsec * ARCSEC_DEG * left)


def _step_noise(seed: int, steps: Steps, step: int) -> float:
    generator = keyed_generator(
        seed,
        "stage step",
        mount=steps.mount,
        laser=steps.laser,
        repeat=steps.repeat,
        step=step,
    )
    return float(generator.standard_normal())


def incidence_rad(truth: Truth, bench: Bench, steps: Steps) -> FloatArray:
    """The true angle by which the part is turned about +y, radians (S,)."""
    turned = true_stage_deg(truth, bench, steps) - steps.mount_deg
    zero = truth.mounts[steps.mount].zero_offset_deg
    return np.radians(bench.stage.direction * turned - zero)


def wobble_rad(
    truth: Truth, bench: Bench, stage_deg: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Tilt of the stage axis about x and about z, radians, twice per turn (S,).

    A once-per-turn cone would be the same as a tilted part.
    """
    size = twin_settings(bench).effects.wobble_arcsec * ARCSEC_RAD
    angle = 2.0 * np.radians(stage_deg) + truth.phases.wobble
    return size * np.cos(angle), size * np.sin(angle)


def beam_direction(truth: Truth, bench: Bench, planned_s: FloatArray) -> FloatArray:
    """Unit vectors (S, 3) along the beam; its pointing drifts with planned time."""
    effects = twin_settings(bench).effects
    drift = effects.pointing_urad_per_h * 1e-6 * planned_s / S_PER_H
    across = drift * np.cos(truth.phases.pointing)
    up = truth.beam.elevation_rad + drift * np.sin(truth.phases.pointing)
    vectors = np.stack(
        (np.sin(across) * np.cos(up), np.sin(up), -np.cos(across) * np.cos(up)),
        axis=-1,
    )
    return np.asarray(vectors)


def air_at(truth: Truth, bench: Bench, planned_s: float) -> AirTruth:
    """The air at a planned time: temperature and pressure drift."""
    effects, hours = twin_settings(bench).effects, planned_s / S_PER_H
    air = truth.air
    return AirTruth(
        air.temperature_C + effects.air_drift_K_per_h * hours,
        air.pressure_hPa + effects.pressure_drift_hPa_per_h * hours,
        air.humidity_percent,
    )


def part_warmer_K(bench: Bench, planned_s: FloatArray) -> FloatArray:
    """How much warmer the part is than it will be in the end (S,)."""
    effects = twin_settings(bench).effects
    decay = np.exp(-planned_s / S_PER_H / effects.part_settle_h)
    return np.asarray(effects.part_warm_K * decay)


def grating_period_mm(truth: Truth, bench: Bench, planned_s: FloatArray) -> FloatArray:
    """The pitch at the part's temperature of each planned time, mm (S,)."""
    warmer = part_warmer_K(bench, planned_s)
    return truth.grating_period_mm() + truth.pitch_nm * 1e-6 * (
        truth.expansion_per_K * warmer
    )


def air_wavelength_mm(
    truth: Truth, bench: Bench, laser: str, planned_s: FloatArray, shift_pm: float = 0.0
) -> FloatArray:
    """Wavelength in the true air at each planned time, mm (S,)."""
    effects = twin_settings(bench).effects
    vacuum = truth.vacuum_wavelength_nm[laser]
    at_start = truth.air_wavelength_mm(laser)
    rate = effects.wavelength_drift_pm_per_h * truth.phases.wavelength_sign
    relative = 1e-3 * (rate * planned_s / S_PER_H + shift_pm) / vacuum
    if effects.air_drift_K_per_h or effects.pressure_drift_hPa_per_h:
        relative = relative + _index_change(truth, bench, vacuum, planned_s)
    return np.asarray(at_start * (1.0 + relative))


def _index_change(
    truth: Truth, bench: Bench, vacuum_nm: float, planned_s: FloatArray
) -> FloatArray:
    """Relative change of the wavelength by the drift of the air (S,)."""

    def index(seconds: float) -> float:
        air = air_at(truth, bench, seconds)
        return air_index(
            vacuum_nm,
            temperature_c=air.temperature_C,
            pressure_hpa=air.pressure_hPa,
            humidity_percent=air.humidity_percent,
        )

    first = index(0.0)
    return np.array([first / index(float(s)) - 1.0 for s in planned_s])
