"""Exact tree and forest rounds: a bag is grown from its counts, as weights on the cases.

A split counts weight, so a case of weight 2 equals the case written twice; the compiled builder
is called directly, on one array for all trees, and a tree is dropped once it has answered.

This holds while no setting counts rows (a smallest leaf above 1 would). The builder is private to
scikit-learn: unless it reproduces the public classes on a small table, they are used instead.
"""

from collections.abc import Callable, Iterator, Sequence
from functools import cache
from threading import get_ident
from typing import Any

import numpy as np
from numpy.typing import NDArray

from evalcore.candidates import CANDIDATES
from evalcore.measures import Floats
from evalcore.rounds import Counts

Singles = NDArray[np.float32]
Grow = Callable[[Floats, int], Floats]  # weights of the cases and a seed to class shares, (n, K)


def tree_scores(
    features: Sequence[Floats] | Floats,
    labels: NDArray[np.intp],
    counts: Counts,
    *,
    n_classes: int,
    random_states: Sequence[int],
    present: NDArray[np.bool_] | None = None,
) -> Floats:
    """Grow one decision tree on each bag and answer for every case.

    Bit for bit what `DecisionTreeClassifier` of scikit-learn answers when it is fitted on the
    bag's cases with repeats.

    Parameters
    ----------
    features : ndarray or sequence, R times (n, q)
        Numbers only, nothing missing; a view broadcast over rounds is converted once.
    labels : ndarray of int, shape (n,)
        Class of each case, 0 to `n_classes` - 1.
    counts : ndarray of uint8, shape (R, n)
        How often each case is in each bag; at least one case in each.
    n_classes : int
        K, counting classes that a bag lacks.
    random_states : sequence of int, length R
        Seed of each round.
    present : ndarray of bool, shape (R, q), optional
        Columns a round has; a category that the bag lacks has no column. All of them if left out.

    Returns
    -------
    ndarray, shape (R, n, K)
        Share of each class in the leaf a case falls into; 0 for a class the bag lacks, 1 for the
        only class of a bag.

    Raises
    ------
    ValueError
        By scikit-learn, where a number is infinite or too large for single precision.

    Examples
    --------
    The bag holds cases 0 (twice) and 3, split half way between:

    >>> table = np.array([[[0.0], [1.0], [2.0], [4.0]]])
    >>> labels, counts = np.array([0, 0, 1, 1]), np.array([[2, 0, 0, 1]], dtype=np.uint8)
    >>> tree_scores(table, labels, counts, n_classes=2, random_states=[0]).tolist()
    [[[1.0, 0.0], [1.0, 0.0], [1.0, 0.0], [0.0, 1.0]]]
    """
    tables = _tables(features, counts, present)
    return _scores(tables, labels, counts, n_classes=n_classes, states=random_states, trees=None)


def forest_scores(
    features: Sequence[Floats] | Floats,
    labels: NDArray[np.intp],
    counts: Counts,
    *,
    n_classes: int,
    trees: int,
    random_states: Sequence[int],
    present: NDArray[np.bool_] | None = None,
) -> Floats:
    """Grow one random forest (Breiman 2001) on each bag and answer for every case.

    Bit for bit what `RandomForestClassifier` of scikit-learn answers when it is fitted on the
    bag's cases with repeats: each tree gets its own bootstrap of the bag.

    Parameters
    ----------
    features, labels, counts, n_classes, random_states, present
        As in `tree_scores`.
    trees : int
        Trees in a forest, at least 1.

    Returns
    -------
    ndarray, shape (R, n, K)
        Mean over trees of the shares that `tree_scores` describes.

    Raises
    ------
    ValueError
        As in `tree_scores`.

    Examples
    --------
    A bag with one class always answers that class:

    >>> table = np.array([[[0.0], [1.0], [2.0], [4.0]]])
    >>> labels, counts = np.array([0, 0, 1, 1]), np.array([[2, 1, 0, 0]], dtype=np.uint8)
    >>> forest_scores(table, labels, counts, n_classes=2, trees=3, random_states=[0])[0, 3]
    array([1., 0.])
    """
    tables = _tables(features, counts, present)
    return _scores(tables, labels, counts, n_classes=n_classes, states=random_states, trees=trees)


@cache
def compiled_available() -> bool:
    """Whether the compiled builder runs and answers as the public classes do; tried once a process.

    Returns
    -------
    bool
        False after an import, signature or value error of scikit-learn's private parts, or where
        a tree or a forest on a small table with ties differs in any bit.

    Examples
    --------
    >>> isinstance(compiled_available(), bool)
    True
    """
    case, column = np.ogrid[0:60, 0:5]
    features = np.round(np.sin(1.0 + case * (column + 3.0)), 1).astype(np.float64)
    labels = case[:, 0] // 3 % 4
    bag = (case[:, 0] * 7 % 5 % 3 * (labels < 3)).astype(np.uint8)  # the last class is missing
    try:
        for trees in (None, 8):
            public = _public_round(features, labels, bag, n_classes=4, state=11, trees=trees)
            single = _single(features)
            compiled = _compiled_round(single, labels, bag, n_classes=4, state=11, trees=trees)
            if not np.array_equal(compiled, public):
                return False
    except (ImportError, TypeError, AttributeError, ValueError):
        return False
    return True


def _scores(
    tables: Iterator[tuple[Floats, Singles]],
    labels: NDArray[np.intp],
    counts: Counts,
    *,
    n_classes: int,
    states: Sequence[int],
    trees: int | None,
) -> Floats:
    """Scores of all rounds; one tree where `trees` is None."""
    scores = np.zeros((len(counts), len(labels), n_classes))
    compiled = compiled_available()
    for r, (table, bag, state) in enumerate(zip(tables, counts, states, strict=True)):
        features, single = table
        first, *others = np.flatnonzero(np.bincount(labels[bag > 0]))
        # what the builder cannot take is left to the public class, which says what is wrong
        if not others:
            scores[r, :, first] = 1.0
        elif compiled and single.shape[1] > 0 and np.isfinite(single).all():
            scores[r] = _compiled_round(
                single, labels, bag, n_classes=n_classes, state=state, trees=trees
            )
        else:
            scores[r] = _public_round(
                features, labels, bag, n_classes=n_classes, state=state, trees=trees
            )
    return scores


def _tables(
    features: Sequence[Floats] | Floats, counts: Counts, present: NDArray[np.bool_] | None
) -> Iterator[tuple[Floats, Singles]]:
    """Each round's columns, in double and single precision; converted only where they change."""
    last: tuple[Floats, NDArray[np.bool_]] | None = None
    for r in range(len(counts)):
        cases = features[r]
        columns = np.ones(cases.shape[1], dtype=bool) if present is None else present[r]
        # `last` keeps its array alive, so the same address still means the same numbers
        if last is None or not (_same(last[0], cases) and np.array_equal(last[1], columns)):
            last = cases, columns
            kept = cases[:, columns]
            single = _single(kept)
        yield kept, single


def _same(one: Floats, other: Floats) -> bool:
    """Whether two arrays are the same piece of memory read in the same way."""
    return one is other or one.__array_interface__ == other.__array_interface__


def _single(features: Floats) -> Singles:
    """Single precision, as scikit-learn's trees take it; column by column, as they read it."""
    with np.errstate(over="ignore"):  # infinite numbers are looked for afterwards
        return np.asfortranarray(features, dtype=np.float32)


def _compiled_round(
    features: Singles,
    labels: NDArray[np.intp],
    bag: NDArray[np.uint8],
    *,
    n_classes: int,
    state: int,
    trees: int | None,
) -> Floats:
    """One tree or forest, its random numbers drawn in the order the public classes draw them."""
    n_cases, width = features.shape
    if trees is None:
        return _grower(features, labels, n_classes=n_classes, tried=width)(
            bag.astype(np.float64), state
        )
    grow = _grower(features, labels, n_classes=n_classes, tried=max(1, int(np.sqrt(width))))
    stream = _stream(get_ident())
    stream.seed(state)
    seeds = stream.randint(np.iinfo(np.int32).max, size=trees).tolist()
    rows = np.repeat(np.arange(n_cases), bag)
    total = np.zeros((n_cases, n_classes))
    for seed in seeds:
        stream.seed(seed)
        drawn = rows[stream.randint(0, len(rows), len(rows))]
        total += grow(np.bincount(drawn, minlength=n_cases).astype(np.float64), seed)
    total /= trees
    return total


def _grower(features: Singles, labels: NDArray[np.intp], *, n_classes: int, tried: int) -> Grow:
    """Grow trees that try `tried` columns at each split, all on one table."""
    from sklearn.tree._criterion import Gini
    from sklearn.tree._splitter import BestSplitter
    from sklearn.tree._tree import DepthFirstTreeBuilder, Tree

    stream = _stream(get_ident())
    classes = np.array([n_classes], dtype=np.intp)
    targets = labels.astype(np.float64)[:, None]
    # leaves of 1 case and any weight; splits of 2 cases, at any depth, for any improvement
    splitter = BestSplitter(Gini(1, classes), tried, 1, 0.0, stream, None)
    builder = DepthFirstTreeBuilder(splitter, 2, 1, 0.0, np.iinfo(np.int32).max, 0.0)

    def grow(weights: Floats, seed: int) -> Floats:
        stream.seed(seed)
        tree = Tree(features.shape[1], classes, 1)
        builder.build(tree, features, targets, weights)
        shares: Floats = tree.predict(features)
        return shares

    return grow


@cache
def _stream(thread: int) -> Any:
    """One stream a thread, seeded anew for each tree: making one takes longer than a small tree.

    It is numpy's legacy generator, because scikit-learn draws from that.
    """
    return np.random.RandomState(0)


def _public_round(
    features: Floats,
    labels: NDArray[np.intp],
    bag: NDArray[np.uint8],
    *,
    n_classes: int,
    state: int,
    trees: int | None,
) -> Floats:
    """The same by the candidates' public classes, on the bag's cases with repeats."""
    if trees is None:
        model = CANDIDATES["tree"].model({}, state)
    else:
        model = CANDIDATES["forest"].model({"trees": trees}, state)
    rows = np.repeat(np.arange(len(labels)), bag)
    shares = np.zeros((len(labels), n_classes))
    with np.errstate(over="ignore"):  # too large a number is refused in words
        model.fit(features[rows], labels[rows])
        shares[:, model.classes_] = model.predict_proba(features)
    return shares
