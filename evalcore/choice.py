"""A scheme or candidate that was chosen, with its settings; a candidate may carry a small grid."""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import product
from math import prod
from typing import Any

from evalcore.errors import PlanError
from evalcore.settings import Setting, Value
from evalcore.wording import count, listed

Registry = Mapping[str, Any]
Grid = tuple[tuple[str, tuple[Value, ...]], ...]
BETWEEN = "/"  # values of a grid on the command line: k=1/5/15
MOST_OPTIONS = 50  # of one grid: each is fitted in every inner fold of every round


@dataclass(frozen=True)
class Choice:
    """A scheme or candidate that was chosen, with a value for each of its settings.

    Attributes
    ----------
    key : str
    settings : tuple of (str, value)
        In the order of the registry; the first of its values for a setting with a grid.
    grid : tuple of (str, tuple of value)
        Values among which each round picks inside its bag; empty for one that is not tuned.
    """

    key: str
    settings: tuple[tuple[str, Value], ...] = ()
    grid: Grid = ()

    def values(self) -> dict[str, Value]:
        """The settings by key."""
        return dict(self.settings)

    @property
    def tuned(self) -> bool:
        """Whether settings are picked inside each bag."""
        return bool(self.grid)

    @property
    def options(self) -> tuple["Choice", ...]:
        """Every combination of the grid as a choice without one; itself alone if not tuned.

        Examples
        --------
        >>> [c.written() for c in Choice("svm", (("C", 1.0),), (("C", (1.0, 10.0)),)).options]
        ['svm:C=1', 'svm:C=10']
        """
        names = [name for name, _ in self.grid]
        found = []
        for combination in product(*(values for _, values in self.grid)):
            values = self.values() | dict(zip(names, combination, strict=True))
            found.append(Choice(self.key, tuple(values.items())))
        return tuple(found)

    def written(self, *, without: Iterable[str] = ()) -> str:
        """As on the command line, all settings in order: ``bootstrap:rounds=200,...``."""
        shown = self.written_settings(
            name for name, value in self.settings if name not in without and value != ""
        )
        return f"{self.key}:{shown}" if shown else self.key

    def written_settings(self, names: Iterable[str]) -> str:
        """Some settings as on the command line: ``k=5,scaling=none``."""
        values = {name: (value,) for name, value in self.settings} | dict(self.grid)
        return ",".join(
            f"{name}={BETWEEN.join(map(written_value, values[name]))}" for name in names
        )


def written_value(value: Value) -> str:
    """A setting's value as on the command line."""
    if isinstance(value, bool):
        return "yes" if value else "no"
    return repr(value).removesuffix(".0") if isinstance(value, float) else str(value)


def choose(registry: Registry, key: str, **values: Value | Sequence[Value]) -> Choice:
    """A choice from a registry with its defaults, some of them replaced.

    Parameters
    ----------
    registry : mapping
        Of schemes or candidates.
    key : str
    **values : value, or tuple of values for a grid

    Raises
    ------
    PlanError
        Unknown key, unknown setting, or a value out of bounds; all that is allowed is named.

    Examples
    --------
    >>> from evalcore.candidates import CANDIDATES
    >>> choose(CANDIDATES, "nearest_neighbours", k=(1, 5)).written()
    'nearest_neighbours:k=1/5,scaling=standard'
    """
    if key not in registry:
        raise PlanError(f"There is no {key!r}; choose {listed(list(registry), last='or')}.")
    settings: tuple[Setting, ...] = registry[key].settings
    unknown = set(values) - {setting.key for setting in settings}
    if unknown:
        allowed = listed([f"`{setting.key}`" for setting in settings], last="or") or "no setting"
        raise PlanError(f"{key!r} has no setting {min(unknown)!r}; it takes {allowed}.")
    chosen, grid = [], []
    for setting in settings:
        given = values.get(setting.key, setting.default)
        several = _checked(setting, given if isinstance(given, tuple | list) else (given,))
        chosen.append((setting.key, several[0]))
        if len(several) > 1:
            grid.append((setting.key, several))
    options = prod(len(several) for _, several in grid)
    if options > MOST_OPTIONS:
        raise PlanError(
            f"The grid of {key!r} has {count(options)} combinations; at most {MOST_OPTIONS} are "
            "allowed, because each is fitted in every inner fold of every round."
        )
    return Choice(key, tuple(chosen), tuple(grid))


def _checked(setting: Setting, given: Sequence[Value]) -> tuple[Value, ...]:
    """The values of one setting, each allowed and none twice."""
    several = tuple(float(value) if setting.kind == "number" else value for value in given)
    for value in several:
        setting.check(value)
    if not several or len(set(several)) < len(several):
        raise PlanError(
            f"A grid of `{setting.key}` needs different values; got "
            f"{listed([written_value(value) for value in several]) or 'none'}."
        )
    if len(several) > 1 and setting.kind == "column":
        raise PlanError(f"`{setting.key}` names a column and cannot be tuned; give one.")
    return several


def choose_written(registry: Registry, text: str) -> Choice:
    """A choice as written on the command line: ``KEY`` or ``KEY:name=value,name=value``.

    Several values of a setting, as in ``k=1/5/15``, are a grid.
    """
    key, _, rest = text.partition(":")
    values: dict[str, Value | Sequence[Value]] = {}
    settings = {s.key: s for s in registry[key].settings} if key in registry else {}
    for item in filter(None, rest.split(",")):
        name, equals, value = item.partition("=")
        if not equals:
            raise PlanError(f"{item!r} in {text!r} must be written name=value.")
        setting = settings.get(name)
        if setting is None or setting.kind == "column":
            values[name] = value  # the name of a column may hold anything
        else:
            values[name] = tuple(setting.read(part) for part in value.split(BETWEEN))
    return choose(registry, key, **values)
