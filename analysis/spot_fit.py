"""An elliptical Gaussian on a plane, fitted to a window by reweighted least squares.

Weights are 1 / (shot + read + Ac C^2 signal^2), all from the model and renewed at
every step (quasi-likelihood), with Ac the correlation area of speckle and C its
contrast. The covariance is that of the estimator under the correlated speckle itself,
so that it also holds where a spot has few grains. The position is the centre of the
Gaussian.

Parameters, in this order: height (DN a ms), x, y (px from the window's reference),
a, b, c (1/px^2), plane level (DN a ms), its slopes per column and per row.
"""

import math
from dataclasses import dataclass, replace

import numpy as np

from pitchsweep.analysis.records import FloatArray
from pitchsweep.analysis.speckle_grain import Speckle, position_covariances
from pitchsweep.analysis.spot_window import Fused, Window, fuse

PARAMETERS = 9
_DECREMENT, _QUICK_DECREMENT = 2e-4, 4e-3
"""Stop after a step that moved nothing by more than about 1/70 of its error; without
speckle, 1/15: there what is left after a step is far less than the step."""
TRUSTED_TO = 0.003
"""No beam is a Gaussian down to any depth. Under speckle faint wings weigh as much as
the core, so what is fainter than this share of the height is trusted less."""
_CALM, _CALM_AFTER = 0.6, 7
"""Renewed weights can make the steps swing; later steps are shortened."""


@dataclass(frozen=True)
class Shape:
    """A Gaussian height * exp(-(a dx^2 + 2 b dx dy + c dy^2) / 2); px, DN a ms."""

    height: float
    column_px: float
    row_px: float
    a: float
    b: float
    c: float

    @classmethod
    def round_spot(
        cls, height: float, column_px: float, row_px: float, sigma_px: float
    ) -> "Shape":
        """A circular spot."""
        inverse = 1.0 / sigma_px**2
        return cls(height, column_px, row_px, inverse, 0.0, inverse)

    def widths(self) -> tuple[float, float, float]:
        """rms radii (major, minor) in px, angle of the major axis from +column, rad."""
        middle, half = 0.5 * (self.a + self.c), 0.5 * (self.a - self.c)
        spread = math.hypot(half, self.b)
        major, minor = (middle - spread) ** -0.5, (middle + spread) ** -0.5
        return major, minor, 0.5 * math.atan2(-self.b, -half)

    def half_sides(self, sigmas: float) -> tuple[float, float]:
        """Half the sides (column, row) of the box that holds ``sigmas`` of it, px."""
        det = self.a * self.c - self.b**2
        return sigmas * (self.c / det) ** 0.5, sigmas * (self.a / det) ** 0.5

    def signal(self, x: FloatArray, y: FloatArray) -> FloatArray:
        """The spot without background at columns ``x`` (1, W) and rows ``y`` (H, 1)."""
        dx, dy = x - self.column_px, y - self.row_px
        quadratic = self.a * dx * dx + self.c * dy * dy + (2.0 * self.b) * (dx * dy)
        return np.asarray(self.height * np.exp(-0.5 * np.maximum(quadratic, 0.0)))


@dataclass(frozen=True)
class SpotFit:
    """A fitted spot with what is needed to judge it; arrays are (H, W).

    ``covariance`` (2, 2) of column and row in px^2 includes speckle, whose part is
    ``speckle_covariance``; misfit of the
    model is not in it. ``variance`` is shot and read noise of ``residual``
    (DN a ms)^2; ``weight`` is zero where no exposure is usable. ``modes`` (9, H, W)
    are the orthonormal directions, times root weight, that the fit can follow.
    """

    shape: Shape
    covariance: FloatArray
    speckle_covariance: FloatArray
    converged: bool
    steps: int
    signal: FloatArray
    residual: FloatArray
    variance: FloatArray
    weight: FloatArray
    modes: FloatArray
    binning: int


@dataclass(frozen=True)
class _State:
    """The model at one set of parameters and the weights that it implies."""

    parameters: FloatArray
    unit: FloatArray
    dx: FloatArray
    dy: FloatArray
    signal: FloatArray
    model: FloatArray
    fused: Fused
    weight: FloatArray


def fit_spot(
    window: Window,
    start: Shape,
    speckle: Speckle,
    *,
    limit: int = 30,
    trusted_to: float = TRUSTED_TO,
) -> SpotFit:
    """The spot in ``window``, from ``start``, in at most ``limit`` steps.

    Levenberg-Marquardt with an analytic Jacobian; the weights are fixed within a step.
    ``converged`` is False where the steps run out or the spot collapses; then the
    covariance holds infinities. ``trusted_to``: what is fainter than this share of the
    height weighs less, under speckle only.
    """
    window = replace(window, trusted_to=trusted_to)
    reference = (start.column_px, start.row_px)
    x, y = window.x - reference[0], window.y - reference[1]
    first = np.array([start.height, 0, 0, start.a, start.b, start.c, 0, 0, 0])
    state = _state(window, x, y, first, speckle)
    damping, converged, steps = 1e-3, False, 0
    normal, slope = _normal(state, x, y)
    enough = _DECREMENT if speckle.contrast > 0.0 else _QUICK_DECREMENT
    while steps < limit and damping < 1e6 and not converged:
        steps += 1
        delta = _step(normal, slope, damping)
        if steps > _CALM_AFTER:
            delta *= _CALM
        trial = _trial(window, x, y, state.parameters + delta, speckle)
        if trial is None or not _better(trial, state):
            damping = max(damping, 1e-4) * 10.0
            continue
        converged = float(delta @ slope) < enough * max(1.0, _chi2(state))
        state, damping = trial, damping * 0.03
        if not converged:
            normal, slope = _normal(state, x, y)
    shape = _shape(state.parameters, reference)
    private, shared, modes = _covariance(window, state, x, y, speckle)
    covariance = private + shared
    return SpotFit(
        shape=shape,
        covariance=covariance,
        speckle_covariance=shared,
        converged=converged and bool(np.isfinite(covariance).all()),
        steps=steps,
        signal=state.signal,
        residual=state.fused.rate - state.model,
        variance=state.fused.variance,
        weight=state.weight,
        modes=modes,
        binning=window.binning,
    )


def _shape(p: FloatArray, reference: tuple[float, float]) -> Shape:
    column, row = reference[0] + float(p[1]), reference[1] + float(p[2])
    return Shape(float(p[0]), column, row, float(p[3]), float(p[4]), float(p[5]))


def _covariance(
    window: Window, state: _State, x: FloatArray, y: FloatArray, speckle: Speckle
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Covariances (2, 2) of the position from noise and from speckle; fit modes."""
    root = np.sqrt(state.weight)
    weighted = _jacobian(state, x, y) * root.ravel()
    scale = np.maximum(np.sqrt((weighted**2).sum(axis=1)), 1e-150)
    weighted /= scale[:, None]
    try:
        lower = np.linalg.cholesky(weighted @ weighted.T)
    except np.linalg.LinAlgError:
        lost = np.full((2, 2), np.inf)
        return lost, np.zeros((2, 2)), np.zeros((PARAMETERS, *root.shape))
    inverse = np.linalg.inv(lower)
    modes = (inverse @ weighted).reshape(PARAMETERS, *root.shape)
    rows = inverse.T[1:3] / scale[1:3, None]
    influence = np.tensordot(rows, modes, axes=1) * root
    private, shared = position_covariances(
        influence, state.fused.variance, state.signal, speckle, window.binning
    )
    return private, shared, modes


def _state(
    window: Window, x: FloatArray, y: FloatArray, p: FloatArray, speckle: Speckle
) -> _State:
    dx, dy = x - p[1], y - p[2]
    quadratic = p[3] * dx * dx + p[5] * dy * dy + (2.0 * p[4] * dx) * dy
    unit = np.exp(-0.5 * quadratic)
    signal = p[0] * unit
    fused = fuse(window, signal)
    grainy = speckle.noise_area(window.binning) * signal**2
    if speckle.contrast > 0.0:
        grainy += (window.trusted_to * p[0]) ** 2
    weight = fused.used / (fused.variance + grainy)
    model = signal + (p[6] + p[7] * x + p[8] * y)
    return _State(p, unit, dx, dy, signal, model, fused, weight)


def _trial(
    window: Window, x: FloatArray, y: FloatArray, p: FloatArray, speckle: Speckle
) -> _State | None:
    """The state at ``p``, None where ``p`` is no spot in this window."""
    inside = x[0, 0] <= p[1] <= x[0, -1] and y[0, 0] <= p[2] <= y[-1, 0]
    round_enough = p[3] > 0.0 and p[5] > 0.0 and p[4] ** 2 < 0.998 * p[3] * p[5]
    narrow = max(p[3], p[5]) * window.binning**2 < 9.0
    if not (p[0] > 0.0 and inside and round_enough and narrow):
        return None
    return _state(window, x, y, p, speckle)


def _better(trial: _State, state: _State) -> bool:
    """Whether ``trial`` fits at least as well under the weights of ``state``."""
    before = state.fused.rate - state.model
    after = state.fused.rate - trial.model
    old = float(np.vdot(state.weight * before, before))
    return float(np.vdot(state.weight * after, after)) <= old * (1.0 + 1e-9)


def _chi2(state: _State) -> float:
    """Weighted square of the residuals a pixel in use."""
    residual = state.fused.rate - state.model
    used = max(float(state.fused.used.sum()), 1.0)
    return float(np.vdot(state.weight * residual, residual)) / used


def _jacobian(state: _State, x: FloatArray, y: FloatArray) -> FloatArray:
    """Derivatives of the model by the parameters, (9, pixels)."""
    _, _, _, a, b, c, *_ = state.parameters
    dx, dy, signal = state.dx, state.dy, state.signal
    out = np.empty((PARAMETERS, *signal.shape))
    out[0] = state.unit
    out[1] = signal * (a * dx + b * dy)
    out[2] = signal * (b * dx + c * dy)
    out[3] = signal * (-0.5 * dx * dx)
    out[4] = (signal * -dx) * dy
    out[5] = signal * (-0.5 * dy * dy)
    out[6] = 1.0
    out[7] = x
    out[8] = y
    return out.reshape(PARAMETERS, -1)


def _normal(
    state: _State, x: FloatArray, y: FloatArray
) -> tuple[FloatArray, FloatArray]:
    jacobian = _jacobian(state, x, y)
    weighted = jacobian * state.weight.ravel()
    residual = (state.fused.rate - state.model).ravel()
    return weighted @ jacobian.T, weighted @ residual


def _step(normal: FloatArray, slope: FloatArray, damping: float) -> FloatArray:
    scale = np.sqrt(np.maximum(np.diag(normal), 1e-300))
    scaled = normal / np.outer(scale, scale)
    scaled[np.diag_indices(PARAMETERS)] += damping + 1e-12
    return np.asarray(np.linalg.solve(scaled, slope / scale) / scale)
