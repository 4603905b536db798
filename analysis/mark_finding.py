"""Fixed marks on the screen frame: where they are seen in a step's exposures.

Marks shine by themselves or by room light, in every frame. Their places are roughly
known; each is looked for within ``SEARCH_PX`` and fitted like a spot, without speckle.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import cv2
import numpy as np

from pitchsweep.analysis.records import RejectedSpot, Rejection, SpotSearch
from pitchsweep.analysis.speckle_grain import NO_SPECKLE
from pitchsweep.analysis.spot_fit import Shape, fit_spot
from pitchsweep.analysis.spot_judgement import light_over_noise, misfit
from pitchsweep.analysis.spot_scene import StepScene
from pitchsweep.analysis.spot_window import cut_window

SEARCH_PX = 10.0
_FIRST_SIGMA_PX = 2.0
_ITSELF_PX, _BESIDE_PX = 3.0, 12.0
_LEAST_LIGHT = 8.0
_LARGEST_SIGMA_PX = 6.0


@dataclass(frozen=True)
class MarkSeen:
    """A mark by its number in the bench file, its place in px and u of either axis."""

    number: int
    column_px: float
    row_px: float
    u_px: float


def find_marks(
    scene: StepScene, places_px: Sequence[tuple[float, float]]
) -> tuple[MarkSeen, ...]:
    """The marks seen near their nominal ``places_px`` (column, row), numbered from 0.

    A mark that is out of the frame, too faint or no small spot is left out.
    """
    seen = (_mark(scene, number, place) for number, place in enumerate(places_px))
    return tuple(mark for mark in seen if mark is not None)


def without_marks(
    found: SpotSearch, marks: Sequence[MarkSeen], step: int
) -> SpotSearch:
    """``found`` without the marks themselves; spots beside one are refused."""
    if not marks:
        return found

    def away(column_px: float, row_px: float) -> float:
        return min(
            float(np.hypot(m.column_px - column_px, m.row_px - row_px)) for m in marks
        )

    kept, refused = [], []
    for spot in found.spots:
        distance = away(spot.column_px, spot.row_px)
        if distance >= _BESIDE_PX:
            kept.append(spot)
        elif distance >= _ITSELF_PX:
            refused.append(
                RejectedSpot(step, spot.column_px, spot.row_px, "px", Rejection.ON_MARK)
            )
    refused += [r for r in found.rejected if away(r.x, r.y) >= _ITSELF_PX]
    return replace(found, spots=tuple(kept), rejected=tuple(refused))


def _mark(scene: StepScene, number: int, place: tuple[float, float]) -> MarkSeen | None:
    if scene.side.room(*place) < SEARCH_PX:
        return None
    reach = SEARCH_PX + 3.0 * _FIRST_SIGMA_PX
    planes = [small.plane_at(*place, 2.0 * reach) for small in scene.smalls]
    window = cut_window(scene.layers, planes, None, centre=place, half=(reach, reach))
    longest = window.layers[0]
    light = np.where(longest.good, longest.rate, 0.0)
    smooth = np.asarray(cv2.GaussianBlur(light, (0, 0), _FIRST_SIGMA_PX), np.float64)
    row, column = np.unravel_index(int(np.argmax(smooth)), smooth.shape)
    start = Shape.round_spot(
        max(2.0 * float(smooth[row, column]), 1e-9),
        float(window.x[0, column]),
        float(window.y[row, 0]),
        _FIRST_SIGMA_PX,
    )
    near = (start.column_px, start.row_px)
    half = (5.0 * _FIRST_SIGMA_PX, 5.0 * _FIRST_SIGMA_PX)
    window = cut_window(scene.layers, planes, None, centre=near, half=half)
    fit = fit_spot(window, start, NO_SPECKLE)
    if not fit.converged or light_over_noise(fit) < _LEAST_LIGHT:
        return None
    if fit.shape.widths()[0] > _LARGEST_SIGMA_PX:
        return None
    away = np.hypot(fit.shape.column_px - place[0], fit.shape.row_px - place[1])
    if away > SEARCH_PX:
        return None
    variance = 0.5 * float(np.trace(fit.covariance)) * misfit(fit, NO_SPECKLE).ratio
    return MarkSeen(number, fit.shape.column_px, fit.shape.row_px, variance**0.5)
