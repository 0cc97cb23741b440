"""Average precision and the areas under ROC curves: check cases, scikit-learn, brute force."""

import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from sklearn import metrics

from evalcore import measures, ranking
from evalcore.ranking import auc, average_precision, hand_till

from .checks import cases

ANSWERS = st.lists(
    st.tuples(st.booleans(), st.integers(0, 6), st.integers(1, 4)), min_size=1, max_size=25
)


def columns(answers):
    positive, score, weight = zip(*answers, strict=True)
    return np.array(positive), np.array(score) / 8, np.array(weight)


def by_definition(positive, score, weight):
    """Recall gained x precision at each distinct score, highest first, in fractions."""
    whole = sum(int(w) for p, w in zip(positive, weight, strict=True) if p)
    if whole == 0:
        return math.nan
    area, before = Fraction(0), 0
    for threshold in sorted(set(score.tolist()), reverse=True):
        called = [
            (p, int(w)) for p, s, w in zip(positive, score, weight, strict=True) if s >= threshold
        ]
        found = sum(w for p, w in called if p)
        area += Fraction(found - before, whole) * Fraction(found, sum(w for _, w in called))
        before = found
    return float(area)


@pytest.mark.parametrize("case", cases("05", "ap"))
def test_average_precision_check_cases(case):
    found = average_precision(case["inputs"]["y"], case["inputs"]["score"])
    assert_allclose(found, [case["expected"]["ap"]], rtol=0, atol=case["tolerance"])
    published = case["published"]["ap"]
    assert_allclose(found, [published], rtol=0, atol=case["published_tolerance"])


def test_by_hand_with_a_tie_across_classes():
    """Scores 5 (+), 4 (+ - -), 3 (-), 2 (+): 1/3 x 1 + 1/3 x 2/4 + 1/3 x 3/6."""
    positive = [1, 1, 0, 0, 0, 1]
    score = [5, 4, 4, 4, 3, 2]
    expected = Fraction(1, 3) * (1 + Fraction(2, 4) + Fraction(3, 6))
    for order in ([0, 1, 2, 3, 4, 5], [5, 3, 2, 1, 4, 0]):
        found = average_precision(np.array(positive)[order], np.array(score)[order])
        assert_allclose(found, [float(expected)], rtol=1e-15)


@given(ANSWERS)
def test_average_precision_is_its_definition(answers):
    positive, score, weight = columns(answers)
    found = average_precision(positive, score, weights=weight)
    assert_allclose(found, [by_definition(positive, score, weight)], rtol=0, atol=1e-12)


@pytest.mark.parametrize("weighted", [False, True])
def test_average_precision_agrees_with_scikit_learn_by_round(weighted):
    rng = np.random.default_rng(3)
    group = rng.permutation(np.repeat(np.arange(4), (20, 45, 33, 52)))
    positive = rng.random(150) < 0.3
    score = np.round(rng.normal(size=150) + 0.8 * positive, 1)
    weight = rng.random(150) + 0.1 if weighted else None
    found = average_precision(positive, score, groups=group, n_groups=4, weights=weight)
    expected = [
        metrics.average_precision_score(
            positive[group == g],
            score[group == g],
            sample_weight=weight[group == g] if weighted else None,
        )
        for g in range(4)
    ]
    assert_allclose(found, expected, rtol=0, atol=1e-12)


def test_a_group_that_lacks_a_class():
    # group 0 has positives alone, group 1 negatives alone, group 2 nothing, group 3 both
    positive, group = [1, 1, 0, 0, 1, 0], [0, 0, 1, 1, 3, 3]
    score = [0.3, 0.9, 0.2, 0.8, 0.4, 0.7]
    found = average_precision(positive, score, groups=group, n_groups=4)
    assert_allclose(found, [1, math.nan, math.nan, 0.5])
    assert_allclose(auc(positive, score, groups=group, n_groups=4), [*[math.nan] * 3, 0])


def test_cases_without_weight_do_not_count():
    weight = [0, 1, 2, 1, 0]
    found = average_precision([1, 0, 1, 0, 0], [0.9, 0.8, 0.7, 0.2, 0.95], weights=weight)
    # 2 of 3 when the weight of 2 is reached
    assert_allclose(found, [2 / 3], rtol=1e-15)
    assert_allclose(average_precision([1, 0], [0.2, 0.1], weights=[0, 0]), [math.nan])


def test_no_answers_at_all():
    none = np.array([], dtype=int)
    assert_allclose(average_precision([], [], groups=none, n_groups=2), [math.nan] * 2)


@given(ANSWERS)
def test_areas_see_the_order_of_scores_alone(answers):
    positive, score, weight = columns(answers)
    for area in (average_precision, auc):
        plain, risen = (area(positive, s, weights=weight) for s in (score, np.exp(3 * score)))
        assert_allclose(risen, plain, rtol=0, atol=0)


@given(ANSWERS)
def test_a_case_counted_twice_is_two_cases(answers):
    positive, score, weight = columns(answers)
    again = np.repeat(np.arange(len(score)), weight)
    for area in (average_precision, auc):
        found = area(positive, score, weights=weight)
        assert_allclose(found, area(positive[again], score[again]), rtol=0, atol=1e-12)


@given(ANSWERS)
def test_auc_is_the_share_of_pairs_won(answers):
    positive, score, weight = columns(answers)
    up, down = score[positive], score[~positive]
    pairs = weight[positive][:, None] * weight[~positive]
    won = (up[:, None] > down) + (up[:, None] == down) / 2
    expected = (pairs * won).sum() / pairs.sum() if pairs.size else math.nan
    assert_allclose(auc(positive, score, weights=weight), [expected], rtol=0, atol=1e-12)


def test_two_classes_with_complementary_scores_have_one_area():
    rng = np.random.default_rng(5)
    positive, score = rng.random(40) < 0.4, rng.integers(0, 9, 40) / 8
    both = hand_till(positive, np.column_stack([1 - score, score]))
    assert_allclose(both, auc(positive, score), rtol=0, atol=1e-15)


def test_the_old_place_still_has_them():
    for name in ("auc", "hand_till", "average_precision"):
        assert getattr(measures, name) is getattr(ranking, name)
