"""Every estimate of one candidate under one scheme, counted one way."""

import math
from collections.abc import Iterator

import numpy as np

from evalcore import estimates, intervals
from evalcore.candidates import CANDIDATES
from evalcore.figures import Estimate, Interval
from evalcore.judged import Judged, plus_632
from evalcore.judged_intervals import (
    auc_interval,
    balanced_interval,
    offers_interval,
    share_interval,
)
from evalcore.measures import ALL_MEASURES
from evalcore.plan import Plan
from evalcore.probabilities import brier, log_loss
from evalcore.schemes import SCHEMES
from evalcore.table import Table
from evalcore.together import ESTIMATOR as WINNER

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


def estimates_of(table: Table, plan: Plan, part: Judged) -> Iterator[Estimate]:
    """All measures by all estimators."""
    for measure in ALL_MEASURES.values():
        classes = list(enumerate(table.classes)) if measure.per_class else [(0, "")]
        for k, name in classes:
            values = _figures(plan, part, measure.key, of_class=k)
            n = n_behind(part, k if measure.per_class else None)
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


def losses_of(table: Table, plan: Plan, part: Judged) -> Iterator[Estimate]:
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
                n_behind(part, None),
                held.rounds.n_rounds,
                lacking,
            )


def n_behind(part: Judged, of_class: int | None) -> int:
    """Units or cases held out at least once, of one class or of all."""
    known = ~np.isnan(part.shares)
    return int((known if of_class is None else known & (part.held.labels == of_class)).sum())


def _figures(
    plan: Plan, part: Judged, measure: str, *, of_class: int
) -> Iterator[tuple[str, float, Interval | None, int]]:
    """Estimator, value, interval and undefined rounds of one measure."""
    mean, undefined = estimates.mean_of_rounds(part.held_values(measure, of_class))
    yield "apparent", part.whole_value(measure, of_class), None, 0
    if ALL_MEASURES[measure].from_confusion is None:
        # never pooled across rounds: scores of different models are not on one scale
        out_of_bag = mean
        yield "mean_of_rounds", mean, auc_interval(plan.level, part, mean), undefined
    else:
        out_of_bag = part.pooled_value(measure, of_class)
        yield "held_out_by_case", out_of_bag, default_interval(plan, part, measure, of_class), 0
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


def default_interval(plan: Plan, part: Judged, measure: str, of_class: int) -> Interval | None:
    """The default interval of a held-out value; None where none is offered."""
    if not offers_interval(part, of_class if measure == "sensitivity" else None):
        return None
    if measure == "balanced_accuracy":
        bounds = balanced_interval(plan.level, part)
    elif measure in ("accuracy", "sensitivity"):
        k = of_class if measure == "sensitivity" else None
        bounds = share_interval(plan.level, part, k)
    else:
        return None
    return bounds if bounds.defined else None
