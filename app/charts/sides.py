"""The two sides of a scheme: scores on what was trained on, and on what was held out."""

import math
from dataclasses import dataclass

import numpy as np

from app.charts.round_scores import parts_of
from evalcore.evaluation import Evaluation
from evalcore.measures import Floats
from evalcore.schemes import SCHEMES


@dataclass(frozen=True)
class Sides:
    """What the two sides of a scheme are called: they repeat cases, or they do not."""

    out: str
    inside: str


@dataclass(frozen=True)
class Pair:
    """One candidate's scores on both sides, with their means."""

    candidate: str
    title: str
    held: Floats
    trained: Floats
    mean_out: float
    mean_in: float
    n: int
    plus: float

    @property
    def gap(self) -> float:
        """Mean on the training side minus mean on the held-out side."""
        return self.mean_in - self.mean_out


def sides_of(evaluation: Evaluation, scheme: str) -> Sides:
    """The names of the two sides under a scheme."""
    if SCHEMES[evaluation.plan.scheme(scheme).key].repeats_cases:
        return Sides("out-of-bag", "in-bag")
    return Sides("held-out", "training")


def pairs_of(
    evaluation: Evaluation, scheme: str, measure: str, plus_632: frozenset[str]
) -> list[Pair]:
    """Scores and means of each candidate that is drawn."""
    bootstrap = SCHEMES[evaluation.plan.scheme(scheme).key].repeats_cases
    pairs = []
    for part in parts_of(evaluation, scheme):
        name = part.candidate
        mean = evaluation.estimate(measure, name, scheme=scheme, estimator="mean_of_rounds")
        trained = part.in_bag_values(measure)
        known = trained[~np.isnan(trained)]
        plus = math.nan
        if bootstrap and name in plus_632:
            plus = evaluation.estimate(
                measure, name, scheme=scheme, estimator="point_632_plus"
            ).value
        pairs.append(
            Pair(
                name,
                evaluation.plan.title(name),
                part.held_values(measure),
                trained,
                mean.value,
                float(known.mean()) if len(known) else math.nan,
                mean.n,
                plus,
            )
        )
    return pairs
