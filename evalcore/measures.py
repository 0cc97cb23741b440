"""Measures of right and wrong, each once, for many rounds at once.

Two raw materials: confusion counts of shape (..., K, K) with true classes in rows, and scores.
A value that cannot be computed (no case of a class) is nan.
"""

from collections.abc import Callable
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]


def predicted_class(scores: Floats) -> NDArray[np.intp]:
    """The class with the highest score, the first one on ties, along the last axis."""
    return np.asarray(scores.argmax(axis=-1), dtype=np.intp)


def confusion(
    true: ArrayLike,
    predicted: ArrayLike,
    *,
    n_classes: int,
    groups: ArrayLike | None = None,
    n_groups: int = 1,
    weights: ArrayLike | None = None,
) -> Floats:
    """Confusion counts per group (round).

    Parameters
    ----------
    true, predicted : array_like of int, shape (T,)
        Class codes, 0 to `n_classes` - 1.
    groups : array_like of int, shape (T,), optional
        Round of each answer, 0 to `n_groups` - 1; all in one if left out.
    weights : array_like, shape (T,), optional
        How often each answer counts; once if left out.

    Returns
    -------
    ndarray, shape (n_groups, K, K)
        Rows: true class.

    Examples
    --------
    >>> confusion([0, 0, 1], [0, 1, 1], n_classes=2)[0].tolist()
    [[1.0, 1.0], [0.0, 1.0]]
    """
    true = np.asarray(true, dtype=np.intp)
    group = np.zeros(len(true), dtype=np.intp) if groups is None else np.asarray(groups)
    cell = (group * n_classes + true) * n_classes + np.asarray(predicted, dtype=np.intp)
    size = n_groups * n_classes * n_classes
    weight = None if weights is None else np.asarray(weights)
    counts: Floats = np.bincount(cell, weight, minlength=size).astype(np.float64)
    return counts.reshape(n_groups, n_classes, n_classes)


def _share(part: ArrayLike, whole: ArrayLike) -> Floats:
    """part / whole, nan where the whole is 0."""
    below = np.asarray(whole, dtype=np.float64)
    share: Floats = np.full(np.shape(part), np.nan)
    return np.divide(part, below, out=share, where=below > 0)


def accuracy(counts: Floats) -> Floats:
    """Share right: trace over total."""
    return _share(np.trace(counts, axis1=-2, axis2=-1), counts.sum(axis=(-2, -1)))


def recalls(counts: Floats) -> Floats:
    """Share right of each true class (sensitivity), shape (..., K); nan for an empty class."""
    return _share(np.diagonal(counts, axis1=-2, axis2=-1), counts.sum(axis=-1))


def balanced_accuracy(counts: Floats) -> Floats:
    """Mean of the classes' shares right; nan if a class is empty."""
    return np.asarray(recalls(counts).mean(axis=-1))


def auc(
    positive: ArrayLike,
    scores: ArrayLike,
    *,
    groups: ArrayLike | None = None,
    n_groups: int = 1,
    weights: ArrayLike | None = None,
) -> Floats:
    """Area under the ROC curve per group (round): how often a positive outranks a negative.

    Ties count one half (Mann & Whitney). Never flipped: below 0.5 means ranked the wrong way.

    Parameters
    ----------
    positive : array_like of bool, shape (T,)
    scores : array_like, shape (T,)
        Higher means more likely positive.
    groups, n_groups, weights
        As in `confusion`.

    Returns
    -------
    ndarray, shape (n_groups,)
        nan for a group that lacks positives or negatives.

    Examples
    --------
    >>> auc([0, 0, 1, 1], [0.1, 0.4, 0.35, 0.8]).tolist()
    [0.75]
    """
    is_positive: NDArray[np.bool_] = np.asarray(positive, dtype=bool)
    score = np.asarray(scores, dtype=np.float64)
    group = np.zeros(len(score), dtype=np.intp) if groups is None else np.asarray(groups)
    weight = np.ones(len(score)) if weights is None else np.asarray(weights, dtype=np.float64)
    order = np.lexsort((score, group))
    group, score = group[order], score[order]
    up, down = weight[order] * is_positive[order], weight[order] * ~is_positive[order]
    # one block per distinct score within a group
    starts = np.ones(len(score), dtype=bool)
    starts[1:] = (group[1:] != group[:-1]) | (score[1:] != score[:-1])
    block = np.cumsum(starts) - 1
    block_group = group[starts]
    ups = np.bincount(block, up)
    downs = np.bincount(block, down)
    positives = np.bincount(block_group, ups, minlength=n_groups)
    negatives = np.bincount(block_group, downs, minlength=n_groups)
    negatives_before_group = np.concatenate([[0.0], np.cumsum(negatives)[:-1]])
    below = np.cumsum(downs) - downs - negatives_before_group[block_group]
    wins = np.bincount(block_group, ups * (below + downs / 2), minlength=n_groups)
    return _share(wins, positives * negatives)


def hand_till(
    true: ArrayLike,
    scores: Floats,
    *,
    groups: ArrayLike | None = None,
    n_groups: int = 1,
    weights: ArrayLike | None = None,
) -> Floats:
    """AUC for two or more classes: the mean over pairs of classes (Hand & Till's M) per group.

    Parameters
    ----------
    true : array_like of int, shape (T,)
    scores : ndarray, shape (T, K)
    groups, n_groups, weights
        As in `confusion`.

    Returns
    -------
    ndarray, shape (n_groups,)
        nan for a group that lacks a class. For two classes with complementary scores this is
        the ordinary AUC.
    """
    label = np.asarray(true, dtype=np.intp)
    group = np.zeros(len(label), dtype=np.intp) if groups is None else np.asarray(groups)
    weight = np.ones(len(label)) if weights is None else np.asarray(weights, dtype=np.float64)
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


@dataclass(frozen=True)
class Measure:
    """A measure as users meet it.

    Attributes
    ----------
    key : str
    plain, trade : str
        The plain name with {units} for the user's noun, and the trade's name.
    from_confusion : callable or None
        None if scores are needed.
    per_class : bool
        Whether there is one value a class.
    """

    key: str
    plain: str
    trade: str
    from_confusion: Callable[[Floats], Floats] | None
    per_class: bool = False


MEASURES: dict[str, Measure] = {
    measure.key: measure
    for measure in (
        Measure("accuracy", "share of {units} right", "accuracy", accuracy),
        Measure(
            "balanced_accuracy",
            "mean of the classes’ shares right",
            "balanced accuracy",
            balanced_accuracy,
        ),
        Measure("sensitivity", "share of a class found", "sensitivity", recalls, per_class=True),
        Measure("auc", "how well the scores rank the {units}", "AUC", None),
    )
}
