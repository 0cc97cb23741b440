"""The chance check: p-values counted by hand, and what they do with noise and with a signal."""

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from evalcore.candidates import CANDIDATES
from evalcore.chance_check import (
    BEST,
    ESTIMATOR,
    MAJORITY,
    chance_checks,
    chance_estimates,
    majority_estimates,
    majority_of,
)
from evalcore.choice import choose
from evalcore.plan import Plan
from evalcore.schemes import SCHEMES

from .checks import carried_out, table_of

MAJORITY_CLASS = choose(CANDIDATES, "majority")
BAYES = choose(CANDIDATES, "naive_bayes")
LDA = choose(CANDIDATES, "lda")
GRID = choose(CANDIDATES, "nearest_neighbours", k=(1, 5))
CROSS = choose(SCHEMES, "cross_validation", repeats=6)


def a_table(n=30, *, shift=0.8, seed=2, units=None, share=0.4):
    rng = np.random.default_rng(seed)
    of_unit = np.arange(n) < share * n
    labels = of_unit.astype(int) if units is None else of_unit.astype(int)[np.asarray(units)]
    features = rng.normal(size=(len(labels), 2)) + shift * labels[:, None]
    return table_of(labels.tolist(), features=features, units=units)


def p_by_hand(observed, permuted):
    """Phipson & Smyth 2010: (k + 1)/(m + 1); what is undefined counts as at least as good."""
    k = sum(1 for value in permuted if math.isnan(value) or value >= observed - 1e-12)
    return (k + 1) / (len(permuted) + 1)


class TestInAnEvaluation:
    table = a_table(shift=0.3)
    plan = Plan(
        table.roles,
        (CROSS, choose(SCHEMES, "bootstrap", rounds=22)),
        (BAYES, MAJORITY_CLASS, GRID, LDA),
        permutations=12,
    )
    evaluation, answers = carried_out(table, plan)
    checks = evaluation.beside.chance

    def test_every_candidate_that_looks_at_features_and_the_best(self):
        assert [(c.candidate, c.best) for c in self.checks[:3]] == [
            ("naive_bayes", False),
            ("nearest_neighbours", False),
            ("lda", False),
        ]
        assert [c.best for c in self.checks] == [False, False, False, True]
        assert {c.measure for c in self.checks} == {"balanced_accuracy"}

    def test_p_from_the_stored_figures(self):
        for check in self.checks:
            assert len(check.permuted) == 12
            assert check.test.p == p_by_hand(check.observed, check.permuted.tolist())
        assert len({check.test.p for check in self.checks}) > 1

    def test_the_best_on_both_sides(self):
        *single, best = self.checks
        assert best.observed == max(check.observed for check in single)
        name = next(c.candidate for c in single if c.observed == best.observed)
        assert best.candidate == name
        each = [check.permuted.tolist() for check in single]
        assert best.permuted.tolist() == [max(of) for of in zip(*each, strict=True)]

    def test_the_observed_figure_is_that_of_the_first_twenty_rounds(self):
        rounds = self.plan.draw(self.table)["cross_validation"]
        pairs = [(r, i) for r in range(30) for i in range(30) if rounds.test[r, i]]
        for check in self.checks[:3]:
            scores = self.answers["cross_validation", check.candidate].scores
            right = {}
            for (r, i), score in zip(pairs, scores, strict=True):
                if r < 20:
                    right.setdefault(i, []).append(score.argmax() == self.table.labels[i])
            # four repeats of five folds: every case four times
            assert [len(right[i]) for i in range(30)] == [4] * 30
            of_class = [
                np.mean([np.mean(right[i]) for i in range(30) if self.table.labels[i] == k])
                for k in (0, 1)
            ]
            assert check.rounds == 20
            assert check.observed == pytest.approx(np.mean(of_class), rel=1e-12)

    def test_figures(self):
        rows = [e for e in self.evaluation.beside.estimates if e.estimator in (ESTIMATOR, BEST)]
        assert len(rows) == 3 * 4
        assert {(e.rounds, e.n, e.undefined_rounds, e.scheme) for e in rows} == {
            (12, 30, 0, "cross_validation")
        }
        for check in self.checks:
            mine = {
                e.measure: e.value
                for e in rows
                if (e.candidate, e.estimator)
                == (check.candidate, BEST if check.best else ESTIMATOR)
            }
            ranked = sorted(check.permuted.tolist())
            assert mine == {
                "p": check.test.p,
                "balanced_accuracy": check.observed,
                "balanced_accuracy_permuted_median": (ranked[5] + ranked[6]) / 2,
            }

    def test_majority_share_on_the_first_repeat(self):
        rounds = self.plan.draw(self.table)["cross_validation"]
        rows = {
            (e.candidate, e.measure): e
            for e in self.evaluation.beside.estimates
            if e.estimator == MAJORITY
        }
        assert len(rows) == 3 * 3
        for name in ("naive_bayes", "nearest_neighbours", "lda"):
            # the first five rounds hold every case out once
            assert rounds.test[:5].sum(axis=0).tolist() == [1] * 30
            cases = [i for r in range(5) for i in range(30) if rounds.test[r, i]]
            scores = self.answers["cross_validation", name].scores[:30]
            right = int((scores.argmax(axis=1) == self.table.labels[cases]).sum())
            theirs = stats.binomtest(right, 30, 18 / 30, alternative="greater").pvalue
            assert rows[name, "p"].value == pytest.approx(theirs, rel=1e-11)
            assert rows[name, "accuracy"].value == right / 30
            assert rows[name, "majority_share"].value == 18 / 30
            assert {(rows[name, m].n, rows[name, m].rounds) for m in ("p", "accuracy")} == {(30, 5)}


def test_majority_share_of_a_bootstrap_is_that_of_one_bag():
    table = a_table()
    plan = Plan(table.roles, (choose(SCHEMES, "bootstrap", rounds=4),), (BAYES,), permutations=1)
    evaluation, answers = carried_out(table, plan)
    out = np.flatnonzero(plan.draw(table)["bootstrap"].test[0])
    scores = answers["bootstrap", "naive_bayes"].scores[: len(out)]
    right = int((scores.argmax(axis=1) == table.labels[out]).sum())
    largest = max(np.bincount(table.labels[out]).tolist())
    theirs = stats.binomtest(right, len(out), largest / len(out), alternative="greater").pvalue
    found = [e for e in evaluation.beside.estimates if e.estimator == MAJORITY]
    values = {e.measure: e.value for e in found}
    assert values["p"] == pytest.approx(theirs, rel=1e-11)
    assert values["majority_share"] == largest / len(out)
    # of the cases that this bag left out, and no others
    assert {(e.n, e.rounds) for e in found} == {(len(out), 1)}
    assert len(out) < 20


def test_rows_of_units_are_no_trials():
    units = np.repeat(np.arange(20), 2).tolist()
    table = a_table(20, units=units)
    for answered, number in (("all", 3), ("one", 0)):
        plan = Plan(table.roles, (CROSS,), (BAYES,), answered_from=answered, permutations=1)
        evaluation, _ = carried_out(table, plan)
        found = [e for e in evaluation.beside.estimates if e.estimator == MAJORITY]
        assert len(found) == number
        assert {e.n for e in found} == ({20} if number else set())
        by_case = {p.counted_by: p for p in evaluation.judged}["case"]
        assert by_case.units is not None
        assert list(majority_estimates([by_case])) == []


class TestGivenFigures:
    """The same observed figures against made-up permuted ones."""

    table = a_table(shift=0.6)
    plan = Plan(table.roles, (CROSS,), (BAYES, MAJORITY_CLASS, LDA))
    evaluation, _ = carried_out(table, plan)
    parts = evaluation.parts()

    def checks(self, figures):
        return chance_checks(self.plan, self.parts, np.array(figures, dtype=float))

    def test_none_without_permutations(self):
        assert self.checks(np.empty((0, 3))) == ()
        assert self.evaluation.beside.chance == ()

    def test_none_of_a_baseline_alone(self):
        parts = [part for part in self.parts if part.candidate == "majority"]
        assert chance_checks(self.plan, parts, np.zeros((4, 3))) == ()

    def test_one_candidate_has_no_best_of_several(self):
        found = chance_checks(self.plan, self.parts[:2], np.zeros((4, 3)))
        assert [c.best for c in found] == [False]

    def test_columns_are_those_of_the_plan(self):
        first, second, best = self.checks([[0.1, 0.9, 0.2], [0.3, 0.9, 0.0]])
        assert first.permuted.tolist() == [0.1, 0.3]
        assert second.permuted.tolist() == [0.2, 0.0]
        assert best.permuted.tolist() == [0.2, 0.3]

    def test_ties_count(self):
        observed = [c.observed for c in self.checks(np.zeros((1, 3)))[:2]]
        for at, place in ((0, 0), (1, 2)):
            figures = np.zeros((4, 3))
            figures[1, place] = observed[at]
            figures[2, place] = observed[at] + 0.01
            figures[3, place] = observed[at] - 0.01
            found = self.checks(figures)[at]
            assert (found.test.at_least_as_good, found.test.p) == (2, 3 / 5)

    def test_an_undefined_figure_counts_against_it(self):
        low = [0.0, 0.0, 0.0]
        first, second, best = self.checks([low, [0.0, 0.0, np.nan], low])
        assert [c.test.p for c in (first, second, best)] == [1 / 4, 2 / 4, 2 / 4]
        rows = list(chance_estimates(self.parts, (first, second, best)))
        assert [e.undefined_rounds for e in rows] == [0] * 3 + [1] * 6
        assert all(e.rounds == 3 for e in rows)
        medians = [e.value for e in rows if e.measure.endswith("median")]
        assert medians == [0.0, 0.0, 0.0]

    def test_without_any_figure_p_is_1(self):
        for check in self.checks(np.full((6, 3), np.nan)):
            assert check.test.p == 1.0
            values = [e.value for e in chance_estimates(self.parts, (check,))]
            assert math.isnan(values[2])

    def test_majority_counts_one_answer_a_case(self):
        for part in self.parts:
            found = majority_of(part)
            assert (found.accuracy * 30).is_integer()
            assert found.majority_share == 18 / 30
        # who always names the larger class is right as often as that, and no more
        always = majority_of(self.parts[1])
        assert always.accuracy == always.majority_share


class TestDealtAgain:
    """Twelve cases in four stretches of time, four of class b: one of the first three."""

    labels = (1, 0, 0, 0, 1, 0, 0, 1, 0, 0, 1, 0)
    table = table_of(
        list(labels),
        features=np.random.default_rng(8).normal(size=(12, 2)),
        entries={"day": [str(at) for at in range(12)]},
    )
    plan = Plan(
        table.roles,
        (choose(SCHEMES, "forward_in_time", column="day", parts=3),),
        (BAYES, LDA),
        permutations=30,
    )

    def test_no_figure_is_lacking(self):
        evaluation, _ = carried_out(self.table, self.plan)
        assert not any(np.isnan(check.permuted).any() for check in evaluation.beside.chance)

    def test_where_it_is_of_no_avail_tables_are_counted_and_count_against_it(self, monkeypatch):
        monkeypatch.setattr("evalcore.permuted.ATTEMPTS", 1)
        evaluation, _ = carried_out(self.table, self.plan)
        rows = [e for e in evaluation.beside.estimates if e.estimator in (ESTIMATOR, BEST)]
        lacking = np.isnan(evaluation.beside.chance[0].permuted)
        assert 0 < lacking.sum() < 30
        for check in evaluation.beside.chance:
            # no candidate can be judged on such a table, and none is left out of those counted
            assert np.isnan(check.permuted).tolist() == lacking.tolist()
            assert check.test.p == p_by_hand(check.observed, check.permuted.tolist())
            assert check.test.p >= (lacking.sum() + 1) / 31
        assert {(e.rounds, e.undefined_rounds) for e in rows} == {(30, lacking.sum())}


class TestSimulated:
    """Tables made anew: p is about uniform without a signal, and as small as can be with one."""

    @staticmethod
    def p_of(seed, *, shift, candidates=(BAYES,), permutations=19):
        table = a_table(shift=shift, seed=[19, seed], share=0.5)
        plan = Plan(
            table.roles,
            (choose(SCHEMES, "cross_validation", repeats=4),),
            candidates,
            seed=seed,
            permutations=permutations,
        )
        evaluation, _ = carried_out(table, plan)
        return [check.test.p for check in evaluation.beside.chance]

    def test_uniform_on_noise(self):
        tables, m = 60, 19
        p = np.array([self.p_of(seed, shift=0.0)[0] for seed in range(tables)])
        # uniform on 1/20, ..., 20/20: mean 21/40, variance (20^2 - 1)/12/20^2
        error = np.sqrt(((m + 1) ** 2 - 1) / 12) / (m + 1) / np.sqrt(tables)
        assert abs(p.mean() - 21 / 40) < 2.5 * error
        for level in (0.05, 0.25, 0.5, 0.75):
            spread = np.sqrt(level * (1 - level) / tables)
            assert abs((p <= level + 1e-9).mean() - level) < 3 * spread

    def test_smallest_with_a_signal(self):
        for seed in range(3):
            found = self.p_of(seed, shift=4.0, candidates=(BAYES, LDA))
            assert found == [1 / 20] * 3


class TestKeptTogether:
    """Twelve producers of five lots: half of them, by chance, are of class b.

    The features are partly the producer's own, and have nothing to do with its class.
    """

    @staticmethod
    def p_of(seed):
        rng = np.random.default_rng([12, seed])
        producer = np.repeat(np.arange(12), 5)
        labels = rng.permutation(np.arange(12) % 2)[producer]
        features = 2 * rng.normal(size=(12, 2))[producer] + rng.normal(size=(60, 2))
        names = [f"P{at:02d}" for at in producer]
        table = table_of(labels.tolist(), features=features, entries={"producer": names})
        kept = choose(SCHEMES, "cross_validation", folds=3, repeats=1, keep="producer")
        # few rounds make ties of balanced accuracy likely, and ties make p too large
        plan = Plan(table.roles, (kept,), (LDA,), seed=seed, measure="auc", permutations=19)
        evaluation, _ = carried_out(table, plan)
        (check,) = evaluation.beside.chance
        return check.test.p

    @pytest.mark.parametrize("tables", [120, pytest.param(2000, marks=pytest.mark.slow)])
    def test_p_keeps_its_word(self, tables):
        p = np.array([self.p_of(seed) for seed in range(tables)])
        # as often as it says, since m + 1 = 20 divides each level
        for level in (0.05, 0.25, 0.5, 0.75):
            spread = np.sqrt(level * (1 - level) / tables)
            assert abs((p <= level + 1e-9).mean() - level) < 2.5 * spread

    def test_dealt_freely_it_would_not(self, monkeypatch):
        """Lots of one producer get different classes then, so that its part helps nobody."""

        def freely(table, rng, _):
            return replace(table, labels=rng.permutation(table.labels))

        monkeypatch.setattr("evalcore.permuted.permuted_table", freely)
        tables = 60
        small = sum(self.p_of(seed) <= 0.05 + 1e-9 for seed in range(tables))
        assert stats.binomtest(small, tables, 0.05, alternative="greater").pvalue < 0.01
