"""Keeps frames: lossless, 16 bit, durable, with checksums. Acts (disk).

Small frames are PNG. Coding a large one would take longer than a step, so it is kept
as a plain TIFF; whoever wants the space back may recode it afterwards.
"""

import errno
import hashlib
from dataclasses import dataclass
from pathlib import Path

import cv2
import numpy as np
from numpy.typing import NDArray

from pitchsweep.acquire.acquire_errors import StorageFailed
from pitchsweep.acquire.durable_files import write_durably

Frame = NDArray[np.uint16]

LARGE_PX = 2_000_000
PNG: tuple[str, list[int]] = (".png", [cv2.IMWRITE_PNG_COMPRESSION, 1])
TIFF: tuple[str, list[int]] = (".tif", [cv2.IMWRITE_TIFF_COMPRESSION, 1])

NO_SPACE = (errno.ENOSPC, errno.EDQUOT)


@dataclass(frozen=True)
class StoredFrame:
    """A frame that is on disk: its name relative to the run folder, its SHA-256."""

    file: str
    sha256: str


class FrameStore:
    """The folder ``frames`` of a run; files are named by their number alone."""

    def __init__(self, run: Path) -> None:
        self._run = run
        (run / "frames").mkdir(exist_ok=True)

    def keep(self, number: int, frame: Frame) -> StoredFrame:
        """Stores a (rows, columns) uint16 frame under ``number`` and returns its name.

        It is durable on return. A file of the same number is replaced whole. Raises
        StorageFailed (the errno of the disk stays on ``__cause__``).
        """
        if frame.dtype != np.uint16 or frame.ndim != 2:
            raise ValueError(f"a frame is 2-D uint16, not {frame.dtype} {frame.shape}")
        ending, options = TIFF if frame.size >= LARGE_PX else PNG
        file = f"frames/{number:06d}{ending}"
        path = self._run / file
        coded, data = cv2.imencode(ending, frame, options)
        if not coded:
            raise StorageFailed(path, f"the frame could not be coded as {ending}")
        content = data.data  # not copied: large, and nothing else runs meanwhile
        try:
            write_durably(path, content)
        except OSError as error:
            raise StorageFailed(
                path,
                f"the frame was not kept ({error.strerror or error})",
                "make space on that disk" if error.errno in NO_SPACE else "",
            ) from error
        return StoredFrame(file, hashlib.sha256(content).hexdigest())

    def read(self, file: str, sha256: str) -> Frame:
        """The frame in ``file``, its content checked against ``sha256``.

        Raises StorageFailed naming the file if it is missing, changed or no frame.
        """
        path = self._run / file
        try:
            content = path.read_bytes()
        except OSError as error:
            raise StorageFailed(
                path, f"the frame cannot be read ({error.strerror or error})"
            ) from error
        found = hashlib.sha256(content).hexdigest()
        if found != sha256:
            raise StorageFailed(
                path,
                f"the frame is not what was stored (SHA-256 {found[:12]}..., the "
                f"journal says {sha256[:12]}...)",
                "restore this file from a copy",
            )
        return decode_frame(path, content)


def decode_frame(path: Path, content: bytes) -> Frame:
    """A grey PNG or TIFF of 8 or 16 bit as (rows, columns) uint16 digital numbers.

    ``path`` is only named in messages. Raises StorageFailed for anything else.
    """
    try:
        image = cv2.imdecode(np.frombuffer(content, np.uint8), cv2.IMREAD_UNCHANGED)
    except cv2.error:
        image = None
    if image is None:
        raise StorageFailed(path, "not an image that can be read", "use PNG or TIFF")
    if image.ndim == 3:
        raise StorageFailed(
            path,
            f"a colour image of {image.shape[2]} channels",
            "frames are grey, 8 or 16 bit: save the frames without colour",
        )
    if image.dtype not in (np.uint8, np.uint16):
        raise StorageFailed(
            path, f"pixels of type {image.dtype}", "frames are grey, 8 or 16 bit"
        )
    return np.ascontiguousarray(image, dtype=np.uint16)
