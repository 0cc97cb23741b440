"""Measures from confusion counts: check cases, scikit-learn, fractions by hand, and their laws."""

import math
import statistics
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from numpy.testing import assert_allclose
from sklearn import metrics

from evalcore.measures import (
    FURTHER_MEASURES,
    MEASURES,
    accuracy,
    cohen_kappa,
    f1,
    f1_macro,
    matthews,
    precisions,
    recalls,
    specificities,
)

from .checks import cases

EVERY = (precisions, specificities, f1, f1_macro, cohen_kappa, matthews)
OF_CASES = {
    "precision": precisions,
    "f1_macro": f1_macro,
    "kappa": cohen_kappa,
    "mcc": matthews,
}


def tables(k: int, high: int = 30):
    return arrays(np.int64, (k, k), elements=st.integers(0, high)).map(lambda t: t.astype(float))


@pytest.mark.parametrize("case", cases("05", "cm"))
def test_check_cases(case):
    counts = np.array(case["inputs"]["cm"], dtype=float)
    for name, measure in OF_CASES.items():
        # null in the file stands for what is undefined
        expected = np.array(case["expected"][name], dtype=float)
        assert_allclose(measure(counts), expected, rtol=0, atol=case["tolerance"])
        if name in case.get("published", {}):
            published, exact = case["published"][name], case["published_tolerance"]
            assert_allclose(measure(counts), published, rtol=0, atol=exact)


@pytest.mark.parametrize("case", cases("05", "cv_agg"))
def test_spread_of_folds(case):
    folds = case["inputs"]["folds"]
    counts = np.array([[[f["correct"], f["n"] - f["correct"]], [0, 0]] for f in folds], float)
    spread = statistics.stdev(accuracy(counts).tolist())
    assert spread == pytest.approx(case["expected"]["sd_of_folds"], abs=case["tolerance"])


def test_by_hand():
    """Rows 3 1 0, 1 2 1, 0 2 4: 14 cases, 9 right, answers 4, 5, 5."""
    counts = np.array([[3.0, 1, 0], [1, 2, 1], [0, 2, 4]])
    exact = {
        precisions: [Fraction(3, 4), Fraction(2, 5), Fraction(4, 5)],
        # others of class 1 are 10, of which 1 was called so; then 10 and 3; then 8 and 1
        specificities: [Fraction(9, 10), Fraction(7, 10), Fraction(7, 8)],
        f1: [Fraction(6, 8), Fraction(4, 9), Fraction(8, 11)],
        f1_macro: (Fraction(3, 4) + Fraction(4, 9) + Fraction(8, 11)) / 3,
        # by chance (4 x 4 + 4 x 5 + 6 x 5) / 14^2 = 66/196; (126/196 - 66/196) / (130/196)
        cohen_kappa: Fraction(60, 130),
    }
    for measure, expected in exact.items():
        assert_allclose(measure(counts), np.array(expected, dtype=float), rtol=1e-15)
    # 14^2 - (16 + 16 + 36) = 128 and 14^2 - (16 + 25 + 25) = 130
    assert float(matthews(counts)) ** 2 == pytest.approx(60**2 / (128 * 130), rel=1e-15)


class Drawn:
    """Labels, answers and weights of several rounds in which every class occurs."""

    def __init__(self, n_classes: int):
        rng = np.random.default_rng(n_classes)
        self.labels = range(n_classes)
        self.rounds = []
        for size in (31, 57, 44):
            true = np.concatenate([self.labels, rng.integers(0, n_classes, size)])
            astray = rng.integers(0, n_classes, len(true))
            answered = np.where(rng.random(len(true)) < 0.6, true, astray)
            self.rounds.append((true, answered, rng.random(len(true)) + 0.2))

    def counts(self):
        return np.stack(
            [
                metrics.confusion_matrix(t, a, labels=self.labels, sample_weight=w)
                for t, a, w in self.rounds
            ]
        )

    def each(self, function, **settings):
        return [function(t, a, sample_weight=w, **settings) for t, a, w in self.rounds]


@pytest.mark.parametrize("n_classes", [2, 3, 5])
def test_agree_with_scikit_learn_on_weighted_rounds(n_classes):
    drawn = Drawn(n_classes)
    expected = {
        precisions: drawn.each(metrics.precision_score, average=None),
        f1: drawn.each(metrics.f1_score, average=None),
        f1_macro: drawn.each(metrics.f1_score, average="macro"),
        cohen_kappa: drawn.each(metrics.cohen_kappa_score),
        matthews: drawn.each(metrics.matthews_corrcoef),
    }
    for measure, values in expected.items():
        assert_allclose(measure(drawn.counts()), values, rtol=0, atol=1e-12)
    apart = [
        [metrics.recall_score(t != k, a != k, sample_weight=w) for k in drawn.labels]
        for t, a, w in drawn.rounds
    ]
    assert_allclose(specificities(drawn.counts()), apart, rtol=0, atol=1e-12)


def test_matthews_of_two_classes_is_the_correlation_of_two_columns():
    counts = np.array([[6, 2], [1, 3]])
    true = np.repeat([0, 0, 1, 1], counts.ravel())
    answered = np.repeat([0, 1, 0, 1], counts.ravel())
    assert matthews(counts) == pytest.approx(np.corrcoef(true, answered)[0, 1], abs=1e-15)


class TestEdges:
    def test_an_empty_table_has_no_value(self):
        for measure in EVERY:
            assert np.isnan(measure(np.zeros((2, 3, 3)))).all()
            assert len(measure(np.zeros((2, 3, 3)))) == 2

    def test_the_same_answer_always(self):
        counts = np.array([[90.0, 0], [10, 0]])
        assert cohen_kappa(counts) == 0
        assert matthews(counts) == 0
        assert_allclose(precisions(counts), [0.9, math.nan])
        # 2 x 90 / (90 + 100)
        assert_allclose(f1(counts), [18 / 19, 0], rtol=1e-15)

    def test_cases_of_one_class_alone(self):
        counts = np.array([[6.0, 4], [0, 0]])
        assert cohen_kappa(counts) == 0
        assert matthews(counts) == 0
        assert_allclose(f1(counts), [0.75, 0], rtol=1e-15)
        assert_allclose(specificities(counts), [math.nan, 0.6])

    def test_one_class_and_all_of_it_right(self):
        counts = np.array([[10.0, 0], [0, 0]])
        assert np.isnan(cohen_kappa(counts))
        assert matthews(counts) == 0
        assert_allclose(f1(counts), [1, math.nan])
        assert np.isnan(f1_macro(counts))

    def test_weights_that_do_not_add_up_exactly_leave_a_constant_answer_at_0(self):
        counts = np.array([[0.1, 0, 0], [0.2, 0, 0], [0.7, 0, 0]])
        assert 0.1 + 0.2 + 0.7 != 0.1 + (0.2 + 0.7)
        assert matthews(counts) == 0
        assert matthews(counts.T) == 0

    def test_undefined_rounds_leave_the_others_alone(self):
        counts = np.stack([np.zeros((2, 2)), [[20, 5], [10, 15]], [[4, 0], [0, 0]]])
        assert_allclose(cohen_kappa(counts), [math.nan, 0.4, math.nan], rtol=0, atol=1e-15)
        assert_allclose(matthews(counts), [math.nan, 1 / math.sqrt(6), 0], rtol=1e-15)


@given(tables(3), st.permutations(range(3)))
def test_renamed_classes(counts, order):
    renamed = counts[np.ix_(order, order)]
    for measure in (f1_macro, cohen_kappa, matthews):
        assert_allclose(measure(renamed), measure(counts), rtol=0, atol=1e-12)
    for measure in (precisions, specificities, f1):
        assert_allclose(measure(renamed), measure(counts)[order], rtol=0, atol=1e-12)


@given(tables(3), st.integers(2, 9))
def test_every_case_counted_again_changes_nothing(counts, times):
    for measure in EVERY:
        assert_allclose(measure(times * counts), measure(counts), rtol=0, atol=1e-12)


@given(tables(4))
def test_answers_and_classes_in_each_others_place(counts):
    for measure in (f1, f1_macro, cohen_kappa, matthews):
        assert_allclose(measure(counts.T), measure(counts), rtol=0, atol=1e-12)
    assert_allclose(precisions(counts.T), recalls(counts), rtol=0, atol=0)


@given(tables(2))
def test_ranges(counts):
    for measure in (precisions, specificities, f1):
        defined = measure(counts)[~np.isnan(measure(counts))]
        assert ((defined >= 0) & (defined <= 1)).all()
    for measure in (cohen_kappa, matthews):
        value = float(measure(counts))
        assert math.isnan(value) or -1 - 1e-12 <= value <= 1 + 1e-12
    if not np.isnan(cohen_kappa(counts)):
        # kappa is never further from 0 (2 x 2 tables)
        assert abs(cohen_kappa(counts)) <= abs(matthews(counts)) + 1e-12


@given(tables(2))
def test_specificity_of_one_class_is_the_share_found_of_the_other(counts):
    assert_allclose(specificities(counts), recalls(counts)[::-1], rtol=0, atol=0)


def test_each_further_measure_knows_its_function():
    counts = np.array([[[8.0, 2.0], [3.0, 2.0]]])
    values = {
        key: measure.from_confusion(counts)[0].tolist() for key, measure in FURTHER_MEASURES.items()
    }
    assert values == {
        "precision": [pytest.approx(8 / 11), pytest.approx(1 / 2)],
        "f1": [pytest.approx(16 / 21), pytest.approx(4 / 9)],
        "f1_macro": pytest.approx((16 / 21 + 4 / 9) / 2),
        # by chance (10 x 11 + 5 x 4) / 15^2
        "kappa": pytest.approx((150 - 130) / (225 - 130)),
        "matthews": pytest.approx(20 / math.sqrt((225 - 125) * (225 - 137))),
    }
    for key, measure in FURTHER_MEASURES.items():
        assert measure.key == key
        assert measure.per_class == isinstance(values[key], list)


def test_names_of_all_measures_are_their_own():
    every = {**MEASURES, **FURTHER_MEASURES}.values()
    for names in ([m.plain for m in every], [m.trade for m in every]):
        assert all(names)
        assert len(set(names)) == len(every)
