"""The spots door: positions of orders without frames, for statistics.

Fed by the same rays as the photons door. Every reading carries its stated standard
uncertainty, which is the one it was made with; wild points, ghosts and missing orders
do not say so.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.devices import Label, SpotReading
from pitchsweep.drivers.twin.effects import (
    NO_FAULT,
    LaserState,
    Steps,
    ghost_shift_mm,
    single_step,
)
from pitchsweep.drivers.twin.keyed_noise import keyed_generator
from pitchsweep.drivers.twin.optics import Landing, trace_orders
from pitchsweep.drivers.twin.rays import BoolArray, FloatArray
from pitchsweep.drivers.twin.screen import on_hole, on_screen
from pitchsweep.drivers.twin.truth import Truth, twin_settings

GHOST_ORDER = -(2**31)
"""Stands in an order column where a spot is no order of the part."""

HOLE_MARGIN_MM = 1.5
"""A spot nearer than this to the beam hole is cut by it and not reported."""


@dataclass(frozen=True)
class SpotSweep:
    """Spots of many steps of one mount and laser; every column has length N.

    ``order`` is the true order or GHOST_ORDER; nothing that analyses may look at it
    but to judge. ``brightness`` is the light in mW. Rows run by step, then by order.
    """

    laser: str
    step: NDArray[np.int64]
    stage_deg: FloatArray
    mount_deg: FloatArray
    order: NDArray[np.int64]
    x_mm: FloatArray
    y_mm: FloatArray
    ux_mm: FloatArray
    uy_mm: FloatArray
    brightness: FloatArray


def spots(
    truth: Truth,
    bench: Bench,
    label: Label,
    *,
    stage_deg: float,
    mount_deg: float,
    from_above: bool = False,
    laser_state: LaserState = NO_FAULT,
) -> list[SpotReading]:
    """The spots of one step, from left to right, in nominal screen millimetres.

    ``stage_deg`` is what the stage reads, ``mount_deg`` how the part is seated.
    """
    steps = single_step(
        label,
        stage_deg=stage_deg,
        mount_deg=mount_deg,
        from_above=from_above,
        laser_state=laser_state,
    )
    sweep = sweep_spots(truth, bench, steps, exposure=label.exposure)
    columns = (sweep.x_mm, sweep.y_mm, sweep.ux_mm, sweep.uy_mm, sweep.brightness)
    rows = sorted(zip(*(column.tolist() for column in columns), strict=True))
    return [SpotReading(*row) for row in rows]


def sweep_spots(
    truth: Truth, bench: Bench, steps: Steps, *, exposure: int = 0
) -> SpotSweep:
    """The spots of all ``steps`` at once; equal to ``spots`` step by step."""
    landing = trace_orders(truth, bench, steps)
    shape = landing.share.shape
    order = np.broadcast_to(landing.order, shape)
    place, share = landing.place_mm, landing.share
    seen = landing.visible & _usable(bench, place)
    ghost = twin_settings(bench).effects.ghost_fraction
    if ghost > 0.0:
        copies = place + ghost_shift_mm(truth)
        seen_copies = landing.visible & _usable(bench, copies)
        order = np.concatenate((order, np.full(shape, GHOST_ORDER)), axis=1)
        place = np.concatenate((place, copies), axis=1)
        share = np.concatenate((share, ghost * share), axis=1)
        seen = np.concatenate((seen, seen_copies), axis=1)
    errors, kept = _reading_noise(truth, bench, steps, landing, exposure)
    if ghost > 0.0:
        errors, kept = np.tile(errors, (1, 2, 1)), np.tile(kept, (1, 2))
    seen = seen & kept
    read = (place + errors)[seen]
    rows = np.nonzero(seen)[0]
    stated = np.full(rows.shape, twin_settings(bench).spot_reading_mm)
    return SpotSweep(
        laser=steps.laser,
        step=steps.step[rows],
        stage_deg=steps.stage_deg[rows],
        mount_deg=np.full(rows.shape, steps.mount_deg),
        order=order[seen],
        x_mm=read[:, 0],
        y_mm=read[:, 1],
        ux_mm=stated,
        uy_mm=stated.copy(),
        brightness=share[seen] * bench.lasers[steps.laser].power_mw,
    )


def _usable(bench: Bench, place_mm: FloatArray) -> BoolArray:
    return on_screen(bench, place_mm) & ~on_hole(bench, place_mm, HOLE_MARGIN_MM)


def _reading_noise(
    truth: Truth, bench: Bench, steps: Steps, landing: Landing, exposure: int
) -> tuple[FloatArray, BoolArray]:
    """Reading errors (S, M, 2) in mm, and which orders are not missing (S, M)."""
    settings = twin_settings(bench)
    effects = settings.effects
    count = landing.order.shape[0]
    gauss = np.empty((*landing.share.shape, 2))
    even = np.empty((*landing.share.shape, 4))
    for i, step in enumerate(steps.step):
        generator = keyed_generator(
            truth.seed,
            "spot reading",
            mount=steps.mount,
            laser=steps.laser,
            repeat=steps.repeat,
            step=int(step),
            exposure=exposure,
        )
        gauss[i] = generator.standard_normal((count, 2))
        even[i] = generator.random((count, 4))
    wild = (even[..., 0] < effects.wild_fraction)[..., None]
    astray = effects.wild_mm * (2.0 * even[..., 2:] - 1.0)
    errors = settings.spot_reading_mm * gauss + np.where(wild, astray, 0.0)
    return errors, np.asarray(even[..., 1] >= effects.missing_fraction)
