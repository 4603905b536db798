"""A window to look through: one step's frame, its candidates, one spot's residuals."""

from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle
from numpy.typing import NDArray

from pitchsweep.analysis.frame_strip import draw_log_frame
from pitchsweep.analysis.picture_style import (
    ACCENT,
    LIMIT,
    PAGE_MM,
    drawable,
    halo,
    png_picture,
)
from pitchsweep.analysis.records import FloatArray

SHOWN_PX = 1400
_LISTED = 14
_RESIDUAL_LIMIT = 4.0


@dataclass(frozen=True)
class WindowShown:
    """A candidate: number, window (centre and half sides, px), what became of it."""

    number: int
    column_px: float
    row_px: float
    half_px: tuple[float, float]
    verdict: str
    accepted: bool


@dataclass(frozen=True)
class SpotShown:
    """The window of one spot: light and model in DN a ms, residual over its u."""

    number: int
    light: FloatArray
    model: FloatArray
    residual: FloatArray
    extent_px: tuple[float, float, float, float]


@dataclass(frozen=True)
class StepShown:
    """A step: ``image`` (rows, columns) of its longest exposure and what was found."""

    image: NDArray[np.uint16]
    title: str
    windows: tuple[WindowShown, ...]
    spot: SpotShown | None


def step_png(shown: StepShown) -> bytes:
    """The step as a PNG: frame on a logarithmic scale, windows, list, residuals."""
    rows, columns = shown.image.shape
    frame_mm = min(max(PAGE_MM * rows / columns, 30.0), 150.0)
    lower_mm = 44.0
    height_mm = frame_mm + lower_mm + 16.0

    def draw(figure: Figure) -> None:
        grid = figure.add_gridspec(
            2,
            4,
            height_ratios=[frame_mm, lower_mm],
            width_ratios=[1.0, 1.0, 1.0, 1.7],
            left=0.02,
            right=0.99,
            top=1.0 - 6.0 / height_mm,
            bottom=0.03,
            hspace=0.12,
            wspace=0.12,
        )
        _draw_frame(figure.add_subplot(grid[0, :]), shown)
        panels = [figure.add_subplot(grid[1, k]) for k in range(4)]
        _draw_spot(panels[:3], shown.spot)
        _draw_list(panels[3], shown.windows)

    return png_picture(
        draw, name="step", width_mm=PAGE_MM, height_mm=height_mm, dpi=200.0
    )


def _draw_frame(axes: Axes, shown: StepShown) -> None:
    rows = draw_log_frame(axes, shown.image, SHOWN_PX)
    for window in shown.windows:
        _draw_window(axes, window, rows)
    _framed(axes)
    axes.set_title(drawable(shown.title, length=120), pad=3.0)


def _framed(axes: Axes) -> None:
    axes.set_xticks([])
    axes.set_yticks([])
    for side in axes.spines.values():
        side.set_visible(True)


def _draw_window(axes: Axes, window: WindowShown, rows: int) -> None:
    colour = ACCENT if window.accepted else LIMIT
    wide, high = window.half_px
    axes.add_patch(
        Rectangle(
            (window.column_px - wide, window.row_px - high),
            2.0 * wide,
            2.0 * high,
            fill=False,
            edgecolor=colour,
            linewidth=0.9,
            linestyle="-" if window.accepted else ":",
        )
    )
    place, offset, align = _label_place(window, rows)
    axes.annotate(
        str(window.number),
        place,
        xytext=offset,
        textcoords="offset points",
        ha=align[0],
        va=align[1],
        fontsize=7.0,
        fontweight="bold" if window.accepted else "normal",
        color=colour,
        path_effects=halo(),
        annotation_clip=True,
    )


def _label_place(
    window: WindowShown, rows: int
) -> tuple[tuple[float, float], tuple[float, float], tuple[str, str]]:
    """Where a number stands (px), offset (points) and alignment.

    Those of spots above or below the window, of refused candidates beside it: the
    two often lie on each other.
    """
    wide, high = window.half_px
    if not window.accepted:
        return (
            (window.column_px + wide, window.row_px),
            (2.0, 0.0),
            ("left", "center"),
        )
    below = window.row_px - high < 0.06 * rows
    edge = window.row_px + high if below else window.row_px - high
    return (
        (window.column_px, edge),
        (0.0, -2.0 if below else 2.0),
        ("center", "top" if below else "bottom"),
    )


def _draw_spot(panels: list[Axes], spot: SpotShown | None) -> None:
    for axes in panels:
        _framed(axes)
        axes.set_anchor("N")
    if spot is None:
        for axes in panels:
            axes.set_axis_off()
        panels[0].set_title("no candidate to show")
        return
    top = max(float(np.max(spot.model)), 1e-12)
    for axes, values, title in (
        (panels[0], spot.light, f"window {spot.number}: light"),
        (panels[1], spot.model, "model"),
    ):
        axes.imshow(
            np.clip(values / top, 0.0, 1.0) ** 0.5,
            cmap="Greys",
            vmin=0.0,
            vmax=1.0,
            extent=spot.extent_px,
            interpolation="nearest",
        )
        axes.set_title(title, pad=3.0)
    limit = _RESIDUAL_LIMIT
    panels[2].imshow(
        spot.residual,
        cmap="PuOr_r",
        vmin=-limit,
        vmax=limit,
        extent=spot.extent_px,
        interpolation="nearest",
    )
    panels[2].set_title(f"residual over u, to \N{PLUS-MINUS SIGN}{limit:g}", pad=3.0)


def _draw_list(axes: Axes, windows: tuple[WindowShown, ...]) -> None:
    axes.set_axis_off()
    lines = windows[:_LISTED]
    for k, window in enumerate(lines):
        axes.text(
            0.0,
            1.0 - k / _LISTED,
            drawable(f"{window.number}  {window.verdict}", length=70),
            transform=axes.transAxes,
            va="top",
            fontsize=5.6,
            color=ACCENT if window.accepted else LIMIT,
        )
    if len(windows) > _LISTED:
        axes.text(
            0.0,
            -0.04,
            f"and {len(windows) - _LISTED} more",
            transform=axes.transAxes,
            va="top",
            fontsize=5.6,
        )
