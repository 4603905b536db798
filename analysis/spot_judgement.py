"""Whether a fitted blob is a spot, how far its model holds, and what to state."""

from dataclasses import dataclass

import cv2
import numpy as np

from pitchsweep.analysis.records import FloatArray, RejectedSpot, Rejection, Spot
from pitchsweep.analysis.speckle_grain import Speckle
from pitchsweep.analysis.spot_fit import SpotFit
from pitchsweep.analysis.spot_window import BoolArray, Window

_FEW_GRAINS = 3.0
"""Variance grows by this over the number of grains in a spot's area 4 pi s1 s2: the
weights come from a shape that was fitted to few grains (measured on drawn speckle)."""


@dataclass(frozen=True)
class SpotLimits:
    """What a spot must be; lengths in px.

    The stated error may be ``largest_u_px`` or 0.4 of the minor radius. Heights are
    judged by light over noise. A spot that is saturated in every exposure is fitted
    from its unsaturated pixels and marked; refused without ``accept_saturated``.
    """

    least_sigma_px: float = 0.7
    largest_sigma_px: float = 150.0
    largest_aspect: float = 6.0
    least_light_over_noise: float = 8.0
    largest_u_px: float = 2.0
    largest_misfit_share: float = 0.5
    edge_sigmas: float = 2.0
    clipped_core: float = 0.05
    accept_saturated: bool = True


@dataclass(frozen=True)
class Misfit:
    """Residual of the smooth model: ``ratio`` of its power to the expected one (1 where
    the model holds, never below), ``share`` of the spot's own rms that it is."""

    ratio: float
    share: float


def misfit(fit: SpotFit, speckle: Speckle) -> Misfit:
    """How far the fitted model misses, at the scale of half the spot's minor radius.

    Residuals over their standard deviation are smoothed by a Gaussian of that radius;
    their power is compared with what noise and speckle of the given grain leave. Only
    an excess above three standard deviations of that power counts.
    """
    minor = fit.shape.widths()[1] / fit.binning
    s = max(0.5 * minor, 0.8)
    w = speckle.w_px / fit.binning
    root = np.sqrt(fit.weight)
    private = fit.weight * fit.variance
    grainy = fit.weight * (speckle.contrast * fit.light) ** 2
    along = max(4.0 * np.pi * s * s, 1.0)
    expected = private / along + grainy * w * w / (w * w + 4.0 * s * s)
    smooth = np.asarray(cv2.GaussianBlur(root * fit.residual, (0, 0), s), np.float64)
    # Only the spot itself counts: its background may have its own troubles.
    core = fit.signal > 0.1 * fit.shape.height
    over, under = float((smooth[core] ** 2).sum()), float(expected[core].sum())
    correlation = 4.0 * np.pi * s * s + 2.0 * np.pi * w * w
    cells = max(float(np.count_nonzero(core)) / correlation, 1.0)
    ratio = over / max(under, 1e-300)
    limit = 1.0 + 3.0 * np.sqrt(2.0 / cells)
    share = _share(fit, expected, smooth, core)
    return Misfit(ratio if ratio > limit else 1.0, share)


def _share(
    fit: SpotFit, expected: FloatArray, smooth: FloatArray, core: BoolArray
) -> float:
    """rms of the smooth residual beyond noise, over the rms of the spot."""
    used = core & (fit.weight > 0.0)
    if not used.any():
        return np.inf
    excess = (smooth[used] ** 2 - expected[used]) / fit.weight[used]
    power = max(float(excess.sum()), 0.0)
    return float(np.sqrt(power / float((fit.signal[used] ** 2).sum())))


def clipped_core(window: Window, fit: SpotFit) -> float:
    """Share of the pixels above half height that no exposure shows unclipped."""
    core = fit.signal > 0.5 * fit.shape.height
    lost = np.count_nonzero(window.clipped() & core)
    return lost / max(int(np.count_nonzero(core)), 1)


def light_over_noise(fit: SpotFit) -> float:
    """The spot's light over shot and read noise, as a matched filter sees it."""
    used = fit.weight > 0.0
    return float(np.sqrt((fit.signal[used] ** 2 / fit.variance[used]).sum()))


def exposure_used_ms(window: Window, fit: SpotFit) -> float:
    """The longest exposure with an unclipped core, else the shortest."""
    core = fit.signal > 0.5 * fit.shape.height
    for layer in window.layers:
        if not (layer.clipped & core).any():
            return layer.exposure_ms
    return window.layers[-1].exposure_ms


@dataclass(frozen=True)
class FrameSide:
    """Columns and rows of the frame."""

    columns: int
    rows: int

    def room(self, column_px: float, row_px: float) -> float:
        """Distance to the nearest edge, px; negative outside."""
        across = min(column_px + 0.5, self.columns - 0.5 - column_px)
        return min(across, row_px + 0.5, self.rows - 0.5 - row_px)


def judged(
    window: Window,
    fit: SpotFit,
    speckle: Speckle,
    side: FrameSide,
    limits: SpotLimits,
    step: int,
) -> Spot | RejectedSpot:
    """The spot as it is stated, or the first reason not to use it."""
    if not fit.converged:
        detail = f"after {fit.steps} steps"
        place = fit.shape.column_px, fit.shape.row_px
        return RejectedSpot(step, *place, "px", Rejection.FIT_FAILED, detail)
    seen = misfit(fit, speckle)
    spot = _stated(window, fit, seen, speckle)
    refusal = _refusal(window, fit, spot, seen, speckle, side, limits)
    if refusal is None:
        return spot
    reason, detail = refusal
    return RejectedSpot(step, spot.column_px, spot.row_px, "px", reason, detail)


def _stated(window: Window, fit: SpotFit, seen: Misfit, speckle: Speckle) -> Spot:
    major, minor, angle = fit.shape.widths()
    exposure = exposure_used_ms(window, fit)
    used = next(k for k in window.layers if k.exposure_ms == exposure)
    noise = (used.quiet_variance * window.binning**2) ** 0.5 / exposure
    few = 1.0 + _FEW_GRAINS * speckle.noise_area() / (4.0 * np.pi * major * minor)
    stated = fit.covariance * (seen.ratio * few)
    # What photons and read-out did differs between repeats, all the rest does not.
    private = fit.covariance - fit.speckle_covariance
    return Spot(
        column_px=fit.shape.column_px,
        row_px=fit.shape.row_px,
        covariance_px2=_as_rows(stated),
        peak_dn_per_ms=fit.shape.height,
        sigma_px=(major, minor),
        angle_rad=angle,
        snr=fit.shape.height / noise,
        exposure_ms=exposure,
        saturated=clipped_core(window, fit) > SpotLimits.clipped_core,
        shared_px2=_as_rows(stated - private),
    )


def _as_rows(square: FloatArray) -> tuple[tuple[float, float], tuple[float, float]]:
    (cc, cr), (_, rr) = square
    return (float(cc), float(cr)), (float(cr), float(rr))


def _refusal(
    window: Window,
    fit: SpotFit,
    spot: Spot,
    seen: Misfit,
    speckle: Speckle,
    side: FrameSide,
    limits: SpotLimits,
) -> tuple[Rejection, str] | None:
    lost = clipped_core(window, fit)
    if lost > limits.clipped_core and not limits.accept_saturated:
        return Rejection.SATURATED, f"{100 * lost:.0f} % of its core"
    room = side.room(spot.column_px, spot.row_px)
    if room < limits.edge_sigmas * spot.sigma_px[0]:
        return Rejection.EDGE, f"{room:.1f} px from the edge"
    if light_over_noise(fit) < limits.least_light_over_noise:
        return Rejection.TOO_FAINT, f"light {light_over_noise(fit):.1f} of its noise"
    most = limits.largest_misfit_share * (1.0 + speckle.contrast)
    problem = _shape_problem(spot, seen, limits, most)
    if problem is not None:
        return Rejection.SHAPE, problem
    (var_column, _), (_, var_row) = spot.covariance_px2
    worst = max(var_column, var_row) ** 0.5
    if worst > max(limits.largest_u_px, 0.4 * spot.sigma_px[1]):
        return Rejection.STATED_ERROR, f"{worst:.2f} px"
    return None


def _shape_problem(
    spot: Spot, seen: Misfit, limits: SpotLimits, most: float
) -> str | None:
    major, minor = spot.sigma_px
    if minor < limits.least_sigma_px or major > limits.largest_sigma_px:
        return f"radii {major:.1f} and {minor:.1f} px"
    if major > limits.largest_aspect * minor:
        return f"{major / minor:.1f} times as long as wide"
    if not np.isfinite(seen.share):
        return "no pixel of its core is usable"
    if seen.share > most:
        return f"{100 * seen.share:.0f} % of it is not a Gaussian"
    return None
