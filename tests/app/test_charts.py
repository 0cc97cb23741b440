"""Charts draw the core's values, say them in words, and survive what users' files hold."""

import dataclasses
import io
import json
import math
import random
import subprocess
import sys

import numpy as np
import pytest

from app.charts import (
    Figure,
    class_balance,
    estimates_with_intervals,
    in_and_out,
    per_class,
    round_scores,
    svg,
)
from app.charts.balance import cut_every
from app.charts.bins import Bins, bins_of
from app.charts.drawing import ruler
from app.charts.estimates import title_of
from app.charts.placing import Reference, placed
from app.charts.print_form import printed
from app.charts.style import LOOKS, candidate_look, short_title, shorten
from evalcore.answer import scheme_in_words
from evalcore.answers import joined
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.engine import run, tasks
from evalcore.evaluation import Evaluation, evaluate
from evalcore.figures import Estimate, Interval
from evalcore.intake import make_table
from evalcore.limit import Limit
from evalcore.plan import Plan
from evalcore.schemes import SCHEMES
from evalcore.sheet import read_sheet
from evalcore.table import Roles, Table
from evalcore.wording import NBSP, Noun

HOSTILE = ("<b>x</b>", 'datum.x\'] + "$(1)" :red[a] *b* ' + "long " * 40)


def table_of(classes: tuple[str, ...], *, units: int = 24, rows: int = 1) -> Table:
    rng = random.Random(4)
    text = io.StringIO()
    text.write("lot,a,b,verdict\n")
    for unit in range(units):
        k = unit % 3 % len(classes)
        name = classes[k].replace('"', '""')
        for _ in range(rows):
            text.write(f'L{unit},{rng.gauss(k, 0.8):.4f},{rng.gauss(0, 1):.4f},"{name}"\n')
    if rows > 1:
        roles = Roles("verdict", "lot", noun=Noun("lot", "lots"))
    else:
        roles = Roles("verdict", leave_out=("lot",))
    return make_table(read_sheet(text.getvalue().encode(), "lots.csv"), roles)


def evaluation_of(table: Table, *, limits: tuple[Limit, ...] = ()) -> Evaluation:
    plan = Plan(
        table.roles,
        (
            choose(SCHEMES, "cross_validation", folds=4, repeats=2),
            choose(SCHEMES, "bootstrap", rounds=20),
            choose(SCHEMES, "leave_one_out"),
            choose(SCHEMES, "holdout"),
            choose(SCHEMES, "random_subsampling", rounds=5),
        ),
        tuple(
            choose(CANDIDATES, key, **values)
            for key, values in (
                ("majority", {}),
                ("logistic", {}),
                ("nearest_neighbours", {"k": 1}),
            )
        ),
        limits=limits,
    )
    rounds = plan.draw(table)
    done = list(run(table, plan, rounds, todo=tasks(rounds), jobs=1))
    whole = {c: next(d.answers[c] for d in done if not d.task.scheme) for c in plan.candidate_names}
    answers = {
        (s, c): joined([d.answers[c] for d in done if d.task.scheme == s])
        for s in rounds
        for c in plan.candidate_names
    }
    return evaluate(table, plan, rounds, answers=answers, whole=whole, planned={}, failures={})


@pytest.fixture(scope="module")
def lots() -> Evaluation:
    limits = (Limit("accuracy", 0.625), Limit("sensitivity", 0.9, "failing"))
    return evaluation_of(table_of(("good", "failing"), rows=2), limits=limits)


@pytest.fixture(scope="module")
def hostile() -> Evaluation:
    return evaluation_of(table_of(HOSTILE))


@pytest.fixture(scope="module")
def three() -> Evaluation:
    return evaluation_of(table_of(("a", "b", "c")))


def drawn(figure: Figure, *fields: str) -> list[dict]:
    """All rows the chart was given that hold these fields."""
    spec = figure.chart.to_dict(validate=False)
    return [row for rows in spec["datasets"].values() for row in rows if {*fields} <= {*row}]


def plain(text: str) -> str:
    return text.replace(NBSP, " ")


def one_of_each_form(evaluation: Evaluation) -> list[Figure]:
    first = {evaluation.table.classes[0]: 0.5}
    return [
        class_balance(evaluation.table),
        estimates_with_intervals(evaluation, "accuracy"),
        per_class(evaluation, "logistic", bounds=first),
        round_scores(evaluation, "cross_validation"),
        in_and_out(evaluation, "bootstrap", plus_632=frozenset({"logistic"})),
    ]


def all_figures(evaluation: Evaluation) -> list[Figure]:
    return [
        *one_of_each_form(evaluation),
        *(estimates_with_intervals(evaluation, m) for m in ("balanced_accuracy", "auc")),
        *(round_scores(evaluation, s) for s in evaluation.plan.scheme_names),
        *(in_and_out(evaluation, s) for s in evaluation.plan.scheme_names),
        round_scores(evaluation, "bootstrap", "auc"),
        in_and_out(evaluation, "bootstrap", "balanced_accuracy"),
    ]


def test_marks_and_blocks_stand_where_the_core_says(lots):
    figure = estimates_with_intervals(lots, "accuracy")
    marks = drawn(figure, "x", "shape")
    assert [m["x"] for m in marks] == [
        lots.estimate("accuracy", c).value for c in ("logistic", "nearest_neighbours")
    ]
    blocks = drawn(figure, "x2", "colour", "interval")
    for block, name in zip(blocks, ("logistic", "nearest_neighbours"), strict=True):
        ends = lots.estimate("accuracy", name).interval
        assert (block["x"], block["x2"]) == (ends.low, ends.high)


def test_the_majority_is_a_line_and_no_row(lots):
    figure = estimates_with_intervals(lots, "accuracy")
    assert "majority" not in json.dumps(figure.rows)
    words = [plain(row["long"]) for row in drawn(figure, "long")]
    assert "always answering ‘good’ 67 %" in words
    assert "limit 62.5 %" in words  # as it was set, not rounded


@pytest.mark.parametrize("scheme", ["cross_validation", "bootstrap", "leave_one_out", "holdout"])
def test_bars_count_every_round_once(lots, scheme):
    figure = round_scores(lots, scheme)
    for name in ("logistic", "nearest_neighbours"):
        held = lots.part(name, scheme).held_values("accuracy")
        assert lots.rounds[scheme].n_rounds == len(held)
    total = sum(row["rounds"] for row in drawn(figure, "score", "rounds"))
    assert total == 2 * lots.rounds[scheme].n_rounds


def test_both_sides_count_every_round_and_the_gap_runs_from_mean_to_mean(lots):
    figure = in_and_out(lots, "bootstrap")
    for side in ("out-of-bag", "in-bag"):
        bars = [row for row in drawn(figure, "side") if row["side"] == side]
        assert sum(row["rounds"] for row in bars) == 2 * 20
    gaps = [row for row in drawn(figure, "x", "x2") if "colour" not in row]
    part = lots.part("logistic", "bootstrap")
    assert gaps[0]["x"] == pytest.approx(np.nanmean(part.held_values("accuracy")), abs=1e-12)
    assert gaps[0]["x2"] == pytest.approx(np.mean(part.in_bag_values("accuracy")), abs=1e-12)


def test_632_plus_only_where_asked_for_and_only_for_bootstraps(lots):
    asked = frozenset({"logistic"})
    shown = in_and_out(lots, "bootstrap", plus_632=asked)
    value = lots.estimate(
        "accuracy", "logistic", scheme="bootstrap", estimator="point_632_plus"
    ).value
    assert value in [row["x"] for row in drawn(shown, "x", "y2")]
    assert shown.alt.count(".632+") == 1
    assert ".632+" not in in_and_out(lots, "bootstrap").alt
    assert ".632+" not in in_and_out(lots, "cross_validation", plus_632=asked).alt


def test_balance_draws_units_solid_and_rows_open(lots):
    figure = class_balance(lots.table)
    bars = drawn(figure, "x2", "class")
    assert [b["x2"] for b in bars] == pytest.approx([8 / 24, 16 / 24] * 2, abs=1e-12)
    assert plain(figure.title) == (
        "8 of 24 lots are ‘failing’: what can be judged about them rests on 8, not on 16 rows"
    )
    assert figure.rows[1]["lots"] == 16
    assert figure.rows[1]["rows"] == 32


def test_balance_without_units_counts_cases_once(three):
    figure = class_balance(three.table)
    assert len(drawn(figure, "x2", "class")) == 3
    assert plain(figure.title) == "Each of the 3 classes has 8 cases"
    assert figure.caption.startswith("Counted by case.")


def test_cuts_can_be_counted():
    assert [cut_every(n) for n in (7, 400, 401, 30_000)] == [10, 10, 100, 1000]


def test_per_class_marks_limits_and_cautious_bounds(lots):
    figure = per_class(lots, "logistic", bounds={"failing": 0.41})
    marks = drawn(figure, "x", "shape")
    assert [m["x"] for m in marks] == [
        lots.estimate("sensitivity", "logistic", of_class=k).value for k in ("failing", "good")
    ]
    words = {plain(row["long"]): row["x"] for row in drawn(figure, "x", "long", "align")}
    assert words["at least 41 %"] == 0.41
    assert words["limit 90 %"] == 0.9
    assert plain(figure.title) == "Failing lots found: at least 41 %, limit 90 %"


@pytest.mark.parametrize(("bound", "apart"), [(0.41, False), (0.89, True), (0.91, True)])
def test_words_of_a_bound_and_a_limit_do_not_touch(lots, bound, apart):
    figure = per_class(lots, "logistic", bounds={"failing": bound})
    under = [r for r in drawn(figure, "x", "long", "align") if r["long"].startswith(("at", "lim"))]
    assert len(under) == 2
    assert (under[0]["y"] != under[1]["y"]) == apart


def test_every_figure_has_its_words_and_takes_the_width_of_its_container(lots):
    for figure in all_figures(lots):
        assert figure.alt.startswith(figure.title)
        assert ("Scheme: " in figure.alt) == (figure.title != class_balance(lots.table).title)
        spec = figure.chart.to_dict(validate=False)
        assert spec["width"] == "container"
        assert spec["autosize"]["type"] == "fit-x"
        assert spec["config"]["aria"] is False
        assert "description" not in spec


def test_text_alternative_holds_every_row(lots):
    rows = estimates_with_intervals(lots, "accuracy").rows
    said = plain(estimates_with_intervals(lots, "accuracy").alt)
    for row in rows:
        name = row["candidate"]
        estimate = lots.estimate(
            "accuracy", "logistic" if name == "logistic regression" else "nearest_neighbours"
        )
        assert f"{name}: {100 * estimate.value:.0f} %" in said
        assert "n = 24 lots" in said
    assert "always answering ‘good’ 67 %" in said


def test_every_figure_is_drawn_without_a_warning(hostile, tmp_path):
    """In a process of its own: the converter writes warnings there and may end it."""
    specs = [printed(figure, 368) for figure in one_of_each_form(hostile)]
    (tmp_path / "specs.json").write_text(json.dumps(specs))
    code = (
        "import json, sys, vl_convert\n"
        "for spec in json.load(open(sys.argv[1])): vl_convert.vegalite_to_svg("
        "spec, show_warnings=True)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, str(tmp_path / "specs.json")], capture_output=True, text=True
    )
    assert done.returncode == 0
    assert "WARN" not in done.stdout + done.stderr


def test_hostile_names_stay_text_and_are_shortened(hostile):
    figure = class_balance(hostile.table)
    assert per_class(hostile, "logistic").title.count("‘<b>x</b>’") == 1
    image = svg(figure, 640)
    assert "<b>" not in image
    assert "&lt;b&gt;x&lt;/b&gt;" in image
    shown = [row["long"] for row in drawn(figure, "long") if "datum" in row["long"]]
    assert shown
    assert all(len(name) <= 60 and name.endswith("…") for name in shown)
    spec = json.dumps(estimates_with_intervals(hostile, "accuracy").chart.to_dict()["layer"])
    assert "<b>" not in spec  # names are data, never part of an expression


def test_characters_that_end_the_converter_are_left_out(lots):
    figure = dataclasses.replace(class_balance(lots.table), title="a\x00b\ufffec")
    spec = printed(figure, 640)
    assert spec["title"]["text"] == ["abc"]
    assert shorten("a\x00\nb", 9) == "a  b"
    assert "<svg" in svg(figure, 640)


def test_print_form_has_a_fixed_width_its_font_and_no_theme(lots):
    spec = printed(class_balance(lots.table), 640, titled=False)
    assert spec["width"] == 640
    assert spec["config"]["font"] == "Noto Sans"
    assert "title" not in spec


def test_one_round_and_leave_one_out_say_that_they_show_no_spread(three):
    one = round_scores(three, "holdout")
    assert plain(one.title) == "One round of 7 cases cannot show how far its score can swing"
    lone = round_scores(three, "leave_one_out")
    assert lone.title.startswith("Each round holds out one case and is right or wrong")
    held = three.part("logistic", "leave_one_out").held_values("accuracy")
    right = int(held.sum())
    assert lone.rows[0]["range"] == f"{right} right, {24 - right} wrong"
    assert {row["x"] for row in drawn(lone, "score")} <= {0.0, 1.0}


def test_schemes_in_words(lots, three):
    said = [plain(scheme_in_words(lots.plan, lots.table, s)) for s in lots.plan.scheme_names]
    assert said == [
        "stratified 4-fold cross-validation by lot, 2 times",
        "20 stratified bootstrap rounds by lot",
        "leave one lot out",
        "stratified hold-out by lot, once, 30 %",
        "5 stratified random splits by lot, 30 % held out",
    ]
    assert scheme_in_words(three.plan, three.table, "cross_validation") == (
        "stratified 4-fold cross-validation, 2 times"
    )


def test_a_running_evaluation_says_how_far_it_has_come(three):
    running = dataclasses.replace(three, planned={"cross_validation": 40})
    assert "so far 8 of 40 rounds" in estimates_with_intervals(running, "accuracy").caption


def test_looks_go_by_the_plan_and_pass_over_baselines(lots):
    assert candidate_look(lots.plan, "logistic") == LOOKS[0]
    assert candidate_look(lots.plan, "nearest_neighbours") == LOOKS[1]


def test_bins_are_steps_of_the_score_and_never_narrower():
    sizes = np.full(9, 36)
    values = np.arange(28, 37) / 36
    bins = bins_of(values, sizes, measure="accuracy")
    assert bins == Bins(1 / 36, True)
    assert [c for c, _ in bins.counted(values)] == pytest.approx(values.tolist(), abs=1e-12)
    uneven = bins_of(values, np.array([35, 36, 36]), measure="accuracy")
    assert uneven == Bins(1 / 36, False)
    many = bins_of(np.array([0.5, 1.0]), np.full(2, 2000), measure="accuracy")
    assert not many.exact
    assert 0.5 / many.width <= 25
    assert many.width * 2000 == pytest.approx(round(many.width * 2000), abs=1e-9)


def test_rulers_start_where_the_data_need_it():
    rule = ruler([0.79, 0.84, 0.953])
    assert rule.ticks == (0.75, 0.8, 0.85, 0.9, 0.95, 1.0)
    assert (rule.low, rule.high) == (0.75, 1.0)
    assert ruler([math.nan, 1.0]).ticks[-1] == 1.0
    assert len(ruler([0.0, 1.0]).ticks) <= 6


def estimate(value: float, low: float, high: float) -> Estimate:
    ends = Interval(low, high, 0.95, "wilson")
    return Estimate(value, ends, "accuracy", "c", "s", "e", "", "unit", 90, 5, 0)


@pytest.mark.parametrize(
    ("ends", "title"),
    [
        ([(0.8, 0.9), (0.85, 0.95)], "A and b overlap; both beat guessing"),
        ([(0.4, 0.9), (0.45, 0.95)], "A and b overlap; neither is shown to beat guessing"),
        ([(0.6, 0.7), (0.85, 0.95)], "A and b do not overlap; both beat guessing"),
        (
            [(0.4, 0.9), (0.6, 0.95), (0.1, 0.3)],
            "One of three pairs of intervals overlap; better than guessing: b; not shown to be "
            "better than it: a; worse than it: c",
        ),
        ([(0.6, 0.8)], "Better than guessing: a, 70 % (60–80 %) against 50 %"),
        ([(0.4, 0.8)], "Not shown to be better than guessing: a, 60 % (40–80 %) against 50 %"),
    ],
)
def test_titles_crown_nobody(ends, title):
    found = [estimate((low + high) / 2, low, high) for low, high in ends]
    reference = Reference(0.5, "guessing", f"50{NBSP}%")
    assert plain(title_of("abc"[: len(ends)], found, reference)) == title


def test_words_of_two_lines_do_not_touch():
    near = [Reference(0.5, "guessing", "50 %"), Reference(0.52, "limit", "52 %", is_limit=True)]
    assert placed(near, ruler([0.2, 0.9])) == ([("right", 0), ("left", 0)], 1)
    edge = [Reference(0.0, "guessing", "0 %"), Reference(0.02, "limit", "2 %", is_limit=True)]
    assert placed(edge, ruler([0.0, 0.9]))[1] == 2


def test_long_lists_are_counted_and_not_read_out():
    found = [estimate(0.4, 0.2, 0.6)] * 3 + [estimate(0.8, 0.7, 0.9)]
    title = title_of("abcd", found, Reference(0.5, "guessing", "50 %"))
    assert title == (
        "Three of six pairs of intervals overlap; better than guessing: d; not shown to be better "
        "than it: three candidates"
    )


def test_short_titles_keep_what_sets_candidates_apart(lots):
    two_of_a_kind = tuple(
        choose(CANDIDATES, "nearest_neighbours", k=3, scaling=s) for s in ("standard", "none")
    )
    plan = dataclasses.replace(lots.plan, candidates=two_of_a_kind)
    said = [short_title(plan, name) for name in plan.candidate_names]
    assert [text.partition(" (")[2] for text in said] == ["scaling standard)", "scaling none)"]
    assert len(set(said)) == 2
    assert short_title(lots.plan, "logistic") == "logistic regression"


@pytest.mark.parametrize(
    ("ks", "short"),
    [
        (((1, 5),), ["nearest neighbours"]),  # alone of its kind: nothing to set it apart by
        (((1, 5), (3, 9)), ["nearest neigh… (k 1/5)", "nearest neigh… (k 3/9)"]),
    ],
)
def test_short_titles_of_tuned_candidates(lots, ks, short):
    grids = tuple(choose(CANDIDATES, "nearest_neighbours", k=k) for k in ks)
    plan = dataclasses.replace(lots.plan, candidates=grids)
    said = [short_title(plan, name) for name in plan.candidate_names]
    assert said == short
