"""What ``attend JOB`` does: who holds the key on which terms, then the visit. Acts."""

import json
import sys
from dataclasses import dataclass

from pitchsweep.acquire.attend_visit import TwinHand, visit
from pitchsweep.acquire.attended_bench import Place, open_attended_bench
from pitchsweep.acquire.attended_session import (
    AttendedSession,
    Terms,
    attended_session,
    refuse_too_strong,
)
from pitchsweep.acquire.bench_lock import take_bench_lock
from pitchsweep.acquire.interview import ask_at_terminal, say, say_wrapped
from pitchsweep.acquire.passphrases import Passphrases
from pitchsweep.acquire.stop_signals import StopRequested, StopSignals
from pitchsweep.acquire.sweep_plan import SweepPlan, plan_sweep
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.reader import read_job
from pitchsweep.safety.attended_permit import MAY_HOLD, POWER_CEILING_MW
from pitchsweep.safety.hazard_figures import full_drive_mw, laser_figures
from pitchsweep.safety.lasers_alight import lasers_alight
from pitchsweep.safety.people_ledger import OFFICER
from pitchsweep.safety.people_store import PeopleNow, read_people
from pitchsweep.safety.run_refusals import refuse_unsafe
from pitchsweep.safety.safety_errors import CAUTION, GateRefused, SignerRefused
from pitchsweep.safety.safety_home import SafetyHome, safety_home
from pitchsweep.safety.signers import active_signer, open_signer
from pitchsweep.safety.signing import PrivateKey

NO_LIGHT_NO_EYEWEAR = "none: the bench is simulated"


@dataclass(frozen=True)
class AttendOptions:
    """What the command line gives; None: asked for, or the first that will do."""

    name: str | None
    lasers: tuple[str, ...]
    step: int | None
    minutes: float
    eyewear: str | None
    ceiling_mw: float
    ceiling_by: str | None
    twin_person: bool
    passphrase_files: tuple[str, ...]


def attend(place: str, options: AttendOptions, *, as_json: bool) -> str:
    """Runs a session under an attended permit; what to print.

    Raises SettingsRefused, SignerRefused, GateRefused, GateTripped, DriverError,
    LedgerBroken, RecordForged, OSError; KeyboardInterrupt where it was stopped.
    """
    job = read_job(place).job
    plan = plan_sweep(job, fingerprint(job))
    refuse_unsafe(job)
    _refuse_without_hand(job, options)
    hand = TwinHand() if options.twin_person else None
    home = safety_home()
    terms = _terms(job, plan, home, options)
    lock = take_bench_lock(home.folder, job.bench, say)
    try:
        with attended_session(home, terms) as session, StopSignals() as stop:
            try:
                with open_attended_bench(session.request(stop, say)) as bench:
                    visit(session, bench, stop, hand)
            except StopRequested as error:
                raise KeyboardInterrupt(str(error)) from None
    finally:
        lock.release()
    return _told(session, as_json)


def _refuse_without_hand(job: Job, options: AttendOptions) -> None:
    if options.twin_person:
        if job.bench.twin is None:
            raise GateRefused(
                f"bench '{job.bench.bench}' has no simulated person",
                "at a bench with ports somebody has to hold the key: leave out"
                " --twin-person",
            )
        return
    if not sys.stdin.isatty():
        raise GateRefused(
            "somebody has to hold a key down, and this is no terminal",
            "run it at a terminal; a simulated bench can do it with --twin-person",
        )


def _terms(
    job: Job, plan: SweepPlan, home: SafetyHome, options: AttendOptions
) -> Terms:
    now, passphrases = read_people(home), Passphrases(options.passphrase_files)
    places = _places(job, plan, options)
    refuse_too_strong(places, options.ceiling_mw)
    name = options.name or ask_at_terminal("who holds the key", "")
    role = _role(now, name)
    _show(job, places)
    officer: PrivateKey | None = None
    if options.ceiling_mw > POWER_CEILING_MW:
        officer = _officer(home, now, options, passphrases)
    eyewear = options.eyewear or _ask_eyewear(options)
    same = officer is not None and officer.name == name
    holder = officer if same else None
    return Terms(
        job=job,
        places=places,
        holder=holder or open_signer(home, name, passphrases.of(name)),
        role=role,
        eyewear=eyewear,
        minutes=options.minutes,
        ceiling_mw=options.ceiling_mw,
        officer=officer,
    )


def _places(job: Job, plan: SweepPlan, options: AttendOptions) -> tuple[Place, ...]:
    """A step of the plan for each laser: its beams are in the beam map."""
    lasers, steps = lasers_alight(job), {s.step: s for s in plan.steps}
    chosen = options.lasers or lasers
    odd = [name for name in chosen if name not in lasers]
    if odd:
        raise GateRefused(
            f"the job has no laser '{odd[0]}'", f"it has {', '.join(lasers)}"
        )
    if options.step is not None and options.step not in steps:
        raise GateRefused(
            f"the job has no step {options.step}", f"it has 0 to {max(steps)}"
        )
    places = []
    for name in dict.fromkeys(chosen):
        # A laser of the bench that the recipe does not use stands at its first step.
        first = next((s for s in plan.steps if s.laser == name), plan.steps[0])
        step = first if options.step is None else steps[options.step]
        power_mw = full_drive_mw(job.bench.lasers[name])
        places.append(Place(name, step.step, step.stage_deg, power_mw))
    return tuple(places)


def _role(now: PeopleNow, name: str) -> str:
    roles = active_signer(now, name).roles
    role = next((role for role in MAY_HOLD if role in roles), None)
    if role is None:
        raise SignerRefused(
            name,
            f"is enrolled as {', '.join(roles)} and may not hold an attended permit",
            f"allowed: {' or '.join(MAY_HOLD)}",
        )
    return role


def _officer(
    home: SafetyHome, now: PeopleNow, options: AttendOptions, passphrases: Passphrases
) -> PrivateKey:
    if options.ceiling_by is None:
        raise GateRefused(
            f"{options.ceiling_mw:g} mW is above the {POWER_CEILING_MW:g} mW of an"
            " attended permit",
            "a safety officer may write more: --ceiling-by OFFICER",
        )
    if OFFICER not in active_signer(now, options.ceiling_by).roles:
        raise SignerRefused(
            options.ceiling_by,
            "may not write a higher power ceiling",
            "only a safety officer may",
        )
    return open_signer(home, options.ceiling_by, passphrases.of(options.ceiling_by))


def _show(job: Job, places: tuple[Place, ...]) -> None:
    say(f"Attended light on bench '{job.bench.bench}' for job '{job.job}'")
    if job.bench.twin is not None:
        say("  REHEARSAL: the bench is simulated, no laser is switched by this")
    say_wrapped(CAUTION)
    for place in places:
        figures = laser_figures(job.bench, place.laser)
        say_wrapped(
            f"{place.laser}: {figures.wavelength_nm:.1f} nm, {place.power_mw:g} mW at"
            f" full drive, estimated class {figures.estimate.laser_class}; optical"
            f" density {figures.at(figures.accidental_s).density:.1f} for an accidental"
            f" look of {figures.accidental_s:g} s; stage at {place.stage_deg:.3f} deg"
        )


def _ask_eyewear(options: AttendOptions) -> str:
    if options.twin_person:
        return NO_LIGHT_NO_EYEWEAR
    while True:
        words = ask_at_terminal(
            "eyewear worn by everyone here (what, which density), or why none", ""
        )
        if words:
            return words


def _told(session: AttendedSession, as_json: bool) -> str:
    terms, bench = session.terms, session.terms.job.bench
    if as_json:
        return json.dumps(
            {
                "id": session.identifier,
                "bench": bench.bench,
                "simulated": bench.twin is not None,
                "holder": terms.holder.name,
                "role": terms.role,
                "lit_s": round(session.lit_s, 2),
                "powers": [vars(noted) for noted in session.noted],
                "ledger_head": session.head,
            },
            indent=1,
        )
    kind = "rehearsed, simulated bench" if bench.twin is not None else "attended"
    lines = [
        f"Attended   {session.identifier} ({kind}) by {terms.holder.name} as"
        f" {terms.role}, {session.lit_s:.1f} s of light",
        *(
            f"Power      {n.laser}: {n.value_mw:g} mW by {n.meter}, due {n.meter_due}"
            for n in session.noted
        ),
    ]
    if not session.noted:
        lines.append("Power      none was noted")
    lines.append(f"Ledger     head {session.head}")
    return "\n".join([*lines, f"Caution    {CAUTION}"])
