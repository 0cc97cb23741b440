"""t over rounds that share training cases: check cases, scipy, and identities."""

import math

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy import stats

from evalcore.five_by_two import five_by_two
from evalcore.resampled_t import (
    corrected_resampled_t,
    correlated_t_posterior,
    cv_normal,
    uncorrected_t,
)

from .checks import cases, exactly

VALUES = [0.81, 0.78, 0.9, 0.77, 0.84, 0.79]


def ends(interval):
    return interval.low, interval.high


@pytest.mark.parametrize("case", cases("04", "corrected_t"))
def test_corrected_check_cases(case):
    given_, expected = case["inputs"], case["expected"]
    found = corrected_resampled_t(
        given_["differences"], n_train=given_["n_train"], n_test=given_["n_test"]
    )
    naive = uncorrected_t(given_["differences"])
    numbers = {
        "mean": found.mean,
        "sd": found.sd,
        "se_corrected": found.standard_error,
        "t": found.t,
        "df": found.df,
        "p_two_sided": found.p,
        "ci95": ends(found.interval),
        "t_uncorrected": naive.t,
        "p_two_sided_uncorrected": naive.p,
    }
    assert found.defined
    assert set(numbers) == set(expected)
    for name, number in numbers.items():
        assert_allclose(number, expected[name], rtol=0, atol=case["tolerance"], err_msg=name)


@pytest.mark.parametrize("case", cases("04", "corrected_t_degenerate"))
def test_no_spread_check_cases(case):
    given_ = case["inputs"]
    found = corrected_resampled_t(
        given_["differences"], n_train=given_["n_train"], n_test=given_["n_test"]
    )
    assert found.mean == pytest.approx(case["expected"]["mean"], abs=case["tolerance"])
    assert found.defined is case["expected"]["defined"] is False
    assert found.reason == (
        "All rounds have the same value, so their spread is 0 and t is undefined."
    )
    assert found.sd == 0
    assert all(math.isnan(number) for number in (found.t, found.p, found.standard_error))
    assert not found.interval.defined


@pytest.mark.parametrize("case", cases("04", "five_two"))
def test_five_by_two_check_cases(case):
    found, expected = five_by_two(case["inputs"]["differences"]), case["expected"]
    numbers = {
        "s2": found.variances,
        "t": found.t,
        "df_t": found.df_t,
        "p_t": found.p_t,
        "F": found.f,
        "df_F": found.df_f,
        "p_F": found.p_f,
    }
    assert found.defined
    assert set(numbers) == set(expected)
    for name, number in numbers.items():
        assert_allclose(number, expected[name], rtol=0, atol=case["tolerance"], err_msg=name)


@pytest.mark.parametrize("case", cases("04", "bayes_t"))
def test_posterior_check_cases(case):
    given_, expected = case["inputs"], case["expected"]
    found = correlated_t_posterior(given_["differences"], rho=given_["rho"], rope=given_["rope"])
    numbers = {
        "p_left": found.left,
        "p_rope": found.rope,
        "p_right": found.right,
        "scale": found.scale,
        "df": found.df,
    }
    assert found.defined
    assert set(numbers) == set(expected)
    for name, number in numbers.items():
        assert_allclose(number, expected[name], rtol=0, atol=case["tolerance"], err_msg=name)


@pytest.mark.parametrize("case", cases("04", "bayes_equiv"))
def test_posterior_is_the_one_sided_p(case):
    given_ = case["inputs"]
    n_train, n_test = given_["n_train"], given_["n_test"]
    tested = corrected_resampled_t(given_["differences"], n_train=n_train, n_test=n_test)
    found = correlated_t_posterior(given_["differences"], rho=n_test / (n_train + n_test), rope=0.0)
    assert found.right == pytest.approx(case["expected"]["p_right"], abs=case["tolerance"])
    assert found.right == pytest.approx(1 - tested.p / 2, abs=1e-12)


class TestCorrectedT:
    def test_study_value(self):
        # notes of the simulation study, six digits
        found = corrected_resampled_t([0.8, 0.85, 0.9, 0.75, 0.8], n_train=70, n_test=30)
        assert_allclose(ends(found.interval), (0.694510, 0.945490), rtol=0, atol=5e-7)

    @pytest.mark.parametrize("level", [0.8, 0.95, 0.99])
    def test_against_scipy(self, level):
        found = corrected_resampled_t(VALUES, n_train=50, n_test=9, level=level)
        scale = np.std(VALUES, ddof=1) * math.sqrt(1 / 6 + 9 / 50)
        theirs = stats.t.interval(level, 5, np.mean(VALUES), scale)
        assert_allclose(ends(found.interval), theirs, rtol=1e-12)
        assert (found.interval.level, found.interval.method) == (level, "corrected_t")

    def test_without_overlap_it_is_the_one_sample_t_test(self):
        found, theirs = uncorrected_t(VALUES), stats.ttest_1samp(VALUES, 0)
        assert (found.t, found.p, found.df) == pytest.approx(
            (theirs.statistic, theirs.pvalue, theirs.df), rel=1e-12
        )
        assert_allclose(ends(found.interval), theirs.confidence_interval(0.95), rtol=1e-12)
        assert found.interval.method == "uncorrected_t"

    def test_repeated_folds(self):
        # k folds: n_test/n_train = 1/(k - 1), so the factor is 1/(k r) + 1/(k - 1)
        found = corrected_resampled_t(VALUES, n_train=40, n_test=20)
        assert found.standard_error == pytest.approx(
            np.std(VALUES, ddof=1) * math.sqrt(1 / 6 + 1 / 2), rel=1e-12
        )

    @pytest.mark.parametrize("same", [[0.0] * 4, [0.1 + 0.2, 0.3, 0.3], [0.91 - 0.9, 0.01, 0.01]])
    def test_rounding_is_no_spread(self, same):
        found = corrected_resampled_t(same, n_train=9, n_test=1)
        assert not found.defined
        assert found.sd == 0
        assert found.mean == pytest.approx(same[-1], abs=1e-12)

    @pytest.mark.parametrize(
        ("values", "reason"),
        [
            ([0.8], "The spread of rounds needs at least two of them; got 1."),
            ([], "The spread of rounds needs at least two of them; got 0."),
            ([0.8, math.nan, 0.7], "1 of 3 rounds have no value, so t is undefined."),
            ([0.8, math.inf, math.nan], "2 of 3 rounds have no value, so t is undefined."),
        ],
    )
    def test_undefined_with_a_reason(self, values, reason):
        for found in (corrected_resampled_t(values, n_train=9, n_test=1), uncorrected_t(values)):
            assert found.reason == reason
            assert not found.interval.defined
            assert math.isnan(found.t)
            assert math.isnan(found.p)

    def test_one_round_still_has_its_value(self):
        found = corrected_resampled_t([0.8], n_train=9, n_test=1)
        assert (found.mean, found.df) == (0.8, 0)
        assert math.isnan(found.sd)

    def test_refused(self):
        with pytest.raises(
            ValueError, match=exactly("`n_train` and `n_test` must be above 0; got 90 and 0.")
        ):
            corrected_resampled_t(VALUES, n_train=90, n_test=0)
        with pytest.raises(ValueError, match=r"got nan and 1\.$"):
            corrected_resampled_t(VALUES, n_train=math.nan, n_test=1)
        with pytest.raises(
            ValueError, match=exactly("`values` must hold one value a round; got shape (1, 2).")
        ):
            corrected_resampled_t([[0.1, 0.2]], n_train=9, n_test=1)


class TestFiveByTwo:
    rng = np.random.default_rng(4)
    differences = rng.normal(0.02, 0.03, (5, 2))

    def test_by_the_definition(self):
        found, d = five_by_two(self.differences), self.differences
        s2 = [sum((x - sum(row) / 2) ** 2 for x in row) for row in d]
        assert_allclose(found.variances, s2, rtol=1e-12)
        t, f = d[0, 0] / math.sqrt(sum(s2) / 5), (d**2).sum() / (2 * sum(s2))
        assert (found.t, found.f) == pytest.approx((t, f), rel=1e-12)
        assert found.p_t == pytest.approx(2 * stats.t.sf(abs(t), 5), rel=1e-12)
        assert found.p_f == pytest.approx(stats.f.sf(f, 10, 5), rel=1e-12)

    def test_only_t_depends_on_the_order(self):
        here, there = five_by_two(self.differences), five_by_two(self.differences[::-1, ::-1])
        assert there.f == pytest.approx(here.f, rel=1e-12)
        assert abs(there.t - here.t) > 0.1

    def test_no_spread_within_repeats(self):
        found = five_by_two([[0.1 * i, 0.1 * i] for i in range(5)])
        assert found.reason == "The two folds of every repeat agree, so t and F are undefined."
        assert not found.defined
        assert all(math.isnan(x) for x in (found.t, found.p_t, found.f, found.p_f))

    def test_missing(self):
        d = self.differences.copy()
        d[2, 1] = math.inf
        found = five_by_two(d)
        assert found.reason == "1 of 10 rounds have no value, so t and F are undefined."
        assert math.isnan(found.variances[2])
        assert math.isnan(found.p_f)

    def test_another_shape(self):
        with pytest.raises(
            ValueError,
            match=exactly("`differences` must have 5 repeats of 2 folds; got shape (2, 5)."),
        ):
            five_by_two(self.differences.T)


class TestPosterior:
    @pytest.mark.parametrize("values", [VALUES, [-x for x in VALUES], [0.3, -0.1, 0.2, -0.5]])
    @pytest.mark.parametrize(("rho", "rope"), [(0.0, 0.02), (0.3, 0.25), (0.5, 2.0)])
    def test_against_scipy(self, values, rho, rope):
        found = correlated_t_posterior(values, rho=rho, rope=rope)
        scale = np.std(values, ddof=1) * math.sqrt(1 / len(values) + rho / (1 - rho))
        posterior = stats.t(len(values) - 1, np.mean(values), scale)
        assert found.left == pytest.approx(posterior.cdf(-rope), rel=1e-12)
        assert found.right == pytest.approx(posterior.sf(rope), rel=1e-12)
        assert found.rope == pytest.approx(posterior.cdf(rope) - posterior.cdf(-rope), abs=1e-12)
        assert found.mean == pytest.approx(np.mean(values), rel=1e-12)

    def test_no_region_has_no_chance(self):
        assert correlated_t_posterior(VALUES, rho=0.2, rope=0.0).rope == 0

    def test_no_spread(self):
        found = correlated_t_posterior([0.02] * 10, rho=0.1, rope=0.01)
        assert not found.defined
        assert found.reason.startswith("All rounds have the same value")
        assert found.mean == pytest.approx(0.02, abs=1e-15)
        assert all(math.isnan(x) for x in (found.left, found.rope, found.right, found.scale))

    def test_refused(self):
        with pytest.raises(
            ValueError, match=exactly("`rho` must be at least 0 and below 1; got 1.0.")
        ):
            correlated_t_posterior(VALUES, rho=1.0, rope=0.0)
        with pytest.raises(ValueError, match=exactly("`rope` must be at least 0; got -0.1.")):
            correlated_t_posterior(VALUES, rho=0.1, rope=-0.1)


class TestCvNormal:
    losses = np.array([1, 0, 1, 1, 1, 0, 1, 0, 1, 1, 1, 1.0])
    folds = np.repeat([0, 1, 2], 4)

    def test_all_pairs(self):
        # 9 of 12: the mean squared distance is p (1 - p), so the ends are Wald's
        half = stats.norm.ppf(0.975) * math.sqrt(0.75 * 0.25 / 12)
        found = cv_normal(self.losses)
        assert_allclose(ends(found), (0.75 - half, 0.75 + half), rtol=1e-12)
        assert found.method == "cv_normal"

    def test_within_folds(self):
        # folds hold 3, 2 and 4 of 4: variances 1/4, 1/3 and 0
        half = stats.norm.ppf(0.95) * math.sqrt((1 / 4 + 1 / 3) / 3 / 12)
        found = cv_normal(self.losses, folds=self.folds, level=0.9)
        assert_allclose(ends(found), (0.75 - half, 0.75 + half), rtol=1e-12)

    def test_undefined(self):
        assert not cv_normal(np.ones(12)).defined
        assert not cv_normal([1.0]).defined
        assert not cv_normal([1.0, math.nan, 0.0]).defined
        # a fold of one case has no variance of its own
        assert not cv_normal(self.losses, folds=np.arange(12)).defined
        # nor is there spread where every fold is alike within itself
        assert not cv_normal([1, 1, 0, 0], folds=np.array([0, 0, 1, 1])).defined


values = st.lists(st.floats(-1, 1), min_size=3, max_size=30)


@given(values, st.floats(0.05, 0.9))
def test_order_and_sign(drawn, rho):
    assume(np.ptp(drawn) > 1e-3)
    here = correlated_t_posterior(drawn, rho=rho, rope=0.05)
    there = correlated_t_posterior([-x for x in reversed(drawn)], rho=rho, rope=0.05)
    assert (here.left, here.right) == pytest.approx((there.right, there.left), abs=1e-9)
    assert here.left + here.rope + here.right == pytest.approx(1, abs=1e-12)
    assert min(here.left, here.rope, here.right) >= 0


@given(values, st.floats(0.1, 5), st.floats(0.55, 0.98), st.floats(0.55, 0.98))
def test_overlap_and_level_never_narrow(drawn, ratio, one, other):
    assume(np.ptp(drawn) > 1e-3)
    low, high = sorted((one, other))
    naive = uncorrected_t(drawn, level=low)
    narrow = corrected_resampled_t(drawn, n_train=1, n_test=ratio, level=low)
    wide = corrected_resampled_t(drawn, n_train=1, n_test=ratio, level=high)
    assert naive.interval.width < narrow.interval.width <= wide.interval.width + 1e-12
    assert narrow.p >= naive.p


@given(values, st.floats(0.01, 0.9))
def test_p_and_interval_agree(drawn, level):
    assume(np.ptp(drawn) > 1e-3)
    found = corrected_resampled_t(drawn, n_train=4, n_test=1, level=level)
    assume(abs(found.p - (1 - level)) > 1e-6)
    excludes = found.interval.low > 0 or found.interval.high < 0
    assert excludes == (found.p < 1 - level)
