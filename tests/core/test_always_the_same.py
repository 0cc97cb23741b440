"""A final model that names one class alone, while those of the rounds name others too."""

import math

import numpy as np
import pytest

from evalcore.estimated import default_interval
from evalcore.judged import Judged
from evalcore.judged_intervals import offers_interval
from evalcore.limit import Limit
from evalcore.verdict import verdicts

from .test_findings import CV, a_plan, evaluated, halves, two_classes, wrong_in
from .test_judged import judged_of

NAN = math.nan


class TestAlwaysTheSame:
    """A final model that names class 1 alone, by its confusion counts on all cases."""

    LABELS = np.repeat([0, 1], 10)
    ONE = ([[0, 10], [0, 10]], NAN)

    def part(self, *, whole=ONE, wrong=1, **rest) -> Judged:
        answers = np.ones((4, 20), dtype=int)
        answers[:, :wrong] = 0
        return judged_of(answers, self.LABELS, whole=whole, **rest)

    def test_while_rounds_name_others_too(self):
        part = self.part()
        assert part.always_names == 1
        for k in (0, 1):
            assert not offers_interval(part, k)
            assert default_interval(a_plan(), part, "sensitivity", k) is None
        assert offers_interval(part)
        assert default_interval(a_plan(), part, "accuracy", 0).defined
        assert default_interval(a_plan(), part, "balanced_accuracy", 0).defined

    @pytest.mark.parametrize(
        "part",
        [
            pytest.param({"wrong": 0}, id="rounds as constant"),
            pytest.param({"whole": ([[1, 9], [0, 10]], NAN)}, id="one case named otherwise"),
            pytest.param({"cut_offs": "learned"}, id="answers at a cut-off"),
            pytest.param({"cut_offs": "fixed"}, id="answers at a stated cut-off"),
        ],
    )
    def test_not(self, part):
        made = self.part(**part)
        assert made.always_names is None
        assert offers_interval(made, 0)


@pytest.mark.parametrize("constant", [True, False])
def test_no_limit_on_a_class_is_shown_but_one_on_all_is(constant):
    table = two_classes(50)
    limits = (Limit("sensitivity", 0.5, "a"), Limit("accuracy", 0.5))
    plan = a_plan(limits=limits)
    whole = np.zeros(100, dtype=int) if constant else table.labels
    found = evaluated(
        table,
        plan,
        {CV: halves(100)},
        chosen={CV: wrong_in(table, range(50, 53))},
        whole=whole,
    )
    of_class, of_all = verdicts(found, "logistic")
    assert of_class.value == 1
    assert (of_class.word, of_all.word) == ("not shown yet" if constant else "shown", "shown")
    assert math.isnan(of_class.at_least) == constant
    estimate = found.estimate("sensitivity", "logistic", of_class="a")
    assert (estimate.interval is None) == constant
