"""The tracks of all orders: where each spot was, and where the fit puts it."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from pitchsweep.analysis.picture_style import (
    HOLE,
    MANY_POINTS,
    PAGE_MM,
    REJECTED,
    SOFT_INK,
    Drawing,
    drawable,
    halo,
    order_colour,
    order_marker,
    say_instead,
)
from pitchsweep.analysis.records import FloatArray, PitchResult
from pitchsweep.analysis.report_context import ScreenFacts
from pitchsweep.analysis.result_file import order_text

MOUNTS_A_ROW = 4
LINE_POINTS = 9.0
"""Height of one line of track labels, in points."""


@dataclass(frozen=True)
class RejectedPlaces:
    """Spots not used whose stage angle is known: columns of equal length."""

    stage_deg: FloatArray
    mount_deg: FloatArray
    x_mm: FloatArray


def tracks_svg(result: PitchResult, screen: ScreenFacts | None) -> str:
    """The SVG text of the tracks."""
    return tracks_drawing(result, screen).svg()


def tracks_drawing(result: PitchResult, screen: ScreenFacts | None) -> Drawing:
    """x on the screen against stage angle, one panel for each laser and mount.

    Markers are readings, lines the fit, crosses spots not used, the band the beam
    hole. Orders are named at their tracks.
    """
    table = result.table
    mounts = sorted(set(table.mount_deg.tolist()))
    lasers = sorted(set(table.laser.tolist()))
    columns = max(1, min(MOUNTS_A_ROW, len(mounts)))
    mount_rows = max(1, -(-len(mounts) // columns))
    rows = mount_rows * max(1, len(lasers))

    def draw(figure: Figure) -> None:
        panels = figure.subplots(rows, columns, sharey=True, squeeze=False)
        if not len(table):
            say_instead(panels[0, 0], "no spot was used")
            return
        _draw_panels(panels, result, screen)

    height = 22.0 + (62.0 if rows > 1 else 70.0) * rows
    return Drawing(draw, "tracks", PAGE_MM, height)


def _draw_panels(
    panels: NDArray[Any], result: PitchResult, screen: ScreenFacts | None
) -> None:
    table = result.table
    mounts = sorted(set(table.mount_deg.tolist()))
    lasers = sorted(set(table.laser.tolist()))
    mount_rows = panels.shape[0] // len(lasers)
    places = rejected_places(result, screen)
    for axes in panels.flat:
        axes.set_visible(False)
    for i, laser in enumerate(lasers):
        for j, mount in enumerate(mounts):
            row = i * mount_rows + j // panels.shape[1]
            axes = panels[row, j % panels.shape[1]]
            axes.set_visible(True)
            here = (table.laser == laser) & (table.mount_deg == mount)
            draw_hole(axes, screen, named=(j + 1) % panels.shape[1] == 0)
            draw_rejected(axes, places, mount)
            draw_tracks(axes, result, here, table.stage_deg)
            several = f"{table.laser_names[laser]}, " if len(lasers) > 1 else ""
            axes.set_title(drawable(f"{several}mount {mount:g}°"), pad=14.0)
            axes.set_xlabel("stage angle, degrees")
            if j % panels.shape[1] == 0:
                axes.set_ylabel("x on the screen, mm")


def draw_tracks(
    axes: Axes,
    result: PitchResult,
    here: NDArray[np.bool_],
    angle_deg: FloatArray,
) -> None:
    """Readings, fitted lines and names of the orders of the spots in ``here``.

    ``here`` and ``angle_deg`` (degrees, the abscissa) have the length of the table.
    """
    table = result.table
    ends: list[tuple[float, float, int]] = []
    size = 9.0 if here.sum() < 400 else 5.0
    for order in sorted(set(table.order[here].tolist())):
        mine = np.flatnonzero(here & (table.order == order))
        mine = mine[np.argsort(angle_deg[mine], kind="stable")]
        angle, fitted = angle_deg[mine], result.fitted_x_mm[mine]
        colour = order_colour(order)
        line_angle, line_x = broken_line(angle, fitted)
        axes.plot(line_angle, line_x, color=colour, linewidth=0.9, alpha=0.85)
        axes.scatter(
            angle,
            table.x_mm[mine],
            s=size,
            marker=order_marker(order),
            facecolors="white",
            edgecolors=colour,
            linewidths=0.6,
            rasterized=len(table) > MANY_POINTS,
            zorder=3,
        )
        top = int(np.argmax(fitted))
        ends.append((float(angle[top]), float(fitted[top]), order))
    axes.grid(True)
    axes.margins(x=0.03)
    _name_tracks(axes, ends)


def _name_tracks(axes: Axes, ends: list[tuple[float, float, int]]) -> None:
    """Each order's name above the end of its track, stacked where they would meet."""
    if not ends:
        return
    low, high = axes.get_xlim()
    close = 0.055 * (high - low)
    bottom, top = axes.get_ylim()
    tall = 0.07 * (top - bottom)
    taken: list[tuple[float, float]] = []
    for angle, x_mm, order in sorted(ends):
        lines = 0
        while any(
            abs(angle - a) < close and abs(x_mm + lines * tall - b) < tall
            for a, b in taken
        ):
            lines += 1
        taken.append((angle, x_mm + lines * tall))
        axes.annotate(
            order_text(order),
            (angle, x_mm),
            xytext=(0.0, 5.0 + lines * LINE_POINTS),
            textcoords="offset points",
            ha="center",
            color=order_colour(order),
            fontweight="bold",
            path_effects=halo(),
            annotation_clip=False,
            zorder=5,
        ).set_in_layout(False)


def draw_hole(axes: Axes, screen: ScreenFacts | None, *, named: bool) -> None:
    """The band of the beam hole, ``named`` beside the panel, if the screen is known."""
    if screen is None:
        return
    half = screen.hole_diameter_mm / 2.0
    axes.axhspan(screen.hole_x_mm - half, screen.hole_x_mm + half, color=HOLE, lw=0.0)
    if named:
        axes.text(
            1.01,
            screen.hole_x_mm,
            "beam\nhole",
            transform=axes.get_yaxis_transform(),
            ha="left",
            va="center",
            fontsize=6.0,
            color=SOFT_INK,
        )


def draw_rejected(axes: Axes, places: RejectedPlaces, mount_deg: float) -> None:
    """Crosses at the spots of one mount that were not used."""
    here = places.mount_deg == mount_deg
    axes.scatter(
        places.stage_deg[here],
        places.x_mm[here],
        s=11.0,
        marker="x",
        color=REJECTED,
        linewidths=0.8,
        zorder=2,
    )


def rejected_places(result: PitchResult, screen: ScreenFacts | None) -> RejectedPlaces:
    """Where the spots not used lie, as far as step and screen place are known.

    A step that none of the used spots belongs to, or that stands for several stage
    angles, has no known angle; a place in pixels needs the screen's pixel map.
    """
    angles = _angles_of_steps(result)
    rows = []
    for spot in result.rejected:
        known = angles.get(spot.step)
        x_mm = _x_mm(spot.x, spot.unit, screen)
        if known is not None and x_mm is not None and np.isfinite(x_mm):
            rows.append((*known, x_mm))
    columns = np.array(rows, dtype=np.float64).reshape(-1, 3).T
    return RejectedPlaces(*columns)


def _angles_of_steps(result: PitchResult) -> dict[int, tuple[float, float] | None]:
    table = result.table
    angles: dict[int, tuple[float, float] | None] = {}
    rows = zip(
        table.step.tolist(),
        table.stage_deg.tolist(),
        table.mount_deg.tolist(),
        strict=True,
    )
    for step, stage, mount in rows:
        known = angles.setdefault(step, (stage, mount))
        if known is not None and (known[1] != mount or abs(known[0] - stage) > 0.05):
            angles[step] = None
    return angles


def _x_mm(x: float, unit: str, screen: ScreenFacts | None) -> float | None:
    if unit == "mm":
        return x
    if screen is None or screen.mm_per_px <= 0.0:
        return None
    return screen.mm_per_px * (x - screen.centre_column_px)


def broken_line(angle: FloatArray, x: FloatArray) -> tuple[FloatArray, FloatArray]:
    """The points of a line, with NaN put in where angles leave a wide gap.

    ``angle`` (N,) rising, ``x`` (N,). A gap is wide from three usual steps on.
    """
    steps = np.diff(angle)
    usual = np.median(steps[steps > 1e-6]) if np.any(steps > 1e-6) else np.inf
    cuts = np.flatnonzero(steps > 3.0 * usual) + 1
    return np.insert(angle, cuts, np.nan), np.insert(x, cuts, np.nan)
