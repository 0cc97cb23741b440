"""Figures and findings as tidy CSV text: one row a figure, full precision."""

import csv
import io
from collections.abc import Iterable, Sequence

from evalcore.evaluation import Evaluation
from evalcore.figures import Estimate, Finding
from evalcore.files import write
from evalcore.findings import findings
from evalcore.further_cases import Needed
from evalcore.other_intervals import of_headline
from evalcore.outlook import outlook
from evalcore.per_case import cases
from evalcore.record import Record
from evalcore.sources import SOURCES
from evalcore.together import round_tests
from evalcore.verdict import verdicts, verdicts_at_cut_off

COLUMNS = (
    "candidate", "scheme", "estimator", "measure", "class", "counted_by", "value", "low", "high",
    "level", "interval", "n", "rounds", "undefined_rounds",
)  # fmt: skip
HIGHEST, AT_CUT_OFF = "highest_score", "at_cut_off"  # which answers a verdict is about
FINDING_COLUMNS = (
    "check", "severity", "subject", "title", "seen", "advice", "value", "threshold", "source",
)  # fmt: skip


def write_results(record: Record) -> None:
    """Write every figure of a record as CSV files into it."""
    evaluation = record.evaluation()
    if evaluation is None:
        return
    found = findings(record.table, record.plan, evaluation)
    for name, text in (
        ("results", results_csv(evaluation)),
        ("findings", findings_csv(found)),
        ("comparison", comparison_csv(evaluation)),
        ("intervals", intervals_csv(evaluation)),
        ("cases", cases_csv(evaluation)),
        ("verdicts", verdicts_csv(evaluation)),
        ("learned", learned_csv(evaluation)),
    ):
        write(record.folder / f"{name}.csv", text.encode())


def results_csv(evaluation: Evaluation) -> str:
    """Every estimate of an evaluation, one a row, in full precision.

    An undefined value is ``nan``; `low`, `high`, `level` and `interval` are empty where no
    interval is offered.
    """
    return _csv(COLUMNS, map(_row, (*evaluation.estimates, *evaluation.beside.estimates)))


def findings_csv(found: Iterable[Finding]) -> str:
    """Findings, one a row."""
    return _csv(
        FINDING_COLUMNS,
        (
            (
                f.check, f.severity, f.subject, f.title, f.seen, f.advice, repr(float(f.value)),
                repr(float(f.threshold)), SOURCES[f.source].citation,
            )
            for f in found
        ),
    )  # fmt: skip


def comparison_csv(evaluation: Evaluation) -> str:
    """Candidates compared in pairs on the headline's rounds, one pair a row.

    The call rests on the paired difference; published tests stand beside it.
    """
    header = (
        "first", "second", "difference", "low", "high", "level", "interval", "p", "p_adjusted",
        "call", "only_first_right", "only_second_right", "n", "mcnemar_p", "corrected_t_p",
        "posterior_worse", "posterior_equal", "posterior_better",
    )  # fmt: skip
    rows = []
    for d in evaluation.differences:
        beside = round_tests(evaluation.parts(), d)
        rows.append((
            d.first, d.second, repr(d.value), repr(d.interval.low), repr(d.interval.high),
            repr(d.interval.level), d.interval.method, repr(d.p), repr(d.p_adjusted), d.call,
            str(d.only_first), str(d.only_second), str(d.n), repr(beside.mcnemar_p),
            repr(beside.corrected_t_p), repr(beside.worse), repr(beside.equal),
            repr(beside.better),
        ))  # fmt: skip
    return _csv(header, rows)


def intervals_csv(evaluation: Evaluation) -> str:
    """The default interval of each held-out share and published ones beside it."""
    return _csv(
        (
            "candidate", "scheme", "measure", "class", "counted_by", "value", "low", "high",
            "level", "interval", "n",
        ),
        (
            (
                e.candidate, e.scheme, e.measure, e.of_class, e.counted_by, repr(float(e.value)),
                repr(float(bounds.low)), repr(float(bounds.high)), repr(bounds.level),
                bounds.method, str(e.n),
            )
            for e, bounds in of_headline(evaluation)
        ),
    )  # fmt: skip


def verdicts_csv(evaluation: Evaluation) -> str:
    """Each acceptance limit: its verdict, the bounds behind it, and what would show it.

    The last columns are further units that give four chances in five, judged alone and together
    with the present ones, at a cautious, the present and a hopeful true rate; ``never`` where no
    number is enough, empty where none is asked for.
    """
    names = ("cautious", "present", "hopeful")
    header = [
        "candidate", "answers", "measure", "class", "limit", "confidence", "set_on", "verdict",
        "value",        "at_least", "at_most", "n",
    ]  # fmt: skip
    for name in names:
        header += [f"{name}_rate", f"{name}_alone", f"{name}_together"]
    rows = []
    about = evaluation.about
    given = [(HIGHEST, verdict) for verdict in verdicts(evaluation, about)]
    given += [(AT_CUT_OFF, verdict) for verdict in verdicts_at_cut_off(evaluation, about)]
    for answers, verdict in given:
        limit = verdict.limit
        row = [
            about, answers, limit.measure, limit.of_class, repr(limit.least),
            repr(limit.confidence), limit.set_on, verdict.word, repr(verdict.value),
            repr(verdict.at_least), repr(verdict.at_most), str(verdict.n),
        ]  # fmt: skip
        found = {m.name: m for m in outlook(evaluation, about, verdict).needed}
        for name in names:
            more = found.get(name)
            row += (
                [repr(more.rate), _needed(more.alone), _needed(more.together)]
                if more
                else ["", "", ""]
            )
        rows.append(row)
    return _csv(header, rows)


def _needed(needed: Needed) -> str:
    return str(needed.cases) if needed.cases is not None else needed.outcome


def learned_csv(evaluation: Evaluation) -> str:
    """What each round learned inside its bag: the option picked, the cut-off; a row each."""
    rows = []
    for found in evaluation.beside.picked:
        rows += [
            (found.candidate, found.scheme, str(at), "picked", found.options[option])
            for at, option in enumerate(found.by_round.tolist())
        ]
    for at_cut_off in evaluation.beside.cut_offs:
        part = at_cut_off.part
        rows += [
            (part.candidate, part.scheme, str(at), "cut_off", repr(cut_off))
            for at, cut_off in enumerate(at_cut_off.cut_offs.tolist())
        ]
    return _csv(("candidate", "scheme", "round", "what", "value"), rows)


def cases_csv(evaluation: Evaluation) -> str:
    """Every unit under the headline's scheme, those wrong most often first, by candidate."""
    return _csv(
        ("candidate", "name", "class", "times_held_out", "share_wrong", "named", "flips"),
        (
            (
                candidate, c.name, c.of_class, str(c.times), repr(c.wrong), c.named, repr(c.flips)
            )
            for candidate in evaluation.candidates
            for c in cases(evaluation, candidate)
        ),
    )  # fmt: skip


def _row(e: Estimate) -> tuple[str, ...]:
    bounds = e.interval
    ends = (
        (repr(float(bounds.low)), repr(float(bounds.high)), repr(bounds.level), bounds.method)
        if bounds
        else ("", "", "", "")
    )
    return (
        e.candidate, e.scheme, e.estimator, e.measure, e.of_class, e.counted_by,
        repr(float(e.value)), *ends, str(e.n), str(e.rounds), str(e.undefined_rounds),
    )  # fmt: skip


def _csv(header: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(header)
    writer.writerows([plain(cell) for cell in row] for row in rows)
    return text.getvalue()


def plain(cell: str) -> str:
    """Text that a spreadsheet would take for a formula, made harmless by an apostrophe.

    >>> plain("=1+1"), plain("-0.5"), plain("good")
    ("'=1+1", '-0.5', 'good')
    """
    if cell[:1] in ("=", "+", "-", "@", "\t", "\r"):
        try:
            float(cell)
        except ValueError:
            return "'" + cell
    return cell
