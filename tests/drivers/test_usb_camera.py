"""A USB video class camera, with device and kernel in memory. None real was tried."""

import re
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Camera
from pitchsweep.configs.ports_model import CameraPort
from pitchsweep.drivers import video_controls as vc
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.driver_errors import DeviceRefused, LineBroke, NoAnswerInTime
from pitchsweep.drivers.usb_camera import UsbCameraClient
from pitchsweep.drivers.video_controls import KernelVideoControls, Range

LABEL = Label(0, "red", 0, 1, 0)
PERIOD_S = 0.04
AUTOMATICS = {
    vc.EXPOSURE_AUTO: 3,
    vc.EXPOSURE_AUTO_PRIORITY: 1,
    vc.AUTOGAIN: 1,
    vc.AUTO_WHITE_BALANCE: 1,
    vc.FOCUS_AUTO: 1,
}


@dataclass
class FakeControls:
    """Controls of a device; ``stuck`` ones keep their value."""

    values: dict[int, int] = field(
        default_factory=lambda: {**AUTOMATICS, vc.EXPOSURE_ABSOLUTE: 156, vc.GAIN: 9}
    )
    stuck: set[int] = field(default_factory=set)
    closed: bool = False

    def range_of(self, control: int) -> Range | None:
        return Range(1, 5000, 1) if control in self.values else None

    def read(self, control: int) -> int:
        return self.values[control]

    def write(self, control: int, value: int) -> None:
        if control not in self.stuck:
            self.values[control] = min(max(value, 0), 5000)

    def close(self) -> None:
        self.closed = True


@dataclass
class FakeCapture:
    """A camera that exposes all the time; frame n begins at n periods.

    ``waiting`` old frames are in its buffers. Each pixel is the number of its frame.
    """

    waiting: int = 4
    stamped: bool = True
    shape: tuple[str, int, int] = ("GREY", 64, 64)
    fails_at: int | None = None
    now_s: float = 100.0
    number: int = 0
    grabs: int = 0
    released: bool = False

    def clock(self) -> float:
        return self.now_s

    def grab(self) -> bool:
        self.grabs += 1
        if self.grabs == self.fails_at:
            return False
        newest = int(self.now_s / PERIOD_S)
        if not self.number:
            self.number = newest - self.waiting
        self.number += 1
        self.now_s = max(self.now_s, self.number * PERIOD_S)
        return True

    def retrieve(self) -> tuple[bool, NDArray[Any]]:
        _, width, height = self.shape
        two = (2,) if self.shape[0] == "YUYV" else ()
        kind = np.uint16 if self.shape[0] == "Y16 " else np.uint8
        return True, np.full((height, width, *two), self.number % 200, kind)

    def stamp_s(self) -> float:
        return self.number * PERIOD_S if self.stamped else 0.0

    def format(self) -> tuple[str, int, int]:
        return self.shape

    def release(self) -> None:
        self.released = True


@dataclass
class Bench:
    """A client on a fake device."""

    controls: FakeControls = field(default_factory=FakeControls)
    capture: FakeCapture = field(default_factory=FakeCapture)
    opened: int = 0

    def client(self, bits: int = 8, **port: Any) -> UsbCameraClient:
        def opens(*_: Any) -> FakeCapture:
            self.opened += 1
            return self.capture

        values = {"by": "usb-video", "address": "/dev/null", **port}
        return UsbCameraClient(
            CameraPort.model_validate(values),
            Camera(
                width_px=64,
                height_px=64,
                bits=bits,  # type: ignore[arg-type]
                mm_per_px=1.0,
                centre_column_px=32.0,
                centre_row_px=32.0,
            ),
            open_capture=opens,
            open_controls=lambda _: self.controls,
            now=self.capture.clock,
        )


def test_everything_automatic_is_switched_off_and_exposure_and_gain_are_set() -> None:
    bench = Bench()
    bench.client(gain=7).expose(12.5, LABEL)
    found = bench.controls.values
    assert found[vc.EXPOSURE_AUTO] == vc.EXPOSURE_MANUAL
    assert [found[c] for c in list(AUTOMATICS)[1:]] == [0, 0, 0, 0]
    assert (found[vc.EXPOSURE_ABSOLUTE], found[vc.GAIN]) == (125, 7)


@pytest.mark.parametrize("control", AUTOMATICS)
def test_what_stays_automatic_is_refused_and_the_device_given_back(
    control: int,
) -> None:
    bench = Bench(FakeControls(stuck={control}))
    with pytest.raises(DeviceRefused, match="cannot be switched off") as caught:
        bench.client().identify()
    assert caught.value.reason == "automatic"
    assert bench.capture.released and bench.controls.closed


def test_automatic_exposure_that_comes_back_is_met_at_the_next_frame() -> None:
    bench = Bench()
    client = bench.client()
    client.expose(10.0, LABEL)
    bench.controls.values[vc.EXPOSURE_AUTO] = 3
    bench.controls.stuck.add(vc.EXPOSURE_AUTO)
    with pytest.raises(DeviceRefused, match="automatic exposure"):
        client.expose(10.0, LABEL)


def test_a_control_that_is_not_there_adapts_nothing() -> None:
    bench = Bench(FakeControls({vc.EXPOSURE_ABSOLUTE: 1}))
    assert bench.client().identify()["bits"] == 8


@pytest.mark.parametrize(
    ("controls", "port", "words"),
    [
        (FakeControls({}), {}, "its exposure cannot be set"),
        (FakeControls(stuck={vc.EXPOSURE_ABSOLUTE}), {}, "it exposes 15.6 ms"),
        (FakeControls(stuck={vc.GAIN}), {"gain": 3}, "gain 3 asked for, it stays at 9"),
        (FakeControls({vc.EXPOSURE_ABSOLUTE: 1}), {"gain": 3}, "has no gain"),
    ],
)
def test_what_cannot_be_set_is_said(
    controls: FakeControls, port: dict[str, Any], words: str
) -> None:
    with pytest.raises(DeviceRefused, match=words):
        Bench(controls).client(**port).expose(10.0, LABEL)


@pytest.mark.parametrize("stamped", [True, False])
@pytest.mark.parametrize("waiting", [0, 4])
def test_the_frame_was_exposed_wholly_after_it_was_asked_for(
    stamped: bool, waiting: int
) -> None:
    bench = Bench(capture=FakeCapture(waiting=waiting, stamped=stamped))
    client = bench.client()
    for exposure_ms in (10.0, 35.0, 35.0):
        asked_s = bench.capture.now_s
        frame = client.expose(exposure_ms, LABEL)
        # Ended at its stamp, or began there: begun after the request in both cases.
        ended_s = bench.capture.number * PERIOD_S
        assert ended_s - exposure_ms * 1e-3 >= asked_s - 1e-9
        assert int(frame[0, 0]) == bench.capture.number % 200


def test_a_change_of_exposure_costs_the_frames_that_are_in_flight() -> None:
    bench = Bench(capture=FakeCapture(waiting=0))
    client = bench.client(drop_frames=0)
    client.expose(1.0, LABEL)
    first = bench.capture.grabs
    client.expose(1.0, LABEL)
    assert bench.capture.grabs - first < first


@pytest.mark.parametrize(
    ("name", "bits", "kind"),
    [("GREY", 8, "GREY"), ("YUYV", 8, "YUYV"), ("Y16", 12, "Y16 ")],
)
def test_every_format_gives_a_grey_frame(name: str, bits: int, kind: str) -> None:
    bench = Bench(capture=FakeCapture(shape=(kind, 64, 64)))
    frame = bench.client(bits, pixel_format=name).expose(5.0, LABEL)
    assert frame.shape == (64, 64) and frame.dtype == np.uint16


@pytest.mark.parametrize(
    ("shape", "words"),
    [
        (("MJPG", 64, 64), "it gives MJPG, not GREY"),
        (("\0\0\0\0", 64, 64), "another format, not GREY"),
        (("GREY", 80, 64), "80 x 64 pixels, the bench file says 64 x 64"),
    ],
)
def test_another_format_or_size_is_refused(
    shape: tuple[str, int, int], words: str
) -> None:
    with pytest.raises(DeviceRefused, match=words):
        Bench(capture=FakeCapture(shape=shape)).client().identify()


def test_a_camera_that_gives_no_frame_is_not_waited_for_for_ever() -> None:
    bench = Bench(capture=FakeCapture(fails_at=2))
    with pytest.raises(NoAnswerInTime):
        bench.client().expose(5.0, LABEL)


def test_a_camera_pulled_out_is_gone_and_looked_for_again() -> None:
    bench = Bench(capture=FakeCapture(fails_at=2))
    client = bench.client(address="/dev/no-such-video")
    with pytest.raises(LineBroke, match="/dev/no-such-video is gone"):
        client.expose(5.0, LABEL)
    assert bench.capture.released
    client.expose(5.0, LABEL)
    assert bench.opened == 2


@pytest.mark.parametrize(
    ("path", "words"),
    [
        ("/dev/no-such-video", "/dev/no-such-video: No such file"),
        ("/dev/null", "/dev/null is no video device"),
    ],
)
def test_a_path_that_is_no_camera_is_named(path: str, words: str) -> None:
    port = CameraPort(by="usb-video", address=path)
    camera = Bench().client()._camera
    with pytest.raises(LineBroke, match=words):
        UsbCameraClient(port, camera).identify()


HEADERS = (
    Path("/usr/include/linux/v4l2-controls.h"),
    Path("/usr/include/linux/videodev2.h"),
)


@pytest.mark.skipif(not HEADERS[0].exists(), reason="no kernel headers here")
@pytest.mark.parametrize(
    ("name", "base", "number"),
    [
        ("V4L2_CID_AUTO_WHITE_BALANCE", 0x00980900, vc.AUTO_WHITE_BALANCE),
        ("V4L2_CID_AUTOGAIN", 0x00980900, vc.AUTOGAIN),
        ("V4L2_CID_GAIN", 0x00980900, vc.GAIN),
        ("V4L2_CID_EXPOSURE_AUTO", 0x009A0900, vc.EXPOSURE_AUTO),
        ("V4L2_CID_EXPOSURE_ABSOLUTE", 0x009A0900, vc.EXPOSURE_ABSOLUTE),
        ("V4L2_CID_EXPOSURE_AUTO_PRIORITY", 0x009A0900, vc.EXPOSURE_AUTO_PRIORITY),
        ("V4L2_CID_FOCUS_AUTO", 0x009A0900, vc.FOCUS_AUTO),
    ],
)
def test_control_numbers_are_the_kernels(name: str, base: int, number: int) -> None:
    text = HEADERS[0].read_text()
    assert re.search(rf"{name}\s+\(V4L2_CID_\w*BASE ?\+ ?{number - base}\)", text)


def test_requests_are_numbered_as_the_kernel_numbers_them() -> None:
    """_IOWR('V', n, size) of asm-generic/ioctl.h."""

    def numbered(n: int, size: int) -> int:
        return 3 << 30 | size << 16 | ord("V") << 8 | n

    assert vc.QUERYCTRL == numbered(36, vc.QUERY.size)
    assert vc.G_CTRL == numbered(27, vc.CONTROL.size)
    assert vc.S_CTRL == numbered(28, vc.CONTROL.size)
    assert (vc.QUERY.size, vc.CONTROL.size) == (68, 8)


def _answering(answers: dict[int, bytes]) -> Callable[..., int]:
    def ioctl(_: int, request: int, buffer: bytearray, *rest: Any) -> int:
        if request not in answers:
            raise OSError(22, "Invalid argument")
        buffer[:] = answers[request]
        return 0

    return ioctl


def test_the_kernels_answers_are_taken_apart(monkeypatch: pytest.MonkeyPatch) -> None:
    said = vc.QUERY.pack(vc.GAIN, 1, b"Gain", 2, 64, 2, 9, 0)
    answers = {vc.QUERYCTRL: said, vc.G_CTRL: vc.CONTROL.pack(vc.GAIN, 12)}
    monkeypatch.setattr("fcntl.ioctl", _answering(answers))
    controls = KernelVideoControls("/dev/null")
    assert controls.range_of(vc.GAIN) == Range(2, 64, 2)
    assert controls.read(vc.GAIN) == 12
    disabled = vc.QUERY.pack(vc.GAIN, 1, b"Gain", 2, 64, 2, 9, vc.DISABLED)
    monkeypatch.setattr("fcntl.ioctl", _answering({vc.QUERYCTRL: disabled}))
    assert controls.range_of(vc.GAIN) is None
    with pytest.raises(LineBroke, match="reading a control"):
        controls.read(vc.GAIN)
    controls.close()
