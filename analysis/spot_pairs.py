"""Two spots that were seen as one (pure).

A candidate that one Gaussian does not fit is tried as two, fitted in one likelihood,
each with the other as a companion of which next to nothing is known beforehand: the
covariances are those of the joint fit. Lopsided beams, lobes and speckle are made of
more than one bump too, so a pair is believed only where two plain spots explain all
that is seen, they stand clearly apart, and the other spots of the step are alike.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from pitchsweep.analysis.records import FloatArray, Spot
from pitchsweep.analysis.speckle_grain import Speckle
from pitchsweep.analysis.spot_fit import SpotFit, fit_spot
from pitchsweep.analysis.spot_halves import halves
from pitchsweep.analysis.spot_judgement import (
    SpotLimits,
    clipped_core,
    judged,
    misfit,
)
from pitchsweep.analysis.spot_model import Companion
from pitchsweep.analysis.spot_neighbours import PARTNER_U
from pitchsweep.analysis.spot_scene import FittedCandidate, StepScene, window_around
from pitchsweep.analysis.spot_shape import Shape

_BETTER = 0.7
_CLEAR_GAIN, _GAIN_OF_EXCESS = 100.0, 0.8
_MOST_ALIKE_SHIFT = 0.3
_LONG = 1.7
"""Under speckle, a spot this long may be two though its grains hide the gap."""
_MOST_WIDER = 4.5


@dataclass(frozen=True)
class _Caution:
    """What is asked of a pair: misfit (share of the spot) that makes one spot
    doubtful; radii between the halves of what is bright (1.4 for one round spot); what
    may be left of the misfit, as a share of it and of the spot; radii apart; ratios of
    heights and of radii."""

    doubtful: float
    halves_apart: float
    left: float
    most_left: float
    radii_apart: float
    least_height: float
    most_width: float


_CLEAN = _Caution(0.04, 1.95, 0.25, 0.06, 2.2, 0.25, 1.6)
_GRAINY = _Caution(0.2, 2.5, 0.5, 0.3, 3.0, 0.4, 1.6)


@dataclass(frozen=True)
class _Pair:
    one: FittedCandidate
    other: FittedCandidate
    better: bool = False
    clear: bool = False

    def apart(self) -> FloatArray:
        """From the one to the other, px, pointing to larger columns."""
        a, b = self.one.fit.shape, self.other.fit.shape
        off = np.array([b.column_px - a.column_px, b.row_px - a.row_px])
        return off if off[0] >= 0.0 else -off


@dataclass(frozen=True)
class Parted:
    """Fits with what is clearly two spots as two; and, to measure speckle in, with
    all as two that two spots fit much better, however uneven what is left."""

    found: list[FittedCandidate]
    to_tell_grain: list[FittedCandidate]


def parted(
    scene: StepScene,
    found: Sequence[FittedCandidate],
    speckle: Speckle,
    limits: SpotLimits,
) -> Parted:
    """``found``, with those that are two spots replaced by the two.

    Where two or more part by the same way, that is the form of the beam and none is.
    """
    pairs: dict[int, _Pair] = {}
    for k, item in enumerate(found):
        if _doubtful(item, speckle):
            others = [f for j, f in enumerate(found) if j != k]
            pair = _pair(scene, item, others, speckle, limits)
            if pair is not None:
                pairs[k] = pair
    real = {k: p for k, p in pairs.items() if p.clear and not _repeated(k, pairs)}
    better = {k: p for k, p in pairs.items() if p.better}
    return Parted(_replaced(found, real), _replaced(found, better))


def _replaced(
    found: Sequence[FittedCandidate], pairs: dict[int, _Pair]
) -> list[FittedCandidate]:
    out: list[FittedCandidate] = []
    for k, item in enumerate(found):
        out += [pairs[k].one, pairs[k].other] if k in pairs else [item]
    return out


def _caution(speckle: Speckle) -> _Caution:
    return _GRAINY if speckle.contrast > 0.0 else _CLEAN


def _doubtful(item: FittedCandidate, speckle: Speckle) -> bool:
    """Whether one spot leaves enough unexplained for a second one."""
    fit = item.fit
    if clipped_core(item.window, fit) > 0.0:
        return False
    if not fit.converged:
        return True
    if speckle.contrast == 0.0 and _excess(fit) < _CLEAR_GAIN:
        return False
    major, minor, _ = fit.shape.widths()
    if speckle.contrast > 0.0 and major > _LONG * minor:
        return True
    seen = misfit(fit, speckle)
    return seen.ratio > 1.0 and seen.share > _caution(speckle).doubtful


def _excess(fit: SpotFit) -> float:
    """Chi square beyond what noise leaves: the most that a second spot can gain."""
    used = float(np.count_nonzero(fit.weight))
    return float(np.vdot(fit.weight * fit.residual, fit.residual)) - used


def _pair(
    scene: StepScene,
    item: FittedCandidate,
    others: Sequence[FittedCandidate],
    speckle: Speckle,
    limits: SpotLimits,
) -> _Pair | None:
    """The two spots that ``item`` is, None where it is not clearly two."""
    starts = halves(item)
    wide = _away(*starts) > _caution(speckle).halves_apart * starts[0].widths()[0]
    first = _fitted(item, starts, speckle) if wide else None
    if first is None:
        return None
    shapes = first.one.fit.shape, first.other.fit.shape
    if not _stand_apart(*shapes, speckle):
        return None
    if any(_on_another(shape, item, others) for shape in shapes):
        return None
    window = window_around(scene, shapes)
    pair = _fitted(replace(item, window=window), shapes, speckle)
    if pair is None or not _stand_apart(
        pair.one.fit.shape, pair.other.fit.shape, speckle
    ):
        return None
    alike = all(_alike(pair.one, f) for f in others if _tells(f))
    plain = all(_is_plain(scene, f, speckle, limits) for f in (pair.one, pair.other))
    if not (alike and plain):
        return None
    alone = fit_spot(window, item.fit.shape, speckle, companions=item.beside)
    return _compared(alone, pair, speckle)


def _fitted(
    item: FittedCandidate, starts: tuple[Shape, Shape], speckle: Speckle
) -> _Pair | None:
    """Both spots fitted in the window of ``item``; None where that fails."""
    first = _with(item, starts[0], starts[1], speckle)
    if not first.fit.converged:
        return None
    other = _with(item, first.fit.companions[0], first.fit.shape, speckle)
    return _Pair(first, other) if other.fit.converged else None


def _with(
    item: FittedCandidate, start: Shape, partner: Shape, speckle: Speckle
) -> FittedCandidate:
    inside = _inside(item, start) and _inside(item, partner)
    beside = (Companion(partner, PARTNER_U), *item.beside)
    fit = fit_spot(
        item.window,
        start,
        speckle,
        companions=beside,
        limit=40 if inside else 0,
    )
    candidate = replace(
        item.candidate,
        column_px=fit.shape.column_px,
        row_px=fit.shape.row_px,
        sigma_px=fit.shape.widths()[1],
        height=fit.shape.height,
    )
    return replace(item, candidate=candidate, fit=fit, beside=beside, parted=True)


def _inside(item: FittedCandidate, shape: Shape) -> bool:
    x, y = item.window.x, item.window.y
    across = x[0, 0] <= shape.column_px <= x[0, -1]
    return bool(across and y[0, 0] <= shape.row_px <= y[-1, 0])


def _stand_apart(one: Shape, other: Shape, speckle: Speckle) -> bool:
    """Whether two shapes may be two spots: apart, and about as bright and wide."""
    asked = _caution(speckle)
    radius = max(one.widths()[0], other.widths()[0])
    away = _away(one, other)
    heights = sorted((one.height, other.height))
    widths = zip(one.widths()[:2], other.widths()[:2], strict=True)
    wide = max(_ratio(a, b) for a, b in widths)
    return bool(
        away > asked.radii_apart * radius
        and heights[0] > asked.least_height * heights[1]
        and wide < asked.most_width
    )


def _away(one: Shape, other: Shape) -> float:
    off = other.column_px - one.column_px, other.row_px - one.row_px
    return float(np.hypot(*off))


def _ratio(one: float, other: float) -> float:
    return max(one, other) / min(one, other)


def _on_another(
    shape: Shape, item: FittedCandidate, others: Sequence[FittedCandidate]
) -> bool:
    """Whether one of a pair is a spot that has been found already."""
    known = [f.fit.shape for f in others if f.fit.converged]
    return any(k.radii_away(shape.column_px, shape.row_px) < 2.0 for k in known)


def _tells(item: FittedCandidate) -> bool:
    """Whether a fit says how wide the spots of this step are."""
    return item.fit.converged and _excess(item.fit) < _CLEAR_GAIN


def _alike(one: FittedCandidate, other: FittedCandidate) -> bool:
    """Whether a spot is about as wide as another of the step."""
    return _ratio(one.fit.shape.widths()[1], other.fit.shape.widths()[1]) < _MOST_WIDER


def _is_plain(
    scene: StepScene, item: FittedCandidate, speckle: Speckle, limits: SpotLimits
) -> bool:
    answer = judged(item.window, item.fit, speckle, scene.side, limits, 0)
    grain = 1.5 * speckle.grain_fwhm_px if speckle.contrast > 0.0 else 0.0
    return isinstance(answer, Spot) and item.fit.shape.widths()[1] > grain


def _compared(alone: SpotFit, pair: _Pair, speckle: Speckle) -> _Pair:
    """``pair`` with what is to be held of it against one spot ``alone``."""
    asked = _caution(speckle)
    before = misfit(alone, speckle).share
    after = max(misfit(f.fit, speckle).share for f in (pair.one, pair.other))
    most = min(asked.left * before, asked.most_left)
    clear = after < most and _gains_clearly(alone, pair.one.fit, speckle)
    return replace(pair, better=after < _BETTER * before, clear=clear)


def _gains_clearly(alone: SpotFit, both: SpotFit, speckle: Speckle) -> bool:
    """Whether two spots explain most of what one leaves, whichever weights are taken.

    Under speckle the weights allow for it, so that the gain is that of independent
    grains.
    """
    gains = [
        float((w * (alone.residual**2 - both.residual**2)).sum())
        for w in (alone.weight, both.weight)
    ]
    if speckle.contrast == 0.0 and gains[0] < _GAIN_OF_EXCESS * _excess(alone):
        return False
    return min(gains) > _CLEAR_GAIN


def _repeated(k: int, pairs: dict[int, _Pair]) -> bool:
    """Whether another one parts in the same way."""
    own = pairs[k].apart()
    others = [p.apart() for j, p in pairs.items() if j != k]
    most = _MOST_ALIKE_SHIFT * float(np.hypot(*own))
    return any(
        min(float(np.hypot(*(o - own))), float(np.hypot(*(o + own)))) < most
        for o in others
    )
