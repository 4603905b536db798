"""The camera's noise: what variance a pixel has, and when it is saturated.

Linear camera model of EMVA 1288: variance = gain * signal + read noise squared
(+ 1/12 for rounding to whole numbers), all in digital numbers (DN).
"""

from dataclasses import dataclass, replace
from typing import overload

import numpy as np
from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Camera

ROUNDING_VARIANCE_DN2 = 1.0 / 12.0


@dataclass(frozen=True)
class CameraNoise:
    """Gain (DN per electron), read noise with rounding (DN), black level (DN).

    ``saturation_dn`` is the lowest value that is taken as clipped.
    """

    gain_dn_per_e: float
    read_noise_dn: float
    black_level_dn: float
    saturation_dn: float

    @classmethod
    def from_bench(cls, camera: Camera) -> "CameraNoise":
        """The noise that the bench file states for its camera."""
        read_dn = camera.gain_dn_per_e * camera.read_noise_e
        return cls(
            gain_dn_per_e=camera.gain_dn_per_e,
            read_noise_dn=float(np.hypot(read_dn, ROUNDING_VARIANCE_DN2**0.5)),
            black_level_dn=camera.black_level_dn,
            saturation_dn=float(2**camera.bits - 1),
        )

    @classmethod
    def estimated_from(
        cls, frame: NDArray[np.uint16], *, bits: int | None = None
    ) -> "CameraNoise":
        """Noise read off one frame ``(rows, columns)`` of an unknown camera.

        The variance comes from differences of neighbouring pixels, binned by their
        mean: its lower envelope against the mean gives read noise and gain. The black
        level is the darkest per mille. ``bits`` unknown: the least of 8, 10, 12, 16
        that holds the brightest pixel.
        """
        mean, variance = _noise_curve(frame)
        black = float(np.percentile(frame[::4, ::4], 0.1))
        gain, read_variance = _lower_line(np.maximum(mean - black, 0.0), variance)
        return cls(
            gain_dn_per_e=gain,
            read_noise_dn=float(np.sqrt(read_variance)),
            black_level_dn=black,
            saturation_dn=float(2 ** (bits or _bits_holding(frame)) - 1),
        )

    def variance_dn2(self, level_dn: float) -> float:
        """The variance of a pixel whose expected value is ``level_dn``."""
        signal = max(level_dn - self.black_level_dn, 0.0)
        return self.gain_dn_per_e * signal + self.read_noise_dn**2

    def with_measured(self, background_dn: float, noise_dn: float) -> "CameraNoise":
        """The same camera, its read noise raised if the frame is clearly noisier.

        ``noise_dn`` is the pixel noise measured at level ``background_dn``; less than
        a tenth more than the model is left alone.
        """
        expected = self.variance_dn2(background_dn)
        if noise_dn**2 <= 1.21 * expected:
            return self
        read_variance = self.read_noise_dn**2 + noise_dn**2 - expected
        return replace(self, read_noise_dn=float(np.sqrt(read_variance)))


@overload
def correlated_rounding_dn(noise_dn: float) -> float: ...
@overload
def correlated_rounding_dn(noise_dn: NDArray[np.float64]) -> NDArray[np.float64]: ...
def correlated_rounding_dn(
    noise_dn: float | NDArray[np.float64],
) -> float | NDArray[np.float64]:
    """rms of the rounding error that does not average out over pixels, DN.

    A steady level rounded under normal noise of ``noise_dn`` (rounding not counted) is
    biased by up to exp(-2 pi^2 noise^2) / pi (first Fourier term of the staircase).
    """
    out = np.exp(-2.0 * np.square(np.pi * noise_dn)) / (np.pi * 2.0**0.5)
    return out if isinstance(noise_dn, np.ndarray) else float(out)


def measured_noise_dn(frame: NDArray[np.uint16]) -> float:
    """Pixel noise of the frame's quiet part, DN, from neighbours' differences.

    ``frame`` (rows, columns) is sampled, not modified. Gradients and spots do not
    enter: second differences are clipped at 3.5 of their robust width.
    """
    rows = max(1, frame.shape[0] // 16)
    sample = frame[::rows].astype(np.float32)
    second = sample[:, 1:-1] * 2.0 - sample[:, :-2] - sample[:, 2:]
    size = np.abs(second)
    width = 1.4826 * float(np.median(size[:, ::4])) + 0.5
    kept = size[size < 3.5 * width]
    return float(np.sqrt(np.mean(np.square(kept, dtype=np.float64)) / 6.0 / 0.994))


def _noise_curve(
    frame: NDArray[np.uint16],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Mean level and variance (DN^2), one entry a bin of level, from 4x1 cells."""
    wide = frame[::2, : frame.shape[1] // 4 * 4].astype(np.float64)
    cells = wide.reshape(wide.shape[0], -1, 4)
    # Third differences do not see a slope or a curvature of the beam.
    third = cells[..., 3] - 3 * cells[..., 2] + 3 * cells[..., 1] - cells[..., 0]
    level = cells.mean(axis=2).ravel()
    edges = np.unique(np.percentile(level, np.linspace(0, 100, 25)))
    place = np.digitize(level, edges[1:-1])
    square = third.ravel() ** 2 / 20.0
    means, variances = [], []
    for k in range(len(edges) - 1):
        here = place == k
        if np.count_nonzero(here) < 50:
            continue
        means.append(float(level[here].mean()))
        variances.append(_clipped_mean(square[here]))
    return np.array(means), np.array(variances)


def _clipped_mean(square: NDArray[np.float64]) -> float:
    """Mean of squares of a normal quantity with the far tail left out."""
    limit = 12.0 * (float(np.median(square)) / 0.455 + ROUNDING_VARIANCE_DN2)
    return float(np.mean(square[square < limit]))


def _lower_line(
    signal: NDArray[np.float64], variance: NDArray[np.float64]
) -> tuple[float, float]:
    """Gain and read variance of variance = read + gain * signal; both kept > 0."""
    if signal.size == 0:
        return 1e-6, 1.0
    weight = 1.0 / np.maximum(variance, ROUNDING_VARIANCE_DN2)
    design = np.stack([np.ones_like(signal), signal], axis=1)
    scaled = design * weight[:, None]
    (read, gain), *_ = np.linalg.lstsq(scaled, variance * weight, rcond=None)
    if gain <= 0.0:
        read, gain = float(np.median(variance)), 1e-6
    return float(gain), float(max(read, ROUNDING_VARIANCE_DN2))


def _bits_holding(frame: NDArray[np.uint16]) -> int:
    brightest = int(frame.max())
    return next(bits for bits in (8, 10, 12, 16) if brightest < 2**bits)
