"""Sign-offs that must not count, each refused with the right reason."""

import json
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from port_builders import invented_ports
from sign_off_builders import (
    OFFICER,
    TECHNICIAN,
    WITNESS,
    Office,
    changed,
    demo_work,
    edit_json,
    good_answers,
    ledger_lines,
    office,
    signed,
    stated,
    verdict,
    with_strong_laser,
    write_ledger,
)

from pitchsweep.safety.ledger_chain import Signed
from pitchsweep.safety.people_ledger import SIGNED_OFF
from pitchsweep.safety.people_store import enter, rebuild_register
from pitchsweep.safety.safety_errors import GateRefused, RecordForged, SignerRefused
from pitchsweep.safety.sign_off import (
    LedgerMark,
    SignOff,
    SignsAs,
    record_from,
    record_text,
    signed_bytes,
)
from pitchsweep.safety.sign_off_check import why_signatures_do_not_suffice
from pitchsweep.safety.sign_off_store import Kept, records_of, revoke, sign_and_keep
from pitchsweep.safety.signers import revoke_signer
from pitchsweep.safety.signing import ENTRY, SIGN_OFF, PrivateKey, new_key

WORK = demo_work()


@pytest.fixture
def at(tmp_path: Path) -> Office:
    return office(tmp_path)


def read_again(kept: Kept) -> Kept:
    return Kept(kept.path, record_from(kept.path.read_bytes()))


def sign_anew(at: Office, kept: Kept, *keys: PrivateKey, **change: Any) -> Kept:
    """The record with its statement changed, signed by ``keys`` and entered."""
    statement = replace(kept.record.statement, **change)
    return sign_and_keep(at.home, statement, keys)


def test_a_good_one_counts_and_survives_its_file(at: Office) -> None:
    kept = signed(at, WORK)
    assert verdict(at, kept, WORK) == ""
    assert read_again(kept) == kept
    statement = kept.record.statement
    assert statement.simulated and statement.ledger.entries == 6
    assert statement.ledger.head == ledger_lines(at.home)[5]["hash"]
    assert kept.record.entered.head == ledger_lines(at.home)[6]["hash"]


def test_a_window_is_kept_at_both_ends(at: Office) -> None:
    kept = signed(at, WORK, good_answers(WORK, valid_for_h=2.0))
    assert verdict(at, kept, WORK, after_s=7100.0) == ""
    assert "it has expired" in verdict(at, kept, WORK, after_s=7201.0)
    assert "not valid yet" in verdict(at, kept, WORK, after_s=-60.0)
    assert "not valid yet" in verdict(at, kept, WORK, after_s=float("nan"))


def test_revoked_by_name_alone(at: Office) -> None:
    kept = signed(at, WORK)
    revoke(at.home, kept.record.statement.id, name="a passer-by", reason="smoke")
    assert "revoked by a passer-by" in verdict(at, kept, WORK)
    assert "smoke" in verdict(at, kept, WORK)


def test_a_mark_alone_revokes_too(at: Office) -> None:
    kept = signed(at, WORK)
    at.home.revoked(kept.record.statement.id).parent.mkdir()
    at.home.revoked(kept.record.statement.id).touch()
    assert "it was revoked" in verdict(at, kept, WORK)


def test_a_record_put_back_after_revoking_stays_revoked(at: Office) -> None:
    kept = signed(at, WORK)
    saved = kept.path.read_bytes()
    revoke(at.home, kept.record.statement.id, name="bo", reason="x")
    at.home.revoked(kept.record.statement.id).unlink()
    kept.path.write_bytes(saved)
    assert "it was revoked by bo" in verdict(at, read_again(kept), WORK)


def test_a_revoked_signer_voids_what_they_signed(at: Office) -> None:
    answers = good_answers(
        WORK, (OFFICER, "safety-officer"), (TECHNICIAN, "technician")
    )
    kept = signed(at, WORK, answers)
    assert verdict(at, kept, WORK) == ""
    revoke_signer(at.home, TECHNICIAN, "left the firm", at.keys[OFFICER])
    assert "signer 'bo' was revoked" in verdict(at, kept, WORK)
    with pytest.raises(SignerRefused, match="'bo': was revoked"):
        stated(at, WORK, answers)


def test_another_benchs_and_another_jobs_sign_off(at: Office) -> None:
    kept = signed(at, WORK)
    other = changed(WORK, bench={"bench": "the-other"})
    assert "for bench 'red-laser', this is bench 'the-other'" in verdict(
        at, kept, other
    )
    four = demo_work("shims-four-mounts")
    assert "for job 'shims-spots', this is job" in verdict(at, kept, four)


def test_a_rehearsed_sign_off_is_none_for_a_real_bench(at: Office) -> None:
    kept = signed(at, WORK)
    real = changed(WORK, bench={"twin": None, "ports": invented_ports()})
    assert "for a simulated bench, this one is real" in verdict(at, kept, real)


@pytest.mark.parametrize(
    ("change", "why"),
    [
        (lambda s: s.update(valid_until="2999-01-01T00:00:00.000Z"), "edited"),
        (lambda s: s["settings"].update({"bench.lasers.red.power_mw": 0.1}), "edited"),
        (lambda s: s["answers"].pop("door"), "edited"),
        (lambda s: s["contacts"].update({"eye-injury": "nobody"}), "edited"),
        (lambda s: s["signers"][0].update(role="technician"), "edited"),
        (lambda s: s["signers"][0].update(name="bo"), "edited"),
        (lambda s: s.update(needed=[]), "edited"),
        (lambda s: s.update(id="0" * 16), "under another name"),
        (lambda s: s.update(bench="other"), "for bench 'other'"),
        (lambda s: s["signers"].append(dict(s["signers"][0])), "signs twice"),
        (lambda s: s["signers"].clear(), "not signed by the people"),
    ],
)
def test_an_edited_record(at: Office, change: Callable[[Any], None], why: str) -> None:
    kept = signed(at, WORK)
    edit_json(kept.path, lambda values: change(values["statement"]))
    assert why in verdict(at, read_again(kept), WORK)


@pytest.mark.parametrize(
    ("change", "why"),
    [
        (lambda r: r["signatures"][0].update(signature="00" * 64), "does not fit"),
        (lambda r: r["signatures"][0].update(signature="zz"), "does not fit"),
        (lambda r: r["signatures"].clear(), "not signed by the people"),
        (lambda r: r["signatures"].append(r["signatures"][0]), "not signed by"),
        (lambda r: r["entered"].update(entries=2), "at another place"),
        (lambda r: r["entered"].update(head="ab" * 32), "at another place"),
    ],
)
def test_edited_signatures_and_marks(
    at: Office, change: Callable[[Any], None], why: str
) -> None:
    kept = signed(at, WORK)
    edit_json(kept.path, change)
    assert why in verdict(at, read_again(kept), WORK)


def test_a_cut_or_strange_file_is_no_record(at: Office) -> None:
    kept = signed(at, WORK)
    whole = kept.path.read_text()
    for length in (0, 1, len(whole) // 2, len(whole) - 3):
        kept.path.write_text(whole[:length])
        (found,) = records_of(at.home)
        assert isinstance(found, RecordForged) and "JSON" in str(found)
    for name in json.loads(whole)["statement"]:
        edited = json.loads(whole)
        del edited["statement"][name]
        with pytest.raises(ValueError, match=name):
            record_from(json.dumps(edited))
        edited["statement"][name] = ["odd"]
        with pytest.raises(ValueError):
            record_from(json.dumps({**edited, "signatures": 5}))
    with pytest.raises(ValueError, match="longer"):
        record_from(" " * (2 * 1024 * 1024))


def test_signed_again_by_a_stranger(at: Office) -> None:
    kept, stranger = signed(at, WORK), new_key("ada")
    statement = replace(
        kept.record.statement,
        signers=(SignsAs("ada", stranger.public, "safety-officer"),),
    )
    mark = stranger.sign(SIGN_OFF, signed_bytes(statement))
    forged = SignOff(statement, (mark,), kept.record.entered)
    why = verdict(at, Kept(kept.path, forged), WORK)
    assert "not the one that the people's ledger has" in why


def test_signed_again_without_the_ledger(at: Office) -> None:
    """The officer's own key over another statement counts only once it is entered."""
    statement = replace(stated(at, WORK), valid_until="2999-01-01T00:00:00.000Z")
    mark = at.keys[OFFICER].sign(SIGN_OFF, signed_bytes(statement))
    loose = SignOff(statement, (mark,), LedgerMark(3, "ab" * 32))
    path = at.home.record(statement.id)
    assert "no such sign-off" in verdict(at, Kept(path, loose), WORK)


def test_a_ledger_signature_is_no_sign_off_signature(at: Office) -> None:
    statement = stated(at, WORK)
    mark = at.keys[OFFICER].sign(ENTRY, signed_bytes(statement))
    draft = SignOff(statement, (mark,), LedgerMark(0, ""))
    entry = enter(
        at.home,
        SIGNED_OFF,
        {"id": statement.id, "sha256": draft.sha256},
        [at.keys["ada"]],
    )
    whole = replace(draft, entered=LedgerMark(entry.n, entry.hash))
    path = at.home.record(statement.id)
    assert "does not fit" in verdict(at, Kept(path, whole), WORK)


def test_a_cut_ledger_has_it_no_more(at: Office) -> None:
    kept = signed(at, WORK)
    write_ledger(at.home, ledger_lines(at.home)[:3])
    at.home.register.unlink()
    rebuild_register(at.home)
    assert "no such sign-off" in verdict(at, kept, WORK)


def test_a_role_that_the_signer_does_not_have(at: Office) -> None:
    with pytest.raises(SignerRefused, match="'bo': is not enrolled as safety-officer"):
        stated(at, WORK, good_answers(WORK, (TECHNICIAN, "safety-officer")))
    kept = signed(at, WORK)
    bo = at.keys[TECHNICIAN]
    forged = sign_anew(
        at, kept, bo, id="1" * 16, signers=(SignsAs("bo", bo.public, "safety-officer"),)
    )
    why = verdict(at, forged, WORK)
    assert "'bo' signs as safety officer but is enrolled as technician only" in why


def test_a_technician_alone_is_not_enough(at: Office) -> None:
    with pytest.raises(GateRefused, match="needed: safety-officer"):
        stated(at, WORK, good_answers(WORK, (TECHNICIAN, "technician")))


def test_class_3r_needs_two_different_people(at: Office) -> None:
    strong = with_strong_laser(WORK)
    with pytest.raises(GateRefused, match="2 signatures of different people"):
        stated(at, strong, good_answers(strong))
    twice = (OFFICER, "safety-officer"), (OFFICER, "safety-officer")
    with pytest.raises(SignerRefused, match="'ada': signs twice"):
        stated(at, strong, good_answers(strong, *twice))
    for second in (TECHNICIAN, "technician"), (WITNESS, "witness"):
        kept = signed(
            at, strong, good_answers(strong, (OFFICER, "safety-officer"), second)
        )
        assert verdict(at, kept, strong) == ""


def test_one_person_signing_twice_past_the_program(at: Office) -> None:
    strong = with_strong_laser(WORK)
    pair = (OFFICER, "safety-officer"), (TECHNICIAN, "technician")
    kept = signed(at, strong, good_answers(strong, *pair))
    ada = at.keys[OFFICER]
    both = tuple(
        SignsAs("ada", ada.public, r) for r in ("safety-officer", "technician")
    )
    statement = replace(kept.record.statement, signers=both)
    mark = ada.sign(SIGN_OFF, signed_bytes(statement))
    forged = replace(kept.record, statement=statement, signatures=(mark, mark))
    assert "'ada' signs twice" in verdict(at, Kept(kept.path, forged), strong)
    with pytest.raises(Exception, match="names one key twice"):
        sign_and_keep(at.home, replace(statement, id="2" * 16), [ada, ada])


def test_one_signature_where_two_are_needed_past_the_program(at: Office) -> None:
    strong = with_strong_laser(WORK)
    pair = (OFFICER, "safety-officer"), (TECHNICIAN, "technician")
    kept = signed(at, strong, good_answers(strong, *pair))
    alone = kept.record.statement.signers[:1]
    only = sign_anew(at, kept, at.keys[OFFICER], id="3" * 16, signers=alone)
    assert "2 signatures of different people are needed, 1" in verdict(at, only, strong)
    softer = sign_anew(
        at,
        kept,
        at.keys[OFFICER],
        id="4" * 16,
        signers=alone,
        needed=kept.record.statement.needed[:1],
    )
    assert "other signatures than the checklist asks for" in verdict(at, softer, strong)


def test_an_item_left_out_past_the_program(at: Office) -> None:
    kept = signed(at, WORK)
    answers = dict(kept.record.statement.answers)
    del answers["nobody-inside"]
    short = sign_anew(at, kept, at.keys[OFFICER], id="5" * 16, answers=answers)
    assert "'nobody-inside' was not answered" in verdict(at, short, WORK)


def test_settings_and_their_fingerprint_belong_together(at: Office) -> None:
    kept = signed(at, WORK)
    odd = sign_anew(at, kept, at.keys[OFFICER], id="6" * 16, settings_sha256="0" * 64)
    assert "do not fit the fingerprint" in verdict(at, odd, WORK)


def test_other_angles_or_another_unit(at: Office) -> None:
    kept = signed(at, WORK)
    other = replace(WORK, work_sha256="0" * 64)
    assert "the angles that may be lit are not those" in verdict(at, kept, other)


@pytest.mark.parametrize(
    ("needed", "given", "enough"),
    [
        ([["a"]], ["a"], True),
        ([["a"]], ["b"], False),
        ([["a"], ["a", "b"]], ["b", "a"], True),
        ([["a", "b"], ["a"]], ["a", "b"], True),
        ([["a"], ["b"]], ["a", "a"], False),
        ([["a"], ["b"], ["c"]], ["c", "a", "b"], True),
        ([["a"]], ["b", "a"], True),
    ],
)
def test_who_can_give_which_signature(
    needed: list[list[str]], given: list[str], enough: bool
) -> None:
    signers = tuple(SignsAs(str(n), str(n), role) for n, role in enumerate(given))
    rules = tuple(map(tuple, needed))
    assert (why_signatures_do_not_suffice(rules, signers) is None) is enough


def test_a_record_says_the_same_however_often_it_is_read(at: Office) -> None:
    record = signed(at, WORK).record
    assert record_from(record_text(record)) == record
    assert record_text(record_from(record_text(record))) == record_text(record)
    assert isinstance(record.signatures[0], Signed)
