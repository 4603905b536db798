"""A strip of frames on a logarithmic scale with their spots marked."""

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from pitchsweep.analysis.picture_style import (
    ACCENT,
    LIMIT,
    PAGE_MM,
    Drawing,
    drawable,
    halo,
)
from pitchsweep.analysis.report_context import FrameMark, FrameShown

MOST_FRAMES = 6
SHOWN_PX = 560
"""Frames wider than this are reduced; each block keeps its brightest pixel."""


def frames_png(frames: tuple[FrameShown, ...]) -> bytes:
    """The PNG bytes of the strip. Raises ValueError where there is no frame."""
    return frames_drawing(frames).png()


def frames_drawing(frames: tuple[FrameShown, ...]) -> Drawing:
    """Up to six frames, dark on white: circles are orders, crosses refused spots.

    Raises ValueError where there is no frame.
    """
    if not frames:
        raise ValueError("a strip needs at least one frame")
    shown = spread(frames, MOST_FRAMES)
    rows, width = shown[0].image.shape
    columns = 2 if width > 1.6 * rows else 3
    columns = min(columns, len(shown))
    lines = -(-len(shown) // columns)
    panel_mm = PAGE_MM / columns
    height = lines * (panel_mm * rows / width + 6.0)

    def draw(figure: Figure) -> None:
        panels = figure.subplots(lines, columns, squeeze=False)
        for axes in panels.flat:
            axes.set_axis_off()
        for axes, frame in zip(panels.flat, shown, strict=False):
            _draw_frame(axes, frame)

    return Drawing(draw, "frames", PAGE_MM, height)


def spread(frames: tuple[FrameShown, ...], most: int) -> tuple[FrameShown, ...]:
    """At most ``most`` frames, evenly chosen, first and last among them."""
    if len(frames) <= most:
        return frames
    places = np.linspace(0, len(frames) - 1, most).round().astype(int)
    return tuple(frames[place] for place in places)


def reduced(image: NDArray[np.uint16], shown_px: int) -> tuple[NDArray[np.uint16], int]:
    """``image`` (row, column) in blocks that keep their maximum, and the block size.

    Rows and columns that do not fill a block at the far edges are left out.
    """
    block = max(1, -(-image.shape[1] // shown_px))
    rows, columns = (size // block for size in image.shape)
    if block == 1 or rows == 0:
        return image, 1
    cut = image[: rows * block, : columns * block]
    blocks = cut.reshape(rows, block, columns, block)
    return blocks.max(axis=(1, 3)), block


def log_grey(image: NDArray[np.uint16]) -> NDArray[np.float64]:
    """Values 0 (background) to 1 (brightest), logarithmic above the median."""
    above = np.maximum(image.astype(np.float64) - float(np.median(image)), 0.0)
    noise = float(np.median(above[above > 0.0])) if np.any(above > 0.0) else 1.0
    grey = np.log1p(above / (4.0 * noise))
    brightest = float(grey.max())
    return grey / brightest if brightest > 0.0 else grey


def draw_log_frame(axes: Axes, whole: NDArray[np.uint16], shown_px: int) -> int:
    """Draws a frame (rows, columns) dark on light by its logarithm; its rows.

    The axes stay in pixels of the whole frame, whatever size is drawn.
    """
    image, block = reduced(whole, shown_px)
    rows, columns = (size * block for size in image.shape)
    axes.imshow(
        log_grey(image),
        cmap="Greys",
        vmin=0.0,
        vmax=1.0,
        extent=(-0.5, columns - 0.5, rows - 0.5, -0.5),
        interpolation="nearest",
    )
    axes.set_xlim(-0.5, columns - 0.5)
    axes.set_ylim(rows - 0.5, -0.5)
    # What is drawn on top must not change the limits.
    axes.set_autoscale_on(False)
    return int(rows)


def _draw_frame(axes: Axes, frame: FrameShown) -> None:
    axes.set_axis_on()
    axes.set_xticks([])
    axes.set_yticks([])
    for side in axes.spines.values():
        side.set_visible(True)
    rows = draw_log_frame(axes, frame.image, SHOWN_PX)
    for mark in frame.marks:
        _draw_mark(axes, mark, rows)
    title = (
        f"step {frame.step},  stage {frame.stage_deg:.2f}°,  {frame.exposure_ms:g} ms"
    )
    axes.set_title(title.replace("-", "\N{MINUS SIGN}"), pad=3.0)


def _draw_mark(axes: Axes, mark: FrameMark, rows: int) -> None:
    colour = ACCENT if mark.accepted else LIMIT
    axes.plot(
        [mark.column_px],
        [mark.row_px],
        marker="o" if mark.accepted else "x",
        ms=11.0 if mark.accepted else 5.5,
        mfc="none",
        mec=colour,
        mew=1.1,
    )
    below = mark.row_px < 0.2 * rows or not mark.accepted
    axes.annotate(
        drawable(mark.label, length=28),
        (mark.column_px, mark.row_px),
        xytext=(0.0, -9.0 if below else 8.0),
        textcoords="offset points",
        ha="center",
        va="top" if below else "bottom",
        fontsize=8.0 if mark.accepted else 6.0,
        fontweight="bold" if mark.accepted else "normal",
        color=colour,
        path_effects=halo(),
    )
