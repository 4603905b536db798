"""The twin's process over real ports: stage, unit, camera, world, faults."""

import hashlib
import hmac
import json
import os
import time
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest
from twin_bench import Clients, label, light_anew, running_twin, unit_log, while_lit

from pitchsweep.drivers.driver_errors import (
    AnsweredNonsense,
    DeviceRefused,
    LineBroke,
    NoAnswerInTime,
)
from pitchsweep.drivers.serial_transport import open_serial
from pitchsweep.drivers.twin.fault_schedule import Fault
from pitchsweep.drivers.twin.truth import draw_truth
from pitchsweep.drivers.twin_link import TwinAddress, TwinLink

EXPOSURE = {"exposure_ms": 1.0, "label": dict(label(3).__dict__)}


@pytest.fixture(scope="module")
def twin(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Clients]:
    with running_twin(tmp_path_factory.mktemp("twin")) as clients:
        clients.stage.home()
        yield clients
        spool = _unfetched_frame(clients).parent
        assert spool.exists()
    assert not spool.exists()
    assert clients.handle.process.returncode == 0


def _unfetched_frame(clients: Clients) -> Path:
    link = clients.camera._link
    begun = link.ask("begin", **EXPOSURE)
    return Path(link.ask("fetch", exposure=begun["exposure"])["file"])


def test_it_is_a_process_in_a_session_of_its_own(twin: Clients) -> None:
    pid = twin.handle.process.pid
    assert os.getsid(pid) == pid != os.getsid(0)


def test_devices_say_who_they_are(twin: Clients) -> None:
    assert twin.stage.identify() == "twin-stage"
    assert twin.unit.identify() == twin.job.bench.emission.unit_identity
    camera = twin.camera.identify()
    assert (camera["width_px"], camera["height_px"]) == (320, 128)


def test_truths_are_written_and_follow_from_the_seed(twin: Clients) -> None:
    written = json.loads((twin.handle.directory / "twin_truth.json").read_text())
    truth = draw_truth(twin.job.bench, twin.job.part, 5)
    assert written["pitch_nm"] == truth.pitch_nm
    assert written == json.loads(json.dumps(truth.to_json()))


def test_only_the_started_process_proves_itself(twin: Clients) -> None:
    expected = hmac.new(twin.handle.proof_key, b"nonce", hashlib.sha256).digest()
    assert twin.unit.prove(b"nonce") == expected
    assert twin.handle.proof_key.hex() not in repr(twin.handle)


def test_bench_time_advances_only_by_what_is_asked(twin: Clients) -> None:
    before_s = twin.world.now_s()
    assert twin.world.now_s() == before_s
    twin.world.wait(3600.0)
    assert twin.world.now_s() == before_s + 3600.0
    with pytest.raises(DeviceRefused, match="0 or more"):
        twin.world.wait(-1.0)


def test_the_port_is_held_exclusively(twin: Clients) -> None:
    with pytest.raises(LineBroke):
        open_serial(twin.handle.unit_port)


def test_a_wrong_token_opens_nothing(twin: Clients) -> None:
    address = twin.handle.address
    link = TwinLink(TwinAddress(address.host, address.port, "wrong"))
    with pytest.raises(LineBroke):
        link.ask("now")
    link.close()


def test_light_shows_spots_and_a_frame_and_dark_shows_none(twin: Clients) -> None:
    twin.stage.move_to(8.0)
    twin.world.seat_part(0, 0.0)
    spots, again = (
        while_lit(twin.unit, lambda: twin.world.spots(label(1))) for _ in range(2)
    )
    lit, lit_again = (
        while_lit(twin.unit, lambda: twin.camera.expose(5.0, label(1)))
        for _ in range(2)
    )
    assert not twin.unit.dark().light_on
    dark = twin.camera.expose(5.0, label(1))
    assert twin.world.spots(label(1)) == []
    assert len(spots) >= 2 and spots == again
    assert lit.dtype == np.uint16 and lit.shape == dark.shape == (128, 320)
    assert np.array_equal(lit, lit_again)
    assert (lit.astype(int) - dark > 100).sum() >= 10


def test_a_turning_stage_smears(twin: Clients) -> None:
    twin.stage.move_to(-20.0)
    twin.world.seat_part(0, 0.0)
    still = while_lit(twin.unit, lambda: twin.camera.expose(100.0, label(2)))

    def turn() -> None:
        twin.stage.halt()
        twin.stage.move_to(-20.0)
        twin.stage._ask("move", angle_deg=20.0, feed_deg_per_min=600.0)
        assert twin.stage.where().turning and twin.world.spots(label(2)) == []

    smeared = while_lit(
        twin.unit, lambda: twin.camera.expose(100.0, label(2)), first=turn
    )
    twin.stage.halt()
    twin.unit.dark()
    threshold = 200
    assert (smeared > threshold).sum() > 1.2 * (still > threshold).sum()


def test_a_frame_read_out_later_shows_what_was_there_when_it_was_exposed(
    twin: Clients,
) -> None:
    twin.stage.move_to(8.0)
    twin.world.seat_part(0, 0.0)
    whole = while_lit(twin.unit, lambda: twin.camera.expose(5.0, label(4)))
    to_come = while_lit(twin.unit, lambda: twin.camera.begin(5.0, label(4)))
    assert not twin.unit.dark().light_on
    twin.stage.move_to(14.0)
    twin.world.seat_part(1, 90.0)
    assert (whole > 200).sum() >= 10
    assert np.array_equal(to_come(), whole)


def test_frames_do_not_pile_up(twin: Clients) -> None:
    unfetched = _unfetched_frame(twin)
    spool = unfetched.parent
    unfetched.unlink()
    twin.camera.expose(1.0, label(3))
    assert list(spool.iterdir()) == []


def test_the_person_on_the_spot_is_seen_at_the_unit(twin: Clients) -> None:
    before = twin.unit.state()
    twin.world.set_door(closed=False)
    twin.world.press_reset()
    opened = twin.unit.state()
    twin.world.set_door(closed=True)
    assert before.door_closed and not opened.door_closed
    assert opened.reset_count == before.reset_count + 1
    rows = [(r["what"], r["value"]) for r in unit_log(twin.handle.directory)]
    assert ("door", "open") in rows and rows[-1] == ("door", "closed")


def test_the_light_lapses_within_250_ms_of_the_last_keep_alive(twin: Clients) -> None:
    twin.unit.dark()
    lapses = twin.unit.state().lapse_count
    light_anew(twin.unit)
    while twin.unit.state().light_on:  # the real safety clock runs here
        pass
    assert twin.unit.state().lapse_count == lapses + 1
    on, off = unit_log(twin.handle.directory)[-2:]
    assert (on["value"], off["value"]) == ("on", "off")
    assert 0.0 < off["monotonic_s"] - on["monotonic_s"] <= 0.25


def test_a_line_that_nobody_reads_does_not_hold_up_the_light(twin: Clients) -> None:
    light_anew(twin.unit)
    transport = twin.unit._line._transport
    for _ in range(300):
        transport.send(b"N1 KEEP\n" + b"N1 STATE\n" * 4)
    directory = twin.handle.directory
    limit_s = time.monotonic() + 5.0
    while unit_log(directory)[-1]["value"] != "off":
        assert time.monotonic() < limit_s
    while transport.receive(0.05):
        pass
    assert unit_log(directory)[-1]["why"] == "keep-alive ran out"


def test_questions_that_make_no_sense_are_refused_in_words(twin: Clients) -> None:
    link = TwinLink(twin.handle.address)
    for ask, fields in (
        ("dance", {}),
        ("wait", {}),
        ("wait", {"seconds": "x"}),
        ("begin", {"exposure_ms": 1.0, "label": 3}),
        ("fetch", {"exposure": 77}),
    ):
        with pytest.raises(DeviceRefused, match=ask):
            link.ask(ask, **fields)
    assert link.ask("now") >= 0.0
    link.close()


def test_faults_on_schedule_reach_the_controller(tmp_path: Path) -> None:
    faults = (
        Fault("stage-ask", 2, "silent"),
        Fault("stage-ask", 4, "garbage"),
        Fault("stage-ask", 6, "late", late_s=0.15),
        Fault("stage-move", 1, "stall"),
        Fault("exposure", 2, "refused"),
    )
    with running_twin(tmp_path, *faults) as twin:
        twin.stage._timeout_s = 0.1
        assert twin.stage.identify() == "twin-stage"
        with pytest.raises(NoAnswerInTime):
            twin.stage.identify()
        assert twin.stage.identify() == "twin-stage"
        with pytest.raises(AnsweredNonsense):
            twin.stage.identify()
        assert twin.stage.identify() == "twin-stage"
        with pytest.raises(NoAnswerInTime):
            twin.stage.identify()
        twin.stage._timeout_s = 2.0
        twin.stage.home()
        while not twin.stage._line.late_answers:
            assert twin.stage.identify() == "twin-stage"
        with pytest.raises(DeviceRefused, match="stalled"):
            twin.stage.move_to(30.0)
        twin.camera.expose(1.0, label())
        with pytest.raises(DeviceRefused, match="schedule"):
            twin.camera.expose(1.0, label())


def test_a_power_cut_loses_the_zero(tmp_path: Path) -> None:
    with running_twin(tmp_path) as twin:
        twin.stage.home()
        twin.stage.move_to(4.0)
        twin.world.cut_power()
        assert not twin.stage.where().homed
        twin.stage.home()
        assert twin.stage.move_to(4.0).angle_deg == pytest.approx(4.0)


def test_at_real_speed_waits_sleep_and_time_passes_by_itself(tmp_path: Path) -> None:
    with running_twin(tmp_path, speed="real") as twin:
        bench_s, real_s = twin.world.now_s(), time.monotonic()
        twin.world.wait(0.1)
        real_passed_s = time.monotonic() - real_s
        assert real_passed_s >= 0.1
        assert twin.world.now_s() - bench_s >= 0.1
