"""Light in the frames that is no order: marks, a smear stripe, stray reflections."""

import numpy as np

from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.twin_model import TwinEffects
from pitchsweep.drivers.twin.keyed_noise import keyed_generator
from pitchsweep.drivers.twin.rays import FloatArray
from pitchsweep.drivers.twin.screen import reported
from pitchsweep.drivers.twin.truth import Truth, twin_settings

_MARK_SIGMA_PX = 1.8
_MARK_REACH_PX = 10


def add_marks(
    image: FloatArray, truth: Truth, bench: Bench, planned_s: float, exposure_ms: float
) -> None:
    """Adds the marks' electrons to ``image`` (rows, columns), in place.

    They shine by themselves and are seen through the same moving camera as the orders.
    """
    peak = twin_settings(bench).effects.mark_e_per_ms * exposure_ms
    if not bench.screen.marks_mm or peak <= 0.0:
        return
    true_mm = np.array(bench.screen.marks_mm, dtype=np.float64)
    seen = reported(truth, bench, true_mm, np.full(len(true_mm), planned_s))
    camera = bench.camera
    for x_mm, y_mm in seen:
        column = camera.centre_column_px + x_mm / camera.mm_per_px
        row = camera.centre_row_px - y_mm / camera.mm_per_px
        left, top = round(column) - _MARK_REACH_PX, round(row) - _MARK_REACH_PX
        columns = np.arange(max(left, 0), min(left + 21, image.shape[1]))
        rows = np.arange(max(top, 0), min(top + 21, image.shape[0]))
        if columns.size == 0 or rows.size == 0:
            continue
        along = np.exp(-0.5 * ((columns - column) / _MARK_SIGMA_PX) ** 2)
        down = np.exp(-0.5 * ((rows - row) / _MARK_SIGMA_PX) ** 2)
        box = (slice(rows[0], rows[-1] + 1), slice(columns[0], columns[-1] + 1))
        image[box] += peak * down[:, None] * along[None, :]


def add_smear(image: FloatArray, effects: TwinEffects) -> None:
    """Adds to each column a share of its sum, as read-out through light does."""
    if effects.smear_fraction > 0.0:
        image += effects.smear_fraction * image.sum(axis=0) / image.shape[0]


def stray_places(truth: Truth, stage_deg: float) -> FloatArray:
    """Where two reflections land that are no orders, mm (2, 2).

    The first stands still; the second turns against the part.
    """
    draw = keyed_generator(truth.seed, "stray reflections")
    x, y = draw.uniform(40.0, 120.0, 2), draw.uniform(-30.0, 30.0, 2)
    side = np.where(draw.random(2) < 0.5, -1.0, 1.0)
    turned = np.array([0.0, -1.5 * stage_deg])
    return np.stack((side * x + turned, y), axis=1)
