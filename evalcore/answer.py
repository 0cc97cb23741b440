"""The answer in sentences: what the figures say, in the user's own nouns."""

import math

from evalcore.evaluation import HIGHEST, Evaluation
from evalcore.figures import Estimate
from evalcore.limit import Limit
from evalcore.measures import ALL_MEASURES, MEASURES
from evalcore.plan import Plan
from evalcore.profile import majority
from evalcore.table import Table
from evalcore.verdict import verdicts_in_use
from evalcore.wording import (
    NBSP,
    capitalised,
    class_name,
    count,
    level,
    listed,
    percent,
    quoted,
    with_interval,
)

WITH_CUT_OFF = " at the cut-off"
BY_HIGHEST = "answered by the highest score, not at the cut-off"

LOSS_NAMES = {
    "brier": "squared distance of probabilities (Brier score, sum over classes)",
    "log_loss": "log loss",
}
NEARLY_ALL = 0.95  # where the interval must begin for the title to say so
CAUTION = (
    "Where a wrong answer can hurt someone, these figures support local rules and licensed "
    "practice and do not replace them."
)


def class_rate(table: Table, plan: Plan, name: str, *, trade: bool = True) -> str:
    """What the share right of one class is called: "failing lots found (sensitivity)".

    In a table of two classes the class of concern is found and the other one passed.
    """
    noun = table.noun_for(plan.counted_by(table)).plural
    passed = table.n_classes == 2 and name != plan.concern_of(table)
    words = f"{class_name(name)} {noun} {'passed' if passed else 'found'}"
    return f"{words} ({'specificity' if passed else 'sensitivity'})" if trade else words


def measure_name(table: Table, plan: Plan, measure: str, of_class: str = "") -> str:
    """A measure said plainly, with the trade's name in brackets."""
    if of_class and measure == "sensitivity":
        return class_rate(table, plan, of_class)
    if of_class:
        return f"{class_name(of_class)}: {_plainly(table, plan, measure)}"
    return _plainly(table, plan, measure)


def _plainly(table: Table, plan: Plan, measure: str) -> str:
    if measure not in ALL_MEASURES:
        return LOSS_NAMES[measure]
    known = ALL_MEASURES[measure]
    units = table.noun_for(plan.counted_by(table)).plural
    return f"{known.plain.format(units=units)} ({known.trade})"


def scheme_in_words(plan: Plan, table: Table, scheme: str) -> str:
    """A scheme as captions name it.

    Parameters
    ----------
    plan : Plan
    table : Table
    scheme : str
        Name of the scheme in the plan.

    Returns
    -------
    str
        E.g. "stratified 5-fold cross-validation by lot, 20 times". Without a unit column nothing
        is said about what is kept together.
    """
    choice = plan.scheme(scheme)
    values = choice.values()
    if choice.key == "leave_one_out":
        return f"leave one {table.noun.singular} out"
    stratified = "stratified " if values.get("stratified") else ""
    by = f" by {table.noun.singular}" if table.has_units else ""
    if values.get("keep"):
        by = f" by {quoted(str(values['keep']))}"
    if choice.key == "cross_validation":
        repeats = int(values["repeats"])
        times = "once" if repeats == 1 else f"{count(repeats)} times"
        return f"{stratified}{values['folds']}-fold cross-validation{by}, {times}"
    held_out = percent(float(values["test_share"]), 1) if "test_share" in values else ""
    rounds = int(values.get("rounds", 1))
    if choice.key == "bootstrap":
        return f"{count(rounds)} {stratified}bootstrap {'round' if rounds == 1 else 'rounds'}{by}"
    if choice.key == "random_subsampling":
        splits = "split" if rounds == 1 else "splits"
        return f"{count(rounds)} {stratified}random {splits}{by}, {held_out} held out"
    if choice.key == "holdout":
        return f"{stratified}hold-out{by}, once, {held_out}"
    column = quoted(str(values["column"]))
    if choice.key == "leave_block_out":
        return f"each entry of {column} left out once"
    return f"forward in time by {column}, {values['parts']} stretches judged"


def _figure(estimate: Estimate, *, noun: str = "") -> str:
    n = f"n{NBSP}={NBSP}{count(estimate.n)}{NBSP}{noun}".rstrip()
    bounds = estimate.interval
    if bounds is None or not bounds.defined:
        return f"{percent(estimate.value, estimate.n)} ({n})"
    return with_interval(estimate.value, bounds, estimate.n)[:-1] + f", {n})"


def by_highest(evaluation: Evaluation) -> str:
    """What has to stand by figures of all candidates where the answer is at a cut-off."""
    return "" if evaluation.in_use == HIGHEST else BY_HIGHEST


def not_judged(evaluation: Evaluation) -> bool:
    """Whether the answer's held-out figures are not about the cut-off that goes to work."""
    at = evaluation.at_cut_off(evaluation.about)
    return at is not None and bool(at.unlike)


def answer(evaluation: Evaluation) -> str:
    """The headline sentence: the share right with its interval and n, each class, the majority.

    Says what it covers: further cases obtained like these, with the same share of classes.
    """
    table, plan = evaluation.table, evaluation.plan
    noun = table.noun_for(evaluation.counted_by).plural
    about = evaluation.about
    concern = plan.concern_of(table)
    two = table.n_classes == 2 and concern
    mix = f"share of {class_name(concern)} {noun}" if two else "shares of classes"
    whole = evaluation.estimate("accuracy", about, estimator=evaluation.in_use)
    at = "" if evaluation.in_use == HIGHEST else WITH_CUT_OFF
    if not at and plan.has_cut_off(plan.candidate(about)):
        at = " by the highest score"  # the scheme that learns cut-offs has no round yet
    bounds = whole.interval
    stated = (
        _figure(whole, noun=noun).replace("(", f"({level(bounds.level)} interval ", 1)
        if bounds and bounds.defined
        else _figure(whole, noun=noun)
    )
    k, share = majority(table, evaluation.counted_by)
    always = (
        f"Always answering {quoted(table.classes[k])} would be right in {percent(share, whole.n)}."
    )
    if math.isnan(whole.value) and evaluation.in_use != HIGHEST:
        return f"Nothing can be said of further {noun}: no round learned a cut-off. {always}"
    if not_judged(evaluation):
        return (
            f"Nothing can be said of further {noun}: the cut-off that goes to work was not judged. "
            f"While held out, each round at its own, {plan.title(about)} was right in {stated}; "
            f"{listed(_by_class(evaluation, about))}. {always}"
        )
    return (
        f"On further {noun} obtained like these, with the same {mix}, {plan.title(about)}{at} is "
        f"expected to be right in {stated}; {listed(_by_class(evaluation, about))}. {always}"
    )


def _by_class(evaluation: Evaluation, candidate: str) -> list[str]:
    """Each class with its figure, the class of concern first; of many classes the worst three."""
    table, plan = evaluation.table, evaluation.plan
    by = evaluation.in_use if candidate == evaluation.about else HIGHEST
    given = [
        evaluation.estimate("sensitivity", candidate, estimator=by, of_class=c)
        for c in table.classes
    ]
    concern = plan.concern_of(table)
    if len(given) > 4:
        given = sorted(given, key=lambda e: e.value)[:3]
    else:
        given = sorted(given, key=lambda e: e.of_class != concern)
    return [f"{class_rate(table, plan, e.of_class, trade=False)} {_figure(e)}" for e in given]


def best_sentence(evaluation: Evaluation) -> str:
    """Who came out best, and what that is worth without luck; empty with one candidate."""
    best = evaluation.winner
    if best is None or math.isnan(best.value):
        return ""
    plan = evaluation.plan
    selected = evaluation.estimate(best.measure, best.candidate)
    # at a cut-off verdicts start from what its own correction says
    starts = plan.limits and (best.candidate, evaluation.in_use) == (evaluation.about, HIGHEST)
    start = "; verdicts start there" if starts else ""
    tried = len(evaluation.learners)
    by = by_highest(evaluation)
    return (
        f"Of {tried} candidates {plan.title(best.candidate)} came out best by "
        f"{ALL_MEASURES[best.measure].trade}: {percent(selected.value, best.n)}, "
        f"{percent(best.value, best.n)} once the luck of being best is taken off"
        f"{f' ({by})' if by else ''}{start}."
    )


def so_far(evaluation: Evaluation) -> str:
    """How much of the first scheme the figures rest on; empty once it is complete."""
    scheme = evaluation.plan.scheme_names[0]
    planned = evaluation.planned.get(scheme, 0)
    done = evaluation.rounds[scheme].n_rounds if scheme in evaluation.rounds else 0
    return f"So far, {count(done)} of {count(planned)} rounds: " if done < planned else ""


def title(evaluation: Evaluation) -> str:
    """The answer in a few words: the verdicts, or about how many of ten are right.

    No verdict is given while rounds of the first scheme are missing.
    """
    missing = so_far(evaluation)
    if missing:
        said = _of_ten(evaluation)
        return missing + said[:1].lower() + said[1:]
    given = verdicts_in_use(evaluation, evaluation.about)
    table, plan = evaluation.table, evaluation.plan
    noun = table.noun_for(evaluation.counted_by).plural
    if given:
        return " ".join(
            f"{capitalised(_short(table, plan, v.limit, noun))}"
            f"{WITH_CUT_OFF if v.at_cut_off else ''}: {v.word}."
            for v in given
        )
    return _of_ten(evaluation)


def _of_ten(evaluation: Evaluation) -> str:
    noun = evaluation.table.noun_for(evaluation.counted_by).plural
    estimate = evaluation.estimate("accuracy", evaluation.about, estimator=evaluation.in_use)
    if math.isnan(estimate.value) or not_judged(evaluation):
        return f"How often it is right on further {noun} cannot be told."
    if estimate.interval is not None and estimate.interval.low >= NEARLY_ALL:
        return f"Right on nearly all further {noun} like these."
    of_ten = min(9, round(10 * estimate.value))
    return f"Right on about {of_ten} of 10 further {noun} like these."


def _short(table: Table, plan: Plan, limit: Limit, noun: str) -> str:
    if limit.of_class:
        return f"{class_name(limit.of_class)} {noun}"
    return f"{MEASURES[limit.measure].trade}"
