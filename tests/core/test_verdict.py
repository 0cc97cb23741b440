"""A limit against literal right and wrong answers."""

import numpy as np
import pytest
from scipy.stats import beta

from evalcore.answers import Answers, Reduced
from evalcore.binomial import wilson
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.evaluation import evaluate
from evalcore.intervals import with_model_variance
from evalcore.judged import share_interval
from evalcore.limit import Limit
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES
from evalcore.verdict import Verdict, judge, overall, verdicts

from .checks import table_of

LIMIT = Limit("accuracy", 0.8)


def evaluation(right, *, labels, limits=(LIMIT,), units=None, measure="accuracy", never=()):
    """Candidates that are right as said, (candidates, repeats, n), in halves held out in turn.

    Cases named in `never` are never held out.
    """
    right = np.asarray(right, dtype=bool)
    candidates, repeats, n = right.shape
    own = np.arange(n) if units is None else np.asarray(units)
    out = np.zeros((2 * repeats, n), dtype=np.uint8)
    for repeat in range(repeats):
        out[2 * repeat], out[2 * repeat + 1] = own % 2 == 0, own % 2 == 1
    out[:, list(never)] = 0
    rounds = Rounds(1 - out, out, np.repeat(np.arange(repeats), 2))
    table = table_of(list(labels), units=units, classes=("a", "b"))
    names = ("lda", "qda", "tree")[:candidates]
    plan = Plan(
        table.roles,
        (choose(SCHEMES, "cross_validation", folds=2, repeats=repeats),),
        tuple(choose(CANDIDATES, name) for name in names),
        answered_from="one",
        measure=measure,
        limits=tuple(limits),
    )
    counts = np.ones((2 * repeats, 2, 2))
    rest = dict.fromkeys(("case", "unit"), Reduced(counts, np.full(len(counts), 0.5)))
    round_at, case_at = rounds.pairs
    true, answers = np.asarray(labels)[case_at], {}
    for name, given in zip(names, right, strict=True):
        named = np.where(given[rounds.repeat[round_at], case_at], true, 1 - true)
        answers[name] = Answers(np.eye(2)[named], rest, dict.fromkeys(("case", "unit"), counts))
    scheme = plan.scheme_names[0]
    return evaluate(
        table, plan, {scheme: rounds},
        answers={(scheme, name): given for name, given in answers.items()},
        whole=answers, planned={scheme: len(counts)}, failures={},
    )  # fmt: skip


def first(n, *right):
    """The first so many right, in each repeat."""
    return [[np.arange(n) < r for r in right]]


def test_bounds_are_the_more_cautious_of_two_on_whole_units():
    n = 41
    found = evaluation(first(n, 36, 37), labels=[0] * 20 + [1] * 21)
    (verdict,) = verdicts(found, "lda")
    p, tau2 = 36.5 / n, found.judged[0].tau2
    score = with_model_variance(p, n, tau2, level=0.9)
    assert verdict.value == pytest.approx(p)
    assert verdict.at_least == pytest.approx(min(score.low, beta.ppf(0.05, 36, n - 36 + 1)))
    assert verdict.at_most == pytest.approx(max(score.high, beta.ppf(0.95, 37 + 1, n - 37)))
    assert verdict.at_least < score.low
    assert verdict.at_most > score.high


def test_of_several_it_starts_from_the_corrected_rate():
    n, rng = 60, np.random.default_rng(1)
    right = np.stack([[rng.random(n) < 0.8] * 2 for _ in range(3)])
    found = evaluation(right, labels=[0, 1] * 30)
    corrected = found.corrected("accuracy").value
    best = max(found.candidates, key=lambda name: found.estimate("accuracy", name).value)
    (verdict,) = verdicts(found, best)
    assert corrected < verdict.value
    whole = int(corrected * n)
    assert verdict.at_least <= beta.ppf(0.05, whole, n - whole + 1) + 1e-12
    assert verdict.at_least <= wilson(corrected, n, level=0.9).low + 1e-12


def test_of_rows_of_units_too():
    rng, units = np.random.default_rng(2), np.repeat(np.arange(30), 3)
    # models that differ from repeat to repeat, so that their variance decides the bound
    right = np.stack([[rng.random(90) < 0.98, rng.random(90) < 0.6] for _ in range(3)])
    found = evaluation(right, labels=np.repeat([0, 1] * 15, 3), units=units)
    best = max(found.candidates, key=lambda name: found.estimate("accuracy", name).value)
    luck = found.estimate("accuracy", best).value - found.corrected("accuracy").value
    (verdict,) = verdicts(found, best)
    assert luck > 0
    assert verdict.n == 30
    own = share_interval(0.9, found.part(best, found.scheme), cautious=True)
    assert verdict.at_least == pytest.approx(own.low - luck)


def test_balanced_accuracy_starts_from_the_corrected_value_too():
    n, rng = 60, np.random.default_rng(1)
    right = np.stack([[rng.random(n) < 0.8] * 2 for _ in range(3)])
    limit = Limit("balanced_accuracy", 0.8)
    found = evaluation(right, labels=[0, 1] * 30, limits=(limit,), measure="balanced_accuracy")
    names = found.candidates
    best = max(names, key=lambda name: found.estimate("balanced_accuracy", name).value)
    (several,) = verdicts(found, best)
    alone = evaluation(
        right[[names.index(best)]], labels=[0, 1] * 30, limits=(limit,), measure="balanced_accuracy"
    )
    (one,) = verdicts(alone, "lda")
    assert one.value == several.value
    assert several.at_least < one.at_least


@pytest.mark.parametrize("candidates", [1, 2])
def test_a_class_never_held_out_is_not_shown(candidates):
    limits = (Limit("sensitivity", 0.8, "b"), Limit("balanced_accuracy", 0.8), LIMIT)
    labels = [0] * 30 + [1] * 10
    right = np.ones((candidates, 2, 40), dtype=bool)
    found = evaluation(right, labels=labels, limits=limits, never=range(30, 40))
    words = [v.word for v in verdicts(found, "lda")]
    assert words[:2] == ["not shown yet"] * 2


def test_overall():
    def words(*given):
        return overall(tuple(Verdict(LIMIT, w, 0.9, 0.8, 1.0, 50, 0.9) for w in given))

    assert words() is None
    assert words("shown", "shown") == "shown"
    assert words("shown", "not shown yet") == "not shown yet"
    assert words("shown", "not shown yet", "shown to fall short") == "shown to fall short"


def test_judge():
    nan = float("nan")
    assert judge(0.95, 0.9, 1, limit=0.9, n=10) == "shown"
    assert judge(0.95, 0.9, 1, limit=0.9, n=9) == "not shown yet"
    assert judge(0.5, 0.4, 0.6, limit=0.9, n=9) == "shown to fall short"
    assert judge(nan, nan, nan, limit=0.9, n=50) == "not shown yet"


def test_without_a_correction_the_best_of_several_is_not_shown():
    # class b is judged on one unit, so no resample has it on both sides
    right = np.ones((2, 2, 40), dtype=bool)
    found = evaluation(right, labels=[0] * 30 + [1] * 10, never=range(31, 40))
    assert np.isnan(found.corrected("accuracy").value)
    assert verdicts(found, "lda")[0].word == "not shown yet"
