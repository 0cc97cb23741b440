"""What stands beside the estimates: who learns a cut-off, the best one, the curve's figures."""

import math
from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sklearn.naive_bayes import GaussianNB

from evalcore.beside import CORRECTED, Beside
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off import CutOffRule
from evalcore.learning_curve import learning_curve
from evalcore.limit import Limit
from evalcore.plan import Plan, generator
from evalcore.results import results_csv
from evalcore.rounds import Rounds
from evalcore.schemes import ALL_SCHEMES, SCHEMES
from evalcore.selection import stratified_bags
from evalcore.tuning import Inner, inner_rounds
from evalcore.verdict import verdicts_at_cut_off

from .checks import carried_out, table_of

N = 48
RULE = CutOffRule("b", "cost", miss=3, undecided_below=0.6)


def table(classes=("a", "b")):
    """Two normals, somebody's answers of which a quarter are wrong, and two sites."""
    rng, labels = np.random.default_rng(4), np.arange(N) % 3 // 2
    said = np.where(rng.random(N) < 0.25, 1 - labels, labels)
    entries = {
        "said": [classes[k] for k in said],
        "site": ["x" if i < N / 2 else "y" for i in range(N)],
    }
    x = rng.normal(size=(N, 6)) + 0.6 * labels[:, None]
    return table_of(labels, features=x, classes=classes, entries=entries)


def plan(**choices):
    given = table()
    learners = (
        choose(CANDIDATES, "naive_bayes"),
        choose(CANDIDATES, "logistic", C=(0.1, 10.0)),
    )
    standing = (
        choose(CANDIDATES, "majority"),
        choose(CANDIDATES, "present_practice", column="said"),
    )
    schemes = (
        choose(SCHEMES, "cross_validation", folds=4, repeats=2),
        choose(SCHEMES, "bootstrap", rounds=6),
    )
    return Plan(given.roles, schemes, (*standing, *learners), **choices)


@pytest.fixture(scope="module")
def everything():
    """All that can be asked for, and the answers."""
    curve = choose(ALL_SCHEMES, "learning_curve", sizes=5)
    asked = plan(curve=curve, cut_off=RULE, permutations=2)
    return carried_out(table(), asked)


@pytest.fixture(scope="module")
def without_curve():
    return carried_out(table(), plan(cut_off=RULE, permutations=2))[0]


def written(estimates):
    """Every digit of figures, nan included."""
    return [repr(e) for e in estimates]


class TestWhoLearns:
    def test_candidates_that_are_fitted_to_features(self, everything):
        found, answers = everything
        assert [at.part.candidate for at in found.beside.cut_offs] == ["naive_bayes", "logistic"]
        for name in ("majority", "present_practice"):
            assert found.at_cut_off(name) is None
            assert answers["cross_validation", name].inner is None
            assert not verdicts_at_cut_off(found, name)

    def test_under_the_first_scheme_alone(self, everything):
        found, answers = everything
        for name in ("naive_bayes", "logistic"):
            assert answers["cross_validation", name].inner.shape == (8, N)
            assert answers["bootstrap", name].inner is None
            assert answers["learning_curve", name].inner is None
        schemes = {e.scheme for e in found.beside.estimates if "cut_off" in e.estimator}
        assert schemes == {"cross_validation"}

    def test_nobody_unless_asked(self):
        found, answers = carried_out(table(), plan())
        assert {given.inner for given in answers.values()} == {None}
        nothing = replace(found.beside, picked=(), estimates=())
        assert vars(nothing) == vars(Beside())
        assert {e.candidate for e in found.beside.estimates} == {"logistic"}
        alone = replace(plan(), candidates=plan().candidates[:3])
        assert vars(carried_out(table(), alone)[0].beside) == vars(Beside())

    def test_no_figure_stands_under_the_key_of_another(self, everything):
        found = everything[0]
        keys = [
            (e.candidate, e.scheme, e.estimator, e.measure, e.of_class, e.counted_by)
            for e in (*found.estimates, *found.beside.estimates)
        ]
        assert len(keys) == len(set(keys))
        assert results_csv(found).count("\n") == len(keys) + 1


class TestTheBestAtItsCutOff:
    def by_hand(self, evaluation, measure):
        """Chosen on the units drawn and judged on the others, resample by resample."""
        shares = [at.part.shares for at in evaluation.beside.cut_offs]
        labels = evaluation.table.labels
        rng = generator(evaluation.plan.seed, "winner's correction")
        judged = []
        for bag in stratified_bags(labels, rng=rng, resamples=500):

            def value(share, times, measure):
                recalls = [
                    np.average(share[labels == k], weights=times[labels == k]) for k in (0, 1)
                ]
                every = {"accuracy": np.average(share, weights=times)}
                return (every | {"balanced_accuracy": np.mean(recalls), "b": recalls[1]})[measure]

            inside = [value(share, bag, "balanced_accuracy") for share in shares]
            best = shares[0] if inside[0] >= inside[1] - 1e-12 else shares[1]
            judged.append(value(best, (bag == 0).astype(int), measure))
        return np.mean(judged)

    def test_by_resampling_units(self, everything):
        found = everything[0]
        for measure, of_class, key in (
            ("accuracy", "", "accuracy"),
            ("balanced_accuracy", "", "balanced_accuracy"),
            ("sensitivity", "b", "b"),
        ):
            corrected = found.corrected(measure, of_class, at_cut_off=True)
            assert corrected.estimator == CORRECTED
            assert corrected.value == pytest.approx(self.by_hand(found, key), abs=1e-12)
            assert corrected.value != found.corrected(measure, of_class).value

    def test_none_of_one(self):
        one = replace(plan(cut_off=RULE), candidates=plan().candidates[:3])
        found = carried_out(table(), one)[0]
        assert len(found.beside.cut_offs) == 1
        assert found.corrected("accuracy", at_cut_off=True) is None


class TestNothingToLearnFrom:
    """Two sites, each learned from alone, as if each were one unit: nothing to divide inside."""

    @pytest.mark.parametrize("learners", [1, 2])
    def test_is_counted_and_ends_nothing(self, learners, monkeypatch):
        def of_one_unit(groups, units, counts, *, rngs):
            if len(counts) == 1:
                return inner_rounds(groups, units, counts, rngs=rngs)
            none = np.zeros((0, counts.shape[1]), dtype=np.uint8)
            return Inner(Rounds(none, none.copy(), np.zeros(0, dtype=np.intp)), len(counts))

        monkeypatch.setattr("evalcore.pipeline.inner_rounds", of_one_unit)
        limits = (Limit("accuracy", 0.5), Limit("balanced_accuracy", 0.5))
        asked = plan(cut_off=RULE, limits=(*limits, Limit("sensitivity", 0.5, "b")))
        candidates = asked.candidates[2:3] + (choose(CANDIDATES, "lda"),) * (learners - 1)
        sites = choose(SCHEMES, "leave_block_out", column="site")
        found = carried_out(table(), replace(asked, schemes=(sites,), candidates=candidates))[0]
        assert len(found.beside.cut_offs) == learners
        for e in found.beside.estimates:
            assert (e.rounds, e.undefined_rounds) == (2, 2)
            # from all cases together one is learned
            assert math.isnan(e.value) == (e.measure != "cut_off")
        given = verdicts_at_cut_off(found, "naive_bayes")
        assert [(verdict.word, verdict.n) for verdict in given] == [("not shown yet", 0)] * 3
        assert not math.isnan(found.estimate("accuracy", "naive_bayes").value)


class TestLearningCurve:
    @staticmethod
    def of_learners(evaluation):
        """Two curves of naive Bayes, then two of logistic regression."""
        learners = ("naive_bayes", "logistic")
        return [c for c in evaluation.beside.curves if c.part.candidate in learners]

    def test_its_rounds_give_no_other_estimate(self, everything):
        found, answers = everything
        assert ("learning_curve", "naive_bayes") in answers
        for schemes in (
            found.rounds,
            found.planned,
            {part.scheme for part in found.judged},
            {e.scheme for e in found.estimates},
            {picked.scheme for picked in found.beside.picked},
        ):
            assert set(schemes) == {"cross_validation", "bootstrap"}
        for e in found.beside.estimates:
            sizes = e.estimator.startswith(("learned_from_", "continued_to_"))
            assert (e.scheme == "learning_curve") == sizes

    def test_figures_are_those_of_the_curve(self, everything):
        found = everything[0]
        asked = [
            (name, measure, of_class)
            for name in ("naive_bayes", "logistic")
            for measure, of_class in (("balanced_accuracy", ""), ("sensitivity", "b"))
        ]
        curves = self.of_learners(found)
        assert [(c.part.candidate, c.found.measure, c.of_class) for c in curves] == asked
        expected = []
        for curve, (name, measure, of_class) in zip(curves, asked, strict=True):
            rng = generator(1, "learning curve", name, measure)
            own = learning_curve(curve.part, measure, of_class=1, level=0.95, rng=rng)
            for s, size in enumerate(own.sizes):
                key = (name, measure, of_class, f"learned_from_{size:.0f}")
                expected.append((*key, own.values[s], own.low[s], own.high[s], own.rounds[s]))
            for ahead in own.ahead:
                key = (name, measure, of_class, f"continued_to_{ahead.n}")
                expected.append((*key, ahead.value, ahead.low, ahead.high, 100))
        learners = {name for name, _, _ in asked}
        given = [
            e
            for e in found.beside.estimates
            if e.scheme == "learning_curve" and e.candidate in learners
        ]
        assert expected == [
            (
                e.candidate, e.measure, e.of_class, e.estimator, e.value, e.interval.low,
                e.interval.high, e.rounds,
            )
            for e in given
        ]  # fmt: skip
        # a third of the cases is of b
        assert {(e.of_class, e.n) for e in given} == {("", N), ("b", N // 3)}
        assert any(e.estimator == f"continued_to_{N}" for e in given)

    def test_shares_right_against_scikit_learn(self, everything):
        found = everything[0]
        x, y = found.table.features, found.table.labels
        balanced, sensitivity, *_ = self.of_learners(found)
        rounds = balanced.part.held.rounds
        # by fold, then by size: five of them
        assert len(balanced.found.sizes) == 5
        right = [[[] for _ in y] for _ in range(5)]
        for r, (train, test) in enumerate(zip(rounds.train, rounds.test, strict=True)):
            bag, out = train > 0, np.flatnonzero(test)
            answers = GaussianNB().fit(x[bag], y[bag]).predict(x[out])
            for i, answer in zip(out, answers, strict=True):
                right[r % 5][i].append(answer == y[i])
        shares = np.array([[np.mean(each) for each in of_size] for of_size in right])
        recalls = np.array([shares[:, y == k].mean(axis=1) for k in (0, 1)])
        assert_allclose(balanced.found.values, recalls.mean(axis=0), rtol=0, atol=1e-12)
        assert_allclose(sensitivity.found.values, recalls[1], rtol=0, atol=1e-12)
        assert np.ptp(recalls[1]) > 0.1

    def test_it_moves_no_other_figure(self, everything, without_curve):
        found = everything[0]
        assert without_curve.beside.curves == ()
        assert written(found.estimates) == written(without_curve.estimates)
        others = [e for e in found.beside.estimates if e.scheme != "learning_curve"]
        assert written(others) == written(without_curve.beside.estimates)
        for with_it, without in zip(
            found.beside.cut_offs, without_curve.beside.cut_offs, strict=True
        ):
            assert with_it.cut_offs.tobytes() == without.cut_offs.tobytes()
            assert with_it.part.held.scores.tobytes() == without.part.held.scores.tobytes()
