"""A step's frames -> spots on the nominal screen, with the bench's camera (pure)."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from pitchsweep.acquire.bench_devices import FindSpots, Shot
from pitchsweep.acquire.journal_rows import RejectedRow, SpotRow, StepSpots
from pitchsweep.analysis.camera_noise import CameraNoise
from pitchsweep.analysis.pixel_map import spot_on_screen
from pitchsweep.analysis.records import Spot, SpotSearch
from pitchsweep.analysis.spot_search import Exposure, find_spots
from pitchsweep.configs.bench_model import Camera


def spot_finder(camera: Camera) -> FindSpots:
    """A finder for frames of ``camera``: its noise model, its pixel map."""
    noise = CameraNoise.from_bench(camera)

    def find(step: int, lights: Sequence[Shot], darks: Sequence[Shot]) -> StepSpots:
        exposures = [Exposure(shot.frame, shot.exposure_ms) for shot in lights]
        found = find_spots(exposures, mean_dark(darks), noise, step)
        return on_screen(found, camera)

    return find


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
