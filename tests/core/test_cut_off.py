"""Cut-offs learned in rounds: by hand in fractions, by brute force, by ranks, by simulation."""

import dataclasses
import json
import math
from datetime import date, timedelta
from fractions import Fraction
from itertools import combinations, pairwise

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.stats import beta, norm, uniform
from scipy.stats.mstats import mquantiles
from sklearn import metrics
from sklearn.model_selection import StratifiedKFold

from evalcore.cut_off import (
    at_share,
    calls,
    cost_per_case,
    learned,
    learned_by_round,
    least_units,
    with_undecided,
)
from evalcore.cut_off_rule import CutOffRule
from evalcore.errors import EvalError, PlanError

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


SPREADS = (norm(1, 1), uniform(0.2, 0.7))


def rank_of(m, floor):
    """Rank among m scores at which a floor cuts, as a fraction."""
    return (m + 1) * (1 - Fraction(str(floor)))


def found_by_rank(m, floor):
    """Chance that a further score is called: it takes each of the m + 1 ranks alike often."""
    rule = by_floor(floor)
    called = []
    for rank in range(m + 1):
        inner = [float(r) for r in range(m + 1) if r != rank]
        cut_off = learned([True] * m + [False], [*inner, -1.0], rule=rule, share=0.5)
        called.append(rank >= cut_off)
    return Fraction(sum(called), m + 1)


class TestByFloor:
    @pytest.mark.parametrize("floor", [0.05, 0.3, 0.5, 0.6, 0.75, 0.8, 0.9, 0.95])
    @pytest.mark.parametrize("m", [1, 2, 3, 4, 8, 9, 10, 18, 19, 20, 39, 59])
    def test_a_further_score_is_found_often_enough(self, m, floor):
        exact = Fraction(str(floor))
        rank, found = rank_of(m, floor), found_by_rank(m, floor)
        if rank < 1:
            assert found == 1
        elif rank > m:
            # the highest is called, and nothing further down
            assert exact < found == Fraction(1, m + 1)
        else:
            # exactly where the rank is whole; the step of a rank is cut where its half is passed
            assert abs(found - exact) <= Fraction(1, 2) / (m + 1)
            assert rank.denominator > 1 or found == exact

    @pytest.mark.parametrize("floor", [0.05, 0.3, 0.5, 0.6, 0.75, 0.8, 0.9, 0.95])
    @pytest.mark.parametrize("m", [1, 2, 3, 4, 8, 9, 10, 18, 19, 20, 39, 59])
    def test_rank_by_other_libraries(self, m, floor):
        # both take the place (m + 1) q, and the lowest and the highest beyond the ends
        rng = np.random.default_rng([m, round(100 * floor)])
        score = rng.normal(size=m)
        positive, mixed = np.append([True] * m, [False] * 3), np.append(score, rng.normal(size=3))
        found = learned(positive, mixed, rule=by_floor(floor), share=0.5)
        if rank_of(m, floor) < 1:
            assert found == -math.inf
            return
        by_numpy = np.quantile(score, 1 - floor, method="weibull")
        by_scipy = mquantiles(score, 1 - floor, alphap=0, betap=0)[0]
        assert_allclose([found, found], [by_numpy, by_scipy], rtol=0, atol=1e-12)

    @pytest.mark.parametrize("floor", [0.3, 0.5, 0.6, 0.75, 0.8, 0.9, 0.95])
    @pytest.mark.parametrize("m", range(1, 60))
    def test_one_level_for_every_number(self, m, floor):
        # of m uniform scores the i-th smallest is i/(m + 1) on average (David & Nagaraja, Order
        # Statistics; value from memory), so what lies between two of them is as well
        rank = rank_of(m, floor)
        inner = [*(float(Fraction(i, m + 1)) for i in range(1, m + 1)), -1.0]
        cut_off = learned([True] * m + [False], inner, rule=by_floor(floor), share=0.5)
        if 1 <= rank <= m:
            assert cut_off == pytest.approx(float(1 - Fraction(str(floor))), abs=1e-8 / (m + 1))
        else:
            assert cut_off == (-math.inf if rank < 1 else inner[m - 1])

    @pytest.mark.parametrize("floor", [0.4, 0.5, 0.75])
    def test_ties_only_find_more(self, floor):
        # all ways in which six scores take two values, each of the six once the further one; a
        # cut-off between two scores misses no more than the upper one would
        rule, least = by_floor(floor), 1 - Fraction(math.ceil(rank_of(5, floor)), 6)
        shares = []
        for ups in (set(c) for k in range(7) for c in combinations(range(6), k)):
            score = np.array([float(i in ups) for i in range(6)])
            found = 0
            for further in range(6):
                inner = np.append(np.delete(score, further), -1.0)
                cut_off = learned([True] * 5 + [False], inner, rule=rule, share=0.5)
                found += score[further] >= cut_off
            shares.append(Fraction(int(found), 6))
        assert min(shares) == least
        assert rank_of(5, floor).denominator > 1 or least == Fraction(str(floor))

    def test_by_hand(self):
        # m = 9: the smallest at a floor of 0.9, the second at 0.8, the fifth at 0.5
        positive = [True] * 9 + [False]
        score = [0.5, 0.1, 0.9, 0.3, 0.7, 0.2, 0.8, 0.4, 0.6, 0.45]
        for floor, expected in ((0.91, -math.inf), (0.9, 0.1), (0.8, 0.2), (0.5, 0.5), (0.1, 0.9)):
            assert learned(positive, score, rule=by_floor(floor), share=0.5) == expected
        # half of the way from the second to the third, a fifth from the first to the second
        for floor, expected in ((0.75, 0.25), (0.88, 0.12), (0.89, 0.11)):
            found = learned(positive, score, rule=by_floor(floor), share=0.5)
            assert found == pytest.approx(expected, abs=1e-9)

    def test_a_floor_next_to_nothing_takes_the_highest_score(self):
        rule = by_floor(1e-12)
        assert learned([1, 1, 0], [0.2, 0.6, 0.9], rule=rule, share=0.5) == 0.6
        assert least_units(1e-12) == 1

    @pytest.mark.parametrize("hundredths", range(1, 100))
    def test_least_units(self, hundredths):
        missed = 1 - Fraction(hundredths, 100)
        least = next(m for m in range(1, 200) if (m + 1) * missed >= 1)
        assert least_units(hundredths / 100) == least
        rule = by_floor(hundredths / 100)
        for m, all_called in ((least - 1, True), (least, False)):
            if m:
                score = np.linspace(0.1, 0.9, m + 1)
                cut_off = learned([True] * m + [False], score, rule=rule, share=0.5)
                assert (cut_off == -math.inf) == all_called

    @pytest.mark.parametrize("of_class", SPREADS, ids=["normal", "uniform"])
    @pytest.mark.parametrize(
        ("m", "floor"), [(12, 0.9), (16, 0.9), (24, 0.9), (29, 0.9), (15, 0.75), (7, 0.9)]
    )
    def test_simulated_share_found(self, m, floor, of_class):
        rng = np.random.default_rng(2)
        ours = of_class.rvs((4000, m), random_state=rng)
        inner = np.column_stack([ours, rng.normal(0, 1, (4000, 5))])
        positive = np.arange(m + 5) < m
        cut_offs = learned_by_round(positive, inner, rule=by_floor(floor), share=0.5)
        found = of_class.sf(cut_offs)
        error = found.std() / math.sqrt(len(found))
        assert found.mean() >= floor - 3 * error
        # the share above the j-th smallest of m follows a beta distribution, with mean 1 - j/(m+1)
        rank = rank_of(m, floor)
        j = math.floor(rank)
        expected = beta(m + 1 - j, j).mean() if j else 1.0
        if rank == j or not j:
            assert abs(found.mean() - expected) <= 4 * error
        elif of_class is SPREADS[1]:
            # where the share falls evenly between two scores it is the floor itself
            assert abs(found.mean() - floor) <= 4 * error
        else:
            assert found.mean() <= expected + 4 * error
            assert found.mean() <= floor + 0.01


class TestBagsAndTheWholeTable:
    """Five bags of four fifths learn a cut-off each for what is held out; all cases learn another.

    Floor 0.9, scores that no model gave, so nothing but the number differs. With ranks rounded
    down, 20 of the class would be cut at 1 of 17 in bags and at 2 of 21 in all (3.6 points apart),
    24 at 2 of 20 or 21 and 2 of 25, 29 at 2 of 24 or 25 and 3 of 30.
    """

    RULE = by_floor(0.9)

    def rates(self, of_class, m, tables):
        """Share found: held out, expected of these cut-offs, and of the one of all cases."""
        rng, positive = np.random.default_rng([9, m]), np.arange(2 * m) < m
        for at in range(tables):
            score = np.append(of_class.rvs(m, random_state=rng), rng.normal(size=m))
            folds = StratifiedKFold(5, shuffle=True, random_state=at).split(score, positive)
            out = np.zeros((5, 2 * m), dtype=bool)
            for fold, (_, held) in enumerate(folds):
                out[fold, held] = True
            inner = np.where(out, math.nan, score)
            cut_offs = learned_by_round(positive, inner, rule=self.RULE, share=0.5)
            ours = out & positive
            expected = (of_class.sf(cut_offs) * ours.sum(axis=1)).sum() / m
            on_all = learned(positive, score, rule=self.RULE, share=0.5)
            yield (calls(score, cut_offs[:, None]) * ours).sum() / m, expected, of_class.sf(on_all)

    @pytest.mark.parametrize("of_class", SPREADS, ids=["normal", "uniform"])
    @pytest.mark.parametrize("m", [20, 24, 29])
    def test_are_cut_at_one_level(self, of_class, m):
        held, expected, on_all = np.array([*self.rates(of_class, m, 800)]).T
        for rate in (held, expected):
            error = np.std(rate - on_all, ddof=1) / math.sqrt(len(rate))
            apart = abs(np.mean(rate - on_all))
            assert error < 0.003
            if of_class is SPREADS[1]:
                assert apart <= 3 * error
            else:
                # between two scores of a bell the share does not fall evenly
                assert apart <= 0.0055 + 3 * error
            assert abs(rate.mean() - 0.9) < 0.012
        assert abs(on_all.mean() - 0.9) < 0.007


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


class TestAtShare:
    def test_by_hand(self):
        # of 1000: 80 of the class, 60 found; 920 others, 230 alarms
        rule = CutOffRule("failing", "cost", miss=10, alarm=2)
        found = at_share(0.75, 0.75, rule=rule, share=0.08)
        assert found.share == 0.08
        assert found.right_when_called == pytest.approx(60 / 290, abs=1e-15)
        assert found.right_when_not_called == pytest.approx(690 / 710, abs=1e-15)
        assert found.cost == pytest.approx((20 * 10 + 230 * 2) / 1000, abs=1e-15)
        assert found.called == pytest.approx(290 / 1000, abs=1e-15)

    def test_without_costs_it_is_the_share_wrong(self):
        found = at_share(0.75, 0.75, rule=by_floor(0.9), share=0.08)
        assert found.cost == pytest.approx((20 + 230) / 1000, abs=1e-15)

    def test_an_answer_that_never_comes(self):
        found = at_share(0.0, 1.0, rule=COST, share=0.25)
        assert math.isnan(found.right_when_called)
        assert (found.right_when_not_called, found.cost, found.called) == (0.75, 0.25, 0)

    def test_an_undefined_rate(self):
        found = dataclasses.asdict(at_share(math.nan, 0.5, rule=COST, share=0.25))
        assert [name for name, value in found.items() if not math.isnan(value)] == ["share"]

    def test_a_share_beyond_1(self):
        with pytest.raises(EvalError, match=exactly("`share` must be from 0 to 1; got 1.5.")):
            at_share(0.5, 0.5, rule=COST, share=1.5)

    @given(st.floats(0, 1), st.floats(0, 1), st.floats(0.01, 0.5), st.floats(0.5, 0.99))
    def test_the_middle_of_a_range_gives_the_mean_cost_over_it(self, found, passed, low, high):
        rule = CutOffRule("failing", "cost", miss=7, share_low=low, share_high=high)
        ends = [at_share(found, passed, rule=rule, share=share).cost for share in (low, high)]
        middle = at_share(found, passed, rule=rule, share=rule.share_used(0.9)).cost
        assert middle == pytest.approx(sum(ends) / 2, abs=1e-12)


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


OPEN = st.floats(0, 1, exclude_min=True, exclude_max=True)
COSTS = st.floats(0, exclude_min=True, allow_infinity=False)
OF_CLASS = st.text(min_size=1) | st.sampled_from(["a:b", "a:miss=1", "x=1,y", ":", "1", "ja, 2:1"])


@st.composite
def rules(draw):
    values = {}
    by = draw(st.sampled_from(["cost", "floor", "fixed"]))
    if by == "cost":
        values |= {"miss": draw(COSTS), "alarm": draw(COSTS)}
    elif by == "floor":
        values["floor"] = draw(OPEN)
    else:
        values["at"] = draw(st.floats(allow_nan=False, allow_infinity=False))
        values["set_on"] = draw(st.just("") | st.dates(max_value=date.today()).map(str))
    if draw(st.booleans()):
        values["share_low"], values["share_high"] = sorted([draw(OPEN), draw(OPEN)])
    if draw(st.booleans()):
        values["undecided_below"] = draw(st.floats(0.5, 1, exclude_min=True, exclude_max=True))
    return CutOffRule(draw(OF_CLASS), by, **values)


class TestRule:
    @given(rules())
    def test_round_trips(self, rule):
        assert CutOffRule.read(rule.written()) == rule
        assert CutOffRule(**json.loads(json.dumps(dataclasses.asdict(rule)))) == rule
        assert len({rule, CutOffRule.read(rule.written())}) == 1

    @pytest.mark.parametrize(
        ("text", "rule"),
        [
            ("f:miss=10", CutOffRule("f", "cost", miss=10)),
            ("f:alarm=0.5", CutOffRule("f", "cost", alarm=0.5)),
            (
                "f:miss=10,alarm=1,share=0.08",
                CutOffRule("f", "cost", miss=10, share_low=0.08, share_high=0.08),
            ),
            (
                "a:b:undecided=0.7,share=1e-05-2E-1,miss=2",
                CutOffRule(
                    "a:b", "cost", miss=2, share_low=1e-5, share_high=0.2, undecided_below=0.7
                ),
            ),
            ("f:floor=0.9,undecided=0", CutOffRule("f", "floor", floor=0.9)),
            (
                "f:at=0.35,set_on=2026-05-04",
                CutOffRule("f", "fixed", at=0.35, set_on="2026-05-04"),
            ),
            ("f:at=0", CutOffRule("f", "fixed")),
        ],
    )
    def test_read(self, text, rule):
        assert CutOffRule.read(text) == rule

    def test_written(self):
        rule = CutOffRule.read("a:b:undecided=0.70,share=0.05-0.20,miss=10.0")
        assert rule.written() == "a:b:miss=10,alarm=1,share=0.05-0.2,undecided=0.7"
        fixed = CutOffRule(
            "f", "fixed", at=0.35, set_on="2026-05-04", share_low=0.1, share_high=0.1
        )
        assert fixed.written() == "f:at=0.35,set_on=2026-05-04,share=0.1"

    def test_share_used(self):
        assert CutOffRule.read("f:miss=2").share_used(0.3) == 0.3
        assert CutOffRule.read("f:miss=2,share=0.08").share_used(0.3) == 0.08
        assert CutOffRule.read("f:miss=2,share=0.125-0.375").share_used(0.3) == 0.25

    def test_today_has_been_and_tomorrow_has_not(self):
        today = date.today()
        assert CutOffRule("f", "fixed", at=0.3, set_on=str(today)).set_on == str(today)
        # two days, should midnight pass between
        later = str(today + timedelta(days=2))
        message = f"`set_on` must be a date that has been; got {later}."
        with pytest.raises(PlanError, match=exactly(message)):
            CutOffRule("f", "fixed", at=0.3, set_on=later)

    def test_chosen_on_these_cases(self):
        texts = ("f:at=0.35", "f:at=0.35,set_on=2026-05-04", "f:miss=2", "f:floor=0.9")
        found = [CutOffRule.read(text).chosen_on_these_cases for text in texts]
        assert found == [True, False, False, False]


NO_SETTING = (
    "A cut-off has no setting 'recall'; it takes `miss`, `alarm`, `floor`, `at`, `set_on`, `share` "
    "or `undecided`."
)
ONE_OF_THREE = (
    "A cut-off takes costs (`miss`, `alarm`), a `floor` or a fixed `at`, exactly one of the three; "
)
SHARE = "`share` must lie strictly between 0 and 1, the lower end of a range first; got "
UNDECIDED = "`undecided` must be above 0.5 and below 1, or 0 for no case; got "


class TestErrors:
    @pytest.mark.parametrize(
        ("text", "message"),
        [
            ("failing", "A cut-off is written CLASS:name=value,...; got 'failing'."),
            (":miss=1", "A cut-off is written CLASS:name=value,...; got ':miss=1'."),
            ("a:b", "'b' in 'a:b' must be written name=value."),
            ("f:recall=1", NO_SETTING),
            ("f:miss=1,miss=2", "`miss` stands twice in 'f:miss=1,miss=2'; once is enough."),
            ("f:", ONE_OF_THREE + "got none in 'f:'."),
            ("f:set_on=2026-05-04", ONE_OF_THREE + "got none in 'f:set_on=2026-05-04'."),
            (
                "f:floor=0.9,miss=1,at=1",
                ONE_OF_THREE + "got `floor`, `miss` and `at` in 'f:floor=0.9,miss=1,at=1'.",
            ),
            ("f:miss=ten", "`miss` must be a number; got 'ten'."),
            ("f:miss=0", "`miss` must be above 0 and finite; got 0.0."),
            ("f:alarm=inf", "`alarm` must be above 0 and finite; got inf."),
            ("f:miss=nan", "`miss` must be above 0 and finite; got nan."),
            ("f:floor=1", "`floor` must lie strictly between 0 and 1; got 1."),
            ("f:floor=0", "`floor` must lie strictly between 0 and 1; got 0."),
            ("f:at=nan", "`at` must be finite; got nan."),
            ("f:miss=2,share=0", SHARE + "0."),
            ("f:miss=2,share=1", SHARE + "1."),
            ("f:miss=2,share=-0.1", SHARE + "-0.1."),
            ("f:miss=2,share=0.2-0.05", SHARE + "0.2 to 0.05."),
            ("f:miss=2,share=0-0.05", SHARE + "0 to 0.05."),
            ("f:miss=2,share=0.05-", "`share` must be a number; got '0.05-'."),
            ("f:miss=2,share=", "`share` must be a number; got ''."),
            ("f:miss=2,undecided=0.5", UNDECIDED + "0.5."),
            ("f:miss=2,undecided=1", UNDECIDED + "1.0."),
            ("f:miss=2,undecided=nan", UNDECIDED + "nan."),
            (
                "f:floor=0.9,set_on=2026-05-04",
                "`set_on` goes with a cut-off by fixed; got it with one by floor.",
            ),
            ("f:at=0.3,set_on=May", "`set_on` must be a date as YYYY-MM-DD; got 'May'."),
            ("f:at=0.3,set_on=20260504", "`set_on` must be a date as YYYY-MM-DD; got '20260504'."),
            (
                "f:at=0.3,set_on=9998-12-31",
                "`set_on` must be a date that has been; got 9998-12-31.",
            ),
        ],
    )
    def test_read(self, text, message):
        with pytest.raises(PlanError, match=exactly(message)):
            CutOffRule.read(text)

    @pytest.mark.parametrize(
        ("values", "message"),
        [
            (
                {"of_class": "", "by": "cost"},
                "A cut-off needs the class that is called from it up; got none.",
            ),
            (
                {"of_class": "f", "by": "youden"},
                "A cut-off is by cost, floor or fixed; got 'youden'.",
            ),
            (
                {"of_class": "f", "by": "floor", "floor": 0.9, "miss": 2.0},
                "`miss` goes with a cut-off by cost; got it with one by floor.",
            ),
            ({"of_class": "f", "by": "cost", "share_high": 0.2}, SHARE + "0 to 0.2."),
        ],
    )
    def test_made(self, values, message):
        with pytest.raises(PlanError, match=exactly(message)):
            CutOffRule(**values)

    def test_least_units(self):
        message = "`floor` must lie strictly between 0 and 1; got 1."
        with pytest.raises(PlanError, match=exactly(message)):
            least_units(1.0)
