"""Numbers as text that claim no more than their uncertainty allows.

Two significant digits of the uncertainty decide the last place of both numbers, as
GUM (JCGM 100:2008) 7.2.6 recommends.
"""

import math
from decimal import ROUND_HALF_EVEN, Context, Decimal
from typing import NamedTuple

PLAIN_PLACES = 9
"""Beyond this many places before or after the point a power of ten is written."""
SMALLEST_SHARE = 1e-20
"""A share of the variance below this is what 16-digit arithmetic leaves of none."""

_EXACT = Context(prec=400, rounding=ROUND_HALF_EVEN)


class Rounded(NamedTuple):
    """A value and its uncertainty, both to the same last place."""

    value: str
    u: str


def rounded(value: float, u: float) -> Rounded:
    """``value`` and ``u`` as text, to the place of the second digit of ``u``.

    ``value``: any number, in the unit of ``u``. ``u``: standard or expanded
    uncertainty. Where ``u`` is not finite or not above zero there is nothing to round
    to: the value comes with two significant digits and ``u`` reads "unknown". A value
    that is not finite reads "unknown".
    """
    if not math.isfinite(value):
        return Rounded("unknown", significant(u) if _usable(u) else "unknown")
    if not _usable(u):
        return Rounded(significant(value), "unknown")
    short_u = _to_digits(Decimal(repr(float(u))), 2)
    place = _exponent(short_u)
    short_value = _to_place(Decimal(repr(float(value))), place)
    power = _common_power(short_value, short_u)
    return Rounded(_plain(short_value, power), _plain(short_u, power))


def significant(value: float, digits: int = 2) -> str:
    """``value`` alone to ``digits`` significant digits; "unknown" if not finite."""
    if not math.isfinite(value):
        return "unknown"
    short = _to_digits(Decimal(repr(float(value))), digits)
    return _plain(short, _common_power(short, short))


def percent(fraction: float) -> str:
    """A share or probability in per cent, never rounded up to a certainty.

    0.9512 -> "95.1 %", 0.99999 -> "> 99.9 %", 2e-5 -> "< 0.1 %", 1.0 -> "> 99.9 %".
    """
    if not math.isfinite(fraction):
        return "unknown"
    if fraction > 0.999:
        return "> 99.9 %"
    if fraction < 0.001:
        return "< 0.1 %"
    return f"{100.0 * fraction:.1f} %"


def plain_percent(fraction: float) -> str:
    """A stated fraction such as a coverage: 0.95 -> "95 %", 0.9545 -> "95.45 %"."""
    return f"{100.0 * fraction:.6g} %"


def relative(u: float, value: float) -> str:
    """``u``/``value`` to two digits, as 4.3e-06; "unknown" where it has no meaning."""
    if not _usable(u) or not math.isfinite(value) or value == 0.0:
        return "unknown"
    return f"{abs(u / value):.1e}"


def share_text(u: float, share: float) -> str:
    """``u`` to two digits; 0 where its ``share`` of the variance is rounding alone."""
    return "0" if share < SMALLEST_SHARE else significant(u)


def _usable(u: float) -> bool:
    return math.isfinite(u) and u > 0.0


def _exponent(number: Decimal) -> int:
    return int(number.as_tuple().exponent)


def _to_place(number: Decimal, place: int) -> Decimal:
    result = number.quantize(Decimal((0, (1,), place)), context=_EXACT)
    return result.copy_abs() if result.is_zero() else result


def _to_digits(number: Decimal, digits: int) -> Decimal:
    """Rounded to ``digits`` significant digits, also when 9.96 becomes 10."""
    if number.is_zero():
        return Decimal(0)
    short = _to_place(number, number.adjusted() - digits + 1)
    if short.adjusted() > number.adjusted():
        short = _to_place(number, short.adjusted() - digits + 1)
    return short


def _common_power(value: Decimal, u: Decimal) -> int:
    """0 where plain digits will do, else the power of ten to take out of both."""
    largest = max(value.adjusted(), u.adjusted())
    if _exponent(u) >= -PLAIN_PLACES and largest <= PLAIN_PLACES:
        return 0
    return largest


def _plain(number: Decimal, power: int) -> str:
    text = f"{number.scaleb(-power, context=_EXACT):f}"
    text = text.replace("-", "\N{MINUS SIGN}")
    return text if power == 0 else f"{text}e{power}"
