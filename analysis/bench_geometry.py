"""Where an order lands on the screen, with its derivatives: the model of the fit."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.cover_walk import one_way_tangent
from pitchsweep.analysis.part_ray import (
    GRAZING,
    N_LOCAL,
    Local,
    PartFrame,
    Trace,
    dot,
    stack,
    trace_rays,
)
from pitchsweep.analysis.records import FloatArray

__all__ = ["GRAZING", "N_LOCAL", "Landing", "Local", "landing", "order_direction"]


@dataclass(frozen=True)
class Landing:
    """Where spots land: x, y (N,) mm, derivatives (N, 2, N_LOCAL), valid (N,) bool.

    ``leaving`` (N,) is the cosine between the order and the part's normal, 0 where
    the order does not leave.
    """

    x_mm: FloatArray
    y_mm: FloatArray
    jacobian: FloatArray
    valid: NDArray[np.bool_]
    leaving: FloatArray


def order_direction(local: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Unit direction (N, 3) of each order, and its squared normal cosine (N,).

    Where the squared cosine is not positive the order does not leave and the
    direction is meaningless (finite all the same).
    """
    trace = trace_rays(local)
    return trace.out, trace.kn2


def landing(local: FloatArray) -> Landing:
    """Reported screen position of spots with local quantities ``local``.

    Invalid rows (order not leaving, or missing the screen plane) hold finite
    numbers that mean nothing; ``valid`` tells them.
    """
    trace = trace_rays(_with_curvature(local))
    jacobian = np.zeros((local.shape[0], 2, N_LOCAL))
    _put_part_tangents(trace, jacobian)
    _put_beam_tangents(trace, local, jacobian)
    _put_screen_tangents(trace, jacobian)
    _chain_curvature(local, jacobian)
    return Landing(
        x_mm=dot(trace.hit, trace.axes[:, 0]) + local[:, Local.SCREEN_X],
        y_mm=dot(trace.hit, trace.axes[:, 1]) + local[:, Local.SCREEN_Y],
        jacobian=jacobian,
        valid=trace.valid,
        leaving=np.sqrt(np.maximum(trace.kn2, 0.0)),
    )


def _place_on_part(local: FloatArray) -> FloatArray:
    """Where along g the beam meets the part (N,), counted from the stage axis."""
    a = local[:, Local.INCIDENCE]
    off = local[:, Local.BEAM_X] - local[:, Local.SURFACE] * np.sin(a)
    return np.asarray(off / np.cos(a))


def _with_curvature(local: FloatArray) -> FloatArray:
    """A curved part is met at another incidence: the normal leans by place / radius."""
    bent = local.copy()
    bent[:, Local.INCIDENCE] += local[:, Local.CURVATURE] * _place_on_part(local)
    return bent


def _chain_curvature(local: FloatArray, jacobian: FloatArray) -> None:
    """From derivatives by the incidence met to those by what makes it."""
    a, bend = local[:, Local.INCIDENCE], local[:, Local.CURVATURE]
    met = jacobian[:, :, Local.INCIDENCE].copy()
    place = _place_on_part(local)
    off = local[:, Local.BEAM_X] * np.sin(a) - local[:, Local.SURFACE]
    by_a, by_x, by_s = off / np.cos(a) ** 2, 1.0 / np.cos(a), -np.tan(a)
    jacobian[:, :, Local.CURVATURE] = met * place[:, None]
    jacobian[:, :, Local.INCIDENCE] += met * (bend * by_a)[:, None]
    jacobian[:, :, Local.BEAM_X] += met * (bend * by_x)[:, None]
    jacobian[:, :, Local.SURFACE] += met * (bend * by_s)[:, None]


def _put(trace: Trace, jacobian: FloatArray, column: int, d_hit: FloatArray) -> None:
    jacobian[:, 0, column] = dot(d_hit, trace.axes[:, 0])
    jacobian[:, 1, column] = dot(d_hit, trace.axes[:, 1])


def _hit_tangent(trace: Trace, d_out: FloatArray, d_origin: FloatArray) -> FloatArray:
    """How the hit moves when the ray's direction and origin do."""
    ez = trace.axes[:, 2]
    d_flight = -(dot(d_origin, ez) + trace.flight * dot(d_out, ez)) / trace.towards
    moved = d_origin + trace.flight[:, None] * d_out + d_flight[:, None] * trace.out
    return np.asarray(moved)


def _out_tangent(
    trace: Trace, d_kt: FloatArray, d_kh: FloatArray, d_frame: PartFrame | None
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
    trace: Trace,
    d_n: FloatArray,
    d_k: FloatArray,
    d_start: FloatArray,
    d_surface: float = 0.0,
) -> FloatArray:
    """How the point where the beam meets the part moves."""
    n = trace.frames[0].n
    d_facing = dot(d_n, trace.k) + dot(n, d_k)
    top = d_surface - dot(d_n, trace.start) - dot(n, d_start)
    d_reach = (top - trace.reach * d_facing) / trace.facing
    moved = d_start + d_reach[:, None] * trace.k + trace.reach[:, None] * d_k
    return np.asarray(moved)


def _walk_tangent(
    trace: Trace, d_k: FloatArray, d_out: FloatArray, d_n: FloatArray
) -> FloatArray:
    """How the exit point moves inside the cover."""
    n = trace.frames[0].n
    moved = one_way_tangent(trace.k, n, d_k, d_n)
    return trace.cover * (moved + one_way_tangent(trace.out, n, d_out, d_n))


def _put_part_tangents(trace: Trace, jacobian: FloatArray) -> None:
    zero, still = np.zeros_like(trace.kt), np.zeros_like(trace.k)
    d_out = _out_tangent(trace, zero + 1.0, zero, None)
    d_exit = _walk_tangent(trace, still, d_out, still)
    _put(trace, jacobian, Local.Q, _hit_tangent(trace, d_out, d_exit))
    columns = (Local.INCIDENCE, Local.AZIMUTH, Local.TILT)
    for column, d_frame in zip(columns, trace.frames[1:], strict=True):
        d_kt, d_kh = dot(trace.k, d_frame.g), dot(trace.k, d_frame.h)
        d_out = _out_tangent(trace, d_kt, d_kh, d_frame)
        d_origin = _origin_tangent(trace, d_frame.n, still, still)
        d_origin = d_origin + _walk_tangent(trace, still, d_out, d_frame.n)
        _put(trace, jacobian, column, _hit_tangent(trace, d_out, d_origin))
    d_origin = _origin_tangent(trace, still, still, still, 1.0)
    _put(trace, jacobian, Local.SURFACE, _hit_tangent(trace, still, d_origin))
    _put(trace, jacobian, Local.COVER, _hit_tangent(trace, still, trace.walk))


def _put_beam_tangents(trace: Trace, local: FloatArray, jacobian: FloatArray) -> None:
    still, frame = np.zeros_like(trace.k), trace.frames[0]
    e, turn = local[:, Local.ELEVATION], local[:, Local.BEAM_TURN]
    c, s = np.cos(turn), np.sin(turn)
    climbing = stack(s * np.sin(e), np.cos(e), c * np.sin(e))
    turning = stack(-c * np.cos(e), np.zeros_like(e), s * np.cos(e))
    for column, d_k in ((Local.ELEVATION, climbing), (Local.BEAM_TURN, turning)):
        d_out = _out_tangent(trace, dot(d_k, frame.g), dot(d_k, frame.h), None)
        d_origin = _origin_tangent(trace, still, d_k, still)
        d_origin = d_origin + _walk_tangent(trace, d_k, d_out, still)
        _put(trace, jacobian, column, _hit_tangent(trace, d_out, d_origin))
    for column, axis in ((Local.BEAM_X, 0), (Local.BEAM_Y, 1)):
        d_start = still.copy()
        d_start[:, axis] = 1.0
        d_origin = _origin_tangent(trace, still, still, d_start)
        _put(trace, jacobian, column, _hit_tangent(trace, still, d_origin))


def _put_screen_tangents(trace: Trace, jacobian: FloatArray) -> None:
    away = np.zeros_like(trace.k)
    away[:, 2] = -1.0  # the hit is counted from the screen origin
    still = np.zeros_like(trace.k)
    _put(trace, jacobian, Local.DISTANCE, _hit_tangent(trace, still, away))
    columns = (Local.SCREEN_TX, Local.SCREEN_TY, Local.SCREEN_TZ)
    for column, slope in zip(columns, trace.axes_by, strict=True):
        # The plane turns about its own centre: only the component of the hit
        # along the turned normal moves the point along the ray.
        d_flight = -dot(trace.hit, slope[:, 2]) / trace.towards
        _put(trace, jacobian, column, d_flight[:, None] * trace.out)
        jacobian[:, 0, column] += dot(trace.hit, slope[:, 0])
        jacobian[:, 1, column] += dot(trace.hit, slope[:, 1])
    jacobian[:, 0, Local.SCREEN_X] = 1.0
    jacobian[:, 1, Local.SCREEN_Y] = 1.0
