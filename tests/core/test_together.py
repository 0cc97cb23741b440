"""What the best of several is worth, as an evaluation reports it."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import beta

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.engine import run, tasks
from evalcore.evaluation import evaluate
from evalcore.intervals import with_model_variance
from evalcore.limit import Limit
from evalcore.plan import Plan, generator
from evalcore.resampled_t import corrected_resampled_t, correlated_t_posterior
from evalcore.schemes import SCHEMES
from evalcore.selection import stratified_bags, winners_correction
from evalcore.together import differences, learned, round_tests, winner, winner_estimates
from evalcore.verdict import verdicts

from .checks import carried_out, table_of
from .test_judged import judged_of
from .test_verdict import evaluation

SCHEME = "cross_validation"


def corrected_figures(found, bags, primary="accuracy"):
    """Value of every corrected estimate from selection alone, by measure and class."""
    parts = found.parts()
    shares = np.column_stack([part.shares for part in learned(found.plan, parts)])
    of = winners_correction(parts[0].held.labels, shares, bags, primary=primary)
    figures = {("sensitivity", name): of.corrected.recalls[k] for k, name in enumerate("ab")}
    figures["accuracy", ""] = of.corrected.accuracy
    figures["balanced_accuracy", ""] = of.corrected.balanced_accuracy
    return of, figures


def random_right(n, candidates=3, seed=1):
    rng = np.random.default_rng(seed)
    return rng.random((candidates, 2, n)) < 0.75


def drawn(found, labels, resamples=500):
    rng = generator(found.plan.seed, "winner's correction")
    return stratified_bags(labels, rng=rng, resamples=resamples)


@pytest.mark.parametrize("primary", ["accuracy", "balanced_accuracy"])
def test_values_and_intervals(primary):
    # lda is good at the large class, qda at the small one
    labels = np.array([0] * 40 + [1] * 20)
    chance = np.where(labels == 0, [[1.0], [0.7]], [[0.5], [0.95]])
    right = np.random.default_rng(0).random((2, 2, 60)) < chance[:, None]
    # every second case of b flips from repeat to repeat, so that models vary, in b most
    right[:, 0, 50:], right[:, 1, 50:] = True, False
    right[1, 1, 51:] = True
    found = evaluation(right, labels=labels, measure=primary)
    of, figures = corrected_figures(found, drawn(found, labels), primary)
    best = ("lda", "qda")[of.winner]
    assert best == {"accuracy": "lda", "balanced_accuracy": "qda"}[primary]
    estimates = list(winner_estimates(found.table, found.plan, found.parts()))
    assert {(e.measure, e.of_class): e.value for e in estimates} == figures
    part = found.part(best, SCHEME)
    assert len({part.tau2, part.tau2_of(0), part.tau2_of(1)}) == 3 or primary != "accuracy"
    for e in estimates:
        n, k = {"": (60, None), "a": (40, 0), "b": (20, 1)}[e.of_class]
        assert (e.candidate, e.scheme, e.estimator) == (best, SCHEME, "winner_corrected")
        assert (e.counted_by, e.n, e.rounds, e.undefined_rounds) == ("case", n, 4, 0)
        if e.measure == "balanced_accuracy":
            assert e.interval is None
            continue
        tau2 = part.tau2 if k is None else part.tau2_of(k)
        assert e.interval == with_model_variance(e.value, n, tau2, level=0.95)
    assert found.winner.measure == primary
    assert found.winner.value == figures[primary, ""]


class TestAtCutOffs:
    """The same right answers, taken as if each round had learned a cut-off."""

    LABELS = np.array([0] * 24 + [1] * 18)

    def figures(self, cut_offs):
        found = evaluation(random_right(42, seed=3), labels=self.LABELS)
        parts = [replace(part, cut_offs=cut_offs) for part in found.parts()]
        return parts, list(winner_estimates(found.table, found.plan, parts))

    def test_of_a_class_the_interval_is_exact(self):
        parts, given = self.figures("learned")
        _, by_score = self.figures("none")
        assert [e.value for e in given] == [e.value for e in by_score]
        assert given[0].interval == by_score[0].interval
        assert given[1].interval is None
        part = next(p for p in parts if p.candidate == given[0].candidate)
        for k, e in enumerate(given[2:]):
            spread = e.value * (1 - e.value)
            n = spread / (spread / e.n + part.tau2_of(k))
            low = beta.ppf(0.025, e.value * n, n - e.value * n + 1)
            high = beta.ppf(0.975, e.value * n + 1, n - e.value * n)
            assert (e.interval.low, e.interval.high) == pytest.approx((low, high), rel=1e-9)
            assert e.interval.method == "exact_model_variance"

    def test_unlike_the_one_in_use_there_is_none(self):
        _, by_score = self.figures("none")
        _, given = self.figures("unlike")
        assert [e.interval is None for e in by_score] == [False, True, False, False]
        assert [e.interval for e in given] == [None] * 4
        assert [e.value for e in given] == [e.value for e in by_score]


def test_auc_counts_as_balanced_accuracy():
    labels = np.array([0] * 30 + [1] * 12)
    given = {"labels": labels}
    by_auc = evaluation(random_right(42), measure="auc", **given)
    balanced = evaluation(random_right(42), measure="balanced_accuracy", **given)
    assert by_auc.winner.measure == "balanced_accuracy"
    assert by_auc.winner.value == balanced.winner.value


def test_rows_of_a_unit_are_drawn_together():
    units = np.repeat(np.arange(20), 3)
    labels = np.repeat([0, 1] * 10, 3)
    found = evaluation(random_right(60), labels=labels, units=units)
    bags = drawn(found, labels[::3])
    _, figures = corrected_figures(found, bags[:, units])
    _, apart = corrected_figures(found, drawn(found, labels))
    estimates = list(winner_estimates(found.table, found.plan, found.parts()))
    assert {(e.measure, e.of_class): e.value for e in estimates} == figures
    assert figures["accuracy", ""] != apart["accuracy", ""]
    assert {e.interval for e in estimates} == {None}


def test_units_counted_as_such_are_drawn_themselves():
    units = np.repeat(np.arange(20), 3)
    labels = np.repeat([0, 1] * 10, 3)
    found = evaluation(random_right(60), labels=labels, units=units)
    parts = found.parts(SCHEME, "unit")
    shares = np.column_stack([part.shares for part in parts])
    of = winners_correction(labels[::3], shares, drawn(found, labels[::3]))
    estimates = list(winner_estimates(found.table, found.plan, parts))
    assert estimates[0].value == of.corrected.accuracy
    assert (estimates[0].n, estimates[0].counted_by) == (20, "unit")
    assert estimates[0].interval is not None


def test_fewer_resamples_of_a_large_table():
    n = 10_000
    labels = np.arange(n) % 2
    plan = evaluation(random_right(12, 2), labels=[0, 1] * 6).plan
    right = np.random.default_rng(0).random((2, 2, n)) < 0.8
    parts = [
        judged_of(np.where(right[c], labels, 1 - labels), labels, candidate=name)
        for c, name in enumerate(("lda", "qda"))
    ]
    assert len(winner(table_of(labels), plan, parts).chosen) == 250


def test_baselines_are_not_chosen_among():
    rng = np.random.default_rng(6)
    labels = np.array([0] * 24 + [1] * 12)
    table = table_of(labels, features=rng.normal(size=(36, 2)) + labels[:, None])
    names = ("majority", "lda", "naive_bayes")
    scheme = choose(SCHEMES, "cross_validation", folds=3, repeats=2)

    def plan(*keys):
        return Plan(table.roles, (scheme,), tuple(choose(CANDIDATES, key) for key in keys))

    found = carried_out(table, plan(*names))[0]
    parts = found.parts()
    assert [p.candidate for p in learned(found.plan, parts)] == ["lda", "naive_bayes"]
    _, figures = corrected_figures(found, drawn(found, labels), "balanced_accuracy")
    best = max(names[1:], key=lambda c: found.estimate("balanced_accuracy", c).value)
    assert (found.winner.candidate, found.winner.value) == (
        best, figures["balanced_accuracy", ""],
    )  # fmt: skip
    assert [(d.first, d.second) for d in differences(found.plan, parts)] == [("lda", "naive_bayes")]
    alone = carried_out(table, plan("majority", "lda"))[0]
    assert winner(table, alone.plan, alone.parts()) is None
    assert alone.winner is None
    assert differences(alone.plan, alone.parts()) == ()


def test_differences_are_about_the_named_candidate():
    found = evaluation(random_right(40), labels=[0, 1] * 20)
    parts = found.parts()
    about = differences(found.plan, parts, about="qda")
    assert [(d.first, d.second) for d in about] == [("qda", "lda"), ("qda", "tree")]
    # one that is not among them, such as a baseline, compares all
    assert len(differences(found.plan, parts, about="majority")) == 3
    means = [part.shares.mean() for part in parts]
    assert about[0].value == pytest.approx(means[1] - means[0], rel=1e-12)


def test_published_tests_beside_a_difference():
    # lda is right in all of the first repeat; qda misses 9 of 40 then and 5 in the second
    right = np.ones((2, 2, 40), dtype=bool)
    right[0, 1, :2] = right[1, 0, :9] = right[1, 1, :5] = False
    found = evaluation(right, labels=[0, 1] * 20)
    (difference,) = found.differences
    beside = round_tests(found.parts(), difference, delta=0.1)
    assert beside.mcnemar_p == pytest.approx(2 * 0.5**9, rel=1e-14)
    # even places first; half of the cases held out each time
    between = [5 / 20, 4 / 20, 2 / 20, 1 / 20]
    t = corrected_resampled_t(between, n_train=20, n_test=20)
    posterior = correlated_t_posterior(between, rho=0.5, rope=0.1)
    assert beside.corrected_t_p == pytest.approx(t.p, rel=1e-10)
    assert (beside.worse, beside.equal, beside.better) == pytest.approx(
        (posterior.left, posterior.rope, posterior.right), rel=1e-9
    )
    assert beside.worse < beside.better


def test_published_tests_of_equals():
    found = evaluation(np.ones((2, 2, 40), dtype=bool), labels=[0, 1] * 20)
    beside = round_tests(found.parts(), found.differences[0])
    assert beside.mcnemar_p == 1
    assert np.isnan([beside.corrected_t_p, beside.worse, beside.equal, beside.better]).all()


def test_leave_one_out_part_of_the_way_over_a_sorted_table():
    rng = np.random.default_rng(7)
    labels = np.array([0] * 12 + [1] * 12)
    table = table_of(labels, features=rng.normal(size=(24, 2)) + 3 * labels[:, None])
    limits = (
        Limit("accuracy", 0.6),
        Limit("balanced_accuracy", 0.6),
        Limit("sensitivity", 0.6, "a"),
        Limit("sensitivity", 0.6, "b"),
    )
    plan = Plan(
        table.roles,
        (choose(SCHEMES, "leave_one_out"),),
        tuple(choose(CANDIDATES, key) for key in ("lda", "naive_bayes")),
        limits=limits,
    )
    rounds = {name: r.first(12) for name, r in plan.draw(table).items()}
    whole, held_out = run(table, plan, rounds, todo=tasks(rounds), jobs=1)
    found = evaluate(
        table, plan, rounds,
        answers={("leave_one_out", name): held_out.answers[name] for name in plan.candidate_names},
        whole=whole.answers, planned={"leave_one_out": 24}, failures={},
    )  # fmt: skip
    corrected = [e for e in found.estimates if e.estimator == "winner_corrected"]
    assert [(e.measure, e.of_class, e.n) for e in corrected] == [
        ("accuracy", "", 12), ("balanced_accuracy", "", 12), ("sensitivity", "a", 12),
        ("sensitivity", "b", 0),
    ]  # fmt: skip
    assert all(np.isnan(e.value) and e.interval is None for e in corrected)
    # all that was held out was right, yet the other class has not come up
    assert found.estimate("accuracy", found.about).value > 0.9
    assert [v.word for v in verdicts(found, found.about)] == ["not shown yet"] * 4
