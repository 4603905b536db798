"""A camera's noise from pairs of frames: photon transfer after EMVA 1288 (pure).

Two frames of the same even scene differ by noise alone: half the variance of their
difference is the temporal variance, whatever the scene's own pattern. Variance over
dark variance against mean over dark mean is a line whose slope is the gain K in DN per
electron; it is fitted up to 70 % of saturation. Dark variance less the 1/12 of rounding
is the read noise (never taken below 0.24 DN^2, where rounding spoils the measure).
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.camera_noise import ROUNDING_VARIANCE_DN2, CameraNoise

Frame = NDArray[np.uint16]
LEAST_DARK_VARIANCE_DN2 = 0.24
FIT_TO = 0.7
_LEAST_LEVELS = 3


@dataclass(frozen=True)
class PhotonTransfer:
    """Gain, dark level and noise of a camera, and how straight it answers.

    ``dark_noise_e`` is the temporal dark noise in electrons; ``saturation_dn`` the mean
    level with the greatest variance; ``linearity`` the largest deviation of the mean
    from a line in exposure between 5 and 95 % of saturation, as a share of it (NaN
    where no exposures were given). ``u_gain`` is the gain's standard uncertainty.
    """

    gain_dn_per_e: float
    u_gain: float
    dark_level_dn: float
    dark_noise_e: float
    saturation_dn: float
    linearity: float

    def camera_noise(self, bits: int) -> CameraNoise:
        """The noise model of a camera of ``bits`` bits for the spot finder."""
        read_dn = self.dark_noise_e * self.gain_dn_per_e
        return CameraNoise(
            gain_dn_per_e=self.gain_dn_per_e,
            read_noise_dn=float(np.hypot(read_dn, ROUNDING_VARIANCE_DN2**0.5)),
            black_level_dn=self.dark_level_dn,
            saturation_dn=float(2**bits - 1),
        )


def pair_statistics(first: Frame, second: Frame) -> tuple[float, float]:
    """Mean and temporal variance (DN, DN^2) of two frames of one scene and exposure.

    Raises ValueError where their shapes differ.
    """
    if first.shape != second.shape:
        raise ValueError(
            f"frames of one shape are needed: {first.shape}, {second.shape}"
        )
    a, b = first.astype(np.float64), second.astype(np.float64)
    offset = float(a.mean() - b.mean())
    variance = float(np.mean((a - b - offset) ** 2)) / 2.0
    return float(a.mean() + b.mean()) / 2.0, variance


def photon_transfer(
    pairs: Sequence[tuple[Frame, Frame]],
    dark_pair: tuple[Frame, Frame],
    *,
    exposures_ms: Sequence[float] | None = None,
) -> PhotonTransfer:
    """The camera that ``pairs`` of lit frames (one level each) and a dark pair show.

    ``exposures_ms`` (one a pair) tells the linearity too. Raises ValueError where fewer
    than three levels lie below 70 % of saturation or the variance does not grow.
    """
    dark_mean, dark_seen = pair_statistics(*dark_pair)
    dark_variance = max(dark_seen, LEAST_DARK_VARIANCE_DN2)
    # Lit frames are dithered and hold the whole 1/12 of rounding; no dark shows less.
    quiet = max(dark_seen, ROUNDING_VARIANCE_DN2)
    points = np.array([pair_statistics(*pair) for pair in pairs]).reshape(-1, 2)
    mean, variance = points[:, 0] - dark_mean, points[:, 1] - quiet
    saturation = float(mean[np.argmax(variance)]) if mean.size else 0.0
    low = (mean > 0.0) & (mean <= FIT_TO * saturation)
    if np.count_nonzero(low) < _LEAST_LEVELS:
        raise ValueError(
            f"{np.count_nonzero(low)} levels lie below {100 * FIT_TO:.0f} % of "
            f"saturation; at least {_LEAST_LEVELS} are needed"
        )
    gain, u_gain = _slope(mean[low], variance[low], dark_variance)
    if gain <= 0.0:
        raise ValueError("the variance does not grow with the light")
    read_variance = dark_variance - ROUNDING_VARIANCE_DN2
    return PhotonTransfer(
        gain_dn_per_e=gain,
        u_gain=u_gain,
        dark_level_dn=dark_mean,
        dark_noise_e=read_variance**0.5 / gain,
        saturation_dn=saturation + dark_mean,
        linearity=_linearity(mean, saturation, exposures_ms),
    )


def _slope(
    mean: NDArray[np.float64], variance: NDArray[np.float64], dark_variance: float
) -> tuple[float, float]:
    """Slope through the origin with weights 1 / variance^2, and its scatter."""
    weight = 1.0 / np.maximum(variance + dark_variance, 1e-9) ** 2
    power = float(weight @ mean**2)
    slope = float(weight @ (mean * variance)) / power
    left = variance - slope * mean
    scatter = float(weight @ left**2) / max(mean.size - 1, 1)
    return slope, (scatter / power) ** 0.5


def _linearity(
    mean: NDArray[np.float64],
    saturation: float,
    exposures_ms: Sequence[float] | None,
) -> float:
    if exposures_ms is None:
        return float("nan")
    time = np.asarray(exposures_ms, dtype=np.float64)
    used = (mean > 0.05 * saturation) & (mean < 0.95 * saturation)
    if np.count_nonzero(used) < _LEAST_LEVELS:
        return float("nan")
    line = np.polyfit(time[used], mean[used], 1, w=1.0 / mean[used])
    left = mean[used] - np.polyval(line, time[used])
    return float(np.abs(left).max() / saturation)
