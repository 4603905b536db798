"""A camera's noise from pairs of frames on disk. This module acts (disk).

The folder holds ``pairs.csv`` with the columns ``file,exposure_ms,light``: two frames
of an even, steady scene at each of several exposures (``light`` is ``on``) and two dark
frames (``off``), taken one right after the other.
"""

import csv
import json
from collections.abc import Iterator
from dataclasses import dataclass
from math import isfinite, isnan
from pathlib import Path

from pitchsweep.analysis.analysis_errors import InputRefused
from pitchsweep.analysis.frame_image import decode_frame
from pitchsweep.analysis.photon_transfer import Frame, PhotonTransfer, photon_transfer
from pitchsweep.configs.bench_model import Camera

LIST = "pairs.csv"
COLUMNS = ("file", "exposure_ms", "light")


@dataclass(frozen=True)
class PairRow:
    """One row of ``pairs.csv``."""

    line: int
    file: str
    exposure_ms: float
    lit: bool


def calibrate_camera(folder: Path, camera: Camera) -> PhotonTransfer:
    """What the frame pairs in ``folder`` say of the bench's camera.

    Raises InputRefused with file, line, column and value, for frames that are no grey
    images of the camera's bits, and for pairs that do not tell the gain.
    """
    path = folder / LIST
    lit: dict[float, list[PairRow]] = {}
    dark: dict[float, list[PairRow]] = {}
    for row in _rows(path):
        (lit if row.lit else dark).setdefault(row.exposure_ms, []).append(row)
    if len(dark) != 1:
        raise InputRefused(
            f"dark frames of {len(dark)} exposures are listed",
            allowed="two dark frames (light off) of one exposure",
            file=str(path),
        )
    exposures = sorted(lit)
    pairs = [_pair(folder, lit[exposure], camera) for exposure in exposures]
    (dark_rows,) = dark.values()
    try:
        return photon_transfer(
            pairs, _pair(folder, dark_rows, camera), exposures_ms=exposures
        )
    except ValueError as error:
        raise InputRefused(
            str(error),
            allowed="an even scene, two frames each of three exposures or more, the"
            " brightest saturated, the others well below",
            file=str(path),
        ) from None


def calibration_json(seen: PhotonTransfer) -> str:
    """The calibration as JSON; keys carry units as in a bench file."""
    whole = {
        "gain_dn_per_e": seen.gain_dn_per_e,
        "u_gain_dn_per_e": seen.u_gain,
        "read_noise_e": seen.dark_noise_e,
        "black_level_dn": seen.dark_level_dn,
        "saturation_dn": seen.saturation_dn,
        "linearity": None if isnan(seen.linearity) else seen.linearity,
    }
    return json.dumps(whole, indent=2) + "\n"


def calibration_lines(seen: PhotonTransfer, camera: Camera) -> list[str]:
    """The calibration in words, then the lines for the bench file's camera block."""
    linear = "not known (too few exposures)"
    if not isnan(seen.linearity):
        linear = f"within {100.0 * seen.linearity:.2g} % of saturation"
    return [
        f"Gain        {seen.gain_dn_per_e:.4g} DN per electron,"
        f" u = {seen.u_gain:.2g} (bench file {camera.gain_dn_per_e:g})",
        f"Read noise  {seen.dark_noise_e:.3g} electrons"
        f" (bench file {camera.read_noise_e:g})",
        f"Dark level  {seen.dark_level_dn:.2f} DN"
        f" (bench file {camera.black_level_dn:g})",
        f"Saturation  noise is largest at {seen.saturation_dn:.0f} DN"
        f" of {2**camera.bits - 1}",
        f"Straight    {linear}",
        "For the bench file, in its block camera:",
        f"  gain_dn_per_e: {seen.gain_dn_per_e:.4g}",
        f"  read_noise_e: {seen.dark_noise_e:.3g}",
        f"  black_level_dn: {seen.dark_level_dn:.2f}",
    ]


def _rows(path: Path) -> Iterator[PairRow]:
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        why = getattr(error, "strerror", None) or str(error)
        raise InputRefused(
            f"cannot be read ({why})",
            allowed=f"a folder with frames and {LIST}: {','.join(COLUMNS)}",
            file=str(path),
        ) from None
    reader = csv.DictReader(text.splitlines(), skipinitialspace=True)
    if tuple(reader.fieldnames or ()) != COLUMNS:
        raise InputRefused(
            "another header",
            allowed=",".join(COLUMNS),
            file=str(path),
            line=1,
            value=",".join(reader.fieldnames or ()),
        )
    for row in reader:
        yield _row(path, reader.line_num, row)


def _row(path: Path, line: int, row: dict[str, str | None]) -> PairRow:
    def refuse(column: str, allowed: str) -> InputRefused:
        return InputRefused(
            "not allowed here",
            allowed=allowed,
            file=str(path),
            line=line,
            column=column,
            value=row[column] or "",
        )

    try:
        exposure_ms = float(row["exposure_ms"] or "")
    except ValueError:
        exposure_ms = float("nan")
    if not (isfinite(exposure_ms) and 0.0 < exposure_ms <= 3.6e6):
        raise refuse("exposure_ms", "milliseconds, above 0 up to 3.6e6")
    if row["light"] not in ("on", "off"):
        raise refuse("light", "on, or off for a dark frame")
    if not row["file"]:
        raise refuse("file", "the name of a PNG or TIFF file beside it")
    return PairRow(line, row["file"], exposure_ms, row["light"] == "on")


def _pair(folder: Path, rows: list[PairRow], camera: Camera) -> tuple[Frame, Frame]:
    if len(rows) != 2:
        light = "on" if rows[0].lit else "off"
        raise InputRefused(
            f"{len(rows)} frames of {rows[0].exposure_ms:g} ms, light {light}",
            allowed="two of each exposure",
            file=str(folder / LIST),
            line=rows[-1].line,
        )
    first, second = (_frame(folder, row, camera) for row in rows)
    return first, second


def _frame(folder: Path, row: PairRow, camera: Camera) -> Frame:
    path = folder / row.file
    try:
        content = path.read_bytes()
    except OSError as error:
        raise InputRefused(
            f"cannot be read ({error.strerror or error})",
            allowed=f"a PNG or TIFF file beside {LIST}",
            file=str(folder / LIST),
            line=row.line,
            column="file",
            value=row.file,
        ) from None
    frame = decode_frame(content, name=str(path), bits=camera.bits)
    if frame.shape != (camera.height_px, camera.width_px):
        raise InputRefused(
            f"the frame has {frame.shape[1]} x {frame.shape[0]} pixels",
            allowed=f"the bench's camera: {camera.width_px} x {camera.height_px}",
            file=str(path),
        )
    return frame
