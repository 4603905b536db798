"""result.json: the keys that are promised, in JSON that any reader takes."""

import json
import math
from dataclasses import replace

import pytest
from result_builder import build_result, build_table_result

from pitchsweep.analysis.analysis_errors import NoResult
from pitchsweep.analysis.decision_words import decision_words
from pitchsweep.analysis.records import (
    BudgetLine,
    Decision,
    RejectedSpot,
    Rejection,
)
from pitchsweep.analysis.result_file import (
    order_text,
    result_dict,
    result_json,
    summary_lines,
    unused_words,
)

PROMISED = {
    "part",
    "serial",
    "simulated",
    "asked",
    "pitch_nm",
    "u_pitch_nm",
    "U_pitch_nm",
    "k",
    "coverage",
    "dof",
    "pitch_at_C",
    "reduced_chi2",
    "steps_used",
    "spots_used",
    "orders_used",
    "rejected",
    "budget",
    "nuisance",
    "decision",
    "warnings",
    "software",
    "inputs_sha256",
    "origin",
}


def refuse_constant(name: str) -> float:
    raise AssertionError(f"{name} is no JSON")


def test_every_promised_key_is_there() -> None:
    assert set(result_dict(build_result())) >= PROMISED


def test_the_text_reads_back_to_the_same_values() -> None:
    result = build_result()
    back = json.loads(result_json(result), parse_constant=refuse_constant)
    assert back == result_dict(result)
    assert back["pitch_nm"] == result.pitch_nm
    assert back["budget"][0] == {
        "source": "stage: harmonics and repeatability",
        "kind": "B",
        "u_nm": 0.0231,
    }
    assert back["rejected"][0] == {"reason": "no-order-there", "count": 12}
    assert back["nuisance"][0]["unit"] == "mm"
    assert back["decision"] == "conforms"
    assert back["decision_rule"].startswith("guarded acceptance")


def test_what_is_not_finite_becomes_null() -> None:
    result = replace(
        build_result(),
        dof=math.inf,
        reduced_chi2=math.nan,
        budget=(BudgetLine("unknown", "B", math.nan),),
    )
    back = json.loads(result_json(result), parse_constant=refuse_constant)
    assert back["dof"] is None
    assert back["reduced_chi2"] is None
    assert back["budget"][0]["u_nm"] is None


@pytest.mark.parametrize("name", ["pitch_nm", "u_pitch_nm", "U_pitch_nm"])
def test_a_pitch_that_is_no_number_is_no_result(name: str) -> None:
    with pytest.raises(NoResult, match=name):
        result_json(replace(build_result(), **{name: math.nan}))


def test_the_summary_shows_pitch_k_decision_and_warnings() -> None:
    lines = summary_lines(replace(build_result(), warnings=("air was not read",)))
    text = "\n".join(lines)
    assert "830.417 nm +/- 0.063 nm at 20 C" in text
    assert "k = 2.03, coverage 95 %" in text
    assert "conforms (probability > 99.9 %)" in text
    assert lines[-1] == "Warning    air was not read"
    assert text.isascii()


def test_the_summary_of_a_coarse_result_claims_no_decimals() -> None:
    text = "\n".join(summary_lines(build_table_result()))
    assert "833 nm +/- 26 nm" in text
    assert "no decision: no tolerance was given" in text


@pytest.mark.parametrize(
    ("upper_nm", "words"),
    [
        (2.0, "undecided: too near a limit for this uncertainty"),
        (1.1, "undecided: the uncertainty is too large for this tolerance"),
    ],
)
def test_undecided_says_whether_any_pitch_could_have_conformed(
    upper_nm: float, words: str
) -> None:
    undecided = Decision("undecided", "guarded", 0.912, 1.0, upper_nm)
    result = replace(build_result(), decision=undecided)  # U is 0.0634 nm
    assert decision_words(result) == f"{words} (probability 91.2 %)"


def test_spots_not_used_are_counted_with_their_reasons() -> None:
    spot = RejectedSpot(3, 1.0, 2.0, "mm", Rejection.OFF_TRACK)
    result = replace(build_result(), rejected=(spot,))
    assert unused_words(result) == "1 spot: off its track (1)"
    assert unused_words(replace(result, rejected=())) == "0 spots"


def test_orders_carry_their_sign() -> None:
    assert [order_text(m) for m in (-1, 0, 2)] == ["\N{MINUS SIGN}1", "0", "+2"]
