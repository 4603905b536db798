"""Builders for signers, sign-offs and what forgers do to their files."""

import atexit
import json
import shutil
import tempfile
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

from pitchsweep.acquire.bench_work import work_for
from pitchsweep.acquire.sweep_plan import plan_sweep
from pitchsweep.configs.answers_model import Answers, ItemAnswer, ReadingAnswer, SignsAs
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.reader import read_job
from pitchsweep.safety.attended_entries import (
    ATTENDED_BEGUN,
    ATTENDED_ENDED,
    POWER_READ,
)
from pitchsweep.safety.checklist import (
    circumstances_of,
    items_that_apply,
    readings_wanted,
)
from pitchsweep.safety.hazard_figures import full_drive_mw
from pitchsweep.safety.ledger import utc_text
from pitchsweep.safety.ledger_chain import canonical_json, entry_hash
from pitchsweep.safety.people_store import enter, read_people
from pitchsweep.safety.power_readings import latest_readings
from pitchsweep.safety.safety_home import SafetyHome
from pitchsweep.safety.sign_off import LedgerMark, Statement
from pitchsweep.safety.sign_off_making import Moment, Work, statement_of
from pitchsweep.safety.sign_off_store import (
    Kept,
    judge,
    new_identifier,
    sign_and_keep,
)
from pitchsweep.safety.signers import enrol, open_signer
from pitchsweep.safety.signing import PrivateKey

PASSPHRASE = "quite long enough"
CHECKLIST = "demo:enclosed-bench"
OFFICER, TECHNICIAN, WITNESS = "ada", "bo", "cy"


@dataclass(frozen=True)
class Office:
    """A home with an officer, a technician and a witness, and their opened keys."""

    home: SafetyHome
    keys: Mapping[str, PrivateKey]


def office(folder: Path) -> Office:
    """A home of its own under ``folder`` in which the three are enrolled."""
    made = _office_to_copy()
    home = SafetyHome(folder / "home")
    shutil.copytree(made.home.folder, home.folder)
    return Office(home, made.keys)


@cache
def _office_to_copy() -> Office:
    # Keys under a passphrase are slow to make: once for all tests.
    folder = Path(tempfile.mkdtemp())
    atexit.register(shutil.rmtree, folder)
    home = SafetyHome(folder / "home")
    enrol(home, OFFICER, ["safety-officer"], PASSPHRASE)
    keys = {OFFICER: open_signer(home, OFFICER, PASSPHRASE)}
    for name, role in ((TECHNICIAN, "technician"), (WITNESS, "witness")):
        enrol(home, name, [role], PASSPHRASE, keys[OFFICER])
        keys[name] = open_signer(home, name, PASSPHRASE)
    return Office(home, keys)


@cache
def demo_work(name: str = "shims-spots") -> Work:
    """What a sign-off of a shipped job is bound to."""
    return work_of(read_job(f"demo:{name}").job)


def work_of(job: Job) -> Work:
    return work_for(job, plan_sweep(job, fingerprint(job)), CHECKLIST)


def changed(work: Work, **blocks: Mapping[str, Any]) -> Work:
    """``work`` with keys of bench, part or recipe replaced, the digest as it was."""
    parts = {
        name: getattr(work.job, name).model_copy(update=dict(values))
        for name, values in blocks.items()
    }
    job = work.job.model_copy(update=parts)
    return Work(job, work.checklist, work.checklist_source, work.work_sha256)


def with_strong_laser(work: Work) -> Work:
    """The job's lasers at 3 mW: class 3R, which needs two people."""
    lasers = {
        name: laser.model_copy(update={"power_mw": 3.0})
        for name, laser in work.job.bench.lasers.items()
    }
    return changed(work, bench={"lasers": lasers})


def good_answers(work: Work, *signers: tuple[str, str], **more: Any) -> Answers:
    """Every item that applies answered well by ``signers`` (name, role)."""
    people = signers or ((OFFICER, "safety-officer"),)
    items = items_that_apply(work.checklist, circumstances_of(work.job))
    answered = {
        name: ItemAnswer(
            words="somebody, 0555 0100" if item.asks else None,
            readings=tuple(
                ReadingAnswer(
                    of=of, value=0.5 * upper, meter="m 1", meter_due="2999-01-01"
                )
                for of, upper in readings_wanted(item, work.job)
            ),
        )
        for name, item in items.items()
    }
    values = {
        "signers": tuple(
            SignsAs.model_validate({"name": n, "role": r}) for n, r in people
        ),
        "items": answered,
        **more,
    }
    return Answers.model_validate(values)


def attended_begun(at: Office, job: Job, **changes: Any) -> dict[str, Any]:
    """What an attended permit of the officer's for ``job`` says in the ledger."""
    bench = job.bench
    return {
        "id": new_identifier(),
        "name": OFFICER,
        "role": "safety-officer",
        "bench": bench.bench,
        "unit": bench.emission.unit_identity,
        "simulated": bench.twin is not None,
        "job": job.job,
        "lasers": list(job.recipe.lasers),
        "eyewear": "density 2, worn",
        "ceiling_mw": 5.0,
        "valid_until": utc_text(time.time() + 600.0),
        **changes,
    }


def power_read(job: Job, laser: str, attended: str, **changes: Any) -> dict[str, Any]:
    """What a power reading of ``laser`` says: half of its full drive."""
    settings = job.bench.lasers[laser]
    return {
        "attended": attended,
        "laser": laser,
        "wavelength_nm": settings.vacuum_wavelength_nm,
        "value_mw": 0.5 * full_drive_mw(settings),
        "meter": "m 1",
        "meter_due": "2999-01-01",
        "lit_s": 2.0,
        **changes,
    }


def with_powers(at: Office, job: Job, **changes: Any) -> Office:
    """``at`` with the power of every laser of ``job`` read under a permit."""
    read = latest_readings(job, read_people(at.home).people)
    left = [name for name in job.recipe.lasers if name not in read or changes]
    if left:
        keys, begun = [at.keys[OFFICER]], attended_begun(at, job)
        enter(at.home, ATTENDED_BEGUN, begun, keys)
        for name in left:
            reading = power_read(job, name, begun["id"], **changes)
            enter(at.home, POWER_READ, reading, keys)
        ended = {"id": begun["id"], "ending": "done", "entries": 0, "head": ""}
        enter(at.home, ATTENDED_ENDED, ended)
    return at


def stated(at: Office, work: Work, answers: Answers | None = None) -> Statement:
    """The statement that ``answers`` lead to now."""
    with_powers(at, work.job)
    now = read_people(at.home)
    moment = Moment(
        time.time(), new_identifier(), now.people, LedgerMark(now.entries, now.head)
    )
    return statement_of(work, answers or good_answers(work), moment)


def signed(at: Office, work: Work, answers: Answers | None = None) -> Kept:
    """A sign-off of ``work``, kept."""
    given = answers or good_answers(work)
    keys = [at.keys[signer.name] for signer in given.signers]
    return sign_and_keep(at.home, stated(at, work, given), keys)


def verdict(at: Office, kept: Kept, work: Work, after_s: float = 0.0) -> str:
    """Why ``kept`` does not count for ``work``; empty when it does."""
    return judge(at.home, kept, work, read_people(at.home), time.time() + after_s)


def secret(folder: Path, text: str = PASSPHRASE, name: str = "pass") -> str:
    """A private file with a passphrase; its path."""
    path = folder / name
    path.write_text(text + "\n")
    path.chmod(0o600)
    return str(path)


def ledger_lines(home: SafetyHome) -> list[dict[str, Any]]:
    return [json.loads(line) for line in home.ledger.read_bytes().splitlines()]


def write_ledger(home: SafetyHome, entries: list[dict[str, Any]]) -> None:
    """Writes entries as they are, in canonical spelling."""
    home.ledger.write_bytes(b"".join(canonical_json(e) + b"\n" for e in entries))


def chained_anew(entries: list[dict[str, Any]]) -> list[dict[str, Any]]:
    """Numbers and hashes made consistent again, as a forger with the format would."""
    prev, out = "0" * 64, []
    for n, entry in enumerate(entries, start=1):
        body = {"n": n, "prev": prev, **{k: entry[k] for k in ("utc", "kind", "data")}}
        prev = entry_hash(prev, body)
        signed_part = {"signed": entry["signed"]} if "signed" in entry else {}
        out.append({**body, "hash": prev, **signed_part})
    return out


def edit_json(path: Path, change: Callable[[Any], None]) -> None:
    """Changes a JSON file in place."""
    values = json.loads(path.read_text())
    change(values)
    path.write_text(json.dumps(values))
