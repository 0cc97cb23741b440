"""What the coverage study says of the user's own headline."""

import math
from collections.abc import Sequence

from evalcore.at_cut_off import ESTIMATOR as AT_CUT_OFF
from evalcore.choice import choose
from evalcore.evaluation import Evaluation
from evalcore.evidence import LEVEL, Headline, Line, like
from evalcore.figures import Estimate
from evalcore.measures import ALL_MEASURES
from evalcore.profile import smallest_class
from evalcore.schemes import SCHEMES
from evalcore.wording import Noun, count, level, listed, percent

ANSWERED = ("accuracy", "sensitivity")  # every answer gives these, whatever its measure
STUDIED = {"cross_validation": "default", "bootstrap": "bootstrap"}
NONE_LIKE = (
    "No simulated table resembles this one (candidate, scheme, level, cut-off, number of "
    "cases, smallest class, features), so whether the interval keeps its word here is not measured."
)


def headline(evaluation: Evaluation, measure: str = "") -> Headline | None:
    """What the headline rests on, or another measure; None where nothing of its kind was studied.

    That is: at another level, or under another scheme than the recommended cross-validation or
    bootstrap.
    """
    table, plan = evaluation.table, evaluation.plan
    used = plan.scheme(evaluation.scheme)
    studied = [choose(SCHEMES, key) for key in STUDIED]
    if plan.level != LEVEL or used not in studied:
        return None
    estimate = _estimate(evaluation, measure)
    estimator = estimate.estimator
    if estimate.measure == "auc" and len(plan.schemes) == 1:
        estimator = "mean_of_rounds_alone"
    elif _rests_on_others(evaluation, estimate.measure) and (
        set(plan.schemes) != set(studied) or estimator == AT_CUT_OFF
    ):
        return None  # cut-offs were studied under one scheme
    rule = plan.cut_off if evaluation.in_use == AT_CUT_OFF else None
    called = table.units_holding[table.classes.index(rule.of_class)] if rule else 0
    return Headline(
        plan.candidate(evaluation.about),
        rule,
        int(called),
        STUDIED[used.key],
        estimator,
        estimate.measure,
        evaluation.counted_by,
        table.n_units,
        smallest_class(table)[1],
        table.n_cases,
        len(table.columns),
        table.n_classes,
    )


def matching(
    evaluation: Evaluation, among: Sequence[Line] | None = None, *, measure: str = ""
) -> tuple[Line, ...]:
    """Lines like the headline's that tell enough; none while rounds it rests on are missing."""
    given = headline(evaluation, measure) if _complete(evaluation, measure) else None
    return tuple(line for line in like(given, among) if line.tells) if given else ()


def falling_short(evaluation: Evaluation, among: Sequence[Line] | None = None) -> tuple[Line, ...]:
    """Lines like any figure of the answer in which the interval did not keep its word."""
    measures = dict.fromkeys((_estimate(evaluation).measure, *ANSWERED))
    return tuple(
        line
        for measure in measures
        for line in matching(evaluation, among, measure=measure)
        if line.short
    )


def sentence(evaluation: Evaluation, among: Sequence[Line] | None = None) -> str:
    """What is known of the headline's interval on simulated tables like this one.

    Empty where the headline has no interval, and while rounds it rests on are missing.
    """
    bounds = _estimate(evaluation).interval
    if not _complete(evaluation) or bounds is None or not bounds.defined:
        return ""
    found = matching(evaluation, among)
    tables = sum(line.tables - line.without_interval for line in found)
    shares = [line.coverage for line in found if not math.isnan(line.coverage)]
    if not shares:
        return NONE_LIKE
    held = [percent(share, tables) for share in (min(shares), max(shares))]
    lacking = sum(line.without_interval for line in found)
    none = f", with none in {count(lacking)} more" if lacking else ""
    return (
        f"In {count(tables)} simulated tables like this one in size ({size_in_words(found)}), the "
        f"{level(LEVEL)} interval of this candidate’s {ALL_MEASURES[found[0].measure].trade} held "
        f"the true value in {' to '.join(dict.fromkeys(held))}{none}; real tables may be otherwise."
    )


def size_in_words(found: Sequence[Line]) -> str:
    """How large simulated tables were: "60 cases, about 30 in the smallest class; ..."."""
    rows = listed([count(rows) for rows in sorted({line.rows for line in found})], last="or")
    what = "cases" if rows == "1" else f"units of {rows} rows"
    kinds = Noun("kind of data", "kinds of data").counted(len({line.scenario for line in found}))
    return (
        f"{_span([line.n for line in found])} {what}, about "
        f"{_span([round(line.smallest_class) for line in found])} in the smallest class; {kinds}"
        f"{'; cut-offs learned alike' if found[0].cut_off else ''}"
    )


def _span(numbers: Sequence[int]) -> str:
    return " to ".join(dict.fromkeys([count(min(numbers)), count(max(numbers))]))


def _estimate(evaluation: Evaluation, measure: str = "") -> Estimate:
    """The headline's figure or another; of sensitivity the balanced one, unless asked for."""
    table = evaluation.table
    of_class = table.classes[smallest_class(table)[0]] if measure == "sensitivity" else ""
    headline_s = evaluation.plan.measure
    measure = measure or ("balanced_accuracy" if headline_s == "sensitivity" else headline_s)
    # at a learned cut-off where there is one
    estimator = "mean_of_rounds" if measure == "auc" else evaluation.in_use
    return evaluation.estimate(measure, evaluation.about, estimator=estimator, of_class=of_class)


def _rests_on_others(evaluation: Evaluation, measure: str) -> bool:
    """Whether what other schemes show of the model's variance bears on the headline's interval."""
    part = evaluation.part_in_use(evaluation.about)
    if measure == "accuracy":
        return math.isnan(part.own_tau2(None))
    return measure == "auc" or any(math.isnan(part.own_tau2(k)) for k in range(part.n_classes))


def _complete(evaluation: Evaluation, measure: str = "") -> bool:
    """Whether all rounds that the headline's interval rests on have finished."""
    others = _rests_on_others(evaluation, _estimate(evaluation, measure).measure)
    names = evaluation.plan.scheme_names if others else (evaluation.scheme,)
    return all(
        name in evaluation.rounds
        and evaluation.rounds[name].n_rounds == evaluation.planned.get(name)
        for name in names
    )
