"""How many cases it takes to show a limit: exact binomial counts."""

from evalcore.intervals import clopper_pearson


def lower_bound(right: float, n: float, *, confidence: float = 0.95) -> float:
    """Exact one-sided lower bound of a share (Clopper & Pearson 1934).

    >>> round(lower_bound(59, 59), 4)
    0.9505
    """
    return clopper_pearson(right, n, level=2 * confidence - 1).low


def upper_bound(right: float, n: float, *, confidence: float = 0.95) -> float:
    """Exact one-sided upper bound of a share."""
    return clopper_pearson(right, n, level=2 * confidence - 1).high


def cases_to_show(least: float, *, misses: int = 0, confidence: float = 0.95) -> int:
    """Smallest number of cases that shows a share of at least `least` with some misses.

    Parameters
    ----------
    least : float
        Limit, strictly between 0 and 1.
    misses : int
        Wrong answers allowed, from 0.
    confidence : float
        One-sided.

    Examples
    --------
    >>> [cases_to_show(0.9, misses=misses) for misses in (0, 1, 2, 3, 5)]
    [29, 46, 61, 76, 103]
    """
    low, high = misses + 1, misses + 2
    while lower_bound(high - misses, high, confidence=confidence) < least:
        low, high = high, 2 * high
    while low < high:
        middle = (low + high) // 2
        if lower_bound(middle - misses, middle, confidence=confidence) >= least:
            high = middle
        else:
            low = middle + 1
    return low
