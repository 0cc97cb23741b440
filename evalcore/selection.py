"""What is left of the best of several candidates: the winner's correction.

The best of several is partly the luckiest. Its own estimate is too high; how much so can be had
from the same held-out answers, without another fit.
"""

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.measures import Floats

Primary = Literal["accuracy", "balanced_accuracy"]
Counts = NDArray[np.intp]
SAME = 1e-9  # means this close are ties: sums of shares differ by rounding alone


@dataclass(frozen=True, eq=False)
class Shares:
    """One candidate's shares right, or its optimism in each.

    Attributes
    ----------
    accuracy : float
    balanced_accuracy : float
        Mean of `recalls`.
    recalls : ndarray, shape (K,)
        Of each class.
    """

    accuracy: float
    balanced_accuracy: float
    recalls: Floats


@dataclass(frozen=True, eq=False)
class WinnersCorrection:
    """The best candidate's estimate before and after the correction.

    Attributes
    ----------
    winner : int
        Column of the best candidate on all units.
    naive, corrected, optimism : Shares
        Of the winner; of choosing the winner, which is what a new case will meet; the first less
        the second. `corrected` is nan if no resample was used.
    wins : ndarray of int, shape (C,)
        In how many used resamples each candidate was the winner.
    chosen : ndarray of int, shape (B,)
        Winner of each resample, -1 where it was skipped.
    outside : ndarray, shape (B,)
        The primary measure of that winner on the units not drawn, nan where skipped.
    skipped : int
        Resamples that lacked a class among the units drawn or those not drawn.
    """

    winner: int
    naive: Shares
    corrected: Shares
    optimism: Shares
    wins: Counts
    chosen: Counts
    outside: Floats
    skipped: int


def stratified_bags(labels: ArrayLike, *, rng: np.random.Generator, resamples: int = 500) -> Counts:
    """How often each unit is drawn, class by class with repeats, shape (B, n).

    Parameters
    ----------
    labels : array_like of int, shape (n,)
    rng : Generator
    resamples : int
        B.
    """
    classes = np.asarray(labels, dtype=np.intp)
    bags: Counts = np.zeros((resamples, len(classes)), dtype=np.intp)
    for k in np.unique(classes):
        members = np.flatnonzero(classes == k)
        even = np.full(len(members), 1 / len(members))
        bags[:, members] = rng.multinomial(len(members), even, size=resamples)
    return bags


def winners_correction(
    labels: ArrayLike,
    shares: ArrayLike,
    bags: ArrayLike,
    *,
    primary: Primary = "accuracy",
    n_classes: int = 0,
) -> WinnersCorrection:
    """Bootstrap bias-corrected estimate of the best of several candidates.

    Tsamardinos, Greasidou & Borboudakis 2018: in each resample of the units the winner is chosen
    on the units drawn, repeats counted, and judged on those not drawn; the mean over resamples is
    what choosing the best is worth. Stratifying the resamples by class is our choice.

    Parameters
    ----------
    labels : array_like of int, shape (n,)
        Class of each unit, 0 to K - 1.
    shares : array_like, shape (n, C)
        Share of each unit's held-out answers that were right, by candidate. Units with nan (never
        held out) are left out. For a loss give its negative: the figures are then negatives too.
    bags : array_like of int, shape (B, n)
        How often each unit is drawn, e.g. `stratified_bags`. A resample is skipped if a class is
        missing among the units drawn or those not drawn; a class of one unit skips all.
    primary : {"accuracy", "balanced_accuracy"}
        The measure that names the winner; the first candidate on ties.
    n_classes : int
        K; as many as `labels` show if 0. A class without a unit that was held out gives nan.

    Raises
    ------
    ValueError
        Shapes do not agree, or there is no candidate or no unit.

    Examples
    --------
    >>> shares = [[1, 0], [0, 1], [1, 1], [0, 0]]
    >>> found = winners_correction([0, 0, 0, 0], shares, [[2, 0, 1, 1], [1, 2, 0, 1]])
    >>> found.naive.accuracy, found.corrected.accuracy, found.chosen.tolist()
    (0.5, 0.5, [0, 1])
    """
    right, drawn = np.asarray(shares, dtype=np.float64), np.asarray(bags, dtype=np.intp)
    classes = np.asarray(labels, dtype=np.intp)
    _check(classes, right, drawn)
    known = ~np.isnan(right).any(axis=1)
    right, drawn, classes = right[known], drawn[:, known], classes[known]
    n_classes = n_classes or int(classes.max()) + 1
    on_all = _means(np.ones((1, len(classes)), dtype=np.intp), right, classes, n_classes)
    winner = int(_first_best(on_all[primary])[0])
    naive = _shares({name: values[:, winner] for name, values in on_all.items()})
    inside = _means(drawn, right, classes, n_classes)
    outside = _means((drawn == 0).astype(np.intp), right, classes, n_classes)
    # balanced accuracy is nan exactly where a class is missing
    used = ~np.isnan(inside["balanced_accuracy"] + outside["balanced_accuracy"]).any(axis=1)
    best = _first_best(inside[primary][used])
    picked = {name: values[used][np.arange(len(best)), best] for name, values in outside.items()}
    corrected = _shares(picked)
    chosen: Counts = np.full(len(drawn), -1, dtype=np.intp)
    chosen[used] = best
    judged: Floats = np.full(len(drawn), np.nan)
    judged[used] = picked[primary]
    optimism = Shares(
        naive.accuracy - corrected.accuracy,
        naive.balanced_accuracy - corrected.balanced_accuracy,
        naive.recalls - corrected.recalls,
    )
    wins = np.bincount(best, minlength=right.shape[1]).astype(np.intp)
    return WinnersCorrection(
        winner, naive, corrected, optimism, wins, chosen, judged, int((~used).sum())
    )


def _check(classes: Counts, right: Floats, drawn: Counts) -> None:
    if right.ndim != 2 or drawn.ndim != 2 or not len(classes) == len(right) == drawn.shape[1]:
        raise ValueError(
            "`labels` (n,), `shares` (n, C) and `bags` (B, n) must agree in n; got "
            f"{classes.shape}, {right.shape} and {drawn.shape}."
        )
    if right.shape[1] == 0 or np.isnan(right).any(axis=1).all():
        raise ValueError("There must be a candidate, and a unit that all candidates answered.")


def _means(weights: Counts, right: Floats, classes: Counts, n_classes: int) -> dict[str, Floats]:
    """Weighted means of every candidate: accuracy and balanced (B, C), recalls (B, C, K)."""
    sums = np.empty((len(weights), right.shape[1], n_classes))
    sizes = np.empty((len(weights), 1, n_classes))
    for k in range(n_classes):
        members = classes == k
        sums[:, :, k] = weights[:, members].astype(np.float64) @ right[members]
        sizes[:, 0, k] = weights[:, members].sum(axis=1)
    total = np.broadcast_to(sizes.sum(axis=2), sums.shape[:2])
    recalls = np.divide(sums, sizes, out=np.full_like(sums, np.nan), where=sizes > 0)
    everything = sums.sum(axis=2)
    accuracy = np.divide(everything, total, out=np.full_like(everything, np.nan), where=total > 0)
    return {"accuracy": accuracy, "balanced_accuracy": recalls.mean(axis=2), "recalls": recalls}


def _first_best(values: Floats) -> Counts:
    """The first column within rounding of the best of each row."""
    best = values.max(axis=1, keepdims=True)
    return np.asarray((values >= best - SAME).argmax(axis=1), dtype=np.intp)


def _shares(values: dict[str, Floats]) -> Shares:
    """Means over resamples; nan without any."""
    if not len(values["accuracy"]):
        return Shares(np.nan, np.nan, np.full(values["recalls"].shape[-1], np.nan))
    return Shares(
        float(values["accuracy"].mean()),
        float(values["balanced_accuracy"].mean()),
        values["recalls"].mean(axis=0),
    )


@dataclass(frozen=True)
class FoldCorrection:
    """The best candidate's error over folds before and after the correction.

    Attributes
    ----------
    winner : int
    naive, bias, corrected : float
        `corrected` = `naive` + `bias`.
    """

    winner: int
    naive: float
    bias: float
    corrected: float


def fold_correction(fold_errors: ArrayLike) -> FoldCorrection:
    """The winner's bias from the folds' own winners (Tibshirani & Tibshirani 2009).

    bias = mean over folds of (the winner's error - the least error in that fold). Cruder than
    `winners_correction`: small folds make it too large.

    Parameters
    ----------
    fold_errors : array_like, shape (J, C)
        Error of each candidate in each fold, no nan; J and C at least 1. The first candidate wins
        ties.

    Raises
    ------
    ValueError
        It is empty or not a matrix.

    Examples
    --------
    >>> found = fold_correction([[0.2, 0.3], [0.4, 0.1]])
    >>> found.winner, round(found.naive, 3), round(found.bias, 3), round(found.corrected, 3)
    (1, 0.2, 0.05, 0.25)
    """
    errors = np.asarray(fold_errors, dtype=np.float64)
    if errors.ndim != 2 or errors.size == 0:
        raise ValueError(f"`fold_errors` must have shape (J, C), both from 1; got {errors.shape}.")
    means = errors.mean(axis=0)
    winner = int(_first_best(-means[None, :])[0])
    bias = float((errors[:, winner] - errors.min(axis=1)).mean())
    return FoldCorrection(winner, float(means[winner]), bias, float(means[winner]) + bias)


def expected_best(candidates: int, n: int, *, chance: float = 0.5) -> float:
    """Expected accuracy of the best of several candidates that only guess, each on its own.

    The largest of C independent binomial counts over n: sum over k < n of 1 - P(X <= k)^C, over n
    (elementary). Candidates that resemble each other reach less.

    Parameters
    ----------
    candidates : int
        C, from 1.
    n : int
        Units, from 1.
    chance : float
        Chance of a right guess, 0 to 1.

    Raises
    ------
    ValueError
        One of them is out of these bounds.

    Examples
    --------
    >>> round(expected_best(10, 50), 4), expected_best(1, 50, chance=0.5)
    (0.6084, 0.5)
    """
    from scipy.special import bdtr

    if candidates < 1 or n < 1 or not 0 <= chance <= 1:
        raise ValueError(
            "`candidates` and `n` must be 1 or more and `chance` between 0 and 1; got "
            f"{candidates}, {n} and {chance}."
        )
    at_most = np.asarray(bdtr(np.arange(n), n, chance), dtype=np.float64)
    return float((1 - at_most**candidates).sum() / n)
