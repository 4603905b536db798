from acquire_fakes import small_job

from pitchsweep.acquire.zero_order_watch import (
    WatchState,
    after_exposure,
    is_well_seen,
    predict_zero_order,
    zero_check_incidence_deg,
)

JOB = small_job()


def look(
    state: WatchState, incidence_deg: float, *spots: tuple[float, float], first: bool
) -> WatchState:
    return after_exposure(
        state,
        bench=JOB.bench,
        part=JOB.part,
        incidence_deg=incidence_deg,
        spots_mm=spots,
        first_after_homing=first,
    )


def test_the_zero_order_moves_to_plus_x_by_twice_the_angle() -> None:
    # 250 mm * tan(20 deg) = 90.99 mm
    assert round(predict_zero_order(JOB.bench, JOB.part, 10.0).x_mm, 2) == 90.99


def test_allowance_is_generous_and_never_below_ten_millimetres() -> None:
    prediction = predict_zero_order(JOB.bench, JOB.part, 10.0)
    assert prediction.allowance_x_mm > 20.0 and prediction.allowance_y_mm >= 10.0


def test_check_angle_is_small_and_well_seen() -> None:
    angle = zero_check_incidence_deg(JOB.bench, JOB.part, [-45.0, 0.0, 1.0, 9.0, 12.0])
    assert angle == 9.0
    assert is_well_seen(JOB.bench, predict_zero_order(JOB.bench, JOB.part, 9.0))
    assert zero_check_incidence_deg(JOB.bench, JOB.part, [0.0, 0.5]) is None


def test_first_exposure_trips_when_it_is_elsewhere_or_mirrored() -> None:
    assert not look(WatchState(), 10.0, (95.0, 5.0), first=True).trip_reason
    mirrored = look(WatchState(), 10.0, (-91.0, 0.0), first=True)
    assert "first exposure after homing" in mirrored.trip_reason
    assert "no spot at all" in look(WatchState(), 10.0, first=True).trip_reason


def test_lost_once_is_forgiven_and_twice_running_trips() -> None:
    once = look(WatchState(), 10.0, (0.0, 0.0), first=False)
    assert once.lost_in_a_row == 1 and not once.trip_reason
    assert look(once, 11.0, (100.0, 0.0), first=False) == WatchState()
    assert "lost in 2 exposures" in look(once, 11.0, first=False).trip_reason


def test_exposures_where_it_is_not_expected_do_not_count() -> None:
    once = look(WatchState(), 10.0, first=False)
    for angle in (0.0, 1.0, 30.0, 60.0, -75.0):
        assert look(once, angle, first=False) == once
