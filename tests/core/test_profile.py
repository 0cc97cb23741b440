"""What a table holds, counted by hand."""

import numpy as np
import pytest

from evalcore.profile import class_shares, majority, profile, smallest_class
from evalcore.table import Roles

from .checks import table_from, table_of


class TestClasses:
    # units 0..4 of classes a, b, b, c, b with 1, 3, 1, 2, 1 cases
    table = table_of([0, 1, 1, 1, 1, 2, 2, 1], units=[0, 1, 1, 1, 2, 3, 3, 4])

    def test_shares(self):
        found = [
            (s.name, s.units, s.unit_share, s.cases, s.case_share) for s in class_shares(self.table)
        ]
        assert found == [
            ("a", 1, pytest.approx(1 / 5), 1, pytest.approx(1 / 8)),
            ("b", 3, pytest.approx(3 / 5), 5, pytest.approx(5 / 8)),
            ("c", 1, pytest.approx(1 / 5), 2, pytest.approx(2 / 8)),
        ]

    def test_majority(self):
        assert majority(self.table, "unit") == (1, pytest.approx(3 / 5))
        assert majority(self.table, "case") == (1, pytest.approx(5 / 8))

    def test_smallest_class_is_the_first_of_equals(self):
        assert smallest_class(self.table) == (0, 1)

    def test_a_mixed_unit_belongs_to_its_most_frequent_class(self):
        table = table_of([0, 1, 1, 0, 1, 0, 1], units=[0, 0, 0, 1, 1, 2, 3])
        assert table.unit_labels.tolist() == [1, 0, 0, 1]
        assert table.mixed_units.tolist() == [0, 1]
        assert profile(table).mixed_units == 2


class TestColumns:
    def test_penguins(self):
        # values from memory of the printed summary of R's palmerpenguins: 152 + 68 + 124
        # penguins, 11 without sex, 2 without measurements, body mass 2700, 4050, 6300
        table = table_from("penguins.csv", Roles("species"))
        found = profile(table)
        assert [(s.name, s.cases) for s in found.classes] == [
            ("Adelie", 152),
            ("Chinstrap", 68),
            ("Gentoo", 124),
        ]
        columns = {column.name: column for column in found.columns}
        assert (columns["sex"].kind, columns["sex"].missing) == ("text", 11)
        assert columns["sex"].categories == ("female", "male")
        assert columns["island"].categories == ("Biscoe", "Dream", "Torgersen")
        mass = columns["body_mass_g"]
        assert (mass.missing, mass.low, mass.median, mass.high) == (2, 2700, 4050, 6300)
        assert np.isnan(columns["sex"].median)
        assert found.incomplete_cases == 11


class TestCopies:
    def test_counted_by_hand(self):
        x = [[1, 2], [1, 2], [3, 4], [5, 6], [5, 6], [5, 6]]
        # rows 0, 1: alike, one class; rows 3, 4, 5: alike, classes a, b, b
        found = profile(table_of([0, 0, 1, 0, 1, 1], features=x))
        # row 1 equals row 0, row 5 equals row 4
        assert found.copied_cases == 2
        # rows 3, 4 and 5 each equal a row of another class
        assert found.contradicting_cases == 3

    def test_within_a_unit_there_are_no_copies(self):
        x = [[1, 2], [1, 2], [3, 4], [1, 2]]
        found = profile(table_of([0, 0, 1, 0], units=[0, 0, 1, 2], features=x))
        assert found.copied_cases == 1

    def test_missing_values_may_be_alike(self):
        x = [[1, np.nan], [1, np.nan], [np.nan, 1]]
        assert profile(table_of([0, 0, 1], features=x)).copied_cases == 1

    def test_a_negative_zero_is_a_zero(self):
        assert profile(table_of([0, 0, 1], features=[[0.0], [-0.0], [1.0]])).copied_cases == 1
