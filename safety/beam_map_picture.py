"""The beam map of one laser as a picture: from above, and all round the part.

Left, seen from above as a polar plot: the orders as planned, a step further out for
every larger incidence, inside the ring of what stands in the beam plane. Right, all
directions: what is declared, and where orders may go with the grooves any way round;
hatched where nothing is declared, dark where an order may go and nothing stops it.
"""

import math

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import ListedColormap
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle
from matplotlib.projections.polar import PolarAxes

from pitchsweep.analysis.order_visibility import wavelength_over_pitch
from pitchsweep.analysis.picture_style import (
    ACCENT,
    ACCENT_SOFT,
    BAND,
    COOL,
    HOLE,
    INK,
    LIMIT,
    SOFT_INK,
    WARM,
    drawable,
    halo,
    order_colour,
    png_picture,
    svg_picture,
)
from pitchsweep.configs.enclosure_model import Surface
from pitchsweep.configs.job_model import Job
from pitchsweep.safety.beam_cones import reached, spread_of
from pitchsweep.safety.beam_faults import faults_by_bit
from pitchsweep.safety.beam_judgement import rays_with
from pitchsweep.safety.beam_map import Beam, BeamKind, BeamMap
from pitchsweep.safety.beam_steps import lit_angles
from pitchsweep.safety.hazard_figures import full_drive_mw
from pitchsweep.safety.surroundings import NOTHING, surroundings_of

WIDTH_MM, HEIGHT_MM = 180.0, 92.0
INNER, OUTER, RING = 0.22, 0.86, 0.09
REACH_CELL_DEG = 3.0


def beam_map_svg(job: Job, found: BeamMap, laser: str) -> str:
    """The picture of one laser of ``found``, the beam map of ``job``, as SVG text."""
    return svg_picture(
        lambda figure: _draw(figure, job, found, laser),
        name=f"beam-map-{laser}",
        width_mm=WIDTH_MM,
        height_mm=HEIGHT_MM,
    )


def beam_map_png(job: Job, found: BeamMap, laser: str) -> bytes:
    """The same picture as PNG bytes."""
    return png_picture(
        lambda figure: _draw(figure, job, found, laser),
        name=f"beam-map-{laser}",
        width_mm=WIDTH_MM,
        height_mm=HEIGHT_MM,
    )


def _draw(figure: Figure, job: Job, found: BeamMap, laser: str) -> None:
    grid = figure.add_gridspec(1, 2, width_ratios=(1.0, 1.25))
    beams = [beam for beam in found.beams if beam.laser == laser]
    surfaces = found.enclosure.surfaces if found.enclosure else ()
    above = figure.add_subplot(grid[0], projection="polar")
    assert isinstance(above, PolarAxes)
    _draw_from_above(above, beams, surfaces)
    around = figure.add_subplot(grid[1])
    _draw_all_round(around, surfaces)
    power_mw = full_drive_mw(job.bench.lasers[laser])
    _draw_reach(around, job, laser)
    above.set_title(drawable(f"{laser}, {power_mw:.3g} mW in each beam, from above"))
    unstopped = any(beam.fault is not None for beam in beams)
    around.set_title(
        "purple: where an order may go and nothing stops it"
        if unstopped
        else "grey: where orders may go, grooves any way round"
    )


def _draw_from_above(
    axes: PolarAxes, beams: list[Beam], surfaces: tuple[Surface, ...]
) -> None:
    axes.set_theta_zero_location("N")
    axes.set_ylim(0.0, OUTER + RING + 0.01)
    axes.set_yticks([])
    axes.grid(False)
    axes.spines["polar"].set_visible(False)
    axes.set_thetagrids(
        (0.0, 90.0, 180.0, 270.0), ("0: laser, screen", "90", "180", "-90")
    )
    axes.tick_params(pad=1.0)
    _draw_ring(axes, surfaces)
    planned = [b for b in beams if b.azimuth_deg is not None and not b.at.left_behind]
    for kind, shape in ((BeamKind.ORDER, "o"), (BeamKind.THROUGH, ".")):
        _draw_tracks(axes, [b for b in planned if b.kind is kind], shape)
    axes.annotate(
        "",
        xy=(0.0, 0.02),
        xytext=(0.0, OUTER),
        arrowprops={"arrowstyle": "-|>", "color": INK, "linewidth": 0.8},
    )


def _draw_ring(axes: PolarAxes, surfaces: tuple[Surface, ...]) -> None:
    around = surroundings_of(surfaces)
    row = max(int(np.searchsorted(around.elevation_edges_deg, 0.0, "right")) - 1, 0)
    for place, low in enumerate(around.azimuth_edges_deg[:-1]):
        high = around.azimuth_edges_deg[place + 1]
        if not -180.0 <= low < 180.0:
            continue
        surface = _surface_of(int(around.bits[row, place]), surfaces)
        axes.bar(
            math.radians(0.5 * (low + high)),
            RING,
            width=math.radians(high - low),
            bottom=OUTER,
            color=_colour(surface),
            hatch="" if surface else "////",
            edgecolor="white" if surface else LIMIT,
            linewidth=0.5,
        )


def _draw_tracks(axes: PolarAxes, beams: list[Beam], shape: str) -> None:
    if not beams:
        return
    angles = [beam.at.incidence_deg for beam in beams]
    low, span = min(angles), max(max(angles) - min(angles), 1e-9)
    for order in sorted({beam.order for beam in beams if beam.order is not None}):
        own = [beam for beam in beams if beam.order == order]
        radius = [
            INNER + (b.at.incidence_deg - low) / span * (OUTER - INNER - 0.05)
            for b in own
        ]
        theta = [math.radians(b.azimuth_deg or 0.0) for b in own]
        colour = order_colour(order)
        axes.plot(theta, radius, shape, color=colour, markersize=1.6, linewidth=0.5)
        if shape == "o":
            axes.annotate(
                f"{order:+d}" if order else "0",
                (theta[-1], radius[-1]),
                color=colour,
                path_effects=halo(),
                ha="center",
                va="center",
            )


def _draw_all_round(axes: Axes, surfaces: tuple[Surface, ...]) -> None:
    axes.set_xlim(180.0, -180.0)
    axes.set_ylim(-90.0, 90.0)
    axes.set_xticks(range(-180, 181, 60))
    axes.set_yticks(range(-90, 91, 30))
    axes.set_xlabel("azimuth / deg (0 to the laser, +x on the left)")
    axes.set_ylabel("elevation / deg")
    whole = Rectangle(
        (-180.0, -90.0), 360.0, 180.0, fill=False, hatch="////", edgecolor=LIMIT
    )
    axes.add_patch(whole)
    for surface in reversed(surfaces):
        _draw_surface(axes, surface)
    for surface in surfaces:
        _name_surface(axes, surface)


def _draw_surface(axes: Axes, surface: Surface) -> None:
    width = surface.azimuth_to_deg - surface.azimuth_from_deg
    height = surface.elevation_to_deg - surface.elevation_from_deg
    start = (surface.azimuth_from_deg + 180.0) % 360.0 - 180.0
    for turn in (0.0, -360.0):
        axes.add_patch(
            Rectangle(
                (start + turn, surface.elevation_from_deg),
                width,
                height,
                facecolor=_colour(surface),
                edgecolor="white",
                linewidth=0.6,
            )
        )


def _name_surface(axes: Axes, surface: Surface) -> None:
    middle = 0.5 * (surface.azimuth_from_deg + surface.azimuth_to_deg)
    azimuth = (middle + 180.0) % 360.0 - 180.0
    low, high = surface.elevation_from_deg, surface.elevation_to_deg
    below = surface.what == "hole"
    inside = high - low > 24.0
    axes.annotate(
        drawable(surface.name, length=24),
        (azimuth, low if below else high),
        xytext=(0.0, -8.0 if below or inside else 2.0),
        textcoords="offset points",
        ha="right" if azimuth < -150.0 else "left" if azimuth > 150.0 else "center",
        color=SOFT_INK,
        fontsize=6.0,
        path_effects=halo(),
        annotation_clip=True,
        zorder=5,
    )


def _draw_reach(axes: Axes, job: Job, laser: str) -> None:
    """The cells into which an order may go; darker where nothing there stops it."""
    edges = (
        np.arange(-180.0, 180.1, REACH_CELL_DEG),
        np.arange(-90.0, 90.1, REACH_CELL_DEG),
    )
    middles = [0.5 * (edge[1:] + edge[:-1]) for edge in edges]
    azimuth, elevation = (m.ravel() for m in np.meshgrid(*middles))
    angles = lit_angles(job)
    each = [
        reached(
            azimuth,
            elevation,
            np.array([angle.incidence_deg for angle in angles]),
            np.array([angle.half_width_deg for angle in angles]),
            wavelength_over_pitch(job.bench, part, laser),
            spread_of(job.bench, part, laser),
        )
        for part in job.parts
    ]
    lit = np.logical_or.reduce(each)
    around = surroundings_of(
        job.bench.enclosure.surfaces if job.bench.enclosure else ()
    )
    bad = sum(faults_by_bit(around, rays_with(job, laser)))
    met = around.met_by_cones(azimuth, elevation, np.zeros_like(azimuth))
    shape = (len(middles[1]), len(middles[0]))
    for colour, where in (
        (INK, lit & (met & bad == 0)),
        (LIMIT, lit & (met & bad != 0)),
    ):
        axes.pcolormesh(
            *edges,
            np.where(where, 1.0, np.nan).reshape(shape),
            cmap=ListedColormap([colour]),
            alpha=0.16 if colour == INK else 0.45,
            rasterized=True,
        )


def _surface_of(bits: int, surfaces: tuple[Surface, ...]) -> Surface | None:
    return None if bits == NOTHING else surfaces[bits.bit_length() - 2]


def _colour(surface: Surface | None) -> str:
    if surface is None:
        return "white"
    if surface.acts_as == "mirror":
        return WARM[2]
    plain = {"window": COOL[2], "hole": HOLE, "screen": ACCENT_SOFT, "dump": ACCENT}
    return plain.get(surface.what, BAND)
