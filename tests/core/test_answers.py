"""Answers by unit and by case, and what is kept of those for the bags themselves."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sklearn import metrics

from evalcore.answers import Answers, answers_of, held_out, joined, reduce, unit_means
from evalcore.measures import predicted_class
from evalcore.rounds import Rounds

from .checks import table_of

UNITS = np.array([0, 1, 0, 2, 3, 3, 3, 1, 4, 5, 6, 6])
UNIT_LABELS = np.array([0, 1, 2, 0, 1, 2, 1])


def made(seed: int, n_rounds: int = 8):
    """A table of seven units, rounds over them, and scores for every case."""
    rng = np.random.default_rng(seed)
    table = table_of(UNIT_LABELS[UNITS].tolist(), units=UNITS)
    bags = Rounds.of_bags(rng.multinomial(7, [1 / 7] * 7, n_rounds))
    scores = rng.dirichlet(np.ones(3), (n_rounds, len(UNITS)))
    return table, bags.of_cases(UNITS), scores


class TestHeldOut:
    def test_by_case_is_as_it_was(self):
        table, rounds, scores = made(1)
        held = held_out(table, rounds, scores[rounds.pairs], counted_by="case")
        assert held.rounds is rounds
        assert held.scores.tolist() == scores[rounds.pairs].tolist()
        assert held.true.tolist() == table.labels[rounds.pairs[1]].tolist()
        assert held.correct.tolist() == (held.predicted == held.true).tolist()

    @pytest.mark.parametrize("seed", range(3))
    def test_by_unit_is_the_mean_of_its_cases(self, seed):
        table, rounds, scores = made(seed)
        held = held_out(table, rounds, scores[rounds.pairs], counted_by="unit")
        at = 0
        for r in range(rounds.n_rounds):
            for unit in range(7):
                rows = np.flatnonzero(unit == UNITS)
                if not rounds.test[r, rows[0]]:
                    continue
                assert (held.rounds.pairs[0][at], held.rounds.pairs[1][at]) == (r, unit)
                assert_allclose(held.scores[at], scores[r, rows].mean(axis=0), rtol=1e-14)
                assert held.true[at] == UNIT_LABELS[unit]
                at += 1
        assert at == len(held.scores)

    def test_a_unit_is_not_answered_by_vote(self):
        # two cases lean a little to class 1, one strongly to class 0: the mean says 0
        table = table_of([0, 0, 0, 1], units=[0, 0, 0, 1])
        test = np.array([[1, 1, 1, 1]], dtype=np.uint8)
        rounds = Rounds(np.zeros_like(test), test, np.zeros(1, dtype=np.intp))
        scores = np.array([[0.45, 0.55], [0.45, 0.55], [0.9, 0.1], [0.3, 0.7]])
        held = held_out(table, rounds, scores, counted_by="unit")
        assert held.predicted.tolist() == [0, 1]
        assert_allclose(held.scores[0], [0.6, 0.4], rtol=1e-15)

    def test_without_units_both_ways_are_one(self):
        table = table_of([0, 1, 0, 1])
        rounds = Rounds.of_bags([[0, 2, 2, 0]])
        scores = np.array([[0.7, 0.3], [0.2, 0.8]])
        by_unit = held_out(table, rounds, scores, counted_by="unit")
        assert by_unit.scores.tolist() == scores.tolist()

    @pytest.mark.parametrize("counted_by", ["unit", "case"])
    def test_confusion_and_auc_agree_with_scikit_learn(self, counted_by):
        table, rounds, scores = made(2, n_rounds=40)
        held = held_out(table, rounds, scores[rounds.pairs], counted_by=counted_by)
        complete = 0
        for r in range(rounds.n_rounds):
            rows = held.rounds.pairs[0] == r
            true = held.true[rows]
            expected = metrics.confusion_matrix(true, held.predicted[rows], labels=[0, 1, 2])
            assert held.confusion[r].tolist() == expected.tolist()
            if len(set(true.tolist())) < 3:
                assert np.isnan(held.auc[r])
                continue
            complete += 1
            auc = metrics.roc_auc_score(true, held.scores[rows], multi_class="ovo")
            assert held.auc[r] == pytest.approx(auc, rel=0, abs=1e-12)
        assert complete > 0


def test_unit_means():
    scores = np.random.default_rng(3).random((4, len(UNITS), 3))
    table = table_of(UNIT_LABELS[UNITS].tolist(), units=UNITS)
    found = unit_means(table, scores)
    assert found.shape == (4, 7, 3)
    for unit in range(7):
        assert_allclose(found[:, unit], scores[:, unit == UNITS].mean(axis=1), rtol=1e-14)


class TestReduce:
    @pytest.mark.parametrize("seed", range(3))
    def test_agrees_with_scikit_learn_under_weights(self, seed):
        rng = np.random.default_rng(seed)
        n, n_rounds = 30, 5
        labels = rng.integers(0, 2, n)
        raw = np.round(rng.random((n_rounds, n)), 1)
        scores = np.stack([1 - raw, raw], axis=-1)
        weights = rng.multinomial(n, [1 / n] * n, n_rounds).astype(np.uint8)
        found = reduce(labels, scores, weights)
        for r in range(n_rounds):
            # a bag written out row by row: what a bag is
            rows = np.repeat(np.arange(n), weights[r])
            predicted = predicted_class(scores[r])
            expected = metrics.confusion_matrix(labels[rows], predicted[rows])
            assert found.confusion[r].tolist() == expected.tolist()
            auc = metrics.roc_auc_score(labels, raw[r], sample_weight=weights[r])
            assert found.auc[r] == pytest.approx(auc, rel=0, abs=1e-12)

    def test_three_classes(self):
        table, rounds, scores = made(4)
        found = reduce(table.labels, scores, rounds.train)
        complete = 0
        for r in range(rounds.n_rounds):
            rows = np.repeat(np.arange(table.n_cases), rounds.train[r])
            if len(set(table.labels[rows].tolist())) == 3:
                complete += 1
                auc = metrics.roc_auc_score(table.labels[rows], scores[r, rows], multi_class="ovo")
                assert found.auc[r] == pytest.approx(auc, rel=0, abs=1e-12)
            else:
                assert np.isnan(found.auc[r])
        assert complete > 0


def test_answers_of_keeps_the_held_out_and_reduces_the_bags():
    table, rounds, scores = made(5)
    found = answers_of(table, rounds, scores)
    assert found.scores.tolist() == scores[rounds.test > 0].tolist()
    by_case = reduce(table.labels, scores, rounds.train)
    by_unit = reduce(UNIT_LABELS, unit_means(table, scores), rounds.of_units(UNITS).train)
    assert found.in_bag["case"].confusion.tolist() == by_case.confusion.tolist()
    assert found.in_bag["unit"].confusion.tolist() == by_unit.confusion.tolist()
    # a bag of seven units, whatever their sizes
    assert found.in_bag["unit"].confusion.sum(axis=(1, 2)).tolist() == [7.0] * 8
    assert_allclose(found.in_bag["unit"].auc, by_unit.auc, rtol=0)


def same(one: Answers, other: Answers) -> None:
    assert one.scores.tobytes() == other.scores.tobytes()
    for way in ("unit", "case"):
        assert one.in_bag[way].confusion.tobytes() == other.in_bag[way].confusion.tobytes()
        assert one.in_bag[way].auc.tobytes() == other.in_bag[way].auc.tobytes()


def test_parts_join_to_the_whole():
    table, rounds, scores = made(6)
    parts = [
        answers_of(table, rounds.part(rows), scores[rows])
        for rows in (slice(0, 3), slice(3, 4), slice(4, 8))
    ]
    same(joined(parts), answers_of(table, rounds, scores))
