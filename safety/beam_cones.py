"""Where the orders of a part may go: cones of light in degrees. Pure.

At incidence a the beam has the component sin a along the part's face, in the plane of
the turn; order m adds m lambda/d along the grating vector, whose direction in the face
is *free* (a part may sit a quarter turn wrong). What is left of the unit vector stands
on the face: towards the laser for a reflected order, away from it for one that goes
through. Each cone takes in everything that is only known to three standard
uncertainties, and the spacing of the sampled groove directions.
"""

from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.records import FloatArray
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part

SIGMAS = 3.0
GROOVE_STEP_DEG = 2.0
AIR_FRACTION = 3e-4
GHOST_WEDGE_DEG = 1.0
GHOST_INDEX = 1.6
"""A ghost turns back once inside a part whose faces are this far from parallel."""


@dataclass(frozen=True)
class Spread:
    """What widens the cones of one laser: parts of a unit vector, and radians.

    ``along_face`` of the beam's component along the face, ``per_order`` of lambda/d,
    ``turn_rad`` of the face itself.
    """

    along_face: float
    per_order: float
    turn_rad: float


@dataclass(frozen=True)
class Cones:
    """Cones (K, M, G): K incidences, orders 0 to M - 1, G directions of the grating.

    ``leaves`` says where an order can leave at all; the rest is meaningless there.
    Orders -m have the cones of +m, half a turn of the grating vector away.
    """

    azimuth_deg: FloatArray
    elevation_deg: FloatArray
    half_deg: FloatArray
    leaves: "np.ndarray[tuple[int, ...], np.dtype[np.bool_]]"


def spread_of(bench: Bench, part: Part, laser: str) -> Spread:
    """How well the directions of ``laser``'s orders are known, three sigma."""
    beam, stage, light = bench.beam, bench.stage, bench.lasers[laser]
    stage_deg = (
        stage.angle_tolerance_deg
        + SIGMAS * stage.u_zero_deg
        + SIGMAS * sum(stage.u_harmonics_arcsec) / 3600.0
    )
    turn_rad = np.radians(stage_deg) + SIGMAS * part.u_tilt_mrad * 1e-3
    return Spread(
        along_face=float(turn_rad + SIGMAS * beam.u_elevation_mrad * 1e-3),
        per_order=part.nominal_within_percent * 1e-2
        + SIGMAS * light.u_wavelength_nm / light.vacuum_wavelength_nm
        + AIR_FRACTION,
        turn_rad=float(turn_rad),
    )


def highest_order(ratio: float, spread: Spread) -> int:
    """The highest order that may leave at any incidence, ``ratio`` being lambda/d."""
    return int((2.0 + spread.along_face) / (ratio * (1.0 - spread.per_order)))


def order_cones(
    incidence_deg: FloatArray,
    half_width_deg: FloatArray,
    ratio: float,
    spread: Spread,
    *,
    through: bool,
    ghost: bool,
) -> Cones:
    """The cones of all orders for a free groove azimuth.

    ``incidence_deg``, ``half_width_deg`` (K,): incidences within -90 to 90 and the
    half width of what each stands for; ``ratio``: lambda/d.
    """
    a = np.radians(incidence_deg)[:, None, None]
    half_width = np.radians(half_width_deg)[:, None, None]
    order = np.arange(highest_order(ratio, spread) + 1.0)[None, :, None]
    groove = np.radians(np.arange(0.0, 360.0, GROOVE_STEP_DEG))[None, None, :]
    across = np.sin(a) + order * ratio * np.cos(groove)
    along_y = order * ratio * np.sin(groove)
    sampling = 0.5 * np.radians(GROOVE_STEP_DEG)
    shift = _shift(order * ratio, half_width, spread, sampling=sampling, ghost=ghost)
    shift, across, along_y = np.broadcast_arrays(shift, across, along_y)
    length = np.hypot(across, along_y)
    leaves = length - shift < 1.0
    within = np.minimum(1.0, 1.0 / np.maximum(length, 1e-12))
    x, y, z = _lab_direction(a, across * within, along_y * within, through)
    half = spread.turn_rad + half_width + shift + _slant(length, shift)
    return Cones(
        azimuth_deg=np.degrees(np.arctan2(x, z)),
        elevation_deg=np.degrees(np.arcsin(np.clip(y, -1.0, 1.0))),
        half_deg=np.minimum(np.degrees(half), 180.0),
        leaves=leaves,
    )


def nominal_direction_deg(
    incidence_deg: float, shift: float, *, through: bool
) -> tuple[float, float] | None:
    """Azimuth and elevation of an order with grooves upright; None if it stays in.

    ``shift`` is m lambda/d.
    """
    across = np.sin(np.radians(incidence_deg)) + shift
    if abs(across) >= 1.0:
        return None
    turn = np.radians(incidence_deg)
    x, _, z = _lab_direction(turn, np.asarray(across), np.asarray(0.0), through)
    return float(np.degrees(np.arctan2(x, z))), 0.0


def reached(
    azimuth_deg: FloatArray,
    elevation_deg: FloatArray,
    incidence_deg: FloatArray,
    half_width_deg: FloatArray,
    ratio: float,
    spread: Spread,
) -> "np.ndarray[tuple[int, ...], np.dtype[np.bool_]]":
    """Whether an order may go into each direction (N,), grooves any way round.

    The other way about: from a direction to the lambda/d that would send light there.
    Orders gone through count, ghosts do not.
    """
    azimuth, elevation = np.radians(azimuth_deg), np.radians(elevation_deg)
    x, z = np.cos(elevation) * np.sin(azimuth), np.cos(elevation) * np.cos(azimuth)
    orders = np.arange(highest_order(ratio, spread) + 1.0) * ratio
    found = np.zeros(azimuth.shape, dtype=np.bool_)
    for a, half_width in zip(
        np.radians(incidence_deg), np.radians(half_width_deg), strict=True
    ):
        across = x * np.cos(a) - z * np.sin(a) - np.sin(a)
        away = np.hypot(across, np.sin(elevation))[:, None]
        shift = _shift(orders, half_width, spread, sampling=0.0, ghost=False)
        slack = shift + half_width + spread.turn_rad
        found |= (np.abs(away - orders[None, :]) <= slack[None, :]).any(axis=1)
    return found


def _shift(
    ratio: FloatArray,
    half_width: FloatArray,
    spread: Spread,
    *,
    sampling: float,
    ghost: bool,
) -> FloatArray:
    """How far the component along the face may be off; ``ratio`` is m lambda/d."""
    wedge = 2.0 * GHOST_INDEX * np.radians(GHOST_WEDGE_DEG) if ghost else 0.0
    known = spread.along_face + half_width + wedge
    return np.asarray(known + ratio * (spread.per_order + sampling))


def _lab_direction(
    a: FloatArray, across: FloatArray, along_y: FloatArray, through: bool
) -> tuple[FloatArray, FloatArray, FloatArray]:
    off_face = np.sqrt(np.maximum(0.0, 1.0 - across**2 - along_y**2))
    if through:
        off_face = -off_face
    x = across * np.cos(a) + off_face * np.sin(a)
    z = -across * np.sin(a) + off_face * np.cos(a)
    return x, along_y, z


def _slant(length: FloatArray, shift: FloatArray) -> FloatArray:
    """How far a shift along the face leans a direction: much, near the face."""
    now = np.arcsin(np.minimum(1.0, length))
    outwards = np.arcsin(np.minimum(1.0, length + shift)) - now
    inwards = now - np.arcsin(np.clip(length - shift, 0.0, 1.0))
    return np.asarray(np.maximum(outwards, inwards))
