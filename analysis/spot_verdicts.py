"""What becomes of each fitted candidate of a step: a spot, or refused with a reason.

The fit of a candidate alone is judged in spot_judgement; here also what lies around
it: skirts of brighter spots and an uneven background.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from pitchsweep.analysis.records import RejectedSpot, Rejection, Spot, SpotSearch
from pitchsweep.analysis.speckle_grain import Speckle
from pitchsweep.analysis.spot_judgement import (
    SpotLimits,
    clipped_core,
    judged,
    light_over_noise,
    misfit,
)
from pitchsweep.analysis.spot_scene import (
    FittedCandidate,
    StepScene,
    lost_in_unevenness,
)
from pitchsweep.analysis.spot_shape import Shape

_SKIRTS = ((5.0, 0.1), (10.0, 0.04))
"""Within so many radii of a spot, what is fainter than this share is part of it;
twice the share where that spot's own height says little."""
_LOBED = 0.3
"""A spot of which this share is no Gaussian has lobes."""


@dataclass(frozen=True)
class Look:
    """The fits behind a search: brightest first, refused ones among them.

    ``speckle`` is what the fits allow for, ``measured`` whether the step told it.
    """

    scene: StepScene
    fits: tuple[FittedCandidate, ...]
    speckle: Speckle
    measured: bool


def verdicts(
    seen: Look, step: int, limits: SpotLimits | None = None
) -> list[Spot | RejectedSpot]:
    """A verdict for each of ``seen.fits``, in order; refused ones have a score."""
    limits = limits or SpotLimits()
    out: list[Spot | RejectedSpot] = []
    bright: list[FittedCandidate] = []
    for item in seen.fits:
        verdict = _verdict(seen, item, bright, limits, step)
        if isinstance(verdict, RejectedSpot):
            verdict = replace(verdict, score=light_over_noise(item.fit))
        out.append(verdict)
        if item.fit.converged:
            bright.append(item)
    return out


def judged_look(seen: Look, step: int, limits: SpotLimits | None = None) -> SpotSearch:
    """``seen`` with its verdicts, as a search's result."""
    answers = verdicts(seen, step, limits)
    return SpotSearch(
        spots=tuple(a for a in answers if isinstance(a, Spot)),
        rejected=tuple(a for a in answers if isinstance(a, RejectedSpot)),
        background_dn=seen.scene.smalls[0].level(),
        noise_dn=seen.scene.noise_dn[0],
        speckle_contrast=seen.speckle.contrast,
        grain_fwhm_px=seen.speckle.grain_fwhm_px,
        speckle_measured=seen.measured,
    )


def nearer(shape: Shape, other: Shape, sigmas: float) -> bool:
    """Whether ``other`` lies within so many major radii of ``shape``."""
    away = np.hypot(other.column_px - shape.column_px, other.row_px - shape.row_px)
    return bool(away < sigmas * shape.widths()[0])


def _verdict(
    seen: Look,
    item: FittedCandidate,
    bright: Sequence[FittedCandidate],
    limits: SpotLimits,
    step: int,
) -> Spot | RejectedSpot:
    alone = judged(item.window, item.fit, seen.speckle, seen.scene.side, limits, step)
    if isinstance(alone, RejectedSpot):
        return alone
    shape = item.fit.shape
    if _in_skirt(seen, shape, bright, limits):
        reason, detail = Rejection.SHAPE, "faint, in the skirts of a much brighter spot"
    elif lost_in_unevenness(seen.scene, item.fit):
        reason, detail = Rejection.TOO_FAINT, "the background around it is as uneven"
    else:
        return alone
    return RejectedSpot(step, shape.column_px, shape.row_px, "px", reason, detail)


def _in_skirt(
    seen: Look, shape: Shape, bright: Sequence[FittedCandidate], limits: SpotLimits
) -> bool:
    """Whether a much brighter spot is so near that this is a part of it."""
    for other in bright:
        share = shape.height / other.fit.shape.height
        for sigmas, most in _SKIRTS:
            if share >= 2.0 * most or not nearer(other.fit.shape, shape, sigmas):
                continue
            if share < most or _has_vague_height(seen, other, limits):
                return True
    return False


def _has_vague_height(seen: Look, item: FittedCandidate, limits: SpotLimits) -> bool:
    """Whether a fitted height says little: clipped everywhere, or several lobes."""
    if clipped_core(item.window, item.fit) > limits.clipped_core:
        return True
    share = misfit(item.fit, seen.speckle).share
    return share > _LOBED * (1.0 + seen.speckle.contrast)
