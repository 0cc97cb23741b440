"""The error as a falling curve of the number of cases: a + b n^-c, or the reason why not.

Cortes et al. 1994; Figueroa et al. 2012.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from evalcore.errors import EvalError
from evalcore.measures import Floats
from evalcore.wording import count

LEAST_SIZES = 4  # three parameters go through any three points
REACH = 2.0  # the curve is continued to this many times the largest size, and no further
SLOWEST, STEEPEST = 1e-3, 3.0  # range of c
LARGEST_CHANCE = 0.05  # one-sided, that points without a trend fall like this
MOST_CASES = 10**9


@dataclass(frozen=True)
class PowerLaw:
    """A fitted curve, error = a + b n^-c.

    Attributes
    ----------
    a : float
        Error that stays with cases without end, >= 0.
    b : float
        > 0.
    c : float
        Speed of the fall, above 0 and at most 3.
    smallest, largest : int
        Sizes between which the curve was measured.
    residual : float
        Root of the weighted mean square distance from the points.
    """

    a: float
    b: float
    c: float
    smallest: int
    largest: int
    residual: float

    def predict(self, n: float, *, beyond: bool = False) -> float:
        """Error at n cases.

        Parameters
        ----------
        n : float
            From 1; at most twice the largest size measured.
        beyond : bool
            Allow more than that.

        Raises
        ------
        EvalError
            n out of range.
        """
        if not 1 <= n < math.inf:
            raise EvalError(f"`n` must be 1 or more; got {n:g}.")
        if not beyond and n > REACH * self.largest:
            raise EvalError(
                f"The curve was measured up to {count(self.largest)} cases and is not continued "
                f"beyond {count(self._reach)}, because a further guess has no support; got {n:g}."
            )
        return float(self.a + self.b * n**-self.c)

    def n_for(self, target: float, *, beyond: bool = False) -> int | None:
        """Smallest number of cases whose error is at or below a target.

        Parameters
        ----------
        target : float
            Wanted error.
        beyond : bool
            Allow an answer above twice the largest size measured.

        Returns
        -------
        int or None
            None where the curve never comes that low (a >= target), or not with a billion cases.

        Raises
        ------
        EvalError
            The answer lies too far beyond the sizes measured.
        """
        if not self.a < target:
            return None
        exponent = math.log(self.b / (target - self.a)) / self.c
        if exponent > math.log(MOST_CASES):
            return None
        # the power and its inverse round differently: start one below and let the power decide
        n = max(1, math.ceil(math.exp(exponent)) - 1)
        while self.predict(n, beyond=True) > target:
            n += 1
        if not beyond and n > REACH * self.largest:
            raise EvalError(
                f"By the curve an error of {target:g} takes more than {count(self._reach)} cases, "
                f"twice the largest size measured, and it is not continued beyond."
            )
        return n

    @property
    def _reach(self) -> int:
        return math.floor(REACH * self.largest)


@dataclass(frozen=True)
class NoPowerLaw:
    """Why no curve is fitted: one sentence, fit to be shown."""

    reason: str


def power_law(
    sizes: Sequence[int], errors: Sequence[float], *, weights: Sequence[float] | None = None
) -> PowerLaw | NoPowerLaw:
    """Fit a + b n^-c by weighted least squares, or say why not.

    For each c the best a >= 0 and b follow from linear regression on n^-c; c is searched on a
    grid and then refined, so no starting values are needed. The points must fall more clearly
    than points without a trend do by luck: Mann's test against trend (Mann 1945; Kendall 1938),
    exact and one-sided, at 5 %.

    Parameters
    ----------
    sizes : sequence of int, length m
        Numbers of training cases, from 1, each once, in any order.
    errors : sequence of float, length m
        Mean error at each size, >= 0.
    weights : sequence of float, length m, optional
        > 0, in proportion to 1 over the variance of each error; equal by default.

    Returns
    -------
    PowerLaw or NoPowerLaw
        NoPowerLaw for fewer than four sizes, and for points that do not clearly fall.

    Raises
    ------
    EvalError
        Lengths that differ, a size named twice, or a value out of range.

    Examples
    --------
    >>> law = power_law([20, 40, 80, 160], [0.05 + 0.8 * n**-0.6 for n in (20, 40, 80, 160)])
    >>> round(law.a, 4), round(law.b, 4), round(law.c, 4), law.n_for(0.08)
    (0.05, 0.8, 0.6, 239)
    >>> power_law([20, 40, 80], [0.3, 0.2, 0.1]).reason
    'A curve needs at least 4 sizes; there are 3.'
    """
    n, error, weight = _checked(sizes, errors, weights)
    if len(n) < LEAST_SIZES:
        return NoPowerLaw(f"A curve needs at least {LEAST_SIZES} sizes; there are {len(n)}.")
    found = _fitted(n, error[None], weight)
    if not found.falls[0]:
        return NoPowerLaw(
            "The error does not clearly fall as cases are added: it is no lower at the larger "
            f"size in {_pairs_against(error[None])[0]} of {math.comb(len(n), 2)} pairs of sizes. "
            "So no curve is drawn beyond the points."
        )
    a, b, c, loss = (float(part[0]) for part in (found.a, found.b, found.c, found.loss))
    if math.isnan(c):
        return NoPowerLaw("The error falls, but no curve of this form falls with it.")
    return PowerLaw(a, b, c, int(n[0]), int(n[-1]), math.sqrt(loss / float(weight.sum())))


@dataclass(frozen=True, eq=False)
class PowerLaws:
    """Curves fitted to many series of errors at the same sizes; nan where there is none.

    Attributes
    ----------
    a, b, c, loss : ndarray, shape (B,)
        As in `PowerLaw`; `loss` is the weighted sum of squared distances.
    falls : ndarray of bool, shape (B,)
        Whether the points clearly fall.
    """

    a: Floats
    b: Floats
    c: Floats
    loss: Floats
    falls: NDArray[np.bool_]

    def predict(self, n: float) -> Floats:
        """Error at n cases of each curve, shape (B,); how far is for the caller to bound."""
        return np.asarray(self.a + self.b * n**-self.c)


def power_laws(sizes: Sequence[int], errors: Floats) -> PowerLaws:
    """`power_law` of many series at once, all sizes weighing the same.

    Parameters
    ----------
    sizes : sequence of int, length m
        At least four, rising.
    errors : ndarray, shape (B, m)
        >= 0; a series with nan has no curve.

    Examples
    --------
    >>> sizes = [20, 40, 80, 160]
    >>> falling = [0.05 + 0.8 * n**-0.6 for n in sizes]
    >>> found = power_laws(sizes, np.array([falling, falling[::-1]]))
    >>> found.c.round(4).tolist(), found.predict(320).round(4).tolist()
    ([0.6, nan], [0.0751, nan])
    """
    n = np.asarray(sizes, dtype=np.float64)
    return _fitted(n, np.asarray(errors, dtype=np.float64), np.ones(len(n)))


def _checked(
    sizes: Sequence[int], errors: Sequence[float], weights: Sequence[float] | None
) -> tuple[Floats, Floats, Floats]:
    """Sizes in rising order with their errors and weights."""
    n = np.asarray(sizes, dtype=np.float64)
    error = np.asarray(errors, dtype=np.float64)
    weight = np.ones(len(n)) if weights is None else np.asarray(weights, dtype=np.float64)
    if not n.shape == error.shape == weight.shape or n.ndim != 1:
        raise EvalError(
            "Sizes, errors and weights must be lists of one length; "
            f"got {n.size}, {error.size} and {weight.size}."
        )
    if len(np.unique(n)) < len(n):
        raise EvalError("Each size must come once; take the mean of its repeats first.")
    for name, values, fits, allowed in (
        ("size", n, n >= 1, "1 or more"),
        ("error", error, error >= 0, "0 or more"),
        ("weight", weight, weight > 0, "above 0"),
    ):
        bad = ~(fits & np.isfinite(values))
        if bad.any():
            raise EvalError(f"Each {name} must be {allowed}; got {values[bad][0]:g}.")
    order = np.argsort(n)
    return n[order], error[order], weight[order]


def _fitted(n: Floats, error: Floats, weight: Floats) -> PowerLaws:
    """Curves of errors of shape (B, m) at rising sizes."""
    known = ~np.isnan(error).any(axis=1)
    falls = known & (_chance_of_falling(len(n))[_pairs_against(error)] <= LARGEST_CHANCE)
    fitted = np.full((4, len(error)), np.nan)
    c = _best_speed(n, error[falls], weight)
    a, b, loss = _line(_power(n, c), error[falls], weight)
    fitted[:, falls] = np.where(b > 0, [a, b, c, loss], np.nan)
    return PowerLaws(fitted[0], fitted[1], fitted[2], fitted[3], falls)


def _pairs_against(error: Floats) -> NDArray[np.intp]:
    """Pairs of sizes whose error is not lower at the larger one, shape (B,)."""
    m = error.shape[1]
    later = np.triu(np.ones((m, m), dtype=bool), k=1)
    return np.asarray(((error[:, :, None] <= error[:, None, :]) & later).sum(axis=(1, 2)))


def _chance_of_falling(m: int) -> Floats:
    """Chance that a random order of m different errors has at most k pairs that do not fall.

    The number of orders of m values with k pairs out of place is the product of
    1 + x + ... + x^(i-1), i = 1..m, at x^k. A tie counts as a pair that does not fall.
    """
    orders = np.ones(1)
    for i in range(2, m + 1):
        orders = np.convolve(orders, np.full(i, 1 / i))  # divided at once: 100! is no float
    return np.cumsum(orders)


def _power(n: Floats, c: Floats) -> Floats:
    """n^-c, shape (B, m)."""
    return np.asarray(n ** -np.atleast_1d(c)[:, None])


def _line(x: Floats, y: Floats, weight: Floats) -> tuple[Floats, Floats, Floats]:
    """Weighted least squares of y = a + b x with a >= 0: a, b and the sum of squares, (B,)."""
    share = weight / weight.sum()
    middle_x, middle_y = x @ share, y @ share
    # n^-c hardly varies where c is small: centred, nothing is lost to rounding
    from_x, from_y = x - middle_x[:, None], y - middle_y[:, None]
    b = (from_x * from_y) @ share / (from_x**2 @ share)
    a = middle_y - b * middle_x
    through_zero = (x * y) @ share / (x * x @ share)
    b = np.where(a < 0, through_zero, b)
    a = np.maximum(a, 0.0)
    return a, b, (y - a[:, None] - b[:, None] * x) ** 2 @ weight


def _best_speed(n: Floats, error: Floats, weight: Floats) -> Floats:
    """The c of least squares: best of a grid, then golden section between its neighbours, (B,)."""

    def loss(c: Floats) -> Floats:
        return _line(_power(n, c), error, weight)[2]

    if not len(error):
        return np.empty(0)
    grid = np.geomspace(SLOWEST, STEEPEST, 400)
    best = np.array([loss(np.full(len(error), c)) for c in grid]).argmin(axis=0)
    low, high = grid[np.maximum(best - 1, 0)], grid[np.minimum(best + 1, len(grid) - 1)]
    golden = (math.sqrt(5) - 1) / 2
    for _ in range(80):
        left, right = high - golden * (high - low), low + golden * (high - low)
        lower = loss(left) < loss(right)
        low, high = np.where(lower, low, left), np.where(lower, right, high)
    middle = (low + high) / 2
    # golden section never tries the ends themselves
    return np.asarray(np.where(loss(middle) <= loss(grid[best]), middle, grid[best]))
