"""Measures of right and wrong, each once, for many rounds at once.

Raw material: confusion counts of shape (..., K, K) with true classes in rows, whole or weighted.
Leading axes (rounds) are kept. A value that cannot be computed (no case of a class) is nan.
What needs scores instead stands in `ranking` and `probabilities`.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.ranking import auc as auc
from evalcore.ranking import average_precision as average_precision
from evalcore.ranking import hand_till as hand_till
from evalcore.shares import Floats as Floats
from evalcore.shares import by_group, group_sums, quotient


def predicted_class(scores: Floats) -> NDArray[np.intp]:
    """The class with the highest score, the first one on ties, along the last axis."""
    return np.asarray(scores.argmax(axis=-1), dtype=np.intp)


def confusion(
    true: ArrayLike,
    predicted: ArrayLike,
    *,
    n_classes: int,
    groups: ArrayLike | None = None,
    n_groups: int = 1,
    weights: ArrayLike | None = None,
) -> Floats:
    """Confusion counts per group (round).

    Parameters
    ----------
    true, predicted : array_like of int, shape (T,)
        Class codes, 0 to `n_classes` - 1.
    groups : array_like of int, shape (T,), optional
        Round of each answer, 0 to `n_groups` - 1; all in one if left out.
    weights : array_like, shape (T,), optional
        How often each answer counts; once if left out.

    Returns
    -------
    ndarray, shape (n_groups, K, K)
        Rows: true class.

    Examples
    --------
    >>> confusion([0, 0, 1], [0, 1, 1], n_classes=2)[0].tolist()
    [[1.0, 1.0], [0.0, 1.0]]
    """
    true = np.asarray(true, dtype=np.intp)
    group, weight = by_group(len(true), groups=groups, weights=weights)
    cell = (group * n_classes + true) * n_classes + np.asarray(predicted, dtype=np.intp)
    size = n_groups * n_classes * n_classes
    return group_sums(weight, cell, size).reshape(n_groups, n_classes, n_classes)


def accuracy(counts: Floats) -> Floats:
    """Share right: trace over total; nan for an empty table.

    Examples
    --------
    >>> float(accuracy(np.array([[20.0, 5.0], [10.0, 15.0]])))
    0.7
    """
    right = np.trace(counts, axis1=-2, axis2=-1)
    # weights such as thirds add up differently in another order; all right must come out as 1
    return quotient(right, np.maximum(counts.sum(axis=(-2, -1)), right))


def recalls(counts: Floats) -> Floats:
    """Share right of each true class (sensitivity), shape (..., K); nan for an empty class.

    Examples
    --------
    >>> recalls(np.array([[20.0, 5.0], [10.0, 15.0]])).tolist()
    [0.8, 0.6]
    """
    return quotient(np.diagonal(counts, axis1=-2, axis2=-1), counts.sum(axis=-1))


def balanced_accuracy(counts: Floats) -> Floats:
    """Mean of the classes' shares right; nan if a class is empty.

    Examples
    --------
    >>> float(balanced_accuracy(np.array([[45.0, 15.0], [25.0, 15.0]])))
    0.5625
    """
    return np.asarray(recalls(counts).mean(axis=-1))


def specificities(counts: Floats) -> Floats:
    """Share of all other classes' cases that were not called this class, shape (..., K).

    For two classes this is the other class's share right, in reverse order. nan where no other
    class has a case.

    Examples
    --------
    >>> specificities(np.array([[231.0, 27.0], [32.0, 54.0]])).round(3).tolist()
    [0.628, 0.895]
    """
    true, answered = counts.sum(axis=-1), counts.sum(axis=-2)
    others = counts.sum(axis=(-2, -1))[..., None] - true
    wrongly_called = answered - np.diagonal(counts, axis1=-2, axis2=-1)
    return quotient(others - wrongly_called, others)


def precisions(counts: Floats) -> Floats:
    """Share right among the answers that name a class (positive predictive value), shape (..., K).

    It holds for the class shares of these cases; for other shares see
    `decisions.predictive_values`. nan for a class that was never answered.

    Examples
    --------
    >>> precisions(np.array([[20.0, 5.0], [10.0, 15.0]])).round(4).tolist()
    [0.6667, 0.75]
    """
    return quotient(np.diagonal(counts, axis1=-2, axis2=-1), counts.sum(axis=-2))


def f1(counts: Floats) -> Floats:
    """Harmonic mean of a class's share found and its precision, shape (..., K).

    2 x right / (cases of the class + answers that name it) (van Rijsbergen 1979). So a class that
    has cases but was never answered, or the reverse, gets 0; one with neither is undefined, nan.

    Examples
    --------
    >>> f1(np.array([[30.0, 0, 0], [5, 5, 0], [4, 1, 0]])).round(4).tolist()
    [0.8696, 0.625, 0.0]
    """
    both = counts.sum(axis=-1) + counts.sum(axis=-2)
    return quotient(2 * np.diagonal(counts, axis1=-2, axis2=-1), both)


def f1_macro(counts: Floats) -> Floats:
    """Mean of the classes' F1; nan if a class has neither cases nor answers.

    Examples
    --------
    >>> round(float(f1_macro(np.array([[20.0, 5.0], [10.0, 15.0]]))), 4)
    0.697
    """
    return np.asarray(f1(counts).mean(axis=-1))


def _beyond_chance(counts: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """n x right - sum of row total x column total; row totals, column totals, n."""
    true, answered = counts.sum(axis=-1), counts.sum(axis=-2)
    n = counts.sum(axis=(-2, -1))
    right = np.trace(counts, axis1=-2, axis2=-1)
    return n * right - (true * answered).sum(axis=-1), true, answered, n


def cohen_kappa(counts: Floats) -> Floats:
    """Agreement of answers and classes beyond chance: (observed - expected) / (1 - expected).

    Expected is the agreement of independent answers with the same totals (Cohen 1960). An answer
    that never changes gets 0. nan for an empty table, and where all cases are of one class and
    all were answered so: then chance alone agrees throughout.

    Parameters
    ----------
    counts : ndarray, shape (..., K, K)

    Returns
    -------
    ndarray, shape (...)
        At most 1; below 0 means less agreement than by chance.

    Examples
    --------
    >>> round(float(cohen_kappa(np.array([[20.0, 5.0], [10.0, 15.0]]))), 4)
    0.4
    """
    excess, true, answered, n = _beyond_chance(counts)
    return quotient(excess, n**2 - (true * answered).sum(axis=-1))


def matthews(counts: Floats) -> Floats:
    """Matthews correlation coefficient, for two or more classes.

    (n x right - sum of t_k a_k) / sqrt((n^2 - sum of t_k^2)(n^2 - sum of a_k^2)), t_k cases and
    a_k answers of class k (Matthews 1975; for more classes Gorodkin 2004, R_K). By convention 0
    where all answers, or all cases, are of one class: the ratio is then 0/0, even if all is
    right. nan for an empty table.

    Parameters
    ----------
    counts : ndarray, shape (..., K, K)

    Returns
    -------
    ndarray, shape (...)
        -1 to 1 for two classes; for more the lowest value depends on the table.

    Examples
    --------
    >>> matthews(np.array([[[6.0, 2.0], [1.0, 3.0]], [[90.0, 0.0], [10.0, 0.0]]])).round(3).tolist()
    [0.478, 0.0]
    """
    excess, true, answered, n = _beyond_chance(counts)
    # counted, not compared with n: weighted sums may differ in the last digit
    constant = ((true > 0).sum(axis=-1) == 1) | ((answered > 0).sum(axis=-1) == 1)
    spreads = [np.maximum(n**2 - (side**2).sum(axis=-1), 0) for side in (true, answered)]
    value = quotient(excess, np.sqrt(spreads[0]) * np.sqrt(spreads[1]))
    return np.where(constant, 0.0, value)


@dataclass(frozen=True)
class Measure:
    """A measure as users meet it.

    Attributes
    ----------
    key : str
    plain, trade : str
        The plain name with {units} for the user's noun, and the trade's name.
    from_confusion : callable or None
        None if scores are needed.
    per_class : bool
        Whether there is one value a class.
    """

    key: str
    plain: str
    trade: str
    from_confusion: Callable[[Floats], Floats] | None
    per_class: bool = False


MEASURES: dict[str, Measure] = {
    measure.key: measure
    for measure in (
        Measure("accuracy", "share of {units} right", "accuracy", accuracy),
        Measure(
            "balanced_accuracy",
            "mean of the classes’ shares right",
            "balanced accuracy",
            balanced_accuracy,
        ),
        Measure("sensitivity", "share of a class found", "sensitivity", recalls, per_class=True),
        Measure("auc", "how well the scores rank the {units}", "AUC", None),
    )
}

# values of a whole table of counts: estimated like the others, but without an interval, and no
# headline
FURTHER_MEASURES: dict[str, Measure] = {
    measure.key: measure
    for measure in (
        Measure(
            "precision",
            "right when it names a class",
            "positive predictive value",
            precisions,
            per_class=True,
        ),
        Measure("f1", "share found and right when named, in one", "F1", f1, per_class=True),
        Measure("f1_macro", "mean of the classes’ F1", "macro F1", f1_macro),
        Measure("kappa", "agreement beyond chance", "Cohen’s kappa", cohen_kappa),
        Measure("matthews", "correlation of answers and classes", "MCC", matthews),
    )
}

ALL_MEASURES: dict[str, Measure] = MEASURES | FURTHER_MEASURES
