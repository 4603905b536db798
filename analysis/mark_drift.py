"""Camera shift and scale of each step from the marks seen in it (pure).

All steps see the same marks, so their mean places over the run are the reference: a
constant offset of the camera is the fit's to find. A step's places are
(1 + s) * reference + d; d and s are solved by weighted least squares.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.records import FloatArray

_SPAN_FOR_SCALE_MM = 20.0
"""Marks nearer together than this tell no scale."""


@dataclass(frozen=True)
class MarkPlace:
    """A mark of a step by its number: place on the nominal screen, u of either axis."""

    number: int
    x_mm: float
    y_mm: float
    u_mm: float


@dataclass(frozen=True)
class StepDrift:
    """Shift (mm) and relative scale of a step, variances, and about which point."""

    shift_mm: tuple[float, float]
    scale: float
    variance_mm2: float
    variance_scale: float
    centre_mm: tuple[float, float]

    def undone(self, x_mm: float, y_mm: float) -> tuple[float, float]:
        """Where a spot would have been seen without the drift."""
        cx, cy = self.centre_mm
        grown = 1.0 + self.scale
        return (
            cx + (x_mm - cx - self.shift_mm[0]) / grown,
            cy + (y_mm - cy - self.shift_mm[1]) / grown,
        )

    def added_variance_mm2(self, x_mm: float, y_mm: float) -> tuple[float, float]:
        """What the correction adds to the variances of x and y there."""
        cx, cy = self.centre_mm
        return (
            self.variance_mm2 + self.variance_scale * (x_mm - cx) ** 2,
            self.variance_mm2 + self.variance_scale * (y_mm - cy) ** 2,
        )


def drifts(steps: Sequence[Sequence[MarkPlace]]) -> list[StepDrift | None]:
    """The drift of every step; None for a step that shows no mark.

    The order of the steps does not matter.
    """
    reference = _reference(steps)
    return [_drift(marks, reference) for marks in steps]


def _reference(
    steps: Sequence[Sequence[MarkPlace]],
) -> dict[int, tuple[float, float]]:
    places: dict[int, list[tuple[float, float]]] = {}
    for marks in steps:
        for mark in marks:
            places.setdefault(mark.number, []).append((mark.x_mm, mark.y_mm))
    out = {}
    for number, seen in sorted(places.items()):
        x, y = np.median(np.sort(np.array(seen), axis=0), axis=0)
        out[number] = (float(x), float(y))
    return out


def _drift(
    marks: Sequence[MarkPlace], reference: dict[int, tuple[float, float]]
) -> StepDrift | None:
    if not marks:
        return None
    weight = np.array([1.0 / m.u_mm**2 for m in marks])
    there: FloatArray = np.array([reference[m.number] for m in marks])
    off = np.array([(m.x_mm, m.y_mm) for m in marks]) - there
    total = float(weight.sum())
    centre = weight @ there / total
    lever = there - centre
    power = float(weight @ np.sum(lever**2, axis=1))
    span = float(np.ptp(there, axis=0).max())
    shift = weight @ off / total
    if span < _SPAN_FOR_SCALE_MM:
        scale, variance_scale = 0.0, 0.0
    else:
        scale = float(weight @ np.sum(lever * (off - shift), axis=1)) / power
        variance_scale = 1.0 / power
    return StepDrift(
        shift_mm=(float(shift[0]), float(shift[1])),
        scale=scale,
        variance_mm2=1.0 / total,
        variance_scale=variance_scale,
        centre_mm=(float(centre[0]), float(centre[1])),
    )
