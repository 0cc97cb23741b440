"""Table, plan, rounds and answers put together: every estimate of every candidate and scheme."""

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from evalcore.answers import Answers, held_out
from evalcore.at_cut_off import ESTIMATOR as AT_CUT_OFF
from evalcore.at_cut_off import AtCutOff
from evalcore.beside import CORRECTED, Beside, beside
from evalcore.candidates import CANDIDATES
from evalcore.clusters import clusters
from evalcore.comparison import Difference
from evalcore.estimated import estimates_of, losses_of
from evalcore.figures import CountedBy, Estimate
from evalcore.judged import Judged, with_second_looks
from evalcore.measures import Floats
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES
from evalcore.table import Table
from evalcore.together import ESTIMATOR as WINNER
from evalcore.together import differences, winner_estimates

HIGHEST = "held_out_by_case"  # the class with the highest score is answered


@dataclass(frozen=True, eq=False)
class Evaluation:
    """What an evaluation found, complete or as far as it has come.

    Attributes
    ----------
    table : Table
    plan : Plan
    rounds : dict of str to Rounds
        Finished rounds of each scheme; schemes without any are missing.
    planned : dict of str to int
        Rounds planned of each scheme.
    judged : tuple of Judged
    estimates : tuple of Estimate
    failures : dict of str to str
        Candidates that could not be fitted, and why.
    beside : Beside
        Cut-offs, picked settings, learning curve and chance check, as far as asked for.
    """

    table: Table
    plan: Plan
    rounds: dict[str, Rounds]
    planned: dict[str, int]
    judged: tuple[Judged, ...]
    estimates: tuple[Estimate, ...]
    failures: dict[str, str]
    beside: Beside = field(default_factory=Beside)

    @property
    def counted_by(self) -> CountedBy:
        """How the headline counts."""
        return self.plan.counted_by(self.table)

    @property
    def scheme(self) -> str:
        """The scheme of the headline: the first that has rounds."""
        return next(iter(self.rounds))

    @property
    def about(self) -> str:
        """The candidate of the headline; the next one that could be fitted if it failed."""
        names = [n for n in self.plan.candidate_names if n not in self.failures]
        return self.plan.about_name if self.plan.about_name in names else names[0]

    @property
    def candidates(self) -> tuple[str, ...]:
        """Candidates that could be fitted, in the order of the plan."""
        return tuple(n for n in self.plan.candidate_names if n not in self.failures)

    @property
    def learners(self) -> list[str]:
        """Those of them that look at features."""
        return [name for name in self.candidates if not self.is_baseline(name)]

    @property
    def bootstraps(self) -> list[str]:
        """Schemes that draw cases repeatedly."""
        return [s for s in self.rounds if SCHEMES[self.plan.scheme(s).key].repeats_cases]

    def is_baseline(self, candidate: str) -> bool:
        """Whether a candidate looks at no feature."""
        return CANDIDATES[self.plan.candidate(candidate).key].baseline

    def parts(self, scheme: str = "", counted_by: CountedBy | None = None) -> list[Judged]:
        """Every candidate under one scheme; the headline's scheme and counting unless given."""
        wanted = (scheme or self.scheme, counted_by or self.counted_by)
        return [j for j in self.judged if (j.scheme, j.counted_by) == wanted]

    @cached_property
    def winner(self) -> Estimate | None:
        """The corrected estimate of the best candidate by the headline's measure, if any.

        Of accuracy where the headline's measure is not balanced accuracy.
        """
        measure = "accuracy" if self.plan.measure == "accuracy" else "balanced_accuracy"
        return self.corrected(measure)

    def corrected(
        self, measure: str, of_class: str = "", *, at_cut_off: bool = False
    ) -> Estimate | None:
        """What the best candidate's figure is worth once the luck of being best is taken off."""
        given, estimator = (
            (self.beside.estimates, CORRECTED) if at_cut_off else (self.estimates, WINNER)
        )
        for e in given:
            if (e.estimator, e.scheme, e.counted_by, e.measure, e.of_class) == (
                estimator,
                self.scheme,
                self.counted_by,
                measure,
                of_class,
            ):
                return e
        return None

    def at_cut_off(self, candidate: str) -> AtCutOff | None:
        """A candidate at its learned cut-off; None where none is learned."""
        found = [at for at in self.beside.cut_offs if at.part.candidate == candidate]
        return found[0] if found else None

    @property
    def in_use(self) -> str:
        """By which estimator the answer is given: at a learned cut-off where there is one."""
        return AT_CUT_OFF if self.at_cut_off(self.about) else HIGHEST

    def part_in_use(self, candidate: str) -> Judged:
        """A candidate's answers under the headline's scheme: at its cut-off if it is the answer's.

        Others are compared with it by the highest score.
        """
        at = self.at_cut_off(candidate) if candidate == self.about else None
        return at.part if at else self.part(candidate, self.scheme)

    @cached_property
    def differences(self) -> tuple[Difference, ...]:
        """The candidate of the headline against all others, on the headline's rounds."""
        return differences(self.plan, self.parts(), about=self.about)

    def part(self, candidate: str, scheme: str, counted_by: CountedBy | None = None) -> Judged:
        """One candidate under one scheme, counted as the headline unless said otherwise."""
        wanted = (candidate, scheme, counted_by or self.counted_by)
        return next(j for j in self.judged if (j.candidate, j.scheme, j.counted_by) == wanted)

    def estimate(
        self,
        measure: str,
        candidate: str,
        *,
        scheme: str = "",
        estimator: str = "held_out_by_case",
        of_class: str = "",
        counted_by: CountedBy | None = None,
    ) -> Estimate:
        """One estimate; of the headline's scheme and counting unless said otherwise.

        Raises
        ------
        KeyError
            There is no such estimate.
        """
        key = (measure, candidate, scheme or self.scheme, estimator, of_class)
        return self._by_key[(*key, counted_by or self.counted_by)]

    @cached_property
    def _by_key(self) -> dict[tuple[str, ...], Estimate]:
        return {
            (e.measure, e.candidate, e.scheme, e.estimator, e.of_class, e.counted_by): e
            for e in (*self.estimates, *self.beside.estimates)
        }


def evaluate(
    table: Table,
    plan: Plan,
    rounds: dict[str, Rounds],
    *,
    answers: dict[tuple[str, str], Answers],
    whole: dict[str, Answers],
    planned: dict[str, int],
    failures: dict[str, str],
    permuted: Floats | None = None,
) -> Evaluation:
    """Every estimate from the answers so far.

    Parameters
    ----------
    table : Table
    plan : Plan
    rounds : dict of str to Rounds
        Finished rounds of each scheme.
    answers : dict of (scheme name, candidate name) to Answers
    whole : dict of candidate name to Answers
        Of the fits on all cases.
    planned : dict of str to int
    failures : dict of str to str
    permuted : ndarray, shape (m, C), optional
        Figures of the permuted tables that have finished, in the order of the candidates.
    """
    ways: list[CountedBy] = ["unit", "case"] if table.has_units else ["case"]
    judged = []
    for (scheme, candidate), given in answers.items():
        if candidate in failures:
            continue
        for way in ways:
            judged.append(
                Judged(
                    scheme,
                    candidate,
                    way,
                    held_out(table, rounds[scheme], given.scores, counted_by=way),
                    given.in_bag[way],
                    given.on_all[way],
                    whole[candidate].in_bag[way],
                    clusters(table, plan, scheme, counted_by=way),
                )
            )
    asked = beside(
        table,
        plan,
        judged,
        answers=answers,
        whole=whole,
        permuted=np.empty((0, len(plan.candidates))) if permuted is None else permuted,
    )
    # bags of the learning curve are small on purpose: their mean says nothing
    parts = with_second_looks([part for part in judged if not plan.is_curve(part.scheme)])
    rounds = {scheme: drawn for scheme, drawn in rounds.items() if not plan.is_curve(scheme)}
    planned = {scheme: number for scheme, number in planned.items() if not plan.is_curve(scheme)}
    figures = [e for part in parts for e in estimates_of(table, plan, part)]
    figures += [e for part in parts for e in losses_of(table, plan, part)]
    for scheme in rounds:
        for way in ways:
            alike = [p for p in parts if (p.scheme, p.counted_by) == (scheme, way)]
            figures += winner_estimates(table, plan, alike)
    return Evaluation(table, plan, rounds, planned, parts, tuple(figures), failures, asked)
