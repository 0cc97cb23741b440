"""Whether forecasts mean what they say: of cases forecast at 0.8, do 0.8 come?

A logistic line through forecasts and what came, and the error over bins of forecasts. A value
that cannot be computed is nan.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.errors import EvalError
from evalcore.probabilities import checked
from evalcore.shares import Floats, by_group, group_means, group_sums, quotient


@dataclass(frozen=True)
class CalibrationLine:
    """How forecasts would have to be turned to fit what came.

    Attributes
    ----------
    intercept, slope : float
        Of logit P(positive) = intercept + slope x logit(forecast); 0 and 1 are best. A slope
        below 1 means forecasts too near 0 and 1.
    in_the_large : float
        The intercept with the slope held at 1; below 0 means forecasts too high on the whole.
    observed_over_expected : float
        Positives over the sum of forecasts.
    """

    intercept: float
    slope: float
    in_the_large: float
    observed_over_expected: float


def calibration_line(
    positive: ArrayLike, forecasts: ArrayLike, *, weights: ArrayLike | None = None
) -> CalibrationLine:
    """Intercept and slope of the logistic recalibration of forecasts (Cox 1958).

    By maximum likelihood. Undefined, nan: intercept and slope where some forecast separates the
    classes (at least every positive on one side of it, every negative on the other, it included)
    or all forecasts are equal, since no finite line is the most likely then; `in_the_large` where
    a class has no case; these three where a forecast is exactly 0 or 1, whose logit is infinite;
    `observed_over_expected` where the forecasts add up to 0.

    Parameters
    ----------
    positive, forecasts, weights
        As in `probabilities.brier_decomposition`.

    Returns
    -------
    CalibrationLine

    Raises
    ------
    EvalError
        A forecast is not within 0 to 1.

    Examples
    --------
    >>> line = calibration_line([0, 0, 0, 1, 0, 1, 1, 1], [0.2] * 4 + [0.8] * 4)
    >>> round(line.slope, 3), round(line.observed_over_expected, 3)
    (0.792, 1.0)
    """
    f, y = checked(forecasts), np.asarray(positive, dtype=bool)
    _, weight = by_group(len(f), groups=None, weights=weights)
    ratio = float(quotient((weight * y).sum(), (weight * f).sum()))
    # a case that does not count must not decide whether the classes are separated
    counts = weight > 0
    f, y, weight = f[counts], y[counts], weight[counts]
    if y.all() or not y.any() or not ((f > 0) & (f < 1)).all():
        return CalibrationLine(math.nan, math.nan, math.nan, ratio)
    logit = np.log(f) - np.log1p(-f)
    one = np.ones((len(f), 1))
    large = float(_logistic(one, y, offset=logit, weights=weight)[0])
    if not _overlap(logit[y], logit[~y]):
        return CalibrationLine(math.nan, math.nan, large, ratio)
    # standardised, so that forecasts close together do not spoil the equations
    centre = float(np.average(logit, weights=weight))
    scale = float(np.sqrt(np.average((logit - centre) ** 2, weights=weight)))
    design = np.column_stack([one, (logit - centre) / scale])
    level, rise = _logistic(design, y, offset=np.zeros(len(f)), weights=weight)
    slope = float(rise) / scale
    return CalibrationLine(float(level) - slope * centre, slope, large, ratio)


def _overlap(a: Floats, b: Floats) -> bool:
    """Whether no value lies between two sets: then a logistic line exists (Albert & Anderson)."""
    return bool(a.max() > b.min() and b.max() > a.min())


def _logistic(
    design: Floats, positive: NDArray[np.bool_], *, offset: Floats, weights: Floats
) -> Floats:
    """Maximum-likelihood coefficients of a logistic model, by Newton's method; nan if it fails.

    The step is shortened to log(1 + d) / d, d the largest change of a log odds it would make:
    with that it cannot overshoot (Sun & Tran-Dinh 2019), and near the end d is small and the
    step whole.
    """
    from scipy.special import expit

    found = np.zeros(design.shape[1])
    for _ in range(1000):  # a few for usual forecasts, many steps of about 1 for far-out ones
        odds = offset + design @ found
        up, down = expit(odds), expit(-odds)
        # positive - up in two parts: whole answers cancel exactly, small tails keep their digits
        above = odds > 0
        whole = positive.astype(np.float64) - above
        tail = np.where(above, down, -up)
        gradient = design.T @ (weights * whole) + design.T @ (weights * tail)
        curvature = (design.T * (weights * up * down)) @ design
        try:
            step = np.linalg.solve(curvature, gradient)
        except np.linalg.LinAlgError:
            break
        change = float(np.abs(design @ step).max())
        if change < 1e-9:  # the error left over is about its square
            return np.asarray(found + step)
        found = found + step * (math.log1p(change) / change)
    return np.full(design.shape[1], np.nan)


@dataclass(frozen=True)
class CalibrationBin:
    """Forecasts of like height and what came of them.

    Attributes
    ----------
    number : int
        From 0, the lowest.
    count : float
        Cases (or their weight).
    forecast, share : float
        Mean forecast, and share that came.
    """

    number: int
    count: float
    forecast: float
    share: float


@dataclass(frozen=True)
class CalibrationError:
    """How far forecasts are from what came, over bins of forecasts.

    Attributes
    ----------
    expected, maximum, root_mean_square : float
        Of |share - mean forecast|: mean by cases (ECE), largest bin (MCE), root of the mean
        square by cases (RMSCE). nan without cases.
    bins : tuple of CalibrationBin
        Those that hold cases.
    """

    expected: float
    maximum: float
    root_mean_square: float
    bins: tuple[CalibrationBin, ...]


def calibration_error(
    labels: ArrayLike, forecasts: ArrayLike, *, bins: int, weights: ArrayLike | None = None
) -> CalibrationError:
    """Calibration error over bins of equal width (Naeini et al. 2015; Guo et al. 2017).

    One forecast a case: its bin is that of the positive class's forecast, and what came is
    whether the case is positive. A forecast for each class: the top label, the highest forecast
    (of the first class on ties) and whether that class came. Bin m of M holds forecasts above
    (m - 1)/M up to and with m/M, the first one 0 too. The value depends on the number of bins,
    and with few cases it is above 0 even for perfect forecasts.

    Parameters
    ----------
    labels : array_like of int, shape (T,)
        0 or 1, or class codes.
    forecasts : array_like, shape (T,) or (T, K)
    bins : int
        At least 1.
    weights : array_like, shape (T,), optional
        How often each case counts; once if left out.

    Returns
    -------
    CalibrationError

    Raises
    ------
    EvalError
        `bins` is below 1, or a forecast is not within 0 to 1.

    Examples
    --------
    >>> error = calibration_error([0, 0, 1, 1, 1], [0.25, 0.25, 0.55, 0.75, 0.75], bins=2)
    >>> round(error.expected, 4), round(error.maximum, 4), round(error.root_mean_square, 4)
    (0.29, 0.3167, 0.2918)
    """
    if bins < 1:
        raise EvalError(f"`bins` must be at least 1; got {bins}.")
    f, came = checked(forecasts), np.asarray(labels, dtype=np.intp)
    if f.ndim == 2:
        f, came = f.max(axis=1), (f.argmax(axis=1) == came).astype(np.intp)
    _, weight = by_group(len(f), groups=None, weights=weights)
    # divided, not multiplied: so a forecast of 0.3 is the edge 3/10 to the last digit
    place = np.searchsorted(np.arange(1, bins) / bins, f, side="left")
    count = group_sums(weight, place, bins)
    used = np.flatnonzero(count > 0)
    size = count[used]
    mean, share = (group_sums(weight * of, place, bins)[used] / size for of in (f, came))
    gap = np.abs(share - mean)
    held = zip(used.tolist(), size.tolist(), mean.tolist(), share.tolist(), strict=True)
    return CalibrationError(
        expected=float(group_means(gap, weights=size)[0]),
        maximum=float(gap.max()) if gap.size else math.nan,
        root_mean_square=math.sqrt(group_means(gap**2, weights=size)[0]),
        bins=tuple(CalibrationBin(*row) for row in held),
    )
