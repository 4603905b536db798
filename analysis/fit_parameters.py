"""What a joint fit leaves unknown: the shape of one unknown, and its sources.

A parameter acts on one local quantity of the spots (part_ray.Local), on the logarithm
of lambda/d, or on one term of the screen map, each with a coefficient a spot. Which
parameters a fit has, with scope and prior, is decided in ``parameter_table``.
"""

from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from pitchsweep.analysis.records import FloatArray

ARCSEC = np.pi / 648000.0


class Kind(StrEnum):
    """What a parameter acts on."""

    LOCAL = "local"
    LOG_RATIO = "log-of-lambda-over-d"
    MAP_X = "map-x"
    MAP_Y = "map-y"


class Scope(StrEnum):
    """What shares one value of a parameter."""

    EVERYTHING = "everything"
    BENCH = "bench"
    LASER = "laser"
    PART = "part"
    MOUNT = "mount"
    RUN = "run"


class Source(StrEnum):
    """Budget source that a prior belongs to."""

    PITCH = "pitch of the reference"
    WAVELENGTH = "laser wavelength"
    AIR = "air index"
    TEMPERATURE = "temperature of the part"
    EXPANSION = "expansion coefficient"
    SCREEN = "screen distance, pose and offset"
    MAP = "screen map"
    LENS = "lens distortion"
    BEAM = "beam height, offset and elevation"
    SEAT = "seat of the part (zero, azimuth, tilt, surface)"
    COVER = "cover through which the part is read"
    CURVATURE = "curvature of the part"
    SPIRAL = "curved grooves over the width of the beam"
    HARMONICS = "stage errors, 1 to 4 per turn"
    WORM = "stage errors, worm period"
    SCALE = "stage scale"
    BACKLASH = "leftover backlash of the stage"
    DRIFT = "drift of camera, beam and wavelength"
    JUMP = "jumps of the laser wavelength"
    STEPS = "stage repeatability"


@dataclass(frozen=True)
class Parameter:
    """One unknown, counted from its prior mean.

    ``u_prior`` infinite: nothing is known of it beforehand. ``coefficient`` (N,): how
    much of it each spot feels. ``column``: the local quantity, or the map term.
    ``shown_scale`` turns the internal unit into ``unit``; ``mean`` is the prior mean
    in that unit.
    """

    name: str
    scope: Scope
    source: Source
    kind: Kind
    u_prior: float
    unit: str
    shown_scale: float
    coefficient: FloatArray
    column: int = 0
    mean: float = 0.0
