"""Where an order lands on the screen, with its derivatives: the model of the fit.

Every spot has fourteen *local* quantities (``Local``); everything the fit can vary acts
through them. Conical grating equation in direction cosines: along the grating vector g
the tangential component becomes k.g + q with q = m*lambda/d, along the grooves h it is
conserved, and the rest is normal to the surface.
"""

from dataclasses import dataclass
from enum import IntEnum

import numpy as np

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


N_LOCAL = len(Local)
GRAZING = 1e-3
"""Orders whose normal direction cosine is below this are treated as not leaving."""


@dataclass(frozen=True)
class Landing:
    """Where spots land: x, y (N,) mm, derivatives (N, 2, 14), valid (N,) bool."""

    x_mm: FloatArray
    y_mm: FloatArray
    jacobian: FloatArray
    valid: "np.ndarray[tuple[int, ...], np.dtype[np.bool_]]"


@dataclass(frozen=True)
class _Frame:
    """Unit vectors of the part in the lab, each (N, 3)."""

    g: FloatArray
    h: FloatArray
    n: FloatArray


def _dot(a: FloatArray, b: FloatArray) -> FloatArray:
    return np.einsum("ij,ij->i", a, b)


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
    frame = _part_frame(local)[0]
    k = _beam(local)
    kt = _dot(k, frame.g) + local[:, Local.Q]
    kh = _dot(k, frame.h)
    kn2 = 1.0 - kt**2 - kh**2
    kn = np.sqrt(np.maximum(kn2, GRAZING**2))
    return kt[:, None] * frame.g + kh[:, None] * frame.h + kn[:, None] * frame.n, kn2


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


def landing(local: FloatArray) -> Landing:
    """Reported screen position of spots with local quantities ``local`` (N, 14).

    Invalid rows (order not leaving, or missing the screen plane) hold finite
    numbers that mean nothing; ``valid`` tells them.
    """
    frame, by_incidence, by_azimuth, by_tilt = _part_frame(local)
    k = _beam(local)
    kt = _dot(k, frame.g) + local[:, Local.Q]
    kh = _dot(k, frame.h)
    kn2 = 1.0 - kt**2 - kh**2
    kn = np.sqrt(np.maximum(kn2, GRAZING**2))
    out = kt[:, None] * frame.g + kh[:, None] * frame.h + kn[:, None] * frame.n
    zero = np.zeros_like(kt)
    start = _stack(local[:, Local.BEAM_X], local[:, Local.BEAM_Y], zero)
    facing = _dot(frame.n, k)
    reach = (local[:, Local.SURFACE] - _dot(frame.n, start)) / facing
    origin = start + reach[:, None] * k
    axes, axes_by = _screen_axes(local)
    ex, ey, ez = axes[:, 0], axes[:, 1], axes[:, 2]
    centre = _stack(zero, zero, local[:, Local.DISTANCE])
    towards = _dot(out, ez)
    valid = (kn2 > GRAZING**2) & (towards > GRAZING) & (facing < -GRAZING)
    towards = np.where(np.abs(towards) > GRAZING, towards, GRAZING)
    flight = _dot(centre - origin, ez) / towards
    hit = origin + flight[:, None] * out - centre

    jacobian = np.zeros((local.shape[0], 2, N_LOCAL))

    def put_ray(column: int, d_out: FloatArray, d_origin: FloatArray) -> None:
        d_flight = -(_dot(d_origin, ez) + flight * _dot(d_out, ez)) / towards
        d_hit = d_origin + flight[:, None] * d_out + d_flight[:, None] * out
        jacobian[:, 0, column] = _dot(d_hit, ex)
        jacobian[:, 1, column] = _dot(d_hit, ey)

    def out_tangent(
        d_kt: FloatArray, d_kh: FloatArray, d_frame: _Frame | None
    ) -> FloatArray:
        d_kn = -(kt * d_kt + kh * d_kh) / kn
        moved = (
            d_kt[:, None] * frame.g + d_kh[:, None] * frame.h + d_kn[:, None] * frame.n
        )
        if d_frame is not None:
            moved = moved + (
                kt[:, None] * d_frame.g
                + kh[:, None] * d_frame.h
                + kn[:, None] * d_frame.n
            )
        return moved

    def origin_tangent(
        d_n: FloatArray, d_k: FloatArray, d_start: FloatArray, d_s: float
    ) -> FloatArray:
        d_facing = _dot(d_n, k) + _dot(frame.n, d_k)
        top = d_s - _dot(d_n, start) - _dot(frame.n, d_start)
        d_reach = (top - reach * d_facing) / facing
        return d_start + d_reach[:, None] * k + reach[:, None] * d_k

    still = np.zeros_like(k)
    put_ray(Local.Q, out_tangent(zero + 1.0, zero, None), still)
    for column, d_frame in (
        (Local.INCIDENCE, by_incidence),
        (Local.AZIMUTH, by_azimuth),
        (Local.TILT, by_tilt),
    ):
        d_out = out_tangent(_dot(k, d_frame.g), _dot(k, d_frame.h), d_frame)
        put_ray(column, d_out, origin_tangent(d_frame.n, still, still, 0.0))
    e = local[:, Local.ELEVATION]
    d_k = _stack(zero, np.cos(e), np.sin(e))
    d_out = out_tangent(_dot(d_k, frame.g), _dot(d_k, frame.h), None)
    put_ray(Local.ELEVATION, d_out, origin_tangent(still, d_k, still, 0.0))
    for column, axis in ((Local.BEAM_X, 0), (Local.BEAM_Y, 1)):
        d_start = still.copy()
        d_start[:, axis] = 1.0
        put_ray(column, still, origin_tangent(still, still, d_start, 0.0))
    put_ray(Local.SURFACE, still, origin_tangent(still, still, still, 1.0))

    d_centre = _stack(zero, zero, zero + 1.0)
    d_hit = (_dot(d_centre, ez) / towards)[:, None] * out - d_centre
    jacobian[:, 0, Local.DISTANCE] = _dot(d_hit, ex)
    jacobian[:, 1, Local.DISTANCE] = _dot(d_hit, ey)
    for column, slope in zip(
        (Local.SCREEN_TX, Local.SCREEN_TY, Local.SCREEN_TZ), axes_by, strict=True
    ):
        # The plane turns about its own centre: only the component of the hit
        # along the turned normal moves the point along the ray.
        d_flight = -_dot(hit, slope[:, 2]) / towards
        d_hit = d_flight[:, None] * out
        jacobian[:, 0, column] = _dot(d_hit, ex) + _dot(hit, slope[:, 0])
        jacobian[:, 1, column] = _dot(d_hit, ey) + _dot(hit, slope[:, 1])
    jacobian[:, 0, Local.SCREEN_X] = 1.0
    jacobian[:, 1, Local.SCREEN_Y] = 1.0
    return Landing(
        x_mm=_dot(hit, ex) + local[:, Local.SCREEN_X],
        y_mm=_dot(hit, ey) + local[:, Local.SCREEN_Y],
        jacobian=jacobian,
        valid=valid,
    )
