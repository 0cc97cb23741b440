"""One candidate fitted in some rounds: from counts where that is exact, else round by round."""

import warnings
from collections.abc import Sequence

import numpy as np

from evalcore.candidates import CANDIDATES, estimator
from evalcore.choice import Choice
from evalcore.exact_rounds import Preparations, exact_scores
from evalcore.measures import Floats
from evalcore.plan import Engine
from evalcore.prepared import nothing_varies, prepare
from evalcore.rounds import Counts
from evalcore.settings import Settings
from evalcore.table import Table


def round_scores(
    choice: Choice, preparations: Preparations, *, engine: Engine, states: Sequence[int]
) -> Floats:
    """Answers of one candidate for every case in some rounds, shape (R, n, K).

    By its fast path where there is one and `engine` is "fast"; rounds it does not cover, and
    everything under "plain", by the plain adapter.
    """
    table, counts = preparations.table, preparations.counts
    scaled = CANDIDATES[choice.key].scaled(choice.values())
    found = (
        exact_scores(choice, preparations, scaled=scaled, random_states=states)
        if engine == "fast"
        else None
    )
    if found is None:
        return plain_scores(choice, table, counts, random_states=states)
    scores, covered = found
    left = np.flatnonzero(~covered).tolist()
    if left:
        scores[left] = plain_scores(
            choice, table, counts[left], random_states=[states[r] for r in left]
        )
    return scores


def plain_scores(
    choice: Choice, table: Table, counts: Counts, *, random_states: Sequence[int]
) -> Floats:
    """Fit one candidate on each bag with the public classes, and answer for every case.

    Parameters
    ----------
    choice : Choice
    table : Table
    counts : ndarray, shape (R, n)
        How often each case is in each bag.
    random_states : sequence of int, length R

    Returns
    -------
    ndarray, shape (R, n, K)
        Probabilities, or decision values where the candidate has no probabilities. A class the
        bag lacks has probability 0, or a decision value below all others.
    """
    fixed = CANDIDATES[choice.key].fixed
    if fixed is not None:
        answers = fixed(table, choice.values())
        return np.broadcast_to(answers, (len(counts), *answers.shape))
    scores = np.zeros((len(counts), table.n_cases, table.n_classes))
    for r, (bag, state) in enumerate(zip(counts, random_states, strict=True)):
        scores[r] = _round_scores(choice, table, bag, state)
    return scores


def _round_scores(choice: Choice, table: Table, bag: Counts, state: int) -> Floats:
    if choice.key == "qda":
        bag = _of_spread_classes(table, bag)
    rows = np.repeat(np.arange(table.n_cases), bag)
    labels = table.labels[rows]
    present, times = np.unique(labels, return_counts=True)
    scores = np.zeros((table.n_cases, table.n_classes))
    alike = nothing_varies(prepare(table, bag[None], scaled=False), bag[None])[0]
    if len(present) == 1 or alike:
        # one class only, or nothing to tell cases apart by: the classes' shares
        scores[:, present] = times / len(rows)
        return scores
    settings: Settings = choice.values()
    model = estimator(CANDIDATES[choice.key], settings, table, state)
    with warnings.catch_warnings():
        # collinear one-hot columns and the like are expected in small bags
        warnings.simplefilter("ignore")
        model.fit(table.features[rows], labels)
        if hasattr(model, "predict_proba"):
            scores[:, present] = model.predict_proba(table.features)
            return scores
        values = model.decision_function(table.features)
    if values.ndim == 1:
        values = np.column_stack([-values, values])
    scores[:] = values.min() - 1
    scores[:, present] = values
    return scores


def _of_spread_classes(table: Table, bag: Counts) -> Counts:
    """The bag without classes whose cases are all alike once prepared: they have no covariance."""
    while True:
        features = prepare(table, bag[None], scaled=False).features[0]
        inside = bag > 0
        present = np.unique(table.labels[inside])
        alone = [
            k for k in present if len(np.unique(features[inside & (table.labels == k)], axis=0)) < 2
        ]
        if not alone or len(alone) == len(present):
            return bag
        # gaps are filled anew without them, so the others are looked at again
        bag = np.where(np.isin(table.labels, alone), 0, bag).astype(np.uint8)
