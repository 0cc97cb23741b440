"""Tables with known truth: clusters of unit variance, alone or as rows of independent units."""

import math
from dataclasses import dataclass
from functools import lru_cache
from statistics import NormalDist

import numpy as np
from numpy.typing import NDArray

from evalcore.measures import Floats
from evalcore.plan import generator

FURTHER = 10_000  # units the truth is measured on
SEED = 1


@dataclass(frozen=True, eq=False)
class Cases:
    """Labelled cases; the rows of a unit stand together."""

    labels: NDArray[np.intp]
    features: Floats
    units: NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class Mechanism:
    """A unit comes from one cluster of its class at random, its rows around a place of its own."""

    shares: tuple[float, ...]  # of the classes
    centres: Floats  # shape (K, clusters of a class, features that tell something)
    noise: int = 0  # features that tell nothing
    rows: int = 1  # of each unit
    alike: float = 0.0  # share of a feature's variance that the rows of a unit have in common
    least: int = 4  # units of each class in a table

    def draw(self, n: int, rng: np.random.Generator) -> Cases:
        """Rows of n units; classes are drawn again until every class has `least`."""
        classes, clusters, features = self.centres.shape
        labels = np.zeros(n, dtype=np.intp)
        while np.bincount(labels, minlength=classes).min() < self.least:
            labels = rng.choice(classes, size=n, p=self.shares)
        cluster = rng.integers(clusters, size=n)
        width = features + self.noise
        place = math.sqrt(self.alike) * rng.normal(size=(n, width)) if self.alike else 0.0
        own = rng.normal(size=(n, self.rows, width))
        x = np.swapaxes(math.sqrt(1 - self.alike) * np.swapaxes(own, 0, 1) + place, 0, 1)
        x[..., :features] += self.centres[labels, cluster][:, None]
        units = np.repeat(np.arange(n), self.rows)
        return Cases(labels[units], x.reshape(-1, width), units)


def two_normals(bayes: float, *, features: int = 5) -> Floats:
    """Centres of two classes which, equally frequent, can be told apart in a share `bayes`."""
    half = NormalDist().inv_cdf(bayes) / math.sqrt(features)
    return np.array([[[-half] * features], [[half] * features]])


EVEN, RARE = (0.5, 0.5), (0.85, 0.15)
MECHANISMS = {
    "gauss": Mechanism(EVEN, two_normals(0.85)),
    "imb": Mechanism(RARE, two_normals(0.85)),
    "p50": Mechanism(EVEN, two_normals(0.85), noise=45),
    "noise": Mechanism(EVEN, np.zeros((2, 1, 1)), noise=9),
    "three": Mechanism((1 / 3, 1 / 3, 1 / 3), 2.2 / math.sqrt(2) * np.eye(3)[:, None, :], noise=2),
    "xor": Mechanism(EVEN, 1.5 * np.array([[[1.0, 1], [-1, -1]], [[1, -1], [-1, 1]]]), noise=3),
    "sep": Mechanism(EVEN, two_normals(0.98)),
    # six rows a unit that share half of their variance; five units of a class, so that 5 parts fit
    "units": Mechanism(EVEN, two_normals(0.85), rows=6, alike=0.5, least=5),
}
TITLES = {
    "gauss": "two normal classes, equally frequent",
    "imb": "two normal classes, 85 to 15",
    "p50": "two normal classes, 5 features that tell something and 45 that do not",
    "noise": "labels that no feature tells",
    "three": "three normal classes",
    "xor": "classes that no straight line parts",
    "sep": "two normal classes, almost apart",
    "units": "two normal classes, six rows a unit",
}


@lru_cache(maxsize=4)
def further_cases(scenario: str) -> Cases:
    """The large sample that a scenario's models are tried on."""
    return MECHANISMS[scenario].draw(FURTHER, generator(SEED, scenario, "further cases"))
