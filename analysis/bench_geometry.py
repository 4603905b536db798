"""Where an order lands on the screen, with its derivatives: the model of the fit.

Every spot has fifteen *local* quantities (``Local``); everything the fit can vary acts
through them. Conical grating equation in direction cosines: along the grating vector g
the tangential component becomes k.g + q with q = m*lambda/d, along the grooves h it is
conserved, and the rest is normal to the surface.
"""

from dataclasses import dataclass
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.cover_walk import one_way, one_way_tangent
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


N_LOCAL = len(Local)
GRAZING = 1e-3
"""Orders whose normal direction cosine is below this are treated as not leaving."""


@dataclass(frozen=True)
class Landing:
    """Where spots land: x, y (N,) mm, derivatives (N, 2, 15), valid (N,) bool.

    ``leaving`` (N,) is the cosine between the order and the part's normal, 0 where
    the order does not leave.
    """

    x_mm: FloatArray
    y_mm: FloatArray
    jacobian: FloatArray
    valid: NDArray[np.bool_]
    leaving: FloatArray


@dataclass(frozen=True)
class _Frame:
    """Unit vectors of the part in the lab, each (N, 3)."""

    g: FloatArray
    h: FloatArray
    n: FloatArray


def _dot(a: FloatArray, b: FloatArray) -> FloatArray:
    return np.asarray(np.einsum("ij,ij->i", a, b))


def _stack(x: FloatArray, y: FloatArray, z: FloatArray) -> FloatArray:
    return np.stack(np.broadcast_arrays(x, y, z), axis=-1)


def _turn_about_y(v: FloatArray, angle: FloatArray) -> FloatArray:
    c, s = np.cos(angle), np.sin(angle)
    return _stack(v[:, 0] * c + v[:, 2] * s, v[:, 1], v[:, 2] * c - v[:, 0] * s)


def _part_frame(local: FloatArray) -> tuple[_Frame, _Frame, _Frame, _Frame]:
    """The part's unit vectors and their derivatives by incidence, azimuth, tilt."""
    a, rho, tau = (local[:, i] for i in (Local.INCIDENCE, Local.AZIMUTH, Local.TILT))
    zero = np.zeros_like(a)
    across = _stack(zero + 1.0, zero, zero)
    along = _stack(zero, np.cos(tau), -np.sin(tau))
    normal = _stack(zero, np.sin(tau), np.cos(tau))
    c, s = np.cos(rho)[:, None], np.sin(rho)[:, None]
    # Tilt turns `along` into -normal and `normal` into `along`.
    frame = (c * across + s * along, -s * across + c * along, normal)
    by_tilt = (-s * normal, -c * normal, along)
    by_azimuth = (frame[1], -frame[0], zero[:, None] * normal)
    turned = _Frame(*(_turn_about_y(v, a) for v in frame))
    by_incidence = _Frame(
        *(_stack(v[:, 2], zero, -v[:, 0]) for v in (turned.g, turned.h, turned.n))
    )
    return (
        turned,
        by_incidence,
        _Frame(*(_turn_about_y(v, a) for v in by_azimuth)),
        _Frame(*(_turn_about_y(v, a) for v in by_tilt)),
    )


def order_direction(local: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Unit direction (N, 3) of each order, and its squared normal cosine (N,).

    Where the squared cosine is not positive the order does not leave and the
    direction is meaningless (finite all the same).
    """
    trace = _trace(local)
    return trace.out, trace.kn2


@dataclass(frozen=True)
class _Trace:
    """One ray a spot, from the beam to the screen: everything the tangents need."""

    k: FloatArray  # beam
    frames: tuple[_Frame, _Frame, _Frame, _Frame]
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
    walk: FloatArray  # of the exit point, a unit of cover


def _beam(local: FloatArray) -> FloatArray:
    e = local[:, Local.ELEVATION]
    return _stack(np.zeros_like(e), np.sin(e), -np.cos(e))


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


def _trace(local: FloatArray) -> _Trace:
    frames = _part_frame(local)
    frame, k = frames[0], _beam(local)
    kt = _dot(k, frame.g) + local[:, Local.Q]
    kh = _dot(k, frame.h)
    kn2 = 1.0 - kt**2 - kh**2
    kn = np.sqrt(np.maximum(kn2, GRAZING**2))
    out = kt[:, None] * frame.g + kh[:, None] * frame.h + kn[:, None] * frame.n
    zero = np.zeros_like(kt)
    start = _stack(local[:, Local.BEAM_X], local[:, Local.BEAM_Y], zero)
    facing = _dot(frame.n, k)
    reach = (local[:, Local.SURFACE] - _dot(frame.n, start)) / facing
    axes, axes_by = _screen_axes(local)
    towards = _dot(out, axes[:, 2])
    valid = (kn2 > GRAZING**2) & (towards > GRAZING) & (facing < -GRAZING)
    towards = np.where(np.abs(towards) > GRAZING, towards, GRAZING)
    walk = one_way(k, frame.n) + one_way(out, frame.n)
    cover = local[:, Local.COVER, None]
    from_centre = start + reach[:, None] * k + cover * walk
    from_centre[:, 2] -= local[:, Local.DISTANCE]
    flight = -_dot(from_centre, axes[:, 2]) / towards
    return _Trace(
        k=k,
        frames=frames,
        kt=kt,
        kh=kh,
        kn=kn,
        kn2=kn2,
        out=out,
        start=start,
        reach=reach,
        facing=facing,
        axes=axes,
        axes_by=axes_by,
        towards=towards,
        flight=flight,
        hit=from_centre + flight[:, None] * out,
        valid=valid,
        cover=cover,
        walk=walk,
    )


def landing(local: FloatArray) -> Landing:
    """Reported screen position of spots with local quantities ``local`` (N, 15).

    Invalid rows (order not leaving, or missing the screen plane) hold finite
    numbers that mean nothing; ``valid`` tells them.
    """
    trace = _trace(local)
    jacobian = np.zeros((local.shape[0], 2, N_LOCAL))
    _put_part_tangents(trace, jacobian)
    _put_beam_tangents(trace, local, jacobian)
    _put_screen_tangents(trace, jacobian)
    return Landing(
        x_mm=_dot(trace.hit, trace.axes[:, 0]) + local[:, Local.SCREEN_X],
        y_mm=_dot(trace.hit, trace.axes[:, 1]) + local[:, Local.SCREEN_Y],
        jacobian=jacobian,
        valid=trace.valid,
        leaving=np.sqrt(np.maximum(trace.kn2, 0.0)),
    )


def _put(trace: _Trace, jacobian: FloatArray, column: int, d_hit: FloatArray) -> None:
    jacobian[:, 0, column] = _dot(d_hit, trace.axes[:, 0])
    jacobian[:, 1, column] = _dot(d_hit, trace.axes[:, 1])


def _hit_tangent(trace: _Trace, d_out: FloatArray, d_origin: FloatArray) -> FloatArray:
    """How the hit moves when the ray's direction and origin do."""
    ez = trace.axes[:, 2]
    d_flight = -(_dot(d_origin, ez) + trace.flight * _dot(d_out, ez)) / trace.towards
    moved = d_origin + trace.flight[:, None] * d_out + d_flight[:, None] * trace.out
    return np.asarray(moved)


def _out_tangent(
    trace: _Trace, d_kt: FloatArray, d_kh: FloatArray, d_frame: _Frame | None
) -> FloatArray:
    """How the order's direction moves with its components and the part's frame."""
    frame = trace.frames[0]
    d_kn = -(trace.kt * d_kt + trace.kh * d_kh) / trace.kn
    moved = d_kt[:, None] * frame.g + d_kh[:, None] * frame.h + d_kn[:, None] * frame.n
    if d_frame is not None:
        moved = moved + trace.kt[:, None] * d_frame.g + trace.kh[:, None] * d_frame.h
        moved = moved + trace.kn[:, None] * d_frame.n
    return np.asarray(moved)


def _origin_tangent(
    trace: _Trace,
    d_n: FloatArray,
    d_k: FloatArray,
    d_start: FloatArray,
    d_surface: float = 0.0,
) -> FloatArray:
    """How the point where the beam meets the part moves."""
    n = trace.frames[0].n
    d_facing = _dot(d_n, trace.k) + _dot(n, d_k)
    top = d_surface - _dot(d_n, trace.start) - _dot(n, d_start)
    d_reach = (top - trace.reach * d_facing) / trace.facing
    moved = d_start + d_reach[:, None] * trace.k + trace.reach[:, None] * d_k
    return np.asarray(moved)


def _walk_tangent(
    trace: _Trace, d_k: FloatArray, d_out: FloatArray, d_n: FloatArray
) -> FloatArray:
    """How the exit point moves inside the cover."""
    n = trace.frames[0].n
    moved = one_way_tangent(trace.k, n, d_k, d_n)
    return trace.cover * (moved + one_way_tangent(trace.out, n, d_out, d_n))


def _put_part_tangents(trace: _Trace, jacobian: FloatArray) -> None:
    zero, still = np.zeros_like(trace.kt), np.zeros_like(trace.k)
    d_out = _out_tangent(trace, zero + 1.0, zero, None)
    d_exit = _walk_tangent(trace, still, d_out, still)
    _put(trace, jacobian, Local.Q, _hit_tangent(trace, d_out, d_exit))
    columns = (Local.INCIDENCE, Local.AZIMUTH, Local.TILT)
    for column, d_frame in zip(columns, trace.frames[1:], strict=True):
        d_kt, d_kh = _dot(trace.k, d_frame.g), _dot(trace.k, d_frame.h)
        d_out = _out_tangent(trace, d_kt, d_kh, d_frame)
        d_origin = _origin_tangent(trace, d_frame.n, still, still)
        d_origin = d_origin + _walk_tangent(trace, still, d_out, d_frame.n)
        _put(trace, jacobian, column, _hit_tangent(trace, d_out, d_origin))
    d_origin = _origin_tangent(trace, still, still, still, 1.0)
    _put(trace, jacobian, Local.SURFACE, _hit_tangent(trace, still, d_origin))
    _put(trace, jacobian, Local.COVER, _hit_tangent(trace, still, trace.walk))


def _put_beam_tangents(trace: _Trace, local: FloatArray, jacobian: FloatArray) -> None:
    still, frame = np.zeros_like(trace.k), trace.frames[0]
    e = local[:, Local.ELEVATION]
    d_k = _stack(np.zeros_like(e), np.cos(e), np.sin(e))
    d_out = _out_tangent(trace, _dot(d_k, frame.g), _dot(d_k, frame.h), None)
    d_origin = _origin_tangent(trace, still, d_k, still)
    d_origin = d_origin + _walk_tangent(trace, d_k, d_out, still)
    _put(trace, jacobian, Local.ELEVATION, _hit_tangent(trace, d_out, d_origin))
    for column, axis in ((Local.BEAM_X, 0), (Local.BEAM_Y, 1)):
        d_start = still.copy()
        d_start[:, axis] = 1.0
        d_origin = _origin_tangent(trace, still, still, d_start)
        _put(trace, jacobian, column, _hit_tangent(trace, still, d_origin))


def _put_screen_tangents(trace: _Trace, jacobian: FloatArray) -> None:
    away = np.zeros_like(trace.k)
    away[:, 2] = -1.0  # the hit is counted from the screen origin
    still = np.zeros_like(trace.k)
    _put(trace, jacobian, Local.DISTANCE, _hit_tangent(trace, still, away))
    columns = (Local.SCREEN_TX, Local.SCREEN_TY, Local.SCREEN_TZ)
    for column, slope in zip(columns, trace.axes_by, strict=True):
        # The plane turns about its own centre: only the component of the hit
        # along the turned normal moves the point along the ray.
        d_flight = -_dot(trace.hit, slope[:, 2]) / trace.towards
        _put(trace, jacobian, column, d_flight[:, None] * trace.out)
        jacobian[:, 0, column] += _dot(trace.hit, slope[:, 0])
        jacobian[:, 1, column] += _dot(trace.hit, slope[:, 1])
    jacobian[:, 0, Local.SCREEN_X] = 1.0
    jacobian[:, 1, Local.SCREEN_Y] = 1.0
