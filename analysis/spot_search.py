"""One step's exposures in, its spots out.

Candidates are found on all exposures together, averaged down; each is fitted in full
frames over the unsaturated pixels of every exposure at once, so nothing has to be
deduplicated between exposures. A second look, with the found spots taken off, finds
faint ones beside bright ones. Speckle is measured in the residuals unless given.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.camera_noise import CameraNoise
from pitchsweep.analysis.records import SpotSearch
from pitchsweep.analysis.speckle_grain import NO_SPECKLE, TYPICAL_SPECKLE, Speckle
from pitchsweep.analysis.speckle_measure import GrainSample, measure_speckle
from pitchsweep.analysis.spot_candidates import (
    Candidate,
    LightMap,
    candidates,
    light_map,
)
from pitchsweep.analysis.spot_fit import Shape
from pitchsweep.analysis.spot_judgement import (
    SpotLimits,
    light_over_noise,
)
from pitchsweep.analysis.spot_scene import (
    Exposure,
    FittedCandidate,
    StepScene,
    core_if_wings_disagree,
    fit_candidate,
    refit,
    step_scene,
)
from pitchsweep.analysis.spot_verdicts import Look, judged_look, nearer
from pitchsweep.analysis.spot_window import shared_rounding

__all__ = ["Exposure", "Look", "SearchSettings", "find_spots", "look"]

_COARSEST_GRAIN_PX = 8.0


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
    grain, measured = speckle or NO_SPECKLE, False
    found = _fit_all(scene, candidates(light, threshold=settings.threshold), grain, [])
    rest = _without(light, found)
    late = candidates(rest, threshold=settings.threshold)
    found += _fit_all(scene, late, grain, found)
    if speckle is None:
        seen, found = _with_speckle(scene, found)
        grain = seen or TYPICAL_SPECKLE
        measured = seen is not None
    return Look(scene, tuple(_distinct(found)), grain, measured)


def _fit_all(
    scene: StepScene,
    found: Sequence[Candidate],
    speckle: Speckle,
    before: Sequence[FittedCandidate],
) -> list[FittedCandidate]:
    """Fits of the candidates, leaving out what lies on a spot already fitted."""
    out: list[FittedCandidate] = []
    for item in found:
        taken = any(_covers(f.fit.shape, item) for f in (*before, *out))
        if not taken:
            out.append(fit_candidate(scene, item, speckle))
    return out


def _covers(shape: Shape, item: Candidate) -> bool:
    """Whether a candidate lies within 3.5 radii of a brighter fitted spot."""
    dx, dy = item.column_px - shape.column_px, item.row_px - shape.row_px
    square = shape.a * dx * dx + 2 * shape.b * dx * dy + shape.c * dy * dy
    return square < 3.5**2 and item.height < shape.height


def _with_speckle(
    scene: StepScene, found: list[FittedCandidate]
) -> tuple[Speckle | None, list[FittedCandidate]]:
    """Speckle seen, and the fits renewed with it; twice, as weights matter to both.

    None where there is too little light to see any: the fits then allow for the
    speckle that is typical of a diffusing screen.
    """
    grain, renewed = _measured(found), found
    if _none_seen(grain) and not all(f.fit.converged for f in found):
        # Weights without speckle may be what kept them from converging.
        renewed = [
            f if f.fit.converged else refit(scene, f, TYPICAL_SPECKLE) for f in found
        ]
        grain = _measured(renewed)
    if grain is not None and grain.contrast == 0.0:
        return grain, found
    renewed = [refit(scene, item, grain or TYPICAL_SPECKLE) for item in renewed]
    # Weights that allow for speckle may hide that of a faint spot: then the first.
    grain = _measured(renewed) or grain
    last = grain or TYPICAL_SPECKLE
    renewed = [refit(scene, item, last) for item in renewed]
    return grain, [
        core_if_wings_disagree(item, first.fit.shape, last)
        for item, first in zip(renewed, found, strict=True)
    ]


def _none_seen(speckle: Speckle | None) -> bool:
    return speckle is None or speckle.contrast == 0.0


def _without(light: LightMap, found: Sequence[FittedCandidate]) -> LightMap:
    """The map with fitted spots taken off and their leftovers counted as noise."""
    rows, columns = light.rate.shape
    middle = (light.factor - 1) / 2.0
    x = (np.arange(columns, dtype=np.float64) * light.factor + middle)[None, :]
    y = (np.arange(rows, dtype=np.float64) * light.factor + middle)[:, None]
    rate, variance = light.rate.copy(), light.noise**2
    for item in found:
        box = _box(item.fit.shape, light)
        signal = item.fit.shape.signal(x[:, box[1]], y[box[0]])
        rate[box] -= signal.astype(np.float32)
        variance[box] += ((0.2 * signal) ** 2).astype(np.float32)
    return replace(light, rate=rate, noise=np.sqrt(variance))


def _box(shape: Shape, light: LightMap) -> tuple[slice, slice]:
    wide, high = shape.half_sides(6.0)
    f = light.factor
    return (
        slice(
            max(int((shape.row_px - high) / f), 0), int((shape.row_px + high) / f) + 2
        ),
        slice(
            max(int((shape.column_px - wide) / f), 0),
            int((shape.column_px + wide) / f) + 2,
        ),
    )


def _measured(found: Sequence[FittedCandidate]) -> Speckle | None:
    """Speckle from the four brightest fits; None where there is too little light.

    In binned windows the grain is seen in bins; contrast and grain of bins stand for
    the same noise per area.
    """
    good = [f for f in found if _shows_grain(f)]
    good.sort(key=lambda f: -light_over_noise(f.fit))
    binning = good[0].fit.binning if good else 1
    good = [f for f in good if f.fit.binning == binning]
    seen = measure_speckle([_sample(f) for f in good[:4]])
    if seen is None:
        return None
    seen = replace(seen, grain_fwhm_px=seen.grain_fwhm_px * binning)
    minor = [f.fit.shape.widths()[1] for f in good[:4]]
    # Coarse, or pale and as wide as the spots: no grain, but beams of another form.
    pale = seen.contrast < 0.3 and minor
    wide = pale and seen.grain_fwhm_px > 0.8 * float(np.median(minor))
    return NO_SPECKLE if wide or seen.grain_fwhm_px > _COARSEST_GRAIN_PX else seen


def _shows_grain(item: FittedCandidate) -> bool:
    """Whether a fit is a clear spot, not a streak or a leftover."""
    if not item.fit.converged or light_over_noise(item.fit) < 20.0:
        return False
    major, minor, _ = item.fit.shape.widths()
    return major < 4.0 * minor


def _sample(item: FittedCandidate) -> GrainSample:
    fit = item.fit
    bright = (fit.weight > 0.0) & (fit.signal > 0.05 * fit.shape.height)
    root = np.sqrt(fit.weight)
    return GrainSample(
        residual=root * fit.residual,
        signal=root * fit.signal,
        noise=fit.weight * fit.variance,
        rounding=root * shared_rounding(item.window, fit.signal),
        modes=fit.modes,
        bright=bright.astype(np.float64),
    )


def _distinct(found: Sequence[FittedCandidate]) -> list[FittedCandidate]:
    """Brightest first; fits that slid onto a brighter spot are left out."""
    ordered = sorted(found, key=lambda f: (not f.fit.converged, -f.fit.shape.height))
    out: list[FittedCandidate] = []
    for item in ordered:
        shape = item.fit.shape
        if not any(nearer(k.fit.shape, shape, 2.0) for k in out):
            out.append(item)
    return out
