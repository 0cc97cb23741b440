"""What is known beforehand about bootstrap bags, without drawing one: elementary probability."""

import math
from collections.abc import Sequence

import numpy as np

from evalcore.measures import Floats


def never_drawn(n: int) -> float:
    """Chance that a case is not in a bag of n draws from n: (1 - 1/n)^n, 1/e for large n.

    >>> round(never_drawn(10), 4)
    0.3487
    """
    return (1 - 1 / n) ** n


def expected_distinct_share(n: int) -> float:
    """Expected share of cases that are in a bag at least once: 1 - (1 - 1/n)^n."""
    return 1 - never_drawn(n)


def stratified_distinct_share(class_sizes: Sequence[int]) -> float:
    """The same where each class draws its own number of cases."""
    missing = sum(size * never_drawn(size) for size in class_sizes)
    return 1 - missing / sum(class_sizes)


def never_out_of_bag(n: int, rounds: int) -> float:
    """Chance that a case is in every one of some bags, so that it is never judged."""
    return expected_distinct_share(n) ** rounds


def sd_shrink(n: int) -> float:
    """How much a bootstrap standard deviation falls short: sqrt((n - 1)/n).

    A bag's draws have the variance of the sample with divisor n, not n - 1
    (Efron & Tibshirani 1993, chapter 5).
    """
    return math.sqrt((n - 1) / n)


def distinct_pmf(n: int) -> Floats:
    """Chance of 0, 1, ... n distinct cases in a bag of n draws, shape (n + 1,)."""
    chances = np.zeros(n + 1)
    chances[0] = 1.0
    seen = np.arange(n + 1)
    for _ in range(n):
        again = chances * seen / n
        again[1:] += chances[:-1] * (n - seen[:-1]) / n
        chances = again
    return chances
