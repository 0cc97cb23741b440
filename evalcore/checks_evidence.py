"""Doubts from the coverage study: intervals that did not keep their word on simulated tables."""

from collections.abc import Iterator

from evalcore.evaluation import Evaluation
from evalcore.evidence import LEAST, LEVEL, falling_short, matching, size_in_words
from evalcore.figures import Finding
from evalcore.measures import ALL_MEASURES
from evalcore.plan import Plan
from evalcore.table import Table
from evalcore.wording import count, level, percent


def interval_falls_short(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """The headline's interval held the truth too rarely on simulated tables like this one."""
    short = falling_short(evaluation) if evaluation else ()
    if evaluation is None or not short:
        return
    worst = min(short, key=lambda line: line.coverage)
    name, tables = evaluation.about, worst.tables - worst.without_interval
    fell, kinds = (len({x.scenario for x in given}) for given in (short, matching(evaluation)))
    share, least = percent(worst.coverage, tables), percent(LEAST, 1)
    yield Finding(
        "interval_falls_short",
        "moderate",
        name,
        f"On {count(fell)} of {count(kinds)} kinds of simulated tables like this one in size the "
        f"{level(LEVEL)} interval held the true value in {share} at worst, {least} is asked "
        "for",
        f"{count(tables)} simulated tables ({size_in_words([worst])}) judged by "
        f"{plan.title(name)} with the same scheme: the interval of "
        f"{ALL_MEASURES[worst.measure].trade} held the true value in {share}. The threshold is "
        f"{least}, and the simulation’s own error is allowed for. Real tables may be otherwise.",
        "Take the interval for narrower than it should be: rest no decision on its ends, and "
        "compare with another scheme or a simpler candidate.",
        worst.coverage,
        LEAST,
        "own_simulation",
    )
