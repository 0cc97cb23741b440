"""The parts a judgement is made of, and what they refuse."""

import dataclasses
import math

import numpy as np
import pytest

from evalcore.errors import TableError
from evalcore.figures import Finding, Interval
from evalcore.table import Column, Roles, Table

from .checks import exactly, table_of

FINDING = Finding("check", "note", "", "title", "seen", "advice", 0.7, 0.8, "wilson1927")


class TestInterval:
    def test_width(self):
        found = Interval(0.62, 0.91, 0.95, "wilson")
        assert found.width == pytest.approx(0.29)
        assert found.defined

    def test_undefined(self):
        found = Interval(math.nan, math.nan, 0.95, "wilson")
        assert not found.defined
        assert math.isnan(found.width)

    @pytest.mark.parametrize("level", [0, 1, 1.2, -0.1])
    def test_refuses_levels(self, level):
        message = f"`level` must be between 0 and 1, both excluded; got {level}."
        with pytest.raises(ValueError, match=exactly(message)):
            Interval(0.6, 0.9, level, "wilson")

    def test_refuses_ends_the_wrong_way_round(self):
        message = "`low` must not exceed `high`; got 0.9 and 0.6."
        with pytest.raises(ValueError, match=exactly(message)):
            Interval(0.9, 0.6, 0.95, "wilson")


class TestFinding:
    def test_refuses_severities(self):
        message = "`severity` must be one of ('grave', 'moderate', 'note'); got 'mild'."
        with pytest.raises(ValueError, match=exactly(message)):
            dataclasses.replace(FINDING, severity="mild")

    def test_refuses_sources_that_are_not_listed(self):
        message = "`source` must be a key of SOURCES; got 'hearsay'."
        with pytest.raises(ValueError, match=exactly(message)):
            dataclasses.replace(FINDING, source="hearsay")


class TestTable:
    made = table_of([0, 1, 0, 1, 1], units=[0, 1, 0, 2, 2])

    def test_counts(self):
        assert (self.made.n_cases, self.made.n_units, self.made.n_classes) == (5, 3, 2)
        assert self.made.class_counts("case").tolist() == [2, 3]
        assert self.made.class_counts("unit").tolist() == [1, 2]
        assert self.made.labels_by("unit").tolist() == [0, 1, 1]

    def test_nouns(self):
        assert self.made.noun_for("case").plural == "rows"
        assert self.made.noun_for("unit") == self.made.noun
        assert table_of([0, 1]).noun_for("case").plural == "cases"

    def test_the_fingerprint_sees_every_value(self):
        base = {"labels": [0, 1, 0, 1], "features": [[1, 2], [3, 4], [5, 6], [7, np.nan]]}
        changes = [
            {},
            {"labels": [0, 1, 1, 0]},
            {"features": [[1, 2], [3, 4], [5, 6], [7, 8]]},
            {"features": [[1, 2], [3, 4], [5, 6], [np.nan, 7]]},
            {"units": [0, 1, 0, 2]},
            {"classes": ("a", "z")},
        ]
        prints = {table_of(**(base | change)).fingerprint for change in changes}
        assert len(prints) == len(changes)
        assert table_of(**base).fingerprint in prints

    def test_the_fingerprint_sees_which_unit_a_case_is_of(self):
        one, other = (table_of([0, 1, 1, 1], units=units) for units in ([0, 1, 1, 2], [0, 1, 2, 2]))
        assert one.unit_names == other.unit_names
        assert one.fingerprint != other.fingerprint

    def test_arrays_are_read_only(self):
        for array in (self.made.features, self.made.labels, self.made.units, self.made.lines):
            with pytest.raises(ValueError, match="read-only"):
                array[0] = 1

    def test_refuses_one_class(self):
        message = "The column ‘class’ holds one class only (‘a’); at least two are needed."
        with pytest.raises(TableError, match=exactly(message)):
            table_of([0, 0])

    def test_missing_values_of_a_column(self):
        assert Column("x", "number", np.array([1.5, np.nan, np.nan])).missing == 2

    def test_refuses_to_be_without_columns(self):
        message = (
            "No column is left for the candidates to learn from; keep at least one besides the "
            "label ‘class’."
        )
        index = np.array([0, 1])
        with pytest.raises(TableError, match=exactly(message)):
            Table("t.csv", (), index, ("a", "b"), index, ("u", "v"), Roles("class"), index, 2)
