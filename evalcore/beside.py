"""What stands beside the estimates: learned cut-offs, picked settings, learning curve, chance."""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from evalcore.answers import Answers
from evalcore.at_cut_off import AtCutOff, at_cut_off, cut_off_estimates
from evalcore.candidates import CANDIDATES
from evalcore.chance_check import (
    ChanceCheck,
    chance_checks,
    chance_estimates,
    majority_estimates,
)
from evalcore.estimated import n_behind
from evalcore.figures import Estimate, Interval
from evalcore.groups import noun_of
from evalcore.judged import Judged
from evalcore.learning_curve import CurveMeasure, LearningCurve, learning_curve
from evalcore.measures import Floats
from evalcore.picked import Picked, picked, picked_estimates
from evalcore.plan import Plan, generator
from evalcore.table import Table
from evalcore.together import learned, winner_estimates

CORRECTED = "winner_corrected_at_cut_off"


@dataclass(frozen=True, eq=False)
class Curve:
    """The learning curve of one candidate by one measure."""

    part: Judged
    of_class: str
    found: LearningCurve


@dataclass(frozen=True, eq=False)
class Beside:
    """What was asked for beside the estimates; each empty where it was not.

    Attributes
    ----------
    cut_offs : tuple of AtCutOff
        Under the headline's scheme and counting.
    picked : tuple of Picked
        Of tuned candidates, a scheme each.
    curves : tuple of Curve
    chance : tuple of ChanceCheck
    estimates : tuple of Estimate
        Their figures, keyed like all others.
    """

    cut_offs: tuple[AtCutOff, ...] = ()
    picked: tuple[Picked, ...] = ()
    curves: tuple[Curve, ...] = ()
    chance: tuple[ChanceCheck, ...] = ()
    estimates: tuple[Estimate, ...] = ()


def beside(
    table: Table,
    plan: Plan,
    judged: Sequence[Judged],
    *,
    answers: Mapping[tuple[str, str], Answers],
    whole: Mapping[str, Answers],
    permuted: Floats,
) -> Beside:
    """Everything beside the estimates, as far as rounds have finished.

    Parameters
    ----------
    table : Table
    plan : Plan
    judged : sequence of Judged
        All candidates, schemes (the learning curve's too) and ways of counting.
    answers : mapping of (scheme name, candidate name) to Answers
    whole : mapping of candidate name to Answers
    permuted : ndarray, shape (m, C)
        Figures of permuted tables.
    """
    way = plan.counted_by(table)
    counted = [part for part in judged if part.counted_by == way]
    headline = [part for part in counted if part.scheme == plan.headline_scheme]
    figures: list[Estimate] = []
    settings = []
    # small bags of the curve say nothing about what is picked from all cases
    for part in (p for p in counted if not plan.is_curve(p.scheme)):
        choice = plan.candidate(part.candidate)
        given = answers[part.scheme, part.candidate]
        found = picked(
            choice, part.candidate, part.scheme, given=given, whole=whole[part.candidate]
        )
        if found:
            settings.append(found)
            figures += picked_estimates(found, part)
    cut_offs = []
    for part in headline:
        given = answers[part.scheme, part.candidate]
        elsewhere = [
            (other, answers[other.scheme, other.candidate])
            for other in counted
            if other.candidate == part.candidate
            and other.scheme != part.scheme
            and not plan.is_curve(other.scheme)
        ]
        at = at_cut_off(
            table, plan, part, given=given, whole=whole[part.candidate], elsewhere=elsewhere
        )
        if at:
            cut_offs.append(at)
            figures += cut_off_estimates(table, plan, at)
    # without a cut-off in any round there is no answer to choose the best by
    answered = [at.part for at in cut_offs if at.undefined < len(at.cut_offs)]
    corrected = winner_estimates(table, plan, answered, estimator=CORRECTED)
    curves = tuple(_curves(table, plan, [p for p in counted if plan.is_curve(p.scheme)]))
    checks = chance_checks(plan, headline, permuted)
    figures += [*corrected, *_curve_estimates(curves), *chance_estimates(headline, checks)]
    if plan.permutations:
        figures += majority_estimates(learned(plan, headline))
    return Beside(tuple(cut_offs), tuple(settings), curves, checks, tuple(figures))


def _curves(table: Table, plan: Plan, parts: Sequence[Judged]) -> Iterator[Curve]:
    """By the headline's measure, and for the class whose misses matter most."""
    measure: CurveMeasure = "accuracy" if plan.measure == "accuracy" else "balanced_accuracy"
    concern = plan.concern_of(table)
    wanted: list[tuple[CurveMeasure, str]] = [(measure, "")]
    wanted += [("sensitivity", concern)] if concern else []
    for part in learned(plan, parts):
        if CANDIDATES[plan.candidate(part.candidate).key].fixed is not None:
            continue  # answers that stand in the table learn nothing
        for of_measure, name in wanted:
            found = learning_curve(
                part,
                of_measure,
                of_class=table.classes.index(name) if name else 0,
                level=plan.level,
                rng=generator(plan.seed, "learning curve", part.candidate, of_measure),
                noun=noun_of(table, plan.keep),
            )
            yield Curve(part, name, found)


def _curve_estimates(curves: Sequence[Curve]) -> Iterator[Estimate]:
    """A figure for each size measured, and for each the curve is continued to."""
    for curve in curves:
        part, found = curve.part, curve.found
        n = n_behind(part, found.of_class if curve.of_class else None)
        level = found.gain.interval.level
        points = [
            (f"learned_from_{size:.0f}", value, low, high, int(rounds))
            for size, value, low, high, rounds in zip(
                found.sizes, found.values, found.low, found.high, found.rounds, strict=True
            )
        ]
        total = part.held.rounds.n_rounds
        points += [(f"continued_to_{a.n}", a.value, a.low, a.high, total) for a in found.ahead]
        for estimator, value, low, high, rounds in points:
            interval = Interval(float(low), float(high), level, "resampled_units")
            yield Estimate(
                float(value),
                interval if not np.isnan(low) else None,
                found.measure,
                part.candidate,
                part.scheme,
                estimator,
                curve.of_class,
                part.counted_by,
                n,
                rounds,
                0,
            )
