"""The pipe to a guard process: lines out, replies and events in (acts)."""

import json
import subprocess
import threading
from collections.abc import Callable, Mapping
from contextlib import suppress

from pitchsweep.drivers.driver_errors import LineBroke
from pitchsweep.safety.gate_event import GateEvent, event_from_mapping
from pitchsweep.safety.gate_table import GateState
from pitchsweep.safety.ledger_chain import canonical_json
from pitchsweep.safety.safety_errors import GateRefused, GateTripped, GuardLost

REPLY_LIMIT_S = 3.0
START_LIMIT_S = 10.0
EXIT_DEVICE = 4

Message = Mapping[str, object]


class GuardPipe:
    """Numbers questions, waits for their replies, keeps the gate's history.

    ``tripped`` is set while the gate is tripped, ``lost`` for good when the guard is
    gone. ``on_event`` is called with every event, from the reading thread.
    """

    def __init__(
        self,
        process: subprocess.Popen[bytes],
        *,
        port: str,
        on_event: Callable[[GateEvent], None] | None,
    ) -> None:
        self.tripped = threading.Event()
        self.lost = threading.Event()
        self.events: list[GateEvent] = []
        self.state = GateState.COLD
        self.process = process
        self.sending = threading.Lock()
        self._port = port
        self._on_event = on_event
        self._number = 0
        self._replies: dict[int, Message] = {}
        self._news = threading.Condition()
        self._started = False
        self._fatal: Message | None = None
        self._reader = threading.Thread(target=self._read, daemon=True)

    def begin(self, config: Message) -> None:
        """Hands the configuration over and waits until the guard has begun.

        Raises LineBroke when the emission line cannot be opened, GateRefused when the
        configuration or the ledger is refused.
        """
        self._reader.start()
        self.send(config, wait_s=START_LIMIT_S)
        with self._news:
            self._news.wait_for(
                lambda: self._started or self.lost.is_set(), START_LIMIT_S
            )
        if not self._started:
            self._raise_not_started()

    def ask(self, command: str, **fields: object) -> Message:
        """The reply to ``command``. GuardLost when there is none in time."""
        with self._news:
            self._number += 1
            number = self._number
        self.send({"command": command, "id": number, **fields}, wait_s=REPLY_LIMIT_S)
        with self._news:
            self._news.wait_for(
                lambda: number in self._replies or self.lost.is_set(), REPLY_LIMIT_S
            )
            reply = self._replies.pop(number, None)
        if reply is None:
            raise GuardLost(self._why_lost(f"no reply to '{command}'"))
        return reply

    def send(self, message: Message, *, wait_s: float) -> None:
        """Writes a line; a broken pipe shows in ``lost``, which the reader sets."""
        pipe = self.process.stdin
        if pipe is None or not self.sending.acquire(timeout=wait_s):
            return
        try:
            with suppress(OSError, ValueError):
                pipe.write(canonical_json(message) + b"\n")
                pipe.flush()
        finally:
            self.sending.release()

    def raise_if_stopped(self) -> None:
        """Raises GuardLost when the guard is gone, GateTripped after a trip."""
        if self.lost.is_set():
            raise GuardLost(self._why_lost("it ended"))
        if self.tripped.is_set():
            trips = [e for e in self.events if e.state == "tripped" and e.moved]
            raise GateTripped(trips[-1].event, trips[-1].reason)

    def close(self, wait_s: float) -> None:
        """Ends the guard's input, which means dark, and waits for its end."""
        self._close_stdin(wait_s)
        try:
            self.process.wait(REPLY_LIMIT_S)
        except subprocess.TimeoutExpired:
            self.process.kill()
            self.process.wait()
        if self._reader.ident is not None:
            self._reader.join(REPLY_LIMIT_S)
        if self.process.stdout is not None:
            self.process.stdout.close()

    def _close_stdin(self, wait_s: float) -> None:
        pipe = self.process.stdin
        if pipe is None or not self.sending.acquire(timeout=wait_s):
            return
        try:
            with suppress(OSError):
                pipe.close()
        finally:
            self.sending.release()

    def _raise_not_started(self) -> None:
        fatal = self._fatal or {"fatal": "it did not start"}
        reason = str(fatal["fatal"])
        self.process.kill()
        if fatal.get("exit") == EXIT_DEVICE:
            raise LineBroke(self._port, "opening the emission line", reason)
        raise GateRefused(f"the guard: {reason}", "mend what it names and try again")

    def _why_lost(self, otherwise: str) -> str:
        ended = [e for e in self.events if e.state == "ended"]
        if ended:
            return f"the guard ended: {ended[-1].reason}"
        code = self.process.poll()
        how = otherwise if code is None else f"it ended with code {code}"
        return f"the guard is gone or silent: {how}"

    def _read(self) -> None:
        pipe = self.process.stdout
        assert pipe is not None
        try:
            with suppress(OSError, ValueError):
                for line in pipe:
                    self._take(json.loads(line))
        finally:
            with self._news:
                self.lost.set()
                self._news.notify_all()

    def _take(self, message: Message) -> None:
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
        self.state = GateState(event.state)
        if self.state is GateState.TRIPPED:
            self.tripped.set()
        else:
            self.tripped.clear()
        if self._on_event is not None:
            self._on_event(event)
