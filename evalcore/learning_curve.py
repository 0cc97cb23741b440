"""What more cases would bring: a candidate's value by the number of units it learned from.

Rounds as `draws.nested_bags` makes them; source of the construction: own_learning_curve.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray

from evalcore.binomial import exact_high
from evalcore.bootstrap_intervals import percentile
from evalcore.errors import EvalError
from evalcore.figures import Interval
from evalcore.judged import Judged
from evalcore.measures import Floats
from evalcore.power_law import REACH, NoPowerLaw, PowerLaw, power_law, power_laws
from evalcore.rounds import Rounds
from evalcore.selection import stratified_bags
from evalcore.shares import quotient
from evalcore.wording import Noun, count, points, tenths
from evalcore.wording import level as confidence

CurveMeasure = Literal["accuracy", "balanced_accuracy", "sensitivity"]
Slope = Literal["rising", "flat", "cannot tell"]
WORTHWHILE = 0.02  # two points: a doubling that brings less rarely repays it (our judgement)
UNIT = Noun("unit", "units")


class Prediction(NamedTuple):
    """What the curve says of n units, and its band, nan where undefined."""

    n: int
    value: float
    low: float
    high: float


class Gain(NamedTuple):
    """Value at the largest size less that at size `start`, the closest to half of it."""

    value: float
    interval: Interval
    start: int


@dataclass(frozen=True, eq=False)
class LearningCurve:
    """A measure by the number of units learned from, S sizes, smallest first.

    Attributes
    ----------
    measure, of_class : str, int
        As asked for.
    sizes : ndarray, shape (S,)
        Mean number of units in the bags; for the largest a mean over folds, so not always whole.
    values, low, high : ndarray, shape (S,)
        The measure and its band; nan where undefined.
    rounds, not_judged : ndarray of int, shape (S,)
        Rounds of each size; units or cases (of the class for a sensitivity) none of them held out.
    law : PowerLaw or NoPowerLaw
        Of the error, 1 - value.
    ahead : tuple of Prediction
        At as many units as the table has, and at twice the largest size, where the curve ends (a
        bag lies in the table, so that is at most twice the table). Empty without a law.
    resamples, without_law : int
        Resamples of the units; those whose points no curve fits, which the bands of `ahead` lack
        (0 without a law, where none is tried).
    gain : Gain
        Over the last doubling.
    call, reason : str
    """

    measure: CurveMeasure
    of_class: int
    sizes: Floats
    values: Floats
    low: Floats
    high: Floats
    rounds: NDArray[np.intp]
    not_judged: NDArray[np.intp]
    law: PowerLaw | NoPowerLaw
    ahead: tuple[Prediction, ...]
    resamples: int
    without_law: int
    gain: Gain
    call: Slope
    reason: str


def learning_curve(
    part: Judged,
    measure: CurveMeasure,
    *,
    of_class: int = 0,
    level: float,
    rng: np.random.Generator,
    resamples: int = 500,
    noun: Noun = UNIT,
) -> LearningCurve:
    """A candidate's learning curve, how it goes on, and whether it still rises.

    e(s, i) is the share right of unit i over the rounds of size s that held it out. Accuracy is
    its mean over i, sensitivity that over a class, balanced accuracy the mean over classes. Units
    are drawn anew within their class, for all sizes at once, so that the curve moves as one; the
    band runs from quantile to quantile. The error follows a + b n^-c where it clearly falls
    (Figueroa et al. 2012), all sizes weighing the same, as they are judged on the same units, and
    is fitted anew to each resample.

    The band covers which units were judged, not which were learned from: another table would
    give other models too, so it is too narrow. Predictions also take the curve's form for granted
    and leave out resamples that do not fall, so their bands lean towards a rise.

    The call is our own construction (own_learning_curve): *rising* if there is a law and the
    interval of the gain over the last doubling lies above 0; else *flat* if it lies below 0.02, a
    loss included; else *cannot tell*. Where all resamples agree, the interval reaches as far as
    the exact bound for a difference that none of the units judged shows.

    Parameters
    ----------
    part : Judged
        Of rounds as `draws.nested_bags` makes them, or the first of them. Where cases come in
        blocks (`units`), these are counted and drawn anew, by their most frequent class.
    measure : {"accuracy", "balanced_accuracy", "sensitivity"}
    of_class : int
        For a sensitivity.
    level : float
    rng : Generator
    resamples : int
        At least 2/(1 - level) - 1, or ends are merely the lowest and highest.
    noun : Noun

    Raises
    ------
    EvalError
        The rounds are of another scheme.

    Examples
    --------
    Two halves of a table, learned from two units and then from four:

    >>> from evalcore.answers import HeldOut
    >>> train = np.array([[1, 0, 1, 0] + 4 * [0], [1] * 4 + 4 * [0],
    ...                   4 * [0] + [1, 0, 1, 0], 4 * [0] + [1] * 4], dtype=np.uint8)
    >>> test = np.repeat(train[[3, 1]], 2, axis=0)
    >>> answers = [0, 1, 0, 1] + [0, 0, 1, 1] + [0, 1, 1, 1] + [0, 0, 1, 1]
    >>> held = HeldOut(np.array([0, 0, 1, 1] * 2), Rounds(train, test, np.array([0, 1, 0, 1])),
    ...                np.eye(2)[answers])
    >>> part = Judged("learning_curve", "made", "unit", held, None, None, None, None)
    >>> curve = learning_curve(part, "accuracy", level=0.95, rng=np.random.default_rng(1))
    >>> curve.sizes.tolist(), curve.values.tolist(), curve.call
    ([2.0, 4.0], [0.625, 1.0], 'cannot tell')
    """
    rank = _ranks(part.held.rounds)
    chosen = _chosen(part, measure, of_class)
    shares, sizes = _shares(part, rank), _sizes(part, rank)
    values = _values(shares, chosen, np.ones((1, shares.shape[1])))[0]
    drawn = _values(shares, chosen, _resampled(part, rng, resamples))
    bands = [percentile(column, level=level) for column in drawn.T]
    law = _law(sizes, values)
    ahead, without = _ahead(law, sizes, drawn, n=part.blocks, level=level)
    asked: Sequence[int | None] = range(part.n_classes)
    if measure != "balanced_accuracy":
        asked = [of_class if measure == "sensitivity" else None]
    n = min(part.blocks_with(k) for k in asked)
    gain = _gain(sizes, values, drawn, level=level, n=n)
    call = _call(law, gain)
    return LearningCurve(
        measure=measure,
        of_class=of_class,
        sizes=sizes,
        values=values,
        low=np.array([band.low for band in bands]),
        high=np.array([band.high for band in bands]),
        rounds=np.bincount(rank),
        not_judged=np.isnan(shares)[:, chosen.any(axis=0)].sum(axis=1),
        law=law,
        ahead=ahead,
        resamples=resamples,
        without_law=without,
        gain=gain,
        call=call,
        reason=_reason(sizes, law, gain, call=call, noun=noun),
    )


def _ranks(rounds: Rounds) -> NDArray[np.intp]:
    """Which size each round has, 0 for the smallest, shape (R,)."""
    back = np.flatnonzero(np.diff(rounds.repeat) <= 0)
    n_sizes = int(back[0]) + 1 if len(back) else rounds.n_rounds
    rank = np.arange(rounds.n_rounds) % n_sizes
    inner = np.flatnonzero(rank > 0)
    nested = (rounds.train[inner] >= rounds.train[inner - 1]).all()
    if not nested or n_sizes == 1 < rounds.n_rounds:
        raise EvalError(
            "A learning curve needs rounds in which each bag lies within the next larger one, as "
            "its own scheme draws them; these are of another scheme."
        )
    return rank


def _chosen(part: Judged, measure: CurveMeasure, of_class: int) -> NDArray[np.bool_]:
    """The units or cases of each mean that the measure is made of, shape (means, N)."""
    of_each = part.held.labels == np.arange(part.n_classes)[:, None]
    if measure == "accuracy":
        return np.ones((1, len(part.held.labels)), dtype=bool)
    return np.asarray(of_each[[of_class]] if measure == "sensitivity" else of_each)


def _shares(part: Judged, rank: NDArray[np.intp]) -> Floats:
    """Share right of each unit or case at each size, shape (S, N); nan if never held out there."""
    at_round, at_case = part.held.rounds.pairs
    shape = (int(rank.max()) + 1, len(part.held.labels))
    place, size = rank[at_round] * shape[1] + at_case, shape[0] * shape[1]
    right = np.bincount(place, part.held.correct.astype(np.float64), minlength=size)
    return quotient(right, np.bincount(place, minlength=size)).reshape(shape)


def _sizes(part: Judged, rank: NDArray[np.intp]) -> Floats:
    """Mean number of units, or of blocks where cases come in them, in the bags of each size."""
    rounds = part.held.rounds if part.units is None else part.held.rounds.of_units(part.units)
    return np.bincount(rank, rounds.train.sum(axis=1)) / np.bincount(rank)


def _values(shares: Floats, chosen: NDArray[np.bool_], weights: Floats) -> Floats:
    """The measure at each size under weights of the units, (B, N) to (B, S)."""
    known = ~np.isnan(shares)
    right = np.where(known, shares, 0.0)
    means = [quotient(weights[:, c] @ right[:, c].T, weights[:, c] @ known[:, c].T) for c in chosen]
    return np.asarray(np.mean(means, axis=0))


def _resampled(part: Judged, rng: np.random.Generator, resamples: int) -> Floats:
    """How often each unit or case counts in each resample, shape (B, N)."""
    labels = part.held.labels
    units = np.arange(len(labels)) if part.units is None else part.units
    block = np.unique(units, return_inverse=True)[1]
    counts = np.zeros((part.blocks, part.n_classes))
    np.add.at(counts, (block, labels), 1)
    bags = stratified_bags(counts.argmax(axis=1), rng=rng, resamples=resamples)
    return bags[:, block].astype(np.float64)


def _law(sizes: Floats, values: Floats) -> PowerLaw | NoPowerLaw:
    """The curve of the error, all sizes weighing the same."""
    lacking = int(np.isnan(values).sum())
    if lacking:
        return NoPowerLaw(f"At {lacking} of {len(values)} sizes there is no value.")
    # equal errors must be ties, though their sums were rounded in another order
    errors = np.round(1 - values, 12).tolist()
    return power_law(_whole(sizes), errors)


def _whole(sizes: Floats) -> list[int]:
    return [round(size) for size in sizes.tolist()]


def _ahead(
    law: PowerLaw | NoPowerLaw, sizes: Floats, drawn: Floats, *, n: int, level: float
) -> tuple[tuple[Prediction, ...], int]:
    """Predictions with their bands, and how many resamples have no law."""
    if isinstance(law, NoPowerLaw):
        return (), 0
    fitted = power_laws(_whole(sizes), np.round(1 - drawn, 12))
    known = ~np.isnan(fitted.c)
    furthest = math.floor(REACH * law.largest)
    ahead = []
    for at in sorted({min(n, furthest), furthest}):
        band = percentile(1 - fitted.predict(at)[known], level=level)
        ahead.append(Prediction(at, 1 - law.predict(at), band.low, band.high))
    return tuple(ahead), int((~known).sum())


def _gain(sizes: Floats, values: Floats, drawn: Floats, *, level: float, n: int) -> Gain:
    """Over the last doubling; n independent units or blocks were judged, of the rarest class."""
    if len(sizes) == 1:
        return Gain(math.nan, percentile([], level=level), 0)
    start = int(np.abs(sizes[:-1] - sizes[-1] / 2).argmin())
    interval = percentile(drawn[:, -1] - drawn[:, start], level=level)
    if interval.low == interval.high:
        # units that all gain alike give no width: as many may differ as none of n tells
        beyond = exact_high(0, n, (1 - level) / 2)
        ends = (interval.low - beyond, interval.high + beyond)
        interval = Interval(max(-1.0, ends[0]), min(1.0, ends[1]), level, "unseen_share")
    return Gain(float(values[-1] - values[start]), interval, start)


def _call(law: PowerLaw | NoPowerLaw, gain: Gain) -> Slope:
    if isinstance(law, PowerLaw) and gain.interval.low > 0:
        return "rising"
    return "flat" if gain.interval.high < WORTHWHILE else "cannot tell"


def _reason(
    sizes: Floats, law: PowerLaw | NoPowerLaw, gain: Gain, *, call: Slope, noun: Noun
) -> str:
    """The call in words: what the last doubling brought, and why there is no law if so."""
    ends, refusal = gain.interval, f" {law.reason}" if isinstance(law, NoPowerLaw) else ""
    if math.isnan(gain.value) or not ends.defined:
        return f"What learning from more {noun.plural} brought cannot be told yet.{refusal}"
    small, large = np.rint(sizes[[gain.start, -1]]).astype(int).tolist()
    learning = f"Learning from {noun.counted(large)} instead of {count(small)}"
    sure = f"{confidence(ends.level)} interval"
    most = f"{tenths(ends.high)} at most" if ends.high > 0 else "nothing"
    said = {
        "rising": f"{tenths(gain.value)} ({sure}: {tenths(ends.low)} to {tenths(ends.high)}), so "
        "the curve was still rising.",
        "flat": f"{most} (upper end of the {sure}), less than the "
        f"{points(WORTHWHILE, signed=False)} that would matter.",
        "cannot tell": f"{points(gain.value)}, and anything from {points(ends.low)} to "
        f"{points(ends.high)} fits ({sure}), so whether more would help cannot be told.",
    }[call]
    if call == "cannot tell" and ends.low > 0:
        # it helped, but the sizes before do not lead up to it
        said = f"{tenths(gain.value)} ({sure}: {tenths(ends.low)} to {tenths(ends.high)}); whether "
        said += "that goes on cannot be told."
    return f"{learning} brought {said}{refusal}"
