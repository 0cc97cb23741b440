"""The winner's correction against loops over resamples, and the luck of the best counted out."""

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from evalcore.measures import balanced_accuracy, confusion
from evalcore.selection import (
    expected_best,
    fold_correction,
    stratified_bags,
    winners_correction,
)

from .checks import cases, exactly


def by_loops(labels, shares, bags, primary):
    """Winner and its figures of each resample, unit by unit; None where a class is missing."""
    n_classes = max(labels) + 1

    def figures(units, c):
        rates = []
        for k in range(n_classes):
            own = [shares[i][c] for i in units if labels[i] == k]
            rates.append(sum(own) / len(own) if own else math.nan)
        values = [shares[i][c] for i in units]
        accuracy = sum(values) / len(values) if values else math.nan
        return {"accuracy": accuracy, "balanced_accuracy": sum(rates) / n_classes, "rates": rates}

    found = []
    for bag in bags:
        drawn = [i for i, times in enumerate(bag) for _ in range(times)]
        outside = [i for i, times in enumerate(bag) if not times]
        if any({labels[i] for i in part} != set(range(n_classes)) for part in (drawn, outside)):
            found.append(None)
            continue
        scores = [figures(drawn, c)[primary] for c in range(len(shares[0]))]
        best = next(c for c, score in enumerate(scores) if score >= max(scores) - 1e-9)
        found.append((best, figures(outside, best)))
    return found


@pytest.mark.parametrize("case", cases("07", "bbc"))
def test_check_cases(case):
    loss, bags = np.array(case["inputs"]["loss"]), case["inputs"]["bags"]
    expected, tolerance = case["expected"], case["tolerance"]
    found = winners_correction(np.zeros(len(loss), dtype=int), -loss, bags)
    figures = {
        "config_loss": loss.mean(axis=0).tolist(),
        "selected": found.winner,
        "naive_best_loss": -found.naive.accuracy,
        "bbc_loss": -found.corrected.accuracy,
        "per_bag_loss": (-found.outside).tolist(),
        "per_bag_selected": found.chosen.tolist(),
        "optimism": found.optimism.accuracy,
    }
    for name, value in expected.items():
        assert figures[name] == pytest.approx(value, rel=0, abs=tolerance), name
    assert found.wins.tolist() == [expected["per_bag_selected"].count(c) for c in range(3)]
    # right instead of wrong: the same, turned round
    turned = winners_correction(np.zeros(len(loss), dtype=int), 1 - loss, bags)
    assert turned.corrected.accuracy == pytest.approx(1 - expected["bbc_loss"], abs=tolerance)
    assert turned.chosen.tolist() == expected["per_bag_selected"]


@pytest.mark.parametrize("primary", ["accuracy", "balanced_accuracy"])
@pytest.mark.parametrize("seed", range(4))
def test_by_loops(primary, seed):
    rng = np.random.default_rng(seed)
    labels = rng.permutation(np.repeat([0, 1, 2], [11, 6, 4]))
    shares = rng.integers(0, 21, (21, 5)) / 20
    bags = np.vstack([stratified_bags(labels, rng=rng, resamples=40), np.ones((1, 21), dtype=int)])
    found = winners_correction(labels, shares, bags, primary=primary)
    loops = by_loops(labels.tolist(), shares.tolist(), bags.tolist(), primary)
    used = [one for one in loops if one is not None]
    assert found.skipped == len(loops) - len(used) >= 1
    assert found.chosen.tolist() == [-1 if one is None else one[0] for one in loops]
    assert found.wins.tolist() == [sum(best == c for best, _ in used) for c in range(5)]
    for name in ("accuracy", "balanced_accuracy"):
        expected = np.mean([figures[name] for _, figures in used])
        assert getattr(found.corrected, name) == pytest.approx(expected, rel=1e-12)
        naive, optimism = (getattr(x, name) for x in (found.naive, found.optimism))
        assert optimism == pytest.approx(naive - expected, abs=1e-12)
    recalls = np.mean([figures["rates"] for _, figures in used], axis=0)
    assert found.corrected.recalls == pytest.approx(recalls, rel=1e-12)
    outside = [math.nan if one is None else one[1][primary] for one in loops]
    assert found.outside.tolist() == pytest.approx(outside, rel=1e-12, nan_ok=True)


def test_naive_figures_are_those_of_the_winner():
    rng = np.random.default_rng(8)
    labels = np.repeat([0, 1], [14, 5])
    right = rng.random((19, 4)) < 0.6
    bags = stratified_bags(labels, rng=rng, resamples=3)
    for primary in ("accuracy", "balanced_accuracy"):
        found = winners_correction(labels, right, bags, primary=primary)
        counts = [
            confusion(labels, np.where(column, labels, 1 - labels), n_classes=2)[0]
            for column in right.T
        ]
        of_primary = {
            "accuracy": right.mean(axis=0),
            "balanced_accuracy": np.array([balanced_accuracy(c) for c in counts]),
        }
        assert found.winner == of_primary[primary].argmax()
        assert found.naive.accuracy == pytest.approx(right[:, found.winner].mean(), rel=1e-12)
        assert found.naive.balanced_accuracy == pytest.approx(
            float(balanced_accuracy(counts[found.winner])), rel=1e-12
        )


def test_the_measure_names_the_winner():
    labels = [0] * 8 + [1] * 2
    # the first is right on the large class only, the second on half of each
    shares = np.column_stack([[1.0] * 8 + [0.0] * 2, [0.6] * 8 + [1.0] * 2])
    bags = stratified_bags(labels, rng=np.random.default_rng(1), resamples=4)
    assert winners_correction(labels, shares, bags).winner == 0
    assert winners_correction(labels, shares, bags, primary="balanced_accuracy").winner == 1


@given(st.integers(0, 10_000))
def test_a_single_candidate_has_no_luck_on_average_over_all_bags(seed):
    rng = np.random.default_rng(seed)
    shares = rng.random((4, 1))
    # all 4^4 equally likely draws: every unit is out equally often
    draws = itertools.product(range(4), repeat=4)
    bags = np.array([np.bincount(draw, minlength=4) for draw in draws])
    found = winners_correction([0] * 4, shares, bags)
    # the 24 draws that take each unit once leave none out
    assert found.skipped == 24
    assert found.corrected.accuracy == pytest.approx(shares.mean(), rel=1e-12)
    assert found.wins.tolist() == [232]


def test_ties_go_to_the_first_in_spite_of_rounding():
    rng = np.random.default_rng(2)
    column = rng.integers(0, 21, 30) / 20
    labels = np.repeat([0, 1], 15)
    # the same values within each class in another order: equal means, other roundings
    other = np.concatenate([column[:15][::-1], column[15:][::-1]])
    found = winners_correction(labels, np.column_stack([other, column]), np.ones((1, 30), int))
    assert found.winner == 0
    assert found.skipped == 1
    for values in (found.corrected.accuracy, found.corrected.balanced_accuracy):
        assert math.isnan(values)
    assert found.chosen.tolist() == [-1]


def test_units_without_an_answer_are_left_out():
    rng = np.random.default_rng(3)
    labels, shares = np.repeat([0, 1], 8), rng.random((16, 3))
    bags = stratified_bags(labels, rng=rng, resamples=30)
    gaps = shares.copy()
    gaps[[2, 9]] = math.nan
    kept = np.delete(np.arange(16), [2, 9])
    a = winners_correction(labels, gaps, bags)
    b = winners_correction(labels[kept], shares[kept], bags[:, kept])
    assert a.corrected.accuracy == b.corrected.accuracy
    assert a.chosen.tolist() == b.chosen.tolist()


def test_a_class_of_one_unit_cannot_be_in_and_out():
    labels = [0, 0, 0, 0, 1]
    bags = stratified_bags(labels, rng=np.random.default_rng(4), resamples=20)
    found = winners_correction(labels, np.eye(5)[:, :2], bags)
    assert found.skipped == 20
    assert math.isnan(found.corrected.accuracy)
    assert found.wins.tolist() == [0, 0]


def test_bags_keep_the_classes():
    labels = np.array([0, 1, 1, 0, 2, 0, 0])
    bags = stratified_bags(labels, rng=np.random.default_rng(5))
    assert bags.shape == (500, 7)
    for k, size in enumerate((4, 2, 1)):
        assert (bags[:, labels == k].sum(axis=1) == size).all()
    # chance of a unit of a class of four not to be drawn: (3/4)^4; 4 standard errors
    assert abs((bags[:, 0] == 0).mean() - 0.75**4) < 4 * math.sqrt(0.316 * 0.684 / 500)
    again = stratified_bags(labels, rng=np.random.default_rng(5))
    assert (bags == again).all()


def test_what_does_not_fit():
    with pytest.raises(ValueError, match=r"must agree in n; got \(2,\), \(3, 1\) and \(1, 3\)"):
        winners_correction([0, 0], [[1], [0], [1]], [[1, 1, 1]])
    with pytest.raises(ValueError, match="a unit that all candidates answered"):
        winners_correction([0, 0], [[math.nan], [math.nan]], [[1, 1]])
    with pytest.raises(ValueError, match="There must be a candidate"):
        winners_correction([0, 0], np.empty((2, 0)), [[1, 1]])


class TestFolds:
    @pytest.mark.parametrize("case", cases("07", "tt"))
    def test_check_cases(self, case):
        found = fold_correction(case["inputs"]["fold_error"])
        figures = {
            "selected": found.winner,
            "cv_best": found.naive,
            "bias": found.bias,
            "corrected": found.corrected,
        }
        assert figures == pytest.approx(case["expected"], rel=0, abs=case["tolerance"])

    def test_no_bias_where_one_wins_everywhere(self):
        found = fold_correction([[0.3, 0.1], [0.2, 0.15]])
        assert (found.winner, found.bias) == (1, 0.0)
        assert found.corrected == found.naive == pytest.approx(0.125, rel=1e-15)

    @given(st.lists(st.tuples(st.integers(0, 9), st.integers(0, 9)), min_size=1, max_size=9))
    def test_never_lowers_the_error(self, rows):
        found = fold_correction(np.array(rows) / 10)
        assert found.bias >= 0
        assert found.winner == int(sum(b for _, b in rows) < sum(a for a, _ in rows))

    @pytest.mark.parametrize("errors", [[], [0.1, 0.2], [[], []]])
    def test_not_a_matrix(self, errors):
        with pytest.raises(ValueError, match=r"must have shape \(J, C\)"):
            fold_correction(errors)


class TestExpectedBest:
    @pytest.mark.parametrize("case", cases("07", "ebest"))
    def test_check_cases(self, case):
        given_ = case["inputs"]
        found = expected_best(given_["C"], given_["n"], chance=given_["p"])
        expected = case["expected"]["expected_best_accuracy"]
        assert found == pytest.approx(expected, rel=0, abs=case["tolerance"])

    @pytest.mark.parametrize("chance", [0.0, 0.37, 1.0])
    @pytest.mark.parametrize(("candidates", "n"), [(1, 4), (2, 3), (3, 2)])
    def test_all_outcomes(self, candidates, n, chance):
        total = 0.0
        for counts in itertools.product(range(n + 1), repeat=candidates):
            weight = math.prod(
                math.comb(n, k) * chance**k * (1 - chance) ** (n - k) for k in counts
            )
            total += weight * max(counts) / n
        assert expected_best(candidates, n, chance=chance) == pytest.approx(total, rel=1e-12)

    def test_more_candidates_more_luck(self):
        values = [expected_best(c, 30, chance=0.7) for c in (1, 2, 5, 20, 1000)]
        assert values[0] == pytest.approx(0.7, rel=1e-12)
        assert values == sorted(values)

    @pytest.mark.parametrize(
        ("c", "n", "p"), [(0, 5, 0.5), (2, 0, 0.5), (2, 5, 1.2), (2, 5, math.nan)]
    )
    def test_out_of_bounds(self, c, n, p):
        message = f"`candidates` and `n` must be 1 or more and `chance` between 0 and 1; got {c}, {n} and {p}."
        with pytest.raises(ValueError, match=exactly(message)):
            expected_best(c, n, chance=p)
