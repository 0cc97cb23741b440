"""Logistic regression with an L2 penalty in many rounds at once, as the converged fit.

Idea: Newton's method needs products of the features with weights only, and counts are weights;
so all rounds of a chunk take each step together, and a separable bag is tamed by halving steps.
"""

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from evalcore.closed_form import Labels, from_log_odds, softmax
from evalcore.prepared import Prepared
from evalcore.rounds import Counts
from evalcore.shares import Floats

_STEPS = 100
_SMALL = 1e-5  # the last step in units of log odds; the next would be about its square
_TINY = 1e-10  # keeps a step finite where no case is in doubt any more; does not move the minimum
_STEEP = 0.5  # halve a step if the slope beyond it is more than this share of that before it


def logistic(
    prepared: Prepared, labels: Labels, counts: Counts, *, n_classes: int, C: float
) -> Floats:
    """Logistic regression: the minimum of C x (sum of -log p) + (sum of squared weights) / 2.

    Two classes: one vector of weights; more: one for each class (multinomial). Intercepts carry
    no penalty. Every class must be in every bag. A round that does not converge is nan.

    Parameters
    ----------
    prepared : Prepared
        Scaled as the candidate asks for.
    labels : ndarray of int, shape (n,)
    counts : ndarray of uint8, shape (R, n)
    n_classes : int
    C : float
        Above 0; smaller means more penalty.

    Examples
    --------
    A feature that says nothing leaves the shares of the classes:

    >>> given = Prepared(np.zeros((1, 1, 4)), np.ones((1, 1), dtype=bool), True)
    >>> bags = np.array([[1, 1, 1, 1]], dtype=np.uint8)
    >>> logistic(given, np.array([0, 1, 1, 1]), bags, n_classes=2, C=1.0)[0, 0].round(12).tolist()
    [0.25, 0.75]
    """
    penalty = np.eye(n_classes - 1) / C
    if n_classes > 2:
        # the penalty on all classes' weights, in terms of their differences from the first class
        penalty -= 1 / (C * n_classes)
    target = (labels == np.arange(1, n_classes)[:, None]).astype(np.float64)
    log_odds = np.full((len(counts), *target.shape), np.nan)
    fits = _start(prepared, target, counts)
    for _ in range(_STEPS):
        settled = fits.step(target, penalty)
        log_odds[fits.rounds[settled]] = fits.log_odds[settled]
        if settled.all():
            break
        if settled.any():
            fits = fits.those(~settled)
    return _answers(log_odds)


@dataclass(eq=False)
class _Fits:
    """Rounds still under way; classes 1 to K - 1 against class 0.

    Attributes
    ----------
    rounds : ndarray of int, shape (R,)
    design : ndarray, shape (R, q + 1, n)
        Columns and one of ones.
    bags : ndarray, shape (R, 1, n)
    weights, move : ndarray, shape (R, K - 1, q + 1)
        Where each fit is, and the step that led there.
    slope : ndarray, shape (R,)
        Slope of the loss along that step where it began; below 0.
    log_odds : ndarray, shape (R, K - 1, n)
    room : ndarray, shape (R, q + 1, n)
        Written over in every step: fresh memory would cost more than the sums.
    """

    rounds: NDArray[np.intp]
    design: Floats
    bags: Floats
    weights: Floats
    move: Floats
    slope: Floats
    log_odds: Floats
    room: Floats

    def those(self, chosen: NDArray[np.bool_]) -> "_Fits":
        """Some of the rounds alone."""
        return _Fits(*(getattr(self, field.name)[chosen] for field in fields(self)))

    def step(self, target: Floats, penalty: Floats) -> NDArray[np.bool_]:
        """Take one step in every round; True where it was too small to need another."""
        chances = _chances(self.log_odds)
        gradient = (self.bags * (chances - target)) @ self.design.swapaxes(1, 2)
        gradient[:, :, :-1] += penalty @ self.weights[:, :, :-1]  # intercepts are free
        newton = -self._solved(gradient, chances, penalty)
        # the loss is convex: steep uphill at the end of a step means it went too far
        too_far = (gradient * self.move).sum(axis=(1, 2)) > -_STEEP * self.slope
        self.slope = np.where(too_far, self.slope / 2, (gradient * newton).sum(axis=(1, 2)))
        halved = self.move / 2
        back = too_far[:, None, None]
        self.move = np.where(back, halved, newton)
        change = np.where(back, -halved, newton)
        self.weights = self.weights + change
        moved = change @ self.design
        self.log_odds = self.log_odds + moved
        return np.asarray(~too_far & (np.abs(moved).max(axis=(1, 2)) <= _SMALL))

    def _solved(self, gradient: Floats, chances: Floats, penalty: Floats) -> Floats:
        """Second derivatives divided into the gradient, shape (R, K - 1, q + 1)."""
        n_rounds, others, width = gradient.shape
        curvature = np.empty((n_rounds, others, width, others, width))
        on = np.arange(width)
        ridge = np.ones(width)
        ridge[-1] = 0
        for j in range(others):
            own = self.bags[:, 0] * chances[:, j]
            for k in range(j + 1):
                spread = own * ((j == k) - chances[:, k])
                np.multiply(self.design, spread[:, None, :], out=self.room)
                block = self.room @ self.design.swapaxes(1, 2)
                block[:, on, on] += penalty[j, k] * ridge + _TINY * (j == k)
                curvature[:, j, :, k] = curvature[:, k, :, j] = block
        size = others * width
        square = curvature.reshape(n_rounds, size, size)
        solved = np.linalg.solve(square, gradient.reshape(n_rounds, size, 1))
        return np.asarray(solved.reshape(gradient.shape), dtype=np.float64)


def _start(prepared: Prepared, target: Floats, counts: Counts) -> _Fits:
    """All weights 0: equal chances for every class."""
    n_rounds, width, n = prepared.columns.shape
    design = np.ones((n_rounds, width + 1, n))
    design[:, :-1] = prepared.columns
    zeros = np.zeros((n_rounds, len(target), width + 1))
    return _Fits(
        np.arange(n_rounds),
        design,
        counts[:, None, :].astype(np.float64),
        zeros,
        zeros,
        np.zeros(n_rounds),
        np.zeros((n_rounds, *target.shape)),
        np.empty_like(design),
    )


def _chances(log_odds: Floats) -> Floats:
    """Probabilities of classes 1 to K - 1, shape (R, K - 1, n)."""
    if log_odds.shape[1] == 1:
        with np.errstate(over="ignore"):
            return 1 / (1 + np.exp(-log_odds))
    return _answers(log_odds).swapaxes(1, 2)[:, 1:]


def _answers(log_odds: Floats) -> Floats:
    """Probabilities of all classes, shape (R, n, K)."""
    if log_odds.shape[1] == 1:
        return from_log_odds(log_odds[:, 0])
    first = np.zeros((len(log_odds), 1, log_odds.shape[2]))
    return softmax(np.concatenate([first, log_odds], axis=1))
