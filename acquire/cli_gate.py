"""The verbs of the gate: ``ack`` and ``dark``. Parses, calls, prints."""

import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

if TYPE_CHECKING:
    from pitchsweep.safety.running_guards import DarkAnswer

SILENT_WORDS = (
    "no answer; its unit goes dark by itself within 250 ms of the last keep-alive"
)

NOBODY_WORDS = (
    "no guard of this user was found here; that says nothing of light that others hold:"
    "\nuse the interlock, the emergency stop or the mains where light must go at once"
)


def ack(
    run: Annotated[Path, typer.Argument(help="The run folder that was tripped.")],
    name: Annotated[
        str | None, typer.Option(help="Who acknowledges (asked for if not given).")
    ] = None,
) -> None:
    """Acknowledge a trip, at the bench and by name.

    Only then may a tripped run go on.
    """
    from pitchsweep.acquire.ack_run import acknowledge_run
    from pitchsweep.configs.typed_command import typed
    from pitchsweep.safety.safety_errors import CAUTION

    done = acknowledge_run(run, name or _ask_name(), _say)
    print(f"{done.run}: {done.reason}")
    print(f"go on with: {typed('sweep', '--resume', done.run)}")
    print(f"Caution: {CAUTION}", flush=True)


def dark() -> None:
    """Make every running sweep of this user dark at once.

    Needs nothing and no one.
    """
    from pitchsweep.safety.running_guards import find_guards, tell_dark

    answers = [tell_dark(guard) for guard in find_guards()]
    for answer in answers:
        print(f"{answer.guard.run} on {answer.guard.unit}: {_dark_words(answer)}")
    if not answers:
        print(NOBODY_WORDS)
    sys.stdout.flush()
    if not all(answer.answered and not answer.light_on for answer in answers):
        _say("cut the power or open the interlock where the light must go at once")
        raise typer.Exit(3)


def register(app: typer.Typer) -> None:
    """Adds these verbs to the command line."""
    app.command()(ack)
    app.command()(dark)


def _dark_words(answer: "DarkAnswer") -> str:
    from pitchsweep.safety.running_guards import GONE

    if not answer.answered:
        return SILENT_WORDS
    if answer.state == GONE:
        return "its guard has ended; the unit is dark by itself"
    return f"{'LIGHT STILL ON' if answer.light_on else 'dark'}, gate {answer.state}"


def _ask_name() -> str:
    if not sys.stdin.isatty():
        raise typer.BadParameter("give --name, or run this at a terminal")
    return str(typer.prompt("your name", err=True))


def _say(text: str) -> None:
    print(text, file=sys.stderr, flush=True)
