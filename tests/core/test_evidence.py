"""Which simulated tables resemble the user's, and the packaged table itself."""

import dataclasses
import math
from operator import attrgetter

import pytest

from evalcore import evidence
from evalcore.at_cut_off import ESTIMATOR as AT_CUT_OFF
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose, choose_written
from evalcore.cut_off_rule import CutOffRule
from evalcore.evidence import Headline, Line, like, read
from tests.studies.coverage import FIGURES, SHARES
from tests.studies.mechanisms import MECHANISMS


def line(**changes) -> Line:
    """A line about tables of 60 cases, 30 of each of two classes."""
    usual = Line(
        scenario="gauss",
        n=60,
        counted_by="case",
        features=5,
        classes=2,
        rows=1,
        smallest_class=30,
        candidate="lda",
        cut_off="",
        scheme="default",
        estimator="held_out_by_case",
        interval="wilson_model_variance",
        measure="accuracy",
        coverage=0.95,
        monte_carlo_error=0.007,
        bias=0.0,
        rmse=0.05,
        width=0.2,
        tables=1000,
        without_interval=0,
    )
    return dataclasses.replace(usual, **changes)


def asked(**changes) -> Headline:
    usual = Headline(
        candidate=choose(CANDIDATES, "lda"),
        cut_off=None,
        called=0,
        scheme="default",
        estimator="held_out_by_case",
        measure="accuracy",
        counted_by="case",
        n=60,
        smallest_class=30,
        cases=60,
        features=5,
        classes=2,
    )
    return dataclasses.replace(usual, **changes)


def line_at(rule: str, **changes) -> Line:
    """A line about answers at cut-offs for the smallest class."""
    return line(**{"cut_off": rule, "estimator": AT_CUT_OFF} | changes)


def asked_at(rule: str, **changes) -> Headline:
    """The same asked at a cut-off for class b, of 30."""
    given = {"cut_off": CutOffRule.read(f"b:{rule}"), "called": 30, "estimator": AT_CUT_OFF}
    return asked(**given | changes)


class TestLike:
    @pytest.mark.parametrize(
        ("of_line", "of_user"),
        [
            ({}, {}),
            # three halves either way, ends included
            ({"n": 40}, {}),
            ({"n": 90}, {}),
            ({"smallest_class": 20}, {}),
            ({"smallest_class": 45}, {}),
            ({"smallest_class": 4.5}, {"smallest_class": 3}),
            # more than two classes are alike
            ({"classes": 3}, {"classes": 5}),
            # settings written out or left to their default
            ({"candidate": "logistic"}, {"candidate": choose_written(CANDIDATES, "logistic:C=1")}),
            (
                {"candidate": "nearest_neighbours:k=15"},
                {"candidate": choose(CANDIDATES, "nearest_neighbours", k=15)},
            ),
            # units count; rows of each may be as many as they like
            ({"rows": 6, "counted_by": "unit"}, {"cases": 120, "counted_by": "unit"}),
            # as many features: 50 are more than a third of 60 cases, 30 are half of them
            ({"features": 50}, {"features": 30}),
            ({}, {"features": 29}),
        ],
    )
    def test_these_are(self, of_line, of_user):
        given = line(**of_line)
        assert like(asked(**of_user), [given]) == (given,)

    @pytest.mark.parametrize(
        ("of_line", "of_user"),
        [
            ({"n": 39}, {}),
            ({"n": 91}, {}),
            ({"smallest_class": 19.5}, {}),
            ({"smallest_class": 45.5}, {}),
            ({"classes": 3}, {}),
            ({}, {"classes": 3}),
            ({"candidate": "qda"}, {}),
            ({"candidate": "logistic"}, {"candidate": choose(CANDIDATES, "logistic", C=2.0)}),
            (
                {"candidate": "nearest_neighbours:k=5"},
                {"candidate": choose(CANDIDATES, "nearest_neighbours", k=(5, 15))},
            ),
            ({"candidate": "best of all 8"}, {}),
            ({"candidate": "lda against qda"}, {}),
            ({"scheme": "bootstrap"}, {}),
            ({"estimator": "verdict"}, {}),
            ({"measure": "auc"}, {}),
            ({"rows": 6, "counted_by": "unit"}, {"cases": 120}),
            ({"rows": 6}, {}),
            ({}, {"cases": 120}),
            ({"features": 50}, {"features": 29}),
            ({}, {"features": 30}),
        ],
    )
    def test_these_are_not(self, of_line, of_user):
        assert like(asked(**of_user), [line(**of_line)]) == ()

    def test_rows_of_units_count_when_features_are_held_against_cases(self):
        # ten units of six rows: 5 features are fewer than a third of 60 cases
        assert not line(n=10, rows=6).many_features
        assert line(n=15, rows=1, features=6).many_features
        assert not line(n=15, rows=1, features=5).many_features


class TestCutOffsLearnedAlike:
    """Of 60 cases half are of the class, so that costs stand to each other as miss to alarm."""

    @pytest.mark.parametrize(
        ("studied", "of_user"),
        [
            ("floor=0.9", "floor=0.9"),
            # left out of the class: 0.15 to 0.1 is three halves, ends included; 0.1 to 0.07
            ("floor=0.9", "floor=0.85"),
            ("floor=0.85", "floor=0.9"),
            ("floor=0.9", "floor=0.93"),
            ("floor=0.25", "floor=0.5"),
            ("floor=0.5", "floor=0.25"),
            ("miss=5,alarm=1", "miss=5"),
            ("miss=5,alarm=1", "miss=50,alarm=10"),
            # 7.5 and 10/3 to 5 are three halves either way
            ("miss=5,alarm=1", "miss=7.5"),
            ("miss=5,alarm=1", "miss=10,alarm=3"),
            # the share in use: 5 x 0.6/0.4 = 7.5, 5 x 0.4/0.6 = 10/3, 20 x 0.2/0.8 = 5
            ("miss=5,alarm=1", "miss=5,share=0.6"),
            ("miss=5,alarm=1", "miss=5,share=0.4"),
            ("miss=5,alarm=1", "miss=20,share=0.2"),
            # the middle of a range: 0.6
            ("miss=5,alarm=1", "miss=5,share=0.5-0.7"),
            # of the study too: 5 x 0.2/0.8 = 1.25
            ("miss=5,alarm=1,share=0.2", "miss=1.25"),
            # what is left to a person changes no cut-off
            ("floor=0.9", "floor=0.9,undecided=0.7"),
        ],
    )
    def test_these_are(self, studied, of_user):
        given = line_at(studied)
        assert like(asked_at(of_user), [given]) == (given,)

    @pytest.mark.parametrize(
        ("studied", "of_user"),
        [
            # 0.05, 0.06 and 0.16 to 0.1; 0.76 to 0.5
            ("floor=0.9", "floor=0.95"),
            ("floor=0.9", "floor=0.94"),
            ("floor=0.9", "floor=0.84"),
            ("floor=0.5", "floor=0.24"),
            ("miss=5,alarm=1", "miss=7.6"),
            ("miss=5,alarm=1", "miss=10,alarm=3.1"),
            ("miss=5,alarm=1", "miss=1,alarm=5"),
            # 5 x 0.61/0.39 = 7.8, 5 x 0.39/0.61 = 3.2, 5 x 0.62/0.38 = 8.2
            ("miss=5,alarm=1", "miss=5,share=0.61"),
            ("miss=5,alarm=1", "miss=5,share=0.39"),
            ("miss=5,alarm=1", "miss=5,share=0.5-0.74"),
            ("miss=5,alarm=1,share=0.2", "miss=5"),
            # found in another way, also where what goes unsaid (miss 1, floor 0) is near
            ("floor=0.9", "miss=5"),
            ("floor=0.9", "miss=1"),
            ("miss=5,alarm=1", "floor=0.9"),
            ("miss=5,alarm=1", "floor=0.25"),
            # fixed ones are like nothing, not even each other
            ("floor=0.9", "at=0.5,set_on=2026-01-15"),
            ("miss=5,alarm=1", "at=0.5"),
            ("at=0.5", "at=0.5"),
        ],
    )
    def test_these_are_not(self, studied, of_user):
        assert like(asked_at(of_user), [line_at(studied)]) == ()

    def test_without_a_rule_only_lines_without_one(self):
        known = [line(estimator=AT_CUT_OFF), line_at("floor=0.9"), line_at("miss=5,alarm=1")]
        assert like(asked(estimator=AT_CUT_OFF), known) == (known[0],)
        assert like(asked_at("floor=0.9"), known) == (known[1],)
        assert like(asked_at("miss=5"), known) == (known[2],)
        assert like(asked_at("at=0.5"), known) == ()

    @pytest.mark.parametrize(
        ("called", "alike"), [(19, False), (20, True), (30, True), (45, True), (46, False)]
    )
    def test_the_called_class_is_as_large_as_the_smallest_that_was_studied(self, called, alike):
        # three halves of 30 either way, whatever the smallest class of the user's table
        for rule in ("floor=0.9", f"miss={5 * (90 - called) / called}"):  # 5 in all
            given = asked_at(rule, called=called, n=90, cases=90)
            studied = line_at("floor=0.9" if rule.startswith("floor") else "miss=5,alarm=1")
            assert like(given, [studied]) == ((studied,) if alike else ())

    @pytest.mark.parametrize(
        ("called", "alike"), [(23, False), (25, True), (35, True), (37, False)]
    )
    def test_unstated_shares_are_those_of_the_table(self, called, alike):
        # 5 x 23/37 = 3.1, 5 x 25/35 = 3.6, 5 x 35/25 = 7, 5 x 37/23 = 8.0
        given, studied = asked_at("miss=5", called=called), line_at("miss=5,alarm=1")
        assert like(given, [studied]) == ((studied,) if alike else ())

    def test_shares_are_of_units(self):
        # 30 of 60 units, not of 360 rows
        studied = line_at("miss=5,alarm=1", rows=6, counted_by="unit")
        assert like(asked_at("miss=5", cases=360, counted_by="unit"), [studied]) == (studied,)

    @pytest.mark.parametrize(
        ("miss", "alike"), [(1.6, False), (1.7, True), (3.7, True), (3.8, False)]
    )
    def test_of_the_study_too(self, miss, alike):
        # 5 x (20/60)/(40/60) = 2.5
        studied = line_at("miss=5,alarm=1", smallest_class=20)
        assert like(asked_at(f"miss={miss}"), [studied]) == ((studied,) if alike else ())

    def test_costs_three_halves_apart_are_alike_whatever_the_share(self):
        for of_class in range(6, 55):
            size = {"smallest_class": of_class}
            studied = line_at("miss=5,alarm=1", **size)
            given = asked_at("miss=7.5", called=of_class, **size)
            assert like(given, [studied]) == (studied,), of_class

    def test_auc_knows_no_cut_off(self):
        auc = {"measure": "auc", "estimator": "mean_of_rounds_alone"}
        known = [line(**auc), line_at("floor=0.9", **auc)]
        for given in (
            asked(**auc),
            *(asked_at(rule, **auc) for rule in ("floor=0.9", "miss=5", "at=0.5")),
            asked_at("floor=0.9", called=2, **auc),
        ):
            assert like(given, known) == (known[0],)


class TestShort:
    @pytest.mark.parametrize(
        ("estimator", "coverage", "error", "short"),
        [
            # coverage and two errors, in binary fractions: 29/32 = 0.906, 30/32 = 0.9375
            ("held_out_by_case", 29 / 32, 0, True),
            ("held_out_by_case", 29 / 32, 1 / 64, False),
            ("held_out_by_case", 30 / 32, 0, False),
            # false words in 2/32 = 0.0625, less two errors 0.0469
            ("verdict", 30 / 32, 0, True),
            ("verdict", 30 / 32, 1 / 128, False),
            ("comparison", 31 / 32, 0, False),
            ("comparison", 29 / 32, 1 / 64, True),
            ("held_out_by_case", math.nan, math.nan, False),
        ],
    )
    def test_by_more_than_two_errors_of_the_simulation(self, estimator, coverage, error, short):
        given = line(estimator=estimator, coverage=coverage, monte_carlo_error=error)
        assert given.short is short


class TestTells:
    @pytest.mark.parametrize(
        ("estimator", "tables", "without", "tells"),
        [
            ("held_out_by_case", 100, 0, True),
            ("held_out_by_case", 99, 0, False),
            ("held_out_by_case", 1000, 900, True),
            ("held_out_by_case", 1000, 901, False),
            # a word is said of each table, with an interval or not
            ("verdict", 1000, 1000, True),
            ("comparison", 100, 100, True),
            ("verdict", 99, 0, False),
        ],
    )
    def test_a_hundred_tables_with_what_it_is_about(self, estimator, tables, without, tells):
        given = line(estimator=estimator, coverage=0.5, tables=tables, without_interval=without)
        assert given.tells is tells
        # what does not tell is not called short, however low
        assert given.short is tells


class TestRead:
    HEADER = ",".join(field.name for field in dataclasses.fields(Line))
    ROW = "units,20,unit,5,2,6,9.5,lda,,default,verdict,,accuracy,0.9810,0.0043,nan,nan,nan,1000,3"

    def test_values_are_typed(self):
        (found,) = read(f"{self.HEADER}\n{self.ROW}\n")
        assert (found.n, found.rows, found.smallest_class, found.cut_off) == (20, 6, 9.5, "")
        assert (found.coverage, found.tables, found.interval) == (0.981, 1000, "")
        assert math.isnan(found.width)

    def test_a_rule_of_two_costs_is_one_value(self):
        row = self.ROW.replace("lda,", 'lda,"miss=5,alarm=1"', 1)
        (found,) = read(f"{self.HEADER}\n{row}\n")
        assert (found.candidate, found.cut_off) == ("lda", "miss=5,alarm=1")

    def test_columns_must_be_those(self):
        with pytest.raises(TypeError):
            read("scenario,n\ngauss,60\n")
        with pytest.raises(KeyError):
            read(f"{self.HEADER},more\n{self.ROW},1\n")


class TestPackaged:
    """Whatever the figures are: the file is whole and says what it should."""

    def test_every_scenario_and_every_figure_has_lines(self):
        known = [x for x in evidence.lines() if not x.cut_off]
        assert {x.scenario for x in known} == set(MECHANISMS)
        by_the_highest_score = {figure for figure in FIGURES if figure[1] != AT_CUT_OFF}
        given = {(x.scheme, x.estimator, x.measure) for x in known}
        assert given >= by_the_highest_score
        assert AT_CUT_OFF not in {by for _, by, _ in given}
        assert {x.estimator for x in known} >= {"verdict", "difference", "comparison"}

    def test_every_rule_has_its_figures_and_its_verdicts(self):
        verdicts = {("default", "verdict", measure) for measure in SHARES}
        least = verdicts | {("default", AT_CUT_OFF, measure) for measure in SHARES}
        known = [x for x in evidence.lines() if x.cut_off]
        for rule in {x.cut_off for x in known}:
            given = {(x.scheme, x.estimator, x.measure) for x in known if x.cut_off == rule}
            assert least <= given <= verdicts | {f for f in FIGURES if f[1] == AT_CUT_OFF}

    def test_rules_learn_the_cut_off_of_one_of_two_classes(self):
        for x in evidence.lines():
            if x.cut_off:
                rule = CutOffRule.read(f"smallest class:{x.cut_off}")
                assert rule.written() == f"smallest class:{x.cut_off}"
                assert (rule.by in ("floor", "cost"), x.classes) == (True, 2)

    def test_shares_are_shares_and_tables_are_counted(self):
        for x in evidence.lines():
            assert x.tables > 0
            assert 0 <= x.without_interval <= x.tables
            assert x.smallest_class > 0
            if math.isnan(x.coverage):
                assert x.without_interval == x.tables
            else:
                assert 0 <= x.coverage <= 1
                assert 0 < x.monte_carlo_error < 0.5

    def test_cells_are_those_of_the_mechanisms(self):
        for x in evidence.lines():
            mechanism = MECHANISMS[x.scenario]
            assert x.classes == len(mechanism.shares)
            assert x.rows == mechanism.rows
            assert x.many_features == (x.scenario == "p50")
            assert x.counted_by in (("unit", "case") if x.rows > 1 else ("case",))

    def test_each_figure_of_a_cell_stands_once(self):
        cell = attrgetter("scenario", "n", "counted_by", "candidate", "cut_off")
        figure = attrgetter("scheme", "estimator", "measure")
        keys = [(cell(x), figure(x)) for x in evidence.lines()]
        assert len(set(keys)) == len(keys)

    def test_candidates_that_figures_are_of_can_be_chosen(self):
        figures = ("held_out_by_case", AT_CUT_OFF)
        told = {x.candidate for x in evidence.lines() if x.estimator in figures}
        assert {choose_written(CANDIDATES, written).key for written in told} <= set(CANDIDATES)
