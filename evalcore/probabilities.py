"""How good forecast probabilities are, case by case: Brier score and log loss.

Forecasts of shape (T,) are the probability of the positive class, with labels 0 and 1; forecasts
of shape (T, K) give each class its own. A value that cannot be computed is nan.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from evalcore.errors import EvalError
from evalcore.shares import Floats, by_group, group_means, group_sums, quotient

#: Nearest to 0 and 1 that a forecast comes in the log loss: a certain forecast that turns out
#: wrong then costs 36.04, not infinity (the convention of scikit-learn).
CLIP = float(np.finfo(np.float64).eps)


def checked(forecasts: ArrayLike) -> Floats:
    """Forecasts as an array.

    Raises
    ------
    EvalError
        One of them is not within 0 to 1 (or is nan).

    Examples
    --------
    >>> checked([0, 0.25, 1]).tolist()
    [0.0, 0.25, 1.0]
    """
    given = np.asarray(forecasts, dtype=np.float64)
    outside = given[~((given >= 0) & (given <= 1))]
    if outside.size:
        raise EvalError(f"`forecasts` must be probabilities from 0 to 1; got {outside[0]}.")
    return given


def brier(
    labels: ArrayLike,
    forecasts: ArrayLike,
    *,
    groups: ArrayLike | None = None,
    n_groups: int = 1,
    weights: ArrayLike | None = None,
) -> Floats:
    """Brier score per group (round): mean squared distance of forecasts and what came; low is good.

    With one forecast a case, the mean of (f - y)^2, 0 to 1. With a forecast for each class, the
    mean of its sum over classes, 0 to 2 (Brier 1950): for two classes twice the former.

    Parameters
    ----------
    labels : array_like of int, shape (T,)
        0 or 1, or class codes.
    forecasts : array_like, shape (T,) or (T, K)
    groups, n_groups, weights
        As in `measures.auc`.

    Returns
    -------
    ndarray, shape (n_groups,)
        nan for an empty group.

    Raises
    ------
    EvalError
        A forecast is not within 0 to 1.

    Examples
    --------
    >>> brier([0, 1, 1, 0], [0.1, 0.9, 0.8, 0.3]).round(4).tolist()
    [0.0375]
    """
    f, label = checked(forecasts), np.asarray(labels, dtype=np.intp)
    if f.ndim == 1:
        distance = (f - label) ** 2
    else:
        distance = ((f - np.eye(f.shape[1])[label]) ** 2).sum(axis=1)
    return group_means(distance, groups=groups, n_groups=n_groups, weights=weights)


def log_loss(
    labels: ArrayLike,
    forecasts: ArrayLike,
    *,
    groups: ArrayLike | None = None,
    n_groups: int = 1,
    weights: ArrayLike | None = None,
) -> Floats:
    """Mean of -log of the probability given to the class that came, per group (round).

    Natural logarithm; low is good (Good 1952). Forecasts are first moved to within `CLIP` of 0
    and 1, about 2.2e-16.

    Parameters
    ----------
    labels, forecasts, groups, n_groups, weights
        As in `brier`.

    Returns
    -------
    ndarray, shape (n_groups,)
        nan for an empty group; at most 36.04.

    Raises
    ------
    EvalError
        A forecast is not within 0 to 1.

    Examples
    --------
    >>> log_loss([1, 0, 0, 1], [0.9, 0.1, 0.2, 0.65]).round(5).tolist()
    [0.21616]
    """
    f, label = checked(forecasts), np.asarray(labels, dtype=np.intp)
    given = np.where(label == 1, f, 1 - f) if f.ndim == 1 else f[np.arange(len(f)), label]
    loss = -np.log(np.clip(given, CLIP, 1 - CLIP))
    return group_means(loss, groups=groups, n_groups=n_groups, weights=weights)


@dataclass(frozen=True)
class BrierParts:
    """The Brier score and what it is made of: brier = reliability - resolution + uncertainty.

    Attributes
    ----------
    brier : float
    reliability : float
        How far forecasts are from the shares that came; 0 is best.
    resolution : float
        How far those shares are from the share of positives; high is good.
    uncertainty : float
        Share of positives x share of negatives: the score of a forecast that says just this share.
    skill : float
        1 - brier / uncertainty; nan if all cases are of one class.
    """

    brier: float
    reliability: float
    resolution: float
    uncertainty: float
    skill: float


def brier_decomposition(
    positive: ArrayLike, forecasts: ArrayLike, *, weights: ArrayLike | None = None
) -> BrierParts:
    """Murphy's parts of the Brier score, with equal forecasts as groups (Murphy 1973).

    With n_g cases of forecast f_g of which the share o_g is positive, and o the share of all:
    reliability = sum n_g (f_g - o_g)^2 / n, resolution = sum n_g (o_g - o)^2 / n,
    uncertainty = o (1 - o). Where nearly every forecast is unlike the others, groups are single
    cases and the parts say little.

    Parameters
    ----------
    positive : array_like of bool, shape (T,)
    forecasts : array_like, shape (T,)
    weights : array_like, shape (T,), optional
        How often each case counts; once if left out.

    Returns
    -------
    BrierParts
        nan throughout where there is no case.

    Raises
    ------
    EvalError
        A forecast is not within 0 to 1.

    Examples
    --------
    >>> parts = brier_decomposition([1, 0, 0, 1], [0.4, 0.4, 0.1, 0.9])
    >>> [round(part, 3) for part in (parts.reliability, parts.resolution, parts.uncertainty)]
    [0.01, 0.125, 0.25]
    """
    f, y = checked(forecasts), np.asarray(positive, dtype=bool)
    _, weight = by_group(len(f), groups=None, weights=weights)
    score = float(brier(y, f, weights=weight)[0])
    distinct, place = np.unique(f, return_inverse=True)
    size = group_sums(weight, place)
    came = quotient(group_sums(weight * y, place), size)
    base = float(group_means(y.astype(np.float64), weights=weight)[0])
    counted = size > 0
    parts = [
        float(group_means(square[counted], weights=size[counted])[0])
        for square in ((distinct - came) ** 2, (came - base) ** 2)
    ]
    uncertainty = base * (1 - base)
    skill = 1 - float(quotient(score, uncertainty))
    return BrierParts(score, parts[0], parts[1], uncertainty, skill)
