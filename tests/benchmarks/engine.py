"""How much faster rounds from counts are than the loop a practitioner would write.

Both sides fit the same candidates on the same bootstrap bags, answer for bag and out-of-bag cases,
and score accuracy, balanced accuracy and AUC on each. They take turns in one process with inner
threads held at one; what is printed are ratios of processor time, median over turns.

    python tests/benchmarks/engine.py [--n N] [--p P] [--turns T] [--grow]
"""

import argparse
import resource
import statistics
import time
import warnings
from collections.abc import Callable

import numpy as np
from threadpoolctl import threadpool_limits

from evalcore.answers import answers_of
from evalcore.candidates import CANDIDATES
from evalcore.choice import Choice, choose
from evalcore.engine import chunk_rounds
from evalcore.exact_rounds import Preparations
from evalcore.fits import round_scores
from evalcore.rounds import Rounds
from evalcore.table import Column, Roles, Table

LINE_UP = (
    "majority", "naive_bayes", "lda", "qda", "logistic", "nearest_neighbours", "tree", "forest",
    "svm",
)  # fmt: skip
CLOSED = ("naive_bayes", "lda", "qda", "logistic")
SUMS = {
    "line-up": LINE_UP,
    "without-forest": tuple(k for k in LINE_UP if k != "forest"),
    "closed-forms": CLOSED,
}


def made_table(n: int, p: int) -> Table:
    """Two classes, four in ten cases of the second; three informative features of p."""
    rng = np.random.default_rng(7)
    labels = (rng.random(n) < 0.4).astype(np.intp)
    features = rng.normal(size=(n, p))
    features[:, : min(3, p)] += 0.8 * labels[:, None]
    columns = tuple(Column(f"x{j}", "number", features[:, j].copy()) for j in range(p))
    return Table(
        name="made",
        columns=columns,
        labels=labels,
        classes=("a", "b"),
        units=np.arange(n),
        unit_names=tuple(map(str, range(n))),
        roles=Roles("class"),
        lines=np.arange(n),
        rows_read=n,
    )


def bags(table: Table, n_rounds: int) -> Rounds:
    """Bootstrap rounds of a table."""
    n = table.n_cases
    drawn = np.random.default_rng(3).multinomial(n, np.full(n, 1 / n), size=n_rounds)
    return Rounds.of_bags(drawn)


def by_hand(choice: Choice, table: Table, rounds: Rounds) -> None:
    """The practitioner's loop: clone a pipeline, fit, predict twice, score with scikit-learn."""
    from sklearn.base import clone
    from sklearn.impute import SimpleImputer
    from sklearn.metrics import accuracy_score, balanced_accuracy_score, roc_auc_score
    from sklearn.neighbors import KNeighborsClassifier
    from sklearn.pipeline import make_pipeline
    from sklearn.preprocessing import StandardScaler

    model = CANDIDATES[choice.key].model(choice.values(), 1)
    if choice.key == "nearest_neighbours":
        model = KNeighborsClassifier(5)
    pipeline = make_pipeline(SimpleImputer(strategy="median"), StandardScaler(), model)
    x, y = table.features, table.labels
    for bag in rounds.train:
        rows, out = np.repeat(np.arange(len(bag)), bag), np.flatnonzero(bag == 0)
        fitted = clone(pipeline).fit(x[rows], y[rows])
        for part in (rows, out):
            answers = fitted.predict(x[part])
            if hasattr(fitted, "predict_proba"):
                scores = fitted.predict_proba(x[part])[:, 1]
            else:
                scores = fitted.decision_function(x[part])
            accuracy_score(y[part], answers)
            balanced_accuracy_score(y[part], answers)
            roc_auc_score(y[part], scores)


def by_counts(choice: Choice, table: Table, rounds: Rounds) -> None:
    """The engine's way with the same scores, chunk by chunk."""
    step = chunk_rounds(table.n_cases)
    for start in range(0, rounds.n_rounds, step):
        part = rounds.part(slice(start, start + step))
        states = list(range(part.n_rounds))
        scores = round_scores(choice, Preparations(table, part.train), engine="fast", states=states)
        answers_of(table, part, scores)


def seconds(work: Callable[[], None]) -> float:
    """Processor time of one call."""
    began = time.process_time()
    work()
    return time.process_time() - began


def compare(n: int, p: int, turns: int) -> None:
    """Print the ratios of one size of table."""
    table = made_table(n, p)
    slow: dict[str, list[float]] = {key: [] for key in LINE_UP}
    fast: dict[str, list[float]] = {key: [] for key in LINE_UP}
    few = bags(table, 3 if n > 1000 else 5)
    many = bags(table, chunk_rounds(n))
    for key in LINE_UP:
        choice = choose(CANDIDATES, key)
        for way in (by_counts, by_hand):
            way(choice, table, few)  # imports and first calls do not count
        for _ in range(turns):
            slow[key].append(seconds(lambda c=choice: by_hand(c, table, few)) / few.n_rounds)
            fast[key].append(seconds(lambda c=choice: by_counts(c, table, many)) / many.n_rounds)
    for key in LINE_UP:
        ratio = statistics.median(a / b for a, b in zip(slow[key], fast[key], strict=True))
        print(f"{key} n={n} p={p} ratio={ratio:.1f}", flush=True)
    for name, keys in SUMS.items():
        ratio = statistics.median(
            sum(slow[k][t] for k in keys) / sum(fast[k][t] for k in keys) for t in range(turns)
        )
        print(f"{name} n={n} p={p} ratio={ratio:.1f}", flush=True)


def growth() -> None:
    """Print how the time of closed forms grows with rounds, cases and features."""
    keys = ("majority", "naive_bayes", "lda", "logistic")

    def spent(n: int, p: int, n_rounds: int) -> float:
        table, rounds = made_table(n, p), bags(made_table(n, p), n_rounds)
        return sum(
            seconds(lambda k=k: by_counts(choose(CANDIDATES, k), table, rounds)) for k in keys
        )

    for n_rounds in (10, 100, 1000):
        print(f"rounds={n_rounds} n=150 p=10 seconds={spent(150, 10, n_rounds):.3f}", flush=True)
    for n in (100, 1_000, 10_000, 100_000):
        print(f"rounds=10 n={n} p=10 seconds={spent(n, 10, 10):.3f}", flush=True)
    for p in (5, 20, 100):
        print(f"rounds=10 n=1000 p={p} seconds={spent(1000, p, 10):.3f}", flush=True)


def main() -> None:
    """Run what was asked for."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument(
        "--n", type=int, action="append", help="cases; 150, 600 and 3000 if left out"
    )
    parser.add_argument("--p", type=int, action="append", help="features; 10 and 50 if left out")
    parser.add_argument("--turns", type=int, default=5)
    parser.add_argument("--grow", action="store_true", help="also how time grows")
    given = parser.parse_args()
    warnings.simplefilter("ignore")
    with threadpool_limits(1):
        for p in given.p or (10, 50):
            for n in given.n or (150, 600, 3000):
                compare(n, p, given.turns)
        if given.grow:
            growth()
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(f"peak memory {peak:.0f} MiB")


if __name__ == "__main__":
    main()
