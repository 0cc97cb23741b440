"""Bootstrap of any statistic of a column, or of two.

As everywhere, a bag is a row of whole numbers: how often each case was drawn. Each statistic is a
function of values and such counts, so the data, a replica and the data without a case are one
formula. What is drawn is whole units; within each class where two classes are compared.
"""

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.bag_facts import sd_shrink
from evalcore.bootstrap_intervals import (
    bca,
    bias,
    jackknife_acceleration,
    percentile,
    standard_error,
)
from evalcore.errors import EvalError
from evalcore.figures import Interval
from evalcore.measures import Floats
from evalcore.statistic_formulas import STATISTICS, Statistic

CELLS = 1_000_000  # counts held at once: about 8 MB an array, whatever the number of rounds


@dataclass(frozen=True, eq=False)
class Bootstrapped:
    """A statistic, its replicas and what they say.

    Attributes
    ----------
    statistic : str
        Key into `STATISTICS`.
    value : float
        On the data; nan where undefined, e.g. the correlation with a column that never changes.
    replicas : ndarray, shape (R,)
        One value a bag, for a histogram; nan where a bag has none.
    undefined : int
        Replicas without a value; they are left out of what follows.
    standard_error : float
        SD of the replicas, divisor one less than their number.
    bias : float
        Mean of the replicas minus the value.
    percentile, bca : Interval
    shrink : float
        Known factor by which replicas fall short, sqrt((G - 1)/G): the standard error of a mean or
        proportion, and the root mean square of an SD's replicas; nan for other statistics, and for
        an SD where units have several cases.
    n : int
        Cases with a value.
    n_units : int
        Units that were drawn.
    missing : int
        Cases set aside because a value is missing.
    """

    statistic: str
    value: float
    replicas: Floats
    undefined: int
    standard_error: float
    bias: float
    percentile: Interval
    bca: Interval
    shrink: float
    n: int
    n_units: int
    missing: int


def bootstrap(
    first: ArrayLike,
    second: ArrayLike | None = None,
    *,
    statistic: str,
    rounds: int,
    generator: np.random.Generator,
    units: ArrayLike | None = None,
    share: float = 0.5,
    level: float = 0.95,
) -> Bootstrapped:
    """Bootstrap a statistic of one or two columns (Efron & Tibshirani 1993).

    Parameters
    ----------
    first : array_like, shape (n,)
        Numbers, or 0 and 1 for a proportion; nan where missing.
    second : array_like, shape (n,), optional
        The other column, or the class as 0 or 1; a case that lacks either value is set aside.
    statistic : str
        Key into `STATISTICS`.
    rounds : int
        Bags R, at least 2/(1 - level) - 1 of them. With the same generator more only append.
    generator : numpy.random.Generator
    units : array_like, shape (n,), optional
        What is independent; each case by itself if left out. Units are drawn whole; within each
        class for a difference of means, unless a unit has cases of both.
    share : float
        Which quantile, 0 to 1.
    level : float
        Of both intervals.

    Raises
    ------
    EvalError
        An unknown statistic, columns it cannot read, too few cases or rounds.

    Examples
    --------
    >>> mice = [94, 197, 16, 38, 99, 141, 23]
    >>> generator = np.random.default_rng(1)
    >>> found = bootstrap(mice, statistic="mean", rounds=4000, generator=generator)
    >>> round(found.value, 2), round(found.standard_error), round(found.shrink, 4)
    (86.86, 23, 0.9258)
    """
    _check_rounds(rounds, level)
    sample = _sample(_chosen(statistic), first, second, units, share)
    value = float(sample.values(np.ones((1, sample.n_units)))[0])
    strata = sample.strata()
    bags = _bags(strata, rounds, generator, step=max(1, CELLS // sample.n))
    replicas = np.concatenate([sample.values(bag) for bag in bags])
    left_out = np.concatenate([sample.values(counts) for counts in sample.leave_one_out()])
    acceleration = jackknife_acceleration(left_out, strata=strata)
    return Bootstrapped(
        statistic,
        value,
        replicas,
        undefined=int(np.isnan(replicas).sum()),
        standard_error=standard_error(replicas),
        bias=bias(replicas, value),
        percentile=percentile(replicas, level=level),
        bca=bca(replicas, value, acceleration=acceleration, level=level),
        shrink=sample.shrink(),
        n=sample.n,
        n_units=sample.n_units,
        missing=sample.missing,
    )


def value_of(
    first: ArrayLike, second: ArrayLike | None = None, *, statistic: str, share: float = 0.5
) -> float:
    """The statistic on the data themselves; parameters and errors as in `bootstrap`.

    >>> value_of([3, 1, 2, 10], statistic="median")
    2.5
    """
    sample = _sample(_chosen(statistic), first, second, None, share)
    return float(sample.values(np.ones((1, sample.n)))[0])


@dataclass(frozen=True, eq=False)
class _Sample:
    """Cases with all values, ready to be counted."""

    chosen: Statistic
    first: Floats
    second: Floats
    units: NDArray[np.intp]
    share: float
    missing: int

    @property
    def n(self) -> int:
        return len(self.first)

    @property
    def n_units(self) -> int:
        return int(self.units.max()) + 1

    def values(self, counts: Floats) -> Floats:
        """One value for each row of counts of units."""
        return self.chosen.formula(self.first, self.second, counts[:, self.units], self.share)

    def leave_one_out(self) -> Iterator[Floats]:
        """Counts of units, each left out in turn, a few rows at a time."""
        step = max(1, CELLS // self.n)
        for start in range(0, self.n_units, step):
            counts = np.ones((min(step, self.n_units - start), self.n_units))
            counts[np.arange(len(counts)), start + np.arange(len(counts))] = 0.0
            yield counts

    def strata(self) -> NDArray[np.intp]:
        """Class of each unit where two classes are compared and no unit has both, else 0.

        Raises `EvalError` where one of them has a single unit.
        """
        of_unit = np.zeros(self.n_units, dtype=np.intp)
        if self.chosen.reads == "numbers_by_class":
            of_unit[self.units] = self.second.astype(np.intp)
            if np.any(of_unit[self.units] != self.second):
                of_unit[:] = 0
        if np.bincount(of_unit).min() < 2:
            raise EvalError(
                f"{self.chosen.title} needs at least two units (of each class, where classes are "
                "compared): from one alone nothing is known about how units vary."
            )
        return of_unit

    def shrink(self) -> float:
        alone = self.n_units == self.n
        known = self.chosen.key in ("mean", "proportion") or (self.chosen.key == "sd" and alone)
        return sd_shrink(self.n_units) if known else math.nan


def _chosen(statistic: str) -> Statistic:
    if statistic not in STATISTICS:
        raise EvalError(f"`statistic` must be one of {', '.join(STATISTICS)}; got {statistic!r}.")
    return STATISTICS[statistic]


def _sample(
    chosen: Statistic,
    first: ArrayLike,
    second: ArrayLike | None,
    units: ArrayLike | None,
    share: float,
) -> _Sample:
    """Checked columns without the cases that lack a value; units numbered from 0."""
    one = np.asarray(first, dtype=np.float64)
    two_columns = chosen.reads in ("two_numbers", "numbers_by_class")
    if two_columns == (second is None):
        wanted = "two columns" if two_columns else "one column"
        raise EvalError(f"{chosen.title} reads {wanted}; got {'one' if two_columns else 'two'}.")
    two = np.zeros_like(one) if second is None else np.asarray(second, dtype=np.float64)
    unit = np.arange(one.size) if units is None else np.asarray(units)
    if one.ndim != 1 or two.shape != one.shape or unit.shape != one.shape:
        raise EvalError(
            f"Columns and units must be equally long; got {one.shape}, {two.shape}, {unit.shape}."
        )
    if not 0 <= share <= 1:
        raise EvalError(f"`share` must be between 0 and 1; got {share:g}.")
    has = np.isfinite(one) & np.isfinite(two)
    codes = np.unique(unit[has], return_inverse=True)[1].astype(np.intp)
    sample = _Sample(chosen, one[has], two[has], codes, share, int((~has).sum()))
    _check_values(sample)
    return sample


def _check_values(sample: _Sample) -> None:
    chosen = sample.chosen
    binary = {"yes_no": sample.first, "numbers_by_class": sample.second}.get(chosen.reads)
    if binary is not None and not np.isin(binary, (0, 1)).all():
        what = "values" if chosen.reads == "yes_no" else "classes"
        raise EvalError(f"{chosen.title} needs {what} that are 0 or 1.")
    parts = (0, 1) if chosen.reads == "numbers_by_class" else (0,)
    for part in parts:
        cases = int((sample.second == part).sum()) if len(parts) > 1 else sample.n
        if cases < chosen.least:
            where = f" in class {part}" if len(parts) > 1 else ""
            raise EvalError(
                f"{chosen.title} needs at least {chosen.least} cases with a value{where}; "
                f"got {cases}."
            )


def _check_rounds(rounds: int, level: float) -> None:
    if not 0 < level < 1:
        raise EvalError(f"`level` must be between 0 and 1, both excluded; got {level}.")
    least = math.ceil(2 / (1 - level) - 1 - 1e-9)
    if rounds < least:
        raise EvalError(
            f"`rounds` must be at least {least} for an interval at level {level:g}; got {rounds}."
        )


def _bags(
    strata: NDArray[np.intp], rounds: int, generator: np.random.Generator, *, step: int
) -> Iterator[Floats]:
    """Counts of units, shape (up to `step`, G): each stratum draws its own number of units."""
    order = np.argsort(strata, kind="stable")
    _, starts, sizes = np.unique(strata[order], return_index=True, return_counts=True)
    start, size = np.repeat(starts, sizes), np.repeat(sizes, sizes)
    for done in range(0, rounds, step):
        some = min(step, rounds - done)
        drawn = order[start + generator.integers(0, size, size=(some, len(order)))]
        cells = np.arange(some)[:, None] * len(order) + drawn
        flat = np.bincount(cells.ravel(), minlength=some * len(order))
        yield flat.reshape(some, len(order)).astype(np.float64)
