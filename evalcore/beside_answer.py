"""What stands beside the estimates in sentences: cut-off, picked settings, curve, chance."""

import math
from collections.abc import Iterator

from evalcore.answer import measure_name
from evalcore.at_cut_off import AtCutOff
from evalcore.chance_check import ChanceCheck
from evalcore.evaluation import Evaluation
from evalcore.judged import share_interval
from evalcore.picked import Picked
from evalcore.wording import (
    capitalised,
    class_name,
    count,
    decimal,
    level,
    listed,
    n_equals,
    percent,
    with_interval,
)


def beside_in_sentences(evaluation: Evaluation) -> tuple[str, ...]:
    """Everything that was asked for beside the estimates, about the candidate of the answer."""
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
        return
    yield _where(evaluation, found)
    yield _rates(evaluation, found)
    yield from _in_use(evaluation, found)
    if found.undecided:
        kept, sent = found.undecided.right_of_decided, found.undecided.sent
        noun, n = evaluation.table.noun_for(evaluation.counted_by), _n(found)
        yield (
            f"A probability below {decimal(found.rule.undecided_below)} is left to a person: "
            f"{percent(sent, n)} of {noun.plural}. Of the others {percent(kept, n)} are right; "
            "counting those left undecided as wrong, "
            f"{percent(found.undecided.right_counting_undecided_wrong, n)} of all."
        )


def _n(found: AtCutOff) -> int:
    return len(found.part.held.labels)


def _where(evaluation: Evaluation, found: AtCutOff) -> str:
    rule, spread = found.rule, found.spread
    noun = evaluation.table.noun_for(evaluation.counted_by)
    name = class_name(rule.of_class)
    if rule.by == "fixed":
        how = f"set on {rule.set_on}" if rule.set_on else "chosen on these cases"
        return f"A {noun.singular} is called {name} from {_cut(found.on_all)} up ({how})."
    by = (
        f"a miss costs {rule.miss:g}, a false alarm {rule.alarm:g}"
        if rule.by == "cost"
        else f"at least {level(rule.floor)} of {name} {noun.plural} are to be found"
    )
    return (
        f"A {noun.singular} is called {name} from {_cut(found.on_all)} up, learned from held-out "
        f"scores inside the bag ({by}); in {level(spread.level)} of rounds it fell between "
        f"{_cut(spread.low)} and {_cut(spread.high)}."
    )


def _cut(value: float) -> str:
    if math.isinf(value):
        return "any score" if value < 0 else "no score"
    return decimal(value, 3)


def _rates(evaluation: Evaluation, found: AtCutOff) -> str:
    parts = []
    for k, name in enumerate(evaluation.table.classes):
        bounds = share_interval(evaluation.plan.level, found.part, k)
        value = found.part.pooled_value("sensitivity", k)
        n = int((found.part.held.labels == k).sum())
        what = measure_name(evaluation.table, evaluation.plan, "sensitivity", name)
        parts.append(f"{what} {with_interval(value, bounds, n)}, {n_equals(n)}")
    return f"At it, held out: {'; '.join(parts)}."


def _in_use(evaluation: Evaluation, found: AtCutOff) -> Iterator[str]:
    """What the answers are worth at the shares of the class in use."""
    noun, n = evaluation.table.noun_for(evaluation.counted_by), _n(found)
    name = class_name(found.rule.of_class)
    stated = "" if found.rule.share_low else ", the share of this table"
    for at in found.at_shares:
        cost = (
            f", at an expected cost of {decimal(at.cost, 3)} a {noun.singular}"
            if found.rule.by == "cost"
            else ""
        )
        yield (
            f"Where {percent(at.share, n)} of {noun.plural} are {name}{stated}: "
            f"{percent(at.called, n)} are called {name}, rightly in "
            f"{percent(at.right_when_called, n)}; of those not called "
            f"{percent(at.right_when_not_called, n)} are none{cost}."
        )


def curve_sentences(evaluation: Evaluation) -> Iterator[str]:
    """What more cases would bring the candidate of the answer."""
    for curve in evaluation.beside.curves:
        if curve.part.candidate != evaluation.about:
            continue
        what = measure_name(evaluation.table, evaluation.plan, curve.found.measure, curve.of_class)
        ahead = "".join(
            f" Continued to {count(a.n)} {evaluation.table.noun_for(curve.part.counted_by).plural}:"
            f" {percent(a.value, a.n)} ({percent(a.low, a.n)} to {percent(a.high, a.n)})."
            for a in curve.found.ahead
        )
        yield f"Learning curve, {what}: {curve.found.call}. {curve.found.reason}{ahead}"


def chance_sentences(evaluation: Evaluation) -> Iterator[str]:
    """How often permuted labels did as well: the candidate of the answer, and the best of all."""
    for check in evaluation.beside.chance:
        if check.best or check.candidate == evaluation.about:
            yield _chance(evaluation, check)


def _chance(evaluation: Evaluation, check: ChanceCheck) -> str:
    test = check.test
    whom = (
        "the best of all candidates, chosen anew on each,"
        if check.best
        else evaluation.plan.title(check.candidate)
    )
    return (
        f"Chance check: with labels permuted, {whom} did at least as well in "
        f"{count(test.at_least_as_good)} of {count(test.permutations)} tables: p = "
        f"{decimal(test.p, 3)} ({check.rounds} rounds each, whole pipeline repeated)."
    )
