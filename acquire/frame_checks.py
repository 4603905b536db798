"""Is this frame what was asked for? Cheap looks before it is believed (pure)."""

import numpy as np

from pitchsweep.acquire.bench_devices import Frame
from pitchsweep.configs.bench_model import Camera
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.driver_errors import DeviceRefused

EVERY = 8
"""Rows and columns between the pixels that are looked at."""
WHITE_SHARE = 0.9


class FrameChecks:
    """Looks at one frame after the other; remembers a thinned copy of the last.

    The same exposure taken again may well give the same frame (a twin's noise is
    keyed by it), so identity is held against another exposure only.
    """

    def __init__(self, camera: Camera) -> None:
        self._camera = camera
        self._last: tuple[Label, Frame] | None = None

    def check(self, frame: Frame, label: Label) -> None:
        """Raises DeviceRefused (wrong-frame, black, white, identical)."""
        camera = self._camera
        shape = (camera.height_px, camera.width_px)
        if frame.shape != shape:
            rows, columns = frame.shape
            self._refuse(
                "wrong-frame",
                f"{columns} x {rows} pixels, the bench file says "
                f"{camera.width_px} x {camera.height_px}",
            )
        highest = int(frame.max())
        full = 2**camera.bits - 1
        if highest > full:
            self._refuse(
                "wrong-frame",
                f"{highest} digital numbers; {camera.bits} bits end at {full}",
            )
        thin = frame[::EVERY, ::EVERY].copy()
        last, self._last = self._last, (label, thin)
        if highest == 0 or int(thin.max()) == int(thin.min()) < full:
            self._refuse("black", f"every pixel reads {highest}")
        if float(np.mean(thin >= full)) > WHITE_SHARE:
            self._refuse("white", "nearly every pixel is saturated")
        if last is not None and last[0] != label and np.array_equal(last[1], thin):
            self._refuse("identical", "the frame is the one before, pixel by pixel")

    def _refuse(self, reason: str, detail: str) -> None:
        raise DeviceRefused("camera", reason, detail)  # type: ignore[arg-type]
