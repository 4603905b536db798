"""The exposures of one step as a scene, and the fit of one candidate in it."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.camera_noise import CameraNoise, measured_noise_dn
from pitchsweep.analysis.frame_background import robust_width
from pitchsweep.analysis.speckle_grain import Speckle
from pitchsweep.analysis.spot_candidates import Candidate, SmallFrame, small_frame
from pitchsweep.analysis.spot_fit import Shape, SpotFit, fit_spot
from pitchsweep.analysis.spot_judgement import FrameSide
from pitchsweep.analysis.spot_window import BoolArray, FrameLayer, Window, cut_window

_WINDOW_SIGMAS = 5.0


@dataclass(frozen=True)
class Exposure:
    """One frame (rows, columns), uint16 DN, and its exposure time."""

    frame: NDArray[np.uint16]
    exposure_ms: float


@dataclass(frozen=True)
class StepScene:
    """What all candidates of a step share; layers are ordered longest first."""

    layers: tuple[FrameLayer, ...]
    smalls: tuple[SmallFrame, ...]
    hot: BoolArray | None
    side: FrameSide


@dataclass(frozen=True)
class FittedCandidate:
    """A candidate, the window around it and what was fitted there."""

    candidate: Candidate
    window: Window
    fit: SpotFit


def hot_pixels(dark: NDArray[np.float32] | NDArray[np.uint16]) -> BoolArray:
    """Pixels of a mean dark frame (rows, columns) that stand out of it by 8 widths."""
    image = np.asarray(dark, dtype=np.float32)
    width = max(robust_width(image[::2, ::2]), 0.3)
    middle = float(np.median(image[::8, ::8]))
    return np.asarray(np.abs(image - middle) > 8.0 * width, dtype=np.bool_)


def step_scene(
    exposures: Sequence[Exposure],
    dark: NDArray[np.float32] | NDArray[np.uint16] | None,
    camera: CameraNoise,
    factor: int,
) -> StepScene:
    """The scene of a bracket (any order), averaged down by ``factor`` for the search.

    Raises ValueError where there is no exposure or the shapes differ.
    """
    shapes = {e.frame.shape for e in exposures} | (
        set() if dark is None else {dark.shape}
    )
    if len(shapes) != 1:
        raise ValueError(f"frames of one shape are needed, got {sorted(shapes)}")
    ordered = sorted(exposures, key=lambda e: -e.exposure_ms)
    layers = [FrameLayer(e.frame, e.exposure_ms, camera) for e in ordered]
    smalls = [small_frame(layer, factor) for layer in layers]
    layers = [
        replace(layer, noise=_noise_seen(layer, small))
        for layer, small in zip(layers, smalls, strict=True)
    ]
    rows, columns = ordered[0].frame.shape
    hot = None if dark is None else hot_pixels(dark)
    return StepScene(tuple(layers), tuple(smalls), hot, FrameSide(columns, rows))


def _noise_seen(layer: FrameLayer, small: SmallFrame) -> CameraNoise:
    level = float(np.median(small.background))
    return layer.noise.with_measured(level, measured_noise_dn(layer.frame))


def fit_candidate(
    scene: StepScene, item: Candidate, speckle: Speckle
) -> FittedCandidate:
    """The fit of one candidate, its window recut if the spot is of another size."""
    start = Shape.round_spot(
        item.height, item.column_px, item.row_px, min(max(item.sigma_px, 1.0), 200.0)
    )
    half = (_WINDOW_SIGMAS * item.sigma_px + 1.0,) * 2
    window = _window(scene, start, half)
    fit = fit_spot(window, start, speckle)
    wanted = fit.shape.half_sides(_WINDOW_SIGMAS)
    off = max(abs(w / h - 1.0) for w, h in zip(wanted, half, strict=True))
    if fit.converged and off > 0.1 and max(wanted) < 3.0 * half[0] + 20.0:
        window = _window(scene, fit.shape, wanted)
        fit = fit_spot(window, fit.shape, speckle)
    return FittedCandidate(item, window, fit)


def refit(scene: StepScene, item: FittedCandidate, speckle: Speckle) -> FittedCandidate:
    """The fit renewed with other weights; from the start where it had not converged."""
    if not item.fit.converged:
        return fit_candidate(scene, item.candidate, speckle)
    return replace(item, fit=fit_spot(item.window, item.fit.shape, speckle))


def _window(scene: StepScene, shape: Shape, half: tuple[float, float]) -> Window:
    centre = (shape.column_px, shape.row_px)
    planes = [s.plane_at(*centre, max(half)) for s in scene.smalls]
    # Six pixels a radius are enough for a fit, and much faster on wide beams.
    shortest = min(scene.side.columns, scene.side.rows)
    binning = min(max(1, int(shape.widths()[1] / 6.0)), shortest)
    return cut_window(
        scene.layers, planes, scene.hot, centre=centre, half=half, binning=binning
    )
