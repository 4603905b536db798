"""Image bytes to a frame: grey, whole numbers, in the camera's own bits (pure)."""

import zlib
from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

from pitchsweep.analysis.analysis_errors import InputRefused

_PNG = b"\x89PNG\r\n\x1a\n"
_ALLOWED = "a grey PNG, TIFF or PGM image of 8 or 16 bits"


def decode_frame(
    content: bytes, *, name: str, bits: int | None = None
) -> NDArray[np.uint16]:
    """The frame (rows, columns) in the image file ``content``.

    ``name`` is shown in refusals. With ``bits`` (the camera's), values that were stored
    in the high bits of a 16-bit word are moved down, see ``in_low_bits``. A colour
    image is taken only where its channels are equal. Raises InputRefused.
    """
    if content.startswith(_PNG) and not png_is_whole(content):
        raise InputRefused(
            "the image is damaged or was not saved to its end",
            allowed=_ALLOWED,
            file=name,
        )
    try:
        raw = np.frombuffer(content, dtype=np.uint8)
        image = cv2.imdecode(raw, cv2.IMREAD_UNCHANGED) if raw.size else None
    except cv2.error:
        image = None
    if image is None:
        raise InputRefused(
            "this is no image that can be read", allowed=_ALLOWED, file=name
        )
    if image.dtype not in (np.uint8, np.uint16):
        raise InputRefused(f"pixels are {image.dtype}", allowed=_ALLOWED, file=name)
    if image.ndim == 3:
        image = _grey(image, name)
    frame = np.ascontiguousarray(image, dtype=np.uint16)
    if bits is None or image.dtype == np.uint8:
        return frame
    return in_low_bits(frame, bits=bits, name=name)


def png_is_whole(content: bytes) -> bool:
    """Whether every chunk up to IEND is there and sound (PNG, W3C, section 5.3).

    Decoders print complaints of their own on stderr instead, and some then go on.
    """
    place = len(_PNG)
    while place + 12 <= len(content):
        size = int.from_bytes(content[place : place + 4], "big")
        kind_and_data = memoryview(content)[place + 4 : place + 8 + size]
        stated = content[place + 8 + size : place + 12 + size]
        if zlib.crc32(kind_and_data).to_bytes(4, "big") != stated:
            return False
        if bytes(kind_and_data[:4]) == b"IEND":
            return True
        place += 12 + size
    return False


def _grey(image: NDArray[Any], name: str) -> NDArray[Any]:
    """The one channel of an image whose colour channels are equal."""
    colours = image[..., : min(image.shape[2], 3)]
    if (colours != colours[..., :1]).any():
        raise InputRefused("the image has colours", allowed=_ALLOWED, file=name)
    return image[..., 0]


def in_low_bits(
    frame: NDArray[np.uint16], *, bits: int, name: str
) -> NDArray[np.uint16]:
    """``frame`` with values of a ``bits``-bit camera in the low bits of each word.

    Many cameras store 10 or 12 bits in the high bits: the low 16 - bits bits are then
    zero. Frames where that holds for all but one pixel in ten thousand (some cameras
    write their data into the first pixels) are shifted right; not those of one value
    that may be meant as it is. Raises InputRefused where values are too large and not
    so aligned.
    """
    spare = 2 ** (16 - bits) - 1
    brightest = int(frame.max(initial=0))
    odd = np.count_nonzero(frame & np.uint16(spare)) if spare else frame.size
    aligned = odd <= 1e-4 * frame.size
    varied = brightest > int(frame.min(initial=brightest))
    if aligned and (varied or brightest >= 2**bits):
        return frame >> np.uint16(16 - bits)
    if brightest < 2**bits:
        return frame
    raise InputRefused(
        f"the brightest pixel is {brightest}",
        allowed=f"0 to {2**bits - 1} for the bench's {bits}-bit camera, in the low "
        "or in the high bits of each word",
        file=name,
    )
