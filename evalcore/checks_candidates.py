"""Doubts about candidates: no better than a constant answer, width, schemes apart, luck."""

import math
from collections.abc import Iterator

from evalcore.answer import by_highest
from evalcore.checks_models import why_632_misleads
from evalcore.evaluation import HIGHEST, Evaluation
from evalcore.figures import Finding
from evalcore.measures import ALL_MEASURES
from evalcore.per_case import agreement_within_units
from evalcore.plan import Plan
from evalcore.profile import majority
from evalcore.table import Table
from evalcore.wording import (
    capitalised,
    n_equals,
    percent,
    points,
    quoted,
    tenths,
    with_interval,
)

WIDTH = 0.20
APART = 0.03
LUCK, MANY, MANY_UNITS = 0.02, 10, 200


def failed(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """A candidate could not be fitted."""
    for name, why in (evaluation.failures if evaluation else {}).items():
        yield Finding(
            "failed",
            "grave",
            name,
            f"{capitalised(plan.title(name))} could not be fitted and is left out",
            f"At least one round failed (threshold: 0): {why}",
            "See the record's log; change its settings or leave it out.",
            1,
            0,
            "common_practice",
        )


def not_better_than_majority(
    table: Table, plan: Plan, evaluation: Evaluation | None
) -> Iterator[Finding]:
    """Always giving the most frequent answer would do about as well."""
    if evaluation is None:
        return
    largest, share = majority(table, evaluation.counted_by)
    always = quoted(table.classes[largest])
    for name in evaluation.learners:
        by = evaluation.in_use if name == evaluation.about else HIGHEST
        estimate = evaluation.estimate("accuracy", name, estimator=by)
        bounds = estimate.interval
        if bounds is None or not bounds.low <= share:
            continue
        n = estimate.n
        yield Finding(
            "not_better_than_majority",
            # a cut-off gives shares right away for the class whose misses matter
            "grave" if estimate.value <= share and by == HIGHEST else "moderate",
            name,
            f"{capitalised(plan.title(name))} is not shown to be better than always answering "
            f"{always}: {percent(estimate.value, n)} against {percent(share, n)}",
            f"Right in {with_interval(estimate.value, bounds, n)}, {n_equals(n)}; the threshold "
            f"is the majority share, {percent(share, n)}, which must lie below the interval.",
            "Look at the classes one by one, at other features, or for more cases.",
            bounds.low,
            share,
            "common_practice",
        )


def wide_interval(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """The headline's interval leaves much open."""
    if evaluation is None:
        return
    name = evaluation.about
    estimator = "mean_of_rounds" if plan.measure == "auc" else evaluation.in_use
    measure = "balanced_accuracy" if plan.measure == "sensitivity" else plan.measure
    estimate = evaluation.estimate(measure, name, estimator=estimator)
    bounds = estimate.interval
    if bounds is None or not bounds.width > WIDTH:
        return
    yield Finding(
        "wide_interval",
        "moderate",
        name,
        f"The interval of {ALL_MEASURES[measure].trade} is wide: "
        f"{points(bounds.width, signed=False)}, asked about from {points(WIDTH, signed=False)}",
        f"{with_interval(estimate.value, bounds, estimate.n)}, {n_equals(estimate.n)}. The width "
        "comes from the number of cases; more rounds do not narrow it.",
        f"Judge more {table.noun.plural} before deciding on a difference this small.",
        bounds.width,
        WIDTH,
        "own_simulation",
    )


def schemes_disagree(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Cross-validation and .632+ are apart."""
    if evaluation is None or plan.scheme(evaluation.scheme).key == "bootstrap":
        return
    for scheme in evaluation.bootstraps:
        for name in evaluation.learners:
            first = evaluation.estimate("accuracy", name).value
            second = evaluation.estimate(
                "accuracy", name, scheme=scheme, estimator="point_632_plus"
            ).value
            if not abs(first - second) > APART or why_632_misleads(evaluation, name, scheme):
                continue
            n = evaluation.estimate("accuracy", name).n
            yield Finding(
                "schemes_disagree",
                "moderate",
                name,
                f"Two schemes disagree about {plan.title(name)} by "
                f"{tenths(abs(first - second))}, asked about from {tenths(APART)}",
                f"The first scheme gives {percent(first, n)}, .632+ gives {percent(second, n)}; "
                f"the threshold is {tenths(APART)}.",
                "Take the lower figure until more cases decide.",
                abs(first - second),
                APART,
                "common_practice",
            )


def best_of_several(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """The best of several candidates is partly the luckiest."""
    best = evaluation.winner if evaluation else None
    if evaluation is None or best is None or math.isnan(best.value):
        return
    selected = evaluation.estimate(best.measure, best.candidate)
    luck = selected.value - best.value
    tried = len(evaluation.learners)
    if not (luck > LUCK or (tried > MANY and table.n_units < MANY_UNITS)):
        return
    n = best.n
    yield Finding(
        "best_of_several",
        "moderate",
        best.candidate,
        f"{capitalised(plan.title(best.candidate))} came out best of {tried}: "
        f"{percent(selected.value, n)}, {percent(best.value, n)} once the luck of being best is "
        f"taken off{_in_brackets(by_highest(evaluation))}",
        f"Choosing the best of {tried} on these cases flatters it by "
        f"{points(luck, signed=False)}; thresholds: {points(LUCK, signed=False)}, or more than "
        f"{MANY} candidates on fewer than {MANY_UNITS} cases.",
        "Quote the corrected figure, and try fewer candidates.",
        luck,
        LUCK,
        "tsamardinos2018",
    )


def rows_agree(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Rows of one unit that are answered alike add little to each other."""
    if evaluation is None or not table.has_units:
        return
    name = evaluation.about
    alike = agreement_within_units(evaluation, name)
    if math.isnan(alike):
        return
    noun, n = table.noun, table.n_units
    yield Finding(
        "rows_agree",
        "note",
        name,
        f"Two rows of one {noun.singular} are answered alike in {percent(alike, n)}",
        f"Held out together, two rows of a {noun.singular} got the same answer from "
        f"{plan.title(name)} in {percent(alike, n)} of pairs (mean over {noun.plural}; all alike "
        f"would mean that further rows add nothing). {capitalised(noun.plural)} count, not rows.",
        f"For a surer figure judge more {noun.plural}, not more rows of each.",
        alike,
        1.0,
        "elementary",
    )


def _in_brackets(words: str) -> str:
    return f" ({words})" if words else ""
