"""A bench with ports, emulated: the twin's stage, unit and sensors on pseudo-terminals,
and a small HTTP camera that hands out the twin's frames as stills.

``python emulated_bench.py`` takes its configuration as one JSON line on stdin, prints
its ports as one JSON line, then obeys words until stdin ends. Its unit declines every
challenge, as a real one does. Its log is the judge of emission.
"""

import json
import subprocess
import sys
import threading
import urllib.parse
from collections.abc import Callable
from dataclasses import dataclass, field
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from pathlib import Path
from typing import Any

from emulated_unit import RealUnit

from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.part_model import Part
from pitchsweep.drivers.devices import Label
from pitchsweep.drivers.twin.emission_unit import EmissionUnit
from pitchsweep.drivers.twin.fault_schedule import FaultSchedule
from pitchsweep.drivers.twin.firmware_lines import LineCutter, Reply
from pitchsweep.drivers.twin.pty_port import PtyPort
from pitchsweep.drivers.twin.stage_firmware import StageFirmware
from pitchsweep.drivers.twin.truth import draw_truth
from pitchsweep.drivers.twin.unit_firmware import UnitFirmware
from pitchsweep.drivers.twin.unit_log import UnitLog
from pitchsweep.drivers.twin.world import World

STAGE_IDENTITY = "emulated-stage"
SEEN_ON = "2026-01-15"


class EmulatedBench:
    """The process as a test holds it; ``ports`` are its addresses."""

    def __init__(self, directory: Path, twin_job: Job, seed: int = 5) -> None:
        directory.mkdir(parents=True, exist_ok=True)
        self.directory = directory
        self.twin_job = twin_job
        self.process = subprocess.Popen(
            [sys.executable, __file__],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            start_new_session=True,
        )
        configuration = {
            "directory": str(directory),
            "bench": twin_job.bench.model_dump(mode="json"),
            "part": twin_job.part.model_dump(mode="json"),
            "seed": seed,
        }
        self.tell(json.dumps(configuration))
        assert self.process.stdout is not None
        self.ports: dict[str, str] = json.loads(self.process.stdout.readline())

    patience_s = 20.0

    def tell(self, words: str) -> None:
        assert self.process.stdin is not None
        self.process.stdin.write(words.encode() + b"\n")
        self.process.stdin.flush()

    def ask(self, what: str, check: Callable[[], None]) -> str:
        """The person at the bench, who opens and closes the door for it."""
        self.tell("open")
        check()
        for_mount = what.partition("mount ")[2]
        if for_mount:
            number, degrees = for_mount.removesuffix(" deg").split(", ")
            self.tell(f"seat {int(number) - 1} {degrees}")
        return f"emulated person ({what})"

    def open_interlock(self) -> None:
        self.tell("open")

    def close_interlock(self) -> None:
        self.tell("close")

    def job(self, **camera: Any) -> Job:
        """The job with the ports of this bench in the place of its twin."""
        bench, ports = self.twin_job.bench, self.ports
        values = bench.model_dump()
        values["twin"] = None
        values["ports"] = {
            "stage": {
                "port": ports["stage"],
                "dialect": "rotary-line",
                "identity": STAGE_IDENTITY,
            },
            "unit": {"port": ports["unit"], "dialect": "emission-line"},
            "camera": {
                "by": "http-stills",
                "address": ports["camera"],
                "automatic_off_seen_on": SEEN_ON,
                "delay_s": 0.01,
                "drop_frames": 0,
                "answers_within_s": 5.0,
                **camera,
            },
        }
        for name in ("air", "power"):
            if values[f"{name}_sensor"] is not None:
                port = {"port": ports[name], "dialect": f"{name}-line"}
                values["ports"][name] = port
        return Job.model_validate(
            {**self.twin_job.model_dump(), "bench": Bench.model_validate(values)}
        )

    def rows(self, what: str) -> list[tuple[float, str, str]]:
        """(monotonic seconds, value, why) of every change of ``what``."""
        lines = (self.directory / "unit.log").read_text().splitlines()
        found = [row for row in map(json.loads, lines) if row["what"] == what]
        return [(r["monotonic_s"], r["value"], r["why"]) for r in found]

    def truth(self) -> dict[str, Any]:
        found = json.loads((self.directory / "truth.json").read_text())
        return dict(found)

    def end(self) -> None:
        for pipe in (self.process.stdin, self.process.stdout):
            if pipe is not None:
                pipe.close()
        self.process.wait(10.0)


class _Sensors:
    """A sensor's firmware: what it is asked for, read from the world."""

    def __init__(self, identity: str, read: Callable[[], str], word: str) -> None:
        def answer(words: list[str]) -> str:
            if words == ["WHO"]:
                return f"NAMED {identity}"
            return read() if words == [word] else "DECLINED UNREADABLE"

        self._lines = LineCutter("sensors", FaultSchedule(), answer)

    def receive(self, data: bytes) -> list[Reply]:
        return self._lines.receive(data)

    def due_in_s(self) -> float | None:
        return None


@dataclass
class _Camera:
    """The camera's state: how the next frames are spoilt, how many were taken."""

    world: World
    laser: str
    how: str = ""
    count: int = 0
    lock: threading.Lock = field(default_factory=threading.Lock)

    def still(self, exposure_ms: float) -> bytes:
        """A PNG of the frame exposed from now on."""
        import cv2

        with self.lock:
            self.count += 1
            label = Label(0, self.laser, 0, self.count, 0, self.world.time.now_s())
            exposing = self.world.begin_exposure(exposure_ms, label)
            frame = self.world.camera.read_out(exposing).frame
        if self.how == "small":
            frame = frame[: frame.shape[0] // 2]
        image = (
            cv2.cvtColor(frame, cv2.COLOR_GRAY2BGR) if self.how == "colour" else frame
        )
        if self.how == "colour":
            image[:, :, 0] = 0
        if self.how == "eight-bit":
            image = (image >> 8).astype("uint8")
        kind = ".jpg" if self.how == "lossy" else ".png"
        if kind == ".jpg":
            image = (image >> 4).astype("uint8")
        content: bytes = cv2.imencode(kind, image)[1].tobytes()
        return (
            with_exif(content, exposure_ms, mode=0) if self.how == "auto" else content
        )


def with_exif(png: bytes, exposure_ms: float, mode: int) -> bytes:
    """``png`` with an eXIf chunk that tells exposure time and mode, by Pillow."""
    import io

    from PIL import Image
    from PIL.TiffImagePlugin import IFDRational

    exif = Image.Exif()
    exif[33434] = IFDRational(round(1000 * exposure_ms), 1_000_000)
    exif[41986] = mode
    with Image.open(io.BytesIO(png)) as image:
        out = io.BytesIO()
        image.save(out, "PNG", exif=exif)
    return out.getvalue()


def _serve_camera(camera: _Camera) -> ThreadingHTTPServer:
    class Handler(BaseHTTPRequestHandler):
        def do_GET(self) -> None:
            if camera.how == "silent":
                self.close_connection = True
                return
            query = urllib.parse.parse_qs(urllib.parse.urlsplit(self.path).query)
            content = camera.still(float(query["us"][0]) / 1000.0)
            self.send_response(503 if camera.how == "busy" else 200)
            if camera.how == "cached":
                self.send_header("Age", "60")
            self.send_header("Content-Length", str(len(content)))
            self.end_headers()
            self.wfile.write(content)

        def log_message(self, format: str, *args: Any) -> None:
            return

    server = ThreadingHTTPServer(("127.0.0.1", 0), Handler)
    threading.Thread(target=server.serve_forever, args=(0.05,), daemon=True).start()
    return server


def main() -> None:
    said = json.loads(sys.stdin.readline())
    directory = Path(said["directory"])
    bench = Bench.model_validate_json(json.dumps(said["bench"]))
    part = Part.model_validate_json(json.dumps(said["part"]))
    unit = EmissionUnit(
        UnitLog(directory / "unit.log"),
        keep_alive_s=bench.emission.keep_alive_ms * 1e-3,
        has_shutter=True,
        channels=bench.emission.interlock_channels,
    )
    truth = draw_truth(bench, part, said["seed"])
    (directory / "truth.json").write_text(json.dumps(truth.to_json()))
    faults = FaultSchedule()
    world = World(
        truth, bench, unit, faults=faults, state_path=directory / "state.json"
    )
    laser = next(iter(bench.lasers))
    camera = _Camera(world, laser)
    firmware = UnitFirmware(
        unit, identity=bench.emission.unit_identity, key=bytes(32), faults=faults
    )
    ports = {
        "stage": StageFirmware(world, identity=STAGE_IDENTITY, faults=faults),
        "unit": RealUnit(firmware),
        "air": _Sensors("emulated-air", lambda: _air(world), "AIR"),
        "power": _Sensors("emulated-power", lambda: _power(world, laser), "POWER"),
    }
    opened = {name: PtyPort(what, name=name) for name, what in ports.items()}
    server = _serve_camera(camera)
    address = f"http://127.0.0.1:{server.server_port}/still.png?us={{exposure_us}}"
    paths = {name: port.path for name, port in opened.items()}
    print(json.dumps({**paths, "camera": address}), flush=True)
    for line in sys.stdin:
        _obey(line.split(), world, unit, camera, server)


def _obey(
    words: list[str],
    world: World,
    unit: EmissionUnit,
    camera: _Camera,
    server: ThreadingHTTPServer,
) -> None:
    if words[0] == "seat":
        world.seat(int(words[1]), float(words[2]))
    elif words[0] == "camera":
        camera.how = words[1] if len(words) > 1 else ""
    elif words[0] == "unplug-camera":
        server.shutdown()
        server.server_close()
    elif words[0] == "reset":
        unit.press_reset()
    else:
        unit.set_door(closed=words[0] == "close")


def _air(world: World) -> str:
    air = world.read_air()
    numbers = (air.temperature_C, air.pressure_hPa, air.humidity_percent)
    return "AIR " + " ".join(f"{n:.2f}" for n in (*numbers, air.part_temperature_C))


def _power(world: World, laser: str) -> str:
    power_mw = world.sense(laser, world.time.now_s()).power_mw
    return "DECLINED NO-READING" if power_mw is None else f"POWER {power_mw:.4f}"


if __name__ == "__main__":
    main()
