"""The answer in sentences: what it says of two classes, of three, and of a limit."""

import dataclasses
import re

import numpy as np
import pytest

from evalcore.answer import answer, class_rate, measure_name, scheme_in_words, title
from evalcore.answers import answers_of
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off_rule import CutOffRule
from evalcore.evaluation import Evaluation, evaluate
from evalcore.limit import Limit
from evalcore.limit_rows import limit_rows
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES
from evalcore.table import Roles, Table
from evalcore.wording import NBSP, Noun

from . import test_verdict
from .checks import table_of
from .test_at_cut_off import scored

LOTS = Roles("verdict", "lot", noun=Noun("lot", "lots"))
RAW_FLOAT = re.compile(r"\d\.\d{3}|nan|inf|e-\d|array|np\.")
CV = choose(SCHEMES, "cross_validation", folds=2, repeats=2)


def spaced(text: str) -> str:
    """With plain spaces, so that tests can be read; each "%" has to follow one that cannot break."""
    assert not re.search(r"[^\u00a0]%|[^\u00a0]= ", text)
    return text.replace(NBSP, " ")


def told(table: Table, wrong, *, key: str = "logistic", **choices) -> Evaluation:
    """An evaluation in which the units named are always answered wrongly, all others rightly.

    Two-fold cross-validation twice, every unit held out twice; the majority answers the first
    class. `wrong` maps a unit to the class it is given.
    """
    candidates = (choose(CANDIDATES, "majority"), choose(CANDIDATES, key))
    plan = Plan(table.roles, (CV,), candidates, **choices)
    n_units = table.n_units
    folds = np.array([np.arange(n_units) % 2 == 0, np.arange(n_units) % 2 == 1] * 2)
    rounds = Rounds(
        (~folds).astype(np.uint8), folds.astype(np.uint8), np.repeat([0, 1], 2)
    ).of_cases(table.units)
    chosen = table.unit_labels.copy()
    chosen[list(wrong)] = list(wrong.values())
    by_name = {
        "majority": np.full(n_units, np.bincount(table.unit_labels).argmax()),
        key: chosen,
    }
    all_cases = Rounds(
        np.ones((1, table.n_cases), dtype=np.uint8),
        np.zeros((1, table.n_cases), dtype=np.uint8),
        np.zeros(1, dtype=np.intp),
    )
    answers, whole = {}, {}
    for name, given in by_name.items():
        scores = np.eye(table.n_classes)[given][table.units]
        answers["cross_validation", name] = answers_of(
            table, rounds, np.repeat(scores[None], rounds.n_rounds, axis=0)
        )
        whole[name] = answers_of(table, all_cases, scores[None])
    return evaluate(
        table,
        plan,
        {"cross_validation": rounds},
        answers=answers,
        whole=whole,
        planned={"cross_validation": rounds.n_rounds},
        failures={},
    )


def lots(n_good: int = 60, n_failing: int = 20, *, classes=("failing", "good"), rows: int = 2):
    """Lots with two rows each, failing ones first."""
    labels = np.repeat([0] * n_failing + [1] * n_good, rows)
    units = np.repeat(np.arange(n_good + n_failing), rows)
    return dataclasses.replace(table_of(labels.tolist(), units=units, classes=classes), roles=LOTS)


# 2 of 20 failing lots and 6 of 60 good ones answered wrongly; the same each time, so that the
# intervals are Wilson's: 72/80 0.815 to 0.948, 18/20 0.699 to 0.972, 54/60 0.799 to 0.953
EIGHT_WRONG = {**dict.fromkeys(range(2), 1), **dict.fromkeys(range(20, 26), 0)}


class TestTwoClasses:
    def test_share_interval_n_each_class_and_majority(self):
        assert spaced(answer(told(lots(), EIGHT_WRONG))) == (
            "On further lots obtained like these, with the same share of failing lots, logistic "
            "regression is expected to be right in 90 % (95 % interval 81–95 %, n = 80 lots); "
            "failing lots found 90 % (70–97 %, n = 20) and good lots passed 90 % (80–95 %, "
            "n = 60). Always answering ‘good’ would be right in 75 %."
        )

    def test_counted_by_row_says_so(self):
        text = spaced(answer(told(lots(), EIGHT_WRONG, answered_from="one")))
        assert text.startswith(
            "On further rows obtained like these, with the same share of failing"
        )
        assert "n = 160 rows" in text
        assert "failing rows found 90 %" in text

    def test_without_units_cases_are_counted(self):
        table = table_of([0] * 4 + [1] * 8, classes=("failing", "good"))
        text = spaced(answer(told(table, {0: 1})))
        assert text.startswith("On further cases obtained like these")
        assert "right in 92 % (95 % interval 65–99 %, n = 12 cases)" in text
        assert "failing cases found 75 % (30–95 %, n = 4)" in text

    def test_the_class_of_concern_comes_first_and_is_the_one_found(self):
        text = spaced(answer(told(lots(), EIGHT_WRONG, concern="good")))
        assert "with the same share of good lots" in text
        assert "good lots found 90 % (80–95 %, n = 60) and failing lots passed 90 %" in text

    def test_another_level_stands_in_the_sentence(self):
        text = spaced(answer(told(lots(), EIGHT_WRONG, level=0.9)))
        # statsmodels proportion_confint(72, 80, 0.1, "wilson"): 0.83110..0.94273
        assert "right in 90 % (90 % interval 83–94 %, n = 80 lots)" in text

    @pytest.mark.parametrize(
        ("classes", "found", "constant"),
        [
            (("0", "1"), "‘0’ lots found 90 %", "‘1’"),
            (("<b>x</b>", "good"), "‘<b>x</b>’ lots found 90 %", "‘good’"),
            (("a.b", "good"), "‘a.b’ lots found 90 %", "‘good’"),
            (("très sec", "vert"), "très sec lots found 90 %", "‘vert’"),
            (("non-viable", "viable"), "non-viable lots found 90 %", "‘viable’"),
        ],
    )
    def test_names_that_are_no_words_are_quoted(self, classes, found, constant):
        text = spaced(answer(told(lots(classes=classes), EIGHT_WRONG)))
        assert found in text
        assert f"with the same share of {found.partition(' lots')[0]} lots" in text
        assert text.endswith(f"Always answering {constant} would be right in 75 %.")


class TestMoreClasses:
    def test_three_are_all_found_and_no_share_is_singled_out(self):
        table = table_of([0] * 10 + [1] * 10 + [2] * 20, classes=("Adelie", "Chinstrap", "Gentoo"))
        # Wilson: 36/40 0.76948..0.96042, 9/10 0.59585..0.98212, 8/10 0.49016..0.94332,
        # 19/20 0.76387..0.99112
        text = spaced(answer(told(table, {0: 1, 10: 0, 11: 2, 20: 1})))
        assert text == (
            "On further cases obtained like these, with the same shares of classes, logistic "
            "regression is expected to be right in 90 % (95 % interval 77–96 %, n = 40 cases); "
            "Adelie cases found 90 % (60–98 %, n = 10), Chinstrap cases found 80 % (49–94 %, "
            "n = 10) and Gentoo cases found 95 % (76–99 %, n = 20). Always answering ‘Gentoo’ "
            "would be right in 50 %."
        )

    def test_of_many_the_worst_three_are_told(self):
        labels = np.repeat(range(5), 10).tolist()
        table = table_of(labels, classes=("a", "b", "c", "d", "e"))
        wrong = {0: 1, 10: 0, 11: 0, 20: 1, 21: 1, 22: 1, 30: 0, 31: 0, 32: 0, 33: 0}
        text = spaced(answer(told(table, wrong)))
        found = re.findall(r"(\w) cases found (\d+) %", text)
        assert found == [("d", "60"), ("c", "70"), ("b", "80")]


class TestTitle:
    @pytest.mark.parametrize(
        ("wrong", "expected"),
        [
            (0, "Right on nearly all further lots like these."),
            # Wilson at 77 of 80 begins at 0.895, so no more than that is claimed
            (3, "Right on about 9 of 10 further lots like these."),
            (8, "Right on about 9 of 10 further lots like these."),
            (40, "Right on about 5 of 10 further lots like these."),
        ],
    )
    def test_says_about_how_many_of_ten(self, wrong, expected):
        made = told(
            lots(), {20 + g if g < 60 else g - 60: 0 if g < 60 else 1 for g in range(wrong)}
        )
        assert title(made) == expected

    def test_says_that_it_cannot_be_told(self):
        # no bag could learn a cut-off, so there is no answer at one
        held = np.array([[0.1, np.nan] * 4, [np.nan, 0.9] * 4])
        given = {"naive_bayes": (held, np.full((2, 8), np.nan), np.linspace(0, 1, 8))}
        made = scored(given, [0, 0, 0, 0, 1, 1, 1, 1], CutOffRule("b", "cost"))
        assert np.isnan(made.estimate("accuracy", "naive_bayes", estimator="at_cut_off").value)
        assert title(made) == "How often it is right on further cases cannot be told."
        begun = dataclasses.replace(made, planned={"cross_validation": 4})
        assert title(begun) == (
            "So far, 2 of 4 rounds: how often it is right on further cases cannot be told."
        )

    def test_says_the_verdicts_if_there_are_limits(self):
        limits = (
            Limit("sensitivity", 0.9, "failing"),
            Limit("sensitivity", 0.7, "good"),
            Limit("accuracy", 0.97),
        )
        made = told(lots(), EIGHT_WRONG, limits=limits)
        assert title(made) == (
            "Failing lots: not shown yet. Good lots: shown. Accuracy: shown to fall short."
        )


class TestLimits:
    def rows(self, *limits, table=None, wrong=EIGHT_WRONG):
        return limit_rows(told(table or lots(), wrong, limits=limits), "logistic")

    def test_shown(self):
        # exact one-sided 95 % lower bound of 54/60: scipy.stats.beta.ppf(0.05, 54, 7) = 0.81214
        (row,) = self.rows(Limit("sensitivity", 0.7, "good", set_on="4 May 2026"))
        assert row.verdict.word == "shown"
        assert spaced(row.name) == "Good lots passed (specificity)"
        assert spaced(row.figure) == "90 % (80–95 %), n = 60"
        assert spaced(row.detail) == ("Limit 70 %, set 4 May 2026; these lots show at least 81 %.")

    def test_not_shown_yet_says_what_it_takes(self):
        # beta.ppf(0.05, 18, 3) = 0.71738; 61 cases with 2 misses, 46 with one (exact binomial)
        (row,) = self.rows(Limit("sensitivity", 0.9, "failing"))
        assert row.verdict.word == "not shown yet"
        assert spaced(row.name) == "Failing lots found (sensitivity)"
        assert spaced(row.figure) == "90 % (70–97 %), n = 20"
        assert spaced(row.detail) == (
            "Limit 90 %; these lots show at least 71 %. By the count alone, 90 % with 2 misses takes 61 "
            "failing lots, with one miss 46."
        )

    def test_shown_to_fall_short(self):
        # exact one-sided 95 % upper bound of 72/80: beta.ppf(0.95, 73, 8) = 0.94926; Wilson at
        # 90 % ends at 0.94273, and the more cautious one counts
        (row,) = self.rows(Limit("accuracy", 0.97))
        assert row.verdict.word == "shown to fall short"
        assert spaced(row.detail) == "Limit 97 %; these lots show at most 95 %."

    def test_too_few_for_a_verdict(self):
        # 8 of 8 right: exact lower bound at 95 % 0.05 ** (1 / 8) = 0.68766
        table = lots(n_failing=8)
        (row,) = self.rows(Limit("sensitivity", 0.5, "failing"), table=table, wrong={})
        assert row.verdict.word == "not shown yet"
        assert spaced(row.detail) == (
            "Limit 50 %; 8 failing lots are too few for a verdict (at least 10 are needed): even "
            "8 of 8 right could mean 69 %."
        )

    @pytest.mark.parametrize(
        ("least", "said"), [(0.925, "92.5 %"), (0.999, "99.9 %"), (0.29, "29 %")]
    )
    def test_the_limit_is_said_as_it_was_set(self, least, said):
        (row,) = self.rows(Limit("sensitivity", least, "failing"))
        assert spaced(row.detail).startswith(f"Limit {said}; these lots show at ")

    def test_balanced_accuracy_has_no_count_to_ask_for(self):
        (row,) = self.rows(Limit("balanced_accuracy", 0.9))
        assert row.verdict.word == "not shown yet"
        assert spaced(row.detail).endswith("It may be true; these are too few to show it.")

    def test_with_a_cut_off_chosen_on_these_cases_nothing_is_shown(self):
        given = test_verdict.TestAtCutOff()
        for set_on in ("", "2026-01-15"):
            found = given.always(CutOffRule("b", "fixed", at=0.25, set_on=set_on))
            rows = limit_rows(found, "naive_bayes")
            assert len(rows) == 3
            said = "The cut-off was chosen on these cases, so nothing is shown with it."
            for row in rows:
                assert row.verdict.word == ("shown" if set_on else "not shown yet")
                assert row.detail.endswith(f" {said}") == (not set_on)
                # nor would further cases mend it
                assert row.further == ""
        # 0.05 to the 1/80 and Wilson's lower end at 90 %, 80/(80 + 1.645^2) = 0.9673
        chosen = given.always(CutOffRule("b", "fixed", at=0.25))
        assert spaced(limit_rows(chosen, "naive_bayes")[0].detail) == (
            f"Limit 80 %; these cases show at least 96 %. {said}"
        )
        # what falls short falls short with it, and is said as ever
        high = given.always(CutOffRule("b", "fixed", at=0.5))
        details = [row.detail for row in limit_rows(high, "naive_bayes")]
        assert all("show at most" in detail for detail in details)
        assert not any(said in detail for detail in details)

    def test_no_limit_no_row(self):
        assert self.rows() == ()


def test_nothing_is_said_in_raw_numbers():
    limits = (
        Limit("sensitivity", 0.925, "failing"),
        Limit("sensitivity", 0.7, "good"),
        Limit("balanced_accuracy", 1 / 3),
        Limit("accuracy", 0.97),
    )
    # a share of 1/7 and of 2/3 have no end
    table = lots(n_good=21, n_failing=9)
    made = told(table, {0: 1, 1: 1, 2: 1, 9: 0, 10: 0, 11: 0}, limits=limits)
    said = [answer(made), title(made), *(part for row in limit_rows(made, "logistic") for part in (row.name, row.figure, row.detail))]  # fmt: skip
    assert len(said) == 2 + 3 * 4
    for text in said:
        assert not RAW_FLOAT.search(text), text


class TestNames:
    def test_measures_are_said_plainly_with_the_trade_name_behind(self):
        table = lots()
        plan = told(table, {}).plan
        assert measure_name(table, plan, "accuracy") == "share of lots right (accuracy)"
        assert measure_name(table, plan, "sensitivity", "failing") == (
            "failing lots found (sensitivity)"
        )
        assert class_rate(table, plan, "good", trade=False) == "good lots passed"

    @pytest.mark.parametrize(
        ("choice", "expected"),
        [
            (
                choose(SCHEMES, "cross_validation"),
                "stratified 5-fold cross-validation by lot, 20 times",
            ),
            (
                choose(SCHEMES, "cross_validation", repeats=1, stratified=False),
                "5-fold cross-validation by lot, once",
            ),
            (choose(SCHEMES, "bootstrap"), "200 stratified bootstrap rounds by lot"),
            (
                choose(SCHEMES, "bootstrap", rounds=1, stratified=False),
                "1 bootstrap round by lot",
            ),
            (
                choose(SCHEMES, "random_subsampling", rounds=1000, test_share=0.25),
                "1,000 stratified random splits by lot, 25 % held out",
            ),
            (
                choose(SCHEMES, "random_subsampling", rounds=1),
                "1 stratified random split by lot, 30 % held out",
            ),
            (choose(SCHEMES, "holdout"), "stratified hold-out by lot, once, 30 %"),
            (choose(SCHEMES, "leave_one_out"), "leave one lot out"),
        ],
    )
    def test_schemes_in_words(self, choice, expected):
        table = lots()
        plan = Plan(table.roles, (choice,), (choose(CANDIDATES, "majority"),))
        assert spaced(scheme_in_words(plan, table, choice.key)) == expected

    def test_without_units_nothing_is_kept_together(self):
        table = table_of([0, 0, 1, 1])
        plan = Plan(table.roles, (CV,), (choose(CANDIDATES, "majority"),))
        assert scheme_in_words(plan, table, "cross_validation") == (
            "stratified 2-fold cross-validation, 2 times"
        )
