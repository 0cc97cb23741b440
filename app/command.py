"""The console command: the dashboard, and the same work without a screen."""

import argparse
import sys
from collections.abc import Sequence
from pathlib import Path

from app.columns import size_parser, statistic_parser
from evalcore.answer import answer, title
from evalcore.beside_answer import beside_in_sentences
from evalcore.candidates import CANDIDATES
from evalcore.choice import Choice, choose_written
from evalcore.cluster import on_cluster
from evalcore.cut_off_rule import CutOffRule
from evalcore.errors import EvalError, PlanError
from evalcore.findings import findings
from evalcore.intake import make_table, noun_from
from evalcore.limit import Limit
from evalcore.limit_rows import limit_rows
from evalcore.measures import MEASURES
from evalcore.plan import Plan, recommended_candidates, recommended_schemes
from evalcore.record import Record, Status
from evalcore.schemes import LEARNING_CURVE, SCHEMES
from evalcore.sheet import read_sheet
from evalcore.table import Copies, Roles
from evalcore.wording import Noun, count, duration
from evalcore.worker import fill


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command; returns the exit code, 1 for anything that cannot be used."""
    given = _parser().parse_args(arguments)
    try:
        given.run(given)
    except EvalError as error:
        print(error, file=sys.stderr)
        return 1
    except KeyboardInterrupt:
        print("Stopped; what had finished is kept. The same command goes on.", file=sys.stderr)
        return 130
    return 0


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="withheld",
        description="Judge a classifier from a small labelled table by resampling.",
    )
    commands = parser.add_subparsers(title="commands", required=True, metavar="COMMAND")
    _dashboard_parser(commands.add_parser("dashboard", help="open the dashboard in the browser"))
    _evaluate_parser(commands.add_parser("evaluate", help="evaluate a file without a screen"))
    statistic_parser(commands.add_parser("statistic", help="bootstrap any statistic of a column"))
    size_parser(commands.add_parser("sample-size", help="cases to show a limit or reach a width"))
    made = commands.add_parser("summary", help="write a record's summary as PDF and HTML")
    made.add_argument("folder", type=Path, metavar="FOLDER", help="a record")
    made.add_argument("--out", type=Path, help="where to write; the record itself by default")
    made.set_defaults(run=_summary)
    return parser


def _dashboard_parser(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--port", type=int, default=8501, help="first port to try")
    parser.add_argument("--records", type=Path, help="where records are kept")
    parser.add_argument("--no-browser", action="store_true", help="open no browser window")
    parser.set_defaults(run=_dashboard)


def _evaluate_parser(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("file", type=Path, metavar="FILE", help="CSV with a header")
    parser.add_argument("--label", required=True, metavar="COLUMN", help="the class of each case")
    parser.add_argument("--unit", default="", metavar="COLUMN", help="what is independent")
    parser.add_argument("--noun", default="", metavar="ONE,MANY", help="what a unit is called")
    parser.add_argument("--leave-out", action="append", default=[], metavar="COLUMN")
    parser.add_argument(
        "--copies",
        choices=("set-aside", "keep"),
        help="rows entered twice and units submitted twice; set aside by default with --unit",
    )
    parser.add_argument(
        "--scheme", action="append", default=[], metavar="KEY[:name=value,...]",
        help=f"one of {', '.join(SCHEMES)}; the first gives the headline",
    )  # fmt: skip
    parser.add_argument(
        "--candidate", action="append", default=[], metavar="KEY[:name=value,...]",
        help=f"one of {', '.join(CANDIDATES)}; several values of a setting, as in k=1/5/15, are a "
        "grid that each round picks from inside its bag",
    )  # fmt: skip
    parser.add_argument(
        "--cut-off", default="", metavar="CLASS:name=value,...",
        help="learn from which score on a class is called: by costs (miss=10,alarm=1), by a floor "
        "(floor=0.90), or fixed (at=0.35,set_on=DATE); share=0.08 or share=0.05-0.2 in use; "
        "undecided=0.7 leaves lower probabilities to a person",
    )  # fmt: skip
    parser.add_argument(
        "--learning-curve", nargs="?", const="", metavar="sizes=6,subsets=20",
        help="what more cases would bring, from nested smaller bags",
    )  # fmt: skip
    parser.add_argument(
        "--chance-check", type=int, default=0, metavar="N",
        help="permute the labels between units N times (199 say) and judge each the same way",
    )  # fmt: skip
    parser.add_argument(
        "--answered-from",
        choices=("all", "one"),
        help="whether a future unit is answered from all its rows or from one; all by default, "
        "one where a unit carries several classes",
    )
    parser.add_argument("--about", default="", metavar="CANDIDATE", help="whom the answer is about")
    parser.add_argument("--measure", default="balanced_accuracy", choices=list(MEASURES))
    parser.add_argument("--concern", default="", metavar="CLASS", help="whose misses matter most")
    parser.add_argument(
        "--limit", action="append", default=[], metavar="MEASURE[:CLASS]=SHARE",
        help="acceptance limit, e.g. sensitivity:failing=0.90",
    )  # fmt: skip
    parser.add_argument("--question", default="", help="what the judgement is for")
    parser.add_argument("--seed", type=int, default=1, metavar="N", help="random seed")
    parser.add_argument(
        "--engine",
        choices=("fast", "plain"),
        default="fast",
        help="plain: every round fitted on its own with scikit-learn's public classes",
    )
    parser.add_argument("--jobs", type=int, metavar="N", help="processes; digits do not depend")
    parser.add_argument(
        "--cluster", default="", metavar="ADDRESS", help="a Dask scheduler that carries out rounds"
    )
    parser.add_argument("--out", type=Path, required=True, metavar="FOLDER", help="new record")
    parser.set_defaults(run=_evaluate)


def _dashboard(given: argparse.Namespace) -> None:
    from app.server import serve

    serve(port=given.port, records=given.records, browser=not given.no_browser)


def _summary(given: argparse.Namespace) -> None:
    from app.print.child import build_in_child

    for path in build_in_child(given.folder, given.out or given.folder):
        print(path)


def _evaluate(given: argparse.Namespace) -> None:
    if given.jobs is not None and given.jobs < 1:
        raise PlanError(f"`jobs` must be at least 1; got {given.jobs}.")
    if given.jobs is not None and given.cluster:
        raise PlanError(
            f"`jobs` counts processes on this machine and a cluster has its own; got {given.jobs} "
            f"and the cluster {given.cluster!r}. Give one of the two."
        )
    data, plan = _read(given.file), _plan(given)
    record = _record(given.out, data, given.file.name, plan)
    if given.cluster:
        with on_cluster(given.cluster):
            fill(record, jobs=-1, tell=_progress)
    else:
        fill(record, jobs=given.jobs, tell=_progress)
    print(file=sys.stderr)
    evaluation = record.evaluation()
    if evaluation is None:
        return
    print(title(evaluation), answer(evaluation), sep="\n")
    for row in limit_rows(evaluation, evaluation.about):
        print(f"{row.name}: {row.verdict.word}. {row.detail}")
        if row.further:
            print(row.further)
    for sentence in beside_in_sentences(evaluation):
        print(sentence)
    for finding in findings(record.table, plan, evaluation):
        print(f"{finding.severity}: {finding.title}")
    print(f"Record: {record.folder}")


def _read(path: Path) -> bytes:
    try:
        return path.read_bytes()
    except OSError as error:
        raise PlanError(f"The file {str(path)!r} cannot be read: {error.strerror}.") from error


def _record(folder: Path, data: bytes, name: str, plan: Plan) -> Record:
    """A new record, or the unfinished one of the very same file and plan to go on with."""
    if (folder / "about.json").is_file():
        record = Record(folder)
        if record.plan == plan and record.source == data:
            record.clear_cancel()
            return record
    return Record.create(folder, data, name, plan)


def _plan(given: argparse.Namespace) -> Plan:
    copies: Copies = "keep"
    if given.copies == "set-aside" or (given.copies is None and given.unit):
        copies = "set_aside"
    one, _, many = given.noun.partition(",")
    noun = Noun(one, many or one + "s") if one else noun_from(given.unit)
    roles = Roles(given.label, given.unit, tuple(given.leave_out), noun, copies)
    table = make_table(read_sheet(_read(given.file), given.file.name), roles)
    schemes = tuple(choose_written(SCHEMES, text) for text in given.scheme)
    candidates = tuple(choose_written(CANDIDATES, text) for text in given.candidate)
    return Plan(
        roles=roles,
        schemes=schemes or recommended_schemes(table),
        candidates=candidates or recommended_candidates(),
        answered_from=given.answered_from or ("one" if len(table.mixed_units) else "all"),
        measure=given.measure,
        concern=given.concern,
        about=_about(given.about, candidates),
        limits=tuple(_limit(text) for text in given.limit),
        seed=given.seed,
        question=given.question,
        engine=given.engine,
        curve=_curve(given.learning_curve, (schemes or recommended_schemes(table))[0]),
        cut_off=CutOffRule.read(given.cut_off) if given.cut_off else None,
        permutations=given.chance_check,
    )


def _curve(text: str | None, headline: Choice) -> Choice | None:
    """The learning curve's scheme with the settings given; None where it was not asked for.

    It keeps together what the headline's scheme does.
    """
    if text is None:
        return None
    keep = headline.values().get("keep", "")
    kept = f",keep={keep}" if keep and "keep=" not in text else ""
    return choose_written(
        {LEARNING_CURVE.key: LEARNING_CURVE}, f"{LEARNING_CURVE.key}:{text}{kept}"
    )


def _about(text: str, candidates: Sequence[Choice]) -> str:
    """Whom the answer is about, by key or as the candidate was written."""
    if not text or text in CANDIDATES:
        return text
    wanted = choose_written(CANDIDATES, text)
    alone = [c.key for c in candidates].count(wanted.key) < 2
    return wanted.key if alone else wanted.written()


def _limit(text: str) -> Limit:
    what, equals, least = text.rpartition("=")
    measure, _, of_class = what.partition(":")
    try:
        return Limit(measure, float(least), of_class)
    except ValueError as error:
        if isinstance(error, EvalError) and equals:
            raise
        raise PlanError(
            f"A limit is written MEASURE=SHARE or sensitivity:CLASS=SHARE; got {text!r}."
        ) from error


def _progress(status: Status) -> None:
    left = f", {duration(status.seconds_left)} left" if status.seconds_left else ""
    line = f"{count(status.done)} of {count(status.total)} rounds{left}"
    end = "\r" if sys.stderr.isatty() else "\n"
    if sys.stderr.isatty() or status.state != "running" or status.done % 50 < 10:
        print(f"{line:<60}", end=end, file=sys.stderr, flush=True)


if __name__ == "__main__":
    sys.exit(main())
