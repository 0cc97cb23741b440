"""Which settings rounds picked, counted by hand, and the figures made of it."""

from collections import Counter

import numpy as np
import pytest

from evalcore.answers import Answers
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.picked import IN_ROUNDS, ON_ALL, picked
from evalcore.plan import Plan
from evalcore.schemes import SCHEMES

from .checks import carried_out, table_of

GRID = choose(CANDIDATES, "nearest_neighbours", k=(1, 5), scaling=("standard", "none"))
OPTIONS = ("k=1,scaling=standard", "k=1,scaling=none", "k=5,scaling=standard", "k=5,scaling=none")


def answers(places) -> Answers:
    return Answers(np.zeros((0, 2)), {}, {}, None if places is None else np.array(places))


class TestPicked:
    def test_shares_of_rounds(self):
        found = picked(
            GRID, "near", "bootstrap", given=answers([2, 0, 2, 3, 2]), whole=answers([3])
        )
        assert found.options == OPTIONS
        assert found.shares.tolist() == [1 / 5, 0.0, 3 / 5, 1 / 5]
        assert found.on_all == 3
        assert (found.candidate, found.scheme) == ("near", "bootstrap")

    def test_only_what_differs_is_named(self):
        grid = choose(CANDIDATES, "nearest_neighbours", k=(9, 1), scaling="none")
        found = picked(grid, "near", "bootstrap", given=answers([1]), whole=answers([0]))
        assert found.options == ("k=9", "k=1")

    @pytest.mark.parametrize(("given", "whole"), [(None, None), (None, [0]), ([0], None)])
    def test_none_where_nothing_is_tuned(self, given, whole):
        choice = choose(CANDIDATES, "lda")
        assert (
            picked(choice, "lda", "bootstrap", given=answers(given), whole=answers(whole)) is None
        )


class TestInAnEvaluation:
    rng = np.random.default_rng(5)
    labels = np.repeat([0, 1], 15)
    table = table_of(
        labels.tolist(), features=rng.normal(size=(30, 3)) * [1, 9, 1] + labels[:, None]
    )
    plan = Plan(
        table.roles,
        (choose(SCHEMES, "bootstrap", rounds=20), choose(SCHEMES, "cross_validation", repeats=2)),
        (choose(CANDIDATES, "lda"), GRID, choose(CANDIDATES, "logistic", C=(0.01, 1.0))),
    )
    evaluation, given = carried_out(table, plan)

    def test_every_scheme_and_tuned_candidate(self):
        found = {(p.scheme, p.candidate): p for p in self.evaluation.beside.picked}
        assert set(found) == {
            (scheme, candidate)
            for scheme in ("bootstrap", "cross_validation")
            for candidate in ("nearest_neighbours", "logistic")
        }
        for key, each in found.items():
            times = Counter(self.given[key].picked.tolist())
            rounds = sum(times.values())
            assert rounds == {"bootstrap": 20, "cross_validation": 10}[key[0]]
            assert each.shares.tolist() == [times[o] / rounds for o in range(len(each.options))]
        # the fit on all cases is one, whatever the scheme
        for candidate in ("nearest_neighbours", "logistic"):
            schemes = ("bootstrap", "cross_validation")
            assert len({found[scheme, candidate].on_all for scheme in schemes}) == 1
        assert len(set(self.given["bootstrap", "nearest_neighbours"].picked.tolist())) > 1

    def test_figures(self):
        rows = [e for e in self.evaluation.beside.estimates if e.estimator in (IN_ROUNDS, ON_ALL)]
        keys = [(e.candidate, e.scheme, e.estimator, e.measure) for e in rows]
        assert len(set(keys)) == len(keys) == 2 * 2 * (4 + 2)
        for each in self.evaluation.beside.picked:
            mine = [e for e in rows if (e.candidate, e.scheme) == (each.candidate, each.scheme)]
            in_rounds = {e.measure: e for e in mine if e.estimator == IN_ROUNDS}
            on_all = {e.measure: e for e in mine if e.estimator == ON_ALL}
            assert tuple(in_rounds) == tuple(on_all) == each.options
            assert [e.value for e in in_rounds.values()] == each.shares.tolist()
            assert sum(e.value for e in on_all.values()) == 1.0
            assert on_all[each.options[each.on_all]].value == 1.0
            assert {e.rounds for e in in_rounds.values()} == {
                len(self.given[each.scheme, each.candidate].picked)
            }
            assert {(e.n, e.interval, e.of_class, e.undefined_rounds) for e in mine} == {
                (30, None, "", 0)
            }
