"""Where in a run a laser's wavelength jumped: found in what the fit left over (pure).

A mode hop moves all orders but zero at once, each as its angle asks. For every moment
between two steps the fit says how much chi-squared would fall if the wavelength were
another from then on, all its other unknowns free to give way (a score test, see C. R.
Rao, Proc. Camb. Phil. Soc. 44 (1948) 50). A jump of camera or stage is asked for alike,
so that none of them is taken for a mode hop.
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.fit_parameters import ARCSEC, Kind
from pitchsweep.analysis.fit_problem import FitProblem
from pitchsweep.analysis.fit_scene import WavelengthJump
from pitchsweep.analysis.joint_fit import JointFit
from pitchsweep.analysis.part_ray import Local
from pitchsweep.analysis.prediction import predict, whitened
from pitchsweep.analysis.records import FloatArray, IntArray

FEWEST_STEPS = 8
"""Fewer steps of a laser say nothing of jumps."""
MOST_MOMENTS = 600
BACK_AGAIN = 10.0
"""By so much more a jump with one back must explain than a jump that lasts."""
LEAST_KNOWN = 0.5
"""A jump that the other unknowns take up but for this part of its prior is not seen."""


@dataclass(frozen=True)
class View:
    """A fit with the weights (N,) it was made with; ``scale_2`` of its readings."""

    problem: FitProblem
    order: IntArray
    fit: JointFit
    weight: FloatArray
    scale_2: float = 1.0


@dataclass(frozen=True)
class Scan:
    """What a jump before each step but the first (K,) would be, in time order.

    ``since`` the step's time, ``size`` and ``u`` of the jump, ``gain`` by which
    chi-squared (at the readings' own scatter) would fall, ``pitch_shift`` by how much
    of the pitch an overlooked jump of size 1 moves it. ``score`` and ``information``
    (K, K) are those of all of them together, from which pairs are judged.
    """

    since: FloatArray
    size: FloatArray
    u: FloatArray
    gain: FloatArray
    pitch_shift: FloatArray
    score: FloatArray
    information: FloatArray
    scale_2: float

    @property
    def best(self) -> int:
        """Index of the largest gain."""
        return int(np.argmax(self.gain))

    def pairs(self, u_prior: float) -> FloatArray:
        """Gain (K, K) of a jump with one back to where it was, of the same size."""
        alone = np.diag(self.information)
        known = alone[:, None] + alone[None, :] - 2.0 * self.information
        precision = known + 1.0 / u_prior**2
        told = known > LEAST_KNOWN * precision
        score = self.score[:, None] - self.score[None, :]
        return np.where(told, score**2 / precision, 0.0) / self.scale_2

    def overlooked(self, u_prior: float, sigmas: float) -> float:
        """Standard uncertainty of the pitch from a jump that is not shown.

        It may be anywhere, with or without one back, as large as ``sigmas`` times its
        own u with equal chance, and within what the prior allows.
        """
        alone = np.diag(self.information)
        known = alone[:, None] + alone[None, :] - 2.0 * self.information
        both = self.pitch_shift[:, None] - self.pitch_shift[None, :]
        total = 0.0
        for information, shift in ((alone, self.pitch_shift), (known, both)):
            u = np.sqrt(self.scale_2 / (np.maximum(0.0, information) + u_prior**-2))
            most = np.minimum(sigmas * u, np.sqrt(3.0) * u_prior)
            total = max(total, float(np.mean((shift * most) ** 2)) / 3.0)
        return float(np.sqrt(total))


@dataclass(frozen=True)
class Suspect:
    """The likeliest jump, with the one back if that explains more; how much it does.

    ``rival`` says what else explains more, if anything does, and ``rival_shift`` by
    how much of the pitch that moves it.
    """

    jumps: tuple[WavelengthJump, ...]
    scan: Scan
    gain: float
    rival: str = ""
    rival_shift: float = 0.0


class JumpSearch:
    """Scans of one view for jumps of one kind or another."""

    def __init__(self, view: View) -> None:
        self._view = view
        problem, fit = view.problem, view.fit
        there = predict(problem, view.order, fit.state)
        used = there.valid & (view.weight > 0.0)
        self._weight = np.where(used, view.weight, 0.0)
        self._jacobian = whitened(problem, there.jacobian)
        self._by_step = whitened(problem, there.by_step)
        # A step of lambda/d in its logarithm is one of the pitches' the other way.
        self._ratio = -self._jacobian[:, :, : len(problem.parts)].sum(axis=2)
        bb = self._sum(self._by_step, self._by_step)
        self._diagonal = 1.0 / problem.u_step_rad**2 + bb
        starts = problem.by_step[problem.step_starts]
        self._time = problem.time[starts]
        self._run = problem.run[starts]
        self._laser = problem.table.laser[starts]
        self._lit = self._sum(self._ratio, self._ratio) > 0.0
        weighted = self._by_step * self._weight[:, None]
        self._border = problem.sum_by_step(
            np.einsum("nip,ni->np", self._jacobian, weighted)
        )

    def wavelength(self, laser: int, run: int, u_prior: float) -> Scan | None:
        """Jumps of the logarithm of a wavelength; None for too few steps."""
        here = (self._laser == laser) & (self._run == run) & self._lit
        return self._scan(self._ratio, here, u_prior)

    def others(self, run: int) -> Iterator[tuple[str, float, Scan]]:
        """What else may jump: words, how its size is shown in them, scan."""
        here = self._run == run
        for words, scale, name, u in (
            ("the picture had moved by {:.3f} mm in x", 1.0, Local.SCREEN_X, 1.0),
            ("the picture had moved by {:.3f} mm in y", 1.0, Local.SCREEN_Y, 1.0),
        ):
            column = self._column(name)
            found = None if column is None else self._scan(column, here, u)
            if found is not None:
                yield words, scale, found
        found = self._scan(self._by_step, here, 1e-3)
        if found is not None:
            yield "the stage's zero had moved by {:.0f} arcsec", 1.0 / ARCSEC, found

    def _column(self, local: Local) -> FloatArray | None:
        for index, parameter in enumerate(self._view.problem.parameters):
            if parameter.kind is not Kind.LOCAL or parameter.column != local:
                continue
            if np.all(parameter.coefficient == 1.0):
                return np.asarray(self._jacobian[:, :, index])
        return None

    def _sum(self, a: FloatArray, b: FloatArray) -> FloatArray:
        rows = self._weight * np.sum(a * b, axis=1)
        return self._view.problem.sum_by_step(rows)

    def _scan(
        self, column: FloatArray, here: NDArray[np.bool_], u_prior: float
    ) -> Scan | None:
        steps = np.flatnonzero(here)
        steps = steps[np.argsort(self._time[steps], kind="stable")]
        if len(steps) < FEWEST_STEPS:
            return None
        fit = self._view.fit
        across = self._sum(column, self._by_step) / self._diagonal
        square = self._sum(column, column) - across**2 * self._diagonal
        along = self._sum(column, fit.residual)
        weighted = column * self._weight[:, None]
        dense = np.einsum("nip,ni->np", self._jacobian, weighted)
        mixed = self._view.problem.sum_by_step(dense) - self._border * across[:, None]
        kept = _thinned(len(steps))
        score = _from_the_end(along[steps])[kept]
        shared = _from_the_end(mixed[steps])[kept]
        # A later jump is felt by a part of the spots that feel an earlier one.
        later = np.maximum(kept[:, None], kept[None, :])
        whole = _from_the_end(square[steps])[later]
        taken = shared @ fit.covariance
        known = whole - taken @ shared.T
        alone = np.maximum(0.0, np.diag(known))
        precision = alone + 1.0 / u_prior**2
        told = alone > LEAST_KNOWN * precision
        gain = np.where(told, score**2 / precision, 0.0) / self._view.scale_2
        return Scan(
            since=self._time[steps[1:]][kept],
            size=score / precision,
            u=np.sqrt(self._view.scale_2 / precision),
            gain=gain,
            pitch_shift=taken[:, 0],
            score=score,
            information=known,
            scale_2=self._view.scale_2,
        )


def _thinned(steps: int) -> IntArray:
    """Which moments are asked for: all of them, or evenly many."""
    every = 1 + (steps - 2) // MOST_MOMENTS
    return np.arange(0, steps - 1, every)


def _from_the_end(rows: FloatArray) -> FloatArray:
    """Sums of ``rows`` from each but the first to the last."""
    return np.asarray(np.cumsum(rows[::-1], axis=0)[::-1][1:])


def likeliest(view: View, u_priors: FloatArray) -> Suspect | None:
    """The jump of a wavelength that explains most; None where nothing can be said.

    ``u_priors`` (lasers,): how large a relative jump of each laser may be.
    """
    search, suspects = JumpSearch(view), list[Suspect]()
    for run in np.unique(view.problem.run).tolist():
        for laser in np.unique(view.problem.table.laser).tolist():
            scan = search.wavelength(laser, run, float(u_priors[laser]))
            if scan is not None:
                suspects.append(_of_scan(scan, laser, run, float(u_priors[laser])))
    if not suspects:
        return None
    first = max(suspects, key=lambda suspect: suspect.gain)
    return _with_rival(search, first)


def _of_scan(scan: Scan, laser: int, run: int, u_prior: float) -> Suspect:
    alone, pairs = float(scan.gain[scan.best]), scan.pairs(u_prior)
    k, j = np.unravel_index(int(np.argmax(pairs)), pairs.shape)
    both = float(pairs[k, j])
    moments = sorted({int(k), int(j)}) if both > alone + BACK_AGAIN else [scan.best]
    jumps = tuple(WavelengthJump(laser, run, float(scan.since[m])) for m in moments)
    return Suspect(jumps, scan, both if len(jumps) == 2 else alone)


def _with_rival(search: JumpSearch, suspect: Suspect) -> Suspect:
    gain = suspect.gain
    for words, scale, scan in search.others(suspect.jumps[0].run):
        best = scan.best
        if scan.gain[best] > gain:
            gain, size = float(scan.gain[best]), float(scan.size[best])
            shift = abs(size * float(scan.pitch_shift[best]))
            told = words.format(scale * size)
            suspect = replace(suspect, rival=told, rival_shift=shift)
    return suspect
