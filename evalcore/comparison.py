"""Which of several candidates is better on the same rounds, and when that cannot be told."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from evalcore.figures import Interval
from evalcore.measures import Floats
from evalcore.multiplicity import holm
from evalcore.paired_difference import PairedDifference, paired_difference, unseen_share
from evalcore.rounds import Rounds

Call = Literal["better", "worse", "practically equal", "cannot tell"]
PRACTICAL = 0.02  # two points: a smaller difference would rarely change which candidate is taken


def call(low: float, high: float, *, delta: float = PRACTICAL) -> Call:
    """What an interval of a difference says: one of four answers.

    *Practically equal* if it lies within -delta to delta, ends included, even where it excludes 0;
    else *better* if it lies above 0, *worse* if below; else, and if undefined, *cannot tell*.

    Parameters
    ----------
    low, high : float
        Ends.
    delta : float
        Largest difference that does not matter, from 0.

    Examples
    --------
    >>> call(0.01, 0.09), call(-0.2, 0.03), call(-0.01, 0.015)
    ('better', 'cannot tell', 'practically equal')
    """
    if not delta >= 0:
        raise ValueError(f"`delta` must be 0 or more; got {delta}.")
    if -delta <= low and high <= delta:
        return "practically equal"
    if low > 0:
        return "better"
    return "worse" if high < 0 else "cannot tell"


@dataclass(frozen=True)
class Difference:
    """Two candidates compared, as one of a family of comparisons.

    Attributes
    ----------
    first, second : str
        `value` is the first's share right less the second's.
    value : float
    interval : Interval
        At the level its place in the family asks for; it excludes 0 exactly where `p_adjusted`
        is below 1 - level of the family.
    p, p_adjusted : float
        Alone, and by Holm.
    call : {"better", "worse", "practically equal", "cannot tell"}
        About the first.
    only_first, only_second, left_out : int
        From the first repeat; see `PairedDifference`.
    n : int
    """

    first: str
    second: str
    value: float
    interval: Interval
    p: float
    p_adjusted: float
    call: Call
    only_first: int
    only_second: int
    n: int
    left_out: int


def compare(
    names: Sequence[str],
    correct: Mapping[str, ArrayLike],
    rounds: Rounds,
    *,
    about: str = "",
    units: NDArray[np.intp] | None = None,
    level: float = 0.95,
    delta: float = PRACTICAL,
) -> tuple[Difference, ...]:
    """Compare one candidate with all others, or all pairs, with few false calls in the family.

    m comparisons, alpha = 1 - level. p-values are adjusted by Holm (1979). A comparison that Holm
    rejects at step k of the sorted p-values shows its interval at 1 - alpha/(m - k + 1), any
    other at 1 - alpha/m, so that an interval excludes 0 exactly where its adjusted p is below
    alpha. *Better* and *worse* follow from that: at most alpha of families call one of equals
    so, as far as the single p-values keep their word (see `paired_difference`).

    *Practically equal* is always read off at 1 - alpha/m (Holm's order proves nothing about it:
    a pair it has rejected may still be called equal), so at most alpha/2 of families call a pair
    equal that is delta or more apart. And no interval's far end lies nearer than G units allow:
    if none of them showed a difference, a share u of future ones still may (see
    `PairedDifference.at`). Within 0.02, fewer than 183 units are never enough for one comparison at
    95 %, and more comparisons take more.

    Parameters
    ----------
    names : sequence of str
        Candidates in order; fewer than two give no comparison.
    correct : mapping of str to array_like of bool, shape (T,)
        Whether each held-out answer is right, in the order of `rounds.pairs`.
    rounds : Rounds
    about : str
        The candidate the others are compared with, as `first`; all pairs if empty. It must have
        been named beforehand: against the best of the same rounds the promise does not hold.
    units : ndarray of int, shape (n,), optional
        As in `paired_difference`.
    level : float
    delta : float

    Raises
    ------
    ValueError
        `about` is not one of `names`.

    Examples
    --------
    >>> out = np.array([[1, 1, 1, 1, 0, 0, 0, 0], [0, 0, 0, 0, 1, 1, 1, 1]] * 2, dtype=np.uint8)
    >>> rounds = Rounds(1 - out, out, np.array([0, 0, 1, 1]))
    >>> correct = {"a": [1] * 16, "b": [1, 0, 1, 1, 1, 1, 1, 0] * 2, "c": [0] * 16}
    >>> [(d.first, d.second, d.call) for d in compare(["a", "b", "c"], correct, rounds, about="a")]
    [('a', 'b', 'cannot tell'), ('a', 'c', 'better')]
    """
    if about and about not in names:
        raise ValueError(f"`about` must be one of {', '.join(names)}; got {about!r}.")
    pairs = [(about, n) for n in names if n != about] if about else list(combinations(names, 2))
    found = [
        paired_difference(correct[a], correct[b], rounds, units=units, level=level)
        for a, b in pairs
    ]
    adjusted = holm([d.p for d in found])
    levels, common = _levels([d.p for d in found], adjusted, level)
    return tuple(
        _difference(names_of, d, p, own, common, delta)
        for names_of, d, p, own in zip(pairs, found, adjusted.tolist(), levels, strict=True)
    )


def _levels(p: Sequence[float], adjusted: Floats, level: float) -> tuple[list[float], float]:
    """Level of each interval, and the one that holds for all at once."""
    alpha, m = 1 - level, int((~np.isnan(adjusted)).sum())
    common = 1 - alpha / max(m, 1)
    step = np.argsort(np.argsort(np.asarray(p, dtype=np.float64), kind="stable"))
    return [
        1 - alpha / (m - int(k)) if p_adjusted < alpha else common
        for k, p_adjusted in zip(step, adjusted, strict=True)
    ], common


def _difference(
    names: tuple[str, str],
    found: PairedDifference,
    p_adjusted: float,
    level: float,
    common: float,
    delta: float,
) -> Difference:
    shown, wide = _with_unseen(found, level), _with_unseen(found, common)
    equal = call(wide.low, wide.high, delta=delta) == "practically equal"
    return Difference(
        *names,
        found.value,
        shown,
        found.p,
        p_adjusted,
        call(shown.low, shown.high, delta=delta if equal else 0.0),
        found.only_first,
        found.only_second,
        found.n,
        found.left_out,
    )


def _with_unseen(found: PairedDifference, level: float) -> Interval:
    """The interval, with any end that lies away from 0 no nearer than unseen units allow."""
    bounds = found.at(level)
    if not bounds.defined:
        return bounds
    least, most = unseen_share(found.value, found.df + 1, level)
    low = bounds.low if bounds.low > 0 else min(bounds.low, least)
    high = bounds.high if bounds.high < 0 else max(bounds.high, most)
    return Interval(low, high, level, bounds.method)
