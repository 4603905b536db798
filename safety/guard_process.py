"""``python -m pitchsweep.safety.guard_process``: the one that opens the emission line.

Reads JSON lines on stdin (first the configuration, then commands), writes JSON lines
on stdout. The end of stdin and SIGTERM, SIGINT, SIGHUP mean dark at once, and the end.
Loads the standard library, the serial line, the dialect and this folder's gate only.
"""

import os
import queue
import signal
import socket
import sys
import threading
import time
from collections.abc import Callable, Mapping
from contextlib import AbstractContextManager, nullcontext, suppress
from dataclasses import dataclass, replace
from pathlib import Path
from types import FrameType

from pitchsweep.drivers.dialect import Dialect
from pitchsweep.drivers.driver_errors import DriverError
from pitchsweep.drivers.emission_client import EmissionClient
from pitchsweep.drivers.line_client import LineClient
from pitchsweep.drivers.pulse_line import PulseLineClient, open_pulse_line
from pitchsweep.drivers.serial_transport import open_serial
from pitchsweep.safety.background_writer import BackgroundWriter
from pitchsweep.safety.dark_door import Answer, DarkDoor
from pitchsweep.safety.file_watch import FileWatch
from pitchsweep.safety.gate_event import GateEvent
from pitchsweep.safety.gate_table import Event, GateState
from pitchsweep.safety.guard import Guard
from pitchsweep.safety.guard_config import (
    NETWORK_AGE_S,
    GuardConfig,
    config_from_mapping,
)
from pitchsweep.safety.guard_messages import LONGEST_LINE, read_command, read_object
from pitchsweep.safety.guard_world import GuardWorld
from pitchsweep.safety.ledger import Ledger
from pitchsweep.safety.ledger_chain import canonical_json
from pitchsweep.safety.permit_proof import why_permit_is_unproven
from pitchsweep.safety.run_ack import why_run_is_not_acknowledged
from pitchsweep.safety.safety_errors import SafetyError

CONFIG_WAIT_S = 10.0
ANSWER_SHARE = 0.75
"""The unit's deadline as a share of its keep-alive time."""
INBOX_LIMIT = 500
FLUSH_S = 2.0
EXIT_DONE, EXIT_REFUSED, EXIT_DEVICE = 0, 3, 4


@dataclass(frozen=True)
class Line:
    """A line from the controller and when it was read (monotonic seconds)."""

    data: bytes
    received_s: float


@dataclass(frozen=True)
class End:
    """A reason to end: the controller is gone, or a signal."""

    reason: str


@dataclass(frozen=True)
class HandStop:
    """Somebody said ``pitchsweep dark``; ``answer`` takes state and light."""

    answer: Answer


Inbox = queue.SimpleQueue[Line | End | HandStop]
Say = Callable[[Mapping[str, object]], None]


def main() -> int:
    """Runs a guard until it is told or forced to end; the exit code."""
    inbox: Inbox = queue.SimpleQueue()
    _end_on_signals(inbox)
    threading.Thread(target=_read_stdin, args=(inbox,), daemon=True).start()
    speaker: BackgroundWriter[Mapping[str, object]] = BackgroundWriter(_write_stdout)
    try:
        config = _await_config(inbox)
        client = _open_unit(config)
    except (ValueError, SafetyError) as error:
        return _give_up(speaker, f"configuration refused: {error}", EXIT_REFUSED)
    except DriverError as error:
        return _give_up(speaker, str(error), EXIT_DEVICE)
    try:
        with _findable(config, inbox):
            return _serve(config, client, inbox, speaker)
    except (SafetyError, OSError) as error:
        return _give_up(speaker, f"ledger or folder: {error}", EXIT_REFUSED)
    finally:
        with suppress(DriverError):
            client.close()


def _serve(
    config: GuardConfig,
    client: EmissionClient | PulseLineClient,
    inbox: Inbox,
    speaker: BackgroundWriter[Mapping[str, object]],
) -> int:
    ledger = Ledger(Path(config.ledger_path))
    why_not = why_run_is_not_acknowledged(ledger.path, config.run)
    acknowledged = config.resumed and why_not is None
    ledger.append(
        "guard-started",
        {
            "run": config.run,
            "unit": config.unit.identity,
            "port": config.unit.port,
            "permit": config.permit.kind,
            "resumed": config.resumed,
            "acknowledged": acknowledged,
        },
    )
    config = replace(config, resumed=config.resumed and not acknowledged)
    watch = FileWatch(config.watched)
    recorder: BackgroundWriter[tuple[str, dict[str, object]]] = BackgroundWriter(
        lambda item: ledger.append(*item)
    )
    world = GuardWorld(
        now=time.monotonic,
        utc=time.time,
        report=lambda event: speaker.put(_event_message(event)),
        record=lambda kind, data: recorder.put((kind, data)),
        record_failure=lambda: recorder.failure,
        settings_failure=lambda: watch.failure,
    )
    guard = Guard(config, client, world)
    try:
        guard.begin()
        speaker.put({"started": os.getpid(), "state": guard.state.value})
        _loop(guard, inbox, config.limits.tick_s, speaker.put)
    except Exception as error:
        # Whatever it is: never stay armed. The gate's table leads to dark from here.
        guard.fail(Event.GUARD_FAULT, f"{type(error).__name__}: {error}")
    finally:
        guard.end("the guard ends")
        watch.close()
        recorder.close(FLUSH_S)
        speaker.close(FLUSH_S)
    return EXIT_DONE


def _loop(guard: Guard, inbox: Inbox, tick_s: float, say: Say) -> None:
    """Ticks on time; between ticks does what is asked at once."""
    next_tick_s = time.monotonic()
    while guard.state is not GateState.ENDED:
        wait_s = next_tick_s - time.monotonic()
        if wait_s <= 0.0:
            guard.tick()
            next_tick_s = max(next_tick_s + tick_s, time.monotonic())
            continue
        try:
            item = inbox.get(timeout=wait_s)
        except queue.Empty:
            continue
        if isinstance(item, End):
            guard.end(item.reason)
        elif isinstance(item, HandStop):
            guard.fail(Event.HAND_STOP, "'pitchsweep dark' from a terminal")
            item.answer(guard.state.value, guard.shows_light)
        else:
            _obey(guard, item, say)


def _obey(guard: Guard, line: Line, say: Say) -> None:
    try:
        command = read_command(line.data, line.received_s)
    except ValueError as error:
        guard.fail(Event.CONTROLLER_FAULT, f"unreadable message: {error}")
        return
    reply = guard.handle(command)
    if command.number:
        say(
            {
                "reply": command.number,
                "done": reply.done,
                "reason": reply.reason,
                "wants": reply.wants,
                "state": guard.state.value,
                "light_on": guard.shows_light,
            }
        )


def _await_config(inbox: Inbox) -> GuardConfig:
    try:
        item = inbox.get(timeout=CONFIG_WAIT_S)
    except queue.Empty:
        raise ValueError(f"none came within {CONFIG_WAIT_S:g} s") from None
    if not isinstance(item, Line):
        raise ValueError(item.reason if isinstance(item, End) else "told to be dark")
    config = config_from_mapping(read_object(item.data))
    unproven = why_permit_is_unproven(config, time.time())
    if unproven is not None:
        raise ValueError(unproven)
    return config


def _findable(config: GuardConfig, inbox: Inbox) -> AbstractContextManager[object]:
    """The door for ``pitchsweep dark``, where the system has such sockets."""
    if not hasattr(socket, "AF_UNIX"):
        return nullcontext()
    return DarkDoor(
        run=config.run,
        unit=config.unit.identity,
        on_dark=lambda answer: inbox.put(HandStop(answer)),
    )


def _open_unit(config: GuardConfig) -> EmissionClient | PulseLineClient:
    unit = config.unit
    dialect = Dialect.from_mapping(unit.dialect)
    timeout_s = ANSWER_SHARE * unit.keep_alive_ms / 1000.0
    if unit.over_network:
        timeout_s = min(timeout_s, ANSWER_SHARE * NETWORK_AGE_S)
    if unit.line == "pulses":
        return open_pulse_line(
            unit.port,
            dialect,
            device=unit.identity,
            timeout_s=timeout_s,
            channels=unit.channels,
        )
    transport = open_serial(unit.port, baud=unit.baud)
    line = LineClient(transport, dialect, device=unit.identity)
    return EmissionClient(line, timeout_s=timeout_s)


def _end_on_signals(inbox: Inbox) -> None:
    def end(number: int, frame: FrameType | None) -> None:
        inbox.put(End(f"signal {signal.Signals(number).name}"))

    for name in ("SIGTERM", "SIGINT", "SIGHUP"):
        if hasattr(signal, name):
            signal.signal(getattr(signal, name), end)


def _read_stdin(inbox: Inbox) -> None:
    for data in iter(lambda: sys.stdin.buffer.readline(LONGEST_LINE + 1), b""):
        inbox.put(Line(data, time.monotonic()))
        while inbox.qsize() > INBOX_LIMIT:
            time.sleep(0.005)
    inbox.put(End("the controller is gone"))


def _write_stdout(message: Mapping[str, object]) -> None:
    sys.stdout.buffer.write(canonical_json(message) + b"\n")
    sys.stdout.buffer.flush()


def _event_message(event: GateEvent) -> Mapping[str, object]:
    return {"event": vars(event)}


def _give_up(
    speaker: BackgroundWriter[Mapping[str, object]], reason: str, exit_code: int
) -> int:
    speaker.put({"fatal": reason, "exit": exit_code})
    speaker.close(FLUSH_S)
    return exit_code


if __name__ == "__main__":
    code = main()
    # A thread may still wait for stdin; nothing is left to be flushed.
    os._exit(code)
