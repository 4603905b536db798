"""Three-dimensional vectors: rotations, diffraction at a ruled surface, refraction.

Right-handed lab frame, the beam along -z. Vectors are arrays (..., 3); functions
broadcast over the leading axes. Nothing here knows a bench.
"""

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]


def rotation(axis: int, angle_rad: FloatArray | float) -> FloatArray:
    """Right-handed rotation matrices (..., 3, 3) about axis 0, 1 or 2 (x, y, z)."""
    angle = np.asarray(angle_rad, dtype=np.float64)
    matrix = np.zeros((*angle.shape, 3, 3))
    first, second = (axis + 1) % 3, (axis + 2) % 3
    matrix[..., axis, axis] = 1.0
    matrix[..., first, first] = matrix[..., second, second] = np.cos(angle)
    matrix[..., second, first] = np.sin(angle)
    matrix[..., first, second] = -matrix[..., second, first]
    return matrix


def dot(a: FloatArray, b: FloatArray) -> FloatArray:
    """Scalar product over the last axis, which is kept with length 1."""
    return np.asarray(np.sum(a * b, axis=-1, keepdims=True))


def unit(vector: FloatArray) -> FloatArray:
    """Vectors of length 1 along ``vector``."""
    return np.asarray(vector / np.sqrt(dot(vector, vector)))


def diffract(
    beam: FloatArray, normal: FloatArray, grating: FloatArray, ratio: FloatArray
) -> tuple[FloatArray, BoolArray]:
    """Unit vectors (..., 3) that leave a reflection grating, and whether they do (...).

    ``beam`` travels, ``normal`` points to the beam's side, ``grating`` lies in the
    surface across the grooves; all unit vectors. ``ratio`` (..., 1) is m*lambda/d. The
    part of the wave vector in the surface is conserved but for ``ratio`` along
    ``grating``. Where nothing leaves, the vector lies in the surface, finite.
    """
    tangent = beam - dot(beam, normal) * normal + ratio * grating
    rest = 1.0 - dot(tangent, tangent)
    leaves = rest[..., 0] > 0.0
    leaving = tangent + np.sqrt(np.maximum(rest, 0.0)) * normal
    return np.asarray(unit(leaving)), leaves


def meet_sphere(
    start: FloatArray,
    beam: FloatArray,
    apex: FloatArray,
    normal: FloatArray,
    bend: float,
) -> FloatArray:
    """Points (..., 3) where rays meet a convex sphere of curvature ``bend`` (1/mm).

    The sphere touches ``apex`` with outward ``normal``; a ``bend`` of 0 is a plane. The
    form of the quadratic stays accurate down to 0. Rays from behind give finite
    points that mean nothing.
    """
    away = start - apex
    half = dot(beam, normal) + bend * dot(beam, away)
    constant = 2.0 * dot(away, normal) + bend * dot(away, away)
    root = np.sqrt(np.maximum(half * half - bend * constant, 0.0))
    forward = np.where(root - half > 1e-9, root - half, 1.0)
    return np.asarray(start + constant / forward * beam)


def refract(
    direction: FloatArray, normal: FloatArray, ratio: float
) -> tuple[FloatArray, BoolArray]:
    """Unit vectors (..., 3) behind a face, and whether the light gets through (...).

    Snell's law in vectors: the part along the face is multiplied by ``ratio``, the
    index before over the index behind; the ray keeps to its side of ``normal``. Where
    nothing gets through the vector lies in the face, finite.
    """
    across = dot(direction, normal)
    tangent = ratio * (direction - across * normal)
    rest = 1.0 - dot(tangent, tangent)
    behind = tangent + np.sign(across) * np.sqrt(np.maximum(rest, 0.0)) * normal
    return np.asarray(unit(behind)), rest[..., 0] > 0.0


def sideways(direction: FloatArray, normal: FloatArray) -> FloatArray:
    """Step (..., 3) along the surface of a ray inside a layer, per mm of thickness."""
    through = dot(direction, normal)
    tangent = direction - through * normal
    return np.asarray(tangent / np.maximum(np.abs(through), 1e-3))
