"""Settings: read from text, held to their kind and bounds."""

import pytest

from evalcore.errors import PlanError
from evalcore.settings import Setting

from .checks import exactly


class TestSettings:
    whole = Setting("folds", "Parts", "whole", 5, 2, 100)
    number = Setting("C", "Strength", "number", 1.0, 1e-4, 1e4)
    yes_no = Setting("stratified", "Keep shares", "yes_no", True)
    choice = Setting("scaling", "Scaling", "choice", "standard", choices=("standard", "none"))
    column = Setting("keep", "Keep together", "column", "")

    def test_read(self):
        assert self.whole.read("12") == 12
        assert self.number.read("0.25") == 0.25
        assert self.yes_no.read("yes") is True
        assert self.yes_no.read("no") is False
        assert self.choice.read("none") == "none"
        assert self.column.read("harvest year") == "harvest year"

    @pytest.mark.parametrize(
        ("setting", "text", "message"),
        [
            (whole, "3.5", "`folds` must be a whole number; got '3.5'."),
            (number, "much", "`C` must be a number; got 'much'."),
            (yes_no, "true", "`stratified` must be yes or no; got 'true'."),
        ],
    )
    def test_refuses_to_read(self, setting, text, message):
        with pytest.raises(PlanError, match=exactly(message)):
            setting.read(text)

    @pytest.mark.parametrize(
        ("setting", "value", "message"),
        [
            (whole, 1, "`folds` must be between 2 and 100; got 1."),
            (whole, 101, "`folds` must be between 2 and 100; got 101."),
            (number, 2e4, "`C` must be between 0.0001 and 10000; got 20000.0."),
            (number, float("nan"), "`C` must be between 0.0001 and 10000; got nan."),
            (whole, 2.0, "`folds` must be a whole number; got 2.0."),
            (whole, True, "`folds` must be a whole number; got True."),
            (yes_no, 1, "`stratified` must be yes or no; got 1."),
            (column, 7, "`keep` must be the name of a column; got 7."),
            (choice, "robust", "`scaling` must be standard or none; got 'robust'."),
        ],
    )
    def test_refuses_values(self, setting, value, message):
        with pytest.raises(PlanError, match=exactly(message)):
            setting.check(value)

    def test_both_bounds_are_allowed(self):
        for value in (2, 100):
            assert self.whole.check(value) is None

    @pytest.mark.parametrize("name", ["", "producer", "Größe (mm)"])
    def test_any_text_may_name_a_column(self, name):
        assert self.column.check(name) is None
