"""A limit against literal right and wrong answers."""

import numpy as np
import pytest
from scipy.stats import beta

from evalcore.answers import Answers, Reduced
from evalcore.binomial import wilson
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off import CutOffRule
from evalcore.evaluation import evaluate
from evalcore.intervals import with_model_variance
from evalcore.judged_intervals import share_interval
from evalcore.limit import Limit
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES
from evalcore.verdict import Verdict, judge, overall, verdicts, verdicts_at_cut_off

from .checks import table_of
from .test_at_cut_off import scored

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


class TestAtCutOff:
    """Forty cases of each class, held out in halves in turn, twice; cut-offs of 0.25 throughout.

    Inner scores are 0.2 for a and 0.3 for b; held out, cases that are right at the cut-off have
    0.1 if they are of a and 0.4 if they are of b, the others the other way round. By the highest
    score all are a.
    """

    LABELS = np.arange(80) // 40
    COST = CutOffRule("b", "cost")
    LIMITS = (LIMIT, Limit("balanced_accuracy", 0.8), Limit("sensitivity", 0.8, "b"))

    def found(self, right, rule=COST, *, limits=LIMITS, measure="accuracy"):
        """Candidates that are right at the cut-off as said, (candidates, repeats, n)."""
        half = np.arange(80) % 2
        inner = np.where(self.LABELS, 0.3, 0.2)
        bags = [np.where(half == r % 2, np.nan, inner) for r in range(4)]
        given = {}
        for name, repeats in zip(("naive_bayes", "logistic"), right, strict=False):
            score = [np.where(np.asarray(r) == (self.LABELS == 1), 0.4, 0.1) for r in repeats]
            held = [np.where(half == r % 2, score[r // 2], np.nan) for r in range(4)]
            given[name] = held, bags, inner
        return scored(given, self.LABELS, rule, repeat=[0, 0, 1, 1], limits=limits, measure=measure)

    def always(self, rule=COST):
        return self.found(np.ones((1, 2, 80), dtype=bool), rule)

    @staticmethod
    def words(given):
        return [verdict.word for verdict in given]

    def test_answers_at_the_cut_off_are_judged(self):
        found = self.always()
        fall_short = ["shown to fall short"] * 3
        assert self.words(verdicts(found, "naive_bayes")) == fall_short
        at = verdicts_at_cut_off(found, "naive_bayes")
        assert self.words(at) == ["shown"] * 3
        assert [(v.value, v.n) for v in at] == [(1, 80), (1, 40), (1, 40)]
        # all right, and nothing varies: of 80 and of 40 the exact bound, 0.05 to the 1/n
        for verdict, n in ((at[0], 80), (at[2], 40)):
            exact = 0.05 ** (1 / n)
            assert verdict.at_least == pytest.approx(
                min(exact, wilson(1, n, level=0.9).low), rel=1e-12
            )
            assert verdict.at_most == 1
        none_right = self.found(np.zeros((1, 2, 80), dtype=bool))
        assert self.words(verdicts_at_cut_off(none_right, "naive_bayes")) == fall_short

    @pytest.mark.parametrize(("floor", "right"), [(0.9, True), (0.97, False)])
    def test_a_floor_too_high_for_the_bags_shows_nothing(self, floor, right):
        # twenty of b in a bag, forty in all: rank 2.1 of 20 for 0.9; 0.63 of 20 for 0.97, and so
        # every bag calls all, though of forty the rank is 1.23 and another cut-off goes to work
        rule = CutOffRule("b", "floor", floor=floor)
        limits = (
            Limit("sensitivity", 0.8, "b"), Limit("sensitivity", 0.8, "a"), *self.LIMITS[:2],
        )  # fmt: skip
        found = self.found(np.ones((1, 2, 80), dtype=bool), rule, limits=limits)
        at = verdicts_at_cut_off(found, "naive_bayes")
        assert [v.value for v in at] == ([1, 1, 1, 1] if right else [1, 0, 0.5, 0.5])
        assert self.words(at) == ["shown" if right else "not shown yet"] * 4
        assert np.isnan([(v.at_least, v.at_most) for v in at]).all() == (not right)
        assert found.at_cut_off("naive_bayes").on_all == 0.3

    def test_a_class_has_exact_bounds_at_a_cut_off(self):
        # of forty of b 33 are right the first time, another 33 and two fewer the second
        right = np.ones((1, 2, 80), dtype=bool)
        right[0, 0, 40:47] = right[0, 1, 45:54] = False
        found = self.found(right)
        (verdict,) = (v for v in verdicts_at_cut_off(found, "naive_bayes") if v.limit.of_class)
        part, p = found.at_cut_off("naive_bayes").part, 64 / 80
        assert verdict.value == pytest.approx(p, rel=1e-15)
        tau2 = part.cautious_tau2(1)
        n = 1 / (1 / 40 + tau2 / (p * (1 - p)))
        low, high = beta.ppf(0.05, p * n, n - p * n + 1), beta.ppf(0.95, p * n + 1, n - p * n)
        # never less cautious than 32 of 40
        low, high = min(low, beta.ppf(0.05, 32, 9)), max(high, beta.ppf(0.95, 33, 8))
        assert (verdict.at_least, verdict.at_most) == pytest.approx((low, high), rel=1e-9)
        # all cases keep Wilson's
        every = verdicts_at_cut_off(found, "naive_bayes")[0]
        score = with_model_variance(72 / 80, 80, part.cautious_tau2(None), level=0.9)
        assert every.at_least == pytest.approx(min(score.low, beta.ppf(0.05, 72, 9)), rel=1e-9)

    def test_none_without_a_cut_off(self):
        found = evaluation(first(40, 40), labels=[0, 1] * 20)
        assert verdicts_at_cut_off(found, "lda") == ()

    def test_chosen_on_these_cases_it_is_never_shown(self):
        chosen = verdicts_at_cut_off(self.always(CutOffRule("b", "fixed", at=0.25)), "naive_bayes")
        dated = CutOffRule("b", "fixed", at=0.25, set_on="2026-01-15")
        before = verdicts_at_cut_off(self.always(dated), "naive_bayes")
        assert self.words(before) == ["shown"] * 3
        assert self.words(chosen) == ["not shown yet"] * 3
        # the bounds would do
        assert [v.at_least for v in chosen] == [v.at_least for v in before]
        assert min(v.at_least for v in chosen) > 0.8
        assert overall(chosen) == "not shown yet"
        # what falls short with a cut-off picked by eye falls short
        high = CutOffRule("b", "fixed", at=0.5)
        fall_short = verdicts_at_cut_off(self.always(high), "naive_bayes")
        assert self.words(fall_short) == ["shown to fall short"] * 3

    def test_of_several_it_starts_from_the_rate_corrected_at_the_cut_off(self):
        rng = np.random.default_rng(3)
        right = [[rng.random(80) < 0.9] * 2 for _ in range(2)]
        found = self.found(right)
        values = [v.pooled_value("accuracy") for v in (at.part for at in found.beside.cut_offs)]
        best = ("naive_bayes", "logistic")[int(np.argmax(values))]
        verdict = verdicts_at_cut_off(found, best)[0]
        corrected = found.corrected("accuracy", at_cut_off=True).value
        assert verdict.value == max(values)
        # without correction for the cut-off it would start from 1/2, where all are called a
        assert 0.5 < corrected < verdict.value
        part, whole = found.at_cut_off(best).part, int(corrected * 80)
        cautious = with_model_variance(corrected, 80, part.cautious_tau2(None), level=0.9)
        exact = beta.ppf(0.05, whole, 80 - whole + 1)
        assert verdict.at_least == pytest.approx(min(cautious.low, exact), rel=1e-12)
        alone = self.found(right[int(np.argmax(values)) :][:1])
        (one, *_) = verdicts_at_cut_off(alone, "naive_bayes")
        assert one.value == verdict.value
        assert one.at_least > verdict.at_least

    def test_of_several_a_class_has_exact_bounds_at_the_corrected_rate(self):
        rng = np.random.default_rng(5)
        # models that differ from repeat to repeat, so that their variance decides the bound
        right = [[rng.random(80) < 0.98, rng.random(80) < 0.7] for _ in range(2)]
        found = self.found(right, measure="balanced_accuracy")
        best = found.corrected("sensitivity", "b", at_cut_off=True)
        verdict = verdicts_at_cut_off(found, best.candidate)[2]
        assert verdict.rate == best.value < verdict.value
        tau2 = found.at_cut_off(best.candidate).part.cautious_tau2(1)
        n = 1 / (1 / 40 + tau2 / (best.value * (1 - best.value)))
        low = beta.ppf(0.05, best.value * n, n - best.value * n + 1)
        assert n < 30
        assert low < wilson(best.value, n, level=0.9).low - 0.01
        assert verdict.at_least == pytest.approx(low, rel=1e-9)

    def test_balanced_accuracy_of_a_class_never_held_out_has_nobody_behind_it(self):
        limits = (Limit("balanced_accuracy", 0.8),)
        right = np.ones((1, 2, 40), dtype=bool)
        found = evaluation(right, labels=[0] * 30 + [1] * 10, limits=limits, never=range(30, 40))
        (verdict,) = verdicts(found, "lda")
        assert (verdict.word, verdict.n) == ("not shown yet", 0)
