"""Where a ray lands on the true screen, and what the nominal map says of that place."""

import numpy as np
from numpy.polynomial import chebyshev

from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.twin.effects import S_PER_H
from pitchsweep.drivers.twin.rays import BoolArray, FloatArray, rotation
from pitchsweep.drivers.twin.truth import MAP_DEGREES, ScreenTruth, Truth, twin_settings

_BEYOND = 1.25
"""The map error is held beyond this many half-widths; nothing there is seen."""


def land(
    start: FloatArray, direction: FloatArray, screen: ScreenTruth, bow_per_mm: float
) -> tuple[FloatArray, BoolArray]:
    """Screen coordinates (..., 2) in true mm, and whether the ray gets there (...).

    ``bow_per_mm`` bends the screen: its depth is bow_per_mm * (u^2 + v^2), u and v
    from the point where nominal +z meets it.
    """
    axes = (
        rotation(2, screen.roll_rad)
        @ rotation(1, screen.tilt_y_rad)
        @ rotation(0, screen.tilt_x_rad)
    )
    origin = (start - np.array([0.0, 0.0, screen.distance_mm])) @ axes
    heading = direction @ axes
    there = heading[..., 2] > 0.02
    forward = np.where(there, heading[..., 2], 1.0)
    travel = -origin[..., 2] / forward
    for _ in range(3 if bow_per_mm else 0):
        depth = bow_per_mm * np.sum(_flat(origin, heading, travel) ** 2, axis=-1)
        travel = (depth - origin[..., 2]) / forward
    offset = np.array([screen.offset_x_mm, screen.offset_y_mm])
    return _flat(origin, heading, travel) - offset, there


def focus(direction: FloatArray, screen: ScreenTruth) -> tuple[FloatArray, BoolArray]:
    """Places (..., 2) on the sensor of a camera focused at infinity, mm, and if seen.

    ``screen.distance_mm`` is the focal length; where a ray starts does not matter.
    """
    axes = (
        rotation(2, screen.roll_rad)
        @ rotation(1, screen.tilt_y_rad)
        @ rotation(0, screen.tilt_x_rad)
    )
    heading = direction @ axes
    there = heading[..., 2] > 0.02
    forward = np.where(there, heading[..., 2], 1.0)[..., None]
    offset = np.array([screen.offset_x_mm, screen.offset_y_mm])
    return screen.distance_mm * heading[..., :2] / forward - offset, there


def _flat(origin: FloatArray, heading: FloatArray, travel: FloatArray) -> FloatArray:
    return np.asarray(origin[..., :2] + travel[..., None] * heading[..., :2])


def bow_per_mm(bench: Bench) -> float:
    """Curvature of the screen such that its depth at the half-width is the setting."""
    half = bench.screen.width_mm / 2.0
    return twin_settings(bench).effects.screen_bow_mm / half**2


def reported(
    truth: Truth, bench: Bench, place_mm: FloatArray, planned_s: FloatArray
) -> FloatArray:
    """What the nominal pixel map reports of true places (..., 2), in mm.

    Map error, lens distortion and the camera's drift at ``planned_s`` (...).
    """
    effects = twin_settings(bench).effects
    half = np.array([bench.screen.width_mm, bench.screen.height_mm]) / 2.0
    x, y = np.moveaxis(np.clip(place_mm / half, -_BEYOND, _BEYOND), -1, 0)
    shape = (MAP_DEGREES[0] + 1, MAP_DEGREES[1] + 1)
    error = [
        chebyshev.chebval2d(x, y, np.reshape(terms, shape))
        for terms in (truth.screen.map_x, truth.screen.map_y)
    ]
    bulge = effects.distortion_mm / half[0] ** 3
    radius2 = np.sum(place_mm**2, axis=-1, keepdims=True)
    radius2 = np.minimum(radius2, (2.0 * half[0]) ** 2)
    lens = bulge * radius2 * place_mm
    hours = np.asarray(planned_s)[..., None] / S_PER_H
    phase = truth.phases.camera
    way = np.array([np.cos(phase), np.sin(phase)])
    shift = effects.camera_shift_um_per_h * 1e-3 * hours * way
    grown = 1.0 + effects.camera_scale_ppm_per_h * 1e-6 * hours
    return np.asarray((place_mm + np.stack(error, axis=-1) + lens) * grown + shift)


def within_map(bench: Bench, place_mm: FloatArray) -> BoolArray:
    """Whether true places (..., 2) are near enough to the screen to be looked at."""
    half = np.array([bench.screen.width_mm, bench.screen.height_mm]) / 2.0
    return np.asarray(np.all(np.abs(place_mm) < _BEYOND * half, axis=-1))


def on_screen(bench: Bench, place_mm: FloatArray) -> BoolArray:
    """Whether reported places (..., 2) lie within the screen's rectangle."""
    half = np.array([bench.screen.width_mm, bench.screen.height_mm]) / 2.0
    return np.asarray(np.all(np.abs(place_mm) < half, axis=-1))


def on_hole(bench: Bench, place_mm: FloatArray, margin_mm: float) -> BoolArray:
    """Whether reported places (..., 2) lie on the beam hole or within the margin."""
    hole = bench.screen.hole
    away = place_mm - np.array([hole.x_mm, hole.y_mm])
    return np.asarray(
        np.hypot(away[..., 0], away[..., 1]) < hole.diameter_mm / 2.0 + margin_mm
    )
