"""Which settings each round picked inside its bag, and which all cases together pick."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from evalcore.answers import Answers
from evalcore.choice import Choice
from evalcore.figures import Estimate
from evalcore.judged import Judged
from evalcore.measures import Floats

IN_ROUNDS, ON_ALL = "picked_in_rounds", "picked_on_all"


@dataclass(frozen=True, eq=False)
class Picked:
    """The options of a tuned candidate under one scheme.

    Attributes
    ----------
    candidate, scheme : str
    options : tuple of str
        What differs between them, as written: ``k=5``.
    by_round : ndarray of int, shape (R,)
        Place of the option that each round picked.
    on_all : int
        Place of the option picked from all cases: that of the final model.
    """

    candidate: str
    scheme: str
    options: tuple[str, ...]
    by_round: NDArray[np.intp]
    on_all: int

    @property
    def shares(self) -> Floats:
        """Share of rounds that picked each option, shape (O,)."""
        times = np.bincount(self.by_round, minlength=len(self.options))
        return np.asarray(times / len(self.by_round))


def picked(
    choice: Choice, candidate: str, scheme: str, *, given: Answers, whole: Answers
) -> Picked | None:
    """How often each option was picked; None for a candidate that is not tuned."""
    if given.picked is None or whole.picked is None:
        return None
    names = [name for name, _ in choice.grid]
    options = tuple(option.written_settings(names) for option in choice.options)
    return Picked(candidate, scheme, options, given.picked, int(whole.picked[0]))


def picked_estimates(found: Picked, part: Judged) -> Iterator[Estimate]:
    """A figure for each option: the share of rounds that picked it, and whether all cases do."""
    rounds = part.held.rounds.n_rounds
    for at, option in enumerate(found.options):
        for estimator, value, behind in (
            (IN_ROUNDS, float(found.shares[at]), rounds),
            (ON_ALL, float(at == found.on_all), 1),
        ):
            yield Estimate(
                value,
                None,
                option,
                found.candidate,
                found.scheme,
                estimator,
                "",
                part.counted_by,
                len(part.held.labels),
                behind,
                0,
            )
