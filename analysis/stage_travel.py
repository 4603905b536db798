"""From which side the stage came to each step (pure).

Every angle is approached from below, but after a long way down over a short way only:
what is left of the backlash then differs. Steps are numbered in the order taken.
"""

import numpy as np

from pitchsweep.analysis.records import FloatArray, IntArray


def came_from(step: IntArray, stage_deg: FloatArray, run: IntArray) -> FloatArray:
    """1 (N,) where the step before in the run stood higher, -1 where lower.

    ``step``, ``stage_deg``, ``run`` (N,) of the spots. A step at the same angle as the
    one before has its side; the first step of a run, which nobody knows, 0.
    """
    side = np.zeros(len(step))
    for one in np.unique(run):
        here = np.flatnonzero(run == one)
        _, first, which = np.unique(step[here], return_index=True, return_inverse=True)
        turned = -np.sign(np.diff(stage_deg[here][first]))
        side[here] = np.concatenate([[0.0], _carried(turned)])[which.reshape(-1)]
    return side


def _carried(turned: FloatArray) -> FloatArray:
    """Zeros take the value before them."""
    known = np.maximum.accumulate(np.where(turned != 0.0, np.arange(turned.size), 0))
    return np.asarray(turned[known] if turned.size else turned)
