"""Evaluations with literal cut-offs, picks, curves and permuted figures, for checks and sentences."""

import math
from dataclasses import replace

import numpy as np

from evalcore.at_cut_off import AtCutOff
from evalcore.beside import Curve
from evalcore.chance import permutation_test
from evalcore.chance_check import ChanceCheck
from evalcore.choice import Choice
from evalcore.evaluation import Evaluation
from evalcore.figures import Interval
from evalcore.learning_curve import Gain, LearningCurve, Prediction
from evalcore.picked import Picked
from evalcore.power_law import PowerLaw
from evalcore.wording import NBSP

from .test_at_cut_off import scored

Given = tuple[object, object, Evaluation]


def as_given(found: Evaluation) -> Given:
    """What the checks are asked about."""
    return found.table, found.plan, found


def beside(given: Given, **parts: object) -> Given:
    """The same evaluation with something literal beside its estimates."""
    table, plan, found = given
    return table, plan, replace(found, beside=replace(found.beside, **parts))


def at_floor(below: int, *, of_class: int = 20, others: int = 20, **choices: object) -> Evaluation:
    """Naive Bayes with a floor for class b, every case held out in two repeats of two halves.

    All inner scores of b are 0.5, so this is every cut-off as soon as one can be learned: so many
    of b are held out below it. All of a are.
    """
    labels = [0] * others + [1] * of_class
    n = len(labels)
    score = np.where(labels, 0.5, 0.25)
    score[others : others + below] = 0.375
    out = np.array([np.arange(n) % 2 == half for half in (0, 1, 0, 1)])
    inner = np.where(out, math.nan, np.where(labels, 0.5, 0.25))
    held = np.where(out, score, math.nan)
    every = np.where(labels, 0.5, 0.25)
    rule = choices.pop("rule")
    given = {"naive_bayes": (held, inner, every)}
    return scored(given, labels, rule, repeat=[0, 0, 1, 1], **choices)


def at_literal(found: Evaluation, **parts: object) -> Evaluation:
    """The same with parts of the cut-off of its answer put in place of what was learned."""
    (at,) = found.beside.cut_offs
    changed: AtCutOff = replace(at, **parts)
    return replace(found, beside=replace(found.beside, cut_offs=(changed,)))


def picks(choice: Choice, *shares: float, scheme: str = "cross_validation") -> Picked:
    """So many shares of the rounds picked each option of a grid; all cases pick the last one."""
    names = [name for name, _ in choice.grid]
    options = tuple(option.written_settings(names) for option in choice.options)
    assert len(options) == len(shares)
    # of 10,000 rounds, so that shares with two digits more than a percent are whole numbers
    by_round = np.repeat(np.arange(len(shares)), np.rint(10_000 * np.array(shares)).astype(int))
    return Picked(choice.key, scheme, options, by_round, len(options) - 1)


def checked(given: Given, observed: float, permuted: object, **changes: object) -> ChanceCheck:
    """The chance check of the candidate of the answer, from figures of permuted tables."""
    _, plan, found = given
    figures = np.asarray(permuted, dtype=float)
    test = permutation_test(observed, figures)
    made = ChanceCheck(found.about, False, plan.choosing_measure, observed, 20, figures, test)
    return replace(made, **changes)


def chance(given: Given, observed: float, permuted: object, **changes: object) -> Given:
    """An evaluation with that check alone beside it."""
    return beside(given, chance=(checked(given, observed, permuted, **changes),))


def a_curve(given: Given, low: float, *, of_class: str = "", **changes: object) -> Curve:
    """A curve from 20 units to 40 of the candidate of the answer, 0.7 to 0.8.

    The gain of 0.1 has so low a lower end; the call and the reason are literal.
    """
    table, _, found = given
    size, none = np.array([20.0, 40.0]), np.zeros(2, dtype=int)
    made = LearningCurve(
        measure="sensitivity" if of_class else "balanced_accuracy",
        of_class=table.classes.index(of_class) if of_class else 0,
        sizes=size,
        values=np.array([0.7, 0.8]),
        low=np.array([0.6, 0.7]),
        high=np.array([0.8, 0.9]),
        rounds=np.array([20, 20]),
        not_judged=none,
        law=PowerLaw(0.0, 1.0, 0.4, 20, 40, 0.0),
        ahead=(Prediction(50, 0.8125, 0.75, 0.875), Prediction(80, 0.8375, 0.7625, 0.9125)),
        resamples=500,
        without_law=0,
        gain=Gain(0.1, Interval(low, 0.2, 0.95, "percentile"), 0),
        call="rising",
        reason=f"Learning from 40{NBSP}cases instead of 20 brought 10.0{NBSP}points.",
    )
    return Curve(found.part(found.about, found.scheme), of_class, replace(made, **changes))
