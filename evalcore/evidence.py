"""How often intervals kept their word on simulated tables like the user's.

The packaged `evidence.csv` is what the coverage study came to: a line a kind of table, candidate,
scheme and figure. What counts as alike (`ALIKE`) is our own judgement, no source.
"""

import csv
import io
import math
from collections.abc import Sequence
from dataclasses import dataclass, fields
from functools import lru_cache
from importlib import resources
from typing import Any

from evalcore.candidates import CANDIDATES
from evalcore.choice import Choice, choose, choose_written
from evalcore.evaluation import Evaluation
from evalcore.figures import Estimate
from evalcore.measures import ALL_MEASURES
from evalcore.profile import smallest_class
from evalcore.schemes import SCHEMES
from evalcore.wording import Noun, count, level, listed, percent

LEVEL = 0.95  # of the intervals that were simulated
LEAST, MOST_WRONG = 0.93, 0.05  # an interval's coverage; the share of tables with a false word
ALIKE = 1.5  # numbers of cases this many times apart are still alike
MANY_FEATURES = 0.5  # features a case from which a table is of a kind of its own
STUDIED = {"cross_validation": "default", "bootstrap": "bootstrap"}
WORDS = ("verdict", "comparison")  # lines about what was said, not about an interval
NONE_LIKE = (
    "No simulated table resembles this one (candidate, scheme, level, cut-off, number of "
    "cases, smallest class, features), so whether the interval keeps its word here is not measured."
)


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
    def short(self) -> bool:
        """Whether it fell short by more than two Monte-Carlo errors; not where undefined."""
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
    scheme, estimator, measure, counted_by : str
        As in `Line`.
    n, smallest_class : int
        Units.
    cases, features, classes : int
    """

    candidate: Choice
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


def headline(evaluation: Evaluation) -> Headline | None:
    """What the headline rests on; None where the study holds nothing of its kind.

    That is: at another level, or under another scheme than the recommended cross-validation or
    bootstrap.
    """
    table, plan = evaluation.table, evaluation.plan
    used = plan.scheme(evaluation.scheme)
    studied = [choose(SCHEMES, key) for key in STUDIED]
    if plan.level != LEVEL or used not in studied:
        return None
    estimate = _estimate(evaluation)
    estimator = estimate.estimator
    if estimate.measure == "auc" and len(plan.schemes) == 1:
        estimator = "mean_of_rounds_alone"
    elif estimate.measure == "auc" and set(plan.schemes) != set(studied):
        return None  # the other schemes bear on its interval too
    return Headline(
        plan.candidate(evaluation.about),
        STUDIED[used.key],
        estimator,
        estimate.measure,
        evaluation.counted_by,
        table.n_units,
        smallest_class(table)[1],
        table.n_cases,
        len(table.columns),
        table.n_classes,
    )


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
        Same candidate with its settings, scheme, figure and way of counting; n and the smallest
        class within a factor of 1.5; two classes, or more than two, alike; several rows a unit,
        or one; from half as many features as cases on, only kinds with as many.
    """
    known = lines() if among is None else among
    return tuple(line for line in known if _same_figure(line, given) and _alike(line, given))


def matching(evaluation: Evaluation, among: Sequence[Line] | None = None) -> tuple[Line, ...]:
    """Lines like the headline's; none while rounds that it rests on are missing."""
    given = headline(evaluation) if _complete(evaluation) else None
    return like(given, among) if given else ()


def falling_short(evaluation: Evaluation, among: Sequence[Line] | None = None) -> tuple[Line, ...]:
    """Those of them in which the interval did not keep its word."""
    return tuple(line for line in matching(evaluation, among) if line.short)


def sentence(evaluation: Evaluation, among: Sequence[Line] | None = None) -> str:
    """What is known of the headline's interval on simulated tables like this one.

    Empty where the headline has no interval, and while rounds it rests on are missing.
    """
    bounds = _estimate(evaluation).interval
    if not _complete(evaluation) or bounds is None or not bounds.defined:
        return ""
    found = matching(evaluation, among)
    tables = sum(line.tables - line.without_interval for line in found)
    shares = [line.coverage for line in found if not math.isnan(line.coverage)]
    if not shares:
        return NONE_LIKE
    held = [percent(share, tables) for share in (min(shares), max(shares))]
    lacking = sum(line.without_interval for line in found)
    none = f", with none in {count(lacking)} more" if lacking else ""
    return (
        f"In {count(tables)} simulated tables like this one in size ({size_in_words(found)}), the "
        f"{level(LEVEL)} interval of this candidate’s {ALL_MEASURES[found[0].measure].trade} held "
        f"the true value in {' to '.join(dict.fromkeys(held))}{none}; real tables may be otherwise."
    )


def size_in_words(found: Sequence[Line]) -> str:
    """How large simulated tables were: "60 cases, about 30 in the smallest class; ..."."""
    rows = listed([count(rows) for rows in sorted({line.rows for line in found})], last="or")
    what = "cases" if rows == "1" else f"units of {rows} rows"
    kinds = Noun("kind of data", "kinds of data").counted(len({line.scenario for line in found}))
    return (
        f"{_span([line.n for line in found])} {what}, about "
        f"{_span([round(line.smallest_class) for line in found])} in the smallest class; {kinds}"
    )


def _span(numbers: Sequence[int]) -> str:
    return " to ".join(dict.fromkeys([count(min(numbers)), count(max(numbers))]))


def _estimate(evaluation: Evaluation) -> Estimate:
    """The headline's figure; of sensitivity, which has several classes, the balanced one."""
    measure = evaluation.plan.measure
    measure = "balanced_accuracy" if measure == "sensitivity" else measure
    # at a learned cut-off where there is one: such figures were not studied, so no line is alike
    estimator = "mean_of_rounds" if measure == "auc" else evaluation.in_use
    return evaluation.estimate(measure, evaluation.about, estimator=estimator)


def _complete(evaluation: Evaluation) -> bool:
    """Whether all rounds that the headline's interval rests on have finished."""
    first = evaluation.plan.measure != "auc"
    names = (evaluation.scheme,) if first else evaluation.plan.scheme_names
    return all(
        name in evaluation.rounds
        and evaluation.rounds[name].n_rounds == evaluation.planned.get(name)
        for name in names
    )


def _same_figure(line: Line, given: Headline) -> bool:
    """Same figure of the same candidate, counted alike."""
    return (line.scheme, line.estimator, line.measure, line.counted_by) == (
        given.scheme,
        given.estimator,
        given.measure,
        given.counted_by,
    ) and _choice(line.candidate) == given.candidate


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
    return max(a, b) <= ALIKE * min(a, b)


@lru_cache(maxsize=256)
def _choice(written: str) -> Choice | None:
    """The candidate as written; None for a line about several, such as the best of them."""
    known = written.partition(":")[0] in CANDIDATES
    return choose_written(CANDIDATES, written) if known else None
