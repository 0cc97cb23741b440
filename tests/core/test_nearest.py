"""Nearest neighbours: the rule for ties by hand, and every path against a plain loop."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from sklearn.neighbors import KNeighborsClassifier

from evalcore import nearest
from evalcore.nearest import NearestNeighbours, nearest_scores, round_scores


def plain(queries, features, labels, counts, *, k, n_classes):
    """Votes one after the other; whole numbers as coordinates, so that ties are exact."""
    shares = []
    for query in queries.tolist():
        line = sorted(
            (sum((a - b) ** 2 for a, b in zip(query, row, strict=True)), i)
            for i, row in enumerate(features.tolist())
        )
        votes = [int(labels[i]) for _, i in line for _ in range(int(counts[i]))][:k]
        shares.append([votes.count(c) / len(votes) for c in range(n_classes)])
    return np.array(shares)


def bags(n, rounds, rng):
    return rng.multinomial(n, [1 / n] * n, rounds).astype(np.uint8)


def one(features, labels, counts, k, at=0.0):
    x = np.asarray(features, dtype=float)[:, None]
    found = round_scores(
        np.array([[at]]), x, np.asarray(labels), np.asarray(counts), k=k, n_classes=2
    )
    return found[0].tolist()


class TestTies:
    def test_of_equal_distances_the_earlier_case_comes_first(self):
        assert one([1, -1, 5], [0, 1, 1], [1, 1, 1], 1) == [1, 0]
        assert one([-1, 1, 5], [1, 0, 0], [1, 1, 1], 1) == [0, 1]
        assert one([2, -2, 2, -2, 1], [0, 1, 0, 0, 1], [1] * 5, 3) == [1 / 3, 2 / 3]

    def test_a_case_drawn_twice_votes_twice(self):
        assert one([1, 2, 3], [1, 0, 0], [2, 1, 1], 3) == [1 / 3, 2 / 3]
        assert one([1, 2, 3], [1, 0, 0], [2, 1, 1], 2) == [0, 1]
        # its second vote is the one that no longer counts
        assert one([1, 2, 3], [0, 1, 0], [1, 2, 1], 2) == [1 / 2, 1 / 2]

    def test_a_case_not_drawn_has_no_vote(self):
        assert one([0, 1, 2], [1, 0, 0], [0, 1, 2], 1) == [1, 0]
        assert one([0, 0, 2], [1, 0, 0], [0, 1, 2], 1) == [1, 0]

    def test_more_votes_than_the_bag_has(self):
        assert one([1, 2, 3], [0, 0, 1], [1, 0, 2], 9) == [1 / 3, 2 / 3]

    def test_cases_all_alike(self):
        assert one([0, 0, 0], [1, 1, 0], [0, 1, 2], 2) == [1 / 2, 1 / 2]

    def test_rounding_noise_decides_nothing(self):
        # 0.1 + 0.2 and 0.3 are one distance from 0
        assert one([-(0.1 + 0.2), 0.3], [0, 1], [1, 1], 1) == [1, 0]
        assert one([0.1 + 0.2, -0.3], [0, 1], [1, 1], 1) == [1, 0]
        # but what differs in the sixth digit is no tie
        assert one([0.300001, -0.3], [0, 1], [1, 1], 1) == [0, 1]

    def test_many_tied_at_the_border(self):
        # 30 cases at one distance, more than are looked at in a first pass
        features = [3] * 30 + [1, 1]
        labels = [0] * 4 + [1] * 26 + [1, 1]
        assert one(features, labels, [1] * 32, 5) == [3 / 5, 2 / 5]


@settings(max_examples=50, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(1, 12), st.integers(2, 3), st.integers(1, 4))
def test_every_round_as_the_plain_loop(seed, k, n_classes, width):
    rng = np.random.default_rng(seed)
    n = int(rng.integers(12, 40))
    x = rng.integers(0, width, (n, 2)).astype(float)
    labels, counts = rng.integers(0, n_classes, n), bags(n, 3, rng)
    found = nearest_scores(np.stack([x] * 3), labels, counts, k=k, n_classes=n_classes)
    for r in range(3):
        expected = plain(x, x, labels, counts[r], k=k, n_classes=n_classes)
        assert found[r] == pytest.approx(expected, rel=1e-14)


class TestLists:
    """From 500 cases on the nearest few are listed once for all rounds."""

    def looked_at(self, monkeypatch, *given, **rest):
        """Scores, and how many answers were not settled by the lists."""
        numbers, usual = [], nearest.round_scores

        def counted(queries, *others, **more):
            numbers.append(len(queries))
            return usual(queries, *others, **more)

        monkeypatch.setattr(nearest, "round_scores", counted)
        found = nearest_scores(*given, **rest)
        monkeypatch.undo()
        return found, sum(numbers)

    def each_round(self, features, labels, counts, **rest):
        return np.stack([
            round_scores(x, x, labels, bag, **rest) for x, bag in zip(features, counts, strict=True)
        ])  # fmt: skip

    @pytest.mark.parametrize("k", [1, 5, 20])
    @pytest.mark.parametrize("lattice", [False, True])
    def test_as_without_lists(self, monkeypatch, k, lattice):
        rng = np.random.default_rng(k)
        x = rng.normal(size=(520, 3)) * [1, 5, 0.2]
        x = np.round(x * [2, 0.4, 10]) if lattice else x
        labels, counts = rng.integers(0, 3, 520), bags(520, 4, rng)
        # standardised anew within each bag
        features = np.stack([
            (x - x[bag > 0].mean(axis=0)) / x[np.repeat(np.arange(520), bag)].std(axis=0)
            for bag in counts
        ])  # fmt: skip
        rest = {"k": k, "n_classes": 3}
        found, number = self.looked_at(monkeypatch, features, labels, counts, **rest)
        assert number < 4 * 520 * (0.9 if lattice else 0.5)
        assert np.array_equal(found, self.each_round(features, labels, counts, **rest))

    def test_one_table_for_all_rounds_against_the_plain_loop(self, monkeypatch):
        rng = np.random.default_rng(11)
        x = rng.integers(0, 40, (500, 2)).astype(float)
        labels, counts = rng.integers(0, 2, 500), bags(500, 3, rng)
        features = np.broadcast_to(x, (3, 500, 2))
        found, number = self.looked_at(monkeypatch, features, labels, counts, k=3, n_classes=2)
        assert number < 150
        expected = plain(x[:80], x, labels, counts[2], k=3, n_classes=2)
        assert found[2, :80] == pytest.approx(expected, rel=1e-14)

    @pytest.mark.parametrize("shrunk", [0.02, 0.1, 0.3, 0.6])
    def test_a_column_that_shrinks_brings_others_nearer(self, shrunk):
        # listed by a table in which the first column keeps apart what is near in later rounds
        rng = np.random.default_rng(15)
        x = rng.normal(size=(600, 2))
        features = np.stack([x, x * [shrunk, 1], x * [shrunk, 1], x * [1, shrunk]])
        labels, counts = rng.integers(0, 2, 600), bags(600, 4, rng)
        rest = {"k": 5, "n_classes": 2}
        found = nearest_scores(features, labels, counts, **rest)
        assert np.array_equal(found, self.each_round(features, labels, counts, **rest))

    def test_gaps_filled_otherwise_are_not_taken_from_lists(self):
        rng = np.random.default_rng(12)
        x = rng.normal(size=(510, 2))
        features = np.stack([x] * 4)
        gaps = rng.choice(510, 60, replace=False)
        features[:, gaps, 0] = np.array([-0.5, 0.0, 0.5, 1.5])[:, None]
        labels, counts = rng.integers(0, 2, 510), bags(510, 4, rng)
        rest = {"k": 3, "n_classes": 2}
        found = nearest_scores(features, labels, counts, **rest)
        assert np.array_equal(found, self.each_round(features, labels, counts, **rest))

    def test_gaps_of_a_feature_in_very_large_units(self):
        # readings around a billionth, such as nanometres in metres
        rng = np.random.default_rng(13)
        x = rng.normal(size=(510, 2)) * 3e-10
        features = np.stack([x] * 4)
        gaps = rng.choice(510, 60, replace=False)
        features[:, gaps, 0] = np.array([0, -2e-10, 2e-10, 4e-10])[:, None]
        labels, counts = rng.integers(0, 2, 510), bags(510, 4, rng)
        rest = {"k": 3, "n_classes": 2}
        found = nearest_scores(features, labels, counts, **rest)
        assert np.array_equal(found, self.each_round(features, labels, counts, **rest))

    def test_as_many_neighbours_as_are_allowed(self):
        # 4k + 20 would be more than there are cases
        rng = np.random.default_rng(14)
        x, labels = rng.normal(size=(505, 2)), rng.integers(0, 2, 505)
        features, counts = np.stack([x] * 3), bags(505, 3, rng)
        rest = {"k": 200, "n_classes": 2}
        found = nearest_scores(features, labels, counts, **rest)
        assert np.array_equal(found, self.each_round(features, labels, counts, **rest))


@pytest.mark.parametrize(("n", "k"), [(60, 1), (60, 7), (540, 5)])
def test_as_scikit_learn_without_ties(n, k):
    rng = np.random.default_rng(n + k)
    x, labels = rng.normal(size=(n, 4)), rng.integers(0, 3, n)
    counts = bags(n, 3, rng)
    found = nearest_scores(np.stack([x] * 3), labels, counts, k=k, n_classes=3)
    for r, bag in enumerate(counts):
        rows = np.repeat(np.arange(n), bag)
        theirs = KNeighborsClassifier(k).fit(x[rows], labels[rows])
        # copies of one case tie, but they vote alike
        assert found[r] == pytest.approx(theirs.predict_proba(x), rel=1e-12)


class TestClassifier:
    def test_as_scikit_learn_with_text_as_classes(self):
        rng = np.random.default_rng(3)
        x, new = rng.normal(size=(50, 3)), rng.normal(size=(20, 3))
        labels = np.array(["good", "bad", "odd"])[rng.integers(0, 3, 50)]
        ours, theirs = NearestNeighbours(5).fit(x, labels), KNeighborsClassifier(5).fit(x, labels)
        assert ours.classes_.tolist() == ["bad", "good", "odd"]
        assert ours.predict_proba(new).tolist() == theirs.predict_proba(new).tolist()
        assert ours.predict(new).tolist() == theirs.predict(new).tolist()

    def test_the_first_class_on_equal_votes(self):
        model = NearestNeighbours(2).fit([[1.0], [-1.0]], ["b", "a"])
        assert model.predict([[0.0]]).tolist() == ["a"]

    def test_repeated_rows_are_a_case_drawn_as_often(self):
        rng = np.random.default_rng(6)
        x, labels = rng.integers(0, 4, (30, 2)).astype(float), np.arange(30) % 2
        bag = bags(30, 1, rng)[0]
        rows = np.repeat(np.arange(30), bag)
        model = NearestNeighbours(4).fit(x[rows], labels[rows])
        expected = round_scores(x, x, labels, bag, k=4, n_classes=2)
        assert model.predict_proba(x).tolist() == expected.tolist()

    def test_parameters(self):
        model = NearestNeighbours(3)
        assert model.get_params() == {"k": 3}
        assert model.set_params(k=8) is model
        assert model.k == 8
