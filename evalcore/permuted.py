"""The chance check's permuted tables: labels moved between units, judged by the same pipeline."""

import math
from dataclasses import replace
from typing import Literal

import numpy as np

from evalcore.answers import HeldOut, held_out
from evalcore.errors import PlanError
from evalcore.estimates import mean_of_rounds, pooled_confusion
from evalcore.groups import Groups
from evalcore.measures import ALL_MEASURES, Floats
from evalcore.pipeline import candidates_in
from evalcore.plan import CHANCE_ROUNDS, Plan, generator
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES, draw
from evalcore.table import Table
from evalcore.tuning import Learned

Dealt = Literal["units", "groups", "within groups"]
LARGEST_LOG = 700.0  # whose exponential is still a float
ATTEMPTS = 200  # permuted tables looked at for one that the scheme suits


def dealt_among(table: Table, groups: Groups) -> Dealt:
    """What trades labels: units freely, whole groups, or units within their group."""
    if groups.number == table.n_units:
        return "units"
    pure = ((groups.counts > 0).sum(axis=1) == 1).all()
    return "groups" if pure else "within groups"


def kept_together(table: Table, plan: Plan) -> Groups:
    """What the headline's scheme keeps together."""
    choice = plan.scheme(plan.headline_scheme)
    return SCHEMES[choice.key].groups(table, choice.values())


def permuted_table(table: Table, rng: np.random.Generator, groups: Groups | None = None) -> Table:
    """The table with classes dealt anew to its units; all cases of a unit get the same.

    Where the scheme keeps coarser groups together, units of a group may resemble each other, and
    dealing freely would take that for a finding: whole groups trade their class if each is of
    one, else units trade within their group.

    Parameters
    ----------
    table : Table
        No unit carries more than one class.
    rng : Generator
    groups : Groups, optional
        What the scheme keeps together; the units themselves if left out.
    """
    of_unit = table.unit_labels
    among = "units" if groups is None else dealt_among(table, groups)
    if groups is None or among == "units":
        return replace(table, labels=rng.permutation(of_unit)[table.units])
    if among == "groups":
        return replace(table, labels=rng.permutation(groups.labels)[groups.of_case])
    first_case = np.unique(table.units, return_index=True)[1]
    group = groups.of_case[first_case]
    dealt = of_unit.copy()
    for number in range(groups.number):
        inside = np.flatnonzero(group == number)
        dealt[inside] = rng.permutation(of_unit[inside])
    return replace(table, labels=dealt[table.units])


def arrangements(table: Table, plan: Plan) -> float:
    """How many different ways there are to deal the labels; infinite beyond what a float holds.

    By whole groups n! / (n1! n2! ...) with the groups of each class; within groups the product of
    the same over each group's units. p cannot be expected below one over their number.
    """
    groups = kept_together(table, plan)
    within = dealt_among(table, groups) == "within groups"
    parts = groups.counts.tolist() if within else [np.bincount(groups.labels).tolist()]
    ways = sum(math.lgamma(sum(p) + 1) - sum(math.lgamma(n + 1) for n in p) for p in parts)
    return float(round(math.exp(ways))) if ways < LARGEST_LOG else math.inf


def _suitable(table: Table, plan: Plan, keys: tuple[str, ...]) -> tuple[Table, Rounds] | None:
    """A permuted table that the headline's scheme suits, and its rounds; None if none is found.

    Labels that do not suit (a class missing from the earliest units, say) are dealt again: the
    labels as they came suit too, so they are compared with their like.
    """
    choice = plan.scheme(plan.headline_scheme)
    scheme, groups = SCHEMES[choice.key], kept_together(table, plan)
    for attempt in range(ATTEMPTS):
        rng = generator(plan.seed, *keys, "labels", str(attempt))
        mixed = permuted_table(table, rng, groups)
        try:
            rounds = generator(plan.seed, *keys, "rounds")
            return mixed, draw(scheme, mixed, plan.chance_settings, rounds)
        except PlanError:
            continue
    return None


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
    every bag. nan for a candidate that could not be fitted, and for all where the scheme suits
    none of many permuted tables or the rounds leave the figure undefined (a class is never held
    out).
    """
    keys = ("chance check", str(number))
    found: Floats = np.full(len(plan.candidates), np.nan)
    suitable = _suitable(table, plan, keys)
    if suitable is None:
        return found
    mixed, part = suitable[0], chance_rounds(suitable[1])
    answered = candidates_in(mixed, plan, part, scheme=plan.headline_scheme, start=0, keys=keys)
    for at, (_, learned) in enumerate(answered):
        if isinstance(learned, Learned):
            scores = learned.scores[part.pairs]
            held = held_out(mixed, part, scores, counted_by=plan.counted_by(table))
            found[at] = chance_figure(held, plan.choosing_measure)
    return found
