"""The coverage study's truth, what it makes of a table at a cut-off, and that a run goes on."""

import math

import numpy as np
import pytest
from sklearn.metrics import accuracy_score, recall_score
from sklearn.naive_bayes import GaussianNB

from evalcore.cut_off_rule import CutOffRule
from evalcore.evaluation import Evaluation
from evalcore.verdict import verdicts_at_cut_off
from tests.studies import coverage
from tests.studies.cells import CELLS, COST, FLOOR, Cell
from tests.studies.coverage import finished, judge, made, run
from tests.studies.mechanisms import Cases, further_cases
from tests.studies.truth import called, true_values

from .checks import carried_out
from .learned_cases import at_floor


def cases(labels) -> Cases:
    """Further cases of which only the labels matter."""
    return Cases(np.array(labels), np.empty((len(labels), 0)), np.arange(len(labels)))


def of_b(scores) -> np.ndarray:
    """Scores of both classes from those of b; binary fractions, so that sums are exact."""
    b = np.array(scores)
    return np.column_stack([1 - b, b])


class TestTrueValues:
    """Three cases of a and two of b, their scores for b beside them."""

    LABELS, SCORES = (0, 0, 0, 1, 1), (0.125, 0.25, 0.5, 0.25, 0.75)

    @pytest.mark.parametrize(
        ("called", "of_a", "of_b_", "right"),
        [
            # by the highest score; the first of two alike
            (None, 3 / 3, 1 / 2, 4 / 5),
            # b from 1/4 up: two of a, both of b, one of each exactly there
            ((1, 0.25), 1 / 3, 2 / 2, 3 / 5),
            ((1, 0.2500001), 2 / 3, 1 / 2, 3 / 5),
            # a from 3/4 up, where 1 - 1/4 is: two of a, one of b
            ((0, 0.75), 2 / 3, 1 / 2, 3 / 5),
            ((0, 0.7500001), 1 / 3, 2 / 2, 3 / 5),
            # a from 1/4 up: all but nobody, for b reaches 3/4
            ((0, 0.25), 3 / 3, 0 / 2, 3 / 5),
            ((1, -math.inf), 0 / 3, 2 / 2, 2 / 5),
            ((1, math.inf), 3 / 3, 0 / 2, 3 / 5),
        ],
    )
    def test_by_hand(self, called, of_a, of_b_, right):
        given = true_values(
            "gauss", cases(self.LABELS), of_b(self.SCORES), counted_by="case", called=called
        )
        assert given["sensitivity"] == pytest.approx([of_a, of_b_], rel=1e-12)
        assert given["accuracy"] == pytest.approx(right, rel=1e-12)
        assert given["balanced_accuracy"] == pytest.approx((of_a + of_b_) / 2, rel=1e-12)
        # 1/4 beats one of three and ties with one, 3/4 beats all: whatever the cut-off
        assert given["auc"] == pytest.approx((1.5 + 3) / 6, rel=1e-12)

    @pytest.mark.parametrize(
        ("way", "of_a", "of_b_", "right"),
        [("unit", 1 / 1, 1 / 2, 2 / 3), ("case", 5 / 6, 3 / 12, 8 / 18)],
    )
    def test_by_unit_a_mean_on_the_cut_off_is_called(self, way, of_a, of_b_, right):
        # means 3/8, 1/2 and 1/4 of six rows each; one row of a and three of b reach 1/2
        rows = ([0.25] * 5 + [1.0], [0.25] * 3 + [0.75] * 3, [0.25] * 6)
        labels = np.repeat([0, 1, 1], 6)
        given = true_values(
            "units", cases(labels), of_b(np.concatenate(rows)), counted_by=way, called=(1, 0.5)
        )
        assert given["sensitivity"] == pytest.approx([of_a, of_b_], rel=1e-12)
        assert given["accuracy"] == pytest.approx(right, rel=1e-12)
        assert given["balanced_accuracy"] == pytest.approx((of_a + of_b_) / 2, rel=1e-12)

    def test_where_no_feature_tells_only_the_class_s_share_is_measured(self):
        given = true_values(
            "noise", cases(self.LABELS), of_b(self.SCORES), counted_by="case", called=(1, 0.25)
        )
        assert given["sensitivity"] == pytest.approx([1 / 3, 1], rel=1e-12)
        assert [given[m] for m in ("accuracy", "balanced_accuracy", "auc")] == [0.5] * 3


class TestCalled:
    def test_the_cut_off_that_goes_to_work(self):
        # learned from inner scores of all cases that are 1/2 throughout for b
        rule = CutOffRule("b", "floor", floor=0.9)
        assert called(at_floor(0, rule=rule), "naive_bayes") == (1, 0.5)

    @pytest.mark.parametrize(("of_class", "at"), [("a", 0), ("b", 1)])
    def test_of_either_class(self, of_class, at):
        rule = CutOffRule(of_class, "fixed", at=0.35)
        assert called(at_floor(0, rule=rule), "naive_bayes") == (at, 0.35)

    def test_none_where_the_highest_score_answers(self):
        assert called(at_floor(0, rule=None), "naive_bayes") is None


class TestMade:
    @pytest.mark.parametrize("rule", [FLOOR, COST])
    def test_the_rule_is_for_the_smallest_class_of_each_table(self, rule):
        of_class = set()
        for number in range(20):
            table, plan = made(Cell("gauss", 30, ("lda",), bootstrap=False, cut_off=rule), number)
            a, b = np.bincount(table.labels)
            smallest = "a" if a <= b else "b"
            assert plan.cut_off == CutOffRule.read(f"{smallest}:{rule}")
            of_class.add(smallest)
        assert of_class == {"a", "b"}

    def test_the_second_look_only_where_it_is_asked_for(self):
        for bootstrap, keys in (
            (True, ["cross_validation", "bootstrap"]),
            (False, ["cross_validation"]),
        ):
            plan = made(Cell("gauss", 60, ("lda",), bootstrap=bootstrap, cut_off=FLOOR), 0)[1]
            assert [scheme.key for scheme in plan.schemes] == keys

    def test_none_without_one(self):
        assert made(Cell("gauss", 30, ("lda",)), 0)[1].cut_off is None

    def test_every_cell_of_the_study_learns_one(self):
        assert {cell.cut_off for cell in CELLS["cut_off"]} == {FLOOR, COST}
        for cell in CELLS["cut_off"]:
            plan = made(cell, 0)[1]
            assert [plan.learns_cut_off(choice) for choice in plan.candidates] == [True]
        assert {cell.cut_off for name in ("quick", "default", "slow") for cell in CELLS[name]} == {
            ""
        }


@pytest.fixture(
    scope="module", params=[("imb", 120, FLOOR), ("gauss", 60, COST)], ids=lambda p: p[0]
)
def judged(request) -> tuple[Cell, Evaluation, dict]:
    """A table of a cell with a rule, as evaluated, and its one row."""
    scenario, n, rule = request.param
    cell = Cell(scenario, n, ("naive_bayes",), bootstrap=False, cut_off=rule)
    (row,) = judge(cell, 3)
    return cell, carried_out(*made(cell, 3))[0], row


class TestJudge:
    def test_the_truth_is_of_answers_at_the_cut_off_that_goes_to_work(self, judged):
        cell, found, row = judged
        of_class, at = called(found, "naive_bayes")
        # scikit-learn's own class fitted on the table, and its own measures
        model = GaussianNB().fit(found.table.features, found.table.labels)
        further = further_cases(cell.scenario)
        scores = model.predict_proba(further.features)[:, of_class]
        named = np.where(scores >= at, of_class, 1 - of_class)
        recalls = recall_score(further.labels, named, average=None)
        assert row["true/accuracy"] == pytest.approx(
            accuracy_score(further.labels, named), abs=1e-12
        )
        assert row["true/balanced_accuracy"] == pytest.approx(recalls.mean(), abs=1e-12)
        assert row["true/sensitivity"] == pytest.approx(recalls[of_class], abs=1e-12)
        # not those of the highest score
        assert (
            row["true/sensitivity"]
            != recall_score(further.labels, model.predict(further.features), average=None)[of_class]
        )

    def test_figures_are_those_at_the_cut_off_alone(self, judged):
        cell, found, row = judged
        assert row["cut_off"] == cell.cut_off
        by = {name.split("/")[1] for name in row if name.startswith("default/")}
        assert by == {"at_cut_off"}
        smallest = found.table.classes[int(np.bincount(found.table.labels).argmin())]
        for measure in coverage.SHARES:
            of_class = smallest if measure == "sensitivity" else ""
            (estimate,) = [
                e
                for e in found.beside.estimates
                if (e.estimator, e.measure, e.of_class) == ("at_cut_off", measure, of_class)
            ]
            ends = (estimate.value, estimate.interval.low, estimate.interval.high)
            name = f"default/at_cut_off/{measure}"
            assert tuple(row[f"{name}/{part}"] for part in ("value", "low", "high")) == ends

    def test_bounds_are_those_of_verdicts_at_the_cut_off(self, judged):
        _, found, row = judged
        for verdict in verdicts_at_cut_off(found, "naive_bayes"):
            assert row[f"at_least/{verdict.limit.measure}"] == (
                verdict.at_least if verdict.n >= 10 else -math.inf
            )

    def test_predictive_values_and_cost_are_true_at_the_share_of_the_table(self, judged):
        cell, found, row = judged
        of_class, _ = called(found, "naive_bayes")
        p = np.mean(found.table.labels == of_class)
        sensitivity = row["true/sensitivity"]
        specificity = 2 * row["true/balanced_accuracy"] - sensitivity
        hit, alarm = p * sensitivity, (1 - p) * (1 - specificity)
        cleared, missed = (1 - p) * specificity, p * (1 - sensitivity)
        miss = 5 if cell.cut_off == COST else 1
        for measure, value in (
            ("right_when_called", hit / (hit + alarm)),
            ("right_when_not_called", cleared / (cleared + missed)),
            ("cost", miss * missed + alarm),
        ):
            assert row[f"true/{measure}"] == pytest.approx(value, rel=1e-12)

    @pytest.mark.parametrize(("n", "of_class", "offered"), [(60, 9, False), (120, 22, True)])
    def test_too_few_for_a_floor_have_a_value_but_no_interval(self, n, of_class, offered):
        # nine are enough for all cases, and too few in bags of four fifths
        (row,) = judge(Cell("imb", n, ("naive_bayes",), bootstrap=False, cut_off=FLOOR), 3)
        assert row["smallest_class"] == of_class
        for measure in coverage.SHARES:
            name = f"default/at_cut_off/{measure}"
            assert math.isfinite(row[f"{name}/value"])
            assert [math.isfinite(row[f"{name}/{end}"]) for end in ("low", "high")] == [offered] * 2
            assert (row[f"{name}/method"] != "") is offered
            assert math.isfinite(row[f"at_least/{measure}"]) is offered

    def test_units_at_a_cut_off_are_counted_by_unit_alone(self):
        for rule, ways in ((FLOOR, ["unit"]), ("", ["unit", "case"])):
            cell = Cell("units", 20, ("naive_bayes",), bootstrap=False, cut_off=rule)
            assert [row["counted_by"] for row in judge(cell, 0)] == ways


def test_rows_of_another_rule_are_not_taken_for_done(tmp_path, monkeypatch):
    asked = []

    def row_of(cell: Cell, number: int) -> list[dict[str, object]]:
        asked.append((cell.cut_off, number))
        keys = (cell.scenario, cell.n, cell.candidates[-1], cell.cut_off, "case", number)
        return [dict(zip(coverage.KEYS, keys, strict=True))]

    monkeypatch.setattr(coverage, "judge", row_of)
    plain, floor, cost, other = (
        Cell("gauss", 60, ("lda",), cut_off=rule) for rule in ("", FLOOR, COST, "floor=0.95")
    )
    file = tmp_path / "raw.csv"
    # each time what was done, and what is asked for besides
    for cells, tables, expected in (
        ((floor,), 1, [(FLOOR, 0)]),
        ((plain, floor), 1, [("", 0)]),
        ((plain, floor, cost, other), 1, [(COST, 0), ("floor=0.95", 0)]),
        ((plain, floor, cost, other), 1, []),
        ((cost, plain), 2, [(COST, 1), ("", 1)]),
    ):
        asked.clear()
        run(cells, file, tables=tables)
        assert asked == expected
    assert [(row["cut_off"], row["table"]) for row in finished(file)] == [
        (FLOOR, "0"), ("", "0"), (COST, "0"), ("floor=0.95", "0"), (COST, "1"), ("", "1"),
    ]  # fmt: skip


def test_a_run_goes_on_where_it_stopped(tmp_path):
    cells = (
        Cell("gauss", 30, ("lda", "naive_bayes"), bootstrap=False),
        Cell("three", 60, ("naive_bayes",), bootstrap=False),
    )
    straight, stopped = tmp_path / "straight.csv", tmp_path / "stopped.csv"
    coverage.run(cells, straight, tables=2)
    coverage.run(cells, stopped, tables=1)
    # the last line, of a table of one candidate, is cut short
    stopped.write_bytes(stopped.read_bytes()[:-40])
    coverage.run(cells, stopped, tables=2)
    assert sorted(stopped.read_text().splitlines()) == sorted(straight.read_text().splitlines())
    before = stopped.read_bytes()
    coverage.run(cells, stopped, tables=2)
    assert stopped.read_bytes() == before
    rows = coverage.finished(straight)
    # two candidates and the best of them, and one alone
    assert [row["candidate"] for row in rows if row["table"] == "0" and row["scenario"] == "gauss"] == [
        "lda", "naive_bayes", "best of all 2",
    ]  # fmt: skip
    assert len(rows) == 2 * (3 + 1)
