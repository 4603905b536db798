"""A camera that hands out still images by HTTP GET (acts; standard library).

A web server may hand out an older image. So the image that counts is asked for only
when an exposure begun after the request must be over (``delay_s`` on top), images asked
for before are thrown away, and one that is older by the server's own words (Age after
RFC 9111; Date and Last-Modified after RFC 9110) is refused as stale.
"""

import http.client
import socket
import ssl
import urllib.parse
from dataclasses import dataclass
from email.utils import parsedate_to_datetime
from typing import Any

from pitchsweep.configs.bench_model import Camera as CameraSettings
from pitchsweep.configs.ports_model import CameraPort
from pitchsweep.drivers.devices import BenchClock, Label
from pitchsweep.drivers.driver_errors import (
    DeviceRefused,
    LineBroke,
    NoAnswerInTime,
)
from pitchsweep.drivers.frame_format import Frame, grey_frame
from pitchsweep.drivers.still_image import decode_still, exposure_said

LARGEST_IMAGE_BYTES = 128 * 1024 * 1024
EXPOSURE_WITHIN = 0.02
DATES_WITHIN_S = 1.0
"""HTTP dates are whole seconds."""


@dataclass(frozen=True)
class _Fetched:
    content: bytes
    age_s: float


class StillCameraClient:
    """A Camera over HTTP. Nothing is kept open between exposures.

    ``probe_ms`` is the exposure of the first image, by which the camera is known.
    """

    def __init__(
        self,
        port: CameraPort,
        camera: CameraSettings,
        clock: BenchClock,
        *,
        probe_ms: float = 1.0,
    ) -> None:
        self._probe_ms = probe_ms
        self._port = port
        self._camera = camera
        self._clock = clock
        self._url = urllib.parse.urlsplit(port.address)

    def identify(self) -> dict[str, Any]:
        """``camera``, ``width_px``, ``height_px``, ``bits``, from a first image.

        Raises what ``expose`` raises.
        """
        frame = self._read(self._fetch(self._probe_ms), self._probe_ms)
        return {
            "camera": f"stills from {self._url.hostname}",
            "width_px": int(frame.shape[1]),
            "height_px": int(frame.shape[0]),
            "bits": self._camera.bits,
        }

    def expose(self, exposure_ms: float, label: Label) -> Frame:
        """The image exposed wholly after this call, by what the camera can tell.

        Raises LineBroke (refused, gone), NoAnswerInTime, DeviceRefused (declined,
        stale, automatic, wrong-frame), AnsweredNonsense (no PNG or TIFF).
        """
        asked_s = self._clock.now_s()
        for _ in range(self._port.drop_frames):
            self._fetch(exposure_ms)
        due_s = asked_s + exposure_ms * 1e-3 + self._port.delay_s
        self._clock.wait(max(0.0, due_s - self._clock.now_s()))
        fetched = self._fetch(exposure_ms)
        since_s = self._clock.now_s() - asked_s
        if fetched.age_s > since_s + DATES_WITHIN_S:
            detail = f"the image is {fetched.age_s:g} s old, asked for {since_s:.1f} s"
            raise DeviceRefused("camera", "stale", f"{detail} ago")
        return self._read(fetched, exposure_ms)

    def close(self) -> None:
        """Nothing is open."""

    def _read(self, fetched: _Fetched, exposure_ms: float) -> Frame:
        said = exposure_said(fetched.content)
        if said.mode not in (None, "manual"):
            raise DeviceRefused(
                "camera", "automatic", f"its images say exposure is {said.mode}"
            )
        if said.exposure_ms is not None:
            off = abs(said.exposure_ms / exposure_ms - 1.0)
            if off > EXPOSURE_WITHIN:
                raise DeviceRefused(
                    "camera",
                    "wrong-frame",
                    f"exposed for {said.exposure_ms:g} ms, asked for {exposure_ms:g}",
                )
        return grey_frame(decode_still(fetched.content), bits=self._camera.bits)

    def _fetch(self, exposure_ms: float) -> _Fetched:
        where, within_s = self._url.netloc, self._port.answers_within_s
        timeout_s = within_s + exposure_ms * 1e-3
        connection = self._connection(timeout_s)
        try:
            connection.request(
                "GET", self._path(exposure_ms), headers={"Cache-Control": "no-cache"}
            )
            answer = connection.getresponse()
            content = answer.read(LARGEST_IMAGE_BYTES + 1)
        except TimeoutError:
            raise NoAnswerInTime("camera", f"GET from {where}", timeout_s) from None
        except socket.gaierror:
            raise LineBroke("camera", f"finding {where}", "no such host") from None
        except (OSError, http.client.HTTPException) as error:
            why = getattr(error, "strerror", None) or str(error) or "it hung up"
            raise LineBroke("camera", f"fetching from {where}", why) from error
        finally:
            connection.close()
        if answer.status != 200:
            detail = f"GET from {where}: HTTP {answer.status} {answer.reason}"
            raise DeviceRefused("camera", "declined", detail)
        if len(content) > LARGEST_IMAGE_BYTES:
            raise DeviceRefused("camera", "wrong-frame", "an image without an end")
        return _Fetched(content, _age_s(answer))

    def _connection(self, timeout_s: float) -> http.client.HTTPConnection:
        host, port = self._url.hostname or "", self._url.port
        if self._url.scheme == "https":
            context = ssl.create_default_context()
            return http.client.HTTPSConnection(
                host, port, timeout=timeout_s, context=context
            )
        return http.client.HTTPConnection(host, port, timeout=timeout_s)

    def _path(self, exposure_ms: float) -> str:
        path = self._url.path or "/"
        full = f"{path}?{self._url.query}" if self._url.query else path
        full = full.replace("{exposure_ms}", f"{exposure_ms:g}")
        return full.replace("{exposure_us}", f"{1000.0 * exposure_ms:.0f}")


def _age_s(answer: http.client.HTTPResponse) -> float:
    """How old the image is by the server's own words; 0 where it says nothing."""
    ages = [0.0]
    try:
        ages.append(float(answer.headers.get("Age", "0")))
        now, changed = answer.headers.get("Date"), answer.headers.get("Last-Modified")
        if now and changed:
            apart = parsedate_to_datetime(now) - parsedate_to_datetime(changed)
            ages.append(apart.total_seconds())
    except (TypeError, ValueError):
        pass
    return max(ages)
