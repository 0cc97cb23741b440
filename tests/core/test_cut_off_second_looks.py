"""What other schemes tell of the model's variance at a cut-off: each at its own cut-offs."""

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import beta

from evalcore.at_cut_off import at_cut_off
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off_rule import CutOffRule
from evalcore.evaluation import Evaluation, evaluate
from evalcore.model_variance import model_variance
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.schemes import ALL_SCHEMES, SCHEMES

from .checks import carried_out, table_of
from .learned_cases import as_given
from .test_at_cut_off import figure, literal
from .test_findings import found, wilson

NAN = math.nan
LABELS = np.repeat([0, 1], 10)
SCORE = np.where(LABELS, 0.6, 0.2)
ALONE = np.eye(20, dtype=bool)
HALVES = np.array([np.arange(20) % 2 == half for half in (0, 1, 0, 1)])
LOO, CV = "leave_one_out", "cross_validation"


def answered(out, inside, score=SCORE):
    """Held-out scores, and inner ones of b by round, of a always 0.1."""
    up = np.broadcast_to(score, out.shape)[out]
    inner = np.where(LABELS, np.reshape(inside, (-1, 1)), 0.1)
    return literal(np.column_stack([1 - up, up]), np.where(out, NAN, inner))


def rounds_of(out, repeat) -> Rounds:
    held = out.astype(np.uint8)
    return Rounds(1 - held, held, np.asarray(repeat))


def two_schemes(inside, *, rule=None, alone: bool = False) -> Evaluation:
    """Each case left out once, its cut-off 0.5; then halves twice, at cut-offs as given.

    A cut-off that finds half of b lies at the one score that all of b have inside the bag.
    """
    rule = rule or CutOffRule("b", "floor", floor=0.5)
    table = table_of(LABELS)
    schemes = (choose(SCHEMES, LOO), choose(SCHEMES, CV, folds=2, repeats=2))
    names = ("naive_bayes", "lda")
    plan = Plan(
        table.roles,
        schemes[: 1 if alone else 2],
        tuple(choose(CANDIDATES, name) for name in names),
        cut_off=rule,
        measure="accuracy",
    )
    rounds = {LOO: rounds_of(ALONE, [0] * 20), CV: rounds_of(HALVES, [0, 0, 1, 1])}
    rounds = {scheme: rounds[scheme] for scheme in plan.scheme_names}
    given = {LOO: answered(ALONE, np.full(20, 0.5)), CV: answered(HALVES, inside)}
    # of the other candidate nothing varies
    steady = {LOO: given[LOO], CV: answered(HALVES, np.full(4, 0.5))}
    answers = {
        (scheme, name): (given if name == "naive_bayes" else steady)[scheme]
        for scheme in rounds
        for name in names
    }
    whole = literal(np.empty((0, 2)), [np.where(LABELS, 0.5, 0.1)])
    return evaluate(
        table,
        plan,
        rounds,
        answers=answers,
        whole=dict.fromkeys(names, whole),
        planned={scheme: drawn.n_rounds for scheme, drawn in rounds.items()},
        failures={},
    )


class TestByHand:
    """Halves at 0.5 the first time and at 0.7 the second: of b all are found, then none.

    Each of b lies a half above or below its own mean, all alike in a round: 1/4, doubled as two
    repeats have one degree of freedom; 1/10 for balanced accuracy (see `test_judged`).
    """

    VARYING = (0.5, 0.5, 0.7, 0.7)

    def test_tau2_comes_from_the_other_scheme_at_its_own_cut_offs(self):
        made = two_schemes(self.VARYING)
        part = made.at_cut_off("naive_bayes").part
        assert math.isnan(part.own_tau2(None))
        assert part.tau2_of(0) == 0
        assert part.tau2_of(1) == pytest.approx(0.5, rel=1e-15)
        assert part.tau2_balanced == pytest.approx(0.1, rel=1e-14)
        (look,) = part.second_looks
        assert (look.scheme, look.candidate, look.cut_offs) == (CV, "naive_bayes", "learned")
        # called in the first repeat, not in the second: 0.6 lies between 0.5 and 0.7
        of_b = look.held.labels[look.held.rounds.pairs[1]] == 1
        repeat = look.held.rounds.repeat[look.held.rounds.pairs[0]]
        assert look.held.predicted.tolist() == (of_b & (repeat == 0)).astype(int).tolist()
        assert part.tau2 == model_variance(look.held.correct, look.held.rounds) > 0
        # by the highest score nothing varies
        assert made.part("naive_bayes", LOO).tau2_of(1) == 0

    def test_the_interval_rests_on_it(self):
        made, alone = two_schemes(self.VARYING), two_schemes(self.VARYING, alone=True)
        # ten of ten; p(1 - p) is not let below a thousandth: n = 0.001/(0.0001 + 0.5)
        n = 0.001 / (0.001 / 10 + 0.5)
        bounds = figure(made, "sensitivity", "b").interval
        assert bounds.low == pytest.approx(beta.ppf(0.025, n, 1), rel=1e-9)
        assert figure(alone, "sensitivity", "b").interval.low == pytest.approx(
            0.025 ** (1 / 10), rel=1e-9
        )
        low = figure(alone, "accuracy").interval.low
        assert low == pytest.approx(wilson(20, 20)[0], rel=1e-12)
        assert figure(made, "accuracy").interval.low < low - 0.1

    def test_of_the_same_candidate_alone(self):
        part = two_schemes(self.VARYING).at_cut_off("lda").part
        assert [look.candidate for look in part.second_looks] == ["lda"]
        assert part.tau2_of(1) == part.tau2 == 0

    def test_alone_it_is_unknown_and_said_to_be(self):
        made, alone = two_schemes(self.VARYING), two_schemes(self.VARYING, alone=True)
        part = alone.at_cut_off("naive_bayes").part
        assert part.second_looks == ()
        assert math.isnan(part.tau2)
        assert math.isnan(part.tau2_of(1))
        assert [f.subject for f in found("model_variance_unknown", *as_given(alone))] == [LOO]
        assert found("model_variance_unknown", *as_given(made)) == []

    def test_at_a_fixed_cut_off_too(self):
        # scores of 0.6 and 0.2 against 0.3 everywhere: nothing varies, and that is known
        rule = CutOffRule("b", "fixed", at=0.3, set_on="2026-01-15")
        part = two_schemes(self.VARYING, rule=rule).at_cut_off("naive_bayes").part
        assert [(look.scheme, look.cut_offs) for look in part.second_looks] == [(CV, "fixed")]
        assert part.tau2 == part.tau2_of(1) == 0

    def test_rounds_that_learned_none_tell_nothing(self):
        made = two_schemes((NAN, NAN, NAN, NAN))
        part = made.at_cut_off("naive_bayes").part
        (look,) = part.second_looks
        assert look.held.rounds.n_rounds == 0
        assert math.isnan(part.tau2)
        assert math.isnan(part.tau2_balanced)
        # of those that did each case was held out once
        half = two_schemes((0.5, 0.5, NAN, NAN))
        part = half.at_cut_off("naive_bayes").part
        assert part.second_looks[0].held.rounds.n_rounds == 2
        assert math.isnan(part.tau2)
        # by the highest score it is known, but that is not in use
        assert not math.isnan(half.part("naive_bayes", LOO).tau2)
        assert [f.subject for f in found("model_variance_unknown", *as_given(half))] == [LOO]

    def test_a_scheme_without_inner_scores_is_no_look(self):
        made = two_schemes(self.VARYING)
        parts = {scheme: made.part("naive_bayes", scheme) for scheme in (LOO, CV)}
        bare = replace(answered(HALVES, self.VARYING), inner=None)
        whole = literal(np.empty((0, 2)), [np.where(LABELS, 0.5, 0.1)])
        at = at_cut_off(
            made.table,
            made.plan,
            parts[LOO],
            given=answered(ALONE, np.full(20, 0.5)),
            whole=whole,
            elsewhere=[(parts[CV], bare)],
        )
        assert at.part.second_looks == ()


@pytest.fixture(scope="module")
def real():
    """Twenty cases of each class one by one, a bootstrap, and a learning curve."""
    labels = np.arange(40) % 2
    x = np.random.default_rng(3).normal(size=(40, 3)) + 0.9 * labels[:, None]
    table = table_of(labels, features=x)
    plan = Plan(
        table.roles,
        (choose(SCHEMES, LOO), choose(SCHEMES, "bootstrap", rounds=20)),
        (choose(CANDIDATES, "naive_bayes"),),
        cut_off=CutOffRule("b", "fixed", at=0.4, set_on="2026-01-15"),
        curve=choose(ALL_SCHEMES, "learning_curve", sizes=5),
        measure="accuracy",
    )
    return carried_out(table, plan)[0]


def test_leaving_one_out_takes_it_from_the_bootstrap_at_a_fixed_cut_off(real):
    part = real.at_cut_off("naive_bayes").part
    # bags of the learning curve are small on purpose
    (look,) = part.second_looks
    assert look.scheme == "bootstrap"
    rounds, scores = real.rounds["bootstrap"], real.part("naive_bayes", "bootstrap").held.scores
    called = scores[:, 1] >= 0.4
    right = called == real.table.labels[rounds.pairs[1]]
    assert math.isnan(part.own_tau2(None))
    assert part.tau2 == model_variance(right, rounds)
    for k in (0, 1):
        chosen = real.table.labels == k
        assert part.tau2_of(k) == model_variance(right, rounds, chosen=chosen) > 0
    assert found("model_variance_unknown", *as_given(real)) == []
