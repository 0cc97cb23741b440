"""Doubts that the table alone gives rise to."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from evalcore.evaluation import Evaluation
from evalcore.figures import Finding
from evalcore.measures import hand_till
from evalcore.plan import Plan
from evalcore.profile import profile
from evalcore.sample_size import lower_bound, upper_bound
from evalcore.table import Column, Table
from evalcore.wording import capitalised, class_name, count, decimal, percent, quoted

GRAVE_UNITS, FEW_UNITS, LIMIT_UNITS = 10, 30, 75
ALONE, ALONE_GRAVE = 0.97, 0.99


def class_too_small(table: Table, plan: Plan, _: Evaluation | None) -> Iterator[Finding]:
    """Too few units of a class to say much about it; more are asked for where it has a limit."""
    limited = {limit.of_class for limit in plan.limits}
    for k, units in enumerate(table.units_holding.tolist()):
        name, noun = table.classes[k], table.noun
        if units < GRAVE_UNITS:
            severity, threshold, source = "grave", GRAVE_UNITS, "clopper_pearson1934"
        elif units < FEW_UNITS:
            severity, threshold, source = "moderate", FEW_UNITS, "clopper_pearson1934"
        elif name in limited and units < LIMIT_UNITS:
            severity, threshold, source = "moderate", LIMIT_UNITS, "beleites2013"
        else:
            continue
        right = round(0.9 * units)
        low = lower_bound(right, units, confidence=0.975)
        high = upper_bound(right, units, confidence=0.975)
        asks = "a limit asks for" if threshold == LIMIT_UNITS else "at least advised are"
        yield Finding(
            "class_too_small",
            severity,  # type: ignore[arg-type]
            name,
            f"Few {class_name(name)} {noun.plural}: {units}, where {asks} {threshold}",
            f"Class {quoted(name)} has {noun.counted(units)}; the threshold is {threshold}. Even "
            f"{right} of {units} right could mean anything from {percent(low, units)} to "
            f"{percent(high, units)}.",
            f"Judge more {class_name(name)} {noun.plural} before relying on a figure about them.",
            units,
            threshold,
            source,
        )


def tells_classes_apart_alone(table: Table, _: Plan, __: Evaluation | None) -> Iterator[Finding]:
    """One feature that separates the classes nearly perfectly may be known only afterwards."""
    for column in table.columns:
        value = separation(table, column)
        if value < ALONE:
            continue
        yield Finding(
            "tells_classes_apart_alone",
            "grave" if value >= ALONE_GRAVE else "moderate",
            column.name,
            f"{quoted(column.name)} tells the classes apart alone: {decimal(value)}, asked about "
            f"from {decimal(ALONE)}",
            f"Ranking the cases by {quoted(column.name)} alone gives an AUC of {decimal(value)}; "
            f"the threshold for asking is {decimal(ALONE)}. A column that is written down after "
            "the class is known, or because of it, does this too.",
            "Leave it out unless it is known when a new case is answered.",
            value,
            ALONE,
            "own_leakage",
        )


def separation(table: Table, column: Column) -> float:
    """How well one feature alone ranks the classes, either way round: 0.5 to 1.

    Numbers by their order; text by each category's share of every class (cases of categories
    seen once cannot flatter: they count as missing). Cases without a value are left out.
    """
    known = ~np.isnan(column.values)
    labels, values = table.labels[known], column.values[known]
    if len(np.unique(labels)) < table.n_classes:
        return 0.5
    if column.kind == "number":
        return _best_ranking(labels, values, table.n_classes)
    codes = values.astype(np.intp)
    counts = np.zeros((len(column.categories), table.n_classes))
    np.add.at(counts, (codes, labels), 1)
    common = counts.sum(axis=1) > 1
    used = common[codes]
    if len(np.unique(labels[used])) < table.n_classes or not used.any():
        return 0.5
    shares = counts / np.maximum(1, counts.sum(axis=1, keepdims=True))
    return float(hand_till(labels[used], shares[codes[used]])[0])


def _best_ranking(labels: NDArray[np.intp], values: NDArray[np.float64], n_classes: int) -> float:
    """Mean over pairs of classes of the AUC of a number, whichever way round each pair ranks."""
    pairs = [(a, b) for a in range(n_classes) for b in range(a + 1, n_classes)]
    total = 0.0
    for a, b in pairs:
        two = (labels == a) | (labels == b)
        scores = np.column_stack([-values[two], values[two]])
        value = float(hand_till((labels[two] == b).astype(np.intp), scores)[0])
        total += max(value, 1 - value)
    return total / len(pairs)


def copies_left(table: Table, _: Plan, __: Evaluation | None) -> Iterator[Finding]:
    """The same case under two names falls on both sides of a round."""
    facts = profile(table)
    share = facts.copied_cases / table.n_cases
    if facts.copied_cases:
        yield Finding(
            "copies_left",
            "grave" if share > 0.01 else "moderate",
            "",
            f"{capitalised(count(facts.copied_cases))} of {count(table.n_cases)} rows equal an "
            "earlier row in every feature and the label",
            f"{percent(share, table.n_cases)} of the rows are such copies; none is the threshold. "
            "A copy that is held out while its twin is trained on is answered by memory.",
            f"Set copies aside, or name a column that keeps them together as one "
            f"{table.noun.singular}.",
            facts.copied_cases,
            0,
            "own_leakage",
        )
    if facts.contradicting_cases:
        yield Finding(
            "copies_left",
            "moderate",
            "",
            f"{capitalised(count(facts.contradicting_cases))} rows equal a row of another class "
            "in every feature",
            f"{count(facts.contradicting_cases)} rows have a twin with another label; none is the "
            "threshold. No candidate can be right on both.",
            "Look at the labels of these rows first.",
            facts.contradicting_cases,
            0,
            "own_leakage",
        )


def units_not_kept_together(table: Table, plan: Plan, _: Evaluation | None) -> Iterator[Finding]:
    """A column that names what rows have in common was not given as the unit."""
    if table.has_units:
        return
    kept = {choice.values().get("keep", "") for choice in plan.schemes}
    for column, names, spelled in table.repeating:
        if kept == {column}:
            continue
        rows = table.n_cases / names
        yield Finding(
            "units_not_kept_together",
            "grave" if spelled else "moderate",
            column,
            f"Rows share their {quoted(column)}, but are not kept together: {decimal(rows, 1)} "
            "rows each, 1 expected",
            f"{count(table.n_cases)} rows carry {count(names)} different entries in "
            f"{quoted(column)}, {decimal(rows, 1)} rows each (threshold: 1), and all rows of one "
            "entry have the same class. Rows of one entry resemble each other, so a round that "
            "trains on some and judges others scores too well.",
            f"If {quoted(column)} names what is independent, choose it as the unit.",
            rows,
            1,
            "own_leakage",
        )


def missing_values(table: Table, _: Plan, __: Evaluation | None) -> Iterator[Finding]:
    """Gaps are filled inside each bag; how many there are is said."""
    facts = profile(table)
    if not facts.incomplete_cases:
        return
    share = facts.incomplete_cases / table.n_cases
    most = max(facts.columns, key=lambda column: column.missing)
    yield Finding(
        "missing_values",
        "moderate" if share > 0.1 else "note",
        most.name,
        f"{count(facts.incomplete_cases)} of {count(table.n_cases)} rows miss a value, most in "
        f"{quoted(most.name)} ({count(most.missing)})",
        f"{percent(share, table.n_cases)} of the rows miss at least one value (moderate above "
        f"{percent(0.1, 1)}). Gaps are filled inside each bag: numbers with the bag's median, text "
        "with its most frequent entry.",
        "Ask whether values are missing for a reason that has to do with the class.",
        share,
        0.1,
        "common_practice",
    )
