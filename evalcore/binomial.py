"""Where a share may lie, from right answers out of independent trials: published methods.

Ends lie within 0..1, except Wald's and the unclipped ones of Agresti and Coull, which show how far
these overshoot. Without a trial a share is undefined, and so is its interval.
"""

import math
from statistics import NormalDist

from evalcore.figures import Interval


def normal_quantile(level: float) -> float:
    """Half-width of a two-sided normal interval in standard deviations (1.96 at 0.95)."""
    return NormalDist().inv_cdf(0.5 + level / 2)


def wilson(p: float, n: float, *, level: float = 0.95) -> Interval:
    """Wilson's score interval for a proportion (Wilson 1927).

    Parameters
    ----------
    p : float
        Observed share, 0 to 1.
    n : float
        Independent trials, > 0; need not be whole.
    level : float
        Two-sided confidence.

    Examples
    --------
    >>> bounds = wilson(0.8, 50)
    >>> round(bounds.low, 6), round(bounds.high, 6)
    (0.669629, 0.887562)
    """
    low, high = wilson_ends(p, n, normal_quantile(level))
    return Interval(low, high, level, "wilson")


def wilson_ends(p: float, n: float, z: float) -> tuple[float, float]:
    """Where |p - t| = z sqrt(t(1 - t)/n), for any quantile z >= 0; nan without a trial."""
    if math.isnan(p) or not n > 0:
        return math.nan, math.nan
    centre = (p + z * z / (2 * n)) / (1 + z * z / n)
    half = z / (1 + z * z / n) * math.sqrt(p * (1 - p) / n + z * z / (4 * n * n))
    # at p = 0 and p = 1 an end is 0 or 1 exactly, which rounding would miss
    low = 0.0 if p == 0 else max(0.0, centre - half)
    high = 1.0 if p == 1 else min(1.0, centre + half)
    return float(low), float(high)


def wilson_corrected(right: float, n: float, *, level: float = 0.95) -> Interval:
    """Wilson's interval with continuity correction (Newcombe 1998, method 4).

    The ends t solve |right/n - t| - 1/(2n) = z sqrt(t(1 - t)/n). The lower end is 0 up to half a
    right answer, the upper end 1 up to half a wrong one.

    Parameters
    ----------
    right, n, level
        As in `clopper_pearson`.

    Examples
    --------
    >>> bounds = wilson_corrected(81, 263)
    >>> round(bounds.low, 4), round(bounds.high, 4)
    (0.2535, 0.3682)
    """
    if not usable(right, n):
        return Interval(math.nan, math.nan, level, "wilson_corrected")
    z, p, wrong = normal_quantile(level), right / n, n - right

    def end(side: int) -> float:
        """The lower end for side -1, the upper one for +1."""
        root = math.sqrt(max(0.0, z * z + 2 * side - 1 / n + 4 * p * (wrong - side)))
        return (2 * right + z * z + side * (1 + z * root)) / (2 * (n + z * z))

    low = 0.0 if right <= 0.5 else max(0.0, end(-1))
    high = 1.0 if wrong <= 0.5 else min(1.0, end(+1))
    return Interval(low, high, level, "wilson_corrected")


def clopper_pearson(right: float, n: float, *, level: float = 0.95) -> Interval:
    """The exact binomial interval (Clopper & Pearson 1934).

    Parameters
    ----------
    right : float
        Number of right answers, 0 to n.
    n : float
        Independent trials.
    level : float
        Two-sided confidence; for one side alone see `one_sided`.

    Examples
    --------
    >>> bounds = clopper_pearson(18, 20)
    >>> round(bounds.low, 6), round(bounds.high, 6)
    (0.683017, 0.987651)
    """
    tail = (1 - level) / 2
    low, high = exact_low(right, n, tail), exact_high(right, n, tail)
    return Interval(low, high, level, "clopper_pearson")


def exact_low(right: float, n: float, tail: float) -> float:
    """The share at which `right` or more right answers have chance `tail`."""
    from scipy.special import betaincinv

    if not usable(right, n):
        return math.nan
    return 0.0 if right == 0 else float(betaincinv(right, n - right + 1, tail))


def exact_high(right: float, n: float, tail: float) -> float:
    """The share at which `right` or fewer right answers have chance `tail`."""
    from scipy.special import betaincinv

    if not usable(right, n):
        return math.nan
    return 1.0 if right == n else float(betaincinv(right + 1, n - right, 1 - tail))


def agresti_coull(right: float, n: float, *, level: float = 0.95, clipped: bool = True) -> Interval:
    """Wald's interval after z^2/2 right and z^2/2 wrong answers are added (Agresti & Coull 1998).

    p' +- z sqrt(p'(1 - p')/n'), n' = n + z^2, p' = (right + z^2/2)/n'.

    Parameters
    ----------
    right, n, level
        As in `clopper_pearson`.
    clipped : bool
        Whether ends outside 0..1 are cut there.

    Examples
    --------
    >>> bounds = agresti_coull(1, 29)
    >>> round(bounds.low, 6), round(bounds.high, 6)
    (0.0, 0.186287)
    """
    if not usable(right, n):
        return Interval(math.nan, math.nan, level, "agresti_coull")
    z = normal_quantile(level)
    centre = (right + z * z / 2) / (n + z * z)
    half = z * math.sqrt(centre * (1 - centre) / (n + z * z))
    low, high = centre - half, centre + half
    if clipped:
        low, high = max(0.0, low), min(1.0, high)
    return Interval(low, high, level, "agresti_coull")


def jeffreys(right: float, n: float, *, level: float = 0.95) -> Interval:
    """Equal tails of the Beta(right + 1/2, wrong + 1/2) posterior (Brown, Cai & DasGupta 2001).

    By their rule the lower end is 0 where nothing was right and the upper end 1 where all was;
    otherwise the interval would exclude the share that was observed.

    Parameters
    ----------
    right, n, level
        As in `clopper_pearson`.

    Examples
    --------
    >>> bounds = jeffreys(20, 20)
    >>> round(bounds.low, 6), bounds.high
    (0.883361, 1.0)
    """
    from scipy.special import betaincinv

    if not usable(right, n):
        return Interval(math.nan, math.nan, level, "jeffreys")
    a, b, tail = right + 0.5, n - right + 0.5, (1 - level) / 2
    low = 0.0 if right == 0 else float(betaincinv(a, b, tail))
    high = 1.0 if right == n else float(betaincinv(a, b, 1 - tail))
    return Interval(low, high, level, "jeffreys")


def wald(right: float, n: float, *, level: float = 0.95) -> Interval:
    """The textbook interval p +- z sqrt(p(1 - p)/n), for comparison only.

    It has no width where all or nothing was right, may leave 0..1, and covers too seldom even
    with many trials (Brown, Cai & DasGupta 2001). Not clipped.

    Parameters
    ----------
    right, n, level
        As in `clopper_pearson`.

    Examples
    --------
    >>> bounds = wald(81, 263)
    >>> round(bounds.low, 4), round(bounds.high, 4)
    (0.2522, 0.3638)
    """
    if not usable(right, n):
        return Interval(math.nan, math.nan, level, "wald")
    p = right / n
    half = normal_quantile(level) * math.sqrt(p * (1 - p) / n)
    return Interval(p - half, p + half, level, "wald")


def newcombe_difference(
    first: tuple[float, float], second: tuple[float, float], *, level: float = 0.95
) -> Interval:
    """Hybrid score interval for a difference of independent shares (Newcombe 1998, method 10).

    With d = p1 - p2 and Wilson's ends l, u of each share, from
    d - sqrt((p1 - l1)^2 + (u2 - p2)^2) to d + sqrt((u1 - p1)^2 + (p2 - l2)^2).

    Parameters
    ----------
    first, second : tuple of (float, float)
        Right answers and trials of each; the trials of one are not those of the other.
    level : float
        Two-sided confidence.

    Examples
    --------
    >>> bounds = newcombe_difference((56, 70), (48, 80))
    >>> round(bounds.low, 4), round(bounds.high, 4)
    (0.0524, 0.3339)
    """
    if not (usable(*first) and usable(*second)):
        return Interval(math.nan, math.nan, level, "newcombe_difference")
    p1, p2 = first[0] / first[1], second[0] / second[1]
    one, two = wilson(p1, first[1], level=level), wilson(p2, second[1], level=level)
    low = p1 - p2 - math.hypot(p1 - one.low, two.high - p2)
    high = p1 - p2 + math.hypot(one.high - p1, p2 - two.low)
    return Interval(max(-1.0, low), min(1.0, high), level, "newcombe_difference")


def usable(right: float, n: float) -> bool:
    """Whether there is a trial; refuses more right answers than trials."""
    if right < 0 or right > n:
        raise ValueError(f"`right` must be between 0 and n = {n:g}; got {right:g}.")
    return n > 0 and not math.isnan(right)
