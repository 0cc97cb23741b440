"""Doubts about a cut-off: how it was set, what it was learned from, whether it was judged."""

import math
from collections.abc import Iterator

import numpy as np

from evalcore.at_cut_off import HALF, AtCutOff
from evalcore.beside_answer import place, share_in_words
from evalcore.clusters import independent_noun, named_in
from evalcore.cut_off import least_units
from evalcore.estimated import n_behind
from evalcore.evaluation import Evaluation
from evalcore.figures import Finding
from evalcore.judged_intervals import share_interval
from evalcore.plan import Plan
from evalcore.table import Table
from evalcore.wording import (
    DASH,
    Noun,
    capitalised,
    class_name,
    count,
    decimal,
    level,
    n_equals,
    percent,
    reading,
    tenths,
    with_interval,
)

LEAST_ROUNDS = 20  # for the ends of nine rounds in ten to be told


def cut_off_chosen_here(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """A fixed cut-off that was not set before these cases were seen."""
    if evaluation is None or plan.cut_off is None or not plan.cut_off.chosen_on_these_cases:
        return
    yield Finding(
        "cut_off_chosen_here",
        "grave" if plan.limits else "moderate",
        plan.cut_off.of_class,
        f"The cut-off {reading(plan.cut_off.at)} was chosen on these cases",
        "It was fixed without a date on which it was set, so it counts as picked by eye on the "
        "cases it is judged on (dates stated: 0; threshold: 1). Its figures flatter it, and no "
        "limit is called shown with it.",
        "Let each round learn it (by costs or by a floor), or state when it was set if that was "
        "before these cases were seen.",
        0,
        1,
        "common_practice",
    )


def cut_off_calls_all(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """A cut-off below every held-out score, or above: nothing is told apart."""
    found = evaluation.at_cut_off(evaluation.about) if evaluation else None
    if evaluation is None or found is None or not len(found.cut_offs):
        return
    k = table.classes.index(found.rule.of_class)
    scores = evaluation.part(evaluation.about, evaluation.scheme).held.scores[:, k]
    known = found.cut_offs[~np.isnan(found.cut_offs)]
    every, none = (known <= scores.min()).sum(), (known > scores.max()).sum()
    share = float(max(every, none) / len(found.cut_offs))
    if share <= HALF:
        return
    noun, name = table.noun_for(evaluation.counted_by), class_name(found.rule.of_class)
    rounds, each = len(found.cut_offs), "every" if every > none else "no"
    yield Finding(
        "cut_off_calls_all",
        "grave",
        found.rule.of_class,
        f"In {percent(share, rounds)} of rounds the cut-off calls {each} {noun.singular} {name}",
        f"So held-out figures are those of a constant answer there ({count(int(max(every, none)))} "
        f"of {count(rounds)} rounds; threshold: {level(HALF)}).",
        "State another cut-off."
        if found.rule.by == "fixed"
        else f"Take other costs or another floor, or add {name} {noun.plural}: a cut-off that is "
        "learned needs scores that tell the classes apart, and a floor enough of its class in "
        "every bag.",
        share,
        HALF,
        "common_practice",
    )


def cut_off_costs_more(
    table: Table, plan: Plan, evaluation: Evaluation | None
) -> Iterator[Finding]:
    """Calling every case, or none, is expected to cost no more."""
    found = evaluation.at_cut_off(evaluation.about) if evaluation else None
    if evaluation is None or found is None or found.rule.by != "cost":
        return
    rule, noun = found.rule, table.noun_for(evaluation.counted_by)
    name = class_name(rule.of_class)
    for at in found.at_shares:
        none, every = at.share * rule.miss, (1 - at.share) * rule.alarm
        least = min(none, every)
        # without an interval the figures are not about the cut-off in use
        if not at.cost.bounded or not at.cost.high >= least:
            continue
        yield Finding(
            "cut_off_costs_more",
            "grave" if at.cost.value >= least else "moderate",
            rule.of_class,
            f"Where {share_in_words(found, at)} of {noun.plural} are {name}, calling "
            f"{'none' if none <= every else 'every one'} costs {decimal(least, 3)} a "
            f"{noun.singular}; the cut-off is not shown to cost less: {decimal(at.cost.value, 3)}",
            f"Its expected cost is {decimal(at.cost.value, 3)} ({decimal(at.cost.low, 3)}{DASH}"
            f"{decimal(at.cost.high, 3)}); the threshold is the cheaper of calling none and "
            f"calling every one, {decimal(least, 3)}.",
            "Look for features that tell the classes apart, or for more cases; check the costs and "
            "the share in use.",
            at.cost.value,
            least,
            "elementary",
        )


def floor_from_few(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Too few independent units of a class to learn a floor."""
    if evaluation is None or plan.cut_off is None or plan.cut_off.by != "floor":
        return
    rule, needed = plan.cut_off, least_units(plan.cut_off.floor)
    found = evaluation.at_cut_off(evaluation.about)
    if found is None or found.learned_from >= needed:
        return
    noun = independent_noun(table, plan, evaluation.scheme, counted_by=evaluation.counted_by)
    what = named_in(rule.of_class, noun, table.noun_for(evaluation.counted_by))
    yield Finding(
        "floor_from_few",
        "grave",
        rule.of_class,
        f"{capitalised(count(found.learned_from))} {what} cannot teach a floor of "
        f"{level(rule.floor)}",
        f"A cut-off that finds {level(rule.floor)} of further {what} takes at least {needed} of "
        f"them; there are {found.learned_from} (threshold: {needed}).",
        f"Take a lower floor, or add {what}.",
        found.learned_from,
        needed,
        "wilks1941",
    )


def floor_not_delivered(
    table: Table, plan: Plan, evaluation: Evaluation | None
) -> Iterator[Finding]:
    """The floor that was asked for is not reached on held-out cases."""
    if evaluation is None or plan.cut_off is None or plan.cut_off.by != "floor":
        return
    found = evaluation.at_cut_off(evaluation.about)
    if found is None:
        return
    k = table.classes.index(plan.cut_off.of_class)
    value, floor = found.part.pooled_value("sensitivity", k), plan.cut_off.floor
    if math.isnan(value) or value >= floor:
        return
    bounds, n = share_interval(plan.level, found.part, k), n_behind(found.part, k)
    named = f"{class_name(plan.cut_off.of_class)} {table.noun_for(evaluation.counted_by).plural}"
    where = "lies above" if bounds.high < floor else "is within"
    yield Finding(
        "floor_not_delivered",
        "grave" if bounds.high < floor else "note" if bounds.defined else "moderate",
        plan.cut_off.of_class,
        # in points, for a share just short of the floor would be rounded up to it
        f"The cut-off for at least {level(floor)} of {named} finds {tenths(floor - value)} less "
        "while they are held out",
        f"Learned inside each bag, it finds {with_interval(value, bounds, n)}, {n_equals(n)}; the "
        f"threshold is the floor, {level(floor)}"
        f"{f', which {where} the interval' if bounds.defined else ''}.",
        "Ask for a higher floor than the one needed, or add cases of the class: scores of inner "
        "models, fitted to four fifths of a bag, are not quite those of the model itself.",
        value,
        floor,
        "vovk2005",
    )


def cut_off_apart(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """The cut-off that goes to work lies outside those that were judged."""
    if evaluation is None or plan.cut_off is None or plan.cut_off.by == "fixed":
        return
    found = evaluation.at_cut_off(evaluation.about)
    if found is None or found.unlike or len(found.cut_offs) - found.undefined < LEAST_ROUNDS:
        return
    low, high = found.spread.low, found.spread.high
    if low <= found.on_all <= high:
        return
    yield Finding(
        "cut_off_apart",
        "moderate",
        plan.cut_off.of_class,
        f"The cut-off that goes to work, {place(found.on_all)}, lies apart from those that were "
        "judged",
        f"Learned from all cases it is {place(found.on_all)}; in {level(found.spread.level)} of "
        f"rounds it fell between {place(low)} and {place(high)} (threshold: these ends). Held-out "
        "figures are those of the rounds’ cut-offs.",
        "Expect other rates than those reported: more cases of the class make cut-offs steadier.",
        found.on_all,
        high if found.on_all > high else low,
        "common_practice",
    )


def cut_off_not_judged(
    table: Table, plan: Plan, evaluation: Evaluation | None
) -> Iterator[Finding]:
    """Held-out figures are not about the cut-off that goes to work."""
    found = evaluation.at_cut_off(evaluation.about) if evaluation else None
    if evaluation is None or found is None or not found.unlike:
        return
    noun = table.noun_for(evaluation.counted_by)
    why, seen, value, threshold = _why_not_judged(found, noun)
    yield Finding(
        "cut_off_not_judged",
        "grave",
        found.rule.of_class,
        f"No interval is offered at the cut-off: {why}",
        f"{seen}. Held-out figures are those of the rounds’ own cut-offs and say little about the "
        "one that goes to work: they have no interval and show no limit.",
        f"Take {'other costs' if found.rule.by == 'cost' else 'a lower floor'}, add "
        f"{class_name(found.rule.of_class)} {noun.plural}, or take a candidate whose scores tell "
        "the classes apart.",
        value,
        threshold,
        "own_simulation",
    )


def _why_not_judged(found: AtCutOff, noun: Noun) -> tuple[str, str, float, float]:
    """Why not, what was seen, and the number with its threshold."""
    name, rounds = class_name(found.rule.of_class), len(found.cut_offs)
    cases = noun.counted(len(found.part.held.labels))
    if found.unlike == "not learned":
        why = f"none could be learned from all {cases}"
        return why, "Cut-offs learned from all: 0; threshold: 1", 0, 1
    if found.unlike == "bags":
        infinite = int((~np.isfinite(found.cut_offs)).sum())
        seen = (
            f"There it calls all or none, or is not learned (threshold: {level(HALF)} of rounds); "
            f"learned from all {cases} it is {place(found.on_all)}"
        )
        why = f"in {count(infinite)} of {count(rounds)} rounds the bag cannot teach one like it"
        return why, seen, infinite / rounds, HALF
    each, share = ("all", 1) if found.unlike == "all" else ("none", 0)
    seen = f"Share of those it was learned from that is called: {share}; threshold: {share}"
    return f"it calls {each} of {cases} {name}", seen, share, share
