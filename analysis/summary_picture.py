"""One picture that tells the whole: result, decision, tracks, residuals."""

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from pitchsweep.analysis.decision_words import decision_words
from pitchsweep.analysis.number_text import plain_percent, rounded
from pitchsweep.analysis.picture_style import (
    INK,
    LIMIT,
    SOFT_INK,
    drawable,
    png_picture,
    say_instead,
)
from pitchsweep.analysis.records import PitchResult
from pitchsweep.analysis.report_context import ReportContext
from pitchsweep.analysis.residual_picture import draw_residuals
from pitchsweep.analysis.track_picture import draw_hole, draw_tracks


def summary_png(result: PitchResult, context: ReportContext) -> bytes:
    """Result and decision as text above tracks and residuals, as PNG bytes.

    The tracks are those of the first laser and mount.
    """

    def draw(figure: Figure) -> None:
        halves: Any = figure.subfigures(2, 1, height_ratios=(0.36, 1.0))
        top, below = halves
        _draw_words(top.subplots(), result, context)
        left, right = below.subplots(1, 2, width_ratios=(1.25, 1.0))
        if not len(result.table):
            say_instead(left, "no spot was used")
            say_instead(right, "")
            return
        _draw_first_tracks(left, result, context)
        draw_residuals(right, result, result.residual_x)
        right.set_title("what the fit leaves over", pad=14.0)
        right.set_xlabel("incidence, degrees")
        right.set_ylabel("x: (measured − fitted) / u")

    return png_picture(draw, name="summary", width_mm=200.0, height_mm=125.0)


def _draw_first_tracks(axes: Axes, result: PitchResult, context: ReportContext) -> None:
    table = result.table
    mounts = sorted(set(table.mount_deg.tolist()))
    lasers = sorted(set(table.laser.tolist()))
    here = (table.mount_deg == mounts[0]) & (table.laser == lasers[0])
    draw_hole(axes, context.screen, named=True)
    draw_tracks(axes, result, here, np.asarray(result.incidence_deg))
    name = table.laser_names[lasers[0]]
    axes.set_title(drawable(f"where each order went, {name} laser"), pad=14.0)
    axes.set_xlabel("incidence, degrees")
    axes.set_ylabel("x on the screen, mm")


def _draw_words(axes: Axes, result: PitchResult, context: ReportContext) -> None:
    axes.set_axis_off()
    pitch = rounded(result.pitch_nm, result.U_pitch_nm)
    part = context.part
    name = f"{part.part}   serial {part.serial}   lot {part.lot}" if part else ""
    lines = [
        (0.95, drawable(name, length=90), 8.5, SOFT_INK),
        (0.64, f"{pitch.value} nm ± {pitch.u} nm", 19.0, INK),
        (
            0.32,
            f"groove pitch at {result.pitch_at_C:g} °C, k = {result.k:.2f},"
            f" coverage {plain_percent(result.coverage)}",
            8.5,
            SOFT_INK,
        ),
        (0.10, drawable(decision_words(result), length=90), 9.5, INK),
    ]
    for height, text, size, colour in lines:
        axes.text(
            0.005,
            height,
            text,
            fontsize=size,
            color=colour,
            va="center",
            transform=axes.transAxes,
        )
    if context.simulated:
        axes.text(
            0.995,
            0.95,
            "simulated bench: invented data",
            ha="right",
            va="center",
            color=LIMIT,
            fontsize=9.0,
            transform=axes.transAxes,
        )
