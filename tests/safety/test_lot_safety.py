"""Every part of a lot is looked at before there is light, and none may change after."""

from typing import Any

import pytest
from beam_map_builders import job_within, surface
from lots import job_with_lot, lot_job
from sign_off_builders import office, signed, verdict, work_of

from pitchsweep.acquire.watched_sources import sources_of
from pitchsweep.configs.fingerprint import fingerprint
from pitchsweep.configs.part_model import Part
from pitchsweep.configs.reader import read_checklist, read_job
from pitchsweep.configs.safety_settings import bound_settings, settings_sha256
from pitchsweep.safety.beam_map import beam_map
from pitchsweep.safety.beam_map_text import beam_map_lines
from pitchsweep.safety.run_refusals import refuse_unsafe, why_refused
from pitchsweep.safety.safety_errors import GateRefused

CHECKLIST = read_checklist("demo:enclosed-bench")


def other(was: Part, **changes: Any) -> Part:
    return was.model_copy(update=changes)


@pytest.mark.parametrize("seat", range(4))
def test_a_change_of_any_part_changes_what_was_signed(seat: int) -> None:
    job = lot_job()
    bound = settings_sha256(bound_settings(job, CHECKLIST))
    lot = list(job.lot)

    def changed(**changes: Any) -> Any:
        return job_with_lot(
            job, *lot[:seat], other(lot[seat], **changes), *lot[seat + 1 :]
        )

    for changes in ({"nominal_pitch_nm": 741.0}, {"u_tilt_mrad": 11.0}):
        now = changed(**changes)
        assert settings_sha256(bound_settings(now, CHECKLIST)) != bound
        assert fingerprint(now) != fingerprint(job)
    noted = changed(note="only words")
    assert settings_sha256(bound_settings(noted, CHECKLIST)) == bound
    assert fingerprint(noted) != fingerprint(job)


def test_a_part_more_or_less_voids_a_sign_off_and_is_named(tmp_path: Any) -> None:
    at, job = office(tmp_path), lot_job()
    kept = signed(at, work_of(job))
    assert verdict(at, kept, work_of(job)) == ""
    said = kept.record.statement.part
    assert "2: shim-830, serial 7" in said and "4: reference-740" in said
    shorter = job_with_lot(job, *job.lot[:3])
    assert "lot[3]" in verdict(at, kept, work_of(shorter))
    tilted = job_with_lot(job, *job.lot[:2], other(job.lot[2], u_tilt_mrad=12.0))
    why = verdict(at, kept, work_of(tilted))
    assert "lot[2].u_tilt_mrad was 10.0, is 12.0" in why


def test_every_file_of_a_lot_is_watched_while_it_runs() -> None:
    names = {path.rsplit("/", 1)[-1] for path in sources_of(read_job("demo:lot-ratio"))}
    assert {"reference-740.yaml", "shim-830.yaml", "shim-830-second.yaml"} <= names


# A gap above 40 degrees. Of 310 nm grooves no order but zero ever leaves (light of
# 633 nm within 45 degrees of incidence: |sin a + 633/310| > 1), and that one stays low.
GAP = surface("walls", -180.0, 180.0, -90.0, 40.0)
FINE = {"nominal_pitch_nm": 310.0, "u_tilt_mrad": 1.0}


@pytest.mark.parametrize("first", [True, False], ids=["first", "second"])
@pytest.mark.parametrize(
    ("changes", "beam"),
    [
        ({"nominal_pitch_nm": 830.0}, "order -2, -1, +1, +2 of part bad 1"),
        ({**FINE, "u_tilt_mrad": 150.0}, "order -1, 0, +1 of part bad 1"),
    ],
    ids=["an order", "the zero order"],
)
def test_one_unsafe_part_refuses_the_lot(
    first: bool, changes: dict[str, Any], beam: str
) -> None:
    alone = job_within([GAP], step_deg=5.0)
    good = other(alone.part, part="good", serial="1", **FINE)
    bad = other(alone.part, part="bad", **{"serial": "1", **FINE, **changes})
    assert why_refused(job_with_lot(alone, good)) == ()
    job = job_with_lot(alone, *((bad, good) if first else (good, bad)))
    refused = why_refused(job)
    assert any(beam in refusal.what for refusal in refused)
    assert not any("part good" in refusal.what for refusal in refused)
    with pytest.raises(GateRefused):
        refuse_unsafe(job)


def test_the_beam_map_has_the_beams_of_every_part() -> None:
    found = beam_map(lot_job(step_deg=10.0))
    # The two shims send every beam alike and stand there once.
    assert {beam.part for beam in found.beams} == {"shim-830 7", "reference-740 R1"}
    text = "\n".join(beam_map_lines(found))
    assert "(part shim-830 7)" in text and "(part reference-740 R1)" in text
