"""What is said of a limit that cannot be judged, of whom it is said, and of a model that varies."""

import dataclasses
import math

import numpy as np
import pytest

from evalcore.choice import choose
from evalcore.cut_off_rule import CutOffRule
from evalcore.evaluation import Evaluation
from evalcore.limit import Limit
from evalcore.limit_rows import limit_rows
from evalcore.outlook import Outlook, in_words, outlook
from evalcore.sample_size import cases_to_show
from evalcore.schemes import SCHEMES
from evalcore.table import Roles
from evalcore.verdict import part_behind, verdicts
from evalcore.wording import Noun

from . import test_verdict
from .checks import table_of
from .test_answer import spaced
from .test_findings import CV, a_plan, evaluated, halves, rounds_of, two_classes, wrong_in
from .test_verdict import LIMIT, evaluation, first

OF_B, OF_A = Limit("sensitivity", 0.8, "b"), Limit("sensitivity", 0.8, "a")


def details(made: Evaluation, candidate: str = "lda") -> list[str]:
    """The second line of each row, without a bound's digits where there is one."""
    rows = limit_rows(made, candidate)
    assert all(row.verdict.word == "not shown yet" for row in rows if "no bound" in row.detail)
    return [spaced(row.detail) for row in rows]


def why(reason: str) -> str:
    return f"Limit 80 %; no bound can be given: {reason}."


IN_ALL = "fewer than 5 blocks were held out"
OF_A_CLASS = "fewer than 5 blocks of a class were held out"


class TestNoBound:
    def test_the_cut_off_was_not_judged(self):
        """Each bag calls all, the cut-off in use not (see `test_verdict.TestAtCutOff`)."""
        made = test_verdict.TestAtCutOff().found(
            np.ones((1, 2, 80), dtype=bool), CutOffRule("b", "floor", floor=0.97)
        )
        assert made.at_cut_off("naive_bayes").unlike == "bags"
        rows = limit_rows(made, "naive_bayes")
        assert [spaced(row.detail) for row in rows] == [
            why("the cut-off that goes to work was not judged")
        ] * 3
        assert [row.further for row in rows] == [""] * 3

    def test_the_model_in_use_always_answers_one_class(self):
        table, plan = two_classes(), a_plan(limits=(OF_A, OF_B, LIMIT))
        made = evaluated(
            table,
            plan,
            {CV: halves(100)},
            chosen={CV: wrong_in(table, range(3))},
            whole=np.ones(100, dtype=int),
        )
        always = why("the model fitted on all cases always answers ‘b’")
        assert details(made, "logistic")[:2] == [always] * 2
        # of all cases a bound is given: exact, beta.ppf(0.05, 97, 4) = 0.924
        assert details(made, "logistic")[2] == "Limit 80 %; these cases show at least 92 %."

    def blocks(self, with_b: int, *, sites: int = 9) -> Evaluation:
        """Ten rows a site of b in so many sites, ten of a in the others, in halves of sites."""
        of_site = np.arange(10 * sites) % sites
        labels = (of_site < with_b).astype(int)
        table = table_of(labels, entries={"site": [f"s{at}" for at in of_site]})
        plan = a_plan(limits=(OF_B, LIMIT))
        scheme = choose(SCHEMES, CV, folds=2, repeats=1, keep="site")
        plan = dataclasses.replace(plan, schemes=(scheme,))
        return evaluated(table, plan, plan.draw(table), chosen={CV: wrong_in(table, range(5))})

    @pytest.mark.parametrize(("with_b", "given"), [(4, False), (5, True)])
    def test_too_few_blocks_of_the_class(self, with_b, given):
        of_class, of_all = details(self.blocks(with_b), "logistic")
        assert (of_class == why("fewer than 5 blocks of a class were held out")) == (not given)
        assert (
            of_class.startswith("Limit 80 %; 5 entries of ‘site’ with b cases are too few") == given
        )
        assert of_all.startswith("Limit 80 %; 9 entries of ‘site’ are too few for a verdict")

    def test_too_few_blocks_in_all(self):
        for detail in details(self.blocks(2, sites=4), "logistic"):
            assert detail == why("fewer than 5 blocks were held out")

    @pytest.mark.parametrize(
        ("of_a", "of_b", "few"),
        [
            # of ten sites, five of each class
            (range(5), range(5, 9), ("", OF_A_CLASS, "")),
            (range(5), range(5, 10), ("", "", "")),
            (range(4), range(5, 10), (OF_A_CLASS, "", "")),
            (range(2), range(5, 7), (IN_ALL, IN_ALL, IN_ALL)),
        ],
    )
    def test_blocks_are_those_held_out(self, of_a, of_b, few):
        of_site = np.arange(100) % 10
        table = table_of((of_site >= 5).astype(int), entries={"site": [f"s{at}" for at in of_site]})
        scheme = choose(SCHEMES, CV, folds=2, repeats=1, keep="site")
        plan = dataclasses.replace(a_plan(limits=(OF_A, OF_B, LIMIT)), schemes=(scheme,))
        held = np.isin(of_site, [*of_a, *of_b])
        out = [held & (of_site % 2 == half) for half in (0, 1)]
        made = evaluated(table, plan, {CV: rounds_of(out, np.zeros(2, dtype=int))})
        part = made.part("logistic", CV)
        assert part.blocks == 10
        behind = [len(of_a) + len(of_b), len(of_a), len(of_b)]
        assert [part.blocks_with(k) for k in (None, 0, 1)] == behind
        for detail, reason in zip(details(made, "logistic"), few, strict=True):
            assert detail == why(reason) if reason else "no bound" not in detail

    def test_luck(self):
        # class b is judged on one unit, so no resample has it on both sides
        right = np.ones((2, 2, 40), dtype=bool)
        made = evaluation(right, labels=[0] * 30 + [1] * 10, never=range(31, 40))
        assert details(made) == [why("the luck of being best cannot be told")]

    def test_nobody_was_held_out(self):
        right = np.ones((1, 2, 40), dtype=bool)
        made = evaluation(
            right, labels=[0] * 30 + [1] * 10, limits=(OF_B, LIMIT), never=range(30, 40)
        )
        # of thirty all right: exact, 0.05 to the 1/30 = 0.905
        assert details(made) == [
            "Limit 80 %; none of these cases has been held out yet.",
            "Limit 80 %; these cases show at least 90 %.",
        ]


class TestNoun:
    """Forty lots of two rows in twenty sites, two of the sites wrong; all right or all wrong."""

    LOTS = Roles("verdict", "lot", noun=Noun("lot", "lots"))

    def rows(self, *, keep: str = "", answered_from: str = "all", wrong=range(8)):
        labels, units = np.repeat([0, 1], 40), np.arange(80) // 2
        site = [f"s{unit // 2}" for unit in units]
        table = table_of(labels, units=units, entries={"site": site})
        table = dataclasses.replace(table, roles=self.LOTS)
        scheme = choose(SCHEMES, CV, folds=2, repeats=2, keep=keep)
        plan = a_plan(limits=(OF_A, LIMIT), answered_from=answered_from)
        plan = dataclasses.replace(plan, schemes=(scheme,), roles=self.LOTS)
        made = evaluated(table, plan, plan.draw(table), chosen={CV: wrong_in(table, wrong)})
        return limit_rows(made, "logistic")

    @pytest.mark.parametrize(
        ("keep", "answered_from", "noun"),
        [
            ("", "all", "lots"),
            # rows of a lot are not independent of each other: lots are
            ("", "one", "lots"),
            ("site", "all", "entries of ‘site’"),
            ("site", "one", "entries of ‘site’"),
        ],
    )
    def test_is_of_what_is_independent(self, keep, answered_from, noun):
        of_a, of_all = self.rows(keep=keep, answered_from=answered_from)
        n = 10 if keep else 20
        assert (of_a.verdict.n, of_all.verdict.n) == (n, 2 * n)
        assert f"; these {noun} show at " in spaced(of_all.detail)
        for row, of_class in ((of_a, "a "), (of_all, "")):
            assert row.verdict.word == "not shown yet"
            if keep or answered_from == "one":
                # groups are no trials that are right or wrong: none are counted ahead
                assert row.further == ""
                assert spaced(row.detail).endswith(f" %. More {noun} would narrow that.")
            else:
                assert spaced(row.further).startswith(f"Further {of_class}lots judged alone that ")
                assert "would narrow that" not in row.detail
        if not keep and answered_from == "all":
            # exact, with a fifth of them missed
            needed = cases_to_show(0.8, misses=4, confidence=0.95)
            assert f" with 4 misses takes {needed} a lots, with " in spaced(of_a.detail)

    @pytest.mark.parametrize(("keep", "answered_from"), [("", "one"), ("site", "all")])
    def test_no_further_groups_are_counted_of_a_limit_fallen_short_of(self, keep, answered_from):
        for row in self.rows(keep=keep, answered_from=answered_from, wrong=range(60)):
            assert row.verdict.word == "shown to fall short"
            assert row.further == ""
        # all sixty rows are thirty lots; lots themselves have an outlook
        for row in self.rows(wrong=range(60)):
            assert row.verdict.word == "shown to fall short"
            assert spaced(row.further).startswith("Further ")

    def test_of_too_few(self):
        labels = np.repeat([0, 1], [18, 60])
        table = table_of(labels, entries={"site": [f"s{i // 3}" for i in range(78)]})
        scheme = choose(SCHEMES, CV, folds=2, repeats=2, keep="site")
        plan = dataclasses.replace(a_plan(limits=(OF_A,)), schemes=(scheme,))
        (row,) = limit_rows(evaluated(table, plan, plan.draw(table)), "logistic")
        # six of six: 0.05 to the 1/6 = 0.607
        assert spaced(row.detail) == (
            "Limit 80 %; 6 entries of ‘site’ with a cases are too few for a verdict (at least 10 "
            "are needed): even 6 of 6 right could mean 61 %."
        )


def ahead_of(*outcomes: tuple[float, str]) -> Outlook:
    """Further cases at a cautious, the present and a hopeful rate, each with what they come to.

    The limit is 0.8.
    """
    made = evaluation(first(40, 34, 34), labels=[0, 1] * 20)
    (verdict,) = verdicts(made, "lda")
    examples = outlook(made, "lda", verdict).needed
    assert [more.name for more in examples] == ["cautious", "present", "hopeful"]
    needed = tuple(
        dataclasses.replace(more, rate=rate, alone=dataclasses.replace(more.alone, outcome=outcome))
        for more, (rate, outcome) in zip(examples, outcomes, strict=bool(outcomes))
    )
    return Outlook(verdict, needed)


class TestTooVariable:
    @pytest.mark.parametrize(
        ("outcomes", "too"),
        [
            ([(0.7, "never"), (0.85, "never"), (0.9, "never")], True),
            # a better rate than the present one is only hoped for
            ([(0.7, "never"), (0.85, "never"), (0.9, "reached")], True),
            # at or below the limit no number would do anyhow
            ([(0.7, "never"), (0.8, "never"), (0.9, "never")], False),
            ([(0.5, "never"), (0.6, "never"), (0.8, "never")], False),
            ([(0.7, "never"), (0.85, "too many"), (0.9, "never")], False),
            ([(0.81, "never"), (0.85, "reached"), (0.9, "never")], False),
            ([], False),
        ],
    )
    def test_where_no_number_would_do_at_the_present_rate_above_the_limit(self, outcomes, too):
        assert ahead_of(*outcomes).too_variable is too

    def test_is_said_in_place_of_a_count(self):
        made = evaluation(first(60, 60, 42), labels=[0, 1] * 30)
        (row,) = limit_rows(made, "lda")
        # by count alone 76 with 9 misses would do: sixty are too few
        assert cases_to_show(0.8, misses=9, confidence=0.95) == 76 > row.verdict.n
        least = math.floor(100 * row.verdict.at_least)
        assert spaced(row.detail) == (
            f"Limit 80 %; these cases show at least {least} %. The model varies too much from "
            "round to round to show more."
        )
        assert row.further == in_words(made, outlook(made, "lda", row.verdict))

    def test_a_steady_one_gets_its_count(self):
        (row,) = limit_rows(evaluation(first(60, 51, 51), labels=[0, 1] * 30), "lda")
        assert spaced(row.detail).endswith(
            " By the count alone, 80 % with 9 misses takes 76 cases, with one miss 22."
        )


def test_the_answers_a_verdict_is_about():
    made = test_verdict.TestAtCutOff().always()
    (highest, *_), (at, *_) = (
        verdicts(made, "naive_bayes"),
        test_verdict.verdicts_at_cut_off(made, "naive_bayes"),
    )
    assert part_behind(made, "naive_bayes", highest) is made.part("naive_bayes", made.scheme)
    assert part_behind(made, "naive_bayes", at) is made.at_cut_off("naive_bayes").part
