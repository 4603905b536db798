"""The ports of a bench with hardware: stage, emission unit, camera, sensors.

A serial port is a device path or a pyserial URL (``rfc2217://host:port``); paths under
``/dev/serial/by-id`` stay the same when plugs are changed. A camera is reached through
open standards only: USB video class, a motion-JPEG stream, or still images by HTTP.
"""

from importlib.resources import files
from typing import Annotated, Literal, Self
from urllib.parse import urlsplit

from pydantic import AfterValidator, Field, model_validator

from pitchsweep.configs.moments import Day
from pitchsweep.configs.settings_base import Name, Settings, Text

EXPOSURE_MARKS = ("{exposure_ms}", "{exposure_us}")
"""What stands in a still image's address for the exposure that is asked for."""


def _ships(name: str) -> str:
    folder = files("pitchsweep.configs") / "dialects"
    names = sorted(entry.name for entry in folder.iterdir())
    shipped = [n.removesuffix(".yaml") for n in names if n.endswith(".yaml")]
    if name not in shipped:
        raise ValueError(f"no dialect '{name}' ships; there are {', '.join(shipped)}")
    return name


class SerialPort(Settings):
    """A serial port and the dialect spoken on it."""

    port: Text
    dialect: Annotated[Name, AfterValidator(_ships)]
    baud: Annotated[int, Field(ge=1200, le=4_000_000)] = 115200


class StagePort(SerialPort):
    """The stage's port; with ``identity`` nothing else that answers there will do."""

    identity: Text | None = None


class CameraPort(Settings):
    """Where frames come from, and how it is known what they are.

    ``usb-video``: a USB video class device, uncompressed; exposure and gain are set
    through the system's own camera controls and read back, automatic ones switched
    off or refused. ``network-video``: a motion-JPEG stream (8 bit, lossy).
    ``http-stills``: one PNG or TIFF image a request, 8 or 16 bit.

    No standard tells a network camera's exposure from here. So
    ``automatic_off_seen_on`` is the day on which somebody saw at the camera itself that
    exposure, gain and gamma are fixed; the exposure is ``fixed_exposure_ms``, or stands
    in the address of stills as ``{exposure_ms}`` or ``{exposure_us}``. ``delay_s`` is
    the longest time from the end of an exposure until nothing older is handed out;
    ``drop_frames`` are thrown away before every exposure besides.
    """

    by: Literal["usb-video", "network-video", "http-stills"]
    address: Text
    pixel_format: Literal["GREY", "Y16", "YUYV"] = "GREY"
    gain: Annotated[int, Field(ge=0, le=1_000_000)] | None = None
    automatic_off_seen_on: Day | None = None
    fixed_exposure_ms: Annotated[float, Field(gt=0.0, le=60000.0)] | None = None
    delay_s: Annotated[float, Field(ge=0.0, le=30.0)] = 0.5
    drop_frames: Annotated[int, Field(ge=0, le=100)] = 2
    answers_within_s: Annotated[float, Field(gt=0.0, le=120.0)] = 10.0

    @property
    def exposure_in_address(self) -> bool:
        """Whether the address carries the exposure."""
        return any(mark in self.address for mark in EXPOSURE_MARKS)

    @model_validator(mode="after")
    def _says_what_it_needs(self) -> Self:
        why = self._why_not()
        if why:
            raise ValueError(why)
        return self

    def _why_not(self) -> str:
        local = self.by == "usb-video"
        if local == ("://" in self.address):
            wanted = "a device such as /dev/video0" if local else "an http:// URL"
            return f"address of {self.by} is {wanted}, not {self.address}"
        if local:
            return ""
        schemes: tuple[str, ...] = ("http", "https")
        if self.by == "network-video":
            schemes += ("rtsp",)
        if self.address.partition("://")[0] not in schemes:
            return f"address of {self.by} begins with {', '.join(schemes)}"
        if not _host_and_port(self.address):
            return f"address {self.address} has no host, or a port that is no number"
        if "@" in self.address.partition("://")[2].partition("/")[0]:
            return (
                "a name or password in the address would stand in every run folder:"
                " let the camera serve this computer without one"
            )
        if self.automatic_off_seen_on is None:
            return (
                f"automatic_off_seen_on is missing: {self.by} cannot tell whether"
                " exposure and gain are automatic; see to it, and write down the day"
            )
        if self.exposure_in_address and self.by == "network-video":
            return "a stream's address carries no exposure: use fixed_exposure_ms"
        if self.exposure_in_address == (self.fixed_exposure_ms is not None):
            return (
                "give fixed_exposure_ms, or (stills) {exposure_ms} or {exposure_us}"
                " in the address, one of them"
            )
        return ""


class Ports(Settings):
    """The ports of a bench with hardware; ``air`` and ``power`` are optional sensors.

    An emission unit of ``line: pulses`` is fed over the control lines of its port,
    local or ``rfc2217://``; its dialect serves to ask who it is.
    """

    stage: StagePort
    unit: SerialPort
    camera: CameraPort
    air: SerialPort | None = None
    power: SerialPort | None = None

    @model_validator(mode="after")
    def _every_port_is_another(self) -> Self:
        serial = {"stage": self.stage, "unit": self.unit}
        serial |= {"air": self.air} if self.air else {}
        serial |= {"power": self.power} if self.power else {}
        taken: dict[str, str] = {}
        for name, port in serial.items():
            if port.port in taken:
                raise ValueError(
                    f"{name} and {taken[port.port]} cannot share the port {port.port}"
                )
            taken[port.port] = name
        return self


def _host_and_port(address: str) -> bool:
    """Whether ``address`` names a host and, if at all, a port from 1 to 65535."""
    try:
        parts = urlsplit(address)
        return bool(parts.hostname) and parts.port != 0
    except ValueError:
        return False
