"""What counted cases resemble each other by, and what that is called."""

import numpy as np
from numpy.typing import NDArray

from evalcore.figures import CountedBy
from evalcore.groups import noun_of
from evalcore.plan import Plan
from evalcore.schemes import ALL_SCHEMES
from evalcore.table import Table
from evalcore.wording import Noun, class_name


def clusters(
    table: Table, plan: Plan, scheme: str, *, counted_by: CountedBy
) -> NDArray[np.intp] | None:
    """What counted cases or units resemble each other by, beyond what is counted; None if nothing.

    Rows of a unit where rows are counted; blocks or groups that a scheme keeps together.
    """
    choice = plan.scheme(scheme)
    registered = ALL_SCHEMES[choice.key]
    groups = registered.groups(table, choice.values())
    first_case = np.unique(table.units, return_index=True)[1]
    of_counted = groups.of_case[first_case] if counted_by == "unit" else groups.of_case
    return of_counted if groups.number < len(of_counted) else None


def independent_noun(table: Table, plan: Plan, scheme: str, *, counted_by: CountedBy) -> Noun:
    """What is independent of one another where something is counted: cases, units, groups."""
    if clusters(table, plan, scheme, counted_by=counted_by) is None:
        return table.noun_for(counted_by)
    values = plan.scheme(scheme).values()
    return noun_of(table, str(values.get("keep") or values.get("column") or ""))


def named_in(of_class: str, independent: Noun, counted: Noun) -> str:
    """What is independent and holds a class, in the plural.

    >>> named_in("failing", Noun("site", "sites"), Noun("lot", "lots"))
    'sites with failing lots'
    """
    if not of_class:
        return independent.plural
    named = f"{class_name(of_class)} {counted.plural}"
    return named if independent == counted else f"{independent.plural} with {named}"
