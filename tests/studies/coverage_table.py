"""The coverage study reduced to one small tidy table: a line a cell and figure.

`coverage` is the share of tables whose interval held the truth; of a verdict or comparison, the
share without a false word. Tables without an interval are neither held nor missed; they are counted
in a column of their own. The Monte-Carlo error is that of the share after two successes and two
failures are added (Agresti & Coull 1998), so that it is not 0 where every table agrees.
"""

import csv
import math
from collections.abc import Iterable, Iterator, Mapping, Sequence
from typing import TextIO

import numpy as np

from evalcore.measures import Floats
from tests.studies.coverage import BEST, FIGURES, HELD, KEYS, MEAN, SHARES, WINNER
from tests.studies.mechanisms import MECHANISMS

Raw = Mapping[str, object]
Line = dict[str, object]

COLUMNS = (
    *("scenario", "n", "counted_by", "features", "classes", "rows", "smallest_class"),
    *("candidate", "cut_off", "scheme", "estimator", "interval", "measure"),
    *("coverage", "monte_carlo_error", "bias", "rmse", "width", "tables", "without_interval"),
)
ALL_PAIRS = "all pairs"  # a table is wrong if any of its calls is


def summary(rows: Iterable[Raw]) -> Iterator[Line]:
    """Lines of every cell: its figures, its verdicts, its comparisons.

    Parameters
    ----------
    rows : iterable of mapping
        As `coverage.run` writes them, in their order; of a table judged twice the later rows count.
    """
    cells: dict[tuple[str, int, str, str], list[Raw]] = {}
    for row in _latest(rows):
        scenario, n, *rest = (str(row[key]) for key in ("scenario", "n", "counted_by", "cut_off"))
        key = (scenario, int(n), *rest)
        cells.setdefault(key, []).append(row)
    order = list(MECHANISMS)
    for key in sorted(cells, key=lambda key: (order.index(key[0]), *key[1:])):
        by_candidate: dict[str, list[Raw]] = {}
        for row in cells[key]:
            by_candidate.setdefault(str(row["candidate"]), []).append(row)
        for candidate, those in by_candidate.items():
            yield from _figures(candidate, those)
            yield from _verdicts(candidate, those)
        yield from _comparisons(cells[key])


def write(lines: Iterable[Line], file: TextIO) -> None:
    """The lines as CSV; shares and errors to four digits, undefined ones as nan."""
    writer = csv.DictWriter(file, COLUMNS, lineterminator="\n")
    writer.writeheader()
    for line in lines:
        # a median of whole numbers ends in .5 at most
        shown = {
            name: f"{value:{'g' if name == 'smallest_class' else '.4f'}}"
            for name, value in line.items()
            if isinstance(value, float)
        }
        writer.writerow(line | shown)


def _latest(rows: Iterable[Raw]) -> list[Raw]:
    """Each candidate's row of a table once; an interrupted run may have judged a table again."""
    kept: dict[tuple[object, ...], Raw] = {}
    for row in rows:
        key = tuple(str(row[name]) for name in KEYS)
        kept.pop(key, None)  # the rows of a table stay together, in the order of its line-up
        kept[key] = row
    return list(kept.values())


def _figures(candidate: str, rows: Sequence[Raw]) -> Iterator[Line]:
    best = candidate.startswith(BEST)
    for scheme, by, measure in FIGURES:
        name = f"{scheme}/{by}/{measure}"
        given = [row for row in rows if _has(row, f"{name}/value")]
        if (scheme, by) == ("default", MEAN):
            # with one scheme there is but one model variance: the figure of that one alone
            given = [row for row in given if _has(row, f"bootstrap/{MEAN}/{measure}/value")]
        # a few tables of a cell may be recommended another scheme; a line is of most of them
        if 2 * len(given) > len(rows):
            # what was judged of the best is what is left once its luck is taken off
            estimator = WINNER if best and by == HELD else by
            head = {"scheme": scheme, "estimator": estimator, "measure": measure}
            kept = _kept(given, name, truth=f"true/{measure}")
            yield _line(given, candidate, head | kept)


def _verdicts(candidate: str, rows: Sequence[Raw]) -> Iterator[Line]:
    """How often a limit equal to the true rate was not called shown, as it must not be."""
    for measure in SHARES:
        given = [row for row in rows if _has(row, f"at_least/{measure}")]
        if not given:
            continue
        bound, true = _numbers(given, f"at_least/{measure}"), _numbers(given, f"true/{measure}")
        # without a bound nothing is called shown, so nothing wrongly: nan is not at least anything
        kept = _shares(~(bound >= true), without=~np.isfinite(bound), of_all=True)
        yield _line(given, candidate, {"estimator": "verdict", "measure": measure} | kept)


def _comparisons(rows: Sequence[Raw]) -> Iterator[Line]:
    """Each pair of a line-up, then all pairs of a table at once."""
    by_pair: dict[str, list[Raw]] = {}
    by_table: dict[str, list[Raw]] = {}
    first = ""
    for row in rows:
        if _has(row, "difference/call"):
            by_pair.setdefault(f"{first} against {row['candidate']}", []).append(row)
            by_table.setdefault(str(row["table"]), []).append(row)
        else:
            first = str(row["candidate"])  # begins a line-up, and is compared with the others
    for pair, those in by_pair.items():
        kept = _kept(those, "difference", truth="difference/true")
        yield _line(those, pair, {"estimator": "difference", "measure": "accuracy"} | kept)
        yield _called(pair, [[row] for row in those])
    if by_table:
        yield _called(ALL_PAIRS, list(by_table.values()))


def _called(candidate: str, families: Sequence[Sequence[Raw]]) -> Line:
    """How often a family of calls held no false one."""
    false = np.array([_numbers(rows, "difference/false").any() for rows in families])
    lacking = [np.isnan(_numbers(rows, "difference/low")).any() for rows in families]
    kept = _shares(~false, without=np.array(lacking), of_all=True)
    head = {"estimator": "comparison", "measure": "accuracy"}
    return _line([rows[0] for rows in families], candidate, head | kept)


def _kept(rows: Sequence[Raw], name: str, *, truth: str) -> Line:
    """How often the interval held the truth, and how far off the value was."""
    value, true = _numbers(rows, f"{name}/value"), _numbers(rows, truth)
    low, high = _numbers(rows, f"{name}/low"), _numbers(rows, f"{name}/high")
    lacking = np.isnan(low) | np.isnan(high)
    off = (value - true)[~np.isnan(value)]
    methods = {str(row.get(f"{name}/method") or "") for row in rows} - {""}
    return {
        "interval": " or ".join(sorted(methods)),
        **_shares((low <= true) & (true <= high), without=lacking),
        "bias": _mean(off),
        "rmse": math.sqrt(_mean(off**2)),
        "width": _mean((high - low)[~lacking]),
    }


def _shares(
    held: np.ndarray, *, without: np.ndarray, of_all: bool = False
) -> dict[str, float | int]:
    """Share held and its error: of tables with an interval, or of all where none is no fault."""
    asked = held if of_all else held[~without]
    n, right = len(asked), int(asked.sum())
    plus = (right + 2) / (n + 4)
    return {
        "coverage": right / n if n else math.nan,
        "monte_carlo_error": math.sqrt(plus * (1 - plus) / (n + 4)) if n else math.nan,
        "tables": len(held),
        "without_interval": int(without.sum()),
    }


def _line(rows: Sequence[Raw], candidate: str, figures: Line) -> Line:
    """The figures with the cell they are of; what does not apply is empty or nan."""
    first = rows[0]
    mechanism = MECHANISMS[str(first["scenario"])]
    classes, _, telling = mechanism.centres.shape
    return {
        "scenario": first["scenario"],
        "n": int(str(first["n"])),
        "counted_by": first["counted_by"],
        "features": telling + mechanism.noise,
        "classes": classes,
        "rows": mechanism.rows,
        "smallest_class": float(np.median(_numbers(rows, "smallest_class"))),
        "candidate": candidate,
        "cut_off": first["cut_off"],
        "scheme": "default",
        "interval": "",
        "bias": math.nan,
        "rmse": math.nan,
        "width": math.nan,
    } | figures


def _has(row: Raw, column: str) -> bool:
    """Whether something stands there; a scheme that was not carried out leaves nothing."""
    return row.get(column, "") not in ("", None)


def _numbers(rows: Sequence[Raw], column: str) -> Floats:
    return np.array([float(str(row[column])) for row in rows])


def _mean(values: Floats) -> float:
    return float(values.mean()) if len(values) else math.nan
