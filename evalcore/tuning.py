"""Settings picked inside each bag by inner cross-validation, and the inner held-out scores.

Inner folds divide what is independent, never repeated rows: the copies of a case are on one side.
Otherwise a candidate that memorises meets its own cases again, and always wins. Inner rounds are
nothing but more count rows for the same engine.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from evalcore.answers import held_out
from evalcore.candidates import CANDIDATES
from evalcore.choice import Choice
from evalcore.exact_rounds import Preparations
from evalcore.figures import CountedBy
from evalcore.fits import round_scores
from evalcore.groups import Groups
from evalcore.measures import ALL_MEASURES, Floats
from evalcore.plan import INNER_FOLDS, Engine
from evalcore.rounds import Counts, Rounds
from evalcore.table import Table

_SAME = 1e-12  # inner figures are shares of counts: far above rounding, far below a step


@dataclass(frozen=True, eq=False)
class Inner:
    """Inner rounds of some bags.

    Attributes
    ----------
    rounds : Rounds
        Over cases; one row an inner fold, its `repeat` the bag it belongs to.
    n_bags : int
    """

    rounds: Rounds
    n_bags: int

    @property
    def of_bag(self) -> NDArray[np.intp]:
        """Bag of each inner round, shape (S,)."""
        return self.rounds.repeat


def inner_rounds(
    groups: Groups, units: Groups, counts: Counts, *, rngs: Sequence[np.random.Generator]
) -> Inner:
    """Cut each bag into folds of groups, class by class; a group's copies stay together.

    Five folds, fewer where the rarest class of a bag has fewer groups in it, but at least two.
    Where a bag holds one group only its units are divided; none where that is one unit.

    Parameters
    ----------
    groups : Groups
        What is kept together.
    units : Groups
        The table's units: the same, or finer.
    counts : ndarray of uint8, shape (R, n)
        How often each case is in each bag.
    rngs : sequence of Generator, length R
        One a bag.

    Examples
    --------
    A bag with case 0 three times, its copies on one side in each fold:

    >>> from types import SimpleNamespace
    >>> alone = SimpleNamespace(of_case=np.arange(4), labels=np.array([0, 0, 1, 1]), number=4)
    >>> bags = np.array([[3, 1, 1, 1]], dtype=np.uint8)
    >>> found = inner_rounds(alone, alone, bags, rngs=[np.random.default_rng(1)])
    >>> sorted(found.rounds.train[:, 0].tolist())
    [0, 3]
    """
    train, test, of_bag = [], [], []
    for at, (bag, rng) in enumerate(zip(counts, rngs, strict=True)):
        several = len(np.unique(groups.of_case[bag > 0])) > 1
        divided = groups if several else units
        fold = _folds(divided, np.unique(divided.of_case[bag > 0]), rng)[divided.of_case]
        for number in range(int(fold.max()) + 1 if fold.max() > 0 else 0):
            out = fold == number
            train.append(np.where(out, 0, bag).astype(np.uint8))
            test.append((out & (bag > 0)).astype(np.uint8))
            of_bag.append(at)
    shape = (len(train), counts.shape[1])
    rounds = Rounds(
        np.array(train, dtype=np.uint8).reshape(shape),
        np.array(test, dtype=np.uint8).reshape(shape),
        np.array(of_bag, dtype=np.intp),
    )
    return Inner(rounds, len(counts))


def _folds(groups: Groups, present: NDArray[np.intp], rng: np.random.Generator) -> NDArray[np.intp]:
    """Fold of each group, -1 for groups that are not in the bag."""
    labels = groups.labels[present]
    rarest = int(np.bincount(labels)[np.unique(labels)].min())
    n_folds = min(INNER_FOLDS, max(2, rarest), len(present))
    dealt = np.concatenate([rng.permutation(present[labels == k]) for k in np.unique(labels)])
    fold = np.full(groups.number, -1, dtype=np.intp)
    # dealt like cards, so folds differ by at most one, in all and of each class
    fold[dealt] = np.arange(len(dealt)) % n_folds
    return fold


class SharedBags:
    """The bags of a task, what was prepared of them, and their inner rounds once needed."""

    def __init__(self, table: Table, counts: Counts, inner: Callable[[], Inner]) -> None:
        self.table, self.counts = table, counts
        self.prepared = Preparations(table, counts)
        self._inner = inner

    @cached_property
    def inner(self) -> Inner:
        """Inner rounds, the same for every candidate."""
        return self._inner()

    @cached_property
    def inner_prepared(self) -> Preparations:
        """What was prepared of the inner bags, shared by all candidates and options."""
        return Preparations(self.table, self.inner.rounds.train)


@dataclass(frozen=True, eq=False)
class Learned:
    """Answers of one candidate in some rounds.

    Attributes
    ----------
    scores : ndarray, shape (R, n, K)
        Of the model fitted on the whole bag, with the settings picked in it.
    picked : ndarray of int, shape (R,), or None
        Which of the candidate's options; None where there is one.
    inner : ndarray, shape (R, n, K), or None
        Inner held-out scores of the picked option for cases of the bag, nan for all others; None
        if nothing was learned from them.
    """

    scores: Floats
    picked: NDArray[np.intp] | None
    inner: Floats | None


def learn(
    choice: Choice,
    bags: SharedBags,
    states: Sequence[int],
    *,
    engine: Engine,
    measure: str,
    counted_by: CountedBy,
    keep_inner: bool,
) -> Learned:
    """Pick settings inside each bag, if there is a choice, and answer for every case.

    The option with the highest `measure` over the bag's inner held-out answers is picked, every
    unit of the bag weighing one however often it was drawn. Of equals the smoothest is taken (see
    `Setting.smoother`), then the first as listed.

    Parameters
    ----------
    choice : Choice
    bags : SharedBags
    states : sequence of int, length R
        A random state for each bag.
    engine : {"fast", "plain"}
    measure : str
        A key of ``MEASURES`` with one value, as `Plan.choosing_measure`.
    counted_by : {"unit", "case"}
    keep_inner : bool
        Whether inner scores are wanted though nothing is tuned.
    """
    options = choice.options
    if len(options) == 1 and not keep_inner:
        scores = round_scores(choice, bags.prepared, engine=engine, states=states)
        return Learned(scores, None, None)
    inner_states = [states[r] for r in bags.inner.of_bag]
    pairs = bags.inner.rounds.pairs
    tried = [
        round_scores(option, bags.inner_prepared, engine=engine, states=inner_states)[pairs]
        for option in options
    ]
    picked = np.zeros(len(states), dtype=np.intp)
    if len(options) > 1:
        values = np.array(
            [
                _inner_values(bags, scores, measure=measure, counted_by=counted_by)
                for scores in tried
            ]
        )
        picked = _best(choice, values)
    return Learned(
        _fitted(options, bags, picked, states=states, engine=engine),
        picked if choice.tuned else None,
        _inner_held_out(bags, tried, picked) if keep_inner else None,
    )


def _inner_values(
    bags: SharedBags, scores: Floats, *, measure: str, counted_by: CountedBy
) -> Floats:
    """A measure of each bag's inner held-out answers, (T, K) to (R,); nan where there are none."""
    inner = bags.inner
    held = held_out(bags.table, inner.rounds, scores, counted_by=counted_by)
    function = ALL_MEASURES[measure].from_confusion
    if function is None:
        return _mean_by(held.auc, inner.of_bag, inner.n_bags)
    counts = np.zeros((inner.n_bags, *held.confusion.shape[1:]))
    np.add.at(counts, inner.of_bag, held.confusion)
    return function(counts)


def _mean_by(values: Floats, place: NDArray[np.intp], number: int) -> Floats:
    """Mean of the defined values of each bag; nan where none is."""
    known = ~np.isnan(values)
    times = np.bincount(place[known], minlength=number)
    sums = np.bincount(place[known], values[known], minlength=number)
    return np.where(times > 0, sums / np.maximum(times, 1), np.nan)


def _best(choice: Choice, values: Floats) -> NDArray[np.intp]:
    """Place of the best option of each bag, from values of shape (options, R)."""
    towards = {"high": -1.0, "low": 1.0}
    smoother = {s.key: towards.get(s.smoother) for s in CANDIDATES[choice.key].settings}
    rank = [
        tuple(
            sign * float(option.values()[name])
            for name, _ in choice.grid
            if (sign := smoother[name]) is not None
        )
        for option in choice.options
    ]
    # smoothest first; sorting is stable, so equals stay as listed
    order = np.array(sorted(range(len(rank)), key=lambda at: rank[at]), dtype=np.intp)
    ordered = np.where(np.isnan(values), -np.inf, values)[order]
    reached = ordered >= ordered.max(axis=0) - _SAME
    return np.asarray(order[reached.argmax(axis=0)], dtype=np.intp)


def _fitted(
    options: Sequence[Choice],
    bags: SharedBags,
    picked: NDArray[np.intp],
    *,
    states: Sequence[int],
    engine: Engine,
) -> Floats:
    """Answers for every case of models with the settings picked, shape (R, n, K)."""
    first = int(picked[0])
    if (picked == first).all():
        return round_scores(options[first], bags.prepared, engine=engine, states=states)
    scores = np.empty((len(picked), bags.table.n_cases, bags.table.n_classes))
    for at in np.unique(picked).tolist():
        rounds = np.flatnonzero(picked == at)
        scores[rounds] = round_scores(
            options[at],
            Preparations(bags.table, bags.counts[rounds]),
            engine=engine,
            states=[states[int(r)] for r in rounds],
        )
    return scores


def _inner_held_out(bags: SharedBags, tried: Sequence[Floats], picked: NDArray[np.intp]) -> Floats:
    """Inner held-out scores of the picked options, nan outside the bag, shape (R, n, K)."""
    inner = bags.inner
    found = np.full((inner.n_bags, bags.table.n_cases, bags.table.n_classes), np.nan)
    row, case = inner.rounds.pairs
    of_option = picked[inner.of_bag]
    for at, scores in enumerate(tried):
        here = of_option[row] == at
        found[inner.of_bag[row[here]], case[here]] = scores[here]
    return found
