"""The beam map: what refuses a run, and that the refusal names steps and remedy."""

import time

import pytest
from beam_map_builders import ALL_ROUND, job_within, surface, with_laser
from builders import demo_job

from pitchsweep.acquire.sweep_plan import plan_sweep
from pitchsweep.configs.enclosure_model import PartMount
from pitchsweep.configs.reader import shipped_names
from pitchsweep.safety.beam_map import Beam, BeamKind, beam_map, refusals
from pitchsweep.safety.beam_map_text import beam_map_lines, step_lines
from pitchsweep.safety.beam_steps import grid_deg, lit_angles, steps_text
from pitchsweep.safety.refusals import Refusal

JOBS = shipped_names("jobs")


def only(found: tuple[Refusal, ...], words: str) -> Refusal:
    """The refusal that says ``words``; there must be one."""
    (refusal,) = [r for r in found if words in r.what]
    return refusal


@pytest.mark.parametrize("name", JOBS)
def test_every_shipped_job_stops_all_its_beams(name: str) -> None:
    found = beam_map(demo_job(name))
    assert refusals(found) == ()
    assert found.closed_all_round
    assert all(
        beam.meets and "nothing declared" not in beam.meets for beam in found.beams
    )


def test_every_planned_step_and_zero_check_is_in_the_map() -> None:
    for name in JOBS:
        if name == "track-320-red":
            continue
        job = demo_job(name)
        plan = plan_sweep(job, "any")
        planned = {step.incidence_deg for step in plan.steps + plan.zero_checks}
        mapped = {s for a in lit_angles(job) for s in a.steps_deg}
        assert {round(p, 6) for p in planned} == {round(m, 6) for m in mapped}


def test_every_order_that_may_leave_is_there_at_full_drive() -> None:
    job = with_laser(demo_job("track-1600-violet"), "violet", full_drive_mw=4.0)
    found = beam_map(job)
    assert {beam.power_mw for beam in found.beams} == {4.0}
    orders = {beam.order for beam in found.beams if beam.kind is BeamKind.ORDER}
    assert set(range(-7, 8)) <= orders
    kinds = {beam.kind for beam in found.beams}
    assert kinds == set(BeamKind)


def test_zero_order_goes_by_twice_the_incidence() -> None:
    found = beam_map(demo_job("shims-spots"))
    zero = [b for b in found.beams if b.kind is BeamKind.ORDER and b.order == 0]
    for beam in zero:
        assert beam.azimuth_deg == pytest.approx(2.0 * beam.at.incidence_deg, abs=1e-9)


def test_first_order_at_normal_incidence_is_the_grating_equation() -> None:
    """sin b = lambda/d: 632.99 nm on 830 nm leaves at 49.70 degrees (C)."""
    found = beam_map(demo_job("shims-spots"))
    (beam,) = [
        b
        for b in found.beams
        if (b.kind, b.order, b.at.incidence_deg) == (BeamKind.ORDER, 1, 0.0)
    ]
    assert beam.azimuth_deg == pytest.approx(49.70, abs=0.005)


def test_a_bench_without_an_enclosure_is_refused_in_one_line() -> None:
    (refusal,) = refusals(beam_map(demo_job("shims-spots", bench={"enclosure": None})))
    assert "declares no enclosure" in refusal.what and "'enclosure:'" in refusal.remedy


def test_a_part_mounted_a_quarter_turn_wrong_sends_orders_up_and_down() -> None:
    # A bench that thought only of the plane: a belt all round.
    belt = surface("belt", -180.0, 180.0, -30.0, 30.0)
    found = beam_map(job_within([belt]))
    refusal = only(refusals(found), "order -2, -1, +1, +2 at the 91 steps")
    assert "-45 to 45 deg" in refusal.what
    assert "no stop is declared" in refusal.what
    assert "declare" in refusal.remedy and "leave those steps out" in refusal.remedy
    worst = [b for b in found.beams if b.fault and b.order == 1]
    assert max(abs(b.fault_elevation_deg or 0.0) for b in worst) > 40.0


def test_the_zero_order_stays_in_the_belt() -> None:
    belt = surface("belt", -180.0, 180.0, -30.0, 30.0)
    found = beam_map(job_within([belt], margin_deg=0.0))
    zero = [b for b in found.beams if b.kind is BeamKind.ORDER and b.order == 0]
    steep = {b.at.incidence_deg for b in zero if b.fault}
    assert all(abs(incidence) > 40.0 for incidence in steep)


def test_an_uncovered_direction_names_its_steps() -> None:
    """The zero order of 40 to 45 degrees goes to 80 to 90; a gap lies there."""
    walls = surface("walls", -268.0, 72.0, -90.0, 90.0)  # all but 72 to 92
    found = beam_map(job_within([walls], margin_deg=0.0))
    faulty = {
        b.at.incidence_deg
        for b in found.beams
        if b.kind is BeamKind.ORDER and b.order == 0 and b.fault
    }
    # A gap of 72 to 92 degrees, the zero order known to about 5 degrees.
    assert set(range(37, 45)) <= faulty <= set(range(30, 46))
    text = " ".join(r.what for r in refusals(found))
    assert "no stop is declared there" in text and "incidence" in text


def test_a_missing_part_lets_the_beam_straight_on() -> None:
    ahead = surface("walls", -170.0, 170.0, -90.0, 90.0)
    refusal = only(refusals(beam_map(job_within([ahead]))), "part missing")
    assert "every step" in refusal.what and "azimuth 180" in refusal.what


def test_a_shiny_mount_is_a_mirror_that_turns_with_the_stage() -> None:
    gap = [surface("walls", -290.0, 50.0, -90.0, 90.0)]  # open from 50 to 70
    black = refusals(beam_map(job_within(gap)))
    assert not any("bare mount" in r.what for r in black)
    shiny = job_within(gap, mount=PartMount(acts_as="mirror", tilt_deg=0.0))
    refusal = only(refusals(beam_map(shiny)), "bare mount")
    assert "steps at incidence 2" in refusal.what


def test_a_ghost_spreads_further_than_its_order() -> None:
    found = beam_map(
        job_within([ALL_ROUND.model_copy(update={"azimuth_to_deg": 90.0})])
    )
    faults = {
        kind: {
            (b.at.incidence_deg, b.order)
            for b in found.beams
            if b.kind is kind and b.fault
        }
        for kind in (BeamKind.ORDER, BeamKind.GHOST)
    }
    assert faults[BeamKind.ORDER] < faults[BeamKind.GHOST]


def test_a_mirror_without_a_direction_is_refused() -> None:
    mirror = surface("camera", -10.0, 10.0, 20.0, 35.0, what="camera", acts_as="mirror")
    found = refusals(beam_map(job_within([mirror, ALL_ROUND])))
    assert found and all("'camera' is a mirror" in r.what for r in found)
    assert all("throws_into" in r.remedy for r in found)


def test_a_mirror_that_throws_onto_stops_is_accepted() -> None:
    mirror = surface(
        "post",
        60.0,
        64.0,
        -90.0,
        30.0,
        what="post",
        acts_as="mirror",
        reflectance=0.5,
        throws_into=(-120.0, 120.0, -40.0, 40.0),
    )
    other = mirror.model_copy(update={"name": "other-post"})
    low = other.model_copy(update={"azimuth_from_deg": -64.0, "azimuth_to_deg": -60.0})
    behind = mirror.model_copy(
        update={"throws_into": surface("s", 130.0, 200.0, -9.0, 9.0)}
    )
    assert not refusals(beam_map(job_within([behind, ALL_ROUND])))
    onto_itself = refusals(beam_map(job_within([mirror, ALL_ROUND])))
    assert all("onto mirror 'post'" in r.what for r in onto_itself) and onto_itself
    two = refusals(beam_map(job_within([behind, low, ALL_ROUND])))
    assert any("'other-post'" in r.what for r in two)


def test_a_mirror_that_throws_into_the_open_is_refused() -> None:
    mirror = surface(
        "post",
        60.0,
        64.0,
        -10.0,
        10.0,
        what="post",
        acts_as="mirror",
        throws_into=(130.0, 150.0, 30.0, 40.0),
    )
    walls = surface("walls", -180.0, 180.0, -90.0, 35.0)
    found = refusals(beam_map(job_within([mirror, walls])))
    assert any("throws it where no stop is declared" in r.what for r in found)


def test_what_a_mirror_throws_must_be_borne_where_it_lands() -> None:
    mirror = surface(
        "post",
        60.0,
        64.0,
        -10.0,
        10.0,
        what="post",
        acts_as="mirror",
        reflectance=0.5,
        throws_into=(171.0, 189.0, -4.0, 4.0),
    )
    # The beam passes the dump only if straight on; the mirror sends half of it there.
    dump = surface("dump", 170.0, 190.0, -5.0, 5.0, what="dump", max_power_mw=0.4)
    found = refusals(beam_map(job_within([mirror, dump, ALL_ROUND])))
    assert any("by mirror 'post'" in r.what for r in found)
    assert any("declared for 0.4 mW" in r.what for r in found)


def test_a_window_must_be_dense_enough_for_a_night() -> None:
    """0.9 mW of 633 nm against 10 W/m2 over 7 mm, 0.385 mW: density 0.37 (C)."""

    def with_density(density: float) -> tuple[Refusal, ...]:
        window = surface(
            "window", 60.0, 80.0, 0.0, 30.0, what="window", optical_density=density
        )
        return refusals(beam_map(job_within([window, ALL_ROUND])))

    assert with_density(0.36) and not with_density(0.38)
    assert "window 'window' of density 0.36" in with_density(0.36)[0].what
    assert "cover the window" in with_density(0.36)[0].remedy


def test_the_hole_and_the_screen_are_met_when_they_are_in_the_way() -> None:
    found = beam_map(demo_job("shims-spots"))

    def zero_at(incidence_deg: float) -> Beam:
        (beam,) = [
            b
            for b in found.beams
            if (b.kind, b.order) == (BeamKind.ORDER, 0)
            and b.at.incidence_deg == incidence_deg
        ]
        return beam

    assert "beam-hole" in zero_at(0.0).meets and "screen" in zero_at(0.0).meets
    assert zero_at(10.0).meets[0] == "screen"
    assert zero_at(-45.0).meets == ("walls",)


def test_a_part_left_in_another_mount_is_mapped_too() -> None:
    found = beam_map(demo_job("shims-four-mounts"))
    left = [b for b in found.beams if b.at.left_behind]
    assert any(abs(b.at.incidence_deg) > 80.0 for b in left)
    assert not any(b.at.left_behind for b in beam_map(demo_job("shims-spots")).beams)
    lines = beam_map_lines(found)
    assert any("stayed as in another mount" in line for line in lines)


def test_neighbouring_steps_stand_together_and_stay_named() -> None:
    job = demo_job("shims-spots", recipe={"step_deg": 0.01})
    angles = lit_angles(job)
    assert len(angles) < 200
    assert sum(len(a.steps_deg) for a in angles) == len(grid_deg(job.recipe)) == 9001
    assert max(a.half_width_deg for a in angles) <= 0.25
    assert refusals(beam_map(job)) == ()


def test_steps_are_told_in_runs() -> None:
    assert (
        steps_text([1.0, 2.0, 3.0, 7.0], 1.0)
        == "the 4 steps at incidence 1 to 3, 7 deg"
    )
    assert steps_text([5.0], 1.0) == "the step at incidence 5 deg"
    assert steps_text([], 1.0) == "every step"


def test_the_table_has_a_line_for_every_kind_and_ends_with_the_verdict() -> None:
    good = beam_map_lines(beam_map(demo_job("shims-spots")))
    assert good[-1].startswith("every beam meets only")
    assert sum(line.startswith("red") for line in good) == 5 * 4 + 2
    bad = beam_map_lines(beam_map(job_within([surface("belt", -9, 9, -9, 9)])))
    assert bad[-1].startswith("REFUSED: ")
    assert any("Not closed all round" in line for line in bad)
    steps = step_lines(beam_map(demo_job("shims-spots")), "red")
    assert len(steps) == len(beam_map(demo_job("shims-spots")).beams)


def test_a_map_of_a_wide_sweep_is_quick() -> None:
    # Measured at 0.15 s; so slow that it cannot fail by a busy machine alone.
    began = time.process_time()
    beam_map(demo_job("track-1600-violet"))
    assert time.process_time() - began < 5.0
