"""The model of a window: a spot, the spots beside it, and a plane under them.

Parameters, in this order: height (DN a ms), x, y (px from the window's reference), a,
b, c (1/px^2), plane level (DN a ms), its slopes per column and per row; then the first
six again for each companion, whose light is in the window too. Companions are nuisance:
they are fitted together with the spot, held by what is known of them beforehand.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.records import FloatArray
from pitchsweep.analysis.speckle_grain import Speckle
from pitchsweep.analysis.spot_shape import Shape
from pitchsweep.analysis.spot_window import Fused, Window, fuse

OWN, EACH = 9, 6
_MOST_HALO = 0.02
"""The share of the height that light of the plane is taken to be the beam's own halo,
at most: a steeper rise would let weights follow the plane."""


@dataclass(frozen=True)
class Companion:
    """A spot beside the fitted one, and how well it is known beforehand.

    ``relative_u``: standard uncertainty of its height and radii as a share of them, and
    of its place in its radii.
    """

    shape: Shape
    relative_u: float


@dataclass(frozen=True)
class Patch:
    """What a fit works on: pixels from the reference, companions, speckle, priors."""

    window: Window
    x: FloatArray
    y: FloatArray
    speckle: Speckle
    first: FloatArray
    known: FloatArray | None

    def penalty(self, parameters: FloatArray) -> float:
        """Square of the companions' departure from what is known of them."""
        if self.known is None:
            return 0.0
        off = parameters[OWN:] - self.first[OWN:]
        return float(off @ (self.known @ off))

    @property
    def count(self) -> int:
        """How many parameters there are."""
        return int(self.first.size)


@dataclass(frozen=True)
class Bump:
    """One Gaussian of the model in the window: arrays (H, W) or broadcast to it."""

    unit: FloatArray
    dx: FloatArray
    dy: FloatArray
    signal: FloatArray


@dataclass(frozen=True)
class State:
    """The model at one set of parameters and the weights that it implies.

    ``light`` is all light of the laser: spots and what the plane holds of a halo.
    """

    parameters: FloatArray
    bumps: tuple[Bump, ...]
    light: FloatArray
    model: FloatArray
    fused: Fused
    weight: FloatArray
    residual: FloatArray
    chi2: float

    @property
    def signal(self) -> FloatArray:
        """The spot alone."""
        return self.bumps[0].signal


def patch_of(
    window: Window, start: Shape, speckle: Speckle, companions: Sequence[Companion]
) -> Patch:
    """The patch of ``window`` with its reference at the centre of ``start``."""
    column, row = start.column_px, start.row_px
    first = [start.height, 0.0, 0.0, start.a, start.b, start.c, 0.0, 0.0, 0.0]
    for item in companions:
        s = item.shape
        first += [s.height, s.column_px - column, s.row_px - row, s.a, s.b, s.c]
    return Patch(
        window=window,
        x=window.x - column,
        y=window.y - row,
        speckle=speckle,
        first=np.array(first),
        known=_known(companions) if companions else None,
    )


def state_at(patch: Patch, p: FloatArray, weight: FloatArray | None = None) -> State:
    """The model at ``p`` (parameters), with weights that it implies or the given ones.

    ``chi2`` is under these weights.
    """
    x, y = patch.x, patch.y
    bumps = [_bump(x, y, p[:6])]
    light = bumps[0].signal
    for k in range(OWN, p.size, EACH):
        bumps.append(_bump(x, y, p[k : k + EACH]))
        light = light + bumps[-1].signal
    plane = p[6] + p[7] * x + p[8] * y
    model = light + plane
    fused = fuse(patch.window, light)
    variance = fused.variance
    if patch.speckle.contrast > 0.0:
        light = light + np.clip(plane, 0.0, _MOST_HALO * p[0])
        area = patch.speckle.noise_area(patch.window.binning)
        # Of the height at the start: a lobe must not make all around it count less.
        floor = (patch.window.trusted_to * patch.first[0]) ** 2
        variance = variance + (area * np.square(light) + floor)
    if weight is None:
        weight = fused.used / variance
    residual = fused.rate - model
    chi2 = float(np.vdot(weight * residual, residual)) + patch.penalty(p)
    return State(p, tuple(bumps), light, model, fused, weight, residual, chi2)


def trial_at(
    patch: Patch, p: FloatArray, weight: FloatArray | None = None
) -> State | None:
    """The state at ``p``, None where ``p`` is no spot in this window."""
    x, y = patch.x, patch.y
    inside = x[0, 0] <= p[1] <= x[0, -1] and y[0, 0] <= p[2] <= y[-1, 0]
    binning = patch.window.binning
    heads = (0, *range(OWN, p.size, EACH))
    if not (inside and all(_is_spot(p[k : k + EACH], binning) for k in heads)):
        return None
    return state_at(patch, p, weight)


def better(trial: State, state: State, patch: Patch) -> bool:
    """Whether ``trial`` fits at least as well under the weights of ``state``."""
    after = state.fused.rate - trial.model
    new = float(np.vdot(state.weight * after, after))
    return new + patch.penalty(trial.parameters) <= state.chi2 * (1.0 + 1e-9)


def rooted_jacobian(state: State, patch: Patch) -> FloatArray:
    """Derivatives of the model by the parameters times root weight, (P, pixels)."""
    root = np.sqrt(state.weight)
    out = np.empty((patch.count, *root.shape))
    _bump_rows(out, state.bumps[0], state.parameters[:6], root)
    out[6] = root
    np.multiply(root, patch.x, out=out[7])
    np.multiply(root, patch.y, out=out[8])
    for bump, k in zip(state.bumps[1:], range(OWN, patch.count, EACH), strict=True):
        _bump_rows(out[k:], bump, state.parameters[k : k + EACH], root)
    return out.reshape(patch.count, -1)


def _bump(x: FloatArray, y: FloatArray, p: FloatArray) -> Bump:
    dx, dy = x - p[1], y - p[2]
    # Half the exponent, as a product of a column, a row and what joins them.
    square = (-p[4] * dx) * dy
    square -= (0.5 * p[3]) * dx * dx
    square -= (0.5 * p[5]) * dy * dy
    unit = np.exp(np.minimum(square, 0.0, out=square), out=square)
    return Bump(unit, dx, dy, p[0] * unit)


def _bump_rows(out: FloatArray, bump: Bump, p: FloatArray, root: FloatArray) -> None:
    """Fills the first six rows of ``out`` (.., H, W) with derivatives times root."""
    _, _, _, a, b, c = p
    dx, dy = bump.dx, bump.dy
    np.multiply(bump.unit, root, out=out[0])
    rooted = p[0] * out[0]
    np.multiply(rooted, a * dx + b * dy, out=out[1])
    np.multiply(rooted, b * dx + c * dy, out=out[2])
    np.multiply(rooted, -0.5 * dx * dx, out=out[3])
    np.multiply(rooted, -dx, out=out[4])
    out[4] *= dy
    np.multiply(rooted, -0.5 * dy * dy, out=out[5])


def _is_spot(p: FloatArray, binning: int) -> bool:
    round_enough = p[3] > 0.0 and p[5] > 0.0 and p[4] ** 2 < 0.998 * p[3] * p[5]
    return bool(p[0] > 0.0 and round_enough and max(p[3], p[5]) * binning**2 < 9.0)


def _known(companions: Sequence[Companion]) -> FloatArray:
    """Information on the companions' parameters beforehand, (6 K, 6 K)."""
    out = np.zeros((EACH * len(companions),) * 2)
    for k, item in enumerate(companions):
        shape, share = item.shape, item.relative_u
        middle = 0.5 * (shape.a + shape.c)
        box = slice(EACH * k + 1, EACH * k + 3)
        out[EACH * k, EACH * k] = 1.0 / (share * shape.height) ** 2
        # Radii and turn are all known to the same share of the spot's own form.
        out[box, box] = np.array([[shape.a, shape.b], [shape.b, shape.c]]) / share**2
        for j, weight in ((3, 1.0), (4, 2.0), (5, 1.0)):
            out[EACH * k + j, EACH * k + j] = weight / (2.0 * share * middle) ** 2
    return out
