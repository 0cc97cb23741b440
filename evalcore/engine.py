"""Rounds carried out: candidates x rounds in chunks, each chunk finished on its own.

A chunk is fully determined by table and plan, so digits do not depend on the number of processes,
on the order or on an interruption.
"""

import os
import time
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from evalcore.answers import Answers, answers_of
from evalcore.measures import Floats
from evalcore.permuted import permuted_figures
from evalcore.pipeline import candidates_in
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.table import Table
from evalcore.tuning import Learned

CHUNK = 50  # most rounds finished together
LARGE = 5_000  # cases from which a single round takes long enough to be reported
WHOLE = ""  # the scheme name of the fits on all cases
CHANCE = "chance check"  # the scheme name of permuted tables; no scheme is named with a blank


@dataclass(frozen=True)
class Task:
    """Some rounds of one scheme; fits on all cases are `WHOLE`, permuted tables `CHANCE`."""

    scheme: str
    start: int
    stop: int


@dataclass(frozen=True, eq=False)
class Finished:
    """A task with what each candidate answered.

    Attributes
    ----------
    task : Task
    answers : dict of str to Answers
        By candidate name; a candidate that failed is missing.
    failures : dict of str to str
        By candidate name, why it could not be fitted.
    seconds : float
        Time taken.
    chance : ndarray or None, shape (m, C)
        Of permuted tables: the figure of each candidate on each, in the order of the plan.
    """

    task: Task
    answers: dict[str, Answers]
    failures: dict[str, str]
    seconds: float
    chance: Floats | None = None


def tasks(rounds: dict[str, Rounds], *, size: int = 0, permutations: int = 0) -> list[Task]:
    """All tasks of drawn rounds: fits on all cases first, then by scheme, permuted tables last.

    `size` rounds to a task; `chunk_rounds` decides where it is 0.
    """
    todo = [Task(WHOLE, 0, 1)]
    for name, drawn in rounds.items():
        step = size or chunk_rounds(drawn.n_cases)
        todo += [
            Task(name, start, min(start + step, drawn.n_rounds))
            for start in range(0, drawn.n_rounds, step)
        ]
    return todo + [
        Task(CHANCE, number, number + 1)  # each goes through many rounds of its own
        for number in range(permutations)
    ]


def chunk_rounds(n_cases: int) -> int:
    """Rounds finished together: many of a small table, one by one of a very large one.

    It depends on the table alone, so that a resume meets the same bounds; and no chunk takes so
    long that nothing is heard of it.

    >>> [chunk_rounds(n) for n in (150, 720, 3_000, 10_000, 100_000)]
    [50, 20, 10, 5, 1]
    """
    if n_cases > LARGE:
        return max(1, 50_000 // n_cases)
    return max(10, min(CHUNK, 15_000 // n_cases))


def whole_rounds(n_cases: int) -> Rounds:
    """The one round in which every case is trained on once and none is held out."""
    ones = np.ones((1, n_cases), dtype=np.uint8)
    return Rounds(ones, np.zeros_like(ones), np.zeros(1, dtype=np.intp))


def run(
    table: Table,
    plan: Plan,
    rounds: dict[str, Rounds],
    *,
    todo: Sequence[Task],
    jobs: int = 1,
) -> Iterator[Finished]:
    """Carry out tasks and yield each as it is finished, in order.

    Parameters
    ----------
    table : Table
    plan : Plan
    rounds : dict of str to Rounds
        As drawn by `plan.draw`, or as stored in a record.
    todo : sequence of Task
    jobs : int
        Processes; 1 stays in this one.
    """
    if jobs == 1:
        for task in todo:
            yield carry_out(table, plan, rounds, task)
        return
    from joblib import Parallel, delayed

    yield from Parallel(n_jobs=jobs, return_as="generator")(
        delayed(carry_out)(table, plan, _only(rounds, task), task) for task in todo
    )


def _only(rounds: dict[str, Rounds], task: Task) -> dict[str, Rounds]:
    return {task.scheme: rounds[task.scheme]} if task.scheme in rounds else {}


def carry_out(table: Table, plan: Plan, rounds: dict[str, Rounds], task: Task) -> Finished:
    """Fit every candidate in the rounds of one task and reduce its answers."""
    from threadpoolctl import threadpool_limits

    began = time.perf_counter()
    for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
        # the limit below reaches only what is loaded already; this is read on loading
        os.environ[name] = "1"
    # one thread inside: more would fight over the cores and could change the last digits
    with threadpool_limits(1):
        if task.scheme == CHANCE:
            numbers = range(task.start, task.stop)
            chance = np.array([permuted_figures(table, plan, number) for number in numbers])
            return Finished(task, {}, {}, time.perf_counter() - began, chance)
        answers, failures = _answered(table, plan, rounds, task)
    return Finished(task, answers, failures, time.perf_counter() - began)


def _answered(
    table: Table, plan: Plan, rounds: dict[str, Rounds], task: Task
) -> tuple[dict[str, Answers], dict[str, str]]:
    """Answers of every candidate in the rounds of one task, and why any failed."""
    part = (
        rounds[task.scheme].part(slice(task.start, task.stop))
        if task.scheme
        else whole_rounds(table.n_cases)
    )
    answers, failures = {}, {}
    for name, found in candidates_in(table, plan, part, scheme=task.scheme, start=task.start):
        if isinstance(found, Learned):
            inner = None
            if found.inner is not None and plan.cut_off:
                inner = found.inner[:, :, table.classes.index(plan.cut_off.of_class)]
            answers[name] = replace(
                answers_of(table, part, found.scores), picked=found.picked, inner=inner
            )
        else:
            failures[name] = found
    return answers, failures
