"""Everything that is true of one simulated bench with one part on it.

A truth is drawn from the priors of the bench and the part; the seed alone decides.
``pitch_nm`` is the pitch at 20 C. The grating that the light meets has
``pitch_nm * (1 + expansion_per_K * (part_temperature_C - 20))``.
"""

from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from pitchsweep.configs.bench_model import Bench, Laser
from pitchsweep.configs.part_model import Part
from pitchsweep.configs.twin_model import TwinSettings
from pitchsweep.drivers.twin.air import air_index
from pitchsweep.drivers.twin.keyed_noise import keyed_generator

MOUNTS_DRAWN = 8
MAP_DEGREES = (5, 2)
MAP_TERMS = (MAP_DEGREES[0] + 1) * (MAP_DEGREES[1] + 1)
REFERENCE_C = 20.0


@dataclass(frozen=True)
class MountTruth:
    """How the part really sits in one mount."""

    zero_offset_deg: float
    groove_azimuth_rad: float
    part_tilt_rad: float
    surface_offset_mm: float


@dataclass(frozen=True)
class ScreenTruth:
    """Where the screen really is, and how its nominal map errs.

    The screen's axes are ``R_z(roll) R_y(tilt_y) R_x(tilt_x)``; its origin lies on +z
    at ``distance_mm`` and reads (-offset_x_mm, -offset_y_mm). ``map_x``/``map_y`` are
    coefficients of T_i(x / half width) T_j(y / half height), i slow, j fast, in mm.
    """

    distance_mm: float
    tilt_x_rad: float
    tilt_y_rad: float
    roll_rad: float
    offset_x_mm: float
    offset_y_mm: float
    map_x: tuple[float, ...]
    map_y: tuple[float, ...]


@dataclass(frozen=True)
class PartTruth:
    """What is true of the part however it sits.

    ``wedge_across_rad`` and ``wedge_along_rad`` lean the outer face of the cover
    towards the grating vector and along the grooves; ``track_radius_mm`` is 0 where
    the grooves are straight.
    """

    cover_mm: float = 0.0
    cover_index: float = 1.55
    wedge_across_rad: float = 0.0
    wedge_along_rad: float = 0.0
    track_radius_mm: float = 0.0


@dataclass(frozen=True)
class BeamTruth:
    """The line of the beam near the part."""

    elevation_rad: float
    offset_mm: float
    height_mm: float


@dataclass(frozen=True)
class AirTruth:
    """The air that the light goes through."""

    temperature_C: float
    pressure_hPa: float
    humidity_percent: float


@dataclass(frozen=True)
class Phases:
    """Random phases, directions and places of the effects; sizes are settings.

    ``harmonics`` holds one phase per harmonic; ``camera``, ``pointing`` and ``ghost``
    are directions; ``wavelength_sign`` is 1 or -1. All angles in radians.
    """

    harmonics: tuple[float, float, float, float]
    worm: float
    wobble: float
    camera: float
    pointing: float
    ghost: float
    ghost_wedge_rad: float
    wavelength_sign: float
    room_step_s: float
    relief: float
    relief_lean: float


@dataclass(frozen=True)
class Truth:
    """Every truth of one bench, part and seed."""

    seed: int
    pitch_nm: float
    expansion_per_K: float
    part_temperature_C: float
    vacuum_wavelength_nm: dict[str, float]
    screen: ScreenTruth
    beam: BeamTruth
    air: AirTruth
    phases: Phases
    mounts: tuple[MountTruth, ...]
    part: PartTruth = PartTruth()

    def grating_period_mm(self) -> float:
        """The pitch at the part's own temperature, in mm."""
        warmer = self.part_temperature_C - REFERENCE_C
        return self.pitch_nm * 1e-6 * (1.0 + self.expansion_per_K * warmer)

    def air_wavelength_mm(self, laser: str, *, shift_pm: float = 0.0) -> float:
        """Wavelength of ``laser`` in the true air, in mm; KeyError if unknown."""
        vacuum = self.vacuum_wavelength_nm[laser] + 1e-3 * shift_pm
        index = air_index(
            vacuum,
            temperature_c=self.air.temperature_C,
            pressure_hpa=self.air.pressure_hPa,
            humidity_percent=self.air.humidity_percent,
        )
        return vacuum * 1e-6 / index

    def to_json(self) -> dict[str, Any]:
        """Plain values for ``twin_truth.json``; ``pitch_nm`` is at 20 C."""
        return asdict(self)


def twin_settings(bench: Bench) -> TwinSettings:
    """The twin's settings of ``bench``; ValueError where it has real ports."""
    if bench.twin is None:
        raise ValueError(f"bench '{bench.bench}' has ports, not a twin")
    return bench.twin


def draw_truth(
    bench: Bench,
    part: Part,
    seed: int,
    *,
    own: str = "",
    mounts: int = MOUNTS_DRAWN,
) -> Truth:
    """A truth drawn from the priors of ``bench`` and ``part`` with ``seed`` alone.

    ``own`` (any text) sets what belongs to this part apart from another part's on the
    same bench; ``mounts`` is how many mounts are drawn.
    """
    settings = twin_settings(bench)
    material = part.material
    return Truth(
        seed=seed,
        pitch_nm=_draw_pitch_nm(bench, part, seed, own),
        expansion_per_K=_normal(
            seed,
            f"expansion{own}",
            material.expansion_per_K,
            material.u_expansion_per_K,
        ),
        part_temperature_C=_normal(
            seed,
            f"part temperature{own}",
            material.temperature_C,
            material.u_temperature_C,
        ),
        vacuum_wavelength_nm={
            name: _draw_wavelength(seed, name, laser)
            for name, laser in bench.lasers.items()
        },
        screen=_draw_screen(bench, seed, settings.effects.map_error_mm),
        beam=_draw_beam(bench, seed),
        air=_draw_air(bench, seed),
        phases=_draw_phases(seed),
        mounts=tuple(_draw_mount(bench, part, seed, i) for i in range(mounts)),
        part=_draw_part(bench, part, seed, own),
    )


def _draw_pitch_nm(bench: Bench, part: Part, seed: int, own: str) -> float:
    """A certified pitch is off by what its certificate says, another by the bench's."""
    if part.certified is not None:
        certified = part.certified
        quantity = f"certified pitch{own}"
        return _normal(seed, quantity, certified.pitch_nm, certified.u_pitch_nm)
    off = twin_settings(bench).pitch_off_percent / 100.0
    stretch = keyed_generator(seed, f"pitch{own}").uniform(-off, off)
    return part.nominal_pitch_nm * (1.0 + float(stretch))


def _normal(seed: int, quantity: str, mean: float, sd: float, mount: int = 0) -> float:
    noise = keyed_generator(seed, quantity, mount=mount).standard_normal()
    return mean + sd * float(noise)


def _angle(seed: int, quantity: str) -> float:
    return float(keyed_generator(seed, quantity).uniform(0.0, 2.0 * np.pi))


def _draw_wavelength(seed: int, name: str, laser: Laser) -> float:
    noise = keyed_generator(seed, "wavelength", laser=name).standard_normal()
    return laser.vacuum_wavelength_nm + laser.u_wavelength_nm * float(noise)


def _draw_screen(bench: Bench, seed: int, map_error_mm: float) -> ScreenTruth:
    screen = bench.screen
    tilt = screen.u_tilt_mrad * 1e-3
    each = map_error_mm / float(np.sqrt(MAP_TERMS))
    return ScreenTruth(
        distance_mm=_normal(
            seed, "screen distance", screen.distance_mm, screen.u_distance_mm
        ),
        tilt_x_rad=_normal(seed, "screen tilt x", 0.0, tilt),
        tilt_y_rad=_normal(seed, "screen tilt y", 0.0, tilt),
        roll_rad=_normal(seed, "screen roll", 0.0, tilt / 3.0),
        offset_x_mm=_normal(seed, "screen offset x", 0.0, screen.u_offset_mm),
        offset_y_mm=_normal(seed, "screen offset y", 0.0, screen.u_offset_mm),
        map_x=_draw_map(seed, "map x", each),
        map_y=_draw_map(seed, "map y", each),
    )


def _draw_map(seed: int, quantity: str, each_mm: float) -> tuple[float, ...]:
    noise = keyed_generator(seed, quantity).standard_normal(MAP_TERMS)
    return tuple(float(each_mm * value) for value in noise)


def _draw_beam(bench: Bench, seed: int) -> BeamTruth:
    beam = bench.beam
    return BeamTruth(
        elevation_rad=_normal(seed, "elevation", 0.0, beam.u_elevation_mrad * 1e-3),
        offset_mm=_normal(seed, "beam offset", 0.0, beam.u_offset_mm),
        height_mm=_normal(seed, "beam height", 0.0, beam.u_height_mm),
    )


def _draw_air(bench: Bench, seed: int) -> AirTruth:
    air = bench.air
    humidity = _normal(seed, "humidity", air.humidity_percent, air.u_humidity_percent)
    return AirTruth(
        temperature_C=_normal(
            seed, "air temperature", air.temperature_C, air.u_temperature_C
        ),
        pressure_hPa=_normal(seed, "pressure", air.pressure_hPa, air.u_pressure_hPa),
        humidity_percent=min(100.0, max(0.0, humidity)),
    )


def _draw_part(bench: Bench, part: Part, seed: int, own: str = "") -> PartTruth:
    effects = twin_settings(bench).effects
    mm, index, wedges = 0.0, effects.cover_index, (0.0, 0.0)
    if part.cover_mm > 0.0:
        mm = abs(_normal(seed, f"cover{own}", part.cover_mm, part.u_cover_mm))
        index = _normal(seed, f"cover index{own}", part.cover_index, part.u_cover_index)
        wedge = part.u_cover_wedge_mrad * 1e-3
        wedges = (
            _normal(seed, f"cover wedge across{own}", 0.0, wedge),
            _normal(seed, f"cover wedge along{own}", 0.0, wedge),
        )
    if effects.cover_thickness_mm > 0.0:
        mm, index = effects.cover_thickness_mm, effects.cover_index
    radius = effects.track_radius_mm
    if radius == 0.0 and part.track_radius_mm is not None:
        u_mm = part.u_track_radius_mm
        radius = abs(_normal(seed, f"track radius{own}", part.track_radius_mm, u_mm))
    return PartTruth(
        cover_mm=mm,
        cover_index=index,
        wedge_across_rad=wedges[0] + effects.cover_wedge_mrad * 1e-3,
        wedge_along_rad=wedges[1],
        track_radius_mm=radius,
    )


def _draw_mount(bench: Bench, part: Part, seed: int, mount: int) -> MountTruth:
    azimuth = part.u_groove_azimuth_mrad * 1e-3
    tilt = part.u_tilt_mrad * 1e-3
    offset = part.u_surface_offset_mm
    return MountTruth(
        zero_offset_deg=_normal(seed, "zero", 0.0, bench.stage.u_zero_deg, mount),
        groove_azimuth_rad=_normal(seed, "groove azimuth", 0.0, azimuth, mount),
        part_tilt_rad=_normal(seed, "part tilt", 0.0, tilt, mount),
        surface_offset_mm=_normal(seed, "surface offset", 0.0, offset, mount),
    )


def _draw_phases(seed: int) -> Phases:
    sign = keyed_generator(seed, "wavelength drift sign").integers(0, 2)
    return Phases(
        harmonics=(
            _angle(seed, "harmonic 1"),
            _angle(seed, "harmonic 2"),
            _angle(seed, "harmonic 3"),
            _angle(seed, "harmonic 4"),
        ),
        worm=_angle(seed, "worm"),
        wobble=_angle(seed, "wobble"),
        camera=_angle(seed, "camera drift"),
        pointing=_angle(seed, "pointing drift"),
        ghost=_angle(seed, "ghost"),
        ghost_wedge_rad=float(keyed_generator(seed, "wedge").uniform(0.008, 0.02)),
        wavelength_sign=float(2 * sign - 1),
        room_step_s=float(keyed_generator(seed, "room step").uniform(20.0, 200.0)),
        relief=float(keyed_generator(seed, "relief").uniform(0.7, 1.1)),
        relief_lean=float(keyed_generator(seed, "lean").uniform(-0.2, 0.2)),
    )
