"""An evaluation as the content of a summary: plain data that any page can be set from."""

import dataclasses
from dataclasses import dataclass
from typing import Any

from evalcore import evidence_quoted
from evalcore.answer import CAUTION, answer, best_sentence, measure_name, scheme_in_words, title
from evalcore.beside_answer import beside_in_sentences
from evalcore.candidates import CANDIDATES
from evalcore.estimated import ESTIMATORS
from evalcore.evaluation import Evaluation
from evalcore.figures import Estimate
from evalcore.findings import findings
from evalcore.intervals import METHODS
from evalcore.limit_rows import limit_rows
from evalcore.record import Record
from evalcore.sources import SOURCES
from evalcore.wording import capitalised, count, decimal, level, listed, percent, quoted
from evalcore.wording import interval as interval_text

NOT_STATED = "not stated"


@dataclass(frozen=True)
class TableOfText:
    """A table of finished text: a header and rows as wide."""

    header: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]


@dataclass(frozen=True)
class Summary:
    """What a summary says, in order. All text is finished; nothing is left to round.

    Attributes
    ----------
    question, title, answer : str
        The user's question (or that none was stated), the answer in a few words, and in full.
    limits : tuple of (name, figure, verdict word, detail)
    findings : tuple of (severity, title, seen, advice, source)
    does_not_hold : tuple of str
        Where the claim does not reach, what was not stated included.
    cautions : tuple of str
    design : tuple of str
        How cases were held out, and what was learned or checked beside, in sentences.
    balance : TableOfText
        Units and rows of each class.
    flow : tuple of (what, count)
        Rows read, set aside and why, judged on.
    estimates : TableOfText
        By candidate, scheme, estimator and measure.
    plan : tuple of (what, choice)
    identity : tuple of (what, value)
        Record, fingerprints, versions.
    """

    question: str
    title: str
    answer: str
    limits: tuple[tuple[str, str, str, str], ...]
    findings: tuple[tuple[str, str, str, str, str], ...]
    does_not_hold: tuple[str, ...]
    cautions: tuple[str, ...]
    design: tuple[str, ...]
    balance: TableOfText
    flow: tuple[tuple[str, str], ...]
    estimates: TableOfText
    plan: tuple[tuple[str, str], ...]
    identity: tuple[tuple[str, str], ...]

    def as_data(self) -> dict[str, Any]:
        """The same as nested dicts and lists, fit for JSON."""
        return dataclasses.asdict(self)


def summary(record: Record, evaluation: Evaluation) -> Summary:
    """The content of a record's summary."""
    table, plan = evaluation.table, evaluation.plan
    return Summary(
        question=plan.question or f"Question: {NOT_STATED}",
        title=title(evaluation),
        answer=answer(evaluation),
        limits=tuple(
            (row.name, row.figure, row.verdict.word, row.detail)
            for row in limit_rows(evaluation, evaluation.about)
        ),
        findings=tuple(
            (f.severity, f.title, f.seen, f.advice, SOURCES[f.source].citation)
            for f in findings(table, plan, evaluation)
        ),
        does_not_hold=does_not_hold(evaluation),
        cautions=(CAUTION,),
        design=(*design(evaluation), *beside_in_sentences(evaluation)),
        balance=balance(evaluation),
        flow=flow(evaluation),
        estimates=TableOfText(ESTIMATE_HEADER, tuple(estimate_rows(evaluation))),
        plan=plan_lines(evaluation),
        identity=identity(record),
    )


def does_not_hold(evaluation: Evaluation) -> tuple[str, ...]:
    """Where the figures do not reach, and what nobody has stated."""
    noun = evaluation.table.noun.plural
    return (
        f"{capitalised(noun)} of another origin, time or instrument than those in the table: "
        f"{NOT_STATED}.",
        f"How the {noun} were obtained, and who labelled them by which method: {NOT_STATED}.",
        "Internal validation only: no later, separate table has been judged.",
    )


def design(evaluation: Evaluation) -> tuple[str, ...]:
    """How cases were held out and what happened inside each round."""
    table, plan = evaluation.table, evaluation.plan
    schemes = [scheme_in_words(plan, table, name) for name in evaluation.rounds]
    kept = (
        f" All rows of one {table.noun.singular} are always on the same side."
        if table.has_units
        else ""
    )
    counted = {
        "unit": f"A {table.noun.singular} is answered once, by the mean score of its rows; n "
        f"counts {table.noun.plural}.",
        "case": "Every row is answered by itself; n counts rows."
        if table.has_units
        else f"n counts {table.noun.plural}.",
    }[evaluation.counted_by]
    last = (evidence_quoted.sentence(evaluation), best_sentence(evaluation))
    return (
        f"{capitalised(listed(schemes))}; the first gives the headline.{kept}",
        "Filling of gaps, scaling and the coding of text are learned anew inside every bag.",
        f"{counted} A held-out figure refers to the recipe, trained on part of the cases; the "
        "model in use is refitted on all of them.",
        f"Intervals are two-sided at {level(plan.level)} and say where the true share of this "
        "recipe may lie; limits are judged one-sided.",
        *(said for said in last if said),
    )


def balance(evaluation: Evaluation) -> TableOfText:
    """Units and rows of each class as text."""
    table = evaluation.table
    units, cases = table.class_counts("unit"), table.class_counts("case")
    noun = table.noun.plural
    header: tuple[str, ...] = ("class", noun, "share")
    if table.has_units:
        header += ("rows", "share")
    rows = []
    for k, name in enumerate(table.classes):
        row = [name, count(int(units[k])), percent(units[k] / table.n_units, table.n_units)]
        if table.has_units:
            row += [count(int(cases[k])), percent(cases[k] / table.n_cases, table.n_cases)]
        rows.append(tuple(row))
    return TableOfText(header, tuple(rows))


def flow(evaluation: Evaluation) -> tuple[tuple[str, str], ...]:
    """From rows read to rows judged on, nothing lost on the way."""
    table = evaluation.table
    lines = [("rows read", count(table.rows_read))]
    lines += [(f"set aside: {part.reason}", count(part.rows)) for part in table.set_aside]
    lines.append(("rows judged on", count(table.n_cases)))
    if table.has_units:
        lines.append((f"which are {table.noun.plural}", count(table.n_units)))
    return tuple(lines)


PLAIN_NUMBERS = ("auc", "kappa", "matthews", "brier", "log_loss")
ESTIMATE_HEADER = (
    "candidate", "scheme", "estimator", "measure", "value", "interval", "method", "n",
)  # fmt: skip


def estimate_rows(evaluation: Evaluation, *, every: bool = False) -> list[tuple[str, ...]]:
    """Estimates as text, counted as the headline, or both ways with `every`.

    Without `every`: accuracy, balanced accuracy and AUC, and the classes' shares held out.
    """
    rows = []
    for e in evaluation.estimates:
        usual = e.counted_by == evaluation.counted_by and (
            not e.of_class or e.estimator == "held_out_by_case"
        )
        if every or usual:
            rows.append(_estimate_row(evaluation, e))
    return rows


def _estimate_row(evaluation: Evaluation, e: Estimate) -> tuple[str, ...]:
    table, plan = evaluation.table, evaluation.plan
    shown = e.interval if e.interval and e.interval.defined else None
    as_auc = e.measure in PLAIN_NUMBERS
    value = decimal(e.value) if as_auc else percent(e.value, e.n)
    bounds = (
        (f"{decimal(shown.low)} to {decimal(shown.high)}" if as_auc else interval_text(shown, e.n))
        if shown
        else "none"
    )
    return (
        plan.title(e.candidate),
        scheme_in_words(plan, table, e.scheme),
        ESTIMATORS[e.estimator],
        measure_name(table, plan, e.measure, e.of_class),
        value,
        bounds,
        METHODS[shown.method] if shown else "",
        f"{count(e.n)} {table.noun_for(e.counted_by).plural}",
    )


def plan_lines(evaluation: Evaluation) -> tuple[tuple[str, str], ...]:
    """The plan, choice by choice."""
    table, plan = evaluation.table, evaluation.plan
    lines = [
        ("label", plan.roles.label),
        ("unit", plan.roles.unit or "each row"),
        ("columns left out", listed([quoted(name) for name in table.left_out]) or "none"),
        ("features", listed([quoted(column.name) for column in table.columns])),
        ("answer is about", plan.title(evaluation.about)),
        ("measure", measure_name(table, plan, plan.measure)),
    ]
    lines += [("scheme", choice.written()) for choice in plan.schemes]
    lines += [
        ("candidate", f"{CANDIDATES[choice.key].title} [{choice.written()}]")
        for choice in plan.candidates
    ]
    lines += [
        (
            "acceptance limit",
            f"{measure_name(table, plan, limit.measure, limit.of_class)} at least "
            f"{level(limit.least)}, one-sided {level(limit.confidence)}, set "
            f"{limit.set_on or NOT_STATED}",
        )
        for limit in plan.limits
    ]
    lines += [("learning curve", plan.curve.written())] if plan.curve else []
    lines += [("cut-off", plan.cut_off.written())] if plan.cut_off else []
    if plan.permutations:
        lines.append(("chance check", f"{count(plan.permutations)} permutations of the labels"))
    return (*lines, ("random seed", str(plan.seed)))


def identity(record: Record) -> tuple[tuple[str, str], ...]:
    """What a reviewer needs to find and repeat this very evaluation."""
    about = record.about
    versions = ", ".join(f"{name} {number}" for name, number in about["versions"].items())
    return (
        ("record", record.name),
        ("evaluated", about["begun"]),
        ("file", about["name"]),
        ("table (sha256)", about["table"]),
        ("plan (sha256)", about["plan"]),
        ("versions", versions),
    )
