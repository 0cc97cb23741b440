"""What both forms of the summary are set from: its text, its charts, its two tables of figures."""

import json
import re
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

import vl_convert

from app.charts.balance import class_balance
from app.charts.estimates import estimates_with_intervals
from app.charts.in_and_out import in_and_out
from app.charts.per_class import per_class
from app.charts.print_form import printed, svg, without_forbidden
from app.charts.round_scores import round_scores
from app.charts.style import Figure
from app.print.lower import lowered
from evalcore.answer import by_highest, scheme_in_words
from evalcore.errors import RecordError
from evalcore.estimated import ESTIMATORS
from evalcore.evaluation import Evaluation
from evalcore.figures import Estimate
from evalcore.measures import MEASURES
from evalcore.record import Record
from evalcore.summary import Summary, estimate_rows, summary
from evalcore.table import Table
from evalcore.wording import NBSP, capitalised, count, level, listed

FONTS = Path(__file__).parent / "fonts"
WIDE, SLIM = 640, 352  # px; the charts change to their short words below 520
PAPER_WIDE = 740  # px; set across the text, words come out as large as in a slim chart in a column
LOWER = 0.6  # on paper, of the height between lines of words
MOST_CLASSES = 4  # of more, the classes' shares would fill a page
# Marks that turn the direction of whatever follows: a name must not turn the sentence around it.
TURNING = re.compile("[\u202a-\u202e\u2066-\u2069]")
FONT_ON_SCREEN = "Noto Sans, Segoe UI, Helvetica, Arial, sans-serif"  # a page brings no font along

REST = (
    "Every figure in full precision, with its method, is in results.csv of the record; every "
    "finding is in findings.csv."
)
PAPER_REST = (
    "Findings stand here without what was seen and, unless grave, without what to do: both are in "
    "findings.csv of the record and on the HTML page, which has the sources in full. Every figure "
    "in full precision is in results.csv."
)

Row = tuple[str, ...]


@dataclass(frozen=True)
class Picture:
    """A chart with its words, drawn at one width for each place it may stand in.

    Attributes
    ----------
    title, caption, alt : str
    wide, slim : str
        SVG for print, across the text and in one of two columns.
    page_wide, page_slim : str
        The same for the HTML page.
    """

    title: str
    caption: str
    alt: str
    wide: str
    slim: str
    page_wide: str
    page_slim: str


@dataclass(frozen=True)
class Groups:
    """A table whose rows stand in groups.

    Attributes
    ----------
    title : str
    header : tuple of str
    groups : tuple of (line, rows)
        The line stands above its rows; empty where there is one group only.
    note : str
        Below the table; may be empty.
    """

    title: str
    header: Row
    groups: tuple[tuple[str, tuple[Row, ...]], ...]
    note: str = ""


@dataclass(frozen=True)
class Content:
    """Everything the summary shows, as finished text and finished drawings.

    Attributes
    ----------
    summary : Summary
    findings : tuple of (severity, title, advice, seen, number of the source)
    sources : tuple of (number, citation)
    flow : str
        From rows read to rows judged on, as one sentence.
    evaluated : str
        When, as the record has it.
    foot : str
        Record and table in one line.
    first : Picture
        Estimates with intervals.
    balance : Picture
        Units and rows of each class.
    limits : Picture or None
        The share found of each class, against its limit if it has one; none for many classes
        without limits.
    rounds, bags : Picture
        Scores of the rounds; in-bag against out-of-bag.
    figures : tuple of Groups
        Held out by candidate and measure, then by every scheme and estimator.
    rest, paper_rest : str
        Where to find what is not shown; on paper findings stand without what was seen.
    """

    summary: Summary
    findings: tuple[tuple[str, str, str, str, str], ...]
    sources: tuple[tuple[str, str], ...]
    flow: str
    evaluated: str
    foot: str
    first: Picture
    balance: Picture
    limits: Picture | None
    rounds: Picture
    bags: Picture
    figures: tuple[Groups, ...]
    rest: str
    paper_rest: str

    def as_data(self) -> dict[str, Any]:
        """The same as nested dicts and lists, fit for JSON."""
        data: dict[str, Any] = json.loads(json.dumps(asdict(self)))
        return data


def content(record: Record) -> Content:
    """What a record's summary shows.

    Parameters
    ----------
    record : Record
        May be unfinished; then the summary says so among its findings.

    Raises
    ------
    RecordError
        No round has finished yet, so there is nothing to summarise.
    """
    evaluation = record.evaluation()
    if evaluation is None:
        raise RecordError(
            f"Record {record.name!r} has no finished rounds yet; a summary can be written once "
            "the first ones are done."
        )
    said = _clean_summary(summary(record, evaluation))
    known = dict(said.identity)
    sources = list(dict.fromkeys(finding[-1] for finding in said.findings))
    return Content(
        summary=said,
        findings=tuple(
            (severity, title, advice, seen, count(sources.index(source) + 1))
            for severity, title, seen, advice, source in said.findings
        ),
        sources=tuple((count(at), source) for at, source in enumerate(sources, start=1)),
        flow=cleaned(flow_in_words(evaluation.table)),
        evaluated=known["evaluated"],
        foot=f"Record {known['record']}, table {_cut(known['file'])} (sha256 "
        f"{known['table (sha256)'][:12]}…)",
        **_pictures(evaluation),
        figures=(held_out(evaluation), by_estimator(evaluation)),
        rest=REST,
        paper_rest=PAPER_REST,
    )


def flow_in_words(table: Table) -> str:
    """From rows read to rows judged on, as one sentence."""
    judged = f": {table.noun.counted(table.n_units)}" if table.has_units else ""
    if not table.set_aside:
        return f"All {count(table.rows_read)} rows read are judged on{judged}."
    aside = sum(part.rows for part in table.set_aside)
    why = "; ".join(f"{part.reason}: {count(part.rows)}" for part in table.set_aside)
    return (
        f"Of {count(table.rows_read)} rows read, {count(aside)} "
        f"{'is' if aside == 1 else 'are'} set aside ({why}) and {count(table.n_cases)} "
        f"{'is' if table.n_cases == 1 else 'are'} judged on{judged}."
    )


def cleaned(value: Any) -> Any:
    """The same value without characters that no form can set or that turn the text around.

    >>> cleaned(["a\\u202eb", "c\\x00d"])
    ['ab', 'cd']
    """
    if isinstance(value, str):
        return TURNING.sub("", str(without_forbidden(value)))
    if isinstance(value, list | tuple):
        return type(value)(cleaned(item) for item in value)
    if isinstance(value, dict):
        return {key: cleaned(item) for key, item in value.items()}
    return value


def _clean_summary(said: Summary) -> Summary:
    parts = {name: getattr(said, name) for name in Summary.__dataclass_fields__}
    for name in ("balance", "estimates"):
        table = parts.pop(name)
        parts[name] = type(table)(cleaned(table.header), cleaned(table.rows))
    return Summary(**{name: cleaned(part) for name, part in parts.items()})


def _cut(name: str, most: int = 40) -> str:
    return name if len(name) <= most else f"{name[: most - 1]}…"


def _pictures(evaluation: Evaluation) -> dict[str, Any]:
    """The charts, by their place in the content."""
    vl_convert.register_font_directory(str(FONTS))  # else words are measured with another font
    few = evaluation.table.n_classes <= MOST_CLASSES
    limited = few or any(limit.of_class for limit in evaluation.plan.limits)
    figures = {
        "first": estimates_with_intervals(evaluation, "accuracy"),
        "balance": class_balance(evaluation.table),
        "limits": per_class(evaluation, evaluation.about) if limited else None,
        "rounds": round_scores(evaluation, evaluation.scheme),
        "bags": in_and_out(evaluation, scheme_of_bags(evaluation)),
    }
    return {place: figure and _picture(figure) for place, figure in figures.items()}


def scheme_of_bags(evaluation: Evaluation) -> str:
    """The scheme whose in-bag and out-of-bag scores are shown: a bootstrap if one was run."""
    kinds = {name: evaluation.plan.scheme(name).key for name in evaluation.rounds}
    return next((n for n, kind in kinds.items() if kind == "bootstrap"), evaluation.scheme)


def _picture(figure: Figure) -> Picture:
    return Picture(
        title=cleaned(figure.title),
        caption=cleaned(figure.caption),
        alt=cleaned(figure.alt),
        wide=_low(figure, PAPER_WIDE),
        slim=_low(figure, SLIM),
        page_wide=svg(figure, WIDE, font=FONT_ON_SCREEN, titled=False),
        page_slim=svg(figure, SLIM, font=FONT_ON_SCREEN, titled=False),
    )


def _low(figure: Figure, width: int) -> str:
    spec = lowered(printed(figure, width, titled=False), LOWER)
    return str(vl_convert.vegalite_to_svg(spec))


# of use to few readers; they stand in results.csv
LESS_USED = ("optimism_corrected", "out_of_bag_or_632_plus", "winner_corrected")
MAIN_ESTIMATORS = tuple(key for key in ESTIMATORS if key not in LESS_USED)


def held_out(evaluation: Evaluation) -> Groups:
    """Held-out figures of the headline's scheme: a candidate a row, a measure a column."""
    few = evaluation.table.n_classes <= MOST_CLASSES
    found: dict[str, dict[str, str]] = {}
    methods: dict[str, list[str]] = {}
    n = ""
    for e, row in _usual(evaluation):
        estimator = "mean_of_rounds" if e.measure == "auc" else "held_out_by_case"
        if e.scheme != evaluation.scheme or e.estimator != estimator or (e.of_class and not few):
            continue
        candidate, _, _, measure, value, bounds, method, counted = row
        n = n or counted  # the title says it once for all columns but those of a class
        column = measure if counted == n else f"{measure}, {_n(counted)}"
        # one cell for both, since a value without its interval says little
        found.setdefault(candidate, {})[column] = f"{value} ({bounds})" if method else value
        known = methods.setdefault(column, [])
        if method and method not in known:
            known.append(method)
    scheme = scheme_in_words(evaluation.plan, evaluation.table, evaluation.scheme)
    return Groups(
        title=cleaned(f"Held out, {_n(n)}: {scheme}"),
        header=cleaned(("candidate", *methods)),
        groups=(("", _filled(found, list(methods))),),
        note=cleaned(_how_found(evaluation, methods)),
    )


def _how_found(evaluation: Evaluation, methods: dict[str, list[str]]) -> str:
    """Which method gave the interval of which measure, for the note below the table."""
    named: dict[str, list[str]] = {}
    for measure, known in methods.items():
        named.setdefault(listed(known) or "none", []).append(measure.split(" (")[0])
    said = "; ".join(f"{method}: {listed(of)}" for method, of in named.items())
    auc = " AUC is the mean of the rounds." if any("(AUC)" in column for column in methods) else ""
    by = _sentence(by_highest(evaluation))
    return f"{by}In brackets the {level(evaluation.plan.level)} interval. Methods: {said}.{auc}"


def _sentence(words: str) -> str:
    return f"{capitalised(words)}. " if words else ""


def _n(counted: str) -> str:
    return f"n = {counted}".replace(" ", NBSP)


def _filled(found: dict[str, dict[str, str]], columns: list[str]) -> tuple[Row, ...]:
    return tuple(
        cleaned((name, *(values.get(column, "") for column in columns)))
        for name, values in found.items()
    )


def by_estimator(evaluation: Evaluation) -> Groups:
    """The share right of each candidate by every scheme and estimator."""
    found: dict[str, dict[str, dict[str, str]]] = {}
    counted: dict[str, str] = {}
    measure = ""
    for e, row in _usual(evaluation):
        if e.measure != "accuracy":
            continue
        found.setdefault(row[1], {}).setdefault(row[0], {})[e.estimator] = row[4]
        measure = row[3]
        if e.estimator == "held_out_by_case":
            counted[row[1]] = f", {_n(row[7])}"
    alike = len(set(counted.values())) == 1  # a bootstrap may never hold some cases out
    used = [
        key
        for key in ESTIMATORS
        if any(key in values for scheme in found.values() for values in scheme.values())
    ]
    return Groups(
        title=cleaned(
            f"By every scheme and estimator: {measure}"
            f"{next(iter(counted.values())) if alike else ''}"
        ),
        header=("candidate", *(ESTIMATORS[key] for key in used)),
        groups=tuple(
            (
                cleaned(f"{capitalised(scheme)}{'' if alike else counted.get(scheme, '')}"),
                _filled(candidates, used),
            )
            for scheme, candidates in found.items()
        ),
        note=_sentence(by_highest(evaluation)).strip(),
    )


def _usual(evaluation: Evaluation) -> Sequence[tuple[Estimate, Row]]:
    """Estimates of the main measures, counted as the headline counts, each with its text.

    The rest is in the record's results.csv.
    """
    rows = estimate_rows(evaluation, every=True)
    pairs = zip(evaluation.estimates, rows, strict=True)
    return [
        (e, row)
        for e, row in pairs
        if e.counted_by == evaluation.counted_by
        and e.measure in MEASURES
        and e.estimator in MAIN_ESTIMATORS
    ]
