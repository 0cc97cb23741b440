"""Which simulated tables resemble the user's, what is said of them, and the packaged table itself."""

import dataclasses
import math

import numpy as np
import pytest

from evalcore import evidence
from evalcore.answer import best_sentence
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose, choose_written
from evalcore.cut_off import CutOffRule
from evalcore.evaluation import Evaluation
from evalcore.evidence import Headline, Line, falling_short, headline, like, read, sentence
from evalcore.plan import Plan, recommended_schemes
from evalcore.schemes import SCHEMES
from evalcore.summary import design
from evalcore.wording import NBSP
from tests.studies.coverage import FIGURES
from tests.studies.mechanisms import MECHANISMS

from .checks import carried_out, table_of

CV, BOOTSTRAP = choose(SCHEMES, "cross_validation"), choose(SCHEMES, "bootstrap")


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


@pytest.fixture(scope="module")
def evaluation() -> Evaluation:
    """Thirty cases of each class under the recommended schemes, all rounds."""
    rng = np.random.default_rng(1)
    labels = [0] * 30 + [1] * 30
    table = table_of(labels, features=rng.normal(size=(60, 5)) + np.array(labels)[:, None])
    candidates = (choose(CANDIDATES, "lda"), choose(CANDIDATES, "naive_bayes"))
    plan = Plan(table.roles, recommended_schemes(table), candidates, measure="accuracy")
    return carried_out(table, plan)[0]


def planned(evaluation: Evaluation, **changes) -> Evaluation:
    return dataclasses.replace(evaluation, plan=dataclasses.replace(evaluation.plan, **changes))


class TestHeadline:
    def test_of_the_recommended_plan(self, evaluation):
        assert headline(evaluation) == asked()

    def test_is_about_the_candidate_of_the_answer(self, evaluation):
        given = headline(planned(evaluation, about="naive_bayes"))
        assert given == asked(candidate=choose(CANDIDATES, "naive_bayes"))

    def test_of_sensitivity_is_the_balanced_one(self, evaluation):
        for measure in ("balanced_accuracy", "sensitivity"):
            assert headline(planned(evaluation, measure=measure)).measure == "balanced_accuracy"

    def test_of_auc_goes_by_the_schemes_that_bear_on_its_interval(self, evaluation):
        auc = planned(evaluation, measure="auc")
        assert headline(auc) == asked(measure="auc", estimator="mean_of_rounds")
        alone = planned(auc, schemes=(CV,))
        assert headline(alone) == asked(measure="auc", estimator="mean_of_rounds_alone")
        fewer = choose(SCHEMES, "bootstrap", rounds=50)
        assert headline(planned(auc, schemes=(CV, fewer))) is None
        assert headline(planned(evaluation, schemes=(CV, fewer))) == asked()

    def test_of_the_bootstrap_as_the_first_scheme(self, evaluation):
        rounds = {"bootstrap": evaluation.rounds["bootstrap"]}
        alone = planned(dataclasses.replace(evaluation, rounds=rounds), schemes=(BOOTSTRAP,))
        assert headline(alone) == asked(scheme="bootstrap")

    def test_counts_units(self):
        labels = np.repeat([0, 1], 60)
        table = table_of(labels.tolist(), units=np.arange(120) // 2)
        lda = (choose(CANDIDATES, "lda"),)
        plan = Plan(table.roles, (CV,), lda, measure="accuracy")
        found = carried_out(table, plan)[0]
        given = asked(counted_by="unit", cases=120, features=1)
        assert headline(found) == given
        assert headline(planned(found, answered_from="one")) == dataclasses.replace(
            given, counted_by="case"
        )

    def test_nothing_of_the_kind_was_studied(self, evaluation):
        assert headline(planned(evaluation, level=0.9)) is None
        more = choose(SCHEMES, "cross_validation", repeats=21)
        assert headline(planned(evaluation, schemes=(more, BOOTSTRAP))) is None


def said(evaluation: Evaluation, *among: Line) -> str:
    return sentence(evaluation, among).replace(NBSP, " ")


class TestSentence:
    def test_of_several_kinds_of_tables(self, evaluation):
        others = [
            line(n=40, smallest_class=20.5, coverage=0.971, scenario="sep", tables=1200),
            line(coverage=0.2, candidate="qda"),
        ]
        assert said(evaluation, line(coverage=0.953), *others) == (
            "In 2,200 simulated tables like this one in size (40 to 60 cases, about 20 to 30 in "
            "the smallest class; 2 kinds of data), the 95 % interval of this candidate’s accuracy "
            "held the true value in 95.3 % to 97.1 %; real tables may be otherwise."
        )

    def test_of_one_kind_and_with_tables_that_had_no_interval(self, evaluation):
        given = line(measure="balanced_accuracy", tables=1000, without_interval=100)
        assert said(planned(evaluation, measure="balanced_accuracy"), given) == (
            "In 900 simulated tables like this one in size (60 cases, about 30 in the smallest "
            "class; 1 kind of data), the 95 % interval of this candidate’s balanced accuracy held "
            "the true value in 95.0 %, with none in 100 more; real tables may be otherwise."
        )

    def test_of_units(self):
        given = [line(rows=6, n=20, smallest_class=9), line(rows=6, n=30, smallest_class=12)]
        assert evidence.size_in_words(given).replace(NBSP, " ") == (
            "20 to 30 units of 6 rows, about 9 to 12 in the smallest class; 1 kind of data"
        )

    def test_figures_at_a_learned_cut_off_were_not_studied(self, evaluation):
        rule = CutOffRule("b", "floor", floor=0.8)
        plan = dataclasses.replace(evaluation.plan, schemes=(CV,), cut_off=rule)
        found = carried_out(evaluation.table, plan)[0]
        assert headline(found) == asked(estimator="at_cut_off")
        assert said(found, line()).startswith("No simulated table resembles this one (")
        auc = planned(found, measure="auc")
        assert headline(auc) == asked(measure="auc", estimator="mean_of_rounds_alone")

    def test_where_nothing_is_alike(self, evaluation):
        expected = (
            "No simulated table resembles this one (candidate, scheme, level, cut-off, number of "
            "cases, smallest class, features), so whether the interval keeps its word here is not "
            "measured."
        )
        assert said(evaluation) == expected
        assert said(evaluation, line(n=200)) == expected
        assert said(planned(evaluation, level=0.9), line()) == expected
        never = line(coverage=math.nan, without_interval=1000)
        assert said(evaluation, never) == expected

    def test_none_without_an_interval_or_while_rounds_are_missing(self, evaluation):
        assert said(evaluation, line()) != ""
        key = ("accuracy", "held_out_by_case")
        bare = tuple(
            dataclasses.replace(e, interval=None) if (e.measure, e.estimator) == key else e
            for e in evaluation.estimates
        )
        assert said(dataclasses.replace(evaluation, estimates=bare), line()) == ""
        more = evaluation.planned | {"cross_validation": 101}
        assert said(dataclasses.replace(evaluation, planned=more), line()) == ""

    def test_only_auc_waits_for_the_second_scheme(self, evaluation):
        unfinished = dataclasses.replace(
            evaluation, planned=evaluation.planned | {"bootstrap": 201}
        )
        assert said(unfinished, line()) != ""
        assert said(planned(unfinished, measure="auc"), line()) == ""


def test_the_summary_quotes_it_between_what_intervals_are_and_who_came_out_best(evaluation):
    given = design(evaluation)
    assert given[-2:] == (sentence(evaluation), best_sentence(evaluation))
    assert given[-3].startswith("Intervals are two-sided")
    missing = dataclasses.replace(
        evaluation, planned=evaluation.planned | {"cross_validation": 101}
    )
    assert all(design(missing))


class TestFallingShort:
    def test_lines_alike_that_are_short(self, evaluation):
        short = line(coverage=0.887, monte_carlo_error=0.01)
        given = [line(), short, dataclasses.replace(short, n=200), line(coverage=0.92)]
        assert falling_short(evaluation, given) == (short,)

    def test_not_while_rounds_are_missing(self, evaluation):
        more = evaluation.planned | {"cross_validation": 101}
        unfinished = dataclasses.replace(evaluation, planned=more)
        assert falling_short(unfinished, [line(coverage=0.8)]) == ()
        assert len(falling_short(evaluation, [line(coverage=0.8)])) == 1


class TestRead:
    HEADER = ",".join(field.name for field in dataclasses.fields(Line))
    ROW = "units,20,unit,5,2,6,9.5,lda,default,verdict,,accuracy,0.9810,0.0043,nan,nan,nan,1000,3"

    def test_values_are_typed(self):
        (found,) = read(f"{self.HEADER}\n{self.ROW}\n")
        assert (found.n, found.rows, found.smallest_class) == (20, 6, 9.5)
        assert (found.coverage, found.tables, found.interval) == (0.981, 1000, "")
        assert math.isnan(found.width)

    def test_columns_must_be_those(self):
        with pytest.raises(TypeError):
            read("scenario,n\ngauss,60\n")
        with pytest.raises(KeyError):
            read(f"{self.HEADER},more\n{self.ROW},1\n")


class TestPackaged:
    """Whatever the figures are: the file is whole and says what it should."""

    def test_every_scenario_and_every_figure_has_lines(self):
        known = evidence.lines()
        assert {x.scenario for x in known} == set(MECHANISMS)
        assert {(x.scheme, x.estimator, x.measure) for x in known} >= set(FIGURES)
        assert {x.estimator for x in known} >= {"verdict", "difference", "comparison"}

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
        keys = [
            (x.scenario, x.n, x.counted_by, x.candidate, x.scheme, x.estimator, x.measure)
            for x in evidence.lines()
        ]
        assert len(set(keys)) == len(keys)

    def test_candidates_that_figures_are_of_can_be_chosen(self):
        told = {x.candidate for x in evidence.lines() if x.estimator == "held_out_by_case"}
        assert {choose_written(CANDIDATES, written).key for written in told} <= set(CANDIDATES)
