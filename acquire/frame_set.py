"""A folder of images with ``frames.csv``, taken elsewhere. This module acts (disk).

Columns ``file,step,stage_deg,mount_deg,laser,exposure_ms``; ``mount_deg`` may be blank
or absent (0), ``laser`` may be left out where the bench has one. ``dark`` in the laser
column marks a dark frame, which serves every step.
"""

import csv
from dataclasses import dataclass
from math import isfinite
from pathlib import Path

from pitchsweep.acquire.bench_devices import Shot
from pitchsweep.acquire.fit_input import FitInput, order_table
from pitchsweep.acquire.spot_places import (
    StepPlace,
    places_of,
    rejected_of,
    saturation_warnings,
)
from pitchsweep.acquire.step_spots import spot_finder
from pitchsweep.analysis.analysis_errors import InputRefused
from pitchsweep.analysis.frame_image import decode_frame
from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part
from pitchsweep.drivers.devices import Label

LIST = "frames.csv"
REQUIRED = ("file", "step", "stage_deg", "exposure_ms")
OPTIONAL = ("mount_deg", "laser")
DARK = "dark"


@dataclass(frozen=True)
class ListedFrame:
    """One row of ``frames.csv``."""

    line: int
    file: str
    step: int
    stage_deg: float
    mount_deg: float
    laser: str
    exposure_ms: float


def input_from_frames(
    folder: Path, bench: Bench, part: Part, coverage: float, only_laser: str | None
) -> FitInput:
    """The spots of every frame of ``folder``, several exposures of a step together.

    Raises InputRefused with file, line, column and value, or for a file that is no
    grey image of the camera's bits.
    """
    lasers = (only_laser,) if only_laser else tuple(bench.lasers)
    listed = read_frame_list(folder / LIST, lasers)
    darks = [_shot(folder, frame, bench) for frame in listed if frame.laser == DARK]
    steps: dict[int, list[ListedFrame]] = {}
    for frame in listed:
        if frame.laser != DARK:
            _check_one_scene(folder, steps.setdefault(frame.step, []), frame)
    find = spot_finder(bench)
    found = {
        step: find(step, [_shot(folder, frame, bench) for frame in frames], darks)
        for step, frames in sorted(steps.items())
    }
    heads = {step: frames[0] for step, frames in steps.items()}
    places = places_of(
        [
            (spots, StepPlace(step, head.stage_deg, head.mount_deg, head.laser))
            for step, spots in found.items()
            for head in (heads[step],)
        ]
    )
    rejected = [r for step, spots in found.items() for r in rejected_of(spots, step)]
    table = order_table(places, lasers)
    warnings = saturation_warnings(found.values(), "add frames of shorter exposure")
    return FitInput(
        str(folder), table, bench, part, coverage, tuple(rejected), tuple(warnings)
    )


def read_frame_list(path: Path, lasers: tuple[str, ...]) -> list[ListedFrame]:
    """The rows of a ``frames.csv``. Raises InputRefused."""
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        raise InputRefused(
            f"cannot be read ({error})", allowed="a UTF-8 CSV file", file=str(path)
        ) from None
    lines = [
        (number, line)
        for number, line in enumerate(text.splitlines(), 1)
        if line.strip() and not line.lstrip().startswith("#")
    ]
    numbers = [number for number, _ in lines]
    rows = list(csv.reader(line for _, line in lines))
    header = [name.strip() for name in rows[0]] if rows else []
    _check_header(path, header)
    frames = [
        _listed(path, number, dict(zip(header, row, strict=False)), lasers)
        for number, row in zip(numbers[1:], rows[1:], strict=False)
    ]
    if not any(frame.laser != DARK for frame in frames):
        raise InputRefused(
            "no light frame is listed", allowed="at least one row", file=str(path)
        )
    return frames


def _check_header(path: Path, header: list[str]) -> None:
    missing = [name for name in REQUIRED if name not in header]
    unknown = [name for name in header if name not in REQUIRED + OPTIONAL]
    if missing or unknown:
        what = f"column {missing[0]} is missing" if missing else "unknown column"
        raise InputRefused(
            what,
            allowed=f"the header {','.join(('file', 'step', 'stage_deg'))},mount_deg,"
            "laser,exposure_ms",
            file=str(path),
            line=1,
            value=None if missing else unknown[0],
        )


def _listed(
    path: Path, line: int, row: dict[str, str], lasers: tuple[str, ...]
) -> ListedFrame:
    def number(name: str, low: float, high: float, default: str = "") -> float:
        text = row.get(name, "").strip() or default
        try:
            value = float(text)
        except ValueError:
            value = float("nan")
        if not (isfinite(value) and low <= value <= high):
            raise InputRefused(
                "not a number in range",
                allowed=f"{low:g} to {high:g}",
                file=str(path),
                line=line,
                column=name,
                value=text,
            )
        return value

    laser = row.get("laser", "").strip() or (lasers[0] if len(lasers) == 1 else "")
    if laser != DARK and laser not in lasers:
        raise InputRefused(
            "no such laser",
            allowed=f"{', '.join(lasers)}, or '{DARK}' for a dark frame",
            file=str(path),
            line=line,
            column="laser",
            value=laser,
        )
    step = number("step", 0, 2**31 - 1)
    if step != int(step):
        raise InputRefused(
            "not a whole number",
            allowed="a step number",
            file=str(path),
            line=line,
            column="step",
            value=row["step"],
        )
    return ListedFrame(
        line=line,
        file=row.get("file", "").strip(),
        step=int(step),
        stage_deg=number("stage_deg", -3600.0, 3600.0),
        mount_deg=number("mount_deg", -360.0, 360.0, "0"),
        laser=laser,
        exposure_ms=number("exposure_ms", 1e-6, 3.6e6),
    )


def _check_one_scene(
    folder: Path, frames: list[ListedFrame], frame: ListedFrame
) -> None:
    frames.append(frame)
    head = frames[0]
    if (frame.stage_deg, frame.mount_deg, frame.laser) != (
        head.stage_deg,
        head.mount_deg,
        head.laser,
    ):
        raise InputRefused(
            f"step {frame.step} has another angle, mount or laser at line {head.line}",
            allowed="one angle, mount and laser a step",
            file=str(folder / LIST),
            line=frame.line,
        )


def _shot(folder: Path, frame: ListedFrame, bench: Bench) -> Shot:
    path = folder / frame.file
    try:
        content = path.read_bytes()
    except OSError as error:
        raise InputRefused(
            f"cannot be read ({error.strerror or error})",
            allowed="a PNG or TIFF file beside frames.csv",
            file=str(folder / LIST),
            line=frame.line,
            column="file",
            value=frame.file,
        ) from None
    image = decode_frame(content, name=str(path), bits=bench.camera.bits)
    wanted = (bench.camera.height_px, bench.camera.width_px)
    if image.shape != wanted:
        raise InputRefused(
            f"the frame has {image.shape[1]} x {image.shape[0]} pixels",
            allowed=f"the bench's camera: {wanted[1]} x {wanted[0]}",
            file=str(path),
        )
    label = Label(0, frame.laser, 0, frame.step, 0)
    return Shot(frame.exposure_ms, label, image)
