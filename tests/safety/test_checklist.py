"""The shipped checklist, which items apply, and which answers will do."""

from typing import Any

import pytest
from sign_off_builders import (
    OFFICER,
    TECHNICIAN,
    changed,
    demo_work,
    good_answers,
    with_strong_laser,
)

from pitchsweep.configs.answers_model import Answers, ItemAnswer, ReadingAnswer
from pitchsweep.configs.checklist_model import Applies, Checklist
from pitchsweep.configs.config_errors import SettingsRefused
from pitchsweep.configs.reader import find, read_checklist, settings_from, shipped_names
from pitchsweep.configs.yaml_lines import parse_yaml
from pitchsweep.safety.checklist import (
    Circumstances,
    circumstances_of,
    does_apply,
    flaws_of,
    items_that_apply,
    readings_wanted,
    signatures_needed,
)
from pitchsweep.safety.sign_off_making import Work

WORK = demo_work()
LAST_DAY = "2030-06-30"


def test_the_shipped_list_asks_for_all_that_it_should() -> None:
    says = {n: i.says.lower() for n, i in WORK.checklist.items.items()}
    for words in (
        ("key", "holder"),
        ("labels", "read", "bench file"),
        ("enclosure", "class"),
        ("warning sign", "lit"),
        ("warning", "before the first emission"),
        ("emergency stop", "pressed once"),
        ("door", "opened once", "shutter shut"),
        ("no override",),
        ("nobody is inside",),
        ("windows", "cable ports", "covered"),
        ("stop", "fitted"),
        ("watches", "tools", "shiny screws"),
        ("plane", "not at the eye height"),
        ("burns",),
        ("fire alarm", "chain"),
        ("cleaners", "guards", "visitors"),
        ("safety officer",),
        ("morning", "make the bench safe"),
        ("power", "full drive"),
        ("infrared filter", "doubled"),
        ("part", "clamped", "face", "groove direction", "marked"),
        ("eye injury",),
    ):
        assert any(all(w in text for w in words) for text in says.values()), words
    power = WORK.checklist.items["power"].reading
    assert power is not None and power.with_meter and power.each_laser
    shown = {i.shown_as for i in WORK.checklist.items.values()} - {None}
    assert shown == {"key-holder", "safety-officer", "morning", "eye-injury"}
    assert WORK.checklist.items["fire-alarm"].may_be_absent


def test_every_shipped_checklist_reads_and_is_named_after_its_file() -> None:
    names = shipped_names("checklists")
    assert "enclosed-bench" in names
    assert all(read_checklist(f"demo:{n}").checklist == n for n in names)


HERE = Circumstances("2", False, True, True, True)


@pytest.mark.parametrize(
    ("conditions", "applies"),
    [
        ({}, True),
        ({"laser_classes": ("2", "3R")}, True),
        ({"laser_classes": ("3B",)}, False),
        ({"doubled": True}, False),
        ({"doubled": False}, True),
        ({"unattended": True, "enclosed": True}, True),
        ({"unattended": True, "enclosed": False}, False),
        ({"simulated": True}, True),
        ({"simulated": False}, False),
        ({"laser_classes": ("2",), "simulated": False}, False),
    ],
)
def test_stated_conditions_must_all_hold(
    conditions: dict[str, Any], applies: bool
) -> None:
    assert does_apply(Applies(**conditions), HERE) is applies


def test_circumstances_come_from_the_job() -> None:
    assert circumstances_of(WORK.job) == HERE
    green = demo_work("track-740-green").job
    assert circumstances_of(green).doubled
    assert circumstances_of(with_strong_laser(WORK).job).laser_class == "3R"
    open_bench = changed(WORK, bench={"enclosure": None}).job
    assert not circumstances_of(open_bench).enclosed
    assert "doubled-filter" in items_that_apply(WORK.checklist, circumstances_of(green))
    assert "doubled-filter" not in items_that_apply(WORK.checklist, HERE)


def test_signatures_follow_class_and_attendance() -> None:
    strong = circumstances_of(with_strong_laser(WORK).job)
    assert signatures_needed(WORK.checklist, HERE) == (("safety-officer",),)
    assert len(signatures_needed(WORK.checklist, strong)) == 2
    attended = circumstances_of(with_strong_laser(WORK).job, unattended=False)
    assert len(signatures_needed(WORK.checklist, attended)) == 1


def flaws(answers: Answers, work: Work = WORK) -> dict[str, str]:
    items = items_that_apply(work.checklist, circumstances_of(work.job))
    return {f.item: f.why for f in flaws_of(answers, items, work.job, LAST_DAY)}


def with_item(name: str, **values: Any) -> Answers:
    good = good_answers(WORK)
    item = good.items[name].model_copy(update=values)
    return good.model_copy(update={"items": {**good.items, name: item}})


def power(**values: Any) -> tuple[ReadingAnswer, ...]:
    good: dict[str, Any] = {
        "of": "red",
        "value": 0.9,
        "meter": "m",
        "meter_due": LAST_DAY,
    }
    return (ReadingAnswer(**{**good, **values}),)


def test_good_answers_have_no_flaw_and_limits_belong_to_the_allowed() -> None:
    assert flaws(good_answers(WORK)) == {}
    assert flaws(with_item("power", readings=power())) == {}
    assert flaws(with_item("fire-alarm", absent=True)) == {}


@pytest.mark.parametrize(
    ("item", "values", "why"),
    [
        ("nobody-inside", {"yes": False}, "is answered no"),
        ("nobody-inside", {"absent": True}, "is not an answer to this"),
        ("officer", {"words": None}, "words are missing: Safety officer's name"),
        ("officer", {"words": "  "}, "words are missing"),
        ("officer", {"words": "w" * 161}, "room for 160 letters"),
        ("power", {"readings": ()}, "readings wanted: red"),
        ("power", {"readings": power(of="blue")}, "readings wanted: red"),
        ("power", {"readings": power() * 2}, "readings wanted: red"),
        ("power", {"readings": power(value=0.9001)}, "allowed 0 to 0.9 mW"),
        ("power", {"readings": power(meter=None)}, "instrument"),
        ("power", {"readings": power(meter_due=None)}, "instrument"),
        ("power", {"readings": power(meter_due="2030-06-29")}, "was due on 2030-06-29"),
        ("door", {"readings": power()}, "readings wanted: none"),
        ("door", {"by": "nobody"}, "answers but does not sign"),
    ],
)
def test_an_answer_that_will_not_do(item: str, values: Any, why: str) -> None:
    assert why in flaws(with_item(item, **values))[item]


def test_items_unknown_and_left_out() -> None:
    good = good_answers(WORK)
    items = {**good.items, "doors": ItemAnswer()}
    del items["door"]
    assert flaws(good.model_copy(update={"items": items})) == {
        "doors": "no such item applies here",
        "door": "is not answered",
    }


def test_only_the_officer_answers_for_the_officer() -> None:
    pair = (OFFICER, "safety-officer"), (TECHNICIAN, "technician")
    strong = with_strong_laser(WORK)
    good = good_answers(strong, *pair)
    assert flaws(good, strong) == {}
    by_bo = good.items["officer"].model_copy(update={"by": TECHNICIAN})
    odd = good.model_copy(update={"items": {**good.items, "officer": by_bo}})
    assert (
        "answers as technician: allowed safety-officer" in flaws(odd, strong)["officer"]
    )


def test_a_doubled_laser_asks_for_a_reading_at_its_full_drive() -> None:
    work = demo_work("track-740-green")
    lasers = work.job.bench.lasers
    green = lasers["green"].model_copy(update={"full_drive_mw": 2.0})
    job = changed(work, bench={"lasers": {**lasers, "green": green}}).job
    item = work.checklist.items["power"]
    assert readings_wanted(item, job) == (("green", 2.0),)


def refusal(change: tuple[str, str]) -> str:
    path = find("demo:enclosed-bench", "checklists")
    text = path.read_text(encoding="utf-8")
    assert change[0] in text
    with pytest.raises(SettingsRefused) as caught:
        settings_from(parse_yaml(text.replace(*change, 1), "mine.yaml"), Checklist)
    return str(caught.value)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (("longest_window_h: 24.0", "longest_window_h: 100.0"), ("above 0 up to 96",)),
        (("roles: [safety-officer]", "roles: [boss]"), ("boss", "technician")),
        (("shown_as: key-holder", "shown: key-holder"), ("nearest", "shown_as")),
        (("unit: mW", "unit: W"), ("items.power.reading.unit = W", "uW")),
        (("each_laser: true", "each_laser: false"), ("each_laser: true",)),
        (("not_above: laser-power, ", ""), ("either upper or not_above",)),
        (('says: "The key', 'say: "The key'), ("items.key.says",)),
        (('asks: "Who holds the key?"\n', "\n"), ("shown_as needs asks",)),
        (
            (
                "  - roles: [safety-officer]\n",
                "  - roles: [witness]\n    applies: {doubled: true}\n",
            ),
            ("must apply always",),
        ),
    ],
)
def test_a_wrong_checklist_is_refused_with_file_and_line(
    change: tuple[str, str], words: tuple[str, ...]
) -> None:
    said = refusal(change)
    assert said.startswith("mine.yaml line ")
    for word in words:
        assert word in said
