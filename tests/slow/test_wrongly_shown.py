"""How often the best of several candidates that just miss a limit is wrongly called shown.

No models are fitted. Every candidate is right on a case of class a by chance, with a true rate equal
to the limit; whoever comes out best is judged. A case is right or wrong by itself (the least help
for the correction: nothing but luck tells candidates apart), or partly anew in every round.
"""

import math
from dataclasses import replace

import numpy as np
import pytest

from evalcore.answers import Answers, Reduced
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.evaluation import Evaluation, evaluate
from evalcore.limit import Limit
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES
from evalcore.verdict import verdicts
from tests.core.checks import table_of

pytestmark = pytest.mark.slow

FOLDS, REPEATS = 5, 4
NAMES = ("lda", "qda", "naive_bayes", "logistic", "tree", "forest", "svm", "boosting")


def folds(labels: np.ndarray, rng: np.random.Generator) -> Rounds:
    """Stratified 5-fold cross-validation, 4 times."""
    out = np.zeros((FOLDS * REPEATS, len(labels)), dtype=np.uint8)
    for repeat in range(REPEATS):
        for k in np.unique(labels):
            members = rng.permutation(np.flatnonzero(labels == k))
            out[FOLDS * repeat + np.arange(len(members)) % FOLDS, members] = 1
    return Rounds(1 - out, out, np.repeat(np.arange(REPEATS), FOLDS))


def right(rates: np.ndarray, rounds: Rounds, noise: float, rng: np.random.Generator) -> np.ndarray:
    """Whether each held-out answer is right: settled by the case, or with chance `noise` anew."""
    case_at = rounds.pairs[1]
    settled = rng.random(rounds.n_cases) < rates
    anew = rng.random(len(case_at)) < rates[case_at]
    return np.where(rng.random(len(case_at)) < noise, anew, settled[case_at])


def made(
    labels: np.ndarray, plan: Plan, rates: np.ndarray, *, noise: float, rng: np.random.Generator
) -> Evaluation:
    """An evaluation of candidates whose true rates on the classes are all the same."""
    table, rounds = table_of(labels.tolist(), classes=("a", "b")), folds(labels, rng)
    counts = np.ones((rounds.n_rounds, 2, 2))
    reduced = Reduced(counts, np.full(len(counts), 0.5))
    ways = ("case", "unit")
    answers = {}
    for name in plan.candidate_names:
        is_right = right(rates[labels], rounds, noise, rng)
        named = np.where(is_right, labels[rounds.pairs[1]], 1 - labels[rounds.pairs[1]])
        answers[name] = Answers(
            np.eye(2)[named], dict.fromkeys(ways, reduced), dict.fromkeys(ways, counts)
        )
    scheme = plan.scheme_names[0]
    return evaluate(
        table,
        plan,
        {scheme: rounds},
        answers={(scheme, name): given for name, given in answers.items()},
        whole=answers,
        planned={scheme: rounds.n_rounds},
        failures={},
    )


def plan_for(candidates: int, limit: Limit, measure: str) -> Plan:
    return Plan(
        table_of([0, 1]).roles,
        (choose(SCHEMES, "cross_validation", folds=FOLDS, repeats=REPEATS),),
        tuple(choose(CANDIDATES, name) for name in NAMES[:candidates]),
        measure=measure,
        limits=(limit,),
    )


def best(evaluation: Evaluation, measure: str, of_class: str) -> str:
    def value(name: str) -> float:
        return evaluation.estimate(measure, name, of_class=of_class).value

    return max(evaluation.candidates, key=value)


LIMITS = {  # the limit, the measure that names the winner, cases of a and of b
    "accuracy": (Limit("accuracy", 0.85), "accuracy", (60, 40)),
    "class": (Limit("sensitivity", 0.85, "a"), "accuracy", (100, 20)),
    "balanced": (Limit("balanced_accuracy", 0.85), "balanced_accuracy", (60, 60)),
}
TIMES = {1: 600, 3: 500, 8: 400}  # tables


def share_shown(
    case: str, candidates: int, *, times: int, noise: float = 0.0, rate: float | None = None
) -> tuple[float, float]:
    """Share of tables whose best candidate is called shown; the same without winner's correction.

    All candidates have the same true rate: the limit's unless given.
    """
    limit, measure, sizes = LIMITS[case]
    rng = np.random.default_rng([candidates, *sizes, times, round(100 * noise)])
    labels, plan = np.repeat([0, 1], sizes).astype(np.intp), plan_for(candidates, limit, measure)
    rates, shown = np.full(2, limit.least if rate is None else rate), np.zeros(2)
    for _ in range(times):
        found = made(labels, plan, rates, noise=noise, rng=rng)
        winner = best(found, limit.measure, limit.of_class)
        as_selected = tuple(e for e in found.estimates if e.estimator != "winner_corrected")
        for at, judged in enumerate((found, replace(found, estimates=as_selected))):
            (verdict,) = verdicts(judged, winner)
            shown[at] += verdict.word == "shown"
    corrected, naive = (shown / times).tolist()
    return corrected, naive


def allowed(times: int) -> float:
    """5 % and two Monte-Carlo standard errors."""
    return 0.05 + 2 * math.sqrt(0.05 * 0.95 / times)


@pytest.mark.parametrize(
    ("case", "candidates"),
    [
        *((case, k) for case in ("accuracy", "class") for k in TIMES),
        ("balanced", 1),
        ("balanced", 3),
        ("balanced", 8),
    ],
)
def test_at_the_limit_the_best_is_seldom_called_shown(case, candidates):
    times = TIMES[candidates]
    shown, _ = share_shown(case, candidates, times=times)
    assert shown <= allowed(times)


@pytest.mark.parametrize("case", ["accuracy", "balanced"])
def test_nor_where_answers_change_from_round_to_round(case):
    shown, _ = share_shown(case, 8, times=200, noise=0.3)
    assert shown <= allowed(200)


def test_the_winners_correction_is_what_keeps_the_promise():
    shown, naive = share_shown("accuracy", 8, times=200)
    assert shown <= allowed(200)
    assert naive > 0.05 + 3 * (allowed(200) - 0.05)


def test_who_is_well_above_the_limit_is_called_shown():
    shown, _ = share_shown("accuracy", 8, times=60, rate=0.97)
    assert shown >= 0.9
