"""Whether default intervals, verdicts and comparisons keep their word: tables with known truth.

Each simulated table is judged under the recommended schemes, all candidates of a cell's line-up on
the same rounds. The truth is what the same candidate, fitted on this very table through the plain
pipeline, reaches on 10,000 further cases. Rows are appended as each table is finished; a second
run skips what is there.

    python -m tests.studies.coverage --tables 1000 --out FILE [--cells quick|default|...] [--jobs 2]
    python -m tests.studies.coverage --summarise FILE... [--out SUMMARY]
"""

import argparse
import csv
import math
import os
import pathlib
import sys
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace

from evalcore import measures
from evalcore.at_cut_off import ESTIMATOR as AT_CUT_OFF
from evalcore.at_cut_off import RATIO, SUM
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose_written
from evalcore.comparison import PRACTICAL
from evalcore.cut_off_rule import CutOffRule
from evalcore.evaluation import Evaluation
from evalcore.figures import CountedBy, Interval
from evalcore.judged_intervals import auc_interval
from evalcore.limit import Limit
from evalcore.plan import Plan, generator, recommended_schemes
from evalcore.profile import smallest_class
from evalcore.table import Table
from evalcore.together import ESTIMATOR as WINNER
from evalcore.verdict import verdicts_in_use
from tests.core.checks import carried_out, table_of
from tests.studies.cells import CELLS, Cell
from tests.studies.mechanisms import MECHANISMS, SEED, further_cases
from tests.studies.truth import (
    called,
    columns,
    final_choice,
    fitted_scores,
    true_in_use,
    true_values,
)

Row = dict[str, object]
MEASURES = ("accuracy", "balanced_accuracy", "sensitivity", "auc")
SHARES = MEASURES[:3]  # measures that limits go on
# at the table's share: how often right when the class is called, and when not; expected cost
IN_USE = ("right_when_called", "right_when_not_called", "cost")
BEST = "best of all"  # the row of whoever came out best


HELD, MEAN, SWITCH = "held_out_by_case", "mean_of_rounds", "out_of_bag_or_632_plus"
ALONE = "mean_of_rounds_alone"  # AUC with the model variance of its own scheme alone
BY_SCHEME = (*((HELD, measure) for measure in SHARES), (MEAN, "auc"), (ALONE, "auc"))
FIGURES = (  # scheme, estimator, measure; the default scheme is what the table is recommended
    *(("default", *figure) for figure in BY_SCHEME),
    *(("bootstrap", *figure) for figure in (*BY_SCHEME, (SWITCH, "accuracy"))),
    *(("default", AT_CUT_OFF, measure) for measure in (*SHARES, *IN_USE)),
)
PARTS = ("value", "low", "high", "method")
KEYS = ("scenario", "n", "candidate", "cut_off", "counted_by", "table")
COLUMNS = (
    *KEYS,
    "smallest_class",
    *(f"true/{measure}" for measure in (*MEASURES, *IN_USE)),
    *(f"{'/'.join(figure)}/{part}" for figure in FIGURES for part in PARTS),
    *(f"at_least/{measure}" for measure in SHARES),
    *(f"difference/{part}" for part in ("true", "value", "low", "high", "call", "false")),
)


def made(cell: Cell, number: int) -> tuple[Table, Plan]:
    """One table and the recommended plan for it, or the headline's scheme alone."""
    keys = (cell.scenario, str(cell.n), str(number))
    cases = MECHANISMS[cell.scenario].draw(cell.n, generator(SEED, *keys))
    units = cases.units if MECHANISMS[cell.scenario].rows > 1 else None
    table = table_of(cases.labels.tolist(), features=cases.features, units=units)
    schemes = recommended_schemes(table)[: None if cell.bootstrap else 1]
    candidates = tuple(choose_written(CANDIDATES, written) for written in cell.candidates)
    seed = int(generator(SEED, *keys, "plan").integers(2**31))
    # limits that everything reaches: only the bounds that verdicts rest on are looked at
    (of_class, _), least = smallest_class(table), 1e-9
    limits = tuple(
        Limit(measure, least, table.classes[of_class] if measure == "sensitivity" else "")
        for measure in SHARES
    )
    rule = CutOffRule.read(f"{table.classes[of_class]}:{cell.cut_off}") if cell.cut_off else None
    return table, Plan(table.roles, schemes, candidates, limits=limits, cut_off=rule, seed=seed)


def judge(cell: Cell, number: int) -> list[Row]:
    """One table judged and held against the truth: its rows of the file."""
    table, plan = made(cell, number)
    of_class, size = smallest_class(table)
    found = carried_out(table, plan)[0]
    ways: list[CountedBy] = (
        ["unit", "case"] if table.has_units and not cell.cut_off else [found.counted_by]
    )
    further = further_cases(cell.scenario)
    scores = {
        name: fitted_scores(table, final_choice(found, name), further, random_state=plan.seed)
        for name in found.candidates
    }
    rows = []
    for way in ways:
        counted = found if way == found.counted_by else _counted_by_case(found)
        truth = {
            name: true_values(
                cell.scenario, further, scores[name], counted_by=way, called=called(found, name)
            )
            for name in found.candidates
        }
        # candidates of the same key are told apart as they were written
        for name, written in zip(found.candidates, cell.candidates, strict=True):
            keys = (cell.scenario, cell.n, written, cell.cut_off, way, number)
            row: Row = dict(zip(KEYS, keys, strict=True))
            row |= {"smallest_class": size} | columns(truth[name], of_class)
            row |= judged_values(counted, name, table.classes[of_class])
            row |= _in_use(counted, name, truth[name])
            row |= _bounds(_alone(counted), name)
            rows.append(row | _difference(counted, name, truth))
        rows += _best(cell, counted, truth, rows[-1], of_class=of_class)
    return rows


def judged_values(found: Evaluation, name: str, of_class: str) -> Row:
    """Value and default interval of every figure of a candidate, as far as schemes were used.

    Where there is a cut-off, of the figures at it alone: the others are studied without one.
    """
    row: Row = {}
    for scheme, by, measure in FIGURES:
        scheme_name = found.scheme if scheme == "default" else scheme
        at_cut_off = by == AT_CUT_OFF
        if scheme_name not in found.rounds or at_cut_off != (found.in_use == AT_CUT_OFF):
            continue
        if measure in IN_USE:
            continue
        estimate = found.estimate(
            measure,
            name,
            scheme=scheme_name,
            estimator=MEAN if by == ALONE else by,
            of_class=of_class if measure == "sensitivity" else "",
        )
        interval = estimate.interval
        if by == ALONE:
            part = replace(found.part(name, scheme_name), second_looks=())
            interval = auc_interval(found.plan.level, part, estimate.value)
        row |= _parts(f"{scheme}/{by}/{measure}", estimate.value, interval)
    return row


def _in_use(found: Evaluation, name: str, truth: Mapping[str, measures.Floats]) -> Row:
    """What a cut-off is worth at the table's share, and truly."""
    at, row = found.at_cut_off(name), Row()
    for measure in IN_USE if at else ():
        rate = getattr(at.at_shares[0], measure)
        row[f"true/{measure}"] = getattr(true_in_use(found, name, truth), measure).value
        method = SUM if measure == "cost" else RATIO
        bounds = Interval(rate.low, rate.high, found.plan.level, method) if rate.bounded else None
        row |= _parts(f"default/{AT_CUT_OFF}/{measure}", rate.value, bounds)
    return row


def _parts(name: str, value: float, interval: Interval | None) -> Row:
    ends = (interval.low, interval.high, interval.method) if interval else (math.nan, math.nan, "")
    return {f"{name}/{p}": v for p, v in zip(PARTS, (value, *ends), strict=True)}


def _counted_by_case(found: Evaluation) -> Evaluation:
    return replace(found, plan=replace(found.plan, answered_from="one"))


def _alone(found: Evaluation) -> Evaluation:
    """As if each candidate had been the only one tried."""
    return replace(found, estimates=tuple(e for e in found.estimates if e.estimator != WINNER))


def _bounds(found: Evaluation, name: str) -> Row:
    """What each measure was shown to be at least; a limit at or below it is called shown."""
    return {
        f"at_least/{verdict.limit.measure}": verdict.at_least if verdict.n >= 10 else -math.inf
        for verdict in verdicts_in_use(found, name)
    }


def _difference(
    found: Evaluation, name: str, truth: Mapping[str, Mapping[str, measures.Floats]]
) -> Row:
    """The first candidate less this one, and whether the call is false."""
    for d in found.differences:
        if d.second == name:
            true = float(truth[d.first]["accuracy"] - truth[d.second]["accuracy"])
            false = {
                "better": true <= 0,
                "worse": true >= 0,
                "practically equal": abs(true) > PRACTICAL,
                "cannot tell": False,
            }[d.call]
            values = (true, d.value, d.interval.low, d.interval.high, d.call, int(false))
            return {
                f"difference/{part}": value
                for part, value in zip(
                    ("true", "value", "low", "high", "call", "false"), values, strict=True
                )
            }
    return {}


def _best(
    cell: Cell,
    found: Evaluation,
    truth: Mapping[str, Mapping[str, measures.Floats]],
    like: Row,
    *,
    of_class: int,
) -> Iterator[Row]:
    """A row for whoever came out best, with the luck of being best taken off."""
    best = found.winner
    if best is None:
        return
    row: Row = {key: like[key] for key in (*KEYS, "smallest_class")}
    row |= {"candidate": f"{BEST} {len(cell.candidates)}"}
    row |= columns(truth[best.candidate], of_class)
    for measure in SHARES:
        name = found.table.classes[of_class] if measure == "sensitivity" else ""
        corrected = found.corrected(measure, name)
        if corrected:
            row |= _parts(f"default/{HELD}/{measure}", corrected.value, corrected.interval)
    yield row | _bounds(found, best.candidate)


def finished(path: pathlib.Path) -> list[dict[str, str]]:
    """Rows of a file; a line that an interruption cut short is left out."""
    with path.open(newline="", encoding="utf-8") as file:
        return list(csv.DictReader(line for line in file if line.endswith("\n")))


def _begun(path: pathlib.Path) -> None:
    """Begin a new file with its head; take off a last line that was cut short."""
    text = path.read_bytes() if path.exists() else b""
    whole = text.rfind(b"\n") + 1
    if whole:
        os.truncate(path, whole)
    else:
        path.write_text(",".join(COLUMNS) + "\n", encoding="utf-8")


def run(cells: Sequence[Cell], path: pathlib.Path, *, tables: int, jobs: int = 1) -> None:
    """Append the rows of every table that the file lacks, all cells growing alike."""
    from joblib import Parallel, delayed

    _begun(path)
    keys = ("scenario", "n", "candidate", "cut_off", "table")
    done = {tuple(row[key] for key in keys) for row in finished(path)}
    todo = (
        delayed(judge)(cell, number)
        for number in range(tables)
        for cell in cells
        if number < cell.most
        and (cell.scenario, str(cell.n), cell.candidates[-1], cell.cut_off, str(number)) not in done
    )
    with path.open("a", newline="", encoding="utf-8") as file:
        writer = csv.DictWriter(file, COLUMNS, restval="", lineterminator="\n")
        for rows in Parallel(n_jobs=jobs, return_as="generator_unordered")(todo):
            writer.writerows(rows)
            file.flush()


def main() -> None:
    """Run or summarise, as was asked for."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--tables", type=int, default=1000)
    parser.add_argument("--out", type=pathlib.Path, required="--summarise" not in sys.argv)
    parser.add_argument("--cells", choices=list(CELLS), default="default")
    parser.add_argument("--jobs", type=int, default=1)
    parser.add_argument("--summarise", type=pathlib.Path, nargs="+")
    given = parser.parse_args()
    if given.summarise:
        from tests.studies.coverage_table import summary, write

        rows = (row for path in given.summarise for row in finished(path))
        with given.out.open("w", encoding="utf-8") if given.out else sys.stdout as file:
            write(summary(rows), file)
        return
    run(CELLS[given.cells], given.out, tables=given.tables, jobs=given.jobs)


if __name__ == "__main__":
    # under its own name, so that other processes find what they are handed
    from tests.studies.coverage import main as _main

    _main()
