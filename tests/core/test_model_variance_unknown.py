"""The doubt that an interval leaves the model's variance out: of all cases, or of one class."""

import dataclasses
import math

import numpy as np
import pytest

from evalcore.choice import choose
from evalcore.schemes import SCHEMES
from evalcore.wording import NBSP

from .checks import table_of
from .test_findings import (
    BOOTSTRAP,
    CV,
    a_plan,
    bags,
    evaluated,
    found,
    halves,
    of_rounds,
    only,
    rounds_of,
    two_classes,
    wrong_in,
)

UNKNOWN = "model_variance_unknown"
SECOND = "take random subsampling or the bootstrap, be it as a second scheme"
FIVE = table_of([0] * 40 + [1] * 5)


def one_of_b(repeats: int = 2, held: int = 1):
    """Five folds of eight cases of a and one of b, or so many of b in five folds."""
    of_a, of_b = np.arange(40) % 5, np.arange(5)
    out = [[*(of_a == r), *((of_b - r) % 5 < held)] for _ in range(repeats) for r in range(5)]
    return rounds_of(out, np.repeat(range(repeats), 5))


def numbers(given):
    return [(f.severity, f.subject, f.value, f.threshold) for f in found(UNKNOWN, *given)]


class TestOfAClass:
    def test_where_one_is_held_out_at_a_time(self):
        given = of_rounds({CV: one_of_b()}, table=FIVE)
        part = given[2].part("logistic", CV)
        assert not math.isnan(part.tau2)
        assert not math.isnan(part.tau2_of(0))
        assert math.isnan(part.tau2_of(1))
        assert numbers(given) == [("moderate", "b", 1, 2)]
        finding = only(UNKNOWN, *given)
        assert finding.title.replace(NBSP, " ") == (
            "The interval of b cases leaves out how much the model itself varies: rounds hold out "
            "1 of them at a time that is independent, 2 are needed"
        )
        assert finding.advice == (
            "Take fewer folds, or take random subsampling or the bootstrap, be it as a second scheme."
        )

    def test_not_where_two_are_held_out_together_twice(self):
        assert numbers(of_rounds({CV: one_of_b(held=2)}, table=FIVE)) == []

    def test_not_where_another_scheme_tells(self):
        two = {CV: one_of_b(), BOOTSTRAP: one_of_b(held=2)}
        assert numbers(of_rounds(two, table=FIVE)) == []
        # one that holds out one of b, too, does not
        alike = {CV: one_of_b(), BOOTSTRAP: one_of_b(repeats=3)}
        assert numbers(of_rounds(alike, table=FIVE)) == [("moderate", "b", 1, 2)]

    def test_of_both_classes_in_their_order(self):
        table = table_of([0] * 5 + [1] * 5)
        out = [[*(np.arange(5) == r), *(np.arange(5) == r)] for r in range(5)] * 2
        given = of_rounds({CV: rounds_of(out, np.repeat([0, 1], 5))}, table=table)
        assert [f.subject for f in found(UNKNOWN, *given)] == ["a", "b"]

    def test_not_where_the_class_has_no_interval(self):
        # the fit on all cases names a alone, and rounds do not
        plan = a_plan()
        made = evaluated(FIVE, plan, {CV: one_of_b()}, whole=np.zeros(45, dtype=int))
        assert made.part("logistic", CV).always_names == 0
        assert found(UNKNOWN, FIVE, plan, made) == []

    def test_once_of_all_it_is_not_said_of_classes_too(self):
        given = of_rounds({CV: one_of_b(repeats=1)}, table=FIVE)
        assert numbers(given) == [("moderate", CV, 1, 2)]


class TestOfAll:
    def test_another_scheme_may_tell(self):
        table = two_classes()
        once = halves(100, repeats=1)
        assert numbers(of_rounds({CV: once}, table=table)) == [("moderate", CV, 1, 2)]
        # a bootstrap of two rounds holds each case out once
        assert numbers(of_rounds({CV: once, BOOTSTRAP: bags(100)}, table=table)) == [
            ("moderate", CV, 1, 2)
        ]
        assert numbers(of_rounds({CV: once, BOOTSTRAP: halves(100)}, table=table)) == []

    def test_where_each_was_answered_at_most_once(self):
        finding = only(UNKNOWN, *of_rounds({CV: halves(100, repeats=1)}, table=two_classes()))
        assert finding.title == (
            "The interval leaves out how much the model itself varies: each case was answered at "
            "most once, twice is needed"
        )
        assert finding.seen.startswith(
            "Each case is held out in at most 1 round of the first scheme, and no other scheme "
            "holds one out more often; from 2 on, the model's variance can be told apart. "
        )
        assert finding.advice == f"Repeat the cross-validation, or {SECOND}."

    def by_site(self, at_a_time: int, repeats: int = 2):
        """Ten sites of both classes, so many held out together, each once a repeat."""
        site = np.arange(40) % 10
        entries = {"site": [f"s{at}" for at in site]}
        table = two_classes(20, entries=entries)
        scheme = choose(SCHEMES, CV, folds=10 // at_a_time, repeats=repeats, keep="site")
        plan = dataclasses.replace(a_plan(), schemes=(scheme,))
        folds = range(0, 10, at_a_time)
        out = [(site >= f) & (site < f + at_a_time) for f in folds] * repeats
        rounds = rounds_of(out, np.repeat(range(repeats), len(folds)))
        chosen = np.array([wrong_in(table, range(r % 5)) for r in range(len(out))])
        return of_rounds({CV: rounds}, table=table, plan=plan, chosen={CV: chosen})

    def test_where_blocks_are_held_out_repeatedly_but_one_at_a_time(self):
        given = self.by_site(1)
        part = given[2].part("logistic", CV)
        assert part.held.rounds.times_tested.tolist() == [2] * 40
        # each round holds one site's four cases: no pair of independent ones was answered together
        per_round = [set(np.arange(40)[out > 0] % 10) for out in part.held.rounds.test]
        assert [len(sites) for sites in per_round] == [1] * 20
        assert math.isnan(part.tau2)
        assert numbers(given) == [("moderate", CV, 1, 2)]
        finding = only(UNKNOWN, *given)
        assert finding.title == (
            "The interval leaves out how much the model itself varies: rounds hold out 1 block at "
            "a time, 2 are needed"
        )
        assert finding.seen.startswith(
            "Only answers to independent cases of one round tell how models differ; from 2 on, "
            "the model's variance can be told apart. "
        )
        assert finding.advice == f"Take fewer folds, or {SECOND}."

    def test_not_where_two_blocks_are_held_out_together_repeatedly(self):
        given = self.by_site(2)
        assert not math.isnan(given[2].part("logistic", CV).tau2)
        assert numbers(given) == []

    def test_blocks_held_out_once_are_answered_once(self):
        for at_a_time in (1, 2):
            finding = only(UNKNOWN, *self.by_site(at_a_time, repeats=1))
            assert finding.title.endswith(": each case was answered at most once, twice is needed")

    @pytest.mark.parametrize(("sites", "raised"), [(4, 0), (5, 1)])
    def test_not_of_too_few_blocks_as_they_have_no_interval(self, sites, raised):
        table = two_classes(10, entries={"site": [f"s{i % sites}" for i in range(20)]})
        scheme = choose(SCHEMES, "leave_block_out", column="site")
        plan = dataclasses.replace(a_plan(), schemes=(scheme,))
        made = evaluated(table, plan, plan.draw(table))
        assert len(found(UNKNOWN, table, plan, made)) == raised

    def test_without_blocks_it_is_cases_that_are_held_out_one_at_a_time(self):
        table = two_classes(5)
        rounds = rounds_of(np.tile(np.eye(10, dtype=bool), (2, 1)), np.repeat([0, 1], 10))
        finding = only(UNKNOWN, *of_rounds({CV: rounds}, table=table))
        assert finding.title.endswith("varies: rounds hold out 1 case at a time, 2 are needed")
