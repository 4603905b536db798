"""What the twin's sensors say: the truth, and the sensors' own errors."""

import numpy as np

from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.devices import AirReading, Label
from pitchsweep.drivers.twin.effects import (
    S_PER_H,
    LaserState,
    air_at,
    part_warmer_K,
    single_step,
)
from pitchsweep.drivers.twin.keyed_noise import keyed_generator
from pitchsweep.drivers.twin.optics import trace_orders
from pitchsweep.drivers.twin.screen import on_hole
from pitchsweep.drivers.twin.truth import Truth, twin_settings

HOLE_MARGIN_MM = 0.5


def read_air(truth: Truth, bench: Bench, planned_s: float) -> AirReading:
    """Air and part temperature; off by one draw each of what the bench declares."""
    air = air_at(truth, bench, planned_s)
    part_C = truth.part_temperature_C + float(
        part_warmer_K(bench, planned_array(planned_s))[0]
    )
    sensor = bench.air_sensor
    if sensor is None:
        return AirReading(
            air.temperature_C, air.pressure_hPa, air.humidity_percent, part_C
        )
    off = keyed_generator(truth.seed, "air sensor").standard_normal(4)
    return AirReading(
        temperature_C=air.temperature_C + sensor.u_temperature_C * float(off[0]),
        pressure_hPa=air.pressure_hPa + sensor.u_pressure_hPa * float(off[1]),
        humidity_percent=float(
            np.clip(air.humidity_percent + sensor.u_humidity_percent * off[2], 0, 100)
        ),
        part_temperature_C=part_C + sensor.u_part_temperature_C * float(off[3]),
    )


def planned_array(planned_s: float) -> "np.ndarray[tuple[int], np.dtype[np.float64]]":
    """One planned time as an array of length 1."""
    return np.array([planned_s], dtype=np.float64)


def read_power_mw(
    truth: Truth,
    bench: Bench,
    label: Label,
    *,
    stage_deg: float,
    mount_deg: float,
    laser_state: LaserState,
    lit: bool,
) -> float | None:
    """What the bench's power sensor says; None where none is declared."""
    if bench.power_sensor is None:
        return None
    return power_at_part_mw(
        truth,
        bench,
        label,
        stage_deg=stage_deg,
        mount_deg=mount_deg,
        laser_state=laser_state,
        lit=lit,
    )


def power_at_part_mw(
    truth: Truth,
    bench: Bench,
    label: Label,
    *,
    stage_deg: float,
    mount_deg: float,
    laser_state: LaserState,
    lit: bool,
) -> float:
    """Power at the part; 0 in the dark.

    An order that goes back into the beam hole disturbs the laser.
    """
    if not lit:
        return 0.0
    effects = twin_settings(bench).effects
    hours = label.planned_s / S_PER_H
    power = bench.lasers[label.laser].power_mw * laser_state.power
    power *= 1.0 + 0.01 * effects.laser_power_percent_per_h * hours
    if effects.feedback_percent:
        steps = single_step(label, stage_deg=stage_deg, mount_deg=mount_deg)
        landing = trace_orders(truth, bench, steps)
        back = landing.visible & on_hole(bench, landing.place_mm, HOLE_MARGIN_MM)
        if back.any():
            power *= 1.0 + 0.01 * effects.feedback_percent
    return power
