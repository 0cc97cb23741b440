"""How often equally good candidates are told apart, and how much luck the winner's correction takes.

No models are fitted: answers are right or wrong by a case's difficulty, shared by all candidates,
the candidate's own view of the case, and how good its models happen to be: once for the table,
and anew in every round.

The settings were made steadier after a first run in which the formula without the error of the
model's variance failed, and after the formula was changed; so this is a check of the code, and no
independent evidence that 5 % is kept for fitted models.
"""

import math

import numpy as np
import pytest
from scipy import stats

from evalcore.comparison import compare
from evalcore.estimates import mean_correct
from evalcore.rounds import Rounds
from evalcore.selection import stratified_bags, winners_correction

pytestmark = pytest.mark.slow

FOLDS, REPEATS = 5, 20
SHARED, OWN = 1.5, 1.5  # spread of difficulty, in units of a single answer's own spread


def folds(n: int, rng: np.random.Generator) -> Rounds:
    """5-fold cross-validation repeated 20 times."""
    fold = np.concatenate([rng.permutation(n) % FOLDS + FOLDS * r for r in range(REPEATS)])
    out = np.zeros((FOLDS * REPEATS, n), dtype=np.uint8)
    out[fold, np.tile(np.arange(n), REPEATS)] = 1
    return Rounds(1 - out, out, np.repeat(np.arange(REPEATS), FOLDS))


def answers(
    names, rounds: Rounds, rng: np.random.Generator, *, good: float, models: float
) -> dict[str, np.ndarray]:
    """Right or wrong for candidates whose expected share right is the same."""
    round_at, case_at = rounds.pairs
    shared = SHARED * rng.normal(size=rounds.n_cases)
    right = {}
    for name in names:
        case = shared + OWN * rng.normal(size=rounds.n_cases)
        model = models * (rng.normal() + rng.normal(size=rounds.n_rounds))
        noise = rng.normal(size=len(case_at))
        right[name] = good + case[case_at] + model[round_at] + noise > 0
    return right


def expected_share(good: float, models: float) -> float:
    """Chance of a right answer over cases, tables and rounds."""
    return float(stats.norm.cdf(good / math.sqrt(1 + SHARED**2 + OWN**2 + 2 * models**2)))


def two_standard_errors(share: float, times: int) -> float:
    return 2 * math.sqrt(share * (1 - share) / times)


FAMILIES = [  # candidates, cases, spread of the models, about one or all pairs, families
    (2, 40, 0.4, "", 1200),
    (2, 200, 0.0, "", 800),
    (3, 100, 0.4, "", 800),
    (5, 60, 0.25, "a", 800),
    (8, 40, 0.4, "a", 800),
    (8, 200, 0.4, "a", 300),
    (6, 80, 0.4, "", 300),
]


@pytest.mark.parametrize(("candidates", "n", "models", "about", "families"), FAMILIES)
def test_families_of_equals(candidates, n, models, about, families):
    rng = np.random.default_rng([candidates, n, families])
    names = "abcdefgh"[:candidates]
    false = 0
    for _ in range(families):
        rounds = folds(n, rng)
        right = answers(names, rounds, rng, good=1.5, models=models)
        found = compare(list(names), right, rounds, about=about)
        false += any(d.call in ("better", "worse") for d in found)
    assert false / families <= 0.05 + two_standard_errors(0.05, families)


def test_the_models_variance_is_what_keeps_the_promise():
    rng = np.random.default_rng(11)
    times, false = 600, np.zeros(2)
    for _ in range(times):
        rounds = folds(120, rng)
        right = answers("ab", rounds, rng, good=1.5, models=0.5)
        (found,) = compare(["a", "b"], right, rounds)
        plain = stats.ttest_rel(*(mean_correct(right[name], rounds) for name in "ab")).pvalue
        false += [found.p < 0.05, plain < 0.05]
    with_it, without = false / times
    assert with_it <= 0.05 + two_standard_errors(0.05, times)
    assert without > 0.05 + 3 * two_standard_errors(0.05, times)


def test_a_real_difference_is_found():
    rng = np.random.default_rng(12)
    times, found = 100, 0
    for _ in range(times):
        rounds = folds(150, rng)
        right = answers("bc", rounds, rng, good=0.7, models=0.2)
        right |= answers("a", rounds, rng, good=2.8, models=0.2)
        calls = [d.call for d in compare(["a", "b", "c"], right, rounds, about="a")]
        assert "worse" not in calls
        found += calls == ["better", "better"]
    assert found >= 0.8 * times


@pytest.mark.parametrize(("candidates", "n"), [(2, 60), (5, 60), (8, 40), (8, 120)])
def test_the_winners_correction_takes_most_of_the_luck(candidates, n):
    rng = np.random.default_rng([candidates, n, 13])
    names, good, models = "abcdefgh"[:candidates], 0.9, 0.0
    truth, values = expected_share(good, models), []
    for _ in range(250):
        rounds = folds(n, rng)
        right = answers(names, rounds, rng, good=good, models=models)
        shares = np.column_stack([mean_correct(right[name], rounds) for name in names])
        labels = (np.arange(n) % 3 == 0).astype(np.intp)
        bags = stratified_bags(labels, rng=rng)
        found = winners_correction(labels, shares, bags)
        values.append((found.naive.accuracy - truth, found.corrected.accuracy - truth))
    (naive, corrected), errors = np.mean(values, axis=0), np.std(values, axis=0) / math.sqrt(250)
    assert naive > 4 * errors[0]
    assert abs(corrected) <= 0.4 * naive + 2 * errors[1]
