"""What sensors said during a sweep, taken into the fit in place of the files (pure)."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from pitchsweep.acquire.fit_input import FitInput, MeasuredState
from pitchsweep.acquire.journal_rows import ReadingRow
from pitchsweep.analysis.measure import measure_pitch
from pitchsweep.analysis.records import PitchResult
from pitchsweep.configs.bench_model import Air, Bench
from pitchsweep.configs.part_model import Part

SWITCHED = (
    "the laser itself is switched and starts cold at every step: its wavelength is"
    " taken as known to {:g} nm less well (emission.u_switched_nm); a laser kept warm"
    " behind a head shutter is not"
)


@dataclass(frozen=True)
class Surroundings:
    """Bench, part and references with the measured air and temperatures in them."""

    bench: Bench
    part: Part
    references: tuple[Part, ...]


def state_of(rows: Iterable[ReadingRow]) -> MeasuredState | None:
    """The mean of what was read at the steps; None where nothing was."""
    known = [row for row in rows if row.air_C is not None]
    if not known:
        return None
    return MeasuredState(
        air_C=_mean([row.air_C for row in known]),
        pressure_hPa=_mean([row.pressure_hPa for row in known]),
        humidity_percent=_mean([row.humidity_percent for row in known]),
        part_C=_mean([row.part_C for row in known]),
        spread_part_K=_spread([row.part_C for row in known]),
    )


def surroundings(given: FitInput) -> Surroundings:
    """What the fit works with: the files' values where nothing was measured.

    A laser that is itself switched starts cold: its wavelength is known less well.
    """
    states = given.measured or (None,) * (1 + len(given.references))
    parts = (given.part, *given.references)
    seated = tuple(
        _with_temperature(part, given.bench, state)
        for part, state in zip(parts, states, strict=True)
    )
    known = [state for state in states if state is not None]
    bench = _with_switched_lasers(_with_air(given.bench, known))
    return Surroundings(bench, seated[0], seated[1:])


def measure(
    given: FitInput,
    *,
    trust_nominal: bool = True,
    generator: np.random.Generator | None = None,
    advise: bool = True,
) -> PitchResult:
    """The fit of ``given`` with what was measured; options as in ``measure_pitch``.

    Raises InputRefused, NoResult.
    """
    around = surroundings(given)
    found = measure_pitch(
        given.table,
        bench=around.bench,
        part=around.part,
        references=around.references,
        coverage=given.coverage,
        rejected=given.rejected,
        trust_nominal=trust_nominal,
        generator=generator,
        advise=advise,
    )
    if given.bench.emission.switches != "laser":
        return found
    said = SWITCHED.format(given.bench.emission.u_switched_nm)
    return replace(found, warnings=(*found.warnings, said))


def _with_switched_lasers(bench: Bench) -> Bench:
    if bench.emission.switches != "laser":
        return bench
    u_nm = bench.emission.u_switched_nm
    lasers = {
        name: laser.model_copy(
            update={"u_wavelength_nm": float(np.hypot(laser.u_wavelength_nm, u_nm))}
        )
        for name, laser in bench.lasers.items()
    }
    return bench.model_copy(update={"lasers": lasers})


def _with_air(bench: Bench, known: Sequence[MeasuredState]) -> Bench:
    sensor = bench.air_sensor
    if sensor is None or not known:
        return bench
    measured = Air(
        temperature_C=_mean([state.air_C for state in known]),
        u_temperature_C=sensor.u_temperature_C,
        pressure_hPa=_mean([state.pressure_hPa for state in known]),
        u_pressure_hPa=sensor.u_pressure_hPa,
        humidity_percent=_mean([state.humidity_percent for state in known]),
        u_humidity_percent=sensor.u_humidity_percent,
        co2_ppm=bench.air.co2_ppm,
    )
    return bench.model_copy(update={"air": measured})


def _with_temperature(part: Part, bench: Bench, state: MeasuredState | None) -> Part:
    sensor = bench.air_sensor
    if sensor is None or state is None:
        return part
    # The fit takes one temperature: what it moved by during the sweep widens it.
    u_K = (sensor.u_part_temperature_C**2 + state.spread_part_K**2) ** 0.5
    material = part.material.model_copy(
        update={"temperature_C": state.part_C, "u_temperature_C": u_K}
    )
    return part.model_copy(update={"material": material})


def _mean(values: Sequence[float | None]) -> float:
    known = [value for value in values if value is not None]
    return sum(known) / len(known)


def _spread(values: Sequence[float | None]) -> float:
    mean = _mean(values)
    known = [value for value in values if value is not None]
    return float((sum((value - mean) ** 2 for value in known) / len(known)) ** 0.5)
