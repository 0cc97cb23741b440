"""Which cases to look at again, counted by hand."""

import numpy as np
import pytest

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.evaluation import Evaluation
from evalcore.per_case import agreement_within_units, cases
from evalcore.plan import Plan
from evalcore.schemes import SCHEMES

from .checks import table_of
from .test_judged import judged_of

NAN = float("nan")


def found_of(answers, labels, *, units=None, answered_from="one", by_unit=None) -> Evaluation:
    """Linear discriminant that named these classes, -1 where a case was not held out."""
    table = table_of(labels, units=units)
    plan = Plan(
        table.roles,
        (choose(SCHEMES, "bootstrap"),),
        (choose(CANDIDATES, "lda"),),
        answered_from=answered_from,
    )
    given = {"n_classes": table.n_classes, "scheme": "bootstrap"}
    parts = [judged_of(answers, table.labels, **given)]
    if by_unit is not None:
        parts.append(judged_of(by_unit, table.unit_labels, counted_by="unit", **given))
    rounds = {"bootstrap": parts[0].held.rounds}
    return Evaluation(table, plan, rounds, {"bootstrap": len(answers)}, tuple(parts), (), {})


# one column a case
ANSWERS = np.array([
    [0, 1, 2, -1, 0, 1],
    [0, 1, 1, -1, 1, 1],
    [1, 1, 2, -1, 2, -1],
    [-1, 1, 1, -1, 0, -1],
])  # fmt: skip
LABELS = [0, 0, 0, 1, 1, 2]


def fields(record):
    return (record.name, record.of_class, record.times, record.wrong, record.named, record.flips)


def test_by_hand():
    by_name = {c.name: fields(c)[1:] for c in cases(found_of(ANSWERS, LABELS), "lda")}
    same = pytest.approx
    # a, a, b: of 3 pairs of rounds 2 differ
    assert by_name["u0"] == ("a", 3, same(1 / 3), "b", same(2 / 3))
    assert by_name["u1"] == ("a", 4, 1.0, "b", 0.0)
    # c, b, c, b: named equally often, the first; 4 of 6 pairs differ
    assert by_name["u2"] == ("a", 4, 1.0, "b", same(4 / 6))
    assert by_name["u3"] == ("b", 0, same(NAN, nan_ok=True), "", same(NAN, nan_ok=True))
    # a, b, c, a: the right one does not count as named; 5 of 6 pairs differ
    assert by_name["u4"] == ("b", 4, 0.75, "a", same(5 / 6))
    assert by_name["u5"] == ("c", 2, 1.0, "b", 0.0)


def test_wrong_most_often_first_then_as_in_the_table():
    names = [c.name for c in cases(found_of(ANSWERS, LABELS), "lda")]
    assert names == ["u1", "u2", "u5", "u4", "u0", "u3"]


def test_never_wrong_stands_before_never_held_out():
    found = cases(found_of([[-1, 1, 0, -1]], [0, 1, 0, 1]), "lda")
    assert [c.name for c in found] == ["u1", "u2", "u0", "u3"]
    assert found[0].wrong == 0
    assert found[0].named == ""


def test_one_round_says_nothing_of_flips():
    first = cases(found_of([[1, 1]], [0, 1]), "lda")[0]
    assert first.times == 1
    assert np.isnan(first.flips)


def test_rows_are_named_by_line_and_units_by_name():
    units = [0, 0, 1, 1]
    given = {"units": units, "by_unit": [[1, 1]]}
    found = found_of([[0, 1, 0, 1]], [0, 0, 1, 1], **given)
    # the file's first line is its header
    assert [c.name for c in cases(found, "lda")] == ["line 3", "line 4", "line 2", "line 5"]
    by_unit = cases(found, "lda", counted_by="unit")
    assert [(c.name, c.of_class, c.wrong) for c in by_unit] == [("u0", "a", 1.0), ("u1", "b", 0.0)]
    whole = found_of([[0, 1, 0, 1]], [0, 0, 1, 1], answered_from="all", **given)
    assert [c.name for c in cases(whole, "lda")] == ["u0", "u1"]


def test_agreement_within_units():
    units = [0, 0, 0, 1, 1, 2]
    answers = [
        [0, 0, 1, 0, 1, 0],
        [1, 1, 1, -1, -1, 1],
        [-1, -1, -1, 1, 1, 0],
        [-1, -1, -1, 0, 1, -1],
    ]
    found = found_of(answers, [0, 0, 0, 1, 1, 0], units=units, by_unit=[[0, 0, 0]])
    # of u0 1 + 3 of 6 pairs agree, of u1 1 of 3; u2 has no pair
    assert agreement_within_units(found, "lda") == pytest.approx((4 / 6 + 1 / 3) / 2, rel=1e-15)


def test_rows_of_a_unit_in_different_rounds_are_no_pair():
    found = found_of(
        [[0, -1, 1, 1], [-1, 1, -1, -1]], [0, 0, 1, 1], units=[0, 0, 1, 1], by_unit=[[0, 1]]
    )
    assert agreement_within_units(found, "lda") == 1.0


def test_no_agreement_without_units_or_pairs():
    assert np.isnan(agreement_within_units(found_of([[0, 1]], [0, 1]), "lda"))
    apart = found_of([[0, -1, 1], [-1, 0, -1]], [0, 0, 1], units=[0, 0, 1], by_unit=[[0, 1]])
    assert np.isnan(agreement_within_units(apart, "lda"))
