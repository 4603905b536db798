"""One ray a spot: beam, part, order, screen. What the derivatives are built from.

Every spot has a few *local* quantities (``Local``); everything the fit can vary acts
through them. Conical grating equation in direction cosines: along the grating vector g
the tangential component becomes k.g + q with q = m*lambda/d, along the grooves h it is
conserved, and the rest is normal to the surface.
"""

from dataclasses import dataclass
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.cover_walk import one_way, passage
from pitchsweep.analysis.records import FloatArray


class Local(IntEnum):
    """Columns of the local quantities of a spot; millimetres and radians."""

    Q = 0  # m * lambda / d
    INCIDENCE = 1  # a, right-handed about +y
    AZIMUTH = 2  # grating vector turned about the normal
    TILT = 3  # normal leaning towards +y
    ELEVATION = 4  # beam climbing towards +y
    BEAM_X = 5  # beam offset from the stage axis
    BEAM_Y = 6  # beam height
    SURFACE = 7  # surface in front of the stage axis
    DISTANCE = 8  # screen origin along +z
    SCREEN_TX = 9  # screen turned about x, y, z
    SCREEN_TY = 10
    SCREEN_TZ = 11
    SCREEN_X = 12  # reported x of the screen origin
    SCREEN_Y = 13
    COVER = 14  # thickness of a clear layer through which the part is read
    BEAM_TURN = 15  # beam turned about +y away from -z
    CURVATURE = 16  # of the part along g, convex positive, per millimetre
    INDEX = 17  # of the cover, less COVER_INDEX
    WEDGE_G = 18  # the cover's front leaning towards g, against the grooves' plane
    WEDGE_H = 19  # and towards h
    TRACK = 20  # curvature of the grooves, per millimetre; their centre towards -g
    BEAM_RMS = 21  # rms radius of a beam whose width counts; the ray so far above it
    DISTORTION = 22  # of the lens: places grow by it times radius squared, per mm^2
    FAR = 23  # 1: the camera looks at infinity, DISTANCE is its focal length


N_LOCAL = len(Local)
COVER_INDEX = 1.55
"""Index a cover is counted from: between polycarbonate and glass, common practice."""
GRAZING = 1e-3
"""Orders whose normal direction cosine is below this are treated as not leaving."""


@dataclass(frozen=True)
class PartFrame:
    """Unit vectors of the part in the lab, each (N, 3)."""

    g: FloatArray
    h: FloatArray
    n: FloatArray


def dot(a: FloatArray, b: FloatArray) -> FloatArray:
    return np.asarray(np.einsum("ij,ij->i", a, b))


def stack(x: FloatArray, y: FloatArray, z: FloatArray) -> FloatArray:
    return np.stack(np.broadcast_arrays(x, y, z), axis=-1)


def _turn_about_y(v: FloatArray, angle: FloatArray) -> FloatArray:
    c, s = np.cos(angle), np.sin(angle)
    return stack(v[:, 0] * c + v[:, 2] * s, v[:, 1], v[:, 2] * c - v[:, 0] * s)


def _part_frame(local: FloatArray) -> tuple[PartFrame, PartFrame, PartFrame, PartFrame]:
    """The part's unit vectors and their derivatives by incidence, azimuth, tilt."""
    a, rho, tau = (local[:, i] for i in (Local.INCIDENCE, Local.AZIMUTH, Local.TILT))
    zero = np.zeros_like(a)
    across = stack(zero + 1.0, zero, zero)
    along = stack(zero, np.cos(tau), -np.sin(tau))
    normal = stack(zero, np.sin(tau), np.cos(tau))
    c, s = np.cos(rho)[:, None], np.sin(rho)[:, None]
    # Tilt turns `along` into -normal and `normal` into `along`.
    frame = (c * across + s * along, -s * across + c * along, normal)
    by_tilt = (-s * normal, -c * normal, along)
    by_azimuth = (frame[1], -frame[0], zero[:, None] * normal)
    turned = PartFrame(*(_turn_about_y(v, a) for v in frame))
    by_incidence = PartFrame(
        *(stack(v[:, 2], zero, -v[:, 0]) for v in (turned.g, turned.h, turned.n))
    )
    return (
        turned,
        by_incidence,
        PartFrame(*(_turn_about_y(v, a) for v in by_azimuth)),
        PartFrame(*(_turn_about_y(v, a) for v in by_tilt)),
    )


@dataclass(frozen=True)
class Trace:
    """One ray a spot, from the beam to the screen: everything the tangents need."""

    k: FloatArray  # beam
    frames: tuple[PartFrame, PartFrame, PartFrame, PartFrame]
    met: FloatArray  # (N, 3) order on g, h, n without the cover's wedge
    kt: FloatArray
    kh: FloatArray
    kn: FloatArray
    kn2: FloatArray
    out: FloatArray
    start: FloatArray  # where the beam crosses the plane of the stage axis
    reach: FloatArray
    facing: FloatArray
    axes: FloatArray
    axes_by: list[FloatArray]
    towards: FloatArray
    flight: FloatArray
    hit: FloatArray  # from the screen origin
    valid: NDArray[np.bool_]
    cover: FloatArray  # (N, 1)
    index: FloatArray  # of the cover
    wedge: FloatArray  # (N, 2) lean of the cover's front towards g and h
    bent: FloatArray  # both passages together, a unit of wedge
    walk: FloatArray  # of the exit point, a unit of cover
    near: FloatArray  # (N, 1) 0 where places on the part do not matter


def _beam(local: FloatArray) -> FloatArray:
    e, turn = local[:, Local.ELEVATION], local[:, Local.BEAM_TURN]
    return stack(-np.sin(turn) * np.cos(e), np.sin(e), -np.cos(turn) * np.cos(e))


def _screen_axes(local: FloatArray) -> tuple[FloatArray, list[FloatArray]]:
    """Screen axes (N, 3 axes, 3) and their derivatives by the three turns."""
    tx, ty, tz = (
        local[:, i] for i in (Local.SCREEN_TX, Local.SCREEN_TY, Local.SCREEN_TZ)
    )
    rx, drx = _turn(tx, 0)
    ry, dry = _turn(ty, 1)
    rz, drz = _turn(tz, 2)
    axes = ry @ rx @ rz
    by = [ry @ drx @ rz, dry @ rx @ rz, ry @ rx @ drz]
    return axes.transpose(0, 2, 1), [d.transpose(0, 2, 1) for d in by]


def _turn(angle: FloatArray, axis: int) -> tuple[FloatArray, FloatArray]:
    """Right-handed rotation matrices (N, 3, 3) about a lab axis, and derivative."""
    c, s = np.cos(angle), np.sin(angle)
    i, j = ((1, 2), (2, 0), (0, 1))[axis]
    turn = np.zeros((angle.shape[0], 3, 3))
    slope = np.zeros_like(turn)
    turn[:, axis, axis] = 1.0
    turn[:, i, i] = turn[:, j, j] = c
    turn[:, i, j], turn[:, j, i] = -s, s
    slope[:, i, i] = slope[:, j, j] = -s
    slope[:, i, j], slope[:, j, i] = -c, c
    return turn, slope


def _normal_part(
    along_g: FloatArray, along_h: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Squared normal component of an order, and the component held off grazing."""
    square = 1.0 - along_g**2 - along_h**2
    return square, np.sqrt(np.maximum(square, GRAZING**2))


def trace_rays(local: FloatArray) -> Trace:
    """The rays of spots with local quantities (N, N_LOCAL)."""
    frames = _part_frame(local)
    frame, k = frames[0], _beam(local)
    index = COVER_INDEX + local[:, Local.INDEX]
    wedge = local[:, [Local.WEDGE_G, Local.WEDGE_H]]
    facing = dot(frame.n, k)
    met_g, met_h = dot(k, frame.g) + local[:, Local.Q], dot(k, frame.h)
    met2, met_n = _normal_part(met_g, met_h)
    bent = passage(-facing, index) + passage(met_n, index)
    kt, kh = met_g + wedge[:, 0] * bent, met_h + wedge[:, 1] * bent
    kn2, kn = _normal_part(kt, kh)
    out = kt[:, None] * frame.g + kh[:, None] * frame.h + kn[:, None] * frame.n
    zero = np.zeros_like(kt)
    height = local[:, Local.BEAM_Y] + local[:, Local.BEAM_RMS]
    start = stack(local[:, Local.BEAM_X], height, zero)
    reach = (local[:, Local.SURFACE] - dot(frame.n, start)) / facing
    axes, axes_by = _screen_axes(local)
    towards = dot(out, axes[:, 2])
    valid = (np.minimum(kn2, met2) > GRAZING**2) & (towards > GRAZING)
    towards = np.where(np.abs(towards) > GRAZING, towards, GRAZING)
    walk = one_way(k, frame.n, index) + one_way(out, frame.n, index)
    cover, near = local[:, Local.COVER, None], 1.0 - local[:, Local.FAR, None]
    from_centre = start + reach[:, None] * k + cover * walk
    from_centre[:, 2] -= local[:, Local.DISTANCE]
    away = np.where(
        near[:, 0] > 0.0, -dot(from_centre, axes[:, 2]), local[:, Local.DISTANCE]
    )
    flight = away / towards
    return Trace(
        k=k,
        frames=frames,
        met=stack(met_g, met_h, met_n),
        kt=kt,
        kh=kh,
        kn=kn,
        kn2=np.minimum(kn2, met2),
        out=out,
        start=start,
        reach=reach,
        facing=facing,
        axes=axes,
        axes_by=axes_by,
        towards=towards,
        flight=flight,
        hit=near * from_centre + flight[:, None] * out,
        valid=valid & (facing < -GRAZING),
        cover=cover,
        index=index,
        wedge=wedge,
        bent=bent,
        walk=walk,
        near=near,
    )
