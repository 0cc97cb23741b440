"""Scores of rounds counted into bins, so that bars are sent to the screen and not rounds."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from evalcore.measures import Floats

MOST_STROKES = 40
MOST_BARS = 25


@dataclass(frozen=True)
class Bins:
    """Bins of one width, centred on 1, 1 - width, 1 - 2 width and so on.

    A set of m cases can only score multiples of 1/m. Counting down from 1 puts every bin's centre
    on such a score, and no bin is narrower than one step, which would draw a false comb.

    Attributes
    ----------
    width : float
    exact : bool
        Whether each bin holds one possible score, so that strokes may be drawn in place of bars.
    """

    width: float
    exact: bool

    def counted(self, values: Floats) -> list[tuple[float, int]]:
        """Centre and number of values of each bin that is not empty; nan is passed over.

        >>> Bins(0.25, True).counted(np.array([1.0, 0.75, 0.75, np.nan]))
        [(0.75, 2), (1.0, 1)]
        """
        known = values[~np.isnan(values)]
        # 1e-9: a score half way between two centres must not fall by the noise of a division
        steps = np.floor((1 - known) / self.width + 0.5 - 1e-9).astype(np.intp)
        found, counts = np.unique(steps, return_counts=True)
        return [
            (float(1 - k * self.width), int(c))
            for k, c in zip(found[::-1], counts[::-1], strict=True)
        ]


def usual_size(sizes: NDArray[np.intp]) -> int:
    """The usual number of held-out units or cases: the median of the rounds'."""
    return max(1, int(np.median(sizes)))


def bins_of(values: Floats, sizes: NDArray[np.intp], *, measure: str) -> Bins:
    """Bins for the scores of all candidates of a scheme.

    Parameters
    ----------
    values : ndarray
        All scores that will be drawn.
    sizes : ndarray of int, shape (R,)
        Held-out units or cases of each round.
    measure : str
        Only accuracy moves in steps of 1/m.
    """
    step = 1 / usual_size(sizes)
    known = values[~np.isnan(values)]
    steps = float(np.ptp(known)) / step if len(known) else 0.0
    alike = measure == "accuracy" and len(set(sizes.tolist())) == 1
    if alike and steps <= MOST_STROKES:
        return Bins(step, True)
    return Bins(step * max(1, int(np.ceil(steps / MOST_BARS))), False)
