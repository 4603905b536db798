"""The exposures of one step as a scene, and the fit of one candidate in it."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import cv2
import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.camera_noise import CameraNoise, measured_noise_dn
from pitchsweep.analysis.frame_background import robust_width
from pitchsweep.analysis.small_frames import SmallFrame, small_frame
from pitchsweep.analysis.speckle_grain import Speckle
from pitchsweep.analysis.spot_candidates import Candidate
from pitchsweep.analysis.spot_fit import TRUSTED_TO, SpotFit, fit_spot
from pitchsweep.analysis.spot_judgement import FrameSide, light_over_noise
from pitchsweep.analysis.spot_model import Companion
from pitchsweep.analysis.spot_shape import Shape
from pitchsweep.analysis.spot_window import BoolArray, FrameLayer, Window, cut_window

_WINDOW_SIGMAS = 5.0
_CORE_ONLY, _DISAGREE, _LEFT = 0.06, 3.3, 0.1
_CLEARLY_ABOVE, _LEAST_OVER_UNEVENNESS = 100.0, 12.0
_PIXELS_A_RADIUS, _PIXELS_FOR_GRAIN = 3.0, 6.0
"""Bins this fine a radius cost a fit 0.5 % of its accuracy; grains are told from the
spot's form with finer ones."""


@dataclass(frozen=True)
class Exposure:
    """One frame (rows, columns), uint16 DN, and its exposure time."""

    frame: NDArray[np.uint16]
    exposure_ms: float


@dataclass(frozen=True)
class StepScene:
    """What all candidates of a step share; layers are ordered longest first.

    ``noise_dn`` is the pixel noise measured in each layer.
    """

    layers: tuple[FrameLayer, ...]
    smalls: tuple[SmallFrame, ...]
    hot: BoolArray | None
    side: FrameSide
    noise_dn: tuple[float, ...]


@dataclass(frozen=True)
class FittedCandidate:
    """A candidate, the window around it, what was fitted there and what with it.

    ``parted``: it is one of two spots that were seen as one.
    """

    candidate: Candidate
    window: Window
    fit: SpotFit
    beside: tuple[Companion, ...] = ()
    parted: bool = False


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
    blind: BoolArray | None = None,
) -> StepScene:
    """The scene of a bracket (any order), averaged down by ``factor`` for the search.

    Pixels that are ``blind`` (rows, columns) show no screen and never count. Raises
    ValueError where there is no exposure or the shapes differ.
    """
    shapes = {e.frame.shape for e in exposures} | (
        set() if dark is None else {dark.shape}
    )
    if len(shapes) != 1:
        raise ValueError(f"frames of one shape are needed, got {sorted(shapes)}")
    ordered = sorted(exposures, key=lambda e: -e.exposure_ms)
    layers = [FrameLayer(e.frame, e.exposure_ms, camera) for e in ordered]
    smalls = [small_frame(layer, factor) for layer in layers]
    seen = tuple(measured_noise_dn(layer.frame) for layer in layers)
    layers = [
        replace(
            layer,
            noise=layer.noise.with_measured(small.level(), noise_dn),
            stripes=small.stripes,
        )
        for layer, small, noise_dn in zip(layers, smalls, seen, strict=True)
    ]
    rows, columns = ordered[0].frame.shape
    hot = blind if dark is None else hot_pixels(dark)
    if blind is not None and hot is not None:
        hot = hot | blind
    return StepScene(tuple(layers), tuple(smalls), hot, FrameSide(columns, rows), seen)


def fit_candidate(
    scene: StepScene,
    item: Candidate,
    speckle: Speckle,
    beside: tuple[Companion, ...] = (),
    *,
    trusted_to: float = TRUSTED_TO,
) -> FittedCandidate:
    """The fit of one candidate, its window recut if the spot is of another size."""
    start = Shape.round_spot(
        item.height, item.column_px, item.row_px, min(max(item.sigma_px, 1.0), 200.0)
    )
    half = (_WINDOW_SIGMAS * item.sigma_px + 1.0,) * 2
    window = _window(scene, start, half)

    def fitted(window: Window, start: Shape) -> SpotFit:
        return fit_spot(
            window, start, speckle, companions=beside, trusted_to=trusted_to
        )

    fit = fitted(window, start)
    wanted = fit.shape.half_sides(_WINDOW_SIGMAS)
    if fit.converged and _off(wanted, half) and max(wanted) < 3.0 * half[0] + 20.0:
        window = _window(scene, fit.shape, wanted)
        fit = fitted(window, fit.shape)
    return FittedCandidate(item, window, fit, beside)


def refit(
    scene: StepScene,
    item: FittedCandidate,
    speckle: Speckle,
    *,
    trusted_to: float = TRUSTED_TO,
) -> FittedCandidate:
    """The fit renewed with other weights; from the start where it had not converged.

    Bins that were too coarse for speckle are made finer. ``trusted_to`` as for
    ``fit_spot``.
    """
    if not item.fit.converged:
        return fit_candidate(scene, item.candidate, speckle, item.beside)
    shape = item.fit.shape
    finest = max(1, int(shape.widths()[1] / _PIXELS_FOR_GRAIN))
    if speckle.contrast > 0.0 and item.window.binning > finest:
        half = shape.half_sides(_WINDOW_SIGMAS)
        window = _window(scene, shape, half, _PIXELS_FOR_GRAIN)
        item = replace(item, window=window)
    fit = fit_spot(
        item.window, shape, speckle, companions=item.beside, trusted_to=trusted_to
    )
    return replace(item, fit=fit)


def core_if_wings_disagree(
    scene: StepScene, item: FittedCandidate, seen: FittedCandidate, speckle: Speckle
) -> FittedCandidate:
    """The fit, or that of the core alone where the two differ by too much.

    Under speckle faint wings weigh as much as the core: a ghost or a halo of a few
    percent pulls the spot. The difference of an efficient and a less efficient
    estimate has the difference of their variances; beyond ``_DISAGREE`` of it, wings
    are not trusted, and a tenth of what they pulled is added to the core's error.
    ``seen`` is where the core was seen before.
    """
    if not item.fit.converged:
        return item
    start = replace(item, fit=seen.fit if seen.fit.converged else item.fit)
    core = refit(scene, start, speckle, trusted_to=_CORE_ONLY).fit
    if not core.converged or core.shape.widths()[1] < 0.6 * item.fit.shape.widths()[1]:
        return item
    off = np.array(
        [
            core.shape.column_px - item.fit.shape.column_px,
            core.shape.row_px - item.fit.shape.row_px,
        ]
    )
    spread = core.covariance - item.fit.covariance
    # Rounding and few grains: never less than a fifth of the core's own variance.
    least = 0.2 * core.covariance
    values = np.linalg.eigvalsh(spread - least)
    spread = spread if values.min() > 0.0 else spread + least
    if np.linalg.eigvalsh(spread).min() <= 0.0:
        spread = core.covariance
    if float(off @ np.linalg.solve(spread, off)) < _DISAGREE**2:
        return item
    left = (_LEFT**2) * np.outer(off, off)
    core = replace(
        core,
        covariance=core.covariance + left,
        speckle_covariance=core.speckle_covariance + left,
    )
    return replace(item, fit=core)


def lost_in_unevenness(scene: StepScene, fit: SpotFit) -> bool:
    """Whether the background varies by more than a twelfth of the spot at its scale.

    Compared are a matched filter's answer at the spot and its robust scatter between 4
    and 10 radii around it; only where that is more than twice what noise explains.
    """
    if light_over_noise(fit) > _CLEARLY_ABOVE:
        return False
    small, shape = scene.smalls[0], fit.shape
    major, minor, _ = shape.widths()
    scale = max(minor / small.factor, 0.5)
    row, column = shape.row_px / small.factor, shape.column_px / small.factor
    reach = 10.0 * major / small.factor
    rows, columns = small.excess.shape
    box = (
        slice(max(int(row - reach), 0), min(int(row + reach) + 2, rows)),
        slice(max(int(column - reach), 0), min(int(column + reach) + 2, columns)),
    )
    smooth = np.asarray(
        cv2.GaussianBlur(small.excess[box], (0, 0), scale), dtype=np.float32
    )
    down = np.arange(box[0].start, box[0].stop)[:, None] - row
    across = np.arange(box[1].start, box[1].stop)[None, :] - column
    ring = smooth[np.hypot(down, across) > 0.4 * reach]
    if ring.size < 50:
        return False
    scatter = robust_width(ring)
    white = float(np.median(small.noise[box])) / (2.0 * np.pi**0.5 * scale)
    seen = 0.5 * shape.height * small.exposure_ms
    return scatter > 2.0 * white and seen < _LEAST_OVER_UNEVENNESS * scatter


def _off(wanted: tuple[float, float], half: tuple[float, float]) -> bool:
    """Whether a window is too small for its spot, or much too large."""
    ratios = [w / h for w, h in zip(wanted, half, strict=True)]
    return max(ratios) > 1.08 or min(ratios) < 0.7


def window_around(scene: StepScene, shapes: Sequence[Shape]) -> Window:
    """The window that holds all of ``shapes``."""
    sides = [(s, *s.half_sides(_WINDOW_SIGMAS)) for s in shapes]
    left = min(s.column_px - wide for s, wide, _ in sides)
    right = max(s.column_px + wide for s, wide, _ in sides)
    top = min(s.row_px - high for s, _, high in sides)
    bottom = max(s.row_px + high for s, _, high in sides)
    narrow = min(shapes, key=lambda s: s.widths()[1])
    middle = replace(
        narrow, column_px=0.5 * (left + right), row_px=0.5 * (top + bottom)
    )
    return _window(scene, middle, (0.5 * (right - left), 0.5 * (bottom - top)))


def _window(
    scene: StepScene,
    shape: Shape,
    half: tuple[float, float],
    pixels: float = _PIXELS_A_RADIUS,
) -> Window:
    centre = (shape.column_px, shape.row_px)
    planes = [s.plane_at(*centre, max(half)) for s in scene.smalls]
    shortest = min(scene.side.columns, scene.side.rows)
    binning = min(max(1, int(shape.widths()[1] / pixels)), shortest)
    return cut_window(
        scene.layers, planes, scene.hot, centre=centre, half=half, binning=binning
    )
