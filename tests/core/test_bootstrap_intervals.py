"""Bootstrap intervals from given replicates: check cases from R's boot, exact ranks, scipy."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy import stats

from evalcore.bootstrap_intervals import (
    basic,
    bca,
    bca_levels,
    bias,
    jackknife_acceleration,
    jackknife_standard_error,
    median_bias,
    normal,
    percentile,
    quantile,
    standard_error,
)
from evalcore.intervals import METHODS

from .checks import cases


def ends(interval):
    return interval.low, interval.high


@pytest.mark.parametrize("case", cases("03", "boot_given"))
class TestGivenReplicates:
    def law(self, case):
        lsat, gpa = (np.array(case["inputs"]["data"][name]) for name in ("LSAT", "GPA"))
        left_out = [
            np.corrcoef(np.delete(lsat, i), np.delete(gpa, i))[0, 1] for i in range(len(lsat))
        ]
        return float(np.corrcoef(lsat, gpa)[0, 1]), np.array(left_out)

    def test_all_numbers(self, case):
        given_, expected = case["inputs"], case["expected"]
        value, left_out = self.law(case)
        replicates, level = given_["replicates"], given_["level"]
        a = jackknife_acceleration(left_out)
        z0 = median_bias(replicates, value)
        numbers = {
            "theta": value,
            "acceleration_jackknife": a,
            "se_jackknife": jackknife_standard_error(left_out),
            "percentile": ends(percentile(replicates, level=level)),
            "basic": ends(basic(replicates, value, level=level)),
            "bca": ends(bca(replicates, value, acceleration=a, level=level)),
            "bca_levels": bca_levels(z0, a, level=level),
            "z0": z0,
            "se_boot": standard_error(replicates),
            "bias": bias(replicates, value),
            "normal": ends(normal(replicates, value, level=level)),
        }
        # the check offers plain interpolation as an alternative; ours is the (R + 1) rule
        assert {name for name in expected if not name.endswith("_type7")} == set(numbers)
        for name, number in numbers.items():
            assert_allclose(number, expected[name], rtol=0, atol=case["tolerance"], err_msg=name)

    def test_close_to_plain_interpolation(self, case):
        replicates, level = case["inputs"]["replicates"], case["inputs"]["level"]
        tails = [(1 - level) / 2, (1 + level) / 2]
        plain = np.quantile(replicates, tails)
        assert_allclose(plain, case["expected"]["percentile_type7"], rtol=0, atol=1e-9)
        assert_allclose(ends(percentile(replicates, level=level)), plain, rtol=0, atol=0.01)


class TestQuantile:
    replicates = np.random.default_rng(3).permutation(np.arange(1.0, 100.0) ** 2)

    @pytest.mark.parametrize(
        ("p", "rank"), [(0.01, 1), (0.05, 5), (0.07, 7), (0.5, 50), (0.99, 99)]
    )
    def test_whole_ranks_are_replicates(self, p, rank):
        assert quantile(self.replicates, p) == rank**2

    @pytest.mark.parametrize(("p", "end"), [(0, 1), (0.003, 1), (0.997, 99), (1, 99)])
    def test_beyond_the_outermost(self, p, end):
        assert quantile(self.replicates, p) == end**2

    def test_between_two_it_reads_on_the_normal_scale(self):
        z = stats.norm.ppf([0.12, 0.125, 0.13])
        expected = 144 + (z[1] - z[0]) / (z[2] - z[0]) * (169 - 144)
        assert quantile(self.replicates, 0.125) == pytest.approx(expected, rel=1e-12)

    def test_normal_scores_give_back_their_quantile(self):
        # on replicates that are normal quantiles themselves the rule is exact
        scores = stats.norm.ppf(np.arange(1, 40) / 40)
        for p in (0.031, 0.4242, 0.9):
            assert quantile(scores, p) == pytest.approx(stats.norm.ppf(p), rel=1e-12)


class TestBca:
    @pytest.mark.parametrize(("z0", "a", "level"), [(-0.07, -0.08, 0.95), (0.21, 0.04, 0.8)])
    def test_levels_against_scipy(self, z0, a, level):
        z = stats.norm.ppf([(1 - level) / 2, (1 + level) / 2])
        expected = stats.norm.cdf(z0 + (z0 + z) / (1 - a * (z0 + z)))
        assert_allclose(bca_levels(z0, a, level=level), expected, rtol=1e-12)

    def test_without_bias_and_acceleration_it_is_the_percentile_interval(self):
        # 20 of 40 below, so z0 is 0
        replicates = np.arange(1.0, 41.0)
        found = bca(replicates, 20.5, acceleration=0.0, level=0.9)
        assert_allclose(ends(found), ends(percentile(replicates, level=0.9)), rtol=1e-9)

    def test_agrees_with_scipy_on_its_own_replicates(self):
        # scipy interpolates plainly, so with many replicates the ends agree closely, not exactly
        sample = np.random.default_rng(8).exponential(size=25)
        result = stats.bootstrap(
            (sample,), np.mean, n_resamples=9999, method="BCa", rng=np.random.default_rng(1)
        )
        left_out = (sample.sum() - sample) / 24
        found = bca(
            result.bootstrap_distribution,
            sample.mean(),
            acceleration=jackknife_acceleration(left_out),
        )
        assert_allclose(ends(found), result.confidence_interval, rtol=2e-3)

    def test_undefined(self):
        replicates = np.arange(1.0, 100.0)
        for value in (0.5, 1.0, 99.5, math.nan):
            assert not bca(replicates, value, acceleration=0.0).defined
        assert not bca(replicates, 50.0, acceleration=math.nan).defined
        # 1 - a (z0 + z) is negative: the levels would change places
        assert not bca(replicates, 50.0, acceleration=0.9).defined
        assert math.isnan(bca_levels(0.0, 0.9)[0])

    def test_ties_are_not_below(self):
        assert median_bias([1.0, 2.0, 2.0, 3.0], 2.0) == pytest.approx(stats.norm.ppf(0.25))


class TestJackknife:
    def test_mean_by_hand(self):
        # of a mean the jackknife gives the textbook standard error, and skewness / (6 sqrt n)
        x = np.array([3.0, 1.0, 4.0, 1.5, 9.0, 2.6])
        left_out = (x.sum() - x) / 5
        assert jackknife_standard_error(left_out) == pytest.approx(stats.sem(x), rel=1e-12)
        expected = stats.skew(x) / (6 * math.sqrt(6))
        assert jackknife_acceleration(left_out) == pytest.approx(expected, rel=1e-12)

    def test_two_strata(self):
        # difference of means: variances add, and so do the third moments over n squared
        x, y = np.array([3.0, 1.0, 4.0, 9.0]), np.array([5.0, 2.0, 2.5, 7.0, 1.0, 1.2])
        left_out = np.concatenate([(x.sum() - x) / 3 - y.mean(), x.mean() - (y.sum() - y) / 5])
        strata = np.repeat([1, 0], [4, 6])
        expected = math.hypot(stats.sem(x), stats.sem(y))
        found = jackknife_standard_error(left_out, strata=strata)
        assert found == pytest.approx(expected, rel=1e-12)
        third = stats.moment(x, 3) / 4**2 - stats.moment(y, 3) / 6**2
        second = stats.moment(x, 2) / 4 + stats.moment(y, 2) / 6
        found = jackknife_acceleration(left_out, strata=strata)
        assert found == pytest.approx(third / (6 * second**1.5), rel=1e-12)

    def test_undefined(self):
        assert math.isnan(jackknife_acceleration([2.0, 2.0, 2.0]))
        assert math.isnan(jackknife_acceleration([2.0, math.nan, 3.0]))
        assert jackknife_standard_error([2.0, 2.0, 2.0]) == 0
        assert math.isnan(jackknife_standard_error([2.0, math.nan, 3.0]))
        # a stratum of one cannot be left out
        strata = [0, 0, 1]
        assert math.isnan(jackknife_standard_error([2.0, 2.1, math.nan], strata=strata))


class TestEdges:
    def test_replicates_without_a_value_are_left_out(self):
        full = np.arange(1.0, 40.0)
        gaps = np.concatenate([[math.nan], full, [math.nan]])
        for method in (percentile, lambda r: basic(r, 20.0), lambda r: normal(r, 20.0)):
            assert method(gaps) == method(full)
        assert standard_error(gaps) == standard_error(full)
        assert bias(gaps, 20.5) == bias(full, 20.5) == -0.5

    @pytest.mark.parametrize("replicates", [[], [math.nan, math.nan], [3.0]])
    def test_fewer_than_two(self, replicates):
        assert math.isnan(standard_error(replicates))
        for found in (
            percentile(replicates),
            basic(replicates, 3.0),
            normal(replicates, 3.0),
            bca(replicates, 3.5, acceleration=0.0),
        ):
            assert not found.defined

    def test_all_have_names(self):
        made = (
            percentile([1.0, 2.0]),
            basic([1.0, 2.0], 1.0),
            normal([1.0, 2.0], 1.0),
            bca([1.0, 2.0], 1.5, acceleration=0.0),
        )
        assert [interval.method.removeprefix("bootstrap_") for interval in made] == [
            "percentile",
            "basic",
            "normal",
            "bca",
        ]
        assert {interval.method for interval in made} <= set(METHODS)


replicate_lists = st.lists(st.floats(-100, 100), min_size=2, max_size=80)


@given(replicate_lists, st.floats(0, 1), st.floats(0, 1))
def test_quantiles_are_in_order_and_within(replicates, one, other):
    low, high = sorted((one, other))
    assert quantile(replicates, low) <= quantile(replicates, high) + 1e-9
    assert min(replicates) <= quantile(replicates, one) <= max(replicates)


@given(replicate_lists, st.floats(0.001, 0.999))
def test_mirrored_replicates_mirror_the_quantile(replicates, p):
    mirrored = -quantile([-x for x in replicates], 1 - p)
    assert quantile(replicates, p) == pytest.approx(mirrored, abs=1e-6)


@given(replicate_lists, st.floats(-50, 50), st.floats(0.5, 0.98), st.floats(0.5, 0.98))
def test_a_higher_level_never_narrows(replicates, value, one, other):
    low, high = sorted((one, other))
    for method in (percentile, basic, normal):
        more = () if method is percentile else (value,)
        narrow = method(replicates, *more, level=low)
        wide = method(replicates, *more, level=high)
        assert wide.low <= narrow.low + 1e-9
        assert wide.high >= narrow.high - 1e-9


@given(replicate_lists)
def test_rescaling_goes_through_a_percentile_interval(replicates):
    # an increasing change of scale moves whole-rank ends with it
    replicates = (replicates * 20)[:39]
    plain = percentile(replicates)
    cubed = percentile([x**3 for x in replicates])
    assert_allclose(ends(cubed), (plain.low**3, plain.high**3), rtol=1e-9)
