"""Rounds: how often each case is in each round's training bag, and which cases are held out.

A resampling scheme is nothing but this table of counts; every estimate follows from it, the
labels and the answers.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Counts = NDArray[np.uint8]


@dataclass(frozen=True, eq=False)
class Rounds:
    """The count matrix of a scheme.

    Attributes
    ----------
    train : ndarray of uint8, shape (R, n)
        How often case i is in the bag of round r.
    test : ndarray of uint8, shape (R, n)
        1 where case i is held out and judged in round r, else 0; only where `train` is 0.
    repeat : ndarray of int, shape (R,)
        Which repeat a round belongs to; each repeat judges every case at most once.

    Raises
    ------
    ValueError
        Shapes differ, or a case is trained on and judged in the same round.

    Examples
    --------
    Four cases, one bag in which case 0 was drawn twice and case 3 never:

    >>> rounds = Rounds.of_bags([[2, 1, 1, 0]])
    >>> rounds.test.tolist()
    [[0, 0, 0, 1]]
    """

    train: Counts
    test: Counts
    repeat: NDArray[np.intp]

    def __post_init__(self) -> None:
        if self.train.shape != self.test.shape or len(self.repeat) != len(self.train):
            raise ValueError(
                f"`train`, `test` and `repeat` must agree in shape; got {self.train.shape}, "
                f"{self.test.shape} and {self.repeat.shape}."
            )
        if np.any((self.train > 0) & (self.test > 0)):
            raise ValueError("A case is trained on and judged in the same round.")
        for array in (self.train, self.test, self.repeat):
            array.setflags(write=False)

    @classmethod
    def of_bags(cls, bags: object) -> "Rounds":
        """Rounds of a bootstrap: judged are the cases that a bag left out.

        Parameters
        ----------
        bags : array_like of int, shape (R, n)
            How often each case was drawn, 0 to 255.
        """
        counts = np.asarray(bags)
        if counts.min(initial=0) < 0 or counts.max(initial=0) > np.iinfo(np.uint8).max:
            raise ValueError("A case cannot be drawn fewer than 0 or more than 255 times.")
        train = counts.astype(np.uint8)
        return cls(train, (train == 0).astype(np.uint8), np.arange(len(train)))

    @property
    def n_rounds(self) -> int:
        """Number of rounds R."""
        return len(self.train)

    @property
    def n_cases(self) -> int:
        """Number of cases n."""
        return int(self.train.shape[1])

    @cached_property
    def pairs(self) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
        """Round and case of each held-out answer, both of shape (T,), ordered by round and case."""
        rounds, cases = np.nonzero(self.test)
        return rounds, cases

    @cached_property
    def times_tested(self) -> NDArray[np.intp]:
        """How often each case is held out and judged, shape (n,)."""
        return np.asarray(self.test.sum(axis=0, dtype=np.intp))

    @cached_property
    def test_sizes(self) -> NDArray[np.intp]:
        """Held-out cases of each round, shape (R,)."""
        return np.asarray(self.test.sum(axis=1, dtype=np.intp))

    @property
    def distinct_share(self) -> NDArray[np.float64]:
        """Share of all cases that are in each bag at least once, shape (R,)."""
        return np.asarray((self.train > 0).mean(axis=1), dtype=np.float64)

    def first(self, n_rounds: int) -> "Rounds":
        """The first rounds alone."""
        return self.part(slice(0, n_rounds))

    def part(self, rows: slice) -> "Rounds":
        """Some of the rounds."""
        return Rounds(self.train[rows], self.test[rows], self.repeat[rows])

    def of_units(self, units: NDArray[np.intp]) -> "Rounds":
        """The same rounds counted by unit, where all cases of a unit are kept together.

        Parameters
        ----------
        units : ndarray of int, shape (n,)
            Unit of each case, 0 to G - 1.
        """
        first_case = np.unique(units, return_index=True)[1]
        return Rounds(self.train[:, first_case], self.test[:, first_case], self.repeat)

    def of_cases(self, units: NDArray[np.intp]) -> "Rounds":
        """Rounds drawn over units, spread to all their cases."""
        return Rounds(self.train[:, units], self.test[:, units], self.repeat)
