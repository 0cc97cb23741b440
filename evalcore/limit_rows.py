"""Each acceptance limit in sentences: its figure, its verdict, and what would show it."""

import math
from dataclasses import dataclass

from evalcore.answer import WITH_CUT_OFF, measure_name, so_far
from evalcore.at_cut_off import ESTIMATOR as AT_CUT_OFF
from evalcore.clusters import independent_noun, named_in
from evalcore.evaluation import HIGHEST, Evaluation
from evalcore.judged import Judged
from evalcore.outlook import Outlook, in_words, outlook
from evalcore.sample_size import LEAST_UNITS, cases_to_show, upper_bound
from evalcore.schemes import LEAST_BLOCKS
from evalcore.verdict import Verdict, part_behind, verdicts_in_use
from evalcore.wording import (
    capitalised,
    count,
    level,
    n_equals,
    percent,
    percent_down,
    percent_up,
    quoted,
    with_interval,
)


@dataclass(frozen=True)
class LimitRow:
    """One acceptance limit as a row: name, figure, verdict, what stands behind it and further on.

    `further` says how many more units would show it; empty where none are asked for.
    """

    name: str
    figure: str
    verdict: Verdict
    detail: str
    further: str


def limit_rows(evaluation: Evaluation, candidate: str) -> tuple[LimitRow, ...]:
    """Each acceptance limit with its figure, verdict and what would show it.

    None while rounds of the first scheme are missing: more rounds could change a verdict.
    """
    if so_far(evaluation):
        return ()
    rows = []
    for verdict in verdicts_in_use(evaluation, candidate):
        limit = verdict.limit
        by = AT_CUT_OFF if verdict.at_cut_off else HIGHEST
        estimate = evaluation.estimate(
            limit.measure, candidate, estimator=by, of_class=limit.of_class
        )
        name = measure_name(evaluation.table, evaluation.plan, limit.measure, limit.of_class)
        ahead = outlook(evaluation, candidate, verdict)
        rows.append(
            LimitRow(
                capitalised(name) + (WITH_CUT_OFF if verdict.at_cut_off else ""),
                f"{with_interval(estimate.value, estimate.interval, estimate.n)}, "
                f"{n_equals(estimate.n)}",
                verdict,
                _detail(evaluation, candidate, ahead),
                in_words(evaluation, ahead),
            )
        )
    return tuple(rows)


def _chosen_here(evaluation: Evaluation, verdict: Verdict) -> bool:
    rule = evaluation.plan.cut_off
    return verdict.at_cut_off and rule is not None and rule.chosen_on_these_cases


def _why_no_bound(evaluation: Evaluation, part: Judged, verdict: Verdict) -> str:
    """What keeps a limit from being judged at all."""
    classes, of_class = evaluation.table.classes, verdict.limit.of_class
    if part.cut_offs == "unlike":
        return "the cut-off that goes to work was not judged"
    if of_class and part.always_names is not None:
        always = quoted(classes[part.always_names])
        return f"the model fitted on all cases always answers {always}"
    asked = {"accuracy": [], "sensitivity": [of_class]}.get(verdict.limit.measure, classes)
    of_each = [part.blocks_with(classes.index(name)) for name in asked]
    if part.units is not None and part.blocks_with(None) < LEAST_BLOCKS:
        return f"fewer than {LEAST_BLOCKS} blocks were held out"
    if part.units is not None and min(of_each, default=LEAST_BLOCKS) < LEAST_BLOCKS:
        return f"fewer than {LEAST_BLOCKS} blocks of a class were held out"
    return "the luck of being best cannot be told"


def _detail(evaluation: Evaluation, candidate: str, given: Outlook) -> str:
    """What the bounds come to, and what would show the limit by count."""
    table, verdict = evaluation.table, given.verdict
    limit, n = verdict.limit, verdict.n
    part = part_behind(evaluation, candidate, verdict)
    noun = independent_noun(
        table, evaluation.plan, evaluation.scheme, counted_by=evaluation.counted_by
    )
    least = level(limit.least)
    set_on = f", set {limit.set_on}" if limit.set_on else ""
    stated = f"Limit {least}{set_on}"
    if math.isnan(verdict.at_least):
        if n == 0:
            return f"{stated}; none of these {noun.plural} has been held out yet."
        return f"{stated}; no bound can be given: {_why_no_bound(evaluation, part, verdict)}."
    if verdict.word == "shown to fall short":
        return f"{stated}; these {noun.plural} show at most {percent_up(verdict.at_most, n)}."
    shows = f"{stated}; these {noun.plural} show at least {percent_down(verdict.at_least, n)}."
    if verdict.word == "shown":
        return shows
    units = named_in(limit.of_class, noun, table.noun_for(evaluation.counted_by))
    if n < LEAST_UNITS:
        wrong = 1 - upper_bound(0, n, confidence=limit.confidence)
        return (
            f"{stated}; {n} {units} are too few for a verdict (at least {LEAST_UNITS} are "
            f"needed): even {n} of {n} right could mean {percent(wrong, n)}."
        )
    if _chosen_here(evaluation, verdict):
        return (
            f"{shows} The cut-off was chosen on these {noun.plural}, so nothing is shown with it."
        )
    if limit.measure == "balanced_accuracy":
        return f"{shows} It may be true; these are too few to show it."
    if part.units is not None:
        return f"{shows} More {noun.plural} would narrow that."
    misses = math.ceil((1 - verdict.rate) * n - 1e-9)
    needed = cases_to_show(limit.least, misses=misses, confidence=limit.confidence)
    with_one = cases_to_show(limit.least, misses=1, confidence=limit.confidence)
    misses_made = f"{misses} miss{'' if misses == 1 else 'es'}"
    if given.too_variable or needed <= n:
        # the count alone would do: it is the model's own variance that stands against it
        return f"{shows} The model varies too much from round to round to show more."
    more = f" By the count alone, {least} with {misses_made} takes {count(needed)} {units}"
    return shows + more + (f", with one miss {count(with_one)}." if misses > 1 else ".")
