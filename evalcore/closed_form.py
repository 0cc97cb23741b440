"""Exact rounds from counts: majority, naive Bayes, linear and quadratic discriminants.

Idea: such a model is nothing but weighted means and scatters of its bag, and the counts are the
weights; so one product gives a chunk's means, another its scatters, a third answers for all cases.

Each function takes what `prepared.prepare` gives, the labels and the counts, and returns scores
of shape (R, n, K). Every class must be in every bag (`complete`), except for `majority`. A round
whose answer would hang on rounding is nan throughout: the plain adapter has to carry it out.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from evalcore.prepared import Prepared
from evalcore.rounds import Counts
from evalcore.shares import Floats

Labels = NDArray[np.intp]

SMOOTHING = 1e-9  # share of the largest variance that naive Bayes adds to every variance
RANK = 1e-4  # singular values up to this count as 0, as in scikit-learn's LDA
_NONE = 1e-20  # a variance below this share of a column's squared size is rounding
_CLEAR = (1e-12, 1e-5)  # eigenvalues between these are too near to RANK squared to trust
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
    feature varies in a bag the answer is the classes' shares.

    Examples
    --------
    Classes of variance 1 around 1 and 5, and a case half way between:

    >>> x = np.array([[[0.0, 2.0, 4.0, 6.0, 3.0]]])
    >>> given = Prepared(x, np.ones((1, 1), dtype=bool), True)
    >>> bags = np.array([[1, 1, 1, 1, 0]], dtype=np.uint8)
    >>> naive_bayes(given, np.array([0, 0, 1, 1, 1]), bags, n_classes=2)[0, 4].tolist()
    [0.5, 0.5]
    """
    bag = _moments(prepared, labels, counts, n_classes)
    sums = np.square(bag.residuals()) @ bag.weights.swapaxes(1, 2)
    variances = sums / bag.sizes[:, None, :]
    total = ((variances + np.square(bag.centres)) @ bag.shares[:, :, None])[:, :, 0]
    largest = np.where(total > _NONE * bag.extent**2, total, 0.0).max(axis=1)
    # where nothing varies any spread will do: all classes lie at the same distance
    spread = variances + np.where(largest > 0, SMOOTHING * largest, 1.0)[:, None, None]
    scores = np.log(bag.shares) - np.log(spread).sum(axis=1) / 2
    return softmax(scores[:, :, None] - _distances(bag, 1 / spread) / 2)


def lda(prepared: Prepared, labels: Labels, counts: Counts, *, n_classes: int) -> Floats:
    """Linear discriminant analysis (Fisher 1936; Rao 1948), priors being the bag's class shares.

    Features are divided by their standard deviation within classes; directions whose singular
    value within or (relative to the largest) between classes is at most 1e-4 are left out, so
    more features than cases, collinear and constant features are fine. A feature that is
    constant within every class is left out as well; where it is so only within rounding, and no
    whole or half number, the round is nan. So is a round in which no direction is left.

    Examples
    --------
    >>> x = np.array([[[0.0, 2.0, 4.0, 6.0, 3.0]]])
    >>> given = Prepared(x, np.ones((1, 1), dtype=bool), True)
    >>> bags = np.array([[1, 1, 1, 1, 0]], dtype=np.uint8)
    >>> lda(given, np.array([0, 0, 1, 1, 1]), bags, n_classes=2)[0, 4].round(12).tolist()
    [0.5, 0.5]
    """
    bag = _moments(prepared, labels, counts, n_classes)
    residuals = bag.residuals()
    weights = counts / bag.total[:, None]
    scatter = (residuals * weights[:, None, :]) @ residuals.swapaxes(1, 2)
    variances = np.diagonal(scatter, axis1=1, axis2=2)
    none = variances <= _NONE * bag.extent**2
    scale = np.where(none, 0.0, 1 / np.sqrt(np.where(none, 1.0, variances)))
    whitening = _whitening(scatter, scale, residuals, weights)
    centres = whitening.swapaxes(1, 2) @ bag.centres
    if n_classes > 2:
        centres = _between(centres, bag.sizes)
    coefficients = (whitening @ centres).swapaxes(1, 2)
    offset = np.log(bag.shares) - np.square(centres).sum(axis=1) / 2
    offset -= (coefficients @ bag.overall)[:, :, 0]
    scores = _linear_answers(bag.columns, coefficients, offset)
    scores[_by_rounding(prepared, bag, none) | ~whitening.any(axis=(1, 2))] = np.nan
    return scores


def qda(
    prepared: Prepared, labels: Labels, counts: Counts, *, n_classes: int, shrinkage: float
) -> Floats:
    """Quadratic discriminant analysis: a covariance for each class, shrunk towards a sphere.

    (1 - g) S_k + g trace(S_k) / q I with S_k the class's covariance (divisor N_k), q the bag's
    columns and g the shrinkage (Friedman 1989, eq. 18), so collinear columns and classes with
    fewer cases than columns are fine. A round in which the cases of a class are all alike is nan.

    Examples
    --------
    >>> x = np.array([[[-1.0, 1.0, -3.0, 3.0, 0.0]]])
    >>> given = Prepared(x, np.ones((1, 1), dtype=bool), True)
    >>> bags = np.array([[1, 1, 1, 1, 0]], dtype=np.uint8)
    >>> labels = np.array([0, 0, 1, 1, 1])
    >>> qda(given, labels, bags, n_classes=2, shrinkage=0.01)[0, 4].round(12).tolist()
    [0.75, 0.25]
    """
    bag = _moments(prepared, labels, counts, n_classes)
    residuals = bag.residuals()
    on = np.arange(residuals.shape[1])
    q = prepared.present.sum(axis=1)
    scores = np.empty((len(counts), n_classes, len(labels)))
    away = np.empty_like(residuals)
    alike = np.zeros(len(counts), dtype=bool)
    for k in range(n_classes):
        own = np.flatnonzero(labels == k)
        cases = residuals.take(own, axis=2)
        weights = counts.take(own, axis=1) / bag.sizes[:, k, None]
        covariance = (cases * weights[:, None, :]) @ cases.swapaxes(1, 2)
        variances = covariance[:, on, on]
        alike |= (variances <= _NONE * bag.extent**2).all(axis=1)
        ball = np.where(alike, 1.0, shrinkage * variances.sum(axis=1) / q)[:, None]
        covariance *= 1 - shrinkage
        # a column the bag lacks is 0 throughout and must not enter the volume
        covariance[:, on, on] += np.where(prepared.present, ball, 1.0)
        lower = np.linalg.cholesky(covariance)
        root = np.linalg.inv(lower)
        np.matmul(root, bag.columns, out=away)
        away -= root @ bag.means[:, :, k, None]
        volume = np.log(lower[:, on, on]).sum(axis=1)
        scores[:, k] = (np.log(bag.shares[:, k]) - volume)[:, None]
        scores[:, k] -= np.einsum("rqn,rqn->rn", away, away) / 2
    answers = softmax(scores)
    answers[alike] = np.nan
    return answers


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
class _Moments:
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
    return counts @ np.eye(n_classes)[labels]


def _moments(prepared: Prepared, labels: Labels, counts: Counts, n_classes: int) -> _Moments:
    given = prepared.columns[:1] if prepared.shared else prepared.columns
    columns = given - given.mean(axis=2, keepdims=True)
    extent = np.maximum(columns.max(axis=2), -columns.min(axis=2))
    belongs = (labels == np.arange(n_classes)[:, None]).astype(np.float64)
    weights = counts[:, None, :] * belongs
    sizes = weights.sum(axis=2)
    total = sizes.sum(axis=1)
    shares = sizes / total[:, None]
    means = columns @ weights.swapaxes(1, 2) / sizes[:, None, :]
    overall = means @ shares[:, :, None]
    centres = means - overall
    return _Moments(
        columns, extent, weights, sizes, shares, total, means, overall, centres, belongs
    )


def _distances(bag: _Moments, precision: Floats) -> Floats:
    """Sum over columns of (x - mean)^2 x precision, shape (R, K, n).

    Multiplied out it is two products; but squares that nearly cancel would lose their digits.
    """
    if (bag.extent[:, :, None] ** 2 * precision).max() < _LONG:
        turned = precision.swapaxes(1, 2)
        leaning = -2 * (precision * bag.means).swapaxes(1, 2)
        fixed = (precision * bag.means**2).sum(axis=1)[:, :, None]
        return turned @ np.square(bag.columns) + leaning @ bag.columns + fixed
    found = np.empty(bag.weights.shape)
    root = np.sqrt(precision)
    for k in range(found.shape[1]):
        away = bag.columns - bag.means[:, :, k, None]
        away *= root[:, :, k, None]
        np.einsum("rqn,rqn->rn", away, away, out=found[:, k])
    return found


def _whitening(scatter: Floats, scale: Floats, residuals: Floats, weights: Floats) -> Floats:
    """Directions of unit variance within classes, shape (R, q, q); those left out are 0."""
    values, vectors = np.linalg.eigh(scatter * scale[:, :, None] * scale[:, None, :])
    kept = values > RANK**2
    found = vectors * np.where(kept, 1 / np.sqrt(np.where(kept, values, 1.0)), 0.0)[:, None, :]
    # small eigenvalues carry few digits: take singular values of the rows there
    for r in np.flatnonzero(((values > _CLEAR[0]) & (values < _CLEAR[1])).any(axis=1)):
        rows = (residuals[r] * scale[r][:, None] * np.sqrt(weights[r])).T
        _, singular, directions = np.linalg.svd(rows, full_matrices=False)
        rank = int((singular > RANK).sum())
        found[r] = 0
        found[r, :, :rank] = directions[:rank].T / singular[:rank]
    found *= scale[:, :, None]
    return found


def _between(centres: Floats, sizes: Floats) -> Floats:
    """Class centres, shape (R, q, K), projected on directions in which they differ noticeably."""
    directions, singular, _ = np.linalg.svd(
        centres * np.sqrt(sizes)[:, None, :], full_matrices=False
    )
    kept = singular > RANK * singular[:, :1]
    return directions @ ((directions * kept[:, None, :]).swapaxes(1, 2) @ centres)


def _linear_answers(columns: Floats, coefficients: Floats, offset: Floats) -> Floats:
    """Probabilities from linear scores; coefficients (R, K, q), offsets (R, K)."""
    if offset.shape[1] > 2:
        return softmax(coefficients @ columns + offset[:, :, None])
    difference = coefficients[:, 1:] - coefficients[:, :1]
    return from_log_odds((difference @ columns)[:, 0] + (offset[:, 1:] - offset[:, :1]))


def _by_rounding(prepared: Prepared, bag: _Moments, none: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Rounds with a feature that is constant within classes, but only if one rounds well.

    Sums of whole and half numbers are exact, and a feature that is constant in the whole bag
    tells nothing; any other leaves something of the size of rounding to divide by.
    """
    if not none.any():
        return np.zeros(len(none), dtype=bool)
    apart = np.ptp(bag.means, axis=2) > np.sqrt(_NONE) * bag.extent
    doubled = 2 * prepared.columns
    exact = (doubled == np.rint(doubled)).all(axis=2)
    return np.asarray((none & apart & ~exact).any(axis=1))
