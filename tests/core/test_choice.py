"""Grids: how they are written and read, what they refuse, and plans that carry them as JSON."""

import dataclasses
import itertools
import json

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from evalcore.candidates import CANDIDATES
from evalcore.choice import Choice, choose, choose_written
from evalcore.cut_off import CutOffRule
from evalcore.engine import run, tasks
from evalcore.errors import PlanError
from evalcore.fits import round_scores
from evalcore.plan import Plan
from evalcore.schemes import ALL_SCHEMES, SCHEMES
from evalcore.table import Roles

from .checks import exactly, table_of

BOOTSTRAP = choose(SCHEMES, "bootstrap")
LOGISTIC = choose(CANDIDATES, "logistic")
NEAR = choose(CANDIDATES, "nearest_neighbours", k=(1, 5, 15))
CURVE = choose(ALL_SCHEMES, "learning_curve")


def plan(**changes) -> Plan:
    return dataclasses.replace(Plan(Roles("class"), (BOOTSTRAP,), (LOGISTIC, NEAR)), **changes)


def refused(message, action, *args, **kwargs):
    with pytest.raises(PlanError, match=exactly(message)):
        action(*args, **kwargs)


class TestWritten:
    @pytest.mark.parametrize(
        "text",
        [
            "nearest_neighbours:k=1/5/15,scaling=standard",
            "nearest_neighbours:k=15/1/5,scaling=none",
            "nearest_neighbours:k=3,scaling=none/standard",
            "nearest_neighbours:k=1/5,scaling=standard/none",
            "logistic:C=0.01/1/100",
            "qda:shrinkage=1e-05/0.5/1",
            "forest:trees=50/200",
        ],
    )
    def test_there_and_back(self, text):
        read = choose_written(CANDIDATES, text)
        assert read.written() == text
        assert read.tuned

    @given(
        st.lists(st.integers(1, 200), min_size=1, max_size=8, unique=True),
        st.sampled_from([("standard",), ("none",), ("standard", "none"), ("none", "standard")]),
    )
    def test_any_grid_of_neighbours(self, k, scaling):
        made = choose(CANDIDATES, "nearest_neighbours", k=k, scaling=scaling)
        assert choose_written(CANDIDATES, made.written()) == made
        assert made.tuned == (len(k) > 1 or len(scaling) > 1)

    @given(st.lists(st.floats(1e-4, 1e4), min_size=2, max_size=6, unique=True))
    def test_any_grid_of_numbers(self, values):
        made = choose(CANDIDATES, "svm", C=tuple(values))
        read = choose_written(CANDIDATES, made.written())
        assert read == made
        assert dict(read.grid)["C"] == tuple(values)

    def test_the_first_value_stands_in_the_settings(self):
        assert (
            Choice("nearest_neighbours", (("k", 1), ("scaling", "standard")), (("k", (1, 5, 15)),))
            == NEAR
        )

    def test_one_value_is_no_grid(self):
        assert choose(CANDIDATES, "svm", C=(3,)) == choose(CANDIDATES, "svm", C=3)
        assert not choose_written(CANDIDATES, "svm:C=3").tuned

    def test_the_order_of_values_is_kept(self):
        other = choose(CANDIDATES, "nearest_neighbours", k=(15, 5, 1))
        assert other != NEAR
        assert other.written() == "nearest_neighbours:k=15/5/1,scaling=standard"

    def test_the_name_of_a_column_may_hold_a_stroke(self):
        kept = choose_written(SCHEMES, "bootstrap:keep=lot/day")
        assert kept.values()["keep"] == "lot/day"
        assert not kept.tuned
        answers = choose_written(CANDIDATES, "present_practice:column=a/b")
        assert (answers.values()["column"], answers.tuned) == ("a/b", False)

    def test_settings_in_part(self):
        both = choose_written(CANDIDATES, "nearest_neighbours:k=1/5,scaling=standard/none")
        assert both.written_settings(["k"]) == "k=1/5"
        assert both.written(without=("k",)) == "nearest_neighbours:scaling=standard/none"


class TestOptions:
    def test_the_last_setting_moves_fastest(self):
        made = choose(CANDIDATES, "nearest_neighbours", k=(5, 1), scaling=("none", "standard"))
        pairs = itertools.product((5, 1), ("none", "standard"))
        assert [tuple(option.values().values()) for option in made.options] == list(pairs)
        assert not any(option.tuned for option in made.options)

    def test_settings_that_are_not_tuned_stay(self):
        made = choose(CANDIDATES, "nearest_neighbours", k=(5, 1), scaling="none")
        assert [o.written() for o in made.options] == [
            "nearest_neighbours:k=5,scaling=none",
            "nearest_neighbours:k=1,scaling=none",
        ]

    def test_one_that_is_not_tuned_is_its_only_option(self):
        assert LOGISTIC.options == (LOGISTIC,)
        assert choose(CANDIDATES, "lda").options == (choose(CANDIDATES, "lda"),)


class TestRefusals:
    @pytest.mark.parametrize(
        ("text", "message"),
        [
            (
                "nearest_neighbours:k=1/5/1",
                "A grid of `k` needs different values; got 1, 5 and 1.",
            ),
            ("logistic:C=1/1.0", "A grid of `C` needs different values; got 1 and 1."),
            (
                "nearest_neighbours:scaling=none/none",
                "A grid of `scaling` needs different values; got none and none.",
            ),
            ("nearest_neighbours:k=1/201", "`k` must be between 1 and 200; got 201."),
            ("nearest_neighbours:k=1/", "`k` must be a whole number; got ''."),
            ("nearest_neighbours:k=1/2.5", "`k` must be a whole number; got '2.5'."),
            ("logistic:C=1/nan", "`C` must be between 0.0001 and 10000; got nan."),
            (
                "nearest_neighbours:scaling=none/robust",
                "`scaling` must be standard or none; got 'robust'.",
            ),
            ("lda:C=1/2", "'lda' has no setting 'C'; it takes no setting."),
        ],
    )
    def test_of_what_is_written(self, text, message):
        refused(message, choose_written, CANDIDATES, text)

    def test_no_value(self):
        refused("A grid of `C` needs different values; got none.", choose, CANDIDATES, "svm", C=())

    def test_a_column_is_not_tuned(self):
        message = "`column` names a column and cannot be tuned; give one."
        refused(message, choose, CANDIDATES, "present_practice", column=("a", "b"))

    def test_fifty_combinations_and_no_more(self):
        k, both = tuple(range(1, 26)), ("standard", "none")
        assert len(choose(CANDIDATES, "nearest_neighbours", k=k, scaling=both).options) == 50
        message = (
            "The grid of 'nearest_neighbours' has {} combinations; at most 50 are allowed, because "
            "each is fitted in every inner fold of every round."
        )
        many = {"k": (*k, 26), "scaling": both}
        refused(message.format(52), choose, CANDIDATES, "nearest_neighbours", **many)
        many = {"k": tuple(range(1, 52))}
        refused(message.format(51), choose, CANDIDATES, "nearest_neighbours", **many)

    @pytest.mark.parametrize("text", ["bootstrap:rounds=100/200", "bootstrap:stratified=yes/no"])
    def test_a_scheme_is_not_tuned(self, text):
        grid = choose_written(SCHEMES, text)
        message = (
            f"Settings of a scheme are not tuned; got the grid {grid.written()!r}. Give one value "
            "each, or choose the scheme several times."
        )
        refused(message, plan, schemes=(BOOTSTRAP, grid))

    def test_nor_is_the_learning_curve(self):
        message = (
            "Settings of a scheme are not tuned; got the grid 'learning_curve:sizes=5/6,subsets="
            "20'. Give one value each, or choose the scheme several times."
        )
        refused(message, plan, curve=choose(ALL_SCHEMES, "learning_curve", sizes=(5, 6)))

    @pytest.mark.parametrize("number", [-1, 10_000])
    def test_permutations(self, number):
        message = f"The chance check takes between 0 and 9,999 permutations; got {number}."
        refused(message, plan, permutations=number)


class TestOnATable:
    table = table_of([0] * 9 + [1] * 14)

    def test_it_fits(self):
        made = plan(curve=CURVE, cut_off=CutOffRule("a", "cost"), permutations=99)
        assert made.check(self.table) is None

    def test_a_cut_off_parts_two_classes(self):
        message = (
            "A cut-off parts two classes; this table has 3. Leave the cut-off out, or join classes "
            "in the file."
        )
        three = table_of([0, 1, 2] * 6)
        refused(message, plan(cut_off=CutOffRule("a", "cost")).check, three)

    def test_a_cut_off_is_for_a_class_of_the_table(self):
        message = "There is no class ‘z’; the classes are ‘a’ and ‘b’."
        refused(message, plan(cut_off=CutOffRule("z", "cost")).check, self.table)

    @pytest.mark.parametrize("answered_from", ["all", "one"])
    def test_the_chance_check_needs_one_class_a_unit(self, answered_from):
        table = table_of([0, 0, 1, 1, 0, 1, 1, 0, 1], units=[0, 0, 1, 1, 2, 2, 2, 3, 4])
        message = (
            "The chance check moves classes between cases, so each needs one class; ‘u2’ carries "
            "more than one."
        )
        scheme = (choose(SCHEMES, "leave_one_out"),)
        near = (choose(CANDIDATES, "nearest_neighbours", k=(1, 2)),)
        made = plan(schemes=scheme, candidates=near, answered_from=answered_from)
        refused(message, dataclasses.replace(made, permutations=9).check, table)
        if answered_from == "one":
            assert made.check(table) is None

    def test_the_largest_of_a_grid_must_fit_in_a_bag(self):
        # the smallest of five parts' complements: 23 less 5
        cross = (choose(SCHEMES, "cross_validation"),)
        grid = choose(CANDIDATES, "nearest_neighbours", k=(19, 1))
        message = "`k` must be between 1 and 18, the cases of the smallest bag; got 19."
        refused(message, plan(schemes=cross, candidates=(grid,)).check, self.table)
        grid = choose(CANDIDATES, "nearest_neighbours", k=(18, 1))
        assert plan(schemes=cross, candidates=(grid,)).check(self.table) is None


class TestNames:
    def test_two_grids_of_one_kind(self):
        narrow = choose(CANDIDATES, "nearest_neighbours", k=(3, 5))
        made = plan(candidates=(NEAR, narrow, LOGISTIC))
        names = (
            "nearest_neighbours:k=1/5/15,scaling=standard",
            "nearest_neighbours:k=3/5,scaling=standard",
            "logistic",
        )
        assert made.candidate_names == names
        assert [made.title(name) for name in names] == [
            "nearest neighbours (k tuned; k 1/5/15)",
            "nearest neighbours (k tuned; k 3/5)",
            "logistic regression",
        ]
        assert made.candidate(names[1]) == narrow

    def test_a_grid_beside_the_same_kind_with_one_value(self):
        made = plan(candidates=(NEAR, choose(CANDIDATES, "nearest_neighbours", k=1)))
        assert [made.title(name) for name in made.candidate_names] == [
            "nearest neighbours (k tuned)",
            "nearest neighbour",
        ]


RULES = (
    CutOffRule("faul", "cost", miss=10.0, share_low=0.05, share_high=0.2, undecided_below=0.6),
    CutOffRule("faul", "floor", floor=0.9),
    CutOffRule("faul", "fixed", at=-0.25, set_on="2026-05-02"),
)


class TestJson:
    @pytest.mark.parametrize("rule", RULES, ids=lambda rule: rule.by)
    def test_there_and_back(self, rule):
        made = plan(
            candidates=(
                choose(CANDIDATES, "nearest_neighbours", k=(1, 5), scaling=("standard", "none")),
                choose(CANDIDATES, "svm", C=(0.1, 1.0, 1e-4)),
                LOGISTIC,
            ),
            curve=choose(ALL_SCHEMES, "learning_curve", sizes=8),
            cut_off=rule,
            permutations=999,
        )
        again = Plan.from_json(made.to_json())
        assert again == made
        assert hash(again) == hash(made)
        assert again.fingerprint == made.fingerprint
        assert again.to_json() == made.to_json()

    def test_each_of_them_changes_the_fingerprint(self):
        changes = [
            {},
            {"candidates": (LOGISTIC, choose(CANDIDATES, "nearest_neighbours", k=(1, 5)))},
            {"candidates": (LOGISTIC, choose(CANDIDATES, "nearest_neighbours", k=1))},
            {"curve": CURVE},
            {"cut_off": RULES[0]},
            {"cut_off": RULES[1]},
            {"permutations": 99},
        ]
        assert len({plan(**change).fingerprint for change in changes}) == len(changes)

    def test_a_plan_from_before_these_fields_still_reads(self):
        old = """{
 "roles": {"label": "class", "unit": "lot", "leave_out": ["day"],
  "noun": {"singular": "lot", "plural": "lots"}, "copies": "keep"},
 "schemes": [{"key": "bootstrap",
  "settings": [["rounds", 200], ["stratified", true], ["keep", ""]]}],
 "candidates": [{"key": "majority", "settings": []}, {"key": "logistic", "settings": [["C", 1.0]]}],
 "answered_from": "all", "measure": "balanced_accuracy", "concern": "", "about": "",
 "limits": [{"measure": "accuracy", "least": 0.7, "of_class": "", "confidence": 0.95,
  "set_on": ""}],
 "level": 0.95, "seed": 1, "question": "", "engine": "fast", "format": 1
}"""
        read = Plan.from_json(old)
        assert read.candidates == (choose(CANDIDATES, "majority"), LOGISTIC)
        assert read.schemes == (BOOTSTRAP,)
        assert not any(choice.tuned for choice in (*read.schemes, *read.candidates))
        assert (read.curve, read.cut_off, read.permutations) == (None, None, 0)
        assert read.limits[0].least == 0.7
        assert Plan.from_json(read.to_json()) == read

    @pytest.mark.parametrize(
        ("field", "value"),
        [("curve", {"settings": []}), ("cut_off", {"of_class": "a", "by": "cost", "x": 1})],
    )
    def test_a_damaged_part_is_refused(self, field, value):
        data = json.loads(plan().to_json()) | {field: value}
        with pytest.raises(PlanError, match=r"\AThis is not a plan as this program writes it: "):
            Plan.from_json(json.dumps(data))


class TestModelsToFit:
    """What a plan says it will fit against what is fitted, counted."""

    table = table_of([0, 1] * 12, features=np.random.default_rng(4).normal(size=(24, 2)))

    @pytest.mark.parametrize(
        "scheme",
        [
            "cross_validation:folds=3,repeats=9",
            "cross_validation:folds=2,repeats=3",
            "random_subsampling:rounds=25,test_share=0.2",
            "holdout:test_share=0.2",
            "leave_one_out",
        ],
    )
    @pytest.mark.parametrize("rule", [None, CutOffRule("a", "cost")], ids=["plain", "cut_off"])
    def test_counted(self, scheme, rule, monkeypatch):
        made = plan(
            schemes=(choose_written(SCHEMES, scheme),),
            candidates=(choose(CANDIDATES, "nearest_neighbours", k=(1, 3)), LOGISTIC),
            cut_off=rule,
            permutations=2,
        )
        fitted = []

        def counted(choice, preparations, **named):
            fitted.append(len(preparations.counts))
            return round_scores(choice, preparations, **named)

        monkeypatch.setattr("evalcore.tuning.round_scores", counted)
        drawn = made.draw(self.table)
        for _ in run(self.table, made, drawn, todo=tasks(drawn, permutations=2)):
            pass
        # every bag holds at least five of each class, so each has five inner folds
        assert min(d.train[:, ::2].sum(axis=1).min() for d in drawn.values()) >= 5
        assert made.fits(self.table) == sum(fitted)
