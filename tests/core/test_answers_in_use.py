"""Doubts about the answers that go to work: at a cut-off where there is one."""

from dataclasses import replace

import numpy as np
import pytest

from evalcore.answer import answer
from evalcore.beside import Beside
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off_rule import CutOffRule
from evalcore.plan import Plan
from evalcore.schemes import SCHEMES

from .checks import carried_out, table_of
from .learned_cases import as_given
from .test_at_cut_off import scored
from .test_findings import found, only, wilson


class TestAnswersInUse:
    """Forty cases of each class with scores for b below 1/2, 0.1 for a and 0.4 for b.

    By the highest score all are a; at a cut-off of 0.25 all are right, and at one of 0.45 none of
    b is.
    """

    LABELS = np.arange(80) // 40

    @staticmethod
    def out():
        return np.array([np.arange(80) % 2 == r % 2 for r in range(4)])

    def given(self, at: float | None, *others: str, measure: str = "accuracy"):
        rule = None if at is None else CutOffRule("b", "fixed", at=at, set_on="2026-01-15")
        held = np.where(self.out(), np.where(self.LABELS, 0.4, 0.1), np.nan)
        scores = (held, np.full((4, 80), np.nan), np.full(80, np.nan))
        names = dict.fromkeys(("naive_bayes", *others), scores)
        return as_given(
            scored(names, self.LABELS, rule, repeat=[0, 0, 1, 1], measure=measure, about="naive_bayes")
        )  # fmt: skip

    @pytest.mark.parametrize("at", [None, 0.45, 0.25])
    def test_not_better_than_the_majority(self, at):
        raised = found("not_better_than_majority", *self.given(at))
        assert [f.value for f in raised] == ([] if at == 0.25 else [wilson(40, 80)[0]])
        # a half against a half; a cut-off gives shares right away on purpose
        grave = "grave" if at is None else "moderate"
        assert [f.severity for f in raised] == [grave] * len(raised)

    def test_others_are_compared_by_the_highest_score(self):
        raised = found("not_better_than_majority", *self.given(0.25, "lda"))
        assert [(f.subject, f.severity) for f in raised] == [("lda", "grave")]

    def test_worse_than_the_majority_at_a_cut_off_is_not_grave(self):
        # from 0.1 up all are called b, and three of four are a
        plan = self.given(0.1)[1]
        labels = (np.arange(80) >= 60).astype(int)
        held = np.where(self.out(), np.where(labels, 0.4, 0.1), np.nan)
        literal = {"naive_bayes": (held, np.full((4, 80), np.nan), np.full(80, np.nan))}
        made = scored(literal, labels, plan.cut_off, repeat=[0, 0, 1, 1])
        finding = only("not_better_than_majority", *as_given(made))
        assert made.estimate("accuracy", "naive_bayes", estimator="at_cut_off").value == 0.25
        assert (finding.severity, finding.threshold) == ("moderate", 0.75)

    @pytest.mark.parametrize("at", [None, 0.45, 0.25])
    def test_wide_interval(self, at):
        # Wilson at 40 of 80 is 0.214 wide, at 80 of 80 0.046
        low, high = wilson(40, 80)
        raised = found("wide_interval", *self.given(at))
        expected = [] if at == 0.25 else [pytest.approx(high - low, rel=1e-12)]
        assert [f.value for f in raised] == expected


def test_before_the_scheme_that_learns_cut_offs_has_a_round_the_answer_says_by_what_it_is():
    labels = np.arange(40) % 2
    table = table_of(labels, features=np.random.default_rng(4).normal(2 * labels)[:, None])
    schemes = (
        choose(SCHEMES, "cross_validation", folds=2, repeats=2),
        choose(SCHEMES, "bootstrap", rounds=20),
    )
    rule = CutOffRule.read("b:miss=3")
    plan = Plan(table.roles, schemes, (choose(CANDIDATES, "lda"),), cut_off=rule)
    found = carried_out(table, plan)[0]
    assert "linear discriminant at the cut-off is expected" in answer(found)
    later = replace(
        found,
        rounds={"bootstrap": found.rounds["bootstrap"]},
        judged=tuple(part for part in found.judged if part.scheme == "bootstrap"),
        beside=Beside(),
    )
    assert "linear discriminant by the highest score is expected" in answer(later)
