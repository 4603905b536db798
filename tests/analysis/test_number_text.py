"""Numbers as text: the place of the second digit of u decides."""

import math
from decimal import Decimal, localcontext

import pytest
from hypothesis import given
from hypothesis import strategies as st

from pitchsweep.analysis.number_text import (
    percent,
    plain_percent,
    relative,
    rounded,
    significant,
)

VALUES = st.floats(-1e12, 1e12, allow_nan=False)
UNCERTAINTIES = st.floats(1e-15, 1e12)


def number(text: str) -> Decimal:
    return Decimal(text.replace("\N{MINUS SIGN}", "-"))


# JCGM 100:2008 (GUM), 7.2.2 and 7.2.6: m_s = 100.02147 g with u_c = 0.35 mg;
# R = 10.05762 ohm with u_c = 27 mohm is to be stated as 10.058 ohm.
@pytest.mark.parametrize(
    ("value", "u", "expected"),
    [
        (100.02147, 0.00035, ("100.02147", "0.00035")),
        (10.05762, 0.027, ("10.058", "0.027")),
        (830.123456, 0.0996, ("830.12", "0.10")),
        (830.123456, 0.0994, ("830.123", "0.099")),
        (123456.0, 12345.0, ("123000", "12000")),
        (0.4, 97.0, ("0", "97")),
        (-0.04, 1.0, ("0.0", "1.0")),
        (-1.26, 0.25, ("\N{MINUS SIGN}1.26", "0.25")),
        (1.23456e-15, 1.2e-18, ("1.2346e-15", "0.0012e-15")),
    ],
)
def test_value_and_u_share_the_last_place(
    value: float, u: float, expected: tuple[str, str]
) -> None:
    assert tuple(rounded(value, u)) == expected


@given(value=VALUES, u=UNCERTAINTIES)
def test_rounding_moves_a_value_by_at_most_half_of_the_last_place(
    value: float, u: float
) -> None:
    texts = rounded(value, u)
    kept_u = number(texts.u)
    last_place = Decimal(10) ** (kept_u.adjusted() - 1)
    assert abs(number(texts.value) - Decimal(repr(value))) <= last_place / 2
    assert abs(kept_u - Decimal(repr(u))) <= last_place / 2
    assert kept_u == 0 or kept_u / last_place < 100


@given(value=VALUES, u=UNCERTAINTIES)
def test_no_digit_beyond_the_second_of_u(value: float, u: float) -> None:
    texts = rounded(value, u)
    assert texts.value.partition("e")[2] == texts.u.partition("e")[2]
    last_place = Decimal(10) ** (number(texts.u).adjusted() - 1)
    with localcontext(prec=100):
        for text in texts:
            assert number(text) % last_place == 0


@given(value=VALUES, u=UNCERTAINTIES)
def test_a_sign_change_changes_the_sign_only(value: float, u: float) -> None:
    there, back = rounded(value, u), rounded(-value, u)
    assert there.u == back.u
    assert number(there.value) == -number(back.value)


@pytest.mark.parametrize("u", [0.0, -1.0, math.nan, math.inf])
def test_without_an_uncertainty_two_digits_remain(u: float) -> None:
    assert tuple(rounded(830.1234, u)) == ("830", "unknown")


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_a_value_that_is_no_number_is_unknown(value: float) -> None:
    assert rounded(value, 0.01).value == "unknown"
    assert significant(value) == "unknown"
    assert percent(value) == "unknown"


def test_significant_digits() -> None:
    assert [significant(x) for x in (0.0, 0.0004567, 9.96, 1234.0)] == [
        "0",
        "0.00046",
        "10",
        "1200",
    ]


def test_probabilities_are_never_rounded_to_certainty() -> None:
    assert percent(1.0) == "> 99.9 %"
    assert percent(0.9995) == "> 99.9 %"
    assert percent(0.0) == "< 0.1 %"
    assert percent(0.9512) == "95.1 %"


def test_stated_fractions_and_ratios() -> None:
    assert plain_percent(0.95) == "95 %"
    assert plain_percent(0.9545) == "95.45 %"
    assert relative(0.0035, 830.0) == "4.2e-06"
    assert relative(0.0035, 0.0) == "unknown"
