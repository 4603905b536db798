"""``signer``, ``signoff`` and ``ledger`` from outside: codes, plain lines, files."""

import json
import os
from collections.abc import Callable
from pathlib import Path

import pytest
from acquire_fakes import FakeBench, QuietProgress, opener, small_job
from port_builders import with_ports
from repository import ROOT
from sign_off_builders import (
    OFFICER,
    PASSPHRASE,
    Office,
    demo_work,
    edit_json,
    good_answers,
    ledger_lines,
    office,
    secret,
    signed,
    with_powers,
    work_of,
    write_ledger,
)

from pitchsweep.acquire.cli import run
from pitchsweep.acquire.journal_file import open_journal
from pitchsweep.acquire.run_folder import open_run_folder
from pitchsweep.acquire.run_permit import entered, permit_for
from pitchsweep.acquire.sweep_plan import plan_sweep
from pitchsweep.acquire.sweep_session import sweep_job
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.frozen_job import freeze, plain_yaml
from pitchsweep.configs.job_model import Job
from pitchsweep.safety.ledger import Ledger
from pitchsweep.safety.people_store import read_people
from pitchsweep.safety.safety_errors import GateRefused
from pitchsweep.safety.safety_home import SafetyHome
from pitchsweep.safety.signers import open_signer
from pitchsweep.safety.unattended_permit import UnattendedPermit

JOB = "demo:shims-spots"
WORK = demo_work()
Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def at(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Office:
    """A home that the command line uses, with its three signers."""
    here = office(tmp_path)
    monkeypatch.setenv("PITCHSWEEP_HOME", str(here.home.folder))
    monkeypatch.chdir(tmp_path)
    return here


@pytest.fixture
def cli(capsys: pytest.CaptureFixture[str]) -> Run:
    def call(*words: str) -> tuple[int, str, str]:
        code = run(words)
        shown = capsys.readouterr()
        assert "Traceback" not in shown.err
        if code:
            assert 1 <= shown.err.count("\n") <= 2, shown.err
        return code, shown.out, shown.err

    return call


def answers_file(folder: Path, job: Job = WORK.job) -> str:
    path = folder / "answers.yaml"
    answers = good_answers(WORK if job is WORK.job else work_of(job))
    values = answers.model_dump(exclude_none=True)
    path.write_text(plain_yaml(values))
    return str(path)


def test_from_nobody_to_a_verified_sign_off(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, cli: Run
) -> None:
    home = SafetyHome(tmp_path / "new")
    monkeypatch.setenv("PITCHSWEEP_HOME", str(home.folder))
    with_pass = ("--passphrase-file", secret(tmp_path))
    assert cli("signoff", JOB)[0] == 3
    code, out, _ = cli("signer", "enrol", "ada", "--role", "safety-officer", *with_pass)
    assert code == 0 and "no one vouches for it" in out
    code, out, _ = cli("signer", "list")
    assert code == 0 and "safety-officer" in out and "first here" in out
    answers = answers_file(tmp_path)
    code, _, err = cli("signoff", JOB, "--answers", answers, *with_pass)
    assert code == 3 and "no power reading made under an attended permit" in err
    ada = open_signer(home, OFFICER, PASSPHRASE)
    with_powers(Office(home, {OFFICER: ada}), WORK.job)
    sheet = tmp_path / "door.html"
    code, out, _ = cli(
        "signoff", JOB, "--answers", answers, "--door-sheet", str(sheet), *with_pass
    )
    assert code == 0 and "rehearsed sign-off, simulated bench" in out
    assert "no safety function" in out and "Laser running" in sheet.read_text()
    code, out, _ = cli("signoff", "verify", JOB)
    assert code == 0 and "valid now" in out
    code, out, _ = cli("signoff", "show", JOB)
    assert code == 0 and "beam map of job" in out and "nobody-inside: yes (ada)" in out
    code, out, _ = cli("signoff", "show", JOB, "--json")
    assert code == 0 and json.loads(out)["valid"] is True
    assert cli("ledger", "verify")[0] == 0


def test_revoking_needs_a_name_and_no_secret(at: Office, cli: Run) -> None:
    kept = signed(at, WORK)
    number = kept.record.statement.id
    assert cli("signoff", "revoke", JOB)[0] == 2
    code, out, _ = cli("signoff", "revoke", JOB, "--name", "anyone", "--reason", "x")
    assert code == 0 and number in out
    code, _, err = cli("signoff", "verify", JOB)
    assert code == 3 and "revoked by anyone" in err
    assert cli("signoff", "revoke", JOB, "--name", "anyone")[0] == 3
    again = signed(at, WORK).record.statement.id
    assert cli("signoff", "revoke", again, "--name", "anyone")[0] == 0


def test_revoking_works_on_a_broken_ledger(at: Office, cli: Run) -> None:
    number = signed(at, WORK).record.statement.id
    entries = ledger_lines(at.home)
    entries[1]["data"]["name"] = "mo"
    write_ledger(at.home, entries)
    code, _, err = cli("signoff", "revoke", JOB, "--name", "anyone")
    assert code == 3 and "entry 2" in err
    assert at.home.revoked(number).exists()


@pytest.mark.parametrize(
    ("words", "code", "said"),
    [
        (("signoff",), 2, "Missing argument"),
        (("signoff", "show"), 2, "give JOB"),
        (("signoff", "burn", JOB), 2, "give JOB"),
        (("signoff", "demo:nothing"), 2, "no such name"),
        (("signoff", JOB), 3, "needs a terminal"),
        (("signoff", JOB, "--checklist", "no.yaml"), 2, "no.yaml: cannot be read"),
        (("signoff", JOB, "--answers", "no.yaml"), 2, "no.yaml: cannot be read"),
        (("signoff", "verify", JOB), 3, "has no sign-off"),
        (("signoff", "show", JOB), 3, "has no sign-off"),
        (("signer", "enrol", "mo", "--role", "witness"), 2, "nobody vouches"),
        (("signer", "enrol", "mo", "--role", "boss"), 2, "allowed, each once"),
        (
            ("signer", "enrol", "mo", "--role", "witness", "--vouched-by", "bo"),
            2,
            "only a safety officer",
        ),
        (
            ("signer", "enrol", "mo", "--role", "witness", "--vouched-by", "ada"),
            2,
            "no passphrase",
        ),
        (("signer", "revoke", "no", "--by", "ada", "--reason", "x"), 2, "not enrolled"),
        (("signer", "revoke", "bo", "--by", "ada", "--reason", "x"), 2, "passphrase"),
        (("ledger", "verify", "no-such"), 2, "no run folder and no ledger"),
    ],
)
def test_what_is_refused(
    at: Office, cli: Run, words: tuple[str, ...], code: int, said: str
) -> None:
    found, out, err = cli(*words)
    assert (found, out) == (code, "") and said in err
    assert read_people(at.home).entries == 3


def test_passphrases_come_from_private_files(
    at: Office, cli: Run, tmp_path: Path
) -> None:
    answers = answers_file(tmp_path)
    with_powers(at, WORK.job)
    wrong = secret(tmp_path, "wrong wrong", "wrong")
    code, _, err = cli("signoff", JOB, "--answers", answers, "--passphrase-file", wrong)
    assert code == 2 and "does not open the key" in err
    loose = secret(tmp_path)
    Path(loose).chmod(0o644)
    code, _, err = cli("signoff", JOB, "--answers", answers, "--passphrase-file", loose)
    assert code == 2 and "open to other users" in err
    Path(loose).chmod(0o600)
    named = f"ada={loose}", f"bo={wrong}"
    code, *_ = cli(
        "signoff", JOB, "--answers", answers,
        "--passphrase-file", named[0], "--passphrase-file", named[1],
    )  # fmt: skip
    assert code == 0


def test_answers_that_will_not_do(at: Office, cli: Run, tmp_path: Path) -> None:
    path = Path(answers_file(tmp_path))
    with_powers(at, WORK.job)
    text = path.read_text()
    with_pass = ("--passphrase-file", secret(tmp_path))
    for old, new, code, said in (
        ("value: 0.45", "value: 0.95", 3, "item 'power': red 0.95 mW is not what was"),
        ("value: 0.45", "value: -1", 2, "line"),
        ("2999-01-01", "2001-01-01", 3, "was due on"),
        ("  door:\n    yes: true", "  door:\n    yes: false", 3, "'door': is answered"),
        ("valid_for_h: 14.0", "valid_for_h: 25.0", 3, "allows up to 24 h"),
        ("name: ada", "name: mo", 2, "signer 'mo': is not enrolled"),
        ("role: safety-officer", "role: technician", 2, "is not enrolled as"),
    ):
        dumped = text.replace('"yes"', "yes").replace('"2999-01-01"', '"2999-01-01"')
        assert old in dumped, old
        path.write_text(dumped.replace(old, new))
        found, out, err = cli("signoff", JOB, "--answers", str(path), *with_pass)
        assert (found, out) == (code, "") and said in err, err
    assert read_people(at.home).entries == 6


def test_a_signer_is_enrolled_and_revoked(at: Office, cli: Run, tmp_path: Path) -> None:
    with_pass = ("--passphrase-file", secret(tmp_path))
    code, out, _ = cli(
        "signer", "enrol", "mo", "--role", "technician", "--role", "witness",
        "--vouched-by", OFFICER, *with_pass,
    )  # fmt: skip
    assert code == 0 and "vouched by   ada" in out
    assert (
        cli("signer", "revoke", "mo", "--by", "ada", "--reason", "y", *with_pass)[0]
        == 0
    )
    code, out, _ = cli("signer", "list")
    assert code == 0 and "REVOKED" in out and "by ada: y" in out
    code, out, _ = cli("signer", "list", "--json")
    assert {s["name"] for s in json.loads(out)["signers"]} == {"ada", "bo", "cy", "mo"}


def test_an_edited_register_is_told_and_rebuilt(at: Office, cli: Run) -> None:
    edit_json(at.home.register, lambda r: r["signers"].pop())
    code, _, err = cli("signer", "list")
    assert code == 3 and "'cy' is not as the ledger has it" in err
    assert cli("signer", "list", "--rebuild")[0] == 0
    assert cli("signer", "list")[0] == 0


def test_ledger_verify_names_the_first_broken_entry(
    at: Office, capsys: pytest.CaptureFixture[str]
) -> None:
    signed(at, WORK)
    entries = ledger_lines(at.home)
    entries[2]["data"]["roles"] = ["safety-officer"]
    write_ledger(at.home, entries)
    assert run(["ledger", "verify"]) == 3
    assert "entry 3: its hash does not fit" in capsys.readouterr().out
    write_ledger(at.home, entries[:2])
    assert run(["ledger", "verify", "--json"]) == 3
    (found,) = json.loads(capsys.readouterr().out)
    assert found["broken_entry"] == 3 and "cut off" in found["reason"]


def run_under_sign_off(at: Office, folder: Path) -> Path:
    """A run of values under a sign-off, its guard's ledger written by hand."""
    fake = FakeBench(small_job())
    signed(at, work_of(fake.job))
    path = sweep_job(fake.job, folder / "runs", QuietProgress(), opener(fake)).path
    run_folder = open_run_folder(path)
    plan = plan_sweep(fake.job, fingerprint(fake.job))
    permit = permit_for(fake.job, plan, lambda text: None)
    ledger = path / "ledger.jsonl"
    with open_journal(run_folder.journal) as journal:
        with entered(permit, run_folder, journal, ledger):
            for step in range(3):
                entry = Ledger(ledger).append("light", {"run": path.name, "step": step})
        journal.set_meta("ledger_entries", str(entry.n))
        journal.set_meta("ledger_head", entry.hash)
    return path


def test_verifying_needs_no_folder_that_can_be_written_to(
    at: Office,
    capsys: pytest.CaptureFixture[str],
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    path = run_under_sign_off(at, tmp_path)
    real = os.access
    monkeypatch.setattr(os, "access", lambda p, mode: mode != os.W_OK and real(p, mode))
    for place in (path, at.home.folder):
        place.chmod(0o555)
    before = sorted(path.iterdir())
    assert run(["ledger", "verify", str(path)]) == 0
    assert capsys.readouterr().out.count("holds  ") == 2
    assert sorted(path.iterdir()) == before
    if os.getuid() == 0:
        (path / "run.db-wal").write_bytes(b"x" * 32)
        assert run(["ledger", "verify", str(path)]) == 2
        assert "it was not closed" in capsys.readouterr().err
    for place in (path, at.home.folder):
        place.chmod(0o755)


def test_the_form_is_the_documented_example(
    at: Office, cli: Run, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """What README says of answers: print the form, fill it in, sign with it."""
    code, text, _ = cli("signoff", "form", JOB)
    assert code == 0 and max(map(len, text.splitlines())) <= 90
    path = tmp_path / "answers.yaml"
    sign = ("signoff", JOB, "--answers", str(path))
    with_pass = ("--passphrase-file", secret(tmp_path))
    path.write_text(text)
    # Every line that is still empty is named, so there are more than two.
    assert run([*sign, *with_pass]) == 2
    assert "items.key.words = ''" in capsys.readouterr().err
    with_powers(at, WORK.job)
    path.write_text(text.replace("NAME", "ada").replace('""', '"Bo, 0555 0100"'))
    code, _, err = cli(*sign, *with_pass)
    assert code == 3 and "item 'key': is answered no" in err
    path.write_text(path.read_text().replace("yes: false", "yes: true"))
    assert cli(*sign, *with_pass)[0] == 0
    assert cli("signoff", "verify", JOB)[0] == 0
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    assert "signoff form" in readme and "yes: true" in readme


def test_a_run_and_the_peoples_ledger_hold_each_other(
    at: Office, capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    path = run_under_sign_off(at, tmp_path)
    assert run(["ledger", "verify", str(path)]) == 0
    assert capsys.readouterr().out.count("holds  ") == 2
    ledger = path / "ledger.jsonl"
    lines = ledger.read_bytes().splitlines(keepends=True)
    ledger.write_bytes(b"".join(lines[:-1]))
    assert run(["ledger", "verify", str(path)]) == 3
    assert "cut off: 3 entries" in capsys.readouterr().out
    ledger.write_bytes(b"".join(lines))
    write_ledger(at.home, ledger_lines(at.home)[:4])
    at.home.register.unlink()
    assert run(["ledger", "verify", str(path)]) == 3
    assert "cut off: 8 entries" in capsys.readouterr().out


def permit_said(job: Job) -> tuple[object, list[str]]:
    said: list[str] = []
    permit = permit_for(job, plan_sweep(job, fingerprint(job)), said.append)
    return permit.for_guard(bytes(32)), said


def test_a_twin_uses_a_valid_sign_off_and_rehearses_otherwise(at: Office) -> None:
    permit, said = permit_said(WORK.job)
    assert type(permit).__name__ == "RehearsalPermit" and said == []
    kept = signed(at, WORK)
    permit, said = permit_said(WORK.job)
    assert isinstance(permit, UnattendedPermit) and permit.record == kept.record
    assert "rehearsed sign-off" in said[0] and "ada as safety-officer" in said[0]
    part = WORK.job.part.model_copy(update={"serial": "8"})
    permit, said = permit_said(WORK.job.model_copy(update={"part": part}))
    assert type(permit).__name__ == "RehearsalPermit"
    assert "part.serial was 7, is 8" in said[0] and "rehearses" in said[0]


def test_at_real_speed_the_window_must_last(at: Office) -> None:
    bench = WORK.job.bench
    assert bench.twin is not None
    twin = bench.twin.model_copy(update={"speed": "real"})
    job = WORK.job.model_copy(update={"bench": bench.model_copy(update={"twin": twin})})
    signed(at, WORK, good_answers(WORK, valid_for_h=0.001))
    with pytest.raises(GateRefused, match="the sign-off ends in"):
        permit_said(job)


def hardware() -> Job:
    return with_ports(WORK.job)


def test_a_bench_with_ports_needs_a_sign_off(
    at: Office, cli: Run, tmp_path: Path
) -> None:
    job = hardware()
    path = tmp_path / "job.yaml"
    path.write_text(freeze(job))
    code, _, err = cli("sweep", str(path))
    assert code == 3 and "needs a sign-off, and it has none" in err
    assert not (tmp_path / "runs").exists()
    work = work_of(job)
    signed(at, work, good_answers(work, valid_for_h=10.0))
    said: list[str] = []
    permit_for(job, plan_sweep(job, fingerprint(job)), said.append)
    assert "sign-off" in said[0] and "by ada as safety-officer" in said[0]
    changed = job.part.model_copy(update={"serial": "8"})
    path.write_text(freeze(job.model_copy(update={"part": changed})))
    code, _, err = cli("sweep", str(path))
    assert code == 3 and "does not count: a setting changed" in err


def test_a_broken_ledger_keeps_a_signed_job_dark(
    at: Office, cli: Run, tmp_path: Path
) -> None:
    signed(at, WORK)
    entries = ledger_lines(at.home)
    entries[0]["utc"] = "2001-01-01T00:00:00.000Z"
    write_ledger(at.home, entries)
    code, _, err = cli("sweep", JOB)
    assert code == 3 and "entry 1 of the ledger is broken" in err
    assert not (tmp_path / "runs").exists()


def test_the_home_of_nobody_is_not_made(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, cli: Run
) -> None:
    monkeypatch.setenv("PITCHSWEEP_HOME", str(tmp_path / "none"))
    assert cli("signer", "list")[0] == 0
    assert cli("ledger", "verify")[0] == 0
    assert permit_said(WORK.job)[1] == []
    assert not (tmp_path / "none").exists()
