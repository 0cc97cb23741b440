"""What a candidate fitted on a table is truly worth: its answers for many further cases."""

import math
from collections.abc import Mapping

import numpy as np

from evalcore import measures
from evalcore.candidates import CANDIDATES, estimator
from evalcore.choice import Choice
from evalcore.cut_off import calls
from evalcore.evaluation import Evaluation
from evalcore.figures import CountedBy
from evalcore.share_in_use import AtShare, Rate, at_share
from evalcore.table import Table
from tests.studies.mechanisms import MECHANISMS, Cases


def final_choice(found: Evaluation, name: str) -> Choice:
    """A candidate with the settings of its final model: those picked on all cases, if tuned."""
    choice = found.plan.candidate(name)
    for settings in found.beside.picked:
        if settings.candidate == name:
            return choice.options[settings.on_all]
    return choice


def fitted_scores(
    table: Table, choice: Choice, further: Cases, *, random_state: int
) -> measures.Floats:
    """What the model fitted on a table answers for further cases, by the plain pipeline."""
    model = estimator(CANDIDATES[choice.key], choice.values(), table, random_state)
    model.fit(table.features, table.labels)
    answer = getattr(model, "predict_proba", None) or model.decision_function
    scores: measures.Floats = answer(further.features)
    return scores if scores.ndim == 2 else np.column_stack([-scores, scores])


def called(found: Evaluation, name: str) -> tuple[int, float] | None:
    """The class that is called and the cut-off it goes to work with, where one was asked for."""
    at = found.at_cut_off(name)
    return (found.table.classes.index(at.rule.of_class), at.on_all) if at else None


def true_values(
    scenario: str,
    further: Cases,
    scores: measures.Floats,
    *,
    counted_by: CountedBy,
    called: tuple[int, float] | None = None,
) -> dict[str, measures.Floats]:
    """Accuracy, balanced accuracy, sensitivity of each class and AUC, on further cases or units.

    Answered by the highest score, or from a cut-off of one of two classes.
    """
    labels = further.labels
    if counted_by == "unit":
        rows = MECHANISMS[scenario].rows
        labels, scores = labels[::rows], scores.reshape(-1, rows, scores.shape[1]).mean(axis=1)
    named = measures.predicted_class(scores)
    if called and math.isnan(called[1]):  # no cut-off, no answers
        nothing = np.float64(np.nan)
        return {"accuracy": nothing, "balanced_accuracy": nothing, "auc": nothing} | {
            "sensitivity": np.full(scores.shape[1], np.nan)
        }
    if called:
        of_class, cut_off = called
        named = np.where(calls(scores[:, of_class], cut_off), of_class, 1 - of_class)
    counts = measures.confusion(labels, named, n_classes=scores.shape[1])
    values = {
        "accuracy": measures.accuracy(counts)[0],
        "balanced_accuracy": measures.balanced_accuracy(counts)[0],
        "sensitivity": measures.recalls(counts)[0],
        "auc": measures.hand_till(labels, scores)[0],
    }
    if scenario == "noise":  # known without measuring
        values |= dict.fromkeys(("accuracy", "balanced_accuracy", "auc"), np.float64(0.5))
    return values


def columns(truth: Mapping[str, measures.Floats], of_class: int) -> dict[str, object]:
    """As columns of a row, of the class where a measure has one value a class."""
    return {
        f"true/{measure}": float(np.atleast_1d(value)[of_class if value.ndim else 0])
        for measure, value in truth.items()
    }


def true_in_use(found: Evaluation, name: str, truth: Mapping[str, measures.Floats]) -> AtShare:
    """What its cut-off is truly worth at the share that the evaluation took."""
    at = found.at_cut_off(name)
    k = found.table.classes.index(at.rule.of_class)
    rates = (Rate(float(truth["sensitivity"][of])) for of in (k, 1 - k))
    return at_share(*rates, rule=at.rule, share=at.at_shares[0].share)
