"""Sample size: the check cases, and exact counts against scipy's binomial and statsmodels."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from statsmodels.stats.proportion import proportion_confint

from evalcore.errors import EvalError
from evalcore.intervals import wilson
from evalcore.sample_size import (
    allowed_misses,
    auc_standard_error,
    cases_for_auc,
    cases_for_width,
    cases_to_show,
    confidence_shown,
    lower_bound,
    upper_bound,
)

from .checks import cases, exactly

LIMITS = (0.8, 0.85, 0.9, 0.95, 0.98, 0.99)
MISSES = (0, 1, 2, 3, 5)
# own calculation of this project, recomputed with scipy.stats.binom in the test:
# cases of a class so that the one-sided 95 % bound reaches the limit, exact and Wilson's
EXACT = (
    (14, 22, 30, 37, 50),
    (19, 30, 40, 50, 68),
    (29, 46, 61, 76, 103),
    (59, 93, 124, 153, 208),
    (149, 236, 313, 386, 523),
    (299, 473, 628, 773, 1049),
)
WILSON = (
    (11, 20, 28, 35, 48),
    (16, 28, 38, 47, 65),
    (25, 42, 58, 72, 100),
    (52, 87, 118, 147, 202),
    (133, 222, 300, 373, 511),
    (268, 446, 602, 748, 1024),
)


@pytest.mark.parametrize("case", cases("03", "demo_n"))
def test_cases_to_show_check_cases(case):
    least, confidence, misses = (
        case["inputs"][name] for name in ("reliability", "confidence", "failures")
    )
    n, expected = cases_to_show(least, misses=misses, confidence=confidence), case["expected"]
    assert n == expected["n"] == case["published"]["n"]
    for size, key in ((n, "cdf_at_n"), (n - 1, "cdf_at_n_minus_1")):
        risk = 1 - confidence_shown(size - misses, size, least=least)
        assert risk == pytest.approx(expected[key], abs=case["tolerance"])


@pytest.mark.parametrize("case", cases("03", "demo_conf"))
def test_confidence_shown_check_cases(case):
    given_, expected = case["inputs"], case["expected"]
    right, n = given_["correct"], given_["n"]
    shown = confidence_shown(right, n, least=given_["reliability"])
    assert shown == pytest.approx(expected["confidence"], abs=case["tolerance"])
    bound = lower_bound(right, n)
    assert bound == pytest.approx(expected["one_sided_lower95"], abs=case["tolerance"])


@pytest.mark.parametrize("case", cases("06", "ss_wilson"))
def test_width_check_cases(case):
    share, width, level = (case["inputs"][name] for name in ("p", "width", "level"))
    found, expected = cases_for_width(share, width=width, level=level), case["expected"]
    assert (found.n, found.n_wald) == (expected["n"], expected["n_wald"])
    assert found.width == pytest.approx(expected["width_at_n"], abs=case["tolerance"])


@pytest.mark.parametrize("case", cases("06", "ss_auc"))
def test_auc_check_cases(case):
    found = cases_for_auc(
        case["inputs"]["auc"],
        half_width=case["inputs"]["half_width"],
        ratio=case["inputs"]["ratio"],
        level=case["inputs"]["level"],
    )
    expected = case["expected"]
    assert (found.n_positive, found.n_negative) == (expected["n_pos"], expected["n_neg"])
    assert found.standard_error == pytest.approx(expected["se_at_n"], abs=case["tolerance"])


@pytest.mark.parametrize("case", cases("06", "se_auc"))
def test_auc_error_check_cases(case):
    found = auc_standard_error(
        case["inputs"]["auc"],
        n_positive=case["inputs"]["n_pos"],
        n_negative=case["inputs"]["n_neg"],
    )
    assert found == pytest.approx(case["expected"]["se"], abs=case["tolerance"])


class TestCasesToShow:
    @pytest.mark.parametrize(("least", "row"), list(zip(LIMITS, EXACT, strict=True)))
    def test_exact_table(self, least, row):
        sizes = np.arange(1, 1100)
        for misses, n in zip(MISSES, row, strict=True):
            shown = stats.binom.cdf(misses, sizes, 1 - least) <= 0.05
            assert cases_to_show(least, misses=misses) == sizes[shown][0] == n

    @pytest.mark.parametrize(("least", "row"), list(zip(LIMITS, WILSON, strict=True)))
    def test_wilson_table(self, least, row):
        sizes = np.arange(1, 1100)
        for misses, n in zip(MISSES, row, strict=True):
            right = np.maximum(sizes - misses, 0)
            low, _ = proportion_confint(right, sizes, alpha=0.1, method="wilson")
            assert cases_to_show(least, misses=misses, method="wilson") == n
            assert sizes[low >= least][0] == n

    def test_58_of_60_divides_the_methods(self):
        assert lower_bound(58, 60) < 0.9 < wilson(58 / 60, 60, level=0.9).low
        assert cases_to_show(0.9, misses=2) == 61
        assert cases_to_show(0.9, misses=2, method="wilson") == 58

    def test_a_confidence_reached_exactly_counts(self):
        # 0.1^n <= 1 - 0.9 at n = 1, 0.5^4 = 1 - 0.9375
        assert cases_to_show(0.1, confidence=0.9) == 1
        assert cases_to_show(0.5, confidence=0.9375) == 4
        # 1 - 0.8^4 = 369/625, which floats give a hair less
        assert cases_to_show(0.8, confidence=369 / 625) == 4
        # P(more than 1 of 2 wrong at 0.9) = 81/100
        assert cases_to_show(0.1, misses=1, confidence=0.81) == 2

    @given(st.floats(0.3, 0.98), st.integers(0, 6), st.floats(0.55, 0.99), st.floats(0.55, 0.99))
    def test_more_asked_takes_more(self, least, misses, confidence, other):
        less, more = sorted((confidence, other))
        n = cases_to_show(least, misses=misses, confidence=less)
        assert n <= cases_to_show(least, misses=misses, confidence=more)
        assert n < cases_to_show(least, misses=misses + 1, confidence=less)
        assert n <= cases_to_show(least + 0.01, misses=misses, confidence=less)

    @pytest.mark.parametrize(
        ("settings", "message"),
        [
            ({"least": 1.0}, "`least` must be between 0 and 1, both excluded; got 1."),
            ({"least": math.nan}, "`least` must be between 0 and 1, both excluded; got nan."),
            (
                {"least": 0.9, "confidence": 0.5},
                "`confidence` must be between 0.5 and 1, both excluded; got 0.5.",
            ),
            ({"least": 0.9, "misses": -1}, "`misses` must be 0 or more; got -1."),
        ],
    )
    def test_refusals(self, settings, message):
        with pytest.raises(EvalError, match=exactly(message)):
            cases_to_show(settings.pop("least"), **settings)


class TestConfidenceShown:
    @given(st.integers(0, 200), st.integers(1, 200), st.floats(0.05, 0.99))
    def test_binomial(self, misses, right, least):
        n = misses + right
        expected = stats.binom.sf(misses, n, 1 - least)
        assert confidence_shown(right, n, least=least) == pytest.approx(expected, abs=1e-12)

    @given(st.integers(1, 100), st.integers(0, 100), st.floats(0.6, 0.99))
    def test_undoes_the_bound(self, right, misses, confidence):
        n = right + misses
        least = lower_bound(right, n, confidence=confidence)
        assert confidence_shown(right, n, least=least) == pytest.approx(confidence, abs=1e-9)

    def test_bounds_mirror(self):
        assert upper_bound(3, 20) == pytest.approx(1 - lower_bound(17, 20), abs=1e-12)

    def test_no_case_shows_nothing(self):
        assert math.isnan(confidence_shown(0, 0, least=0.5))
        assert confidence_shown(0, 12, least=0.5) == 0


class TestAllowedMisses:
    @pytest.mark.parametrize("confidence", [0.6, 0.9, 0.95, 0.99])
    @pytest.mark.parametrize("least", [0.05, 0.5, 0.8, 0.9, 0.97, 0.999])
    def test_exact_by_enumeration(self, least, confidence):
        sizes = np.arange(0, 400)
        found = allowed_misses(sizes, least=least, confidence=confidence)
        for n, most in zip(sizes.tolist(), found.tolist(), strict=True):
            risks = stats.binom.cdf(np.arange(n), n, 1 - least)  # all wrong shows nothing
            assert most == np.count_nonzero(risks <= 1 - confidence + 1e-12) - 1

    @pytest.mark.parametrize("least", [0.05, 0.5, 0.8, 0.9, 0.97])
    def test_wilson_by_enumeration(self, least):
        sizes = np.arange(0, 150)
        found = allowed_misses(sizes, least=least, method="wilson")
        for n, most in zip(sizes.tolist(), found.tolist(), strict=True):
            lows = [wilson((n - m) / n, n, level=0.9).low for m in range(n + 1)] if n else []
            assert most == sum(low >= least for low in lows) - 1

    def test_wilson_at_an_effective_number(self):
        found = allowed_misses(
            [200], least=0.8, method="wilson", n_effective=np.array([60.0])
        ).item()
        lows = [wilson((200 - m) / 200, 60.0, level=0.9).low for m in (found, found + 1)]
        assert lows[0] >= 0.8 > lows[1]


class TestCasesForWidth:
    @given(st.floats(0, 1), st.floats(0.02, 0.9), st.floats(0.6, 0.99))
    def test_smallest(self, share, width, level):
        found = cases_for_width(share, width=width, level=level)
        assert found.width == wilson(share, found.n, level=level).width <= width
        assert found.n == 1 or wilson(share, found.n - 1, level=level).width > width

    @given(st.floats(0.01, 0.99), st.floats(0.02, 0.9))
    def test_wald(self, share, width):
        n = cases_for_width(share, width=width).n_wald
        z = stats.norm.ppf(0.975)
        assert 2 * z * math.sqrt(share * (1 - share) / n) <= width * (1 + 1e-12)
        assert n == 1 or 2 * z * math.sqrt(share * (1 - share) / (n - 1)) > width * (1 - 1e-12)

    def test_perfect_share(self):
        # width z^2/(n + z^2) <= 0.1 from n = 9 z^2 = 34.57
        for share in (0.0, 1.0):
            found = cases_for_width(share, width=0.1)
            assert (found.n, found.n_wald) == (35, 1)

    @pytest.mark.parametrize(
        ("share", "width", "message"),
        [
            (1.2, 0.1, "`share` must be between 0 and 1; got 1.2."),
            (0.9, 0.0, "`width` must be between 0 and 1, both excluded; got 0."),
        ],
    )
    def test_refusals(self, share, width, message):
        with pytest.raises(EvalError, match=exactly(message)):
            cases_for_width(share, width=width)


class TestAuc:
    def test_error_from_the_definition(self):
        # negative-exponential scores: P(two positives beat a negative) = A/(2 - A), P(one
        # positive beats two negatives) = 2A^2/(1 + A); Var = sum of covariances of pairs over n^2
        value, n1, n0 = 0.8, 3, 4
        q1, q2 = value / (2 - value), 2 * value**2 / (1 + value)
        total = 0.0
        for i in range(n1):
            for j in range(n0):
                for k in range(n1):
                    for m in range(n0):
                        if (i, j) == (k, m):
                            total += value - value**2
                        elif j == m:
                            total += q1 - value**2
                        elif i == k:
                            total += q2 - value**2
        found = auc_standard_error(value, n_positive=n1, n_negative=n0)
        assert found == pytest.approx(math.sqrt(total) / (n1 * n0), rel=1e-12)

    def test_edges(self):
        assert math.isnan(auc_standard_error(0.8, n_positive=0, n_negative=9))
        assert auc_standard_error(1.0, n_positive=4, n_negative=9) == 0

    @given(st.floats(0.05, 0.99), st.floats(0.03, 0.3), st.sampled_from([0.25, 1 / 3, 1, 1.1, 3]))
    def test_smallest_by_linear_search(self, value, half_width, ratio):
        found = cases_for_auc(value, half_width=half_width, ratio=ratio)
        z, n = stats.norm.ppf(0.975), 1
        while True:
            negative = math.ceil(round(ratio * n, 6))
            error = auc_standard_error(value, n_positive=n, n_negative=negative)
            if z * error <= half_width:
                break
            n += 1
        assert (found.n_positive, found.n_negative) == (n, negative)
        assert found.standard_error == error

    def test_a_ratio_that_binary_cannot_hold(self):
        found = cases_for_auc(0.8, half_width=0.2, ratio=1.1)
        assert (found.n_positive, found.n_negative) == (10, 11)

    @pytest.mark.parametrize(
        ("settings", "message"),
        [
            ({"value": 1.0}, "`value` must be between 0 and 1, both excluded; got 1."),
            ({"value": 0.8, "ratio": 0}, "`ratio` must be above 0; got 0."),
        ],
    )
    def test_refusals(self, settings, message):
        with pytest.raises(EvalError, match=exactly(message)):
            cases_for_auc(settings.pop("value"), half_width=0.05, **settings)
