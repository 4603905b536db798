"""The form of a spot: an elliptical Gaussian.

Everywhere in the program a spot's position is the centre of this Gaussian, fitted to
the spot's light: the centre of its core, not its centroid. It has the same meaning for
every exposure, threshold, window and brightness.
"""

import math
from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.records import FloatArray


@dataclass(frozen=True)
class Shape:
    """A Gaussian height * exp(-(a dx^2 + 2 b dx dy + c dy^2) / 2); px, DN a ms."""

    height: float
    column_px: float
    row_px: float
    a: float
    b: float
    c: float

    @classmethod
    def round_spot(
        cls, height: float, column_px: float, row_px: float, sigma_px: float
    ) -> "Shape":
        """A circular spot."""
        inverse = 1.0 / sigma_px**2
        return cls(height, column_px, row_px, inverse, 0.0, inverse)

    def widths(self) -> tuple[float, float, float]:
        """rms radii (major, minor) in px, angle of the major axis from +column, rad."""
        middle, half = 0.5 * (self.a + self.c), 0.5 * (self.a - self.c)
        spread = math.hypot(half, self.b)
        major, minor = (middle - spread) ** -0.5, (middle + spread) ** -0.5
        return major, minor, 0.5 * math.atan2(-self.b, -half)

    def half_sides(self, sigmas: float) -> tuple[float, float]:
        """Half the sides (column, row) of the box that holds ``sigmas`` of it, px."""
        det = self.a * self.c - self.b**2
        return sigmas * (self.c / det) ** 0.5, sigmas * (self.a / det) ** 0.5

    def signal(self, x: FloatArray, y: FloatArray) -> FloatArray:
        """The spot without background at columns ``x`` (1, W) and rows ``y`` (H, 1)."""
        dx, dy = x - self.column_px, y - self.row_px
        quadratic = self.a * dx * dx + self.c * dy * dy + (2.0 * self.b) * (dx * dy)
        return np.asarray(self.height * np.exp(-0.5 * np.maximum(quadratic, 0.0)))

    def light_at(self, column_px: float, row_px: float, wider: float = 1.0) -> float:
        """Its light at one place, DN a ms, were it so many times as wide."""
        dx, dy = column_px - self.column_px, row_px - self.row_px
        square = self.a * dx * dx + 2.0 * self.b * dx * dy + self.c * dy * dy
        return self.height * math.exp(-0.5 * max(square, 0.0) / wider**2)

    def radii_away(self, column_px: float, row_px: float) -> float:
        """How many of its own rms radii a place is off its centre."""
        dx, dy = column_px - self.column_px, row_px - self.row_px
        square = self.a * dx * dx + 2.0 * self.b * dx * dy + self.c * dy * dy
        return math.sqrt(max(square, 0.0))
