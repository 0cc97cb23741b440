"""The binomial family against check cases, statsmodels, and its definitions put back."""

import math

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy import stats
from statsmodels.stats.proportion import confint_proportions_2indep, proportion_confint

from evalcore import intervals
from evalcore.binomial import (
    agresti_coull,
    clopper_pearson,
    jeffreys,
    newcombe_difference,
    wald,
    wilson,
    wilson_corrected,
)
from evalcore.intervals import effective_n, exact_with_model_variance
from evalcore.one_sided import confidence_shown, lower_bound, rule_of_three, upper_bound

from .checks import cases, exactly

LEVELS = (0.8, 0.95, 0.99)
FAMILY = (clopper_pearson, wilson_corrected, agresti_coull, jeffreys, wald)


def ends(interval):
    return interval.low, interval.high


@pytest.mark.parametrize("case", cases("03", "binom_ci"))
def test_binomial_check_cases(case):
    x, n, level = (case["inputs"][name] for name in ("x", "n", "level"))
    found = {
        "wilson": wilson(x / n, n, level=level),
        "wilson_cc": wilson_corrected(x, n, level=level),
        "clopper_pearson": clopper_pearson(x, n, level=level),
        "agresti_coull": agresti_coull(x, n, level=level),
        "agresti_coull_unclipped": agresti_coull(x, n, level=level, clipped=False),
        "jeffreys": jeffreys(x, n, level=level),
        "wald": wald(x, n, level=level),
    }
    assert set(found) == set(case["expected"])
    for method, interval in found.items():
        assert interval.level == level
        assert_allclose(
            ends(interval), case["expected"][method], rtol=0, atol=case["tolerance"], err_msg=method
        )
    for method, published in case.get("published", {}).items():
        assert_allclose(ends(found[method]), published, rtol=0, atol=case["published_tolerance"])


@pytest.mark.parametrize("case", cases("03", "newcombe_diff"))
def test_difference_check_cases(case):
    given_, expected = case["inputs"], case["expected"]
    first, second = (given_["x1"], given_["n1"]), (given_["x2"], given_["n2"])
    found = ends(newcombe_difference(first, second, level=given_.get("level", 0.95)))
    assert_allclose(found, expected["interval"], rtol=0, atol=case["tolerance"])
    assert_allclose(found, case["published"]["interval"], rtol=0, atol=case["published_tolerance"])
    assert found[0] < expected["diff"] < found[1]


@pytest.mark.parametrize("case", cases("03", "zero_fail"))
def test_no_failures(case):
    n, expected, exact = case["inputs"]["n"], case["expected"], case["tolerance"]
    assert upper_bound(0, n) == pytest.approx(expected["one_sided_upper95"], abs=exact)
    assert clopper_pearson(0, n).high == pytest.approx(expected["two_sided_cp_upper95"], abs=exact)
    assert rule_of_three(n) == pytest.approx(expected["rule_of_three"], abs=exact)
    # the same counted from the other end: everything right
    assert lower_bound(n, n) == pytest.approx(1 - expected["one_sided_upper95"], abs=exact)


@pytest.mark.parametrize("case", cases("03", "demo_conf"))
def test_confidence_shown(case):
    right, n, least = (case["inputs"][name] for name in ("correct", "n", "reliability"))
    expected, exact = case["expected"], case["tolerance"]
    shown = confidence_shown(right, n, least=least)
    assert shown == pytest.approx(expected["confidence"], abs=exact)
    assert shown == pytest.approx(stats.binom.cdf(right - 1, n, least), abs=1e-12)
    assert lower_bound(right, n) == pytest.approx(expected["one_sided_lower95"], abs=exact)
    assert lower_bound(right, n, confidence=shown) == pytest.approx(least, abs=1e-12)


class TestNewcombesTables:
    """Newcombe 1998, Stat. Med. 17:857-872, Table I: 81/263, 15/148, 0/20, 1/29."""

    @pytest.mark.parametrize(
        ("x", "n", "method", "low", "high"),
        [
            (15, 148, wald, 0.0527, 0.1500),
            (15, 148, wilson_corrected, 0.0598, 0.1644),
            (15, 148, clopper_pearson, 0.0578, 0.1617),
            (0, 20, wald, 0.0, 0.0),
            (0, 20, wilson_corrected, 0.0, 0.2005),
            (0, 20, clopper_pearson, 0.0, 0.1684),
            (1, 29, wilson_corrected, 0.0018, 0.1963),
        ],
    )
    def test_ends(self, x, n, method, low, high):
        assert_allclose(ends(method(x, n)), (low, high), rtol=0, atol=5.1e-5)

    # Newcombe 1998, Stat. Med. 17:873-890, Table II, method 10
    @pytest.mark.parametrize(
        ("first", "second", "low", "high"),
        [
            ((56, 70), (48, 80), 0.0524, 0.3339),
            ((9, 10), (3, 10), 0.1705, 0.8090),
            ((10, 10), (0, 20), 0.6791, 1.0),
            ((10, 10), (0, 10), 0.6075, 1.0),
        ],
    )
    def test_differences(self, first, second, low, high):
        found = newcombe_difference(first, second)
        assert_allclose(ends(found), (low, high), rtol=0, atol=5.1e-5)


@pytest.mark.parametrize("level", LEVELS)
@pytest.mark.parametrize("n", [1, 7, 29, 150])
def test_agree_with_statsmodels(n, level):
    x = np.arange(n + 1)
    for name, method in (("agresti_coull", agresti_coull), ("jeffreys", jeffreys)):
        low, high = proportion_confint(x, n, alpha=1 - level, method=name)
        found = np.array([ends(method(int(k), n, level=level)) for k in x])
        # only the ends at 0 and 1 follow the rule of Brown, Cai and DasGupta
        inner_low, inner_high = x > 0, x < n
        if name == "agresti_coull":
            inner_low = inner_high = x >= 0
        assert_allclose(found[inner_low, 0], low[inner_low], rtol=0, atol=1e-12)
        assert_allclose(found[inner_high, 1], high[inner_high], rtol=0, atol=1e-12)
    assert ends(jeffreys(0, n, level=level))[0] == 0
    assert ends(jeffreys(n, n, level=level))[1] == 1


@pytest.mark.parametrize("level", LEVELS)
@pytest.mark.parametrize(("x", "n"), [(0, 9), (1, 1), (4, 31), (97, 98)])
def test_agree_with_scipy(x, n, level):
    found = wilson_corrected(x, n, level=level)
    theirs = stats.binomtest(x, n).proportion_ci(confidence_level=level, method="wilsoncc")
    assert_allclose(ends(found), (theirs.low, theirs.high), rtol=0, atol=1e-12)


@pytest.mark.parametrize("level", LEVELS)
@pytest.mark.parametrize(("x", "n"), [(0, 9), (5, 9), (97, 98), (98, 98)])
def test_one_sided_bounds_agree_with_scipy(x, n, level):
    for ours, theirs in (("clopper_pearson", "exact"), ("wilson", "wilson")):
        low = stats.binomtest(x, n, alternative="greater").proportion_ci(level, method=theirs).low
        high = stats.binomtest(x, n, alternative="less").proportion_ci(level, method=theirs).high
        bounds = [f(x, n, confidence=level, method=ours) for f in (lower_bound, upper_bound)]
        assert_allclose(bounds, (low, high), rtol=0, atol=1e-12)


@pytest.mark.parametrize("level", LEVELS)
@pytest.mark.parametrize(("first", "second"), [((3, 17), (9, 23)), ((0, 12), (5, 5))])
def test_differences_agree_with_statsmodels(first, second, level):
    theirs = confint_proportions_2indep(*first, *second, method="newcomb", alpha=1 - level)
    assert_allclose(ends(newcombe_difference(first, second, level=level)), theirs, atol=1e-12)


@pytest.mark.parametrize("level", LEVELS)
@pytest.mark.parametrize(("x", "n"), [(42, 50), (3, 23), (1, 9)])
def test_corrected_limits_put_back(x, n, level):
    # half an answer closer, the observed share is z standard errors from each end
    z = stats.norm.ppf(0.5 + level / 2)
    for t in ends(wilson_corrected(x, n, level=level)):
        assert abs(x / n - t) - 0.5 / n == pytest.approx(z * math.sqrt(t * (1 - t) / n), rel=1e-9)


class TestEdges:
    @pytest.mark.parametrize("method", FAMILY)
    def test_no_trial_is_undefined(self, method):
        assert not method(0, 0).defined
        assert not method(math.nan, 20).defined
        assert method(0, 0).method == method(3, 4).method

    def test_no_trial_leaves_bounds_and_differences_undefined(self):
        for method in ("clopper_pearson", "wilson"):
            assert math.isnan(lower_bound(0, 0, method=method))
            assert math.isnan(upper_bound(0, 0, method=method))
        assert math.isnan(confidence_shown(0, 0, least=0.9))
        assert math.isnan(rule_of_three(0))
        assert not newcombe_difference((3, 4), (0, 0)).defined

    @pytest.mark.parametrize("method", FAMILY)
    def test_more_right_than_trials(self, method):
        with pytest.raises(
            ValueError, match=exactly("`right` must be between 0 and n = 20; got 21.")
        ):
            method(21, 20)
        with pytest.raises(ValueError, match=r"got -1\.$"):
            method(-1, 20)

    def test_confidence_out_of_bounds(self):
        message = exactly("`confidence` must be at least 0.5 and below 1; got 0.4.")
        with pytest.raises(ValueError, match=message):
            lower_bound(3, 4, confidence=0.4)
        with pytest.raises(ValueError, match=r"got 1\.0\.$"):
            upper_bound(3, 4, confidence=1.0, method="wilson")

    def test_limit_out_of_bounds(self):
        with pytest.raises(
            ValueError, match=exactly("`least` must be between 0 and 1, both excluded; got 1.")
        ):
            confidence_shown(3, 4, least=1)

    def test_nothing_right_shows_nothing(self):
        assert confidence_shown(0, 12, least=0.3) == 0
        assert lower_bound(0, 12) == 0
        assert upper_bound(12, 12) == 1

    def test_half_an_answer_has_no_lower_end(self):
        assert wilson_corrected(0.4, 10).low == 0
        assert wilson_corrected(9.6, 10).high == 1

    def test_old_imports_and_names(self):
        assert intervals.wilson is wilson
        assert intervals.newcombe_difference is newcombe_difference
        made = [method(3, 8) for method in FAMILY]
        made += [wilson(0.4, 8), newcombe_difference((1, 3), (2, 5))]
        assert {interval.method for interval in made} <= set(intervals.METHODS)
        assert len(set(intervals.METHODS.values())) == len(intervals.METHODS)


counts = st.integers(1, 300).flatmap(lambda n: st.tuples(st.integers(0, n), st.just(n)))
levels = st.floats(0.5, 0.995)


@given(counts, levels)
def test_right_and_wrong_may_be_exchanged(xn, level):
    x, n = xn
    for method in FAMILY:
        one, other = method(x, n, level=level), method(n - x, n, level=level)
        assert_allclose(ends(one), (1 - other.high, 1 - other.low), rtol=0, atol=1e-9)


@given(counts, levels, levels)
def test_a_higher_level_never_narrows(xn, one, other):
    low, high = sorted((one, other))
    for method in FAMILY:
        narrow, wide = method(*xn, level=low), method(*xn, level=high)
        assert wide.low <= narrow.low + 1e-12
        assert wide.high >= narrow.high - 1e-12


@given(counts, levels)
def test_the_share_lies_inside(xn, level):
    x, n = xn
    for method in FAMILY:
        found = method(x, n, level=level)
        assert found.low <= x / n + 1e-12
        assert x / n - 1e-12 <= found.high
        if method is not wald:
            assert found.low >= 0
            assert found.high <= 1


@given(counts, levels)
def test_correction_never_narrows(xn, level):
    x, n = xn
    plain, corrected = wilson(x / n, n, level=level), wilson_corrected(x, n, level=level)
    assert corrected.low <= plain.low + 1e-12
    assert corrected.high >= plain.high - 1e-12


@given(counts, counts, levels)
def test_swapping_shares_changes_the_sign(one, two, level):
    here, there = (
        newcombe_difference(one, two, level=level),
        newcombe_difference(two, one, level=level),
    )
    assert_allclose(ends(here), (-there.high, -there.low), rtol=0, atol=1e-12)
    assert here.low - 1e-12 <= one[0] / one[1] - two[0] / two[1] <= here.high + 1e-12


@given(counts, st.floats(0.51, 0.99), st.floats(0.05, 0.95))
def test_one_side_is_an_end_of_the_two_sided_interval(xn, confidence, least):
    x, n = xn
    level = 2 * confidence - 1
    both = clopper_pearson(x, n, level=level)
    assert lower_bound(x, n, confidence=confidence) == pytest.approx(both.low, abs=1e-12)
    assert upper_bound(x, n, confidence=confidence) == pytest.approx(both.high, abs=1e-12)
    # what is shown with more than this confidence has its bound above the limit, and only that
    shown = confidence_shown(x, n, least=least)
    assume(abs(shown - confidence) > 1e-9)
    assert (shown > confidence) == (lower_bound(x, n, confidence=confidence) > least)


class TestExactWithModelVariance:
    @pytest.mark.parametrize("case", cases("03", "binom_ci"))
    @pytest.mark.parametrize("tau2", [0.0, math.nan])
    def test_without_variance_it_is_the_exact_one(self, case, tau2):
        x, n, level = (case["inputs"][name] for name in ("x", "n", "level"))
        found = exact_with_model_variance(x / n, n, tau2, level=level)
        # a share so near 0 or 1 that it has the least spread counts as many cases as there are
        assert_allclose(
            ends(found), case["expected"]["clopper_pearson"], rtol=0, atol=case["tolerance"]
        )
        if "published" in case:
            assert_allclose(
                ends(found),
                case["published"]["clopper_pearson"],
                rtol=0,
                atol=case["published_tolerance"],
            )
        named = "clopper_pearson" if math.isnan(tau2) else "exact_model_variance"
        assert (found.method, found.level) == (named, level)

    @pytest.mark.parametrize("level", LEVELS)
    @pytest.mark.parametrize(
        ("p", "n", "tau2"), [(0.9, 20, 0.003), (0.84, 60, 0.03**2), (0.3, 12, 0.02)]
    )
    def test_beta_quantiles_at_the_effective_n(self, p, n, tau2, level):
        # p(1 - p)/n' = p(1 - p)/n + tau2
        n_equal = p * (1 - p) / (p * (1 - p) / n + tau2)
        assert n_equal < 0.95 * n
        right, tail = p * n_equal, (1 - level) / 2
        low = stats.beta.ppf(tail, right, n_equal - right + 1)
        high = stats.beta.ppf(1 - tail, right + 1, n_equal - right)
        found = exact_with_model_variance(p, n, tau2, level=level)
        assert ends(found) == pytest.approx((low, high), rel=1e-10)

    @pytest.mark.parametrize("tau2", [0.0, 0.004])
    def test_all_or_none_right(self, tau2):
        # the exact bound at the n of the least spread: 0.025 to the 1/n'
        n_equal = 1 / (1 / 30 + tau2 / 0.001)
        low = 0.025 ** (1 / n_equal)
        assert ends(exact_with_model_variance(1, 30, tau2)) == (pytest.approx(low, rel=1e-10), 1)
        high = 1 - low
        assert ends(exact_with_model_variance(0, 30, tau2)) == (0, pytest.approx(high, rel=1e-10))

    @pytest.mark.parametrize("level", [0.8, 0.9, 0.95, 0.99])
    @pytest.mark.parametrize("floor", [0.8, 0.9, 0.95])
    def test_at_a_floor_it_holds_where_the_truth_falls(self, floor, level):
        """The share above a cut-off by floor is Beta((m + 1)f, (m + 1)(1 - f)) (Wilks 1941)."""
        for m in range(12, 61):
            truth = stats.beta((m + 1) * floor, (m + 1) * (1 - floor))
            bounds = exact_with_model_variance(floor, m, 0.0, level=level)
            low, high = truth.interval(level)
            assert bounds.low < low < high < bounds.high
            held = truth.cdf(bounds.high) - truth.cdf(bounds.low)
            # more than the level, by seven tenths of what is left of it at the most
            assert level < held < level + 0.7 * (1 - level)
            # Wilson's is drawn towards one half: it leaves out more above
            assert wilson(floor, m, level=level).high < high

    def test_undefined(self):
        for tau2 in (0.0, 0.01, math.nan):
            assert np.isnan(ends(exact_with_model_variance(math.nan, 20, tau2))).all()
        assert np.isnan(ends(exact_with_model_variance(math.nan, 0, math.nan))).all()

    @given(
        st.integers(0, 60), st.integers(1, 60), st.floats(0, 0.05),
        st.floats(0.5, 0.99), st.floats(0.5, 0.99),
    )  # fmt: skip
    def test_a_higher_level_never_narrows(self, x, n, tau2, one, other):
        assume(x <= n)
        less, more = sorted([one, other])
        narrow, wide = (exact_with_model_variance(x / n, n, tau2, level=at) for at in (less, more))
        assert wide.low <= narrow.low + 1e-9
        assert wide.high >= narrow.high - 1e-9
        assert narrow.low - 1e-12 <= x / n <= narrow.high + 1e-12

    @given(st.integers(0, 60), st.integers(1, 60), st.floats(0, 0.05))
    def test_model_variance_never_narrows(self, x, n, tau2):
        assume(x <= n)
        plain, wider = clopper_pearson(x, n), exact_with_model_variance(x / n, n, tau2)
        assert effective_n(x / n, n, tau2) <= n * (1 + 1e-12)
        assert wider.low <= plain.low + 1e-9
        assert wider.high >= plain.high - 1e-9
