"""Cut-offs that tell nothing apart: below every held-out score, above all, or dearer than none."""

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import beta

from evalcore.cut_off_rule import CutOffRule
from evalcore.share_in_use import AtShare, Rate
from evalcore.wording import NBSP

from .learned_cases import as_given, at_floor, at_literal
from .test_at_cut_off import scored
from .test_findings import FLOOR, found, only

NAN, INF = math.nan, math.inf
COST = CutOffRule("b", "cost", miss=10, share_low=0.08, share_high=0.08)


def with_cut_offs(*cut_offs: float):
    """Twenty of each class that score 0.25 and 0.5, four rounds."""
    return as_given(at_literal(at_floor(0, rule=COST), cut_offs=np.array(cut_offs)))


def left_one_out(right: float):
    """Three of a with 0.2 and nine of b with 0.6, each alone held out; so high a cut-off."""
    labels = np.repeat([0, 1], [3, 9])
    score = np.where(labels, 0.6, 0.2)
    out = np.eye(12, dtype=bool)
    literal = np.where(out, score, NAN), np.where(out, NAN, score), score
    rule = CutOffRule("b", "fixed", at=right, set_on="2026-01-15")
    return as_given(scored({"naive_bayes": literal}, labels, rule, repeat=[0] * 12))


class TestCallsAll:
    @pytest.mark.parametrize(
        ("cut_offs", "share", "called"),
        [
            # the lowest score itself is called; just above it not
            ((0.25, 0.25, 0.25, 0.25), 1, "every"),
            ((0.251, 0.251, 0.251, 0.251), None, ""),
            ((-INF, 0.1, 0.25, 0.4), 0.75, "every"),
            # more than half are needed
            ((-INF, 0.1, 0.3, 0.4), None, ""),
            # so is the highest; just above it nothing
            ((0.5, 0.5, 0.5, 0.5), None, ""),
            ((0.501, 0.501, 0.501, 0.4), 0.75, "no"),
            ((INF, INF, INF, 0.9), 1, "no"),
            # one way or the other is no constant answer
            ((-INF, -INF, INF, INF), None, ""),
            ((-INF, INF, INF, INF), 0.75, "no"),
            # of all rounds, with those that learned none
            ((-INF, -INF, 0.4, NAN), None, ""),
            ((-INF, -INF, -INF, NAN), 0.75, "every"),
            ((NAN, NAN, NAN, NAN), None, ""),
        ],
    )
    def test_by_the_lowest_and_the_highest_score(self, cut_offs, share, called):
        raised = found("cut_off_calls_all", *with_cut_offs(*cut_offs))
        assert [(f.severity, f.subject, f.value, f.threshold) for f in raised] == (
            [] if share is None else [("grave", "b", share, 0.5)]
        )
        for finding in raised:
            assert finding.title.replace(NBSP, " ") == (
                f"In {100 * share:.0f} % of rounds the cut-off calls {called} case b"
            )
            assert f" ({4 * share:.0f} of 4 rounds; " in finding.seen

    @pytest.mark.parametrize(
        "rule",
        [CutOffRule("b", "fixed", at=0.4), CutOffRule("b", "cost"), FLOOR],
        ids=lambda r: r.by,
    )
    @pytest.mark.parametrize(("at", "called"), [(0.25, "every"), (0.375, ""), (0.625, "no")])
    def test_whatever_the_rule(self, rule, at, called):
        made = at_literal(at_floor(0, rule=rule), cut_offs=np.full(4, at))
        raised = found("cut_off_calls_all", *as_given(made))
        assert [f" calls {called} case b" in f.title for f in raised] == [True] * bool(called)

    @pytest.mark.parametrize(
        ("at", "called"), [(0.4, ""), (0.2, "every"), (0.601, "no"), (0.6, "")]
    )
    def test_leaving_one_out_is_not_accused_of_small_held_out_parts(self, at, called):
        """In nine rounds of twelve the one held out is called, in three it is not."""
        table, plan, made = left_one_out(at)
        named = made.at_cut_off("naive_bayes").part.held.predicted
        if not called:
            assert named.mean() == pytest.approx(0.75, rel=1e-15)
        raised = found("cut_off_calls_all", table, plan, made)
        assert [f" calls {called} case b" in f.title for f in raised] == [True] * bool(called)

    def test_the_other_class_may_be_the_one_called(self):
        # of a the scores are 0.75 and 0.5
        for at, called in ((0.5, "every"), (0.6, ""), (0.76, "no")):
            made = at_floor(0, rule=CutOffRule("a", "fixed", at=at))
            raised = found("cut_off_calls_all", *as_given(made))
            assert [f" calls {called} case a" in f.title for f in raised] == [True] * bool(called)


def costing(*of_shares: tuple[float, Rate], rule: CutOffRule = COST, **parts: object):
    """At each share so high a cost."""
    shares = tuple(AtShare(share, Rate(NAN), Rate(NAN), cost, 0.25) for share, cost in of_shares)
    return as_given(at_literal(at_floor(0, rule=rule), at_shares=shares, **parts))


class TestCostsMore:
    """Calling none costs 0.08 x 10 = 0.8 a case, calling every one 0.92."""

    @pytest.mark.parametrize(
        ("cost", "severity"),
        [
            (Rate(0.5, 0.25, 0.79), None),
            (Rate(0.5, 0.25, 0.81), "moderate"),
            (Rate(0.79, 0.25, 0.9), "moderate"),
            (Rate(0.81, 0.25, 0.9), "grave"),
            # without an interval it is not about the cut-off in use
            (Rate(0.9), None),
            (Rate(NAN), None),
        ],
    )
    def test_value_and_upper_end(self, cost, severity):
        raised = found("cut_off_costs_more", *costing((0.08, cost)))
        given = [(f.severity, f.subject, f.value, f.threshold) for f in raised]
        assert given == ([(severity, "b", cost.value, 0.8)] if severity else [])

    def test_a_share_is_as_exact_as_it_is_known(self):
        """Stated, as it stands; that of the table, as exact as 40 cases allow."""
        cost = Rate(0.81, 0.25, 0.9)
        for rule, share, words in (
            (COST, 0.075, "Where 7.5 % of cases are b, calling none costs 0.750 a case"),
            (
                CutOffRule("b", "cost"),
                8 / 38,
                "Where 21 % of cases are b, calling none costs 0.211",
            ),
        ):
            (raised,) = found("cut_off_costs_more", *costing((share, cost), rule=rule))
            assert raised.title.replace(NBSP, " ").startswith(words)

    def test_as_much_is_not_less(self):
        # 1/2 x 1 on either side, in binary fractions
        rule = CutOffRule("b", "cost", share_low=0.5, share_high=0.5)
        for cost, severity in (
            (Rate(0.25, 0.125, 0.5), "moderate"),
            (Rate(0.5, 0.25, 0.75), "grave"),
        ):
            assert only("cut_off_costs_more", *costing((0.5, cost), rule=rule)).severity == severity

    def test_at_each_share_by_itself(self):
        rule = replace(COST, alarm=2, share_high=0.25)
        low, high = Rate(0.7, 0.6, 0.9), Rate(1.6, 1.4, 1.8)
        given = found("cut_off_costs_more", *costing((0.08, low), (0.25, high), rule=rule))
        # 0.08 x 10 against 0.92 x 2; 0.25 x 10 against 0.75 x 2
        assert [(f.severity, f.threshold) for f in given] == [("grave", 1.5), ("moderate", 0.8)]
        assert [f.title.replace(NBSP, " ") for f in given] == [
            "Where 25 % of cases are b, calling every one costs 1.500 a case; the cut-off is not "
            "shown to cost less: 1.600",
            "Where 8 % of cases are b, calling none costs 0.800 a case; the cut-off is not shown "
            "to cost less: 0.700",
        ]
        assert given[0].seen == (
            "Its expected cost is 1.600 (1.400–1.800); the threshold is the cheaper of calling "
            "none and calling every one, 1.500."
        )

    def test_of_costs_alone(self):
        for rule in (FLOOR, CutOffRule("b", "fixed", at=0.4)):
            given = costing((0.5, Rate(0.9, 0.8, 1.0)), rule=rule)
            assert found("cut_off_costs_more", *given) == []

    @pytest.mark.parametrize(
        ("of_b", "severity"), [(0, "grave"), (2, "moderate"), (10, None), (20, None)]
    )
    def test_from_answers(self, of_b, severity):
        """Cut-offs of 0.375; so many of twenty of b score above, none of twenty of a."""
        labels = np.repeat([0, 1], 20)
        out = np.array([np.arange(40) % 2 == half for half in (0, 1, 0, 1)])
        inside = np.where(labels, 0.5, 0.25)
        held = np.where(np.arange(40) >= 40 - of_b, 0.5, 0.25)
        literal = np.where(out, held, NAN), np.where(out, NAN, inside), inside
        rule = CutOffRule("b", "cost")
        made = scored({"naive_bayes": literal}, labels, rule, repeat=[0, 0, 1, 1])
        missed = 1 - of_b / 20
        most = 1 - beta.ppf(0.025, of_b, 21 - of_b) if of_b else 1.0
        alarms = 1 - 0.025 ** (1 / 20)
        # half of all are b, and each error costs one: calling none costs a half
        value = missed / 2
        high = value + math.hypot((most - missed) / 2, alarms / 2)
        assert severity == ("grave" if value >= 0.5 else "moderate" if high >= 0.5 else None)
        raised = found("cut_off_costs_more", *as_given(made))
        assert [(f.severity, f.threshold) for f in raised] == ([(severity, 0.5)] * bool(severity))
        assert [f.value for f in raised] == pytest.approx([value] * bool(severity), rel=1e-12)
