"""Where the headline's interval rests on a second scheme, only what was studied so is quoted."""

import dataclasses

import numpy as np
import pytest

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off_rule import CutOffRule
from evalcore.evaluation import Evaluation
from evalcore.evidence_quoted import falling_short, headline, matching
from evalcore.schemes import SCHEMES

from .test_at_cut_off import scored
from .test_evidence import asked, line
from .test_findings import BOOTSTRAP, CV, LDA, a_plan, evaluated, halves, two_classes
from .test_model_variance_unknown import FIVE, one_of_b

OF_FIVE = {"n": 45, "smallest_class": 5, "features": 1}
BALANCED = {"measure": "balanced_accuracy", **OF_FIVE}


def judged(*schemes: str, held: int = 1, measure: str = "balanced_accuracy", **rest) -> Evaluation:
    """Forty cases of a and five of b; the first scheme holds out so many of b at a time."""
    plan = a_plan(*schemes, candidates=(LDA,), measure=measure)
    rounds = {scheme: one_of_b(held=held if scheme == schemes[0] else 2) for scheme in schemes}
    return evaluated(FIVE, plan, rounds, **rest)


class TestBalanced:
    def test_with_the_second_scheme_that_was_studied(self):
        expected = asked(cases=45, **BALANCED)
        assert headline(judged(CV, BOOTSTRAP)) == expected
        assert matching(judged(CV, BOOTSTRAP), [line(**BALANCED)]) == (line(**BALANCED),)

    def test_not_without_it_or_with_another(self):
        assert headline(judged(CV)) is None
        assert headline(judged(CV, BOOTSTRAP, "random_subsampling")) is None
        fewer = choose(SCHEMES, BOOTSTRAP, rounds=50)
        made = judged(CV, BOOTSTRAP)
        plan = dataclasses.replace(made.plan, schemes=(made.plan.schemes[0], fewer))
        assert headline(dataclasses.replace(made, plan=plan)) is None

    def test_not_asked_where_the_class_s_own_variance_is_told(self):
        for schemes in ((CV,), (CV, BOOTSTRAP), (CV, "random_subsampling")):
            assert headline(judged(*schemes, held=2)) == asked(cases=45, **BALANCED)

    @pytest.mark.parametrize(("held", "waits"), [(1, True), (2, False)])
    def test_waits_for_the_rounds_of_both(self, held, waits):
        known = (line(**BALANCED, coverage=0.8),)
        begun = judged(CV, BOOTSTRAP, held=held, planned={CV: 10, BOOTSTRAP: 200})
        assert matching(begun, known) == falling_short(begun, known) == (() if waits else known)
        # without a round of it yet, either
        one = dataclasses.replace(begun, rounds={CV: begun.rounds[CV]})
        assert matching(one, known) == (() if waits else known)
        first = judged(CV, BOOTSTRAP, held=held, planned={CV: 100, BOOTSTRAP: 10})
        assert matching(first, known) == ()

    def test_of_sensitivity_is_the_balanced_one(self):
        assert headline(judged(CV, measure="sensitivity")) is None
        assert headline(judged(CV, BOOTSTRAP, measure="sensitivity")) == asked(cases=45, **BALANCED)


class TestAccuracy:
    def test_a_class_s_own_variance_does_not_bear_on_it(self):
        assert headline(judged(CV, measure="accuracy")) == asked(cases=45, **OF_FIVE)

    @pytest.mark.parametrize(("repeats", "alone"), [(1, False), (2, True)])
    def test_its_own_does(self, repeats, alone):
        # each case answered once, or twice
        table, drawn = two_classes(30), halves(60, repeats=repeats)
        plan = a_plan(candidates=(LDA,), measure="accuracy")
        made = evaluated(table, plan, {CV: drawn})
        expected = asked(features=1)
        assert headline(made) == (expected if alone else None)
        both = a_plan(CV, BOOTSTRAP, candidates=(LDA,), measure="accuracy")
        assert headline(evaluated(table, both, {CV: drawn, BOOTSTRAP: halves(60)})) == expected


class TestAtCutOff:
    """The same rounds, and cut-offs of 0.4 for b between scores of 0.2 and 0.6."""

    def made(self, measure: str, *, held: int = 1, schemes=(CV,)) -> Evaluation:
        drawn = one_of_b(held=held)
        score = np.where(FIVE.labels, 0.6, 0.2)
        out = drawn.test > 0
        literal = np.where(out, score, np.nan), np.where(out, np.nan, score), score
        made = scored(
            {"lda": literal},
            FIVE.labels,
            CutOffRule("b", "cost"),
            repeat=drawn.repeat,
            measure=measure,
        )
        chosen = tuple(choose(SCHEMES, key) for key in schemes)
        return dataclasses.replace(made, plan=dataclasses.replace(made.plan, schemes=chosen))

    @pytest.mark.parametrize("schemes", [(CV,), (CV, BOOTSTRAP)])
    def test_never_where_it_rests_on_another(self, schemes):
        made = self.made("balanced_accuracy", schemes=schemes)
        assert made.in_use == "at_cut_off"
        assert headline(made) is None
        assert matching(made, [line(**BALANCED)]) == ()

    @pytest.mark.parametrize("schemes", [(CV,), (CV, BOOTSTRAP)])
    def test_where_it_does_not(self, schemes):
        for given in (
            self.made("accuracy", schemes=schemes),
            self.made("balanced_accuracy", held=2, schemes=schemes),
        ):
            assert headline(given).estimator == "at_cut_off"
            assert headline(given).called == 5


def test_lines_that_tell_too_little_are_not_quoted():
    given = line(features=1, coverage=0.8)
    few = dataclasses.replace(given, tables=99)
    rare = dataclasses.replace(given, without_interval=901)
    plan = a_plan(candidates=(choose(CANDIDATES, "lda"),), measure="accuracy")
    made = evaluated(two_classes(30), plan, {CV: halves(60)})
    assert matching(made, [few, given, rare]) == falling_short(made, [few, given, rare]) == (given,)
