"""Published intervals beside the default one, against statsmodels and the core's own."""

import numpy as np
import pytest
from statsmodels.stats.proportion import proportion_confint

from evalcore import binomial
from evalcore.answers import Answers, Reduced
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.evaluation import evaluate
from evalcore.intervals import auc_score_type
from evalcore.other_intervals import beside, of_headline
from evalcore.plan import Plan
from evalcore.resampled_t import corrected_resampled_t
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES

from .checks import carried_out, table_of
from .test_verdict import evaluation, first

LABELS = [0] * 20 + [1] * 21


def some(**rest):
    """Right 35 and 37 of 41 times: wrong in class b alone."""
    return evaluation(first(41, 35, 37), labels=LABELS, **rest)


@pytest.mark.parametrize(
    ("measure", "of_class", "right", "n"),
    [("accuracy", "", 36, 41), ("sensitivity", "b", 16, 21), ("sensitivity", "a", 20, 20)],
)
def test_binomial_ones(measure, of_class, right, n):
    found = some()
    estimate = found.estimate(measure, "lda", of_class=of_class)
    by_method = {i.method: i for i in beside(found, estimate)}
    assert list(by_method)[:5] == [
        "wilson", "wilson_corrected", "clopper_pearson", "agresti_coull", "jeffreys",
    ]  # fmt: skip
    for ours, theirs in (
        ("wilson", "wilson"), ("clopper_pearson", "beta"), ("agresti_coull", "agresti_coull"),
    ):  # fmt: skip
        low, high = proportion_confint(right, n, alpha=0.05, method=theirs)
        assert by_method[ours].low == pytest.approx(low, abs=1e-12)
        assert by_method[ours].high == pytest.approx(min(1, high), abs=1e-12)
    for ours in ("wilson_corrected", "jeffreys"):
        expected = getattr(binomial, ours)(right, n, level=0.95)
        assert by_method[ours].low == pytest.approx(expected.low, abs=1e-12)
        assert by_method[ours].high == pytest.approx(expected.high, abs=1e-12)
    assert {i.level for i in by_method.values()} == {0.95}


def test_corrected_resampled_t_of_the_rounds():
    found = some()
    for measure, of_class, right in (
        # held-out halves: 10 + 11 even and 10 + 10 odd places
        ("accuracy", "", [18 / 21, 17 / 20, 19 / 21, 18 / 20]),
        ("sensitivity", "b", [8 / 11, 7 / 10, 9 / 11, 8 / 10]),
    ):
        estimate = found.estimate(measure, "lda", of_class=of_class)
        values = found.part("lda", found.scheme).held_values(measure, 1)
        assert values.tolist() == pytest.approx(right)
        expected = corrected_resampled_t(right, n_train=20.5, n_test=20.5, level=0.95)
        (last,) = [i for i in beside(found, estimate) if i.method == "corrected_t"]
        assert (last.low, last.high) == (
            pytest.approx(expected.interval.low, abs=1e-12),
            pytest.approx(min(1, expected.interval.high), abs=1e-12),
        )


def test_resampled_t_is_cut_at_one():
    found = evaluation(first(40, 38, 40), labels=[0, 1] * 20)
    by_method = {i.method: i for i in beside(found, found.estimate("accuracy", "lda"))}
    for method in ("corrected_t", "cv_normal"):
        assert by_method[method].high == 1.0
        assert 0 < by_method[method].low < 1


def test_no_t_where_all_rounds_agree_or_one_lacks_the_class():
    same = evaluation(first(40, 40, 40), labels=[0, 1] * 20)
    assert len(list(beside(same, same.estimate("accuracy", "lda")))) == 5
    # b stands at even places alone, so every second round lacks it
    apart = evaluation(first(40, 30, 34), labels=[1, 0] * 20)
    assert len(list(beside(apart, apart.estimate("sensitivity", "lda", of_class="b")))) == 5
    methods = [i.method for i in beside(apart, apart.estimate("accuracy", "lda"))]
    assert methods[5:] == ["corrected_t", "cv_normal"]


def test_nothing_for_rows_of_units_or_an_undefined_share():
    units = np.repeat(np.arange(14), 3)[:41]
    labels = (units % 2).tolist()
    rows = evaluation(first(41, 36, 37), labels=labels, units=units)
    assert list(beside(rows, rows.estimate("accuracy", "lda"))) == []
    # the same rows counted as units are independent
    by_unit = rows.estimate("accuracy", "lda", counted_by="unit")
    assert len(list(beside(rows, by_unit))) >= 5
    lacking = some(never=range(20, 41))
    assert list(beside(lacking, lacking.estimate("sensitivity", "lda", of_class="b"))) == []


def test_normal_interval_of_the_first_repeat():
    found = some()
    estimate = found.estimate("accuracy", "lda")
    (last,) = [i for i in beside(found, estimate) if i.method == "cv_normal"]
    # right 18 of the 21 at even places and 17 of the 20 at odd ones
    within = (18 * 3 / 21 / 20 + 17 * 3 / 20 / 19) / 2
    half = 1.959963984540054 * (within / 41) ** 0.5
    assert (last.low, last.high) == pytest.approx((35 / 41 - half, 35 / 41 + half), abs=1e-12)
    by_class = found.estimate("sensitivity", "lda", of_class="b")
    assert "cv_normal" not in {i.method for i in beside(found, by_class)}


def test_no_rounds_to_look_at_where_cases_are_held_out_alone():
    table = table_of([0, 1] * 8, features=np.random.default_rng(1).normal(size=(16, 2)))
    plan = Plan(table.roles, (choose(SCHEMES, "leave_one_out"),), (choose(CANDIDATES, "lda"),))
    found, _ = carried_out(table, plan)
    methods = [i.method for i in beside(found, found.estimate("accuracy", "lda"))]
    assert methods[-1] == "jeffreys"


def test_balanced_accuracy_and_auc_without_the_models_variance():
    found = some()
    (bounds,) = beside(found, found.estimate("balanced_accuracy", "lda"))
    p, n = [1.0, 16 / 21], [20, 21]
    ends = [proportion_confint(a * b, b, method="wilson") for a, b in zip(p, n, strict=True)]
    low = np.mean(p) - np.hypot(p[0] - ends[0][0], p[1] - ends[1][0]) / 2
    high = np.mean(p) + np.hypot(ends[0][1] - p[0], ends[1][1] - p[1]) / 2
    assert (bounds.low, bounds.high) == pytest.approx((low, min(1, high)), abs=1e-12)
    assert bounds.method == "square_and_add"
    area = found.estimate("auc", "lda", estimator="mean_of_rounds")
    assert list(beside(found, area)) == [auc_score_type(area.value, 21, 20, level=0.95)]


def test_of_headline_names_the_default_first():
    found = some()
    pairs = list(of_headline(found))
    estimates = []
    for estimate, _ in pairs:
        if estimate not in estimates:
            estimates.append(estimate)
    assert [(e.measure, e.of_class, e.estimator) for e in estimates] == [
        ("accuracy", "", "held_out_by_case"),
        ("balanced_accuracy", "", "held_out_by_case"),
        ("sensitivity", "a", "held_out_by_case"),
        ("sensitivity", "b", "held_out_by_case"),
        ("auc", "", "mean_of_rounds"),
    ]
    for estimate in estimates:
        given = [interval for e, interval in pairs if e is estimate]
        assert given == [estimate.interval, *beside(found, estimate)]


def test_all_right_by_weights_that_do_not_add_up_exactly():
    # answers of a case weigh 1/times: rounding must not carry the share beyond 1
    rng = np.random.default_rng(7)
    labels = np.arange(40) % 4
    table = table_of(labels)
    rounds = Rounds.of_bags(rng.multinomial(40, [1 / 40] * 40, 50))
    plan = Plan(table.roles, (choose(SCHEMES, "bootstrap"),), (choose(CANDIDATES, "lda"),))
    counts = np.ones((50, 4, 4))
    rest = dict.fromkeys(("case", "unit"), Reduced(counts, np.full(50, 0.5)))
    right = Answers(
        np.eye(4)[labels[rounds.pairs[1]]], rest, dict.fromkeys(("case", "unit"), counts)
    )
    found = evaluate(
        table, plan, {"bootstrap": rounds}, answers={("bootstrap", "lda"): right},
        whole={"lda": right}, planned={"bootstrap": 50}, failures={},
    )  # fmt: skip
    estimate = found.estimate("accuracy", "lda")
    assert estimate.value <= 1
    assert {i.high for i in beside(found, estimate)} == {1.0}
