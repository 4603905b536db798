"""Pixels to nominal screen millimetres and back, with covariance.

x = mm_per_px * (column - centre_column_px), y = -mm_per_px * (row - centre_row_px):
columns grow to +x, rows grow downwards, which is -y.
"""

from dataclasses import dataclass

from pitchsweep.analysis.records import Spot
from pitchsweep.configs.bench_model import Camera


@dataclass(frozen=True)
class ScreenSpot:
    """A position on the nominal screen, mm, with standard uncertainties.

    ``cxy_mm2`` is the covariance of x and y; ``shared_mm2`` (xx, xy, yy) the part of
    the covariance that repeats share.
    """

    x_mm: float
    y_mm: float
    ux_mm: float
    uy_mm: float
    cxy_mm2: float
    shared_mm2: tuple[float, float, float] = (0.0, 0.0, 0.0)


def screen_from_pixels(
    column_px: float, row_px: float, camera: Camera
) -> tuple[float, float]:
    """x, y in nominal screen millimetres of a place in the frame."""
    scale = camera.mm_per_px
    return (
        scale * (column_px - camera.centre_column_px),
        -scale * (row_px - camera.centre_row_px),
    )


def pixels_from_screen(x_mm: float, y_mm: float, camera: Camera) -> tuple[float, float]:
    """column, row in the frame of a nominal screen position."""
    return (
        camera.centre_column_px + x_mm / camera.mm_per_px,
        camera.centre_row_px - y_mm / camera.mm_per_px,
    )


def spot_on_screen(spot: Spot, camera: Camera) -> ScreenSpot:
    """``spot`` with its covariance carried over; the y axis turns the cross term."""
    x_mm, y_mm = screen_from_pixels(spot.column_px, spot.row_px, camera)
    (var_column, cross), (_, var_row) = spot.covariance_px2
    (shared_column, shared_cross), (_, shared_row) = spot.shared_px2
    scale = camera.mm_per_px
    return ScreenSpot(
        x_mm=x_mm,
        y_mm=y_mm,
        ux_mm=scale * var_column**0.5,
        uy_mm=scale * var_row**0.5,
        cxy_mm2=-(scale**2) * cross,
        shared_mm2=(
            scale**2 * shared_column,
            -(scale**2) * shared_cross,
            scale**2 * shared_row,
        ),
    )
