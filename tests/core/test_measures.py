"""Measures against check cases and scikit-learn, several rounds at once."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from sklearn import metrics

from evalcore.measures import (
    MEASURES,
    accuracy,
    auc,
    balanced_accuracy,
    confusion,
    hand_till,
    predicted_class,
    recalls,
)

from .checks import cases


@pytest.mark.parametrize("case", cases("05", "cm"))
def test_confusion_check_cases(case):
    counts = np.array([case["inputs"]["cm"]], dtype=float)
    found = {
        "accuracy": accuracy(counts)[0],
        "balanced_accuracy": balanced_accuracy(counts)[0],
        "recall": recalls(counts)[0],
    }
    for name, value in found.items():
        assert_allclose(value, case["expected"][name], rtol=0, atol=case["tolerance"])
        if name in case.get("published", {}):
            assert_allclose(
                value, case["published"][name], rtol=0, atol=case["published_tolerance"]
            )


@pytest.mark.parametrize("case", cases("05", "auc_hm"))
def test_auc_check_cases(case):
    found = auc(case["inputs"]["y"], case["inputs"]["score"])
    assert_allclose(found, [case["expected"]["auc"]], rtol=0, atol=case["tolerance"])
    if "published" in case:
        published = case["published"]["auc"]
        assert_allclose(found, [published], rtol=0, atol=case["published_tolerance"])


@pytest.mark.parametrize("case", cases("05", "hand_till"))
def test_hand_till_check_cases(case):
    y, prob = np.array(case["inputs"]["y"]), np.array(case["inputs"]["prob"])
    found = hand_till(y, prob)
    assert_allclose(found, [case["expected"]["M"]], rtol=0, atol=case["tolerance"])
    pairs = [(0, 1), (0, 2), (1, 2)]
    for (a, b), expected in zip(pairs, case["expected"]["pairwise"], strict=True):
        chosen = (y == a) | (y == b)
        both = [auc(y[chosen] == k, prob[chosen, k])[0] for k in (a, b)]
        assert np.mean(both) == pytest.approx(expected, rel=0, abs=case["tolerance"])


@pytest.mark.parametrize("case", cases("05", "cv_agg"))
def test_pooled_and_mean_of_folds(case):
    folds = case["inputs"]["folds"]
    counts = np.array([[[f["correct"], f["n"] - f["correct"]], [0, 0]] for f in folds], float)
    expected, exact = case["expected"], case["tolerance"]
    assert accuracy(counts.sum(axis=0)) == pytest.approx(expected["pooled"], abs=exact)
    assert accuracy(counts).mean() == pytest.approx(expected["mean_of_folds"], abs=exact)


class Answered:
    """Six rounds of answers of unlike sizes, with ties and repeats, in mixed order."""

    n_groups = 6

    def __init__(self, n_classes: int, seed: int = 1):
        rng = np.random.default_rng(seed)
        sizes = (40, 25, 60, 33, 50, 45)
        self.n_classes = n_classes
        self.groups = rng.permutation(np.repeat(np.arange(6), sizes))
        n = len(self.groups)
        self.true = rng.integers(0, n_classes, n)
        raw = rng.random((n, n_classes)) + 0.7 * np.eye(n_classes)[self.true]
        # halves and quarters add up exactly, so that ties stay ties
        self.scores = np.floor(8 * raw / raw.sum(axis=1, keepdims=True)) / 8
        self.scores[:, 0] = 1 - self.scores[:, 1:].sum(axis=1)
        self.weights = rng.integers(1, 4, n)

    def each(self):
        for g in range(6):
            yield self.groups == g


@pytest.mark.parametrize("weighted", [False, True])
@pytest.mark.parametrize("n_classes", [2, 3, 4])
def test_confusion_agrees_with_scikit_learn(n_classes, weighted):
    got = Answered(n_classes)
    predicted = predicted_class(got.scores)
    weights = got.weights if weighted else None
    found = confusion(
        got.true, predicted, n_classes=n_classes, groups=got.groups, n_groups=6, weights=weights
    )
    for counts, rows in zip(found, got.each(), strict=True):
        weight = got.weights[rows] if weighted else None
        expected = metrics.confusion_matrix(
            got.true[rows], predicted[rows], labels=range(n_classes), sample_weight=weight
        )
        assert counts.tolist() == expected.tolist()
        assert accuracy(counts) == pytest.approx(
            metrics.accuracy_score(got.true[rows], predicted[rows], sample_weight=weight), abs=1e-12
        )
        assert balanced_accuracy(counts) == pytest.approx(
            metrics.balanced_accuracy_score(got.true[rows], predicted[rows], sample_weight=weight),
            abs=1e-12,
        )
        assert_allclose(
            recalls(counts),
            metrics.recall_score(
                got.true[rows], predicted[rows], average=None, sample_weight=weight
            ),
            rtol=1e-12,
        )


@pytest.mark.parametrize("weighted", [False, True])
def test_auc_agrees_with_scikit_learn(weighted):
    got = Answered(2)
    weights = got.weights if weighted else None
    found = auc(got.true, got.scores[:, 1], groups=got.groups, n_groups=6, weights=weights)
    expected = [
        metrics.roc_auc_score(
            got.true[rows],
            got.scores[rows, 1],
            sample_weight=got.weights[rows] if weighted else None,
        )
        for rows in got.each()
    ]
    assert_allclose(found, expected, rtol=0, atol=1e-12)
    both = hand_till(got.true, got.scores, groups=got.groups, n_groups=6, weights=weights)
    assert_allclose(both, expected, rtol=0, atol=1e-12)


@pytest.mark.parametrize("n_classes", [3, 4])
def test_hand_till_agrees_with_scikit_learn(n_classes):
    got = Answered(n_classes)
    found = hand_till(got.true, got.scores, groups=got.groups, n_groups=6)
    expected = [
        metrics.roc_auc_score(got.true[rows], got.scores[rows], multi_class="ovo")
        for rows in got.each()
    ]
    assert_allclose(found, expected, rtol=0, atol=1e-12)


def test_a_case_counted_twice_equals_two_cases():
    got = Answered(3)
    twice = np.repeat(np.arange(len(got.true)), got.weights)
    found = hand_till(got.true, got.scores, groups=got.groups, n_groups=6, weights=got.weights)
    expected = hand_till(got.true[twice], got.scores[twice], groups=got.groups[twice], n_groups=6)
    assert_allclose(found, expected, rtol=1e-12)


def test_auc_is_the_share_of_pairs_won():
    got = Answered(2)
    rows = got.groups == 2
    up, down = (got.scores[rows & (got.true == k), 1] for k in (1, 0))
    wins = (up[:, None] > down).mean() + (up[:, None] == down).mean() / 2
    found = auc(got.true, got.scores[:, 1], groups=got.groups, n_groups=6)
    assert found[2] == pytest.approx(wins, rel=1e-12)


def test_auc_sees_ranks_alone_and_turns_with_the_sign():
    got = Answered(2)
    score = got.scores[:, 1]
    found = auc(got.true, score, groups=got.groups, n_groups=6)
    risen = auc(got.true, np.exp(3 * score), groups=got.groups, n_groups=6)
    turned = auc(got.true, -score, groups=got.groups, n_groups=6)
    assert risen.tolist() == found.tolist()
    assert_allclose(turned, 1 - found, rtol=0, atol=1e-12)


def test_what_cannot_be_computed_is_undefined():
    # round 0 lacks negatives, round 1 has both, round 2 is empty
    found = auc([1, 1, 1, 0, 0], [0.3, 0.7, 0.4, 0.1, 0.6], groups=[0, 0, 1, 1, 1], n_groups=3)
    assert_allclose(found, [math.nan, 0.5, math.nan])
    three = hand_till(np.array([0, 1, 1, 0]), np.random.default_rng(1).random((4, 3)))
    assert_allclose(three, [math.nan])
    counts = np.array([[3.0, 1.0], [0.0, 0.0]])
    assert_allclose(recalls(counts), [0.75, math.nan])
    assert math.isnan(balanced_accuracy(counts))
    assert accuracy(counts) == 0.75
    assert math.isnan(accuracy(np.zeros((2, 2))))


def test_no_answers_at_all():
    found = auc([], [], groups=np.array([], dtype=int), n_groups=2)
    assert_allclose(found, [math.nan, math.nan])
    assert confusion([], [], n_classes=2, groups=np.array([], dtype=int), n_groups=2).tolist() == [
        [[0, 0], [0, 0]],
        [[0, 0], [0, 0]],
    ]


def test_ties_go_to_the_first_class():
    scores = np.array([[0.4, 0.4, 0.2], [0.1, 0.45, 0.45], [0.2, 0.3, 0.5]])
    assert predicted_class(scores).tolist() == [0, 1, 2]


@given(st.permutations(range(4)), st.integers(1, 50))
def test_renamed_classes_change_nothing(order, seed):
    got = Answered(4, seed)
    renamed = np.argsort(order)[got.true]
    first = hand_till(got.true, got.scores, groups=got.groups, n_groups=6)
    second = hand_till(renamed, got.scores[:, order], groups=got.groups, n_groups=6)
    assert_allclose(first, second, rtol=1e-12)


def test_each_measure_knows_its_function():
    counts = np.array([[[8.0, 2.0], [3.0, 2.0]]])
    values = {
        key: measure.from_confusion(counts).tolist()
        for key, measure in MEASURES.items()
        if measure.from_confusion
    }
    assert values["accuracy"] == [pytest.approx(10 / 15)]
    assert values["balanced_accuracy"] == [pytest.approx(0.6)]
    assert values["sensitivity"] == [[pytest.approx(0.8), pytest.approx(0.4)]]
    assert MEASURES["auc"].from_confusion is None
    assert [key for key, measure in MEASURES.items() if measure.per_class] == ["sensitivity"]
