"""The demo tables tell the story that their README promises, and can be made again."""

import importlib.resources
import subprocess
import sys

import numpy as np
import pytest

from evalcore.answer import title
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.evaluation import Evaluation
from evalcore.findings import findings
from evalcore.fits import plain_scores
from evalcore.intake import make_table
from evalcore.limit import Limit
from evalcore.measures import predicted_class
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES
from evalcore.sheet import read_sheet
from evalcore.table import Roles, Table
from evalcore.verdict import verdicts
from evalcore.wording import Noun

from .checks import carried_out

DEMO = importlib.resources.files("demo_data")
ARCHIVE = "bean_lots.csv"
LEFT_OUT = (
    "producer",
    "harvest_year",
    "instrument",
    "operator",
    "days_to_certificate",
    "present_practice",
)
BY_LOT = Roles("verdict", "lot", LEFT_OUT, Noun("lot", "lots"), "set_aside")
LOGISTIC = choose(CANDIDATES, "logistic")
FOREST = choose(CANDIDATES, "forest", trees=100)
LIMITS = (Limit("sensitivity", 0.9, "failing"), Limit("sensitivity", 0.8, "good"))


def table_of_lots(roles: Roles = BY_LOT) -> Table:
    return make_table(read_sheet((DEMO / ARCHIVE).read_bytes(), ARCHIVE), roles)


def cross_validated(table: Table, *candidates, repeats: int, **choices) -> Evaluation:
    scheme = choose(SCHEMES, "cross_validation", repeats=repeats)
    return carried_out(table, Plan(table.roles, (scheme,), candidates, **choices))[0]


@pytest.fixture(scope="module")
def lots() -> Table:
    return table_of_lots()


@pytest.fixture(scope="module")
def by_lot(lots) -> Evaluation:
    """The answer of the screen by logistic regression, under the recommended first scheme."""
    return cross_validated(lots, LOGISTIC, repeats=20, limits=LIMITS)


@pytest.fixture(scope="module")
def forest_by_lot(lots) -> float:
    return cross_validated(lots, FOREST, repeats=4).estimate("accuracy", "forest").value


def test_746_rows_are_180_lots(lots):
    assert lots.rows_read == 746
    assert [(part.rows, part.units) for part in lots.set_aside] == [(6, 0), (20, 5)]
    assert (lots.n_units, lots.n_cases) == (180, 720)
    assert dict(zip(lots.classes, lots.class_counts("unit").tolist(), strict=True)) == {
        "failing": 38,
        "good": 142,
    }
    assert [column.name for column in lots.columns] == [
        "leachate_conductivity", "moisture", "thousand_grain_weight", "sound_density",
        "hilum_colour_a", "hilum_colour_b", "nir_1", "nir_2", "nir_3", "nir_4", "age_months",
    ]  # fmt: skip
    assert sum(column.missing for column in lots.columns) == 15
    assert not len(lots.mixed_units)


def test_logistic_regression_comes_out_as_the_readme_says(by_lot):
    # demo_data/README.md, folds drawn by other means: 91.2 %, 86.3 % and 92.5 %; two repeats of
    # this draw differ by up to a point or two, twenty by less
    assert by_lot.estimate("accuracy", "logistic").value == pytest.approx(0.912, abs=0.01)
    for of_class, expected in (("failing", 0.863), ("good", 0.925)):
        estimate = by_lot.estimate("sensitivity", "logistic", of_class=of_class)
        assert estimate.value == pytest.approx(expected, abs=0.02)


def test_the_limit_for_failing_lots_stays_open_and_that_for_good_ones_is_shown(by_lot):
    failing, good = verdicts(by_lot, "logistic")
    assert (failing.word, good.word) == ("not shown yet", "shown")
    assert (failing.n, good.n) == (38, 142)
    # exact bounds of 32 whole lots of 38, as in demo_data/README.md; wider where the model varies
    assert failing.at_least <= 0.72
    assert failing.at_most >= 0.93
    assert good.at_least >= 0.8
    assert title(by_lot) == "Failing lots: not shown yet. Good lots: shown."


def test_scored_by_row_the_forest_gains_at_least_five_points(lots, forest_by_lot):
    by_row = table_of_lots(Roles("verdict", leave_out=("lot", *LEFT_OUT)))
    assert [c.name for c in by_row.columns] == [c.name for c in lots.columns]
    assert not by_row.has_units
    flattered = cross_validated(by_row, FOREST, repeats=2).estimate("accuracy", "forest").value
    assert flattered - forest_by_lot >= 0.05


def test_years_left_out_in_turn_score_lower(lots, by_lot, forest_by_lot):
    sheet = read_sheet((DEMO / ARCHIVE).read_bytes(), ARCHIVE)
    year_on_line = dict(zip(sheet.lines, sheet.column("harvest_year"), strict=True))
    years = np.array([year_on_line[line] for line in lots.lines])
    assert sorted(set(years)) == ["2021", "2022", "2023"]
    held = np.array([years == year for year in sorted(set(years))]).astype(np.uint8)
    rounds = Rounds(1 - held, held, np.zeros(3, dtype=int))

    def right(choice) -> float:
        scores = plain_scores(choice, lots, rounds.train, random_states=[1, 2, 3])
        share = 0
        for r in range(3):
            judged = rounds.test[r] == 1
            for unit in np.unique(lots.units[judged]):
                mean = scores[r, lots.units == unit].mean(axis=0)
                share += predicted_class(mean) == lots.unit_labels[unit]
        return share / lots.n_units

    # 87.2 % against 91.2 % and 87.8 % against 90.5 % in demo_data/README.md
    assert right(LOGISTIC) == pytest.approx(0.872, abs=0.006)
    assert right(LOGISTIC) < by_lot.estimate("accuracy", "logistic").value - 0.02
    assert right(FOREST) < forest_by_lot
    scheme = choose(SCHEMES, "leave_block_out", column="harvest_year")
    made = carried_out(lots, Plan(lots.roles, (scheme,), (LOGISTIC,)))[0]
    assert made.estimate("accuracy", "logistic").value == pytest.approx(right(LOGISTIC), rel=1e-12)
    # three years are too few to say how much years differ
    assert made.estimate("accuracy", "logistic").interval is None


def test_a_column_known_only_afterwards_is_asked_about_before_anything_is_fitted():
    kept = tuple(name for name in LEFT_OUT if name != "days_to_certificate")
    table = table_of_lots(Roles("verdict", "lot", kept, Noun("lot", "lots"), "set_aside"))
    plan = Plan(table.roles, (choose(SCHEMES, "cross_validation"),), (LOGISTIC,))
    (alone,) = [f for f in findings(table, plan) if f.check == "tells_classes_apart_alone"]
    assert (alone.severity, alone.subject) == ("grave", "days_to_certificate")
    assert alone.value == pytest.approx(0.999, abs=0.0005)


def test_without_the_unit_lots_and_copies_are_asked_about():
    table = table_of_lots(Roles("verdict", leave_out=("lot", *LEFT_OUT)))
    plan = Plan(table.roles, (choose(SCHEMES, "cross_validation"),), (LOGISTIC,))
    asked = {(f.check, f.severity, f.subject, f.value) for f in findings(table, plan)}
    assert ("units_not_kept_together", "grave", "lot", 746 / 185) in asked
    assert ("copies_left", "grave", "", 26) in asked


def test_present_practice_is_hardly_better_than_always_good(lots):
    sheet = read_sheet((DEMO / ARCHIVE).read_bytes(), ARCHIVE)
    answer_on_line = dict(zip(sheet.lines, sheet.column("present_practice"), strict=True))
    given = np.array([answer_on_line[line] for line in lots.lines])
    first = np.unique(lots.units, return_index=True)[1]
    right = given[first] == np.array(lots.classes)[lots.unit_labels]
    assert right.mean() == pytest.approx(0.811, abs=0.0005)


@pytest.mark.parametrize(
    ("name", "lots", "rows"),
    [("bean_lots_next_season.csv", 60, 240), ("bean_lots_unlabelled.csv", 25, 100)],
)
def test_the_other_tables_hold_what_the_readme_says(name, lots, rows):
    sheet = read_sheet((DEMO / name).read_bytes(), name)
    assert len(sheet.rows) == rows
    assert len(set(sheet.column("lot"))) == lots
    later = {"days_to_certificate", "present_practice", "verdict"}
    assert later & set(sheet.header) == (later if "next" in name else set())


def test_the_tables_can_be_made_again_byte_for_byte(tmp_path):
    maker = tmp_path / "make_bean_lots.py"
    maker.write_bytes((DEMO / "make_bean_lots.py").read_bytes())
    subprocess.run([sys.executable, maker], check=True, cwd=tmp_path)
    made = sorted(path.name for path in tmp_path.glob("*.csv"))
    assert made == sorted(path.name for path in DEMO.iterdir() if path.name.endswith(".csv"))
    assert len(made) == 3
    for name in made:
        assert (tmp_path / name).read_bytes() == (DEMO / name).read_bytes()
