"""Every candidate of a plan in some rounds, with whatever is learned inside the bags."""

import warnings
from collections.abc import Iterator, Sequence

from evalcore.groups import groups_of
from evalcore.plan import APPENDING, Plan, generator
from evalcore.rounds import Rounds
from evalcore.schemes import ALL_SCHEMES
from evalcore.table import Table
from evalcore.tuning import Inner, Learned, SharedBags, inner_rounds, learn


def candidates_in(
    table: Table, plan: Plan, part: Rounds, *, scheme: str, start: int, keys: Sequence[str] = ()
) -> Iterator[tuple[str, Learned | str]]:
    """What each candidate answers in some rounds, or why it could not be fitted.

    Parameters
    ----------
    table : Table
    plan : Plan
    part : Rounds
        Consecutive rounds of a scheme.
    scheme : str
        Its name; empty for the fit on all cases.
    start : int
        Place of the first of them in the scheme.
    keys : sequence of str
        What sets these rounds' random numbers apart from those of others of the same place.
    """
    stream = plan.scheme(scheme).written(without=APPENDING) if scheme else "whole"
    places = [str(r) for r in range(start, start + part.n_rounds)]

    def inner() -> Inner:
        choice = plan.scheme(scheme or plan.headline_scheme)
        groups = ALL_SCHEMES[choice.key].groups(table, choice.values())
        rngs = [generator(plan.seed, *keys, "inner folds", stream, r) for r in places]
        return inner_rounds(groups, groups_of(table), part.train, rngs=rngs)

    bags = SharedBags(table, part.train, inner)
    for name, choice in zip(plan.candidate_names, plan.candidates, strict=True):
        try:
            learned = learn(
                choice,
                bags,
                [_random_state(plan, *keys, choice.written(), stream, r) for r in places],
                engine=plan.engine,
                measure=plan.choosing_measure,
                counted_by=plan.counted_by(table),
                # permuted tables are judged by the highest score: no cut-off is learned there
                keep_inner=plan.learns_cut_off(choice)
                and scheme in ("", plan.headline_scheme)
                and not keys,
            )
        except Exception as error:  # a candidate that cannot be fitted must not end the rest
            where = scheme or "the whole table"
            warnings.warn(f"{name} failed in {where}: {error!r}", stacklevel=2)
            yield name, f"{type(error).__name__}: {error}"
        else:
            yield name, learned


def _random_state(plan: Plan, *keys: str) -> int:
    """A random state for one round, that no other candidate or scheme can move."""
    return int(generator(plan.seed, *keys).integers(2**31))
