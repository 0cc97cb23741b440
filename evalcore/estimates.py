"""Estimates of what a candidate will do on cases not seen, from labels, rounds and answers.

Accuracies (shares right), not errors, unless a name says error.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.measures import Floats, confusion
from evalcore.rounds import Rounds

WEIGHT_OUT = 0.632  # 1 - 1/e, the chance that a case is in a large bag (Efron 1983 prints 0.632)
WEIGHT_IN = 0.368
MEMORISES = 0.999  # an apparent share right from which a candidate counts as memorising


def mean_correct(correct: ArrayLike, rounds: Rounds) -> Floats:
    """Share of each case's held-out answers that were right.

    Parameters
    ----------
    correct : array_like of bool, shape (T,)
        In the order of `rounds.pairs`.

    Returns
    -------
    ndarray, shape (n,)
        nan for a case that was never held out.
    """
    right = np.bincount(
        rounds.pairs[1], np.asarray(correct, dtype=np.float64), minlength=rounds.n_cases
    )
    times = rounds.times_tested
    shares: Floats = np.full(rounds.n_cases, np.nan)
    return np.divide(right, times, out=shares, where=times > 0)


def by_case(correct: ArrayLike, rounds: Rounds) -> float:
    """Held-out share right, every case weighing the same.

    Under a bootstrap this is the leave-one-out bootstrap: cases never out-of-bag are left out.
    nan if no case was held out.
    """
    shares = mean_correct(correct, rounds)
    return float(np.mean(shares[~np.isnan(shares)])) if rounds.pairs[0].size else float("nan")


def recalls_by_case(
    labels: NDArray[np.intp], rounds: Rounds, correct: ArrayLike, *, n_classes: int
) -> Floats:
    """Held-out share right of each class, shape (K,), every case of a class weighing the same."""
    shares = mean_correct(correct, rounds)
    known = ~np.isnan(shares)
    right = np.bincount(labels[known], shares[known], minlength=n_classes)
    number = np.bincount(labels[known], minlength=n_classes)
    recalls: Floats = np.full(n_classes, np.nan)
    return np.divide(right, number, out=recalls, where=number > 0)


def pooled_confusion(
    labels: NDArray[np.intp], rounds: Rounds, predicted: ArrayLike, *, n_classes: int
) -> Floats:
    """Held-out confusion counts in which every case weighs one, spread over its answers.

    Parameters
    ----------
    labels : ndarray of int, shape (n,)
    rounds : Rounds
    predicted : array_like of int, shape (T,)
        Answered classes in the order of `rounds.pairs`.

    Returns
    -------
    ndarray, shape (K, K)
        Rows: true class. Means over a case's answers, so not whole numbers.
    """
    case_at = rounds.pairs[1]
    weights = 1 / rounds.times_tested[case_at]
    counts = confusion(labels[case_at], predicted, n_classes=n_classes, weights=weights)
    return np.asarray(counts[0])


def mean_of_rounds(values: ArrayLike) -> tuple[float, int]:
    """Mean of a measure over the rounds in which it is defined, and how many lack it."""
    array = np.asarray(values, dtype=np.float64)
    undefined = int(np.isnan(array).sum())
    mean = float(np.nanmean(array)) if undefined < array.size else float("nan")
    return mean, undefined


def per_round_632(held_out: ArrayLike, in_bag: ArrayLike) -> Floats:
    """0.632 x out-of-bag + 0.368 x in-bag of each round, shape (R,); nan where either is."""
    return WEIGHT_OUT * np.asarray(held_out, dtype=np.float64) + WEIGHT_IN * np.asarray(
        in_bag, dtype=np.float64
    )


def point_632(apparent: float, out_of_bag: float) -> float:
    """The .632 estimate (Efron 1983): 0.368 x apparent + 0.632 x out-of-bag by case.

    Linear, so the same for shares right and for errors.
    """
    return WEIGHT_IN * apparent + WEIGHT_OUT * out_of_bag


def out_of_bag_or_632_plus(apparent: float, out_of_bag: float, plus: float) -> float:
    """Out-of-bag where a candidate is right on everything it was fitted to, else .632+.

    Own rule: .632+ is too high for candidates that memorise. "Right on everything"
    means apparent >= 0.999.
    """
    return out_of_bag if apparent >= MEMORISES else plus


@dataclass(frozen=True)
class Plus632:
    """The .632+ estimate and its parts, all as shares right.

    Attributes
    ----------
    value : float
    overfitting : float
        Relative overfitting rate R, 0 to 1.
    weight : float
        Weight of the out-of-bag part, 0.632 to 1.
    """

    value: float
    overfitting: float
    weight: float


def point_632_plus(apparent: float, out_of_bag: float, *, no_information: float) -> Plus632:
    """The .632+ estimate (Efron & Tibshirani 1997), in its clipped form.

    With errors a = 1 - apparent, o = 1 - out_of_bag, g = 1 - no_information:
    o' = min(o, g); R = (o' - a) / (g - a) if o' > a and g > a, else 0;
    w = 0.632 / (1 - 0.368 R); error = (1 - w) a + w o'. Clipped means that o' is used in the
    sum and that R stays within 0 and 1; unclipped forms differ if out-of-bag is worse than no
    information, or better than apparent.

    Parameters
    ----------
    apparent, out_of_bag : float
        Shares right on the cases fitted to, and out-of-bag by case.
    no_information : float
        Share right if answers and labels were unrelated, see `no_information`.

    Examples
    --------
    >>> point_632_plus(1.0, 0.5, no_information=0.5).value
    0.5
    """
    a, gamma = 1 - apparent, 1 - no_information
    o = min(1 - out_of_bag, gamma)
    overfitting = (o - a) / (gamma - a) if o > a and gamma > a else 0.0
    weight = WEIGHT_OUT / (1 - WEIGHT_IN * overfitting)
    return Plus632(1 - ((1 - weight) * a + weight * o), overfitting, weight)


def no_information(counts: Floats) -> float:
    """Share right if answers kept their shares but had nothing to do with the labels.

    sum over classes of (share of labels) x (share of answers), from the confusion counts of the
    fit on all cases, shape (K, K) (Efron & Tibshirani 1997). Not the majority share.
    """
    total = counts.sum()
    return float((counts.sum(axis=1) / total) @ (counts.sum(axis=0) / total))
