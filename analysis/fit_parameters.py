"""Which unknowns a joint fit has: name, scope, prior, and what they act on.

One table (``parameter_set``) decides it. A parameter acts on one local quantity of the
spots (bench_geometry.Local) with a coefficient a spot, or on the relative wavelength,
the relative pitch, or one term of the screen map. The angle error of every step is not
in the table: the solver eliminates it.
"""

from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from pitchsweep.analysis.air_index import AirState, air_index
from pitchsweep.analysis.bench_geometry import N_LOCAL, Local
from pitchsweep.analysis.records import FloatArray, IntArray, OrderTable
from pitchsweep.analysis.screen_map import TERMS
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part

ARCSEC = np.pi / 648000.0


class Kind(StrEnum):
    """What a parameter acts on."""

    LOCAL = "local"
    PITCH = "pitch"
    WAVELENGTH = "wavelength"
    MAP_X = "map-x"
    MAP_Y = "map-y"


class Source(StrEnum):
    """Budget source that a prior belongs to."""

    PITCH = "pitch"
    WAVELENGTH = "laser wavelength"
    SCREEN = "screen distance, pose and offset"
    MAP = "screen map"
    BEAM = "beam height, offset and elevation"
    SEAT = "seat of the part (zero, azimuth, tilt, surface)"
    COVER = "cover through which the part is read"
    HARMONICS = "stage errors, 1 to 4 per turn"
    STEPS = "stage repeatability"


@dataclass(frozen=True)
class Parameter:
    """One unknown. ``u_prior`` infinite: nothing is known of it beforehand.

    ``column`` and ``coefficient`` (N,) serve kind LOCAL; ``column`` is the term for
    the map kinds; ``coefficient`` is 0 or 1 for wavelength (its laser's spots).
    ``shown_scale`` turns the internal unit into ``unit``.
    """

    name: str
    scope: str
    source: Source
    kind: Kind
    u_prior: float
    unit: str
    shown_scale: float
    column: int = 0
    coefficient: FloatArray | None = None


@dataclass(frozen=True)
class FitProblem:
    """Everything the solver needs besides the orders; made by ``fit_problem``.

    ``base`` (N, 15) local quantities with every parameter at its prior mean (column
    Q holds lambda/d for the nominal pitch, without the order). ``step_group`` (N,)
    numbers the steps; ``whitener`` (N, 2, 2) turns residuals into independent
    unit-variance ones.
    """

    table: OrderTable
    parameters: tuple[Parameter, ...]
    base: FloatArray
    step_group: IntArray
    n_steps: int
    u_step_rad: float
    direction: int
    whitener: FloatArray
    half_width_mm: float
    half_height_mm: float
    nominal_pitch_nm: float


def fit_problem(
    table: OrderTable, bench: Bench, part: Part, air: AirState
) -> FitProblem:
    """The joint fit of one part's spots on one bench."""
    lam = np.array(
        [
            vacuum_nm(bench, name) / air_index(vacuum_nm(bench, name), air)
            for name in table.laser_names
        ]
    )
    base = np.zeros((len(table), N_LOCAL))
    base[:, Local.Q] = lam[table.laser] / part.nominal_pitch_nm
    base[:, Local.INCIDENCE] = np.deg2rad(
        bench.stage.direction * wrapped_deg(table.stage_deg - table.mount_deg)
    )
    base[:, Local.DISTANCE] = bench.screen.distance_mm
    base[:, Local.COVER] = part.cover_mm
    keys = np.stack([table.step, table.laser, np.round(table.mount_deg * 1e6)], axis=1)
    _, group = np.unique(keys, axis=0, return_inverse=True)
    group = group.reshape(-1).astype(np.int64)
    return FitProblem(
        table=table,
        parameters=parameter_set(table, bench, part),
        base=base,
        step_group=group,
        n_steps=int(group.max(initial=-1)) + 1,
        u_step_rad=bench.stage.u_repeatability_arcsec * ARCSEC,
        direction=bench.stage.direction,
        whitener=_whitener(table),
        half_width_mm=bench.screen.width_mm / 2.0,
        half_height_mm=bench.screen.height_mm / 2.0,
        nominal_pitch_nm=part.nominal_pitch_nm,
    )


def vacuum_nm(bench: Bench, laser: str) -> float:
    """Vacuum wavelength of a laser of the bench, nm."""
    return bench.lasers[laser].vacuum_wavelength_nm


def wrapped_deg(angle_deg: FloatArray) -> FloatArray:
    """Angles brought into -180 to 180 degrees."""
    return (angle_deg + 180.0) % 360.0 - 180.0


def parameter_set(table: OrderTable, bench: Bench, part: Part) -> tuple[Parameter, ...]:
    """The table of unknowns: scope and prior of each, for these spots."""
    everything = np.ones(len(table))
    unknowns = [Parameter("pitch", "part", Source.PITCH, Kind.PITCH, np.inf, "1", 1.0)]
    for index, name in enumerate(table.laser_names):
        laser = bench.lasers[name]
        unknowns.append(
            Parameter(
                f"wavelength of {name}",
                "laser",
                Source.WAVELENGTH,
                Kind.WAVELENGTH,
                laser.u_wavelength_nm / laser.vacuum_wavelength_nm,
                "nm",
                laser.vacuum_wavelength_nm,
                coefficient=(table.laser == index).astype(np.float64),
            )
        )
    screen, beam = bench.screen, bench.beam
    tilt = screen.u_tilt_mrad * 1e-3
    pose, line = Source.SCREEN, Source.BEAM
    for label, column, u, unit, scale, source in (
        ("screen distance", Local.DISTANCE, screen.u_distance_mm, "mm", 1.0, pose),
        ("screen tilt about x", Local.SCREEN_TX, tilt, "mrad", 1e3, pose),
        ("screen tilt about y", Local.SCREEN_TY, tilt, "mrad", 1e3, pose),
        ("screen roll about z", Local.SCREEN_TZ, tilt, "mrad", 1e3, pose),
        ("screen offset x", Local.SCREEN_X, screen.u_offset_mm, "mm", 1.0, pose),
        ("screen offset y", Local.SCREEN_Y, screen.u_offset_mm, "mm", 1.0, pose),
        (
            "beam elevation",
            Local.ELEVATION,
            beam.u_elevation_mrad * 1e-3,
            "mrad",
            1e3,
            line,
        ),
        ("beam offset", Local.BEAM_X, beam.u_offset_mm, "mm", 1.0, line),
        ("beam height", Local.BEAM_Y, beam.u_height_mm, "mm", 1.0, line),
    ):
        unknowns.append(
            Parameter(
                label, "bench", source, Kind.LOCAL, u, unit, scale, column, everything
            )
        )
    cover = Parameter(
        "cover thickness",
        "part",
        Source.COVER,
        Kind.LOCAL,
        part.u_cover_mm,
        "mm",
        1.0,
        Local.COVER,
        everything,
    )
    unknowns.append(cover)
    unknowns += _seat_parameters(table, bench, part)
    unknowns += _harmonics(table, bench)
    u_term = screen.u_map_mm / np.sqrt(TERMS)
    for kind, axis in ((Kind.MAP_X, "x"), (Kind.MAP_Y, "y")):
        for term in range(TERMS):
            name = f"screen map {axis} term {term}"
            unknowns.append(
                Parameter(name, "bench", Source.MAP, kind, u_term, "mm", 1.0, term)
            )
    return tuple(unknowns)


def _seat_parameters(table: OrderTable, bench: Bench, part: Part) -> list[Parameter]:
    """How the part sits, one set a mount."""
    unknowns = []
    for mount in np.unique(table.mount_deg):
        here = (table.mount_deg == mount).astype(np.float64)
        for label, column, u, unit, scale in (
            (
                "zero offset",
                Local.INCIDENCE,
                np.deg2rad(bench.stage.u_zero_deg),
                "deg",
                np.rad2deg(1.0),
            ),
            (
                "groove azimuth",
                Local.AZIMUTH,
                part.u_groove_azimuth_mrad * 1e-3,
                "mrad",
                1e3,
            ),
            ("part tilt", Local.TILT, part.u_tilt_mrad * 1e-3, "mrad", 1e3),
            ("surface offset", Local.SURFACE, part.u_surface_offset_mm, "mm", 1.0),
        ):
            # The incidence is the stage angle minus the zero offset.
            sign = -1.0 if column == Local.INCIDENCE else 1.0
            unknowns.append(
                Parameter(
                    f"{label}, mount {mount:g} deg",
                    "mount",
                    Source.SEAT,
                    Kind.LOCAL,
                    float(u),
                    unit,
                    float(scale),
                    column,
                    sign * here,
                )
            )
    return unknowns


def _harmonics(table: OrderTable, bench: Bench) -> list[Parameter]:
    """Stage errors once to four times a turn of the stage *reading*."""
    unknowns = []
    reading = np.deg2rad(table.stage_deg)
    for k, size in enumerate(bench.stage.u_harmonics_arcsec, start=1):
        for label, wave in (("sine", np.sin), ("cosine", np.cos)):
            unknowns.append(
                Parameter(
                    f"stage error, {k} per turn, {label}",
                    "bench",
                    Source.HARMONICS,
                    Kind.LOCAL,
                    # An amplitude of given rms size in unknown phase.
                    size * ARCSEC / np.sqrt(2.0),
                    "arcsec",
                    1.0 / ARCSEC,
                    Local.INCIDENCE,
                    bench.stage.direction * wave(k * reading),
                )
            )
    return unknowns


def _whitener(table: OrderTable) -> FloatArray:
    """Inverse Cholesky factor (N, 2, 2) of each spot's covariance."""
    ux, uy = table.ux_mm, table.uy_mm
    limit = 0.999 * ux * uy
    c = np.clip(table.cxy_mm2, -limit, limit)
    low = np.zeros((len(table), 2, 2))
    low[:, 0, 0] = 1.0 / ux
    down = np.sqrt(uy**2 - (c / ux) ** 2)
    low[:, 1, 1] = 1.0 / down
    low[:, 1, 0] = -c / (ux**2 * down)
    return low
