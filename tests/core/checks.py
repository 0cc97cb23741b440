"""Facts from outside, and small tables to hold the core against them."""

import json
import pathlib
import re
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from evalcore.answers import joined
from evalcore.engine import run, tasks
from evalcore.evaluation import Evaluation, evaluate
from evalcore.intake import make_table
from evalcore.plan import Plan
from evalcore.sheet import read_sheet
from evalcore.table import Column, Roles, Table

DATA = pathlib.Path(__file__).parents[1] / "data"


def cases(topic: str, kind: str) -> list[Any]:
    """The check cases of one kind as parameters, each under its id.

    Raises if there are none, so that a misspelt kind does not pass as an empty test.
    """
    import pytest

    (path,) = DATA.glob(f"{topic}_*.json")
    found = [c for c in json.loads(path.read_text(encoding="utf-8"))["cases"] if c["kind"] == kind]
    if not found:
        raise LookupError(f"no case of kind {kind!r} in {path.name}")
    return [pytest.param(case, id=case["id"]) for case in found]


def exactly(message: str) -> str:
    """A pattern for `pytest.raises` that only the whole message matches."""
    return rf"\A{re.escape(message)}\Z"


def table_of(
    labels: Sequence[int],
    *,
    units: Sequence[int] | None = None,
    features: object = None,
    classes: Sequence[str] = ("a", "b", "c", "d"),
    entries: Mapping[str, Sequence[str]] | None = None,
) -> Table:
    """A table from class codes; units numbered in order of first appearance.

    `entries` are columns as written, an entry for each case.
    """
    n = len(labels)
    unit = np.arange(n) if units is None else np.asarray(units, dtype=np.intp)
    x = np.arange(n)[:, None] * 1.37 if features is None else np.asarray(features, dtype=float)
    return Table(
        name="made.csv",
        columns=tuple(Column(f"x{j + 1}", "number", x[:, j].copy()) for j in range(x.shape[1])),
        labels=np.asarray(labels, dtype=np.intp),
        classes=tuple(classes[: max(labels) + 1]),
        units=unit,
        unit_names=tuple(f"u{g}" for g in range(int(unit.max()) + 1)),
        roles=Roles("class", "" if units is None else "unit"),
        lines=np.arange(2, n + 2),
        rows_read=n,
        entries={name: tuple(column) for name, column in (entries or {}).items()},
    )


def table_from(name: str, roles: Roles) -> Table:
    """A table from a file among the test data."""
    return make_table(read_sheet((DATA / name).read_bytes(), name), roles)


def carried_out(table: Table, plan: Plan, *, jobs: int = 1) -> tuple[Evaluation, Any]:
    """An evaluation of all rounds of a plan, and its answers by scheme and candidate."""
    rounds = plan.draw(table)
    todo = tasks(rounds, permutations=plan.permutations)
    finished = list(run(table, plan, rounds, todo=todo, jobs=jobs))
    answers = {
        (scheme, name): joined([f.answers[name] for f in finished if f.task.scheme == scheme])
        for scheme in rounds
        for name in plan.candidate_names
    }
    permuted = [f.chance for f in finished if f.chance is not None]
    evaluation = evaluate(
        table,
        plan,
        rounds,
        answers=answers,
        whole={name: finished[0].answers[name] for name in plan.candidate_names},
        planned={scheme: drawn.n_rounds for scheme, drawn in rounds.items()},
        failures={},
        permuted=np.concatenate(permuted) if permuted else None,
    )
    return evaluation, answers
