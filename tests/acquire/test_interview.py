"""The interview, its person played by a script of questions and answers."""

from collections.abc import Callable
from dataclasses import replace

import pytest
from sign_off_builders import (
    OFFICER,
    TECHNICIAN,
    Office,
    demo_work,
    office,
    stated,
    with_powers,
    with_strong_laser,
)

from pitchsweep.acquire.interview import Interview, ask_all
from pitchsweep.configs.answers_model import Answers
from pitchsweep.safety.people_ledger import People
from pitchsweep.safety.people_store import read_people
from pitchsweep.safety.safety_errors import GateRefused
from pitchsweep.safety.sign_off_making import Work

WORK = demo_work()
GOOD = {
    "is it so": "y",
    "mW": "0.85",
    "instrument": "power meter 12",
    "due": "2999-01-31",
    "key?": "Bo",
    "phone?": "Dr Ada, 0555 0100",
    "eye injury": "eye clinic, 0555 0199",
    "make it safe?": "Bo at 07:30",
    "who says so": "",
    "who signs": "",
    "hours": "",
    "valid from": "",
    "sign now": "y",
}


@pytest.fixture(scope="module")
def at(tmp_path_factory: pytest.TempPathFactory) -> Office:
    return office(tmp_path_factory.mktemp("interview"))


class Person:
    """Answers by the words of a question; ``first`` are given once, before the rest."""

    def __init__(self, **first: str) -> None:
        self.first = {key.replace("_", " "): value for key, value in first.items()}
        self.asked: list[str] = []

    def __call__(self, question: str, default: str) -> str:
        self.asked.append(question)
        for words in list(self.first):
            if words in question:
                return self.first.pop(words) or default
        for words, answer in GOOD.items():
            if words in question:
                return answer or default
        raise AssertionError(f"nobody expected: {question}")


def interview(at: Office, person: Person, work: Work = WORK) -> Answers:
    with_powers(at, work.job)
    return ask_all(Interview(work, read_people(at.home).people, ()), person)


def typed_in() -> Work:
    """The work with a checklist whose power is read off now, up to 0.9 mW."""
    item = WORK.checklist.items["power"]
    assert item.reading is not None
    asked = {"not_above": None, "each_laser": False, "upper": 0.9}
    reading = item.reading.model_copy(update=asked)
    items = {
        **WORK.checklist.items,
        "power": item.model_copy(update={"reading": reading}),
    }
    return replace(WORK, checklist=WORK.checklist.model_copy(update={"items": items}))


def test_good_answers_lead_to_a_statement(
    at: Office, capsys: pytest.CaptureFixture[str]
) -> None:
    person = Person()
    answers = interview(at, person)
    statement = stated(at, WORK, answers)
    assert [s.name for s in statement.signers] == [OFFICER]
    assert statement.contacts["eye-injury"] == "eye clinic, 0555 0199"
    assert statement.contacts["morning"] == "Bo at 07:30"
    reading = answers.items["power"].readings[0]
    assert (reading.of, reading.value, reading.meter_due) == ("red", 0.45, "2999-01-01")
    assert not any("mW" in question for question in person.asked)
    shown = capsys.readouterr()
    assert shown.out == ""
    for words in (
        "REHEARSAL",
        "no safety function",
        "estimated class 2",
        "beam map of job",
        "21 items",
        "[21/21] eye-injury",
        "red: 0.45 mW by m 1 (due 2999-01-01) on",
        "combustibles",
    ):
        assert words in shown.err, words
    assert max(map(len, shown.err.splitlines())) <= 130


@pytest.mark.parametrize(
    ("first", "words"),
    [
        ({"is_it_so": "n"}, "item 'key' is answered no"),
        ({"is_it_so": "q"}, "left by q"),
        ({"who_signs": "q"}, "left by q"),
        ({"sign_now": "n"}, "left at the end"),
    ],
)
def test_it_ends_without_signing(at: Office, first: dict[str, str], words: str) -> None:
    with pytest.raises(GateRefused, match=words):
        interview(at, Person(**first))


@pytest.mark.parametrize(
    ("first", "said"),
    [
        ({"mW": "ninety"}, "that is no number"),
        ({"mW": "0.95"}, "will not do: 0.95 mW: allowed 0 to 0.9 mW"),
        ({"mW": "-1"}, "that will not do"),
        ({"due": "31.1.2999"}, "that will not do"),
        ({"due": "2001-01-31"}, "was due on 2001-01-31"),
        ({"key?": " "}, "words are missing"),
        ({"is_it_so": "what"}, ""),
        ({"is_it_so": "a"}, ""),
        ({"hours": "25"}, "the checklist allows up to 24 h"),
        ({"valid_from": "2001-01-01T00:00Z"}, "allowed from now to 48 h ahead"),
        ({"valid_from": "2999-13-01T00:00Z"}, "give UTC as"),
        ({"due": "2999-13-31"}, "no day of the calendar"),
        ({"hours": "long"}, "no such time or number"),
        ({"valid_from": "tonight"}, "no such time or number"),
        ({"who_signs": "bo"}, "one of: ada"),
    ],
)
def test_what_will_not_do_is_said_and_asked_again(
    at: Office,
    first: dict[str, str],
    said: str,
    capsys: pytest.CaptureFixture[str],
) -> None:
    work = typed_in()
    answers = interview(at, Person(**first), work)
    assert said in capsys.readouterr().err
    assert stated(at, work, answers)


def test_a_comma_is_a_decimal_point_too(at: Office) -> None:
    answers = interview(at, Person(mW="0,5"), typed_in())
    assert answers.items["power"].readings[0].value == 0.5


def test_absent_is_an_answer_where_it_may_be(at: Office) -> None:
    answers = interview(at, Person(none_here="a"))
    assert answers.items["fire-alarm"].absent


def test_class_3r_asks_for_two_people_and_who_says_what(
    at: Office, capsys: pytest.CaptureFixture[str]
) -> None:
    strong = with_strong_laser(WORK)
    person = Person(who_says_so=TECHNICIAN)
    answers = interview(at, person, strong)
    assert [s.name for s in answers.signers] == [OFFICER, TECHNICIAN]
    assert answers.items["key"].by == TECHNICIAN
    assert answers.items["officer"].by is None
    assert "2 signature(s) needed" in capsys.readouterr().err
    assert len(stated(at, strong, answers).signers) == 2


def test_nobody_else_to_sign_ends_it(at: Office) -> None:
    people = read_people(at.home).people
    alone = People({OFFICER: people.signers[OFFICER]})
    ask: Callable[[str, str], str] = Person()
    with pytest.raises(GateRefused, match="nobody else is enrolled as technician"):
        ask_all(Interview(with_strong_laser(WORK), alone, ()), ask)
