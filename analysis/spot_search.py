"""One step's exposures in, its spots out.

Candidates are found on all exposures together, averaged down; each is fitted in full
frames over the unsaturated pixels of every exposure at once, so nothing has to be
deduplicated between exposures. A second look, with the found spots taken off, finds
faint ones beside bright ones. Speckle is measured in the residuals unless given.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.camera_noise import CameraNoise
from pitchsweep.analysis.records import SpotSearch
from pitchsweep.analysis.small_frames import light_map
from pitchsweep.analysis.speckle_grain import NO_SPECKLE, TYPICAL_SPECKLE, Speckle
from pitchsweep.analysis.spot_candidates import (
    Candidate,
    candidates,
    late_candidates,
)
from pitchsweep.analysis.spot_grains import speckle_seen
from pitchsweep.analysis.spot_judgement import SpotLimits
from pitchsweep.analysis.spot_model import Companion
from pitchsweep.analysis.spot_neighbours import among_lobes, one_lobe, renewed
from pitchsweep.analysis.spot_pairs import parted
from pitchsweep.analysis.spot_scene import (
    Exposure,
    FittedCandidate,
    StepScene,
    core_if_wings_disagree,
    fit_candidate,
    refit,
    step_scene,
)
from pitchsweep.analysis.spot_shape import Shape
from pitchsweep.analysis.spot_verdicts import Look, judged_look, nearer

__all__ = ["Exposure", "Look", "SearchSettings", "find_spots", "look"]


_OUT_OF_WING, _WIDER = 8.0, 1.3
_NEXT_TO_U, _WINDOW_OF = 0.2, 5.0
_ROUGHLY, _LEAST_CORE = 0.2, 0.65


@dataclass(frozen=True)
class SearchSettings:
    """How to search: averaging factor, detection threshold (in noise), limits."""

    factor: int = 4
    threshold: float = 5.0
    limits: SpotLimits = SpotLimits()


def find_spots(
    exposures: Sequence[Exposure],
    dark: NDArray[np.float32] | NDArray[np.uint16] | None,
    camera: CameraNoise,
    step: int,
    *,
    speckle: Speckle | None = None,
    settings: SearchSettings | None = None,
) -> SpotSearch:
    """Spots and refused candidates of one step, brightest first.

    ``exposures`` (at least one, same shape, any order) are a bracket of one scene.
    ``dark`` is a mean dark frame of that shape or None: it tells hot pixels; its noise
    never enters. ``speckle`` None: measured here (see ``SpotSearch.speckle_contrast``).
    ``background_dn`` and ``noise_dn`` are those of the longest exposure.

    Raises ValueError where ``exposures`` is empty or shapes differ.
    """
    settings = settings or SearchSettings()
    seen = look(exposures, dark, camera, speckle=speckle, settings=settings)
    return judged_look(seen, step, settings.limits)


def look(
    exposures: Sequence[Exposure],
    dark: NDArray[np.float32] | NDArray[np.uint16] | None,
    camera: CameraNoise,
    *,
    speckle: Speckle | None = None,
    settings: SearchSettings | None = None,
    blind: NDArray[np.bool_] | None = None,
) -> Look:
    """What ``find_spots`` judges: every candidate with its window and fit.

    Inputs and errors as there; ``blind`` pixels (rows, columns) show no screen.
    """
    settings = settings or SearchSettings()
    scene = step_scene(exposures, dark, camera, settings.factor, blind)
    light = light_map(scene.smalls)
    bright = candidates(light, threshold=settings.threshold)
    found = _fit_all(scene, bright, speckle or NO_SPECKLE, [])
    seen = parted(scene, found, speckle or NO_SPECKLE, settings.limits)
    found = seen.found
    first = speckle or _first_grain(scene, seen.to_tell_grain)
    weights = first or TYPICAL_SPECKLE
    if weights.contrast > 0.0:
        # Ghosts and halos must not pull before they are known: the core alone counts.
        fine = speckle or _fine_grain(weights, found)
        found = [_core(scene, item, fine) for item in found]
        weights = speckle or _some(speckle_seen(found)) or fine
        found = parted(scene, found, weights, settings.limits).found
    shapes = [item.fit.shape for item in found]
    late = late_candidates(light, shapes, threshold=settings.threshold)
    found = _distinct(found + _fit_all(scene, late, weights, found))
    if weights.contrast == 0.0:
        found = renewed(scene, found, weights, all_of_them=False)
        return Look(scene, tuple(_distinct(found)), weights, speckle is None)
    cores = found
    found = renewed(scene, found, weights, all_of_them=True)
    # Weights that allow for speckle may hide that of a faint spot: then the first.
    grain = speckle or _some(speckle_seen(found)) or first
    last = grain or TYPICAL_SPECKLE
    if _other_than(last, weights):
        found = renewed(scene, found, last, all_of_them=True)
    found = [
        core_if_wings_disagree(scene, item, core, last)
        for item, core in zip(found, cores, strict=True)
    ]
    measured = speckle is None and grain is not None
    return Look(scene, tuple(_distinct(found)), last, measured)


def _first_grain(scene: StepScene, found: Sequence[FittedCandidate]) -> Speckle | None:
    """Speckle that fits without it show; None where they cannot tell."""
    grain = speckle_seen(found)
    if _some(grain) is None and not all(f.fit.converged for f in found):
        # Weights without speckle may be what kept them from converging.
        grain = speckle_seen(
            [f if f.fit.converged else refit(scene, f, TYPICAL_SPECKLE) for f in found]
        )
    return grain


def _fine_grain(grain: Speckle, found: Sequence[FittedCandidate]) -> Speckle:
    """``grain`` where spots are wide enough to show it; else the typical."""
    minor = [f.fit.shape.widths()[1] for f in found if f.fit.converged]
    wide = bool(minor) and grain.grain_fwhm_px < 0.7 * float(np.median(minor))
    return grain if wide and grain.contrast < 1.1 else TYPICAL_SPECKLE


def _core(scene: StepScene, item: FittedCandidate, grain: Speckle) -> FittedCandidate:
    """The core of a spot under speckle; as it was where that is one lobe of it.

    Begun anew where fits without speckle took one lobe for it.
    """
    if item.fit.shape.widths()[1] < _LEAST_CORE * item.candidate.sigma_px:
        first = item.candidate
        return fit_candidate(scene, first, grain, item.beside, trusted_to=_ROUGHLY)
    core = refit(scene, item, grain, trusted_to=_ROUGHLY)
    return item if one_lobe(core, item) else core


def _other_than(grain: Speckle, before: Speckle) -> bool:
    """Whether fits made for ``before`` must be renewed: 5 % in the stated error."""
    change = grain.noise_area() / before.noise_area()
    return not 0.9 < change < 1.1


def _fit_all(
    scene: StepScene,
    found: Sequence[Candidate],
    speckle: Speckle,
    before: Sequence[FittedCandidate],
) -> list[FittedCandidate]:
    """Fits of the candidates, leaving out what lies on a spot already fitted."""
    out: list[FittedCandidate] = []
    for item in found:
        known = [f for f in (*before, *out) if f.fit.converged]
        if not any(_covers(f, item, speckle) for f in known):
            near = [f.fit.shape for f in known if _near(f.fit.shape, item)]
            beside = tuple(Companion(shape, _NEXT_TO_U) for shape in near[:2])
            out.append(fit_candidate(scene, item, speckle, beside))
    return out


def _covers(known: FittedCandidate, item: Candidate, speckle: Speckle) -> bool:
    """Whether a candidate may be part of a brighter fitted spot.

    Under speckle nothing tells a second spot near the first from a lobe of it;
    without, it must stand out of what a spot a little wider would have there.
    """
    shape, column, row = known.fit.shape, item.column_px, item.row_px
    if speckle.contrast > 0.0:
        return among_lobes(known, column, row)
    near = shape.radii_away(column, row) < 3.5 and item.height < shape.height
    return near and item.height < _OUT_OF_WING * shape.light_at(column, row, _WIDER)


def _near(shape: Shape, item: Candidate) -> bool:
    """Whether a fitted spot's light reaches the candidate's window."""
    reach = shape.radii_away(item.column_px, item.row_px)
    return (
        shape.height > item.height
        and reach < 4.0 + _WINDOW_OF * item.sigma_px / (shape.widths()[1])
    )


def _some(seen: Speckle | None) -> Speckle | None:
    """Speckle if any was seen: where it once showed, it does not go away."""
    return None if seen is None or seen.contrast == 0.0 else seen


def _distinct(found: Sequence[FittedCandidate]) -> list[FittedCandidate]:
    """Brightest first; fits that slid onto a brighter spot are left out."""
    ordered = sorted(found, key=lambda f: (not f.fit.converged, -f.fit.shape.height))
    out: list[FittedCandidate] = []
    for item in ordered:
        shape = item.fit.shape
        if not any(nearer(k.fit.shape, shape, 2.0) for k in out):
            out.append(item)
    return out
