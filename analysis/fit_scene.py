"""What the table of unknowns is made for, and how its rows are written."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.air_index import AirState
from pitchsweep.analysis.fit_parameters import Kind, Parameter, Scope, Source
from pitchsweep.analysis.part_ray import Local
from pitchsweep.analysis.records import FloatArray, IntArray, OrderTable
from pitchsweep.configs.bench_model import Beam, Bench
from pitchsweep.configs.part_model import Part

REFERENCE_C = 20.0
MM = ("mm", 1.0)
MRAD = ("mrad", 1e3)
DEG = ("deg", float(np.rad2deg(1.0)))


@dataclass(frozen=True)
class WavelengthJump:
    """A laser's wavelength is another from ``since`` on, in one run.

    ``laser`` and ``run`` index the table's; ``since`` counts as the table's time.
    """

    laser: int
    run: int
    since: float


@dataclass(frozen=True)
class FitScene:
    """What the table of unknowns is made for: spots, bench, parts, air.

    ``part`` and ``run`` (N,) index the spots' parts and runs, ``time`` (N,) is when
    in its run each was seen, ``elapsed`` (N,) runs from -1 to 1 over each run.
    ``jumps`` of wavelengths are each left unknown in size.
    """

    table: OrderTable
    bench: Bench
    parts: tuple[Part, ...]
    air: AirState
    part: IntArray
    run: IntArray
    time: FloatArray
    elapsed: FloatArray
    jumps: tuple[WavelengthJump, ...] = ()

    @property
    def everything(self) -> FloatArray:
        """Coefficient of a parameter that every spot feels."""
        return np.ones(len(self.table))

    @property
    def face_deg(self) -> FloatArray:
        """How far the part was turned in its own plane at each spot."""
        face = self.table.face_deg
        return np.zeros(len(self.table)) if face is None else face


def fit_scene(
    table: OrderTable,
    bench: Bench,
    parts: Sequence[Part],
    air: AirState,
    jumps: Sequence[WavelengthJump] = (),
) -> FitScene:
    """The scene of a table; time is the steps' order where it was not noted."""
    none = np.zeros(len(table), dtype=np.int64)
    run = table.run if table.run is not None else none
    time = table.time_s if table.time_s is not None else table.step.astype(np.float64)
    elapsed = np.zeros(len(table))
    for r in np.unique(run):
        here = run == r
        low, high = float(np.min(time[here])), float(np.max(time[here]))
        if high > low:
            elapsed[here] = 2.0 * (time[here] - low) / (high - low) - 1.0
    return FitScene(
        table=table,
        bench=bench,
        parts=tuple(parts),
        air=air,
        part=table.part if table.part is not None else none,
        run=run,
        time=time,
        elapsed=elapsed,
        jumps=tuple(jumps),
    )


def base_pitch_nm(part: Part) -> float:
    """The pitch at 20 deg C that a part's pitch is counted from."""
    return part.nominal_pitch_nm if part.certified is None else part.certified.pitch_nm


def strain(part: Part) -> float:
    """Thermal strain of the part against 20 deg C (ISO 1, from memory)."""
    material = part.material
    return material.expansion_per_K * (material.temperature_C - REFERENCE_C)


def track_per_mm(part: Part) -> float:
    """Curvature of the grooves where the beam meets them; 0 where they are straight."""
    return 0.0 if part.track_radius_mm is None else 1.0 / part.track_radius_mm


def counted_rms_mm(part: Part, beam: Beam) -> float:
    """Rms radius of the beam where its width counts, on curved grooves; else 0.

    ``beam.diameter_mm`` is the 1/e^2 diameter, four rms radii.
    """
    return 0.0 if part.track_radius_mm is None else beam.diameter_mm / 4.0


def name_of(scene: FitScene, index: int, name: str) -> str:
    """A name, with its part where there are several."""
    several = len(scene.parts) > 1
    return f"{name}, part {scene.parts[index].part}" if several else name


def spots_on(scene: FitScene, index: int) -> FloatArray:
    return np.asarray(scene.part == index, dtype=np.float64)


def log_ratio(
    name: str,
    scope: Scope,
    source: Source,
    u: float,
    coefficient: FloatArray,
    unit: str = "1",
    shown_scale: float = 1.0,
    mean: float = 0.0,
) -> Parameter:
    return Parameter(
        name,
        scope,
        source,
        Kind.LOG_RATIO,
        u,
        unit,
        shown_scale,
        coefficient,
        mean=mean,
    )


def local_row(
    name: str,
    scope: Scope,
    source: Source,
    column: Local,
    u: float,
    shown: tuple[str, float],
    coefficient: FloatArray,
    mean: float = 0.0,
) -> Parameter:
    unit, scale = shown
    return Parameter(
        name, scope, source, Kind.LOCAL, u, unit, scale, coefficient, column, mean
    )
