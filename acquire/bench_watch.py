"""What the sensors and the spots say about the bench at a step (pure)."""

from dataclasses import dataclass, replace

import numpy as np

from pitchsweep.acquire.acquire_errors import FaultMet
from pitchsweep.acquire.journal_rows import StepSpots
from pitchsweep.acquire.sweep_plan import Step
from pitchsweep.acquire.zero_order_watch import is_well_seen, predict_zero_order
from pitchsweep.analysis.order_visibility import visible_orders
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part
from pitchsweep.drivers.devices import BenchReading

DROPOUT_SHARE = 0.2
POWER_CHANGE = 0.1
PART_MOVED_K = 0.5
AIR_MOVED_K = 1.0
PRESSURE_MOVED_HPA = 3.0
HOLE_ROOM_MM = 1.0
STRAY = 1.25
"""Orders other than zero also climb with the groove azimuth, by less than this."""


@dataclass(frozen=True)
class Sensed:
    """What was first read, each laser's power since, and what has been said already.

    ``part``: which part of a lot the first temperature of the part is of.
    """

    first: BenchReading | None = None
    part: int = 0
    powers_mw: tuple[tuple[str, float], ...] = ()
    said: frozenset[str] = frozenset()


@dataclass(frozen=True)
class Sensing:
    """The state after a reading, with the fault it shows or the warning it gives."""

    state: Sensed
    fault: FaultMet | None = None
    warning: str = ""


def after_reading(
    state: Sensed, reading: BenchReading, *, bench: Bench, part: Part, step: Step
) -> Sensing:
    """What a step's reading means; ``reading`` was taken while the light was on.

    A fault that lasts (power, air) is told once; a dropout or feedback at every step.
    """
    first = state.first or reading
    if step.part != state.part:
        first = _of_another_part(first, reading)
    state = replace(state, first=first, part=step.part)
    fault = _power_fault(state, reading, bench, part, step)
    if reading.power_mw is not None and (fault is None or fault.kind == "laser_power"):
        powers = {**dict(state.powers_mw), step.laser: reading.power_mw}
        state = replace(state, powers_mw=tuple(powers.items()))
    if fault is None and bench.air_sensor is not None and reading.air is None:
        fault = FaultMet("air_missing", "the air sensor does not answer")
    if fault is not None:
        lasting = fault.kind in ("air_missing", "laser_power")
        if lasting and fault.kind in state.said:
            return Sensing(state)
        said = state.said | {fault.kind} if lasting else state.said
        return Sensing(replace(state, said=said), fault)
    warning = _moved(first, reading)
    if warning and warning.split()[0] not in state.said:
        said = state.said | {warning.split()[0]}
        return Sensing(replace(state, said=said), warning=warning)
    return Sensing(state)


def _of_another_part(first: BenchReading, reading: BenchReading) -> BenchReading:
    """What another part of a lot has as its temperature is no change of it."""
    if first.air is None or reading.air is None:
        return first
    part_C = reading.air.part_temperature_C
    return replace(first, air=replace(first.air, part_temperature_C=part_C))


def _power_fault(
    state: Sensed, reading: BenchReading, bench: Bench, part: Part, step: Step
) -> FaultMet | None:
    if reading.power_mw is None:
        return None
    nominal_mw = bench.lasers[step.laser].power_mw
    share = reading.power_mw / nominal_mw
    text = f"{reading.power_mw:.3g} mW at the part, {nominal_mw:g} mW expected"
    if share < DROPOUT_SHARE:
        return FaultMet("laser_dropout", text)
    # Feedback comes and goes with the angle; what stays is the laser's own power.
    before_mw = dict(state.powers_mw).get(step.laser, nominal_mw)
    jumped = abs(reading.power_mw / before_mw - 1.0) > POWER_CHANGE
    if jumped and order_back_in_hole(bench, part, step):
        back = "an order returns into the beam hole"
        return FaultMet("laser_feedback", f"{back}: {text}")
    if abs(share - 1.0) > POWER_CHANGE:
        return FaultMet("laser_power", text)
    return None


def order_back_in_hole(bench: Bench, part: Part, step: Step) -> bool:
    """Whether an order is predicted to go back into the hole the beam comes from."""
    view = visible_orders(bench, part, step.laser, step.incidence_deg)
    hole = bench.screen.hole
    apart = np.abs(view.x_mm[0] - hole.x_mm)
    reach = 0.5 * hole.diameter_mm + bench.beam.diameter_mm + HOLE_ROOM_MM
    return bool(np.any(view.leaves[0] & (np.nan_to_num(apart, nan=1e9) <= reach)))


def _moved(first: BenchReading, now: BenchReading) -> str:
    if first.air is None or now.air is None:
        return ""
    part_K = now.air.part_temperature_C - first.air.part_temperature_C
    air_K = now.air.temperature_C - first.air.temperature_C
    pressure_hPa = now.air.pressure_hPa - first.air.pressure_hPa
    if abs(part_K) > PART_MOVED_K:
        return (
            f"part temperature moved by {part_K:+.2f} K since the first step: let it "
            "settle (schedule: steady_K_per_h), or shorten the sweep"
        )
    if abs(air_K) > AIR_MOVED_K:
        return f"air temperature moved by {air_K:+.2f} K since the first step"
    if abs(pressure_hPa) > PRESSURE_MOVED_HPA:
        return f"pressure moved by {pressure_hPa:+.1f} hPa since the first step"
    return ""


def spots_fault(
    found: StepSpots,
    seen_mm: list[tuple[float, float]],
    *,
    bench: Bench,
    part: Part,
    step: Step,
) -> FaultMet | None:
    """Whether spots vanished or appeared that no order explains.

    ``seen_mm``: where any light was seen, measurable or not.
    """
    zero = predict_zero_order(bench, part, step.incidence_deg)
    if not seen_mm and is_well_seen(bench, zero):
        return FaultMet("spots_vanished", "no light on the screen at all")
    # Orders keep to a band about the zero order's height; a stray reflection need not.
    strays = [
        spot for spot in found.spots if abs(spot.y_mm) > STRAY * zero.allowance_y_mm
    ]
    if strays:
        place = f"x {strays[0].x_mm:.0f}, y {strays[0].y_mm:.0f} mm"
        return FaultMet("spots_appeared", f"a spot at {place} that can be no order")
    return None
