"""Calibration line and calibration error: check cases, statsmodels, their own equations."""

import math
import warnings
from fractions import Fraction
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.special import expit, logit

from evalcore.calibration import calibration_error, calibration_line
from evalcore.errors import EvalError

from .checks import cases, exactly

# forecasts in twentieths, so that edges of bins and equal ones occur
ANSWERS = st.lists(
    st.tuples(st.booleans(), st.integers(0, 20), st.integers(1, 4)), min_size=1, max_size=25
)


def columns(answers):
    positive, forecast, weight = zip(*answers, strict=True)
    return np.array(positive), np.array(forecast) / 20, np.array(weight)


def drawn(n, seed, *, spread=1.5):
    """Forecasts that are too sure and too high, and what came."""
    rng = np.random.default_rng(seed)
    x = rng.normal(0.4, spread, n)
    return rng.random(n) < expit(0.6 * x - 0.5), expit(x), rng.random(n) + 0.1


@pytest.mark.parametrize("case", cases("05", "cal"))
def test_line_check_cases(case):
    found = calibration_line(case["inputs"]["y"], case["inputs"]["f"])
    names = {"calibration_in_the_large": "in_the_large"}
    for name, expected in case["expected"].items():
        got = getattr(found, names.get(name, name))
        assert got == pytest.approx(expected, abs=case["tolerance"])


class TestLine:
    @pytest.mark.parametrize(("n", "spread"), [(25, 1.5), (60, 0.01), (300, 4.0)])
    def test_agrees_with_statsmodels(self, n, spread):
        import statsmodels.api as sm

        y, f, weight = drawn(n, 11, spread=spread)
        x, settings = logit(f), {"family": sm.families.Binomial(), "freq_weights": weight}
        line = sm.GLM(y, sm.add_constant(x), **settings).fit(tol=1e-14, tol_criterion="params")
        large = sm.GLM(y, np.ones(n), offset=x, **settings).fit(tol=1e-14, tol_criterion="params")
        found = calibration_line(y, f, weights=weight)
        assert_allclose([found.intercept, found.slope], line.params, rtol=1e-9)
        assert_allclose(found.in_the_large, large.params[0], rtol=1e-9)
        assert found.observed_over_expected == pytest.approx((weight @ y) / (weight @ f), rel=1e-12)

    @given(ANSWERS)
    def test_solves_its_equations_where_a_line_exists(self, answers):
        """At the highest likelihood, what came and the line agree in sum and in sum x logit."""
        y, f, weight = columns(answers)
        f = 0.02 + 0.96 * f
        found = calibration_line(y, f, weights=weight)
        x = logit(f)
        mixed = y.any() and not y.all()
        overlap = mixed and x[y].max() > x[~y].min() and x[~y].max() > x[y].min()
        assert math.isnan(found.slope) == math.isnan(found.intercept) == (not overlap)
        assert math.isnan(found.in_the_large) == (not mixed)
        if mixed:
            rest = weight * (y - expit(found.in_the_large + x))
            assert rest.sum() == pytest.approx(0, abs=1e-9)
        if overlap:
            rest = weight * (y - expit(found.intercept + found.slope * x))
            assert_allclose([rest.sum(), rest @ x], [0, 0], rtol=0, atol=1e-9)

    def test_two_forecasts_by_hand(self):
        """1 of 4 at 0.2 and 3 of 4 at 0.8: logits -ln 4 and ln 4 become -ln 3 and ln 3."""
        found = calibration_line([0, 0, 0, 1, 0, 1, 1, 1], [0.2] * 4 + [0.8] * 4)
        assert found.slope == pytest.approx(math.log(3) / math.log(4), rel=1e-12)
        assert found.intercept == pytest.approx(0, abs=1e-12)
        assert found.in_the_large == pytest.approx(0, abs=1e-12)

    def test_forecasts_all_equal(self):
        """1 of 4 at 0.5: the logit moves from 0 to -ln 3; a slope is anyone's guess."""
        found = calibration_line([0, 1, 0, 0], [0.5] * 4)
        assert math.isnan(found.slope)
        assert math.isnan(found.intercept)
        assert found.in_the_large == pytest.approx(-math.log(3), rel=1e-12)
        assert found.observed_over_expected == 0.5

    @pytest.mark.parametrize(
        ("y", "f"),
        [
            ([0, 0, 1, 1], [0.1, 0.3, 0.6, 0.9]),
            ([1, 1, 0, 0], [0.1, 0.3, 0.6, 0.9]),
            # separated but for a tie
            ([0, 0, 1, 1], [0.1, 0.3, 0.3, 0.9]),
            ([1, 1, 0, 0], [0.1, 0.3, 0.3, 0.9]),
        ],
    )
    def test_separated_classes_have_no_line(self, y, f):
        found = calibration_line(y, f)
        assert math.isnan(found.slope)
        assert math.isnan(found.intercept)
        assert (np.array(y) - expit(found.in_the_large + logit(f))).sum() == pytest.approx(
            0, abs=1e-9
        )

    def test_a_case_without_weight_does_not_join_what_is_separated(self):
        y, f = [0, 0, 1, 1, 0], [0.1, 0.3, 0.6, 0.9, 0.95]
        assert not math.isnan(calibration_line(y, f).slope)
        assert math.isnan(calibration_line(y, f, weights=[1, 1, 1, 1, 0]).slope)
        # nor is its forecast of 1 a reason to give up
        found = calibration_line(
            [0, 1, 0, 1, 1], [0.1, 0.3, 0.6, 0.9, 1.0], weights=[1, 1, 1, 1, 0]
        )
        assert found == calibration_line([0, 1, 0, 1], [0.1, 0.3, 0.6, 0.9])
        assert not math.isnan(found.slope)

    @pytest.mark.parametrize("certain", [0.0, 1.0])
    def test_a_forecast_without_a_finite_logit(self, certain):
        found = calibration_line([0, 1, 0, 1], [0.25, 0.5, 0.75, certain])
        for value in (found.slope, found.intercept, found.in_the_large):
            assert math.isnan(value)
        assert found.observed_over_expected == pytest.approx(2 / (1.5 + certain))

    def test_one_class_alone_and_no_case(self):
        found = calibration_line([1, 1], [0.4, 0.6])
        assert math.isnan(found.slope)
        assert math.isnan(found.in_the_large)
        assert found.observed_over_expected == 2
        empty = calibration_line([], [])
        assert math.isnan(empty.slope)
        assert math.isnan(empty.observed_over_expected)
        assert math.isnan(calibration_line([0, 0], [0.0, 0.0]).observed_over_expected)

    def test_forecasts_far_out_or_close_together(self):
        """Where Newton's whole step would overshoot, or its equations lose their digits."""
        with warnings.catch_warnings():
            warnings.simplefilter("error")
            for f in (
                [1e-300, 1e-200, 1e-250, 1e-220],
                [1 - 1e-15, 1 - 3e-16, 1 - 1e-15, 1 - 2e-16],
                [1e-300, 0.5, 0.4, 1 - 2e-16],
                [0.5, 0.5 + 3e-16, 0.5 + 1e-16, 0.5 + 4e-16],
            ):
                y = np.array([1, 1, 0, 0]) if f[0] < f[2] else np.array([0, 1, 1, 0])
                found = calibration_line(y, f)
                off = y - expit(found.in_the_large + logit(np.array(f)))
                assert off.sum() == pytest.approx(0, abs=1e-6)

    @given(st.integers(0, 200), st.floats(0.3, 3), st.floats(-2, 2))
    def test_turned_forecasts_turn_the_line_back(self, seed, slope, shift):
        y, f, _ = drawn(40, seed)
        plain = calibration_line(y, f)
        assume(not math.isnan(plain.slope))
        turned = calibration_line(y, expit(slope * logit(f) + shift))
        assert turned.slope == pytest.approx(plain.slope / slope, rel=1e-6, abs=1e-9)
        assert turned.intercept == pytest.approx(
            plain.intercept - shift * plain.slope / slope, rel=1e-6, abs=1e-6
        )

    def test_the_other_class_turns_the_intercept_alone(self):
        y, f, weight = drawn(50, 4)
        plain, other = (
            calibration_line(y, f, weights=weight),
            calibration_line(~y, 1 - f, weights=weight),
        )
        assert other.slope == pytest.approx(plain.slope, rel=1e-9)
        assert other.intercept == pytest.approx(-plain.intercept, rel=1e-9)
        assert other.in_the_large == pytest.approx(-plain.in_the_large, rel=1e-9)


@pytest.mark.parametrize(
    ("case", "column"),
    [pytest.param(*c.values, "f", id=c.id) for c in cases("05", "ece")]
    + [pytest.param(*c.values, "prob", id=c.id) for c in cases("05", "ece_top")],
)
def test_error_check_cases(case, column):
    i = case["inputs"]
    found = calibration_error(i["y"], i[column], bins=i["bins"])
    got = {"ece": found.expected, "mce": found.maximum, "rmsce": found.root_mean_square}
    for name, value in got.items():
        assert value == pytest.approx(case["expected"][name], abs=case["tolerance"])
        if name in case.get("published", {}):
            published, exact = case["published"][name], case["published_tolerance"]
            assert value == pytest.approx(published, abs=exact)
    rows = [[b.number, b.count, b.forecast, b.share] for b in found.bins]
    assert_allclose(rows, case["expected"]["bins"], rtol=0, atol=case["tolerance"])


class TestError:
    @given(ANSWERS, st.sampled_from([1, 2, 3, 4, 5, 10, 20]))
    def test_is_its_definition_in_fractions(self, answers, bins):
        y, f, weight = columns(answers)
        held = {}
        for came, twentieths, w in answers:
            # above (m - 1)/M up to and with m/M; 0 in the first
            number = next(
                m for m in range(bins) if Fraction(twentieths, 20) <= Fraction(m + 1, bins)
            )
            held.setdefault(number, []).append((int(came), Fraction(twentieths, 20), w))
        n = int(weight.sum())
        gaps = {}
        for number, of in held.items():
            size = sum(w for _, _, w in of)
            gaps[number] = abs(sum(w * (came - f) for came, f, w in of)) / size, size
        found = calibration_error(y, f, bins=bins, weights=weight)
        assert [b.number for b in found.bins] == sorted(gaps)
        assert [b.count for b in found.bins] == [gaps[m][1] for m in sorted(gaps)]
        expected = sum(gap * size for gap, size in gaps.values()) / n
        square = sum(gap**2 * size for gap, size in gaps.values()) / n
        assert found.expected == pytest.approx(float(expected), abs=1e-12)
        assert found.maximum == pytest.approx(float(max(g for g, _ in gaps.values())), abs=1e-12)
        assert found.root_mean_square == pytest.approx(math.sqrt(square), abs=1e-9)

    @given(ANSWERS, st.integers(1, 30))
    def test_order_and_size_of_the_three(self, answers, bins):
        y, f, weight = columns(answers)
        found = calibration_error(y, f, bins=bins, weights=weight)
        parts = [0, found.expected, found.root_mean_square, found.maximum, 1]
        assert all(a <= b + 1e-9 for a, b in pairwise(parts))
        again = np.repeat(np.arange(len(f)), weight)
        twice = calibration_error(y[again], f[again], bins=bins)
        assert twice.expected == pytest.approx(found.expected, abs=1e-12)
        # one bin sees the whole alone: |share of positives - mean forecast|
        one = calibration_error(y, f, bins=1, weights=weight)
        gap = abs(np.average(y, weights=weight) - np.average(f, weights=weight))
        assert one.expected == pytest.approx(gap, abs=1e-12)
        assert one.expected <= found.expected + 1e-12

    def test_forecasts_on_the_edges_belong_below(self):
        edges = [0.0, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 1.0]
        found = calibration_error([0] * 11, edges, bins=10)
        assert [b.number for b in found.bins] == list(range(10))
        assert [b.count for b in found.bins] == [2, *[1] * 9]

    def test_the_top_label_is_the_first_of_equals(self):
        # confidence 0.4 for class 0, which came once of two
        found = calibration_error([0, 1], [[0.4, 0.4, 0.2], [0.4, 0.4, 0.2]], bins=5)
        (held,) = found.bins
        assert (held.number, held.count, held.share) == (1, 2, 0.5)
        assert found.expected == pytest.approx(0.1, abs=1e-15)

    def test_no_case(self):
        for forecasts in ([], np.empty((0, 3))):
            found = calibration_error([], forecasts, bins=5)
            assert found.bins == ()
            for value in (found.expected, found.maximum, found.root_mean_square):
                assert math.isnan(value)

    def test_what_is_refused(self):
        with pytest.raises(EvalError, match=exactly("`bins` must be at least 1; got 0.")):
            calibration_error([0, 1], [0.2, 0.4], bins=0)
        message = "`forecasts` must be probabilities from 0 to 1; got 1.5."
        with pytest.raises(EvalError, match=exactly(message)):
            calibration_error([0, 1], [0.2, 1.5], bins=5)
        with pytest.raises(EvalError, match=exactly(message)):
            calibration_line([0, 1], [0.2, 1.5])
