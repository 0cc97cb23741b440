"""Nearest neighbours with a stated rule for ties, for one fit and for all rounds at once.

A vote goes to the k nearest rows of the bag, a case drawn twice voting twice. Squared Euclidean
distances are compared after rounding to 11 digits of the bag's squared extent, so that rounding
noise decides nothing; of equal ones the case that stands earlier in the table comes first.

For all rounds of a large table, each case's nearest few are listed once; in a round only these
are looked at, and a bound on what scaling can change certifies that nobody else could be nearer.
"""

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.measures import Floats

_DIGITS = 11
_SPARE = 8  # looked at beyond the m nearest, so that ties at the border are seen
_LARGE = 500  # cases from which listing the nearest once pays
_BLOCK = 4_000_000  # numbers held at once


def squared_distances(queries: Floats, cases: Floats) -> Floats:
    """Squared distances, shape (m, n)."""
    from scipy.spatial.distance import cdist

    return np.asarray(cdist(queries, cases, "sqeuclidean"))


def _unit(rows: Floats) -> float:
    """What squared distances are rounded to: 11 digits of the rows' squared extent."""
    extent = float((np.ptp(rows, axis=0) ** 2).sum()) if len(rows) else 0.0
    return 10.0 ** (np.floor(np.log10(extent)) - _DIGITS) if extent > 0 else 1.0


def _votes(
    squared: Floats, places: NDArray[np.intp], counts: NDArray[Any], *, k: int, unit: float
) -> tuple[NDArray[np.intp], NDArray[np.intp], Floats]:
    """Cases in the order of the rule, the votes each casts, and the distance of the last vote.

    Parameters
    ----------
    squared, places : ndarray, shape (m, w)
        Squared distances and the cases they are to.
    counts : ndarray, shape (n,)
    """
    rounded = np.round(squared / unit)
    order = np.lexsort((places, rounded))
    nearest = np.take_along_axis(places, order, 1)
    weight = counts[nearest].astype(np.intp)
    so_far = np.cumsum(weight, axis=1)
    cast = np.clip(k - (so_far - weight), 0, weight)
    last = (so_far < k).sum(axis=1)
    reach = np.take_along_axis(rounded, order, 1)
    full = np.concatenate([reach, np.full((len(reach), 1), np.inf)], axis=1)
    return nearest, cast, full[np.arange(len(reach)), last]


def _shares(
    nearest: NDArray[np.intp], cast: NDArray[np.intp], labels: NDArray[np.intp], n_classes: int
) -> Floats:
    total = cast.sum(axis=1, keepdims=True)
    votes = [(cast * (labels[nearest] == k)).sum(axis=1) for k in range(n_classes)]
    return np.asarray(np.stack(votes, axis=1) / total)


def round_scores(
    queries: Floats,
    features: Floats,
    labels: NDArray[np.intp],
    counts: NDArray[Any],
    *,
    k: int,
    n_classes: int,
) -> Floats:
    """Answers of one bag for some queries, by looking at every case of the bag.

    Parameters
    ----------
    queries : ndarray, shape (m, q)
    features : ndarray, shape (n, q)
    labels : ndarray of int, shape (n,)
    counts : ndarray, shape (n,)
    k, n_classes : int

    Returns
    -------
    ndarray, shape (m, K)
    """
    in_bag = np.flatnonzero(counts)
    rows, unit = features[in_bag], _unit(features[in_bag])
    width = min(k + _SPARE, len(in_bag))
    shares = np.empty((len(queries), n_classes))
    step = max(1, _BLOCK // max(1, len(in_bag)))
    for start in range(0, len(queries), step):
        part = slice(start, start + step)
        squared = squared_distances(queries[part], rows)
        near = _nearest_places(squared, width, k=k, unit=unit)
        nearest, cast, _ = _votes(
            np.take_along_axis(squared, near, 1), in_bag[near], counts, k=k, unit=unit
        )
        shares[part] = _shares(nearest, cast, labels, n_classes)
    return shares


def _nearest_places(squared: Floats, width: int, *, k: int, unit: float) -> NDArray[np.intp]:
    """Places that hold the k nearest of each row for sure: some more if ties need it."""
    n = squared.shape[1]
    while width < n:
        near = np.argpartition(squared, width - 1, axis=1)[:, :width]
        rounded = np.sort(np.round(np.take_along_axis(squared, near, 1) / unit), axis=1)
        if (rounded[:, min(k, width) - 1] < rounded[:, -1]).all():
            return near
        width = min(2 * width, n)
    return np.broadcast_to(np.arange(n), squared.shape)


def nearest_scores(
    features: Floats, labels: NDArray[np.intp], counts: NDArray[Any], *, k: int, n_classes: int
) -> Floats:
    """Answers of all rounds for all cases.

    Parameters
    ----------
    features : ndarray, shape (R, n, q)
        Prepared within each bag.
    labels : ndarray of int, shape (n,)
    counts : ndarray, shape (R, n)
    k, n_classes : int

    Returns
    -------
    ndarray, shape (R, n, K)
    """
    n_rounds, n, _ = features.shape
    scores = np.empty((n_rounds, n, n_classes))
    listed = _listed(features[0], 4 * k + 20) if n >= _LARGE and n_rounds > 2 else None
    for r in range(n_rounds):
        left = np.ones(n, dtype=bool)
        if listed is not None:
            left = _from_list(scores[r], features, labels, counts[r], r, listed=listed, k=k)
        if left.any():
            x = features[r]
            scores[r, left] = round_scores(x[left], x, labels, counts[r], k=k, n_classes=n_classes)
    return scores


def _listed(features: Floats, width: int) -> tuple[NDArray[np.intp], Floats]:
    """The nearest cases of each case, itself included, and the distance nobody else is below."""
    n = len(features)
    width = min(width, n)
    places, reach = np.empty((n, width), dtype=np.intp), np.empty(n)
    step = max(1, _BLOCK // n)
    for start in range(0, n, step):
        squared = squared_distances(features[start : start + step], features)
        near = np.argpartition(squared, width - 1, axis=1)[:, :width]
        places[start : start + step] = near
        reach[start : start + step] = np.take_along_axis(squared, near, 1).max(axis=1)
    return places, reach


def _from_list(
    scores: Floats,
    features: Floats,
    labels: NDArray[np.intp],
    counts: NDArray[Any],
    r: int,
    *,
    listed: tuple[NDArray[np.intp], Floats],
    k: int,
) -> NDArray[np.bool_]:
    """Fill in what the lists settle for one round; returns the cases they do not settle."""
    places, reach = listed
    shrink = _least_stretch(features[0], features[r])
    left = np.ones(len(places), dtype=bool)
    if shrink == 0.0:
        return left
    x = features[r]
    unit = _unit(x[counts > 0])
    step = max(1, _BLOCK // (places.shape[1] * x.shape[1]))
    for start in range(0, len(places), step):
        part = slice(start, start + step)
        squared = ((x[part, None, :] - x[places[part]]) ** 2).sum(axis=2)
        nearest, cast, last = _votes(squared, places[part], counts, k=k, unit=unit)
        # strictly nearer than anyone who is not listed can be, also after rounding
        settled = last + 1 < reach[part] * shrink * (1 - 1e-9) / unit
        shares = _shares(nearest[settled], cast[settled], labels, scores.shape[1])
        scores[part][settled] = shares
        left[part] = ~settled
    return left


def _least_stretch(before: Floats, after: Floats) -> float:
    """Least factor by which a squared distance changes between two scalings of the same table.

    0.0 if one is not the other column by column up to scale and shift (gaps filled otherwise).
    """
    if before is after or np.shares_memory(before, after):
        return 1.0
    low, spread = before.min(axis=0), np.ptp(before, axis=0)
    ratio = np.divide(np.ptp(after, axis=0), spread, out=np.ones_like(spread), where=spread > 0)
    rebuilt = after.min(axis=0) + (before - low) * ratio
    # column by column: one in large units must not hide what another does
    apart = np.abs(rebuilt - after).max(axis=0, initial=0.0)
    alike = bool((apart <= 1e-9 * np.ptp(after, axis=0) + 1e-15 * np.abs(after).max(axis=0)).all())
    return float((ratio**2).min(initial=1.0)) if alike else 0.0


class NearestNeighbours:
    """The same rule as a classifier with the usual methods, for one fit.

    Parameters
    ----------
    k : int
    """

    def __init__(self, k: int) -> None:
        self.k = k

    def fit(self, features: ArrayLike, labels: ArrayLike) -> "NearestNeighbours":
        """Remember the rows; `labels` are any comparable values."""
        self.features_ = np.asarray(features, dtype=np.float64)
        self.classes_, self.labels_ = np.unique(np.asarray(labels), return_inverse=True)
        return self

    def predict_proba(self, features: ArrayLike) -> Floats:
        """Share of votes for each class, shape (m, K)."""
        ones = np.ones(len(self.labels_), dtype=np.intp)
        return round_scores(
            np.asarray(features, dtype=np.float64),
            self.features_,
            self.labels_,
            ones,
            k=self.k,
            n_classes=len(self.classes_),
        )

    def predict(self, features: ArrayLike) -> NDArray[Any]:
        """The class with most votes, the first one on ties."""
        return np.asarray(self.classes_[self.predict_proba(features).argmax(axis=1)])

    def get_params(self, deep: bool = True) -> dict[str, int]:
        """Parameters, as pipelines ask for them."""
        return {"k": self.k}

    def set_params(self, **params: int) -> "NearestNeighbours":
        """Change parameters, as pipelines do."""
        for name, value in params.items():
            setattr(self, name, value)
        return self

    def __sklearn_tags__(self) -> Any:
        """What a pipeline asks of its last step."""
        from sklearn.utils import ClassifierTags, Tags, TargetTags

        return Tags(
            estimator_type="classifier",
            target_tags=TargetTags(required=True),
            classifier_tags=ClassifierTags(),
        )
