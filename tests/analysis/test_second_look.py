"""What draws that do not bear U out do to a result."""

from dataclasses import replace

import pytest
from result_builder import build_result

from pitchsweep.analysis.records import MonteCarlo, PitchResult
from pitchsweep.analysis.result_file import drawn_words
from pitchsweep.analysis.second_look import with_draws
from pitchsweep.configs.part_model import Tolerance


def drawn_as(
    result: PitchResult, low: float, high: float, *, validated: bool = False
) -> MonteCarlo:
    """Draws whose interval ends ``low`` and ``high`` u from the pitch."""
    return MonteCarlo(
        pitch_nm=result.pitch_nm,
        u_nm=result.u_pitch_nm,
        low_nm=result.pitch_nm + low * result.u_pitch_nm,
        high_nm=result.pitch_nm + high * result.u_pitch_nm,
        draws=36_000,
        lost=0,
        tolerance_nm=0.05 * result.u_pitch_nm,
        settled=True,
        validated=validated,
    )


def test_draws_that_bear_u_out_change_nothing_else() -> None:
    result = build_result()
    drawn = drawn_as(result, -1.97, 1.98, validated=True)
    found = with_draws(result, drawn, None)
    assert replace(found, monte_carlo=None) == replace(result, monte_carlo=None)
    assert "agrees within" in drawn_words(drawn)


def test_lopsided_draws_take_u_to_their_further_end() -> None:
    result = build_result()
    drawn = drawn_as(result, -1.9, result.k + 0.1)
    found = with_draws(result, drawn, None)
    assert found.pitch_nm == result.pitch_nm
    assert found.u_pitch_nm == result.u_pitch_nm
    assert found.k == pytest.approx(result.k + 0.1)
    assert found.U_pitch_nm == pytest.approx(found.k * result.u_pitch_nm)
    assert "further end" in found.warnings[-1]
    assert "does not agree" in drawn_words(drawn)


def test_narrower_draws_leave_u_as_it_is() -> None:
    result = build_result()
    found = with_draws(result, drawn_as(result, -1.8, 1.8), None)
    assert (found.U_pitch_nm, found.k) == (result.U_pitch_nm, result.k)
    assert "stays" in found.warnings[-1]


def test_the_decision_is_made_with_the_u_that_is_stated() -> None:
    result = build_result()
    half = (result.k + 0.05) * result.u_pitch_nm
    tolerance = Tolerance(
        lower_nm=result.pitch_nm - half, upper_nm=result.pitch_nm + half
    )
    found = with_draws(result, drawn_as(result, -1.9, result.k + 0.1), tolerance)
    assert found.decision.outcome == "undecided"
    bearing = drawn_as(result, -1.96, 1.96, validated=True)
    assert with_draws(result, bearing, tolerance).decision == result.decision
