"""The controller's side of the guard: starts it, keeps it informed, asks it (acts).

A thread sends a heartbeat with the latest stage data, another reads what the guard
reports. After a trip every call raises GateTripped until ``acknowledge`` succeeds;
when the guard is gone every call raises GuardLost.
"""

import json
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Mapping
from contextlib import suppress
from types import TracebackType
from typing import IO, Self

from pitchsweep.drivers.driver_errors import LineBroke
from pitchsweep.safety.gate_event import GateEvent, event_from_mapping
from pitchsweep.safety.gate_table import GateState
from pitchsweep.safety.guard_config import GuardConfig, config_as_mapping
from pitchsweep.safety.ledger_chain import canonical_json
from pitchsweep.safety.safety_errors import GateRefused, GateTripped, GuardLost
from pitchsweep.safety.stage_report import StageReport, beat_fields

BEAT_PERIOD_S = 0.05
REPLY_LIMIT_S = 3.0
START_LIMIT_S = 10.0
EXIT_DEVICE = 4
GUARD_COMMAND = (sys.executable, "-m", "pitchsweep.safety.guard_process")


class GuardClient:
    """A running guard. Make one with ``start_guard``; ``stop`` or leave the ``with``.

    ``tripped`` is set while the gate is tripped, ``lost`` for good when the guard is
    gone; ``events`` is the gate's history so far. ``on_event`` is called with every
    line of it, from the reading thread.
    """

    def __init__(
        self,
        process: subprocess.Popen[bytes],
        *,
        port: str,
        on_event: Callable[[GateEvent], None] | None = None,
        now: Callable[[], float] = time.monotonic,
    ) -> None:
        self.tripped = threading.Event()
        self.lost = threading.Event()
        self.events: list[GateEvent] = []
        self._process = process
        self._port = port
        self._on_event = on_event
        self._now = now
        self._stage: StageReport | None = None
        self._state = GateState.COLD
        self._number = 0
        self._replies: dict[int, Mapping[str, object]] = {}
        self._news = threading.Condition()
        self._sending = threading.Lock()
        self._started = False
        self._ending = threading.Event()
        self._fatal: Mapping[str, object] | None = None
        self._reader = threading.Thread(target=self._read, daemon=True)
        self._beater = threading.Thread(target=self._beat_on, daemon=True)

    @property
    def pid(self) -> int:
        """The guard's process number."""
        return self._process.pid

    @property
    def state(self) -> GateState:
        """Where the gate stands, as last reported."""
        return self._state

    def arm(self) -> None:
        """Proves unit and permit and makes the gate ready, dark.

        Raises GateRefused where a condition is missing, GateTripped where the unit is
        not what it should be.
        """
        self._ask_or_raise("arm")

    def acknowledge(self, name: str) -> None:
        """Acknowledges a trip; the gate is cold after it and must be armed anew.

        Raises GateRefused while reset input, interlock cycle or name are missing.
        """
        reply = self._ask("ack", name=name)
        if not reply["done"]:
            self._refuse(reply, "acknowledging")

    def light_on(self, step: int, commanded_deg: float, readback_deg: float) -> None:
        """Asks for light at ``step``, the stage having been read back just now."""
        self.report_stage(
            StageReport(step, commanded_deg, readback_deg, self._now(), turning=False)
        )
        self._raise_if_stopped()
        self._ask_or_raise("light", **self._stage_fields())

    def dark(self) -> None:
        """Asks for dark; returns when the guard has asked the unit."""
        if self.lost.is_set():
            self._raise_if_stopped()
        self._ask("dark")
        self._raise_if_stopped()

    def trip(self, reason: str) -> None:
        """Trips the gate for a fault that the controller saw."""
        self._ask("trip", reason=reason)

    def report_stage(self, stage: StageReport) -> None:
        """What the next heartbeats say of the stage."""
        self._stage = stage

    def check(self) -> None:
        """Raises GateTripped after a trip, GuardLost when the guard is gone."""
        self._raise_if_stopped()

    def stop(self) -> None:
        """Dark, and the guard ends; harmless when it has ended already."""
        self._ending.set()
        self._send({"command": "stop"}, wait_s=0.5)
        self._close_stdin()
        try:
            self._process.wait(REPLY_LIMIT_S)
        except subprocess.TimeoutExpired:
            self._process.kill()
            self._process.wait()
        for thread in (self._beater, self._reader):
            if thread.ident is not None:
                thread.join(REPLY_LIMIT_S)
        if self._process.stdout is not None:
            self._process.stdout.close()

    def _close_stdin(self) -> None:
        """The end of its input means dark and the end to the guard, whatever else."""
        pipe = self._process.stdin
        if pipe is None or not self._sending.acquire(timeout=BEAT_PERIOD_S):
            return
        try:
            with suppress(OSError):
                pipe.close()
        finally:
            self._sending.release()

    def end(self) -> None:
        """The same as ``stop``."""
        self.stop()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.stop()

    def _begin(self, config: Mapping[str, object]) -> None:
        self._reader.start()
        self._send(config, wait_s=START_LIMIT_S)
        with self._news:
            self._news.wait_for(
                lambda: self._started or self.lost.is_set(), START_LIMIT_S
            )
        if not self._started:
            self._raise_not_started()
        self._beater.start()
        self._send_beat()

    def _raise_not_started(self) -> None:
        fatal = self._fatal or {"fatal": "it did not start"}
        reason = str(fatal["fatal"])
        self._process.kill()
        if fatal.get("exit") == EXIT_DEVICE:
            raise LineBroke(self._port, "opening the emission line", reason)
        raise GateRefused(f"the guard: {reason}", "mend what it names and try again")

    def _ask_or_raise(self, command: str, **fields: object) -> None:
        self._raise_if_stopped()
        reply = self._ask(command, **fields)
        self._raise_if_stopped()
        if not reply["done"]:
            self._refuse(reply, command)

    def _refuse(self, reply: Mapping[str, object], what: str) -> None:
        raise GateRefused(
            f"{what} refused: {reply['reason']}", "do what is missing, then try again"
        )

    def _ask(self, command: str, **fields: object) -> Mapping[str, object]:
        with self._news:
            self._number += 1
            number = self._number
        self._send({"command": command, "id": number, **fields}, wait_s=REPLY_LIMIT_S)
        with self._news:
            self._news.wait_for(
                lambda: number in self._replies or self.lost.is_set(), REPLY_LIMIT_S
            )
            reply = self._replies.pop(number, None)
        if reply is None:
            raise GuardLost(self._why_lost(f"no reply to '{command}'"))
        return reply

    def _raise_if_stopped(self) -> None:
        if self.lost.is_set():
            raise GuardLost(self._why_lost("it ended"))
        if self.tripped.is_set():
            trips = [e for e in self.events if e.state == "tripped" and e.moved]
            raise GateTripped(trips[-1].event, trips[-1].reason)

    def _why_lost(self, otherwise: str) -> str:
        ended = [e for e in self.events if e.state == "ended"]
        if ended:
            return f"the guard ended: {ended[-1].reason}"
        code = self._process.poll()
        how = otherwise if code is None else f"it ended with code {code}"
        return f"the guard is gone or silent: {how}"

    def _stage_fields(self) -> dict[str, object]:
        return beat_fields(self._stage, self._now())

    def _send_beat(self) -> None:
        self._send({"command": "beat", **self._stage_fields()}, wait_s=BEAT_PERIOD_S)

    def _beat_on(self) -> None:
        while not (self._ending.wait(BEAT_PERIOD_S) or self.lost.is_set()):
            self._send_beat()

    def _send(self, message: Mapping[str, object], *, wait_s: float) -> None:
        """Writes a line; a broken pipe shows in ``lost``, which the reader sets."""
        pipe = self._process.stdin
        if pipe is None or not self._sending.acquire(timeout=wait_s):
            return
        try:
            with suppress(OSError, ValueError):
                pipe.write(canonical_json(message) + b"\n")
                pipe.flush()
        finally:
            self._sending.release()

    def _read(self) -> None:
        pipe = self._process.stdout
        assert pipe is not None
        try:
            with suppress(OSError, ValueError):
                for line in pipe:
                    self._take(json.loads(line))
        finally:
            with self._news:
                self.lost.set()
                self._news.notify_all()

    def _take(self, message: Mapping[str, object]) -> None:
        event = message.get("event")
        if isinstance(event, dict):
            self._take_event(event_from_mapping(event))
        with self._news:
            if "started" in message:
                self._started = True
            elif "fatal" in message:
                self._fatal = message
            elif isinstance(message.get("reply"), int):
                self._replies[int(str(message["reply"]))] = message
            self._news.notify_all()

    def _take_event(self, event: GateEvent) -> None:
        self.events.append(event)
        self._state = GateState(event.state)
        if self._state is GateState.TRIPPED:
            self.tripped.set()
        else:
            self.tripped.clear()
        if self._on_event is not None:
            self._on_event(event)


def start_guard(
    config: GuardConfig,
    *,
    on_event: Callable[[GateEvent], None] | None = None,
    stderr: int | IO[bytes] = subprocess.DEVNULL,
) -> GuardClient:
    """A guard in a process and session of its own, ready to be armed.

    Raises LineBroke when the emission line cannot be opened or is in use, GateRefused
    when the configuration or the ledger is refused. A resumed run is tripped at once.
    """
    process = subprocess.Popen(
        GUARD_COMMAND,
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=stderr,
        start_new_session=True,
    )
    client = GuardClient(process, port=config.unit.port, on_event=on_event)
    try:
        client._begin(config_as_mapping(config))
    except BaseException:
        client.stop()
        raise
    return client


__all__ = ["GuardClient", "StageReport", "start_guard"]
