"""A plan: every choice that leads from a table to its figures, as one hashable value."""

import dataclasses
import hashlib
import json
import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np

from evalcore.candidates import CANDIDATES
from evalcore.choice import BETWEEN, Choice, choose, written_value
from evalcore.cut_off_rule import CutOffRule
from evalcore.errors import PlanError
from evalcore.figures import CountedBy
from evalcore.limit import Limit
from evalcore.measures import MEASURES
from evalcore.profile import smallest_class
from evalcore.rounds import Rounds
from evalcore.schemes import ALL_SCHEMES, SCHEMES, draw
from evalcore.settings import Value
from evalcore.table import Roles, Table
from evalcore.wording import Noun, capitalised, count, listed, quoted

FORMAT = 1
APPENDING = ("rounds", "repeats")  # settings that only append rounds, so they move no draw

MOST_PERMUTATIONS = 9_999
INNER_FOLDS = 5  # of a bag, where settings or a cut-off are learned
CHANCE_ROUNDS = 20  # of the headline's rounds that every permuted table goes through

Engine = Literal["fast", "plain"]


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
    curve : Choice or None
        The learning curve's scheme, whose rounds stand beside those of `schemes`.
    cut_off : CutOffRule or None
        How a cut-off on the scores is learned inside each bag; two classes only.
    permutations : int
        Times that labels are permuted between units for the chance check; 0 for none.
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
    curve: Choice | None = None
    cut_off: CutOffRule | None = None
    permutations: int = 0
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
        for choice in (*self.schemes, *((self.curve,) if self.curve else ())):
            if choice.tuned:
                raise PlanError(
                    f"Settings of a scheme are not tuned; got the grid {choice.written()!r}. Give "
                    "one value each, or choose the scheme several times."
                )
        of_curve = self.curve.values().get("keep", "") if self.curve else self.keep
        if of_curve != self.keep:
            raise PlanError(
                "The learning curve must keep together what the first scheme keeps together, or it "
                f"judges something else; got {of_curve!r} and {self.keep!r}."
            )
        if not 0 <= self.permutations <= MOST_PERMUTATIONS:
            raise PlanError(
                "The chance check takes between 0 and "
                f"{count(MOST_PERMUTATIONS)} permutations; got {self.permutations}."
            )
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

    @property
    def all_schemes(self) -> dict[str, Choice]:
        """Every scheme that has rounds by name, the learning curve last."""
        found = dict(zip(self.scheme_names, self.schemes, strict=True))
        return found | ({self.curve.key: self.curve} if self.curve else {})

    def scheme(self, name: str) -> Choice:
        """The scheme of a name."""
        return self.all_schemes[name]

    def is_curve(self, scheme: str) -> bool:
        """Whether a scheme is the learning curve's, whose small bags give no estimate."""
        return self.curve is not None and scheme == self.curve.key

    @property
    def headline_scheme(self) -> str:
        """Name of the scheme that gives the headline."""
        return self.scheme_names[0]

    @property
    def keep(self) -> str:
        """The column by which the headline's scheme keeps units together; empty if by none."""
        return str(self.schemes[0].values().get("keep", ""))

    def candidate(self, name: str) -> Choice:
        """The candidate of a name."""
        return self.candidates[self.candidate_names.index(name)]

    def title(self, name: str) -> str:
        """What sentences call a candidate."""
        choice = self.candidate(name)
        kind = _kind(choice)
        alike = [c for c in self.candidates if _kind(c) == kind]
        differ = [
            f"{setting} {BETWEEN.join(map(written_value, _several(choice, setting)))}"
            for setting, _ in choice.settings
            if len({_several(c, setting) for c in alike}) > 1
        ]
        title, tuned = kind
        said = [f"{listed(tuned)} tuned"] if tuned else []
        return f"{title} ({'; '.join([*said, *differ])})" if said or differ else title

    @property
    def about_name(self) -> str:
        """The candidate the headline is about."""
        learned = [
            name
            for name, choice in zip(self.candidate_names, self.candidates, strict=True)
            if not CANDIDATES[choice.key].baseline
        ]
        return self.about or (learned or list(self.candidate_names))[0]

    @property
    def choosing_measure(self) -> str:
        """What settings are picked by, and what the chance check looks at.

        The headline's measure; balanced accuracy in place of one class's sensitivity, which would
        be best for naming that class always.
        """
        return "balanced_accuracy" if MEASURES[self.measure].per_class else self.measure

    @property
    def chance_settings(self) -> dict[str, Value]:
        """The headline scheme's settings, with no more rounds than the chance check looks at.

        Whole repeats of them. Fewer rounds are the same first ones, as more only append.
        """
        values = self.scheme(self.headline_scheme).values()
        most = math.ceil(CHANCE_ROUNDS / int(values.get("folds", 1)))
        few = {name: min(int(values[name]), most) for name in APPENDING if name in values}
        return values | few

    def chance_rounds(self, table: Table) -> int:
        """Rounds that every permuted table goes through."""
        scheme = ALL_SCHEMES[self.scheme(self.headline_scheme).key]
        return scheme.n_rounds(table, self.chance_settings)

    def counted_by(self, table: Table) -> CountedBy:
        """How the headline counts on this table."""
        return "unit" if table.has_units and self.answered_from == "all" else "case"

    def concern_of(self, table: Table) -> str:
        """The class whose misses matter most; empty where none stands out."""
        if self.concern or self.cut_off:
            return self.concern or (self.cut_off.of_class if self.cut_off else "")
        with_limit = [limit.of_class for limit in self.limits if limit.of_class]
        if table.n_classes == 2:
            equal = len(set(table.units_holding.tolist())) == 1
            if not equal:
                return table.classes[smallest_class(table)[0]]
        return with_limit[0] if len(set(with_limit)) == 1 else ""

    def check(self, table: Table) -> None:
        """Raise `PlanError` if this plan does not fit a table."""
        self.draw(table)
        cut_off = self.cut_off.of_class if self.cut_off else ""
        for name in (self.concern, cut_off, *(limit.of_class for limit in self.limits)):
            if name and name not in table.classes:
                raise PlanError(
                    f"There is no class {quoted(name)}; the classes are "
                    f"{listed([quoted(c) for c in table.classes])}."
                )
        if self.cut_off and table.n_classes != 2:
            raise PlanError(
                f"A cut-off parts two classes; this table has {table.n_classes}. Leave the cut-off "
                "out, or join classes in the file."
            )
        if self.cut_off and self.cut_off.undecided_below:
            about = CANDIDATES[self.candidate(self.about_name).key]
            if not about.probabilities:
                raise PlanError(
                    f"`undecided` goes by probabilities, and there are none from {about.title}; "
                    "leave it out, or let the answer be about another candidate."
                )
        if self.permutations and len(table.mixed_units):
            raise PlanError(
                f"The chance check moves classes between {table.noun.plural}, so each needs one "
                f"class; {quoted(table.unit_names[table.mixed_units[0]])} carries more than one."
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
        for name, choice in self.all_schemes.items():
            stream = choice.written(without=APPENDING)
            drawn[name] = draw(
                ALL_SCHEMES[choice.key], table, choice.values(), generator(self.seed, stream)
            )
            if choice != self.curve:  # bags of the curve are small on purpose
                self._check_neighbours(drawn[name])
        for choice in self.candidates:
            fixed = CANDIDATES[choice.key].fixed
            if fixed is not None:
                fixed(table, choice.values())
        return drawn

    def _check_neighbours(self, rounds: Rounds) -> None:
        smallest = int(rounds.train.sum(axis=1, dtype=np.intp).min())
        for choice in self.candidates:
            if not CANDIDATES[choice.key].neighbours:
                continue
            k = max(int(option.values()["k"]) for option in choice.options)
            if k > smallest:
                raise PlanError(
                    f"`k` must be between 1 and {count(smallest)}, the cases of the smallest bag; "
                    f"got {k}."
                )

    def fits(self, table: Table) -> int:
        """How many models will be fitted, inner folds and permuted tables included."""
        return sum(self._fits_of(table, choice) for choice in self.candidates)

    def seconds(self, table: Table) -> float:
        """A rough guess of the work in seconds of one core, before anything was measured."""
        each = [(CANDIDATES[c.key].cost, self._fits_of(table, c)) for c in self.candidates]
        return sum((cost[0] + cost[1] * table.n_cases) * fits for cost, fits in each)

    def _fits_of(self, table: Table, choice: Choice) -> int:
        """Models of one candidate: one a round, and those of inner folds where any are asked."""
        rounds = {
            name: ALL_SCHEMES[c.key].n_rounds(table, c.values())
            for name, c in self.all_schemes.items()
        }
        of_chance = self.permutations * self.chance_rounds(table)
        outer = sum(rounds.values()) + 1 + of_chance
        if choice.tuned:
            return outer * (1 + INNER_FOLDS * len(choice.options))
        learned = rounds[self.headline_scheme] + 1 if self.learns_cut_off(choice) else 0
        return outer + INNER_FOLDS * learned

    def has_cut_off(self, choice: Choice) -> bool:
        """Whether a candidate answers at a cut-off: its scores come from a fit to features."""
        candidate = CANDIDATES[choice.key]
        return self.cut_off is not None and not candidate.baseline and candidate.fixed is None

    def learns_cut_off(self, choice: Choice) -> bool:
        """Whether that cut-off is learned inside each bag, which takes inner folds."""
        return self.has_cut_off(choice) and self.cut_off is not None and self.cut_off.by != "fixed"

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
            data[part] = tuple(map(_choice, data[part]))
        data["limits"] = tuple(Limit(**limit) for limit in data["limits"])
        if data.get("curve"):
            data["curve"] = _choice(data["curve"])
        if data.get("cut_off"):
            data["cut_off"] = CutOffRule(**data["cut_off"])
        return cls(roles=Roles(**roles), **data)

    @property
    def fingerprint(self) -> str:
        """sha256 of the JSON text, 64 hexadecimal digits."""
        return hashlib.sha256(self.to_json().encode()).hexdigest()


def _choice(data: dict[str, Any]) -> Choice:
    """A choice from JSON; records from before grids have none."""
    return Choice(
        data["key"],
        tuple((name, value) for name, value in data["settings"]),
        tuple((name, tuple(values)) for name, values in data.get("grid", ())),
    )


def _kind(choice: Choice) -> tuple[str, tuple[str, ...]]:
    """What a candidate is called without what tells it from others, and its tuned settings."""
    candidate = CANDIDATES[choice.key]
    title = candidate.title if choice.tuned else candidate.named(choice.values())
    return title, tuple(name for name, _ in choice.grid)


def _several(choice: Choice, setting: str) -> tuple[Value, ...]:
    return dict(choice.grid).get(setting, (choice.values()[setting],))


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
