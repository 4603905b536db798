"""Where an order lands on the screen, with its derivatives: the model of the fit."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.cover_walk import (
    one_way_by_index,
    one_way_tangent,
    passage_by_cosine,
    passage_by_index,
)
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
from pitchsweep.analysis.place_on_part import chain_place, where_it_meets
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
    wide = local[:, Local.BEAM_RMS].any()
    there = _over_the_beam(local) if wide else _of_one_ray(local)
    return _through_the_lens(there, local[:, Local.DISTORTION])


def _of_one_ray(local: FloatArray) -> Landing:
    trace = trace_rays(where_it_meets(local))
    jacobian = np.zeros((local.shape[0], 2, N_LOCAL))
    _put_part_tangents(trace, jacobian)
    _put_cover_tangents(trace, jacobian)
    _put_beam_tangents(trace, local, jacobian)
    _put_screen_tangents(trace, jacobian)
    chain_place(local, jacobian)
    return Landing(
        x_mm=dot(trace.hit, trace.axes[:, 0]) + local[:, Local.SCREEN_X],
        y_mm=dot(trace.hit, trace.axes[:, 1]) + local[:, Local.SCREEN_Y],
        jacobian=jacobian,
        valid=trace.valid,
        leaving=np.sqrt(np.maximum(trace.kn2, 0.0)),
    )


def _over_the_beam(local: FloatArray) -> Landing:
    """The mean over a beam on grooves that turn across it.

    Two rays, one rms radius above and below, have the mean of a Gaussian beam to third
    order in the radius.
    """
    ends = []
    for side in (1.0, -1.0):
        moved = local.copy()
        moved[:, Local.BEAM_RMS] *= side
        end = _of_one_ray(moved)
        end.jacobian[:, :, Local.BEAM_RMS] *= side
        ends.append(end)
    one, other = ends
    return Landing(
        x_mm=0.5 * (one.x_mm + other.x_mm),
        y_mm=0.5 * (one.y_mm + other.y_mm),
        jacobian=0.5 * (one.jacobian + other.jacobian),
        valid=one.valid & other.valid,
        leaving=np.minimum(one.leaving, other.leaving),
    )


def _through_the_lens(there: Landing, distortion: FloatArray) -> Landing:
    """Places as a lens reports them that magnifies by 1 + distortion * radius^2."""
    place = np.stack([there.x_mm, there.y_mm], axis=1)
    radius_2 = dot(place, place)
    grown = 1.0 + distortion * radius_2
    jacobian = there.jacobian
    if distortion.any():
        along = np.einsum("ni,nip->np", place, jacobian)
        jacobian = grown[:, None, None] * jacobian
        jacobian += 2.0 * (distortion[:, None] * place)[:, :, None] * along[:, None]
    jacobian[:, :, Local.DISTORTION] = radius_2[:, None] * place
    return Landing(
        x_mm=grown * there.x_mm,
        y_mm=grown * there.y_mm,
        jacobian=jacobian,
        valid=there.valid,
        leaving=there.leaving,
    )


def _put(trace: Trace, jacobian: FloatArray, column: int, d_hit: FloatArray) -> None:
    jacobian[:, 0, column] = dot(d_hit, trace.axes[:, 0])
    jacobian[:, 1, column] = dot(d_hit, trace.axes[:, 1])


def _hit_tangent(trace: Trace, d_out: FloatArray, d_origin: FloatArray) -> FloatArray:
    """How the hit moves when the ray's direction and origin do."""
    ez, d_origin = trace.axes[:, 2], trace.near * d_origin
    d_flight = -(dot(d_origin, ez) + trace.flight * dot(d_out, ez)) / trace.towards
    moved = d_origin + trace.flight[:, None] * d_out + d_flight[:, None] * trace.out
    return np.asarray(moved)


def _out_tangent(
    trace: Trace,
    d_g: FloatArray,
    d_h: FloatArray,
    d_frame: PartFrame | None = None,
    d_facing: FloatArray | None = None,
) -> FloatArray:
    """How the order's direction moves with its components and the part's frame.

    ``d_g`` and ``d_h`` are those before the wedge of the cover bends it.
    """
    if trace.wedge.any():
        d_bent = _bent_tangent(trace, d_g, d_h, d_facing)
        d_g, d_h = d_g + trace.wedge[:, 0] * d_bent, d_h + trace.wedge[:, 1] * d_bent
    moved = _bent_out(trace, d_g, d_h)
    if d_frame is not None:
        moved = moved + trace.kt[:, None] * d_frame.g + trace.kh[:, None] * d_frame.h
        moved = moved + trace.kn[:, None] * d_frame.n
    return np.asarray(moved)


def _bent_tangent(
    trace: Trace, d_g: FloatArray, d_h: FloatArray, d_facing: FloatArray | None
) -> FloatArray:
    met_g, met_h, met_n = trace.met.T
    d_n = -(met_g * d_g + met_h * d_h) / met_n
    moved = passage_by_cosine(met_n, trace.index) * d_n
    if d_facing is not None:
        moved = moved - passage_by_cosine(-trace.facing, trace.index) * d_facing
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
    n, index = trace.frames[0].n, trace.index
    moved = one_way_tangent(trace.k, n, d_k, d_n, index)
    return trace.cover * (moved + one_way_tangent(trace.out, n, d_out, d_n, index))


def _put_part_tangents(trace: Trace, jacobian: FloatArray) -> None:
    zero, still = np.zeros_like(trace.kt), np.zeros_like(trace.k)
    d_out = _out_tangent(trace, zero + 1.0, zero)
    d_exit = _walk_tangent(trace, still, d_out, still)
    _put(trace, jacobian, Local.Q, _hit_tangent(trace, d_out, d_exit))
    columns = (Local.INCIDENCE, Local.AZIMUTH, Local.TILT)
    for column, d_frame in zip(columns, trace.frames[1:], strict=True):
        d_g, d_h = dot(trace.k, d_frame.g), dot(trace.k, d_frame.h)
        d_out = _out_tangent(trace, d_g, d_h, d_frame, dot(trace.k, d_frame.n))
        d_origin = _origin_tangent(trace, d_frame.n, still, still)
        d_origin = d_origin + _walk_tangent(trace, still, d_out, d_frame.n)
        _put(trace, jacobian, column, _hit_tangent(trace, d_out, d_origin))
    d_origin = _origin_tangent(trace, still, still, still, 1.0)
    _put(trace, jacobian, Local.SURFACE, _hit_tangent(trace, still, d_origin))


def _put_cover_tangents(trace: Trace, jacobian: FloatArray) -> None:
    zero, still, n = np.zeros_like(trace.kt), np.zeros_like(trace.k), trace.frames[0].n
    _put(trace, jacobian, Local.COVER, _hit_tangent(trace, still, trace.walk))
    d_bent = passage_by_index(-trace.facing, trace.index)
    d_bent = d_bent + passage_by_index(trace.met[:, 2], trace.index)
    walk = one_way_by_index(trace.k, n, trace.index)
    walk = trace.cover * (walk + one_way_by_index(trace.out, n, trace.index))
    for column, d_kt, d_kh, d_walk in (
        (Local.INDEX, trace.wedge[:, 0] * d_bent, trace.wedge[:, 1] * d_bent, walk),
        (Local.WEDGE_G, trace.bent, zero, still),
        (Local.WEDGE_H, zero, trace.bent, still),
    ):
        d_out = _bent_out(trace, d_kt, d_kh)
        d_exit = d_walk + _walk_tangent(trace, still, d_out, still)
        _put(trace, jacobian, column, _hit_tangent(trace, d_out, d_exit))


def _bent_out(trace: Trace, d_kt: FloatArray, d_kh: FloatArray) -> FloatArray:
    """How the direction moves with its components behind the wedge."""
    frame = trace.frames[0]
    d_kn = -(trace.kt * d_kt + trace.kh * d_kh) / trace.kn
    moved = d_kt[:, None] * frame.g + d_kh[:, None] * frame.h
    return np.asarray(moved + d_kn[:, None] * frame.n)


def _put_beam_tangents(trace: Trace, local: FloatArray, jacobian: FloatArray) -> None:
    still, frame = np.zeros_like(trace.k), trace.frames[0]
    e, turn = local[:, Local.ELEVATION], local[:, Local.BEAM_TURN]
    c, s = np.cos(turn), np.sin(turn)
    climbing = stack(s * np.sin(e), np.cos(e), c * np.sin(e))
    turning = stack(-c * np.cos(e), np.zeros_like(e), s * np.cos(e))
    for column, d_k in ((Local.ELEVATION, climbing), (Local.BEAM_TURN, turning)):
        d_g, d_h, d_facing = (dot(d_k, v) for v in (frame.g, frame.h, frame.n))
        d_out = _out_tangent(trace, d_g, d_h, d_facing=d_facing)
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
    nearer = _hit_tangent(trace, still, away)
    # Far away, the places are the focal length times tangents.
    nearer = nearer + (1.0 - trace.near) * trace.out / trace.towards[:, None]
    _put(trace, jacobian, Local.DISTANCE, nearer)
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
