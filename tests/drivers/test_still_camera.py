"""Still images over HTTP, from a server that can misbehave in every way."""

import http.server
import io
import threading
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pytest
from acquire_fakes import small_job
from numpy.typing import NDArray
from PIL import Image
from PIL.TiffImagePlugin import IFDRational
from port_builders import with_ports

from pitchsweep.configs.bench_model import Bench
from pitchsweep.drivers.bench_clock import MonotonicBenchClock
from pitchsweep.drivers.camera_opening import open_camera
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.driver_errors import (
    AnsweredNonsense,
    DeviceRefused,
    DriverError,
    LineBroke,
    NoAnswerInTime,
)
from pitchsweep.drivers.still_image import ExposureSaid, exposure_said

LABEL = Label(0, "red", 0, 1, 0)
ROWS, COLUMNS = 100, 320


COLOUR = np.zeros((ROWS, COLUMNS, 3), np.uint8) + np.array([9, 90, 200], np.uint8)


def png(
    image: NDArray[Any], *, ms: float | None = None, mode: int | None = None
) -> Any:
    """A PNG made by Pillow, with Exif where asked: the outside writer."""
    return written(image, "PNG", ms=ms, mode=mode)


def written(
    image: NDArray[Any], kind: str, *, ms: float | None = None, mode: int | None = None
) -> bytes:
    exif = Image.Exif()
    if ms is not None:
        exif[33434] = IFDRational(round(1000 * ms), 1_000_000)
    if mode is not None:
        exif[41986] = mode
    out = io.BytesIO()
    Image.fromarray(image).save(out, kind, exif=exif)
    return out.getvalue()


def frame(rows: int = ROWS, fill: int = 3000) -> NDArray[np.uint16]:
    return np.full((rows, COLUMNS), fill, dtype=np.uint16)


@dataclass
class Server:
    """What is handed out next; ``asked`` are the paths that were asked for."""

    content: bytes = b""
    status: int = 200
    headers: dict[str, str] = field(default_factory=dict)
    silent_s: float = 0.0
    asked: list[str] = field(default_factory=list)
    port: int = 0
    hold: threading.Event = field(default_factory=threading.Event)


@pytest.fixture
def server() -> Iterator[Server]:
    state = Server(content=png(frame()))

    class Handler(http.server.BaseHTTPRequestHandler):
        def do_GET(self) -> None:
            state.asked.append(self.path)
            if state.silent_s:
                state.hold.wait(state.silent_s)
                return
            self.send_response_only(state.status)
            for name, value in state.headers.items():
                self.send_header(name, value)
            self.send_header("Content-Length", str(len(state.content)))
            self.end_headers()
            self.wfile.write(state.content)

        def log_message(self, format: str, *args: Any) -> None:
            return

    listening = http.server.ThreadingHTTPServer(("127.0.0.1", 0), Handler)
    state.port = listening.server_port
    thread = threading.Thread(target=listening.serve_forever, args=(0.02,))
    thread.start()
    yield state
    state.hold.set()
    listening.shutdown()
    listening.server_close()
    thread.join()


def bench(port: int, **changes: Any) -> Bench:
    camera = {
        "by": "http-stills",
        "address": f"http://127.0.0.1:{port}/still?us={{exposure_us}}",
        "automatic_off_seen_on": "2026-01-15",
        "delay_s": 0.0,
        "drop_frames": 0,
        **changes,
    }
    return with_ports(small_job(), camera=camera).bench


def expose(port: int, exposure_ms: float = 2.0, **changes: Any) -> NDArray[np.uint16]:
    camera = open_camera(bench(port, **changes), MonotonicBenchClock(), probe_ms=2.0)
    return camera.expose(exposure_ms, LABEL)


def test_a_sixteen_bit_image_comes_through_bit_by_bit(server: Server) -> None:
    image = np.arange(ROWS * COLUMNS, dtype=np.uint16).reshape(ROWS, COLUMNS)
    server.content = png(image)
    assert np.array_equal(expose(server.port), image)
    server.content = written(image, "TIFF")
    assert np.array_equal(expose(server.port), image)


def test_the_exposure_stands_in_the_address(server: Server) -> None:
    expose(server.port, 12.5)
    assert server.asked == ["/still?us=2000", "/still?us=12500"]


def test_images_from_before_are_thrown_away(server: Server) -> None:
    expose(server.port, drop_frames=3)
    assert len(server.asked) == 1 + 4


class HandClock:
    """A bench clock moved by waiting alone."""

    def __init__(self) -> None:
        self.s = 50.0
        self.waits: list[float] = []

    def now_s(self) -> float:
        return self.s

    def wait(self, seconds: float) -> None:
        self.waits.append(seconds)
        self.s += seconds


def test_the_image_is_asked_for_when_its_exposure_must_be_over(server: Server) -> None:
    clock = HandClock()
    camera = open_camera(bench(server.port, delay_s=0.4), clock, probe_ms=2.0)
    camera.expose(100.0, LABEL)
    assert clock.waits == [pytest.approx(0.5)]


@pytest.mark.parametrize(
    ("change", "kind", "words"),
    [
        ({"status": 404}, DeviceRefused, "HTTP 404"),
        ({"status": 302}, DeviceRefused, "HTTP 302"),
        ({"headers": {"Age": "60"}}, DeviceRefused, "stale: the image is 60 s old"),
        (
            {
                "headers": {
                    "Date": "Tue, 01 Dec 2026 18:00:30 GMT",
                    "Last-Modified": "Tue, 01 Dec 2026 18:00:00 GMT",
                }
            },
            DeviceRefused,
            "stale: the image is 30 s old",
        ),
        ({"content": b""}, AnsweredNonsense, "no PNG or TIFF"),
        ({"content": b"\xff\xd8\xff\xe0 and so on"}, AnsweredNonsense, "lossy JPEG"),
        ({"content": png(frame())[:80]}, AnsweredNonsense, "cannot be read"),
        ({"content": png(frame(50))}, DeviceRefused, "320 x 50 pixels, the bench"),
        (
            {"content": png(np.full((ROWS, COLUMNS), 9, np.uint8))},
            DeviceRefused,
            "an image of 8 bits, and the bench file says camera.bits: 12",
        ),
        ({"content": written(COLOUR, "PNG")}, DeviceRefused, "a colour image"),
        ({"content": png(frame(), mode=0)}, DeviceRefused, "exposure is automatic"),
        ({"content": png(frame(), mode=2)}, DeviceRefused, "automatic bracket"),
        (
            {"content": png(frame(), ms=40.0, mode=1)},
            DeviceRefused,
            "exposed for 40 ms, asked for 2",
        ),
    ],
)
def test_what_cannot_be_measured_on_is_refused(
    server: Server, change: dict[str, Any], kind: type[DriverError], words: str
) -> None:
    for name, value in change.items():
        setattr(server, name, value)
    with pytest.raises(kind) as caught:
        expose(server.port)
    assert words in str(caught.value) and "camera" in str(caught.value)
    assert "\n" not in str(caught.value)


def test_an_exposure_that_the_image_confirms_is_taken(server: Server) -> None:
    server.content = png(frame(), ms=2.0, mode=1)
    assert expose(server.port).shape == (ROWS, COLUMNS)


def test_nobody_listening_is_a_broken_line() -> None:
    with pytest.raises(LineBroke, match="127.0.0.1:9 failed: Connection refused"):
        expose(9)


def test_a_silent_camera_is_given_up(server: Server) -> None:
    server.silent_s = 30.0
    with pytest.raises(NoAnswerInTime, match="did not answer 'GET"):
        expose(server.port, answers_within_s=0.1)


@pytest.mark.parametrize("kind", ["PNG", "TIFF"])
def test_exif_written_by_another_program_is_read(kind: str) -> None:
    content = written(frame(), kind, ms=12.5, mode=1)
    said = exposure_said(content)
    assert said.exposure_ms == pytest.approx(12.5) and said.mode == "manual"
    assert exposure_said(written(frame(), kind)) == ExposureSaid()


def test_exif_in_a_directory_of_its_own_is_read() -> None:
    exif = Image.Exif()
    inner = exif.get_ifd(0x8769)
    inner[33434], inner[41986] = IFDRational(1, 80), 0
    said = exposure_said(exif.tobytes().removeprefix(b"Exif\0\0"))
    assert said.exposure_ms == pytest.approx(12.5) and said.mode == "automatic"


def test_damaged_exif_says_nothing_and_breaks_nothing() -> None:
    content = written(frame(4), "TIFF", ms=12.5, mode=1)
    for cut in range(0, len(content), 7):
        exposure_said(content[:cut])
    noise = np.random.default_rng(0)
    for _ in range(200):
        spoilt = bytearray(content)
        spoilt[int(noise.integers(4, len(spoilt)))] = int(noise.integers(256))
        exposure_said(bytes(spoilt))
