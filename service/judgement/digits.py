"""The one rule for digits on pages, sheets and in sentences: a computed value has three of them.

JSON carries all of float64. Gains are not computed: they are told as they were entered.
"""

from __future__ import annotations

from decimal import Decimal

from service.analysis.results import Quantity

DIGITS = 3
WITHOUT_LIMIT = "without limit"
NOT_DEFINED = "not defined"

_PLAIN_FROM, _PLAIN_BELOW = Decimal("1e-4"), Decimal("1e6")
_PLAIN_ENTERED_BELOW = Decimal("1e16")
_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def three_digits(quantity: Quantity) -> str:
    """Tell a computed quantity with three significant digits: 3.12, 69.3, 1230, 4.10 × 10⁻⁷."""
    if quantity is None:
        return NOT_DEFINED
    if isinstance(quantity, str):
        return WITHOUT_LIMIT
    return _significant(quantity, DIGITS)


def beside_limit(value: Quantity, limit: float) -> str:
    """Tell a value with three digits, or more where with three it would seem to lie on the limit."""
    if value is None or isinstance(value, str):
        return three_digits(value)
    for digits in range(DIGITS, 17):
        if _side(float(f"{value:.{digits}g}"), limit) == _side(value, limit):
            return _significant(value, digits)
    return repr(value)


def apart(one: float, other: float) -> tuple[str, str]:
    """Tell two computed numbers with three digits, or with as many more as it takes to tell them apart."""
    told = [(_significant(one, digits), _significant(other, digits)) for digits in range(DIGITS, 18)]
    return next((both for both in told if both[0] != both[1]), told[0])


def as_entered(value: float, displayed: str | None = None) -> str:
    """Tell an entered number: as the controller displays it, else with no digit more or less."""
    if displayed is not None:
        return displayed
    shortest = repr(value).removesuffix(".0")
    decimal = Decimal(shortest)
    return format(decimal, "f") if _PLAIN_FROM <= abs(decimal) < _PLAIN_ENTERED_BELOW else shortest


def time(seconds: Quantity) -> str:
    """Tell a time: in seconds, from two minutes on in minutes too."""
    told = three_digits(seconds)
    if seconds is None or isinstance(seconds, str):
        return told
    return f"{told} s ({three_digits(seconds / 60)} min)" if abs(seconds) >= 120 else f"{told} s"


def _significant(value: float, digits: int) -> str:
    if value == 0:
        return "0"
    mantissa, exponent = f"{value:.{digits - 1}e}".split("e")
    rounded = Decimal(f"{mantissa}e{exponent}")
    if _PLAIN_FROM <= abs(rounded) < _PLAIN_BELOW:
        return format(rounded, "f")
    return f"{mantissa} × 10{str(int(exponent)).translate(_RAISED)}"


def _side(value: float, limit: float) -> int:
    return (value > limit) - (value < limit)
