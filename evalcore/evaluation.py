"""Table, plan, rounds and answers put together: every estimate of every candidate and scheme."""

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from evalcore import estimates, intervals
from evalcore.answers import Answers, held_out
from evalcore.candidates import CANDIDATES
from evalcore.comparison import Difference
from evalcore.figures import CountedBy, Estimate, Interval
from evalcore.judged import (
    Judged,
    auc_interval,
    balanced_interval,
    clusters,
    offers_interval,
    plus_632,
    share_interval,
)
from evalcore.measures import ALL_MEASURES
from evalcore.plan import Plan
from evalcore.probabilities import brier, log_loss
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES
from evalcore.table import Table
from evalcore.together import ESTIMATOR as WINNER
from evalcore.together import differences, winner_estimates

ESTIMATORS: dict[str, str] = {
    "apparent": "on the cases fitted to (apparent)",
    "held_out_by_case": "held out, every case weighing the same",
    "mean_of_rounds": "mean of the rounds",
    "weighted_632_per_round": "0.632 out-of-bag + 0.368 in-bag of each round",
    "point_632": ".632",
    "point_632_plus": ".632+",
    "optimism_corrected": "apparent minus its optimism",
    "out_of_bag_or_632_plus": "out-of-bag where it memorises, else .632+",
    WINNER: "of the best, once the luck of being best is taken off",
}
LOSSES = {"brier": brier, "log_loss": log_loss}
# measures that in-bag and out-of-bag values may be weighed for
WEIGHTED = ("accuracy", "balanced_accuracy", "sensitivity", "auc")


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

    def parts(self, scheme: str = "", counted_by: CountedBy | None = None) -> list[Judged]:
        """Every candidate under one scheme; the headline's scheme and counting unless given."""
        wanted = (scheme or self.scheme, counted_by or self.counted_by)
        return [j for j in self.judged if (j.scheme, j.counted_by) == wanted]

    @cached_property
    def winner(self) -> Estimate | None:
        """The corrected estimate of the best candidate by the headline's measure, if any.

        Of accuracy where the headline's measure is not balanced accuracy.
        """
        measure = "accuracy" if self.plan.measure == "accuracy" else "balanced_accuracy"
        return self.corrected(measure)

    def corrected(self, measure: str, of_class: str = "") -> Estimate | None:
        """What the best candidate's figure is worth once the luck of being best is taken off."""
        for e in self.estimates:
            if (e.estimator, e.scheme, e.counted_by, e.measure, e.of_class) == (
                WINNER,
                self.scheme,
                self.counted_by,
                measure,
                of_class,
            ):
                return e
        return None

    @cached_property
    def differences(self) -> tuple[Difference, ...]:
        """The candidate of the headline against all others, on the headline's rounds."""
        return differences(self.plan, self.parts(), about=self.about)

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
                    given.on_all[way],
                    whole[candidate].in_bag[way],
                    clusters(table, plan, scheme, counted_by=way),
                )
            )
    figures = [e for part in judged for e in _estimates(table, plan, part, judged)]
    figures += [e for part in judged for e in _losses(table, plan, part)]
    for scheme in rounds:
        for way in ways:
            alike = [p for p in judged if (p.scheme, p.counted_by) == (scheme, way)]
            figures += winner_estimates(table, plan, alike)
    return Evaluation(table, plan, rounds, planned, tuple(judged), tuple(figures), failures)


def _estimates(
    table: Table, plan: Plan, part: Judged, judged: Sequence[Judged]
) -> Iterator[Estimate]:
    this = (part.candidate, part.counted_by)
    alike = [p for p in judged if (p.candidate, p.counted_by) == this]
    for measure in ALL_MEASURES.values():
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


def _losses(table: Table, plan: Plan, part: Judged) -> Iterator[Estimate]:
    """Held-out Brier score (sum over classes, 0 to 2) and log loss; low is good.

    Of candidates with probabilities only, and of single rows or cases as of units.
    """
    if not CANDIDATES[plan.candidate(part.candidate).key].probabilities:
        return
    held = part.held
    round_at, case_at = held.rounds.pairs
    weights = 1 / held.rounds.times_tested[case_at]
    for name, loss in LOSSES.items():
        by_case = float(loss(held.true, held.scores, weights=weights)[0])
        of_rounds = loss(held.true, held.scores, groups=round_at, n_groups=held.rounds.n_rounds)
        mean, undefined = estimates.mean_of_rounds(of_rounds)
        for estimator, value, lacking in (
            ("held_out_by_case", by_case, 0),
            ("mean_of_rounds", mean, undefined),
        ):
            yield Estimate(
                value,
                None,
                name,
                part.candidate,
                part.scheme,
                estimator,
                "",
                part.counted_by,
                _n_behind(part, None),
                held.rounds.n_rounds,
                lacking,
            )


def _n_behind(part: Judged, of_class: int | None) -> int:
    """Units or cases held out at least once, of one class or of all."""
    known = ~np.isnan(part.shares)
    return int((known if of_class is None else known & (part.held.labels == of_class)).sum())


def _figures(
    plan: Plan, part: Judged, alike: Sequence[Judged], measure: str, *, of_class: int
) -> Iterator[tuple[str, float, Interval | None, int]]:
    """Estimator, value, interval and undefined rounds of one measure."""
    mean, undefined = estimates.mean_of_rounds(part.held_values(measure, of_class))
    yield "apparent", part.whole_value(measure, of_class), None, 0
    if ALL_MEASURES[measure].from_confusion is None:
        # never pooled across rounds: scores of different models are not on one scale
        out_of_bag = mean
        yield "mean_of_rounds", mean, auc_interval(plan.level, part, alike, mean), undefined
    else:
        out_of_bag = part.pooled_value(measure, of_class)
        yield "held_out_by_case", out_of_bag, _interval(plan, part, measure, of_class), 0
        yield "mean_of_rounds", mean, None, undefined
    if SCHEMES[plan.scheme(part.scheme).key].repeats_cases and measure in WEIGHTED:
        yield from _bootstrap_figures(plan, part, measure, of_class, out_of_bag)


def _bootstrap_figures(
    plan: Plan, part: Judged, measure: str, of_class: int, out_of_bag: float
) -> Iterator[tuple[str, float, Interval | None, int]]:
    """What in-bag, out-of-bag and apparent values are combined to."""
    apparent = part.whole_value(measure, of_class)
    per_round, lacking = estimates.mean_of_rounds(
        estimates.per_round_632(
            part.held_values(measure, of_class), part.in_bag_values(measure, of_class)
        )
    )
    yield "weighted_632_per_round", per_round, None, lacking
    yield "point_632", estimates.point_632(apparent, out_of_bag), None, 0
    if measure != "auc":
        yield "optimism_corrected", apparent - part.optimism(measure, of_class), None, 0
    if measure == "sensitivity":
        return
    plus = plus_632(part, measure, out_of_bag)
    value = plus.value if plus else math.nan
    yield "point_632_plus", value, None, 0
    switched = estimates.out_of_bag_or_632_plus(apparent, out_of_bag, value)
    interval = None
    if measure == "accuracy" and part.units is None and not math.isnan(switched):
        n = int((~np.isnan(part.shares)).sum())
        interval = intervals.with_model_variance(switched, n, part.tau2, level=plan.level)
    yield "out_of_bag_or_632_plus", switched, interval, 0


def _interval(plan: Plan, part: Judged, measure: str, of_class: int) -> Interval | None:
    """The default interval of a held-out value; None where none is offered."""
    if not offers_interval(part):
        return None
    if measure == "accuracy":
        return share_interval(plan.level, part)
    if measure == "sensitivity":
        return share_interval(plan.level, part, of_class)
    return balanced_interval(plan.level, part) if measure == "balanced_accuracy" else None
