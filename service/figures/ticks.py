"""Where ticks stand and what they say."""

from __future__ import annotations

import math
from dataclasses import dataclass

STEPS = (1.0, 2.0, 5.0, 10.0)
ROUND_ENDS = (1.0, 1.2, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0)
_SUPERSCRIPT = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


@dataclass(frozen=True, slots=True)
class TimeUnit:
    """The unit in which a time axis reads best."""

    name: str
    seconds: float


SECOND = TimeUnit("s", 1.0)
MINUTE = TimeUnit("min", 60.0)
HOUR = TimeUnit("h", 3600.0)


def time_unit(span_s: float) -> TimeUnit:
    """Seconds up to three minutes, minutes up to three hours, hours beyond."""
    if span_s <= 3 * MINUTE.seconds:
        return SECOND
    return MINUTE if span_s <= 3 * HOUR.seconds else HOUR


def round_up(value: float) -> float:
    """The next round number at or above a positive value: an axis does not move with every last digit."""
    decade = 10.0 ** math.floor(math.log10(value))
    # the tolerance keeps 0.3 at 0.3, whose quotient by its decade is 3.0000000000000004
    return next((end * decade for end in ROUND_ENDS if end * decade >= value * (1 - 1e-9)), 10 * decade)


def linear(low: float, high: float, at_most: int) -> tuple[float, ...]:
    """Multiples of 1, 2 or 5 times a power of ten within [low, high]: `at_most` of them, two at the least.

    Where the next step leaves fewer than two, the one before stays, with up to five.
    """
    rough = (high - low) / max(at_most - 1, 1)
    decade = 10.0 ** math.floor(math.log10(rough))
    multiples: list[range] = []
    steps = [factor * decade for factor in (*STEPS, 20.0, 50.0)]
    for step in steps:
        multiples.append(range(math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9) + 1))
        if len(multiples[-1]) <= at_most:
            break
    if len(multiples[-1]) < 2:
        multiples.pop()
    step = steps[len(multiples) - 1]
    return tuple(index * step for index in multiples[-1])


def decades(low: float, high: float, at_most: int) -> tuple[float, ...]:
    """Powers of ten within [low, high], `at_most` of them; every second or third where there are more."""
    first, last = math.ceil(math.log10(low) - 1e-9), math.floor(math.log10(high) + 1e-9)
    stride = max(1, math.ceil((last - first + 1) / at_most))
    return tuple(10.0**exponent for exponent in range(first, last + 1, stride))


def labels(values: tuple[float, ...]) -> tuple[str, ...]:
    """What the ticks of a linear axis say: all with as many decimals as their step needs."""
    if not values:
        return ()
    step = values[1] - values[0] if len(values) > 1 else abs(values[0]) or 1.0
    largest = max(abs(value) for value in values)
    if largest >= 1e6 or step < 1e-4:
        return tuple(_scientific(value, step) for value in values)
    decimals = max(0, -math.floor(math.log10(step) + 1e-9))
    return tuple(_minus(f"{value:.{decimals}f}") for value in values)


def decade_labels(values: tuple[float, ...]) -> tuple[str, ...]:
    """What the ticks of a logarithmic axis say: plain numbers near one, powers of ten elsewhere."""
    return tuple(_decade(round(math.log10(value))) for value in values)


def _decade(exponent: int) -> str:
    if -3 <= exponent <= 3:
        return f"{10.0**exponent:.{max(0, -exponent)}f}"
    return "10" + str(exponent).translate(_SUPERSCRIPT)


def _scientific(value: float, step: float) -> str:
    if abs(value) < step / 2:
        return "0"
    exponent = math.floor(math.log10(abs(value)) + 1e-9)
    mantissa = f"{value / 10.0**exponent:.4g}"
    return _minus(f"{mantissa}·10") + str(exponent).translate(_SUPERSCRIPT)


def _minus(text: str) -> str:
    """A true minus sign, and none before a number that prints as zero."""
    if text.startswith("-") and not text.strip("-0."):
        text = text[1:]
    return text.replace("-", "−")
