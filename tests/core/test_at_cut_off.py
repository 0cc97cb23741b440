"""Cut-offs learned inside each bag: what a floor delivers, scikit-learn by hand, exact fractions."""

import math
from dataclasses import replace
from fractions import Fraction
from itertools import pairwise

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sklearn.naive_bayes import GaussianNB

from evalcore import pipeline
from evalcore.answers import Answers, Reduced
from evalcore.at_cut_off import at_cut_off, cut_off_estimates
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off import CutOffRule
from evalcore.engine import run, tasks
from evalcore.evaluation import Evaluation, evaluate
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES

from .checks import carried_out, table_of

NAN = math.nan
WAYS = ("case", "unit")


def scored(given, labels, rule, *, units=None, repeat=None, **choices) -> Evaluation:
    """An evaluation from literal scores for class b.

    `given` holds for each candidate its held-out scores (R, n), nan where not held out, its inner
    scores (R, n), and those of all cases (n,).
    """
    held = np.asarray(next(iter(given.values()))[0], dtype=float)
    out = (~np.isnan(held)).astype(np.uint8)
    rounds = Rounds(1 - out, out, np.arange(len(out)) if repeat is None else np.asarray(repeat))
    table = table_of(labels, units=units, classes=("a", "b"))
    scheme = choose(SCHEMES, "cross_validation", folds=2)
    plan = Plan(
        table.roles,
        (scheme,),
        tuple(choose(CANDIDATES, name) for name in given),
        cut_off=rule,
        measure=choices.pop("measure", "accuracy"),
        **choices,
    )
    answers, whole = {}, {}
    for name, (scores, inner, on_all) in given.items():
        up = np.asarray(scores, dtype=float)[rounds.pairs]
        down = 1 - up if CANDIDATES[name].probabilities else -up
        answers[scheme.key, name] = literal(np.column_stack([down, up]), inner)
        whole[name] = literal(np.empty((0, 2)), [on_all])
    planned = {scheme.key: len(out)}
    return evaluate(
        table, plan, {scheme.key: rounds}, answers=answers, whole=whole, planned=planned,
        failures={},
    )  # fmt: skip


def literal(scores, inner) -> Answers:
    """Held-out and inner scores; bags that say nothing."""
    inner = np.asarray(inner, dtype=float)
    counts = np.ones((len(inner), 2, 2))
    nothing = dict.fromkeys(WAYS, Reduced(counts, np.full(len(inner), 0.5)))
    return Answers(scores, nothing, dict.fromkeys(WAYS, counts), inner=inner)


def figure(evaluation, measure, of_class="", *, estimator="at_cut_off", candidate=""):
    """The one figure of these keys that stands beside the estimates."""
    wanted = (candidate or evaluation.about, estimator, measure, of_class)
    (found,) = (
        e
        for e in evaluation.beside.estimates
        if (e.candidate, e.estimator, e.measure, e.of_class) == wanted
    )
    return found


def figures(found: Evaluation):
    """All that was found at cut-offs, to be compared digit by digit."""
    return [
        (
            at.part.candidate, at.rule, at.cut_offs.tolist(), at.on_all, at.learned_from,
            at.at_shares, at.undecided, at.part.held.scores.tolist(), at.part.shares.tolist(),
        )
        for at in found.beside.cut_offs
    ]  # fmt: skip


def whole_of(table, plan):
    """Answers of the fits on all cases by candidate."""
    return next(run(table, plan, {}, todo=tasks({}))).answers


FLOOR = CutOffRule("b", "floor", floor=0.9)
TABLES = 10


def from_own_bag(evaluation, given):
    """The same forests, their cut-off learned from what they say of cases they were fitted to."""
    table, rounds = evaluation.table, evaluation.rounds["cross_validation"]
    plan = replace(evaluation.plan, candidates=evaluation.plan.candidates[-1:])
    ((_, forests),) = pipeline.candidates_in(
        table, replace(plan, cut_off=None), rounds, scheme="cross_validation", start=0
    )
    assert np.array_equal(forests.scores[rounds.pairs], given.scores)
    own = replace(given, inner=np.where(rounds.train > 0, forests.scores[:, :, 1], NAN))
    part = evaluation.part("forest", "cross_validation")
    at = at_cut_off(table, plan, part, given=own, whole=replace(own, inner=own.inner[:1]))
    found = {(e.measure, e.of_class): e for e in cut_off_estimates(table, plan, at)}
    return found["sensitivity", "b"]


@pytest.fixture(scope="module")
def delivered():
    """Rates of both classes on each table by candidate; of b from the forest's own bag too."""
    names = {"logistic": {}, "naive_bayes": {}, "forest": {"trees": 50}}
    found = {name: [] for name in (*names, "own bag")}
    for seed in range(TABLES):
        rng, labels = np.random.default_rng(seed), np.arange(120) % 2
        shifted = rng.normal(size=(120, 5)) + np.array([0.8] * 3 + [0] * 2) * labels[:, None]
        table = table_of(labels, features=shifted)
        scheme = choose(SCHEMES, "cross_validation", folds=5, repeats=4)
        choices = tuple(choose(CANDIDATES, name, **given) for name, given in names.items())
        plan = Plan(table.roles, (scheme,), choices, cut_off=FLOOR)
        evaluation, answers = carried_out(table, plan)
        for name in names:
            found[name].append(
                [figure(evaluation, "sensitivity", k, candidate=name) for k in ("b", "a")]
            )
        found["own bag"].append(from_own_bag(evaluation, answers[scheme.key, "forest"]))
    return found


class TestFloorIsDelivered:
    """A floor of 0.90, learned from 48 of the class in each bag, on ten tables of two normals.

    It is cut at rank 49/10 of 48 inner scores, which a further one falls below with a chance of
    nearly one in ten.
    """

    @pytest.mark.parametrize("name", ["logistic", "naive_bayes", "forest"])
    def test_on_held_out_cases(self, delivered, name):
        rates = np.array([e.value for e, _ in delivered[name]])
        error = rates.std(ddof=1) / math.sqrt(TABLES)
        assert error < 0.01
        assert rates.mean() > 0.9 - 2 * error
        # not by calling everything: a hundredth is left for models that saw fewer cases
        assert rates.mean() < 0.9 + 2 * error + 0.01
        assert np.mean([other.value for _, other in delivered[name]]) > 0.3
        assert all(e.interval.high >= 0.9 for e, _ in delivered[name])

    def test_from_its_own_bag_a_forest_delivers_half(self, delivered):
        assert 0.3 < np.mean([e.value for e in delivered["own bag"]]) < 0.55
        assert all(e.interval.high < 0.9 for e in delivered["own bag"])


class TestAgainstScikitLearn:
    """Inner folds, cut-offs and calls one by one, on the inner rounds that were drawn."""

    LABELS = np.array([0] * 24 + [1] * 16)
    COST = CutOffRule("b", "cost", miss=3, share_low=0.25, share_high=0.25)
    RULES = (COST, CutOffRule("b", "floor", floor=0.7), CutOffRule("a", "floor", floor=0.7))

    def scores(self, x, bag):
        rows = np.repeat(np.arange(40), bag)
        return GaussianNB().fit(x[rows], self.LABELS[rows]).predict_proba(x)

    def inner(self, x, inner, r):
        found = np.full((40, 2), NAN)
        for fold in np.flatnonzero(inner.of_bag == r):
            out = inner.rounds.test[fold] > 0
            found[out] = self.scores(x, inner.rounds.train[fold])[out]
        return found

    def cut_off(self, positive, scores, rule):
        """Every cut-off tried, costs as fractions."""
        known = ~np.isnan(scores)
        ups, downs = scores[known & positive], scores[known & ~positive]
        if rule.by == "floor":
            return np.quantile(ups, 0.3, method="weibull")
        values = np.unique(scores[known]).tolist()
        tried = [-math.inf, *((low + high) / 2 for low, high in pairwise(values)), math.inf]
        costs = [
            Fraction(3, 4) * Fraction(int((ups < at).sum()), len(ups))
            + Fraction(3, 4) * Fraction(int((downs >= at).sum()), len(downs))
            for at in tried
        ]
        cheapest = [at for at, cost in zip(tried, costs, strict=True) if cost == min(costs)]
        return cheapest[(len(cheapest) - 1) // 2]

    @pytest.mark.parametrize("rule", RULES, ids=["cost", "floor", "floor of a"])
    @pytest.mark.parametrize(
        "scheme",
        [
            choose(SCHEMES, "cross_validation", folds=4, repeats=3),
            choose(SCHEMES, "bootstrap", rounds=12),
        ],
        ids=["folds", "bootstrap"],
    )
    @pytest.mark.parametrize("size", [1, 2], ids=["cases", "units"])
    def test_rates_and_cut_offs(self, monkeypatch, scheme, rule, size):
        drawn = []

        def recording(*given, **rest):
            drawn.append(inner_rounds(*given, **rest))
            return drawn[-1]

        inner_rounds = pipeline.inner_rounds
        monkeypatch.setattr(pipeline, "inner_rounds", recording)
        units = np.arange(40) // size
        x = np.random.default_rng(3).normal(size=(40, 3)) + 0.7 * self.LABELS[:, None]
        table = table_of(self.LABELS, units=units if size > 1 else None, features=x)
        plan = Plan(table.roles, (scheme,), (choose(CANDIDATES, "naive_bayes"),), cut_off=rule)
        evaluation, _ = carried_out(table, plan)
        found, rounds = evaluation.at_cut_off("naive_bayes"), evaluation.rounds[scheme.key]
        of_all, of_bags = drawn
        k, other = (0, "b") if rule.of_class == "a" else (1, "a")
        positive = self.LABELS[::size] == k

        def by_unit(scores):
            return scores[:, k].reshape(-1, size).mean(axis=1)

        called = [[] for _ in positive]
        for r, bag in enumerate(rounds.train):
            inner = by_unit(self.inner(x, of_bags, r))
            assert (np.isnan(inner) == (bag[::size] == 0)).all()
            at = self.cut_off(positive, inner, rule)
            assert found.cut_offs[r] == pytest.approx(at, rel=1e-9)
            held = by_unit(self.scores(x, bag))
            for unit in np.flatnonzero(rounds.test[r, ::size]):
                called[unit].append(held[unit] >= at)
        share = np.array([np.mean(each) if each else NAN for each in called])
        right = np.where(positive, share, 1 - share)
        for measure, of_class, over in (
            ("sensitivity", rule.of_class, positive),
            ("sensitivity", other, ~positive),
            ("accuracy", "", positive | ~positive),
        ):
            expected = np.nanmean(right[over])
            assert 0 < expected < 1
            assert figure(evaluation, measure, of_class).value == pytest.approx(expected, abs=1e-12)
        on_all = self.cut_off(positive, by_unit(self.inner(x, of_all, 0)), rule)
        goes_to_work = figure(evaluation, "cut_off", rule.of_class)
        assert goes_to_work.value == pytest.approx(on_all, rel=1e-9)


RULES = [
    CutOffRule("b", "floor", floor=0.8),
    CutOffRule("b", "cost", miss=10, share_low=0.05, share_high=0.2, undecided_below=0.7),
    CutOffRule("b", "fixed", at=0.3),
]


@pytest.fixture(scope="module")
def before():
    """An evaluation under one rule, its answers and those of the fits on all cases."""
    labels = np.array([0] * 26 + [1] * 14)
    x = np.random.default_rng(6).normal(size=(40, 3)) + 0.8 * labels[:, None]
    table = table_of(labels, features=x)
    plan = Plan(
        table.roles,
        (choose(SCHEMES, "bootstrap", rounds=9),),
        tuple(choose(CANDIDATES, key) for key in ("naive_bayes", "lda")),
        cut_off=CutOffRule("b", "cost"),
    )
    return (*carried_out(table, plan), whole_of(table, plan))


@pytest.mark.parametrize("rule", RULES, ids=lambda rule: rule.by)
def test_costs_and_floors_are_moved_without_a_refit(before, rule):
    evaluation, answers, whole = before
    table, plan = evaluation.table, replace(evaluation.plan, cut_off=rule)
    afresh = carried_out(table, plan)[0]
    moved = tuple(
        at_cut_off(
            table, plan, part, given=answers["bootstrap", part.candidate],
            whole=whole[part.candidate],
        )
        for part in evaluation.parts()
    )  # fmt: skip
    assert len(moved) == 2
    found = replace(evaluation, beside=replace(evaluation.beside, cut_offs=moved))
    assert figures(found) == figures(afresh)
    assert figures(found) != figures(evaluation)


class TestByHand:
    """Eight cases, 0 to 4 of a and 5 to 7 of b; even and odd ones held out in turn, twice.

    Cut-offs 0.5, 0.4, 0.7 and none. Called: of 0 2 4 6 only 2, which ties with its cut-off; of
    1 3 5 7 all but 1, where 5 ties; then of 0 2 4 6 the last two. Shares right: 1 1 1/2 0 1/2 of
    a and 1 1/2 1 of b.
    """

    LABELS = (0, 0, 0, 0, 0, 1, 1, 1)
    HELD = (
        (0.1, NAN, 0.5, NAN, 0.3, NAN, 0.45, NAN),
        (NAN, 0.39, NAN, 0.41, NAN, 0.4, NAN, 0.9),
        (0.6, NAN, 0.65, NAN, 0.8, NAN, 0.7, NAN),
        (NAN, 0.9, NAN, 0.9, NAN, 0.1, NAN, 0.1),
    )
    INNER = (
        (NAN, 0.4, NAN, 0.4, NAN, 0.6, NAN, 0.6),
        (0.2, NAN, 0.1, NAN, 0.0, NAN, 0.6, NAN),
        (NAN, 0.5, NAN, 0.3, NAN, 0.9, NAN, 0.9),
        (0.2, NAN, 0.1, NAN, 0.0, NAN, NAN, NAN),
    )
    # a miss weighs 4 x 3/8 / 3 = 1/2 and an alarm 5/8 / 5 = 1/8: two alarms below 0.35 are cheapest
    ON_ALL = (0.1, 0.2, 0.3, 0.4, 0.5, 0.35, 0.6, 0.9)
    COST = CutOffRule("b", "cost", miss=4)

    def found(self, rule=COST, *, key="naive_bayes", inner=INNER):
        given = {key: (self.HELD, inner, self.ON_ALL)}
        return scored(given, self.LABELS, rule, repeat=[0, 0, 1, 1])

    def test_rates(self):
        found = self.found()
        for measure, of_class, value, n in (
            ("sensitivity", "b", 5 / 6, 3),
            ("sensitivity", "a", 3 / 5, 5),
            ("accuracy", "", 11 / 16, 8),
            ("balanced_accuracy", "", 43 / 60, 8),
        ):
            given = figure(found, measure, of_class)
            assert given.value == pytest.approx(value, abs=1e-15)
            assert given.n == n
            assert given.interval.low < value < given.interval.high

    def test_a_round_without_a_cut_off_is_left_out_and_counted(self):
        found = self.found()
        at = found.at_cut_off("naive_bayes")
        assert_allclose(at.cut_offs, [0.5, 0.4, 0.7, NAN], rtol=1e-15)
        assert at.undefined == 1
        assert at.part.held.rounds.n_rounds == 3
        assert at.part.held.rounds.times_tested.tolist() == [2, 1] * 4
        assert {(e.rounds, e.undefined_rounds) for e in found.beside.estimates} == {(4, 1)}

    def test_cases_held_out_without_a_cut_off_alone_are_unknown(self):
        inner = np.array(self.INNER)
        inner[1] = NAN
        found = self.found(inner=inner)
        # cases 0 2 4 and 6 remain: 2/3 and 1/2
        assert figure(found, "sensitivity", "a").value == pytest.approx(2 / 3, abs=1e-15)
        assert figure(found, "sensitivity", "b").value == 0.5
        assert figure(found, "accuracy").value == pytest.approx(5 / 8, abs=1e-15)
        assert [figure(found, "sensitivity", k).n for k in "ab"] == [3, 1]
        assert np.isnan(found.at_cut_off("naive_bayes").part.shares).tolist() == [False, True] * 4

    def test_no_round_has_a_cut_off(self):
        rule = replace(self.COST, undecided_below=0.7)
        found = self.found(rule, inner=np.full((4, 8), NAN))
        given = {e.measure: e for e in found.beside.estimates}
        cut_off = given.pop("cut_off")
        assert cut_off.value == pytest.approx(0.325, abs=1e-15)
        assert not cut_off.interval.defined
        assert {(e.n, e.rounds, e.undefined_rounds) for e in given.values()} == {(0, 4, 4)}
        assert all(math.isnan(e.value) for e in given.values())

    def test_the_one_that_goes_to_work(self):
        found = figure(self.found(), "cut_off", "b")
        assert found.value == pytest.approx(0.325, abs=1e-15)
        assert found.n == 3
        assert (found.interval.low, found.interval.high) == pytest.approx((0.4, 0.7), rel=1e-15)
        # at 0.06, the middle: a miss weighs 0.08 and an alarm 0.188
        elsewhere = self.found(replace(self.COST, share_low=0.02, share_high=0.1))
        assert figure(elsewhere, "cut_off", "b").value == pytest.approx(0.55, abs=1e-15)

    def test_nine_rounds_in_ten_by_rank(self):
        at = self.found().at_cut_off("naive_bayes")
        # of thirty the 2nd and the 29th: ranks 1.5 and 28.5, rounded up
        some = np.random.default_rng(1).permutation([-math.inf, *range(2, 30), math.inf, NAN])
        spread = replace(at, cut_offs=some).spread
        assert (spread.low, spread.high, spread.level) == (2, 29, 0.9)
        ends = np.array([-math.inf, math.inf])
        assert replace(at, cut_offs=ends).spread.low == -math.inf

    def values(self, found, share):
        keys = (
            ("precision", "b"),
            ("precision", "a"),
            ("share_called", "b"),
            ("cost_per_case", ""),
        )
        return [figure(found, *key, estimator=f"at_cut_off_share_{share}").value for key in keys]

    def test_at_the_share_of_the_table(self):
        # 5/2 of 3 found and 2 of 5 alarms
        expected = [5 / 9, 6 / 7, 9 / 16, (4 / 2 + 2) / 8]
        assert self.values(self.found(), 0.375) == pytest.approx(expected, abs=1e-15)

    def test_at_both_ends_of_a_stated_share(self):
        found = self.found(replace(self.COST, share_low=0.02, share_high=0.1))
        # of 300 cases 30: 25 found, 5 missed, 108 of 270 alarms; of 1500 also 30, 588 of 1470
        tenth = [25 / 133, 162 / 167, 133 / 300, (5 * 4 + 108) / 300]
        fiftieth = [25 / 613, 882 / 887, 613 / 1500, (5 * 4 + 588) / 1500]
        assert self.values(found, 0.1) == pytest.approx(tenth, abs=1e-15)
        assert self.values(found, 0.02) == pytest.approx(fiftieth, abs=1e-15)
        shares = [at.share for at in found.at_cut_off("naive_bayes").at_shares]
        assert shares == [0.02, 0.1]
        one = self.found(replace(self.COST, share_low=0.1, share_high=0.1))
        assert self.values(one, 0.1) == self.values(found, 0.1)
        assert len(one.at_cut_off("naive_bayes").at_shares) == 1

    def test_without_costs_no_cost_is_given(self):
        for rule in (CutOffRule("b", "floor", floor=0.5), CutOffRule("b", "fixed", at=0.5)):
            given = {e.measure for e in self.found(rule).beside.estimates}
            assert "precision" in given
            assert "cost_per_case" not in given

    def test_undecided(self):
        found = self.found(replace(self.COST, undecided_below=0.62))
        # probabilities of the classes answered: 0.9 a, 0.5 b, 0.7 a, 0.55 a | 0.61 a, 0.41 b, 0.4 b,
        # 0.9 b | 0.4 a, 0.35 a, 0.8 b, 0.7 b. Of 0.62 or more all are right but 0.8; they weigh
        # four halves and one whole of eight cases. 0.6 and 0.65 for b are answered with a
        wanted = ("share_undecided", "", "at_cut_off"), ("accuracy", "", "right_of_decided")
        values = [figure(found, m, k, estimator=e).value for m, k, e in wanted]
        assert values == pytest.approx([5 / 8, 2.5 / 3], abs=1e-15)
        wrong = figure(found, "accuracy", estimator="right_counting_undecided_wrong").value
        assert wrong == pytest.approx(2.5 / 8, abs=1e-15)
        undecided = found.at_cut_off("naive_bayes").undecided
        assert undecided.right_counting_undecided_right == pytest.approx(7.5 / 8, abs=1e-15)

    def test_an_answer_below_a_half_is_never_sure(self):
        # called from 0.3 up: what is called with less than 0.62 is left to a person, 0.1 is not
        rule = CutOffRule("b", "fixed", at=0.3, undecided_below=0.62)
        held = np.full((2, 8), NAN)
        held[0, ::2], held[1, 1::2] = (0.35, 0.1, 0.1, 0.35), (0.35, 0.61, 0.9, 0.62)
        given = {"naive_bayes": (held, np.full((2, 8), NAN), self.ON_ALL)}
        undecided = scored(given, self.LABELS, rule).at_cut_off("naive_bayes").undecided
        # decided 2 and 4, rightly a; 5 and 7, rightly b: by the larger probability all but 3 were
        assert (undecided.sent, undecided.right_of_decided) == (0.5, 1)
        assert undecided.right_counting_undecided_wrong == 0.5

    def test_decision_values_leave_nobody_undecided(self):
        found = self.found(replace(self.COST, undecided_below=0.62), key="svm")
        assert found.at_cut_off("svm").undecided is None
        assert figure(found, "accuracy").value == pytest.approx(11 / 16, abs=1e-15)
        assert "share_undecided" not in {e.measure for e in found.beside.estimates}
        assert self.found().at_cut_off("naive_bayes").undecided is None

    def test_the_other_class_may_be_the_one_called(self):
        rule = CutOffRule("a", "fixed", at=0.55)
        # a has 1 - score: 0 2 4 6 get 0.9 0.5 0.7 0.55, 1 3 5 7 get 0.61 0.59 0.6 0.1, then
        # 0.4 0.35 0.2 0.3 and 0.1 0.1 0.9 0.9; 0.55 is left out, as it may be a tie
        found = self.found(rule)
        assert figure(found, "sensitivity", "a").value == pytest.approx(2 / 5, abs=1e-15)
        sure = found.at_cut_off("naive_bayes").part.shares[[5, 7]]
        assert sure.tolist() == [0, 0.5]


class TestUnits:
    """Two units of two rows each of a (rows 0 to 3) and of b (4 to 7), one of each held out.

    Means inside the bags: 0.4 and 0.6, so 0.5; then 0.1 and 0.3, so 0.2. Held out they are 0.45
    and 0.525, both right, and 0.25 and 0.15, both wrong. Row by row 0.2 and 0.8 are as cheap, and
    0.1 and 0.3; the lower ones get 3 of 8 rows right.
    """

    UNITS = (0, 0, 1, 1, 2, 2, 3, 3)
    LABELS = (0, 0, 0, 0, 1, 1, 1, 1)
    HELD = (
        (0.25, 0.65, NAN, NAN, 0.1, 0.95, NAN, NAN),
        (NAN, NAN, 0.15, 0.35, NAN, NAN, 0.12, 0.18),
    )
    INNER = (
        (NAN, NAN, 0.1, 0.7, NAN, NAN, 0.3, 0.9),
        (0.0, 0.2, NAN, NAN, 0.2, 0.4, NAN, NAN),
    )
    ON_ALL = (0.0, 0.2, 0.1, 0.7, 0.5, 0.9, 0.6, 0.8)

    def found(self, answered_from):
        given = {"naive_bayes": (self.HELD, self.INNER, self.ON_ALL)}
        rule = CutOffRule("b", "cost")
        return scored(given, self.LABELS, rule, units=self.UNITS, answered_from=answered_from)

    def test_a_unit_has_the_mean_of_its_rows(self):
        found = self.found("all")
        assert_allclose(found.at_cut_off("naive_bayes").cut_offs, [0.5, 0.2], rtol=1e-15)
        for of_class in "ab":
            assert figure(found, "sensitivity", of_class).value == 0.5
            assert figure(found, "sensitivity", of_class).n == 2
        assert {e.counted_by for e in found.beside.estimates} == {"unit"}
        # means 0.1 0.4 of a and 0.7 0.7 of b
        assert figure(found, "cut_off", "b").value == pytest.approx(0.55, abs=1e-15)
        assert figure(found, "cut_off", "b").n == 2

    def test_rows_alone(self):
        found = self.found("one")
        assert_allclose(found.at_cut_off("naive_bayes").cut_offs, [0.2, 0.1], rtol=1e-15)
        assert figure(found, "accuracy").value == pytest.approx(3 / 8, abs=1e-15)
        assert {e.counted_by for e in found.beside.estimates} == {"case"}
        # 0.7 of a is above 0.5 and 0.6 of b: one alarm below 0.5
        assert figure(found, "cut_off", "b").value == pytest.approx(0.35, abs=1e-15)
        # of four rows, which come in two units
        assert figure(found, "cut_off", "b").n == 2

    @pytest.mark.parametrize(
        ("units", "behind"),
        [
            (None, 4),
            ((0, 1, 2, 3, 4, 5, 6, 7), 4),
            # both blocks hold some of b; then three do; then it is one block's alone
            ((0, 1, 0, 1, 0, 1, 0, 1), 2),
            ((0, 0, 1, 1, 1, 2, 2, 3), 3),
            ((0, 0, 0, 0, 1, 1, 1, 1), 1),
        ],
    )
    def test_learned_from_what_is_independent(self, units, behind):
        found = scored(
            {"naive_bayes": (self.HELD, self.INNER, self.ON_ALL)},
            self.LABELS,
            CutOffRule("b", "cost"),
        )
        part = found.part("naive_bayes", found.scheme)
        assert part.units is None
        blocked = replace(part, units=None if units is None else np.array(units))
        given, whole = literal([], self.INNER), literal([], [self.ON_ALL])
        at = at_cut_off(found.table, found.plan, blocked, given=given, whole=whole)
        assert at.learned_from == behind
        assert at.on_all == found.at_cut_off("naive_bayes").on_all
