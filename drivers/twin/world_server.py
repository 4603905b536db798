"""The twin's own door: JSON lines over a loopback socket, with a token (acts).

The first line of a connection is ``{"token": ...}``; each further line
``{"number": n, "ask": name, ...}`` is answered by ``{"number": n, "answer": ...}`` or
``{"number": n, "refused": why}``. Frames travel by file: raw uint16, row by row.
"""

import hashlib
import hmac
import json
import shutil
import socket
import threading
import zlib
from collections.abc import Callable
from dataclasses import asdict
from pathlib import Path
from typing import Any

import numpy as np

from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.camera_faults import Exposed, NoFrame
from pitchsweep.drivers.twin.camera_readout import Exposing
from pitchsweep.drivers.twin.world import World

LONGEST_LINE_BYTES = 65536
SHARED_MEMORY = Path("/dev/shm")

NO_CAMERA = "no camera"
MOST_UNFETCHED = 4
"""Exposures that may wait to be fetched."""

Message = dict[str, Any]


class WorldServer:
    """Serves ``world`` at ``address`` until ``close``."""

    def __init__(self, world: World, *, token: str, directory: Path) -> None:
        self._asks = WorldAsks(world, _make_spool(directory))
        self._token = token
        self._socket = socket.create_server(("127.0.0.1", 0))
        host, port = self._socket.getsockname()
        self.address: tuple[str, int] = (host, port)
        threading.Thread(target=self._accept, name="world", daemon=True).start()

    def close(self) -> None:
        """Takes no further connections and removes what is left in the spool."""
        self._socket.close()
        shutil.rmtree(self._asks.spool, ignore_errors=True)

    def _accept(self) -> None:
        while True:
            try:
                connection, _ = self._socket.accept()
            except OSError:
                return
            threading.Thread(
                target=self._serve, args=(connection,), daemon=True
            ).start()

    def _serve(self, connection: socket.socket) -> None:
        connection.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        with connection, connection.makefile("rwb") as stream:
            try:
                if not self._admits(stream.readline(LONGEST_LINE_BYTES)):
                    return
                while line := stream.readline(LONGEST_LINE_BYTES):
                    answer = json.dumps(self._asks.answer(json.loads(line)))
                    stream.write(answer.encode("utf-8") + b"\n")
                    stream.flush()
            except (OSError, ValueError):
                return  # whoever spoke has gone, or does not speak JSON lines

    def _admits(self, line: bytes) -> bool:
        given = json.loads(line)
        token = given.get("token") if isinstance(given, dict) else None
        return isinstance(token, str) and hmac.compare_digest(token, self._token)


class WorldAsks:
    """What can be asked of the world; each ask is a method in ``_asks``."""

    def __init__(self, world: World, spool: Path) -> None:
        self.spool = spool
        self._world = world
        self._frames = 0
        self._exposures = 0
        self._exposed: dict[int, Exposing] = {}
        self._reading_out = threading.Lock()
        self._lock = threading.Lock()
        self._asks: dict[str, Callable[[Message], Any]] = {
            "now": lambda m: world.time.now_s(),
            "wait": lambda m: world.wait(float(m["seconds"])),
            "seat": lambda m: world.seat(
                int(m["mount"]),
                float(m["mount_deg"]),
                float(m.get("face_deg", 0.0)),
                int(m.get("part", 0)),
            ),
            "door": lambda m: world.unit.set_door(
                bool(m["closed"]), channel=m.get("channel")
            ),
            "press-reset": lambda m: world.unit.press_reset(),
            "cut-power": lambda m: world.cut_power(),
            "air": lambda m: asdict(world.read_air()),
            "sense": self._sense,
            "meter": lambda m: world.read_meter(str(m["laser"])),
            "person": lambda m: world.ask_person(str(m["what"])),
            "spots": self._spots,
            "camera": self._camera,
            "begin": self._begin,
            "fetch": self._fetch,
        }

    def answer(self, message: Message) -> Message:
        """The answer to one message; never raises on a bad one."""
        number = message.get("number")
        try:
            ask = self._asks[str(message.get("ask"))]
            return {"number": number, "answer": ask(message)}
        except KeyError as error:
            return {"number": number, "refused": f"unknown or missing: {error}"}
        except (ValueError, TypeError) as error:
            return {"number": number, "refused": str(error)}

    def _spots(self, message: Message) -> list[Message]:
        return [asdict(s) for s in self._world.see_spots(_label(message))]

    def _sense(self, message: Message) -> Message:
        return asdict(
            self._world.sense(str(message["laser"]), float(message["planned_s"]))
        )

    def _check_index(self, message: Message) -> None:
        index = int(message.get("index", 0))
        if index != self._world.camera.index:
            raise ValueError(f"{NO_CAMERA} at index {index}")

    def _camera(self, message: Message) -> Message:
        self._check_index(message)
        camera = self._world.bench.camera
        return {
            "camera": "twin-camera",
            "width_px": camera.width_px,
            "height_px": camera.height_px,
            "bits": camera.bits,
        }

    def _begin(self, message: Message) -> Message:
        """Answers when the exposure is over; its frame is fetched by the number."""
        asked_s = self._world.time.now_s()
        self._check_index(message)
        exposure_ms = float(message["exposure_ms"])
        exposing = self._world.begin_exposure(exposure_ms, _label(message))
        self._check_index(message)
        with self._lock:
            self._exposures += 1
            self._exposed[self._exposures] = exposing
            # What nobody fetched is lost: a client that was killed asks no more.
            self._exposed.pop(self._exposures - MOST_UNFETCHED, None)
            return {"exposure": self._exposures, "asked_s": asked_s}

    def _fetch(self, message: Message) -> Message:
        with self._lock:
            exposing = self._exposed.pop(int(message["exposure"]))
        with self._reading_out:
            try:
                taken = self._world.camera.read_out(exposing)
            except NoFrame:
                return {"file": ""}
        return self._hand_over(taken)

    def _hand_over(self, taken: Exposed) -> Message:
        frame = np.ascontiguousarray(taken.frame, dtype="<u2")
        with self._lock:
            self._frames += 1
            path = self.spool / f"frame-{self._frames:06d}.raw"
        path.write_bytes(frame.data)
        crc32 = zlib.crc32(frame.data)
        self._world.time.wait_until(taken.ready_s)
        return {
            "file": str(path),
            "rows": int(frame.shape[0]),
            "columns": int(frame.shape[1]),
            "crc32": crc32,
            "began_s": taken.began_s,
        }


def _label(message: Message) -> Label:
    values = message["label"]
    return Label(
        mount=int(values["mount"]),
        laser=str(values["laser"]),
        repeat=int(values["repeat"]),
        step=int(values["step"]),
        exposure=int(values["exposure"]),
        planned_s=float(values["planned_s"]),
    )


def _make_spool(directory: Path) -> Path:
    """An empty folder for frames in passing: in memory where the machine offers it.

    Its name follows from ``directory``, so that what a killed twin left is removed by
    the next one there.
    """
    mark = hashlib.sha256(str(directory.resolve()).encode()).hexdigest()[:16]
    for beside in (SHARED_MEMORY, directory):
        spool = beside / f"pitchsweep-twin-{mark}"
        shutil.rmtree(spool, ignore_errors=True)
        try:
            spool.mkdir(mode=0o700)
        except OSError:
            continue  # not there, full, or somebody else's
        return spool
    raise OSError(f"no folder for frames can be made in {directory}")
