"""Spots of steps on their way into a table, under the speckle of the whole run (pure).

A step alone measures speckle in few grains. All steps see the same screen, so what
they measured is pooled, and the speckle part of every covariance is restated for it.
The pool is a mean over the steps: it does not depend on the order they were taken in.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

from pitchsweep.acquire.fit_input import SpotPlace
from pitchsweep.acquire.journal_rows import SpotRow, StepSpots
from pitchsweep.analysis.mark_drift import MarkPlace, StepDrift, drifts
from pitchsweep.analysis.records import RejectedSpot, Rejection
from pitchsweep.analysis.speckle_grain import Speckle
from pitchsweep.analysis.speckle_pool import pooled_speckle, restated_share


@dataclass(frozen=True)
class StepPlace:
    """What the spots of a step have in common."""

    step: int
    stage_deg: float
    mount_deg: float
    laser: str
    time_s: float | None = None
    face_deg: float = 0.0


def speckle_of(steps: Iterable[StepSpots]) -> Speckle | None:
    """The speckle of a run; None where no step measured any."""
    measured = [_speckle(found) for found in steps if found.speckle_measured]
    return pooled_speckle([s for s in measured if s is not None])


def places_of(steps: Sequence[tuple[StepSpots, StepPlace]]) -> list[SpotPlace]:
    """The spots of a run's or frame set's steps as table rows.

    Covariances are restated for the speckle of all steps, and places for the camera
    standing still where marks told how it moved.
    """
    speckle = speckle_of(found for found, _ in steps)
    moved = drifts([_marks(found) for found, _ in steps])
    return [
        _still(_place(spot, at, restated_share(_speckle(found), speckle)), drift)
        for (found, at), drift in zip(steps, moved, strict=True)
        for spot in found.spots
    ]


def _marks(found: StepSpots) -> list[MarkPlace]:
    return [MarkPlace(m.number, m.x_mm, m.y_mm, m.u_mm) for m in found.marks]


def _still(place: SpotPlace, drift: StepDrift | None) -> SpotPlace:
    if drift is None:
        return place
    x_mm, y_mm = drift.undone(place.x_mm, place.y_mm)
    more_x, more_y = drift.added_variance_mm2(place.x_mm, place.y_mm)
    return replace(
        place,
        x_mm=x_mm,
        y_mm=y_mm,
        ux_mm=(place.ux_mm**2 + more_x) ** 0.5,
        uy_mm=(place.uy_mm**2 + more_y) ** 0.5,
    )


def rejected_of(found: StepSpots, step: int) -> list[RejectedSpot]:
    """The refused candidates of one step."""
    return [
        RejectedSpot(step, r.x, r.y, r.unit, Rejection(r.reason), r.detail, r.score)
        for r in found.rejected
    ]


def saturation_warnings(steps: Iterable[StepSpots], remedy: str) -> list[str]:
    """A warning where spots were saturated in every exposure, with what to do."""
    clipped = sum(bool(spot.saturated) for found in steps for spot in found.spots)
    if not clipped:
        return []
    return [
        f"{clipped} spots were saturated in every exposure and fitted from their "
        f"wings: {remedy}"
    ]


def _speckle(found: StepSpots) -> Speckle | None:
    if found.speckle_contrast is None or found.grain_fwhm_px is None:
        return None
    return Speckle(found.speckle_contrast, found.grain_fwhm_px)


def _place(spot: SpotRow, at: StepPlace, share: float) -> SpotPlace:
    xx, xy, yy = spot.ux_mm**2, spot.cxy_mm2, spot.uy_mm**2
    shared = (spot.shared_xx_mm2, spot.shared_xy_mm2, spot.shared_yy_mm2)
    sxx, sxy, syy = (0.0 if part is None else part for part in shared)
    more = share - 1.0
    return SpotPlace(
        step=at.step,
        stage_deg=at.stage_deg,
        mount_deg=at.mount_deg,
        laser=at.laser,
        x_mm=spot.x_mm,
        y_mm=spot.y_mm,
        ux_mm=(xx + more * sxx) ** 0.5,
        uy_mm=(yy + more * syy) ** 0.5,
        cxy_mm2=xy + more * sxy,
        brightness=spot.brightness,
        time_s=at.time_s,
        face_deg=at.face_deg,
        shared_xx_mm2=share * sxx,
        shared_xy_mm2=share * sxy,
        shared_yy_mm2=share * syy,
    )
