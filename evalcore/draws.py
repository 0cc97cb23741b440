"""How each scheme draws its rounds over groups of cases that are kept together."""

import math

import numpy as np
from numpy.typing import NDArray

from evalcore.groups import Groups, order_of
from evalcore.rounds import Rounds
from evalcore.settings import Settings
from evalcore.table import Table

Draw = np.random.Generator
CURVE_FOLDS = 5  # of a learning curve: four fifths can be learned from
LEAST_SIZES = 4  # of a learning curve, as `power_law` asks
SMALLEST_SHARE = 0.15  # of the training part, in the smallest bags of a learning curve
LEAST_OF_CLASS = 2  # groups of a class in every bag of a learning curve


def split(held_out: NDArray[np.bool_], repeat: NDArray[np.intp]) -> Rounds:
    """Rounds that train on everything that is not held out."""
    return Rounds((~held_out).astype(np.uint8), held_out.astype(np.uint8), repeat)


def strata_of(groups: Groups, settings: Settings) -> list[NDArray[np.intp]]:
    """Groups by their most frequent class where stratified, else all in one.

    A group that is alone of its class would never be held out, so it joins the smallest other
    stratum.
    """
    if not settings.get("stratified", False):
        return [np.arange(groups.number)]
    strata = [np.flatnonzero(groups.labels == k) for k in range(groups.counts.shape[1])]
    filled = sorted((stratum for stratum in strata if len(stratum)), key=len)
    while len(filled) > 1 and len(filled[0]) == 1:
        filled = sorted([np.sort(np.concatenate(filled[:2])), *filled[2:]], key=len)
    return sorted(filled, key=lambda stratum: int(groups.labels[stratum].min()))


def held_out_sizes(sizes: NDArray[np.intp], share: float) -> NDArray[np.intp]:
    """How many groups of each stratum are held out: the share, rounded by largest remainder.

    Every stratum of two or more keeps at least one group on each side.

    >>> held_out_sizes(np.array([38, 142]), 0.3).tolist()
    [11, 43]
    """
    wanted = share * sizes
    held_out = np.floor(wanted).astype(np.intp)
    spare = round(share * int(sizes.sum())) - int(held_out.sum())
    held_out[np.argsort(held_out - wanted, kind="stable")[: max(0, spare)]] += 1
    return np.asarray(np.clip(held_out, np.minimum(1, sizes - 1), np.maximum(sizes - 1, 0)))


def subsample(_: Table, groups: Groups, settings: Settings, *, rng: Draw) -> Rounds:
    """A fresh part held out in each round; one round where no number of rounds is set."""
    strata = strata_of(groups, settings)
    sizes = np.array([len(stratum) for stratum in strata], dtype=np.intp)
    out = held_out_sizes(sizes, float(settings["test_share"]))
    n_rounds = int(settings.get("rounds", 1))
    held_out = np.zeros((n_rounds, groups.number), dtype=bool)
    for r in range(n_rounds):
        for stratum, size in zip(strata, out, strict=True):
            held_out[r, rng.permutation(stratum)[:size]] = True
    return split(held_out, np.arange(n_rounds))


def folds(_: Table, groups: Groups, settings: Settings, *, rng: Draw) -> Rounds:
    """Every group in one fold per repeat, each class about as even as groups allow."""
    n_folds, repeats = int(settings["folds"]), int(settings["repeats"])
    even = settings["stratified"] and not groups.alike
    held_out = np.zeros((repeats, n_folds, groups.number), dtype=bool)
    for repeat in range(repeats):
        if even:
            fold = _even_folds(groups.counts, n_folds, rng)
            held_out[repeat, fold, np.arange(groups.number)] = True
        else:
            dealt = np.concatenate([rng.permutation(s) for s in strata_of(groups, settings)])
            # dealt like cards, so folds differ by at most one, in all and of each class
            held_out[repeat, np.arange(groups.number) % n_folds, dealt] = True
    return split(held_out.reshape(-1, groups.number), np.repeat(np.arange(repeats), n_folds))


def _even_folds(counts: NDArray[np.intp], n_folds: int, rng: Draw) -> NDArray[np.intp]:
    """Fold of each group: large ones first, each to the fold where its classes are scarcest.

    What is kept small is the sum over folds and classes of squared class shares; ties go to the
    fold with the fewest groups, then to the first. Then single groups are moved while that helps.
    Near the most even folds, but no search through all.
    """
    totals = np.maximum(counts.sum(axis=0), 1)
    shares = counts / totals
    order = rng.permutation(len(counts))
    order = order[np.argsort(-counts[order].sum(axis=1), kind="stable")]
    filled = np.zeros((n_folds, counts.shape[1]))
    number = np.zeros(n_folds, dtype=np.intp)
    fold = np.empty(len(counts), dtype=np.intp)
    for left, group in zip(range(len(order), 0, -1), order, strict=True):
        # the last groups go to folds that are still empty, so that none stays so
        open_folds = (
            np.flatnonzero(number == 0) if left <= (number == 0).sum() else np.arange(n_folds)
        )
        rise = filled[open_folds] @ shares[group]
        best = np.lexsort((open_folds, number[open_folds], np.round(rise, 12)))[0]
        fold[group] = open_folds[best]
        filled[fold[group]] += shares[group]
        number[fold[group]] += 1
    return _moved(fold, shares, filled, number)


def _moved(
    fold: NDArray[np.intp],
    shares: NDArray[np.float64],
    filled: NDArray[np.float64],
    number: NDArray[np.intp],
) -> NDArray[np.intp]:
    """Single groups moved to another fold as long as that makes folds more even."""
    moved = True
    while moved:
        moved = False
        for group, share in enumerate(shares):
            home = fold[group]
            if number[home] == 1:
                continue
            rise = filled @ share
            rise[home] -= share @ share
            to = int(np.round(rise, 12).argmin())
            if rise[to] < rise[home] - 1e-9:
                filled[home], filled[to] = filled[home] - share, filled[to] + share
                number[home], number[to] = number[home] - 1, number[to] + 1
                fold[group], moved = to, True
    return fold


def leave_one_out(_: Table, groups: Groups, __: Settings, *, rng: Draw) -> Rounds:
    """Each group alone; nothing is drawn."""
    alone = np.eye(groups.number, dtype=bool)
    return split(alone, np.zeros(groups.number, dtype=np.intp))


def bootstrap(_: Table, groups: Groups, settings: Settings, *, rng: Draw) -> Rounds:
    """As many groups as there are, drawn with repeats, class by class where stratified."""
    n_rounds = int(settings["rounds"])
    strata = strata_of(groups, settings)
    counts = np.zeros((n_rounds, groups.number), dtype=np.intp)
    for r in range(n_rounds):
        for stratum in strata:
            drawn = rng.integers(0, len(stratum), size=len(stratum))
            counts[r, stratum] = np.bincount(drawn, minlength=len(stratum))
    return Rounds.of_bags(counts)


def forward_in_time(table: Table, _: Groups, settings: Settings, *, rng: Draw) -> Rounds:
    """Train on all that came earlier, judge the next part; nothing is drawn.

    Units are cut into `parts` + 1 stretches of about the same number, one time never divided;
    the first stretch is only learned from.
    """
    stretch = time_stretches(table, settings)
    rounds = range(1, int(stretch.max()) + 1)
    train = np.array([stretch < r for r in rounds]).astype(np.uint8)
    test = np.array([stretch == r for r in rounds]).astype(np.uint8)
    return Rounds(train, test, np.zeros(len(train), dtype=np.intp))


def time_stretches(table: Table, settings: Settings) -> NDArray[np.intp]:
    """Which stretch of time each unit falls in, 0 for the earliest, without gaps."""
    rank = order_of(table, str(settings["column"]))
    parts = int(settings["parts"]) + 1
    # by the middle of the units that share a time, so that equal times stay together and the
    # first and the last time, one on each side of the half, never end up in one stretch
    in_order = np.sort(rank)
    before, reached = (np.searchsorted(in_order, rank, side=side) for side in ("left", "right"))
    wanted = (before + reached) * parts // (2 * len(rank))
    return np.asarray(np.unique(wanted, return_inverse=True)[1])


def nested_sizes(groups: Groups, sizes: int) -> NDArray[np.intp]:
    """How many groups of each class the bags of a learning curve hold, smallest bags first.

    Shares of the smallest training part in geometric steps, so that classes keep their
    proportions; the first is 0.15, or more where the smallest class would keep fewer than two.

    Parameters
    ----------
    groups : Groups
    sizes : int
        Wanted; where rounding makes two of them equal, one is left out.

    Returns
    -------
    ndarray of int, shape (S, number of strata), S <= sizes
        Rows differ and rise. The last is the smallest whole training part.
    """
    strata = strata_of(groups, {"stratified": True})
    number = np.array([len(stratum) for stratum in strata], dtype=np.intp)
    whole = number - -(-number // CURVE_FOLDS)
    first = max(SMALLEST_SHARE, LEAST_OF_CLASS / max(int(whole.min()), 1))
    shares = np.geomspace(min(first, 1.0), 1.0, sizes)
    # what is half a group but for rounding noise goes the same way on every machine
    wanted = np.rint(np.round(shares[:, None] * whole, 9)).astype(np.intp)
    return np.asarray(np.unique(wanted, axis=0))


def n_nested(groups: Groups, settings: Settings) -> int:
    """How many rounds `nested_bags` makes."""
    return len(nested_sizes(groups, int(settings["sizes"]))) * CURVE_FOLDS * _repeats(settings)


def nested_bags(_: Table, groups: Groups, settings: Settings, *, rng: Draw) -> Rounds:
    """Bags of rising size, each within the next; the groups left out of the largest judge all.

    Each repeat deals the groups of every class into five folds. What is outside a fold is put in
    random order, class by class; bags are its beginnings, and the largest holds all of it. Order:
    by fold, then by size. A repeat and a size make one id in `Rounds.repeat`.
    """
    strata = strata_of(groups, {"stratified": True})
    sizes, repeats = nested_sizes(groups, int(settings["sizes"])), _repeats(settings)
    of_group = np.empty((len(sizes), groups.number), dtype=np.intp)
    for stratum, size in zip(strata, sizes.T, strict=True):
        of_group[:, stratum] = size[:, None]
    of_group[-1] = groups.number  # folds differ by one: the largest bag takes what there is
    shape = (repeats, CURVE_FOLDS, len(sizes), groups.number)
    train, test = np.zeros(shape, dtype=np.uint8), np.zeros(shape, dtype=np.uint8)
    for repeat in range(repeats):
        dealt = np.concatenate([rng.permutation(stratum) for stratum in strata])
        fold = np.empty(groups.number, dtype=np.intp)
        fold[dealt] = np.arange(groups.number) % CURVE_FOLDS
        for out in range(CURVE_FOLDS):
            place = np.full(groups.number, groups.number)
            for stratum in strata:
                learned = rng.permutation(stratum[fold[stratum] != out])
                place[learned] = np.arange(len(learned))
            train[repeat, out] = place < of_group
            test[repeat, out] = fold == out
    ids = np.arange(repeats)[:, None, None] * len(sizes) + np.arange(len(sizes))
    flat = (-1, groups.number)
    repeat_of = np.broadcast_to(ids, shape[:3]).reshape(-1)
    return Rounds(train.reshape(flat), test.reshape(flat), repeat_of.copy())


def _repeats(settings: Settings) -> int:
    """Repeats of five folds that give at least as many subsets as are wanted."""
    return math.ceil(int(settings["subsets"]) / CURVE_FOLDS)
