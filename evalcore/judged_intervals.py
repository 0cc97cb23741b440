"""The default intervals of one candidate under one scheme."""

import math

import numpy as np

from evalcore import intervals, model_variance
from evalcore.figures import Interval
from evalcore.judged import Judged
from evalcore.schemes import LEAST_BLOCKS


def offers_interval(part: Judged, of_class: int | None = None) -> bool:
    """Whether rounds are like the model in use, and blocks, if any, are enough to tell anything.

    Shares of classes swing with the class that a model favours, so they say little about one that
    always names the same (own simulation).
    """
    if part.cut_offs == "unlike" or (of_class is not None and part.always_names is not None):
        return False
    return part.units is None or part.blocks_with(None) >= LEAST_BLOCKS


def share_interval(
    level: float,
    part: Judged,
    of_class: int | None = None,
    *,
    variance: bool = True,
    cautious: bool = False,
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
    cautious : bool
        Whether its standard error is added to it, as verdicts ask.
    """
    chosen = ~np.isnan(part.shares)
    if of_class is not None:
        chosen &= part.held.labels == of_class
    if not chosen.any() or part.cut_offs == "unlike":
        return Interval(math.nan, math.nan, level, "wilson")
    tau2 = math.nan
    if variance:
        tau2 = part.tau2 if of_class is None else part.tau2_of(of_class)
        tau2 = part.cautious_tau2(of_class) if cautious else tau2
    shares = part.shares[chosen]
    if part.units is not None:
        if len(np.unique(part.units[chosen])) < LEAST_BLOCKS:
            return Interval(math.nan, math.nan, level, "rows_of_units")
        within = model_variance.cluster_variance_by_repeat(
            part.held.correct, part.held.rounds, part.units, chosen=chosen
        )
        return intervals.rows_of_units(
            shares, part.units[chosen], tau2, level=level, cluster=within
        )
    return at_rate(
        part, float(shares.mean()), len(shares), tau2=tau2, level=level, of_class=of_class
    )


def at_rate(
    part: Judged, rate: float, n: int, *, tau2: float, level: float, of_class: int | None
) -> Interval:
    """The interval of independent cases at a rate: exact for a class at learned cut-offs."""
    if part.cut_offs == "learned" and of_class is not None:
        return intervals.exact_with_model_variance(rate, n, tau2, level=level)
    return intervals.with_model_variance(rate, n, tau2, level=level)


def balanced_interval(level: float, part: Judged) -> Interval:
    """The default interval for balanced accuracy: the classes' own, by square-and-add."""
    parts = [share_interval(level, part, k, variance=False) for k in range(part.n_classes)]
    recalls = [part.pooled_value("sensitivity", k) for k in range(part.n_classes)]
    return intervals.square_and_add(recalls, parts, part.tau2_balanced)


def auc_interval(level: float, part: Judged, value: float) -> Interval | None:
    """Interval for an AUC; None for more classes or dependent cases, since none keeps its word."""
    if part.n_classes != 2 or part.units is not None or math.isnan(value):
        return None
    known = part.held.labels[~np.isnan(part.shares)]
    return intervals.auc_score_type(
        value, int((known == 1).sum()), int((known == 0).sum()), part.tau2_auc, level=level
    )
