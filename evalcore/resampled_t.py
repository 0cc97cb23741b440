"""Tests and intervals from the values of rounds whose training cases overlap.

Rounds that share training cases are not independent, so the spread of their values alone claims
too much. Nothing here is infinite or clipped: what cannot be computed is nan, and `reason` says
why; an interval for a share may reach beyond 0..1.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.binomial import normal_quantile
from evalcore.figures import Interval
from evalcore.measures import Floats

# values are shares or losses of order one: a smaller spread is rounding in their last digits
LEAST_SPREAD = 1e-12


@dataclass(frozen=True)
class ResampledT:
    """Mean over rounds with its t.

    Attributes
    ----------
    mean, sd : float
        Of the rounds' values; the sd with divisor J - 1.
    standard_error : float
        Of the mean.
    t, p : float
        Against a mean of 0, two-sided; meant for differences.
    df : int
        Degrees of freedom, J - 1.
    interval : Interval
        For the mean.
    reason : str
        Why there is no t; empty where there is one.
    """

    mean: float
    sd: float
    standard_error: float
    t: float
    df: int
    p: float
    interval: Interval
    reason: str = ""

    @property
    def defined(self) -> bool:
        """Whether there is a t, a p and an interval."""
        return not self.reason


def corrected_resampled_t(
    values: ArrayLike, *, n_train: float, n_test: float, level: float = 0.95
) -> ResampledT:
    """Corrected resampled t of per-round values or differences (Nadeau & Bengio 2003).

    mean +- t_{J-1} s sqrt(1/J + n_test/n_train). For k folds repeated r times J = k r and
    n_test/n_train = 1/(k - 1) (Bouckaert & Frank 2004).

    Parameters
    ----------
    values : array_like, shape (J,)
        One value a round, in any order; differences of two candidates come from the same rounds.
        A round without a value (nan) leaves the whole undefined.
    n_train, n_test : float
        Cases trained on and judged in a round, > 0; means where rounds differ.
    level : float
        Of the two-sided interval.

    Raises
    ------
    ValueError
        `values` is not one-dimensional, or a size is not positive.

    Examples
    --------
    >>> found = corrected_resampled_t([0.8, 0.85, 0.9, 0.75, 0.8], n_train=70, n_test=30)
    >>> round(found.interval.low, 6), round(found.interval.high, 6)
    (0.69451, 0.94549)
    >>> corrected_resampled_t([0.02, 0.02, 0.02], n_train=90, n_test=10).reason
    'All rounds have the same value, so their spread is 0 and t is undefined.'
    """
    if not (0 < n_train < math.inf and 0 < n_test < math.inf):
        raise ValueError(f"`n_train` and `n_test` must be above 0; got {n_train} and {n_test}.")
    return _t_of(values, n_test / n_train, level, "corrected_t")


def uncorrected_t(values: ArrayLike, *, level: float = 0.95) -> ResampledT:
    """The same as if rounds were independent, to show how much overlap is worth.

    mean +- t_{J-1} s / sqrt(J): as J grows it shrinks to nothing while the cases stay the same
    (Dietterich 1998; Nadeau & Bengio 2003). Never a result by itself.

    >>> round(uncorrected_t([0.8, 0.85, 0.9, 0.75, 0.8]).interval.low, 6)
    0.749214
    """
    return _t_of(values, 0.0, level, "uncorrected_t")


def _t_of(values: ArrayLike, ratio: float, level: float, method: str) -> ResampledT:
    from scipy.special import stdtr, stdtrit

    x = _one_dimensional(values)
    reason, (mean, sd) = _why_undefined(x), _mean_and_sd(x)
    df = max(0, len(x) - 1)
    if reason:
        nowhere = Interval(math.nan, math.nan, level, method)
        return ResampledT(mean, sd, math.nan, math.nan, df, math.nan, nowhere, reason)
    error = sd * math.sqrt(1 / len(x) + ratio)
    t = mean / error
    half = float(stdtrit(df, 0.5 + level / 2)) * error
    interval = Interval(mean - half, mean + half, level, method)
    return ResampledT(mean, sd, error, t, df, 2 * float(stdtr(df, -abs(t))), interval)


def _one_dimensional(values: ArrayLike) -> Floats:
    x = np.asarray(values, dtype=np.float64)
    if x.ndim != 1:
        raise ValueError(f"`values` must hold one value a round; got shape {x.shape}.")
    return x


def _mean_and_sd(x: Floats) -> tuple[float, float]:
    """Mean and sd with divisor J - 1; 0 where all are the same, nan where there are too few."""
    if not len(x) or not np.isfinite(x).all():
        return math.nan, math.nan
    if len(x) < 2:
        return float(x.mean()), math.nan
    return float(x.mean()), 0.0 if alike(x) else float(x.std(ddof=1))


def alike(x: Floats) -> bool:
    """Whether values differ by no more than rounding in their last digits."""
    return float(np.ptp(x)) <= LEAST_SPREAD * max(1.0, float(np.abs(x).max()))


def _why_undefined(x: Floats) -> str:
    missing = int((~np.isfinite(x)).sum())
    if missing:
        return f"{missing} of {len(x)} rounds have no value, so t is undefined."
    if len(x) < 2:
        return f"The spread of rounds needs at least two of them; got {len(x)}."
    if alike(x):
        return "All rounds have the same value, so their spread is 0 and t is undefined."
    return ""


@dataclass(frozen=True)
class Posterior:
    """Where a difference lies, by its posterior: below, within or above a region of no matter.

    Attributes
    ----------
    left, rope, right : float
        P(difference < -rope), P(-rope to rope), P(difference > rope); they sum to 1.
    mean, scale : float
        Of the t distribution; the scale is the corrected t's standard error.
    df : int
        J - 1.
    reason : str
        Why there is no posterior; empty where there is one.
    """

    left: float
    rope: float
    right: float
    mean: float
    scale: float
    df: int
    reason: str = ""

    @property
    def defined(self) -> bool:
        """Whether there are probabilities."""
        return not self.reason


def correlated_t_posterior(differences: ArrayLike, *, rho: float, rope: float) -> Posterior:
    """Bayesian correlated t (Corani & Benavoli 2015; Benavoli et al. 2017).

    Student's t with J - 1 degrees of freedom around the mean difference, scaled by
    s sqrt(1/J + rho/(1 - rho)). With `rope` 0, P(right) is 1 minus the one-sided p of the
    corrected t.

    Parameters
    ----------
    differences : array_like, shape (J,)
        Of two candidates on the same rounds.
    rho : float
        Correlation of rounds, n_test/(n_train + n_test); 0 to below 1.
    rope : float
        Half-width of the region of practical equivalence, from 0.

    Raises
    ------
    ValueError
        `rho` or `rope` out of bounds, or `differences` not one-dimensional.

    Examples
    --------
    >>> found = correlated_t_posterior([0.02, 0.01, 0.03, -0.01, 0.02], rho=0.1, rope=0.01)
    >>> round(found.left, 3), round(found.rope, 3), round(found.right, 3)
    (0.024, 0.307, 0.67)
    """
    from scipy.special import stdtr

    if not 0 <= rho < 1:
        raise ValueError(f"`rho` must be at least 0 and below 1; got {rho}.")
    if not rope >= 0:
        raise ValueError(f"`rope` must be at least 0; got {rope}.")
    fit = _t_of(differences, rho / (1 - rho), 0.95, "corrected_t")
    if fit.reason:
        nan = math.nan
        return Posterior(nan, nan, nan, fit.mean, nan, fit.df, fit.reason)
    near, far = (rope - abs(fit.mean)), (-rope - abs(fit.mean))
    # seen from the mean's side all three are small numbers, so none loses digits
    behind = float(stdtr(fit.df, far / fit.standard_error))
    within = float(stdtr(fit.df, near / fit.standard_error)) - behind
    ahead = float(stdtr(fit.df, -near / fit.standard_error))
    left, right = (behind, ahead) if fit.mean >= 0 else (ahead, behind)
    return Posterior(left, within, right, fit.mean, fit.standard_error, fit.df)


def cv_normal(
    losses: ArrayLike, *, folds: NDArray[np.intp] | None = None, level: float = 0.95
) -> Interval:
    """Normal interval for the mean of one cross-validation (Bayle et al. 2020).

    mean +- z sigma/sqrt(n). Without `folds`, sigma^2 is the all-pairs estimate, the mean squared
    distance from the mean of all; with `folds` the within-fold one, the mean over folds of each
    fold's variance with divisor one less than its cases. It asks that a single case moves the
    fitted model little, and counts nothing for the model's own variability.

    Parameters
    ----------
    losses : array_like, shape (n,)
        Right (1) or wrong (0), or a difference of two candidates, once for every case.
    folds : ndarray of int, shape (n,), optional
        The fold that held each case out, each with at least two cases.
    level : float
        Two-sided confidence.

    Returns
    -------
    Interval
        Undefined with fewer than two cases, a nan, a fold of one case, or no spread at all.

    Examples
    --------
    >>> bounds = cv_normal([1, 1, 0, 1, 1, 0, 1, 1])
    >>> round(bounds.low, 4), round(bounds.high, 4)
    (0.4499, 1.0501)
    """
    x = _one_dimensional(losses)
    variance = math.nan if _why_undefined(x) else _cv_variance(x, folds)
    if not variance > 0:
        return Interval(math.nan, math.nan, level, "cv_normal")
    mean, half = float(x.mean()), normal_quantile(level) * math.sqrt(variance / len(x))
    return Interval(mean - half, mean + half, level, "cv_normal")


def _cv_variance(x: Floats, folds: NDArray[np.intp] | None) -> float:
    if folds is None:
        return float(x.var())
    parts = [x[folds == fold] for fold in np.unique(folds)]
    if min(len(part) for part in parts) < 2:
        return math.nan
    return float(np.mean([part.var(ddof=1) for part in parts]))
