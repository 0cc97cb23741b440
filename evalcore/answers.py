"""What the rounds' models answered: held-out scores kept, everything else reduced per round."""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from evalcore.figures import CountedBy
from evalcore.measures import Floats, confusion, hand_till, predicted_class
from evalcore.rounds import Rounds
from evalcore.row_ranking import row_hand_till
from evalcore.table import Table


@dataclass(frozen=True, eq=False)
class Reduced:
    """Answers of some rounds for cases of their own bags, reduced.

    Attributes
    ----------
    confusion : ndarray, shape (R, K, K)
        Weighted by how often each case is in the bag; rows are true classes.
    auc : ndarray, shape (R,)
        Hand and Till's for more than two classes; nan where undefined.
    """

    confusion: Floats
    auc: Floats


@dataclass(frozen=True, eq=False)
class Answers:
    """What one candidate answered under one scheme.

    Attributes
    ----------
    scores : ndarray, shape (T, K)
        Held-out scores in the order of `Rounds.pairs` over cases.
    in_bag : dict of CountedBy to Reduced
        Answers for the bags themselves, by unit and by case.
    on_all : dict of CountedBy to ndarray, shape (R, K, K)
        Confusion counts of the same models' answers for all cases, each counted once.
    picked : ndarray of int, shape (R,), or None
        Which option of a grid each bag picked; None where nothing is tuned.
    inner : ndarray, shape (R, n), or None
        Inner held-out scores for the class that a cut-off calls, nan outside the bag; kept so
        that costs can be moved without a refit. None where no cut-off is learned.
    """

    scores: Floats
    in_bag: dict[CountedBy, Reduced]
    on_all: dict[CountedBy, Floats]
    picked: NDArray[np.intp] | None = None
    inner: Floats | None = None


@dataclass(frozen=True, eq=False)
class HeldOut:
    """Held-out answers counted one way, by unit or by case.

    Attributes
    ----------
    labels : ndarray of int, shape (N,)
        Class of each unit or case.
    rounds : Rounds
        Over the same N.
    scores : ndarray, shape (T, K)
        In the order of `rounds.pairs`.
    """

    labels: NDArray[np.intp]
    rounds: Rounds
    scores: Floats

    @cached_property
    def predicted(self) -> NDArray[np.intp]:
        """Answered class of each pair, shape (T,)."""
        return predicted_class(self.scores)

    @cached_property
    def true(self) -> NDArray[np.intp]:
        """True class of each pair, shape (T,)."""
        return self.labels[self.rounds.pairs[1]]

    @cached_property
    def correct(self) -> NDArray[np.bool_]:
        """Whether each answer is right, shape (T,)."""
        return np.asarray(self.predicted == self.true)

    @cached_property
    def confusion(self) -> Floats:
        """Confusion counts of each round, shape (R, K, K)."""
        return confusion(
            self.true,
            self.predicted,
            n_classes=self.scores.shape[1],
            groups=self.rounds.pairs[0],
            n_groups=self.rounds.n_rounds,
        )

    @cached_property
    def auc(self) -> Floats:
        """AUC within each round, shape (R,)."""
        return hand_till(
            self.true, self.scores, groups=self.rounds.pairs[0], n_groups=self.rounds.n_rounds
        )


def held_out(table: Table, rounds: Rounds, scores: Floats, *, counted_by: CountedBy) -> HeldOut:
    """Held-out answers by case as they are, or one per unit: the mean of its cases' scores.

    Parameters
    ----------
    table : Table
    rounds : Rounds
        Over the table's cases.
    scores : ndarray, shape (T, K)
        In the order of `rounds.pairs`.
    counted_by : {"unit", "case"}
    """
    if counted_by == "case" or not table.has_units:
        return HeldOut(table.labels, rounds, scores)
    by_unit = rounds.of_units(table.units)
    round_at, case_at = rounds.pairs
    place = round_at * table.n_units + table.units[case_at]
    wanted = by_unit.pairs[0] * table.n_units + by_unit.pairs[1]
    size = rounds.n_rounds * table.n_units
    times = np.bincount(place, minlength=size)[wanted]
    means = [np.bincount(place, column, minlength=size)[wanted] / times for column in scores.T]
    return HeldOut(table.unit_labels, by_unit, np.column_stack(means))


def unit_means(table: Table, scores: Floats) -> Floats:
    """Mean score of each unit's cases, from scores of all cases, shape (..., n, K)."""
    sums = np.zeros((table.n_units, *scores.shape[:-2], scores.shape[-1]))
    np.add.at(sums, table.units, np.moveaxis(scores, -2, 0))
    return np.moveaxis(sums, 0, -2) / np.bincount(table.units)[:, None]


def reduce(labels: NDArray[np.intp], scores: Floats, weights: NDArray[np.uint8]) -> Reduced:
    """Reduce answers for all cases to confusion counts and AUC under weights.

    Parameters
    ----------
    labels : ndarray of int, shape (N,)
    scores : ndarray, shape (R, N, K)
    weights : ndarray, shape (R, N)
        Bag counts; cases of weight 0 are left out.
    """
    weight = weights.astype(np.float64)
    counts = _confusions(labels, predicted_class(scores), weight, n_classes=scores.shape[2])
    return Reduced(counts, row_hand_till(labels, scores, weight))


def _confusions(
    labels: NDArray[np.intp], predicted: NDArray[np.intp], weights: Floats, *, n_classes: int
) -> Floats:
    """Weighted confusion counts of each row by products, shape (R, K, K)."""
    true = (labels == np.arange(n_classes)[:, None]).astype(np.float64)
    columns = [((predicted == k) * weights) @ true.T for k in range(n_classes)]
    return np.stack(columns, axis=2)


def answers_of(table: Table, rounds: Rounds, scores: Floats) -> Answers:
    """Keep the held-out scores of some rounds and reduce the rest.

    Parameters
    ----------
    table : Table
    rounds : Rounds
    scores : ndarray, shape (R, n, K)
        What each round's model answers for every case.
    """
    ways: dict[CountedBy, tuple[NDArray[np.intp], Floats, NDArray[np.uint8]]] = {
        "case": (table.labels, scores, rounds.train)
    }
    if table.has_units:
        by_unit = rounds.of_units(table.units).train
        ways["unit"] = (table.unit_labels, unit_means(table, scores), by_unit)
    in_bag = {way: reduce(*given) for way, given in ways.items()}
    on_all = {
        way: _confusions(labels, predicted_class(given), np.ones((1, 1)), n_classes=table.n_classes)
        for way, (labels, given, _) in ways.items()
    }
    in_bag.setdefault("unit", in_bag["case"])
    on_all.setdefault("unit", on_all["case"])
    return Answers(scores[rounds.pairs], in_bag, on_all)


def joined(parts: list[Answers]) -> Answers:
    """Answers of consecutive rounds put together again."""
    return Answers(
        np.concatenate([part.scores for part in parts]),
        _joined([part.in_bag for part in parts]),
        {way: np.concatenate([part.on_all[way] for part in parts]) for way in parts[0].on_all},
        _put_together([part.picked for part in parts]),
        _put_together([part.inner for part in parts]),
    )


def _put_together(parts: Sequence[NDArray[Any] | None]) -> NDArray[Any] | None:
    found = [part for part in parts if part is not None]
    return np.concatenate(found) if len(found) == len(parts) else None


def _joined(parts: list[dict[CountedBy, Reduced]]) -> dict[CountedBy, Reduced]:
    return {
        way: Reduced(
            np.concatenate([part[way].confusion for part in parts]),
            np.concatenate([part[way].auc for part in parts]),
        )
        for way in parts[0]
    }
