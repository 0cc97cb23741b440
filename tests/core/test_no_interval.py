"""An interval that would be undefined is none: in estimates, tables and rates."""

import csv
import dataclasses
import io
import math

import numpy as np
import pytest

from evalcore.choice import choose
from evalcore.estimated import default_interval
from evalcore.judged_intervals import offers_interval, share_interval
from evalcore.results import results_csv
from evalcore.schemes import SCHEMES

from .checks import table_of
from .test_findings import CV, a_plan, evaluated, found, wrong_in
from .test_judged import judged_of

BOUNDS = ("low", "high", "level", "interval")


def of_blocks(with_b: int):
    """A hundred cases of ten sites, b in so many of them, two repeats of halves of sites."""
    of_site = np.arange(100) % 10
    table = table_of((of_site < with_b).astype(int), entries={"site": [f"s{k}" for k in of_site]})
    scheme = choose(SCHEMES, CV, folds=2, repeats=2, keep="site")
    plan = dataclasses.replace(a_plan(), schemes=(scheme,))
    made = evaluated(table, plan, plan.draw(table), chosen={CV: wrong_in(table, range(0, 100, 7))})
    return table, plan, made


@pytest.mark.parametrize(("with_b", "offered"), [(4, False), (5, True)])
class TestTooFewBlocksOfAClass:
    def test_no_estimate_has_it(self, with_b, offered):
        _, plan, made = of_blocks(with_b)
        part = made.part("logistic", CV)
        assert offers_interval(part, 1)
        assert share_interval(0.95, part, 1).defined is offered
        for measure, k, has in (
            ("sensitivity", 1, offered),
            ("balanced_accuracy", 0, offered),
            ("sensitivity", 0, True),
            ("accuracy", 0, True),
        ):
            assert (default_interval(plan, part, measure, k) is not None) is has
            name = "ab"[k] if measure == "sensitivity" else ""
            estimate = made.estimate(measure, "logistic", of_class=name)
            assert (estimate.interval is not None) is has
            assert not math.isnan(estimate.value)

    def test_cells_are_empty_not_undefined(self, with_b, offered):
        _, _, made = of_blocks(with_b)
        rows = list(csv.DictReader(io.StringIO(results_csv(made))))
        (of_b,) = (
            r
            for r in rows
            if (r["measure"], r["class"], r["estimator"])
            == ("sensitivity", "b", "held_out_by_case")
        )
        assert float(of_b["value"]) > 0
        cells = [of_b[key] for key in BOUNDS]
        assert (cells == [""] * 4) is not offered
        assert all(cell not in ("", "nan") for cell in cells) is offered
        # nowhere is an end undefined
        assert {r[key] for r in rows for key in BOUNDS}.isdisjoint({"nan"})

    def test_it_is_said(self, with_b, offered):
        raised = found("few_blocks", *of_blocks(with_b))
        given = [(f.severity, f.subject, f.value, f.threshold) for f in raised]
        assert given == ([] if offered else [("moderate", "b", 4, 5)])
        for finding in raised:
            assert finding.title.startswith("Only 4 blocks with b cases in ")


def test_of_a_class_never_held_out():
    labels = np.repeat([0, 1], 10)
    answers = np.where(np.arange(20) < 10, labels, -1)
    part = judged_of([answers] * 2, labels)
    assert default_interval(a_plan(), part, "sensitivity", 1) is None
    assert default_interval(a_plan(), part, "balanced_accuracy", 0) is None
    assert default_interval(a_plan(), part, "sensitivity", 0).defined
    assert default_interval(a_plan(), part, "accuracy", 0).defined


def test_of_nobody_held_out():
    part = judged_of(np.full((2, 20), -1), np.repeat([0, 1], 10))
    for measure in ("accuracy", "balanced_accuracy", "sensitivity", "auc", "precision"):
        assert default_interval(a_plan(), part, measure, 0) is None
