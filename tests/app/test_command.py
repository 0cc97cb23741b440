"""The console command: the files it leaves, what it says, what it refuses."""

import csv
import io
import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from app.command import main
from evalcore.candidates import CANDIDATES
from evalcore.engine import run
from evalcore.estimated import ESTIMATORS
from evalcore.findings import CHECKS
from evalcore.record import Record, Status
from evalcore.results import COLUMNS, FINDING_COLUMNS
from evalcore.schemes import SCHEMES
from evalcore.together import ESTIMATOR as WINNER

ROOT = Path(__file__).parents[2]
DATA = ROOT / "tests" / "data"
DEMO = ROOT / "demo_data" / "bean_lots.csv"
LEFT_OUT = ("producer", "harvest_year", "instrument", "operator", "days_to_certificate", "present_practice")  # fmt: skip
FEW = ["--scheme", "cross_validation:folds=4,repeats=2", "--candidate", "majority", "--candidate", "naive_bayes"]  # fmt: skip
FILES = {"source.csv", "plan.json", "rounds.npz", "about.json", "status.json", "results.csv", "findings.csv"}  # fmt: skip


def rows_of(folder: Path, name: str = "results.csv") -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO((folder / name).read_bytes().decode())))


def evaluate(out: Path, file: Path, *arguments: str) -> int:
    return main(["evaluate", str(file), *arguments, "--out", str(out)])


@pytest.fixture(scope="module")
def penguins(tmp_path_factory) -> Path:
    out = tmp_path_factory.mktemp("penguins") / "record"
    code = evaluate(
        out,
        DATA / "penguins.csv",
        *("--label", "species", "--leave-out", "year", *FEW),
        *("--candidate", "nearest_neighbours:k=1", "--candidate", "nearest_neighbours:k=5"),
        *("--scheme", "bootstrap:rounds=5"),
    )
    assert code == 0
    return out


@pytest.fixture(scope="module")
def lots(tmp_path_factory) -> Path:
    out = tmp_path_factory.mktemp("lots") / "record"
    leave_out = [part for name in LEFT_OUT for part in ("--leave-out", name)]
    code = evaluate(
        out,
        DEMO,
        *("--label", "verdict", "--unit", "lot", *leave_out, *FEW),
        *("--limit", "sensitivity:failing=0.90", "--limit", "sensitivity:good=0.5"),
    )
    assert code == 0
    return out


class TestFiles:
    def test_a_record_is_left(self, penguins):
        assert {p.name for p in penguins.iterdir() if p.is_file()} >= FILES
        assert (penguins / "source.csv").read_bytes() == (DATA / "penguins.csv").read_bytes()
        assert Record(penguins).status() == Status("finished", 14, 14)

    def test_columns_stand_as_the_readme_says(self, penguins):
        readme = (ROOT / "README.md").read_text("utf-8")
        text = (penguins / "results.csv").read_bytes().decode()
        header = text.partition("\n")[0]
        assert header == ",".join(COLUMNS)
        assert f"`{', '.join(COLUMNS)}`" in readme
        assert "\r" not in text
        assert text.endswith("\n")
        findings = (penguins / "findings.csv").read_bytes().decode()
        assert findings.partition("\n")[0] == ",".join(FINDING_COLUMNS)

    def test_one_row_a_figure_found_by_its_keys(self, penguins):
        rows = rows_of(penguins)
        keys = [tuple(row[c] for c in ("candidate", "scheme", "estimator", "measure", "class", "counted_by")) for row in rows]  # fmt: skip
        assert len(set(keys)) == len(keys)
        # each candidate under each scheme has the same figures; the best one also its corrected ones
        figures: dict[tuple[str, str], set[tuple[str, ...]]] = {}
        for key in keys:
            if key[2] != WINNER:
                figures.setdefault(key[:2], set()).add(key[2:])
        assert len(figures) == 4 * 2
        for scheme in ("cross_validation", "bootstrap"):
            alike = [given for (_, of_scheme), given in figures.items() if of_scheme == scheme]
            assert alike.count(alike[0]) == 4
        assert {key[2] for key in keys} == set(ESTIMATORS)
        assert len({key[0] for key in keys if key[2] == WINNER and key[1] == "bootstrap"}) == 1
        readme = (ROOT / "README.md").read_text("utf-8")
        for column in ("scheme", "estimator", "measure", "counted_by"):
            for key in {row[column] for row in rows}:
                assert f"`{key}`" in readme, key
        assert {row["class"] for row in rows if row["measure"] == "sensitivity"} == {
            "Adelie",
            "Chinstrap",
            "Gentoo",
        }
        assert {row["class"] for row in rows if row["measure"].endswith("accuracy")} == {""}

    def test_a_candidate_chosen_twice_stands_with_its_settings(self, penguins):
        assert list(dict.fromkeys(row["candidate"] for row in rows_of(penguins))) == [
            "majority",
            "naive_bayes",
            "nearest_neighbours:k=1,scaling=standard",
            "nearest_neighbours:k=5,scaling=standard",
        ]

    def test_numbers_stand_in_full_precision(self, penguins):
        evaluation = Record(penguins).evaluation()
        for row, estimate in zip(rows_of(penguins), evaluation.estimates, strict=True):
            np.testing.assert_equal(float(row["value"]), estimate.value)
            assert int(row["n"]) == estimate.n
            assert (int(row["rounds"]), int(row["undefined_rounds"])) == (
                estimate.rounds,
                estimate.undefined_rounds,
            )
            bounds = estimate.interval
            if bounds is None:
                assert [row[c] for c in ("low", "high", "level", "interval")] == [""] * 4
            else:
                np.testing.assert_equal(
                    (float(row["low"]), float(row["high"])), (bounds.low, bounds.high)
                )
                assert (float(row["level"]), row["interval"]) == (0.95, bounds.method)

    def test_counted_by_case_alone_without_units(self, penguins):
        assert {row["counted_by"] for row in rows_of(penguins)} == {"case"}

    def test_counted_both_ways_with_units(self, lots):
        held = {
            row["counted_by"]: int(row["n"])
            for row in rows_of(lots)
            if (row["measure"], row["estimator"]) == ("accuracy", "held_out_by_case")
        }
        assert held == {"unit": 180, "case": 720}

    def test_findings_have_a_number_a_threshold_and_a_source(self, lots):
        rows = rows_of(lots, "findings.csv")
        assert {row["check"] for row in rows} <= set(CHECKS)
        for row in rows:
            float(row["value"])
            float(row["threshold"])
            assert row["severity"] in ("grave", "moderate", "note")
            assert all(row[c] for c in ("title", "seen", "advice", "source"))

    def test_rows_entered_twice_and_lots_submitted_twice_are_set_aside_with_a_unit(self, lots):
        record = Record(lots)
        assert record.plan.roles.copies == "set_aside"
        assert [part.rows for part in record.table.set_aside] == [6, 20]
        assert record.plan.roles.noun.plural == "lots"

    def test_copies_can_be_kept_and_units_named(self, tmp_path):
        out = tmp_path / "record"
        code = evaluate(
            out,
            DATA / "odd_files" / "23_exact_duplicates.csv",
            *("--label", "class", "--copies", "set-aside", *FEW),
        )
        assert code == 0
        assert [part.rows for part in Record(out).table.set_aside] == [40]
        code = evaluate(
            tmp_path / "people",
            DATA / "groups_trap_constructed.csv",
            *("--label", "label", "--unit", "person", "--copies", "keep", *FEW),
            *("--noun", "person,people"),
        )
        assert code == 0
        roles = Record(tmp_path / "people").plan.roles
        assert (roles.copies, roles.noun.plural) == ("keep", "people")

    def test_iris_by_linear_discriminant_has_its_known_share(self, tmp_path):
        # 3 of 150 wrong when each is left out, none, 2 and 1 by class: R MASS::lda(CV = TRUE), as
        # in tests/data/08_real_data_deterministic.json
        out = tmp_path / "record"
        chosen = ("--label", "class", "--scheme", "leave_one_out", "--candidate", "lda")
        assert evaluate(out, DATA / "iris.csv", *chosen) == 0
        held = {
            (row["measure"], row["class"]): float(row["value"])
            for row in rows_of(out)
            if row["estimator"] == "held_out_by_case"
        }
        assert held["accuracy", ""] == 147 / 150
        assert [held["sensitivity", c] for c in ("setosa", "versicolor", "virginica")] == [
            1, 48 / 50, 49 / 50,
        ]  # fmt: skip

    def test_formulas_get_an_apostrophe(self, tmp_path):
        out = tmp_path / "record"
        file = DATA / "odd_files" / "30_formula_injection.csv"
        assert evaluate(out, file, "--label", "class", *FEW) == 0
        classes = Record(out).table.classes
        risky = {name for name in classes if name[0] in "=+-@"}
        assert risky
        written = {row["class"] for row in rows_of(out) if row["class"]}
        assert written == {f"'{name}" if name in risky else name for name in classes}
        for name in ("results.csv", "findings.csv"):
            for row in csv.reader(io.StringIO((out / name).read_text("utf-8"))):
                for cell in row:
                    assert cell[:1] not in ("=", "+", "@") or cell == ""
                    assert not cell.startswith("-") or float(cell) < 0

    def test_markup_in_names_stands_as_it_is(self, tmp_path):
        out = tmp_path / "record"
        file = DATA / "odd_files" / "31_html_in_names.csv"
        assert evaluate(out, file, "--label", "<b>class</b>", *FEW) == 0
        assert {row["class"] for row in rows_of(out) if row["class"]} == set(
            Record(out).table.classes
        )


class TestSaying:
    def test_answer_limits_findings_and_place_on_standard_output(self, tmp_path, capsys):
        out = tmp_path / "record"
        code = evaluate(
            out,
            DATA / "iris.csv",
            *("--label", "class", *FEW),
            *("--limit", "sensitivity:setosa=0.8", "--limit", "accuracy=0.999"),
        )
        said = capsys.readouterr()
        assert code == 0
        lines = said.out.replace("\u00a0", " ").splitlines()
        assert lines[0].startswith("Setosa cases: shown. Accuracy: ")
        assert lines[1].startswith("On further cases obtained like these, with the same shares")
        assert "naive Bayes is expected to be right in" in lines[1]
        assert lines[2].startswith("Setosa cases found (sensitivity): shown. Limit 80 %;")
        assert lines[3].startswith("Share of cases right (accuracy): ")
        # what would show the limit that is not shown, then the findings
        assert lines[4].startswith("Further cases judged alone that give four chances in five")
        assert all(line.partition(":")[0] in ("grave", "moderate", "note") for line in lines[5:-1])
        assert lines[-1] == f"Record: {out}"
        assert "9 of 9 rounds" in said.err

    def test_nobody_is_asked_for_a_terminal(self, tmp_path):
        out = tmp_path / "record"
        arguments = ["evaluate", str(DATA / "iris.csv"), "--label", "class", *FEW]
        ended = subprocess.run(
            [sys.executable, "-m", "app.command", *arguments, "--out", str(out)],
            cwd=ROOT,
            stdin=subprocess.DEVNULL,
            capture_output=True,
            text=True,
            encoding="utf-8",
        )
        assert ended.returncode == 0
        assert f"Record: {out}" in ended.stdout
        assert "Traceback" not in ended.stderr

    def test_help_names_every_scheme_and_candidate(self, capsys):
        with pytest.raises(SystemExit, match=r"\A0\Z"):
            main(["evaluate", "--help"])
        said = " ".join(capsys.readouterr().out.split())
        for key in (*SCHEMES, *CANDIDATES):
            assert key in said

    def test_choices_end_in_the_plan(self, lots, tmp_path):
        assert Record(lots).plan.limits[0].of_class == "failing"
        assert [limit.least for limit in Record(lots).plan.limits] == [0.9, 0.5]
        out = tmp_path / "record"
        code = evaluate(
            out,
            DATA / "penguins.csv",
            *("--label", "species", *FEW, "--seed", "7", "--measure", "accuracy"),
            *("--about", "majority", "--concern", "Gentoo", "--question", "Which one?"),
        )
        assert code == 0
        plan = Record(out).plan
        assert (plan.seed, plan.measure, plan.about, plan.concern, plan.question) == (
            7, "accuracy", "majority", "Gentoo", "Which one?",
        )  # fmt: skip


class TestGoingOn:
    def test_the_same_command_goes_on_with_an_unfinished_record(self, tmp_path, monkeypatch):
        arguments = (DATA / "iris.csv", "--label", "class", *FEW, "--scheme", "bootstrap:rounds=12")
        whole, stopped = tmp_path / "whole", tmp_path / "stopped"
        assert evaluate(whole, *arguments) == 0

        def breaks_off(*given, todo, jobs):
            for at, finished in enumerate(run(*given, todo=todo, jobs=jobs)):
                if at == 2:
                    raise KeyboardInterrupt
                yield finished

        monkeypatch.setattr("evalcore.worker.run", breaks_off)
        assert evaluate(stopped, *arguments, "--jobs", "1") == 130
        monkeypatch.undo()
        kept = {p.name: p.stat().st_mtime_ns for p in (stopped / "chunks").iterdir()}
        assert len(kept) == 2
        Record(stopped).cancel()
        assert evaluate(stopped, *arguments) == 0
        assert (stopped / "results.csv").read_bytes() == (whole / "results.csv").read_bytes()
        now = {p.name: p.stat().st_mtime_ns for p in (stopped / "chunks").iterdir()}
        assert now.items() > kept.items()

    def test_breaking_off_says_that_it_can_go_on(self, tmp_path, monkeypatch, capsys):
        def breaks_off(*_, **__):
            raise KeyboardInterrupt

        monkeypatch.setattr("evalcore.worker.run", breaks_off)
        assert evaluate(tmp_path / "record", DATA / "iris.csv", "--label", "class", *FEW) == 130
        assert capsys.readouterr().err.splitlines()[-1] == (
            "Stopped; what had finished is kept. The same command goes on."
        )

    def test_the_number_of_processes_does_not_show(self, tmp_path):
        arguments = (DATA / "iris.csv", "--label", "class", *FEW)
        for jobs in ("1", "2"):
            assert evaluate(tmp_path / jobs, *arguments, "--jobs", jobs) == 0
        one, two = ((tmp_path / jobs / "results.csv").read_bytes() for jobs in ("1", "2"))
        assert one == two

    @pytest.mark.parametrize("changed", [("--seed", "2"), ("--question", "Why?")])
    def test_another_plan_does_not_go_on_with_it(self, tmp_path, capsys, changed):
        out = tmp_path / "record"
        arguments = (DATA / "iris.csv", "--label", "class", *FEW)
        assert evaluate(out, *arguments) == 0
        before = (out / "results.csv").read_bytes()
        capsys.readouterr()
        assert evaluate(out, *arguments, *changed) == 1
        assert capsys.readouterr().err == (
            "The folder 'record' is not empty; a new record needs a new folder.\n"
        )
        assert (out / "results.csv").read_bytes() == before


IRIS_COLUMNS = (
    "‘sepal length (cm)’, ‘sepal width (cm)’, ‘petal length (cm)’, ‘petal width (cm)’ and ‘class’"
)
ONE = ["--label", "class", "--candidate", "majority"]
REFUSED = {
    "unknown label": (
        "iris.csv",
        ["--label", "kind"],
        f"There is no column ‘kind’ in ‘iris.csv’; it has {IRIS_COLUMNS}.",
    ),
    "unknown unit": (
        "iris.csv",
        [*ONE, "--unit", "plant"],
        f"There is no column ‘plant’ in ‘iris.csv’; it has {IRIS_COLUMNS}.",
    ),
    "unknown column to leave out": (
        "iris.csv",
        [*ONE, "--leave-out", "colour"],
        f"There is no column ‘colour’ in ‘iris.csv’; it has {IRIS_COLUMNS}.",
    ),
    "unknown scheme": (
        "iris.csv",
        [*ONE, "--scheme", "jackknife"],
        "There is no 'jackknife'; choose "
        + ", ".join(list(SCHEMES)[:-1])
        + f" or {list(SCHEMES)[-1]}.",
    ),
    "unknown candidate": (
        "iris.csv",
        ["--label", "class", "--candidate", "oracle"],
        "There is no 'oracle'; choose "
        + ", ".join(list(CANDIDATES)[:-1])
        + f" or {list(CANDIDATES)[-1]}.",
    ),
    "unknown setting": (
        "iris.csv",
        ["--label", "class", "--candidate", "forest:depth=3"],
        "'forest' has no setting 'depth'; it takes `trees`.",
    ),
    "setting out of bounds": (
        "iris.csv",
        ["--label", "class", "--candidate", "forest:trees=0"],
        "`trees` must be between 1 and 2000; got 0.",
    ),
    "setting of another kind": (
        "iris.csv",
        [*ONE, "--scheme", "bootstrap:rounds=many"],
        "`rounds` must be a whole number; got 'many'.",
    ),
    "setting without a value": (
        "iris.csv",
        [*ONE, "--scheme", "bootstrap:rounds"],
        "'rounds' in 'bootstrap:rounds' must be written name=value.",
    ),
    "too many folds": (
        "iris.csv",
        [*ONE, "--scheme", "cross_validation:folds=60"],
        "`folds` must be between 2 and 50, because class ‘setosa’ has 50\u00a0cases; got 60.",
    ),
    "too many neighbours": (
        "iris.csv",
        [
            *("--label", "class", "--scheme", "holdout:test_share=0.5"),
            *("--candidate", "nearest_neighbours:k=76"),
        ],
        "`k` must be between 1 and 75, the cases of the smallest bag; got 76.",
    ),
    "one class": (
        "odd_files/14_one_class.csv",
        ["--label", "class"],
        "The column ‘class’ holds one class only (‘a’); at least two are needed.",
    ),
    "header only": (
        "odd_files/10_header_only.csv",
        ["--label", "class"],
        "No cases: ‘10_header_only.csv’ has a header and no rows.",
    ),
    "unknown class of concern": (
        "iris.csv",
        [*ONE, "--concern", "rose"],
        "There is no class ‘rose’; the classes are ‘setosa’, ‘versicolor’ and ‘virginica’.",
    ),
    "limit of no class": (
        "iris.csv",
        [*ONE, "--limit", "sensitivity=0.9"],
        "A limit on sensitivity needs a class: sensitivity:CLASS=VALUE.",
    ),
    "limit of no share": (
        "iris.csv",
        [*ONE, "--limit", "accuracy"],
        "A limit is written MEASURE=SHARE or sensitivity:CLASS=SHARE; got 'accuracy'.",
    ),
    "limit in percent": (
        "iris.csv",
        [*ONE, "--limit", "accuracy=90"],
        "An acceptance limit must lie between 0 and 1 and its confidence between 0.5 and 1; got "
        "90 and 0.95.",
    ),
    "value of a grid out of bounds": (
        "iris.csv",
        ["--label", "class", "--candidate", "nearest_neighbours:k=1/0"],
        "`k` must be between 1 and 200; got 0.",
    ),
    "value of a grid of another kind": (
        "iris.csv",
        ["--label", "class", "--candidate", "nearest_neighbours:k=1/few"],
        "`k` must be a whole number; got 'few'.",
    ),
    "grid of one value": (
        "iris.csv",
        ["--label", "class", "--candidate", "nearest_neighbours:k=5/5"],
        "A grid of `k` needs different values; got 5 and 5.",
    ),
    "grid on a scheme": (
        "iris.csv",
        [*ONE, "--scheme", "cross_validation:folds=4/5"],
        "Settings of a scheme are not tuned; got the grid "
        "'cross_validation:folds=4/5,repeats=20,stratified=yes'. Give one value each, or choose "
        "the scheme several times.",
    ),
    "cut-off of an unknown class": (
        "iris.csv",
        [*ONE, "--cut-off", "rose:miss=10"],
        "There is no class ‘rose’; the classes are ‘setosa’, ‘versicolor’ and ‘virginica’.",
    ),
    "cut-off with three classes": (
        "iris.csv",
        [*ONE, "--cut-off", "setosa:miss=10"],
        "A cut-off parts two classes; this table has 3. Leave the cut-off out, or join classes in "
        "the file.",
    ),
    "cut-off without a rule": (
        "iris.csv",
        [*ONE, "--cut-off", "setosa:share=0.1"],
        "A cut-off takes costs (`miss`, `alarm`), a `floor` or a fixed `at`, exactly one of the "
        "three; got none in 'setosa:share=0.1'.",
    ),
    "cut-off by two rules": (
        "iris.csv",
        [*ONE, "--cut-off", "setosa:miss=2,floor=0.9"],
        "A cut-off takes costs (`miss`, `alarm`), a `floor` or a fixed `at`, exactly one of the "
        "three; got `miss` and `floor` in 'setosa:miss=2,floor=0.9'.",
    ),
    "cut-off of no class": (
        "iris.csv",
        [*ONE, "--cut-off", "miss=10"],
        "A cut-off is written CLASS:name=value,...; got 'miss=10'.",
    ),
    "chance check below 0": (
        "iris.csv",
        [*ONE, "--chance-check", "-1"],
        "The chance check takes between 0 and 9,999 permutations; got -1.",
    ),
    "unknown setting of the learning curve": (
        "iris.csv",
        [*ONE, "--learning-curve", "steps=6"],
        "'learning_curve' has no setting 'steps'; it takes `sizes`, `subsets` or `keep`.",
    ),
    "too few sizes of the learning curve": (
        "iris.csv",
        [*ONE, "--learning-curve", "sizes=4"],
        "`sizes` must be between 5 and 12; got 4.",
    ),
    "answer about nobody": (
        "iris.csv",
        [*ONE, "--about", "svm"],
        "The answer cannot be about 'svm'; the candidates are majority.",
    ),
    "no processes": (
        "iris.csv",
        [*ONE, "--jobs", "0"],
        "`jobs` must be at least 1; got 0.",
    ),
}


class TestRefusing:
    def one_sentence(self, capsys, message: str) -> None:
        said = capsys.readouterr()
        assert said.out == ""
        assert said.err == message + "\n"

    @pytest.mark.parametrize("what", REFUSED)
    def test_one_sentence_code_1_and_nothing_left(self, tmp_path, capsys, what):
        file, arguments, message = REFUSED[what]
        assert evaluate(tmp_path / "record", DATA / file, *arguments) == 1
        self.one_sentence(capsys, message)
        assert not (tmp_path / "record").exists()

    def test_an_empty_file(self, tmp_path, capsys):
        (tmp_path / "empty.csv").write_bytes(b"")
        assert evaluate(tmp_path / "record", tmp_path / "empty.csv", "--label", "class") == 1
        self.one_sentence(
            capsys, "‘empty.csv’ is empty; a header line and one line a case are needed."
        )

    def test_a_file_that_is_not_there(self, tmp_path, capsys):
        missing = tmp_path / "missing.csv"
        assert evaluate(tmp_path / "record", missing, "--label", "class") == 1
        self.one_sentence(
            capsys, f"The file '{missing}' cannot be read: No such file or directory."
        )

    def test_a_candidate_that_fails_alone(self, tmp_path, capsys, monkeypatch):
        def cannot(*_, **__):
            raise ValueError("no such model")

        monkeypatch.setattr("evalcore.tuning.round_scores", cannot)
        with pytest.warns(UserWarning, match="naive_bayes failed"):
            code = evaluate(
                tmp_path / "record",
                DATA / "iris.csv",
                *("--label", "class", "--candidate", "naive_bayes", "--scheme", "holdout"),
            )
        assert code == 1
        assert capsys.readouterr().err.splitlines()[-1] == (
            "No candidate could be fitted: ValueError: no such model"
        )

    def test_an_altered_record(self, tmp_path, capsys):
        out = tmp_path / "record"
        arguments = (DATA / "iris.csv", *ONE, "--scheme", "holdout")
        assert evaluate(out, *arguments) == 0
        about = json.loads((out / "about.json").read_text("utf-8"))
        (out / "about.json").write_text(json.dumps(about | {"table": "0" * 64}), "utf-8")
        capsys.readouterr()
        assert evaluate(out, *arguments) == 1
        assert capsys.readouterr().err.splitlines()[-1] == (
            "The table of record 'record' reads differently now than when it was evaluated; its "
            "file was altered, or this version reads it otherwise."
        )


class TestSummary:
    def test_writes_pdf_and_html_beside_the_record_or_elsewhere(self, lots, tmp_path, capsys):
        assert main(["summary", str(lots), "--out", str(tmp_path / "out")]) == 0
        pdf, html = capsys.readouterr().out.split()
        assert Path(pdf) == tmp_path / "out" / "summary.pdf"
        assert Path(html) == tmp_path / "out" / "summary.html"
        assert Path(pdf).read_bytes().startswith(b"%PDF-")
        assert "failing lots" in Path(html).read_text("utf-8")

    def test_writes_into_the_record_unless_told_otherwise(self, penguins):
        assert main(["summary", str(penguins)]) == 0
        assert (penguins / "summary.pdf").read_bytes().startswith(b"%PDF-")
        assert (penguins / "summary.html").read_text("utf-8").startswith("<!DOCTYPE html>")

    def test_a_folder_without_a_record(self, tmp_path, capsys):
        assert main(["summary", str(tmp_path)]) == 1
        assert capsys.readouterr().err.splitlines()[-1] == (
            f"There is no record in {tmp_path.name!r}."
        )


class TestColumns:
    def test_a_statistic_of_a_column(self, tmp_path, capsys):
        # mouse data, treatment group: Efron & Tibshirani 1993, table 2.1 (mean 86.86; the
        # bootstrap standard error of the mean without end is 23.36)
        path = tmp_path / "mice.csv"
        path.write_text(
            "days,group\n" + "\n".join(f"{d},t" for d in (94, 197, 16, 38, 99, 141, 23))
        )
        arguments = ["statistic", str(path), "--column", "days", "--statistic", "mean"]
        assert main([*arguments, "--rounds", "20000"]) == 0
        lines = capsys.readouterr().out.replace("\u00a0", " ").splitlines()
        assert lines[0] == "Mean of ‘days’: 86.857143"
        assert lines[1] == "n = 7, units 7, missing 0"
        error = float(lines[2].split()[2].rstrip(","))
        assert error == pytest.approx(23.36, abs=0.5)

    def test_words_have_no_mean(self, tmp_path, capsys):
        path = tmp_path / "words.csv"
        path.write_text("word,group\nup,a\ndown,b\n")
        assert main(["statistic", str(path), "--column", "word", "--statistic", "mean"]) == 1
        said = capsys.readouterr().err
        assert said.startswith("The column ‘word’ must hold numbers;")
        assert said.count("\n") == 1

    def test_cases_to_show_a_limit(self, capsys):
        # 29, 46, 61: exact binomial, recomputed with scipy in test_sample_size
        assert main(["sample-size", "--limit", "0.9"]) == 0
        lines = capsys.readouterr().out.replace("\u00a0", " ").splitlines()
        assert lines[0] == "90 % shown with 0 misses: 29 cases (exact), 25 (Wilson)"
        assert lines[1] == "90 % shown with 1 miss: 46 cases (exact), 42 (Wilson)"

    def test_nothing_wanted(self, capsys):
        assert main(["sample-size"]) == 1
        assert capsys.readouterr().err == (
            "Name what is wanted: --limit, --share with --width, or --auc with --half-width.\n"
        )
