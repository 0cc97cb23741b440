"""The chance check's permuted tables: labels moved between units, judged by the same pipeline."""

from dataclasses import replace

import numpy as np

from evalcore.answers import HeldOut, held_out
from evalcore.errors import PlanError
from evalcore.estimates import mean_of_rounds, pooled_confusion
from evalcore.measures import ALL_MEASURES, Floats
from evalcore.pipeline import candidates_in
from evalcore.plan import CHANCE_ROUNDS, Plan, generator
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES, draw
from evalcore.table import Table
from evalcore.tuning import Learned


def permuted_table(table: Table, rng: np.random.Generator) -> Table:
    """The table with classes dealt anew to its units; all cases of a unit get the same.

    Parameters
    ----------
    table : Table
        No unit carries more than one class.
    """
    return replace(table, labels=rng.permutation(table.unit_labels)[table.units])


def chance_rounds(rounds: Rounds) -> Rounds:
    """The first rounds of a scheme that the chance check looks at: 20, and whole repeats.

    Examples
    --------
    >>> three_folds = np.eye(3, dtype=np.uint8)[[0, 1, 2] * 10]
    >>> chance_rounds(Rounds(1 - three_folds, three_folds, np.repeat(np.arange(10), 3))).n_rounds
    21
    """
    if rounds.n_rounds <= CHANCE_ROUNDS:
        return rounds
    last = rounds.repeat[CHANCE_ROUNDS - 1]
    return rounds.first(int(np.flatnonzero(rounds.repeat == last)[-1]) + 1)


def chance_figure(held: HeldOut, measure: str) -> float:
    """The figure that is held against permuted labels.

    Held out by case; for AUC the mean of the rounds.

    Parameters
    ----------
    held : HeldOut
        Of `chance_rounds`.
    measure : str
        A key of ``MEASURES`` with one value, as `Plan.choosing_measure`.
    """
    function = ALL_MEASURES[measure].from_confusion
    if function is None:
        return mean_of_rounds(held.auc)[0]
    counts = pooled_confusion(
        held.labels, held.rounds, held.predicted, n_classes=held.scores.shape[1]
    )
    return float(function(counts[None])[0])


def permuted_figures(table: Table, plan: Plan, number: int) -> Floats:
    """The figure of each candidate on one permuted table, shape (C,).

    Rounds are drawn anew, because they are stratified by class; settings are tuned anew inside
    every bag. nan for a candidate that could not be fitted, and for all where the scheme does not
    suit the permuted table.
    """
    keys = ("chance check", str(number))
    mixed = permuted_table(table, generator(plan.seed, *keys, "labels"))
    choice = plan.scheme(plan.headline_scheme)
    found: Floats = np.full(len(plan.candidates), np.nan)
    try:
        rng = generator(plan.seed, *keys, "rounds")
        drawn = draw(SCHEMES[choice.key], mixed, plan.chance_settings, rng)
    except PlanError:
        return found
    part = chance_rounds(drawn)
    answered = candidates_in(mixed, plan, part, scheme=plan.headline_scheme, start=0, keys=keys)
    for at, (_, learned) in enumerate(answered):
        if isinstance(learned, Learned):
            scores = learned.scores[part.pairs]
            held = held_out(mixed, part, scores, counted_by=plan.counted_by(table))
            found[at] = chance_figure(held, plan.choosing_measure)
    return found
