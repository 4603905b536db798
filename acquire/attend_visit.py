"""A visit under an attended permit: laser by laser, light while held, powers. Acts."""

import sys
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from datetime import UTC, date, datetime, timedelta

from pitchsweep.acquire.attended_bench import AttendedBench, Place
from pitchsweep.acquire.attended_session import (
    LEAST_LIGHT_S,
    AttendedSession,
    Noted,
)
from pitchsweep.acquire.held_key import Keys, TerminalKeys
from pitchsweep.acquire.hold_to_run import HOLD, HoldWorld, hold_to_run
from pitchsweep.acquire.interview import Ask, ask_at_terminal, say
from pitchsweep.acquire.stop_signals import StopSignals
from pitchsweep.safety.attended_permit import HOLD_S
from pitchsweep.safety.safety_errors import GateRefused

READ, NEXT, LEAVE = "r", "n", "q"
TWIN_METER = "meter of the simulated bench"
TWIN_METER_LASTS = timedelta(days=365)
KEYS = (
    "hold the space bar: light, and dark within"
    f" {HOLD_S:g} s of letting go; r: note the power; n: next laser; q: leave"
)


@dataclass
class Watched:
    """What was last seen during a hold: a twin's meter while lit (mW), light so far."""

    laser: str
    meter_mw: float | None = None
    lit_s: float = 0.0
    shown: str = ""


class TwinHand:
    """The simulated person's hand: holds the key, then wants to note the power."""

    def __init__(self) -> None:
        self._since_s: float | None = None

    def read(self, wait_s: float) -> str:
        """Presses again and again, as a key does that is held."""
        threading.Event().wait(wait_s)
        now_s = time.monotonic()
        self._since_s = self._since_s or now_s
        return READ if now_s - self._since_s > 1.5 * LEAST_LIGHT_S else HOLD

    def drop(self) -> None:
        """Begins anew."""
        self._since_s = None


@dataclass
class Visit:
    """What a visit works with; ``hand`` is a twin's person, None for a terminal."""

    session: AttendedSession
    bench: AttendedBench
    stop: StopSignals
    hand: TwinHand | None = None
    ask: Ask = ask_at_terminal
    keys: Callable[[], "TerminalKeys"] = field(default=TerminalKeys)


def visit(
    session: AttendedSession,
    bench: AttendedBench,
    stop: StopSignals,
    hand: TwinHand | None,
) -> None:
    """Goes from laser to laser until each is done, or somebody leaves.

    Raises GateTripped, DriverError, StopRequested, GateRefused for a power above the
    permit's ceiling, LedgerBroken, OSError.
    """
    going = Visit(session, bench, stop, hand)
    for place in session.terms.places:
        if not _at_laser(going, place) or session.time_is_up:
            return


def _at_laser(going: Visit, place: Place) -> bool:
    """Holds and notes at one laser; False when somebody leaves."""
    say()
    say(f"laser '{place.laser}' and no other is switched on; {place.stage_deg:.3f} deg")
    light, seen = going.bench.light_at(place), Watched(place.laser)
    if going.hand is None:
        say(KEYS)
    while True:
        with _keys(going) as keys:
            held = hold_to_run(light, _world(going, keys, seen), READ + NEXT + LEAVE)
        seen.lit_s += held.lit_s
        going.session.lit_s += held.lit_s
        _show_line(seen, "dark", last=True)
        if held.key == READ:
            _note(going, seen)
            if going.hand is None:
                continue
        if held.key in ("", LEAVE):
            return False
        return True


@contextmanager
def _keys(going: Visit) -> Iterator[Keys]:
    if going.hand is not None:
        yield going.hand
        return
    with going.keys() as keys:
        yield keys


def _world(going: Visit, keys: Keys, seen: Watched) -> HoldWorld:
    def look(lit: bool, refused: str) -> None:
        if refused:
            say(f"  {refused}")
        if lit and going.bench.meter is not None:
            seen.meter_mw = going.bench.meter(seen.laser) or seen.meter_mw
        _show_line(seen, "LIGHT" if lit else "dark ")

    return HoldWorld(
        keys=keys,
        now=time.monotonic,
        look=look,
        time_is_up=lambda: going.session.time_is_up,
        check_stop=going.stop.check,
    )


def _show_line(seen: Watched, state: str, *, last: bool = False) -> None:
    """One line that is written over while it stays the same line."""
    shown = "meter" if state == "LIGHT" else "the meter showed"
    meter = "" if seen.meter_mw is None else f"  {shown} {seen.meter_mw:.3f} mW"
    text = f"  {state}  {seen.laser}{meter}"
    if text == seen.shown and not last:
        return
    begin = "\r" if sys.stderr.isatty() else "\n"[: bool(seen.shown)]
    sys.stderr.write(f"{begin}{text}" + "\n" * last)
    sys.stderr.flush()
    seen.shown = "" if last else text


def _note(going: Visit, seen: Watched) -> None:
    """Notes the power, asked for in the dark; before there was light nothing is."""
    if seen.lit_s < LEAST_LIGHT_S:
        say(f"  hold the key for {LEAST_LIGHT_S:g} s first, and read the meter")
        return
    noted = _by_twin(seen) if going.hand is not None else _asked(going, seen)
    if noted is not None:
        going.session.note(noted)
        say(f"  noted: {noted.laser} {noted.value_mw:g} mW, signed")


def _by_twin(seen: Watched) -> Noted:
    if seen.meter_mw is None:
        raise GateRefused(f"laser '{seen.laser}' gave no light", "look at the bench")
    due = (datetime.now(UTC) + TWIN_METER_LASTS).date().isoformat()
    value_mw = round(seen.meter_mw, 6)
    return Noted(seen.laser, value_mw, TWIN_METER, due, seen.lit_s)


def _asked(going: Visit, seen: Watched) -> Noted | None:
    """What the person types; None when they leave it."""
    hint = "" if seen.meter_mw is None else f"{seen.meter_mw:.4g}"
    while True:
        typed = going.ask(f"power at the part of '{seen.laser}' in mW (q: none)", hint)
        if typed.lower() == LEAVE:
            return None
        meter = going.ask("instrument and its number", "")
        due = going.ask("its calibration is due (2030-01-31)", "")
        why = _why_not(typed, meter, due)
        if why is None:
            value_mw = float(typed.replace(",", "."))
            return Noted(seen.laser, value_mw, meter, due, seen.lit_s)
        say(f"  will not do: {why}")


def _why_not(typed: str, meter: str, due: str) -> str | None:
    try:
        if not 0.0 <= float(typed.replace(",", ".")) <= 1e5:
            return f"{typed} mW: from 0 to 100000"
    except ValueError:
        return f"{typed or 'nothing'} is no number"
    if not meter:
        return "which instrument?"
    try:
        if date.fromisoformat(due) < datetime.now(UTC).date():
            return f"the instrument was due on {due}"
    except ValueError:
        return f"{due or 'nothing'} is no day such as 2030-01-31"
    return None
