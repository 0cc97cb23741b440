"""The bootstrap with no end of bags: exact standard errors, without drawing one."""

import math

import numpy as np
from numpy.typing import ArrayLike

from evalcore.bag_facts import sd_shrink
from evalcore.measures import Floats


def exact_mean_error(values: ArrayLike) -> float:
    """Standard error of the mean over all bags (Efron & Tibshirani 1993, chapter 5).

    sqrt((n - 1)/n) s/sqrt(n) with s the standard deviation on divisor n - 1; nan below two values.

    Examples
    --------
    Efron and Tibshirani's mice, treated:

    >>> round(exact_mean_error([94, 197, 16, 38, 99, 141, 23]), 2)
    23.36
    """
    x = np.asarray(values, dtype=np.float64)
    if len(x) < 2:
        return math.nan
    return float(x.std(ddof=1)) * sd_shrink(len(x)) / math.sqrt(len(x))


def exact_quantile_error(values: ArrayLike, *, share: float = 0.5) -> float:
    """Standard error of the median, or of another quantile, over all bags.

    From the exact joint distribution of two neighbouring order statistics of a bag (Maritz &
    Jarrett 1978 for the median; Efron & Tibshirani 1993, chapter 2, print its value for the mice).

    Parameters
    ----------
    values : array_like, shape (n,)
        At least two, else nan; ties are allowed. The work grows with n squared.
    share : float
        Which quantile, 0 to 1, interpolated as in `statistic_formulas.quantile`.

    Raises
    ------
    ValueError
        `share` outside 0 to 1.

    Examples
    --------
    >>> round(exact_quantile_error([94, 197, 16, 38, 99, 141, 23]), 2)
    37.83
    """
    if not 0 <= share <= 1:
        raise ValueError(f"`share` must be between 0 and 1; got {share}.")
    x = np.sort(np.asarray(values, dtype=np.float64))
    n = len(x)
    if n < 2 or np.isnan(x).any():
        return math.nan
    rank = (n - 1) * share
    below = min(math.floor(rank), n - 2)
    chances = neighbours_pmf(n, below + 1)
    between = x[:, None] + (rank - below) * (x[None, :] - x[:, None])
    centre = float((chances * between).sum())
    return math.sqrt(float((chances * (between - centre) ** 2).sum()))


def neighbours_pmf(n: int, k: int) -> Floats:
    """Chance that the k-th and next value of a bag are the i-th and j-th of the sample.

    For i < j, C(n, k) [(i/n)^k - ((i - 1)/n)^k] [((n - j + 1)/n)^(n - k) - ((n - j)/n)^(n - k)];
    for i = j what remains of the chance that the k-th is the i-th; 0 for i > j.

    Parameters
    ----------
    n : int
        Cases and draws, at least 2.
    k : int
        1 to n - 1, the lowest being 1.

    Returns
    -------
    ndarray, shape (n, n)

    Examples
    --------
    Two cases: both draws the lower, one of each, both the higher:

    >>> neighbours_pmf(2, 1).round(12).tolist()
    [[0.25, 0.5], [0.0, 0.25]]
    """
    from scipy.special import betainc, gammaln

    i = np.arange(1, n + 1)
    ways = gammaln(n + 1) - gammaln(k + 1) - gammaln(n - k + 1)
    # logarithms, because C(n, k) leaves the range of floats from n = 1030 on
    low = k * np.log(i / n) + np.log1p(-(((i - 1) / i) ** k))
    j = n - i + 1
    high = (n - k) * np.log(j / n) + np.log1p(-(((j - 1) / j) ** (n - k)))
    # below the diagonal the formula is no chance and may leave the range
    above = i[:, None] < i[None, :]
    apart = np.exp(np.where(above, ways + low[:, None] + high[None, :], -np.inf))
    kth = np.diff(betainc(k, n - k + 1, np.arange(n + 1) / n))
    return np.asarray(apart + np.diag(np.maximum(0.0, kth - apart.sum(axis=1))))
