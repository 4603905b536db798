"""The report page: complete, self-contained, escaped, no digits beyond u."""

import re
from dataclasses import replace
from html.parser import HTMLParser

import pytest
from result_builder import (
    build_context,
    build_result,
    build_table_result,
)

from pitchsweep.analysis.records import Decision, RejectedSpot, Rejection
from pitchsweep.analysis.report_context import ReportContext
from pitchsweep.analysis.report_page import (
    REJECTED_SHOWN,
    STANDING_CAUTIONS,
    report_page,
)
from pitchsweep.analysis.report_rows import REJECTION_WORDS

SECTIONS = (
    "result",
    "figures",
    "part",
    "cautions",
    "tracks",
    "residuals",
    "pitches",
    "budget",
    "frames",
    "rejected",
    "nuisances",
    "gate",
    "run",
)
VOID = {"meta", "img", "br", "hr", "link", "input"}
FETCHING = {"script", "link", "iframe", "object", "embed", "base", "form"}


class Reader(HTMLParser):
    """Notes ids, addresses, tags, and whether the tags close in order."""

    def __init__(self) -> None:
        super().__init__()
        self.ids: list[str] = []
        self.addresses: list[str] = []
        self.tags: set[str] = set()
        self.open: list[str] = []
        self.text: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.add(tag)
        values = dict(attrs)
        if "id" in values:
            self.ids.append(values["id"] or "")
        self.addresses += [v or "" for k, v in attrs if k in ("src", "href", "srcset")]
        assert not any(name.startswith("on") for name in values)
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.text.append(data)


def read(page: str) -> Reader:
    reader = Reader()
    reader.feed(page)
    reader.close()
    assert reader.open == []
    return reader


@pytest.fixture(scope="module")
def page() -> str:
    return report_page(build_result(), build_context())


def test_all_sections_are_there(page: str) -> None:
    ids = read(page).ids
    assert [name for name in SECTIONS if name not in ids] == []
    assert len(ids) == len(set(ids))


def test_the_page_needs_nothing_but_itself(page: str) -> None:
    reader = read(page)
    assert len(reader.addresses) == 5
    assert all(address.startswith("data:image/") for address in reader.addresses)
    assert reader.tags & FETCHING == set()
    style = page[page.index("<style>") : page.index("</style>")]
    assert "url(" not in style and "@import" not in style
    assert "http:" not in page and "https:" not in page


def test_result_decision_and_cautions_come_before_the_pictures(page: str) -> None:
    first = page[: page.index("<figure>")]
    assert "830.417 nm ± 0.063 nm" in first
    assert "k = 2.03, coverage 95 %" in first
    assert "Conforms." in first and "&gt; 99.9 %" in first
    assert "guarded acceptance" in first
    for caution in STANDING_CAUTIONS:
        assert caution in first
    for fact in ("S-0147", "L-22", "front", "centre"):
        assert fact in first


def test_a_simulated_bench_says_so_first(page: str) -> None:
    words = "Simulated bench: invented data."
    assert page.index(words) < page.index("<h1>")
    context = replace(build_context(), simulated=False, frames=())
    real = report_page(build_table_result(), context)
    assert words not in real


def test_warnings_stand_on_the_first_page() -> None:
    result = replace(build_result(), warnings=("mounts differ & more",))
    page = report_page(result, ReportContext())
    assert page.index("mounts differ &amp; more") < page.index("<figure>")


def test_budget_gate_run_and_ledger_are_listed(page: str) -> None:
    text = " ".join(read(page).text)
    for words in (
        "stage: harmonics and repeatability",
        "56.0 %",
        "all checks passed",
        "20260301T210000Z_shims",
        "5f" * 32,
        "a3" * 32,
        "pitchsweep 0.1.0",
        "247.32",
        "36 terms of the screen map",
        "lies on the hole through which the beam comes",
    ):
        assert words in text


@pytest.mark.parametrize(
    "name",
    [
        "<script>alert(1)</script>",
        '"><img src=x onerror=alert(1)>',
        "{{ 7 * 7 }} {% raw %}",
        "' & < > \u202e 部品 $x^2$",
    ],
)
def test_nasty_part_names_stay_text(name: str) -> None:
    result = replace(build_table_result(), warnings=(name,))
    context = replace(build_context(part_name=name), frames=(), simulated=False)
    page = report_page(result, context)
    reader = read(page)
    assert "script" not in reader.tags
    assert all(address.startswith("data:image/") for address in reader.addresses)
    assert name in "".join(reader.text)


def test_no_pitch_is_shown_to_more_digits_than_its_uncertainty(page: str) -> None:
    text = " ".join(read(page).text)
    shown = re.findall(r"\b830\.4\d*", text)
    assert shown and all(len(number) <= len("830.417") for number in shown)


def test_a_table_without_anything_else_gives_a_report() -> None:
    page = report_page(build_table_result(), ReportContext())
    ids = read(page).ids
    assert "frames" not in ids and "warnings" in ids
    assert "833 nm ± 26 nm" in page
    assert "No decision: no tolerance was given." in page
    assert "No part file was given." in page


@pytest.mark.parametrize(
    ("outcome", "words"),
    [
        ("does-not-conform", "Does not conform."),
        ("undecided", "Undecided: the uncertainty is too large for this tolerance."),
    ],
)
def test_other_decisions_in_words(outcome: str, words: str) -> None:
    decision = Decision(outcome, "guarded acceptance", 0.5, 829.5, 830.4)
    page = report_page(
        replace(build_table_result(), decision=decision), ReportContext()
    )
    assert words in page and "50.0 %" in page


def test_long_lists_of_spots_not_used_are_cut_and_counted() -> None:
    spots = tuple(
        RejectedSpot(step, 1.0, 2.0, "mm", Rejection.OFF_TRACK) for step in range(250)
    )
    page = report_page(replace(build_table_result(), rejected=spots), ReportContext())
    assert f"The first {REJECTED_SHOWN} of 250" in page
    assert page.count("1.00, 2.00 mm") == REJECTED_SHOWN


def test_every_reason_has_its_words() -> None:
    assert set(REJECTION_WORDS) == {reason.value for reason in Rejection}


def test_equal_input_gives_equal_pages() -> None:
    context = replace(build_context(), frames=build_context().frames[:1])
    first, second = (report_page(build_table_result(), context) for _ in range(2))
    assert first == second
