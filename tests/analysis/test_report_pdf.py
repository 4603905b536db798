"""The PDF report: whole, in order, repeatable; read back with a PDF reader."""

import io
import re
from dataclasses import replace
from itertools import pairwise

import pytest
from pypdf import PdfReader
from pypdf.generic import DictionaryObject
from result_builder import build_context, build_result, build_table_result

from pitchsweep.analysis.pdf_style import CUT, LONGEST_TEXT, fitted, printable
from pitchsweep.analysis.records import Decision, MonteCarlo, Nuisance, PitchSeen
from pitchsweep.analysis.report_context import GateRow, PartFacts, ReportContext
from pitchsweep.analysis.report_pdf import GATE_SHOWN, report_pdf
from pitchsweep.analysis.report_rows import budget_row, nuisance_rows, seen_rows
from pitchsweep.analysis.report_words import SIMULATED_SAID, STANDING_CAUTIONS

A4_POINTS = (595.28, 841.89)
"""ISO 216: 210 mm x 297 mm, at 72 points an inch."""

IN_ORDER = (
    "Simulated bench: invented data.",
    "Groove pitch of shim-830",
    "830.417 nm ± 0.063 nm",
    "k = 2.03, coverage 95 %",
    "Conforms.",
    "> 99.9 %",
    "Rule: guarded acceptance",
    "mounts differ & more",
    "administrative control",
    "Standard uncertainty u",
    "Assumed absent, and in no line of the budget: wobble; gradients.",
    "Tracks of all orders",
    "Measured minus fitted",
    "Pitch seen by parts of the data",
    "second half of the sweep",
    "Uncertainty budget",
    "Combined standard uncertainty u",
    "Frames",
    "Fitted beside the pitch",
    "screen distance",
    "And 36 terms of the screen map",
    "Spots not used",
    "lies on the hole through which the beam comes",
    "Gate history",
    "all checks passed",
    "Bench and run",
    "20260301T210000Z_shims",
    "5f" * 32,
    "a3" * 32,
)

NASTY = {
    "<b>bold</b> &amp; <script>": "<b>bold</b> &amp; <script>",
    "(\\) {{ 7 * 7 }} %PDF endobj": "(\\) {{ 7 * 7 }} %PDF endobj",
    "a\u202eb\x00c 部 \ud800": "a[U+202E]b[U+0000]c [U+90E8] [U+D800]",
    "W" * 400: "W" * 20,
}
"""A text and how it is to read: what cannot be shown is shown as its number."""


def texts(pdf: bytes) -> list[str]:
    """The text of every page, line ends as blanks."""
    pages = PdfReader(io.BytesIO(pdf)).pages
    return [" ".join(page.extract_text().split()) for page in pages]


@pytest.fixture(scope="module")
def whole() -> bytes:
    result = build_result(lasers=("red", "violet"), mounts=(0.0, 90.0, 180.0, 270.0))
    result = replace(
        result,
        warnings=("mounts differ & more",),
        assumed_absent=("wobble", "gradients"),
    )
    return report_pdf(result, build_context())


@pytest.fixture(scope="module")
def bare() -> bytes:
    return report_pdf(build_table_result(), ReportContext())


def test_three_to_five_upright_a4_pages(whole: bytes) -> None:
    pages = PdfReader(io.BytesIO(whole)).pages
    assert 3 <= len(pages) <= 5
    for page in pages:
        size = (float(page.mediabox.width), float(page.mediabox.height))
        assert size == pytest.approx(A4_POINTS, abs=0.5)


def test_everything_stands_there_in_the_order_it_is_asked_for(whole: bytes) -> None:
    text = " ".join(texts(whole))
    places = []
    start = 0
    for words in IN_ORDER:
        assert words in text[start:], words
        start = text.index(words, start)
        places.append(start)
    assert all(a < b for a, b in pairwise(places))


def test_the_first_page_answers_the_customer(whole: bytes) -> None:
    first = texts(whole)[0]
    wanted = (SIMULATED_SAID, "830.417 nm ± 0.063 nm", "Conforms.", *STANDING_CAUTIONS)
    assert [words for words in wanted if words not in first] == []


def test_every_page_names_the_part_and_its_number(whole: bytes) -> None:
    pages = texts(whole)
    for number, text in enumerate(pages, start=1):
        assert f"page {number} of {len(pages)}" in text
        assert "Groove pitch of shim-830, serial S-0147" in text


def test_negative_numbers_carry_a_minus_sign_also_in_pictures(whole: bytes) -> None:
    text = " ".join(texts(whole))
    assert "−0.021 ± 0.024" in text and "−12.0" in text
    assert "stage −40.00°" in text
    assert "fitted incidence, degrees" in text


def test_zero_carries_no_sign_and_rounding_errors_are_no_contribution() -> None:
    still = Nuisance("stage scale", -1e-9, 1.0, "ppm", 0.0, 1.0)
    subset = PitchSeen("order -2", 830.4, 0.1, 0.1, 0.2, 9)
    result = replace(build_table_result(), nuisance=(still,), pitches_seen=(subset,))
    assert nuisance_rows(result)[0].moved == "0.0"
    assert seen_rows(result)[0].subset == "order −2"
    assert budget_row("air index", "B", 3e-17, 1e-36, "").u_nm == "0"
    assert budget_row("air index", "B", 3e-3, 1e-8, "").u_nm == "0.0030"


def test_no_pitch_is_shown_to_more_digits_than_its_uncertainty(whole: bytes) -> None:
    shown = re.findall(r"\b830\.4\d*", " ".join(texts(whole)))
    assert shown and all(len(number) <= len("830.417") for number in shown)


def test_all_fonts_are_embedded(whole: bytes) -> None:
    fonts = [item for item in objects(whole) if item.get("/Type") == "/Font"]
    single = [font for font in fonts if font["/Subtype"] != "/Type0"]
    assert single
    for font in single:
        assert "/FontFile2" in font["/FontDescriptor"]  # ISO 32000-1, 9.9


def test_nothing_in_the_file_runs_or_dates_it(whole: bytes) -> None:
    keys = {key for item in objects(whole) for key in item}
    assert keys & {"/JS", "/JavaScript", "/Launch", "/URI", "/EmbeddedFile"} == set()
    assert keys & {"/CreationDate", "/ModDate"} == set()


def objects(pdf: bytes) -> list[DictionaryObject]:
    reader = PdfReader(io.BytesIO(pdf))
    numbers = sorted(reader.xref.get(0, {}))
    found = [reader.get_object(number) for number in numbers]
    return [item for item in found if isinstance(item, DictionaryObject)]


def test_equal_input_gives_equal_bytes(bare: bytes) -> None:
    assert report_pdf(build_table_result(), ReportContext()) == bare


def test_a_table_without_anything_else_gives_a_report(bare: bytes) -> None:
    text = " ".join(texts(bare))
    assert "833 nm ± 26 nm" in text and SIMULATED_SAID not in text
    for words in (
        "No decision: no tolerance was given.",
        "No part file was given.",
        "too few for a part of them",
        "Every spot was used.",
        "No gate history belongs to these data.",
        "percent-level result",
    ):
        assert words in text


def test_nasty_texts_stay_text_and_long_ones_are_cut() -> None:
    names = tuple(NASTY)
    decision = Decision("undecided", names[0], 0.5, 829.5, 830.4)
    result = replace(build_table_result(), warnings=names, decision=decision)
    part = PartFacts(names[0], *names[:4], 830.0, note="W" * 4000)
    gate = tuple(
        GateRow(f"at {i:03}", "x" * 500, "部" * 500, "x" * 3000) for i in range(90)
    )
    context = replace(build_context(), frames=(), part=part, gate_history=gate)
    text = " ".join(texts(report_pdf(result, context)))
    assert [shown for shown in NASTY.values() if shown not in text] == []
    assert "Undecided: the uncertainty is too large for this tolerance." in text
    assert f"The last {GATE_SHOWN} of 90 changes." in text
    assert "at 049" not in text and "at 050" in text and "at 089" in text


def test_long_texts_are_cut_with_a_sign_that_they_are() -> None:
    assert printable("ab\n\tc") == "ab c"
    assert len(printable("x" * 9999)) == len(printable("部" * 999)) == LONGEST_TEXT
    assert printable("x" * 9999).endswith(CUT)
    assert fitted("short", size=7.0, width=300.0) == "short"
    assert fitted("long " * 99, size=7.0, width=60.0).endswith(CUT)


def test_draws_correlations_and_advice_are_on_paper_too() -> None:
    drawn = MonteCarlo(
        830.42, 0.031, 830.36, 830.48, 36_000, 0, 0.0005, settled=True, validated=True
    )
    advice = ("a mount half a turn away would bring u from 0.031 to 0.012 nm",)
    beside = replace(build_result().nuisance[0], correlation=-0.71)
    result = replace(
        build_result(), monte_carlo=drawn, advice=advice, nuisance=(beside,)
    )
    text = " ".join(texts(report_pdf(result, build_context())))
    assert "from 36000 draws of all inputs; U of the fit agrees within" in text
    assert advice[0] in text and "What would help" in text
    assert f"{beside.name} (\N{MINUS SIGN}0.71)" in text
