"""How likely further cases are to show a limit, and how many it takes for a good chance.

The chance is exact binomial and saw-toothed: a case more can lower it, because one miss more is
allowed only at certain numbers of cases. So two sizes are told apart, the first with the wanted
chance and the one from which the chance stays there.
"""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from evalcore.errors import EvalError
from evalcore.intervals import effective_n, wilson
from evalcore.measures import Floats
from evalcore.sample_size import LEAST_UNITS, allowed_misses, inside

Outcome = Literal["reached", "never", "too many"]
MOST = 5_000  # further cases looked for; who can label more has no small table
ENDLESS = 1e18  # stands for as many cases as one likes


@dataclass(frozen=True)
class Goal:
    """A limit that cases are to show, and what is supposed about them.

    Attributes
    ----------
    least : float
        Limit, strictly between 0 and 1.
    rate : float
        Supposed true rate, 0 to 1.
    confidence : float
        One-sided, above 0.5.
    right, n : int
        Present cases judged together with the further ones; 0 of 0 for further cases alone.
    tau2 : float
        Variance of the model, from `model_variance`; with a number, 0 too, Wilson's bound at the
        effective n must show the limit besides the exact one, as in a verdict. nan asks for the
        exact bound alone.
    share : float
        Share right at which `tau2` was found; nan for the limit itself. The model's variance is
        kept in proportion to p(1 - p) here or at the limit, whichever is smaller (own
        construction), so that a better rate never counts against itself.

    Raises
    ------
    EvalError
        A field out of range.
    """

    least: float
    rate: float
    confidence: float = 0.95
    right: int = 0
    n: int = 0
    tau2: float = math.nan
    share: float = math.nan

    def __post_init__(self) -> None:
        inside("least", self.least)
        inside("confidence", self.confidence, low=0.5)
        if not 0 <= self.rate <= 1:
            raise EvalError(f"`rate` must be between 0 and 1; got {self.rate:g}.")
        if not 0 <= self.right <= self.n:
            raise EvalError(f"`right` must be between 0 and the {self.n} cases; got {self.right}.")
        if self.tau2 < 0:
            raise EvalError(f"`tau2` must be 0 or more; got {self.tau2:g}.")

    def counted(self, n: float) -> float:
        """Effective number of n cases under the model's variance."""
        # the smaller p(1 - p) is the one farther from a half; a nan share loses the comparison
        farther = abs(self.share - 0.5) > abs(self.least - 0.5)
        tau2 = 0.0 if math.isnan(self.tau2) else self.tau2
        return effective_n(self.share if farther else self.least, n, tau2)

    @property
    def ceiling(self) -> float:
        """What the lower bound comes to with cases without end; at or below `least` is never."""
        if math.isnan(self.tau2) or self.tau2 == 0:
            return self.rate
        return wilson(self.rate, self.counted(ENDLESS), level=2 * self.confidence - 1).low


def chances_to_show(goal: Goal, further: Sequence[int] | NDArray[np.intp]) -> Floats:
    """Chance that further cases show the limit, for several numbers of them.

    P(X <= misses allowed - misses so far), X binomial with the further cases and 1 - rate.

    Parameters
    ----------
    goal : Goal
    further : sequence of int, length N
        Numbers of further cases, from 0.

    Returns
    -------
    ndarray, shape (N,)
        0 where no number of right answers can show the limit, and where fewer than
        `LEAST_UNITS` cases would be judged.

    Examples
    --------
    >>> goal = Goal(least=0.9, rate=0.95)
    >>> chances_to_show(goal, [50, 100, 150, 200]).round(2).tolist()
    [0.28, 0.44, 0.66, 0.8]
    """
    from scipy.special import bdtr

    sizes = np.asarray(further, dtype=np.intp)
    totals = sizes + goal.n
    left = _allowed(goal, totals) - (goal.n - goal.right)
    possible = (left >= 0) & (totals >= LEAST_UNITS)
    most = np.clip(left, 0, sizes)
    found: Floats = np.where(possible, bdtr(most, sizes, 1 - goal.rate), 0.0)
    return np.where(possible & (left >= sizes), 1.0, found)


def _allowed(goal: Goal, totals: NDArray[np.intp]) -> NDArray[np.intp]:
    exact = allowed_misses(totals, least=goal.least, confidence=goal.confidence)
    if math.isnan(goal.tau2):
        return exact
    score = allowed_misses(
        totals,
        least=goal.least,
        confidence=goal.confidence,
        method="wilson",
        n_effective=np.array([goal.counted(n) for n in totals.tolist()], dtype=np.float64),
    )
    return np.minimum(exact, score)


@dataclass(frozen=True)
class Needed:
    """How many further cases give a wanted chance.

    Attributes
    ----------
    cases : int or None
        From here on the chance stays at or above the wanted one; None where `outcome` says why.
    first : int or None
        Smallest number with the wanted chance, which some larger numbers may not have.
    outcome : {"reached", "never", "too many"}
        "never": at this rate, with this model's variance, no number of cases is enough; "too
        many": more than `MOST`.
    """

    cases: int | None
    first: int | None
    outcome: Outcome


def cases_for_chance(goal: Goal, *, chance: float = 0.8) -> Needed:
    """Fewest further cases from which the chance to show the limit stays as wanted.

    Numbers up to twice `MOST` are looked through, because present cases may show a limit that
    further ones at the supposed rate take back.

    Parameters
    ----------
    goal : Goal
    chance : float
        Strictly between 0 and 1.

    Raises
    ------
    EvalError
        `chance` out of range.

    Examples
    --------
    >>> cases_for_chance(Goal(least=0.9, rate=0.97))
    Needed(cases=89, first=76, outcome='reached')
    >>> cases_for_chance(Goal(least=0.9, rate=0.9)).outcome
    'never'
    """
    inside("chance", chance)
    if goal.ceiling <= goal.least:
        return Needed(None, None, "never")
    enough = chances_to_show(goal, np.arange(2 * MOST + 1)) >= chance
    short = np.flatnonzero(~enough)
    steady = int(short[-1]) + 1 if len(short) else 0
    if steady > MOST:
        return Needed(None, None, "too many")
    return Needed(steady, int(np.argmax(enough)), "reached")


@dataclass(frozen=True)
class MoreCases:
    """Further cases needed at one supposed rate.

    Attributes
    ----------
    name : str
        What the rate is called, e.g. "present".
    rate : float
    alone, together : Needed
        When the further cases are judged by themselves, or together with the present ones.
    """

    name: str
    rate: float
    alone: Needed
    together: Needed


def more_cases(
    right: float,
    n: int,
    *,
    least: float,
    confidence: float = 0.95,
    rates: Mapping[str, float],
    tau2: float = math.nan,
    looks: int = 2,
    chance: float = 0.8,
) -> tuple[MoreCases, ...]:
    """How many more cases of a class give a good chance to show its limit.

    Parameters
    ----------
    right : float
        Present right answers, 0 to n; a mean over repeats is rounded down to whole cases.
    n : int
        Present cases, from 1.
    least, confidence
        The limit; one-sided.
    rates : mapping of str to float
        Supposed true rates by name, e.g. cautious, present and hopeful.
    tau2 : float
        Variance of the model now, taken to stay as it is beside p(1 - p); nan counts as 0.
    looks : int
        Planned looks at the same growing table, this one included. Judged together, each look
        gets its part of the error allowed: confidence 1 - (1 - confidence)/looks (Bonferroni).
    chance : float
        Wanted, strictly between 0 and 1.

    Returns
    -------
    tuple of MoreCases
        One a rate, in the order given.

    Raises
    ------
    EvalError
        A setting out of range.

    Examples
    --------
    >>> cautious, hopeful = more_cases(36, 38, least=0.9, rates={"cautious": 0.9, "hopeful": 0.97})
    >>> cautious.alone.outcome, hopeful.alone.cases, hopeful.together.cases
    ('never', 89, 89)
    """
    if not 0 <= right <= n or n < 1:
        raise EvalError(f"`right` must be between 0 and `n`, `n` at least 1; got {right:g} of {n}.")
    if looks < 1:
        raise EvalError(f"`looks` must be 1 or more; got {looks}.")
    variance, share = (0.0 if math.isnan(tau2) else tau2), right / n
    whole = math.floor(right + 1e-9)
    shared = 1 - (1 - confidence) / looks
    found = []
    for name, rate in rates.items():
        alone = Goal(least, rate, confidence, tau2=variance, share=share)
        together = Goal(least, rate, shared, whole, n, variance, share)
        found.append(
            MoreCases(
                name,
                rate,
                cases_for_chance(alone, chance=chance),
                cases_for_chance(together, chance=chance),
            )
        )
    return tuple(found)
