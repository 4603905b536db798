"""A USB video class camera: frames by OpenCV, controls by the kernel (acts).

Such a camera exposes all the time, and some frames always wait in its buffers. A frame
counts only when its time stamp (the kernel's monotonic clock, at the start or the end
of the transfer) is later than the request by a whole exposure, ``drop_frames`` having
been thrown away besides. Where a driver gives no stamps, as many frames as buffers can
hold are thrown away too. Never tried on a real camera.
"""

import os
import re
import time
from collections.abc import Callable
from contextlib import suppress
from dataclasses import dataclass
from typing import Any, Protocol

from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Camera as CameraSettings
from pitchsweep.configs.ports_model import CameraPort
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.driver_errors import (
    DeviceRefused,
    DriverError,
    LineBroke,
    NoAnswerInTime,
)
from pitchsweep.drivers.frame_format import Frame, grey_frame, luminance
from pitchsweep.drivers.quiet_video import quiet_video
from pitchsweep.drivers.video_controls import (
    KernelVideoControls,
    VideoControls,
    set_exposure,
    set_gain,
    switch_automatics_off,
)

FOURCC = {"GREY": "GREY", "Y16": "Y16 ", "YUYV": "YUYV"}
BUFFERS = 4
"""Frames that may wait in a driver that gives no time stamps."""
IN_FLIGHT = 2
"""Frames more that may still carry the exposure before."""
STAMP_AHEAD_S = 0.1
"""A stamp further ahead of our clock than this is of another clock."""


class Capture(Protocol):
    """An open stream of frames, shaped like OpenCV's."""

    def grab(self) -> bool: ...

    def retrieve(self) -> tuple[bool, Any]: ...

    def stamp_s(self) -> float: ...

    def format(self) -> tuple[str, int, int]: ...

    def release(self) -> None: ...


OpenCapture = Callable[[CameraPort, CameraSettings], Capture]
OpenControls = Callable[[str], VideoControls]


@dataclass(frozen=True)
class _Opened:
    capture: Capture
    controls: VideoControls


class UsbCameraClient:
    """A Camera. One that went away is opened and checked anew at the next exposure."""

    def __init__(
        self,
        port: CameraPort,
        camera: CameraSettings,
        *,
        open_capture: OpenCapture | None = None,
        open_controls: OpenControls = KernelVideoControls,
        now: Callable[[], float] = time.monotonic,
    ) -> None:
        self._port = port
        self._camera = camera
        self._open_capture = open_capture or open_video_device
        self._open_controls = open_controls
        self._now = now
        self._opened: _Opened | None = None
        self._exposure_ms: float | None = None

    def identify(self) -> dict[str, Any]:
        """``camera``, ``width_px``, ``height_px``, ``bits`` as the device states them.

        Opens it: raises LineBroke, DeviceRefused (automatic, declined, wrong-frame).
        """
        _, width, height = self._device().capture.format()
        bits = self._camera.bits
        name = f"video device {self._port.address}"
        return {"camera": name, "width_px": width, "height_px": height, "bits": bits}

    def expose(self, exposure_ms: float, label: Label) -> Frame:
        """The first frame exposed wholly after this call.

        Raises NoAnswerInTime when none comes, LineBroke when the device is gone, and
        what ``identify`` raises.
        """
        device = self._device()
        # Read back every time: another program may have changed what is shared.
        switch_automatics_off(device.controls)
        set_exposure(device.controls, exposure_ms)
        anew, self._exposure_ms = self._exposure_ms != exposure_ms, exposure_ms
        drop = self._port.drop_frames + (IN_FLIGHT if anew else 0)
        try:
            self._grab_new(device.capture, exposure_ms * 1e-3, drop)
        except LineBroke:
            self.close()
            raise
        done, image = device.capture.retrieve()
        if not done or image is None:
            raise NoAnswerInTime("camera", "expose", self._port.answers_within_s)
        if self._port.pixel_format == "YUYV":
            image = luminance(image)
        return grey_frame(image, bits=self._camera.bits)

    def close(self) -> None:
        """Gives the device back."""
        opened, self._opened, self._exposure_ms = self._opened, None, None
        if opened is not None:
            opened.capture.release()
            with suppress(OSError):
                opened.controls.close()

    def _device(self) -> _Opened:
        if self._opened is None:
            self._opened = self._open()
        return self._opened

    def _open(self) -> _Opened:
        controls = self._open_controls(self._port.address)
        capture: Capture | None = None
        try:
            capture = self._open_capture(self._port, self._camera)
            self._check_format(capture.format())
            switch_automatics_off(controls)
            if self._port.gain is not None:
                set_gain(controls, self._port.gain)
        except DriverError:
            if capture is not None:
                capture.release()
            controls.close()
            raise
        return _Opened(capture, controls)

    def _check_format(self, found: tuple[str, int, int]) -> None:
        name, width, height = found
        camera, wanted = self._camera, FOURCC[self._port.pixel_format]
        if name != wanted:
            other = name.strip("\0 ") or "another format"
            detail = f"it gives {other}, not {wanted.strip()}"
            raise DeviceRefused("camera", "wrong-frame", detail)
        if (width, height) != (camera.width_px, camera.height_px):
            raise DeviceRefused(
                "camera",
                "wrong-frame",
                f"it gives {width} x {height} pixels, the bench file says "
                f"{camera.width_px} x {camera.height_px}",
            )

    def _grab_new(self, capture: Capture, exposure_s: float, drop: int) -> None:
        asked_s = self._now()
        until_s = asked_s + exposure_s + self._port.answers_within_s
        grabbed, last_stamp_s = 0, float("nan")
        while True:
            if not capture.grab():
                self._refuse_gone(until_s - asked_s)
            grabbed, stamp_s = grabbed + 1, capture.stamp_s()
            now_s = self._now()
            stamped = 0.0 < stamp_s <= now_s + STAMP_AHEAD_S and stamp_s != last_stamp_s
            last_stamp_s = stamp_s
            least = drop + (0 if stamped else BUFFERS)
            seen_s = stamp_s if stamped else now_s
            if grabbed > least and seen_s >= asked_s + exposure_s:
                return
            if now_s > until_s:
                raise NoAnswerInTime("camera", "expose", until_s - asked_s)

    def _refuse_gone(self, waited_s: float) -> None:
        if not os.path.exists(self._port.address):
            raise LineBroke("camera", "exposing", f"{self._port.address} is gone")
        raise NoAnswerInTime("camera", "expose", waited_s)


class _OpenCvCapture:
    """OpenCV's capture through V4L2, giving pixels as they come."""

    def __init__(self, capture: Any) -> None:
        self._capture = capture

    def grab(self) -> bool:
        return bool(self._capture.grab())

    def retrieve(self) -> tuple[bool, NDArray[Any] | None]:
        done, image = self._capture.retrieve()
        return bool(done), image

    def stamp_s(self) -> float:
        import cv2

        return float(self._capture.get(cv2.CAP_PROP_POS_MSEC)) * 1e-3

    def format(self) -> tuple[str, int, int]:
        import cv2

        code = int(self._capture.get(cv2.CAP_PROP_FOURCC))
        name = "".join(chr((code >> 8 * i) & 0xFF) for i in range(4))
        width = int(self._capture.get(cv2.CAP_PROP_FRAME_WIDTH))
        return name, width, int(self._capture.get(cv2.CAP_PROP_FRAME_HEIGHT))

    def release(self) -> None:
        self._capture.release()


def open_video_device(port: CameraPort, camera: CameraSettings) -> Capture:
    """The device of ``port``, asked for its format, size and few buffers."""
    import cv2

    quiet_video()
    real = os.path.realpath(port.address)
    number = re.fullmatch(r"/dev/video([0-9]+)", real)
    place: Any = int(number[1]) if number else real
    capture = cv2.VideoCapture(place, cv2.CAP_V4L2)
    if not capture.isOpened():
        capture.release()
        why = f"{port.address} gives no video"
        raise LineBroke("camera", "opening", why)
    # Format first: a change of it resets what was set before.
    capture.set(cv2.CAP_PROP_CONVERT_RGB, 0)
    wanted = cv2.VideoWriter.fourcc(*FOURCC[port.pixel_format])
    capture.set(cv2.CAP_PROP_FOURCC, wanted)
    capture.set(cv2.CAP_PROP_FRAME_WIDTH, camera.width_px)
    capture.set(cv2.CAP_PROP_FRAME_HEIGHT, camera.height_px)
    capture.set(cv2.CAP_PROP_BUFFERSIZE, 1)
    return _OpenCvCapture(capture)
