"""Predictive values, likelihood ratios, cut-offs, net benefit: published, by hand, brute force."""

import math
from fractions import Fraction
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from sklearn import metrics

from evalcore.decisions import (
    best_cut_off,
    decision_curve,
    likelihood_ratios,
    net_benefit,
    predictive_values,
    youden,
)
from evalcore.errors import EvalError
from evalcore.measures import precisions, recalls, specificities

from .checks import cases, exactly

CELLS = st.integers(1, 40)
ANSWERS = st.lists(
    st.tuples(st.booleans(), st.integers(0, 8), st.integers(1, 4)), min_size=2, max_size=25
)
RATES = st.floats(0.01, 0.99)


def columns(answers):
    positive, score, weight = zip(*answers, strict=True)
    return np.array(positive), np.array(score) / 8, np.array(weight)


def of_positive_class(i):
    counts = np.array([[i["tn"], i["fp"]], [i["fn"], i["tp"]]], dtype=float)
    return counts, recalls(counts)[1], specificities(counts)[1]


@pytest.mark.parametrize("case", cases("05", "diag"))
def test_diagnostic_check_cases(case):
    counts, sensitivity, specificity = of_positive_class(case["inputs"])
    plus, minus = likelihood_ratios(sensitivity, specificity)
    share = case["inputs"]["prevalence"]
    positive, negative = predictive_values(sensitivity, specificity, share=share)
    found = {
        "sensitivity": sensitivity,
        "specificity": specificity,
        "ppv_sample": precisions(counts)[1],
        "npv_sample": precisions(counts)[0],
        "lr_pos": plus,
        "lr_neg": minus,
        "youden": youden(sensitivity, specificity),
        "ppv_at_prev": positive,
        "npv_at_prev": negative,
    }
    assert set(found) == set(case["expected"])
    for name, value in found.items():
        assert_allclose(value, case["expected"][name], rtol=0, atol=case["tolerance"])
        if name in case["published"]:
            exact = case["published_tolerance"]
            assert_allclose(value, case["published"][name], rtol=0, atol=exact)


@pytest.mark.parametrize("case", cases("05", "screen"))
def test_screening_check_cases(case):
    i = case["inputs"]
    found, _ = predictive_values(
        i["sensitivity"], 1 - i["false_positive_rate"], share=i["prevalence"]
    )
    assert found == pytest.approx(case["expected"]["ppv"], abs=case["tolerance"])
    assert found == pytest.approx(case["published"]["ppv"], abs=case["published_tolerance"])


@given(CELLS, CELLS, CELLS, CELLS)
def test_at_the_share_of_the_cases_predictive_values_are_precisions(tn, fp, fn, tp):
    counts, sensitivity, specificity = of_positive_class({"tn": tn, "fp": fp, "fn": fn, "tp": tp})
    share = (fn + tp) / counts.sum()
    positive, negative = predictive_values(sensitivity, specificity, share=share)
    assert_allclose([negative, positive], precisions(counts), rtol=0, atol=1e-12)
    y = np.repeat([0, 0, 1, 1], counts.astype(int).ravel())
    answered = np.repeat([0, 1, 0, 1], counts.astype(int).ravel())
    expected = metrics.class_likelihood_ratios(y, answered)
    assert_allclose(likelihood_ratios(sensitivity, specificity), expected, rtol=1e-9)


@given(RATES, RATES, RATES)
def test_odds_after_are_odds_before_times_the_ratio(sensitivity, specificity, share):
    plus, minus = likelihood_ratios(sensitivity, specificity)
    positive, negative = predictive_values(sensitivity, specificity, share=share)
    before = share / (1 - share)
    assert_allclose(positive / (1 - positive), before * plus, rtol=1e-9)
    assert_allclose((1 - negative) / negative, before * minus, rtol=1e-9)


class TestEdges:
    def test_no_wrong_answer_sets_no_bound(self):
        plus, minus = likelihood_ratios([0.9, 1.0, 0.0], [1.0, 0.0, 0.5])
        assert_allclose(plus, [math.nan, 1, 0])
        assert_allclose(minus, [0.1, math.nan, 2], rtol=1e-15)

    def test_undefined_rates_stay_undefined(self):
        for found in (
            *likelihood_ratios(math.nan, 0.9),
            *predictive_values(math.nan, 0.9, share=0.2),
        ):
            assert np.isnan(found)
        assert np.isnan(youden(math.nan, 0.9))

    def test_an_answer_that_never_comes(self):
        positive, negative = predictive_values([0.0, 1.0], [1.0, 0.0], share=0.3)
        assert_allclose(positive, [math.nan, 0.3], rtol=1e-15)
        assert_allclose(negative, [0.7, math.nan], rtol=1e-15)

    def test_nobody_and_everybody_of_the_class(self):
        positive, negative = predictive_values(0.8, 0.6, share=[0, 1])
        assert_allclose(positive, [0, 1])
        assert_allclose(negative, [1, 0])

    def test_a_share_beyond_1(self):
        message = "`share` must be from 0 to 1; got 1.25."
        with pytest.raises(EvalError, match=exactly(message)):
            predictive_values(0.8, 0.6, share=[0.5, 1.25])


@pytest.mark.parametrize("case", cases("05", "youden"))
def test_cut_off_check_cases(case):
    found = best_cut_off(case["inputs"]["y"], case["inputs"]["score"])
    for name, expected in case["expected"].items():
        assert getattr(found, name) == pytest.approx(expected, abs=case["tolerance"])
        published, exact = case["published"][name], case["published_tolerance"]
        assert getattr(found, name) == pytest.approx(published, abs=exact)


class TestBestCutOff:
    @given(ANSWERS)
    def test_the_best_of_all_and_the_lowest_of_equals(self, answers):
        positive, score, weight = columns(answers)
        assume(positive.any() and not positive.all())
        found = best_cut_off(positive, score, weights=weight)
        values = sorted(set(score.tolist()))
        middles = [(a + b) / 2 for a, b in pairwise(values)]
        indices = {}
        for threshold in (-math.inf, *middles, math.inf):
            called = score >= threshold
            sensitivity, specificity = (
                Fraction(int(weight[right].sum()), int(weight[side].sum()))
                for right, side in ((called & positive, positive), (~called & ~positive, ~positive))
            )
            indices[threshold] = sensitivity + specificity - 1, sensitivity, specificity
        best = max(index for index, _, _ in indices.values())
        lowest = min(t for t, (index, _, _) in indices.items() if index == best)
        assert found.threshold == lowest
        expected = [float(part) for part in indices[lowest]]
        got = [found.youden, found.sensitivity, found.specificity]
        assert_allclose(got, expected, rtol=0, atol=1e-15)

    def test_agrees_with_the_roc_curve_of_scikit_learn(self):
        rng = np.random.default_rng(7)
        positive = rng.random(80) < 0.4
        score = np.round(rng.normal(size=80) + positive, 1)
        weight = rng.random(80) + 0.1
        false, true, _ = metrics.roc_curve(positive, score, sample_weight=weight)
        found = best_cut_off(positive, score, weights=weight)
        assert found.youden == pytest.approx((true - false).max(), abs=1e-12)

    @given(ANSWERS)
    def test_a_case_counted_twice_is_two_cases(self, answers):
        positive, score, weight = columns(answers)
        assume(positive.any() and not positive.all())
        again = np.repeat(np.arange(len(score)), weight)
        assert best_cut_off(positive, score, weights=weight) == best_cut_off(
            positive[again], score[again]
        )

    def test_a_tie_stays_a_tie_where_rates_round_apart(self):
        # 2/6 from 2.5 up; from 6.5 up 5/6 - 1/2, in the last digit more
        assert 5 / 6 - 1 / 2 > 2 / 6
        found = best_cut_off([0, 0, 1, 0, 0, 0, 0, 1], [1, 2, 3, 4, 5, 6, 7, 7])
        assert (found.threshold, found.sensitivity, found.specificity) == (2.5, 1, 2 / 6)

    def test_scores_that_say_nothing_or_the_opposite(self):
        for score in ([0.4, 0.4, 0.4, 0.4], [0.1, 0.2, 0.8, 0.9]):
            found = best_cut_off([1, 1, 0, 0], score)
            assert (found.threshold, found.youden) == (-math.inf, 0)
            assert (found.sensitivity, found.specificity) == (1, 0)

    def test_a_class_without_a_case(self):
        for positive in ([1, 1], [0, 0]):
            found = best_cut_off(positive, [0.1, 0.2])
            assert math.isnan(found.threshold)
            assert math.isnan(found.youden)
            assert math.isnan(found.sensitivity)
            assert math.isnan(found.specificity)
        assert math.isnan(best_cut_off([], []).threshold)

    def test_a_case_without_weight_moves_no_mid_point(self):
        found = best_cut_off([0, 0, 1], [0.2, 0.5, 0.6], weights=[1, 0, 1])
        assert found.threshold == pytest.approx(0.4, rel=1e-15)

    def test_neighbouring_numbers_are_still_told_apart(self):
        # half way between them rounds down for some, up for others
        low = 0.3
        for _ in range(4):
            high = math.nextafter(low, 1)
            found = best_cut_off([0, 1], [low, high])
            assert (found.threshold, found.youden) == (high, 1)
            low = high

    def test_wide_scores_do_not_overflow(self):
        assert best_cut_off([0, 1], [1.5e308, 1.7e308]).threshold == pytest.approx(1.6e308)


@pytest.mark.parametrize("case", cases("05", "net_benefit"))
def test_net_benefit_check_cases(case):
    i = case["inputs"]
    found = decision_curve(i["y"], i["f"], thresholds=i["thresholds"])
    assert found.thresholds.tolist() == i["thresholds"]
    for name, expected in case["expected"].items():
        assert_allclose(getattr(found, name), expected, rtol=0, atol=case["tolerance"])


@pytest.mark.parametrize("case", cases("05", "nb_counts"))
def test_net_benefit_from_counts_check_cases(case):
    i = case["inputs"]
    found = net_benefit(i["tp"], i["fp"], n=i["n"], threshold=i["threshold"])
    assert found == pytest.approx(case["expected"]["net_benefit"], abs=case["tolerance"])
    published, exact = case["published"]["net_benefit"], case["published_tolerance"]
    assert found == pytest.approx(published, abs=exact)


@pytest.mark.parametrize("case", cases("05", "nb_all"))
def test_acting_on_all_check_cases(case):
    i = case["inputs"]
    events, n = i["events"], i["n"]
    expected, exact = case["expected"]["treat_all"], case["tolerance"]
    found = net_benefit(events, n - events, n=n, threshold=i["thresholds"])
    assert_allclose(found, expected, rtol=0, atol=exact)
    y = np.arange(n) < events
    curve = decision_curve(y, np.full(n, events / n), thresholds=i["thresholds"])
    assert_allclose(curve.treat_all, expected, rtol=0, atol=exact)


class TestNetBenefit:
    def test_by_hand(self):
        """Six cases; acting from 1/3 on: 2 of 3 positives, 1 false, 2/6 - 1/6 x 1/2 = 1/4."""
        curve = decision_curve(
            [1, 1, 1, 0, 0, 0], [0.9, 1 / 3, 0.2, 0.5, 0.1, 0.3], thresholds=[1 / 3]
        )
        assert_allclose(curve.model, [1 / 4], rtol=1e-15)
        # 3/6 - 3/6 x 1/2
        assert_allclose(curve.treat_all, [1 / 4], rtol=1e-15)
        assert curve.treat_none.tolist() == [0]

    @given(ANSWERS, st.floats(0, 0.95))
    def test_acting_from_0_on_is_acting_on_all(self, answers, threshold):
        positive, forecast, weight = columns(answers)
        curve = decision_curve(positive, forecast, thresholds=[0, threshold], weights=weight)
        share = np.average(positive, weights=weight)
        assert_allclose([curve.model[0], curve.treat_all[0]], [share, share], rtol=0, atol=1e-12)
        assert (curve.model <= share + 1e-12).all()
        again = np.repeat(np.arange(len(forecast)), weight)
        twice = decision_curve(positive[again], forecast[again], thresholds=[0, threshold])
        assert_allclose(curve.model, twice.model, rtol=0, atol=1e-12)
        assert_allclose(curve.treat_all, twice.treat_all, rtol=0, atol=1e-12)

    @given(st.integers(1, 30), st.integers(1, 30))
    def test_acting_on_all_is_worth_nothing_at_the_share_of_positives(self, events, others):
        n = events + others
        assert net_benefit(events, others, n=n, threshold=events / n) == pytest.approx(0, abs=1e-12)

    def test_no_case(self):
        curve = decision_curve([], [], thresholds=[0.1, 0.2])
        for values in (curve.model, curve.treat_all, curve.treat_none):
            assert_allclose(values, [math.nan] * 2)
        assert np.isnan(net_benefit(0, 0, n=0, threshold=0.2))

    @pytest.mark.parametrize("threshold", [1.0, -0.5])
    def test_thresholds_out_of_range(self, threshold):
        message = f"`threshold` must be from 0 to below 1; got {threshold}."
        with pytest.raises(EvalError, match=exactly(message)):
            net_benefit(3, 2, n=9, threshold=[0.5, threshold])
        with pytest.raises(EvalError, match=exactly(message)):
            decision_curve([0, 1], [0.1, 0.2], thresholds=[threshold])
