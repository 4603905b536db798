"""The pitch that parts of the data give, against the result and the tolerance."""

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from pitchsweep.analysis.number_text import rounded
from pitchsweep.analysis.picture_style import (
    ACCENT,
    ACCENT_SOFT,
    LIMIT,
    PAGE_MM,
    SOFT_INK,
    Drawing,
    drawable,
    halo,
    say_instead,
)
from pitchsweep.analysis.records import PitchResult, PitchSeen
from pitchsweep.analysis.result_file import subset_text

FAR = 3.0
"""A tolerance limit is drawn if it lies within this many half ranges of the rest."""


def pitches_seen_svg(result: PitchResult) -> str:
    """The SVG text of the pitches that parts of the data give."""
    return pitches_seen_drawing(result).svg()


def pitches_seen_drawing(result: PitchResult) -> Drawing:
    """Difference of each subset's pitch from the result, in nm, with error bars.

    The band is the result's expanded uncertainty; limits too far away to draw are
    named at the edge.
    """
    seen = [item for item in result.pitches_seen if np.isfinite(item.deviation_nm)]

    def draw(figure: Figure) -> None:
        axes = figure.subplots()
        if not seen:
            say_instead(axes, "no subset of the spots gives a pitch of its own")
            return
        _draw_band(axes, result)
        for place, item in enumerate(seen):
            _draw_one(axes, place, item)
        _draw_limits(axes, result, _half_range(seen, result))
        _label(axes, seen, result)

    height = 32.0 + 6.2 * max(2, len(seen))
    return Drawing(draw, "pitches", PAGE_MM, height)


def _half_range(seen: list[PitchSeen], result: PitchResult) -> float:
    reach = [abs(s.deviation_nm) + 2.0 * _usable(s.u_deviation_nm) for s in seen]
    return 1.15 * max([*reach, result.U_pitch_nm])


def _usable(u: float) -> float:
    return u if np.isfinite(u) and u > 0.0 else 0.0


def _draw_band(axes: Axes, result: PitchResult) -> None:
    axes.axvspan(
        -result.U_pitch_nm, result.U_pitch_nm, color=ACCENT_SOFT, alpha=0.45, lw=0.0
    )
    axes.axvline(0.0, color=ACCENT, lw=1.0)


def _draw_one(axes: Axes, place: int, item: PitchSeen) -> None:
    u = _usable(item.u_deviation_nm)
    middle = item.deviation_nm
    axes.plot([middle - 2 * u, middle + 2 * u], [place] * 2, color=SOFT_INK, lw=0.8)
    axes.plot([middle - u, middle + u], [place] * 2, color=ACCENT, lw=2.6)
    axes.plot([middle], [place], marker="o", ms=4.6, mfc="white", mec=ACCENT, mew=1.1)


def _draw_limits(axes: Axes, result: PitchResult, half: float) -> None:
    """Tolerance limits as lines where near, as words at the edge where far."""
    limits = (result.decision.lower_nm, result.decision.upper_nm)
    names = ("lower limit", "upper limit")
    left, right = -half, half
    far: list[tuple[str, float]] = []
    for name, limit in zip(names, limits, strict=True):
        if limit is None:
            continue
        offset = limit - result.pitch_nm
        if abs(offset) > FAR * half:
            far.append((name, offset))
            continue
        left, right = min(left, 1.08 * offset), max(right, 1.08 * offset)
        axes.axvline(offset, color=LIMIT, lw=1.2, ls=(0, (5, 2)))
        axes.text(
            offset,
            1.01,
            name,
            color=LIMIT,
            ha="center",
            va="bottom",
            transform=axes.get_xaxis_transform(),
        )
    axes.set_xlim(left, right)
    for name, offset in far:
        _name_far_limit(axes, name, offset, result)


def _name_far_limit(axes: Axes, name: str, offset: float, result: PitchResult) -> None:
    text = rounded(offset, result.U_pitch_nm).value
    below = offset < 0.0
    axes.text(
        0.0 if below else 1.0,
        1.01,
        f"← {name} at {text} nm" if below else f"{name} at +{text} nm →",
        color=LIMIT,
        ha="left" if below else "right",
        va="bottom",
        transform=axes.transAxes,
        path_effects=halo(),
    )


def _label(axes: Axes, seen: list[PitchSeen], result: PitchResult) -> None:
    names = [f"{drawable(subset_text(item.subset))}  ({item.spots})" for item in seen]
    axes.set_yticks(range(len(seen)), names)
    axes.set_ylim(len(seen) - 0.4, -0.6)
    axes.tick_params(axis="y", length=0.0)
    axes.spines["left"].set_visible(False)
    pitch = rounded(result.pitch_nm, result.U_pitch_nm)
    axes.set_xlabel(f"pitch seen minus result ({pitch.value} nm), nm")
    axes.grid(True, axis="x")
