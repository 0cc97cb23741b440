"""What the coverage study says of the user's own headline."""

import dataclasses
import math

import numpy as np
import pytest

from evalcore.answer import best_sentence
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off_rule import CutOffRule
from evalcore.evaluation import Evaluation
from evalcore.evidence import Line
from evalcore.evidence_quoted import (
    NONE_LIKE,
    falling_short,
    headline,
    matching,
    sentence,
    size_in_words,
)
from evalcore.plan import Plan, recommended_schemes
from evalcore.schemes import SCHEMES
from evalcore.summary import design
from evalcore.wording import NBSP

from .checks import carried_out, table_of
from .test_evidence import asked, asked_at, line, line_at

CV, BOOTSTRAP = choose(SCHEMES, "cross_validation"), choose(SCHEMES, "bootstrap")


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
        assert size_in_words(given).replace(NBSP, " ") == (
            "20 to 30 units of 6 rows, about 9 to 12 in the smallest class; 1 kind of data"
        )

    def test_where_nothing_is_alike(self, evaluation):
        expected = NONE_LIKE.replace(NBSP, " ")
        assert expected == (
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


def judged_at(evaluation: Evaluation, rule: str) -> Evaluation:
    """The same table under the recommended cross-validation, class b called from a cut-off up."""
    cut_off = CutOffRule.read(f"b:{rule}")
    plan = dataclasses.replace(evaluation.plan, schemes=(CV,), cut_off=cut_off)
    return carried_out(evaluation.table, plan)[0]


@pytest.fixture(scope="module")
def at_floor(evaluation) -> Evaluation:
    return judged_at(evaluation, "floor=0.9")


class TestAtCutOff:
    KNOWN = (
        line_at("floor=0.9"),
        line_at("floor=0.7"),
        line_at("miss=5,alarm=1"),
        line(),
        line_at("floor=0.9", estimator="verdict"),
    )

    @pytest.mark.parametrize(
        ("rule", "taken"),
        [("floor=0.9", [0]), ("floor=0.93", [0]), ("floor=0.95", []), ("floor=0.75", [1]),
         ("miss=6", [2]), ("miss=9", []), ("miss=9,share=0.4", [2])],
    )  # fmt: skip
    def test_takes_the_lines_with_its_rule(self, evaluation, rule, taken):
        found = judged_at(evaluation, rule)
        assert headline(found) == asked_at(rule)
        assert matching(found, self.KNOWN) == tuple(self.KNOWN[i] for i in taken)
        assert (said(found, *self.KNOWN) == NONE_LIKE.replace(NBSP, " ")) is (not taken)

    def test_lines_at_cut_offs_are_not_taken_by_the_highest_score(self, evaluation):
        assert matching(evaluation, self.KNOWN) == (line(),)

    def test_sentence(self, at_floor):
        given = line_at("floor=0.9", coverage=0.947), line(coverage=0.2), line(estimator="verdict")
        assert said(at_floor, *given) == (
            "In 1,000 simulated tables like this one in size (60 cases, about 30 in the smallest "
            "class; 1 kind of data; cut-offs learned alike), the 95 % interval of this candidate’s "
            "accuracy held the true value in 94.7 %; real tables may be otherwise."
        )

    def test_falling_short(self, at_floor):
        short = line_at("floor=0.9", coverage=0.887)
        assert falling_short(at_floor, [short, line_at("floor=0.9"), line(coverage=0.8)]) == (
            short,
        )

    def test_auc_is_quoted_as_without_one(self, at_floor):
        auc = {"measure": "auc", "estimator": "mean_of_rounds_alone"}
        by_auc = planned(at_floor, measure="auc")
        assert headline(by_auc) == asked_at("floor=0.9", **auc)
        known = (line(**auc), line_at("floor=0.9", coverage=0.2, **auc))
        assert matching(by_auc, known) == known[:1]
        assert "cut-offs" not in said(by_auc, *known)


class TestCalled:
    """Twenty-two cases or units of a and 38 of b, a fixed cut-off for either."""

    @pytest.mark.parametrize(("of_class", "called"), [("a", 22), ("b", 38)])
    @pytest.mark.parametrize("rows", [1, 2])
    def test_units_of_the_class_that_is_called(self, of_class, called, rows):
        labels = np.repeat([0, 1], [22 * rows, 38 * rows])
        units = np.arange(60 * rows) // rows if rows > 1 else None
        table = table_of(labels.tolist(), units=units)
        rule = CutOffRule(of_class, "fixed", at=0.5, set_on="2026-01-15")
        lda = (choose(CANDIDATES, "lda"),)
        plan = Plan(table.roles, (CV,), lda, measure="accuracy", cut_off=rule)
        found = carried_out(table, plan)[0]
        assert headline(found) == asked_at(
            "at=0.5,set_on=2026-01-15",
            cut_off=rule,
            called=called,
            smallest_class=22,
            features=1,
            cases=60 * rows,
            counted_by="unit" if rows > 1 else "case",
        )
        # a fixed one is like nothing that was studied
        assert sentence(found, [line(features=1), line_at("floor=0.9")]) == NONE_LIKE

    def test_none_where_the_answer_is_by_the_highest_score(self):
        table = table_of([0] * 30 + [1] * 30)
        rule = CutOffRule.read("b:at=0.5,set_on=2026-01-15")
        both = (choose(CANDIDATES, "majority"), choose(CANDIDATES, "lda"))
        plan = Plan(table.roles, (CV,), both, measure="accuracy", cut_off=rule)
        found = carried_out(table, plan)[0]
        given = headline(planned(found, about="majority"))
        assert given == asked(candidate=both[0], features=1)
        assert headline(found) == asked_at("at=0.5", cut_off=rule, features=1)


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

    def test_of_every_figure_that_the_answer_gives(self, evaluation):
        """Whatever its measure: the share right of all and of the smallest class stand in it."""
        by_class = line(measure="sensitivity", coverage=0.8)
        of_all, balanced = line(coverage=0.8), line(measure="balanced_accuracy", coverage=0.8)
        given = [by_class, of_all, balanced, line(measure="auc", coverage=0.8)]
        assert evaluation.plan.measure == "accuracy"
        assert falling_short(evaluation, given) == (of_all, by_class)
        by_balanced = planned(evaluation, measure="balanced_accuracy")
        assert falling_short(by_balanced, given) == (balanced, of_all, by_class)
        assert headline(by_balanced, "accuracy") == headline(evaluation)
        assert headline(evaluation, "sensitivity").measure == "sensitivity"

    def test_not_while_rounds_are_missing(self, evaluation):
        more = evaluation.planned | {"cross_validation": 101}
        unfinished = dataclasses.replace(evaluation, planned=more)
        assert falling_short(unfinished, [line(coverage=0.8)]) == ()
        assert len(falling_short(evaluation, [line(coverage=0.8)])) == 1
