"""How well scores put the cases of a class first: areas under curves, by group (round).

Only the order of the scores within a group matters; equal scores are one threshold.
"""

from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.shares import Floats, by_group, group_sums, quotient


@dataclass(frozen=True, eq=False)
class _Ranked:
    """Weight of positives and negatives at each distinct score, lowest first within each group."""

    group: NDArray[np.intp]
    positive: Floats
    negative: Floats
    n_groups: int

    def total(self, values: Floats) -> Floats:
        """Sum of values by group."""
        return group_sums(values, self.group, self.n_groups)

    def below(self, values: Floats) -> Floats:
        """Sum of values at lower scores of the same group."""
        before_group = np.concatenate([[0.0], np.cumsum(self.total(values))[:-1]])
        return np.asarray(np.cumsum(values) - values - before_group[self.group])

    def from_here_up(self, values: Floats) -> Floats:
        """Sum of values at this score and at higher ones of the same group."""
        return self.total(values)[self.group] - self.below(values)


def _ranked(
    positive: ArrayLike,
    scores: ArrayLike,
    *,
    groups: ArrayLike | None,
    n_groups: int,
    weights: ArrayLike | None,
) -> _Ranked:
    is_positive: NDArray[np.bool_] = np.asarray(positive, dtype=bool)
    score = np.asarray(scores, dtype=np.float64)
    group, weight = by_group(len(score), groups=groups, weights=weights)
    order = np.lexsort((score, group))
    group, score = group[order], score[order]
    up, down = weight[order] * is_positive[order], weight[order] * ~is_positive[order]
    # one block per distinct score within a group
    starts = np.ones(len(score), dtype=bool)
    starts[1:] = (group[1:] != group[:-1]) | (score[1:] != score[:-1])
    block = np.cumsum(starts) - 1
    return _Ranked(group[starts], group_sums(up, block), group_sums(down, block), n_groups)


def auc(
    positive: ArrayLike,
    scores: ArrayLike,
    *,
    groups: ArrayLike | None = None,
    n_groups: int = 1,
    weights: ArrayLike | None = None,
) -> Floats:
    """Area under the ROC curve per group (round): how often a positive outranks a negative.

    Ties count one half (Mann & Whitney 1947). Never flipped: below 0.5 means ranked the wrong way.

    Parameters
    ----------
    positive : array_like of bool, shape (T,)
    scores : array_like, shape (T,)
        Higher means more likely positive.
    groups, n_groups, weights
        Group (round) of each answer, 0 to `n_groups` - 1, and how often it counts; all in one
        group and once each if left out.

    Returns
    -------
    ndarray, shape (n_groups,)
        nan for a group that lacks positives or negatives.

    Examples
    --------
    >>> auc([0, 0, 1, 1], [0.1, 0.4, 0.35, 0.8]).tolist()
    [0.75]
    """
    ranked = _ranked(positive, scores, groups=groups, n_groups=n_groups, weights=weights)
    ups, downs = ranked.positive, ranked.negative
    wins = ranked.total(ups * (ranked.below(downs) + downs / 2))
    return quotient(wins, ranked.total(ups) * ranked.total(downs))


def hand_till(
    true: ArrayLike,
    scores: Floats,
    *,
    groups: ArrayLike | None = None,
    n_groups: int = 1,
    weights: ArrayLike | None = None,
) -> Floats:
    """AUC for two or more classes: the mean over pairs (M of Hand & Till 2001), per group.

    Parameters
    ----------
    true : array_like of int, shape (T,)
    scores : ndarray, shape (T, K)
    groups, n_groups, weights
        As in `auc`.

    Returns
    -------
    ndarray, shape (n_groups,)
        nan for a group that lacks a class. For two classes with complementary scores this is
        the ordinary AUC.

    Examples
    --------
    >>> scores = np.array([[0.6, 0.3, 0.1], [0.3, 0.4, 0.3], [0.1, 0.2, 0.7], [0.5, 0.1, 0.4]])
    >>> hand_till([0, 1, 2, 2], scores).tolist()
    [1.0]
    """
    label = np.asarray(true, dtype=np.intp)
    group, weight = by_group(len(label), groups=groups, weights=weights)
    pairs = list(combinations(range(scores.shape[-1]), 2))
    total = np.zeros(n_groups)
    for a, b in pairs:
        chosen = (label == a) | (label == b)
        total += sum(
            auc(
                label[chosen] == k,
                scores[chosen, k],
                groups=group[chosen],
                n_groups=n_groups,
                weights=weight[chosen],
            )
            / 2
            for k in (a, b)
        )
    return total / len(pairs)


def average_precision(
    positive: ArrayLike,
    scores: ArrayLike,
    *,
    groups: ArrayLike | None = None,
    n_groups: int = 1,
    weights: ArrayLike | None = None,
) -> Floats:
    """Area under the precision-recall curve as steps, per group (round).

    The sum over thresholds, from the highest score down, of (recall gained) x precision; equal
    scores are one threshold, so the order of the cases does not matter. Scores that say nothing
    get the share of positives, not 0.5.

    Parameters
    ----------
    positive : array_like of bool, shape (T,)
    scores : array_like, shape (T,)
        Higher means more likely positive.
    groups, n_groups, weights
        As in `auc`.

    Returns
    -------
    ndarray, shape (n_groups,)
        nan for a group without positives; 1 for one with positives alone.

    Examples
    --------
    >>> round(float(average_precision([0, 0, 1, 1], [0.1, 0.4, 0.35, 0.8])[0]), 4)
    0.8333
    """
    ranked = _ranked(positive, scores, groups=groups, n_groups=n_groups, weights=weights)
    found = ranked.from_here_up(ranked.positive)
    # undefined only above the first case with any weight, where no recall is gained
    precision = np.nan_to_num(quotient(found, found + ranked.from_here_up(ranked.negative)))
    return quotient(ranked.total(ranked.positive * precision), ranked.total(ranked.positive))
