"""A spot fitted to a window by reweighted least squares, companions with it.

Weights are 1 / (shot + read + Ac C^2 light^2), all from the model and renewed at
every step (quasi-likelihood), with Ac the correlation area of speckle and C its
contrast. The covariance is that of the estimator under the correlated speckle itself,
so that it also holds where a spot has few grains; it holds what is left of companions'
light. The model and the order of its parameters are those of spot_model.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from pitchsweep.analysis.records import FloatArray
from pitchsweep.analysis.speckle_grain import Speckle, position_covariances
from pitchsweep.analysis.spot_model import (
    OWN,
    Companion,
    Patch,
    State,
    better,
    patch_of,
    rooted_jacobian,
    state_at,
    trial_at,
)
from pitchsweep.analysis.spot_shape import Shape
from pitchsweep.analysis.spot_window import Window

__all__ = ["TRUSTED_TO", "Companion", "Shape", "SpotFit", "fit_spot"]

_DECREMENT, _QUICK_DECREMENT = 2e-4, 4e-3
"""Stop after a step that moved nothing by more than about 1/70 of its error; without
speckle, 1/15: there what is left after a step is far less than the step."""
TRUSTED_TO = 0.003
"""No beam is a Gaussian down to any depth. Under speckle faint wings weigh as much as
the core, so what is fainter than this share of the height is trusted less."""
_CALM, _CALM_AFTER, _KEPT_AFTER, _SWING = 0.6, 3, 8, 0.6
"""Renewed weights can make the steps swing: after so many that gained hardly less than
the one before, steps are shortened, and at last the weights are kept."""


@dataclass(frozen=True)
class SpotFit:
    """A fitted spot with what is needed to judge it; arrays are (H, W).

    ``covariance`` (2, 2) of column and row in px^2 includes speckle, whose part is
    ``speckle_covariance``, with it what companions leave; misfit of the model is not
    in it. ``signal`` is the spot alone, ``light`` all light of the laser in the
    window. ``variance`` is shot and read noise of ``residual`` (DN a ms)^2; ``weight``
    is zero where no exposure is usable. ``modes`` (P, H, W) are the orthonormal
    directions, times root weight, that the fit can follow. ``companions`` are the
    other spots in the window as they were fitted with it.
    """

    shape: Shape
    covariance: FloatArray
    speckle_covariance: FloatArray
    converged: bool
    steps: int
    signal: FloatArray
    light: FloatArray
    residual: FloatArray
    variance: FloatArray
    weight: FloatArray
    modes: FloatArray
    binning: int
    companions: tuple[Shape, ...] = ()


def fit_spot(
    window: Window,
    start: Shape,
    speckle: Speckle,
    *,
    companions: Sequence[Companion] = (),
    limit: int = 40,
    trusted_to: float = TRUSTED_TO,
) -> SpotFit:
    """The spot in ``window``, from ``start``, in at most ``limit`` steps.

    Levenberg-Marquardt with an analytic Jacobian; the weights are fixed within a step.
    ``converged`` is False where the steps run out or the spot collapses; then the
    covariance holds infinities. ``companions``: spots whose light is in the window
    too. ``trusted_to``: what is fainter than this share of the height weighs less,
    under speckle only.
    """
    window = replace(window, trusted_to=trusted_to)
    patch = patch_of(window, start, speckle, companions)
    state, converged, steps = _descended(patch, limit)
    private, shared, modes = _covariance(patch, state)
    covariance = private + shared
    reference = (start.column_px, start.row_px)
    heads = range(OWN, patch.count, 6)
    return SpotFit(
        shape=_shape(state.parameters, reference),
        covariance=covariance,
        speckle_covariance=shared,
        converged=converged and bool(np.isfinite(covariance).all()),
        steps=steps,
        signal=state.signal,
        light=state.light,
        residual=state.residual,
        variance=state.fused.variance,
        weight=state.weight,
        modes=modes,
        binning=window.binning,
        companions=tuple(_shape(state.parameters[k:], reference) for k in heads),
    )


def _descended(patch: Patch, limit: int) -> tuple[State, bool, int]:
    """The last state, whether it is the answer, and the steps taken."""
    state = state_at(patch, patch.first)
    damping, converged, steps, swings, last = 1e-3, False, 0, 0, np.inf
    normal, slope = _normal(patch, state)
    enough = _DECREMENT if patch.speckle.contrast > 0.0 else _QUICK_DECREMENT
    while steps < limit and damping < 1e6 and not converged:
        steps += 1
        delta = _step(normal, slope, damping)
        gain = float(delta @ slope)
        if swings > _CALM_AFTER:
            delta *= _CALM
        kept = state.weight if swings > _KEPT_AFTER else None
        trial = trial_at(patch, state.parameters + delta, kept)
        if trial is None or not better(trial, state, patch):
            damping = max(damping, 1e-4) * 10.0
            continue
        used = max(float(state.fused.used.sum()), 1.0)
        converged = gain < enough * max(1.0, state.chi2 / used)
        swings += gain > _SWING * last
        state, damping, last = trial, damping * 0.03, gain
        if not converged:
            normal, slope = _normal(patch, state)
    return state, converged, steps


def _shape(p: FloatArray, reference: tuple[float, float]) -> Shape:
    column, row = reference[0] + float(p[1]), reference[1] + float(p[2])
    return Shape(float(p[0]), column, row, float(p[3]), float(p[4]), float(p[5]))


def _covariance(
    patch: Patch, state: State
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Covariances (2, 2) of the position from noise and from speckle; fit modes."""
    root = np.sqrt(state.weight)
    weighted = rooted_jacobian(state, patch)
    gram = weighted @ weighted.T
    if patch.known is not None:
        gram[OWN:, OWN:] += patch.known
    scale = np.maximum(np.sqrt(np.diag(gram)), 1e-150)
    try:
        lower = np.linalg.cholesky(gram / np.outer(scale, scale))
    except np.linalg.LinAlgError:
        lost = np.full((2, 2), np.inf)
        return lost, np.zeros((2, 2)), np.zeros((patch.count, *root.shape))
    inverse = np.linalg.inv(lower) / scale
    modes = (inverse @ weighted).reshape(patch.count, *root.shape)
    rows = inverse.T[1:3]
    private, shared = position_covariances(
        (rows @ inverse @ weighted).reshape(2, *root.shape) * root,
        state.fused.variance,
        state.light,
        patch.speckle,
        patch.window.binning,
    )
    if patch.known is not None:
        follow = (rows @ inverse)[:, OWN:]
        shared = shared + follow @ patch.known @ follow.T
    return private, shared, modes


def _normal(patch: Patch, state: State) -> tuple[FloatArray, FloatArray]:
    jacobian = rooted_jacobian(state, patch)
    residual = (np.sqrt(state.weight) * state.residual).ravel()
    normal, slope = jacobian @ jacobian.T, jacobian @ residual
    if patch.known is not None:
        normal[OWN:, OWN:] += patch.known
        slope[OWN:] -= patch.known @ (state.parameters - patch.first)[OWN:]
    return normal, slope


def _step(normal: FloatArray, slope: FloatArray, damping: float) -> FloatArray:
    size = slope.size
    scale = 1.0 / np.sqrt(np.maximum(normal.ravel()[:: size + 1], 1e-300))
    scaled = normal * scale
    scaled *= scale[:, None]
    scaled.ravel()[:: size + 1] += damping + 1e-12
    return np.asarray(np.linalg.solve(scaled, slope * scale) * scale)
