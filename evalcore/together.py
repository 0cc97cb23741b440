"""All candidates on the same rounds: the winner's correction, and who differs from whom."""

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from evalcore.candidates import CANDIDATES
from evalcore.comparison import Difference, compare
from evalcore.figures import Estimate, Interval
from evalcore.judged import Judged
from evalcore.judged_intervals import at_rate, offers_interval
from evalcore.paired_tests import mcnemar
from evalcore.plan import Plan, generator
from evalcore.resampled_t import corrected_resampled_t, correlated_t_posterior
from evalcore.selection import Primary, WinnersCorrection, stratified_bags, winners_correction
from evalcore.table import Table

RESAMPLES = 500
ESTIMATOR = "winner_corrected"


def learned(plan: Plan, parts: Sequence[Judged]) -> list[Judged]:
    """Those candidates that look at something: the ones one may choose between."""
    return [p for p in parts if not CANDIDATES[plan.candidate(p.candidate).key].baseline]


def winner(table: Table, plan: Plan, parts: Sequence[Judged]) -> WinnersCorrection | None:
    """What the best of several candidates is worth; None if there was nothing to choose.

    Parameters
    ----------
    table : Table
    plan : Plan
    parts : sequence of Judged
        Every candidate under one scheme, counted one way.
    """
    choice = learned(plan, parts)
    if len(choice) < 2:
        return None
    shares = np.column_stack([part.shares for part in choice])
    rng = generator(plan.seed, "winner's correction")
    # large tables need fewer resamples: each says more, and all are held in memory
    resamples = max(50, min(RESAMPLES, 2_500_000 // table.n_cases))
    if parts[0].counted_by == "case" and table.has_units:
        # rows of a unit are drawn together
        bags = stratified_bags(table.unit_labels, rng=rng, resamples=resamples)[:, table.units]
    else:
        bags = stratified_bags(choice[0].held.labels, rng=rng, resamples=resamples)
    primary: Primary = "accuracy" if plan.measure == "accuracy" else "balanced_accuracy"
    return winners_correction(
        choice[0].held.labels, shares, bags, primary=primary, n_classes=table.n_classes
    )


def winner_estimates(
    table: Table, plan: Plan, parts: Sequence[Judged], *, estimator: str = ESTIMATOR
) -> Iterator[Estimate]:
    """The corrected figures of the best candidate, with the interval at the corrected value."""
    found = winner(table, plan, parts)
    if found is None:
        return
    part = learned(plan, parts)[found.winner]
    known = ~np.isnan(part.shares)
    values: list[tuple[str, str, float, int | None]] = [
        ("accuracy", "", found.corrected.accuracy, None),
        ("balanced_accuracy", "", found.corrected.balanced_accuracy, None),
    ]
    values += [
        ("sensitivity", name, float(found.corrected.recalls[k]), k)
        for k, name in enumerate(table.classes)
    ]
    for measure, name, value, k in values:
        n = int((known if k is None else known & (part.held.labels == k)).sum())
        yield Estimate(
            value,
            None if measure == "balanced_accuracy" else _interval(plan, part, value, n, k),
            measure,
            part.candidate,
            part.scheme,
            estimator,
            name,
            part.counted_by,
            n,
            part.held.rounds.n_rounds,
            0,
        )


def _interval(plan: Plan, part: Judged, value: float, n: int, k: int | None) -> Interval | None:
    """With model variance at the corrected value, for independent cases."""
    if part.units is not None or not offers_interval(part, k) or math.isnan(value):
        return None
    tau2 = part.tau2 if k is None else part.tau2_of(k)
    return at_rate(part, value, n, tau2=tau2, level=plan.level, of_class=k)


def differences(
    plan: Plan, parts: Sequence[Judged], *, about: str = "", delta: float = 0.02
) -> tuple[Difference, ...]:
    """Paired differences of shares right between candidates, on the same rounds.

    Parameters
    ----------
    plan : Plan
    parts : sequence of Judged
        Every candidate under one scheme, counted one way.
    about : str
        Compare this candidate with all others; all pairs if empty.
    delta : float
        Largest difference that does not matter.
    """
    choice = learned(plan, parts)
    if len(choice) < 2:
        return ()
    return compare(
        [part.candidate for part in choice],
        {part.candidate: part.held.correct for part in choice},
        choice[0].held.rounds,
        about=about if about in {part.candidate for part in choice} else "",
        units=choice[0].units,
        level=plan.level,
        delta=delta,
    )


@dataclass(frozen=True)
class RoundTests:
    """Published tests of one pair beside the paired difference.

    Attributes
    ----------
    mcnemar_p : float
        McNemar's test on one answer a case (first repeat), exact with under 25 discordant.
    corrected_t_p : float
        Corrected resampled t on differences of rounds; nan without at least two that differ.
    worse, equal, better : float
        Posterior of the Bayesian correlated t: the first is worse, practically equal, better.
    """

    mcnemar_p: float
    corrected_t_p: float
    worse: float
    equal: float
    better: float


def round_tests(parts: Sequence[Judged], found: Difference, *, delta: float = 0.02) -> RoundTests:
    """McNemar, corrected resampled t and Bayesian correlated t of one pair's share right."""
    by_name = {part.candidate: part for part in parts}
    first, second = by_name[found.first], by_name[found.second]
    between = first.held_values("accuracy") - second.held_values("accuracy")
    rounds = first.held.rounds
    n_test = float(rounds.test_sizes.mean())
    n_train = float((rounds.train > 0).sum(axis=1).mean())
    between = between[~np.isnan(between)]
    mcnemar_p = mcnemar(found.only_first, found.only_second).p
    if len(between) < 2:
        return RoundTests(mcnemar_p, math.nan, math.nan, math.nan, math.nan)
    t = corrected_resampled_t(between, n_train=n_train, n_test=n_test)
    posterior = correlated_t_posterior(between, rho=n_test / (n_train + n_test), rope=delta)
    return RoundTests(mcnemar_p, t.p, posterior.left, posterior.rope, posterior.right)
