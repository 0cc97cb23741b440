"""The coverage study's table: hand-made raw rows, every share worked out as a fraction."""

import csv
import io
import math
import sys

import pytest

from evalcore import evidence
from tests.studies import coverage
from tests.studies.coverage_table import COLUMNS, summary, write

ACCURACY = "default/held_out_by_case/accuracy"
AT_CUT_OFF = "default/at_cut_off/accuracy"
AUC = "default/mean_of_rounds/auc"


def raw(table: int, candidate: str = "lda", **values: object) -> dict[str, object]:
    """A row of the raw file; columns are written with two underscores for a stroke."""
    cell = {"scenario": "gauss", "n": 60, "counted_by": "case", "smallest_class": 30, "cut_off": ""}
    named = {name.replace("__", "/"): value for name, value in values.items()}
    return cell | {"candidate": candidate, "table": table} | named


def figure(name: str, value: object, low: object, high: object, method: str = "wilson") -> dict:
    return dict(zip((f"{name}/{p}" for p in coverage.PARTS), (value, low, high, method), strict=True))  # fmt: skip


def only(lines, **wanted) -> dict:
    (line,) = [x for x in lines if all(x[name] == value for name, value in wanted.items())]
    return line


class TestFigures:
    ROWS = (
        (20, 0.84, 0.70, 0.90, "wilson"),
        (21, 0.82, 0.81, 0.91, "wilson"),  # begins above the truth
        (22, 0.80, 0.80, 0.90, "other"),  # ends are part of the interval
        (23, 0.78, 0.70, 0.80, "wilson"),
        (30, 0.86, math.nan, math.nan, ""),
    )

    @pytest.fixture
    def line(self) -> dict:
        made = [
            raw(at, smallest_class=size) | {"true/accuracy": 0.80} | figure(ACCURACY, *of)
            for at, (size, *of) in enumerate(self.ROWS)
        ]
        (line,) = summary(made)
        return line

    def test_coverage_is_of_tables_with_an_interval_and_the_others_are_counted(self, line):
        assert line["coverage"] == 3 / 4
        assert (line["tables"], line["without_interval"]) == (5, 1)

    def test_its_error_is_of_two_successes_and_two_failures_more(self, line):
        # (3 + 2)/(4 + 4) = 5/8: sqrt(5/8 x 3/8 / 8)
        assert line["monte_carlo_error"] == pytest.approx(math.sqrt(15 / 512), rel=1e-12)

    def test_bias_rmse_and_width(self, line):
        # off by 4, 2, 0, -2 and 6 points
        assert line["bias"] == pytest.approx(0.02, abs=1e-12)
        assert line["rmse"] == pytest.approx(math.sqrt(0.0060 / 5), abs=1e-12)
        assert line["width"] == pytest.approx((0.2 + 0.1 + 0.1 + 0.1) / 4, abs=1e-12)

    def test_keys(self, line):
        keys = ("scheme", "estimator", "measure", "interval", "smallest_class")
        expected = ("default", "held_out_by_case", "accuracy", "other or wilson", 22)
        assert tuple(line[key] for key in keys) == expected


def test_an_error_where_every_table_agrees():
    made = [raw(at) | {"true/accuracy": 0.5} | figure(ACCURACY, 0.5, 0.4, 0.6) for at in range(4)]
    (line,) = summary(made)
    assert line["coverage"] == 1
    # (4 + 2)/(4 + 4) = 3/4: sqrt(3/4 x 1/4 / 8)
    assert line["monte_carlo_error"] == pytest.approx(math.sqrt(3 / 128), rel=1e-12)


def test_without_any_interval_there_is_no_coverage_but_a_bias():
    made = [raw(at) | {"true/accuracy": 0.5} | figure(ACCURACY, 0.75, math.nan, math.nan, "") for at in range(2)]  # fmt: skip
    (line,) = summary(made)
    assert math.isnan(line["coverage"])
    assert math.isnan(line["monte_carlo_error"])
    assert math.isnan(line["width"])
    assert (line["bias"], line["tables"], line["without_interval"]) == (0.25, 2, 2)


@pytest.mark.parametrize(
    ("scenario", "facts"), [("p50", (50, 2, 1)), ("three", (5, 3, 1)), ("units", (5, 2, 6))]
)
def test_what_tables_of_a_scenario_are_like(scenario, facts):
    made = raw(0, scenario=scenario) | {"true/accuracy": 0.5} | figure(ACCURACY, 0.5, 0.4, 0.6)
    (line,) = summary([made])
    assert (line["features"], line["classes"], line["rows"]) == facts


def test_a_scheme_that_was_not_carried_out_leaves_no_line():
    made = [raw(0) | {"true/accuracy": 0.5} | figure(ACCURACY, "", "", "", "")]
    assert list(summary(made)) == []


def test_auc_of_two_schemes_only_where_there_were_two():
    alone = figure(AUC, 0.7, 0.6, 0.8) | figure(AUC.replace("/auc", "_alone/auc"), 0.7, 0.65, 0.8)
    second = figure("bootstrap/mean_of_rounds/auc", 0.7, 0.6, 0.8)
    twice = [raw(at) | {"true/auc": 0.5} | alone | second for at in (1, 2)]
    made = [raw(0) | {"true/auc": 0.7} | alone, *twice]
    lines = list(summary(made))
    both = only(lines, scheme="default", estimator="mean_of_rounds")
    assert (both["tables"], both["coverage"]) == (2, 0)
    one = only(lines, scheme="default", estimator="mean_of_rounds_alone")
    assert (one["tables"], one["coverage"]) == (3, 1 / 3)
    # one of two is not most of a cell's tables
    few = {(line["scheme"], line["estimator"]) for line in summary(made[:2])}
    assert ("default", "mean_of_rounds") not in few
    assert ("default", "mean_of_rounds_alone") in few


def test_a_verdict_is_wrong_where_the_true_rate_itself_is_called_shown():
    bounds = (0.79, 0.80, 0.81, math.nan, -math.inf)
    made = [raw(at, at_least__accuracy=b, true__accuracy=0.80) for at, b in enumerate(bounds)]
    (line,) = summary(made)
    assert (line["estimator"], line["measure"]) == ("verdict", "accuracy")
    # 0.80 and 0.81 reach it; without a bound nothing is called shown
    assert (line["coverage"], line["tables"], line["without_interval"]) == (3 / 5, 5, 2)
    # (3 + 2)/(5 + 4) = 5/9
    assert line["monte_carlo_error"] == pytest.approx(math.sqrt(20 / 729), rel=1e-12)


def test_the_best_has_figures_of_its_own():
    made = raw(0, "best of all 8", at_least__accuracy=0.7) | {"true/accuracy": 0.8}
    lines = list(summary([made | figure(ACCURACY, 0.8, 0.7, 0.9)]))
    assert [line["estimator"] for line in lines] == ["winner_corrected", "verdict"]
    assert {line["candidate"] for line in lines} == {"best of all 8"}


def line_up(table: int, *false: int, low: float = -0.1) -> list[dict]:
    """logistic against lda and tree, then the best; which of the two calls are false."""
    others = [
        raw(table, name, difference__call="better", difference__false=wrong)
        | {"difference/true": 0.05, "difference/value": 0.0}
        | {"difference/low": low, "difference/high": 0.1}
        for name, wrong in zip(("lda", "tree"), false, strict=True)
    ]
    return [raw(table, "logistic"), *others, raw(table, "best of all 3")]


class TestComparisons:
    ROWS = (*line_up(0, 1, 0), *line_up(1, 1, 1), *line_up(2, 0, 0), *line_up(3, 0, 1, low=0.06))

    def test_each_pair(self):
        lines = list(summary(self.ROWS))
        lda = only(lines, candidate="logistic against lda", estimator="comparison")
        tree = only(lines, candidate="logistic against tree", estimator="comparison")
        assert (lda["coverage"], tree["coverage"]) == (2 / 4, 2 / 4)
        held = only(lines, candidate="logistic against lda", estimator="difference")
        # -0.1 to 0.1 holds 0.05, 0.06 to 0.1 does not
        assert (held["coverage"], held["bias"]) == (3 / 4, pytest.approx(-0.05, abs=1e-12))

    def test_a_family_is_wrong_where_any_call_is(self):
        family = only(summary(self.ROWS), candidate="all pairs")
        assert (family["estimator"], family["measure"]) == ("comparison", "accuracy")
        assert (family["coverage"], family["tables"], family["without_interval"]) == (1 / 4, 4, 0)

    def test_line_ups_of_other_files_do_not_mix(self):
        rows = [*self.ROWS, raw(0, "svm"), raw(1, "svm")]
        assert list(summary(rows)) == list(summary(self.ROWS))

    def test_without_an_interval_nothing_is_called(self):
        lines = list(summary([*line_up(0, 0, 0), *line_up(1, 0, 0, low=math.nan)]))
        family = only(lines, candidate="all pairs")
        assert (family["coverage"], family["tables"], family["without_interval"]) == (1, 2, 1)


def test_a_table_judged_twice_counts_once_and_stays_with_its_line_up():
    # interrupted after two rows, gone on with another table and line-up, then judged again
    rows = [*line_up(0, 1, 0)[:2], *line_up(1, 0, 0), raw(0, "svm"), *line_up(0, 0, 0)]
    lines = list(summary(rows))
    assert {line["candidate"] for line in lines} == {
        "logistic against lda",
        "logistic against tree",
        "all pairs",
    }
    family = only(lines, candidate="all pairs")
    assert (family["tables"], family["coverage"]) == (2, 1)


def test_cells_stand_in_the_order_of_the_study_whatever_came_first():
    def made(scenario: str, n: int) -> dict:
        return raw(0, scenario=scenario, n=n, at_least__accuracy=0.5, true__accuracy=0.8)

    rows = [made("noise", 40), made("gauss", 120), made("p50", 60), made("gauss", 60)]
    found = [(line["scenario"], line["n"]) for line in summary(rows)]
    assert found == [("gauss", 60), ("gauss", 120), ("p50", 60), ("noise", 40)]


class TestRules:
    """The same table judged by the highest score and at cut-offs of two rules."""

    RULES = ("floor=0.9", "", "miss=5,alarm=1")
    HELD = (1, 2, 3)  # of four tables
    SHOWN = (3, 0, 1)  # wrongly, of four

    @pytest.fixture
    def rows(self) -> list[dict]:
        made = []
        for table in range(4):
            for rule, held, shown in zip(self.RULES, self.HELD, self.SHOWN, strict=True):
                low = 0.7 if table < held else 0.85
                name = AT_CUT_OFF if rule else ACCURACY
                row = raw(table, cut_off=rule, true__accuracy=0.8, smallest_class=20 + len(rule))
                row["at_least/accuracy"] = 0.9 if table < shown else 0.5
                made.append(row | figure(name, 0.8, low, 0.9))
        return made

    def test_are_cells_of_their_own(self, rows):
        lines = list(summary(rows))
        assert len(lines) == 6
        for rule, held, shown in zip(self.RULES, self.HELD, self.SHOWN, strict=True):
            by = "at_cut_off" if rule else "held_out_by_case"
            interval = only(lines, cut_off=rule, estimator=by)
            assert (interval["coverage"], interval["tables"]) == (held / 4, 4)
            assert (interval["scheme"], interval["smallest_class"]) == ("default", 20 + len(rule))
            verdict = only(lines, cut_off=rule, estimator="verdict")
            assert (verdict["coverage"], verdict["tables"]) == (1 - shown / 4, 4)

    def test_stand_together_whatever_came_first(self, rows):
        expected = ["", "", "floor=0.9", "floor=0.9", "miss=5,alarm=1", "miss=5,alarm=1"]
        assert [line["cut_off"] for line in summary(rows[::-1])] == expected

    def test_a_table_judged_twice_counts_once_a_rule(self, rows):
        again = rows[0] | figure(AT_CUT_OFF, 0.8, 0.85, 0.9)
        lines = list(summary([*rows, again]))
        first, third = (only(lines, cut_off=self.RULES[i], estimator="at_cut_off") for i in (0, 2))
        assert (first["coverage"], first["tables"]) == (0, 4)
        assert (third["coverage"], third["tables"]) == (3 / 4, 4)

    def test_compare_their_own_line_ups(self):
        ruled = [row | {"cut_off": "floor=0.9"} for row in line_up(0, 1, 0)]
        lines = list(summary([*line_up(0, 0, 0), *ruled]))
        for rule, share in (("", 1), ("floor=0.9", 0)):
            family = only(lines, candidate="all pairs", cut_off=rule)
            assert (family["coverage"], family["tables"]) == (share, 1)

    def test_are_written_and_read_back(self, rows):
        file = io.StringIO()
        write(summary(rows), file)
        read = evidence.read(file.getvalue())
        assert [line.cut_off for line in read] == [line["cut_off"] for line in summary(rows)]
        assert {line.cut_off for line in read} == set(self.RULES)


def test_written_with_four_digits():
    made = [raw(at, smallest_class=20 + at, true__accuracy=0.8) | figure(ACCURACY, 0.8, 0.7, 0.9) for at in range(2)]  # fmt: skip
    # one end alone is no interval
    for at, ends in enumerate(((math.nan, 0.9), (0.7, math.nan))):
        made.append(raw(at, "svm", true__accuracy=0.8) | figure(ACCURACY, 0.8, *ends))
    file = io.StringIO()
    write(summary(made), file)
    assert file.getvalue().partition("\n")[0] == ",".join(COLUMNS)
    first, second = csv.DictReader(io.StringIO(file.getvalue()))
    assert (first["coverage"], first["width"], first["smallest_class"]) == ("1.0000", "0.2000", "20.5")  # fmt: skip
    assert (second["coverage"], second["smallest_class"]) == ("nan", "30")


def test_several_files_become_what_the_package_reads(tmp_path, monkeypatch):
    paths = []
    for at in range(2):
        path = tmp_path / f"raw{at}.csv"
        with path.open("w", newline="") as file:
            writer = csv.DictWriter(file, coverage.COLUMNS, restval="", lineterminator="\n")
            writer.writeheader()
            writer.writerow(raw(at, true__accuracy=0.8 - at / 2) | figure(ACCURACY, 0.8, 0.7, 0.9))
        paths.append(str(path))
    out = tmp_path / "small.csv"
    monkeypatch.setattr(sys, "argv", ["coverage", "--summarise", *paths, "--out", str(out)])
    coverage.main()
    (line,) = evidence.read(out.read_text())
    assert (line.tables, line.coverage, line.n, line.features) == (2, 0.5, 60, 5)
    assert line.bias == 0.25  # of 0 and 0.5
