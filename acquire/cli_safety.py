"""The verbs of people: ``signer``, ``attend``, ``signoff``, ``ledger``.

Parses, calls, prints.

Passphrases are typed, or read from a file that only its owner may read; never from
the command line, where every other user could see them.
"""

import sys
from pathlib import Path
from typing import Annotated

import typer

Json = Annotated[bool, typer.Option("--json", help="Print the result as JSON.")]
PassphraseFile = Annotated[
    list[str] | None,
    typer.Option(
        "--passphrase-file",
        help="FILE, or NAME=FILE for one of several; mode 600. Else it is asked for.",
    ),
]
VERBS = ("form", "show", "verify", "revoke")

signer = typer.Typer(no_args_is_help=True, help="Who may sign on this computer.")
ledger = typer.Typer(no_args_is_help=True, help="The record of what people did.")


@signer.command("enrol")
def signer_enrol(
    name: Annotated[str, typer.Argument(help="Letters, digits, '.', '_', '-'.")],
    role: Annotated[
        list[str],
        typer.Option(help="safety-officer, technician or witness; several allowed."),
    ],
    vouched_by: Annotated[
        str | None,
        typer.Option(help="A safety officer who vouches; all but the first need one."),
    ] = None,
    passphrase_file: PassphraseFile = None,
) -> None:
    """Make a key under a passphrase and enter its owner as a signer."""
    from pitchsweep.acquire import signer_verbs

    print(signer_verbs.enrol(name, role, vouched_by, passphrase_file or []), flush=True)


@signer.command("list")
def signer_list(
    as_json: Json = False,
    rebuild: Annotated[
        bool, typer.Option(help="Write the register anew from the ledger.")
    ] = False,
) -> None:
    """Show who is or was enrolled, as the ledger has it."""
    from pitchsweep.acquire import signer_verbs

    print(signer_verbs.listed(as_json=as_json, rebuild=rebuild), flush=True)


@signer.command("revoke")
def signer_revoke(
    name: Annotated[str, typer.Argument(help="Whose key counts no more.")],
    by: Annotated[str, typer.Option(help="The safety officer, or the signer.")],
    reason: Annotated[str, typer.Option(help="Why, in a few words.")],
    passphrase_file: PassphraseFile = None,
) -> None:
    """Make a signer's key void, and every sign-off that carries it."""
    from pitchsweep.acquire import signer_verbs

    print(signer_verbs.revoke(name, by, reason, passphrase_file or []), flush=True)


def signoff(
    words: Annotated[
        list[str],
        typer.Argument(
            metavar="[form|show|verify|revoke] JOB",
            help="A job file or demo:NAME; without a verb: interview and sign.",
        ),
    ],
    answers: Annotated[
        Path | None,
        typer.Option(help="Answers from this YAML file; 'form' prints one to fill in."),
    ] = None,
    checklist: Annotated[
        str, typer.Option(help="A checklist file, or demo:NAME for a shipped one.")
    ] = "demo:enclosed-bench",
    door_sheet: Annotated[
        Path | None, typer.Option(help="Where the door sheet goes (HTML).")
    ] = None,
    name: Annotated[
        str | None, typer.Option(help="Who revokes; needs no passphrase.")
    ] = None,
    reason: Annotated[str | None, typer.Option(help="Why it is revoked.")] = None,
    passphrase_file: PassphraseFile = None,
    as_json: Json = False,
) -> None:
    """Sign a job off for an unattended run, or show, verify, revoke its sign-off.

    ``signoff form JOB > answers.yaml`` prints an answers file with every item to be
    filled in.

    A sign-off authorises nothing in law: interlock, local rules and the laser safety
    officer decide.
    """
    verb, job = _verb_and_job(words)
    from pitchsweep.acquire import sign_off_verbs as verbs

    if verb == "form":
        print(verbs.form(job, checklist), end="", flush=True)
    elif verb == "show":
        print(verbs.show(job, as_json=as_json), flush=True)
    elif verb == "verify":
        print(verbs.verify(job, as_json=as_json), flush=True)
    elif verb == "revoke":
        print(verbs.revoke(job, _asked(name, "your name"), reason), flush=True)
    else:
        options = verbs.SigningOptions(
            answers, checklist, door_sheet, tuple(passphrase_file or ())
        )
        print(verbs.sign(job, options, as_json=as_json), flush=True)


def attend(
    job: Annotated[str, typer.Argument(help="A job file or demo:NAME.")],
    name: Annotated[
        str | None,
        typer.Option(help="Who holds the key: safety officer or technician."),
    ] = None,
    laser: Annotated[
        list[str] | None,
        typer.Option(help="One of the job's lasers; several allowed, else all."),
    ] = None,
    step: Annotated[
        int | None, typer.Option(min=0, help="Stand at this step of the job's plan.")
    ] = None,
    minutes: Annotated[
        float, typer.Option(min=0.1, max=60.0, help="How long it lasts at most.")
    ] = 15.0,
    eyewear: Annotated[
        str | None, typer.Option(help="What is worn and its density, or why none.")
    ] = None,
    ceiling_mw: Annotated[
        float, typer.Option(min=0.001, max=500.0, help="Highest power at the part.")
    ] = 1.0,
    ceiling_by: Annotated[
        str | None, typer.Option(help="The safety officer who writes more than 1 mW.")
    ] = None,
    twin_person: Annotated[
        bool,
        typer.Option("--twin-person", help="The simulated person holds and reads."),
    ] = False,
    passphrase_file: PassphraseFile = None,
    as_json: Json = False,
) -> None:
    """Give light while a key is held down, and note the power read meanwhile.

    For alignment and power readings, by somebody who is there: dark 2 s after the last
    key press, up to 60 minutes. Unattended runs need a power reading made here.
    """
    from pitchsweep.acquire import attend_verb as verb

    options = verb.AttendOptions(
        name=name,
        lasers=tuple(laser or ()),
        step=step,
        minutes=minutes,
        eyewear=eyewear,
        ceiling_mw=ceiling_mw,
        ceiling_by=ceiling_by,
        twin_person=twin_person,
        passphrase_files=tuple(passphrase_file or ()),
    )
    print(verb.attend(job, options, as_json=as_json), flush=True)


@ledger.command("verify")
def ledger_verify(
    places: Annotated[
        list[Path] | None,
        typer.Argument(help="Run folders or ledger files; none: the people's ledger."),
    ] = None,
    as_json: Json = False,
) -> None:
    """Walk through ledgers and name the first broken entry of each."""
    from pitchsweep.acquire.ledger_verbs import verify_ledgers

    holds, text = verify_ledgers(places or [], as_json=as_json)
    print(text, flush=True)
    if not holds:
        raise typer.Exit(3)


@ledger.callback()
def _ledger() -> None:
    """The record of what people did."""


def register(app: typer.Typer) -> None:
    """Adds these verbs to the command line."""
    app.add_typer(signer, name="signer")
    app.command()(attend)
    app.command()(signoff)
    app.add_typer(ledger, name="ledger")


def _verb_and_job(words: list[str]) -> tuple[str, str]:
    if len(words) == 1 and words[0] not in VERBS:
        return "sign", words[0]
    if len(words) == 2 and words[0] in VERBS:
        return words[0], words[1]
    raise typer.BadParameter(f"give JOB, or one of {', '.join(VERBS)} and a JOB")


def _asked(value: str | None, what: str) -> str:
    if value is not None:
        return value
    if not sys.stdin.isatty():
        raise typer.BadParameter(f"give --name ({what}), or run this at a terminal")
    return str(typer.prompt(what, err=True))
