"""Photographs of real beams pass through the spot finder.

Source: documentation of the MIT-licensed library laserbeamsize (ISO 11146 beam widths)
at 462b7f44, see tests/data/beam_photographs/README.md. The number of beams is what an
eye sees; the centres are compared with second-moment centres of that library.
Verified: counted by eye on log-scaled pictures; centres by running the library here.
"""

from collections.abc import Callable
from functools import cache
from pathlib import Path

import laserbeamsize
import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.ndimage import fourier_shift

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

Changed = tuple[NDArray[np.uint16], float, float]
"""A changed photograph, and by how many px its beams moved right and down."""


@cache
def photograph(name: str) -> NDArray[np.uint16]:
    return decode_frame(
        (FOLDER / f"{name}.png").read_bytes(), name=name, bits=BITS[name]
    )


@cache
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


def cropped(frame: NDArray[np.uint16], name: str) -> Changed:
    """Without 101 and 77 px at left and top, 90 and 60 px at right and bottom."""
    return frame[77:-60, 101:-90].copy(), -101.0, -77.0


def noisier(frame: NDArray[np.uint16], name: str) -> Changed:
    """As much normal noise again as the frame has at its middle level, at least 1 DN.

    Clipped pixels stay clipped.
    """
    noise, full = camera_of(name), 2.0 ** BITS[name] - 1.0
    sigma = max(noise.variance_dn2(float(np.median(frame))) ** 0.5, 1.0)
    more = sigma * np.random.default_rng(0).standard_normal(frame.shape)
    seen = np.where(frame < full, frame + more, full)
    return whole(seen, full), 0.0, 0.0


def half_exposed(frame: NDArray[np.uint16], name: str) -> Changed:
    """Half the light over the black level, with the noise that it would have had.

    Halving the values of a frame of variance g s + r^2 leaves a quarter of that, and
    half the light has g s / 2 + r^2: (g s + 3 r^2) / 4 is put on.
    """
    noise = camera_of(name)
    light = np.maximum(frame.astype(np.float64) - noise.black_level_dn, 0.0)
    short = (noise.gain_dn_per_e * light + 3.0 * noise.read_noise_dn**2) / 4.0
    more = np.sqrt(short) * np.random.default_rng(1).standard_normal(frame.shape)
    seen = noise.black_level_dn + (frame - noise.black_level_dn) / 2.0 + more
    return whole(seen, 2.0 ** BITS[name] - 1.0), 0.0, 0.0


def shifted(frame: NDArray[np.uint16], name: str) -> Changed:
    """By 0.37 px to the right and 0.81 px up, by a phase ramp of its Fourier transform.

    Every frequency keeps its size, so the noise stays as it is (bilinear resampling
    would halve it); 64 mirrored pixels at each side keep the frame's edges from ringing
    into it, and rounding puts 1/12 DN^2 on.
    """
    wide = np.fft.fft2(np.pad(frame.astype(np.float64), 64, mode="symmetric"))
    moved = np.fft.ifft2(fourier_shift(wide, (-0.81, 0.37))).real[64:-64, 64:-64]
    return whole(moved, 2.0 ** BITS[name] - 1.0), 0.37, -0.81


def camera_of(name: str) -> CameraNoise:
    return CameraNoise.estimated_from(photograph(name), bits=BITS[name])


def whole(values: NDArray[np.float64], full: float) -> NDArray[np.uint16]:
    return np.clip(np.rint(values), 0.0, full).astype(np.uint16)


@pytest.mark.parametrize("name", list(BITS))
@pytest.mark.parametrize("change", [cropped, noisier, half_exposed, shifted])
def test_beams_are_as_many_and_where_they_were_within_the_stated_error(
    name: str, change: Callable[[NDArray[np.uint16], str], Changed]
) -> None:
    frame, right_px, down_px = change(photograph(name), name)
    noise = CameraNoise.estimated_from(frame, bits=BITS[name])
    after = find_spots([Exposure(frame, 1.0)], None, noise, 0).spots
    before = search(name).spots
    assert len(after) == len(before)
    for was in before:
        column, row = was.column_px + right_px, was.row_px + down_px
        now = min(after, key=lambda s: np.hypot(s.column_px - column, s.row_px - row))
        (u_column_2, _), (_, u_row_2) = was.covariance_px2
        assert abs(now.column_px - column) < u_column_2**0.5
        assert abs(now.row_px - row) < u_row_2**0.5
