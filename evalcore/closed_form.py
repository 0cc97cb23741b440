"""Exact rounds from counts: majority and naive Bayes; the means all closed forms rest on.

Idea: such a model is nothing but weighted means and squares of its bag, and the counts are the
weights; so one product gives a chunk's means, another its squares, a third answers for all cases.

Each function here, in `discriminants` and in `logistic_rounds` takes what `prepared.prepare`
gives, the labels and the counts, and returns scores of shape (R, n, K). Every class must be in
every bag (`complete`), except for `majority`. A round that cannot be answered this way (each
function says which) is nan throughout: the plain adapter has to carry it out.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from evalcore.prepared import Prepared
from evalcore.rounds import Counts
from evalcore.shares import Floats

Labels = NDArray[np.intp]

SMOOTHING = 1e-9  # share of the largest variance that naive Bayes adds to every variance
NONE = 1e-20  # a variance below this share of a column's squared size is rounding
_LONG = 1e4  # squared lengths beyond this are not multiplied out


def complete(labels: Labels, counts: Counts, n_classes: int) -> NDArray[np.bool_]:
    """Whether each bag holds every class, shape (R,).

    Examples
    --------
    >>> complete(np.array([0, 0, 1]), np.array([[1, 1, 1], [2, 1, 0]], dtype=np.uint8), 2).tolist()
    [True, False]
    """
    return np.asarray((_sizes(labels, counts, n_classes) > 0).all(axis=1))


def majority(prepared: Prepared, labels: Labels, counts: Counts, *, n_classes: int) -> Floats:
    """Share of each class in the bag, for every case alike.

    A class the bag lacks has probability 0. The features are not looked at.

    Examples
    --------
    >>> bags = np.array([[2, 1, 1, 0]], dtype=np.uint8)
    >>> unused = Prepared(np.zeros((1, 1, 4)), np.ones((1, 1), dtype=bool), True)
    >>> majority(unused, np.array([0, 0, 1, 1]), bags, n_classes=2)[0, 3].tolist()
    [0.75, 0.25]
    """
    sizes = _sizes(labels, counts, n_classes)
    shares = sizes / sizes.sum(axis=1, keepdims=True)
    return np.repeat(shares[:, None, :], len(labels), axis=1)


def naive_bayes(prepared: Prepared, labels: Labels, counts: Counts, *, n_classes: int) -> Floats:
    """Gaussian naive Bayes: a normal density for each class and feature, multiplied.

    Variances have divisor N_k, and 1e-9 of the bag's largest variance is added to each. Where no
    feature varies in a bag the answer is the classes' shares. A case thousands of standard
    deviations away from every class (a rare value, outside a bag that never varies) is answered
    with fewer digits, here as elsewhere.

    Examples
    --------
    Classes of variance 1 around 1 and 5, and a case half way between:

    >>> x = np.array([[[0.0, 2.0, 4.0, 6.0, 3.0]]])
    >>> given = Prepared(x, np.ones((1, 1), dtype=bool), True)
    >>> bags = np.array([[1, 1, 1, 1, 0]], dtype=np.uint8)
    >>> naive_bayes(given, np.array([0, 0, 1, 1, 1]), bags, n_classes=2)[0, 4].tolist()
    [0.5, 0.5]
    """
    bag = moments(prepared, labels, counts, n_classes=n_classes)
    squares = bag.residuals()
    sums = np.square(squares, out=squares) @ bag.weights.swapaxes(1, 2)
    variances = sums / bag.sizes[:, None, :]
    total = ((variances + np.square(bag.centres)) @ bag.shares[:, :, None])[:, :, 0]
    largest = np.where(total > NONE * bag.extent**2, total, 0.0).max(axis=1)
    # where nothing varies any spread will do: all classes lie at the same distance
    spread = variances + np.where(largest > 0, SMOOTHING * largest, 1.0)[:, None, None]
    scores = np.log(bag.shares) - np.log(spread).sum(axis=1) / 2
    return softmax(scores[:, :, None] - _distances(bag, 1 / spread) / 2)


def softmax(scores: Floats) -> Floats:
    """Probabilities from their logarithms up to a constant, (R, K, n) to (R, n, K); in place."""
    scores -= scores.max(axis=1, keepdims=True)
    np.exp(scores, out=scores)
    scores /= scores.sum(axis=1, keepdims=True)
    return scores.swapaxes(1, 2)


def from_log_odds(log_odds: Floats) -> Floats:
    """Probabilities of class 0 and class 1, the first as 1 less the second, (R, n) to (R, n, 2)."""
    small = np.exp(-np.abs(log_odds))
    answers = np.empty((len(log_odds), 2, log_odds.shape[1]))
    np.divide(np.where(log_odds >= 0, 1.0, small), 1 + small, out=answers[:, 1])
    np.subtract(1, answers[:, 1], out=answers[:, 0])
    return answers.swapaxes(1, 2)


@dataclass(frozen=True, eq=False)
class Moments:
    """Weighted means of each bag and class; columns are centred on the table's own means.

    Attributes
    ----------
    columns : ndarray, shape (R, q, n), or (1, q, n) where all rounds share them
    extent : ndarray, shape (R or 1, q)
        Largest distance from the centre in each column.
    weights : ndarray, shape (R, K, n)
        Counts of the class's cases, else 0.
    sizes, shares : ndarray, shape (R, K)
    total : ndarray, shape (R,)
    means : ndarray, shape (R, q, K)
    overall : ndarray, shape (R, q, 1)
    centres : ndarray, shape (R, q, K)
        Means less the overall mean.
    belongs : ndarray, shape (K, n)
        1 for the class of each case, else 0.
    """

    columns: Floats
    extent: Floats
    weights: Floats
    sizes: Floats
    shares: Floats
    total: Floats
    means: Floats
    overall: Floats
    centres: Floats
    belongs: Floats

    def residuals(self) -> Floats:
        """Columns less the mean of the case's class, shape (R, q, n)."""
        residuals = self.means @ self.belongs
        return np.subtract(self.columns, residuals, out=residuals)


def _sizes(labels: Labels, counts: Counts, n_classes: int) -> Floats:
    """Rows of each class in each bag, shape (R, K)."""
    return np.asarray(counts @ np.eye(n_classes)[labels], dtype=np.float64)


def moments(prepared: Prepared, labels: Labels, counts: Counts, *, n_classes: int) -> Moments:
    """Means of each bag and class; every class must be in every bag."""
    columns, extent = prepared.centred, prepared.extent
    belongs = (labels == np.arange(n_classes)[:, None]).astype(np.float64)
    weights = counts[:, None, :] * belongs
    sizes = weights.sum(axis=2)
    total = sizes.sum(axis=1)
    shares = sizes / total[:, None]
    means = columns @ weights.swapaxes(1, 2) / sizes[:, None, :]
    overall = means @ shares[:, :, None]
    centres = means - overall
    return Moments(columns, extent, weights, sizes, shares, total, means, overall, centres, belongs)


def _distances(bag: Moments, precision: Floats) -> Floats:
    """Sum over columns of (x - mean)^2 x precision, shape (R, K, n).

    Multiplied out it is two products; but squares that nearly cancel would lose their digits.
    """
    if (bag.extent[:, :, None] ** 2 * precision).max() < _LONG:
        turned = precision.swapaxes(1, 2)
        leaning = -2 * (precision * bag.means).swapaxes(1, 2)
        fixed = (precision * bag.means**2).sum(axis=1)[:, :, None]
        found = turned @ np.square(bag.columns)
        found += leaning @ bag.columns
        found += fixed
        return np.asarray(found, dtype=np.float64)
    found = np.empty_like(bag.weights)
    root = np.sqrt(precision)
    for k in range(found.shape[1]):
        away = bag.columns - bag.means[:, :, k, None]
        away *= root[:, :, k, None]
        np.einsum("rqn,rqn->rn", away, away, out=found[:, k])
    return found
