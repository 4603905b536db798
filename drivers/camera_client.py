"""The twin's camera over the network; frames travel by file (acts)."""

import zlib
from dataclasses import asdict
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.driver_errors import AnsweredNonsense, LineBroke
from pitchsweep.drivers.twin_link import ANSWER_TIMEOUT_S, TwinAddress, TwinLink


class TwinCameraClient:
    """A Camera. An exposure takes bench time; its frame is checked and removed."""

    def __init__(self, address: TwinAddress) -> None:
        self._link = TwinLink(address)

    def identify(self) -> dict[str, Any]:
        """``camera``, ``width_px``, ``height_px``, ``bits`` as the camera states."""
        return dict(self._link.ask("camera"))

    def expose(self, exposure_ms: float, label: Label) -> NDArray[np.uint16]:
        """The frame (rows, columns) exposed from now on, after readout.

        Raises DeviceRefused, LineBroke, NoAnswerInTime, or AnsweredNonsense where the
        frame's file is not what the camera announced.
        """
        timeout_s = exposure_ms * 1e-3 + ANSWER_TIMEOUT_S
        said = self._link.ask(
            "expose", exposure_ms=exposure_ms, label=asdict(label), timeout_s=timeout_s
        )
        return _take_frame(
            Path(said["file"]), (said["rows"], said["columns"]), said["crc32"]
        )

    def close(self) -> None:
        """Closes the connection; the camera goes on."""
        self._link.close()


def _take_frame(path: Path, shape: tuple[int, int], crc32: int) -> NDArray[np.uint16]:
    try:
        data = path.read_bytes()
        path.unlink()
    except OSError as error:
        raise LineBroke(str(path), "fetching a frame", error) from error
    if len(data) != 2 * shape[0] * shape[1] or zlib.crc32(data) != crc32:
        why = f"{len(data)} bytes are not the announced frame {shape}"
        raise AnsweredNonsense("camera", data[:16], why)
    return np.frombuffer(data, dtype="<u2").astype(np.uint16).reshape(shape)
