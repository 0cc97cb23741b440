"""Intervals: published figures, other libraries, and limits put back into what defines them."""

import math

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy import stats
from statsmodels.stats.proportion import proportion_confint

from evalcore.figures import Interval
from evalcore.intervals import (
    auc_score_type,
    clopper_pearson,
    effective_n,
    hanley_mcneil_variance,
    normal_quantile,
    rows_of_units,
    square_and_add,
    wilson,
    with_model_variance,
)

from .checks import cases

LEVELS = (0.8, 0.95, 0.99)


def ends(interval):
    return interval.low, interval.high


@pytest.mark.parametrize("level", LEVELS)
def test_normal_quantile(level):
    assert normal_quantile(level) == pytest.approx(stats.norm.ppf(0.5 + level / 2), rel=1e-12)


@pytest.mark.parametrize("case", cases("03", "binom_ci"))
def test_binomial_check_cases(case):
    x, n, level = (case["inputs"][name] for name in ("x", "n", "level"))
    found = {
        "wilson": wilson(x / n, n, level=level),
        "clopper_pearson": clopper_pearson(x, n, level=level),
    }
    for method, interval in found.items():
        assert (interval.method, interval.level) == (method, level)
        assert_allclose(ends(interval), case["expected"][method], rtol=0, atol=case["tolerance"])
        if "published" in case:
            assert_allclose(
                ends(interval),
                case["published"][method],
                rtol=0,
                atol=case["published_tolerance"],
            )


@pytest.mark.parametrize("case", cases("03", "zero_fail"))
def test_no_failures(case):
    n, expected = case["inputs"]["n"], case["expected"]
    one_sided = clopper_pearson(0, n, level=0.90).high
    assert one_sided == pytest.approx(expected["one_sided_upper95"], abs=case["tolerance"])
    assert one_sided < expected["rule_of_three"]
    two_sided = clopper_pearson(0, n, level=0.95).high
    assert two_sided == pytest.approx(expected["two_sided_cp_upper95"], abs=case["tolerance"])


@pytest.mark.parametrize("case", cases("03", "demo_conf"))
def test_demonstrated_share(case):
    given, expected = case["inputs"], case["expected"]
    right, n = given["correct"], given["n"]
    bound = clopper_pearson(right, n, level=0.90).low
    assert bound == pytest.approx(expected["one_sided_lower95"], abs=case["tolerance"])
    # at the confidence with which the share is shown, the bound is that share
    reached = clopper_pearson(right, n, level=2 * expected["confidence"] - 1).low
    assert reached == pytest.approx(given["reliability"], abs=case["tolerance"])


@pytest.mark.parametrize("case", cases("03", "demo_n"))
def test_sizes_of_standard_tables(case):
    given, n = case["inputs"], case["expected"]["n"]
    level = 2 * given["confidence"] - 1
    bounds = [
        clopper_pearson(size - given["failures"], size, level=level).low for size in (n - 1, n)
    ]
    assert bounds[0] < given["reliability"] <= bounds[1]


@pytest.mark.parametrize("level", LEVELS)
@pytest.mark.parametrize("n", [1, 7, 29, 150])
def test_agree_with_statsmodels(n, level):
    x = np.arange(n + 1)
    for method, function in (
        ("wilson", lambda k: wilson(k / n, n, level=level)),
        ("beta", lambda k: clopper_pearson(k, n, level=level)),
    ):
        low, high = proportion_confint(x, n, alpha=1 - level, method=method)
        found = np.array([ends(function(int(k))) for k in x])
        assert_allclose(found[:, 0], low, rtol=0, atol=1e-12)
        assert_allclose(found[:, 1], high, rtol=0, atol=1e-12)


class TestStudyValues:
    """Values of the simulation study's notes, six digits."""

    @pytest.mark.parametrize(
        ("interval", "low", "high"),
        [
            (wilson(0.8, 50), 0.669629, 0.887562),
            (wilson(1.0, 20), 0.838875, 1),
            (clopper_pearson(18, 20), 0.683017, 0.987651),
            (with_model_variance(0.84, 60, 0.03**2), 0.703128, 0.920869),
            (
                square_and_add([0.9, 0.7], [wilson(0.9, 40), wilson(0.7, 20)], math.nan),
                0.672540,
                0.882958,
            ),
            (
                square_and_add([0.9, 0.7], [wilson(0.9, 40), wilson(0.7, 20)], 0.02**2),
                0.666649,
                0.891753,
            ),
            (auc_score_type(0.85, 30, 30, math.nan), 0.720625, 0.922177),
            (auc_score_type(0.85, 30, 30, 0.02**2), 0.713726, 0.929224),
            (auc_score_type(1.0, 10, 20, math.nan), 0.848921, 1),
        ],
    )
    def test_ends(self, interval, low, high):
        assert_allclose(ends(interval), (low, high), rtol=0, atol=5e-7)

    def test_effective_n(self):
        assert effective_n(0.84, 60, 0.03**2) == pytest.approx(42.80255, abs=5e-6)


class TestPutBack:
    """Each limit is where the observed share is just as far away as the method allows."""

    @pytest.mark.parametrize("level", LEVELS)
    @pytest.mark.parametrize(("p", "n"), [(0.84, 50), (0.13, 23), (0.971, 36.5)])
    def test_wilson(self, p, n, level):
        z = stats.norm.ppf(0.5 + level / 2)
        for t in ends(wilson(p, n, level=level)):
            assert abs(p - t) == pytest.approx(z * math.sqrt(t * (1 - t) / n), rel=1e-10)

    @pytest.mark.parametrize("level", LEVELS)
    @pytest.mark.parametrize(("x", "n"), [(42, 50), (3, 23), (1, 9)])
    def test_clopper_pearson(self, x, n, level):
        bounds = clopper_pearson(x, n, level=level)
        tail = (1 - level) / 2
        assert stats.binom.sf(x - 1, n, bounds.low) == pytest.approx(tail, rel=1e-9)
        assert stats.binom.cdf(x, n, bounds.high) == pytest.approx(tail, rel=1e-9)

    @pytest.mark.parametrize("level", LEVELS)
    def test_with_model_variance(self, level):
        p, n, tau2 = 0.87, 73, 0.04**2
        z = stats.norm.ppf(0.5 + level / 2)
        for t in ends(with_model_variance(p, n, tau2, level=level)):
            # 1/n_eff = 1/n + tau2 / (p (1 - p))
            variance = t * (1 - t) * (1 / n + tau2 / (p * (1 - p)))
            assert abs(p - t) == pytest.approx(z * math.sqrt(variance), rel=1e-10)

    @pytest.mark.parametrize("level", LEVELS)
    @pytest.mark.parametrize(("value", "n1", "n0", "tau"), [(0.85, 30, 41, 0.03), (0.63, 9, 52, 0)])
    def test_auc(self, value, n1, n0, tau, level):
        z = stats.norm.ppf(0.5 + level / 2)
        half = (n1 + n0) / 2
        for t in ends(auc_score_type(value, n1, n0, tau**2, level=level)):
            # Newcombe's method 5 is Hanley and McNeil's variance with both sizes at their mean
            variance = hanley_mcneil_variance(t, half, half) * half * half / (n1 * n0)
            assert abs(value - t) == pytest.approx(z * math.sqrt(variance + tau**2), rel=1e-9)


class TestHanleyMcNeil:
    @pytest.mark.parametrize("case", cases("05", "auc_hm"))
    def test_check_cases(self, case):
        y, expected = np.array(case["inputs"]["y"]), case["expected"]
        variance = hanley_mcneil_variance(expected["auc"], y.sum(), (1 - y).sum())
        assert math.sqrt(variance) == pytest.approx(
            expected["se_hanley_mcneil"], abs=case["tolerance"]
        )
        if "se_hanley_mcneil" in case.get("published", {}):
            assert math.sqrt(variance) == pytest.approx(
                case["published"]["se_hanley_mcneil"], abs=case["published_tolerance"]
            )

    @pytest.mark.parametrize("case", cases("06", "se_auc"))
    def test_standard_errors(self, case):
        given = case["inputs"]
        variance = hanley_mcneil_variance(given["auc"], given["n_pos"], given["n_neg"])
        assert math.sqrt(variance) == pytest.approx(case["expected"]["se"], abs=case["tolerance"])


class TestSquareAndAdd:
    def test_by_hand(self):
        # shares 0.8, 0.5, 0.9 with distances below 0.1, 0.2, 0.2 and above 0.1, 0.1, 0.05
        made = [
            Interval(p - below, p + above, 0.95, "made")
            for p, below, above in ((0.8, 0.1, 0.1), (0.5, 0.2, 0.1), (0.9, 0.2, 0.05))
        ]
        found = square_and_add([0.8, 0.5, 0.9], made, math.nan)
        mean = 2.2 / 3
        assert found.low == pytest.approx(mean - 0.3 / 3, rel=1e-12)
        assert found.high == pytest.approx(mean + 0.15 / 3, rel=1e-12)
        assert found.method == "square_and_add"

    def test_one_share_alone_keeps_its_interval(self):
        part = wilson(0.77, 31, level=0.9)
        found = square_and_add([0.77], [part], math.nan)
        assert_allclose(ends(found), ends(part), rtol=1e-14)
        assert found.level == 0.9

    def test_an_empty_class_leaves_it_undefined(self):
        found = square_and_add([0.77, math.nan], [wilson(0.77, 31), wilson(math.nan, 0)], 0.01)
        assert not found.defined


class TestRowsOfUnits:
    units = np.repeat(np.arange(5), [2, 3, 1, 4, 2])
    shares = np.array([1, 0.9, 0.1, 0, 0.2, 0.3, 1, 1, 0.9, 1, 0.35, 0.5])

    def test_by_the_formula(self):
        n, p = 12, self.shares.mean()
        sums = [(self.shares[self.units == g] - p).sum() for g in range(5)]
        for tau2 in (0.0, 0.02**2):
            variance = sum(s * s for s in sums) / n**2 * 5 / 4 + tau2
            assert variance > p * (1 - p) / n
            t = stats.t.ppf(0.975, 4)
            for end in ends(rows_of_units(self.shares, self.units, tau2)):
                scaled = end * (1 - end) / (p * (1 - p)) * variance
                assert abs(p - end) == pytest.approx(t * math.sqrt(scaled), rel=1e-10)

    def test_never_counts_for_more_than_rows(self):
        # units alike in their mean: the rows' own variance is the least that is used
        shares = np.tile([1.0, 0.0, 1.0, 1.0], 6)
        found = rows_of_units(shares, np.repeat(np.arange(6), 4), 0.0)
        t = stats.t.ppf(0.975, 5)
        for end in ends(found):
            assert abs(0.75 - end) == pytest.approx(t * math.sqrt(end * (1 - end) / 24), rel=1e-10)

    def test_all_rows_right_counts_units(self):
        # Wilson at p = 1: n / (n + t^2)
        found = rows_of_units(np.ones(24), np.repeat(np.arange(6), 4), 0.0)
        assert found.high == 1
        assert found.low == pytest.approx(6 / (6 + stats.t.ppf(0.975, 5) ** 2), rel=1e-12)

    def test_undefined_model_variance_adds_nothing(self):
        assert rows_of_units(self.shares, self.units, math.nan) == rows_of_units(
            self.shares, self.units, 0.0
        )

    def test_one_unit_says_nothing(self):
        assert not rows_of_units(np.array([1.0, 0.5]), np.array([0, 0]), 0.0).defined


class TestNamesAndEdges:
    def test_model_variance_is_named_only_where_it_was_added(self):
        parts = [wilson(0.9, 40), wilson(0.7, 20)]
        assert with_model_variance(0.84, 60, math.nan) == wilson(0.84, 60)
        assert with_model_variance(0.84, 60, 0.001).method == "wilson_model_variance"
        assert square_and_add([0.9, 0.7], parts, math.nan).method == "square_and_add"
        assert square_and_add([0.9, 0.7], parts, 0.1).method == "square_and_add_model_variance"
        assert auc_score_type(0.8, 20, 20, math.nan).method == "auc_score_type"
        assert auc_score_type(0.8, 20, 20, 0.1).method == "auc_score_type_model_variance"

    def test_plain_methods_are_not_named_after_a_variance_they_lack(self):
        assert auc_score_type(0.8, 20, 20).method == "auc_score_type"
        assert (
            square_and_add([0.9, 0.7], [wilson(0.9, 40), wilson(0.7, 20)]).method
            == "square_and_add"
        )

    @pytest.mark.parametrize(
        "interval",
        [
            wilson(math.nan, 20),
            wilson(0.7, 0),
            with_model_variance(math.nan, 20, 0.01),
            auc_score_type(math.nan, 20, 20),
            auc_score_type(0.8, 0, 20),
        ],
    )
    def test_undefined(self, interval):
        assert not interval.defined

    def test_a_perfect_share_still_has_a_width_under_model_variance(self):
        # p (1 - p) is not let below 0.001: n_eff = 30 x 0.001 / (0.001 + 30 x 0.0004)
        n_eff = 0.03 / 0.013
        z2 = stats.norm.ppf(0.975) ** 2
        found = with_model_variance(1.0, 30, 0.0004)
        assert_allclose(ends(found), (n_eff / (n_eff + z2), 1), rtol=1e-12)


shares = st.floats(0, 1)
sizes = st.integers(1, 400)
levels = st.floats(0.5, 0.995)
tau2s = st.floats(0, 0.05)


@given(shares, sizes, tau2s, levels, levels)
def test_a_higher_level_never_narrows(p, n, tau2, one, other):
    low, high = sorted((one, other))
    x, n0 = round(p * n), max(1, n // 2)
    for function in (
        lambda level: wilson(p, n, level=level),
        lambda level: clopper_pearson(x, n, level=level),
        lambda level: with_model_variance(p, n, tau2, level=level),
        lambda level: auc_score_type(p, n, n0, tau2, level=level),
        lambda level: square_and_add(
            [p, 0.63], [wilson(p, n, level=level), wilson(0.63, 31, level=level)], tau2
        ),
    ):
        narrow, wide = function(low), function(high)
        assert wide.low <= narrow.low + 1e-12
        assert wide.high >= narrow.high - 1e-12


@given(st.integers(0, 60), st.integers(1, 60), st.integers(2, 5), tau2s)
def test_more_cases_never_widen_at_the_same_share(x, n, times, tau2):
    assume(x <= n)
    p = x / n
    for few, many in (
        (wilson(p, n), wilson(p, n * times)),
        (clopper_pearson(x, n), clopper_pearson(x * times, n * times)),
        (with_model_variance(p, n, tau2), with_model_variance(p, n * times, tau2)),
        (auc_score_type(p, n, n, tau2), auc_score_type(p, n * times, n * times, tau2)),
    ):
        assert few.low <= many.low + 1e-12
        assert many.high <= few.high + 1e-12


@given(st.integers(0, 80), st.integers(1, 80), tau2s, levels)
def test_right_and_wrong_may_be_exchanged(x, n, tau2, level):
    assume(x <= n)
    p = x / n
    for one, other in (
        (wilson(p, n, level=level), wilson(1 - p, n, level=level)),
        (clopper_pearson(x, n, level=level), clopper_pearson(n - x, n, level=level)),
        (
            with_model_variance(p, n, tau2, level=level),
            with_model_variance(1 - p, n, tau2, level=level),
        ),
        (
            auc_score_type(p, n, n + 3, tau2, level=level),
            auc_score_type(1 - p, n + 3, n, tau2, level=level),
        ),
    ):
        assert_allclose(ends(one), (1 - other.high, 1 - other.low), rtol=0, atol=1e-9)


@given(shares, sizes, tau2s)
def test_the_share_lies_inside_and_the_ends_within_0_and_1(p, n, tau2):
    # right answers of units may be halves; Wilson's share is taken as it comes
    halves = round(2 * p * n)
    for interval in (
        wilson(p, n),
        clopper_pearson(halves / 2, n),
        with_model_variance(p, n, tau2),
        auc_score_type(p, n, n, tau2),
        square_and_add([p, 0.9], [wilson(p, n), wilson(0.9, 12)], tau2),
    ):
        middle = {
            "clopper_pearson": halves / (2 * n),
            "square_and_add_model_variance": (p + 0.9) / 2,
        }.get(interval.method, p)
        assert 0 <= interval.low <= middle + 1e-12
        assert middle - 1e-12 <= interval.high <= 1


@given(shares, sizes, st.floats(1e-6, 0.05))
def test_model_variance_never_narrows(p, n, tau2):
    plain, wider = wilson(p, n), with_model_variance(p, n, tau2)
    assert wider.low <= plain.low + 1e-12
    assert wider.high >= plain.high - 1e-12
    assert effective_n(p, n, tau2) < n
