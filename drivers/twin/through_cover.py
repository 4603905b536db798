"""The way of the light through the cover to the grooves and back, face by face.

Every refraction and the diffraction inside are taken in full; where there is no cover
the grooves lie bare.
"""

from dataclasses import dataclass

import numpy as np

from pitchsweep.drivers.twin.rays import (
    BoolArray,
    FloatArray,
    diffract,
    refract,
    sideways,
    unit,
)


@dataclass(frozen=True)
class Grooves:
    """Where the light meets the part: unit vectors that broadcast to (..., 3).

    ``normal`` points to the light, ``grating`` across the grooves, ``along`` them.
    """

    normal: FloatArray
    grating: FloatArray
    along: FloatArray


@dataclass(frozen=True)
class Cover:
    """A clear layer over the grooves: thickness, index, lean of its outer face."""

    thickness_mm: float
    index: float
    lean_across_rad: float
    lean_along_rad: float


def orders_out(
    beam: FloatArray, grooves: Grooves, ratio: FloatArray, cover: Cover
) -> tuple[FloatArray, BoolArray, FloatArray | float]:
    """Directions (..., 3) of the orders, whether they leave, and where beside.

    ``ratio`` (..., 1) is m*lambda/d outside. The last value is by how much (mm) the
    exit lies beside the entry.
    """
    if cover.thickness_mm <= 0.0:
        leaving, leaves = diffract(beam, grooves.normal, grooves.grating, ratio)
        return leaving, leaves, 0.0
    face = unit(
        grooves.normal
        + np.tan(cover.lean_across_rad) * grooves.grating
        + np.tan(cover.lean_along_rad) * grooves.along
    )
    down, _ = refract(beam, face, 1.0 / cover.index)
    up, made = diffract(down, grooves.normal, grooves.grating, ratio / cover.index)
    leaving, leaves = refract(up, face, cover.index)
    beside = sideways(down, grooves.normal) + sideways(up, grooves.normal)
    return leaving, made & leaves, cover.thickness_mm * beside
