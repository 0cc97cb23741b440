"""Many rounds at once give the areas that one group after the other gives."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from sklearn.metrics import roc_auc_score

from evalcore.ranking import auc, hand_till
from evalcore.row_ranking import row_auc, row_hand_till


@st.composite
def rounds(draw, n_classes):
    """Labels, scores (R, n, K) full of ties, and weights (R, n), many of them 0."""
    r, n = draw(st.integers(1, 5)), draw(st.integers(1, 12))
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    levels, most = draw(st.sampled_from([1, 2, 4, 10**6])), draw(st.integers(0, 3))
    labels = rng.integers(0, n_classes, n)
    scores = rng.integers(0, levels, (r, n, n_classes)) / 7 - 0.3
    return labels, scores, rng.integers(0, most + 1, (r, n)).astype(float)


def in_groups(scores, weights):
    """Rounds one after the other, as `ranking` takes them."""
    r, n = weights.shape
    flat = scores.reshape(r * n, *scores.shape[2:])
    return flat, {"groups": np.repeat(np.arange(r), n), "n_groups": r, "weights": weights.ravel()}


@settings(max_examples=200, deadline=None)
@given(rounds(2))
def test_auc_as_by_groups(given_rounds):
    labels, scores, weights = given_rounds
    flat, rest = in_groups(scores[:, :, 1], weights)
    expected = auc(np.tile(labels == 1, len(weights)), flat, **rest)
    found = row_auc(labels == 1, scores[:, :, 1], weights)
    assert found.shape == (len(weights),)
    assert found.tolist() == pytest.approx(expected.tolist(), rel=1e-13, nan_ok=True)
    ups, downs = weights @ (labels == 1), weights @ (labels == 0)
    assert np.isnan(found).tolist() == ((ups == 0) | (downs == 0)).tolist()


@settings(max_examples=200, deadline=None)
@given(st.integers(2, 4).flatmap(rounds))
def test_hand_till_as_by_groups(given_rounds):
    labels, scores, weights = given_rounds
    flat, rest = in_groups(scores, weights)
    expected = hand_till(np.tile(labels, len(weights)), flat, **rest)
    found = row_hand_till(labels, scores, weights)
    assert found.tolist() == pytest.approx(expected.tolist(), rel=1e-13, nan_ok=True)


@settings(max_examples=60, deadline=None)
@given(rounds(2))
def test_complementary_scores_of_two_classes(given_rounds):
    labels, scores, weights = given_rounds
    scores[:, :, 0] = 1 - scores[:, :, 1]
    flat, rest = in_groups(scores[:, :, 1], weights)
    expected = auc(np.tile(labels == 1, len(weights)), flat, **rest)
    found = row_hand_till(labels, scores, weights)
    assert found.tolist() == pytest.approx(expected.tolist(), rel=1e-13, nan_ok=True)


def test_scores_of_two_classes_that_are_no_complement():
    # by class 1's scores 3 of 4 pairs are in order, by class 0's only 1 of 4
    labels = np.array([0, 0, 1, 1])
    up, down = [0.1, 0.4, 0.35, 0.8], [0.1, 0.4, 0.35, 0.8]
    scores = np.array([np.column_stack([down, up])])
    assert row_hand_till(labels, scores, np.ones((1, 4))).tolist() == [(0.75 + 0.25) / 2]


def test_against_scikit_learn_with_weights_and_ties():
    rng = np.random.default_rng(4)
    labels = np.arange(40) % 3 == 0
    scores = np.round(rng.normal(size=(6, 40)) + labels, 1)
    weights = rng.integers(0, 4, (6, 40)).astype(float)
    expected = [
        roc_auc_score(labels, s, sample_weight=w) for s, w in zip(scores, weights, strict=True)
    ]
    assert row_auc(labels, scores, weights).tolist() == pytest.approx(expected, rel=1e-12)


def test_more_classes_against_scikit_learn():
    rng = np.random.default_rng(5)
    labels = np.arange(30) % 3
    scores = rng.dirichlet([1, 1, 1], (2, 30))
    expected = [roc_auc_score(labels, s, multi_class="ovo", average="macro") for s in scores]
    found = row_hand_till(labels, scores, np.ones((2, 30)))
    assert found.tolist() == pytest.approx(expected, rel=1e-12)


def test_by_hand():
    labels = np.array([False, False, True, True])
    scores = np.array([[0.1, 0.4, 0.35, 0.8], [0.5, 0.5, 0.5, 0.5], [0.9, 0.8, 0.1, 0.2]])
    assert row_auc(labels, scores, np.ones((3, 4))).tolist() == [0.75, 0.5, 0.0]
    # the pair out of order counts 3 x 2 times of 4 x 3
    twice = np.array([[1.0, 2.0, 3.0, 1.0]])
    assert row_auc(labels, scores[:1], twice).tolist() == [(3 + 1 + 2) / 12]


def test_two_classes_without_any_case():
    # units that carry several classes may leave two of them without a unit
    scores = np.random.default_rng(0).random((2, 3, 3))
    found = row_hand_till(np.array([2, 2, 2]), scores, np.ones((2, 3)))
    assert np.isnan(found).tolist() == [True, True]
