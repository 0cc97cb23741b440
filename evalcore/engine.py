"""Rounds carried out: candidates x rounds in chunks, each chunk finished on its own.

A chunk is fully determined by table and plan, so digits do not depend on the number of processes,
on the order or on an interruption.
"""

import os
import time
import warnings
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from evalcore.answers import Answers, answers_of
from evalcore.candidates import CANDIDATES, estimator
from evalcore.exact_rounds import Preparations, exact_scores
from evalcore.measures import Floats
from evalcore.plan import APPENDING, Choice, Engine, Plan, generator
from evalcore.prepared import nothing_varies, prepare
from evalcore.rounds import Counts, Rounds
from evalcore.settings import Settings
from evalcore.table import Table

CHUNK = 50  # most rounds finished together
LARGE = 5_000  # cases from which a single round takes long enough to be reported
WHOLE = ""  # the scheme name of the fits on all cases


@dataclass(frozen=True)
class Task:
    """Some rounds of one scheme; the fits on all cases have the scheme name `WHOLE`."""

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
    """

    task: Task
    answers: dict[str, Answers]
    failures: dict[str, str]
    seconds: float


def tasks(rounds: dict[str, Rounds], *, size: int = 0) -> list[Task]:
    """All tasks of drawn rounds: the fits on all cases first, then scheme by scheme.

    `size` rounds to a task; `chunk_rounds` decides where it is 0.
    """
    todo = [Task(WHOLE, 0, 1)]
    for name, drawn in rounds.items():
        step = size or chunk_rounds(drawn.n_cases)
        todo += [
            Task(name, start, min(start + step, drawn.n_rounds))
            for start in range(0, drawn.n_rounds, step)
        ]
    return todo


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
    return {task.scheme: rounds[task.scheme]} if task.scheme else {}


def carry_out(table: Table, plan: Plan, rounds: dict[str, Rounds], task: Task) -> Finished:
    """Fit every candidate in the rounds of one task and reduce its answers."""
    from threadpoolctl import threadpool_limits

    began = time.perf_counter()
    for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
        # the limit below reaches only what is loaded already; this is read on loading
        os.environ.setdefault(name, "1")
    part = (
        rounds[task.scheme].part(slice(task.start, task.stop))
        if task.scheme
        else whole_rounds(table.n_cases)
    )
    answers, failures = {}, {}
    preparations = Preparations(table, part.train)
    # one thread inside: more would fight over the cores and could change the last digits
    with threadpool_limits(1):
        for name, choice in zip(plan.candidate_names, plan.candidates, strict=True):
            states = _random_states(plan, choice, task)
            try:
                scores = round_scores(choice, preparations, engine=plan.engine, states=states)
            except Exception as error:  # a candidate that cannot be fitted must not end the rest
                rounds_of = task.scheme or "the whole table"
                warnings.warn(f"{name} failed in {rounds_of}: {error!r}", stacklevel=2)
                failures[name] = f"{type(error).__name__}: {error}"
            else:
                answers[name] = answers_of(table, part, scores)
    return Finished(task, answers, failures, time.perf_counter() - began)


def _random_states(plan: Plan, choice: Choice, task: Task) -> list[int]:
    """A random state for each round of a task, that no other candidate or scheme can move."""
    scheme = plan.scheme(task.scheme).written(without=APPENDING) if task.scheme else "whole"
    return [
        int(generator(plan.seed, choice.written(), scheme, str(r)).integers(2**31))
        for r in range(task.start, task.stop)
    ]


def round_scores(
    choice: Choice, preparations: Preparations, *, engine: Engine, states: Sequence[int]
) -> Floats:
    """Answers of one candidate for every case in some rounds, shape (R, n, K).

    By its fast path where there is one and `engine` is "fast"; rounds it does not cover, and
    everything under "plain", by the plain adapter.
    """
    table, counts = preparations.table, preparations.counts
    scaled = CANDIDATES[choice.key].scaled(choice.values())
    found = (
        exact_scores(choice, preparations, scaled=scaled, random_states=states)
        if engine == "fast"
        else None
    )
    if found is None:
        return plain_scores(choice, table, counts, random_states=states)
    scores, covered = found
    left = np.flatnonzero(~covered).tolist()
    if left:
        scores[left] = plain_scores(
            choice, table, counts[left], random_states=[states[r] for r in left]
        )
    return scores


def plain_scores(
    choice: Choice, table: Table, counts: Counts, *, random_states: Sequence[int]
) -> Floats:
    """Fit one candidate on each bag with the public classes, and answer for every case.

    Parameters
    ----------
    choice : Choice
    table : Table
    counts : ndarray, shape (R, n)
        How often each case is in each bag.
    random_states : sequence of int, length R

    Returns
    -------
    ndarray, shape (R, n, K)
        Probabilities, or decision values where the candidate has no probabilities. A class the
        bag lacks has probability 0, or a decision value below all others.
    """
    fixed = CANDIDATES[choice.key].fixed
    if fixed is not None:
        answers = fixed(table, choice.values())
        return np.broadcast_to(answers, (len(counts), *answers.shape))
    scores = np.zeros((len(counts), table.n_cases, table.n_classes))
    for r, (bag, state) in enumerate(zip(counts, random_states, strict=True)):
        scores[r] = _round_scores(choice, table, bag, state)
    return scores


def _round_scores(choice: Choice, table: Table, bag: Counts, state: int) -> Floats:
    if choice.key == "qda":
        bag = _of_spread_classes(table, bag)
    rows = np.repeat(np.arange(table.n_cases), bag)
    labels = table.labels[rows]
    present, times = np.unique(labels, return_counts=True)
    scores = np.zeros((table.n_cases, table.n_classes))
    alike = nothing_varies(prepare(table, bag[None], scaled=False), bag[None])[0]
    if len(present) == 1 or alike:
        # one class only, or nothing to tell cases apart by: the classes' shares
        scores[:, present] = times / len(rows)
        return scores
    settings: Settings = choice.values()
    model = estimator(CANDIDATES[choice.key], settings, table, state)
    with warnings.catch_warnings():
        # collinear one-hot columns and the like are expected in small bags
        warnings.simplefilter("ignore")
        model.fit(table.features[rows], labels)
        if hasattr(model, "predict_proba"):
            scores[:, present] = model.predict_proba(table.features)
            return scores
        values = model.decision_function(table.features)
    if values.ndim == 1:
        values = np.column_stack([-values, values])
    scores[:] = values.min() - 1
    scores[:, present] = values
    return scores


def _of_spread_classes(table: Table, bag: Counts) -> Counts:
    """The bag without classes whose cases are all alike once prepared: they have no covariance."""
    while True:
        features = prepare(table, bag[None], scaled=False).features[0]
        inside = bag > 0
        present = np.unique(table.labels[inside])
        alone = [
            k for k in present if len(np.unique(features[inside & (table.labels == k)], axis=0)) < 2
        ]
        if not alone or len(alone) == len(present):
            return bag
        # gaps are filled anew without them, so the others are looked at again
        bag = np.where(np.isin(table.labels, alone), 0, bag).astype(np.uint8)
