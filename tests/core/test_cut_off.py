"""Cut-offs learned in rounds: by hand in fractions, by brute force, by simulation."""

import dataclasses
import math
from fractions import Fraction
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.stats import norm
from sklearn import metrics

from evalcore.cut_off import calls, cost_per_case, learned, learned_by_round, with_undecided
from evalcore.cut_off_rule import CutOffRule
from evalcore.errors import EvalError

from .checks import exactly

SCORED = st.lists(st.tuples(st.booleans(), st.integers(0, 8)), min_size=2, max_size=20)
WEIGHTS = st.integers(1, 20)
COST = CutOffRule("failing", "cost")


def by_floor(floor):
    return CutOffRule("failing", "floor", floor=floor)


def columns(scored):
    positive, score = zip(*scored, strict=True)
    assume(len(set(positive)) == 2)
    return np.array(positive), np.array(score) / 8


def exact_cost(positive, score, cut_off, *, rule, share):
    """Expected cost at a cut-off as a fraction, counted case by case."""
    found = [s >= cut_off for y, s in zip(positive, score, strict=True) if y]
    alarms = [s >= cut_off for y, s in zip(positive, score, strict=True) if not y]
    missed = Fraction(found.count(False), len(found))
    alarmed = Fraction(alarms.count(True), len(alarms))
    return share * int(rule.miss) * missed + (1 - share) * int(rule.alarm) * alarmed


def all_cut_offs(score):
    values = sorted(set(score.tolist()))
    return [-math.inf, *((low + high) / 2 for low, high in pairwise(values)), math.inf]


def cheapest(positive, score, **weighed):
    """All cut-offs of least cost, in order."""
    cost = [exact_cost(positive, score, at, **weighed) for at in all_cut_offs(score)]
    return [at for at, each in zip(all_cut_offs(score), cost, strict=True) if each == min(cost)]


class TestByCost:
    # true classes 0 1 0 1 1 from the lowest score up; below -inf, .2, .4, .6, .8, inf: missed of
    # the class 0 0 1/3 1/3 2/3 1, false alarms of the others 1 1/2 1/2 0 0 0
    POSITIVE = (False, True, False, True, True)
    SCORE = (0.1, 0.3, 0.5, 0.7, 0.9)

    @pytest.mark.parametrize(
        ("miss", "share", "cut_off"),
        [
            # share 1/2: 3/6 1/4 5/12 1/6 2/6 3/6
            (1, 0.5, 0.6),
            # times 10 for misses: 1/2 1/4 23/12 20/12 ..
            (10, 0.5, 0.2),
            # share 1/10, 30 a miss: 9/10 9/20 29/20 1 2 3
            (30, 0.1, 0.2),
            # share 1/10, 1 a miss: 9/10 9/20 29/60 1/30 2/30 1/10
            (1, 0.1, 0.6),
            # nobody is of the class: no alarm from 0.6 on, so the middle of 0.6, 0.8 and infinity
            (1, 0.0, 0.8),
            # everybody is of the class: the lower of -infinity and 0.2
            (1, 1.0, -math.inf),
        ],
    )
    def test_by_hand(self, miss, share, cut_off):
        rule = CutOffRule("failing", "cost", miss=miss)
        found = learned(self.POSITIVE, self.SCORE, rule=rule, share=share)
        assert found == pytest.approx(cut_off, abs=1e-15)

    @given(SCORED, WEIGHTS, WEIGHTS, st.integers(1, 19))
    def test_the_middle_of_the_cheapest_by_brute_force(self, scored, miss, alarm, twentieths):
        positive, score = columns(scored)
        rule = CutOffRule("failing", "cost", miss=miss, alarm=alarm)
        share = Fraction(twentieths, 20)
        tied = cheapest(positive, score, rule=rule, share=share)
        found = learned(positive, score, rule=rule, share=float(share))
        assert found == tied[(len(tied) - 1) // 2]

    @given(SCORED, WEIGHTS, st.integers(1, 19))
    def test_costs_are_those_of_the_roc_curve(self, scored, miss, twentieths):
        positive, score = columns(scored)
        rule = CutOffRule("failing", "cost", miss=miss)
        share = twentieths / 20
        alarmed, found, thresholds = metrics.roc_curve(positive, score, drop_intermediate=False)
        cost = cost_per_case(found, 1 - alarmed, rule=rule, share=share)
        counted = [
            exact_cost(positive, score, at, rule=rule, share=Fraction(twentieths, 20))
            for at in thresholds
        ]
        assert_allclose(cost, np.array(counted, dtype=float), rtol=0, atol=1e-12)
        cut_off = learned(positive, score, rule=rule, share=share)
        called = calls(score, cut_off)
        reached = cost_per_case(
            metrics.recall_score(positive, called),
            metrics.recall_score(positive, called, pos_label=0),
            rule=rule,
            share=share,
        )
        assert reached == pytest.approx(cost.min(), abs=1e-12)

    @given(SCORED, st.randoms(use_true_random=False))
    def test_order_does_not_matter(self, scored, random):
        positive, score = columns(scored)
        mixed = random.sample(range(len(score)), len(score))
        for rule in (CutOffRule("failing", "cost", miss=3), by_floor(0.7)):
            expected = learned(positive, score, rule=rule, share=0.3)
            assert learned(positive[mixed], score[mixed], rule=rule, share=0.3) == expected

    def test_scores_that_say_nothing(self):
        # all or none are called: 4/5 against 3 x 1/5
        rule = CutOffRule("failing", "cost", miss=3)
        assert learned([0, 1, 0], [0.5] * 3, rule=rule, share=0.2) == math.inf
        assert learned([0, 1, 0], [0.5] * 3, rule=rule, share=0.6) == -math.inf

    def test_only_the_ratio_of_costs_counts(self):
        rng = np.random.default_rng(5)
        positive, score = rng.random(60) < 0.4, rng.integers(0, 30, 60) / 30
        for factor in (1e-9, 1e9):
            dear = CutOffRule("failing", "cost", miss=3 * factor, alarm=2 * factor)
            plain = CutOffRule("failing", "cost", miss=3, alarm=2)
            expected = learned(positive, score, rule=plain, share=0.4)
            assert learned(positive, score, rule=dear, share=0.4) == expected

    @pytest.mark.parametrize("factor", [1, 1_000_000])
    @pytest.mark.parametrize("twentieths", range(1, 20))
    def test_ties_are_found_through_rounding(self, twentieths, factor):
        # a case of each class at every score, a miss as dear in all as an alarm: all four tie
        rule = CutOffRule(
            "failing", "cost", miss=factor * (20 - twentieths), alarm=factor * twentieths
        )
        score = [0.25, 0.25, 0.5, 0.5, 0.75, 0.75]
        assert learned([0, 1] * 3, score, rule=rule, share=twentieths / 20) == 0.375

    def test_the_middle_of_ties_moves_less_and_costs_less_than_the_lowest(self):
        rng = np.random.default_rng(11)
        positive = np.arange(40) < 10
        ends, cost = [], []
        for _ in range(1500):
            score = rng.normal(np.where(positive, 1.5, 0.0))
            middle = learned(positive, score, rule=COST, share=0.25)
            tied = cheapest(positive, score, rule=COST, share=Fraction(1, 4))
            pair = np.array([tied[0], middle])
            # the normal distributions the scores came from
            ends.append(pair)
            cost.append(0.25 * norm.cdf(pair - 1.5) + 0.75 * norm.sf(pair))
        finite = np.isfinite(ends).all(axis=1)
        lowest, taken = np.std(np.array(ends)[finite], axis=0)
        assert taken < lowest
        saved = np.diff(cost)[:, 0]
        assert saved.mean() + 3 * saved.std() / math.sqrt(len(saved)) < 0


class TestUndefined:
    def test_a_class_without_a_case(self):
        for rule in (COST, by_floor(0.5)):
            for positive in ([True, True, True], [False, False, False]):
                assert math.isnan(learned(positive, [0.1, 0.5, 0.9], rule=rule, share=0.5))
            assert math.isnan(learned([], [], rule=rule, share=0.5))
            # the only case of the class has no score
            assert math.isnan(learned([1, 0], [math.nan, 0.5], rule=rule, share=0.5))

    def test_a_fixed_cut_off_needs_no_case(self):
        rule = CutOffRule("failing", "fixed", at=0.35)
        assert learned([], [], rule=rule, share=math.nan) == 0.35
        inner = [[math.nan, math.nan], [0.1, 0.9]]
        assert learned_by_round([1, 1], inner, rule=rule, share=0.5).tolist() == [0.35, 0.35]

    def test_an_infinite_score(self):
        message = "A cut-off is learned from finite scores; got an infinite one."
        with pytest.raises(EvalError, match=exactly(message)):
            learned([0, 1], [0.5, math.inf], rule=COST, share=0.5)

    def test_a_share_that_weighs_nothing(self):
        for share, shown in ((math.nan, "nan"), (1.5, "1.5")):
            message = f"`share` must be from 0 to 1; got {shown}."
            with pytest.raises(EvalError, match=exactly(message)):
                learned([0, 1], [0.2, 0.5], rule=COST, share=share)

    def test_rounds_hold_only_their_own_cases(self):
        rng = np.random.default_rng(3)
        positive = np.arange(30) % 3 == 0
        inner = np.where(rng.random((5, 30)) < 0.6, rng.random((5, 30)), math.nan)
        inner[4, positive] = math.nan
        for rule in (CutOffRule("failing", "cost", miss=4), by_floor(0.6)):
            found = learned_by_round(positive, inner, rule=rule, share=0.2)
            assert found.shape == (5,)
            assert np.isnan(found).tolist() == [False] * 4 + [True]
            for each, cut_off in zip(inner[:4], found[:4], strict=True):
                held = ~np.isnan(each)
                assert cut_off == learned(positive[held], each[held], rule=rule, share=0.2)

    def test_no_round(self):
        assert learned_by_round([1, 0], np.empty((0, 2)), rule=COST, share=0.5).shape == (0,)

    def test_calls(self):
        nan, inf = math.nan, math.inf
        found = calls([[0.4, 0.5, nan]] * 4, [[0.5], [-inf], [inf], [nan]])
        expected = [[0, 1, nan], [1, 1, nan], [0, 0, nan], [nan, nan, nan]]
        np.testing.assert_array_equal(found, expected)


class TestWithUndecided:
    RIGHT = (True, True, False, True, False, False)
    TOP = (0.95, 0.7, 0.8, 0.65, 0.6, 0.99)

    def test_by_hand(self):
        # 0.65 and 0.6 are left to a person; of the other four, two are right
        found = with_undecided(self.RIGHT, self.TOP, below=0.7)
        expected = (2 / 6, 2 / 4, 2 / 6, 4 / 6)
        assert_allclose(dataclasses.astuple(found), expected, rtol=0, atol=1e-15)

    def test_nobody_undecided_is_the_share_right(self):
        found = with_undecided(self.RIGHT, self.TOP, below=0)
        assert dataclasses.astuple(found) == (0, 0.5, 0.5, 0.5)

    def test_nobody_decided(self):
        found = with_undecided([True, False], [0.6, 0.7], below=0.9)
        assert math.isnan(found.right_of_decided)
        assert found.sent == found.right_counting_undecided_right == 1
        assert found.right_counting_undecided_wrong == 0

    def test_whole_weights_are_repeated_cases(self):
        weights = [2, 0, 3, 1, 1, 2]
        found = with_undecided(self.RIGHT, self.TOP, below=0.7, weights=weights)
        repeated = with_undecided(
            np.repeat(self.RIGHT, weights), np.repeat(self.TOP, weights), below=0.7
        )
        assert_allclose(dataclasses.astuple(found), dataclasses.astuple(repeated), atol=1e-15)

    @given(
        st.lists(
            st.tuples(st.booleans(), st.integers(10, 20), st.integers(0, 3)),
            min_size=1,
            max_size=15,
        ),
        st.integers(11, 19),
    )
    def test_in_fractions(self, answers, below):
        total = sum(weight for _, _, weight in answers)
        assume(total)
        found = with_undecided(
            [right for right, _, _ in answers],
            np.array([top for _, top, _ in answers]) / 20,
            below=below / 20,
            weights=[weight for _, _, weight in answers],
        )
        kept = sum(weight for _, top, weight in answers if top >= below)
        right = sum(weight for right, top, weight in answers if right and top >= below)
        expected = [
            1 - Fraction(kept, total),
            Fraction(right, kept) if kept else math.nan,
            Fraction(right, total),
            Fraction(right + total - kept, total),
        ]
        assert_allclose(dataclasses.astuple(found), np.array(expected, float), atol=1e-12)

    def test_an_unknown_probability_makes_all_undefined(self):
        found = with_undecided([True, False], [math.nan, 0.9], below=0.7)
        assert np.isnan(dataclasses.astuple(found)).all()
        counted = with_undecided([True, False], [math.nan, 0.9], below=0.7, weights=[0, 1])
        assert dataclasses.astuple(counted) == (0, 0, 0, 0)

    def test_no_case(self):
        assert np.isnan(dataclasses.astuple(with_undecided([], [], below=0.7))).all()
