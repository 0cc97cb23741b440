"""A plan: every choice that leads from a table to its figures, as one hashable value."""

import dataclasses
import hashlib
import json
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np

from evalcore.candidates import CANDIDATES
from evalcore.errors import PlanError
from evalcore.figures import CountedBy
from evalcore.measures import MEASURES
from evalcore.profile import smallest_class
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES, draw
from evalcore.settings import Setting, Value
from evalcore.table import Roles, Table
from evalcore.wording import Noun, capitalised, count, listed, quoted

FORMAT = 1
APPENDING = ("rounds", "repeats")  # settings that only append rounds, so they move no draw

Registry = Mapping[str, Any]
Engine = Literal["fast", "plain"]


@dataclass(frozen=True)
class Choice:
    """A scheme or candidate that was chosen, with a value for each of its settings."""

    key: str
    settings: tuple[tuple[str, Value], ...] = ()

    def values(self) -> dict[str, Value]:
        """The settings by key."""
        return dict(self.settings)

    def written(self, *, without: Iterable[str] = ()) -> str:
        """As on the command line, all settings in order: ``bootstrap:rounds=200,...``."""
        shown = [
            f"{name}={_written(value)}"
            for name, value in self.settings
            if name not in without and value != ""
        ]
        return f"{self.key}:{','.join(shown)}" if shown else self.key


def _written(value: Value) -> str:
    if isinstance(value, bool):
        return "yes" if value else "no"
    return repr(value).removesuffix(".0") if isinstance(value, float) else str(value)


def choose(registry: Registry, key: str, **values: Value) -> Choice:
    """A choice from a registry with its defaults, some of them replaced.

    Raises
    ------
    PlanError
        Unknown key, unknown setting, or a value out of bounds; all that is allowed is named.
    """
    if key not in registry:
        raise PlanError(f"There is no {key!r}; choose {listed(list(registry), last='or')}.")
    settings: tuple[Setting, ...] = registry[key].settings
    unknown = set(values) - {setting.key for setting in settings}
    if unknown:
        allowed = listed([f"`{setting.key}`" for setting in settings], last="or") or "no setting"
        raise PlanError(f"{key!r} has no setting {min(unknown)!r}; it takes {allowed}.")
    chosen = []
    for setting in settings:
        value = values.get(setting.key, setting.default)
        if setting.kind == "number":
            value = float(value)
        setting.check(value)
        chosen.append((setting.key, value))
    return Choice(key, tuple(chosen))


def choose_written(registry: Registry, text: str) -> Choice:
    """A choice as written on the command line: ``KEY`` or ``KEY:name=value,name=value``."""
    key, _, rest = text.partition(":")
    values: dict[str, Value] = {}
    settings = {s.key: s for s in registry[key].settings} if key in registry else {}
    for item in filter(None, rest.split(",")):
        name, equals, value = item.partition("=")
        if not equals:
            raise PlanError(f"{item!r} in {text!r} must be written name=value.")
        values[name] = settings[name].read(value) if name in settings else value
    return choose(registry, key, **values)


@dataclass(frozen=True)
class Limit:
    """An acceptance limit: the least share that must be shown.

    Attributes
    ----------
    measure : {"accuracy", "balanced_accuracy", "sensitivity"}
    least : float
        Share, strictly between 0 and 1.
    of_class : str
        For sensitivity, else empty.
    confidence : float
        One-sided.
    set_on : str
        Date it was set, as the user wrote it; empty if not stated.
    """

    measure: str
    least: float
    of_class: str = ""
    confidence: float = 0.95
    set_on: str = ""

    def __post_init__(self) -> None:
        if self.measure not in ("accuracy", "balanced_accuracy", "sensitivity"):
            raise PlanError(
                "An acceptance limit goes on accuracy, balanced_accuracy or sensitivity; got "
                f"{self.measure!r}."
            )
        if not 0 < self.least < 1 or not 0.5 < self.confidence < 1:
            raise PlanError(
                "An acceptance limit must lie between 0 and 1 and its confidence between 0.5 and "
                f"1; got {self.least:g} and {self.confidence:g}."
            )


@dataclass(frozen=True)
class Plan:
    """All choices of one evaluation.

    Attributes
    ----------
    roles : Roles
    schemes : tuple of Choice
        The first gives the headline.
    candidates : tuple of Choice
        In the order the user chose them.
    answered_from : {"all", "one"}
        Whether a future unit is answered from all its readings (counted by unit) or from one
        (counted by case).
    measure : str
        The measure of the headline.
    concern : str
        The class whose misses matter most; empty for the smallest of two classes, else none.
    about : str
        The candidate the headline is about; empty for the first that is not a baseline.
    limits : tuple of Limit
    level : float
        Two-sided confidence of intervals.
    seed : int
        Random seed.
    question : str
        What the judgement is for, in the user's words.
    engine : {"fast", "plain"}
        Whether rounds are carried out from counts where that gives the same answers, or one by
        one with scikit-learn's public classes, for anyone who doubts.
    """

    roles: Roles
    schemes: tuple[Choice, ...]
    candidates: tuple[Choice, ...]
    answered_from: Literal["all", "one"] = "all"
    measure: str = "balanced_accuracy"
    concern: str = ""
    about: str = ""
    limits: tuple[Limit, ...] = ()
    level: float = 0.95
    seed: int = 1
    question: str = ""
    engine: Engine = "fast"
    format: int = field(default=FORMAT)

    def __post_init__(self) -> None:
        if not self.schemes:
            raise PlanError("A plan needs at least one scheme.")
        if not self.candidates:
            raise PlanError("A plan needs at least one candidate.")
        for choices, what in ((self.schemes, "scheme"), (self.candidates, "candidate")):
            twice = [c.written() for at, c in enumerate(choices) if c in choices[:at]]
            if twice:
                raise PlanError(f"The {what} {twice[0]!r} was chosen twice; once is enough.")
        if self.measure not in MEASURES:
            raise PlanError(
                f"`measure` must be {listed(list(MEASURES), last='or')}; got {self.measure!r}."
            )
        if not 0 <= self.seed < 2**63:
            raise PlanError(f"`seed` must be a whole number from 0; got {self.seed}.")
        if not 0.5 <= self.level < 1:
            raise PlanError(f"`level` must be at least 0.5 and below 1; got {self.level}.")
        if self.about and self.about not in self.candidate_names:
            raise PlanError(
                f"The answer cannot be about {self.about!r}; the candidates are "
                f"{listed(self.candidate_names)}."
            )

    @property
    def scheme_names(self) -> tuple[str, ...]:
        """Name of each scheme: its key, with settings where the key alone is ambiguous."""
        return _names(self.schemes)

    @property
    def candidate_names(self) -> tuple[str, ...]:
        """Name of each candidate: its key, with settings where the key alone is ambiguous."""
        return _names(self.candidates)

    def scheme(self, name: str) -> Choice:
        """The scheme of a name."""
        return self.schemes[self.scheme_names.index(name)]

    def candidate(self, name: str) -> Choice:
        """The candidate of a name."""
        return self.candidates[self.candidate_names.index(name)]

    def title(self, name: str) -> str:
        """What sentences call a candidate."""
        choice = self.candidate(name)
        title = CANDIDATES[choice.key].named(choice.values())
        alike = [c for c in self.candidates if CANDIDATES[c.key].named(c.values()) == title]
        differ = [
            f"{name} {_written(value)}"
            for name, value in choice.settings
            if len({c.values()[name] for c in alike}) > 1
        ]
        return f"{title} ({', '.join(differ)})" if differ else title

    @property
    def about_name(self) -> str:
        """The candidate the headline is about."""
        learned = [
            name
            for name, choice in zip(self.candidate_names, self.candidates, strict=True)
            if not CANDIDATES[choice.key].baseline
        ]
        return self.about or (learned or list(self.candidate_names))[0]

    def counted_by(self, table: Table) -> CountedBy:
        """How the headline counts on this table."""
        return "unit" if table.has_units and self.answered_from == "all" else "case"

    def concern_of(self, table: Table) -> str:
        """The class whose misses matter most; empty where none stands out."""
        if self.concern:
            return self.concern
        with_limit = [limit.of_class for limit in self.limits if limit.of_class]
        if table.n_classes == 2:
            equal = len(set(table.units_holding.tolist())) == 1
            if not equal:
                return table.classes[smallest_class(table)[0]]
        return with_limit[0] if len(set(with_limit)) == 1 else ""

    def check(self, table: Table) -> None:
        """Raise `PlanError` if this plan does not fit a table."""
        self.draw(table)
        for name in (self.concern, *(limit.of_class for limit in self.limits)):
            if name and name not in table.classes:
                raise PlanError(
                    f"There is no class {quoted(name)}; the classes are "
                    f"{listed([quoted(c) for c in table.classes])}."
                )
        if any(limit.measure == "sensitivity" and not limit.of_class for limit in self.limits):
            raise PlanError("A limit on sensitivity needs a class: sensitivity:CLASS=VALUE.")
        if len(table.mixed_units) and self.answered_from == "all" and table.has_units:
            name = table.unit_names[table.mixed_units[0]]
            others = len(table.mixed_units) - 1
            as_do = f", as {'does' if others == 1 else 'do'} {count(others)} more" if others else ""
            raise PlanError(
                f"{capitalised(table.noun.singular)} {quoted(name)} carries more than one "
                f"class{as_do}, so it cannot be answered as one. "
                "Count single rows instead: a future unit is then answered from one reading."
            )

    def draw(self, table: Table) -> dict[str, Rounds]:
        """The rounds of each scheme by name; the same table, plan and seed draw the same.

        Raises
        ------
        PlanError
            A scheme does not suit the table, or a bag is too small for a candidate.
        """
        drawn = {}
        for name, choice in zip(self.scheme_names, self.schemes, strict=True):
            stream = choice.written(without=APPENDING)
            drawn[name] = draw(
                SCHEMES[choice.key], table, choice.values(), generator(self.seed, stream)
            )
            self._check_neighbours(drawn[name])
        for choice in self.candidates:
            fixed = CANDIDATES[choice.key].fixed
            if fixed is not None:
                fixed(table, choice.values())
        return drawn

    def _check_neighbours(self, rounds: Rounds) -> None:
        smallest = int(rounds.train.sum(axis=1, dtype=np.intp).min())
        for choice in self.candidates:
            k = int(choice.values().get("k", 0)) if CANDIDATES[choice.key].neighbours else 0
            if k > smallest:
                raise PlanError(
                    f"`k` must be between 1 and {count(smallest)}, the cases of the smallest bag; "
                    f"got {k}."
                )

    def fits(self, table: Table) -> int:
        """How many models will be fitted, those on all cases included."""
        rounds = sum(SCHEMES[c.key].n_rounds(table, c.values()) for c in self.schemes)
        return (rounds + 1) * len(self.candidates)

    def seconds(self, table: Table) -> float:
        """A rough guess of the work in seconds of one core, before anything was measured."""
        each = sum(
            CANDIDATES[c.key].cost[0] + CANDIDATES[c.key].cost[1] * table.n_cases
            for c in self.candidates
        )
        return each * self.fits(table) / len(self.candidates)

    def to_json(self) -> str:
        """The plan as JSON text; `from_json` gives back an equal plan."""
        return json.dumps(dataclasses.asdict(self), ensure_ascii=False, indent=1)

    @classmethod
    def from_json(cls, text: str) -> "Plan":
        """A plan from its JSON text; raises `PlanError` if it is of a newer format."""
        try:
            data = json.loads(text)
            return cls._from_data(data)
        except (json.JSONDecodeError, KeyError, TypeError, AttributeError) as error:
            raise PlanError(f"This is not a plan as this program writes it: {error!r}.") from error

    @classmethod
    def _from_data(cls, data: dict[str, Any]) -> "Plan":
        if data["format"] != FORMAT:
            raise PlanError(
                f"This plan is of format {data['format']}; this version reads format {FORMAT}."
            )
        roles = data.pop("roles")
        roles["noun"] = Noun(**roles["noun"])
        roles["leave_out"] = tuple(roles["leave_out"])
        for part in ("schemes", "candidates"):
            data[part] = tuple(
                Choice(c["key"], tuple((name, value) for name, value in c["settings"]))
                for c in data[part]
            )
        data["limits"] = tuple(Limit(**limit) for limit in data["limits"])
        return cls(roles=Roles(**roles), **data)

    @property
    def fingerprint(self) -> str:
        """sha256 of the JSON text, 64 hexadecimal digits."""
        return hashlib.sha256(self.to_json().encode()).hexdigest()


def _names(choices: Sequence[Choice]) -> tuple[str, ...]:
    keys = [choice.key for choice in choices]
    return tuple(c.key if keys.count(c.key) == 1 else c.written() for c in choices)


def generator(seed: int, *keys: str) -> np.random.Generator:
    """A random generator of its own for each purpose, named by keys, under one seed."""
    digest = hashlib.sha256("\x1f".join(keys).encode()).digest()
    spawn_key = tuple(int(word) for word in np.frombuffer(digest, dtype="<u4"))
    return np.random.default_rng(np.random.SeedSequence(seed, spawn_key=spawn_key))


def recommended_schemes(table: Table) -> tuple[Choice, ...]:
    """Stratified 5-fold cross-validation 20 times, then 200 stratified bootstrap rounds.

    With fewer than five units of a class there is no fifth part to hold it out in: then the
    bootstrap alone.
    """
    bootstrap = choose(SCHEMES, "bootstrap")
    if smallest_class(table)[1] < 5:
        return (bootstrap,)
    return (choose(SCHEMES, "cross_validation"), bootstrap)


def recommended_candidates() -> tuple[Choice, ...]:
    """The line-up that is on unless the user says otherwise."""
    return tuple(
        choose(CANDIDATES, key) for key, candidate in CANDIDATES.items() if candidate.offered_on
    )
