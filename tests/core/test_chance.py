"""Permutation p-values and the majority share: published figures, and binomials counted out."""

import math
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from evalcore.chance import majority_test, permutation_p, permutation_test

from .checks import cases, exactly


class TestPermutation:
    @pytest.mark.parametrize("case", cases("07", "perm"))
    def test_check_cases(self, case):
        found = permutation_p(case["inputs"]["k"], case["inputs"]["m"])
        assert found == pytest.approx(case["expected"]["p"], rel=0, abs=case["tolerance"])

    @pytest.mark.parametrize("case", cases("07", "perm_list"))
    def test_check_lists(self, case):
        found = permutation_test(case["inputs"]["observed"], case["inputs"]["scores"])
        assert found.at_least_as_good == case["expected"]["k"]
        assert found.permutations == len(case["inputs"]["scores"])
        assert found.p == pytest.approx(case["expected"]["p"], rel=0, abs=case["tolerance"])

    @given(st.lists(st.integers(0, 20), max_size=40), st.integers(0, 20))
    def test_counted(self, scores, observed):
        found = permutation_test(observed / 20, [score / 20 for score in scores])
        k = sum(score >= observed for score in scores)
        assert (found.at_least_as_good, found.p) == (k, (k + 1) / (len(scores) + 1))

    def test_against_scipy(self):
        x, y = [0.61, 0.7, 0.52, 0.8], [0.5, 0.44, 0.3, 0.63]

        def statistic(a, b, axis):
            return a.mean(axis=axis) - b.mean(axis=axis)

        theirs = stats.permutation_test(
            (x, y), statistic, n_resamples=49, alternative="greater", rng=1, vectorized=True
        )
        found = permutation_test(theirs.statistic, theirs.null_distribution)
        assert found.p == pytest.approx(theirs.pvalue, rel=1e-15)

    def test_a_tie_up_to_rounding_is_a_tie(self):
        assert 0.1 + 0.2 > 0.3
        assert permutation_test(0.1 + 0.2, [0.3, 0.29]).at_least_as_good == 1

    def test_undefined_scores_err_upwards(self):
        assert permutation_test(0.7, [math.nan, 0.5, 0.6]).p == 0.5
        assert math.isnan(permutation_test(math.nan, [0.5, 0.6]).p)

    def test_never_0_and_1_without_permutations(self):
        assert permutation_test(0.9, []).p == 1.0

    @pytest.mark.parametrize("k", [-1, 6])
    def test_out_of_bounds(self, k):
        message = f"`at_least_as_good` must be between 0 and the 5 permutations; got {k}."
        with pytest.raises(ValueError, match=exactly(message)):
            permutation_p(k, 5)


class TestMajority:
    @pytest.mark.parametrize("case", cases("07", "nir"))
    def test_check_cases(self, case):
        given_ = case["inputs"]
        found = majority_test(given_["correct"], given_["n"], largest_class=given_["largest_class"])
        figures = {"accuracy": found.accuracy, "nir": found.majority_share, "p": found.p}
        assert figures == pytest.approx(case["expected"], rel=0, abs=case["tolerance"])
        for name, value in case.get("published", {}).items():
            assert figures[name] == pytest.approx(value, rel=0, abs=case["published_tolerance"])

    @given(st.integers(1, 40), st.data())
    def test_counted_out_and_against_scipy(self, n, data):
        right, largest = data.draw(st.integers(0, n)), data.draw(st.integers(0, n))
        share = Fraction(largest, n)
        tail = sum(math.comb(n, k) * share**k * (1 - share) ** (n - k) for k in range(right, n + 1))
        found = majority_test(right, n, largest_class=largest).p
        assert found == pytest.approx(float(tail), rel=1e-11)
        theirs = stats.binomtest(right, n, largest / n, alternative="greater").pvalue
        assert found == pytest.approx(theirs, rel=1e-11)

    def test_no_case(self):
        found = majority_test(0, 0, largest_class=0)
        assert all(math.isnan(x) for x in (found.accuracy, found.majority_share, found.p))

    def test_out_of_bounds(self):
        with pytest.raises(ValueError, match=exactly("`right` must be between 0 and 5; got 6.")):
            majority_test(6, 5, largest_class=3)
        with pytest.raises(ValueError, match="`largest_class` must be between 0 and 5; got -1"):
            majority_test(3, 5, largest_class=-1)
