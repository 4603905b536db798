"""Which spots of a step must be fitted together because one's light is in the other's
window, and how well the other is known (pure).

A spot that a fit takes along is fitted with it in one likelihood. A much fainter patch
within the spot's own light may be a grain of its speckle or its wing and is no
companion; beyond that it is a ghost or another order.
"""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from pitchsweep.analysis.speckle_grain import Speckle
from pitchsweep.analysis.spot_judgement import light_over_noise
from pitchsweep.analysis.spot_model import Companion
from pitchsweep.analysis.spot_scene import FittedCandidate, StepScene, refit
from pitchsweep.analysis.spot_shape import Shape

_ALIKE, _LOBES_TO_RADII = 0.5, 3.5
"""Fainter than this share of a spot and nearer than so many of its radii, a patch may
be a lobe of its speckle."""
_LEAST_RADII, _LEAST_WIDTH, _MOST_WIDTH = 2.0, 0.6, 2.0
_LEAST_SHARE, _LEAST_NOISE = 1e-3, 0.3
_BRIGHTER_U, _FAINTER_U, _MUCH_BRIGHTER = 0.1, 0.3, 3.0
PARTNER_U = 3.0
"""Of two spots seen as one, next to nothing is known but from their joint fit."""
_AT_MOST = 4


def companions_of(
    item: FittedCandidate, found: Sequence[FittedCandidate]
) -> tuple[Companion, ...]:
    """Spots of ``found`` other than ``item`` whose light its fit must know, at most 4.

    Those that bring most light into its window come first.
    """
    height = item.fit.shape.height
    noise = float(item.fit.variance.min()) ** 0.5
    least = max(_LEAST_SHARE * height, _LEAST_NOISE * noise)
    lit = []
    for other in found:
        if other is item or _light_within(other.fit.shape, item) <= least:
            continue
        partner = other.parted and item.parted
        if _believed(other) and (partner or _apart(other, item)):
            brighter = other.fit.shape.height > _MUCH_BRIGHTER * height
            u = PARTNER_U if partner else _BRIGHTER_U if brighter else _FAINTER_U
            lit.append((_light_within(other.fit.shape, item), other.fit.shape, u))
    lit.sort(key=lambda one: -one[0])
    return tuple(Companion(shape, u) for _, shape, u in lit[:_AT_MOST])


def renewed(
    scene: StepScene,
    found: Sequence[FittedCandidate],
    speckle: Speckle,
    *,
    all_of_them: bool,
) -> list[FittedCandidate]:
    """``found`` fitted anew, each with its companions as they are known by then.

    Brightest first; with ``all_of_them`` False only those whose companions are others
    than at their last fit. A fit that fails with companions keeps the one before.
    """
    out = list(found)
    for k in sorted(range(len(out)), key=lambda k: -out[k].fit.shape.height):
        item = out[k]
        beside = companions_of(item, out)
        if not all_of_them and len(beside) == len(item.beside):
            continue
        again = refit(scene, replace(item, beside=beside), speckle)
        failed = beside and item.fit.converged and not again.fit.converged
        if not (failed or one_lobe(again, item)):
            out[k] = again
    return out


def one_lobe(again: FittedCandidate, item: FittedCandidate) -> bool:
    """Whether a renewed fit has taken one lobe of the speckle for the spot."""
    if not (again.fit.converged and item.fit.converged):
        return False
    return again.fit.shape.widths()[1] < _LEAST_WIDTH * item.fit.shape.widths()[1]


def _believed(item: FittedCandidate) -> bool:
    """Whether a fit is good enough to stand for light in others' windows."""
    if not item.fit.converged or light_over_noise(item.fit) < 8.0:
        return False
    major, minor, _ = item.fit.shape.widths()
    return major < 4.0 * minor


def _apart(other: FittedCandidate, item: FittedCandidate) -> bool:
    """Whether ``other`` is a spot of its own, seen from ``item``."""
    shape, own = other.fit.shape, item.fit.shape
    minor, own_minor = shape.widths()[1], own.widths()[1]
    if shape.height < own.height and not (
        _LEAST_WIDTH < minor / own_minor < _MOST_WIDTH
    ):
        return False
    if shape.height > _ALIKE * own.height:
        return own.radii_away(shape.column_px, shape.row_px) > _LEAST_RADII
    return not among_lobes(item, shape.column_px, shape.row_px)


def among_lobes(item: FittedCandidate, column_px: float, row_px: float) -> bool:
    """Whether a place is so near a spot that faint light there may be of its speckle.

    A fit may have taken one lobe for the spot: what was first seen of it counts too.
    """
    shape = item.fit.shape
    major, minor, _ = shape.widths()
    radius = max(float(np.sqrt(major * minor)), item.candidate.sigma_px)
    away = np.hypot(column_px - shape.column_px, row_px - shape.row_px) / radius
    return min(float(away), shape.radii_away(column_px, row_px)) < _LOBES_TO_RADII


def _light_within(shape: Shape, item: FittedCandidate) -> float:
    """Its brightest light in the window of ``item``, DN a ms."""
    x, y = item.window.x, item.window.y
    wide, high = shape.half_sides(5.0)
    apart = (
        shape.column_px + wide < x[0, 0]
        or shape.column_px - wide > x[0, -1]
        or shape.row_px + high < y[0, 0]
        or shape.row_px - high > y[-1, 0]
    )
    return 0.0 if apart else float(shape.signal(x, y).max())
