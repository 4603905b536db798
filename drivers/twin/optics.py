"""The rays of the twin: from the beam through the part to the screen, every order.

Both doors, spots and photons, are fed from here. The formulation is the twin's own:
rotation matrices and vectors throughout, no closed forms.
"""

from dataclasses import dataclass, replace
from itertools import product

import numpy as np
from numpy.polynomial.hermite_e import hermegauss
from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.twin.effects import (
    Steps,
    air_wavelength_mm,
    beam_direction,
    face_side,
    grating_period_mm,
    incidence_rad,
    wobble_rad,
)
from pitchsweep.drivers.twin.order_brightness import FAINTEST, order_share
from pitchsweep.drivers.twin.rays import (
    BoolArray,
    FloatArray,
    dot,
    meet_sphere,
    rotation,
    unit,
)
from pitchsweep.drivers.twin.screen import (
    bow_per_mm,
    focus,
    land,
    reported,
    within_map,
)
from pitchsweep.drivers.twin.through_cover import Cover, Grooves, orders_out
from pitchsweep.drivers.twin.truth import MountTruth, Truth, twin_settings

_MIDDLE = ((0.0, 1.0),)
_EVEN = tuple(
    (float(x), float(np.exp(-0.5 * x**2))) for x in np.linspace(-3.5, 3.5, 58)
)
_ROUND = tuple(zip(*(v.tolist() for v in hermegauss(5)), strict=True))
"""Places across a Gaussian beam in its rms radius, with weights: a comb where an edge
cuts, Gauss points where everything is smooth."""
_GRAZING = 0.02
"""Cosine of the incidence beyond which the beam passes the part by."""


@dataclass(frozen=True)
class Landing:
    """Where the orders of S steps land; arrays (S, M) but for ``order`` (M,).

    ``place_mm`` (S, M, 2) is what the nominal map reports; ``share`` the part of the
    beam's power; ``visible`` is false where an order does not leave the part, misses
    the screen by far or is too faint. Values there are finite and mean nothing.
    """

    order: NDArray[np.int64]
    place_mm: FloatArray
    share: FloatArray
    visible: BoolArray


@dataclass(frozen=True)
class _Pose:
    """Part at S steps: axes (S, 3, 3) with columns across, along grooves, normal."""

    axes: FloatArray
    surface_offset_mm: float
    bend_per_mm: float
    cover: Cover
    track_per_mm: float
    level_mm: float


@dataclass(frozen=True)
class _Beam:
    """Ray of the beam at S steps: a point (S, 3) on it and its direction (S, 3)."""

    point: FloatArray
    direction: FloatArray


def part_axes(incidence: FloatArray, mount: MountTruth) -> FloatArray:
    """Axes (S, 3, 3) of a part turned by ``incidence`` (S,) rad about +y.

    Columns: grating vector, groove direction, normal. The part is tilted about x and
    its grooves are turned about its own normal.
    """
    seated = rotation(0, mount.part_tilt_rad) @ rotation(2, mount.groove_azimuth_rad)
    return np.asarray(rotation(1, incidence) @ seated)


def possible_orders(truth: Truth, laser: str) -> NDArray[np.int64]:
    """All orders (M,) that can leave at some incidence, ascending, -m to m."""
    ratio = truth.air_wavelength_mm(laser) / truth.grating_period_mm()
    highest = max(1, int(np.floor(2.0 / ratio)))
    return np.arange(-highest, highest + 1)


def trace_orders(truth: Truth, bench: Bench, steps: Steps) -> Landing:
    """Every possible order of ``steps.laser`` at every step, on the screen."""
    beam = _beam_of(truth, bench, steps)
    return _whole_beam(truth, bench, steps, _trace(truth, bench, steps, beam))


def trace_bundle(
    truth: Truth, bench: Bench, steps: Steps, *, apart_mm: float = 0.05
) -> tuple[Landing, FloatArray]:
    """The landing, and how the beam's cross-section maps to the screen (S, M, 2, 2).

    Column 0 of each matrix is the movement on the screen per mm of beam moved along x,
    column 1 along y: three rays traced, no closed form.
    """
    beam = _beam_of(truth, bench, steps)
    chief = _trace(truth, bench, steps, beam)
    columns = []
    for step_mm in ((apart_mm, 0.0, 0.0), (0.0, apart_mm, 0.0)):
        moved = replace(beam, point=beam.point + np.array(step_mm))
        aside = _trace(truth, bench, steps, moved)
        columns.append((aside.place_mm - chief.place_mm) / apart_mm)
    return _whole_beam(truth, bench, steps, chief), np.stack(columns, axis=-1)


def _beam_of(truth: Truth, bench: Bench, steps: Steps) -> _Beam:
    direction = beam_direction(truth, bench, steps.planned_s)
    point = np.array([truth.beam.offset_mm, truth.beam.height_mm, 0.0])
    return _Beam(np.broadcast_to(point, direction.shape), direction)


def _pose_of(truth: Truth, bench: Bench, steps: Steps) -> _Pose:
    effects = twin_settings(bench).effects
    mount = truth.mounts[steps.mount]
    axes = part_axes(incidence_rad(truth, bench, steps), mount)
    about_x, about_z = wobble_rad(truth, bench, steps.stage_deg)
    radius_mm = effects.part_radius_m * 1e3
    part, side = truth.part, face_side(steps)
    return _Pose(
        axes=rotation(0, about_x) @ rotation(2, about_z) @ axes,
        surface_offset_mm=mount.surface_offset_mm,
        bend_per_mm=1.0 / radius_mm if radius_mm > 0.0 else 0.0,
        cover=Cover(
            part.cover_mm,
            part.cover_index,
            side * part.wedge_across_rad,
            side * part.wedge_along_rad,
        ),
        track_per_mm=side / part.track_radius_mm if part.track_radius_mm else 0.0,
        level_mm=truth.beam.height_mm,
    )


def _surface_at(pose: _Pose, beam: _Beam) -> tuple[FloatArray, Grooves]:
    """Where the beam meets the part (S, 3), and the grooves there."""
    across, normal = pose.axes[..., :, 0], pose.axes[..., :, 2]
    apex = pose.surface_offset_mm * normal
    point = meet_sphere(beam.point, beam.direction, apex, normal, pose.bend_per_mm)
    there = unit(normal + pose.bend_per_mm * (point - apex))
    # Grooves of a disc run round its centre, one radius off along the grating vector;
    # it was seated by the level of its orders, so at the height of the beam.
    level = apex + pose.level_mm * pose.axes[..., :, 1]
    outwards = across + pose.track_per_mm * (point - level)
    grating = unit(outwards - dot(outwards, there) * there)
    return point, Grooves(there, grating, np.cross(there, grating))


def _trace(truth: Truth, bench: Bench, steps: Steps, beam: _Beam) -> Landing:
    order = possible_orders(truth, steps.laser)
    pose = _pose_of(truth, bench, steps)
    entry, grooves = _surface_at(pose, beam)
    incoming = beam.direction[:, None, :]
    wavelength = air_wavelength_mm(
        truth, bench, steps.laser, steps.planned_s, steps.laser_state.shift_pm
    )
    period = grating_period_mm(truth, bench, steps.planned_s)
    ratio = order[None, :] * (wavelength / period)[:, None]
    normal = grooves.normal[:, None, :]
    met = Grooves(normal, grooves.grating[:, None, :], grooves.along[:, None, :])
    leaving, leaves, beside = orders_out(incoming, met, ratio[..., None], pose.cover)
    point = entry[:, None, :] + beside
    place, there = _arrive(truth, bench, point, leaving)
    share = order_share(
        order[None, :],
        cos_in=np.abs(dot(incoming, normal)[..., 0]),
        cos_out=dot(leaving, normal)[..., 0],
        wavelength_nm=truth.vacuum_wavelength_nm[steps.laser],
        relief=truth.phases.relief,
        lean=face_side(steps) * truth.phases.relief_lean,
    )
    lit = dot(incoming, normal)[..., 0] < -_GRAZING
    seen = leaves & there & lit & within_map(bench, place) & (share > FAINTEST)
    planned = np.broadcast_to(steps.planned_s[:, None], place.shape[:-1])
    share = share * steps.laser_state.power * _on_the_part(bench, steps, pose, entry)
    return Landing(order, reported(truth, bench, place, planned), share, seen)


def _arrive(
    truth: Truth, bench: Bench, point: FloatArray, leaving: FloatArray
) -> tuple[FloatArray, BoolArray]:
    """True places on the screen, or on the sensor of a camera focused at infinity."""
    if bench.screen.kind == "camera-at-infinity":
        return focus(leaving, truth.screen)
    return land(point, leaving, truth.screen, bow_per_mm(bench))


def _on_the_part(
    bench: Bench, steps: Steps, pose: _Pose, entry: FloatArray
) -> FloatArray:
    """1 (S, 1) where the ray meets the part, 0 where it passes its edge."""
    edge_mm = twin_settings(bench).effects.part_edge_mm
    if edge_mm <= 0.0:
        return np.ones((entry.shape[0], 1))
    along = face_side(steps) * dot(entry, pose.axes[..., :, 0])
    return np.asarray(along > -edge_mm, dtype=np.float64)


def _whole_beam(truth: Truth, bench: Bench, steps: Steps, chief: Landing) -> Landing:
    """The centre of light of each order, where the beam's width moves it.

    Rays over the beam's cross-section, weighted by the light in each; on a part with
    straight grooves that the beam does not overrun the one ray in the middle serves.
    """
    across = _EVEN if twin_settings(bench).effects.part_edge_mm > 0.0 else _MIDDLE
    up = _ROUND if truth.part.track_radius_mm > 0.0 else _MIDDLE
    if across is _MIDDLE and up is _MIDDLE:
        return chief
    rms_mm = bench.beam.diameter_mm / 4.0
    beam = _beam_of(truth, bench, steps)
    light, moment = np.zeros_like(chief.share), np.zeros_like(chief.place_mm)
    total, seen = 0.0, chief.visible.copy()
    for (x, weight_x), (y, weight_y) in product(across, up):
        aside = rms_mm * np.array([x, y, 0.0])
        ray = _trace(truth, bench, steps, replace(beam, point=beam.point + aside))
        weight = weight_x * weight_y * ray.share
        seen &= ray.visible
        total += weight_x * weight_y
        light += weight
        moment += weight[..., None] * ray.place_mm
    place = moment / np.maximum(light, 1e-12)[..., None]
    seen &= light > FAINTEST * total
    return replace(chief, place_mm=place, share=light / total, visible=seen)
