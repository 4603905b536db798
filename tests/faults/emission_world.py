"""A lit unit, its guard and the line between them, for the emission faults.

Unit and guard are processes of their own; the unit's log is the judge.
"""

import socket
import sys
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).parent.parent))

from emulated_unit import EmulatedUnit  # noqa: E402
from guard_builders import KEY, POWER_MW, guard_config  # noqa: E402

from pitchsweep.drivers.dialect_files import shipped_dialect_mapping  # noqa: E402
from pitchsweep.safety.file_watch import file_sha256  # noqa: E402
from pitchsweep.safety.guard_client import GuardClient, start_guard  # noqa: E402
from pitchsweep.safety.guard_config import GuardConfig  # noqa: E402


@dataclass
class Lit:
    """A lit unit with its guard; ``wire`` is the line between them, if it is ours."""

    unit: EmulatedUnit
    guard: GuardClient
    folder: Path
    config: GuardConfig
    wire: "Wire | None" = None


@dataclass(frozen=True)
class Scene:
    """A fault: ``act`` brings it about and gives the moment it began."""

    name: str
    bound_s: float
    act: Callable[[Lit], float]
    line: str = "keep-alive"
    channels: int = 1
    settings: dict[str, Any] = field(default_factory=dict)


class Wire:
    """A socket between guard and unit that can be cut, closed or spoilt."""

    def __init__(self, url: str) -> None:
        host, _, port = url.removeprefix("socket://").partition(":")
        self.cut = threading.Event()
        self._far = socket.create_connection((host, int(port)))
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.url = f"socket://127.0.0.1:{self._listener.getsockname()[1]}"
        self._near: socket.socket | None = None
        threading.Thread(target=self._serve, daemon=True).start()

    def garbage(self) -> None:
        """Bytes that no unit ever says."""
        assert self._near is not None
        self._near.sendall(b"\x00\xff~~nonsense~~\n")

    def close(self) -> None:
        """Both ends are gone."""
        for end in (self._near, self._far, self._listener):
            if end is not None:
                with suppress(OSError):
                    end.shutdown(socket.SHUT_RDWR)
                end.close()

    def _serve(self) -> None:
        self._near, _ = self._listener.accept()
        threading.Thread(
            target=self._carry, args=(self._near, self._far), daemon=True
        ).start()
        self._carry(self._far, self._near)

    def _carry(self, source: socket.socket, sink: socket.socket) -> None:
        with suppress(OSError):
            while data := source.recv(4096):
                if not self.cut.is_set():
                    sink.sendall(data)


def config_for(unit: EmulatedUnit, scene: Scene, port: str) -> GuardConfig:
    """The guard's configuration for ``scene``, with the unit at ``port``."""
    dialect = shipped_dialect_mapping("emission-line")
    assert isinstance(dialect, dict)
    job = unit.log.parent / "job.yaml"
    job.write_text("power_mw: 0.9\n")
    return guard_config(
        port=port,
        dialect=dialect,
        ledger=unit.log.parent / "ledger.jsonl",
        utc_s=time.time(),
        line="pulses" if scene.line == "pulses" else "keep-alive",
        channels=scene.channels,
        watched={str(job): file_sha256(job)},
        **scene.settings,
    )


@contextmanager
def lit(scene: Scene, folder: Path) -> Iterator[Lit]:
    """The light is on at step 1 inside the block; everything ends with it."""
    unit = EmulatedUnit(
        folder / "unit.log", KEY, line=scene.line, channels=scene.channels
    )
    wire = Wire(unit.port) if scene.line == "socket" else None
    config = config_for(unit, scene, unit.port if wire is None else wire.url)
    try:
        with start_guard(config) as guard:
            guard.arm(unit)
            guard.light_on(1, 0.0, 0.0, POWER_MW)
            yield Lit(unit, guard, folder, config, wire)
    finally:
        if wire is not None:
            wire.close()
        unit.end()
