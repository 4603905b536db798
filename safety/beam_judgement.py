"""What cones of light meet among the declared surfaces, and whether they may. Pure."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from pitchsweep.analysis.order_visibility import wavelength_over_pitch
from pitchsweep.analysis.records import FloatArray, IntArray
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.part_model import Part
from pitchsweep.safety.beam_cones import Cones, Spread, spread_of
from pitchsweep.safety.beam_faults import Fault, Ray, faults_by_bit
from pitchsweep.safety.hazard_figures import full_drive_mw
from pitchsweep.safety.lasers_alight import lasers_alight, may_be_together
from pitchsweep.safety.surroundings import NOTHING, Surroundings


@dataclass(frozen=True)
class Light:
    """One laser, its directions' spread, and what its beams must not meet.

    ``faults`` has the bits of ``around`` with what is wrong in meeting them; ``part``
    names the part of a lot that turns the beam, empty where there is one part only.
    """

    name: str
    power_mw: float
    ratio: float
    spread: Spread
    around: Surroundings
    faults: Mapping[int, Fault]
    margin_deg: float
    part: str = ""


def light_of(job: Job, name: str, around: Surroundings, part: Part) -> Light:
    """Laser ``name`` on ``part`` of a job, full drive. KeyError for an unknown one."""
    laser = job.bench.lasers[name]
    power_mw = full_drive_mw(laser)
    enclosure = job.bench.enclosure
    return Light(
        name=name,
        power_mw=power_mw,
        ratio=wavelength_over_pitch(job.bench, part, name),
        spread=spread_of(job.bench, part, name),
        around=around,
        faults=faults_by_bit(around, rays_with(job, name)),
        margin_deg=enclosure.margin_deg if enclosure else 0.0,
        part=f"{part.part} {part.serial}" if job.lot else "",
    )


def rays_with(job: Job, name: str) -> tuple[Ray, ...]:
    """What a surface in a beam of ``name`` must bear: all that may be lit with it."""
    names = lasers_alight(job) if may_be_together(job) else (name,)
    lasers = [job.bench.lasers[one] for one in names]
    return tuple(Ray(laser, full_drive_mw(laser)) for laser in lasers)


@dataclass(frozen=True)
class What:
    """What a beam may meet, and the direction of the worst of it."""

    met: int
    bad: int
    azimuth_deg: float
    elevation_deg: float
    within_deg: float


@dataclass(frozen=True)
class Judged:
    """What the cones of one kind meet: bits (K, M), worst directions (K, M)."""

    met: IntArray
    bad: IntArray
    azimuth_deg: FloatArray
    elevation_deg: FloatArray
    within_deg: FloatArray

    @property
    def orders(self) -> int:
        """How many orders there are, zero included, one sign."""
        return int(self.met.shape[1])

    def at(self, row: int, order: int) -> What | None:
        """What one order meets at one angle; None if it cannot leave."""
        met = int(self.met[row, order])
        if not met:
            return None
        place = (row, order)
        return What(
            met,
            int(self.bad[place]),
            float(self.azimuth_deg[place]),
            float(self.elevation_deg[place]),
            float(self.within_deg[place]),
        )


def judged_orders(light: Light, cones: Cones) -> Judged:
    """What each order meets, all groove directions together, bad ones first."""
    half_deg = np.minimum(cones.half_deg + light.margin_deg, 180.0)
    met = _met(light, cones, half_deg)
    bad = met & sum(light.faults)
    within_deg = np.where(bad, half_deg, np.inf)
    if bad.any():
        middle = _met(light, cones, np.zeros_like(half_deg))
        within_deg[(middle & bad) != 0] = 0.0
    worst = np.argmin(within_deg, axis=-1)[..., None]

    def at_worst(values: FloatArray) -> FloatArray:
        return np.asarray(np.take_along_axis(values, worst, -1)[..., 0])

    return Judged(
        met=np.bitwise_or.reduce(met, axis=-1),
        bad=np.bitwise_or.reduce(bad, axis=-1),
        azimuth_deg=at_worst(cones.azimuth_deg),
        elevation_deg=at_worst(cones.elevation_deg),
        within_deg=at_worst(within_deg),
    )


def _met(light: Light, cones: Cones, half_deg: FloatArray) -> IntArray:
    leaves = cones.leaves
    met = np.zeros(leaves.shape, dtype=np.int64)
    met[leaves] = light.around.met_by_cones(
        cones.azimuth_deg[leaves], cones.elevation_deg[leaves], half_deg[leaves]
    )
    return met


def judged_cone(light: Light, azimuth_deg: float, half_deg: float) -> What:
    """What one cone in the beam plane meets, the enclosure's margin added."""
    place = (azimuth_deg, 0.0, min(half_deg + light.margin_deg, 180.0))
    met = int(light.around.met_by_cones(*(np.array([v]) for v in place))[0])
    return What(met, met & sum(light.faults), azimuth_deg, 0.0, place[2])


def met_names(around: Surroundings, met: int) -> tuple[str, ...]:
    """The names of the surfaces among the bits, nearest first; nothing comes first."""
    listed = tuple(
        surface.name
        for place, surface in enumerate(around.surfaces)
        if met & around.bit_of(place)
    )
    return (("nothing declared",) if met & NOTHING else ()) + listed
