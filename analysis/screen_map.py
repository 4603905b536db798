"""The smooth unknown error of the screen map: Chebyshev products in x and y."""

from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.records import FloatArray

X_DEGREE = 5
Y_DEGREE = 2
TERMS = (X_DEGREE + 1) * (Y_DEGREE + 1)
"""Terms an axis; both axes together carry 36."""


@dataclass(frozen=True)
class MapBasis:
    """Value and slopes (per mm) of every term at N places, each (N, TERMS)."""

    value: FloatArray
    by_x: FloatArray
    by_y: FloatArray


def map_basis(
    x_mm: FloatArray, y_mm: FloatArray, half_width_mm: float, half_height_mm: float
) -> MapBasis:
    """T_i(x/half width) * T_j(y/half height), i <= 5 outer, j <= 2 inner."""
    tx, dx = _chebyshev(np.clip(x_mm / half_width_mm, -1.2, 1.2), X_DEGREE)
    ty, dy = _chebyshev(np.clip(y_mm / half_height_mm, -1.2, 1.2), Y_DEGREE)
    return MapBasis(
        value=_products(tx, ty),
        by_x=_products(dx / half_width_mm, ty),
        by_y=_products(tx, dy / half_height_mm),
    )


def _products(tx: FloatArray, ty: FloatArray) -> FloatArray:
    return np.asarray(tx[:, :, None] * ty[:, None, :]).reshape(tx.shape[0], TERMS)


def _chebyshev(t: FloatArray, degree: int) -> tuple[FloatArray, FloatArray]:
    """T_0..T_degree and derivatives at t (N,), each (N, degree + 1)."""
    value = np.asarray(np.polynomial.chebyshev.chebvander(t, degree), dtype=np.float64)
    slope = np.zeros_like(value)
    u = np.ones_like(value)  # Chebyshev polynomials of the second kind
    if degree >= 1:
        u[:, 1] = 2.0 * t
    for i in range(2, degree + 1):
        u[:, i] = 2.0 * t * u[:, i - 1] - u[:, i - 2]
    for i in range(1, degree + 1):
        slope[:, i] = i * u[:, i - 1]
    return value, slope
