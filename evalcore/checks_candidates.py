"""Doubts about candidates: no better than a constant answer, memory, instability, width."""

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from evalcore import intervals
from evalcore.answer import by_highest
from evalcore.estimates import MEMORISES, mean_of_rounds
from evalcore.evaluation import HIGHEST, Evaluation
from evalcore.figures import Finding
from evalcore.judged import plus_632
from evalcore.per_case import agreement_within_units
from evalcore.plan import Plan
from evalcore.profile import majority
from evalcore.schemes import SCHEMES
from evalcore.table import Table
from evalcore.wording import (
    capitalised,
    count,
    decimal,
    n_equals,
    percent,
    points,
    quoted,
    tenths,
    with_interval,
)

OVERFITTING, GAP = 0.3, 0.15
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
    for name in _learned(evaluation):
        by = evaluation.in_use if name == evaluation.about else HIGHEST
        estimate = evaluation.estimate("accuracy", name, estimator=by)
        bounds = estimate.interval
        if bounds is None or not bounds.low <= share:
            continue
        n = estimate.n
        yield Finding(
            "not_better_than_majority",
            "grave" if estimate.value <= share else "moderate",
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


def always_the_same(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """The model fitted on all cases names one class only, those of the rounds name others too."""
    if evaluation is None:
        return
    for name in _learned(evaluation):
        part = evaluation.part_in_use(name)
        if part.always_names is None:
            continue
        others = np.delete(part.pooled.sum(axis=0), part.always_names)
        share, n = float(others.sum() / part.pooled.sum()), len(part.shares)
        yield Finding(
            "always_the_same",
            "grave",
            name,
            f"{capitalised(plan.title(name))} fitted on all cases always answers "
            f"{quoted(table.classes[part.always_names])}",
            f"None of {count(n)} gets another answer (threshold: 1), while models of the rounds "
            f"gave another in {percent(share, n)} of held-out answers. What share of each class is "
            "found therefore says little about the model that goes to work: no interval is offered "
            "for it, and no limit on it is called shown.",
            "Take another candidate or another setting, or features that tell the classes apart.",
            0,
            1,
            "own_simulation",
        )


def memorises(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Right on everything it was trained on."""
    if evaluation is None:
        return
    for name in _learned(evaluation):
        part = evaluation.part(name, evaluation.scheme)
        seen = mean_of_rounds(part.in_bag_values("accuracy"))[0]
        held = mean_of_rounds(part.held_values("accuracy"))[0]
        if seen < MEMORISES:
            continue
        n = table.n_units
        yield Finding(
            "memorises",
            "note",
            name,
            f"{capitalised(plan.title(name))} memorises: {percent(seen, n)} on what it was trained "
            f"on, {percent(held, n)} held out",
            f"Share right on its own bags {decimal(seen, 4)}, threshold "
            f"{decimal(MEMORISES, 3)}. What such a candidate scores on cases it was trained on "
            "says nothing.",
            "Look at held-out figures only.",
            seen,
            MEMORISES,
            "own_simulation",
        )


def misleading_632(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """The .632 estimate is optimistic for candidates that fit their own bag too well."""
    if evaluation is None:
        return
    for scheme in _bootstraps(plan, evaluation):
        for name in _learned(evaluation):
            sign = why_632_misleads(evaluation, name, scheme)
            if sign is None:
                continue
            yield Finding(
                "misleading_632",
                "moderate",
                name,
                f".632 misleads for {plan.title(name)}: {sign.what} {decimal(sign.value, 3)}, "
                f"the threshold is {decimal(sign.threshold, 3)}",
                f"Of the three signs of a candidate that fits its own cases too well ({_SIGNS}) "
                "at least one is there. .632 then comes out too high, the per-round form more so, "
                "and .632+ somewhat.",
                "Use the held-out estimate of the first scheme.",
                sign.value,
                sign.threshold,
                "own_simulation",
            )


_SIGNS = (
    f"share right on the cases fitted to at least {decimal(MEMORISES, 3)}, relative overfitting "
    f"above {decimal(OVERFITTING)}, or {points(GAP, signed=False)} above out-of-bag"
)


@dataclass(frozen=True)
class Sign:
    """One sign that .632 misleads: what, its value and the threshold it has crossed."""

    what: str
    value: float
    threshold: float


def why_632_misleads(evaluation: Evaluation, candidate: str, scheme: str) -> Sign | None:
    """The first sign that .632 must not be trusted for a candidate, or None."""
    out_of_bag = evaluation.estimate("accuracy", candidate, scheme=scheme).value
    part = evaluation.part(candidate, scheme)
    plus = plus_632(part, "accuracy", out_of_bag)
    if plus is None:
        return None
    apparent = part.whole_value("accuracy")
    signs = (
        (apparent >= MEMORISES, Sign("share right on the cases fitted to", apparent, MEMORISES)),
        (
            plus.overfitting > OVERFITTING,
            Sign("relative overfitting", plus.overfitting, OVERFITTING),
        ),
        (apparent - out_of_bag > GAP, Sign("gap to out-of-bag", apparent - out_of_bag, GAP)),
    )
    return next((sign for crossed, sign in signs if crossed), None)


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
        f"The interval is wide: {points(bounds.width, signed=False)}, asked about from "
        f"{points(WIDTH, signed=False)}",
        f"{with_interval(estimate.value, bounds, estimate.n)}, {n_equals(estimate.n)}. The width "
        "comes from the number of cases; more rounds do not narrow it.",
        f"Judge more {table.noun.plural} before deciding on a difference this small.",
        bounds.width,
        WIDTH,
        "own_simulation",
    )


def unstable_model(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """The model's own variance is larger than that of judging a few cases."""
    if evaluation is None:
        return
    for name in _learned(evaluation):
        part = evaluation.part_in_use(name)
        by = evaluation.in_use if name == evaluation.about else HIGHEST
        estimate = evaluation.estimate("accuracy", name, estimator=by)
        if math.isnan(part.tau2) or math.isnan(estimate.value):
            continue
        p, n = estimate.value, estimate.n
        sampling = max(p * (1 - p), intervals.LEAST_SPREAD) / n
        if part.tau2 <= sampling:
            continue
        bare = intervals.wilson(p, n, level=plan.level)
        with_it = intervals.with_model_variance(p, n, part.tau2, level=plan.level)
        yield Finding(
            "unstable_model",
            "moderate",
            name,
            f"{capitalised(plan.title(name))} changes a lot from round to round: that widens its "
            f"interval by {points(with_it.width - bare.width, signed=False)}",
            f"Standard deviation of the share right from the model alone "
            f"{points(math.sqrt(part.tau2), signed=False)}; the threshold is that from "
            f"judging {n} cases, {points(math.sqrt(sampling), signed=False)}.",
            "Prefer a steadier candidate, or more cases to learn from.",
            part.tau2,
            sampling,
            "own_model_variance",
        )


def model_variance_unknown(
    _: Table, plan: Plan, evaluation: Evaluation | None
) -> Iterator[Finding]:
    """Each case is answered once, so the interval cannot include the model's variance."""
    if evaluation is None:
        return
    part = evaluation.part(evaluation.about, evaluation.scheme)
    if not math.isnan(part.tau2):
        return
    yield Finding(
        "model_variance_unknown",
        "moderate",
        evaluation.scheme,
        "The interval leaves out how much the model itself varies: each case was answered at most "
        "once, twice is needed",
        f"Each case is held out in at most {int(part.held.rounds.times_tested.max())} round of the "
        "first scheme, and no other scheme holds one out more often; from 2 on, the model's "
        "variance can be told apart. Such an interval holds the truth less often than it promises, "
        "most so for a model that varies a lot.",
        "Repeat the cross-validation, or take random subsampling or the bootstrap, be it as a "
        "second scheme.",
        1,
        2,
        "own_simulation",
    )


def schemes_disagree(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Cross-validation and .632+ are apart."""
    if evaluation is None or plan.scheme(evaluation.scheme).key == "bootstrap":
        return
    for scheme in _bootstraps(plan, evaluation):
        for name in _learned(evaluation):
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
    tried = len(_learned(evaluation))
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


def _learned(evaluation: Evaluation) -> list[str]:
    """Candidates that look at features."""
    return [name for name in evaluation.candidates if not evaluation.is_baseline(name)]


def _bootstraps(plan: Plan, evaluation: Evaluation) -> list[str]:
    return [s for s in evaluation.rounds if SCHEMES[plan.scheme(s).key].repeats_cases]
