"""What would show a limit that is not shown yet: how many more units, at which true rate."""

import math
from dataclasses import dataclass

from evalcore.evaluation import Evaluation
from evalcore.further_cases import MoreCases, Needed, more_cases
from evalcore.verdict import Verdict, part_behind
from evalcore.wording import NBSP, class_name, count, level, percent

CHANCE = 0.8
LOOKS = 2  # this look and the one after the further units


@dataclass(frozen=True)
class Outlook:
    """Further units for one limit, at a cautious, the present and a hopeful true rate.

    Attributes
    ----------
    verdict : Verdict
    needed : tuple of MoreCases
        Empty where no further units are asked for: the limit is shown, or it is on a measure
        that is no share of units.
    """

    verdict: Verdict
    needed: tuple[MoreCases, ...]

    @property
    def too_variable(self) -> bool:
        """Whether no number would do at the present rate though it lies above the limit."""
        return any(
            more.name == "present"
            and more.rate > self.verdict.limit.least
            and more.alone.outcome == "never"
            for more in self.needed
        )


def outlook(evaluation: Evaluation, candidate: str, verdict: Verdict) -> Outlook:
    """How many further units give four chances in five to show a limit.

    The present rate is the one the verdict starts from; the cautious one lies halfway from it
    to the lower bound, the hopeful one halfway to one (common practice, no source). Further units
    are judged alone, or together with the present ones with the error divided over two looks.

    Parameters
    ----------
    evaluation : Evaluation
    candidate : str
    verdict : Verdict
        Of this candidate.
    """
    limit, rule = verdict.limit, evaluation.plan.cut_off
    fitted = verdict.at_cut_off and rule is not None and rule.chosen_on_these_cases
    if (
        verdict.word == "shown"
        or fitted  # further units cannot mend that
        or limit.measure == "balanced_accuracy"
        or math.isnan(verdict.at_least)
    ):
        return Outlook(verdict, ())
    part = part_behind(evaluation, candidate, verdict)
    if part.units is not None:
        return Outlook(verdict, ())  # groups are no trials that are right or wrong
    k = evaluation.table.classes.index(limit.of_class) if limit.of_class else None
    rate = verdict.rate
    rates = {
        "cautious": (rate + verdict.at_least) / 2,
        "present": rate,
        "hopeful": (1 + rate) / 2,
    }
    needed = more_cases(
        rate * verdict.n,
        verdict.n,
        least=limit.least,
        confidence=limit.confidence,
        rates=rates,
        tau2=part.tau2 if k is None else part.tau2_of(k),
        looks=LOOKS,
        chance=CHANCE,
    )
    return Outlook(verdict, needed)


def in_words(evaluation: Evaluation, given: Outlook) -> str:
    """One sentence on further units; empty where none are asked for."""
    if not given.needed:
        return ""
    limit = given.verdict.limit
    noun = evaluation.table.noun_for(evaluation.counted_by).plural
    units = f"{class_name(limit.of_class)} {noun}" if limit.of_class else noun
    n = given.verdict.n
    parts = [
        f"{_said(more.alone)} if {percent(more.rate, n)} are truly right ({more.name})"
        for more in given.needed
    ]
    limited = any(m.alone.outcome == "never" and m.rate > limit.least for m in given.needed)
    why = " The model itself varies too much from round to round for that." if limited else ""
    return (
        f"Further {units} judged alone that give four chances in five to show "
        f"{level(limit.least)}: {'; '.join(parts)}.{why}"
    )


def _said(needed: Needed) -> str:
    if needed.outcome == "never":
        return "no number"
    if needed.cases is None:
        return f"over{NBSP}5,000"
    return count(needed.cases)
