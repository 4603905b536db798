"""Reading through a clear cover: how far the exit point walks along the surface.

The external grating equation is unchanged (tangential components are kept), but a ray
goes down to the grooves and up again inside the cover and leaves beside its entry.
Derived from Snell's law; checked against the twin's own rays.
"""

import numpy as np

from pitchsweep.analysis.records import FloatArray

COVER_INDEX = 1.55
"""Index taken for a cover: between polycarbonate and glass, common practice."""
_REST = COVER_INDEX**2 - 1.0


def one_way(direction: FloatArray, normal: FloatArray) -> FloatArray:
    """Walk (N, 3) a unit of thickness of rays with unit ``direction`` (N, 3) outside.

    The tangential part over the cosine inside, sqrt(n^2 - 1 + cos^2 outside).
    """
    cosine = np.sum(direction * normal, axis=1)
    inside = np.sqrt(_REST + cosine**2)
    return np.asarray((direction - cosine[:, None] * normal) / inside[:, None])


def one_way_tangent(
    direction: FloatArray,
    normal: FloatArray,
    d_direction: FloatArray,
    d_normal: FloatArray,
) -> FloatArray:
    """How ``one_way`` moves when direction and normal do; all (N, 3)."""
    cosine = np.sum(direction * normal, axis=1)[:, None]
    d_cosine = np.sum(d_direction * normal + direction * d_normal, axis=1)[:, None]
    inside_2 = _REST + cosine**2
    tangential = direction - cosine * normal
    d_tangential = d_direction - d_cosine * normal - cosine * d_normal
    moved = d_tangential - tangential * cosine * d_cosine / inside_2
    return np.asarray(moved / np.sqrt(inside_2))
