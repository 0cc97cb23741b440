"""What a candidate is worth at the cut-off that each round learned inside its own bag."""

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from evalcore.answers import Answers, HeldOut, unit_means
from evalcore.candidates import CANDIDATES
from evalcore.cut_off import WithUndecided, calls, learned, learned_by_round, with_undecided
from evalcore.cut_off_rule import CutOffRule
from evalcore.estimated import default_interval, n_behind
from evalcore.figures import CountedBy, Estimate, Interval
from evalcore.judged import CutOffs, Judged
from evalcore.measures import Floats
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.share_in_use import AtShare, Rate, at_share
from evalcore.table import Table

ESTIMATOR = "at_cut_off"
HALF = 0.5
Unlike = Literal["", "not learned", "all", "none", "bags"]
RATIO, SUM = "ratio_of_shares", "sum_of_shares"
SPREAD = 0.9  # share of rounds between the ends of a cut-off's spread


@dataclass(frozen=True, eq=False)
class AtCutOff:
    """One candidate at its learned cut-off, under the headline's scheme and counting.

    Attributes
    ----------
    part : Judged
        Held-out answers at each round's cut-off; its scores are 1 for the class answered.
    rule : CutOffRule
    cut_offs : ndarray, shape (R,)
        Learned in each round; nan, and the round left out of `part`, where it could not be.
    on_all : float
        Learned from inner scores of all cases: the one that goes to work.
    learned_from : int
        Units or cases of the class it was learned from, or what they come in where they depend on
        each other; 0 for a fixed one.
    at_shares : tuple of AtShare
        At each end of the stated share in use, else at the table's share.
    undecided : WithUndecided or None
        None where nobody is left undecided, or scores are no probabilities.
    unlike : {"", "not learned", "all", "none", "bags"}
        Why no interval is offered, if none is: it could not be learned from all cases; it calls
        all or none of them; or most rounds call every or no case, or learn none, as bags are
        smaller.
    """

    part: Judged
    rule: CutOffRule
    cut_offs: Floats
    on_all: float
    learned_from: int
    at_shares: tuple[AtShare, ...]
    undecided: WithUndecided | None
    unlike: Unlike

    @property
    def undefined(self) -> int:
        """Rounds in which no cut-off could be learned."""
        return int(np.isnan(self.cut_offs).sum())

    @property
    def spread(self) -> Interval:
        """Between which ends the cut-offs of nine rounds in ten fall; no confidence interval.

        nan at both ends where none could be learned in any round.
        """
        known = self.cut_offs[~np.isnan(self.cut_offs)]
        if not len(known):
            return Interval(math.nan, math.nan, SPREAD, "spread_of_rounds")
        tail = (1 - SPREAD) / 2
        # cut-offs that call all or none are infinite: ranks, not means between two
        low, high = np.quantile(known, [tail, 1 - tail], method="inverted_cdf")
        return Interval(float(low), float(high), SPREAD, "spread_of_rounds")


def at_cut_off(
    table: Table,
    plan: Plan,
    judged: Judged,
    *,
    given: Answers,
    whole: Answers,
    elsewhere: Sequence[tuple[Judged, Answers]] = (),
) -> AtCutOff | None:
    """A candidate's held-out answers at the cut-offs of their rounds; None if it has none.

    Costs and floors can be moved in the plan without a refit: inner scores are kept, of the
    rule's class alone.

    Parameters
    ----------
    table : Table
        Of two classes.
    plan : Plan
    judged : Judged
        The candidate under the headline's scheme.
    given, whole : Answers
        Its answers there, and those of the fit on all cases.
    elsewhere : sequence of (Judged, Answers)
        The same under other schemes: second looks, each at its own cut-offs; learned ones are
        learned under the headline's scheme alone, so these are of a fixed one.
    """
    rule = plan.cut_off
    if rule is None or not plan.has_cut_off(plan.candidate(judged.candidate)):
        return None
    cut_offs = _by_round(table, rule, judged, given)
    if cut_offs is None or (rule.by != "fixed" and whole.inner is None):
        return None  # carried out under another rule
    on_all, behind, apart = _of_all(table, rule, judged, whole=whole, cut_offs=cut_offs)
    k = table.classes.index(rule.of_class)
    looks = (
        (other, _by_round(table, rule, other, answers_there)) for other, answers_there in elsewhere
    )
    like: CutOffs = "fixed" if rule.by == "fixed" else "learned"
    part = replace(
        judged,
        held=_answered(judged.held, cut_offs, k),
        cut_offs="unlike" if apart else like,
        second_looks=tuple(
            replace(other, held=_answered(other.held, of_rounds, k), cut_offs=like)
            for other, of_rounds in looks
            if of_rounds is not None
        ),
    )
    rates = [_rate(plan, part, at) for at in (k, 1 - k)]
    share = rule.share_used(_share(table, rule, judged.counted_by))
    shares = dict.fromkeys((rule.share_low or share, rule.share_high or share))
    return AtCutOff(
        part,
        rule,
        cut_offs,
        on_all,
        behind,
        tuple(at_share(rates[0], rates[1], rule=rule, share=each) for each in shares),
        _undecided(plan, judged, part, rule=rule, cut_offs=cut_offs),
        apart,
    )


def _share(table: Table, rule: CutOffRule, way: CountedBy) -> float:
    """The class's share of the table."""
    return float((table.labels_by(way) == table.classes.index(rule.of_class)).mean())


def _by_round(table: Table, rule: CutOffRule, judged: Judged, given: Answers) -> Floats | None:
    """The cut-off of each round; None where no inner scores were kept."""
    way = judged.counted_by
    if rule.by == "fixed":
        return np.full(judged.held.rounds.n_rounds, rule.at)
    if given.inner is None:
        return None
    positive = table.labels_by(way) == table.classes.index(rule.of_class)
    share = rule.share_used(_share(table, rule, way))
    return learned_by_round(positive, _counted(table, given.inner, way), rule=rule, share=share)


def _of_all(
    table: Table, rule: CutOffRule, judged: Judged, *, whole: Answers, cut_offs: Floats
) -> tuple[float, int, Unlike]:
    """The cut-off of all cases, how many of the class it was learned from, why it is unlike."""
    if rule.by == "fixed" or whole.inner is None:
        return rule.at, 0, ""
    way = judged.counted_by
    positive = table.labels_by(way) == table.classes.index(rule.of_class)
    scores = _counted(table, whole.inner, way)[0]
    share = rule.share_used(_share(table, rule, way))
    on_all = learned(positive, scores, rule=rule, share=share)
    return on_all, _independent(judged, positive), why_unlike(cut_offs, on_all, scores)


def why_unlike(cut_offs: Floats, on_all: float, of_all: Floats) -> Unlike:
    """Why held-out figures say little about the cut-off that goes to work; empty if they do not.

    Parameters
    ----------
    cut_offs : ndarray, shape (R,)
    on_all : float
    of_all : ndarray, shape (n,)
        The inner scores that it was learned from.
    """
    if math.isnan(on_all):
        return "not learned"
    called = calls(of_all[~np.isnan(of_all)], on_all)
    if called.all() or not called.any():
        return "all" if called.all() else "none"
    return "bags" if (~np.isfinite(cut_offs)).sum() > HALF * len(cut_offs) else ""


def _rate(plan: Plan, part: Judged, k: int) -> Rate:
    bounds = default_interval(plan, part, "sensitivity", k)
    value = part.pooled_value("sensitivity", k)
    return Rate(value, bounds.low, bounds.high) if bounds else Rate(value)


def _independent(judged: Judged, positive: NDArray[np.bool_]) -> int:
    """How many of the class are independent."""
    if judged.units is None:
        return int(positive.sum())
    return len(np.unique(judged.units[positive]))


def _counted(table: Table, inner: Floats, way: CountedBy) -> Floats:
    """Inner scores of cases, or of units as the mean of their cases."""
    return unit_means(table, inner[..., None])[..., 0] if way == "unit" else inner


def _answered(held: HeldOut, cut_offs: Floats, k: int) -> HeldOut:
    """Answers at the cut-offs as scores of 0 and 1; rounds without a cut-off are left out."""
    rounds, known = held.rounds, ~np.isnan(cut_offs)
    of_round = rounds.pairs[0]
    called = calls(held.scores[:, k], cut_offs[of_round])[known[of_round]]
    scores = np.empty((len(called), 2))
    scores[:, k], scores[:, 1 - k] = called, 1 - called
    kept = Rounds(rounds.train[known], rounds.test[known], rounds.repeat[known])
    return HeldOut(held.labels, kept, scores)


def _undecided(
    plan: Plan, judged: Judged, part: Judged, *, rule: CutOffRule, cut_offs: Floats
) -> WithUndecided | None:
    """Answers whose own probability is too low left to a person; decision values are none."""
    candidate = CANDIDATES[plan.candidate(judged.candidate).key]
    if not rule.undecided_below or not candidate.probabilities:
        return None
    kept = ~np.isnan(cut_offs)[judged.held.rounds.pairs[0]]
    rounds, scores = part.held.rounds, judged.held.scores[kept]
    return with_undecided(
        part.held.correct,
        scores[np.arange(len(scores)), part.held.predicted],  # of the class that is answered
        below=rule.undecided_below,
        weights=1 / rounds.times_tested[rounds.pairs[1]],
    )


def cut_off_estimates(table: Table, plan: Plan, found: AtCutOff) -> Iterator[Estimate]:
    """Every figure at a learned cut-off."""
    part, n = found.part, n_behind(found.part, None)

    def figure(
        measure: str,
        value: float,
        *,
        of_class: str = "",
        interval: Interval | None = None,
        estimator: str = ESTIMATOR,
        behind: int = n,
    ) -> Estimate:
        return Estimate(
            value,
            interval,
            measure,
            part.candidate,
            part.scheme,
            estimator,
            of_class,
            part.counted_by,
            behind,
            len(found.cut_offs),
            found.undefined,
        )

    yield figure(
        "cut_off",
        found.on_all,
        of_class=found.rule.of_class,
        interval=found.spread,
        behind=found.learned_from,
    )
    for measure in ("accuracy", "balanced_accuracy"):
        interval = default_interval(plan, part, measure, 0)
        yield figure(measure, part.pooled_value(measure), interval=interval)
    for k, name in enumerate(table.classes):
        yield figure(
            "sensitivity",
            part.pooled_value("sensitivity", k),
            of_class=name,
            interval=default_interval(plan, part, "sensitivity", k),
            behind=n_behind(part, k),
        )
    other = table.classes[1 - table.classes.index(found.rule.of_class)]
    for at in found.at_shares:
        where = f"{ESTIMATOR}_share_{at.share:.6g}"
        yield figure("share_called", at.called, of_class=found.rule.of_class, estimator=where)
        for measure, name, rate, method in (
            ("precision", found.rule.of_class, at.right_when_called, RATIO),
            ("precision", other, at.right_when_not_called, RATIO),
            ("cost_per_case", "", at.cost, SUM),
        ):
            if measure == "cost_per_case" and found.rule.by != "cost":
                continue
            bounds = Interval(rate.low, rate.high, plan.level, method) if rate.bounded else None
            yield figure(measure, rate.value, of_class=name, interval=bounds, estimator=where)
    if found.undecided:
        yield figure("share_undecided", found.undecided.sent)
        for which in ("right_of_decided", "right_counting_undecided_wrong"):
            yield figure("accuracy", getattr(found.undecided, which), estimator=which)
