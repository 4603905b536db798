"""A motion-JPEG stream on a loopback socket, read by OpenCV itself."""

import threading
import time
from collections.abc import Iterator
from dataclasses import dataclass, field
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from typing import Any

import cv2
import numpy as np
import pytest

from pitchsweep.configs.bench_model import Camera
from pitchsweep.configs.ports_model import CameraPort
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.driver_errors import DeviceRefused, LineBroke
from pitchsweep.drivers.stream_camera import StreamCameraClient

LABEL = Label(0, "red", 0, 1, 0)
EXPOSURE_MS = 20.0
PERIOD_S = 0.02


@dataclass
class Stream:
    """What is sent: ``level`` is the grey of the frames from now on."""

    level: int = 40
    colour: bool = False
    ends: threading.Event = field(default_factory=threading.Event)
    port: int = 0


@pytest.fixture
def stream() -> Iterator[Stream]:
    state = Stream()

    class Handler(BaseHTTPRequestHandler):
        def do_GET(self) -> None:
            self.send_response(200)
            kind = "multipart/x-mixed-replace; boundary=part"
            self.send_header("Content-Type", kind)
            self.end_headers()
            while not state.ends.wait(PERIOD_S):
                image = np.full((64, 96, 3), state.level, np.uint8)
                if state.colour:
                    image[:, :, 0] = 220
                data = cv2.imencode(".jpg", image)[1].tobytes()
                head = "--part\r\nContent-Type: image/jpeg\r\nContent-Length: "
                try:
                    self.wfile.write(f"{head}{len(data)}\r\n\r\n".encode() + data)
                    self.wfile.write(b"\r\n")
                except OSError:
                    return

        def log_message(self, format: str, *args: Any) -> None:
            return

    server = ThreadingHTTPServer(("127.0.0.1", 0), Handler)
    state.port = server.server_port
    thread = threading.Thread(target=server.serve_forever, args=(0.02,))
    thread.start()
    yield state
    state.ends.set()
    server.shutdown()
    server.server_close()
    thread.join()


def client(port: int, **changes: Any) -> StreamCameraClient:
    values = {
        "by": "network-video",
        "address": f"http://127.0.0.1:{port}/video",
        "automatic_off_seen_on": "2026-01-15",
        "fixed_exposure_ms": EXPOSURE_MS,
        "delay_s": 0.3,
        "drop_frames": 1,
        "answers_within_s": 10.0,
        **changes,
    }
    camera = Camera(
        width_px=96,
        height_px=64,
        bits=8,
        mm_per_px=1.0,
        centre_column_px=47.5,
        centre_row_px=31.5,
    )
    return StreamCameraClient(CameraPort.model_validate(values), camera)


def test_a_frame_from_before_the_change_is_never_given(stream: Stream) -> None:
    camera = client(stream.port)
    assert camera.identify()["width_px"] == 96
    for level in (90, 160):
        stream.level = level
        began_s = time.monotonic()
        frame = camera.expose(EXPOSURE_MS, LABEL)
        assert time.monotonic() - began_s >= 0.3
        assert frame.dtype == np.uint16 and abs(int(frame[30, 40]) - level) <= 2
    with pytest.raises(DeviceRefused, match="exposure is fixed at 20 ms"):
        camera.expose(2.0, LABEL)
    camera.close()


def test_colour_is_refused_and_a_broken_stream_is_gone(stream: Stream) -> None:
    stream.colour = True
    camera = client(stream.port)
    with pytest.raises(DeviceRefused, match="a colour image"):
        camera.identify()
    stream.ends.set()
    with pytest.raises(LineBroke, match="it broke off"):
        camera.expose(EXPOSURE_MS, LABEL)
    camera.close()


def test_nobody_listening_is_a_broken_line() -> None:
    with pytest.raises(LineBroke, match="127.0.0.1:9 failed: Connection refused"):
        client(9).identify()
