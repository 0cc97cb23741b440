"""Linear and quadratic discriminants in many rounds at once.

Idea: the scatter of a bag is columns x counts x columns, one product a round; whitened by its
eigenvectors (linear) or by each class's Cholesky factor (quadratic) it answers for all cases.
"""

import numpy as np
from numpy.typing import NDArray

from evalcore.closed_form import NONE, Labels, Moments, from_log_odds, moments, softmax
from evalcore.prepared import Prepared
from evalcore.rounds import Counts
from evalcore.shares import Floats

RANK = 1e-4  # singular values up to this count as 0, as in scikit-learn's LDA
_CLEAR = (1e-12, 1e-5)  # eigenvalues between these are too near to RANK squared to trust


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
    bag = moments(prepared, labels, counts, n_classes=n_classes)
    residuals = bag.residuals()
    weights = counts / bag.total[:, None]
    scatter = (residuals * weights[:, None, :]) @ residuals.swapaxes(1, 2)
    variances = np.diagonal(scatter, axis1=1, axis2=2)
    none = variances <= NONE * bag.extent**2
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
    fewer cases than columns are fine; g is above 0 and at most 1. A round in which the cases of
    a class are all alike is nan.

    Examples
    --------
    >>> x = np.array([[[-1.0, 1.0, -3.0, 3.0, 0.0]]])
    >>> given = Prepared(x, np.ones((1, 1), dtype=bool), True)
    >>> bags = np.array([[1, 1, 1, 1, 0]], dtype=np.uint8)
    >>> labels = np.array([0, 0, 1, 1, 1])
    >>> qda(given, labels, bags, n_classes=2, shrinkage=0.01)[0, 4].round(12).tolist()
    [0.75, 0.25]
    """
    bag = moments(prepared, labels, counts, n_classes=n_classes)
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
        alike |= (variances <= NONE * bag.extent**2).all(axis=1)
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
    projected = (directions * kept[:, None, :]).swapaxes(1, 2) @ centres
    return np.asarray(directions @ projected, dtype=np.float64)


def _linear_answers(columns: Floats, coefficients: Floats, offset: Floats) -> Floats:
    """Probabilities from linear scores; coefficients (R, K, q), offsets (R, K)."""
    if offset.shape[1] > 2:
        return softmax(coefficients @ columns + offset[:, :, None])
    difference = coefficients[:, 1:] - coefficients[:, :1]
    return from_log_odds((difference @ columns)[:, 0] + (offset[:, 1:] - offset[:, :1]))


def _by_rounding(prepared: Prepared, bag: Moments, none: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Rounds with a feature that is constant within classes, but only if one rounds well.

    Sums of whole and half numbers are exact, and a feature that is constant in the whole bag
    tells nothing; any other leaves something of the size of rounding to divide by.
    """
    if not none.any():
        return np.zeros(len(none), dtype=bool)
    apart = np.ptp(bag.means, axis=2) > np.sqrt(NONE) * bag.extent
    doubled = 2 * prepared.columns
    exact = (doubled == np.rint(doubled)).all(axis=2)
    return np.asarray((none & apart & ~exact).any(axis=1))
