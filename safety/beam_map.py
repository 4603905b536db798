"""The beam map: where every beam of a job may go, how strong, what it meets. Pure.

Worst case throughout: full drive power in every order, in every ghost, reflected and
gone through; grooves in any direction; the part missing, or left in another mount.
Nothing amplifies, so no beam is ever stronger, whatever comes back onto the part.
A beam that may meet anything but a declared stop that bears it refuses the run.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from pitchsweep.analysis.order_visibility import wavelength_over_pitch
from pitchsweep.analysis.records import FloatArray, IntArray
from pitchsweep.configs.enclosure_model import Enclosure, PartMount
from pitchsweep.configs.job_model import Job
from pitchsweep.safety.beam_cones import (
    SIGMAS,
    Cones,
    Spread,
    nominal_direction_deg,
    order_cones,
    spread_of,
)
from pitchsweep.safety.beam_faults import DECLARE, Fault, faults_by_bit
from pitchsweep.safety.beam_steps import LitAngle, lit_angles, steps_text
from pitchsweep.safety.hazard_figures import full_drive_mw
from pitchsweep.safety.refusals import Refusal
from pitchsweep.safety.surroundings import NOTHING, Surroundings, surroundings_of


class BeamKind(StrEnum):
    """What makes a beam."""

    ORDER = "order"
    THROUGH = "order gone through"
    GHOST = "ghost"
    GHOST_THROUGH = "ghost gone through"
    PART_MISSING = "part missing"
    BARE_MOUNT = "part missing, bare mount"


ORDER_KINDS = {
    BeamKind.ORDER: (False, False),
    BeamKind.THROUGH: (True, False),
    BeamKind.GHOST: (False, True),
    BeamKind.GHOST_THROUGH: (True, True),
}
"""Kind -> (goes through the part, is a ghost)."""


@dataclass(frozen=True)
class Beam:
    """One beam at one angle.

    ``azimuth_deg``, ``elevation_deg``: where it goes with the grooves upright (None if
    it then stays in). ``meets``: all that it may meet, its cone and any groove
    direction taken in. ``fault`` says what is wrong with that, ``fault_within_deg`` of
    the direction ``fault_azimuth_deg``, ``fault_elevation_deg``.
    """

    laser: str
    kind: BeamKind
    order: int | None
    at: LitAngle
    azimuth_deg: float | None
    elevation_deg: float | None
    power_mw: float
    meets: tuple[str, ...]
    fault: Fault | None = None
    fault_azimuth_deg: float | None = None
    fault_elevation_deg: float | None = None
    fault_within_deg: float | None = None


@dataclass(frozen=True)
class BeamMap:
    """Every beam of a job, and the enclosure around it (None: nothing is declared).

    ``closed_all_round``: whether some declared surface covers every direction, as a
    part that hangs loose would need.
    """

    job: str
    bench: str
    step_deg: float
    enclosure: Enclosure | None
    beams: tuple[Beam, ...]
    closed_all_round: bool


@dataclass(frozen=True)
class _Light:
    """One laser of a map while it is being made."""

    name: str
    power_mw: float
    ratio: float
    spread: Spread
    around: Surroundings
    faults: Mapping[int, Fault]
    margin_deg: float


def beam_map(job: Job) -> BeamMap:
    """The beam map of ``job``: all lasers of its recipe at all its angles."""
    enclosure = job.bench.enclosure
    around = surroundings_of(enclosure.surfaces if enclosure else ())
    angles = lit_angles(job)
    beams: list[Beam] = []
    for name in job.recipe.lasers:
        light = _light(job, name, around)
        beams.extend(_order_beams(light, angles))
        beams.extend(_missing_part_beams(job, light, angles))
    return BeamMap(
        job=job.job,
        bench=job.bench.bench,
        step_deg=job.recipe.step_deg,
        enclosure=enclosure,
        beams=tuple(beams),
        closed_all_round=not bool((around.bits == NOTHING).any()),
    )


def refusals(found: BeamMap) -> tuple[Refusal, ...]:
    """Why the beams of a map refuse the run, alike ones together; empty: none does."""
    if found.enclosure is None:
        lasers = dict.fromkeys(beam.laser for beam in found.beams)
        return (
            Refusal(
                f"bench '{found.bench}' declares no enclosure, so no stop for any order"
                f" of laser {', '.join(lasers)} at every step",
                "add 'enclosure:' to the bench file, with stops for all directions",
            ),
        )
    alike: dict[tuple[str, BeamKind, Fault, bool], list[Beam]] = {}
    for beam in found.beams:
        if beam.fault is not None:
            key = (beam.laser, beam.kind, beam.fault, beam.at.left_behind)
            alike.setdefault(key, []).append(beam)
    return tuple(_refusal(beams, found.step_deg) for beams in alike.values())


def _refusal(beams: Sequence[Beam], step_deg: float) -> Refusal:
    first = beams[0]
    assert first.fault is not None
    steps = [step for beam in beams for step in beam.at.steps_deg]
    orders = sorted({beam.order for beam in beams if beam.order is not None})
    left = ", the part left in another mount" if first.at.left_behind else ""
    named = f" {_orders_text(orders)}" if orders else ""
    return Refusal(
        f"laser '{first.laser}', {first.kind}{named} at"
        f" {steps_text(steps, step_deg)}{left}: {first.fault.reason}"
        f" ({_where(min(beams, key=_uncertainty))})",
        first.fault.remedy + ("; or leave those steps out" if steps else ""),
    )


def _uncertainty(beam: Beam) -> float:
    return beam.fault_within_deg or 0.0


def _where(beam: Beam) -> str:
    near = f"within {beam.fault_within_deg:.0f} deg of " if _uncertainty(beam) else ""
    return (
        f"{near}azimuth {beam.fault_azimuth_deg:.0f}, elevation"
        f" {beam.fault_elevation_deg:.0f} deg"
    )


def _orders_text(orders: Sequence[int]) -> str:
    whole = list(range(orders[0], orders[-1] + 1))
    if len(orders) > 3 and list(orders) == whole:
        return f"{orders[0]:+d} to {orders[-1]:+d}"
    return ", ".join(f"{m:+d}" if m else "0" for m in orders)


def _light(job: Job, name: str, around: Surroundings) -> _Light:
    laser = job.bench.lasers[name]
    power_mw = full_drive_mw(laser)
    enclosure = job.bench.enclosure
    return _Light(
        name=name,
        power_mw=power_mw,
        ratio=wavelength_over_pitch(job.bench, job.part, name),
        spread=spread_of(job.bench, job.part, name),
        around=around,
        faults=faults_by_bit(around, laser, power_mw),
        margin_deg=enclosure.margin_deg if enclosure else 0.0,
    )


def _order_beams(light: _Light, angles: Sequence[LitAngle]) -> Iterator[Beam]:
    incidence = np.array([angle.incidence_deg for angle in angles])
    half_width = np.array([angle.half_width_deg for angle in angles])
    for kind, (through, ghost) in ORDER_KINDS.items():
        cones = order_cones(
            incidence,
            half_width,
            light.ratio,
            light.spread,
            through=through,
            ghost=ghost,
        )
        judged = _judged(light, cones)
        for row, angle in enumerate(angles):
            for order in range(-judged.orders + 1, judged.orders):
                what = judged.at(row, abs(order))
                if what is None:
                    continue
                nominal = nominal_direction_deg(
                    angle.incidence_deg, order * light.ratio, through=through
                )
                yield _beam(light, kind, order, angle, nominal, what)


@dataclass(frozen=True)
class _What:
    """What a beam may meet, and the direction of the worst of it."""

    met: int
    bad: int
    azimuth_deg: float
    elevation_deg: float
    within_deg: float


@dataclass(frozen=True)
class _Judged:
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

    def at(self, row: int, order: int) -> _What | None:
        """What one order meets at one angle; None if it cannot leave."""
        met = int(self.met[row, order])
        if not met:
            return None
        place = (row, order)
        return _What(
            met,
            int(self.bad[place]),
            float(self.azimuth_deg[place]),
            float(self.elevation_deg[place]),
            float(self.within_deg[place]),
        )


def _judged(light: _Light, cones: Cones) -> _Judged:
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

    return _Judged(
        met=np.bitwise_or.reduce(met, axis=-1),
        bad=np.bitwise_or.reduce(bad, axis=-1),
        azimuth_deg=at_worst(cones.azimuth_deg),
        elevation_deg=at_worst(cones.elevation_deg),
        within_deg=at_worst(within_deg),
    )


def _met(light: _Light, cones: Cones, half_deg: FloatArray) -> IntArray:
    leaves = cones.leaves
    met = np.zeros(leaves.shape, dtype=np.int64)
    met[leaves] = light.around.met_by_cones(
        cones.azimuth_deg[leaves], cones.elevation_deg[leaves], half_deg[leaves]
    )
    return met


def _missing_part_beams(
    job: Job, light: _Light, angles: Sequence[LitAngle]
) -> Iterator[Beam]:
    """Straight on past the stage, and off the bare mount."""
    climb_deg = np.degrees(SIGMAS * job.bench.beam.u_elevation_mrad * 1e-3)
    everywhere = LitAngle(0.0, 0.0, ())
    ahead = _cone_beam(light, 180.0, climb_deg)
    yield _beam(light, BeamKind.PART_MISSING, None, everywhere, (180.0, 0.0), ahead)
    enclosure = job.bench.enclosure
    if enclosure is None:
        return
    if enclosure.mount.acts_as == "stop":
        yield Beam(
            laser=light.name,
            kind=BeamKind.BARE_MOUNT,
            order=None,
            at=everywhere,
            azimuth_deg=None,
            elevation_deg=None,
            power_mw=light.power_mw,
            meets=("mount",),
        )
        return
    for angle in angles:
        half_deg = _mount_cone_deg(enclosure.mount, light.spread, angle) + climb_deg
        back_deg = (2.0 * angle.incidence_deg + 180.0) % 360.0 - 180.0
        what = _cone_beam(light, back_deg, half_deg)
        yield _beam(light, BeamKind.BARE_MOUNT, None, angle, (back_deg, 0.0), what)


def _mount_cone_deg(mount: PartMount, spread: Spread, angle: LitAngle) -> float:
    lean_deg = mount.tilt_deg + np.degrees(spread.turn_rad) + angle.half_width_deg
    return float(min(2.0 * lean_deg, 180.0))


def _cone_beam(light: _Light, azimuth_deg: float, half_deg: float) -> _What:
    place = (azimuth_deg, 0.0, min(half_deg + light.margin_deg, 180.0))
    met = int(light.around.met_by_cones(*(np.array([v]) for v in place))[0])
    return _What(met, met & sum(light.faults), azimuth_deg, 0.0, place[2])


def _beam(
    light: _Light,
    kind: BeamKind,
    order: int | None,
    angle: LitAngle,
    nominal: tuple[float, float] | None,
    what: _What,
) -> Beam:
    fault = next((f for bit, f in light.faults.items() if what.bad & bit), None)
    return Beam(
        laser=light.name,
        kind=kind,
        order=order,
        at=angle,
        azimuth_deg=None if nominal is None else nominal[0],
        elevation_deg=None if nominal is None else nominal[1],
        power_mw=light.power_mw,
        meets=_names(light.around, what.met),
        fault=fault,
        fault_azimuth_deg=what.azimuth_deg if fault else None,
        fault_elevation_deg=what.elevation_deg if fault else None,
        fault_within_deg=what.within_deg if fault else None,
    )


def _names(around: Surroundings, met: int) -> tuple[str, ...]:
    listed = tuple(
        surface.name
        for place, surface in enumerate(around.surfaces)
        if met & around.bit_of(place)
    )
    return (("nothing declared",) if met & NOTHING else ()) + listed


__all__ = ["DECLARE", "Beam", "BeamKind", "BeamMap", "beam_map", "refusals"]
