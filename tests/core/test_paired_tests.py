"""McNemar and DeLong: published figures, statsmodels and scipy, and sums over pairs."""

import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from statsmodels.stats import contingency_tables

from evalcore.paired_tests import delong, mcnemar

from .checks import cases, exactly

COUNT = st.integers(0, 60)


def mcnemar_figures(found):
    return {
        "chi2": found.chi2,
        "p_chi2": found.p_chi2,
        "chi2_cc": found.corrected,
        "p_chi2_cc": found.p_corrected,
        "p_exact": found.p_exact,
        "p_mid": found.p_mid,
    }


class TestMcNemar:
    @pytest.mark.parametrize("case", cases("04", "mcnemar"))
    def test_check_cases(self, case):
        found = mcnemar_figures(mcnemar(case["inputs"]["b"], case["inputs"]["c"]))
        expected = {k: math.nan if v is None else v for k, v in case["expected"].items()}
        assert found == pytest.approx(expected, rel=0, abs=case["tolerance"], nan_ok=True)
        for name, value in case.get("published", {}).items():
            assert found[name] == pytest.approx(value, rel=0, abs=case["published_tolerance"])

    @given(COUNT, COUNT)
    def test_against_statsmodels_and_scipy(self, b, c):
        found = mcnemar(b, c)
        if b + c:
            exact = contingency_tables.mcnemar([[3, b], [c, 4]], exact=True)
            chi2 = contingency_tables.mcnemar([[3, b], [c, 4]], exact=False, correction=False)
            assert found.p_exact == pytest.approx(exact.pvalue, rel=1e-12)
            assert (found.chi2, found.p_chi2) == pytest.approx(
                (chi2.statistic, chi2.pvalue), rel=1e-12
            )
            assert found.p_exact == pytest.approx(stats.binomtest(b, b + c).pvalue, rel=1e-12)
        if b != c:
            corrected = contingency_tables.mcnemar([[3, b], [c, 4]], exact=False, correction=True)
            assert (found.corrected, found.p_corrected) == pytest.approx(
                (corrected.statistic, corrected.pvalue), rel=1e-12
            )

    @given(COUNT, COUNT)
    def test_mid_p_counted_out(self, b, c):
        n = b + c
        chance = [Fraction(math.comb(n, k), 2**n) for k in range(n + 1)]
        # splits less likely than the one seen count whole, it and its mirror image half each
        mid = sum(p for p in chance if p < chance[b]) + chance[b]
        found = mcnemar(b, c).p_mid
        assert math.isnan(found) if n == 0 else found == pytest.approx(float(mid), rel=1e-12)

    @given(COUNT, COUNT)
    def test_order_of_candidates_does_not_matter(self, b, c):
        assert mcnemar_figures(mcnemar(b, c)) == pytest.approx(
            mcnemar_figures(mcnemar(c, b)), rel=0, abs=0, nan_ok=True
        )

    def test_reports_the_exact_one_when_few_differ(self):
        few, many = mcnemar(16, 8), mcnemar(17, 8)
        assert (few.p, many.p) == (few.p_exact, many.p_corrected)
        assert few.p_exact != few.p_corrected
        assert many.p_exact != many.p_corrected

    def test_a_correction_never_goes_past_no_difference(self):
        assert (mcnemar(7, 7).corrected, mcnemar(7, 7).p_corrected) == (0.0, 1.0)
        assert (mcnemar(7, 7).p_exact, mcnemar(7, 7).p_mid) == pytest.approx((1.0, 1.0), rel=1e-15)

    def test_nothing_to_tell_them_apart(self):
        found = mcnemar(0, 0)
        assert (found.p, found.p_exact, found.chi2, found.corrected) == (1, 1, 0, 0)
        assert math.isnan(found.p_mid)

    def test_negative(self):
        message = "Counts of cases cannot be negative; got 3 and -1."
        with pytest.raises(ValueError, match=exactly(message)):
            mcnemar(3, -1)


def by_definition(y, scores_a, scores_b):
    """AUCs and their covariance matrix from all pairs, as the paper writes them."""
    wins = [
        np.array(
            [
                [(p > q) + (p == q) / 2 for q, down in zip(s, y, strict=True) if not down]
                for p, up in zip(s, y, strict=True)
                if up
            ]
        )
        for s in (scores_a, scores_b)
    ]
    v10 = np.cov([w.mean(axis=1) for w in wins])
    v01 = np.cov([w.mean(axis=0) for w in wins])
    return [w.mean() for w in wins], v10 / len(wins[0]) + v01 / len(wins[0][0])


SCORES = st.lists(
    st.tuples(st.booleans(), st.integers(0, 6), st.integers(0, 6)), min_size=6, max_size=25
).filter(lambda rows: 2 <= sum(up for up, _, _ in rows) <= len(rows) - 2)


class TestDeLong:
    @pytest.mark.parametrize("case", cases("04", "delong"))
    def test_check_cases(self, case):
        given_ = case["inputs"]
        found = delong(given_["y"], given_["a"], given_["b"])
        figures = {
            "auc": list(found.auc),
            "se_auc": list(found.standard_error),
            "cov": found.covariance,
            "diff": found.difference,
            "z": found.z,
            "p": found.p,
            "ci95_diff": [found.interval.low, found.interval.high],
            "ci95_auc1": [found.intervals[0].low, found.intervals[0].high],
        }
        for name, value in case["expected"].items():
            assert figures[name] == pytest.approx(value, rel=0, abs=case["tolerance"]), name
        for name, value in case.get("published", {}).items():
            assert figures[name] == pytest.approx(value, rel=0, abs=case["published_tolerance"])

    @given(SCORES)
    def test_by_definition(self, rows):
        y, a, b = zip(*rows, strict=True)
        areas, spread = by_definition(y, a, b)
        found = delong(y, a, b)
        assert found.auc == pytest.approx(areas, rel=1e-12, abs=1e-12)
        assert np.square(found.standard_error) == pytest.approx(np.diag(spread), abs=1e-12)
        assert found.covariance == pytest.approx(spread[0, 1], abs=1e-12)
        variance = spread[0, 0] + spread[1, 1] - 2 * spread[0, 1]
        if variance > 1e-9:
            z = (areas[0] - areas[1]) / math.sqrt(variance)
            assert (found.z, found.p) == pytest.approx(
                (z, 2 * stats.norm.sf(abs(z))), rel=1e-6, abs=1e-9
            )

    @given(SCORES)
    def test_order_of_candidates_and_scale_of_scores(self, rows):
        y, a, b = (np.array(column) for column in zip(*rows, strict=True))
        found, turned = delong(y, a, b), delong(y, np.exp(b), a**3)
        assert (found.z, found.p) == pytest.approx((-turned.z, turned.p), abs=1e-12, nan_ok=True)
        assert found.auc == turned.auc[::-1]

    @pytest.mark.parametrize("level", [0.8, 0.95, 0.99])
    def test_p_below_where_the_interval_excludes_0(self, level):
        rng = np.random.default_rng(17)
        y = np.arange(40) % 3 == 0
        sides = set()
        for _ in range(60):
            a, b = rng.normal(size=40) + 1.5 * y, rng.normal(size=40)
            found = delong(y, a, b, level=level)
            excluded = found.interval.low > 0 or found.interval.high < 0
            assert excluded == (found.p < 1 - level)
            sides.add(excluded)
        assert sides == {True, False}

    def test_same_ranking(self):
        found = delong([0, 1, 0, 1, 1], [0.2, 0.4, 0.5, 0.7, 0.9], [1, 2, 3, 4, 5])
        assert (found.difference, found.z, found.p) == (0.0, 0.0, 1.0)
        assert (found.interval.low, found.interval.high) == (0.0, 0.0)

    def test_no_variance_but_a_difference(self):
        found = delong([0, 0, 0, 1, 1, 1], [1, 2, 3, 4, 5, 6], [1, 1, 1, 1, 1, 1])
        assert found.auc == (1.0, 0.5)
        assert math.isnan(found.z)
        assert math.isnan(found.p)
        assert not found.interval.defined

    @pytest.mark.parametrize("y", [[0, 0, 1, 0], [0, 0, 0, 0], [1, 1, 1, 1]])
    def test_too_few_of_a_class(self, y):
        found = delong(y, [1, 2, 3, 4], [2, 1, 4, 3])
        assert math.isnan(found.standard_error[0])
        assert math.isnan(found.p)
        assert not found.interval.defined

    def test_what_does_not_fit(self):
        with pytest.raises(ValueError, match=r"one length; got \(2,\), \(2,\) and \(3,\)"):
            delong([0, 1], [1, 2], [1, 2, 3])
        with pytest.raises(ValueError, match="A score is missing"):
            delong([0, 1], [1, 2], [1, math.nan])
