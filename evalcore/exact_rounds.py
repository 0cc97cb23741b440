"""Every candidate's fast path: answers of many rounds from the counts, without repeating rows.

Each gives what the plain adapter gives (a test holds it). Rounds that a path does not cover, such
as a bag that lacks a class, are left to the plain adapter.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from evalcore import closed_form, discriminants, nearest, trees
from evalcore.choice import Choice
from evalcore.logistic_rounds import logistic
from evalcore.measures import Floats
from evalcore.prepared import Prepared, blocks, nothing_varies, prepare
from evalcore.rounds import Counts
from evalcore.settings import Settings
from evalcore.table import Table


@dataclass(frozen=True, eq=False)
class Bags:
    """What a fast path works from.

    Attributes
    ----------
    prepared : Prepared
    labels : ndarray of int, shape (n,)
    counts : ndarray of uint8, shape (R, n)
    n_classes : int
    settings : mapping
    random_states : sequence of int, length R
    """

    prepared: Prepared
    labels: NDArray[np.intp]
    counts: Counts
    n_classes: int
    settings: Settings
    random_states: Sequence[int]


def _majority(bags: Bags) -> Floats:
    return closed_form.majority(bags.prepared, bags.labels, bags.counts, n_classes=bags.n_classes)


def _naive_bayes(bags: Bags) -> Floats:
    return closed_form.naive_bayes(
        bags.prepared, bags.labels, bags.counts, n_classes=bags.n_classes
    )


def _lda(bags: Bags) -> Floats:
    return discriminants.lda(bags.prepared, bags.labels, bags.counts, n_classes=bags.n_classes)


def _qda(bags: Bags) -> Floats:
    return discriminants.qda(
        bags.prepared,
        bags.labels,
        bags.counts,
        n_classes=bags.n_classes,
        shrinkage=float(bags.settings["shrinkage"]),
    )


def _logistic(bags: Bags) -> Floats:
    return logistic(
        bags.prepared,
        bags.labels,
        bags.counts,
        n_classes=bags.n_classes,
        C=float(bags.settings["C"]),
    )


def _nearest(bags: Bags) -> Floats:
    return nearest.nearest_scores(
        bags.prepared.features,
        bags.labels,
        bags.counts,
        k=int(bags.settings["k"]),
        n_classes=bags.n_classes,
    )


def _tree(bags: Bags) -> Floats:
    return trees.tree_scores(
        bags.prepared.features,
        bags.labels,
        bags.counts,
        n_classes=bags.n_classes,
        random_states=bags.random_states,
        present=bags.prepared.present,
    )


def _forest(bags: Bags) -> Floats:
    return trees.forest_scores(
        bags.prepared.features,
        bags.labels,
        bags.counts,
        n_classes=bags.n_classes,
        trees=int(bags.settings["trees"]),
        random_states=bags.random_states,
        present=bags.prepared.present,
    )


def _svm(bags: Bags) -> Floats:
    """Repeats are kept, since libsvm's tolerance sees weights; decisions come from one product."""
    from sklearn.svm import SVC

    scores = np.empty((len(bags.counts), len(bags.labels), bags.n_classes))
    for r, bag in enumerate(bags.counts):
        x = np.ascontiguousarray(bags.prepared.features[r][:, bags.prepared.present[r]])
        rows = np.repeat(np.arange(len(bag)), bag)
        spread = x[rows].var()
        gamma = 1 / (x.shape[1] * spread) if spread else 1.0
        model = SVC(C=float(bags.settings["C"]), gamma=gamma).fit(x[rows], bags.labels[rows])
        if bags.n_classes > 2:
            scores[r] = model.decision_function(x)
            continue
        squared = nearest.squared_distances(x, model.support_vectors_)
        np.exp(np.multiply(squared, -gamma, out=squared), out=squared)
        values = squared @ model.dual_coef_[0] + model.intercept_[0]
        scores[r] = np.column_stack([-values, values])
    return scores


@dataclass(frozen=True)
class FastPath:
    """How a candidate's rounds are carried out from counts.

    Attributes
    ----------
    scores : callable
        `Bags` to scores (R, n, K), nan in rounds it does not cover.
    any_bag : bool
        Whether bags that lack a class are covered.
    """

    scores: Callable[[Bags], Floats]
    any_bag: bool = False


FAST: dict[str, FastPath] = {
    "majority": FastPath(_majority, any_bag=True),
    "naive_bayes": FastPath(_naive_bayes),
    "lda": FastPath(_lda),
    "qda": FastPath(_qda),
    "logistic": FastPath(_logistic),
    "nearest_neighbours": FastPath(_nearest, any_bag=True),
    "tree": FastPath(_tree, any_bag=True),
    "forest": FastPath(_forest, any_bag=True),
    "svm": FastPath(_svm),
}


class Preparations:
    """Prepared features of a task's blocks of rounds, shared by candidates that use the same."""

    def __init__(self, table: Table, counts: Counts) -> None:
        self.table, self.counts = table, counts
        self._done: dict[tuple[int, bool], Prepared] = {}

    def of(self, block: slice, *, scaled: bool) -> Prepared:
        """The features of one block of rounds, kept for the next candidate."""
        key = (block.start, scaled)
        if key not in self._done:
            self._done[key] = prepare(self.table, self.counts[block], scaled=scaled)
        return self._done[key]


def exact_scores(
    choice: Choice, preparations: Preparations, *, scaled: bool, random_states: Sequence[int]
) -> tuple[Floats, NDArray[np.bool_]] | None:
    """Answers of all rounds for all cases by a candidate's fast path.

    Returns
    -------
    tuple of (scores, covered) or None
        Scores of shape (R, n, K), and which rounds are covered; None without a fast path.
    """
    path = FAST.get(choice.key)
    if path is None:
        return None
    table, counts = preparations.table, preparations.counts
    scores = np.full((len(counts), table.n_cases, table.n_classes), np.nan)
    covered = np.ones(len(counts), dtype=bool)
    if not path.any_bag:
        covered = closed_form.complete(table.labels, counts, table.n_classes)
    for block in blocks(len(counts), table):
        rounds = np.flatnonzero(covered[block]) + block.start
        if not len(rounds):
            continue
        prepared = preparations.of(block, scaled=scaled)
        if len(rounds) < len(prepared.columns):
            prepared = _some(prepared, rounds - block.start)
        states = [random_states[int(r)] for r in rounds]
        bags = Bags(
            prepared, table.labels, counts[rounds], table.n_classes, choice.values(), states
        )
        scores[rounds] = path.scores(bags)
        # where all cases of a bag look alike, the plain adapter answers with the classes' shares
        covered[rounds] &= ~nothing_varies(prepared, counts[rounds])
    covered &= ~np.isnan(scores).any(axis=(1, 2))
    return scores, covered


def _some(prepared: Prepared, rounds: NDArray[np.intp]) -> Prepared:
    if prepared.shared:
        return Prepared(prepared.columns[: len(rounds)], prepared.present[rounds], True)
    return Prepared(prepared.columns[rounds], prepared.present[rounds], False)
