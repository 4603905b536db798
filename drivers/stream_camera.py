"""A network camera's motion-JPEG stream, read by OpenCV (acts: a thread).

A thread takes every frame as it comes, so that none waits anywhere on this side. The
frame that counts arrived a whole exposure and ``delay_s`` after the request; how long
the camera itself may hold a frame back is ``delay_s``, which nobody can see from here.
Streams whose frames are coded from their neighbours are refused: what such a frame
shows was partly exposed earlier.
"""

import socket
import threading
import time
import urllib.parse
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pitchsweep.configs.bench_model import Camera as CameraSettings
from pitchsweep.configs.ports_model import CameraPort
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.driver_errors import DeviceRefused, LineBroke, NoAnswerInTime
from pitchsweep.drivers.frame_format import Frame, grey_frame
from pitchsweep.drivers.quiet_video import quiet_video

STANDARD_PORTS = {"http": 80, "https": 443, "rtsp": 554}
WHOLE_FRAMES = ("MJPG", "MJPEG", "JPEG")


class StreamCameraClient:
    """A Camera; its exposure is fixed. A stream that broke off is opened anew."""

    def __init__(self, port: CameraPort, camera: CameraSettings) -> None:
        self._port = port
        self._camera = camera
        self._frames: _LatestFrame | None = None

    def identify(self) -> dict[str, Any]:
        """``camera``, ``width_px``, ``height_px``, ``bits``, from a first frame.

        Raises LineBroke (refused, no host, no stream), DeviceRefused, NoAnswerInTime.
        """
        frame = self._next(0.0)
        host = urllib.parse.urlsplit(self._port.address).hostname
        return {
            "camera": f"video from {host}",
            "width_px": int(frame.shape[1]),
            "height_px": int(frame.shape[0]),
            "bits": self._camera.bits,
        }

    def expose(self, exposure_ms: float, label: Label) -> Frame:
        """The first frame that can only have been exposed after this call.

        Raises what ``identify`` raises; DeviceRefused for another exposure than the
        fixed one.
        """
        if exposure_ms != self._port.fixed_exposure_ms:
            detail = f"its exposure is fixed at {self._port.fixed_exposure_ms:g} ms"
            raise DeviceRefused("camera", "declined", detail)
        return self._next(exposure_ms * 1e-3 + self._port.delay_s)

    def close(self) -> None:
        """Ends the stream."""
        frames, self._frames = self._frames, None
        if frames is not None:
            frames.end()

    def _next(self, after_s: float) -> Frame:
        if self._frames is None:
            self._frames = _LatestFrame(_open_stream(self._port))
        within_s = after_s + self._port.answers_within_s
        image = self._frames.after(
            time.monotonic() + after_s, self._port.drop_frames, within_s
        )
        if image is None:
            gone = self._frames.over
            self.close()
            if gone:
                raise LineBroke("camera", "reading its stream", "it broke off")
            raise NoAnswerInTime("camera", "frame", within_s)
        return grey_frame(image, bits=self._camera.bits)


class _LatestFrame:
    """Reads a capture to its end in a thread and keeps the newest frame only."""

    def __init__(self, capture: Any) -> None:
        self.over = False
        self._capture = capture
        self._ending = False
        self._new = threading.Condition()
        self._count = 0
        self._came_s = float("-inf")
        self._image: NDArray[Any] | None = None
        self._thread = threading.Thread(target=self._read, name="video", daemon=True)
        self._thread.start()

    def after(self, moment_s: float, drop: int, within_s: float) -> NDArray[Any] | None:
        """The first frame that came after ``moment_s``, ``drop`` more left out."""
        with self._new:
            first = self._count

            def enough() -> bool:
                new = self._count > first + drop and self._came_s >= moment_s
                return new or self.over

            self._new.wait_for(enough, within_s)
            return None if self.over or not enough() else self._image

    def end(self) -> None:
        """Ends the thread and the stream."""
        self._ending = True
        self._thread.join(timeout=5.0)

    def _read(self) -> None:
        while not self._ending:
            came, image = self._capture.read()
            with self._new:
                if not came:
                    self.over = True
                    self._new.notify_all()
                    break
                self._count += 1
                self._came_s = time.monotonic()
                self._image = np.asarray(image)
                self._new.notify_all()
        self._capture.release()


def _open_stream(port: CameraPort) -> Any:
    import cv2

    _knock(port)
    quiet_video()
    # OpenCV ends such waits itself; it says nothing of why.
    within_ms = int(1000.0 * port.answers_within_s)
    limits = [cv2.CAP_PROP_OPEN_TIMEOUT_MSEC, within_ms]
    limits += [cv2.CAP_PROP_READ_TIMEOUT_MSEC, within_ms]
    capture = cv2.VideoCapture(port.address, cv2.CAP_FFMPEG, limits)
    if not capture.isOpened():
        capture.release()
        raise LineBroke(
            "camera", "opening its stream", f"{port.address} gives no video"
        )
    code = int(capture.get(cv2.CAP_PROP_FOURCC))
    name = "".join(chr((code >> 8 * i) & 0xFF) for i in range(4)).strip("\0 ")
    if name.upper() not in WHOLE_FRAMES:
        capture.release()
        detail = (
            f"its stream is {name or 'of an unknown coding'}; set it to motion JPEG"
        )
        raise DeviceRefused("camera", "wrong-frame", detail)
    return capture


def _knock(port: CameraPort) -> None:
    """Raises LineBroke with the reason where nobody listens."""
    url = urllib.parse.urlsplit(port.address)
    number = url.port or STANDARD_PORTS[url.scheme]
    where = f"{url.hostname}:{number}"
    try:
        socket.create_connection((url.hostname, number), port.answers_within_s).close()
    except TimeoutError:
        raise NoAnswerInTime("camera", "connect", port.answers_within_s) from None
    except socket.gaierror:
        raise LineBroke("camera", f"finding {where}", "no such host") from None
    except OSError as error:
        why = error.strerror or str(error)
        raise LineBroke("camera", f"connecting to {where}", why) from error
