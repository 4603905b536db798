"""A still image's bytes -> pixels, and what it says of its own exposure (pure).

Only lossless files count: PNG (ISO/IEC 15948) and TIFF 6.0. What the camera writes
into them after the Exif standard (CIPA DC-008) is taken at its word: ExposureTime (tag
33434) and ExposureMode (41986: 0 automatic, 1 manual, 2 automatic bracket), in a
TIFF's own directory or a PNG's eXIf chunk.
"""

import struct
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pitchsweep.drivers.driver_errors import AnsweredNonsense

PNG = b"\x89PNG\r\n\x1a\n"
TIFF = (b"II*\0", b"MM\0*")
EXIF_IFD, EXPOSURE_TIME, EXPOSURE_MODE = 34665, 33434, 41986
MODES = {0: "automatic", 1: "manual", 2: "automatic bracket"}
_SIZES = {3: 2, 4: 4, 5: 8}
MOST_ENTRIES = 512


@dataclass(frozen=True)
class ExposureSaid:
    """What the file says; None where it says nothing."""

    exposure_ms: float | None = None
    mode: str | None = None


def decode_still(content: bytes) -> NDArray[Any]:
    """The pixels of a PNG or TIFF. Raises AnsweredNonsense for anything else."""
    if not content.startswith((PNG, *TIFF)):
        what = "a lossy JPEG" if content.startswith(b"\xff\xd8") else "no PNG or TIFF"
        raise AnsweredNonsense("camera", content[:16], f"{what}; ask it for PNG, TIFF")
    import cv2

    from pitchsweep.analysis.frame_image import png_is_whole

    if content.startswith(PNG) and not png_is_whole(content):
        raise AnsweredNonsense("camera", content[:16], "an image that cannot be read")
    try:
        image = cv2.imdecode(np.frombuffer(content, np.uint8), cv2.IMREAD_UNCHANGED)
    except cv2.error:
        image = None
    if image is None:
        raise AnsweredNonsense("camera", content[:16], "an image that cannot be read")
    return np.asarray(image)


def exposure_said(content: bytes) -> ExposureSaid:
    """What a PNG or TIFF says of its exposure; nothing where it cannot be read."""
    block = content if content.startswith(TIFF) else _exif_chunk(content)
    try:
        return _from_tiff(block)
    except (struct.error, ValueError, ZeroDivisionError):
        return ExposureSaid()


def _exif_chunk(content: bytes) -> bytes:
    at = len(PNG)
    while at + 8 <= len(content):
        length, kind = struct.unpack_from(">I4s", content, at)
        if kind == b"eXIf":
            return content[at + 8 : at + 8 + int(length)]
        at += 12 + int(length)
    return b""


def _from_tiff(block: bytes) -> ExposureSaid:
    if not block.startswith(TIFF):
        return ExposureSaid()
    order = "<" if block.startswith(b"II") else ">"
    (first,) = struct.unpack_from(f"{order}I", block, 4)
    found = dict(_entries(block, order, first))
    if EXIF_IFD in found:
        found.update(_entries(block, order, int(found[EXIF_IFD])))
    seconds = found.get(EXPOSURE_TIME)
    mode = found.get(EXPOSURE_MODE)
    return ExposureSaid(
        exposure_ms=None if seconds is None else 1000.0 * seconds,
        mode=None if mode is None else MODES.get(int(mode), f"mode {int(mode)}"),
    )


def _entries(block: bytes, order: str, at: int) -> Iterator[tuple[int, float]]:
    """(tag, first value) of the numbers in one directory."""
    (count,) = struct.unpack_from(f"{order}H", block, at)
    for number in range(min(count, MOST_ENTRIES)):
        entry = at + 2 + 12 * number
        tag, kind, values = struct.unpack_from(f"{order}HHI", block, entry)
        if kind not in _SIZES or not values:
            continue
        place = entry + 8
        if _SIZES[kind] * values > 4:
            (place,) = struct.unpack_from(f"{order}I", block, place)
        if kind == 5:
            above, below = struct.unpack_from(f"{order}II", block, place)
            yield tag, above / below
        else:
            letter = "H" if kind == 3 else "I"
            yield tag, struct.unpack_from(f"{order}{letter}", block, place)[0]
