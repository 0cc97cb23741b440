"""AUC of many rounds at once where every round has an answer for every case.

Idea: one sort a round and running sums over all rounds together; weights are whole numbers, so
nothing is lost in the sums.
"""

from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from evalcore.shares import Floats, quotient


def row_auc(positive: NDArray[np.bool_], scores: Floats, weights: Floats) -> Floats:
    """AUC of each row under its weights; the same as `ranking.auc` with a row a group.

    Parameters
    ----------
    positive : ndarray of bool, shape (n,)
    scores, weights : ndarray, shape (R, n)
        Weights are whole numbers.

    Returns
    -------
    ndarray, shape (R,)
        nan where positives or negatives have no weight.
    """
    n_rows, n = scores.shape
    if not n:
        return np.full(n_rows, np.nan)
    first = np.arange(n_rows) * n
    order = np.argsort(scores, axis=1) + first[:, None]
    value = scores.ravel()[order]
    ups = (weights * positive).ravel()[order].ravel()
    downs = (weights * ~positive).ravel()[order].ravel()
    starts = np.ones(value.shape, dtype=bool)
    np.not_equal(value[:, 1:], value[:, :-1], out=starts[:, 1:])
    row = first
    block = np.flatnonzero(starts)
    if len(block) < value.size:
        # tied scores are one block
        ups, downs = np.add.reduceat(ups, block), np.add.reduceat(downs, block)
        row = np.searchsorted(block, first)
    upto = np.cumsum(downs)
    total = np.add.reduceat(ups, row)
    before = upto[row] - downs[row]
    wins = np.add.reduceat(ups * (upto - downs / 2), row) - before * total
    return quotient(wins, total * np.add.reduceat(downs, row))


def row_hand_till(labels: NDArray[np.intp], scores: Floats, weights: Floats) -> Floats:
    """Hand & Till's M of each row; the same as `ranking.hand_till` with a row a group.

    Parameters
    ----------
    labels : ndarray of int, shape (n,)
    scores : ndarray, shape (R, n, K)
    weights : ndarray, shape (R, n)
    """
    n_classes = scores.shape[2]
    total = np.zeros(len(scores))
    pairs = list(combinations(range(n_classes), 2))
    if n_classes == 2 and np.array_equal(scores[:, :, 0], 1 - scores[:, :, 1]):
        # complementary scores rank alike
        return row_auc(labels == 1, scores[:, :, 1], weights)
    for a, b in pairs:
        chosen = np.flatnonzero((labels == a) | (labels == b))
        for k in (a, b):
            of_k = np.ascontiguousarray(scores[:, chosen, k])
            total += row_auc(labels[chosen] == k, of_k, weights[:, chosen]) / 2
    return total / len(pairs)
