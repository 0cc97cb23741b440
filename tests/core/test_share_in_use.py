"""What two rates are worth at a share: by hand, in fractions, ends by finding roots."""

import dataclasses
import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from scipy.optimize import brentq

from evalcore.binomial import clopper_pearson, wilson
from evalcore.cut_off_rule import CutOffRule
from evalcore.errors import EvalError
from evalcore.figures import Interval
from evalcore.intervals import square_and_add
from evalcore.share_in_use import Rate, at_share, ratio_of_shares, sum_of_shares

from .checks import exactly

NAN, INF = math.nan, math.inf
COST = CutOffRule("failing", "cost")
FLOOR = CutOffRule("failing", "floor", floor=0.9)
DEAR = CutOffRule("failing", "cost", miss=10, alarm=2)
FOUND, PASSED = Rate(0.8, 0.5625, 0.9375), Rate(0.75, 0.625, 0.84375)


def of(right, n, *, level=0.95, method=clopper_pearson):
    """A share with its interval by a method that is held to its source elsewhere."""
    given_ = right / n if method is wilson else right
    bounds = method(given_, n, level=level)
    return Rate(right / n, bounds.low, bounds.high)


def difference(ratio, over, under, *, side):
    """An end of the square-and-add interval of over - ratio x under, -1 the lower one."""
    if side < 0:
        outer, inner = over.value - over.low, under.high - under.value
    else:
        outer, inner = over.high - over.value, under.value - under.low
    return over.value - ratio * under.value + side * math.hypot(outer, ratio * inner)


def by_roots(over, under):
    """Ratios at which an end of that interval is 0; the estimate lies between them."""
    middle = over.value / under.value
    ends = []
    for side, (inner, outer) in ((-1, (0.0, middle)), (1, (middle, 1e9))):
        ends.append(
            brentq(
                lambda ratio, side=side: difference(ratio, over, under, side=side),
                inner,
                outer,
                xtol=1e-15,
                rtol=1e-14,
                maxiter=1000,
            )
        )
    return ends


PARTIAL = st.tuples(st.integers(1, 60), st.integers(2, 61)).filter(lambda xn: xn[0] < xn[1])
ANY = st.tuples(st.integers(0, 60), st.integers(1, 60)).filter(lambda xn: xn[0] <= xn[1])
METHODS = st.sampled_from([clopper_pearson, wilson])
SHARES = st.floats(0.01, 0.99)


class TestRate:
    def test_what_it_leaves_to_one(self):
        missed = Rate(0.75, 0.5, 0.875).missed
        assert dataclasses.astuple(missed) == (0.25, 0.125, 0.5)
        assert missed.missed == Rate(0.75, 0.5, 0.875)

    def test_bounded_if_all_three_are_known(self):
        assert Rate(0.75, 0.5, 0.875).bounded
        assert not Rate(0.75).bounded
        assert not Rate(0.75).missed.bounded
        for unknown in range(3):
            parts = [0.75, 0.5, 0.875]
            parts[unknown] = NAN
            assert not Rate(*parts).bounded


class TestRatio:
    @pytest.mark.parametrize("method", [clopper_pearson, wilson])
    @pytest.mark.parametrize(
        ("over", "under"),
        [((4, 40), (32, 40)), ((1, 9), (8, 9)), ((30, 60), (3, 12)), ((59, 60), (1, 60))],
    )
    def test_against_roots(self, over, under, method):
        first, second = of(*over, method=method), of(*under, method=method)
        assert ratio_of_shares(first, second) == pytest.approx(by_roots(first, second), rel=1e-9)

    @given(PARTIAL, PARTIAL, METHODS)
    def test_against_roots_anywhere(self, over, under, method):
        first, second = of(*over, method=method), of(*under, method=method)
        low, high = ratio_of_shares(first, second)
        assert low < first.value / second.value < high
        assert (low, high) == pytest.approx(by_roots(first, second), rel=1e-7)

    def test_ends_far_apart_to_both_sides(self):
        # not from one method: 0.1 in 0.05 to 0.5, 0.5 in 0.1 to 0.6
        over, under = Rate(0.1, 0.05, 0.5), Rate(0.5, 0.1, 0.6)
        found = ratio_of_shares(over, under)
        assert found == pytest.approx(by_roots(over, under), rel=1e-12)
        # 0.1 - 0.5 r = root(0.05^2 + (0.1 r)^2) and 0.5 r - 0.1 = root(0.4^2 + (0.4 r)^2):
        # 0.24 r^2 - 0.1 r + 0.0075 = 0 and 0.09 r^2 - 0.1 r - 0.15 = 0
        by_hand = (0.1 - math.sqrt(0.0028)) / 0.48, (0.1 + math.sqrt(0.064)) / 0.18
        assert found == pytest.approx(by_hand, rel=1e-12)

    def test_none_over(self):
        # 0 from the left; then r b = root(u^2 + r^2 (b - l)^2): 0.25^2 = r^2 (0.5^2 - 0.3^2)
        found = ratio_of_shares(Rate(0.0, 0.0, 0.25), Rate(0.5, 0.2, 0.75))
        assert found == (0.0, pytest.approx(0.25 / 0.4, rel=1e-15))

    def test_none_under(self):
        # a = root((a - l)^2 + r^2 u^2): 0.5^2 - 0.3^2 = r^2 0.25^2; nothing bounds it above
        found = ratio_of_shares(Rate(0.5, 0.2, 0.75), Rate(0.0, 0.0, 0.25))
        assert found == (pytest.approx(0.4 / 0.25, rel=1e-15), INF)

    def test_under_that_may_be_none(self):
        # over its whole length the upper end of the difference stays above 0
        over, under = Rate(0.5, 0.25, 0.75), Rate(0.25, 0.0, 0.5)
        low, high = ratio_of_shares(over, under)
        assert high == INF
        # 0.5 - r/4 = root(1/16 + r^2/16): 3/16 = r/4
        assert low == pytest.approx(0.75, rel=1e-15)
        assert all(difference(r, over, under, side=1) > 0 for r in (1, 10, 1e3, 1e6))

    def test_neither(self):
        found = ratio_of_shares(Rate(0.0, 0.0, 0.25), Rate(0.0, 0.0, 0.5))
        assert np.isnan(found).all()

    def test_an_end_that_is_not_known(self):
        for unknown in range(3):
            parts = [0.75, 0.5, 0.875]
            parts[unknown] = NAN
            for pair in ((Rate(*parts), FOUND), (FOUND, Rate(*parts))):
                assert np.isnan(ratio_of_shares(*pair)).all()

    @given(ANY, ANY, METHODS)
    def test_turned_over(self, over, under, method):
        first, second = of(*over, method=method), of(*under, method=method)
        assume(first.value or second.value)
        low, high = ratio_of_shares(first, second)
        other_low, other_high = ratio_of_shares(second, first)
        assert low <= high
        for end, other in ((low, other_high), (high, other_low)):
            turned = INF if end == 0 else 1 / end
            assert other == pytest.approx(turned, rel=1e-9)

    @given(ANY, ANY, METHODS, st.floats(0.5, 0.99), st.floats(0.5, 0.99))
    def test_a_higher_level_never_narrows(self, over, under, method, one, other):
        less, more = sorted([one, other])
        narrow, wide = (
            ratio_of_shares(
                of(*over, method=method, level=level), of(*under, method=method, level=level)
            )
            for level in (less, more)
        )
        assume(not math.isnan(narrow[0]))
        assert wide[0] <= narrow[0] * (1 + 1e-9)
        assert wide[1] >= narrow[1] * (1 - 1e-9)


class TestSum:
    @pytest.mark.parametrize("weights", [(4, 2), (1, 9), (Fraction(2, 25), Fraction(23, 25))])
    def test_by_the_formula_in_fractions(self, weights):
        rates = (Rate(0.25, 0.125, 0.5), Rate(0.375, 0.25, 0.75))
        exact = [[Fraction(part) for part in dataclasses.astuple(rate)] for rate in rates]
        value = sum(w * p for w, (p, _, _) in zip(weights, exact, strict=True))
        below = sum((w * (p - low)) ** 2 for w, (p, low, _) in zip(weights, exact, strict=True))
        above = sum((w * (high - p)) ** 2 for w, (p, _, high) in zip(weights, exact, strict=True))
        found = sum_of_shares(*rates, weights=tuple(float(w) for w in weights))
        # distances squared are fractions
        assert (float(value) - found[0]) ** 2 == pytest.approx(float(below), rel=1e-12)
        assert (found[1] - float(value)) ** 2 == pytest.approx(float(above), rel=1e-12)
        assert found[0] < value < found[1]

    def test_by_hand(self):
        # 3 x 0.4 + 4 x 0.5; below root(0.9^2 + 1.2^2) = 1.5, above root(1.2^2 + 1.6^2) = 2
        found = sum_of_shares(Rate(0.4, 0.1, 0.8), Rate(0.5, 0.2, 0.9), weights=(3, 4))
        assert found == pytest.approx((1.7, 5.2), rel=1e-14)

    @given(ANY, ANY, METHODS)
    def test_halves_are_the_mean_of_two_shares(self, one, other, method):
        rates = of(*one, method=method), of(*other, method=method)
        parts = [Interval(rate.low, rate.high, 0.95, "wilson") for rate in rates]
        mean = square_and_add([rate.value for rate in rates], parts)
        found = sum_of_shares(*rates, weights=(0.5, 0.5))
        assert found == pytest.approx((mean.low, mean.high), abs=1e-12)

    def test_one_share_alone(self):
        assert sum_of_shares(Rate(0.25, 0.125, 0.5), weights=(2,)) == (0.25, 1.0)
        # what weighs nothing adds nothing
        both = sum_of_shares(Rate(0.25, 0.125, 0.5), Rate(0.5, 0.25, 0.75), weights=(2, 0))
        assert both == (0.25, 1.0)

    def test_all_or_none_is_kept_within_what_can_be(self):
        none = Rate(0.0, 0.0, 0.25)
        assert sum_of_shares(none, none, weights=(3, 4)) == (0.0, 1.25)
        everything = Rate(1.0, 0.75, 1.0)
        assert sum_of_shares(everything, everything, weights=(3, 4)) == (5.75, 7.0)

    def test_an_end_that_is_not_known(self):
        for unknown in range(3):
            parts = [0.75, 0.5, 0.875]
            parts[unknown] = NAN
            assert np.isnan(sum_of_shares(FOUND, Rate(*parts), weights=(1, 1))).all()


class TestValues:
    def test_by_hand(self):
        # of 1000: 80 of the class, 60 found; 920 others, 230 alarms
        found = at_share(Rate(0.75), Rate(0.75), rule=DEAR, share=0.08)
        assert found.share == 0.08
        assert found.right_when_called.value == pytest.approx(60 / 290, abs=1e-15)
        assert found.right_when_not_called.value == pytest.approx(690 / 710, abs=1e-15)
        assert found.cost.value == pytest.approx((20 * 10 + 230 * 2) / 1000, abs=1e-15)
        assert found.called == pytest.approx(290 / 1000, abs=1e-15)
        for rate in (found.right_when_called, found.right_when_not_called, found.cost):
            assert not rate.bounded

    def test_without_costs_it_is_the_share_wrong(self):
        found = at_share(Rate(0.75), Rate(0.75), rule=FLOOR, share=0.08)
        assert found.cost.value == pytest.approx((20 + 230) / 1000, abs=1e-15)

    def test_an_answer_that_never_comes(self):
        found = at_share(Rate(0.0, 0.0, 0.25), Rate(1.0, 0.75, 1.0), rule=COST, share=0.25)
        assert np.isnan(dataclasses.astuple(found.right_when_called)).all()
        not_called = found.right_when_not_called
        assert (not_called.value, found.cost.value, found.called) == (0.75, 0.25, 0)
        assert not_called.bounded
        assert found.cost.bounded

    def test_an_undefined_rate(self):
        for pair in ((Rate(NAN), PASSED), (PASSED, Rate(NAN))):
            found = at_share(*pair, rule=COST, share=0.25)
            assert found.share == 0.25
            assert math.isnan(found.called)
            for rate in (found.right_when_called, found.right_when_not_called, found.cost):
                assert np.isnan(dataclasses.astuple(rate)).all()

    def test_a_share_beyond_1(self):
        with pytest.raises(EvalError, match=exactly("`share` must be from 0 to 1; got 1.5.")):
            at_share(FOUND, PASSED, rule=COST, share=1.5)

    @given(st.floats(0, 1), st.floats(0, 1), st.floats(0.01, 0.5), st.floats(0.5, 0.99))
    def test_the_middle_of_a_range_gives_the_mean_cost_over_it(self, found, passed, low, high):
        rule = CutOffRule("failing", "cost", miss=7, share_low=low, share_high=high)
        rates = Rate(found), Rate(passed)
        ends = [at_share(*rates, rule=rule, share=share).cost.value for share in (low, high)]
        middle = at_share(*rates, rule=rule, share=rule.share_used(0.9)).cost.value
        assert middle == pytest.approx(sum(ends) / 2, abs=1e-12)


def bayes(wrong_to_right, share):
    """Predictive value where a wrong call is so often as likely as a right one, in fractions."""
    right = Fraction(share)
    return float(right / (right + (1 - right) * Fraction(wrong_to_right)))


class TestEnds:
    @pytest.mark.parametrize("share", [0.02, 0.08, 0.25, 0.5, 0.9])
    def test_of_predictive_values_by_bayes_on_ends_of_the_ratio(self, share):
        found = at_share(FOUND, PASSED, rule=COST, share=share)
        alarms_to_found = by_roots(Rate(0.25, 0.15625, 0.375), FOUND)
        missed_to_passed = by_roots(Rate(0.2, 0.0625, 0.4375), PASSED)
        for rate, of_class, ratio, value in (
            (found.right_when_called, share, alarms_to_found, 0.25 / 0.8),
            (found.right_when_not_called, 1 - share, missed_to_passed, 0.2 / 0.75),
        ):
            # the larger the ratio the less often right
            low, high = (bayes(end, of_class) for end in reversed(ratio))
            assert (rate.low, rate.high) == pytest.approx((low, high), rel=1e-9)
            assert rate.value == pytest.approx(bayes(value, of_class), rel=1e-12)
            assert rate.low < rate.value < rate.high

    def test_of_predictive_values_by_hand(self):
        # 3/4 alarms to one found at the least, as in `test_under_that_may_be_none`
        found = at_share(Rate(0.25, 0.0, 0.5), Rate(0.5, 0.25, 0.75), rule=COST, share=0.25)
        called = found.right_when_called
        # none may be found, so it may never be right; at best 1 to 3 x 3/4
        assert (called.low, called.high) == (0.0, pytest.approx(4 / 13, rel=1e-15))
        assert called.value == pytest.approx(1 / 7, rel=1e-15)

    def test_of_cost_by_hand(self):
        # misses 0.25 x 4 x 0.4 in 0.1 to 0.8, alarms 0.75 x 2 x 0.5 in 0.3 to 0.9: 0.4 + 0.75;
        # below root(0.3^2 + 0.3^2), above root(0.4^2 + 0.6^2)
        rule = CutOffRule("failing", "cost", miss=4, alarm=2)
        found = at_share(Rate(0.6, 0.2, 0.9), Rate(0.5, 0.1, 0.7), rule=rule, share=0.25).cost
        expected = (1.15, 1.15 - math.sqrt(0.18), 1.15 + math.sqrt(0.52))
        assert dataclasses.astuple(found) == pytest.approx(expected, rel=1e-14)

    @pytest.mark.parametrize("share", [0.0, 1.0])
    def test_where_all_are_of_one_class_a_predictive_value_is_known(self, share):
        found = at_share(FOUND, PASSED, rule=DEAR, share=share)
        values = found.right_when_called, found.right_when_not_called
        assert [rate.value for rate in values] == [share, 1 - share]
        assert not any(rate.bounded for rate in values)
        # misses 10 x 0.2 in 0.0625 to 0.4375, alarms 2 x 0.25 in 0.15625 to 0.375
        expected = (2.0, 0.625, 4.375) if share else (0.5, 0.3125, 0.75)
        assert dataclasses.astuple(found.cost) == pytest.approx(expected, rel=1e-12)

    @pytest.mark.parametrize(("found_ends", "passed_ends"), [(True, False), (False, True)])
    def test_none_unless_both_rates_have_one(self, found_ends, passed_ends):
        rates = (
            FOUND if found_ends else Rate(FOUND.value),
            PASSED if passed_ends else Rate(PASSED.value),
        )
        found = at_share(*rates, rule=COST, share=0.25)
        known = at_share(FOUND, PASSED, rule=COST, share=0.25)
        for name in ("right_when_called", "right_when_not_called", "cost"):
            rate = getattr(found, name)
            assert rate.value == getattr(known, name).value
            assert math.isnan(rate.low)
            assert math.isnan(rate.high)

    @given(ANY, ANY, METHODS, SHARES, st.floats(0.5, 0.99), st.floats(0.5, 0.99))
    def test_a_higher_level_never_narrows(self, found, passed, method, share, one, other):
        less, more = (
            at_share(
                of(*found, method=method, level=level),
                of(*passed, method=method, level=level),
                rule=DEAR,
                share=share,
            )
            for level in sorted([one, other])
        )
        for name in ("right_when_called", "right_when_not_called", "cost"):
            narrow, wide = getattr(less, name), getattr(more, name)
            if not narrow.bounded:
                assert not wide.bounded
                continue
            assert wide.low <= narrow.low + 1e-9
            assert wide.high >= narrow.high - 1e-9
            assert narrow.low - 1e-9 <= narrow.value <= narrow.high + 1e-9

    @given(ANY, ANY, METHODS, SHARES)
    def test_renaming_the_classes_mirrors_them(self, found, passed, method, share):
        rates = of(*found, method=method), of(*passed, method=method)
        rule = CutOffRule("failing", "cost", miss=3, alarm=7)
        turned = CutOffRule("good", "cost", miss=7, alarm=3)
        one = at_share(*rates, rule=rule, share=share)
        other = at_share(*reversed(rates), rule=turned, share=1 - share)
        for mine, yours in (
            (one.right_when_called, other.right_when_not_called),
            (one.right_when_not_called, other.right_when_called),
            (one.cost, other.cost),
        ):
            expected = dataclasses.astuple(yours)
            assert dataclasses.astuple(mine) == pytest.approx(expected, abs=1e-9, nan_ok=True)
        assert one.called == pytest.approx(1 - other.called, abs=1e-12)
