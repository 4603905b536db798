"""Starts the twin as a process of its own, in a session of its own (acts)."""

import contextlib
import json
import secrets
import select
import subprocess
import sys
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from types import TracebackType
from typing import Any, Self

from pitchsweep.configs.bench_model import Bench
from pitchsweep.configs.part_model import Part
from pitchsweep.drivers.driver_errors import DeviceRefused, LineBroke, NoAnswerInTime
from pitchsweep.drivers.twin.fault_schedule import Fault
from pitchsweep.drivers.twin_link import TwinAddress

START_TIMEOUT_S = 40.0
END_TIMEOUT_S = 10.0


@dataclass(frozen=True)
class TwinHandle:
    """A running twin: where its ports are, and the key that proves it is ours.

    The twin holds its ports until ``end``; when this process dies, the twin notices,
    outlives it by the keep-alive and 5 s, and ends in the dark.
    """

    directory: Path
    stage_port: str
    unit_port: str
    address: TwinAddress = field(repr=False)
    proof_key: bytes = field(repr=False)
    process: "subprocess.Popen[bytes]" = field(repr=False)

    def end(self, timeout_s: float = END_TIMEOUT_S) -> int:
        """Tells the twin to end; its exit code. NoAnswerInTime if it must be killed."""
        stdin = self.process.stdin
        if stdin is not None and not stdin.closed:
            with stdin, contextlib.suppress(OSError):  # it may have ended already
                stdin.write(b"end\n")
        try:
            code = self.process.wait(timeout_s)
        except subprocess.TimeoutExpired:
            self.process.kill()
            self.process.wait()
            raise NoAnswerInTime("twin", "end", timeout_s) from None
        finally:
            if self.process.stdout is not None:
                self.process.stdout.close()
        return code

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.end()


def start_twin(
    directory: Path,
    bench: Bench,
    part: Part,
    seed: int,
    *,
    faults: Sequence[Fault] = (),
    lot: Sequence[Part] = (),
) -> TwinHandle:
    """A twin working in ``directory`` (made if missing), ready to be asked.

    ``lot`` holds the parts that are seated in turn, ``part`` among them; empty where
    that is ``part`` alone. The twin goes on from ``state.json`` where there is one and
    writes ``twin_truth.json``, ``unit.log`` and ``twin.err``. Raises DeviceRefused
    where the twin refuses its configuration or its folder, LineBroke where it does not
    start, NoAnswerInTime.
    """
    directory.mkdir(parents=True, exist_ok=True)
    key, token = secrets.token_bytes(32), secrets.token_hex(16)
    configuration = {
        "directory": str(directory.resolve()),
        "bench": bench.model_dump(mode="json"),
        "part": part.model_dump(mode="json"),
        "lot": [one.model_dump(mode="json") for one in lot],
        "seed": seed,
        "key": key.hex(),
        "token": token,
        "faults": [fault.to_json() for fault in faults],
    }
    process = _spawn(directory / "twin.err")
    try:
        said = _introduce(process, configuration)
        if "refused" in said:
            raise DeviceRefused("twin", "declined", str(said["refused"]))
    except BaseException:
        _give_up(process)
        raise
    host, port = said["address"]
    return TwinHandle(
        directory=directory,
        stage_port=said["stage_port"],
        unit_port=said["unit_port"],
        address=TwinAddress(host, port, token),
        proof_key=key,
        process=process,
    )


def _spawn(errors: Path) -> "subprocess.Popen[bytes]":
    with errors.open("ab") as stderr:
        try:
            return subprocess.Popen(
                [sys.executable, "-m", "pitchsweep.drivers.twin"],
                stdin=subprocess.PIPE,
                stdout=subprocess.PIPE,
                stderr=stderr,
                start_new_session=True,
                bufsize=0,
            )
        except OSError as error:
            raise LineBroke("twin", "starting", error) from error


def _introduce(
    process: "subprocess.Popen[bytes]", configuration: dict[str, Any]
) -> dict[str, Any]:
    assert process.stdin is not None and process.stdout is not None
    data = json.dumps(configuration).encode("utf-8") + b"\n"
    try:
        while data:
            data = data[process.stdin.write(data) :]
    except OSError as error:
        raise LineBroke("twin", "starting", error) from error
    if not select.select([process.stdout], [], [], START_TIMEOUT_S)[0]:
        raise NoAnswerInTime("twin", "start", START_TIMEOUT_S)
    line = process.stdout.readline()
    if not line:
        raise LineBroke("twin", "starting", "it ended at once; see twin.err")
    said: dict[str, Any] = json.loads(line)
    return said


def _give_up(process: "subprocess.Popen[bytes]") -> None:
    process.kill()
    process.wait()
    for stream in (process.stdin, process.stdout):
        if stream is not None:
            stream.close()
