"""The twin's camera over the network; frames travel by file (acts)."""

import zlib
from dataclasses import asdict
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pitchsweep.drivers.devices import FrameToCome, Label
from pitchsweep.drivers.driver_errors import (
    AnsweredNonsense,
    DeviceRefused,
    LineBroke,
    NoAnswerInTime,
)
from pitchsweep.drivers.twin_link import ANSWER_TIMEOUT_S, TwinAddress, TwinLink

MOST_INDICES = 10
GONE = "no camera"


class TwinCameraClient:
    """A Camera. An exposure takes bench time; its frame is checked and removed.

    A camera that is gone is looked for under the next indices at the next exposure.
    """

    def __init__(self, address: TwinAddress) -> None:
        self._link = TwinLink(address)
        self._frames = TwinLink(address)
        self._index: int | None = 0

    def identify(self) -> dict[str, Any]:
        """``camera``, ``width_px``, ``height_px``, ``bits`` as the camera states."""
        if self._index is None:
            self._find()
        return dict(self._link.ask("camera", index=self._index))

    def expose(self, exposure_ms: float, label: Label) -> NDArray[np.uint16]:
        """The frame (rows, columns) exposed from now on, after readout.

        Raises what ``begin`` and its frame raise.
        """
        return self.begin(exposure_ms, label)()

    def begin(self, exposure_ms: float, label: Label) -> FrameToCome:
        """Exposes from now on; returns when that is over and the light may go.

        What is returned waits for the readout and gives the frame (rows, columns); any
        thread may call it, once. Raises DeviceRefused or LineBroke when the camera is
        gone; the frame raises DeviceRefused (stale: begun before it was asked for),
        NoAnswerInTime when none comes, AnsweredNonsense where its file is not what the
        camera announced.
        """
        if self._index is None:
            self._find()
        timeout_s = exposure_ms * 1e-3 + ANSWER_TIMEOUT_S
        try:
            said = self._link.ask(
                "begin",
                exposure_ms=exposure_ms,
                label=asdict(label),
                index=self._index,
                timeout_s=timeout_s,
            )
        except DeviceRefused as error:
            if GONE not in error.detail:
                raise DeviceRefused("camera", "declined", error.detail) from None
            self._index = None
            raise LineBroke("camera", "exposing", "it is gone") from None
        return lambda: self._fetch(int(said["exposure"]), float(said["asked_s"]))

    def _fetch(self, exposure: int, asked_s: float) -> NDArray[np.uint16]:
        said = self._frames.ask("fetch", exposure=exposure)
        if not said["file"]:
            raise NoAnswerInTime("camera", "expose", ANSWER_TIMEOUT_S)
        frame = _take_frame(
            Path(said["file"]), (said["rows"], said["columns"]), said["crc32"]
        )
        if said["began_s"] < asked_s:
            late_s = asked_s - said["began_s"]
            detail = f"the frame was begun {late_s:.3f} s before it was asked for"
            raise DeviceRefused("camera", "stale", detail)
        return frame

    def close(self) -> None:
        """Closes the connections; the camera goes on."""
        self._link.close()
        self._frames.close()

    def _find(self) -> None:
        for index in range(MOST_INDICES):
            try:
                self._link.ask("camera", index=index)
            except DeviceRefused:
                continue
            self._index = index
            return
        raise LineBroke("camera", "looking for it", "no camera at any index")


def _take_frame(path: Path, shape: tuple[int, int], crc32: int) -> NDArray[np.uint16]:
    try:
        data = path.read_bytes()
        path.unlink()
    except OSError as error:
        raise LineBroke("camera", f"fetching {path}", error) from error
    if len(data) != 2 * shape[0] * shape[1] or zlib.crc32(data) != crc32:
        why = f"{len(data)} bytes are not the announced frame {shape}"
        raise AnsweredNonsense("camera", data[:16], why)
    frame = np.frombuffer(data, dtype="<u2").reshape(shape)
    return frame.astype(np.uint16, copy=False)
