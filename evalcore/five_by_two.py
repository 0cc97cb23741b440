"""Five repeats of two folds: a paired t and a combined F for two candidates."""

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike

from evalcore.measures import Floats
from evalcore.resampled_t import alike


@dataclass(frozen=True)
class FiveByTwo:
    """Dietterich's t and Alpaydin's F of five repeats of two folds.

    Attributes
    ----------
    variances : tuple of float, length 5
        Of each repeat: squared distances of its two differences from their mean.
    t, p_t : float
        On `df_t` degrees of freedom, two-sided.
    f, p_f : float
        On `df_f` degrees of freedom.
    reason : str
        Why there is no test; empty where there is one.
    """

    variances: tuple[float, ...]
    t: float
    p_t: float
    f: float
    p_f: float
    reason: str = ""
    df_t: int = field(default=5, init=False)
    df_f: tuple[int, int] = field(default=(10, 5), init=False)

    @property
    def defined(self) -> bool:
        """Whether there is a t and an F."""
        return not self.reason


def five_by_two(differences: ArrayLike) -> FiveByTwo:
    """5x2cv paired t (Dietterich 1998) and combined F (Alpaydin 1999).

    t = d_11 / sqrt(mean s_i^2), which uses the first difference only and so depends on the order;
    F = sum d_ij^2 / (2 sum s_i^2), which does not.

    Parameters
    ----------
    differences : array_like, shape (5, 2)
        Of two candidates, repeats in rows, folds in columns. Undefined if one is nan or if the
        two folds of every repeat agree.

    Raises
    ------
    ValueError
        Another shape.

    Examples
    --------
    >>> found = five_by_two([[0.03, 0.01], [0.02, 0.04], [0, 0.03], [0.05, 0.02], [0.01, 0.02]])
    >>> round(found.t, 4), round(found.f, 4)
    (1.8257, 2.7037)
    """
    from scipy.special import fdtrc, stdtr

    d = np.asarray(differences, dtype=np.float64)
    if d.shape != (5, 2):
        raise ValueError(f"`differences` must have 5 repeats of 2 folds; got shape {d.shape}.")
    d = np.where(np.isfinite(d), d, np.nan)
    # of two values, the squared distances from their mean sum to half their squared difference
    s2 = np.diff(d, axis=1)[:, 0] ** 2 / 2
    variances, reason = tuple(s2.tolist()), _why_undefined(d)
    if reason:
        return FiveByTwo(variances, math.nan, math.nan, math.nan, math.nan, reason)
    t = float(d[0, 0] / math.sqrt(s2.mean()))
    f = float((d**2).sum() / (2 * s2.sum()))
    p_t, p_f = 2 * float(stdtr(5, -abs(t))), float(fdtrc(10, 5, f))
    return FiveByTwo(variances, t, p_t, f, p_f)


def _why_undefined(d: Floats) -> str:
    missing = int(np.isnan(d).sum())
    if missing:
        return f"{missing} of 10 rounds have no value, so t and F are undefined."
    if all(alike(pair) for pair in d):
        return "The two folds of every repeat agree, so t and F are undefined."
    return ""
