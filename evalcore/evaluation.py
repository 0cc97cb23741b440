"""Table, plan, rounds and answers put together: every estimate of every candidate and scheme."""

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from evalcore import estimates, intervals, model_variance
from evalcore.answers import Answers, HeldOut, Reduced, held_out
from evalcore.candidates import CANDIDATES
from evalcore.figures import CountedBy, Estimate, Interval
from evalcore.measures import MEASURES, Floats
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.schemes import LEAST_BLOCKS, SCHEMES
from evalcore.table import Table

ESTIMATORS: dict[str, str] = {
    "apparent": "on the cases fitted to (apparent)",
    "held_out_by_case": "held out, every case weighing the same",
    "mean_of_rounds": "mean of the rounds",
    "weighted_632_per_round": "0.632 out-of-bag + 0.368 in-bag of each round",
    "point_632": ".632",
    "point_632_plus": ".632+",
}


@dataclass(frozen=True, eq=False)
class Judged:
    """One candidate under one scheme, counted one way.

    Attributes
    ----------
    scheme, candidate : str
        Names in the plan.
    counted_by : {"unit", "case"}
    held : HeldOut
    in_bag : Reduced
        Of the rounds' own bags.
    whole : Reduced
        Of the fit on all cases, one round.
    units : ndarray of int or None
        What counted cases resemble each other by (see `clusters`), else None.
    """

    scheme: str
    candidate: str
    counted_by: CountedBy
    held: HeldOut
    in_bag: Reduced
    whole: Reduced
    units: NDArray[np.intp] | None

    def held_values(self, measure: str, of_class: int = 0) -> Floats:
        """A measure within each round's held-out cases, shape (R,)."""
        return _values(measure, self.held.confusion, self.held.auc, of_class)

    def in_bag_values(self, measure: str, of_class: int = 0) -> Floats:
        """A measure on each round's own bag, repeats counted, shape (R,)."""
        return _values(measure, self.in_bag.confusion, self.in_bag.auc, of_class)

    def whole_value(self, measure: str, of_class: int = 0) -> float:
        """A measure of the fit on all cases for these cases."""
        return float(_values(measure, self.whole.confusion, self.whole.auc, of_class)[0])

    @cached_property
    def shares(self) -> Floats:
        """Share of held-out answers that were right, per unit or case; nan if never held out."""
        return estimates.mean_correct(self.held.correct, self.held.rounds)

    @cached_property
    def tau2(self) -> float:
        """Model variance of the share right."""
        return model_variance.model_variance(self.held.correct, self.held.rounds, units=self.units)

    @cached_property
    def tau2_auc(self) -> float:
        """Model variance of the AUC within rounds, of two classes."""
        return model_variance.auc_model_variance(
            self.held.labels == 1, self.held.rounds, self.held.scores[:, 1]
        )

    def tau2_of(self, of_class: int) -> float:
        """Model variance of the share right within one class."""
        return model_variance.model_variance(
            self.held.correct,
            self.held.rounds,
            chosen=self.held.labels == of_class,
            units=self.units,
        )


def clusters(
    table: Table, plan: Plan, scheme: str, *, counted_by: CountedBy
) -> NDArray[np.intp] | None:
    """What counted cases or units resemble each other by, beyond what is counted; None if nothing.

    Rows of a unit where rows are counted; blocks or groups that a scheme keeps together.
    """
    choice = plan.scheme(scheme)
    registered = SCHEMES[choice.key]
    groups = registered.groups(table, choice.values())
    first_case = np.unique(table.units, return_index=True)[1]
    of_counted = groups.of_case[first_case] if counted_by == "unit" else groups.of_case
    return of_counted if groups.number < len(of_counted) else None


def _values(measure: str, confusion: Floats, auc: Floats, of_class: int) -> Floats:
    function = MEASURES[measure].from_confusion
    if function is None:
        return auc
    values = function(confusion)
    return values[:, of_class] if MEASURES[measure].per_class else values


@dataclass(frozen=True, eq=False)
class Evaluation:
    """What an evaluation found, complete or as far as it has come.

    Attributes
    ----------
    table : Table
    plan : Plan
    rounds : dict of str to Rounds
        Finished rounds of each scheme; schemes without any are missing.
    planned : dict of str to int
        Rounds planned of each scheme.
    judged : tuple of Judged
    estimates : tuple of Estimate
    failures : dict of str to str
        Candidates that could not be fitted, and why.
    """

    table: Table
    plan: Plan
    rounds: dict[str, Rounds]
    planned: dict[str, int]
    judged: tuple[Judged, ...]
    estimates: tuple[Estimate, ...]
    failures: dict[str, str]

    @property
    def counted_by(self) -> CountedBy:
        """How the headline counts."""
        return self.plan.counted_by(self.table)

    @property
    def scheme(self) -> str:
        """The scheme of the headline: the first that has rounds."""
        return next(iter(self.rounds))

    @property
    def about(self) -> str:
        """The candidate of the headline; the next one that could be fitted if it failed."""
        names = [n for n in self.plan.candidate_names if n not in self.failures]
        return self.plan.about_name if self.plan.about_name in names else names[0]

    @property
    def candidates(self) -> tuple[str, ...]:
        """Candidates that could be fitted, in the order of the plan."""
        return tuple(n for n in self.plan.candidate_names if n not in self.failures)

    def is_baseline(self, candidate: str) -> bool:
        """Whether a candidate looks at no feature."""
        return CANDIDATES[self.plan.candidate(candidate).key].baseline

    def part(self, candidate: str, scheme: str, counted_by: CountedBy | None = None) -> Judged:
        """One candidate under one scheme, counted as the headline unless said otherwise."""
        wanted = (candidate, scheme, counted_by or self.counted_by)
        return next(j for j in self.judged if (j.candidate, j.scheme, j.counted_by) == wanted)

    def estimate(
        self,
        measure: str,
        candidate: str,
        *,
        scheme: str = "",
        estimator: str = "held_out_by_case",
        of_class: str = "",
        counted_by: CountedBy | None = None,
    ) -> Estimate:
        """One estimate; of the headline's scheme and counting unless said otherwise.

        Raises
        ------
        KeyError
            There is no such estimate.
        """
        key = (measure, candidate, scheme or self.scheme, estimator, of_class)
        return self._by_key[(*key, counted_by or self.counted_by)]

    @cached_property
    def _by_key(self) -> dict[tuple[str, ...], Estimate]:
        return {
            (e.measure, e.candidate, e.scheme, e.estimator, e.of_class, e.counted_by): e
            for e in self.estimates
        }


def evaluate(
    table: Table,
    plan: Plan,
    rounds: dict[str, Rounds],
    *,
    answers: dict[tuple[str, str], Answers],
    whole: dict[str, Answers],
    planned: dict[str, int],
    failures: dict[str, str],
) -> Evaluation:
    """Every estimate from the answers so far.

    Parameters
    ----------
    table : Table
    plan : Plan
    rounds : dict of str to Rounds
        Finished rounds of each scheme.
    answers : dict of (scheme name, candidate name) to Answers
    whole : dict of candidate name to Answers
        Of the fits on all cases.
    planned : dict of str to int
    failures : dict of str to str
    """
    ways: list[CountedBy] = ["unit", "case"] if table.has_units else ["case"]
    judged = []
    for (scheme, candidate), given in answers.items():
        if candidate in failures:
            continue
        for way in ways:
            judged.append(
                Judged(
                    scheme,
                    candidate,
                    way,
                    held_out(table, rounds[scheme], given.scores, counted_by=way),
                    given.in_bag[way],
                    whole[candidate].in_bag[way],
                    clusters(table, plan, scheme, counted_by=way),
                )
            )
    figures = tuple(e for part in judged for e in _estimates(table, plan, part, judged))
    return Evaluation(table, plan, rounds, planned, tuple(judged), figures, failures)


def _estimates(
    table: Table, plan: Plan, part: Judged, judged: Sequence[Judged]
) -> Iterator[Estimate]:
    this = (part.candidate, part.counted_by)
    alike = [p for p in judged if (p.candidate, p.counted_by) == this]
    for measure in MEASURES.values():
        classes = list(enumerate(table.classes)) if measure.per_class else [(0, "")]
        for k, name in classes:
            values = _figures(plan, part, alike, measure.key, of_class=k)
            n = _n_behind(part, k if measure.per_class else None)
            for estimator, value, interval, undefined in values:
                yield Estimate(
                    value,
                    interval,
                    measure.key,
                    part.candidate,
                    part.scheme,
                    estimator,
                    name,
                    part.counted_by,
                    n,
                    part.held.rounds.n_rounds,
                    undefined,
                )


def _n_behind(part: Judged, of_class: int | None) -> int:
    """Units or cases held out at least once, of one class or of all."""
    known = ~np.isnan(part.shares)
    return int((known if of_class is None else known & (part.held.labels == of_class)).sum())


def _figures(
    plan: Plan, part: Judged, alike: Sequence[Judged], measure: str, *, of_class: int
) -> Iterator[tuple[str, float, Interval | None, int]]:
    """Estimator, value, interval and undefined rounds of one measure."""
    apparent = part.whole_value(measure, of_class)
    held, in_bag = part.held_values(measure, of_class), part.in_bag_values(measure, of_class)
    mean, undefined = estimates.mean_of_rounds(held)
    yield "apparent", apparent, None, 0
    if measure == "auc":
        # never pooled across rounds: scores of different models are not on one scale
        out_of_bag = mean
        yield "mean_of_rounds", mean, _auc_interval(plan, part, alike, mean), undefined
    else:
        out_of_bag, interval = _held_out(plan, part, measure, of_class)
        yield "held_out_by_case", out_of_bag, interval, 0
        yield "mean_of_rounds", mean, None, undefined
    if not SCHEMES[plan.scheme(part.scheme).key].repeats_cases:
        return
    per_round, lacking = estimates.mean_of_rounds(estimates.per_round_632(held, in_bag))
    yield "weighted_632_per_round", per_round, None, lacking
    yield "point_632", estimates.point_632(apparent, out_of_bag), None, 0
    if measure != "sensitivity":
        plus = plus_632(part, measure, out_of_bag)
        yield "point_632_plus", plus.value if plus else math.nan, None, 0


def plus_632(part: Judged, measure: str, out_of_bag: float) -> estimates.Plus632 | None:
    """.632+ of accuracy, balanced accuracy or AUC with its own no-information value.

    Accuracy: sum of label share x answer share; balanced accuracy: 1/K; AUC: 0.5. None where the
    out-of-bag value is undefined.
    """
    if math.isnan(out_of_bag):
        return None
    counts = part.whole.confusion[0]
    guess = {"accuracy": estimates.no_information(counts), "auc": 0.5}
    return estimates.point_632_plus(
        part.whole_value(measure), out_of_bag, no_information=guess.get(measure, 1 / len(counts))
    )


def _held_out(
    plan: Plan, part: Judged, measure: str, of_class: int
) -> tuple[float, Interval | None]:
    value, interval = _value_and_interval(plan, part, measure, of_class)
    return value, interval if offers_interval(part) else None


def offers_interval(part: Judged) -> bool:
    """Whether there are enough blocks, where cases come in blocks, to tell their variance."""
    return part.units is None or len(np.unique(part.units)) >= LEAST_BLOCKS


def _value_and_interval(
    plan: Plan, part: Judged, measure: str, of_class: int
) -> tuple[float, Interval]:
    n_classes = part.held.scores.shape[1]
    if measure == "accuracy":
        value = estimates.by_case(part.held.correct, part.held.rounds)
        return value, share_interval(plan.level, part, None)
    recalls = estimates.recalls_by_case(
        part.held.labels, part.held.rounds, part.held.correct, n_classes=n_classes
    )
    if measure == "sensitivity":
        return float(recalls[of_class]), share_interval(plan.level, part, of_class)
    parts = [share_interval(plan.level, part, k, variance=False) for k in range(n_classes)]
    tau2 = model_variance.balanced_model_variance(
        part.held.labels, part.held.rounds, part.held.correct, n_classes=n_classes
    )
    return float(recalls.mean()), intervals.square_and_add(recalls.tolist(), parts, tau2)


def share_interval(
    level: float, part: Judged, of_class: int | None, *, variance: bool = True
) -> Interval:
    """The default interval for a share right, of all cases or of one class.

    Parameters
    ----------
    level : float
        Two-sided.
    part : Judged
    of_class : int or None
    variance : bool
        Whether the model's variance is included.
    """
    chosen = ~np.isnan(part.shares)
    if of_class is not None:
        chosen &= part.held.labels == of_class
    if not chosen.any():
        return Interval(math.nan, math.nan, level, "wilson")
    tau2 = math.nan
    if variance:
        tau2 = part.tau2 if of_class is None else part.tau2_of(of_class)
    shares = part.shares[chosen]
    if part.units is not None:
        return intervals.rows_of_units(shares, part.units[chosen], tau2, level=level)
    return intervals.with_model_variance(float(shares.mean()), len(shares), tau2, level=level)


def _auc_interval(
    plan: Plan, part: Judged, alike: Sequence[Judged], value: float
) -> Interval | None:
    """For two classes and independent cases; None otherwise, since none keeps its word there.

    The model's variance is the largest that any scheme shows: the folds alone cannot tell it
    where a class has few cases (own simulation).
    """
    if part.held.scores.shape[1] != 2 or part.units is not None or math.isnan(value):
        return None
    known = part.held.labels[~np.isnan(part.shares)]
    tau2 = max((p.tau2_auc for p in alike if not math.isnan(p.tau2_auc)), default=math.nan)
    return intervals.auc_score_type(
        value, int((known == 1).sum()), int((known == 0).sum()), tau2, level=plan.level
    )
