"""Whether estimates and default intervals keep their word: simulated tables with known truth.

Each table is judged under the recommended schemes. The truth is what the same candidate, fitted on
this very table through the plain pipeline, reaches on 20,000 further cases. A row is appended as
each table is finished; a second run skips what is there.

    python -m tests.studies.coverage --tables 1000 --out FILE [--cells quick|default|all] [--jobs 2]
    python -m tests.studies.coverage --summarise FILE [--out SUMMARY]
"""

import argparse
import csv
import math
import os
import pathlib
import sys
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from statistics import NormalDist
from typing import TextIO

import numpy as np
from numpy.typing import NDArray

from evalcore import measures
from evalcore.candidates import CANDIDATES, estimator
from evalcore.evaluation import Evaluation
from evalcore.judged import auc_interval
from evalcore.plan import Plan, choose_written, generator, recommended_schemes
from evalcore.profile import smallest_class
from evalcore.table import Table
from tests.core.checks import carried_out, table_of

FURTHER = 20_000  # cases the truth is measured on
LEAST = 4  # cases of each class in a table
SEED = 1
Row = Mapping[str, object]
Cases = tuple[NDArray[np.intp], measures.Floats]  # labels and features
MEASURES = ("accuracy", "balanced_accuracy", "sensitivity", "auc")


@dataclass(frozen=True, eq=False)
class Mechanism:
    """Clusters of unit variance; a case comes from one cluster of its class at random."""

    shares: tuple[float, ...]  # of the classes
    centres: measures.Floats  # shape (K, clusters of a class, features that tell something)
    noise: int = 0  # features that tell nothing

    def draw(self, n: int, rng: np.random.Generator) -> Cases:
        """Labelled cases; labels are drawn again until every class has `LEAST`."""
        classes, clusters, features = self.centres.shape
        labels = np.zeros(n, dtype=np.intp)
        while np.bincount(labels, minlength=classes).min() < LEAST:
            labels = rng.choice(classes, size=n, p=self.shares)
        cluster = rng.integers(clusters, size=n)
        x = rng.normal(size=(n, features + self.noise))
        x[:, :features] += self.centres[labels, cluster]
        return labels, x


def _two_normals(bayes: float, *, features: int = 5) -> measures.Floats:
    """Centres of two classes which, equally frequent, can be told apart in a share `bayes`."""
    half = NormalDist().inv_cdf(bayes) / math.sqrt(features)
    return np.array([[[-half] * features], [[half] * features]])


EVEN, RARE = (0.5, 0.5), (0.85, 0.15)
MECHANISMS = {
    "gauss": Mechanism(EVEN, _two_normals(0.85)),
    "imb": Mechanism(RARE, _two_normals(0.85)),
    "p50": Mechanism(EVEN, _two_normals(0.85), noise=45),
    "noise": Mechanism(EVEN, np.zeros((2, 1, 1)), noise=9),
    "three": Mechanism((1 / 3, 1 / 3, 1 / 3), 2.2 / math.sqrt(2) * np.eye(3)[:, None, :], noise=2),
    "xor": Mechanism(EVEN, 1.5 * np.array([[[1.0, 1], [-1, -1]], [[1, -1], [-1, 1]]]), noise=3),
    "sep": Mechanism(EVEN, _two_normals(0.98)),
}


@dataclass(frozen=True)
class Cell:
    """What is repeated."""

    scenario: str
    n: int
    candidate: str  # as written in a plan
    most: int = 10**9  # tables of it, whatever is asked for; slow candidates have fewer


QUICK = (
    *(Cell(scenario, 60, "lda") for scenario in ("gauss", "p50", "imb")),
    *(Cell("noise", 40, "nearest_neighbours:k=1"), Cell("xor", 100, "tree")),
)
LEARNERS = ("lda", "naive_bayes", "nearest_neighbours:k=5", "nearest_neighbours:k=1", "tree")
SMALL = (
    *((scenario, n) for scenario in ("gauss", "imb") for n in (30, 60, 120)),
    *(("p50", 60), ("noise", 40), ("three", 60), ("xor", 100), ("sep", 40)),
)
LARGE = (("gauss", 300), ("gauss", 500), ("imb", 300), ("noise", 120))
DEFAULT = (
    *(Cell(*at, candidate) for at in SMALL for candidate in LEARNERS),
    *(Cell(*at, candidate) for at in LARGE for candidate in ("lda", "tree")),
)
LINE_UP = (
    *(Cell(*at, "logistic") for at in (*SMALL, *LARGE)),
    *(Cell(*at, candidate, 400) for at in SMALL for candidate in ("svm", "forest")),
)
CELLS = {"quick": QUICK, "default": DEFAULT, "all": (*DEFAULT, *LINE_UP)}

HELD, MEAN, SWITCH = "held_out_by_case", "mean_of_rounds", "out_of_bag_or_632_plus"
ALONE = "mean_of_rounds (this scheme's model variance alone)"
AUCS = ((MEAN, "auc"), (ALONE, "auc"))
BY_FOLDS = (*((HELD, measure) for measure in MEASURES[:3]), *AUCS)
FIGURES = (  # scheme, estimator, measure
    *(("cross_validation", *figure) for figure in BY_FOLDS),
    *(("bootstrap", *figure) for figure in (*BY_FOLDS, (SWITCH, "accuracy"))),
)
TRUE = tuple(f"true {measure}" for measure in MEASURES)
NONE = (math.nan, math.nan, "")
PARTS = ("value", "low", "high", "method")
KEYS = ("scenario", "n", "candidate", "table")
HEAD = (*KEYS[:3], "smallest_class", "scheme", "estimator", "measure")
COLUMNS = (
    *KEYS,
    "smallest_class",
    *TRUE,
    *(f"{scheme}/{name}/{m}/{part}" for scheme, name, m in FIGURES for part in PARTS),
)


@lru_cache(maxsize=4)
def further_cases(scenario: str) -> Cases:
    """The large sample that a scenario's models are tried on."""
    return MECHANISMS[scenario].draw(FURTHER, generator(SEED, scenario, "further cases"))


def made(cell: Cell, number: int, *, bootstrap: bool = True) -> tuple[Table, Plan]:
    """One table and the recommended plan for it, or the headline's scheme alone."""
    keys = (cell.scenario, str(cell.n), cell.candidate, str(number))
    labels, features = MECHANISMS[cell.scenario].draw(cell.n, generator(SEED, *keys))
    table = table_of(labels.tolist(), features=features)
    schemes = recommended_schemes(table)[: None if bootstrap else 1]
    choice, seed = choose_written(CANDIDATES, cell.candidate), generator(SEED, *keys)
    return table, Plan(table.roles, schemes, (choice,), seed=int(seed.integers(2**31)))


def judge(cell: Cell, number: int, *, bootstrap: bool = True) -> dict[str, object]:
    """One table judged and held against the truth: a row of the file."""
    table, plan = made(cell, number, bootstrap=bootstrap)
    of_class, size = smallest_class(table)
    keys = (cell.scenario, cell.n, cell.candidate, number, size)
    row: dict[str, object] = dict(zip(COLUMNS, keys, strict=False))
    row |= true_values(table, plan, further_cases(cell.scenario), of_class)
    return row | judged_values(carried_out(table, plan)[0], table.classes[of_class])


def true_values(table: Table, plan: Plan, further: Cases, of_class: int) -> dict[str, float]:
    """What the model fitted on this table reaches on further cases, through the plain pipeline."""
    (choice,), (labels, features) = plan.candidates, further
    model = estimator(CANDIDATES[choice.key], choice.values(), table, plan.seed)
    model.fit(table.features, table.labels)
    answer = getattr(model, "predict_proba", None) or model.decision_function
    scores = answer(features)
    scores = scores if scores.ndim == 2 else np.column_stack([-scores, scores])
    named = measures.predicted_class(scores)
    counts = measures.confusion(labels, named, n_classes=table.n_classes)
    values = (
        measures.accuracy(counts)[0],
        measures.balanced_accuracy(counts)[0],
        measures.recalls(counts)[0, of_class],
        measures.hand_till(labels, scores)[0],
    )
    return dict(zip(TRUE, map(float, values), strict=True))


def judged_values(found: Evaluation, of_class: str) -> dict[str, object]:
    """Value and default interval of every figure; schemes that were not used are left out."""
    row: dict[str, object] = {}
    for scheme, name, measure in FIGURES:
        if scheme not in found.rounds or (name == ALONE and len(found.rounds) == 1):
            continue
        by, of = MEAN if name == ALONE else name, of_class if measure == "sensitivity" else ""
        estimate = found.estimate(measure, found.about, scheme=scheme, estimator=by, of_class=of)
        interval = estimate.interval
        if name == ALONE:
            part = found.part(found.about, scheme)
            interval = auc_interval(found.plan.level, part, [part], estimate.value)
        ends = (interval.low, interval.high, interval.method) if interval else NONE
        values = (estimate.value, *ends)
        row |= {f"{scheme}/{name}/{measure}/{p}": v for p, v in zip(PARTS, values, strict=True)}
    return row


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


def run(
    cells: Sequence[Cell], path: pathlib.Path, *, tables: int, jobs: int = 1, bootstrap: bool = True
) -> None:
    """Append a row for every table that the file lacks, all cells growing alike."""
    from joblib import Parallel, delayed

    _begun(path)
    done = {tuple(row[key] for key in KEYS) for row in finished(path)}
    todo = (
        delayed(judge)(cell, number, bootstrap=bootstrap)
        for number in range(tables)
        for cell in cells
        if number < cell.most
        and (cell.scenario, str(cell.n), cell.candidate, str(number)) not in done
    )
    with path.open("a", newline="", encoding="utf-8") as file:
        writer = csv.DictWriter(file, COLUMNS, restval="", lineterminator="\n")
        for row in Parallel(n_jobs=jobs, return_as="generator_unordered")(todo):
            writer.writerow(row)
            file.flush()


def summary(rows: Iterable[Row]) -> Iterator[dict[str, object]]:
    """The small table, in shares: a line for each cell and figure; coverage where intervals are."""
    by_cell: dict[tuple[object, ...], list[Row]] = {}
    for row in rows:
        by_cell.setdefault(tuple(row[key] for key in KEYS[:3]), []).append(row)
    for cell, alike in by_cell.items():
        smallest = int(np.median([int(str(row["smallest_class"])) for row in alike]))
        for figure in FIGURES:
            if found := _line(alike, figure):
                yield dict(zip(HEAD, (*cell, smallest, *figure), strict=True)) | found


def _line(alike: list[Row], figure: tuple[str, str, str]) -> dict[str, object]:
    """Coverage, bias, RMSE and width of one figure over tables; empty where no table has it."""
    name = "/".join(figure)
    having = [row for row in alike if row.get(f"{name}/value", "") != ""]
    if not having:
        return {}
    columns = (f"true {figure[2]}", *(f"{name}/{part}" for part in PARTS[:3]))
    truth, value, low, high = np.array([[float(str(r[c])) for r in having] for c in columns])
    offered = ~np.isnan(low)
    error = (value - truth)[~np.isnan(value)]
    covered = ((low <= truth) & (truth <= high))[offered]
    share = float(covered.mean()) if len(covered) else math.nan
    return {
        "interval": next((r[f"{name}/method"] for r in having if r[f"{name}/method"]), ""),
        "coverage": share,
        "monte_carlo_error": math.sqrt(share * (1 - share) / max(1, len(covered))),
        "bias": float(error.mean()),
        "rmse": math.sqrt(float(np.square(error).mean())),
        "width": float((high - low)[offered].mean()) if len(covered) else math.nan,
        "tables": len(having),
    }


def write(lines: Iterable[Row], file: TextIO) -> None:
    """Lines of the small table as CSV, shares to four digits."""
    shown = [{k: f"{v:.4f}" if isinstance(v, float) else v for k, v in x.items()} for x in lines]
    writer = csv.DictWriter(file, list(shown[0]) if shown else [], lineterminator="\n")
    writer.writeheader()
    writer.writerows(shown)


def main() -> None:
    """Run or summarise, as was asked for."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--tables", type=int, default=1000)
    parser.add_argument("--out", type=pathlib.Path, required="--summarise" not in sys.argv)
    parser.add_argument("--cells", choices=list(CELLS), default="default")
    parser.add_argument("--jobs", type=int, default=1)
    parser.add_argument("--folds-only", action="store_true", help="no bootstrap rounds")
    parser.add_argument("--summarise", type=pathlib.Path)
    given = parser.parse_args()
    if given.summarise:
        with given.out.open("w", encoding="utf-8") if given.out else sys.stdout as file:
            write(summary(finished(given.summarise)), file)
        return
    wanted = {"tables": given.tables, "jobs": given.jobs, "bootstrap": not given.folds_only}
    run(CELLS[given.cells], given.out, **wanted)


if __name__ == "__main__":
    # under its own name, so that other processes find what they are handed
    from tests.studies.coverage import main as _main

    _main()
