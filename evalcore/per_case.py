"""Which cases to look at again: how often each is wrong, as what, and how steadily."""

from dataclasses import dataclass

import numpy as np

from evalcore.evaluation import Evaluation
from evalcore.figures import CountedBy
from evalcore.measures import Floats


@dataclass(frozen=True)
class CaseRecord:
    """One unit or case under one scheme.

    Attributes
    ----------
    name : str
        Of the unit, or the line in the file.
    of_class : str
        Its true class.
    times : int
        Rounds in which it was held out.
    wrong : float
        Share of these answers that were wrong; nan if never held out.
    named : str
        The class named most often when it was wrong, the first on ties; empty if never wrong.
    flips : float
        Chance that two of its rounds answer differently: 1 - sum over classes of
        t(t - 1) / (T(T - 1)); nan with fewer than two rounds.
    """

    name: str
    of_class: str
    times: int
    wrong: float
    named: str
    flips: float


def cases(
    evaluation: Evaluation,
    candidate: str,
    *,
    scheme: str = "",
    counted_by: CountedBy | None = None,
) -> tuple[CaseRecord, ...]:
    """Every unit (or case), those wrong most often first, then in the table's order.

    Parameters
    ----------
    evaluation : Evaluation
    candidate : str
    scheme : str, optional
        The headline's unless given.
    counted_by : {"unit", "case"}, optional
        The headline's unless given.
    """
    table = evaluation.table
    way = counted_by or evaluation.counted_by
    part = evaluation.part(candidate, scheme or evaluation.scheme, way)
    case_at = part.held.rounds.pairs[1]
    answers = np.zeros((len(part.held.labels), table.n_classes))
    np.add.at(answers, (case_at, part.held.predicted), 1)
    by_unit = way == "unit" or not table.has_units
    names = table.unit_names if by_unit else tuple(f"line {line}" for line in table.lines)
    found = [
        _record(names[i], int(part.held.labels[i]), answers[i], table.classes)
        for i in range(len(names))
    ]
    return tuple(sorted(found, key=lambda record: -np.nan_to_num(record.wrong, nan=-1.0)))


def _record(
    name: str, label: int, answers: Floats,
    classes: tuple[str, ...],
) -> CaseRecord:  # fmt: skip
    times = int(answers.sum())
    wrong = answers.copy()
    wrong[label] = 0
    pairs = times * (times - 1)
    return CaseRecord(
        name,
        classes[label],
        times,
        float(wrong.sum() / times) if times else float("nan"),
        classes[int(wrong.argmax())] if wrong.any() else "",
        float(1 - (answers * (answers - 1)).sum() / pairs) if pairs else float("nan"),
    )


def agreement_within_units(evaluation: Evaluation, candidate: str) -> float:
    """How often two rows of one unit, held out in the same round, are answered alike.

    Mean over units of the share of agreeing pairs of their rows, rounds pooled; nan where no unit
    has two rows. Two rows of a unit that agree add little to each other.
    """
    table = evaluation.table
    if not table.has_units:
        return float("nan")
    part = evaluation.part(candidate, evaluation.scheme, "case")
    round_at, case_at = part.held.rounds.pairs
    cell = round_at * table.n_units + table.units[case_at]
    place, inverse = np.unique(cell, return_inverse=True)
    answers = np.zeros((len(place), table.n_classes))
    np.add.at(answers, (inverse, part.held.predicted), 1)
    size = answers.sum(axis=1)
    pairs = size * (size - 1)
    alike = (answers * (answers - 1)).sum(axis=1)
    unit = place % table.n_units
    total = np.bincount(unit, pairs, minlength=table.n_units)
    agreeing = np.bincount(unit, alike, minlength=table.n_units)
    known = total > 0
    return float((agreeing[known] / total[known]).mean()) if known.any() else float("nan")
