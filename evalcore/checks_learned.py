"""Doubts about what was learned or checked beside the estimates: cut-off, settings, chance."""

import math
from collections.abc import Iterator

import numpy as np

from evalcore.answer import measure_name
from evalcore.beside_answer import P_DIGITS, place
from evalcore.candidates import CANDIDATES
from evalcore.cut_off import least_units
from evalcore.estimated import n_behind
from evalcore.evaluation import Evaluation
from evalcore.figures import Finding
from evalcore.groups import noun_of
from evalcore.judged import share_interval
from evalcore.permuted import arrangements, dealt_among, kept_together
from evalcore.plan import Plan
from evalcore.table import Table
from evalcore.wording import (
    NBSP,
    capitalised,
    class_name,
    count,
    decimal,
    level,
    n_equals,
    percent,
    quoted,
    reading,
    tenths,
    with_interval,
)

SURE = 0.05  # p above which a figure is not told from chance
OFF_CHANCE = 0.05  # points that permuted labels may be off what guessing gives
HALF = 0.5
BY_COLUMN = {"leave_block_out": "leaves out each entry of", "forward_in_time": "goes by"}


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
    """A cut-off that calls every case its class, so that nothing is told apart."""
    if evaluation is None or plan.cut_off is None:
        return
    found = evaluation.at_cut_off(evaluation.about)
    if found is None or not len(found.part.held.labels):
        return
    rule, k = plan.cut_off, table.classes.index(plan.cut_off.of_class)
    called = found.part.held.confusion[:, :, k].sum(axis=1)
    every = called == found.part.held.rounds.test_sizes
    share = float(every.mean()) if len(every) else 0.0
    if share <= HALF:
        return
    noun, name = table.noun_for(evaluation.counted_by), class_name(rule.of_class)
    yield Finding(
        "cut_off_calls_all",
        "grave",
        rule.of_class,
        f"In {percent(share, len(every))} of rounds every {noun.singular} is called {name}",
        f"So held-out figures are those of a constant answer there ({count(int(every.sum()))} of "
        f"{count(len(every))} rounds; threshold: {level(HALF)}).",
        f"Take other costs or a lower floor, or add {name} {noun.plural}: a cut-off that is "
        "learned needs scores that tell the classes apart, and a floor enough of its class in "
        "every bag.",
        share,
        HALF,
        "common_practice",
    )


def floor_from_few(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Too few independent units of a class to learn a floor."""
    if evaluation is None or plan.cut_off is None or plan.cut_off.by != "floor":
        return
    rule, needed = plan.cut_off, least_units(plan.cut_off.floor)
    found = evaluation.at_cut_off(evaluation.about)
    if found is None or found.learned_from >= needed:
        return
    name, noun = class_name(rule.of_class), table.noun_for(evaluation.counted_by)
    what = noun.plural if found.part.units is None else f"independent {table.noun.plural}"
    yield Finding(
        "floor_from_few",
        "grave",
        rule.of_class,
        f"{capitalised(count(found.learned_from))} {name} {what} cannot teach a floor of "
        f"{level(rule.floor)}",
        f"A cut-off that finds {level(rule.floor)} of further {what} of a class takes at least "
        f"{needed} of them; there are {found.learned_from} (threshold: {needed}).",
        f"Take a lower floor, or add {name} {table.noun.plural}.",
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
        "grave" if bounds.high < floor else "moderate",
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
    if found is None or math.isnan(found.on_all) or not found.spread.defined:
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


def settings_unsteady(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Rounds pick different settings, so these cases hardly tell which is best."""
    if evaluation is None:
        return
    for found in evaluation.beside.picked:
        most = float(found.shares.max())
        if found.scheme != plan.headline_scheme or most >= HALF:
            continue
        rounds = evaluation.rounds[found.scheme].n_rounds
        yield Finding(
            "settings_unsteady",
            "note",
            found.candidate,
            f"No setting of {plan.title(found.candidate)} was picked in half of the rounds, the "
            f"most frequent in {percent(most, rounds)}",
            f"That is {found.options[int(found.shares.argmax())]}, picked in "
            f"{percent(most, rounds)} of {count(rounds)} rounds (threshold: {level(HALF)}). The "
            "figures include this; the setting of the final model is partly luck.",
            "Take the setting on other grounds, or leave out those that hardly differ.",
            most,
            HALF,
            "common_practice",
        )


def grid_too_narrow(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Most rounds pick the end of a grid of three numbers or more, so the best may lie beyond.

    Not where the setting allows nothing beyond it.
    """
    if evaluation is None:
        return
    for found in evaluation.beside.picked:
        grid = plan.candidate(found.candidate).grid
        if found.scheme != plan.headline_scheme or len(grid) != 1:
            continue
        (name, values), rounds = grid[0], evaluation.rounds[found.scheme].n_rounds
        settings = CANDIDATES[plan.candidate(found.candidate).key].settings
        bounds = next((setting.low, setting.high) for setting in settings if setting.key == name)
        numbers = [v for v in values if isinstance(v, int | float) and not isinstance(v, bool)]
        if len(numbers) < 3 or len(numbers) < len(values):
            continue
        at = int(np.argmax(found.shares))
        if numbers[at] not in {min(numbers), max(numbers)} - {*bounds}:
            continue
        if found.shares[at] <= HALF:
            continue
        yield Finding(
            "grid_too_narrow",
            "note",
            found.candidate,
            f"The grid of {plan.title(found.candidate)} may end too early at {found.options[at]}",
            f"The end of the grid was picked in {percent(float(found.shares[at]), rounds)} of "
            f"{count(rounds)} rounds (threshold: {level(HALF)}).",
            f"Try values of `{name}` beyond it.",
            float(found.shares[at]),
            HALF,
            "common_practice",
        )


def not_told_from_chance(
    table: Table, plan: Plan, evaluation: Evaluation | None
) -> Iterator[Finding]:
    """Permuted labels do as well too often."""
    if evaluation is None or not evaluation.beside.chance:
        return
    within = dealt_among(table, kept_together(table, plan)) == "within groups"
    for check in evaluation.beside.chance:
        test = check.test
        if check.best or math.isnan(test.p) or test.p <= SURE:
            continue
        least, p = 1 / (test.permutations + 1), decimal(test.p, P_DIGITS)
        short = least > SURE
        yield Finding(
            "not_told_from_chance",
            "moderate" if within or (short and not test.at_least_as_good) else "grave",
            check.candidate,
            f"{capitalised(plan.title(check.candidate))} is not told from "
            f"{'what is kept together alone' if within else 'chance'}: p{NBSP}={NBSP}{p}",
            f"With labels permuted{' within what is kept together' if within else ''} it did at "
            f"least as well in {count(test.at_least_as_good)} of {count(test.permutations)} "
            f"tables; p{NBSP}={NBSP}(k + 1)/(m + 1){NBSP}={NBSP}{p} (threshold: {decimal(SURE)})."
            + (
                f" With so few tables p cannot be below {decimal(least, P_DIGITS)}."
                if short
                else ""
            ),
            "Permute more often, at least 199 times."
            if short
            else "Do not rely on it: look at the features, or for more cases.",
            test.p,
            SURE,
            "phipson_smyth2010",
        )


def few_arrangements(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """So few ways to deal the labels that no candidate could be told from chance."""
    if evaluation is None or not evaluation.beside.chance:
        return
    found, needed = arrangements(table, plan), math.ceil(1 / SURE)
    if found >= needed:
        return
    ways = int(found)
    yield Finding(
        "few_arrangements",
        "moderate",
        "",
        f"There are only {count(ways)} ways to deal the labels, so the chance check can hardly "
        "tell anything",
        f"What the scheme keeps together trades labels as a whole, or within itself: that leaves "
        f"{count(ways)} different arrangements (threshold: {needed}), and p cannot be expected "
        f"below {decimal(1 / ways)}, however good a candidate is.",
        "Read nothing into its p. It takes more of what is kept together.",
        ways,
        needed,
        "elementary",
    )


def permuted_off_chance(
    table: Table, plan: Plan, evaluation: Evaluation | None
) -> Iterator[Finding]:
    """Permuted labels that are answered better or worse than by guessing."""
    guess = {"balanced_accuracy": 1 / table.n_classes, "auc": 0.5}.get(plan.choosing_measure)
    if evaluation is None or guess is None or not evaluation.beside.chance:
        return
    if dealt_among(table, kept_together(table, plan)) == "within groups":
        return  # what groups tell of the classes stays, so guessing is no yardstick
    for check in evaluation.beside.chance:
        values = check.permuted[~np.isnan(check.permuted)]
        if check.best or check.candidate != evaluation.about or len(values) < 2:
            continue
        mean = float(values.mean())
        error = float(values.std(ddof=1)) / math.sqrt(len(values))
        if abs(mean - guess) <= max(OFF_CHANCE, 3 * error):
            continue
        yield Finding(
            "permuted_off_chance",
            "grave",
            check.candidate,
            f"With permuted labels {plan.title(check.candidate)} is {tenths(abs(mean - guess))} "
            f"{'above' if mean > guess else 'below'} guessing",
            f"Over {count(len(values))} permuted tables its mean is {decimal(mean, 3)}, where "
            f"{decimal(guess, 3)} is expected (threshold: {tenths(OFF_CHANCE)} and three standard "
            "errors). Something lets held-out cases be known, or keeps them from being judged "
            "fairly.",
            "Look for rows of one unit under several names, for columns that tell the unit, and "
            "name the column of the unit if rows repeat.",
            mean,
            guess,
            "own_leakage",
        )


def curve_deals_units(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """The curve deals single units where the headline leaves whole blocks out, or goes by time."""
    key = plan.scheme(plan.headline_scheme).key
    if evaluation is None or not evaluation.beside.curves or key not in BY_COLUMN:
        return
    column = quoted(str(plan.scheme(plan.headline_scheme).values()["column"]))
    yield Finding(
        "curve_deals_units",
        "moderate",
        "",
        f"The learning curve leaves out 0 entries of {column} as a whole, so it says nothing about "
        "one never seen",
        f"The headline {BY_COLUMN[key]} {column}; the curve deals single {table.noun.plural}, so "
        f"the same {column} is learned from and judged (held out by {column}: 0; threshold: 1). "
        "It can rise by what a new one would not bring.",
        f"Read it as about further {table.noun.plural} of the same {column} only.",
        0,
        1,
        "own_learning_curve",
    )


def still_rising(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """The learning curve still rises: more cases would give a better model."""
    if evaluation is None:
        return
    for curve in evaluation.beside.curves:
        found = curve.found
        if curve.part.candidate != evaluation.about or found.call != "rising":
            continue
        noun, ends = noun_of(table, plan.keep), found.gain.interval
        yield Finding(
            "still_rising",
            "note",
            curve.of_class or curve.part.candidate,
            f"{capitalised(plan.title(curve.part.candidate))} still learns from more "
            f"{noun.plural}: {tenths(found.gain.value)} over the last doubling",
            f"{capitalised(measure_name(table, plan, found.measure, curve.of_class))}: "
            f"{found.reason} The threshold for the lower end is 0.",
            f"Add {noun.plural}, and judge the model again.",
            ends.low,
            0,
            "own_learning_curve",
        )
