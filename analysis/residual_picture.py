"""What is left after the fit: residuals against incidence, and order by order."""

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from pitchsweep.analysis.picture_style import (
    BAND,
    INK,
    MANY_POINTS,
    PAGE_MM,
    SOFT_INK,
    Drawing,
    order_colour,
    order_marker,
    say_instead,
)
from pitchsweep.analysis.records import FloatArray, PitchResult
from pitchsweep.analysis.result_file import order_text

LEAST_HALF_RANGE = 3.5
LEAST_RANGE_DEG = 1.0
FEWEST_FOR_RMS = 5


def residuals_svg(result: PitchResult) -> str:
    """The SVG text of the residuals."""
    return residuals_drawing(result).svg()


def residuals_drawing(result: PitchResult) -> Drawing:
    """Residuals in x and y over their stated u, against incidence and by order."""

    def draw(figure: Figure) -> None:
        if not len(result.table):
            say_instead(figure.subplots(), "no spot was used")
            return
        panels = figure.subplots(
            2, 2, sharey=True, sharex="col", squeeze=False, width_ratios=(3.0, 1.3)
        )
        for row, (name, residual) in enumerate(
            (("x", result.residual_x), ("y", result.residual_y))
        ):
            draw_residuals(panels[row, 0], result, residual)
            draw_by_order(panels[row, 1], result, residual)
            panels[row, 0].set_ylabel(f"{name}: (measured − fitted) / u")
        panels[0, 0].set_title("against incidence")
        panels[0, 1].set_title("by order (number: rms)")
        panels[1, 0].set_xlabel("fitted incidence, degrees")
        panels[1, 1].set_xlabel("order")

    return Drawing(draw, "residuals", PAGE_MM, 94.0)


def draw_residuals(axes: Axes, result: PitchResult, residual: FloatArray) -> None:
    """One coordinate's residuals (units of u) against incidence; band at 2 u."""
    _band(axes, residual)
    order = result.table.order
    for m in sorted(set(order.tolist())):
        here = order == m
        axes.scatter(
            result.incidence_deg[here],
            residual[here],
            s=marker_area(len(order)),
            marker=order_marker(m),
            color=order_colour(m),
            alpha=0.75,
            linewidths=0.0,
            rasterized=len(order) > MANY_POINTS,
        )
    _widen(axes)


def _widen(axes: Axes) -> None:
    """Keeps readings at one angle from an axis of rounding errors."""
    low, high = axes.get_xlim()
    if high - low < LEAST_RANGE_DEG:
        middle = 0.5 * (low + high)
        axes.set_xlim(middle - 0.5 * LEAST_RANGE_DEG, middle + 0.5 * LEAST_RANGE_DEG)


def draw_by_order(axes: Axes, result: PitchResult, residual: FloatArray) -> None:
    """The same residuals in one column for each order, with its rms as text."""
    _band(axes, residual)
    order = result.table.order
    names = sorted(set(order.tolist()))
    for place, m in enumerate(names):
        mine = residual[order == m]
        spread = 0.5 * ((np.arange(len(mine)) * 0.618034) % 1.0 - 0.5)
        axes.scatter(
            place + spread,
            mine,
            s=0.6 * marker_area(len(order)),
            marker=order_marker(m),
            color=order_colour(m),
            alpha=0.45,
            linewidths=0.0,
            rasterized=len(order) > MANY_POINTS,
        )
        if len(mine) < FEWEST_FOR_RMS:
            continue
        rms = float(np.sqrt(np.mean(mine**2)))
        axes.plot([place - 0.36, place + 0.36], [rms, rms], color=INK, lw=0.9)
        axes.plot([place - 0.36, place + 0.36], [-rms, -rms], color=INK, lw=0.9)
        axes.text(
            place,
            0.99,
            f"{rms:.1f}",
            transform=axes.get_xaxis_transform(),
            ha="center",
            va="top",
            fontsize=6.0,
            color=SOFT_INK,
        )
    axes.set_xticks(range(len(names)), [order_text(m) for m in names])
    axes.set_xlim(-0.7, len(names) - 0.3)


def marker_area(spots: int) -> float:
    """Size of a marker in square points: large for a few spots, small for many."""
    if spots < 60:
        return 20.0
    return 7.0 if spots < 1500 else 3.0


def _band(axes: Axes, residual: FloatArray) -> None:
    largest = float(np.max(np.abs(residual), initial=0.0))
    low, high = axes.get_ylim()
    shown = max(abs(low), abs(high)) if axes.has_data() else 0.0
    half = max(LEAST_HALF_RANGE, 1.12 * largest, shown)
    axes.axhspan(-2.0, 2.0, color=BAND, lw=0.0)
    axes.axhline(0.0, color=SOFT_INK, lw=0.6)
    axes.set_ylim(-half, half)
