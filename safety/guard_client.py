"""The controller's side of the guard: starts it, keeps it informed, asks it (acts).

A thread sends a heartbeat with the latest stage data, another reads what the guard
reports. After a trip every call raises GateTripped until ``acknowledge`` succeeds;
when the guard is gone every call raises GuardLost.
"""

import subprocess
import sys
import threading
import time
from collections.abc import Callable
from dataclasses import replace
from types import TracebackType
from typing import IO, Protocol, Self

from pitchsweep.safety.arming_proof import Want
from pitchsweep.safety.gate_event import GateEvent
from pitchsweep.safety.gate_table import GateState
from pitchsweep.safety.guard_config import GuardConfig, config_as_mapping
from pitchsweep.safety.guard_pipe import REPLY_LIMIT_S, GuardPipe, Message
from pitchsweep.safety.safety_errors import GateRefused
from pitchsweep.safety.stage_report import StageReport, beat_fields

BEAT_PERIOD_S = 0.05
LOOK_AGAIN_S = 0.01
MOST_TRIALS = 5
"""Time-out trials before arming is given up, on a computer too busy to see one."""
GUARD_COMMAND = [sys.executable, "-m", "pitchsweep.safety.guard_process"]


class Person(Protocol):
    """Who is asked to move the interlock; ``patience_s`` is how long that may take."""

    patience_s: float

    def open_interlock(self) -> None: ...

    def close_interlock(self) -> None: ...


class GuardClient:
    """A running guard. Make one with ``start_guard``; ``stop`` or leave the ``with``.

    ``tripped`` is set while the gate is tripped, ``lost`` for good when the guard is
    gone; ``events`` is the gate's history so far.
    """

    def __init__(
        self, pipe: GuardPipe, *, now: Callable[[], float] = time.monotonic
    ) -> None:
        self.tripped = pipe.tripped
        self.lost = pipe.lost
        self.events = pipe.events
        self._pipe = pipe
        self._now = now
        self._stage: StageReport | None = None
        self._ending = threading.Event()
        self._beater = threading.Thread(target=self._beat_on, daemon=True)

    @property
    def pid(self) -> int:
        """The guard's process number."""
        return self._pipe.process.pid

    @property
    def state(self) -> GateState:
        """Where the gate stands, as last reported."""
        return self._pipe.state

    def arm(self, person: Person) -> None:
        """Proves unit, time-out, interlock and permit; the gate is ready then, dark.

        ``person`` is asked to open and close the interlock with the shutter shut.
        Raises GateRefused where a condition is missing or the person does not come,
        GateTripped where the unit is not what it should be.
        """
        self._prove(person)
        self._ask_or_raise("arm")

    def acknowledge(self, name: str) -> None:
        """Acknowledges a trip; the gate is cold after it and must be armed anew.

        Raises GateRefused while reset input, interlock cycle or name are missing.
        """
        reply = self._pipe.ask("ack", name=name)
        if not reply["done"]:
            self._refuse(reply, "acknowledging")

    def light_on(
        self, step: int, commanded_deg: float, readback_deg: float, power_mw: float
    ) -> None:
        """Asks for light at ``step``, stage and power having been read just now.

        Returns when the unit shows light, which takes a relay some tenths of a second.
        """
        self.report_stage(
            StageReport(
                step,
                commanded_deg,
                readback_deg,
                self._now(),
                turning=False,
                power_mw=power_mw,
            )
        )
        reply = self._ask_or_raise("light", **self._stage_fields())
        while not reply["light_on"]:
            time.sleep(LOOK_AGAIN_S)
            reply = self._ask_or_raise("beat", **self._stage_fields())
            if reply["state"] != GateState.LIT.value:
                self._refuse({"reason": "dark meanwhile"}, "light")

    def press(self) -> None:
        """A person has pressed the key of an attended permit, just now."""
        self._pipe.send({"command": "press", "sent_s": self._now()}, wait_s=0.5)

    def dark(self) -> None:
        """Asks for dark; returns when the guard has asked the unit."""
        if self.lost.is_set():
            self._pipe.raise_if_stopped()
        self._pipe.ask("dark")
        self._pipe.raise_if_stopped()

    def disarm(self) -> None:
        """Dark and cold, so that a person may open the interlock; ``arm`` ends it.

        Raises GateTripped where the gate has tripped.
        """
        self._ask("disarm")

    def trip(self, reason: str) -> None:
        """Trips the gate for a fault that the controller saw."""
        self._pipe.ask("trip", reason=reason)

    def report_stage(self, stage: StageReport) -> None:
        """What the next heartbeats say of the stage."""
        self._stage = stage

    def report_power(self, power_mw: float) -> None:
        """The power at the part, read just now; the guard has judged it on return.

        Raises GateTripped where it is above the limit, GuardLost.
        """
        stage = self._stage
        if stage is not None:
            now_s = self._now()
            self._stage = replace(stage, power_mw=power_mw, power_at_s=now_s)
            self._ask("beat", **self._stage_fields())

    def check(self) -> None:
        """Raises GateTripped after a trip, GuardLost when the guard is gone."""
        self._pipe.raise_if_stopped()

    def stop(self) -> None:
        """Dark, and the guard ends; harmless when it has ended already."""
        self._ending.set()
        self._pipe.send({"command": "stop"}, wait_s=0.5)
        self._pipe.close(BEAT_PERIOD_S)
        if self._beater.ident is not None:
            self._beater.join(REPLY_LIMIT_S)

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

    def begin(self, config: GuardConfig) -> None:
        """Starts the conversation; ``start_guard`` does this."""
        self._pipe.begin(config_as_mapping(config))
        self._beater.start()
        self._send_beat()

    def _prove(self, person: Person) -> None:
        trials, asked = 0, Want.NOTHING
        until_s = self._now() + person.patience_s
        while True:
            reply = self._ask("proof")
            want = Want(reply["wants"])
            if want is Want.NOTHING:
                return
            if self._now() > until_s or trials > MOST_TRIALS:
                self._refuse(reply, "arming")
            if want is Want.TRIAL:
                trials += 1
                self._ask_or_raise("trial")
            elif want is not asked and want is Want.OPEN:
                person.open_interlock()
            elif want is not asked and want is Want.CLOSE:
                person.close_interlock()
            asked = want
            time.sleep(LOOK_AGAIN_S)

    def _ask(self, command: str, **fields: object) -> Message:
        self._pipe.raise_if_stopped()
        reply = self._pipe.ask(command, **fields)
        self._pipe.raise_if_stopped()
        return reply

    def _ask_or_raise(self, command: str, **fields: object) -> Message:
        reply = self._ask(command, **fields)
        if not reply["done"]:
            self._refuse(reply, command)
        return reply

    def _refuse(self, reply: Message, what: str) -> None:
        raise GateRefused(
            f"{what} refused: {reply['reason']}", "do what is missing, then try again"
        )

    def _stage_fields(self) -> dict[str, object]:
        return beat_fields(self._stage, self._now())

    def _send_beat(self) -> None:
        message = {"command": "beat", **self._stage_fields()}
        self._pipe.send(message, wait_s=BEAT_PERIOD_S)

    def _beat_on(self) -> None:
        while not (self._ending.wait(BEAT_PERIOD_S) or self.lost.is_set()):
            self._send_beat()


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
    pipe = GuardPipe(process, port=config.unit.port, on_event=on_event)
    client = GuardClient(pipe)
    try:
        client.begin(config)
    except BaseException:
        client.stop()
        raise
    return client


__all__ = ["GuardClient", "Person", "StageReport", "start_guard"]
