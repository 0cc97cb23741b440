"""What stands beside the estimates in sentences: cut-off, picked settings, curve, chance."""

import math
from collections.abc import Iterator

from evalcore.answer import measure_name
from evalcore.at_cut_off import RATIO, AtCutOff
from evalcore.beside import Curve
from evalcore.chance_check import ChanceCheck, majority_of
from evalcore.estimated import n_behind
from evalcore.evaluation import Evaluation
from evalcore.figures import Interval
from evalcore.groups import noun_of
from evalcore.judged_intervals import share_interval
from evalcore.measures import ALL_MEASURES
from evalcore.permuted import dealt_among, kept_together
from evalcore.picked import Picked
from evalcore.share_in_use import AtShare, Rate
from evalcore.wording import (
    DASH,
    NBSP,
    Noun,
    capitalised,
    class_name,
    count,
    decimal,
    level,
    listed,
    n_equals,
    percent,
    reading,
    score,
    with_interval,
)

P_DIGITS = 4  # with the most permutations allowed p is 1 in 10,000, and never 0


def beside_in_sentences(evaluation: Evaluation) -> tuple[str, ...]:
    """Everything that was asked for beside the estimates.

    Settings picked of every candidate; all else of the candidate of the answer, and chance of the
    best of all besides.
    """
    return (
        *picked_sentences(evaluation),
        *cut_off_sentences(evaluation),
        *curve_sentences(evaluation),
        *chance_sentences(evaluation),
    )


def picked_sentences(evaluation: Evaluation) -> Iterator[str]:
    """Which settings rounds of the headline's scheme picked, and which all cases pick."""
    for found in evaluation.beside.picked:
        if found.scheme == evaluation.scheme:
            yield _picked(evaluation, found)


def _picked(evaluation: Evaluation, found: Picked) -> str:
    rounds = evaluation.rounds[found.scheme].n_rounds
    shares = [
        f"{option} in {percent(share, rounds)}"
        for option, share in zip(found.options, found.shares.tolist(), strict=True)
    ]
    return (
        f"{capitalised(evaluation.plan.title(found.candidate))}: picked inside the bag "
        f"{listed(shares)} of {count(rounds)} rounds; all cases together pick "
        f"{found.options[found.on_all]}, which the final model takes."
    )


def cut_off_sentences(evaluation: Evaluation) -> Iterator[str]:
    """The cut-off of the candidate of the answer, and what it gives on cases never seen."""
    found = evaluation.at_cut_off(evaluation.about)
    if found is None:
        plan = evaluation.plan
        if plan.cut_off and not plan.has_cut_off(plan.candidate(evaluation.about)):
            title = capitalised(plan.title(evaluation.about))
            yield f"{title} learns nothing from features, so it has no cut-off."
        return
    yield _where(evaluation, found)
    if found.undefined == len(found.cut_offs):
        return  # there are no answers to speak of
    yield _rates(evaluation, found)
    if not found.unlike:
        yield from _in_use(evaluation, found)
    if found.undecided:
        kept, sent = found.undecided.right_of_decided, found.undecided.sent
        noun, n = evaluation.table.noun_for(evaluation.counted_by), n_behind(found.part, None)
        decided = max(1, int((1 - sent) * n + 0.5))
        others = (
            ""
            if math.isnan(kept)
            else f" Of the others ({n_equals(decided)}) {percent(kept, decided)} are right;"
        )
        wrong = percent(found.undecided.right_counting_undecided_wrong, n)
        counting = "counting those left undecided as wrong, "
        yield (
            f"An answer with a probability below {reading(found.rule.undecided_below)} is left to "
            f"a person: {percent(sent, n)} of {noun.plural}.{others} "
            f"{counting if others else capitalised(counting)}{wrong} of all."
        )


def _where(evaluation: Evaluation, found: AtCutOff) -> str:
    rule, noun = found.rule, evaluation.table.noun_for(evaluation.counted_by)
    name = class_name(rule.of_class)
    called = _called(found, noun)
    if rule.by == "fixed":
        how = f"set on {rule.set_on}" if rule.set_on else "chosen on these cases"
        return f"{called} ({how})."
    by = (
        f"a miss costs {reading(rule.miss)}, a false alarm {reading(rule.alarm)}"
        if rule.by == "cost"
        else f"at least {level(rule.floor)} of {name} {noun.plural} are to be found"
    )
    learned = ", learned from held-out scores inside the bag" if math.isfinite(found.on_all) else ""
    return f"{called}{learned} ({by}); {_in_rounds(found)}."


def _called(found: AtCutOff, noun: Noun) -> str:
    """From which score on the model in use calls the class; ends without a number in words."""
    name, cut_off = class_name(found.rule.of_class), found.on_all
    if math.isnan(cut_off):
        return f"No cut-off for {name} could be learned from all {noun.plural}"
    if math.isinf(cut_off):
        each = "Every" if cut_off < 0 else "No"
        return f"{each} {noun.singular} is called {name}, whatever its score"
    stated = found.rule.by == "fixed"
    return (
        f"A {noun.singular} is called {name} from "
        f"{reading(cut_off) if stated else score(cut_off)} up"
    )


def _in_rounds(found: AtCutOff) -> str:
    """Where the cut-offs of rounds fell, and how many rounds have none."""
    spread, rounds = found.spread, len(found.cut_offs)
    if not spread.defined:
        return f"it could be learned in none of {count(rounds)} rounds"
    lacking = (
        f", {count(found.undefined)} of {count(rounds)} left out in which it could not be learned"
        if found.undefined
        else ""
    )
    if place(spread.low) == place(spread.high):
        return f"in {level(spread.level)} of rounds or more: {place(spread.low)}{lacking}"
    return (
        f"in {level(spread.level)} of rounds it fell between {place(spread.low)} and "
        f"{place(spread.high)}{lacking}"
    )


def place(cut_off: float) -> str:
    """Where a cut-off lies; in words where it calls all or none."""
    if math.isinf(cut_off):
        return "calling all" if cut_off < 0 else "calling none"
    return score(cut_off)


def _rates(evaluation: Evaluation, found: AtCutOff) -> str:
    parts = []
    for k, name in enumerate(evaluation.table.classes):
        bounds = share_interval(evaluation.plan.level, found.part, k)
        value, n = found.part.pooled_value("sensitivity", k), n_behind(found.part, k)
        what = measure_name(evaluation.table, evaluation.plan, "sensitivity", name)
        parts.append(f"{what} {with_interval(value, bounds, n)}, {n_equals(n)}")
    own = "" if found.rule.by == "fixed" else ", each round at its own cut-off"
    return f"Held out{own}: {'; '.join(parts)}."


def _in_use(evaluation: Evaluation, found: AtCutOff) -> Iterator[str]:
    """What the answers are worth at the shares of the class in use."""
    noun, n = evaluation.table.noun_for(evaluation.counted_by), n_behind(found.part, None)
    name, stated = class_name(found.rule.of_class), bool(found.rule.share_low)

    def rate(of: Rate) -> str:
        return with_interval(of.value, Interval(of.low, of.high, evaluation.plan.level, RATIO), n)

    sizes = [
        f"{count(n_behind(found.part, k))} {class_name(each)}"
        for k, each in enumerate(evaluation.table.classes)
    ]
    behind = (
        f" ({level(evaluation.plan.level)} intervals in brackets, n{NBSP}={NBSP}{listed(sizes)})"
        if any(at.right_when_called.bounded or at.cost.bounded for at in found.at_shares)
        else ""
    )
    for at in found.at_shares:
        share = share_in_words(found, at)
        said = [f"{percent(at.called, n)} are called {name}"]
        if not math.isnan(at.right_when_called.value):
            said.append(f", rightly in {rate(at.right_when_called)}")
        if not math.isnan(at.right_when_not_called.value):
            said.append(f"; of those not called {rate(at.right_when_not_called)} are not {name}")
        if found.rule.by == "cost":
            cost = decimal(at.cost.value, 3)
            if at.cost.bounded:
                cost += f" ({decimal(at.cost.low, 3)}{DASH}{decimal(at.cost.high, 3)})"
            said.append(f"; the expected cost is {cost} a {noun.singular}")
        yield (
            f"Where {share} of {noun.plural} are {name}"
            f"{'' if stated else ', the share of this table'}{behind}: {''.join(said)}."
        )


def share_in_words(found: AtCutOff, at: AtShare) -> str:
    """A share in use as it was stated, else that of the table, as exact as its size allows."""
    if found.rule.share_low:
        return level(at.share)
    return percent(at.share, n_behind(found.part, None))


def curve_sentences(evaluation: Evaluation) -> Iterator[str]:
    """What more cases would bring the candidate of the answer."""
    for curve in evaluation.beside.curves:
        if curve.part.candidate == evaluation.about:
            what = measure_name(
                evaluation.table, evaluation.plan, curve.found.measure, curve.of_class
            )
            ahead = _ahead(evaluation, curve)
            by = " (by the highest score)" if evaluation.plan.cut_off else ""
            yield f"Learning curve, {what}{by}: {curve.found.call}. {curve.found.reason}{ahead}"


def _ahead(evaluation: Evaluation, curve: Curve) -> str:
    """Where the curve is continued to, as exact as the units that were judged allow."""
    part, found = curve.part, curve.found
    n = n_behind(part, found.of_class if curve.of_class else None)
    # bags grow by what is kept together, also where rows are counted
    noun, of_level = noun_of(evaluation.table, evaluation.plan.keep), found.gain.interval.level
    said = [
        f" Continued to {noun.counted(a.n)}: "
        f"{with_interval(a.value, Interval(a.low, a.high, of_level, 'resampled_units'), n)}."
        for a in found.ahead
    ]
    if found.without_law:
        said.append(
            f" {count(found.without_law)} of {count(found.resamples)} resamples that no curve fits "
            "are left out, so the band leans towards a rise."
        )
    return "".join(said)


def chance_sentences(evaluation: Evaluation) -> Iterator[str]:
    """How often permuted labels did as well: the candidate of the answer, and the best of all."""
    for check in evaluation.beside.chance:
        if check.best or check.candidate == evaluation.about:
            yield _chance(evaluation, check)
    if evaluation.beside.chance:
        yield from _majority(evaluation)


def _chance(evaluation: Evaluation, check: ChanceCheck) -> str:
    test = check.test
    whom = (
        "the best of all candidates, chosen anew on each,"
        if check.best
        else evaluation.plan.title(check.candidate)
    )
    rounds = f"{count(check.rounds)} {'round' if check.rounds == 1 else 'rounds'}"
    groups = kept_together(evaluation.table, evaluation.plan)
    within = {
        "units": "",
        "groups": " between what is kept together",
        "within groups": " within what is kept together, so what that alone tells counts as chance",
    }[dealt_among(evaluation.table, groups)]
    return (
        f"Chance check, by the highest score: with labels permuted{within}, {whom} did at "
        f"least as well by {ALL_MEASURES[check.measure].trade} in "
        f"{count(test.at_least_as_good)} of {count(test.permutations)} tables: "
        f"p{NBSP}={NBSP}{decimal(test.p, P_DIGITS)} ({rounds} each, whole pipeline repeated)."
    )


def _majority(evaluation: Evaluation) -> Iterator[str]:
    """One answer a unit, of the first repeat, against the majority share."""
    if evaluation.is_baseline(evaluation.about):
        return
    part = evaluation.part(evaluation.about, evaluation.scheme)
    if part.units is not None:
        return  # rows of a unit are no independent trials
    found = majority_of(part)
    if math.isnan(found.p):
        return
    rounds = part.held.rounds
    n = int(rounds.test_sizes[rounds.repeat == rounds.repeat[0]].sum())
    least = 1 / 10**P_DIGITS
    is_p = (
        f"<{NBSP}{decimal(least, P_DIGITS)}"
        if found.p < least
        else (f"={NBSP}{decimal(found.p, P_DIGITS)}")
    )
    yield (
        "Against always giving the most frequent answer, by the highest score and on one answer "
        f"each: {percent(found.accuracy, n)} against {percent(found.majority_share, n)}, "
        f"p{NBSP}{is_p} (exact binomial test; it leaves out that models vary)."
    )
