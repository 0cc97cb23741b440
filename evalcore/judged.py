"""One candidate under one scheme, counted one way: its values, model variances and intervals."""

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from evalcore import estimates, model_variance
from evalcore.answers import HeldOut, Reduced
from evalcore.figures import CountedBy
from evalcore.measures import ALL_MEASURES, Floats

CutOffs = Literal["none", "fixed", "learned", "unlike"]


@dataclass(frozen=True, eq=False)
class Judged:
    """One candidate under one scheme, counted one way.

    Attributes
    ----------
    scheme, candidate : str
        Names in the plan.
    counted_by : {"unit", "case"}
    held : HeldOut
    in_bag : Reduced
        Of the rounds' own bags.
    on_all : ndarray, shape (R, K, K)
        Confusion counts of all cases, by the rounds' models.
    whole : Reduced
        Of the fit on all cases, one round.
    units : ndarray of int or None
        What counted cases resemble each other by (see `clusters`), else None.
    second_looks : tuple of Judged
        The same candidate counted the same way under the other schemes: what this scheme's rounds
        cannot tell of the model's variance is taken from them.
    cut_offs : {"none", "fixed", "learned", "unlike"}
        Whether each round answered at a cut-off, and at one learned inside its bag; "unlike" if
        those say little about the one that goes to work, and then no interval is offered.
    """

    scheme: str
    candidate: str
    counted_by: CountedBy
    held: HeldOut
    in_bag: Reduced
    on_all: Floats
    whole: Reduced
    units: NDArray[np.intp] | None
    second_looks: "tuple[Judged, ...]" = ()
    cut_offs: CutOffs = "none"

    def held_values(self, measure: str, of_class: int = 0) -> Floats:
        """A measure within each round's held-out cases, shape (R,)."""
        return _values(measure, self.held.confusion, self.held.auc, of_class)

    def in_bag_values(self, measure: str, of_class: int = 0) -> Floats:
        """A measure on each round's own bag, repeats counted, shape (R,)."""
        return _values(measure, self.in_bag.confusion, self.in_bag.auc, of_class)

    def optimism(self, measure: str, of_class: int = 0) -> float:
        """Mean over rounds of a measure on the own bag minus on all cases; nan for AUC."""
        nothing = np.full(len(self.on_all), np.nan)
        on_all = _values(measure, self.on_all, nothing, of_class)
        return estimates.mean_of_rounds(self.in_bag_values(measure, of_class) - on_all)[0]

    def whole_value(self, measure: str, of_class: int = 0) -> float:
        """A measure of the fit on all cases for these cases."""
        return float(_values(measure, self.whole.confusion, self.whole.auc, of_class)[0])

    @cached_property
    def shares(self) -> Floats:
        """Share of held-out answers that were right, per unit or case; nan if never held out."""
        return estimates.mean_correct(self.held.correct, self.held.rounds)

    @property
    def blocks(self) -> int:
        """How many groups the counted cases come in, where they do; else how many there are."""
        return len(np.unique(self.units)) if self.units is not None else len(self.held.labels)

    def blocks_with(self, of_class: int | None) -> int:
        """How many of them hold a case, of a class or of any, that was ever held out."""
        known = ~np.isnan(self.shares)
        if of_class is not None:
            known &= self.held.labels == of_class
        return len(np.unique(self.units[known])) if self.units is not None else int(known.sum())

    @property
    def n_classes(self) -> int:
        """Number of classes K."""
        return int(self.held.scores.shape[1])

    @cached_property
    def pooled(self) -> Floats:
        """Held-out confusion counts, every case weighing one over all its answers, (K, K)."""
        return estimates.pooled_confusion(
            self.held.labels, self.held.rounds, self.held.predicted, n_classes=self.n_classes
        )

    def pooled_value(self, measure: str, of_class: int = 0) -> float:
        """A measure from `pooled`; not for measures that need scores."""
        return float(_values(measure, self.pooled[None], np.array([math.nan]), of_class)[0])

    @cached_property
    def always_names(self) -> int | None:
        """The class that the fit on all cases gives them all while rounds name others too.

        None where it names several, where rounds are as constant, and at a cut-off.
        """
        named = np.flatnonzero(self.whole.confusion[0].sum(axis=0))
        if self.cut_offs != "none" or len(named) != 1:
            return None
        of_class = int(named[0])
        elsewhere = np.delete(self.pooled.sum(axis=0), of_class)
        return of_class if elsewhere.any() else None

    @cached_property
    def tau2(self) -> float:
        """Model variance of the share right."""
        return _told(lambda part: part.own_tau2(None), self)

    def tau2_of(self, of_class: int) -> float:
        """Model variance of the share right within one class."""
        return _told(lambda part: part.own_tau2(of_class), self)

    def cautious_tau2(self, of_class: int | None) -> float:
        """Model variance of all or of one class with its standard error added, for verdicts."""
        return _told(lambda part: part.own_tau2(of_class, cautious=True), self)

    @cached_property
    def tau2_balanced(self) -> float:
        """Model variance of balanced accuracy.

        Where no round holds out two of a class, its rounds tell the part between classes alone.
        """
        own = self.own_tau2_balanced
        if all(not math.isnan(self.own_tau2(k)) for k in range(self.n_classes)):
            return own
        return _largest([own, *(part.own_tau2_balanced for part in self.second_looks)])

    @cached_property
    def tau2_auc(self) -> float:
        """Model variance of the AUC of two classes: the largest that any scheme shows.

        Folds alone cannot tell it where a class has few cases (own simulation).
        """
        return _largest([part.own_tau2_auc for part in (self, *self.second_looks)])

    def own_tau2(self, of_class: int | None, *, cautious: bool = False) -> float:
        """What this scheme's rounds tell of the model's variance, of all or of one class."""
        function = (
            model_variance.cautious_model_variance if cautious else model_variance.model_variance
        )
        chosen = None if of_class is None else self.held.labels == of_class
        return function(self.held.correct, self.held.rounds, chosen=chosen, units=self.units)

    @cached_property
    def own_tau2_balanced(self) -> float:
        """What this scheme's rounds tell of it for balanced accuracy."""
        return model_variance.balanced_model_variance(
            self.held.labels, self.held.rounds, self.held.correct, n_classes=self.n_classes
        )

    @cached_property
    def own_tau2_auc(self) -> float:
        """What this scheme's rounds tell of it for the AUC."""
        return model_variance.auc_model_variance(
            self.held.labels == 1, self.held.rounds, self.held.scores[:, 1]
        )


def _told(variance: Callable[[Judged], float], part: Judged) -> float:
    """A variance from the part's own rounds, else the largest that a second look shows."""
    own = variance(part)
    return _largest([variance(look) for look in part.second_looks]) if math.isnan(own) else own


def _largest(values: Sequence[float]) -> float:
    """Of those that are known; nan if none is."""
    return max((value for value in values if not math.isnan(value)), default=math.nan)


def with_second_looks(judged: Sequence[Judged]) -> tuple[Judged, ...]:
    """Each part with the same candidate's parts, counted the same way, of the other schemes."""
    return tuple(
        replace(
            part,
            second_looks=tuple(
                other
                for other in judged
                if other.scheme != part.scheme
                and (other.candidate, other.counted_by) == (part.candidate, part.counted_by)
            ),
        )
        for part in judged
    )


def _values(measure: str, confusion: Floats, auc: Floats, of_class: int) -> Floats:
    function = ALL_MEASURES[measure].from_confusion
    if function is None:
        return auc
    values = function(confusion)
    return values[:, of_class] if ALL_MEASURES[measure].per_class else values


def plus_632(part: Judged, measure: str, out_of_bag: float) -> estimates.Plus632 | None:
    """.632+ of accuracy, balanced accuracy or AUC with its own no-information value.

    Accuracy: sum of label share x answer share; balanced accuracy: 1/K; AUC: 0.5. None where the
    out-of-bag value is undefined.
    """
    if math.isnan(out_of_bag):
        return None
    counts = part.whole.confusion[0]
    guess = {"accuracy": estimates.no_information(counts), "auc": 0.5}
    return estimates.point_632_plus(
        part.whole_value(measure), out_of_bag, no_information=guess.get(measure, 1 / len(counts))
    )
