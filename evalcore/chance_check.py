"""Whether candidates beat chance: their figures among those of permuted labels."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from evalcore.answers import HeldOut
from evalcore.chance import MajorityTest, PermutationTest, majority_test, permutation_test
from evalcore.figures import Estimate
from evalcore.judged import Judged
from evalcore.measures import Floats
from evalcore.permuted import chance_figure, chance_rounds
from evalcore.plan import Plan
from evalcore.together import learned

ESTIMATOR, BEST = "chance_check", "chance_check_best"
MAJORITY = "majority_test"


@dataclass(frozen=True, eq=False)
class ChanceCheck:
    """One candidate, or the best of all, against permuted labels.

    Attributes
    ----------
    candidate : str
        The best one's name where `best`.
    best : bool
        Whether each permuted table's best figure is what it is held against: choice inside.
    measure : str
    observed : float
        Over the first rounds, as many as each permuted table went through.
    rounds : int
    permuted : ndarray, shape (m,)
        Figures of permuted tables; nan counts as at least as good.
    test : PermutationTest
    """

    candidate: str
    best: bool
    measure: str
    observed: float
    rounds: int
    permuted: Floats
    test: PermutationTest


def chance_checks(plan: Plan, parts: Sequence[Judged], figures: Floats) -> tuple[ChanceCheck, ...]:
    """Every candidate that looks at features, and the best of them where there are several.

    Parameters
    ----------
    plan : Plan
    parts : sequence of Judged
        Every candidate under the headline's scheme and counting.
    figures : ndarray, shape (m, C)
        Of permuted tables, in the order of the plan's candidates.
    """
    chosen = learned(plan, parts)
    if not len(figures) or not chosen:
        return ()
    places = [plan.candidate_names.index(part.candidate) for part in chosen]
    observed = [chance_figure(_first_rounds(part.held), plan.choosing_measure) for part in chosen]
    rounds = chance_rounds(chosen[0].held.rounds).n_rounds
    found = [
        ChanceCheck(
            part.candidate,
            False,
            plan.choosing_measure,
            value,
            rounds,
            figures[:, place],
            permutation_test(value, figures[:, place]),
        )
        for part, place, value in zip(chosen, places, observed, strict=True)
    ]
    if len(chosen) > 1 and not np.isnan(observed).all():
        at = int(np.nanargmax(observed))
        # a table on which any candidate failed counts as at least as good
        best = figures[:, places].max(axis=1)
        test = permutation_test(observed[at], best)
        name = chosen[at].candidate
        found.append(
            ChanceCheck(name, True, plan.choosing_measure, observed[at], rounds, best, test)
        )
    return tuple(found)


def _first_rounds(held: HeldOut) -> HeldOut:
    """Held-out answers of the rounds that the chance check looks at."""
    rounds = chance_rounds(held.rounds)
    return HeldOut(held.labels, rounds, held.scores[: len(rounds.pairs[0])])


def majority_of(part: Judged) -> MajorityTest:
    """The share right against the majority share, on one answer a unit: the first repeat's."""
    rounds = part.held.rounds
    first = rounds.repeat[rounds.pairs[0]] == rounds.repeat[0]
    true = part.held.true[first]
    largest = int(np.bincount(true, minlength=1).max())
    return majority_test(int(part.held.correct[first].sum()), len(true), largest_class=largest)


def chance_estimates(parts: Sequence[Judged], checks: Sequence[ChanceCheck]) -> Iterator[Estimate]:
    """p-values and what they rest on; m stands under rounds."""
    by_name = {part.candidate: part for part in parts}
    for check in checks:
        permuted = check.permuted[~np.isnan(check.permuted)]
        lacking = len(check.permuted) - len(permuted)
        middle = float(np.median(permuted)) if len(permuted) else np.nan
        estimator = BEST if check.best else ESTIMATOR
        part = by_name[check.candidate]
        n = int((chance_rounds(part.held.rounds).times_tested > 0).sum())
        for name, value in (
            ("p", check.test.p),
            (check.measure, check.observed),
            (f"{check.measure}_permuted_median", middle),
        ):
            yield _figure(
                part, estimator, name, value, n=n, rounds=check.test.permutations, lacking=lacking
            )


def majority_estimates(parts: Sequence[Judged]) -> Iterator[Estimate]:
    """The majority-share test of every candidate that looks at features."""
    for part in parts:
        if part.units is not None:
            continue  # rows of a unit are no independent trials
        found, rounds = majority_of(part), part.held.rounds
        first = rounds.repeat == rounds.repeat[0]
        n = int(rounds.test_sizes[first].sum())
        for name, value in (
            ("p", found.p),
            ("accuracy", found.accuracy),
            ("majority_share", found.majority_share),
        ):
            yield _figure(part, MAJORITY, name, value, n=n, rounds=int(first.sum()), lacking=0)


def _figure(
    part: Judged, estimator: str, name: str, value: float, *, n: int, rounds: int, lacking: int
) -> Estimate:
    return Estimate(
        value, None, name, part.candidate, part.scheme, estimator, "", part.counted_by, n, rounds,
        lacking,
    )  # fmt: skip
