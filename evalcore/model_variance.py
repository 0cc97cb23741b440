"""How much a share right varies because the model itself varies from table to table.

All are own constructions: the covariance of centred correctness between cases that the same model
answered, by the method of moments. They are nan where no case is
held out more than once: one set of rounds then says nothing about the model's variance.
"""

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.measures import Floats
from evalcore.rounds import Rounds


def model_variance(
    correct: ArrayLike,
    rounds: Rounds,
    *,
    chosen: NDArray[np.bool_] | None = None,
    units: NDArray[np.intp] | None = None,
) -> float:
    """tau2: how much the share right varies because the model varies from round to round.

    Own construction: the covariance between the correctness of two cases answered by the same
    model. With q = correct - that case's mean over rounds, tau2 = max(0, sum over rounds of
    [(sum q)^2 - sum q^2] / sum of m(m - 1)) x k / (k - 1), m the held-out cases of a round and k
    the mean number of rounds in which a case is held out.

    Parameters
    ----------
    correct : array_like, shape (T,)
        Right (1) or wrong (0), or differences of two candidates, in the order of `rounds.pairs`.
    rounds : Rounds
    chosen : ndarray of bool, shape (n,), optional
        Only these cases (e.g. one class).
    units : ndarray of int, shape (n,), optional
        If given, only pairs of cases from different units count.

    Returns
    -------
    float
        nan where no case is held out twice: then nothing is known of it.
    """
    together, pairs, k = _per_round(correct, rounds, chosen, units)
    if k <= 1 or pairs.sum() <= 0:
        return math.nan
    return max(0.0, float(together.sum() / pairs.sum())) * k / (k - 1)


def cautious_model_variance(
    correct: ArrayLike,
    rounds: Rounds,
    *,
    chosen: NDArray[np.bool_] | None = None,
    units: NDArray[np.intp] | None = None,
) -> float:
    """tau2 plus its standard error, for what must not rest on a lucky draw of the rounds.

    Own construction: tau2 is a ratio of sums over rounds, and its error is that of such a ratio,
    the rounds taken as independent. Parameters and nan as in `model_variance`.
    """
    together, pairs, k = _per_round(correct, rounds, chosen, units)
    if k <= 1 or pairs.sum() <= 0:
        return math.nan
    ratio = together.sum() / pairs.sum()
    error = math.sqrt(float(((together - ratio * pairs) ** 2).sum())) / float(pairs.sum())
    return (max(0.0, float(ratio)) + error) * k / (k - 1)


def _per_round(
    correct: ArrayLike,
    rounds: Rounds,
    chosen: NDArray[np.bool_] | None,
    units: NDArray[np.intp] | None,
) -> tuple[Floats, Floats, float]:
    """(sum q)^2 - sum q^2 and m(m - 1) of each round, and k; see `model_variance`."""
    round_at, case_at = rounds.pairs
    value = np.asarray(correct, dtype=np.float64)
    if chosen is not None:
        kept = chosen[case_at]
        round_at, case_at, value = round_at[kept], case_at[kept], value[kept]
    times = np.bincount(case_at, minlength=rounds.n_cases)
    k = float(times[times > 0].mean()) if value.size else 0.0
    if k <= 1:
        return np.zeros(0), np.zeros(0), k
    means = np.bincount(case_at, value, minlength=rounds.n_cases) / np.maximum(times, 1)
    q = value - means[case_at]
    group = case_at if units is None else units[case_at]
    n_groups = int(group.max()) + 1
    # rounds x units is mostly empty for leave-one-out: only cells that occur are counted
    cells, place = np.unique(round_at * n_groups + group, return_inverse=True)
    of_round, size = cells // n_groups, rounds.n_rounds
    together = np.square(np.bincount(round_at, q, minlength=size)).astype(np.float64)
    together -= np.bincount(of_round, np.bincount(place, q) ** 2, minlength=size)
    pairs = np.square(np.bincount(round_at, minlength=size)).astype(np.float64)
    pairs -= np.bincount(of_round, np.bincount(place).astype(np.float64) ** 2, minlength=size)
    return together, pairs, k


def balanced_model_variance(
    labels: NDArray[np.intp], rounds: Rounds, correct: ArrayLike, *, n_classes: int
) -> float:
    """tau_b2: the model's variance of balanced accuracy (own construction).

    With q as in `model_variance` and m the held-out cases of a class in a round: the mean over
    rounds of [(mean over classes of qbar)^2 - sum over classes of sum(q^2)/m^2 / K^2] x
    k / (k - 1), not below 0. Rounds that lack a class are skipped.

    Returns
    -------
    float
        nan where no case is held out twice.
    """
    round_at, case_at = rounds.pairs
    value = np.asarray(correct, dtype=np.float64)
    times = rounds.times_tested
    k = times[times > 0].mean() if value.size else 0.0
    if k <= 1:
        return math.nan
    means = np.bincount(case_at, value, minlength=rounds.n_cases) / np.maximum(times, 1)
    q = value - means[case_at]
    cell = round_at * n_classes + labels[case_at]
    shape = (rounds.n_rounds, n_classes)
    size = shape[0] * shape[1]
    m = np.bincount(cell, minlength=size).reshape(shape)
    complete = (m > 0).all(axis=1)
    if not complete.any():
        return math.nan
    m = m[complete]
    sums = np.bincount(cell, q, minlength=size).reshape(shape)[complete]
    squares = np.bincount(cell, q * q, minlength=size).reshape(shape)[complete]
    per_round = (sums / m).mean(axis=1) ** 2 - (squares / m**2).sum(axis=1) / n_classes**2
    return max(0.0, float(per_round.mean())) * k / (k - 1)


LARGEST = 500  # cases of a class looked at together; larger classes are cut into parts


def auc_model_variance(
    positive: NDArray[np.bool_], rounds: Rounds, scores: ArrayLike, *, largest: int = LARGEST
) -> float:
    """tau_A2: the model's variance of the AUC within rounds (own construction).

    With g the win (1, ties 0.5) of positive i over negative j in a round minus its mean over the
    rounds in which both are held out: the sum over rounds of (sum g)^2 - sum of squared row sums -
    sum of squared column sums + sum g^2, over the sum of n1(n1 - 1) n0(n0 - 1), x k / (k - 1), k
    the mean number of rounds that hold out both of a pair; not below 0.

    Parameters
    ----------
    positive : ndarray of bool, shape (n,)
    rounds : Rounds
    scores : array_like, shape (T,)
        In the order of `rounds.pairs`, higher for positives.
    largest : int
        Classes with more cases are cut into parts of about this many, every so-many-th case in
        one, and both sums run over the parts: the same quantity from fewer pairs.

    Returns
    -------
    float
        nan where it cannot be estimated.
    """
    dense = np.full(rounds.test.shape, np.nan)
    dense[rounds.pairs] = np.asarray(scores, dtype=np.float64)
    ups, downs = np.flatnonzero(positive), np.flatnonzero(~positive)
    if not len(ups) or not len(downs):
        return math.nan
    parts = -(-max(len(ups), len(downs)) // largest)
    found = np.zeros(4)
    for part in range(parts):
        found += _auc_sums(dense[:, ups[part::parts]], dense[:, downs[part::parts]])
    numerator, pairs, shared, held_out = found.tolist()
    k = shared / held_out if held_out else 0.0
    if k <= 1 or pairs <= 0:
        return math.nan
    return max(0.0, numerator / pairs) * k / (k - 1)


def _auc_sums(ups: Floats, downs: Floats) -> Floats:
    """Numerator, denominator, and what k is made of, for some positives and negatives.

    Scores of shape (R, n1) and (R, n0), nan where a case is not held out.
    """
    times, mean = _mean_wins(ups, downs)
    numerator = 0.0
    for up, down in zip(ups, downs, strict=True):
        g = np.nan_to_num(_wins(up, down) - mean)
        numerator += float(
            g.sum() ** 2 - (g.sum(axis=1) ** 2).sum() - (g.sum(axis=0) ** 2).sum() + (g**2).sum()
        )
    n1, n0 = (
        (~np.isnan(ups)).sum(axis=1).astype(float),
        (~np.isnan(downs)).sum(axis=1).astype(float),
    )
    pairs = float((n1 * (n1 - 1) * n0 * (n0 - 1)).sum())
    return np.array([numerator, pairs, times.sum(), (times > 0).sum()])


def _wins(ups: Floats, downs: Floats) -> Floats:
    """1, 0.5 or 0 for each positive against each negative; nan where one is not held out."""
    difference = ups[:, None] - downs[None, :]
    return np.asarray((np.sign(difference) + 1) / 2, dtype=np.float64)


def _mean_wins(ups: Floats, downs: Floats) -> tuple[Floats, Floats]:
    """How often both of a pair are held out, and the mean win over those rounds."""
    times = np.zeros((ups.shape[1], downs.shape[1]))
    sums = np.zeros_like(times)
    for up, down in zip(ups, downs, strict=True):
        wins = _wins(up, down)
        known = ~np.isnan(wins)
        times += known
        sums += np.where(known, wins, 0.0)
    return times, np.divide(sums, times, out=np.full_like(sums, np.nan), where=times > 0)


def cluster_variance(shares: Floats, units: NDArray[np.intp]) -> float:
    """Variance of a mean over rows that come in units.

    Parameters
    ----------
    shares : ndarray, shape (n,)
        Mean held-out correctness of each row.
    units : ndarray of int, shape (n,)
    """
    p = float(shares.mean())
    sums = np.bincount(units, shares - p)
    groups = len(np.unique(units))
    return float((sums**2).sum() / len(shares) ** 2 * groups / (groups - 1))


def cluster_variance_by_repeat(
    correct: ArrayLike,
    rounds: Rounds,
    units: NDArray[np.intp],
    *,
    chosen: NDArray[np.bool_] | None = None,
) -> float:
    """Mean over repeats of the cluster variance of one answer a row.

    Averaging a row's answers over repeats first would hide how much one answer varies.

    Parameters
    ----------
    correct : array_like, shape (T,)
        In the order of `rounds.pairs`.
    rounds : Rounds
    units : ndarray of int, shape (n,)
    chosen : ndarray of bool, shape (n,), optional
        Only these rows.

    Returns
    -------
    float
        nan where no repeat judges rows of two units.
    """
    round_at, case_at = rounds.pairs
    value, repeat = np.asarray(correct, dtype=np.float64), rounds.repeat[round_at]
    kept = np.ones(len(value), dtype=bool) if chosen is None else chosen[case_at]
    found = []
    for one in np.unique(repeat[kept]):
        rows = kept & (repeat == one)
        if len(np.unique(units[case_at[rows]])) > 1:
            found.append(cluster_variance(value[rows], units[case_at[rows]]))
    return float(np.mean(found)) if found else math.nan
