"""Published intervals beside the default one, so that a reader may hold them against each other."""

from collections.abc import Iterator

import numpy as np

from evalcore import binomial
from evalcore.evaluation import Evaluation
from evalcore.figures import Estimate, Interval
from evalcore.judged import Judged
from evalcore.resampled_t import corrected_resampled_t


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
        By case, of accuracy or a class's sensitivity.
    """
    part = evaluation.part(estimate.candidate, estimate.scheme, estimate.counted_by)
    if part.units is not None or np.isnan(estimate.value):
        return
    level, n = evaluation.plan.level, estimate.n
    right = estimate.value * n
    yield binomial.wilson(estimate.value, n, level=level)
    yield binomial.wilson_corrected(right, n, level=level)
    yield binomial.clopper_pearson(right, n, level=level)
    yield binomial.agresti_coull(right, n, level=level)
    yield binomial.jeffreys(right, n, level=level)
    yield from _of_rounds(part, estimate, level, evaluation.table.classes)


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
        if estimate.estimator != "held_out_by_case" or estimate.measure not in (
            "accuracy",
            "sensitivity",
        ):
            continue
        if estimate.interval is not None:
            yield estimate, estimate.interval
        for interval in beside(evaluation, estimate):
            yield estimate, interval
