"""The model's own variance, against sums over pairs written out as they are defined."""

import itertools
import math

import numpy as np
import pytest
import statsmodels.api as sm

from evalcore.model_variance import (
    auc_model_variance,
    balanced_model_variance,
    cluster_variance,
    model_variance,
)
from evalcore.rounds import Rounds


def held_out(rows) -> Rounds:
    out = np.asarray(rows, dtype=np.uint8)
    return Rounds(1 - out, out, np.arange(len(out)))


def some_rounds(seed: int, n: int = 14, n_rounds: int = 9) -> Rounds:
    return Rounds.of_bags(np.random.default_rng(seed).multinomial(n, [1 / n] * n, n_rounds))


def dense(values, rounds: Rounds) -> np.ndarray:
    grid = np.full(rounds.test.shape, np.nan)
    grid[rounds.pairs] = values
    return grid


def centred(grid: np.ndarray) -> np.ndarray:
    """Values less the mean of their case, as the definition says."""
    known = [column[~np.isnan(column)] for column in grid.T]
    return grid - np.array([column.mean() if len(column) else np.nan for column in known])


def brute(grid: np.ndarray, allowed) -> tuple[float, int]:
    """Mean product of centred values of two cases in one round, over the allowed pairs."""
    q, total, number = centred(grid), 0.0, 0
    for row in q:
        for i, j in itertools.permutations(np.flatnonzero(~np.isnan(row)), 2):
            if allowed(i, j):
                total, number = total + row[i] * row[j], number + 1
    return total / number, number


def mean_times(grid: np.ndarray) -> float:
    times = (~np.isnan(grid)).sum(axis=0)
    return times[times > 0].mean()


class TestShareRight:
    def test_toy_value(self):
        # notes of the simulation study: folds {1, 2}, {3, 4} twice, first right then wrong
        rounds = held_out([[1, 1, 0, 0], [0, 0, 1, 1], [1, 1, 0, 0], [0, 0, 1, 1]])
        correct = [1, 1, 0, 0, 0, 0, 1, 1]
        assert model_variance(correct, rounds) == pytest.approx(0.5, rel=1e-15)

    @pytest.mark.parametrize("seed", range(6))
    def test_over_pairs(self, seed):
        rounds = some_rounds(seed)
        # models that are good or bad as a whole, so that the value is not cut off at 0
        rng = np.random.default_rng(100 + seed)
        quality = rng.uniform(0.1, 0.95, rounds.n_rounds)[rounds.pairs[0]]
        correct = rng.random(len(quality)) < quality
        grid = dense(correct, rounds)
        covariance, _ = brute(grid, lambda i, j: True)
        k = mean_times(grid)
        expected = max(0.0, covariance) * k / (k - 1)
        assert expected > 0
        assert model_variance(correct, rounds) == pytest.approx(expected, rel=1e-12)

    @pytest.mark.parametrize("seed", range(4))
    def test_within_a_class(self, seed):
        rounds = some_rounds(seed)
        rng = np.random.default_rng(200 + seed)
        quality = rng.uniform(0.0, 1, rounds.n_rounds)[rounds.pairs[0]]
        correct = rng.random(len(quality)) < quality
        chosen = np.arange(14) % 3 != 0
        grid = dense(correct, rounds)
        grid[:, ~chosen] = np.nan
        covariance, _ = brute(grid, lambda i, j: True)
        k = mean_times(grid)
        expected = max(0.0, covariance) * k / (k - 1)
        assert expected > 0
        assert model_variance(correct, rounds, chosen=chosen) == pytest.approx(expected, rel=1e-12)

    @pytest.mark.parametrize("seed", range(4))
    def test_between_units_only(self, seed):
        units = np.array([0, 0, 0, 1, 1, 2, 3, 3, 3, 3, 4, 5, 5, 6])
        by_unit = some_rounds(seed, n=7)
        rounds = by_unit.of_cases(units)
        rng = np.random.default_rng(300 + seed)
        quality = rng.uniform(0.0, 1, rounds.n_rounds)[rounds.pairs[0]]
        correct = rng.random(len(quality)) < quality
        grid = dense(correct, rounds)
        covariance, number = brute(grid, lambda i, j: units[i] != units[j])
        _, all_pairs = brute(grid, lambda i, j: True)
        assert number < all_pairs
        k = mean_times(grid)
        expected = max(0.0, covariance) * k / (k - 1)
        found = model_variance(correct, rounds, units=units)
        assert found == pytest.approx(expected, rel=1e-12, abs=1e-15)

    def test_each_case_its_own_unit_changes_nothing(self):
        rounds = some_rounds(1)
        correct = np.random.default_rng(3).random(len(rounds.pairs[0]))
        assert model_variance(correct, rounds, units=np.arange(14)) == model_variance(
            correct, rounds
        )

    def test_finds_the_variance_that_was_put_in(self):
        # models right with chance 0.6 or 0.8 alike: variance 0.01
        rng = np.random.default_rng(4)
        n_rounds, n, m = 1500, 40, 20
        order = rng.random((n_rounds, n)).argsort(axis=1)
        rounds = held_out(order < m)
        chance = rng.choice([0.6, 0.8], n_rounds)[rounds.pairs[0]]
        found = model_variance(rng.random(len(chance)) < chance, rounds)
        # spread of a round's covariance: about sqrt(2) 0.21 / 20 + 2 x 0.1 x sqrt(0.21 / 20)
        assert abs(found - 0.01) < 4 * 0.036 / math.sqrt(n_rounds)

    def test_models_that_differ_by_chance_alone(self):
        rng = np.random.default_rng(5)
        rounds = held_out(rng.random((1500, 40)).argsort(axis=1) < 20)
        found = model_variance(rng.random(30_000) < 0.7, rounds)
        assert 0 <= found < 4 * 0.0149 / math.sqrt(1500)

    @pytest.mark.parametrize("rows", [np.eye(5), [[1, 1, 0, 0, 0], [0, 0, 1, 1, 1]]])
    def test_undefined_where_each_case_is_held_out_once(self, rows):
        assert math.isnan(model_variance([1, 0, 1, 1, 0], held_out(rows)))

    def test_undefined_where_no_two_cases_share_a_round(self):
        assert math.isnan(model_variance([1, 0, 1, 1], held_out([[1, 0], [0, 1], [1, 0], [0, 1]])))

    def test_undefined_where_nothing_is_held_out(self):
        assert math.isnan(model_variance([], held_out([[0, 0], [0, 0]])))

    def test_undefined_for_a_class_of_no_cases(self):
        rounds = some_rounds(1)
        correct = np.ones(len(rounds.pairs[0]))
        assert math.isnan(model_variance(correct, rounds, chosen=np.zeros(14, dtype=bool)))


class TestBalanced:
    labels = np.array([0] * 7 + [1] * 4 + [2] * 3)

    @pytest.mark.parametrize("seed", range(6))
    def test_over_pairs(self, seed):
        rounds = some_rounds(seed, n_rounds=40)
        rng = np.random.default_rng(400 + seed)
        quality = rng.uniform(0.0, 1, rounds.n_rounds)[rounds.pairs[0]]
        correct = rng.random(len(quality)) < quality
        grid = dense(correct, rounds)
        q, values = centred(grid), []
        for row in q:
            tested = np.flatnonzero(~np.isnan(row))
            m = np.bincount(self.labels[tested], minlength=3)
            if (m == 0).any():
                continue
            values.append(
                sum(
                    row[i] * row[j] / (9 * m[self.labels[i]] * m[self.labels[j]])
                    for i, j in itertools.permutations(tested, 2)
                )
            )
        assert 0 < len(values) < 40
        k = mean_times(grid)
        expected = max(0.0, np.mean(values)) * k / (k - 1)
        assert expected > 0
        found = balanced_model_variance(self.labels, rounds, correct, n_classes=3)
        assert found == pytest.approx(expected, rel=1e-12)

    def test_undefined_where_each_case_is_held_out_once(self):
        rounds = held_out(np.arange(14) % 3 == np.arange(3)[:, None])
        found = balanced_model_variance(self.labels, rounds, np.ones(14), n_classes=3)
        assert math.isnan(found)

    def test_undefined_where_every_round_lacks_a_class(self):
        rounds = held_out([[1, 1, 0], [1, 1, 0], [0, 0, 1]])
        found = balanced_model_variance(np.array([0, 0, 1]), rounds, [1, 0, 0, 1, 1], n_classes=2)
        assert math.isnan(found)


class TestAuc:
    positive = np.array([True, False, False, True, False, True, False, False, True, False])

    def brute(self, rounds: Rounds, scores) -> float:
        grid = dense(scores, rounds)
        ups, downs = np.flatnonzero(self.positive), np.flatnonzero(~self.positive)
        win = np.full((rounds.n_rounds, len(ups), len(downs)), np.nan)
        for r, a, b in itertools.product(*map(range, win.shape)):
            up, down = grid[r, ups[a]], grid[r, downs[b]]
            if not (np.isnan(up) or np.isnan(down)):
                win[r, a, b] = 1.0 if up > down else 0.5 if up == down else 0.0
        times = (~np.isnan(win)).sum(axis=0)
        mean = np.where(times > 0, np.nansum(win, axis=0) / np.maximum(times, 1), np.nan)
        total, number = 0.0, 0
        for g in win - mean:
            known = np.argwhere(~np.isnan(g))
            for (i, j), (a, b) in itertools.product(known, known):
                if i != a and j != b:
                    total, number = total + g[i, j] * g[a, b], number + 1
        k = times[times > 0].mean()
        return max(0.0, total / number) * k / (k - 1)

    def scores(self, rounds: Rounds, seed: int) -> np.ndarray:
        """Every second model ranks the wrong way round, so that the value is not cut off at 0."""
        slope = np.where(rounds.pairs[0] % 2, -4, 4)
        noise = np.random.default_rng(500 + seed).normal(size=len(slope))
        return slope * self.positive[rounds.pairs[1]] + noise

    @pytest.mark.parametrize("seed", range(4))
    def test_over_pairs_of_pairs(self, seed):
        rounds = some_rounds(seed, n=10, n_rounds=24)
        # rounded, so that there are ties
        scores = np.round(self.scores(rounds, seed), 1)
        expected = self.brute(rounds, scores)
        assert expected > 0
        assert auc_model_variance(self.positive, rounds, scores) == pytest.approx(
            expected, rel=1e-11
        )

    def test_classes_that_fit_are_one_part(self):
        rounds = some_rounds(7, n=10, n_rounds=24)
        scores = self.scores(rounds, 7)
        whole = auc_model_variance(self.positive, rounds, scores)
        assert whole > 0
        assert auc_model_variance(self.positive, rounds, scores, largest=10) == whole

    def test_parts_of_large_classes_add_up_to_the_same_quantity(self):
        # every round's model shifts all positives together: tau of any part is that of the whole
        n, n_rounds = 400, 60
        rng = np.random.default_rng(5)
        positive = np.arange(n) % 2 == 0
        train = (rng.random((n_rounds, n)) < 0.5).astype(np.uint8)
        rounds = Rounds(train, 1 - train, np.arange(n_rounds))
        fixed, shift = rng.normal(size=n), rng.normal(scale=0.5, size=n_rounds)
        round_at, case_at = rounds.pairs
        scores = fixed[case_at] + positive[case_at] * (1 + shift[round_at])
        whole = auc_model_variance(positive, rounds, scores)
        parts = auc_model_variance(positive, rounds, scores, largest=50)
        assert parts == pytest.approx(whole, rel=0.1)
        assert parts != whole

    def test_any_rising_scale_gives_the_same(self):
        rounds = some_rounds(9, n=10, n_rounds=24)
        scores = self.scores(rounds, 9)
        found = auc_model_variance(self.positive, rounds, scores)
        assert found > 0
        assert auc_model_variance(self.positive, rounds, np.exp(scores)) == found

    def test_undefined_where_each_case_is_held_out_once(self):
        rounds = held_out([[1] * 5 + [0] * 5, [0] * 5 + [1] * 5])
        scores = np.arange(10) * 0.37
        assert math.isnan(auc_model_variance(self.positive, rounds, scores))

    def test_undefined_without_a_class(self):
        rounds = some_rounds(1, n=10)
        scores = np.zeros(len(rounds.pairs[0]))
        assert math.isnan(auc_model_variance(np.ones(10, dtype=bool), rounds, scores))


def test_cluster_variance_is_the_cluster_robust_one_of_statsmodels():
    rng = np.random.default_rng(6)
    units = np.repeat(np.arange(7), [1, 2, 3, 4, 5, 6, 2])
    shares = rng.random(len(units)) + rng.normal(size=7)[units]
    fit = sm.OLS(shares, np.ones(len(shares))).fit(cov_type="cluster", cov_kwds={"groups": units})
    assert cluster_variance(shares, units) == pytest.approx(fit.cov_params()[0, 0], rel=1e-12)


def test_cluster_variance_of_units_of_one_row_is_the_ordinary_one():
    shares = np.array([0.2, 0.9, 0.4, 1.0, 0.75])
    assert cluster_variance(shares, np.arange(5)) == pytest.approx(shares.var(ddof=1) / 5)
