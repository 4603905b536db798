"""Reading through a clear cover: how far rays walk in it, and what its wedge does.

With even faces the external grating equation is unchanged (tangential components are
kept), but a ray goes down to the grooves and up again inside the cover and leaves
beside its entry. Where the faces are not even, the front's normal n + w (w across n,
small) turns a ray at each passage: refraction changes a wave vector along the front's
normal alone, by f(c) = c - sqrt(index^2 - 1 + c^2) at the outer cosine c, so that
the components along the grooves' plane gain w * (f(c in) + f(c out)) in all. Derived
from Snell's law to first order in w; checked against the twin's own rays, which take
every refraction in full.
"""

import numpy as np

from pitchsweep.analysis.records import FloatArray


def inside_2(cosine: FloatArray, index: FloatArray) -> FloatArray:
    """Squared index * cosine inside, for a cosine outside; all (N,)."""
    return np.asarray(index**2 - 1.0 + cosine**2)


def one_way(direction: FloatArray, normal: FloatArray, index: FloatArray) -> FloatArray:
    """Walk (N, 3) a unit of thickness of rays with unit ``direction`` (N, 3) outside.

    The tangential part over the cosine inside, sqrt(index^2 - 1 + cos^2 outside).
    """
    cosine = np.sum(direction * normal, axis=1)
    inside = np.sqrt(inside_2(cosine, index))
    return np.asarray((direction - cosine[:, None] * normal) / inside[:, None])


def one_way_by_index(
    direction: FloatArray, normal: FloatArray, index: FloatArray
) -> FloatArray:
    """How ``one_way`` (N, 3) moves with the index."""
    cosine = np.sum(direction * normal, axis=1)
    less = -index / inside_2(cosine, index)
    return np.asarray(less[:, None] * one_way(direction, normal, index))


def one_way_tangent(
    direction: FloatArray,
    normal: FloatArray,
    d_direction: FloatArray,
    d_normal: FloatArray,
    index: FloatArray,
) -> FloatArray:
    """How ``one_way`` moves when direction and normal do; all (N, 3)."""
    cosine = np.sum(direction * normal, axis=1)[:, None]
    d_cosine = np.sum(d_direction * normal + direction * d_normal, axis=1)[:, None]
    inside = inside_2(cosine, index[:, None])
    tangential = direction - cosine * normal
    d_tangential = d_direction - d_cosine * normal - cosine * d_normal
    moved = d_tangential - tangential * cosine * d_cosine / inside
    return np.asarray(moved / np.sqrt(inside))


def passage(cosine: FloatArray, index: FloatArray) -> FloatArray:
    """f(c) (N,): what one passage of the front adds a unit of its lean."""
    return np.asarray(cosine - np.sqrt(inside_2(cosine, index)))


def passage_by_cosine(cosine: FloatArray, index: FloatArray) -> FloatArray:
    return np.asarray(1.0 - cosine / np.sqrt(inside_2(cosine, index)))


def passage_by_index(cosine: FloatArray, index: FloatArray) -> FloatArray:
    return np.asarray(-index / np.sqrt(inside_2(cosine, index)))
