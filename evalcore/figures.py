"""The three things a judgement is made of: an interval, an estimate and a finding."""

import math
from dataclasses import dataclass
from typing import Literal

from evalcore.sources import SOURCES

Severity = Literal["grave", "moderate", "note"]
CountedBy = Literal["unit", "case"]
SEVERITIES: tuple[Severity, ...] = ("grave", "moderate", "note")


@dataclass(frozen=True)
class Interval:
    """Where the true value may lie.

    Attributes
    ----------
    low, high : float
        Ends, low <= high; both nan where the interval is undefined.
    level : float
        Confidence, strictly between 0 and 1; two-sided.
    method : str
        Key of the method, e.g. ``"wilson"``.
    """

    low: float
    high: float
    level: float
    method: str

    def __post_init__(self) -> None:
        if not 0 < self.level < 1:
            raise ValueError(f"`level` must be between 0 and 1, both excluded; got {self.level}.")
        if self.low > self.high:
            raise ValueError(f"`low` must not exceed `high`; got {self.low} and {self.high}.")

    @property
    def defined(self) -> bool:
        """Whether both ends are numbers."""
        return not (math.isnan(self.low) or math.isnan(self.high))

    @property
    def width(self) -> float:
        """Distance from end to end."""
        return self.high - self.low


@dataclass(frozen=True)
class Estimate:
    """One figure: what was measured, on whom, how, and how sure it is.

    Attributes
    ----------
    value : float
        nan where undefined.
    interval : Interval or None
        None where no interval is offered that keeps its word.
    measure, candidate, scheme, estimator : str
        Keys as listed in README.
    of_class : str
        The class of a per-class measure, else empty.
    counted_by : {"unit", "case"}
    n : int
        Units or cases behind the value.
    rounds : int
        Rounds that were used.
    undefined_rounds : int
        Rounds among them in which the measure had no value.
    """

    value: float
    interval: Interval | None
    measure: str
    candidate: str
    scheme: str
    estimator: str
    of_class: str
    counted_by: CountedBy
    n: int
    rounds: int
    undefined_rounds: int


@dataclass(frozen=True)
class Finding:
    """A doubt the user sees.

    Attributes
    ----------
    check : str
        Key of the check in the registry of ``findings.py``.
    severity : {"grave", "moderate", "note"}
    subject : str
        The candidate, class or column it is about; empty for the whole table.
    title : str
        One line: what, with the number against the threshold.
    seen : str
        What was seen and the threshold, in a sentence or two.
    advice : str
        What to do.
    value, threshold : float
        The number and what it was held against.
    source : str
        Key into ``SOURCES``.
    """

    check: str
    severity: Severity
    subject: str
    title: str
    seen: str
    advice: str
    value: float
    threshold: float
    source: str

    def __post_init__(self) -> None:
        if self.severity not in SEVERITIES:
            raise ValueError(f"`severity` must be one of {SEVERITIES}; got {self.severity!r}.")
        if self.source not in SOURCES:
            raise ValueError(f"`source` must be a key of SOURCES; got {self.source!r}.")
