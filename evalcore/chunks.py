"""The answers of a finished task as arrays of a file, and back."""

import json
from collections.abc import Sequence
from typing import Any

import numpy as np

from evalcore.answers import Answers, Reduced
from evalcore.engine import WHOLE, Finished
from evalcore.figures import CountedBy
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.table import Table

_WAYS: tuple[CountedBy, CountedBy] = ("unit", "case")


def arrays_of(finished: Finished, candidates: Sequence[str]) -> dict[str, Any]:
    """Arrays by name; candidates by their place in the plan, as names may hold anything."""
    arrays: dict[str, Any] = {"failures": np.array(json.dumps(finished.failures))}
    if finished.chance is not None:
        arrays["chance"] = finished.chance
    for at, name in enumerate(candidates):
        if name in finished.answers:
            answers = finished.answers[name]
            arrays[f"{at}-scores"] = answers.scores
            for part in ("picked", "inner"):
                if getattr(answers, part) is not None:
                    arrays[f"{at}-{part}"] = getattr(answers, part)
            for way in _WAYS:
                arrays[f"{at}-{way}-bag"] = answers.in_bag[way].confusion
                arrays[f"{at}-{way}-auc"] = answers.in_bag[way].auc
                arrays[f"{at}-{way}-all"] = answers.on_all[way]
    return arrays


def answers_in(
    stored: Any, plan: Plan, rounds: Rounds, *, scheme: str, of: Table
) -> tuple[dict[str, Answers], dict[str, str]]:
    """Answers of each candidate in some rounds, and why candidates failed.

    Parameters
    ----------
    stored : mapping of str to ndarray
    plan : Plan
    rounds : Rounds
        Of the task.
    scheme : str
        Of the task; empty for the fits on all cases.
    of : Table

    Raises
    ------
    KeyError
        An array is missing.
    ValueError
        The arrays are of other rounds.
    """
    answers = {}
    # inner scores are kept where the cut-off of the headline or of the final model is learned
    kept = scheme in (WHOLE, plan.headline_scheme)
    failures = dict(json.loads(str(stored["failures"])))
    for at, name in enumerate(plan.candidate_names):
        if name in failures:
            continue
        choice = plan.candidate(name)
        answers[name] = Answers(
            stored[f"{at}-scores"],
            {way: Reduced(stored[f"{at}-{way}-bag"], stored[f"{at}-{way}-auc"]) for way in _WAYS},
            {way: stored[f"{at}-{way}-all"] for way in _WAYS},
            stored[f"{at}-picked"] if choice.tuned else None,
            stored[f"{at}-inner"] if kept and plan.learns_cut_off(choice) else None,
        )
        if not _are_of(answers[name], rounds, n_classes=of.n_classes):
            raise ValueError(f"The answers of {name!r} are not of these rounds.")
    return answers, failures


def _are_of(answers: Answers, rounds: Rounds, *, n_classes: int) -> bool:
    """Whether answers are as many as some rounds give: a chunk of other rounds is no use."""
    r, k = rounds.n_rounds, n_classes
    return answers.scores.shape == (rounds.test_sizes.sum(), k) and all(
        (part.confusion.shape, part.auc.shape, on_all.shape) == ((r, k, k), (r,), (r, k, k))
        for part, on_all in ((answers.in_bag[way], answers.on_all[way]) for way in _WAYS)
    )
