"""Doubts about what was learned or checked beside the estimates: settings, chance, curve."""

import math
from collections.abc import Iterator

import numpy as np

from evalcore.answer import measure_name
from evalcore.beside_answer import P_DIGITS
from evalcore.candidates import CANDIDATES
from evalcore.evaluation import Evaluation
from evalcore.figures import Finding
from evalcore.groups import noun_of
from evalcore.measures import ALL_MEASURES
from evalcore.permuted import arrangements, dealt_among, kept_together
from evalcore.plan import Plan
from evalcore.table import Table
from evalcore.wording import (
    NBSP,
    capitalised,
    count,
    decimal,
    level,
    percent,
    quoted,
    tenths,
)

SURE = 0.05  # p above which a figure is not told from chance
OFF_CHANCE = 0.05  # points that permuted labels may be off what guessing gives
HALF = 0.5
BY_COLUMN = {"leave_block_out": "leaves out each entry of", "forward_in_time": "goes by"}


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
            f"{noun.plural}: {tenths(found.gain.value)} of {ALL_MEASURES[found.measure].trade} "
            "over the last doubling",
            f"{capitalised(measure_name(table, plan, found.measure, curve.of_class))}: "
            f"{found.reason} The threshold for the lower end is 0.",
            f"Add {noun.plural}, and judge the model again.",
            ends.low,
            0,
            "own_learning_curve",
        )
