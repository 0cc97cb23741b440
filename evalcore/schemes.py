"""The resampling schemes: their settings, when each is fit for a table, and how each draws.

All draw over units, so that a unit's cases stay together; a table without units is the special
case of one case a unit.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from evalcore.errors import PlanError
from evalcore.profile import smallest_class
from evalcore.rounds import Rounds
from evalcore.table import Table
from evalcore.wording import count, listed, quoted

Value = float | int | str | bool
Settings = Mapping[str, Value]
Strata = list[NDArray[np.intp]]


@dataclass(frozen=True)
class Setting:
    """One setting of a scheme or a candidate: its kind, bounds and default.

    Attributes
    ----------
    key, title : str
    kind : {"whole", "number", "yes_no", "choice"}
    default : int, float, bool or str
    low, high : float
        Bounds of a number, both included.
    choices : tuple of str
        For "choice".
    """

    key: str
    title: str
    kind: Literal["whole", "number", "yes_no", "choice"]
    default: Value
    low: float = 0
    high: float = 0
    choices: tuple[str, ...] = ()

    def read(self, text: str) -> Value:
        """A value written as text, e.g. on the command line; raises `PlanError`."""
        if self.kind == "yes_no":
            if text not in ("yes", "no"):
                raise PlanError(f"`{self.key}` must be yes or no; got {text!r}.")
            return text == "yes"
        if self.kind == "choice":
            return text
        try:
            return int(text) if self.kind == "whole" else float(text)
        except ValueError:
            wanted = "a whole number" if self.kind == "whole" else "a number"
            raise PlanError(f"`{self.key}` must be {wanted}; got {text!r}.") from None

    def check(self, value: Value) -> None:
        """Raise `PlanError` if a value is out of bounds or of another kind."""
        if self.kind == "yes_no" and not isinstance(value, bool):
            raise PlanError(f"`{self.key}` must be yes or no; got {value!r}.")
        if self.kind == "whole" and type(value) is not int:
            raise PlanError(f"`{self.key}` must be a whole number; got {value!r}.")
        if self.kind == "choice":
            if value not in self.choices:
                raise PlanError(
                    f"`{self.key}` must be {listed(self.choices, last='or')}; got {value!r}."
                )
        elif self.kind != "yes_no" and not self.low <= float(value) <= self.high:
            raise PlanError(
                f"`{self.key}` must be between {self.low:g} and {self.high:g}; got {value}."
            )


@dataclass(frozen=True)
class Scheme:
    """One way of holding cases out.

    Attributes
    ----------
    key, title : str
    what : str
        One plain sentence: what it does and what it costs.
    settings : tuple of Setting
    n_rounds : callable
        Settings and number of units to the number of rounds.
    fit : callable
        Table and settings; raises `PlanError` with the reason when it does not suit.
    draw : callable
        Strata (units of each), settings, generator to rounds over units.
    repeats_cases : bool
        Whether bags hold cases more than once.
    """

    key: str
    title: str
    what: str
    settings: tuple[Setting, ...]
    n_rounds: Callable[[Settings, int], int]
    fit: Callable[[Table, Settings], None]
    draw: Callable[[Strata, Settings, np.random.Generator], Rounds]
    repeats_cases: bool = False


def draw(scheme: Scheme, table: Table, settings: Settings, rng: np.random.Generator) -> Rounds:
    """Draw a scheme's rounds for a table.

    Parameters
    ----------
    scheme : Scheme
    table : Table
    settings : mapping
        A value for each of the scheme's settings.
    rng : numpy.random.Generator

    Returns
    -------
    Rounds
        Over the cases of the table; the cases of a unit always together.

    Raises
    ------
    PlanError
        The scheme does not suit the table.
    """
    scheme.fit(table, settings)
    stratified = bool(settings.get("stratified", False))
    strata = (
        [np.flatnonzero(table.unit_labels == k) for k in range(table.n_classes)]
        if stratified
        else [np.arange(table.n_units)]
    )
    by_unit = scheme.draw([s for s in strata if len(s)], settings, rng)
    return by_unit.of_cases(table.units)


def _split(held_out: NDArray[np.bool_], repeat: NDArray[np.intp]) -> Rounds:
    """Rounds that train on everything that is not held out."""
    return Rounds((~held_out).astype(np.uint8), held_out.astype(np.uint8), repeat)


def held_out_sizes(sizes: NDArray[np.intp], share: float) -> NDArray[np.intp]:
    """How many units of each stratum are held out: the share, rounded by largest remainder.

    Every stratum of two or more keeps at least one unit on each side.

    >>> held_out_sizes(np.array([38, 142]), 0.3).tolist()
    [11, 43]
    """
    wanted = share * sizes
    held_out = np.floor(wanted).astype(np.intp)
    spare = round(share * int(sizes.sum())) - int(held_out.sum())
    held_out[np.argsort(held_out - wanted, kind="stable")[: max(0, spare)]] += 1
    return np.asarray(np.clip(held_out, np.minimum(1, sizes - 1), np.maximum(sizes - 1, 0)))


def _subsample(strata: Strata, settings: Settings, rng: np.random.Generator) -> Rounds:
    sizes = np.array([len(s) for s in strata], dtype=np.intp)
    out = held_out_sizes(sizes, float(settings["test_share"]))
    n_rounds = int(settings.get("rounds", 1))
    held_out = np.zeros((n_rounds, int(sizes.sum())), dtype=bool)
    for r in range(n_rounds):
        for stratum, size in zip(strata, out, strict=True):
            held_out[r, rng.permutation(stratum)[:size]] = True
    return _split(held_out, np.arange(n_rounds))


def _folds(strata: Strata, settings: Settings, rng: np.random.Generator) -> Rounds:
    """Shuffled strata are dealt out one after the other like cards.

    So folds differ by at most one unit in all and by at most one unit of each class.
    """
    folds, repeats = int(settings["folds"]), int(settings["repeats"])
    n_units = sum(len(s) for s in strata)
    held_out = np.zeros((repeats, folds, n_units), dtype=bool)
    for repeat in range(repeats):
        dealt = np.concatenate([rng.permutation(stratum) for stratum in strata])
        held_out[repeat, np.arange(n_units) % folds, dealt] = True
    return _split(held_out.reshape(-1, n_units), np.repeat(np.arange(repeats), folds))


def _leave_one_out(strata: Strata, _: Settings, __: np.random.Generator) -> Rounds:
    n_units = sum(len(s) for s in strata)
    return _split(np.eye(n_units, dtype=bool), np.zeros(n_units, dtype=np.intp))


def _bootstrap(strata: Strata, settings: Settings, rng: np.random.Generator) -> Rounds:
    n_rounds, n_units = int(settings["rounds"]), sum(len(s) for s in strata)
    counts = np.zeros((n_rounds, n_units), dtype=np.intp)
    for r in range(n_rounds):
        for stratum in strata:
            drawn = rng.integers(0, len(stratum), size=len(stratum))
            counts[r, stratum] = np.bincount(drawn, minlength=len(stratum))
    return Rounds.of_bags(counts)


def _need_two_each(table: Table, _: Settings) -> None:
    k, units = smallest_class(table)
    if units < 2:
        raise PlanError(
            f"Class {quoted(table.classes[k])} has {table.noun.counted(units)}; at least 2 are "
            "needed, so that one can be learned from while another is held out. Leave the class "
            "out, join it to another, or add to it."
        )


def _folds_fit(table: Table, settings: Settings) -> None:
    _need_two_each(table, settings)
    folds = int(settings["folds"])
    # a class that is the most frequent one of no unit has no stratum
    sizes = table.class_counts("unit")
    k = int(np.where(sizes > 0, sizes, table.n_units + 1).argmin())
    smallest = int(sizes[k])
    if settings["stratified"] and folds > smallest:
        raise PlanError(
            f"`folds` must be between 2 and {smallest}, because class "
            f"{quoted(table.classes[k])} has {table.noun.counted(smallest)}; got {folds}."
        )
    if folds > table.n_units:
        raise PlanError(
            f"`folds` must be between 2 and {count(table.n_units)}, the number of "
            f"{table.noun.plural}; got {folds}."
        )


def _always(number: int) -> Callable[[Settings, int], int]:
    return lambda settings, n_units: number


STRATIFIED = Setting("stratified", "Keep every class's share in each round", "yes_no", True)
_TEST_SHARE = Setting("test_share", "Share held out", "number", 0.3, 0.05, 0.9)

SCHEMES: dict[str, Scheme] = {
    scheme.key: scheme
    for scheme in (
        Scheme(
            "cross_validation",
            "Cross-validation, repeated",
            "Each {unit} is held out once per repeat; {folds} parts, {repeats} times.",
            (
                Setting("folds", "Parts (folds)", "whole", 5, 2, 100),
                Setting("repeats", "Repeats", "whole", 20, 1, 1000),
                STRATIFIED,
            ),
            lambda settings, _: int(settings["folds"]) * int(settings["repeats"]),
            _folds_fit,
            _folds,
        ),
        Scheme(
            "bootstrap",
            "Bootstrap",
            "Draws {n} {units} with repeats; about a third are left unseen each time.",
            (Setting("rounds", "Rounds", "whole", 200, 1, 10_000), STRATIFIED),
            lambda settings, _: int(settings["rounds"]),
            _need_two_each,
            _bootstrap,
            repeats_cases=True,
        ),
        Scheme(
            "random_subsampling",
            "Random subsampling",
            "Holds out a fresh random part each time.",
            (Setting("rounds", "Rounds", "whole", 100, 1, 10_000), _TEST_SHARE, STRATIFIED),
            lambda settings, _: int(settings["rounds"]),
            _need_two_each,
            _subsample,
        ),
        Scheme(
            "holdout",
            "Hold-out, once",
            "One part, held out once. With few {units} the answer moves by many points from one "
            "draw to the next.",
            (_TEST_SHARE, STRATIFIED),
            _always(1),
            _need_two_each,
            _subsample,
        ),
        Scheme(
            "leave_one_out",
            "Leave one out",
            "Each {unit} alone. No repeats are possible, so how much the model itself varies "
            "stays unknown.",
            (),
            lambda _, n_units: n_units,
            _need_two_each,
            _leave_one_out,
        ),
    )
}
