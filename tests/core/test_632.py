"""The .632 and .632+ estimates and their parts (Efron 1983; Efron & Tibshirani 1997)."""

import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from evalcore import estimates
from evalcore.answers import HeldOut
from evalcore.measures import accuracy, confusion, recalls
from evalcore.rounds import Rounds

from .checks import cases


class Worked:
    """A check case in the core's own types."""

    def __init__(self, case):
        given, self.exact = case["inputs"], case["tolerance"]
        self.expected = case["expected"]
        classes = sorted(set(given["y"]))

        def coded(names):
            return np.array([classes.index(name) for name in names])

        self.n_classes, self.labels = len(classes), coded(given["y"])
        self.rounds = Rounds.of_bags(given["bags"])
        predicted = np.array([coded(row) for row in given["pred"]])
        self.held = HeldOut(
            self.labels, self.rounds, np.eye(self.n_classes)[predicted[self.rounds.pairs]]
        )
        self.whole = confusion(self.labels, coded(given["full_pred"]), n_classes=self.n_classes)[0]

    def agrees(self, error, name):
        assert error == pytest.approx(self.expected[name], rel=0, abs=self.exact)


@pytest.fixture(params=cases("02", "b632"))
def worked(request):
    return Worked(request.param)


class TestFromBagsAndPredictions:
    def test_what_each_bag_leaves_out(self, worked):
        rounds, expected = worked.rounds, worked.expected
        assert rounds.test_sizes.tolist() == expected["oob_counts_per_bag"]
        assert rounds.times_tested.tolist() == expected["oob_times_per_case"]
        assert np.flatnonzero(rounds.times_tested == 0).tolist() == expected["cases_never_oob"]
        assert np.flatnonzero(rounds.test_sizes == 0).tolist() == expected["bags_without_oob"]
        assert_allclose(
            rounds.distinct_share, expected["distinct_fraction_per_bag"], rtol=0, atol=worked.exact
        )
        lacking = [
            [k for k in range(worked.n_classes) if not bag[worked.labels == k].any()]
            for bag in rounds.train
        ]
        assert lacking == expected["classes_missing_per_bag"]

    def test_apparent_and_no_information(self, worked):
        worked.agrees(1 - float(accuracy(worked.whole)), "resub")
        worked.agrees(1 - estimates.no_information(worked.whole), "gamma")

    def test_by_case(self, worked):
        worked.agrees(1 - estimates.by_case(worked.held.correct, worked.rounds), "err1")

    def test_mean_of_rounds(self, worked):
        mean, undefined = estimates.mean_of_rounds(accuracy(worked.held.confusion))
        worked.agrees(1 - mean, "err1_per_bag")
        assert undefined == len(worked.expected["bags_without_oob"])

    def test_pooled(self, worked):
        worked.agrees(1 - float(accuracy(worked.held.confusion.sum(axis=0))), "err1_pooled")

    def test_632_and_632_plus(self, worked):
        apparent = float(accuracy(worked.whole))
        out = estimates.by_case(worked.held.correct, worked.rounds)
        plus = estimates.point_632_plus(
            apparent, out, no_information=estimates.no_information(worked.whole)
        )
        worked.agrees(1 - estimates.point_632(apparent, out), "e632")
        worked.agrees(1 - plus.value, "e632plus")
        worked.agrees(plus.overfitting, "R")
        worked.agrees(plus.weight, "w")

    def test_order_of_cases_changes_nothing(self, worked):
        rounds = worked.rounds
        right = np.zeros(rounds.test.shape, dtype=bool)
        right[rounds.pairs] = worked.held.correct
        order = np.random.default_rng(1).permutation(rounds.n_cases)
        mixed = Rounds.of_bags(rounds.train[:, order])
        worked.agrees(1 - estimates.by_case(right[:, order][mixed.pairs], mixed), "err1")


@pytest.mark.parametrize("case", cases("02", "combine"))
def test_combination(case):
    given, expected, exact = case["inputs"], case["expected"], case["tolerance"]
    apparent, out = 1 - given["resub"], 1 - given["err1"]
    plus = estimates.point_632_plus(apparent, out, no_information=1 - given["gamma"])
    value_632 = 1 - estimates.point_632(apparent, out)
    assert value_632 == pytest.approx(expected["e632"], rel=0, abs=exact)
    assert 1 - plus.value == pytest.approx(expected["e632plus"], rel=0, abs=exact)
    assert plus.overfitting == pytest.approx(expected["R"], rel=0, abs=exact)
    assert plus.weight == pytest.approx(expected["w"], rel=0, abs=exact)
    for name, value in (("e632", value_632), ("e632plus", 1 - plus.value)):
        if name in case.get("published", {}):
            assert value == pytest.approx(case["published"][name], abs=case["published_tolerance"])


@pytest.mark.parametrize("case", cases("02", "gamma"))
def test_no_information(case):
    labels, answers = case["inputs"]["label_prop"], case["inputs"]["pred_prop"]
    counts = 1000 * np.outer(labels, answers)
    gamma = 1 - estimates.no_information(counts)
    assert gamma == pytest.approx(case["expected"]["gamma"], rel=0, abs=case["tolerance"])


def test_no_information_uses_the_shares_alone():
    # both have 6 and 4 labels, 7 and 3 answers: 0.6 x 0.7 + 0.4 x 0.3 = 0.54
    for counts in ([[5, 1], [2, 2]], [[3, 3], [4, 0]]):
        assert estimates.no_information(np.array(counts, dtype=float)) == pytest.approx(
            0.54, rel=1e-15
        )


@pytest.mark.parametrize(
    ("apparent", "out", "value", "weight", "overfitting"),
    [
        # notes of the simulation study, six digits
        (0.95, 0.80, 0.841945, 0.720365, 1 / 3),
        (1.0, 0.45, 0.5, 1.0, 1.0),
        (0.70, 0.75, 0.7316, 0.632, 0.0),
    ],
)
def test_632_plus_in_shares_right(apparent, out, value, weight, overfitting):
    plus = estimates.point_632_plus(apparent, out, no_information=0.5)
    assert plus.value == pytest.approx(value, abs=5e-7)
    assert plus.weight == pytest.approx(weight, abs=5e-7)
    assert plus.overfitting == pytest.approx(overfitting, abs=1e-12)


def test_632_plus_by_hand():
    # errors 1/10 and 3/10, gamma 1/2: R = (3/10 - 1/10)/(1/2 - 1/10) = 1/2
    weight = Fraction(632, 1000) / (1 - Fraction(368, 1000) / 2)
    error = (1 - weight) * Fraction(1, 10) + weight * Fraction(3, 10)
    plus = estimates.point_632_plus(0.9, 0.7, no_information=0.5)
    assert plus.value == pytest.approx(float(1 - error), rel=1e-14)


shares = st.floats(0, 1)


@given(shares, shares, st.floats(0.02, 0.98))
def test_632_plus_lies_between_its_parts(apparent, out, guess):
    plus = estimates.point_632_plus(apparent, out, no_information=guess)
    clipped = max(out, guess)
    assert min(apparent, clipped) - 1e-12 <= plus.value <= max(apparent, clipped) + 1e-12
    assert 0 <= plus.overfitting <= 1
    assert 0.632 - 1e-12 <= plus.weight <= 1 + 1e-12
    if clipped == out:
        assert plus.value <= estimates.point_632(apparent, out) + 1e-12


def test_632_of_nothing_is_undefined():
    assert math.isnan(estimates.point_632(0.9, math.nan))
    assert math.isnan(estimates.point_632_plus(0.9, math.nan, no_information=0.4).value)


class TestByCase:
    """Three rounds over four cases; case 3 is never left out."""

    rounds = Rounds.of_bags([[0, 0, 2, 2], [0, 2, 0, 2], [0, 1, 1, 2]])
    # pairs: round 0 cases 0, 1; round 1 cases 0, 2; round 2 case 0
    correct = (True, False, True, True, False)

    def test_mean_correct(self):
        found = estimates.mean_correct(self.correct, self.rounds)
        assert_allclose(found, [2 / 3, 0, 1, math.nan], rtol=1e-15)

    def test_by_case(self):
        # (2/3 + 0 + 1) / 3 = 5/9; pooled it would be 3/5
        assert estimates.by_case(self.correct, self.rounds) == pytest.approx(5 / 9, rel=1e-15)

    def test_recalls_by_case(self):
        # class 0: cases 0 and 1; class 1: case 2; class 2: case 3, never left out
        found = estimates.recalls_by_case(
            np.array([0, 0, 1, 2]), self.rounds, self.correct, n_classes=3
        )
        assert_allclose(found, [1 / 3, 1, math.nan], rtol=1e-15)

    def test_nothing_left_out(self):
        rounds = Rounds.of_bags([[1, 1], [1, 1]])
        assert math.isnan(estimates.by_case([], rounds))


def test_mean_of_rounds_counts_what_is_undefined():
    mean, undefined = estimates.mean_of_rounds([0.7, math.nan, 0.85])
    assert (mean, undefined) == (pytest.approx(0.775, rel=1e-15), 1)
    mean, undefined = estimates.mean_of_rounds([math.nan, math.nan])
    assert math.isnan(mean)
    assert undefined == 2


def test_per_round_632():
    held, in_bag = np.array([0.7, math.nan, 0.6]), np.array([0.9, 0.95, 1.0])
    # 0.632 x 0.7 + 0.368 x 0.9 and 0.632 x 0.6 + 0.368 x 1
    found = estimates.per_round_632(held, in_bag)
    assert_allclose(found, [0.7736, math.nan, 0.7472], rtol=1e-14)


def test_recalls_by_case_equal_recalls_where_each_case_is_left_out_once():
    rng = np.random.default_rng(2)
    labels, predicted = rng.integers(0, 3, 30), rng.integers(0, 3, 30)
    out = np.arange(30) % 5 == np.arange(5)[:, None]
    rounds = Rounds((~out).astype(np.uint8), out.astype(np.uint8), np.zeros(5, dtype=np.intp))
    correct = (labels == predicted)[rounds.pairs[1]]
    found = estimates.recalls_by_case(labels, rounds, correct, n_classes=3)
    assert_allclose(found, recalls(confusion(labels, predicted, n_classes=3))[0], rtol=1e-14)
