"""The beam map: where every beam of a job may go, how strong, what it meets. Pure.

Worst case throughout: full drive power in every order, in every ghost, reflected and
gone through; grooves in any direction; the part missing, or left in another mount.
Nothing amplifies, so no beam is ever stronger, whatever comes back onto the part.
A beam that may meet anything but a declared stop that bears it refuses the run.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from enum import StrEnum
from itertools import product

import numpy as np

from pitchsweep.configs.enclosure_model import Enclosure, PartMount
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.part_model import Part
from pitchsweep.safety.beam_cones import (
    SIGMAS,
    Spread,
    nominal_direction_deg,
    order_cones,
)
from pitchsweep.safety.beam_faults import Fault
from pitchsweep.safety.beam_judgement import (
    Light,
    What,
    judged_cone,
    judged_orders,
    light_of,
    met_names,
)
from pitchsweep.safety.beam_steps import LitAngle, lit_angles, steps_text
from pitchsweep.safety.lasers_alight import at_once_in_words, lasers_alight
from pitchsweep.safety.refusals import Refusal
from pitchsweep.safety.surroundings import NOTHING, surroundings_of


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
    the direction ``fault_azimuth_deg``, ``fault_elevation_deg``. ``part`` names the
    part of a lot.
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
    part: str = ""


@dataclass(frozen=True)
class BeamMap:
    """Every beam of a job, and the enclosure around it (None: nothing is declared).

    ``closed_all_round``: whether some declared surface covers every direction, as a
    part that hangs loose would need; ``at_once``: which lasers may be alight together,
    in words.
    """

    job: str
    bench: str
    step_deg: float
    enclosure: Enclosure | None
    beams: tuple[Beam, ...]
    closed_all_round: bool
    at_once: str = ""


def beam_map(job: Job) -> BeamMap:
    """The beam map of ``job``: all lasers that may be alight, at all its angles.

    Every part of a lot is taken in, each at all angles.

    Where several may be so together, whatever stops one beam must bear them all: their
    zero orders and straight ways coincide.
    """
    enclosure = job.bench.enclosure
    around = surroundings_of(enclosure.surfaces if enclosure else ())
    angles = lit_angles(job)
    beams: list[Beam] = []
    for name, part in product(lasers_alight(job), _alike_once(job)):
        light = light_of(job, name, around, part)
        beams.extend(_order_beams(light, angles))
        beams.extend(_missing_part_beams(job, light, angles))
    return BeamMap(
        job=job.job,
        bench=job.bench.bench,
        step_deg=job.recipe.step_deg,
        enclosure=enclosure,
        beams=tuple(beams),
        closed_all_round=not bool((around.bits == NOTHING).any()),
        at_once=at_once_in_words(job),
    )


def _alike_once(job: Job) -> list[Part]:
    """The job's parts, of those that send every beam alike only the first."""
    seen: dict[tuple[float, ...], Part] = {}
    for part in job.parts:
        key = (part.nominal_pitch_nm, part.nominal_within_percent, part.u_tilt_mrad)
        seen.setdefault(key, part)
    return list(seen.values())


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
    alike: dict[tuple[str, str, BeamKind, Fault, bool], list[Beam]] = {}
    for beam in found.beams:
        if beam.fault is not None:
            key = (
                beam.laser,
                beam.part,
                beam.kind,
                beam.fault,
                beam.at.left_behind,
            )
            alike.setdefault(key, []).append(beam)
    return tuple(_refusal(beams, found.step_deg) for beams in alike.values())


def _refusal(beams: Sequence[Beam], step_deg: float) -> Refusal:
    first = beams[0]
    assert first.fault is not None
    steps = [step for beam in beams for step in beam.at.steps_deg]
    orders = sorted({beam.order for beam in beams if beam.order is not None})
    left = ", the part left in another mount" if first.at.left_behind else ""
    named = f" {_orders_text(orders)}" if orders else ""
    if first.part and first.order is not None:
        named += f" of part {first.part}"
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


def _order_beams(light: Light, angles: Sequence[LitAngle]) -> Iterator[Beam]:
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
        judged = judged_orders(light, cones)
        for row, angle in enumerate(angles):
            for order in range(-judged.orders + 1, judged.orders):
                what = judged.at(row, abs(order))
                if what is None:
                    continue
                nominal = nominal_direction_deg(
                    angle.incidence_deg, order * light.ratio, through=through
                )
                yield _beam(light, kind, order, angle, nominal, what)


def _missing_part_beams(
    job: Job, light: Light, angles: Sequence[LitAngle]
) -> Iterator[Beam]:
    """Straight on past the stage, and off the bare mount."""
    climb_deg = np.degrees(SIGMAS * job.bench.beam.u_elevation_mrad * 1e-3)
    everywhere = LitAngle(0.0, 0.0, ())
    ahead = judged_cone(light, 180.0, climb_deg)
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
            part=light.part,
        )
        return
    for angle in angles:
        half_deg = _mount_cone_deg(enclosure.mount, light.spread, angle) + climb_deg
        back_deg = (2.0 * angle.incidence_deg + 180.0) % 360.0 - 180.0
        what = judged_cone(light, back_deg, half_deg)
        yield _beam(light, BeamKind.BARE_MOUNT, None, angle, (back_deg, 0.0), what)


def _mount_cone_deg(mount: PartMount, spread: Spread, angle: LitAngle) -> float:
    lean_deg = mount.tilt_deg + np.degrees(spread.turn_rad) + angle.half_width_deg
    return float(min(2.0 * lean_deg, 180.0))


def _beam(
    light: Light,
    kind: BeamKind,
    order: int | None,
    angle: LitAngle,
    nominal: tuple[float, float] | None,
    what: What,
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
        meets=met_names(light.around, what.met),
        fault=fault,
        fault_azimuth_deg=what.azimuth_deg if fault else None,
        fault_elevation_deg=what.elevation_deg if fault else None,
        fault_within_deg=what.within_deg if fault else None,
        part=light.part,
    )
