"""Takes exposures; frames are read out and checked behind them. Acts (camera, thread).

Where the camera says when its exposure is over, light and stage need not wait for the
readout: a thread of its own fetches the frame and looks at it meanwhile.
"""

from collections.abc import Sequence
from concurrent.futures import Future, ThreadPoolExecutor
from typing import Self

from pitchsweep.acquire.bench_devices import Frame, Shot
from pitchsweep.acquire.frame_checks import FrameChecks
from pitchsweep.configs.bench_model import Camera as CameraSettings
from pitchsweep.drivers.devices import Camera, FrameToCome, Label, ReadsOutLater

ShotToCome = Future[Shot]
"""``result`` waits for the frame; raises DriverError for one that will not do."""


class Exposures:
    """One camera; use it in a ``with`` block. Frames are checked in their order."""

    def __init__(self, camera: Camera, settings: CameraSettings) -> None:
        self._camera = camera
        self._checks = FrameChecks(settings)
        self._reader = ThreadPoolExecutor(1, "frames")

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        # Not waited for: who holds a shot waits for it.
        self._reader.shutdown(wait=False)

    def take(self, exposure_ms: float, label: Label) -> ShotToCome:
        """Exposes from now on; returns when that is over. Raises DriverError."""
        if isinstance(self._camera, ReadsOutLater):
            to_come = self._camera.begin(exposure_ms, label)
            return self._reader.submit(self._read, to_come, exposure_ms, label)
        frame = self._camera.expose(exposure_ms, label)
        return come(self._checked(frame, exposure_ms, label))

    def _read(self, to_come: FrameToCome, exposure_ms: float, label: Label) -> Shot:
        return self._checked(to_come(), exposure_ms, label)

    def _checked(self, frame: Frame, exposure_ms: float, label: Label) -> Shot:
        self._checks.check(frame, label)
        return Shot(exposure_ms, label, frame)


def come(shot: Shot) -> ShotToCome:
    """A shot that is there already."""
    future: ShotToCome = Future()
    future.set_result(shot)
    return future


def wait_for(shots: Sequence[ShotToCome]) -> tuple[Shot, ...]:
    """The shots, all of them there. Raises what went wrong with the first that is not.

    Raises DriverError.
    """
    return tuple(shot.result() for shot in shots)
