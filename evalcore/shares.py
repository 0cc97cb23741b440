"""A part over a whole that may be empty, and weighted means by group (round)."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]


def quotient(part: ArrayLike, whole: ArrayLike) -> Floats:
    """Part over whole, nan where the whole is not above 0.

    Parameters
    ----------
    part, whole : array_like
        Of shapes that broadcast.

    Examples
    --------
    >>> quotient([1.0, 0.0], [4.0, 0.0]).tolist()
    [0.25, nan]
    """
    below = np.asarray(whole, dtype=np.float64)
    shape = np.broadcast_shapes(np.shape(part), below.shape)
    found: Floats = np.full(shape, np.nan)
    return np.divide(part, below, out=found, where=below > 0)


def by_group(
    n: int, *, groups: ArrayLike | None, weights: ArrayLike | None
) -> tuple[NDArray[np.intp], Floats]:
    """Group and weight of each of n answers: all in group 0, each counting once, if left out.

    Examples
    --------
    >>> [given.tolist() for given in by_group(2, groups=None, weights=[3, 1])]
    [[0, 0], [3.0, 1.0]]
    """
    group = np.zeros(n, dtype=np.intp) if groups is None else np.asarray(groups, dtype=np.intp)
    weight = np.ones(n) if weights is None else np.asarray(weights, dtype=np.float64)
    return group, weight


def group_sums(values: ArrayLike, group: NDArray[np.intp], n_groups: int = 0) -> Floats:
    """Sum of the values of each group, 0 for an empty one; groups up to the last if no number.

    Examples
    --------
    >>> group_sums([0.5, 1.5, 2.0], np.array([0, 0, 2])).tolist()
    [2.0, 0.0, 2.0]
    """
    return np.bincount(group, values, minlength=n_groups).astype(np.float64)


def group_means(
    values: Floats,
    *,
    groups: ArrayLike | None = None,
    n_groups: int = 1,
    weights: ArrayLike | None = None,
) -> Floats:
    """Weighted mean of the values of each group.

    Parameters
    ----------
    values : ndarray, shape (T,)
    groups : array_like of int, shape (T,), optional
        0 to `n_groups` - 1; all in one if left out.
    weights : array_like, shape (T,), optional
        How often each value counts; once if left out.

    Returns
    -------
    ndarray, shape (n_groups,)
        nan for a group without any weight.

    Examples
    --------
    >>> group_means(np.array([1.0, 2.0, 5.0]), groups=[0, 0, 2], n_groups=3).tolist()
    [1.5, nan, 5.0]
    """
    group, weight = by_group(len(values), groups=groups, weights=weights)
    total = group_sums(weight, group, n_groups)
    return quotient(group_sums(weight * values, group, n_groups), total)
