"""Published intervals beside the default one, so that a reader may hold them against each other."""

from collections.abc import Iterator

import numpy as np

from evalcore import binomial, intervals
from evalcore.evaluation import Evaluation
from evalcore.figures import Estimate, Interval
from evalcore.judged import Judged
from evalcore.resampled_t import corrected_resampled_t, cv_normal
from evalcore.schemes import SCHEMES

SHOWN = {
    ("held_out_by_case", "accuracy"),
    ("held_out_by_case", "balanced_accuracy"),
    ("held_out_by_case", "sensitivity"),
    ("mean_of_rounds", "auc"),
}


def beside(evaluation: Evaluation, estimate: Estimate) -> Iterator[Interval]:
    """Other intervals for a held-out share right, of all or of one class.

    Binomial ones take the n behind the share as independent trials; they leave the model's
    variance out and are meant for reading beside the default, not instead. The corrected
    resampled t looks at the rounds and is offered where they are more than one and judge disjoint
    or random parts. Nothing is offered for rows of units, which are not independent.

    Parameters
    ----------
    evaluation : Evaluation
    estimate : Estimate
        One of `SHOWN`.
    """
    part = evaluation.part(estimate.candidate, estimate.scheme, estimate.counted_by)
    if part.units is not None or np.isnan(estimate.value):
        return
    if estimate.measure in ("balanced_accuracy", "auc"):
        yield _without_model_variance(evaluation, part, estimate)
        return
    level, n = evaluation.plan.level, estimate.n
    right = estimate.value * n
    yield binomial.wilson(estimate.value, n, level=level)
    yield binomial.wilson_corrected(right, n, level=level)
    yield binomial.clopper_pearson(right, n, level=level)
    yield binomial.agresti_coull(right, n, level=level)
    yield binomial.jeffreys(right, n, level=level)
    if SCHEMES[evaluation.plan.scheme(estimate.scheme).key].drawn:
        yield from _of_rounds(part, estimate, level, evaluation.table.classes)
    if estimate.measure == "accuracy":
        yield from _of_one_repeat(part, level)


def _without_model_variance(evaluation: Evaluation, part: Judged, estimate: Estimate) -> Interval:
    """The published form of the default interval: the model's variance left out."""
    level = evaluation.plan.level
    sizes = np.bincount(part.held.labels[~np.isnan(part.shares)]).tolist()
    if estimate.measure == "auc":
        return intervals.auc_score_type(estimate.value, sizes[1], sizes[0], level=level)
    recalls = [part.pooled_value("sensitivity", k) for k in range(part.n_classes)]
    parts = [binomial.wilson(p, n, level=level) for p, n in zip(recalls, sizes, strict=True)]
    return intervals.square_and_add(recalls, parts)


def _of_one_repeat(part: Judged, level: float) -> Iterator[Interval]:
    """Normal interval of the first repeat, where it judges every case once in several folds."""
    round_at, case_at = part.held.rounds.pairs
    first = part.held.rounds.repeat[round_at] == 0
    folds = round_at[first]
    if len(case_at[first]) != len(part.held.labels) or np.bincount(folds).min(initial=9) < 2:
        return
    bounds = cv_normal(part.held.correct[first], folds=folds, level=level)
    if bounds.defined and len(np.unique(folds)) > 1:
        low = max(0.0, bounds.low)
        yield Interval(low, max(low, min(1.0, bounds.high)), level, bounds.method)


def _of_rounds(
    part: Judged, estimate: Estimate, level: float, classes: tuple[str, ...]
) -> Iterator[Interval]:
    k = classes.index(estimate.of_class) if estimate.of_class else 0
    values = part.held_values(estimate.measure, k)
    rounds = part.held.rounds
    if len(values) < 2 or np.isnan(values).any():
        return
    n_train = float((rounds.train > 0).sum(axis=1).mean())
    found = corrected_resampled_t(
        values, n_train=n_train, n_test=float(rounds.test_sizes.mean()), level=level
    )
    if found.interval.defined:
        low, high = max(0.0, found.interval.low), min(1.0, found.interval.high)
        yield Interval(low, max(low, high), level, found.interval.method)


def of_headline(evaluation: Evaluation) -> Iterator[tuple[Estimate, Interval]]:
    """Every held-out share with its default interval, then the others beside it."""
    for estimate in evaluation.estimates:
        if (estimate.estimator, estimate.measure) not in SHOWN:
            continue
        if estimate.interval is None:
            continue
        yield estimate, estimate.interval
        for interval in beside(evaluation, estimate):
            yield estimate, interval
