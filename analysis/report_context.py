"""What a report shows beside the fit result; everything may be missing.

A table fit has no frames and no gate history; a run has both.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.lot_parts import LotRow
from pitchsweep.configs.bench_model import Bench, Screen
from pitchsweep.configs.part_model import Part


@dataclass(frozen=True)
class Fact:
    """One line of a list of facts: what, and the value with its unit, as text."""

    label: str
    text: str


@dataclass(frozen=True)
class PartFacts:
    """What was measured; limits are None where the part has no tolerance."""

    part: str
    serial: str
    lot: str
    side: str
    place: str
    nominal_pitch_nm: float
    lower_nm: float | None = None
    upper_nm: float | None = None
    note: str = ""


@dataclass(frozen=True)
class ScreenFacts:
    """The nominal screen: half sizes and beam hole in mm, origin on the +z axis.

    A pixel lies at x = mm_per_px * (column - centre_column_px),
    y = -mm_per_px * (row - centre_row_px); ``mm_per_px`` 0 means no map is known.
    """

    half_width_mm: float
    half_height_mm: float
    hole_x_mm: float
    hole_y_mm: float
    hole_diameter_mm: float
    mm_per_px: float = 0.0
    centre_column_px: float = 0.0
    centre_row_px: float = 0.0


@dataclass(frozen=True)
class GateRow:
    """One change of the gate: when (UTC text), the event, the state after it."""

    at_utc: str
    event: str
    state: str
    detail: str = ""


@dataclass(frozen=True)
class FrameMark:
    """A mark in a frame: centre in px, an order or a reason, used or not."""

    column_px: float
    row_px: float
    label: str
    accepted: bool


@dataclass(frozen=True)
class FrameShown:
    """A frame for the strip: ``image`` uint16 (row, column) in digital numbers."""

    image: NDArray[np.uint16]
    step: int
    stage_deg: float
    exposure_ms: float
    marks: tuple[FrameMark, ...] = ()


@dataclass(frozen=True)
class ReportContext:
    """Everything a report shows beside the result."""

    part: PartFacts | None = None
    screen: ScreenFacts | None = None
    simulated: bool = False
    bench_facts: tuple[Fact, ...] = ()
    run_facts: tuple[Fact, ...] = ()
    gate_history: tuple[GateRow, ...] = ()
    frames: tuple[FrameShown, ...] = ()
    cautions: tuple[str, ...] = ()
    ledger_entries: int | None = None
    ledger_head: str = ""
    lot: tuple[LotRow, ...] = ()


def part_facts(part: Part) -> PartFacts:
    """The facts of a part file."""
    limits = part.tolerance
    return PartFacts(
        part=part.part,
        serial=part.serial,
        lot=part.lot,
        side=part.side,
        place=part.place,
        nominal_pitch_nm=part.nominal_pitch_nm,
        lower_nm=limits.lower_nm if limits else None,
        upper_nm=limits.upper_nm if limits else None,
        note=part.note or "",
    )


def screen_facts(bench: Bench) -> ScreenFacts:
    """Screen, hole and nominal pixel map of a bench file."""
    screen, camera = bench.screen, bench.camera
    return ScreenFacts(
        half_width_mm=screen.width_mm / 2.0,
        half_height_mm=screen.height_mm / 2.0,
        hole_x_mm=screen.hole.x_mm,
        hole_y_mm=screen.hole.y_mm,
        hole_diameter_mm=screen.hole.diameter_mm,
        mm_per_px=camera.mm_per_px,
        centre_column_px=camera.centre_column_px,
        centre_row_px=camera.centre_row_px,
    )


def bench_facts(bench: Bench) -> tuple[Fact, ...]:
    """The bench as lines of text: what stood there and how well it was known."""
    screen, stage = bench.screen, bench.stage
    harmonics = ", ".join(f"{u:g}" for u in stage.u_harmonics_arcsec)
    lasers = tuple(
        Fact(
            f"Laser {name}",
            f"{laser.vacuum_wavelength_nm!r} nm in vacuum, u {laser.u_wavelength_nm:g}"
            f" nm, {laser.power_mw:g} mW",
        )
        for name, laser in bench.lasers.items()
    )
    return (
        Fact("Bench", bench.bench + (" (simulated)" if bench.twin else "")),
        *((Fact("Note", bench.note),) if bench.note else ()),
        *lasers,
        _view(screen),
        Fact(
            "Stage",
            f"zero u {stage.u_zero_deg:g} deg, repeatability u"
            f" {stage.u_repeatability_arcsec:g} arcsec, one to four per turn u"
            f" {harmonics} arcsec",
        ),
        Fact(
            "Camera",
            f"{bench.camera.width_px} x {bench.camera.height_px} pixels,"
            f" {bench.camera.bits} bit, {bench.camera.mm_per_px:g} mm a pixel",
        ),
    )


def _view(screen: Screen) -> Fact:
    """What the orders are seen on."""
    size = f"{screen.width_mm:g} mm x {screen.height_mm:g} mm"
    length = f"{screen.distance_mm:g} mm, u {screen.u_distance_mm:g} mm"
    if screen.kind == "camera-at-infinity":
        return Fact("Camera at infinity", f"sensor {size}, focal length {length}")
    return Fact("Screen", f"{size} at {length}")
