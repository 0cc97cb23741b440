"""Numbers to text: the only file that rounds.

A space before "%" and around "=" is non-breaking (U+00A0), ranges take an en dash, negative
numbers too (the print font has no minus sign).
"""

import math
import re
import unicodedata
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from evalcore.figures import Interval

NBSP = "\u00a0"
DASH = "\u2013"


@dataclass(frozen=True)
class Noun:
    """What one unit is called, e.g. ``Noun("lot", "lots")``."""

    singular: str
    plural: str

    def counted(self, number: int) -> str:
        """The number with its noun.

        >>> Noun("lot", "lots").counted(1200).replace(NBSP, " ")
        '1,200 lots'
        """
        return f"{count(number)}{NBSP}{self.singular if number == 1 else self.plural}"


CASE = Noun("case", "cases")
ROW = Noun("row", "rows")


def count(number: int) -> str:
    """An exact count with thousands separated.

    >>> count(1200)
    '1,200'
    """
    return f"{number:,}"


def percent(value: float, n: int) -> str:
    """A share in percent; one decimal from 200 cases on, none below.

    Parameters
    ----------
    value : float
        Share, 0 to 1; nan gives "undefined".
    n : int
        Cases or units behind it.

    Examples
    --------
    >>> percent(0.884, 38).replace(NBSP, " ")
    '88 %'
    >>> percent(0.884, 500).replace(NBSP, " ")
    '88.4 %'
    >>> percent(0.002, 38).replace(NBSP, " ")
    '<1 %'
    """
    return f"{_percent_number(value, n)}{NBSP}%" if not math.isnan(value) else "undefined"


def percent_down(value: float, n: int) -> str:
    """A share that is said to be reached: rounded down, so that 89.6 % is not called 90 %.

    >>> percent_down(0.896, 38).replace(NBSP, " ")
    '89 %'
    """
    return _cut(value, n, math.floor)


def percent_up(value: float, n: int) -> str:
    """A share that is said not to be exceeded: rounded up."""
    return _cut(value, n, math.ceil)


def _cut(value: float, n: int, towards: Callable[[float], int]) -> str:
    if math.isnan(value):
        return "undefined"
    decimals = _decimals(n)
    # what is a whole step but for rounding noise stays it
    steps = towards(round(100 * value * 10**decimals, 6))
    return f"{steps / 10**decimals:.{decimals}f}{NBSP}%"


def _decimals(n: int) -> int:
    return 1 if n >= 200 else 0


def _percent_number(value: float, n: int) -> str:
    decimals = _decimals(n)
    smallest = 10.0**-decimals
    shown = 100 * value
    if 0 < shown < smallest / 2:
        return f"<{smallest:.{decimals}f}"
    if 100 - smallest / 2 <= shown < 100:
        return f">{100 - smallest:.{decimals}f}"
    return f"{shown:.{decimals}f}"


def interval(bounds: Interval, n: int) -> str:
    """Both ends in percent, e.g. "72–95 %".

    >>> interval(Interval(0.72, 0.95, 0.95, "wilson"), 38).replace(NBSP, " ")
    '72–95 %'
    >>> interval(Interval(0.996, 1.0, 0.95, "wilson"), 38).replace(NBSP, " ")
    '>99–100 %'
    """
    if not bounds.defined:
        return "undefined"
    # an end is not rounded to certainty: no lower one to 100 %, no upper one to 0 %
    low, high = (f"{100 * end:.{_decimals(n)}f}" for end in (bounds.low, bounds.high))
    low = _percent_number(bounds.low, n) if bounds.low > 0.5 else low
    high = _percent_number(bounds.high, n) if bounds.high < 0.5 else high
    return f"{low}{DASH}{high}{NBSP}%"


def with_interval(value: float, bounds: Interval | None, n: int) -> str:
    """A share with its interval, e.g. "88 % (72–95 %)"; the share alone where there is none."""
    if bounds is None or not bounds.defined:
        return percent(value, n)
    return f"{percent(value, n)} ({interval(bounds, n)})"


def n_equals(number: int, noun: Noun | None = None) -> str:
    """The n behind a figure, e.g. "n = 38 lots"."""
    text = count(number) if noun is None else noun.counted(number)
    return f"n{NBSP}={NBSP}{text}"


def points(difference: float, *, signed: bool = True) -> str:
    """A difference of two shares in percentage points.

    >>> points(0.021).replace(NBSP, " "), points(-0.034).replace(NBSP, " ")
    ('+2 points', '–3 points')
    >>> points(0.012, signed=False).replace(NBSP, " ")
    '1 point'
    """
    whole = round(100 * difference)
    sign = "" if whole == 0 or not signed else ("+" if whole > 0 else DASH)
    return f"{sign}{abs(whole)}{NBSP}{'point' if abs(whole) == 1 else 'points'}"


def tenths(difference: float) -> str:
    """A difference in points with one decimal, where it is held against a threshold.

    >>> tenths(0.0316).replace(NBSP, " ")
    '3.2 points'
    """
    return f"{100 * difference:.1f}{NBSP}points"


def decimal(value: float, digits: int = 2) -> str:
    """A plain decimal number such as an AUC or a threshold; an en dash for minus."""
    if math.isnan(value):
        return "undefined"
    return f"{value:.{digits}f}".replace("-", DASH)


def score(value: float) -> str:
    """A score or cut-off, with as many digits as keep it from looking like 0 or 1.

    >>> score(0.3042), score(0.99971), score(-1.2)
    ('0.304', '0.9997', '–1.200')
    """
    digits = 3
    while digits < 12 and 0 < value < 1 and float(f"{value:.{digits}f}") in (0.0, 1.0):
        digits += 1
    return decimal(value, digits)


def reading(value: float) -> str:
    """A reading as it might stand in the user's file, six digits at most.

    >>> reading(12.5), reading(-3.0)
    ('12.5', '–3')
    """
    return "undefined" if math.isnan(value) else f"{value:g}".replace("-", DASH)


def level(value: float) -> str:
    """A confidence level, e.g. "95 %"."""
    return f"{100 * value:.4g}{NBSP}%"


def duration(seconds: float) -> str:
    """A time to wait, in words that promise no more than is known.

    >>> duration(3), duration(44), duration(130)
    ('a few seconds', 'about 40 seconds', 'about 2 minutes')
    """
    if seconds < 8:
        return "a few seconds"
    if seconds < 55:
        return f"about {max(10, round(seconds / 10) * 10)} seconds"
    minutes = round(seconds / 60)
    if minutes < 90:
        return "about a minute" if minutes <= 1 else f"about {minutes} minutes"
    return f"about {round(minutes / 60)} hours"


def listed(items: Sequence[str], *, last: str = "and") -> str:
    """Items in a sentence: "a, b and c".

    >>> listed(["a", "b", "c"])
    'a, b and c'
    """
    if len(items) < 2:
        return "".join(items)
    return f"{', '.join(items[:-1])} {last} {items[-1]}"


def quoted(name: str) -> str:
    """A name that came from the user's file, set apart from our own words."""
    return f"‘{name}’"


def capitalised(sentence: str) -> str:
    """The sentence with its first letter in upper case, the rest untouched."""
    return sentence[:1].upper() + sentence[1:]


def class_name(name: str) -> str:
    """A class inside a sentence: as it is if it reads as a word, else in quotes.

    >>> class_name("failing"), class_name("1")
    ('failing', '‘1’')
    """
    # composed first: a letter with its accent apart would not count as a letter
    composed = unicodedata.normalize("NFC", name)
    return name if re.fullmatch(r"[^\W\d_]+(?:[ \-’][^\W\d_]+)*", composed) else quoted(name)
