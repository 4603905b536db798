"""The stage client against the twin's stage firmware, in one process."""

import pytest
from driver_fakes import FakeBenchClock, FakeStageWorld, stage_line

from pitchsweep.configs.bench_model import Stage
from pitchsweep.drivers.driver_errors import AskedIllegal, DeviceRefused
from pitchsweep.drivers.stage_client import StageClient


def _stage(**settings: float) -> tuple[StageClient, FakeStageWorld]:
    world = FakeStageWorld(FakeBenchClock())
    values = {"travel_min_deg": -180.0, "travel_max_deg": 180.0, **settings}
    return StageClient(stage_line(world), world.clock, Stage(**values)), world


def _homed(**settings: float) -> tuple[StageClient, FakeStageWorld]:
    stage, world = _stage(**settings)
    stage.home()
    return stage, world


def test_it_says_who_and_where() -> None:
    stage, _ = _stage()
    assert stage.identify() == "fake-stage"
    reading = stage.where()
    assert (reading.angle_deg, reading.turning, reading.homed) == (0.0, False, False)


def test_it_refuses_to_move_before_homing() -> None:
    stage, world = _stage()
    with pytest.raises(DeviceRefused) as refusal:
        stage.move_to(10.0)
    assert refusal.value.reason == "not-homed" and world.moves_deg == []


def test_homing_takes_bench_time_and_finds_zero() -> None:
    stage, world = _homed()
    assert world.clock.time_s >= 2.0
    assert stage.where().homed
    assert world.mechanics.motor_deg(world.clock.time_s) == 0.0


def test_every_angle_is_approached_from_below() -> None:
    stage, world = _homed(approach_deg=0.5)
    for angle_deg in (-10.0, 10.0, 10.2, 0.0):
        assert stage.move_to(angle_deg).angle_deg == pytest.approx(angle_deg)
        now_s = world.clock.time_s
        assert world.mechanics.table_deg(now_s) == world.mechanics.motor_deg(now_s)
    expected = [-10.5, -10.0, 10.0, 9.7, 10.2, -0.5, 0.0]
    assert world.moves_deg == pytest.approx(expected)


def test_motion_takes_its_bench_time_and_no_more() -> None:
    stage, world = _homed(approach_deg=0.5, speed_deg_per_s=10.0)
    before_s = world.clock.time_s
    stage.move_to(30.0)
    assert world.clock.time_s - before_s == pytest.approx(3.0, abs=0.06)


def test_outside_travel_nothing_is_sent() -> None:
    stage, world = _homed()
    for angle_deg in (181.0, -179.9, float("nan")):
        with pytest.raises(AskedIllegal):
            stage.move_to(angle_deg)
    assert world.moves_deg == []


def test_a_stall_a_wrong_place_and_a_lost_zero_are_told() -> None:
    stage, world = _homed()
    world.astray_deg = 0.05
    with pytest.raises(DeviceRefused, match="sent to 20.0000") as refusal:
        stage.move_to(20.0)
    assert refusal.value.reason == "wrong-place"
    world.astray_deg, world.stalls = 0.0, True
    with pytest.raises(DeviceRefused) as refusal:
        stage.move_to(30.0)
    assert refusal.value.reason == "stalled"
    world.stalls = False
    world.mechanics.lose_zero(world.clock.time_s, 5.0)
    with pytest.raises(DeviceRefused) as refusal:
        stage.move_to(30.0)
    assert refusal.value.reason == "not-homed"


def test_a_stage_that_never_arrives_is_given_up_in_bounded_bench_time() -> None:
    stage, world = _homed()
    before_s = world.clock.time_s
    world.astray_deg = 1e6
    with pytest.raises(DeviceRefused) as refusal:
        stage.move_to(10.0)
    assert refusal.value.reason == "still-turning"
    assert world.clock.time_s - before_s < 10.0


def test_a_stage_found_turning_is_halted_first() -> None:
    stage, world = _homed()
    world.stage_move(100.0, 60.0)
    world.clock.wait(1.0)
    assert stage.move_to(5.0).angle_deg == pytest.approx(5.0)
