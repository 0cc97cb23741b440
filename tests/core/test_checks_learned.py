"""Doubts about what was learned or checked beside the estimates: where each begins and ends."""

import dataclasses
import math

import numpy as np
import pytest

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off_rule import CutOffRule
from evalcore.limit import Limit
from evalcore.schemes import SCHEMES
from evalcore.wording import NBSP

from .checks import table_of
from .learned_cases import a_curve, as_given, at_floor, at_literal, beside, chance, picks
from .test_findings import (
    BOOTSTRAP,
    CV,
    FLOOR,
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
    wilson,
)


class TestCutOffs:
    def test_one_chosen_on_these_cases_is_grave_where_a_limit_is_set(self):
        limits = (Limit("accuracy", 0.8),)
        given = alone(cut_off=CutOffRule("b", "fixed", at=0.35), limits=limits)
        assert only("cut_off_chosen_here", *given).severity == "grave"

    def test_learned_ones_are_not_chosen_here(self):
        given = alone(cut_off=CutOffRule("b", "cost", miss=10))
        assert found("cut_off_chosen_here", *given) == []

    @pytest.mark.parametrize(
        ("floor", "of_class", "needed", "every"),
        [
            # nine for 9 of 10 and nineteen for 19 of 20, in all
            (0.9, 8, 9, True),
            (0.95, 18, 19, True),
            # and in the bags, each half of all: eight and nine of seventeen
            (0.9, 9, None, True),
            (0.9, 16, None, True),
            (0.9, 17, None, False),
            (0.9, 18, None, False),
            (0.95, 36, None, True),
            (0.95, 38, None, False),
        ],
    )
    def test_too_few_in_all_or_in_the_bags(self, floor, of_class, needed, every):
        rule = CutOffRule("b", "floor", floor=floor)
        given = as_given(at_floor(0, of_class=of_class, rule=rule))
        numbers = {
            check: [(f.value, f.threshold) for f in found(check, *given)]
            for check in ("floor_from_few", "cut_off_calls_all")
        }
        assert numbers == {
            "floor_from_few": [(of_class, needed)] if needed else [],
            "cut_off_calls_all": [(1, 0.5)] if every else [],
        }

    def test_too_few_in_the_bags_says_that_held_out_figures_are_of_something_else(self):
        given = as_given(at_floor(0, of_class=9, rule=FLOOR))
        finding = only("cut_off_calls_all", *given)
        assert finding.severity == "grave"
        assert finding.title.replace(NBSP, " ") == "In 100 % of rounds every case is called b"
        assert finding.seen.replace(NBSP, " ") == (
            "So held-out figures are those of a constant answer there (4 of 4 rounds; threshold: "
            "50 %)."
        )
        # and that another cut-off goes to work
        apart = only("cut_off_apart", *given)
        assert (apart.value, apart.threshold) == (0.5, -math.inf)
        assert apart.title == "The cut-off that goes to work, 0.500, lies apart from those that were judged"  # fmt: skip
        assert "of rounds it fell between calling all and calling all (" in apart.seen

    @pytest.mark.parametrize(
        "rule", [CutOffRule("b", "fixed", at=0.25), CutOffRule("b", "cost", miss=1000)], ids=str
    )
    def test_whatever_the_rule_a_constant_answer_is_said(self, rule):
        # scores are 0.25 and up; three cases of b score 0.25 inside the bags as those of a do
        given = at_floor(0, rule=rule)
        if rule.by == "cost":
            (at,) = given.beside.cut_offs
            nobody = np.zeros_like(at.part.held.scores)
            nobody[:, 1] = 1
            part = dataclasses.replace(
                at.part, held=dataclasses.replace(at.part.held, scores=nobody)
            )
            assert found("cut_off_calls_all", *as_given(given)) == []
            given = at_literal(given, part=part)
        finding = only("cut_off_calls_all", *as_given(given))
        assert (finding.severity, finding.subject) == ("grave", "b")
        assert (finding.value, finding.threshold) == (1, 0.5)

    @pytest.mark.parametrize(("rounds", "raised"), [(2, False), (3, True), (4, True)])
    def test_it_takes_more_than_half_of_the_rounds(self, rounds, raised):
        given = at_floor(0, rule=CutOffRule("b", "cost"))
        (at,) = given.beside.cut_offs
        held = at.part.held
        scores = held.scores.copy()
        scores[held.rounds.pairs[0] < rounds] = 0, 1
        part = dataclasses.replace(at.part, held=dataclasses.replace(held, scores=scores))
        values = [
            f.value for f in found("cut_off_calls_all", *as_given(at_literal(given, part=part)))
        ]
        assert values == ([rounds / 4] if raised else [])

    def test_all_called_the_other_class_is_not_this(self):
        given = as_given(at_floor(0, rule=CutOffRule("b", "fixed", at=0.9)))
        assert found("cut_off_calls_all", *given) == []

    def test_without_a_round_at_a_cut_off_nothing_is_called(self):
        given = at_floor(0, rule=FLOOR)
        (at,) = given.beside.cut_offs
        held = at.part.held
        none = dataclasses.replace(held, rounds=held.rounds.first(0), scores=held.scores[:0])
        part = dataclasses.replace(at.part, held=none)
        nothing = at_literal(given, part=part, cut_offs=np.full(4, math.nan))
        for check in ("cut_off_calls_all", "cut_off_apart"):
            assert found(check, *as_given(nothing)) == []

    def test_a_floor_counts_what_is_independent(self):
        # twenty cases of b in two blocks
        given = at_floor(0, rule=FLOOR)
        (at,) = given.beside.cut_offs
        part = dataclasses.replace(at.part, units=np.arange(40) % 2)
        assert found("floor_from_few", *as_given(given)) == []
        finding = only("floor_from_few", *as_given(at_literal(given, part=part, learned_from=2)))
        assert (finding.severity, finding.value, finding.threshold) == ("grave", 2, 9)
        assert finding.title.replace(NBSP, " ") == (
            "2 b independent cases cannot teach a floor of 90 %"
        )

    @pytest.mark.parametrize(
        ("on_all", "threshold"),
        [
            (0.2, 0.3), (0.3, None), (0.35, None), (0.5, None), (0.6, 0.5),
            (-math.inf, 0.3), (math.inf, 0.5), (math.nan, None),
        ],
    )  # fmt: skip
    def test_a_cut_off_beyond_either_end_was_not_judged(self, on_all, threshold):
        cut_offs = np.array([0.3, 0.4, 0.5, math.nan])
        given = at_literal(at_floor(0, rule=FLOOR), on_all=on_all, cut_offs=cut_offs)
        raised = found("cut_off_apart", *as_given(given))
        assert [f.threshold for f in raised] == ([] if threshold is None else [threshold])
        assert all((f.severity, f.subject, f.value) == ("moderate", "b", on_all) for f in raised)
        said = {-math.inf: "calling all", math.inf: "calling none"}
        for finding in raised:
            assert f"work, {said.get(on_all, f'{on_all:.3f}')}, lies" in finding.title
            assert "fell between 0.300 and 0.500 (" in finding.seen

    def test_a_fixed_cut_off_goes_to_work_as_it_was_judged(self):
        given = at_floor(0, rule=CutOffRule("b", "fixed", at=0.3))
        assert found("cut_off_apart", *as_given(at_literal(given, on_all=0.9))) == []

    def test_constant_answers_are_asked_of_every_rule_but_not_found_in_these(self):
        for rule in (CutOffRule("b", "cost"), CutOffRule("b", "fixed", at=0.6)):
            given = as_given(at_floor(6, of_class=8, rule=rule))
            assert found("cut_off_calls_all", *given) == []

    @pytest.mark.parametrize("check", ["floor_from_few", "floor_not_delivered"])
    def test_a_floor_is_asked_of_a_floor_alone(self, check):
        for rule in (CutOffRule("b", "cost"), CutOffRule("b", "fixed", at=0.6)):
            assert found(check, *as_given(at_floor(6, of_class=8, rule=rule))) == []

    # Wilson at 14 of 20 ends at 0.855, at 15 of 20 at 0.888, at 16 of 20 at 0.919
    @pytest.mark.parametrize(
        ("below", "severity"), [(3, "moderate"), (4, "moderate"), (5, "grave"), (6, "grave")]
    )
    def test_a_floor_above_the_interval_is_grave(self, below, severity):
        finding = only("floor_not_delivered", *as_given(at_floor(below, rule=FLOOR)))
        assert (finding.severity == "grave") == (wilson(20 - below, 20)[1] < 0.9)
        assert finding.severity == severity
        where = "lies above" if severity == "grave" else "is within"
        assert f"90{NBSP}%, which {where} the interval." in finding.seen

    def test_a_share_just_short_is_not_rounded_up_to_the_floor(self):
        # 224 of 250 are 89.6 %
        finding = only("floor_not_delivered", *as_given(at_floor(26, of_class=250, rule=FLOOR)))
        assert finding.value == pytest.approx(0.896, rel=1e-12)
        assert finding.title.replace(NBSP, " ") == (
            "The cut-off for at least 90 % of b cases finds 0.4 points less while they are held out"
        )

    def test_cases_never_held_out_are_not_behind_it(self):
        # in two of four rounds no cut-off was learned: ten of b were never answered
        found_ = at_floor(6, rule=FLOOR)
        (at,) = found_.beside.cut_offs
        held = at.part.held
        half = held.rounds.first(1)
        kept = dataclasses.replace(held, rounds=half, scores=held.scores[: half.test.sum()])
        part = dataclasses.replace(at.part, held=kept)
        finding = only("floor_not_delivered", *as_given(at_literal(found_, part=part)))
        # three of the ten even ones
        assert finding.value == pytest.approx(0.7, rel=1e-12)
        assert f"n{NBSP}={NBSP}10;" in finding.seen

    def test_without_an_interval_none_is_spoken_of(self):
        found_ = at_floor(6, rule=FLOOR)
        (at,) = found_.beside.cut_offs
        # two blocks, as of two sites, are too few to tell their variance
        part = dataclasses.replace(at.part, units=np.arange(40) % 2)
        finding = only("floor_not_delivered", *as_given(at_literal(found_, part=part)))
        assert finding.severity == "moderate"
        assert "interval" not in finding.seen

    def test_of_the_candidate_of_the_answer(self):
        table, plan, made = as_given(at_floor(6, of_class=8, rule=FLOOR))
        nobody = dataclasses.replace(made, beside=dataclasses.replace(made.beside, cut_offs=()))
        for check in (
            "cut_off_calls_all",
            "floor_from_few",
            "floor_not_delivered",
            "cut_off_apart",
        ):
            assert found(check, table, plan, nobody) == []


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
            "Logistic regression still learns from more cases: 10.0 points over the last doubling"
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
