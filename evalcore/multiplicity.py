"""p-values of several tests, adjusted for there being several."""

from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike

from evalcore.measures import Floats


def holm(p: ArrayLike) -> Floats:
    """Holm's adjusted p-values (Holm 1979): the k-th smallest times m - k + 1, never decreasing.

    At most alpha of families contain a false rejection, whatever the dependence.

    Parameters
    ----------
    p : array_like, shape (m,)
        nan stays nan and does not count towards m. May be empty.

    Examples
    --------
    >>> holm([0.01, 0.04, 0.03, 0.005]).tolist()
    [0.03, 0.06, 0.06, 0.02]
    """
    return _adjusted(p, lambda sorted_p, m: np.maximum.accumulate(sorted_p * np.arange(m, 0, -1)))


def bonferroni(p: ArrayLike) -> Floats:
    """Bonferroni's adjusted p-values (Dunn 1961): each times m. Otherwise as `holm`.

    >>> bonferroni([0.01, 0.6]).tolist()
    [0.02, 1.0]
    """
    return _adjusted(p, lambda sorted_p, m: sorted_p * m)


def benjamini_hochberg(p: ArrayLike) -> Floats:
    """Benjamini & Hochberg's adjusted p-values (1995): the k-th smallest times m/k, from the top.

    Holds the expected share of false ones among all rejections, a weaker promise than `holm`.

    >>> benjamini_hochberg([0.01, 0.04, 0.03, 0.005]).tolist()
    [0.02, 0.04, 0.04, 0.02]
    """

    def steps(sorted_p: Floats, m: int) -> Floats:
        return np.minimum.accumulate((sorted_p * m / np.arange(1, m + 1))[::-1])[::-1]

    return _adjusted(p, steps)


def _adjusted(p: ArrayLike, steps: Callable[[Floats, int], Floats]) -> Floats:
    values = np.array(p, dtype=np.float64)
    known = np.flatnonzero(~np.isnan(values))
    if ((values[known] < 0) | (values[known] > 1)).any():
        raise ValueError(f"p-values must lie between 0 and 1; got {values[known].tolist()}.")
    order = known[np.argsort(values[known], kind="stable")]
    values[order] = np.minimum(1.0, steps(values[order], len(order)))
    return values
