"""Where the cut-off that goes to work was not judged: no interval, no limit shown, and said so."""

import math
import re
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from scipy.stats import beta

from evalcore.answer import answer, not_judged, title
from evalcore.at_cut_off import why_unlike
from evalcore.beside_answer import beside_in_sentences
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off_rule import CutOffRule
from evalcore.findings import findings
from evalcore.intervals import with_model_variance
from evalcore.limit import Limit
from evalcore.model_variance import model_variance
from evalcore.plan import Plan
from evalcore.schemes import SCHEMES
from evalcore.share_in_use import Rate
from evalcore.verdict import verdicts, verdicts_at_cut_off
from evalcore.wording import NBSP

from .checks import carried_out, table_of
from .test_at_cut_off import figure
from .test_share_in_use import by_roots

NAN, INF = math.nan, math.inf
OF_ALL = np.array([0.1, 0.3, 0.3, 0.7])
STEADY = np.array([0.3, 0.4, 0.5, 0.3])


class TestWhy:
    @pytest.mark.parametrize(
        ("on_all", "why"),
        [
            # called from it up: the lowest itself, all; above it, not all
            (-INF, "all"), (0.05, "all"), (0.1, "all"), (0.1 + 1e-12, ""),
            # the highest itself is called
            (0.7, ""), (0.7 + 1e-12, "none"), (INF, "none"),
            (NAN, "not learned"),
        ],
    )  # fmt: skip
    def test_on_all(self, on_all, why):
        assert why_unlike(STEADY, on_all, OF_ALL) == why
        # cases without a score are not asked
        assert why_unlike(STEADY, on_all, np.append(OF_ALL, NAN)) == why

    @pytest.mark.parametrize(
        ("cut_offs", "why"),
        [
            ((-INF, -INF, 0.3, 0.3), ""),  # a half
            ((-INF, -INF, -INF, 0.3, 0.3, 0.3), ""),
            ((-INF, -INF, 0.3), "bags"),
            ((-INF, INF, 0.3), "bags"),
            ((INF, INF, 0.3), "bags"),
            ((-INF,), "bags"),
            # rounds without a cut-off are as unlike, and count among all
            ((-INF, -INF, 0.3, NAN, NAN, NAN), "bags"),
            ((-INF, 0.3, NAN), "bags"),
            ((-INF, 0.3, 0.3, NAN), ""),
            ((NAN, 0.3), ""),
            ((NAN, NAN, 0.3), "bags"),
            ((NAN, NAN), "bags"),
            ((), ""),
        ],
    )
    def test_bags(self, cut_offs, why):
        assert why_unlike(np.array(cut_offs, dtype=float), 0.3, OF_ALL) == why

    def test_the_cut_off_in_use_comes_first(self):
        bags = np.array([-INF, -INF])
        for on_all, why in ((NAN, "not learned"), (-INF, "all"), (INF, "none"), (0.3, "bags")):
            assert why_unlike(bags, on_all, OF_ALL) == why


LIMITS = (
    Limit("accuracy", 0.3),
    Limit("balanced_accuracy", 0.3),
    Limit("sensitivity", 0.3, "b"),
    Limit("sensitivity", 0.3, "a"),
)


def judged(others, of_class, rule, *, shift, seed=1, repeats=1):
    """Two candidates on a table of two normals, five-fold, with limits easily met."""
    labels = np.repeat([0, 1], [others, of_class])
    x = np.random.default_rng(seed).normal(size=(len(labels), 3)) + shift * labels[:, None]
    table = table_of(labels, features=x)
    scheme = choose(SCHEMES, "cross_validation", folds=5, repeats=repeats)
    candidates = tuple(choose(CANDIDATES, key) for key in ("naive_bayes", "lda"))
    plan = Plan(table.roles, (scheme,), candidates, cut_off=rule, limits=LIMITS)
    return carried_out(table, plan)[0]


def floor(value):
    return CutOffRule("b", "floor", floor=value, undecided_below=0.7)


def costs(**of):
    return CutOffRule("b", "cost", share_low=0.1, share_high=0.3, **of)


SEEN = (
    "Held-out figures are those of the rounds’ own cut-offs and say little about the one that goes "
    "to work: they have no interval and show no limit."
)
CASES = {
    # eight of b in each bag and ten in all, where nine are needed
    "bags": (30, 10, floor(0.9), 2.0, "bags"),
    # eight in all
    "few": (30, 8, floor(0.9), 2.0, "all"),
    # features that tell nothing: it is cheapest to call all, or none
    "dear misses": (40, 20, costs(miss=200), 0.0, "all"),
    "dear alarms": (40, 20, costs(alarm=200), 0.0, "none"),
}


@cache
def case_of(name):
    others, of_class, rule, shift, why = CASES[name]
    return judged(others, of_class, rule, shift=shift), why


@pytest.fixture(params=CASES)
def case(request):
    return case_of(request.param)


class TestEvaluations:
    def test_why(self, case):
        found, why = case
        at = found.at_cut_off("naive_bayes")
        assert (at.unlike, at.part.cut_offs) == (why, "unlike")
        # by the highest score all is as it was
        assert found.part("naive_bayes", found.scheme).cut_offs == "none"
        assert found.estimate("accuracy", "naive_bayes").interval.defined

    def test_no_interval_is_offered(self, case):
        found, _ = case
        given = [e for e in found.beside.estimates if e.candidate == "naive_bayes"]
        assert {e.measure for e in given} >= {
            "accuracy", "balanced_accuracy", "sensitivity", "precision", "share_called",
        }  # fmt: skip
        assert {e.measure for e in given if e.interval} == {"cut_off"}  # its spread
        for at in found.at_cut_off("naive_bayes").at_shares:
            rates = at.right_when_called, at.right_when_not_called, at.cost
            assert not any(rate.bounded for rate in rates)

    def test_nor_of_the_winner(self, case):
        found, _ = case
        by = "winner_corrected_at_cut_off"
        corrected = [e for e in found.beside.estimates if e.estimator == by]
        assert len(corrected) == 4
        unlike = found.at_cut_off(corrected[0].candidate).unlike
        assert {e.interval is None for e in corrected if e.measure != "balanced_accuracy"} == {
            bool(unlike)
        }

    def test_no_limit_is_shown_or_said_to_be_missed(self, case):
        found, _ = case
        given = verdicts_at_cut_off(found, "naive_bayes")
        assert [v.word for v in given] == ["not shown yet"] * 4
        assert np.isnan([(v.at_least, v.at_most) for v in given]).all()
        # a limit of 1 is not called missed either, though not all are right
        most = tuple(replace(limit, least=0.999) for limit in LIMITS)
        high = replace(found, plan=replace(found.plan, limits=most))
        assert {v.word for v in verdicts_at_cut_off(high, "naive_bayes")} == {"not shown yet"}
        # by the highest score one of the limits is shown, or shown to be missed
        words = {v.word for given in (found, high) for v in verdicts(given, "naive_bayes")}
        assert words & {"shown", "shown to fall short"}

    def test_no_ends_in_sentences(self, case):
        found, _ = case
        sentences = [s.replace(NBSP, " ") for s in beside_in_sentences(found)]
        # what a share in use would make of them is not said at all
        (sentence,) = (s for s in sentences if s.startswith(("Held out", "Where")))
        assert sentence.startswith("Held out, each round at its own cut-off: ")
        assert not re.search(r"\d–>?\d", sentence)

    def test_nothing_is_said_of_further_cases(self, case):
        found, _ = case
        k, n = (found.table.labels == 0).sum(), found.table.n_cases
        plain = answer(found).replace(NBSP, " ")
        assert plain.startswith(
            "Nothing can be said of further cases: the cut-off that goes to work was not judged. "
            "While held out, each round at its own, naive Bayes was right in "
        )
        assert "is expected to be" not in plain
        assert not re.search(r"\d–>?\d", plain)
        assert plain.endswith(f" Always answering ‘a’ would be right in {100 * k / n:.0f} %.")
        assert not_judged(found)
        # without limits the title would say of how many in ten
        bare = replace(found, plan=replace(found.plan, limits=()))
        assert title(bare) == "How often it is right on further cases cannot be told."

    def test_the_answer_by_hand(self):
        # ten of forty are b: of each bag all are called, so that these are right and no others
        found, _ = case_of("bags")
        assert answer(found).replace(NBSP, " ") == (
            "Nothing can be said of further cases: the cut-off that goes to work was not judged. "
            "While held out, each round at its own, naive Bayes was right in 25 % (n = 40 cases); "
            "b cases found 100 % (n = 10) and a cases passed 0 % (n = 30). Always answering ‘a’ "
            "would be right in 75 %."
        )

    def test_costs_are_not_held_against_it(self, case):
        found, _ = case
        raised = {f.check for f in findings(found.table, found.plan, found)}
        assert "cut_off_costs_more" not in raised

    def test_it_is_found(self, case):
        found, why = case
        given = [f for f in findings(found.table, found.plan, found) if "not_judged" in f.check]
        assert [f.severity for f in given] == ["grave"]
        assert given[0].subject == "b"
        says = {"bags": "in 5 of 5 rounds", "all": "it calls all of", "none": "it calls none of"}
        assert says[why] in given[0].title

    def test_in_full(self):
        found, _ = case_of("bags")
        (finding,) = (
            f for f in findings(found.table, found.plan, found) if f.check == "cut_off_not_judged"
        )
        on_all = figure(found, "cut_off", "b").value
        assert 0.01 < on_all < 0.99
        assert finding.title == (
            "No interval is offered at the cut-off: in 5 of 5 rounds the bag cannot teach one like it"
        )
        assert finding.seen.replace(NBSP, " ") == (
            "There it calls all or none, or is not learned (threshold: 50 % of rounds); learned from "
            f"all 40 cases it is {on_all:.3f}. {SEEN}"
        )
        assert finding.advice == (
            "Take a lower floor, add b cases, or take a candidate whose scores tell "
            "the classes apart."
        )
        assert (finding.value, finding.threshold) == (1, 0.5)

    def test_a_fixed_cut_off_is_the_one_in_use(self):
        found = judged(30, 10, CutOffRule("b", "fixed", at=-1.0), shift=3.0)
        at = found.at_cut_off("naive_bayes")
        assert (at.unlike, at.part.cut_offs) == ("", "fixed")
        assert figure(found, "sensitivity", "b").interval.defined
        assert figure(found, "sensitivity", "b").interval.method.startswith("wilson")


@pytest.fixture(scope="module", params=[floor(0.8), costs(miss=3, alarm=2)], ids=["floor", "cost"])
def found(request):
    return judged(60, 40, request.param, shift=0.7, seed=4, repeats=3)


class TestLikeTheOneInUse:
    """Sixty cases of a and forty of b, two normals: cut-offs of bags and of all cases alike."""

    def of(self, found, of_class=None):
        """The share right, how many, and the model's variance, of all or of one class."""
        part = found.at_cut_off("naive_bayes").part
        chosen = None if of_class is None else part.held.labels == of_class
        right = part.shares if of_class is None else part.shares[chosen]
        return right.mean(), len(right), model_variance(
            part.held.correct, part.held.rounds, chosen=chosen
        )  # fmt: skip

    def test_a_class_has_exact_bounds(self, found):
        at = found.at_cut_off("naive_bayes")
        assert (at.unlike, at.part.cut_offs) == ("", "learned")
        for k, name in enumerate("ab"):
            p, n, tau2 = self.of(found, k)
            assert 0.02 < p < 0.98
            n_equal = 1 / (1 / n + tau2 / (p * (1 - p)))
            right = p * n_equal
            low = beta.ppf(0.025, right, n_equal - right + 1)
            high = beta.ppf(0.975, right + 1, n_equal - right)
            bounds = figure(found, "sensitivity", name).interval
            assert bounds.method == "exact_model_variance"
            assert (bounds.low, bounds.high) == pytest.approx((low, high), rel=1e-9)

    def test_accuracy_keeps_its_own(self, found):
        p, n, tau2 = self.of(found)
        bounds, expected = figure(found, "accuracy").interval, with_model_variance(p, n, tau2)
        assert bounds.method == expected.method
        assert (bounds.low, bounds.high) == pytest.approx((expected.low, expected.high), rel=1e-9)

    def rates(self, found):
        """What is found of b and passed of a, with what each leaves to one."""
        for name in "ba":
            e = figure(found, "sensitivity", name)
            yield Rate(e.value, e.interval.low, e.interval.high)
            yield Rate(1 - e.value, 1 - e.interval.high, 1 - e.interval.low)

    def test_predictive_values_by_roots(self, found):
        right, missed, passed, alarms = self.rates(found)
        rule = found.plan.cut_off
        for share in {rule.share_low or 0.4, rule.share_high or 0.4}:
            by = f"at_cut_off_share_{share}"
            for of_class, of_share, ratio in (
                ("b", share, by_roots(alarms, right)),
                ("a", 1 - share, by_roots(missed, passed)),
            ):
                odds = (1 - of_share) / of_share
                high, low = (1 / (1 + odds * end) for end in ratio)
                e = figure(found, "precision", of_class, estimator=by)
                assert (e.interval.method, e.interval.level) == ("ratio_of_shares", 0.95)
                assert (e.interval.low, e.interval.high) == pytest.approx((low, high), rel=1e-9)
                assert e.interval.low < e.value < e.interval.high
            called = figure(found, "share_called", "b", estimator=by)
            assert called.interval is None

    def test_cost_by_hand(self, found):
        _, missed, _, alarms = self.rates(found)
        rule = found.plan.cut_off
        costs_given = [e for e in found.beside.estimates if e.measure == "cost_per_case"]
        assert bool(costs_given) == (rule.by == "cost")
        for share in (0.1, 0.3) if costs_given else ():
            e = figure(found, "cost_per_case", estimator=f"at_cut_off_share_{share}")
            a, b = 3 * share, 2 * (1 - share)
            value = a * missed.value + b * alarms.value
            below = math.hypot(a * (missed.value - missed.low), b * (alarms.value - alarms.low))
            above = math.hypot(a * (missed.high - missed.value), b * (alarms.high - alarms.value))
            assert e.value == pytest.approx(value, rel=1e-12)
            expected = (value - below, value + above)
            assert (e.interval.low, e.interval.high) == pytest.approx(expected, rel=1e-9)
            assert (e.interval.method, e.interval.level) == ("sum_of_shares", 0.95)

    def test_nothing_is_found_and_ends_are_said(self, found):
        raised = {f.check for f in findings(found.table, found.plan, found)}
        assert "cut_off_not_judged" not in raised
        assert not not_judged(found)
        assert " at the cut-off is expected to be right in " in answer(found)
        sentences = [s.replace(NBSP, " ") for s in beside_in_sentences(found)]
        for sentence in (s for s in sentences if s.startswith("Where")):
            ends = len(re.findall(r" % \(\d+(?:\.\d)?–\d+(?:\.\d)? %\)", sentence))
            assert ends == 2
            by_cost = found.plan.cut_off.by == "cost"
            assert bool(re.search(r"cost is 0\.\d{3} \(0\.\d{3}–[01]\.\d{3}\) a case", sentence)) == by_cost  # fmt: skip
