"""Doubts about the models of a candidate: one answer for all, memory, instability."""

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from evalcore import intervals
from evalcore.estimated import default_interval
from evalcore.estimates import MEMORISES, mean_of_rounds
from evalcore.evaluation import HIGHEST, Evaluation
from evalcore.figures import Finding
from evalcore.judged import plus_632
from evalcore.plan import Plan
from evalcore.table import Table
from evalcore.wording import (
    capitalised,
    class_name,
    count,
    decimal,
    percent,
    points,
    quoted,
)

OVERFITTING, GAP = 0.3, 0.15


def always_the_same(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """The model fitted on all cases names one class only, those of the rounds name others too."""
    if evaluation is None:
        return
    for name in evaluation.candidates:
        part = evaluation.part_in_use(name)
        if part.always_names is None:
            continue
        others = np.delete(part.pooled.sum(axis=0), part.always_names)
        share, n = float(others.sum() / part.pooled.sum()), len(part.shares)
        yield Finding(
            "always_the_same",
            "grave",
            name,
            f"{capitalised(plan.title(name))}, fitted on all cases, answers "
            f"{quoted(table.classes[part.always_names])} for all {count(n)} of them",
            f"None of them gets another answer (threshold: 1), while models of the rounds "
            f"gave another in {percent(share, n)} of held-out answers. What share of each class is "
            "found therefore says little about the model that goes to work: no interval is offered "
            "for it, and no limit on it is called shown. The share right of all and its mean over "
            "classes kept their word on simulated tables of that kind, and stand.",
            "Take another candidate or another setting, or features that tell the classes apart.",
            0,
            1,
            "own_simulation",
        )


def memorises(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Right on everything it was trained on."""
    if evaluation is None:
        return
    for name in evaluation.learners:
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
    for scheme in evaluation.bootstraps:
        for name in evaluation.learners:
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


def unstable_model(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """The model's own variance is larger than that of judging a few cases."""
    if evaluation is None:
        return
    for name in evaluation.learners:
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
    table: Table, plan: Plan, evaluation: Evaluation | None
) -> Iterator[Finding]:
    """The rounds of no scheme tell how much the model varies, of all cases or of a class."""
    if evaluation is None:
        return
    part = evaluation.part_in_use(evaluation.about)
    if default_interval(plan, part, "accuracy", 0) is None:
        return
    learned, noun = part.cut_offs == "learned", table.noun_for(evaluation.counted_by).plural
    where = "make random subsampling or the bootstrap the first scheme, which alone learns cut-offs"
    second = "take random subsampling or the bootstrap, be it as a second scheme"
    advice = where if learned else second
    if math.isnan(part.tau2):
        if part.held.rounds.times_tested.max() > 1:
            one = table.noun_for(evaluation.counted_by).singular if part.units is None else "block"
            why = f"rounds hold out 1 {one} at a time, 2 are needed"
            seen = "Only answers to independent cases of one round tell how models differ"
            advice = f"Take fewer folds, or {advice}."
        else:
            why = "each case was answered at most once, twice is needed"
            seen = "Each case is held out in at most 1 round of the first scheme" + (
                "" if learned else ", and no other scheme holds one out more often"
            )
            advice = f"Repeat the cross-validation, or {advice}."
        yield _unknown(
            evaluation.scheme,
            f"The interval leaves out how much the model itself varies: {why}",
            f"{seen}; from 2 on, the model's variance can be told apart",
            advice,
        )
        return
    for k, name in enumerate(table.classes):
        if math.isnan(part.tau2_of(k)) and default_interval(plan, part, "sensitivity", k):
            yield _unknown(
                name,
                f"The interval of {class_name(name)} {noun} leaves out how much the model itself "
                "varies: rounds hold out 1 of them at a time that is independent, 2 are needed",
                "No round holds out 2 independent ones of the class together more than once, so "
                "how much the share right of the class varies with the model cannot be told apart",
                f"Take fewer folds, or {advice}.",
            )


def _unknown(subject: str, title: str, seen: str, advice: str) -> Finding:
    return Finding(
        "model_variance_unknown",
        "moderate",
        subject,
        title,
        f"{seen}. Such an interval holds the truth less often than it promises, most so for a "
        "model that varies a lot.",
        advice,
        1,
        2,
        "own_simulation",
    )
