"""Plans and roles to the values behind widgets, and back: the keys of all widgets in one place."""

from collections.abc import Mapping, Sequence
from typing import Any

from evalcore.candidates import CANDIDATES
from evalcore.choice import Choice, Registry, choose
from evalcore.limit import Limit
from evalcore.plan import Plan
from evalcore.schemes import SCHEMES
from evalcore.table import Roles, Table

Values = Mapping[str, Any]
PLAN = "plan "  # all keys of the Settings page begin so


def of_roles(roles: Roles) -> dict[str, Any]:
    """Values behind the widgets of Upload."""
    return {
        "label": roles.label,
        "unit": roles.unit,
        "leave_out": list(roles.leave_out),
        f"noun_one {roles.unit}": roles.noun.singular,
        f"noun_many {roles.unit}": roles.noun.plural,
        f"copies {roles.unit}": roles.copies,
    }


def of_plan(plan: Plan) -> dict[str, Any]:
    """Values behind the widgets of Settings."""
    values: dict[str, Any] = {
        "answered_from": plan.answered_from,
        "first": plan.schemes[0].key,
        "second": [choice.key for choice in plan.schemes[1:]],
        "candidates": list(dict.fromkeys(choice.key for choice in plan.candidates)),
        "about": plan.about,
        "measure": plan.measure,
        "concern": plan.concern,
        "seed": plan.seed,
        "level": plan.level,
        "question": plan.question,
    }
    for choice in (*plan.schemes, *plan.candidates):
        values |= {setting(choice.key, name): value for name, value in choice.settings}
    for limit in plan.limits:
        values[limit_key(limit.measure, limit.of_class)] = 100 * limit.least
        values["confidence"] = 100 * limit.confidence
        values["set_on"] = limit.set_on
    return {PLAN + name: value for name, value in values.items()}


def not_carried_over(plan: Plan) -> tuple[str, ...]:
    """Choices of a plan that Settings has no widget for, in words."""
    asked = (
        ("tuned settings", any(choice.tuned for choice in plan.candidates)),
        ("a scheme chosen twice", _twice(plan.schemes)),
        ("a candidate chosen twice", _twice(plan.candidates)),
        ("a cut-off", plan.cut_off is not None),
        ("a learning curve", plan.curve is not None),
        ("a chance check", plan.permutations > 0),
        ("every round fitted on its own", plan.engine == "plain"),
    )
    return tuple(words for words, there in asked if there)


def _twice(chosen: Sequence[Choice]) -> bool:
    """Whether one of them stands there more than once, with different settings."""
    return len({choice.key for choice in chosen}) < len(chosen)


def setting(key: str, name: str) -> str:
    """Name of the value of a scheme's or a candidate's setting."""
    return f"{key}.{name}"


def limit_key(measure: str, of_class: str) -> str:
    """Name of the value of an acceptance limit."""
    return f"limit {measure} {of_class}"


def plan_of(values: Values, table: Table) -> Plan:
    """The plan that the widgets of Settings describe.

    Parameters
    ----------
    values : mapping
        By the names of `of_plan`, without the common beginning.
    table : Table

    Raises
    ------
    PlanError
        The choices do not make a plan.
    """
    schemes = (values["first"], *(key for key in values["second"] if key != values["first"]))
    about = values["about"] if values["about"] in values["candidates"] else ""
    return Plan(
        roles=table.roles,
        schemes=tuple(_choice(SCHEMES, key, values) for key in schemes),
        candidates=tuple(_choice(CANDIDATES, key, values) for key in values["candidates"]),
        answered_from=values["answered_from"],
        measure=values["measure"],
        concern=values["concern"],
        about=about,
        limits=tuple(_limits(values, table)),
        level=values["level"],
        seed=int(values["seed"]),
        question=values["question"].strip(),
    )


def _choice(registry: Registry, key: str, values: Values) -> Choice:
    names = [s.key for s in registry[key].settings]
    given = {name: values[setting(key, name)] for name in names if setting(key, name) in values}
    return choose(registry, key, **given)


def _limits(values: Values, table: Table) -> list[Limit]:
    asked = [("sensitivity", name) for name in table.classes] + [("balanced_accuracy", "")]
    asked.append(("accuracy", ""))
    return [
        Limit(
            measure,
            values[limit_key(measure, name)] / 100,
            name,
            values.get("confidence", 95) / 100,
            values.get("set_on", ""),
        )
        for measure, name in asked
        if values.get(limit_key(measure, name))
    ]
