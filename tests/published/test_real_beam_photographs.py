"""Photographs of real beams pass through the spot finder.

Source: documentation of the MIT-licensed library laserbeamsize (ISO 11146 beam widths)
at 462b7f44, see tests/data/beam_photographs/README.md. The number of beams is what an
eye sees; the centres are compared with second-moment centres of that library.
Verified: counted by eye on log-scaled pictures; centres by running the library here.
"""

from functools import cache
from pathlib import Path

import cv2
import laserbeamsize
import numpy as np
import pytest
from numpy.typing import NDArray

from pitchsweep.analysis.camera_noise import CameraNoise
from pitchsweep.analysis.frame_image import decode_frame
from pitchsweep.analysis.records import Rejection, SpotSearch
from pitchsweep.analysis.spot_judgement import SpotLimits
from pitchsweep.analysis.spot_search import Exposure, SearchSettings, find_spots

FOLDER = Path(__file__).resolve().parents[1] / "data" / "beam_photographs"
BITS = {
    "TEM00_140mm": 12,
    "sb_259mm_10": 12,
    "k-200mm": 8,
    "FBWR_151": 8,
    "t-520mm": 8,
}
WITH_SATURATED = SearchSettings(limits=SpotLimits(accept_saturated=True))


@cache
def photograph(name: str) -> NDArray[np.uint16]:
    return decode_frame(
        (FOLDER / f"{name}.png").read_bytes(), name=name, bits=BITS[name]
    )


def search(name: str, settings: SearchSettings | None = None) -> SpotSearch:
    frame = photograph(name)
    noise = CameraNoise.estimated_from(frame, bits=BITS[name])
    return find_spots([Exposure(frame, 1.0)], None, noise, 0, settings=settings)


@pytest.mark.parametrize(
    ("name", "beams"),
    [
        ("TEM00_140mm", 1),
        ("sb_259mm_10", 2),
        ("k-200mm", 1),
        ("FBWR_151", 1),
        ("t-520mm", 1),
    ],
)
def test_as_many_beams_as_an_eye_sees_with_saturated_ones_let_through(
    name: str, beams: int
) -> None:
    found = search(name, WITH_SATURATED)
    assert len(found.spots) == beams
    for spot in found.spots:
        assert np.linalg.eigvalsh(np.array(spot.covariance_px2)).min() > 0.0


def test_the_saturated_beam_is_refused_as_such_if_so_wished() -> None:
    strict = SearchSettings(limits=SpotLimits(accept_saturated=False))
    found = search("FBWR_151", strict)
    assert found.spots == ()
    reasons = [r.reason for r in found.rejected]
    assert reasons.count(Rejection.SATURATED) == 1


@pytest.mark.parametrize(
    ("name", "within_px"), [("TEM00_140mm", 3.0), ("k-200mm", 3.0), ("t-520mm", 1.0)]
)
def test_clean_centres_agree_with_iso_11146_second_moments(
    name: str, within_px: float
) -> None:
    """Within a tenth of the rms radius (radii 22 to 55 px), 1 px on the clean beam.

    A Gaussian's centre and the first moment differ on a lopsided beam; the tolerance
    is that difference, not an accuracy. The library sees the beam's surroundings of
    4 radii: on whole frames its own background is led astray by gradient and smear.
    """
    (spot,) = search(name, WITH_SATURATED).spots
    column, row = moment_centre(name, spot.column_px, spot.row_px, spot.sigma_px[0])
    assert spot.column_px == pytest.approx(column, abs=within_px)
    assert spot.row_px == pytest.approx(row, abs=within_px)


def moment_centre(
    name: str, column_px: float, row_px: float, radius_px: float
) -> tuple[float, float]:
    """laserbeamsize's centre in a crop of 4 radii, back in the frame's pixels."""
    frame = photograph(name)
    reach = int(4 * radius_px)
    left, top = max(int(column_px) - reach, 0), max(int(row_px) - reach, 0)
    right, bottom = int(column_px) + reach + 1, int(row_px) + reach + 1
    crop = frame[top:bottom, left:right].astype(float)
    x, y, *_ = laserbeamsize.beam_size(crop)
    return left + float(x), top + float(y)


@pytest.mark.parametrize("name", ["TEM00_140mm", "k-200mm", "t-520mm"])
@pytest.mark.parametrize("shift", [0.25, 0.5])
def test_a_known_shift_of_a_real_beam_is_seen_within_the_stated_error(
    name: str, shift: float
) -> None:
    frame = photograph(name)
    noise = CameraNoise.estimated_from(frame, bits=BITS[name])
    matrix = np.array([[1.0, 0.0, shift], [0.0, 1.0, -shift]])
    size = (frame.shape[1], frame.shape[0])
    moved = cv2.warpAffine(frame.astype(np.float32), matrix, size)
    whole = np.rint(moved).astype(np.uint16)
    (before,) = search(name, WITH_SATURATED).spots
    answer = find_spots([Exposure(whole, 1.0)], None, noise, 0, settings=WITH_SATURATED)
    (after,) = answer.spots
    u = max(before.covariance_px2[0][0], before.covariance_px2[1][1]) ** 0.5
    assert abs(after.column_px - before.column_px - shift) < u
    assert abs(after.row_px - before.row_px + shift) < u
