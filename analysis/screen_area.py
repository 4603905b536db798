"""Where on the screen a spot counts: the one rule, for spots seen and for predicted."""

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.records import FloatArray
from pitchsweep.configs.bench_model import Bench

BoolArray = NDArray[np.bool_]


def on_hole(bench: Bench, x_mm: FloatArray, y_mm: FloatArray) -> BoolArray:
    """Which places (N,) lie on the beam hole, or so near that the hole cuts a spot."""
    hole = bench.screen.hole
    radius = hole.diameter_mm / 2.0 + bench.beam.diameter_mm
    return np.asarray(np.hypot(x_mm - hole.x_mm, y_mm - hole.y_mm) < radius)


def off_screen(bench: Bench, x_mm: FloatArray, y_mm: FloatArray) -> BoolArray:
    """Which places (N,) lie beside the screen wherever it may stand."""
    screen = bench.screen
    margin = 3.0 * screen.u_offset_mm
    beside = np.abs(x_mm) > screen.width_mm / 2.0 + margin
    return np.asarray(beside | (np.abs(y_mm) > screen.height_mm / 2.0 + margin))


def counts(bench: Bench, x_mm: FloatArray, y_mm: FloatArray) -> BoolArray:
    """Which places (N,) lie on the screen and off the hole."""
    return ~(on_hole(bench, x_mm, y_mm) | off_screen(bench, x_mm, y_mm))
