import numpy as np
import pytest
from acquire_fakes import small_job
from builders import demo_job
from hypothesis import given
from hypothesis import strategies as st

from pitchsweep.acquire.acquire_errors import JobRefused
from pitchsweep.acquire.sweep_plan import (
    frames_of,
    incidence_grid_deg,
    ordered,
    plan_sweep,
)
from pitchsweep.configs.reader import read_job
from pitchsweep.configs.recipe_model import Recipe


@given(
    order=st.sampled_from(["up", "up-down", "shuffled"]),
    count=st.integers(1, 60),
    seed=st.text(max_size=5),
)
def test_every_order_takes_every_angle_once(order: str, count: int, seed: str) -> None:
    grid = tuple(float(k) for k in range(count))
    taken = ordered(grid, order, seed)
    assert sorted(taken) == list(grid)
    assert taken == ordered(grid, order, seed)


def test_up_down_goes_up_and_comes_down_between() -> None:
    assert ordered((1.0, 2.0, 3.0, 4.0, 5.0), "up-down", "") == (1, 3, 5, 4, 2)


def test_shuffled_order_depends_on_the_fingerprint() -> None:
    job = small_job(angle_order="shuffled")
    first, second = plan_sweep(job, "a"), plan_sweep(job, "b")
    assert [s.stage_deg for s in first.steps] != [s.stage_deg for s in second.steps]
    assert first == plan_sweep(job, "a")


def test_grid_includes_the_stop_when_a_whole_step_reaches_it() -> None:
    recipe = small_job(start_deg=-0.3, stop_deg=0.3, step_deg=0.1).recipe
    assert incidence_grid_deg(recipe) == (-0.3, -0.2, -0.1, 0.0, 0.1, 0.2, 0.3)


@given(
    mounts=st.lists(st.sampled_from([0.0, 90.0, 180.0, 270.0]), min_size=1, unique=True)
)
def test_plan_is_numbered_dense_and_within_travel(mounts: list[float]) -> None:
    job = small_job(mounts_deg=tuple(mounts))
    plan = plan_sweep(job, "x")
    stage = job.bench.stage
    assert [s.step for s in plan.steps] == list(range(9 * len(mounts)))
    planned = [s.planned_s for s in plan.steps]
    assert planned == sorted(planned) and len(set(planned)) == len(planned)
    frame = 0
    for step in plan.steps:
        assert step.first_frame == frame
        frame += frames_of(step)
        assert stage.travel_min_deg <= step.stage_deg - stage.approach_deg
        assert step.stage_deg <= stage.travel_max_deg
        seen = stage.direction * (step.stage_deg - step.mount_deg)
        # Whole turns change no angle.
        assert np.isclose((seen - step.incidence_deg) % 360.0, 0.0) or np.isclose(
            (seen - step.incidence_deg) % 360.0, 360.0
        )
    assert frame == plan.frames
    assert len(plan.zero_checks) == len(mounts)


def test_darks_are_due_at_each_mount_and_every_so_many_steps() -> None:
    plan = plan_sweep(small_job(mounts_deg=(0.0, 90.0)), "x")
    due = [s.step for s in plan.steps if s.dark_due]
    assert due == [0, 4, 8, 9, 13, 17]


def test_angles_beyond_the_travel_are_refused_with_the_travel() -> None:
    job = small_job(mounts_deg=(50.0,))
    narrow = job.bench.stage.model_copy(
        update={"travel_min_deg": -60.0, "travel_max_deg": 60.0}
    )
    bench = job.bench.model_copy(update={"stage": narrow})
    with pytest.raises(JobRefused, match="its travel is -60 to 60 deg"):
        plan_sweep(job.model_copy(update={"bench": bench}), "x")


def test_a_sweep_that_sees_no_order_is_refused_with_the_angle_it_needs() -> None:
    job = read_job("demo:track-320-red").job
    with pytest.raises(JobRefused) as caught:
        plan_sweep(job, "x")
    assert "order -1 leaves only beyond 79.9 degrees of incidence" in str(caught.value)
    assert "the recipe stops at 75" in str(caught.value)


@pytest.mark.parametrize("pitch", ["1600", "740", "320"])
@pytest.mark.parametrize("laser", ["red", "green", "violet"])
def test_eight_of_nine_shipped_tracks_are_planned(pitch: str, laser: str) -> None:
    job = read_job(f"demo:track-{pitch}-{laser}").job
    if (pitch, laser) == ("320", "red"):
        return
    assert len(plan_sweep(job, "x").steps) > 100


def test_a_sweep_that_never_sees_the_zero_order_is_refused() -> None:
    job = small_job(start_deg=44.0, stop_deg=46.0, step_deg=1.0)
    with pytest.raises(JobRefused, match="zero order cannot be watched"):
        plan_sweep(job, "x")


def test_a_part_turned_in_its_own_plane_is_a_seating_of_its_own() -> None:
    faces = {"mounts_deg": (0.0, 0.0), "faces_deg": (0.0, 180.0)}
    job = demo_job("shims-spots", recipe=faces)
    plan = plan_sweep(job, "x")
    assert {(s.mount, s.face_deg) for s in plan.steps} == {(0, 0.0), (1, 180.0)}
    assert [c.face_deg for c in plan.zero_checks] == [0.0, 180.0]


@pytest.mark.parametrize(
    ("faces", "said"),
    [
        ((0.0,), "one entry for each"),
        ((180.0, 180.0), "differ"),
        ((0.0, 90.0), "0 or 180"),
    ],
)
def test_faces_that_make_no_sense_are_refused(
    faces: tuple[float, ...], said: str
) -> None:
    recipe = demo_job("shims-spots").recipe.model_dump()
    with pytest.raises(ValueError, match=said):
        Recipe(**{**recipe, "mounts_deg": (0.0, 0.0), "faces_deg": faces})
