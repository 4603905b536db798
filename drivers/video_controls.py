"""Controls of a video device through the Linux kernel's V4L2 interface (acts).

Numbers and layouts are those of linux/videodev2.h and linux/v4l2-controls.h. A USB
video class device shows its exposure and gain under them; absolute exposure counts in
units of 100 microseconds. ``fcntl`` is imported inside functions: Linux alone has this.
"""

import os
import struct
from dataclasses import dataclass
from typing import Protocol

from pitchsweep.drivers.driver_errors import DeviceRefused, LineBroke

EXPOSURE_AUTO, EXPOSURE_ABSOLUTE = 0x009A0901, 0x009A0902
EXPOSURE_AUTO_PRIORITY, FOCUS_AUTO = 0x009A0903, 0x009A090C
AUTO_WHITE_BALANCE, AUTOGAIN, GAIN = 0x0098090C, 0x00980912, 0x00980913
EXPOSURE_MANUAL = 1
EXPOSURE_UNIT_MS = 0.1

QUERYCTRL, G_CTRL, S_CTRL = 0xC0445624, 0xC008561B, 0xC008561C
QUERY = struct.Struct("=II32siiiiI8x")
CONTROL = struct.Struct("=Ii")
DISABLED, READ_ONLY = 0x0001, 0x0004

SWITCHED_OFF = (
    ("exposure", EXPOSURE_AUTO, EXPOSURE_MANUAL),
    ("frame rate after exposure", EXPOSURE_AUTO_PRIORITY, 0),
    ("gain", AUTOGAIN, 0),
    ("white balance", AUTO_WHITE_BALANCE, 0),
    ("focus", FOCUS_AUTO, 0),
)
"""What adapts itself to the picture: its name, control and the value that stops it."""

EXPOSURE_WITHIN = 0.02


@dataclass(frozen=True)
class Range:
    """What a control takes: whole numbers from ``least`` to ``most`` by ``step``."""

    least: int
    most: int
    step: int


class VideoControls(Protocol):
    """Controls of one device; ``range_of`` is None for one that it does not have."""

    def range_of(self, control: int) -> Range | None: ...

    def read(self, control: int) -> int: ...

    def write(self, control: int, value: int) -> None: ...

    def close(self) -> None: ...


class KernelVideoControls:
    """The controls of the device at ``path``. Raises LineBroke where it cannot open."""

    def __init__(self, path: str) -> None:
        self._path = path
        try:
            self._file = os.open(path, os.O_RDWR | os.O_NONBLOCK)
        except OSError as error:
            why = f"{path}: {error.strerror}"
            raise LineBroke("camera", "opening", why) from error
        try:
            self.range_of(GAIN)
        except LineBroke:
            os.close(self._file)
            raise

    def range_of(self, control: int) -> Range | None:
        """The range, or None where the device has no such control."""
        asked = bytearray(QUERY.pack(control, 0, b"", 0, 0, 0, 0, 0))
        if not self._ask(QUERYCTRL, asked):
            return None
        _, _, _, least, most, step, _, flags = QUERY.unpack(asked)
        return None if flags & DISABLED else Range(least, most, max(step, 1))

    def read(self, control: int) -> int:
        """The present value. Raises LineBroke."""
        asked = bytearray(CONTROL.pack(control, 0))
        if not self._ask(G_CTRL, asked):
            raise LineBroke("camera", "reading a control", f"{control:#x} of it")
        return int(CONTROL.unpack(asked)[1])

    def write(self, control: int, value: int) -> None:
        """Sets a value; whether it took is for the reader to see."""
        self._ask(S_CTRL, bytearray(CONTROL.pack(control, value)))

    def close(self) -> None:
        """Closes the device."""
        os.close(self._file)

    def _ask(self, request: int, buffer: bytearray) -> bool:
        import errno
        import fcntl

        try:
            fcntl.ioctl(self._file, request, buffer, True)
        except OSError as error:
            if error.errno == errno.ENOTTY:
                why = f"{self._path} is no video device"
                raise LineBroke("camera", "opening", why) from error
            if error.errno == errno.ENODEV:
                why = f"{self._path} is gone"
                raise LineBroke("camera", "asking its controls", why) from error
            return False
        return True


def switch_automatics_off(controls: VideoControls) -> None:
    """Stops everything that adapts itself; what is not there adapts nothing.

    Raises DeviceRefused (automatic) naming what cannot be switched off.
    """
    for name, control, off in SWITCHED_OFF:
        if controls.range_of(control) is None:
            continue
        if controls.read(control) != off:
            controls.write(control, off)
        if controls.read(control) != off:
            detail = f"its automatic {name} cannot be switched off; take another camera"
            raise DeviceRefused("camera", "automatic", detail)


def set_gain(controls: VideoControls, gain: int) -> None:
    """Sets the gain, in the device's own steps, and reads it back."""
    allowed = controls.range_of(GAIN)
    if allowed is None:
        raise DeviceRefused("camera", "declined", "it has no gain to be set")
    controls.write(GAIN, gain)
    found = controls.read(GAIN)
    if found != gain:
        detail = f"gain {gain} asked for, it stays at {found}"
        raise DeviceRefused(
            "camera",
            "declined",
            f"{detail}; it takes {allowed.least} to {allowed.most}",
        )


def set_exposure(controls: VideoControls, exposure_ms: float) -> None:
    """Sets the exposure and reads it back; within 2 per cent or DeviceRefused."""
    allowed = controls.range_of(EXPOSURE_ABSOLUTE)
    if allowed is None:
        raise DeviceRefused("camera", "declined", "its exposure cannot be set")
    controls.write(EXPOSURE_ABSOLUTE, max(1, round(exposure_ms / EXPOSURE_UNIT_MS)))
    found_ms = EXPOSURE_UNIT_MS * controls.read(EXPOSURE_ABSOLUTE)
    if abs(found_ms / exposure_ms - 1.0) > EXPOSURE_WITHIN:
        lowest, highest = (EXPOSURE_UNIT_MS * v for v in (allowed.least, allowed.most))
        raise DeviceRefused(
            "camera",
            "declined",
            f"exposure {exposure_ms:g} ms asked for, it exposes {found_ms:g} ms; it"
            f" takes {lowest:g} to {highest:g} ms in steps of"
            f" {EXPOSURE_UNIT_MS * allowed.step:g} ms",
        )
