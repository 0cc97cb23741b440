"""What counted cases resemble each other by, and what that is called."""

from dataclasses import replace

import numpy as np
import pytest

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.clusters import clusters, independent_noun, named_in
from evalcore.plan import Plan
from evalcore.schemes import SCHEMES
from evalcore.wording import Noun

from .checks import table_of


class TestClusters:
    labels = np.repeat([0, 1, 0, 1, 0, 1], 2)
    units = np.repeat(np.arange(6), 2)
    site = ("x", "x", "y", "y", "x", "x", "z", "z", "y", "y", "z", "z")

    def found(self, scheme, *, units=None, counted_by="case"):
        table = table_of(self.labels, units=units, entries={"site": self.site})
        plan = Plan(table.roles, (scheme,), (choose(CANDIDATES, "lda"),), answered_from="one")
        return clusters(table, plan, plan.scheme_names[0], counted_by=counted_by)

    def test_rows_of_units(self):
        cv = choose(SCHEMES, "cross_validation", folds=2)
        assert self.found(cv, units=self.units).tolist() == self.units.tolist()
        assert self.found(cv, units=self.units, counted_by="unit") is None
        assert self.found(cv) is None

    @pytest.mark.parametrize(
        "scheme",
        [
            choose(SCHEMES, "cross_validation", folds=2, keep="site"),
            choose(SCHEMES, "leave_block_out", column="site"),
        ],
        ids=["keep", "blocks"],
    )
    def test_what_a_scheme_keeps_together(self, scheme):
        def alike(given):
            return [[a == b for b in given] for a in given]

        by_row = alike(self.site)
        assert alike(self.found(scheme).tolist()) == by_row
        assert alike(self.found(scheme, units=self.units).tolist()) == by_row
        by_unit = self.found(scheme, units=self.units, counted_by="unit")
        assert alike(by_unit.tolist()) == alike(self.site[::2])


class TestIndependentNoun:
    """Two rows a lot, six lots, three sites."""

    CV = choose(SCHEMES, "cross_validation", folds=2)
    KEPT = choose(SCHEMES, "cross_validation", folds=2, keep="site")
    BLOCKS = choose(SCHEMES, "leave_block_out", column="site")

    def noun(self, scheme, *, units=True, counted_by="case", site=TestClusters.site):
        table = table_of(
            TestClusters.labels,
            units=TestClusters.units if units else None,
            entries={"site": site, "line": range(12)},
        )
        roles = replace(table.roles, noun=Noun("lot", "lots"))
        table = replace(table, roles=roles)
        plan = Plan(roles, (scheme,), (choose(CANDIDATES, "lda"),), answered_from="one")
        return independent_noun(table, plan, plan.scheme_names[0], counted_by=counted_by)

    def test_what_is_counted_where_nothing_is_alike(self):
        assert self.noun(self.CV, counted_by="unit") == Noun("lot", "lots")
        assert self.noun(self.CV, units=False) == Noun("lot", "lots")

    def test_lots_where_their_rows_are_counted(self):
        assert self.noun(self.CV) == Noun("lot", "lots")

    @pytest.mark.parametrize("scheme", [KEPT, BLOCKS], ids=["keep", "blocks"])
    @pytest.mark.parametrize(("units", "way"), [(True, "unit"), (True, "case"), (False, "case")])
    def test_groups_that_are_kept_together(self, scheme, units, way):
        expected = Noun("entry of ‘site’", "entries of ‘site’")
        assert self.noun(scheme, units=units, counted_by=way) == expected

    def test_groups_of_one_are_no_groups(self):
        alone = [f"s{unit}" for unit in TestClusters.units]
        assert self.noun(self.KEPT, counted_by="unit", site=alone) == Noun("lot", "lots")


@pytest.mark.parametrize(
    ("of_class", "independent", "expected"),
    [
        (
            "failing",
            Noun("entry of ‘site’", "entries of ‘site’"),
            "entries of ‘site’ with failing lots",
        ),
        ("failing", Noun("lot", "lots"), "failing lots"),
        ("", Noun("entry of ‘site’", "entries of ‘site’"), "entries of ‘site’"),
        ("", Noun("lot", "lots"), "lots"),
        # a class named by a number is quoted, as elsewhere
        ("1", Noun("lot", "lots"), "‘1’ lots"),
    ],
)
def test_what_is_independent_and_holds_a_class(of_class, independent, expected):
    assert named_in(of_class, independent, Noun("lot", "lots")) == expected
