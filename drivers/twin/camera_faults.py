"""What a failing camera hands over instead of the frame it was asked for."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Camera

DEPTH_SHIFT = 4


class NoFrame(Exception):
    """Raised when an exposure ends and no frame comes."""


@dataclass(frozen=True)
class Exposed:
    """A frame (rows, columns) in digital numbers and the bench time it began at.

    It may be handed over from the bench time ``ready_s`` on.
    """

    frame: NDArray[np.uint16]
    began_s: float
    ready_s: float = 0.0


class CameraFaults:
    """One camera; ``index`` is where the system finds it, which may change."""

    def __init__(self, camera: Camera) -> None:
        self.index = 0
        self._full = 2**camera.bits - 1
        self._last: Exposed | None = None

    def before(self, does: str) -> None:
        """Raises ValueError where the exposure does not even begin."""
        if does == "gone":
            self.index += 1
        if does == "refused":
            raise ValueError("the camera refuses this exposure: fault on schedule")

    def after(self, does: str, good: Exposed) -> Exposed:
        """What is handed over for the frame ``good``."""
        last, self._last = self._last or good, good
        frame = good.frame
        if does == "stale":
            return last
        if does == "identical":
            return replace(good, frame=last.frame)
        if does == "wrong-size":
            return replace(good, frame=frame[: frame.shape[0] // 2])
        if does == "wrong-depth":
            return replace(good, frame=(frame << DEPTH_SHIFT).astype(np.uint16))
        if does == "black":
            return replace(good, frame=np.zeros_like(frame))
        if does == "white":
            return replace(good, frame=np.full_like(frame, self._full))
        return good
