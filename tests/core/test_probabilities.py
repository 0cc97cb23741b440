"""Brier score, its parts and log loss: check cases, scikit-learn, fractions by hand."""

import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from sklearn import metrics

from evalcore.errors import EvalError
from evalcore.probabilities import CLIP, brier, brier_decomposition, checked, log_loss

from .checks import cases, exactly

# forecasts in twentieths, so that equal ones occur
ANSWERS = st.lists(
    st.tuples(st.booleans(), st.integers(0, 20), st.integers(1, 4)), min_size=1, max_size=25
)


def columns(answers):
    positive, forecast, weight = zip(*answers, strict=True)
    return np.array(positive), np.array(forecast) / 20, np.array(weight)


class Drawn:
    """Three rounds of forecasts for four classes, each of which occurs in each round."""

    def __init__(self):
        rng = np.random.default_rng(2)
        self.group = np.repeat([0, 1, 2], (17, 40, 26))
        self.label = np.concatenate([np.arange(size) % 4 for size in (17, 40, 26)])
        self.forecast = rng.dirichlet([0.7] * 4, len(self.label))
        self.weight = rng.random(len(self.label)) + 0.1

    def each(self, function, **settings):
        for g in range(3):
            of = self.group == g
            yield function(
                self.label[of], self.forecast[of], sample_weight=self.weight[of], **settings
            )

    def found(self, measure):
        return measure(
            self.label, self.forecast, groups=self.group, n_groups=3, weights=self.weight
        )


@pytest.mark.parametrize("case", cases("05", "prob_multi"))
def test_check_cases(case):
    y, prob = case["inputs"]["y"], np.array(case["inputs"]["prob"])
    found = {"brier_sum_over_classes": brier(y, prob), "log_loss": log_loss(y, prob)}
    for name, value in found.items():
        assert_allclose(value, [case["expected"][name]], rtol=0, atol=case["tolerance"])
        if name in case.get("published", {}):
            published, exact = case["published"][name], case["published_tolerance"]
            assert_allclose(value, [published], rtol=0, atol=exact)
    if prob.shape[1] == 2:
        # one column says the same; the Brier score then counts each distance once
        assert_allclose(2 * brier(y, prob[:, 1]), found["brier_sum_over_classes"], rtol=1e-12)
        assert_allclose(log_loss(y, prob[:, 1]), found["log_loss"], rtol=1e-12)


@pytest.mark.parametrize("case", cases("05", "brier_dec"))
def test_decomposition_check_cases(case):
    i = case["inputs"]
    found = brier_decomposition(i["y"], i["f"])
    for name, expected in case["expected"].items():
        assert getattr(found, name) == pytest.approx(expected, abs=case["tolerance"])
    assert_allclose(brier(i["y"], i["f"]), [found.brier], rtol=0, atol=case["tolerance"])
    for name, published in case.get("published", {}).items():
        assert getattr(found, name) == pytest.approx(published, abs=case["published_tolerance"])


def test_agree_with_scikit_learn_on_weighted_rounds():
    drawn = Drawn()
    expected = list(drawn.each(metrics.brier_score_loss, scale_by_half=False))
    assert_allclose(drawn.found(brier), expected, rtol=0, atol=1e-12)
    expected = list(drawn.each(metrics.log_loss))
    assert_allclose(drawn.found(log_loss), expected, rtol=0, atol=1e-12)


def test_one_forecast_a_case_agrees_with_scikit_learn():
    drawn = Drawn()
    y, f = drawn.label == 1, drawn.forecast[:, 1]
    expected = metrics.brier_score_loss(y, f, sample_weight=drawn.weight)
    assert_allclose(brier(y, f, weights=drawn.weight), [expected], rtol=0, atol=1e-12)
    expected = metrics.log_loss(y, f, sample_weight=drawn.weight)
    assert_allclose(log_loss(y, f, weights=drawn.weight), [expected], rtol=0, atol=1e-12)


def test_by_hand():
    forecast = [[0.5, 0.25, 0.25], [0.125, 0.75, 0.125]]
    # 1/4 + 1/16 + 1/16 = 24/64, and 1/64 + 9/16 + 49/64 = 86/64
    assert brier([0, 2], forecast).tolist() == [(24 + 86) / 128]
    # -ln(1/2) = ln 2, and -ln(1/8) = 3 ln 2
    assert_allclose(log_loss([0, 2], forecast), [2 * math.log(2)], rtol=1e-15)
    assert_allclose(log_loss([0, 2], forecast, weights=[3, 1]), [1.5 * math.log(2)], rtol=1e-15)


def test_certain_forecasts():
    # the nearest to 1 - CLIP costs CLIP; the opposite -ln(CLIP) = 52 ln 2
    for forecast in ([1.0, 0.0], [[0.0, 1.0], [1.0, 0.0]]):
        assert_allclose(log_loss([1, 0], forecast), [CLIP], rtol=1e-9)
        assert_allclose(log_loss([0, 1], forecast), [52 * math.log(2)], rtol=1e-15)
    assert brier([1, 0], [1.0, 0.0]).tolist() == [0]
    assert brier([1, 0], [0.0, 1.0]).tolist() == [1]
    assert brier([1, 0], [[1.0, 0.0], [0.0, 1.0]]).tolist() == [2]


@given(ANSWERS)
def test_a_case_counted_twice_is_two_cases(answers):
    y, f, weight = columns(answers)
    again = np.repeat(np.arange(len(f)), weight)
    for measure in (brier, log_loss):
        assert_allclose(
            measure(y, f, weights=weight), measure(y[again], f[again]), rtol=1e-12, atol=1e-15
        )
    found, plain = (
        brier_decomposition(y, f, weights=weight),
        brier_decomposition(y[again], f[again]),
    )
    for name in ("brier", "reliability", "resolution", "uncertainty", "skill"):
        assert_allclose(getattr(found, name), getattr(plain, name), rtol=1e-9, atol=1e-12)


@given(ANSWERS)
def test_parts_in_fractions_add_up(answers):
    y, f, weight = columns(answers)
    n = int(weight.sum())
    base = Fraction(int(weight[y].sum()), n)
    reliability = resolution = score = Fraction(0)
    for twentieths in {a[1] for a in answers}:
        of = [(int(p), w) for p, t, w in answers if t == twentieths]
        size, forecast = sum(w for _, w in of), Fraction(twentieths, 20)
        came = Fraction(sum(p * w for p, w in of), size)
        reliability += size * (forecast - came) ** 2 / n
        resolution += size * (came - base) ** 2 / n
        score += sum(w * (forecast - p) ** 2 for p, w in of) / n
    uncertainty = base * (1 - base)
    assert score == reliability - resolution + uncertainty
    found = brier_decomposition(y, f, weights=weight)
    parts = [found.brier, found.reliability, found.resolution, found.uncertainty]
    expected = [float(part) for part in (score, reliability, resolution, uncertainty)]
    assert_allclose(parts, expected, rtol=0, atol=1e-12)
    skill = float(1 - score / uncertainty) if uncertainty else math.nan
    assert_allclose(found.skill, skill, rtol=0, atol=1e-10)


def test_all_of_one_class_leaves_no_skill_to_measure():
    found = brier_decomposition([1, 1], [0.9, 0.7])
    assert_allclose([found.brier, found.reliability], [0.05, 0.05], rtol=1e-12)
    assert (found.resolution, found.uncertainty) == (0, 0)
    assert math.isnan(found.skill)


def test_forecasts_without_weight_are_no_group():
    found = brier_decomposition([1, 0, 1], [0.8, 0.4, 0.1], weights=[1, 1, 0])
    assert found == brier_decomposition([1, 0], [0.8, 0.4])


def test_no_case():
    found = brier_decomposition([], [])
    for name in ("brier", "reliability", "resolution", "uncertainty", "skill"):
        assert math.isnan(getattr(found, name))
    for measure in (brier, log_loss):
        assert_allclose(measure([1], [0.75], groups=[1], n_groups=3)[[0, 2]], [math.nan] * 2)
        assert_allclose(measure([], np.empty((0, 3))), [math.nan])
    assert brier([1], [0.75], groups=[1], n_groups=3)[1] == 0.0625


@pytest.mark.parametrize("bad", [-0.25, 1.5, math.nan])
def test_decision_values_are_no_forecasts(bad):
    message = f"`forecasts` must be probabilities from 0 to 1; got {bad}."
    for refuse in (
        lambda: checked([0.5, bad]),
        lambda: brier([0, 1], [0.5, bad]),
        lambda: log_loss([0, 1], [[0.5, 0.5], [0.5, bad]]),
        lambda: brier_decomposition([0, 1], [0.5, bad]),
    ):
        with pytest.raises(EvalError, match=exactly(message)):
            refuse()
