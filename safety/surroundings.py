"""What a cone of light may meet, from the surfaces declared around the part. Pure.

The edges of all surfaces cut the sphere of directions into cells, each of which lies
in one surface (the first listed that covers it) or in none. A cone is replaced by the
smallest sector of azimuth and elevation around it, so it may meet more than it really
does, never less.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.records import FloatArray, IntArray
from pitchsweep.configs.enclosure_model import Sector, Surface

HAIR_DEG = 1e-6
"""So much inside its edges is a sector, that it does not touch its neighbours."""

NOTHING = 1
"""Bit 0 of what is met: a direction that no surface covers. Surface i is bit i + 1."""


@dataclass(frozen=True)
class Surroundings:
    """The cells of the sphere; azimuth edges run over three turns, -540 to 540 deg.

    ``bits`` (J, I): what each cell of elevation j, azimuth i is.
    """

    surfaces: tuple[Surface, ...]
    azimuth_edges_deg: FloatArray
    elevation_edges_deg: FloatArray
    bits: IntArray

    def bit_of(self, surface: int) -> int:
        """The bit of a surface, by its place in the list."""
        return NOTHING << (surface + 1)

    def met_by_cones(
        self, azimuth_deg: FloatArray, elevation_deg: FloatArray, half_deg: FloatArray
    ) -> IntArray:
        """What each cone (N,) may meet, as the bits of all cells that it touches.

        Azimuth -180 to 180, elevation -90 to 90, half angle 0 to 180, in degrees.
        """
        low, high = elevation_deg - half_deg, elevation_deg + half_deg
        steep = np.maximum(np.abs(low), np.abs(high)) >= 90.0
        across = np.sin(np.radians(np.minimum(half_deg, 90.0)))
        ratio = across / np.maximum(np.cos(np.radians(elevation_deg)), 1e-12)
        wide = np.where(steep, 180.0, np.degrees(np.arcsin(np.minimum(ratio, 1.0))))
        return self._met(
            azimuth_deg - wide,
            azimuth_deg + wide,
            np.maximum(low, -90.0),
            np.minimum(high, 90.0),
        )

    def met_in_sector(self, sector: Sector) -> int:
        """What light anywhere in a sector may meet."""
        start = _folded(sector.azimuth_from_deg)
        end = start + sector.azimuth_to_deg - sector.azimuth_from_deg
        place = (
            start + HAIR_DEG,
            end - HAIR_DEG,
            sector.elevation_from_deg + HAIR_DEG,
            sector.elevation_to_deg - HAIR_DEG,
        )
        return int(self._met(*(np.array([value]) for value in place))[0])

    def _met(
        self, west: FloatArray, east: FloatArray, low: FloatArray, high: FloatArray
    ) -> IntArray:
        """The bits of all cells touched by sectors (N,), many of which are alike."""
        columns, rows = self.azimuth_edges_deg, self.elevation_edges_deg
        place = (
            np.maximum(np.searchsorted(columns, west, "left") - 1, 0),
            np.searchsorted(columns, east, "right"),
            np.maximum(np.searchsorted(rows, low, "left") - 1, 0),
            np.searchsorted(rows, high, "right"),
        )
        shape = (len(columns) + 1,) * 2 + (len(rows) + 1,) * 2
        alike, back = np.unique(np.ravel_multi_index(place, shape), return_inverse=True)
        corners = zip(*np.unravel_index(alike, shape), strict=True)
        met = [
            np.bitwise_or.reduce(self.bits[c:d, a:b], None) for a, b, c, d in corners
        ]
        return np.asarray(met, dtype=np.int64)[back]


def surroundings_of(surfaces: Sequence[Surface]) -> Surroundings:
    """The cells of ``surfaces`` (at most 60), the first listed lying nearest."""
    azimuth = _edges(
        [e for s in surfaces for e in (s.azimuth_from_deg, s.azimuth_to_deg)]
    )
    elevation = np.unique(
        [-90.0, 90.0]
        + [e for s in surfaces for e in (s.elevation_from_deg, s.elevation_to_deg)]
    )
    middle_azimuth = 0.5 * (azimuth[1:] + azimuth[:-1])
    middle_elevation = 0.5 * (elevation[1:] + elevation[:-1])
    bits = np.full((len(middle_elevation), len(middle_azimuth)), NOTHING, np.int64)
    for place in reversed(range(len(surfaces))):
        covered = _covers(surfaces[place], middle_azimuth, middle_elevation)
        bits[covered] = NOTHING << (place + 1)
    turns = np.concatenate([azimuth[:-1] - 360.0, azimuth[:-1], azimuth + 360.0])
    return Surroundings(tuple(surfaces), turns, elevation, np.tile(bits, 3))


def _edges(azimuths_deg: Sequence[float]) -> FloatArray:
    return np.unique([-180.0, 180.0, *map(_folded, azimuths_deg)])


def _folded(azimuth_deg: float) -> float:
    return round((azimuth_deg + 180.0) % 360.0 - 180.0, 9)


def _covers(
    sector: Sector, azimuth_deg: FloatArray, elevation_deg: FloatArray
) -> "np.ndarray[tuple[int, ...], np.dtype[np.bool_]]":
    width = sector.azimuth_to_deg - sector.azimuth_from_deg
    along = (azimuth_deg - sector.azimuth_from_deg) % 360.0 <= width
    above = sector.elevation_from_deg <= elevation_deg
    within = above & (elevation_deg <= sector.elevation_to_deg)
    return np.asarray(within[:, None] & along[None, :])
