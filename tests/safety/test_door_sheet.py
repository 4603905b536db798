"""The door sheet says what it must, of this sign-off and no other."""

import html
from dataclasses import replace
from datetime import UTC

import pytest
from sign_off_builders import demo_work, office, signed

from pitchsweep.safety.door_sheet import door_sheet
from pitchsweep.safety.sign_off import SignOff


@pytest.fixture(scope="module")
def record(tmp_path_factory: pytest.TempPathFactory) -> SignOff:
    at = office(tmp_path_factory.mktemp("door"))
    return signed(at, demo_work("track-740-green")).record


def test_it_says_all_that_a_door_needs(record: SignOff) -> None:
    page = html.unescape(door_sheet(record, UTC))
    statement = record.statement
    for words in (
        statement.valid_from[:16].replace("T", " "),
        statement.valid_until[:16].replace("T", " "),
        "estimated",
        "532.2 nm",
        "0.9 mW",
        "doubled: infrared",
        "optical density alone does not choose it",
        "The lamp is lit and the door opens",
        "pitchsweep dark",
        "no password",
        "Suspected eye injury",
        "Laser safety officer",
        "In the morning",
        "somebody, 0555 0100",
        "ada as safety officer",
        statement.id,
        record.entered.head,
        "no safety function",
        "hard-wired interlock, the local rules and the laser safety officer decide",
        "authorises nothing in law",
        "Rehearsal on a simulated bench",
    ):
        assert words in page, words
    assert "http" not in page and "<script" not in page


def test_a_real_bench_shows_no_rehearsal(record: SignOff) -> None:
    real = replace(record, statement=replace(record.statement, simulated=False))
    assert "Rehearsal" not in door_sheet(real)


def test_words_of_people_stay_words(record: SignOff) -> None:
    odd = {"eye-injury": "<script>alert(1)</script> & more"}
    page = door_sheet(
        replace(record, statement=replace(record.statement, contacts=odd))
    )
    assert "<script>" not in page and "&lt;script&gt;" in page
    assert "not stated" in page


def test_more_to_say_is_set_smaller(record: SignOff) -> None:
    def size(lasers: int, letters: int) -> str:
        statement = replace(
            record.statement,
            lasers=record.statement.lasers * lasers,
            contacts={str(n): "w" * letters for n in range(4)},
        )
        page = door_sheet(replace(record, statement=statement))
        return page.split("html { font-size: ")[1].split("pt")[0]

    assert float(size(1, 40)) > float(size(3, 150)) > float(size(8, 160))


def test_it_says_the_powers_read_and_what_lasers_may_do_together(
    record: SignOff,
) -> None:
    page = door_sheet(record)
    assert "green 0.45 mW on" in page and "together" not in page
    lasers = tuple({**laser, "together": True} for laser in record.statement.lasers)
    both = replace(record.statement, lasers=lasers * 2)
    assert "<b>together: 1.8 mW</b>" in door_sheet(replace(record, statement=both))
