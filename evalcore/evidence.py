"""How often intervals kept their word on simulated tables like the user's.

The packaged `evidence.csv` is what the coverage study came to: a line a kind of table, candidate,
scheme and figure. What counts as alike (`ALIKE`) is our own judgement, no source.
"""

import csv
import io
from collections.abc import Sequence
from dataclasses import dataclass, fields
from functools import lru_cache
from importlib import resources
from typing import Any

from evalcore.candidates import CANDIDATES
from evalcore.choice import Choice, choose_written
from evalcore.cut_off_rule import CutOffRule

LEVEL = 0.95  # of the intervals that were simulated
LEAST, MOST_WRONG = 0.93, 0.05  # an interval's coverage; the share of tables with a false word
LEAST_TABLES = 100  # with an interval, for a share of them to be quoted
ALIKE = 1.5  # numbers of cases this many times apart are still alike
MANY_FEATURES = 0.5  # features a case from which a table is of a kind of its own
WORDS = ("verdict", "comparison")  # lines about what was said, not about an interval


@dataclass(frozen=True)
class Line:
    """One figure of the study, over all tables of a kind.

    Attributes
    ----------
    scenario : str
    n : int
        Units of each table; cases where each is a unit.
    counted_by : str
        By "unit" or by "case".
    features, classes, rows : int
        Of each table; `rows` of each unit.
    smallest_class : float
        Median over the tables, in units.
    candidate : str
        As written on the command line.
    cut_off : str
        Rule for the smallest class of each table, as on the command line after the colon; empty
        where the class with the highest score was answered.
    scheme : {"default", "bootstrap"}
        The scheme recommended for the table, or the bootstrap alone.
    estimator, interval, measure : str
        `interval` is the method, empty where there is none.
    coverage, monte_carlo_error : float
        Share of tables whose interval held the truth, or in which no false word was said; nan where
        no table had an interval.
    bias, rmse, width : float
        nan where they do not apply.
    tables, without_interval : int
    """

    scenario: str
    n: int
    counted_by: str
    features: int
    classes: int
    rows: int
    smallest_class: float
    candidate: str
    cut_off: str
    scheme: str
    estimator: str
    interval: str
    measure: str
    coverage: float
    monte_carlo_error: float
    bias: float
    rmse: float
    width: float
    tables: int
    without_interval: int

    @property
    def tells(self) -> bool:
        """Whether enough tables had what it is about: an interval, or a word."""
        asked = self.tables if self.estimator in WORDS else self.tables - self.without_interval
        return asked >= LEAST_TABLES

    @property
    def short(self) -> bool:
        """Whether it fell short by more than two Monte-Carlo errors; not where too few tell."""
        if not self.tells:
            return False
        most = self.coverage + 2 * self.monte_carlo_error
        return most < (1 - MOST_WRONG if self.estimator in WORDS else LEAST)

    @property
    def many_features(self) -> bool:
        """Whether there were more features than a third of the cases."""
        return 3 * self.features > self.n * self.rows


@dataclass(frozen=True)
class Headline:
    """What the user's headline rests on, as far as it decides which lines are like it.

    Attributes
    ----------
    candidate : Choice
    cut_off : CutOffRule or None
        None where the class with the highest score is answered.
    called : int
        Units of the class that is called from the cut-off up; 0 without one.
    scheme, estimator, measure, counted_by : str
        As in `Line`.
    n, smallest_class : int
        Units.
    cases, features, classes : int
    """

    candidate: Choice
    cut_off: CutOffRule | None
    called: int
    scheme: str
    estimator: str
    measure: str
    counted_by: str
    n: int
    smallest_class: int
    cases: int
    features: int
    classes: int


@lru_cache(maxsize=1)
def lines() -> tuple[Line, ...]:
    """Every line of the packaged table."""
    return read(resources.files("evalcore").joinpath("evidence.csv").read_text("utf-8"))


def read(text: str) -> tuple[Line, ...]:
    """Lines from CSV with a header that names the attributes of `Line`.

    Raises
    ------
    TypeError
        A column is missing.
    KeyError
        A column is unknown.
    """
    kinds: dict[str, Any] = {field.name: field.type for field in fields(Line)}
    rows = csv.DictReader(io.StringIO(text))
    return tuple(Line(**{name: kinds[name](value) for name, value in row.items()}) for row in rows)


def like(given: Headline, among: Sequence[Line] | None = None) -> tuple[Line, ...]:
    """Lines about tables that resemble the user's, of the same candidate and figure.

    Parameters
    ----------
    given : Headline
    among : sequence of Line, optional
        Those of the package unless given.

    Returns
    -------
    tuple of Line
        Same candidate with its settings, scheme, figure and way of counting; a cut-off found alike,
        or none; n and the smallest class within a factor of 1.5; two classes, or more than two,
        alike; several rows a unit, or one; from half as many features as cases on, only kinds with
        as many.
    """
    known = lines() if among is None else among
    return tuple(line for line in known if _same_figure(line, given) and _alike(line, given))


def _same_figure(line: Line, given: Headline) -> bool:
    """Same figure of the same candidate, counted alike."""
    return (line.scheme, line.estimator, line.measure, line.counted_by) == (
        given.scheme,
        given.estimator,
        given.measure,
        given.counted_by,
    ) and (_choice(line.candidate) == given.candidate and _same_rule(line, given))


def _same_rule(line: Line, given: Headline) -> bool:
    """Whether cut-offs were found alike: from floors, or from costs weighed by the share in use."""
    rule = given.cut_off if given.measure != "auc" else None  # which knows no cut-off
    if rule is None or not line.cut_off:
        return rule is None and not line.cut_off
    if not _near(line.smallest_class, given.called):
        return False  # studied of the smallest class
    studied = CutOffRule.read(f"smallest class:{line.cut_off}")
    if studied.by != rule.by:
        return False
    if rule.by == "floor":
        return _near(1 - studied.floor, 1 - rule.floor)
    return rule.by == "cost" and _near(
        _odds(studied, line.smallest_class / line.n), _odds(rule, given.called / given.n)
    )


def _odds(rule: CutOffRule, table_share: float) -> float:
    """Cost of all misses to that of all false alarms if every answer were wrong."""
    share = rule.share_used(table_share)
    return rule.miss * share / (rule.alarm * (1 - share))


def _alike(line: Line, given: Headline) -> bool:
    """Whether the study's tables were like the user's."""
    return (
        _near(line.n, given.n)
        and _near(line.smallest_class, given.smallest_class)
        and (line.classes == 2) == (given.classes == 2)
        and (line.rows > 1) == (given.cases > given.n)
        and line.many_features == (given.features >= MANY_FEATURES * given.cases)
    )


def _near(a: float, b: float) -> bool:
    # 1 - 0.85 and 1.5 (1 - 0.9) differ by rounding alone
    return max(a, b) <= ALIKE * min(a, b) * (1 + 1e-9)


@lru_cache(maxsize=256)
def _choice(written: str) -> Choice | None:
    """The candidate as written; None for a line about several, such as the best of them."""
    known = written.partition(":")[0] in CANDIDATES
    return choose_written(CANDIDATES, written) if known else None
