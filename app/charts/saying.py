"""How charts say the value of a measure: shares in percent, ranks (AUC) as plain decimals."""

import math

from evalcore.figures import Estimate, Interval
from evalcore.intervals import METHODS
from evalcore.measures import MEASURES
from evalcore.wording import DASH, Noun, count, decimal, interval, percent, points, with_interval

NUMBERS = ("no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten")


def in_words(number: int) -> str:
    """A small count as a word, as sentences take it; a larger one in digits.

    >>> in_words(3), in_words(12)
    ('three', '12')
    """
    return NUMBERS[number] if number < len(NUMBERS) else count(number)


def value(measure: str, number: float, n: int) -> str:
    """One value of a measure."""
    return decimal(number) if measure == "auc" else percent(number, n)


def bounds(measure: str, ends: Interval | None, n: int) -> str:
    """An interval of a measure; empty where there is none."""
    if ends is None or not ends.defined:
        return ""
    if measure == "auc":
        return f"{decimal(ends.low)}{DASH}{decimal(ends.high)}"
    return interval(ends, n)


def figure(estimate: Estimate) -> str:
    """A value with its interval."""
    if estimate.measure != "auc":
        return with_interval(estimate.value, estimate.interval, estimate.n)
    ends = bounds("auc", estimate.interval, estimate.n)
    return decimal(estimate.value) + (f" ({ends})" if ends else "")


def spoken(estimate: Estimate) -> str:
    """A value and its ends as a text alternative says them: "90 %, 84 % to 94 %"."""
    shown = value(estimate.measure, estimate.value, estimate.n)
    ends = estimate.interval
    if ends is None or not ends.defined:
        return shown
    low = value(estimate.measure, ends.low, estimate.n)
    return f"{shown}, {low} to {value(estimate.measure, ends.high, estimate.n)}"


def gap(measure: str, difference: float) -> str:
    """A difference of two values; signed only where it is negative, which is the surprise."""
    if math.isnan(difference):
        return "undefined"
    if measure == "auc":
        return decimal(difference)
    return points(difference, signed=difference < 0)


def method(ends: Interval | None) -> str:
    """The name of an interval's method."""
    if ends is None:
        return "none is offered that keeps its word"
    return METHODS[ends.method]


def axis_title(measure: str, noun: Noun) -> str:
    """The measure in plain words with the trade's name in brackets."""
    chosen = MEASURES[measure]
    return f"{chosen.plain.replace('{units}', noun.plural)} ({chosen.trade})"
