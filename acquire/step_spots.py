"""A step's frames -> spots on the nominal screen, with the bench's camera (pure)."""

from collections.abc import Sequence
from dataclasses import replace

import cv2
import numpy as np
from numpy.typing import NDArray

from pitchsweep.acquire.bench_devices import FindSpots, Shot
from pitchsweep.acquire.journal_rows import MarkRow, RejectedRow, SpotRow, StepSpots
from pitchsweep.analysis.bracket_noise import bracket_noise, camera_seen
from pitchsweep.analysis.camera_noise import CameraNoise
from pitchsweep.analysis.mark_finding import MarkSeen, find_marks, without_marks
from pitchsweep.analysis.pixel_map import (
    pixels_from_screen,
    screen_from_pixels,
    spot_on_screen,
)
from pitchsweep.analysis.records import RejectedSpot, Rejection, Spot, SpotSearch
from pitchsweep.analysis.spot_search import Exposure, look
from pitchsweep.analysis.spot_verdicts import Look, judged_look
from pitchsweep.configs.bench_model import Bench, Camera

_ROOM_SIGMAS = 2.0
"""A spot nearer to the edge of the beam hole than so many radii has lost light to it,
as one at the frame's edge."""


def spot_finder(bench: Bench) -> FindSpots:
    """A finder for frames of ``bench``: its noise model, pixel map and marks."""
    cv2.setNumThreads(1)  # the finder has one worker; the sweep has the other core
    camera = bench.camera
    blind = no_screen(bench)

    def find(step: int, lights: Sequence[Shot], darks: Sequence[Shot]) -> StepSpots:
        exposures = [Exposure(shot.frame, shot.exposure_ms) for shot in lights]
        noise = camera_of(bench, lights, darks)
        seen = look(exposures, mean_dark(darks), noise, blind=blind)
        marks = marks_of(seen, bench)
        found = judged_on_bench(seen, marks, bench, step)
        rows = tuple(_mark_row(mark, camera) for mark in marks)
        return replace(on_screen(found, camera), marks=rows)

    return find


def camera_of(
    bench: Bench, lights: Sequence[Shot], darks: Sequence[Shot]
) -> CameraNoise:
    """The camera's noise as the bench file states it.

    Where a step's bracket and dark clearly show another one, they are believed.
    """
    stated = CameraNoise.from_bench(bench.camera)
    frames = [(shot.frame, shot.exposure_ms) for shot in lights]
    return camera_seen(stated, bracket_noise(frames, mean_dark(darks), stated))


def marks_of(seen: Look, bench: Bench) -> tuple[MarkSeen, ...]:
    """The bench file's marks that a step's frames show."""
    camera = bench.camera
    places = [pixels_from_screen(*mark, camera) for mark in bench.screen.marks_mm]
    return find_marks(seen.scene, places)


def judged_on_bench(
    seen: Look, marks: Sequence[MarkSeen], bench: Bench, step: int
) -> SpotSearch:
    """The verdicts on ``seen``, beam hole and marks heeded; marks are no spots."""
    found = off_the_hole(judged_look(seen, step), bench, step)
    return without_marks(found, marks, step)


def no_screen(bench: Bench) -> NDArray[np.bool_]:
    """Pixels (rows, columns) within the beam hole, a pixel's diagonal about it too.

    Where the hole takes a part of a spot, the rest tells where its middle is.
    """
    camera, hole = bench.camera, bench.screen.hole
    column, row = pixels_from_screen(hole.x_mm, hole.y_mm, camera)
    across = np.arange(camera.width_px)[None, :] - column
    down = np.arange(camera.height_px)[:, None] - row
    reach = hole.diameter_mm / 2.0 / camera.mm_per_px + 2.0**0.5
    return np.asarray(np.hypot(across, down) < reach)


def off_the_hole(found: SpotSearch, bench: Bench, step: int) -> SpotSearch:
    """``found`` without spots whose core the beam hole cuts; they are refused."""
    camera, hole = bench.camera, bench.screen.hole
    column, row = pixels_from_screen(hole.x_mm, hole.y_mm, camera)
    radius = hole.diameter_mm / 2.0 / camera.mm_per_px

    def room(spot: Spot) -> float:
        return float(np.hypot(spot.column_px - column, spot.row_px - row)) - radius

    cut = [s for s in found.spots if room(s) < _ROOM_SIGMAS * s.sigma_px[0]]
    refused = [
        RejectedSpot(
            step,
            s.column_px,
            s.row_px,
            "px",
            Rejection.ON_HOLE,
            f"{room(s):.1f} px from the edge of the beam hole",
            s.snr,
        )
        for s in cut
    ]
    kept = tuple(s for s in found.spots if s not in cut)
    return replace(found, spots=kept, rejected=(*found.rejected, *refused))


def mean_dark(darks: Sequence[Shot]) -> NDArray[np.float32] | None:
    """The dark frame of the longest exposure: it shows the hot pixels best."""
    if not darks:
        return None
    longest = max(darks, key=lambda shot: shot.exposure_ms)
    return longest.frame.astype(np.float32)


def on_screen(found: SpotSearch, camera: Camera) -> StepSpots:
    """A search result in nominal screen millimetres, as journal rows."""
    return StepSpots(
        spots=tuple(_row(spot, camera) for spot in found.spots),
        rejected=tuple(
            RejectedRow(
                float(item.x),
                float(item.y),
                item.unit,
                item.reason.value,
                item.detail,
                float(item.score),
            )
            for item in found.rejected
        ),
        background_dn=float(found.background_dn),
        noise_dn=float(found.noise_dn),
        speckle_contrast=float(found.speckle_contrast),
        grain_fwhm_px=float(found.grain_fwhm_px),
        speckle_measured=bool(found.speckle_measured),
    )


def _mark_row(mark: MarkSeen, camera: Camera) -> MarkRow:
    x_mm, y_mm = screen_from_pixels(mark.column_px, mark.row_px, camera)
    u_mm = camera.mm_per_px * mark.u_px
    return MarkRow(mark.number, float(x_mm), float(y_mm), float(u_mm))


def _row(spot: Spot, camera: Camera) -> SpotRow:
    # Plain Python numbers: the journal stores nothing else.
    place = spot_on_screen(spot, camera)
    return SpotRow(
        x_mm=float(place.x_mm),
        y_mm=float(place.y_mm),
        ux_mm=float(place.ux_mm),
        uy_mm=float(place.uy_mm),
        cxy_mm2=float(place.cxy_mm2),
        brightness=float(spot.peak_dn_per_ms),
        column_px=float(spot.column_px),
        row_px=float(spot.row_px),
        sigma_major_px=float(spot.sigma_px[0]),
        sigma_minor_px=float(spot.sigma_px[1]),
        snr=float(spot.snr),
        exposure_ms=float(spot.exposure_ms),
        saturated=bool(spot.saturated),
        shared_xx_mm2=float(place.shared_mm2[0]),
        shared_xy_mm2=float(place.shared_mm2[1]),
        shared_yy_mm2=float(place.shared_mm2[2]),
    )
