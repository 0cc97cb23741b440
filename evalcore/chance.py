"""Whether an accuracy is more than chance: permuted labels, and the majority share."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

# scores are shares of counts: far above rounding, far below the step from one count to the next
SAME = 1e-12


def permutation_p(at_least_as_good: int, permutations: int) -> float:
    """Permutation p-value (k + 1)/(m + 1), never 0 (Phipson & Smyth 2010).

    Parameters
    ----------
    at_least_as_good : int
        k, permutations of the labels whose score is at least the observed one, 0 to m.
    permutations : int
        m, drawn at random, from 0. Without any, p is 1.

    Raises
    ------
    ValueError
        k is not between 0 and m.

    Examples
    --------
    >>> permutation_p(0, 99), permutation_p(49, 999)
    (0.01, 0.05)
    """
    if not 0 <= at_least_as_good <= permutations:
        raise ValueError(
            f"`at_least_as_good` must be between 0 and the {permutations} permutations; got "
            f"{at_least_as_good}."
        )
    return (at_least_as_good + 1) / (permutations + 1)


@dataclass(frozen=True)
class PermutationTest:
    """An observed score among those of permuted labels.

    Attributes
    ----------
    at_least_as_good : int
        Ties count.
    permutations : int
    p : float
        nan if the observed score is undefined.
    """

    at_least_as_good: int
    permutations: int
    p: float


def permutation_test(observed: float, scores: ArrayLike) -> PermutationTest:
    """How often permuted labels score at least as well (Phipson & Smyth 2010).

    Parameters
    ----------
    observed : float
        Higher is better. The same figure as the scores: same scheme, same measure, and the best
        of several candidates only against the best of them each time.
    scores : array_like, shape (m,)
        One per permutation of the labels over whole units. Ties count as at least as good, and so
        does an undefined score, because a p-value may err upwards only.

    Examples
    --------
    >>> permutation_test(0.8, [0.5, 0.8, 0.7])
    PermutationTest(at_least_as_good=1, permutations=3, p=0.5)
    """
    others = np.asarray(scores, dtype=np.float64)
    k = int(np.sum(~(others < observed - SAME)))
    p = math.nan if math.isnan(observed) else permutation_p(k, others.size)
    return PermutationTest(k, others.size, p)


@dataclass(frozen=True)
class MajorityTest:
    """Accuracy against the majority share.

    Attributes
    ----------
    accuracy : float
    majority_share : float
        Accuracy of always naming the largest class (the no-information rate).
    p : float
        One-sided; all nan without a case.
    """

    accuracy: float
    majority_share: float
    p: float


def majority_test(right: int, n: int, *, largest_class: int) -> MajorityTest:
    """One-sided exact binomial test of accuracy above the majority share.

    p = P(X >= right), X binomial with n trials and chance largest_class/n (Clopper & Pearson 1934
    inverts the same tail).

    Only for one answer per unit of one model not fitted to it. Not for counts summed over
    repeats or bags, where cases are not independent trials, and it takes the majority share as
    known. With cross-validated answers it leaves out the models' variance: use the permutation
    test there.

    Parameters
    ----------
    right : int
        Units answered right, 0 to n.
    n : int
    largest_class : int
        Units of the largest class among them, 0 to n.

    Raises
    ------
    ValueError
        A count is not between 0 and n.

    Examples
    --------
    >>> round(majority_test(16, 21, largest_class=12).p, 5)
    0.05841
    """
    from scipy.special import betainc

    for name, count in (("right", right), ("largest_class", largest_class)):
        if not 0 <= count <= n:
            raise ValueError(f"`{name}` must be between 0 and {n}; got {count}.")
    if n == 0:
        return MajorityTest(math.nan, math.nan, math.nan)
    share = largest_class / n
    p = float(betainc(right, n - right + 1, share)) if right else 1.0
    return MajorityTest(right / n, share, p)
