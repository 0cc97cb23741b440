"""Doubts from the coverage study: intervals that did not keep their word on simulated tables."""

from collections.abc import Iterator
from dataclasses import replace

from evalcore.evaluation import Evaluation
from evalcore.evidence import LEAST, LEVEL, MOST_WRONG, like
from evalcore.evidence_quoted import falling_short, headline, matching, size_in_words
from evalcore.figures import Finding
from evalcore.measures import ALL_MEASURES
from evalcore.plan import Plan
from evalcore.table import Table
from evalcore.verdict import verdicts_in_use
from evalcore.wording import count, level, percent, tenths


def interval_falls_short(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """The headline's interval held the truth too rarely on simulated tables like this one."""
    short = falling_short(evaluation) if evaluation else ()
    if evaluation is None or not short:
        return
    worst = min(short, key=lambda line: line.coverage)
    name, tables = evaluation.about, worst.tables - worst.without_interval
    trade = ALL_MEASURES[worst.measure].trade
    every = matching(evaluation, measure=worst.measure)
    fell, kinds = (len({x.scenario for x in every if x.short}), len({x.scenario for x in every}))
    share, least = percent(worst.coverage, tables), percent(LEAST, 1)
    yield Finding(
        "interval_falls_short",
        "moderate",
        name,
        f"On {count(fell)} of {count(kinds)} kinds of simulated tables like this one in size the "
        f"{level(LEVEL)} interval of {trade} held the true value in {share} at worst, {least} is "
        "asked for",
        f"{count(tables)} simulated tables ({size_in_words([worst])}) judged by "
        f"{plan.title(name)} with the same scheme: the interval held the true "
        f"value in {share}; its estimate was "
        f"{tenths(abs(worst.bias))} too {'low' if worst.bias < 0 else 'high'} on average. The "
        f"threshold is {least}, and the simulation’s own error is allowed for. Real "
        "tables may be otherwise.",
        "Take the interval for narrower than it should be: rest no decision on its ends, and "
        "compare with another scheme or a simpler candidate.",
        worst.coverage,
        LEAST,
        "own_simulation",
    )


def verdict_falls_short(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """A limit is shown by a rule that was wrong too often on simulated tables like this one."""
    given = headline(evaluation) if evaluation else None
    if evaluation is None or given is None:
        return
    for verdict in verdicts_in_use(evaluation, evaluation.about):
        measure = verdict.limit.measure
        wanted = replace(given, estimator="verdict", measure=measure)
        short = [line for line in like(wanted) if line.short]
        if verdict.word != "shown" or verdict.limit.confidence != LEVEL or not short:
            continue
        if given.cut_off and verdict.limit.of_class not in ("", given.cut_off.of_class):
            continue  # at cut-offs the class that is called was studied
        worst = min(short, key=lambda line: line.coverage)
        wrong, most = percent(1 - worst.coverage, worst.tables), percent(MOST_WRONG, 1)
        yield Finding(
            "verdict_falls_short",
            "moderate",
            verdict.limit.of_class or measure,
            f"A limit that was only just reached was wrongly called shown in {wrong} of simulated "
            f"tables like this one; {most} is asked for",
            f"{count(worst.tables)} simulated tables ({size_in_words([worst])}) judged by "
            f"{plan.title(evaluation.about)}: a limit on {ALL_MEASURES[measure].trade} equal to "
            f"the true rate was called shown in {wrong}. The threshold is {most}, and the "
            "simulation’s own error is allowed for. Real tables may be otherwise.",
            "Where the bound is close to the limit, do not rely on the word alone: judge further "
            "cases.",
            1 - worst.coverage,
            MOST_WRONG,
            "own_simulation",
        )
