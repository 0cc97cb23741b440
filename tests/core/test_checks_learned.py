"""Doubts about what was learned or checked beside the estimates: where each begins and ends."""

import dataclasses
import math

import pytest

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.schemes import SCHEMES
from evalcore.wording import NBSP

from .checks import table_of
from .learned_cases import a_curve, beside, chance, picks
from .test_findings import (
    BOOTSTRAP,
    CV,
    LDA,
    LOGISTIC,
    STRENGTH,
    K,
    a_plan,
    alone,
    found,
    halves,
    of_rounds,
    only,
    permuted,
    picked,
    rising,
)


class TestPickedSettings:
    def test_other_schemes_are_not_asked(self):
        for check, shares in (
            ("settings_unsteady", (0.25, 0.375, 0.375)),
            ("grid_too_narrow", (0.0, 0.0, 1.0)),
        ):
            given = beside(alone(K), picked=(picks(K, *shares, scheme=BOOTSTRAP),))
            assert found(check, *given) == []

    def test_the_low_end_where_more_is_allowed(self):
        finding = only("grid_too_narrow", *picked(STRENGTH, 0.75, 0.25, 0.0))
        assert "C=0.1" in finding.title

    def test_not_where_nothing_is_allowed_beyond(self):
        assert found("grid_too_narrow", *picked(K, 1.0, 0.0, 0.0)) == []
        most = choose(CANDIDATES, "nearest_neighbours", k=(5, 15, 200))
        assert found("grid_too_narrow", *picked(most, 0.0, 0.0, 1.0)) == []

    def test_as_listed_does_not_matter(self):
        mixed = choose(CANDIDATES, "svm", C=(1.0, 10.0, 0.1))
        assert len(found("grid_too_narrow", *picked(mixed, 0.0, 1.0, 0.0))) == 1
        assert found("grid_too_narrow", *picked(mixed, 1.0, 0.0, 0.0)) == []

    def test_two_numbers_or_words_or_two_settings_have_no_end(self):
        two = choose(CANDIDATES, "svm", C=(0.1, 1.0))
        words = choose(CANDIDATES, "nearest_neighbours", scaling=("standard", "none"))
        both = choose(CANDIDATES, "nearest_neighbours", k=(3, 5, 15), scaling=("standard", "none"))
        for choice in (two, words, both):
            last = len(choice.options) - 1
            given = picked(choice, *[0.0] * last, 1.0)
            assert found("grid_too_narrow", *given) == []


class TestChance:
    @pytest.mark.parametrize(
        ("as_good", "tables", "severity", "p"),
        [
            (0, 4, "moderate", 1 / 5),  # the least that four tables can give
            (1, 4, "grave", 2 / 5),
            (0, 18, "moderate", 1 / 19),
            (1, 19, "grave", 2 / 20),  # nineteen are enough for 0.05
            (1, 199, None, 2 / 200),
            (9, 199, None, 10 / 200),
            (10, 199, "grave", 11 / 200),
            (9, 198, "grave", 10 / 199),
        ],
    )
    def test_p_by_the_count(self, as_good, tables, severity, p):
        given = permuted(*[0.9] * as_good, *[0.5] * (tables - as_good))
        if severity is None:
            assert found("not_told_from_chance", *given) == []
            return
        finding = only("not_told_from_chance", *given)
        assert (finding.severity, finding.value) == (severity, pytest.approx(p, rel=1e-12))
        assert finding.title == (
            f"Logistic regression is not told from chance: p{NBSP}={NBSP}{p:.4f}"
        )
        short = tables < 19
        assert (f"cannot be below {1 / (tables + 1):.4f}." in finding.seen) == short
        assert finding.advice.startswith("Permute more often" if short else "Do not rely on it")

    def test_the_best_of_all_is_no_candidate_of_its_own(self):
        given = chance(alone(), 0.5, [0.9] * 20, best=True)
        assert found("not_told_from_chance", *given) == []
        assert found("permuted_off_chance", *given) == []

    def test_a_figure_that_is_undefined_is_not_told_from_anything(self):
        assert found("not_told_from_chance", *chance(alone(), math.nan, [0.5] * 20)) == []

    def test_tables_that_could_not_be_judged_count_as_good_and_not_in_the_mean(self):
        # 2 of 21: (2 + 1)/(21 + 1)
        given = permuted(math.nan, math.nan, *[0.5] * 19)
        assert only("not_told_from_chance", *given).value == pytest.approx(3 / 22, rel=1e-12)
        assert found("permuted_off_chance", *given) == []
        given = permuted(math.nan, *[0.6] * 19)
        finding = only("permuted_off_chance", *given)
        assert finding.value == pytest.approx(0.6, rel=1e-12)
        assert "Over 19 permuted tables" in finding.seen

    def test_below_guessing_too(self):
        finding = only("permuted_off_chance", *permuted(*[0.43, 0.45] * 10))
        assert finding.value == pytest.approx(0.44, rel=1e-12)
        assert f"6.0{NBSP}points below guessing" in finding.title

    def test_few_that_scatter_may_be_off_by_chance(self):
        # mean 0.6, standard error 0.3 sqrt(4/3)/2 = 0.173
        assert found("permuted_off_chance", *permuted(0.3, 0.9, 0.3, 0.9)) == []
        # 0.06 sqrt(4/3)/2 = 0.0346: three of them are 0.104, a little more than the 0.1 seen
        assert found("permuted_off_chance", *permuted(0.54, 0.66, 0.54, 0.66)) == []
        # 0.02 sqrt(4/3)/2 = 0.0115: three of them are 0.035
        assert len(found("permuted_off_chance", *permuted(0.58, 0.62, 0.58, 0.62))) == 1
        assert found("permuted_off_chance", *permuted(0.9)) == []

    def test_what_guessing_gives_depends_on_measure_and_classes(self):
        for measure, tables, number in (
            ("accuracy", [0.7] * 20, 0),  # depends on the shares of the classes
            ("auc", [0.7] * 20, 1),
            ("sensitivity", [0.7] * 20, 1),  # by balanced accuracy
        ):
            given = permuted(*tables, measure=measure)
            assert len(found("permuted_off_chance", *given)) == number, measure
        three = of_rounds({CV: halves(30)}, table=table_of([0, 1, 2] * 10), plan=a_plan())
        assert found("permuted_off_chance", *chance(three, 0.9, [1 / 3] * 20)) == []
        finding = only("permuted_off_chance", *chance(three, 0.9, [0.5] * 20))
        assert (finding.value, finding.threshold) == pytest.approx((0.5, 1 / 3), rel=1e-12)

    def test_chance_of_every_candidate_but_leakage_of_the_answer_s_alone(self):
        given = chance(alone(), 0.5, [0.9] * 20, candidate="logistic")
        assert len(found("permuted_off_chance", *given)) == 1
        plan = a_plan(candidates=(LOGISTIC, LDA))
        two = of_rounds({CV: halves(100)}, plan=plan)
        given = chance(two, 0.5, [0.9] * 20, candidate="lda")
        assert [f.subject for f in found("not_told_from_chance", *given)] == ["lda"]
        assert found("permuted_off_chance", *given) == []

    @pytest.mark.parametrize(
        ("of_groups", "within"),
        [
            ([0, 0, 1, 1], False),  # groups of one class each trade labels as wholes
            ([0, 1, 0, 1], True),  # mixed ones keep their shares, and so what a group tells
        ],
    )
    def test_where_labels_trade_within_groups_groups_are_not_chance(self, of_groups, within):
        table = table_of(of_groups * 10, entries={"site": [f"s{i // 2}" for i in range(40)]})
        kept = choose(SCHEMES, CV, folds=2, repeats=2, keep="site")
        plan = dataclasses.replace(a_plan(), schemes=(kept,))
        given = of_rounds({CV: halves(40)}, table=table, plan=plan)
        finding = only("not_told_from_chance", *chance(given, 0.5, [0.7] * 20))
        assert finding.severity == ("moderate" if within else "grave")
        than = "what is kept together alone" if within else "chance"
        assert finding.title.startswith(f"Logistic regression is not told from {than}: p")
        assert ("permuted within what is kept together it" in finding.seen) == within
        # 0.7 where guessing gives 0.5, but groups that stay tell of the classes
        off = found("permuted_off_chance", *chance(given, 0.9, [0.7] * 20))
        assert len(off) == (0 if within else 1)


class TestLearningCurve:
    @pytest.mark.parametrize(
        ("scheme", "said"),
        [
            ("leave_block_out", "The headline leaves out each entry of ‘year’; "),
            ("forward_in_time", "The headline goes by ‘year’; "),
        ],
    )
    def test_of_single_cases_where_the_headline_goes_by_a_column(self, scheme, said):
        year = [str(2000 + i // 10) for i in range(60)]
        table = table_of([0, 1] * 30, entries={"year": year})
        plan = dataclasses.replace(a_plan(), schemes=(choose(SCHEMES, scheme, column="year"),))
        given = of_rounds(plan.draw(table), table=table, plan=plan)
        assert found("curve_deals_units", *given) == []
        finding = only("curve_deals_units", *beside(given, curves=(a_curve(given, 0.03),)))
        assert (finding.severity, finding.value, finding.threshold) == ("moderate", 0, 1)
        assert finding.seen.startswith(said + "the curve deals single cases, ")
        assert finding.title.startswith("The learning curve leaves out 0 entries of ‘year’ ")

    def test_one_that_keeps_groups_together_as_the_headline_does_is_right(self):
        table = table_of([0, 1] * 20, entries={"site": [f"s{i // 2}" for i in range(40)]})
        kept = choose(SCHEMES, CV, folds=2, repeats=2, keep="site")
        plan = dataclasses.replace(a_plan(), schemes=(kept,))
        given = of_rounds({CV: halves(40)}, table=table, plan=plan)
        curve = a_curve(given, 0.03)
        assert found("curve_deals_units", *beside(given, curves=(curve,))) == []

    def test_says_of_which_measure(self):
        given = alone()
        curves = (a_curve(given, 0.03), a_curve(given, 0.02, of_class="b"))
        first, second = found("still_rising", *beside(given, curves=curves))
        assert (first.subject, second.subject) == ("logistic", "b")
        assert first.seen.startswith("Mean of the classes’ shares right (balanced accuracy): ")
        assert second.seen.startswith("B cases passed (specificity): ")
        assert first.title.replace(NBSP, " ") == (
            "Logistic regression still learns from more cases: 10.0 points of balanced accuracy "
            "over the last doubling"
        )
        assert first.seen.endswith(" The threshold for the lower end is 0.")

    def test_flat_or_of_another_candidate_says_nothing(self):
        assert found("still_rising", *rising(0.01, "flat")) == []
        plan = a_plan(candidates=(LOGISTIC, LDA))
        given = of_rounds({CV: halves(100)}, plan=plan)
        curve = a_curve(given, 0.03)
        other = dataclasses.replace(curve, part=given[2].part("lda", CV))
        assert found("still_rising", *beside(given, curves=(other,))) == []
        assert len(found("still_rising", *beside(given, curves=(curve,)))) == 1
