"""Several lasers behind one unit: they count together unless the bench says not."""

import math

import pytest
from beam_map_builders import ALL_ROUND, enclosure, surface, with_laser
from builders import demo_job

from pitchsweep.configs.bench_model import Emission
from pitchsweep.configs.job_model import Job
from pitchsweep.configs.reader import read_checklist
from pitchsweep.safety.beam_map import beam_map, refusals
from pitchsweep.safety.beam_map_text import beam_map_lines
from pitchsweep.safety.checklist import circumstances_of, readings_wanted
from pitchsweep.safety.hazard_figures import class_together, summed_hazard
from pitchsweep.safety.lasers_alight import (
    lasers_alight,
    may_be_together,
    strongest_mw,
)
from pitchsweep.safety.refusals import refuse_outright
from pitchsweep.safety.shown_figures import figures_shown

NAMES = ("red", "green", "violet")


def job_of(at_once: str, *surfaces: object, **keys: object) -> Job:
    """A job in red on the bench with three lasers of 0.9 mW."""
    job = demo_job("track-740-red")
    emission = job.bench.emission.model_copy(update={"lasers_at_once": at_once})
    update: dict[str, object] = {"emission": emission}
    if surfaces or keys:
        around = surfaces or (ALL_ROUND,)
        update["enclosure"] = enclosure(around, **keys)  # type: ignore[arg-type]
    bench = job.bench.model_copy(update=update)
    recipe = job.recipe.model_copy(update={"step_deg": 30.0})
    return job.model_copy(update={"bench": bench, "recipe": recipe})


def test_a_bench_that_says_nothing_is_taken_to_light_all_of_its_lasers() -> None:
    assert Emission().lasers_at_once == "all"
    together, apart = job_of("all"), job_of("one")
    assert lasers_alight(together) == NAMES and lasers_alight(apart) == ("red",)
    assert may_be_together(together) and not may_be_together(apart)
    assert strongest_mw(together) == pytest.approx(2.7)
    assert strongest_mw(apart) == 0.9
    one = demo_job("shims-spots")
    assert one.bench.emission.lasers_at_once == "all" and not may_be_together(one)


def test_every_beam_of_every_laser_is_in_the_map() -> None:
    assert {b.laser for b in beam_map(job_of("all")).beams} == set(NAMES)
    assert {b.laser for b in beam_map(job_of("one")).beams} == {"red"}
    said = beam_map_lines(beam_map(job_of("all")))
    assert any("Red + green + violet may be alight together, 2.7 mW" in x for x in said)
    said = beam_map_lines(beam_map(job_of("one")))
    assert any("One laser at a time: the bench file declares it" in x for x in said)


def test_a_stop_must_bear_the_sum() -> None:
    weak = surface("walls", -180.0, 180.0, -90.0, 90.0, max_power_mw=2.0)
    assert refusals(beam_map(job_of("one", weak))) == ()
    (first, *_) = refusals(beam_map(job_of("all", weak)))
    assert "declared for 2 mW, the beam may have 2.7 mW" in first.what


def test_a_window_passes_the_sum_of_all_parts() -> None:
    """Density 1 leaves 0.09 mW of each; a night allows 0.39 mW of red (10 W/m2 over
    7 mm, thermal), and 1 W/m2 times C_B of the others: 0.0385 mW at 405 nm. (S)
    """
    window = {"what": "window", "optical_density": 1.0}
    pane = surface("pane", -180.0, 180.0, -90.0, 90.0, **window)
    assert refusals(beam_map(job_of("one", pane))) == ()
    assert "window 'pane'" in refusals(beam_map(job_of("all", pane)))[0].what
    assert math.pi / 4 * 7e-3**2 * 10.0 * 1e3 == pytest.approx(0.385, abs=5e-4)


def test_a_mirror_throws_all_of_it() -> None:
    mirror = surface(
        "pane", -180.0, 180.0, -30.0, 90.0,
        acts_as="mirror", throws_into=(-180.0, 180.0, -90.0, -30.0),
    )  # fmt: skip
    floor = surface("floor", -180.0, 180.0, -90.0, -30.0, max_power_mw=2.0)
    assert refusals(beam_map(job_of("one", mirror, floor))) == ()
    found = refusals(beam_map(job_of("all", mirror, floor)))
    words = "by mirror 'pane': 'floor' is declared for 2 mW"
    assert any(words in refusal.what for refusal in found)


def test_ceiling_and_class_are_judged_by_the_sum() -> None:
    assert refuse_outright(job_of("one", power_ceiling_mw=2.0)) == ()
    (ceiling,) = refuse_outright(job_of("all", power_ceiling_mw=2.0))
    assert "together give 2.7 mW" in ceiling.what
    strong = job_of("all", declared_class="none", power_ceiling_mw=1e3)
    for name in NAMES:
        strong = with_laser(strong, name, power_mw=2.0)
    (by_class,) = refuse_outright(strong)
    assert "class 3B" in by_class.what and "6 mW" in by_class.what
    for name in NAMES:
        strong = with_laser(strong, name, power_mw=200.0)
    enclosed = strong.bench.model_copy(update={"enclosure": enclosure((ALL_ROUND,))})
    (fourth,) = refuse_outright(strong.model_copy(update={"bench": enclosed}))
    assert "class 4" in fourth.what and "one at a time" in fourth.remedy


def test_the_class_of_all_together_is_never_below_that_of_one() -> None:
    bench = job_of("all").bench
    order = ("1", "2", "3R", "3B", "4")
    together = class_together(bench, NAMES).laser_class
    assert together == "3R"
    for name in NAMES:
        one = class_together(bench, [name]).laser_class
        assert order.index(one) <= order.index(together)
    assert circumstances_of(job_of("all")).laser_class == "3R"
    assert circumstances_of(job_of("one")).laser_class == "2"


def test_signers_see_the_sums_of_all_four_exposures_and_read_every_power() -> None:
    job = job_of("all")
    said = "\n".join(figures_shown(job))
    for words in ("for 0.25 s", "for 10 s", "for 100 s", "for 30000 s", "together"):
        assert words in said, words
    night = summed_hazard(job.bench, NAMES, 3e4)
    assert f"density {night.density:.2f}" in said
    assert night.density == pytest.approx(math.log10(night.worst))
    assert "x limit: this beam over 7 mm" in said
    item = read_checklist("demo:enclosed-bench").items["power"]
    assert [of for of, _ in readings_wanted(item, job)] == list(NAMES)
    assert [of for of, _ in readings_wanted(item, job_of("one"))] == ["red"]
