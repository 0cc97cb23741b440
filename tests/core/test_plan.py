"""Plans: their text forms, names, defaults and what they refuse."""

import dataclasses
import json

import numpy as np
import pytest

from evalcore.candidates import CANDIDATES
from evalcore.choice import Choice, choose, choose_written
from evalcore.cut_off_rule import CutOffRule
from evalcore.errors import PlanError
from evalcore.limit import Limit
from evalcore.plan import APPENDING, Plan, generator, recommended_candidates, recommended_schemes
from evalcore.schemes import ALL_SCHEMES, SCHEMES
from evalcore.table import Roles
from evalcore.wording import Noun

from .checks import exactly, table_of

CV, BOOTSTRAP = choose(SCHEMES, "cross_validation"), choose(SCHEMES, "bootstrap")
MAJORITY, LOGISTIC = choose(CANDIDATES, "majority"), choose(CANDIDATES, "logistic")


def plan(**changes) -> Plan:
    return dataclasses.replace(Plan(Roles("class"), (CV,), (MAJORITY, LOGISTIC)), **changes)


def refused(message, action, *args, **kwargs):
    with pytest.raises(PlanError, match=exactly(message)):
        action(*args, **kwargs)


class TestChoosing:
    def test_defaults(self):
        assert (
            Choice(
                "cross_validation",
                (("folds", 5), ("repeats", 20), ("stratified", True), ("keep", "")),
            )
            == CV
        )
        assert Choice("bootstrap", (("rounds", 200), ("stratified", True), ("keep", ""))) == (
            BOOTSTRAP
        )
        assert choose(SCHEMES, "bootstrap", rounds=35).values() == {
            "rounds": 35,
            "stratified": True,
            "keep": "",
        }
        assert choose(SCHEMES, "forward_in_time", column="day").values() == {
            "column": "day",
            "parts": 4,
        }

    @pytest.mark.parametrize(
        ("registry", "text"),
        [
            (SCHEMES, "cross_validation:folds=7,repeats=3,stratified=no"),
            (SCHEMES, "random_subsampling:rounds=40,test_share=0.25,stratified=yes"),
            (SCHEMES, "leave_one_out"),
            (SCHEMES, "bootstrap:rounds=30,stratified=yes,keep=producer"),
            (SCHEMES, "holdout:test_share=0.3,stratified=no,keep=Jahr und Ort"),
            (SCHEMES, "leave_block_out:column=harvest year"),
            (SCHEMES, "leave_block_out"),
            (SCHEMES, "forward_in_time:column=day,parts=3"),
            (CANDIDATES, "logistic:C=0.125"),
            (CANDIDATES, "nearest_neighbours:k=3,scaling=none"),
        ],
    )
    def test_written_and_read_again(self, registry, text):
        assert choose_written(registry, text).written() == text

    def test_written_in_part(self):
        assert choose_written(SCHEMES, "bootstrap:rounds=35") == choose(
            SCHEMES, "bootstrap", rounds=35
        )
        assert choose_written(CANDIDATES, "logistic") == LOGISTIC
        assert CV.written(without=("repeats",)) == "cross_validation:folds=5,stratified=yes"

    def test_no_column_is_not_written(self):
        # what names the stream of random numbers is what it was before there were columns
        assert BOOTSTRAP.written(without=APPENDING) == "bootstrap:stratified=yes"
        kept = choose(SCHEMES, "bootstrap", keep="producer")
        assert kept.written(without=APPENDING) == "bootstrap:stratified=yes,keep=producer"
        assert choose_written(SCHEMES, "bootstrap:keep=") == BOOTSTRAP

    @pytest.mark.parametrize(
        ("registry", "text", "message"),
        [
            (
                SCHEMES,
                "jackknife",
                "There is no 'jackknife'; choose cross_validation, bootstrap, random_subsampling, "
                "holdout, leave_one_out, leave_block_out or forward_in_time.",
            ),
            (
                CANDIDATES,
                "perceptron:C=1",
                "There is no 'perceptron'; choose majority, logistic, lda, qda, naive_bayes, "
                "nearest_neighbours, one_feature, present_practice, tree, forest, svm or boosting.",
            ),
            (
                SCHEMES,
                "bootstrap:folds=3",
                "'bootstrap' has no setting 'folds'; it takes `rounds`, `stratified` or `keep`.",
            ),
            (
                SCHEMES,
                "leave_block_out:keep=site",
                "'leave_block_out' has no setting 'keep'; it takes `column`.",
            ),
            (SCHEMES, "forward_in_time:parts=51", "`parts` must be between 1 and 50; got 51."),
            (CANDIDATES, "lda:C=3", "'lda' has no setting 'C'; it takes no setting."),
            (
                SCHEMES,
                "bootstrap:rounds",
                "'rounds' in 'bootstrap:rounds' must be written name=value.",
            ),
            (SCHEMES, "bootstrap:rounds=many", "`rounds` must be a whole number; got 'many'."),
            (SCHEMES, "bootstrap:rounds=0", "`rounds` must be between 1 and 10000; got 0."),
            (
                CANDIDATES,
                "nearest_neighbours:scaling=robust",
                "`scaling` must be standard or none; got 'robust'.",
            ),
        ],
    )
    def test_refused(self, registry, text, message):
        refused(message, choose_written, registry, text)

    def test_a_whole_number_is_not_cut(self):
        with pytest.raises(PlanError, match=exactly("`k` must be a whole number; got 2.5.")):
            choose(CANDIDATES, "nearest_neighbours", k=2.5)

    def test_yes_or_no_is_not_any_text(self):
        with pytest.raises(PlanError, match=exactly("`stratified` must be yes or no; got 'no'.")):
            choose(SCHEMES, "bootstrap", stratified="no")

    def test_a_column_is_named_by_text(self):
        refused(
            "`column` must be the name of a column; got 3.",
            choose,
            SCHEMES,
            "leave_block_out",
            column=3,
        )


class TestNames:
    def test_the_key_where_it_is_enough(self):
        made = plan(schemes=(CV, BOOTSTRAP))
        assert made.scheme_names == ("cross_validation", "bootstrap")
        assert made.candidate_names == ("majority", "logistic")
        assert made.scheme("bootstrap") == BOOTSTRAP
        assert made.candidate("logistic") == LOGISTIC

    def test_settings_where_it_is_not(self):
        made = plan(candidates=(LOGISTIC, choose(CANDIDATES, "logistic", C=0.1), MAJORITY))
        assert made.candidate_names == ("logistic:C=1", "logistic:C=0.1", "majority")
        assert made.title("logistic:C=0.1") == "logistic regression (C 0.1)"
        assert made.title("majority") == "majority class"

    def test_titles_that_differ_need_no_settings(self):
        near = [choose(CANDIDATES, "nearest_neighbours", k=k) for k in (1, 5)]
        made = plan(candidates=tuple(near))
        assert [made.title(name) for name in made.candidate_names] == [
            "nearest neighbour",
            "5 nearest neighbours",
        ]

    def test_blocks_of_two_columns_stand_side_by_side(self):
        made = plan(
            schemes=tuple(choose(SCHEMES, "leave_block_out", column=c) for c in ("site", "year"))
        )
        assert made.scheme_names == ("leave_block_out:column=site", "leave_block_out:column=year")

    def test_names_are_unique_for_settings_that_hardly_differ(self):
        close = choose(CANDIDATES, "logistic", C=1.0000001)
        names = plan(candidates=(LOGISTIC, close)).candidate_names
        assert len(set(names)) == 2

    def test_the_headline_is_about_the_first_that_learns(self):
        assert plan().about_name == "logistic"
        assert plan(about="majority").about_name == "majority"
        assert plan(candidates=(MAJORITY,)).about_name == "majority"


class TestJson:
    full = Plan(
        Roles("Klasse é", "Los", ("Tag",), Noun("Los", "Lose"), "set_aside"),
        (
            BOOTSTRAP,
            choose(SCHEMES, "random_subsampling", test_share=0.1, keep="Händler"),
            choose(SCHEMES, "forward_in_time", column="Tag"),
        ),
        (MAJORITY, choose(CANDIDATES, "nearest_neighbours", k=3, scaling="none")),
        answered_from="one",
        measure="accuracy",
        concern="faul",
        about="nearest_neighbours",
        limits=(Limit("sensitivity", 0.85, "faul", 0.9, "2 May"), Limit("accuracy", 0.7)),
        level=0.9,
        seed=2**62,
        question="May it sort the next season?",
    )

    @pytest.mark.parametrize("made", [full, plan()])
    def test_there_and_back(self, made):
        again = Plan.from_json(made.to_json())
        assert again == made
        assert hash(again) == hash(made)
        assert again.fingerprint == made.fingerprint

    def test_any_choice_changes_the_fingerprint(self):
        changes = [
            {},
            {"seed": 2},
            {"level": 0.9},
            {"concern": "a"},
            {"schemes": (BOOTSTRAP,)},
            {"schemes": (choose(SCHEMES, "cross_validation", keep="producer"),)},
            {"candidates": (LOGISTIC, MAJORITY)},
            {"limits": (Limit("accuracy", 0.7),)},
            {"question": "?"},
        ]
        prints = {plan(**change).fingerprint for change in changes}
        assert len(prints) == len(changes)
        assert all(len(text) == 64 for text in prints)

    def test_a_newer_format_is_refused(self):
        data = json.loads(plan().to_json()) | {"format": 99}
        message = "This plan is of format 99; this version reads format 1."
        refused(message, Plan.from_json, json.dumps(data))

    @pytest.mark.parametrize("text", ["not a plan", "[1, 2]", '{"format": 1}'])
    def test_what_is_no_plan_is_refused(self, text):
        with pytest.raises(PlanError, match="plan"):
            Plan.from_json(text)


class TestRefusals:
    @pytest.mark.parametrize(
        ("changes", "message"),
        [
            ({"schemes": ()}, "A plan needs at least one scheme."),
            ({"candidates": ()}, "A plan needs at least one candidate."),
            (
                {"candidates": (LOGISTIC, LOGISTIC)},
                "The candidate 'logistic:C=1' was chosen twice; once is enough.",
            ),
            (
                {"schemes": (BOOTSTRAP, CV, BOOTSTRAP)},
                "The scheme 'bootstrap:rounds=200,stratified=yes' was chosen twice; once is "
                "enough.",
            ),
            (
                {"measure": "kappa"},
                "`measure` must be accuracy, balanced_accuracy, sensitivity or auc; got 'kappa'.",
            ),
            ({"seed": -1}, "`seed` must be a whole number from 0; got -1."),
            ({"level": 1.0}, "`level` must be at least 0.5 and below 1; got 1.0."),
            (
                {"about": "forest"},
                "The answer cannot be about 'forest'; the candidates are majority and logistic.",
            ),
        ],
    )
    def test_of_a_plan(self, changes, message):
        refused(message, plan, **changes)

    def test_of_a_curve_that_keeps_something_else_together(self):
        def curve(keep):
            return choose(ALL_SCHEMES, "learning_curve", keep=keep)

        by_site = choose(SCHEMES, "cross_validation", keep="site")
        for scheme, keep, kept in (
            (CV, "site", ""),
            (by_site, "", "site"),
            (by_site, "day", "site"),
        ):
            refused(
                "The learning curve must keep together what the first scheme keeps together, or it "
                f"judges something else; got {keep!r} and {kept!r}.",
                plan,
                schemes=(scheme, BOOTSTRAP),
                curve=curve(keep),
            )
        assert plan(schemes=(by_site, CV), curve=curve("site")).curve == curve("site")
        # what has nothing to keep together keeps nothing
        assert plan(schemes=(choose(SCHEMES, "leave_one_out"),), curve=curve("")).curve == curve("")

    @pytest.mark.parametrize(
        ("values", "message"),
        [
            (
                ("auc", 0.8),
                "An acceptance limit goes on accuracy, balanced_accuracy or sensitivity; got "
                "'auc'.",
            ),
            (
                ("accuracy", 1.0),
                "An acceptance limit must lie between 0 and 1 and its confidence between 0.5 and "
                "1; got 1 and 0.95.",
            ),
            (
                ("accuracy", 0.8, "", 0.5),
                "An acceptance limit must lie between 0 and 1 and its confidence between 0.5 and "
                "1; got 0.8 and 0.5.",
            ),
        ],
    )
    def test_of_a_limit(self, values, message):
        refused(message, Limit, *values)


class TestOnATable:
    table = table_of([0] * 9 + [1] * 14)

    def test_it_fits(self):
        assert plan(schemes=(CV, BOOTSTRAP), concern="b").check(self.table) is None

    def test_unknown_classes(self):
        message = "There is no class ‘z’; the classes are ‘a’ and ‘b’."
        refused(message, plan(concern="z").check, self.table)
        limits = (Limit("sensitivity", 0.8, "z"),)
        refused(message, plan(limits=limits).check, self.table)

    def test_sensitivity_needs_a_class(self):
        refused(
            "A limit on sensitivity needs a class: sensitivity:CLASS=VALUE.",
            plan(limits=(Limit("sensitivity", 0.8),)).check,
            self.table,
        )

    def test_undecided_goes_by_probabilities_of_the_answer(self):
        # of support vectors there are distances to their border only (scikit-learn's SVC)
        svm, undecided = choose(CANDIDATES, "svm"), CutOffRule("b", "cost", undecided_below=0.7)
        asked = plan(candidates=(MAJORITY, svm, LOGISTIC), about="svm", cut_off=undecided)
        message = (
            "`undecided` goes by probabilities, and there are none from support vectors (SVM); "
            "leave it "
            "out, or let the answer be about another candidate."
        )
        refused(message, asked.check, self.table)
        # the answer is about it unsaid, as the first that looks at features
        refused(message, dataclasses.replace(asked, about="").check, self.table)
        # another candidate's answers, or no undecided ones
        assert dataclasses.replace(asked, about="logistic").check(self.table) is None
        learned = dataclasses.replace(asked, cut_off=CutOffRule("b", "cost"))
        assert learned.check(self.table) is None

    def test_more_neighbours_than_a_bag_has_cases(self):
        # the smallest of five parts' complements: 23 less 5
        near = choose(CANDIDATES, "nearest_neighbours", k=19)
        refused(
            "`k` must be between 1 and 18, the cases of the smallest bag; got 19.",
            plan(candidates=(near,)).check,
            self.table,
        )
        fitting = choose(CANDIDATES, "nearest_neighbours", k=18)
        assert plan(candidates=(fitting,)).check(self.table) is None

    def test_units_of_several_classes(self):
        table = table_of([0, 0, 1, 1, 0, 1, 1, 0, 1], units=[0, 0, 1, 1, 2, 2, 2, 3, 4])
        made = plan(schemes=(choose(SCHEMES, "leave_one_out"),))
        assert table.mixed_units.tolist() == [2]
        message = (
            "Case ‘u2’ carries more than one class, so it cannot be answered as one. Count single "
            "rows instead: a future unit is then answered from one reading."
        )
        refused(message, made.check, table)
        assert dataclasses.replace(made, answered_from="one").check(table) is None

    def test_counting(self):
        units = table_of([0, 0, 1, 1], units=[0, 0, 1, 1])
        assert plan().counted_by(units) == "unit"
        assert plan(answered_from="one").counted_by(units) == "case"
        assert plan().counted_by(self.table) == "case"

    def test_the_class_of_concern(self):
        three = table_of([0] * 4 + [1] * 3 + [2] * 5)
        on_c = (Limit("sensitivity", 0.8, "c"),)
        assert plan().concern_of(self.table) == "a"
        assert plan(concern="b").concern_of(self.table) == "b"
        assert plan().concern_of(three) == ""
        assert plan(limits=on_c).concern_of(three) == "c"
        assert plan(limits=(*on_c, Limit("sensitivity", 0.8, "b"))).concern_of(three) == ""

    def test_models_to_fit(self):
        # 100 rounds, 200 rounds and one on all cases, for two candidates; 23 of leave-one-out
        assert plan(schemes=(CV, BOOTSTRAP)).fits(self.table) == 602
        assert plan(schemes=(choose(SCHEMES, "leave_one_out"),)).fits(self.table) == 48

    def test_models_to_fit_for_blocks_and_stretches(self):
        table = table_of(
            [0, 1] * 6,
            entries={"site": list("aabbccddaabb"), "day": [str(day) for day in range(12)]},
        )
        # four sites, or two stretches, and one on all cases, for two candidates
        made = plan(schemes=(choose(SCHEMES, "leave_block_out", column="site"),))
        assert made.fits(table) == 10
        made = plan(schemes=(choose(SCHEMES, "forward_in_time", column="day", parts=2),))
        assert made.fits(table) == 6

    def test_a_scheme_without_its_column_is_refused(self):
        refused(
            "`column` must name the column whose blocks are left out (year, site, instrument); it "
            "is empty.",
            plan(schemes=(choose(SCHEMES, "leave_block_out"),)).check,
            self.table,
        )

    def test_the_guess_of_time_grows_with_the_work(self):
        few, many = plan(schemes=(CV,)), plan(schemes=(CV, BOOTSTRAP))
        assert 0 < few.seconds(self.table) < many.seconds(self.table)
        forest = plan(candidates=(choose(CANDIDATES, "forest"), LOGISTIC))
        assert forest.seconds(self.table) > few.seconds(self.table)


class TestRecommended:
    def test_schemes(self):
        assert recommended_schemes(table_of([0] * 5 + [1] * 9)) == (CV, BOOTSTRAP)
        assert recommended_schemes(table_of([0] * 4 + [1] * 9)) == (BOOTSTRAP,)

    def test_units_decide_not_rows(self):
        table = table_of([0] * 8 + [1] * 9, units=[0, 0, 1, 1, 2, 2, 3, 3, *range(4, 13)])
        assert recommended_schemes(table) == (BOOTSTRAP,)

    def test_candidates(self):
        assert [choice.key for choice in recommended_candidates()] == [
            "majority",
            "logistic",
            "nearest_neighbours",
            "forest",
        ]


class TestGenerator:
    def test_named_streams(self):
        draws = {
            keys: generator(*keys).integers(2**60)
            for keys in [(1, "a"), (2, "a"), (1, "b"), (1, "a", "b"), (1, "ab")]
        }
        assert len(set(draws.values())) == len(draws)
        assert generator(1, "a").integers(2**60) == draws[1, "a"]

    def test_the_stream_is_named_by_the_sha256_of_its_keys(self):
        # printf bootstrap | sha256sum, in words of four bytes, the lowest first
        words = (
            3_708_042_291, 1_747_589_653, 3_409_559_601, 4_062_012_826,
            2_327_746_705, 3_899_449_604, 2_746_668_129, 1_422_463_306,
        )  # fmt: skip
        expected = np.random.default_rng(np.random.SeedSequence(7, spawn_key=words))
        assert generator(7, "bootstrap").integers(2**60) == expected.integers(2**60)
