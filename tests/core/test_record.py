"""The folder that an evaluation leaves: what it keeps, what it gives back, what it refuses."""

import csv
import dataclasses
import io
import json
import re
import shutil
import warnings

import numpy as np
import pytest
from numpy.testing import assert_array_equal

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off_rule import CutOffRule
from evalcore.engine import WHOLE, Task, chunk_rounds, run, tasks
from evalcore.errors import EvalError, PlanError, RecordError, TableError
from evalcore.estimates import by_case
from evalcore.files import write
from evalcore.findings import findings
from evalcore.fits import round_scores
from evalcore.intake import make_table
from evalcore.plan import Plan
from evalcore.record import NAME, SILENT, Record, Status, find, new_folder
from evalcore.results import results_csv
from evalcore.schemes import SCHEMES
from evalcore.sheet import read_sheet
from evalcore.table import Roles
from evalcore.worker import fill

from .checks import DATA, exactly

PENGUINS = (DATA / "penguins.csv").read_bytes()
SOME_PENGUINS = b"".join(PENGUINS.splitlines(keepends=True)[::4])
STEP = chunk_rounds(SOME_PENGUINS.count(b"\n") - 1)  # rounds of a whole chunk
CROSS, BOOTSTRAP = 2 * STEP, STEP + 2  # rounds planned
TOTAL = 1 + CROSS + BOOTSTRAP
NO_SUCH = (
    "This address names no record kept here. A record's name has 22 characters, such as "
    "20260504-101200-0a1b2c."
)


def a_plan(**changes) -> Plan:
    """Cross-validation in two whole chunks, the bootstrap in one and a bit, and all cases once."""
    plan = Plan(
        Roles("species"),
        (
            choose(SCHEMES, "cross_validation", folds=5, repeats=CROSS // 5),
            choose(SCHEMES, "bootstrap", rounds=BOOTSTRAP),
        ),
        (choose(CANDIDATES, "majority"), choose(CANDIDATES, "forest", trees=3)),
    )
    return dataclasses.replace(plan, **changes)


def a_record(folder, plan=None, data=SOME_PENGUINS) -> Record:
    return Record.create(folder / "record", data, "penguins.csv", plan or a_plan())


def carry_out(record: Record, wanted) -> None:
    for finished in run(record.table, record.plan, record.rounds, todo=wanted):
        record.add(finished)


@pytest.fixture(scope="module")
def filled(tmp_path_factory) -> Record:
    record = a_record(tmp_path_factory.mktemp("filled"))
    fill(record, jobs=1)
    return record


class TestCreating:
    def test_holds_the_file_as_it_came_the_plan_and_the_rounds(self, tmp_path):
        plan = a_plan(question="Which one is it?")
        record = Record(a_record(tmp_path, plan).folder)
        table = make_table(read_sheet(SOME_PENGUINS, "penguins.csv"), plan.roles)
        assert record.source == SOME_PENGUINS
        assert record.plan == plan
        assert record.table.fingerprint == table.fingerprint == record.about["table"]
        assert record.about["plan"] == plan.fingerprint
        assert record.about["name"] == "penguins.csv"
        assert re.fullmatch(r"\d{4}-\d\d-\d\d \d\d:\d\d", record.about["begun"])
        assert record.about["versions"]["numpy"] == np.__version__
        for name, drawn in plan.draw(table).items():
            assert_array_equal(record.rounds[name].train, drawn.train)
            assert_array_equal(record.rounds[name].test, drawn.test)
            assert_array_equal(record.rounds[name].repeat, drawn.repeat)

    def test_waits_with_nothing_finished(self, tmp_path):
        record = a_record(tmp_path)
        assert record.status() == Status("waiting", 0, TOTAL)
        assert record.unfinished() == tasks(record.rounds)
        assert record.evaluation() is None

    def test_leaves_no_half_written_file(self, tmp_path):
        record = a_record(tmp_path)
        assert {path.name for path in record.folder.iterdir()} == {
            "source.csv", "plan.json", "rounds.npz", "about.json", "status.json", "alive", "chunks",
        }  # fmt: skip

    def test_takes_an_empty_folder(self, tmp_path):
        (tmp_path / "record").mkdir()
        assert a_record(tmp_path).status().state == "waiting"

    @pytest.mark.parametrize("kept", ["notes.txt", "about.json"])
    def test_refuses_a_folder_that_holds_something(self, tmp_path, kept):
        (tmp_path / "record").mkdir()
        (tmp_path / "record" / kept).write_text("{}")
        message = "The folder 'record' is not empty; a new record needs a new folder."
        with pytest.raises(RecordError, match=exactly(message)):
            a_record(tmp_path)
        assert [path.name for path in (tmp_path / "record").iterdir()] == [kept]

    @pytest.mark.parametrize(
        ("plan", "data", "kind", "message"),
        [
            (
                a_plan(concern="Emperor"),
                SOME_PENGUINS,
                PlanError,
                "There is no class ‘Emperor’; the classes are ‘Adelie’, ‘Chinstrap’ and ‘Gentoo’.",
            ),
            (
                a_plan(),
                b"",
                TableError,
                "‘penguins.csv’ is empty; a header line and one line a case are needed.",
            ),
        ],
        ids=["plan", "file"],
    )
    def test_what_cannot_be_used_leaves_nothing_behind(self, tmp_path, plan, data, kind, message):
        with pytest.raises(kind, match=exactly(message)):
            a_record(tmp_path, plan, data)
        assert list(tmp_path.iterdir()) == []


class TestFinding:
    def test_finds_a_record_by_its_name(self, tmp_path):
        folder = new_folder(tmp_path)
        assert NAME.fullmatch(folder.name)
        Record.create(folder, SOME_PENGUINS, "penguins.csv", a_plan())
        assert find(tmp_path, folder.name).folder == folder

    def test_two_folders_of_one_second_differ(self, tmp_path):
        assert new_folder(tmp_path) != new_folder(tmp_path)

    @pytest.mark.parametrize(
        "name",
        [
            "",
            ".",
            "..",
            "../outside",
            "../20260504-101200-0a1b2c",
            "20260504-101200-0a1b2c/..",
            "20260504-101200-0a1b2c\n",
            "20260504-101200-0A1B2C",
            "20260504-101200-ffffff",
            "/etc",
            "record\x00",
            "%2e%2e",
        ],
    )
    def test_a_name_that_is_none_is_refused(self, tmp_path, name):
        root = tmp_path / "records"
        for folder in (tmp_path / "outside", tmp_path / "20260504-101200-0a1b2c", root / "record"):
            Record.create(folder, SOME_PENGUINS, "penguins.csv", a_plan())
        Record.create(root / "20260504-101200-0a1b2c", SOME_PENGUINS, "penguins.csv", a_plan())
        with pytest.raises(RecordError, match=exactly(NO_SUCH)):
            find(root, name)

    def test_a_folder_without_a_record_is_refused(self, tmp_path):
        (tmp_path / "else").mkdir()
        with pytest.raises(RecordError, match=exactly("There is no record in 'else'.")):
            Record(tmp_path / "else")


class TestAlteredFile:
    def test_a_file_that_reads_differently_is_refused(self, tmp_path):
        record = a_record(tmp_path)
        altered = SOME_PENGUINS.replace(b"Adelie", b"Gentoo", 1)
        assert altered != SOME_PENGUINS
        (record.folder / "source.csv").write_bytes(altered)
        message = (
            "The table of record 'record' reads differently now than when it was evaluated; its "
            "file was altered, or this version reads it otherwise."
        )
        again = Record(record.folder)
        with pytest.raises(RecordError, match=exactly(message)):
            _ = again.table
        with pytest.raises(RecordError, match=exactly(message)):
            fill(again, jobs=1)
        assert again.done() == 0

    def test_a_file_that_only_looks_different_is_not(self, tmp_path):
        record = a_record(tmp_path)
        (record.folder / "source.csv").write_bytes(SOME_PENGUINS.replace(b"\n", b"\r\n"))
        assert Record(record.folder).table.fingerprint == record.about["table"]


class TestFilling:
    def test_ends_finished_with_results_and_findings(self, filled):
        assert filled.status() == Status("finished", TOTAL, TOTAL)
        assert filled.unfinished() == []
        evaluation = filled.evaluation()
        assert (filled.folder / "results.csv").read_text("utf-8") == results_csv(evaluation)
        rows = list(csv.DictReader(io.StringIO((filled.folder / "findings.csv").read_text())))
        found = findings(filled.table, filled.plan, evaluation)
        assert [(r["check"], r["subject"]) for r in rows] == [(f.check, f.subject) for f in found]
        assert [float(r["value"]) for r in rows] == [f.value for f in found]

    def test_the_same_digits_again(self, filled, tmp_path):
        again = a_record(tmp_path)
        fill(again, jobs=1)
        for name in ("results.csv", "findings.csv"):
            assert (again.folder / name).read_bytes() == (filled.folder / name).read_bytes()

    def test_another_seed_gives_other_digits(self, filled, tmp_path):
        other = a_record(tmp_path, a_plan(seed=2))
        fill(other, jobs=1)
        mine = (other.folder / "results.csv").read_bytes()
        assert mine != (filled.folder / "results.csv").read_bytes()

    def test_a_reader_later_gets_the_same_figures(self, filled):
        read = Record(filled.folder).evaluation()
        assert results_csv(read) == (filled.folder / "results.csv").read_text("utf-8")
        assert read.planned == {"cross_validation": CROSS, "bootstrap": BOOTSTRAP}

    def test_what_has_finished_is_not_carried_out_again(self, filled, tmp_path, monkeypatch):
        record = a_record(tmp_path)
        carry_out(record, record.unfinished()[:3])
        kept = {p: p.stat().st_mtime_ns for p in (record.folder / "chunks").iterdir()}
        carried_out = []

        def watched(table, plan, rounds, *, todo, jobs):
            carried_out.extend(todo)
            yield from run(table, plan, rounds, todo=todo, jobs=jobs)

        monkeypatch.setattr("evalcore.worker.run", watched)
        fill(record, jobs=1)
        assert carried_out == tasks(record.rounds)[3:]
        assert {p: p.stat().st_mtime_ns for p in kept} == kept
        assert (record.folder / "results.csv").read_bytes() == (
            filled.folder / "results.csv"
        ).read_bytes()

    def test_tells_how_far_it_is(self, tmp_path):
        record, said = a_record(tmp_path), []
        fill(record, jobs=1, tell=said.append)
        assert [s.done for s in said] == [
            0,
            1,
            1 + STEP,
            1 + CROSS,
            1 + CROSS + STEP,
            TOTAL,
            TOTAL,
        ]
        assert [s.state for s in said] == ["running"] * 6 + ["finished"]
        assert {s.total for s in said} == {TOTAL}
        # nothing is promised before five rounds are through
        assert [s.seconds_left is None for s in said[:3]] == [True, True, False]
        assert said[5].seconds_left == 0


class TestPartOfTheRounds:
    def test_figures_rest_on_finished_rounds_only(self, tmp_path):
        record = a_record(tmp_path)
        carry_out(record, [Task(WHOLE, 0, 1), Task("cross_validation", 0, STEP)])
        evaluation = record.evaluation()
        assert list(evaluation.rounds) == ["cross_validation"]
        first = record.rounds["cross_validation"].first(STEP)
        assert_array_equal(evaluation.rounds["cross_validation"].test, first.test)
        assert evaluation.planned == {"cross_validation": CROSS, "bootstrap": BOOTSTRAP}
        assert {(e.scheme, e.rounds) for e in evaluation.estimates} == {("cross_validation", STEP)}
        part = evaluation.part("forest", "cross_validation")
        assert part.held.scores.shape == (int(first.test.sum()), 3)
        estimate = evaluation.estimate("accuracy", "forest")
        assert estimate.value == by_case(part.held.correct, first)
        assert record.done() == 1 + STEP

    def test_a_chunk_behind_a_gap_waits(self, tmp_path):
        record = a_record(tmp_path)
        later = Task("cross_validation", STEP, 2 * STEP)
        carry_out(record, [Task(WHOLE, 0, 1), Task("bootstrap", 0, STEP), later])
        evaluation = record.evaluation()
        assert {name: drawn.n_rounds for name, drawn in evaluation.rounds.items()} == {
            "bootstrap": STEP
        }
        assert record.done() == 1 + STEP + STEP

    def test_without_the_fit_on_all_cases_there_are_no_figures(self, tmp_path):
        record = a_record(tmp_path)
        carry_out(record, [Task("cross_validation", 0, STEP)])
        assert record.evaluation() is None

    def test_without_any_round_there_are_no_figures(self, tmp_path):
        record = a_record(tmp_path)
        carry_out(record, [Task(WHOLE, 0, 1)])
        assert record.evaluation() is None


def break_down(monkeypatch, key: str, at: int | None = None) -> None:
    """Let a candidate fail in every task, or only in one counted from 0."""
    tasks_begun = []

    def scores(choice, *given, **named):
        if choice.key == key:
            tasks_begun.append(key)
            if at in (None, len(tasks_begun) - 1):
                raise ValueError("this matrix is singular")
        return round_scores(choice, *given, **named)

    monkeypatch.setattr("evalcore.tuning.round_scores", scores)


class TestFailures:
    def test_a_candidate_that_fails_is_told_and_the_others_go_on(self, tmp_path, monkeypatch):
        break_down(monkeypatch, "naive_bayes")
        record = a_record(
            tmp_path, a_plan(candidates=(*a_plan().candidates, choose(CANDIDATES, "naive_bayes")))
        )
        with warnings.catch_warnings(record=True) as told:
            warnings.simplefilter("always")
            fill(record, jobs=1)
        error = "ValueError('this matrix is singular')"
        assert {str(w.message) for w in told} == {
            f"naive_bayes failed in the whole table: {error}",
            f"naive_bayes failed in cross_validation: {error}",
            f"naive_bayes failed in bootstrap: {error}",
        }
        assert record.status().state == "finished"
        evaluation = record.evaluation()
        assert evaluation.failures == {"naive_bayes": "ValueError: this matrix is singular"}
        assert evaluation.candidates == ("majority", "forest")
        assert {e.candidate for e in evaluation.estimates} == {"majority", "forest"}
        found = [f for f in findings(record.table, record.plan, evaluation) if f.check == "failed"]
        assert [(f.severity, f.subject) for f in found] == [("grave", "naive_bayes")]
        assert "ValueError: this matrix is singular" in found[0].seen

    def test_one_failed_round_leaves_the_candidate_out(self, tmp_path, monkeypatch):
        record = a_record(
            tmp_path,
            a_plan(
                candidates=(
                    choose(CANDIDATES, "naive_bayes"),
                    choose(CANDIDATES, "forest", trees=3),
                ),
                schemes=(choose(SCHEMES, "cross_validation", folds=5, repeats=STEP // 5 + 1),),
            ),
        )
        assert len(tasks(record.rounds)) == 3
        break_down(monkeypatch, "naive_bayes", at=2)
        with warnings.catch_warnings(record=True) as told:
            warnings.simplefilter("always")
            fill(record, jobs=1)
        assert {str(w.message).partition(":")[0] for w in told} == {
            "naive_bayes failed in cross_validation"
        }
        evaluation = record.evaluation()
        assert evaluation.failures == {"naive_bayes": "ValueError: this matrix is singular"}
        assert evaluation.candidates == ("forest",)
        # the answer was to be about the one that failed: it is about the next one then
        assert record.plan.about_name == "naive_bayes"
        assert evaluation.about == "forest"

    def test_if_all_fail_there_is_no_evaluation(self, tmp_path, monkeypatch):
        break_down(monkeypatch, "naive_bayes")
        record = a_record(tmp_path, a_plan(candidates=(choose(CANDIDATES, "naive_bayes"),)))
        message = "No candidate could be fitted: ValueError: this matrix is singular"
        with (
            pytest.warns(UserWarning, match="naive_bayes failed"),
            pytest.raises(RecordError, match=exactly(message)),
        ):
            fill(record, jobs=1)
        assert not (record.folder / "results.csv").exists()
        with pytest.raises(EvalError, match=exactly(message)):
            record.evaluation()


class TestStatus:
    def test_a_worker_that_lives_and_gives_signs_is_running(self, tmp_path, monkeypatch):
        record = a_record(tmp_path)
        given = Status("running", 1 + STEP, TOTAL, 4.5, process=1)
        monkeypatch.setattr("evalcore.record._lives", lambda process: process == 1)
        record.set_status(given)
        assert record.status() == given

    def test_a_worker_that_is_gone_shows_as_interrupted(self, tmp_path, monkeypatch):
        record = a_record(tmp_path)
        carry_out(record, record.unfinished()[:2])
        monkeypatch.setattr("evalcore.record._lives", lambda process: False)
        record.set_status(Status("running", 1, TOTAL, 4.5, process=1))
        assert record.status() == Status("interrupted", 1 + STEP, TOTAL)

    def test_a_worker_without_signs_of_life_shows_as_interrupted(self, tmp_path, monkeypatch):
        record = a_record(tmp_path)
        monkeypatch.setattr("evalcore.record._lives", lambda process: True)
        record.set_status(Status("running", 1, TOTAL, process=1))
        now = (record.folder / "alive").stat().st_mtime
        monkeypatch.setattr("evalcore.record.time.time", lambda: now + SILENT - 1)
        assert record.status().state == "running"
        monkeypatch.setattr("evalcore.record.time.time", lambda: now + SILENT + 1)
        assert record.status().state == "interrupted"

    def test_a_record_without_status_shows_as_interrupted(self, tmp_path):
        record = a_record(tmp_path)
        (record.folder / "status.json").unlink()
        assert record.status() == Status("interrupted", 0, TOTAL)

    @pytest.mark.parametrize("state", ["finished", "cancelled", "failed"])
    def test_an_ended_one_keeps_its_state(self, tmp_path, monkeypatch, state):
        record = a_record(tmp_path)
        monkeypatch.setattr("evalcore.record._lives", lambda process: False)
        record.set_status(Status(state, 5, TOTAL, message="why"))
        assert record.status() == Status(state, 5, TOTAL, message="why")

    def test_a_wish_to_stop_can_be_taken_back(self, tmp_path):
        record = a_record(tmp_path)
        assert not record.cancelled()
        record.clear_cancel()
        record.cancel()
        record.cancel()
        assert record.cancelled()
        record.clear_cancel()
        assert not record.cancelled()


def two_classes() -> bytes:
    """Thirty cases of two classes, one reading each."""
    rng = np.random.default_rng(41)
    lines = [
        f"{rng.normal(case % 3 > 0):.4f},{'sound' if case % 3 else 'foul'}" for case in range(30)
    ]
    return ("reading,class\n" + "\n".join(lines) + "\n").encode()


@pytest.fixture(scope="module")
def complete(tmp_path_factory) -> Record:
    """A small finished record in which every kind of array is kept."""
    plan = Plan(
        Roles("class"),
        (choose(SCHEMES, "cross_validation", folds=3, repeats=1),),
        (
            choose(CANDIDATES, "majority"),
            choose(CANDIDATES, "nearest_neighbours", k=(1, 3)),
            choose(CANDIDATES, "naive_bayes"),
        ),
        cut_off=CutOffRule("foul", "cost", miss=4.0),
        permutations=2,
    )
    folder = new_folder(tmp_path_factory.mktemp("complete"))
    record = Record.create(folder, two_classes(), "readings.csv", plan)
    fill(record, jobs=1)
    return record


READERS = {
    "find": lambda folder: find(folder.parent, folder.name),
    "record": Record,
    "plan": lambda folder: Record(folder).plan,
    "source": lambda folder: Record(folder).source,
    "table": lambda folder: Record(folder).table,
    "rounds": lambda folder: Record(folder).rounds,
    "status": lambda folder: Record(folder).status(),
    "evaluation": lambda folder: Record(folder).evaluation(),
}
CHUNKS = ("chunks/whole-00000.npz", "chunks/0-00000.npz", "chunks/chance-00000.npz")
# who needs which file; nobody else may be troubled by it
NEEDED_BY = {
    "about.json": set(READERS),
    "plan.json": {"plan", "table", "rounds", "evaluation"},
    "rounds.npz": {"rounds", "evaluation"},
    "status.json": {"status"},
    "source.csv": {"table", "evaluation"},
} | {name: {"evaluation"} for name in CHUNKS}


def refusals(folder) -> dict[str, str]:
    """What each reader that refuses a record says; any error but a RecordError passes through."""
    said = {}
    for name, read in READERS.items():
        try:
            read(folder)
        except RecordError as error:
            said[name] = str(error)
    return said


def damaged(name: str, folder) -> str:
    return (
        f"The file '{name}' of record '{folder.name}' is missing or damaged; evaluate the table "
        "again."
    )


def of_that_file(said: dict[str, str], name: str, folder) -> bool:
    """Whether all that is said is sentences that name the file and the record."""
    start = f"The file '{name}' of record '{folder.name}' "
    return all(
        message.startswith(start) and message.endswith(".") and "\n" not in message
        for message in said.values()
    )


class TestDamagedFiles:
    @pytest.fixture
    def folder(self, complete, tmp_path):
        """A copy that may be damaged, beside one that is left alone."""
        for name in ("20260504-101200-0a1b2c", "20260504-101200-ffffff"):
            shutil.copytree(complete.folder, tmp_path / name)
        yield tmp_path / "20260504-101200-0a1b2c"
        assert refusals(tmp_path / "20260504-101200-ffffff") == {}

    def test_whole_it_is_read_by_all(self, folder, complete):
        assert refusals(folder) == {}
        assert results_csv(Record(folder).evaluation()) == (
            complete.folder / "results.csv"
        ).read_text("utf-8")

    @pytest.mark.parametrize("name", NEEDED_BY)
    @pytest.mark.parametrize("left", ["nothing", "a_half", "garbage"])
    def test_whoever_needs_the_file_names_it(self, folder, name, left):
        path = folder / name
        whole = path.read_bytes()
        half = whole[: len(whole) // 2]
        kept = {"nothing": b"", "a_half": half, "garbage": bytes(range(256)) * 9}
        path.write_bytes(kept[left])
        said = refusals(folder)
        assert of_that_file(said, name, folder)
        assert set(said) == NEEDED_BY[name]
        # those that know what a file should hold say more than that it is damaged
        if name not in ("plan.json", "source.csv"):
            assert set(said.values()) == {damaged(name, folder)}

    @pytest.mark.parametrize("name", ["plan.json", "rounds.npz", "source.csv"])
    def test_a_missing_file_is_named(self, folder, name):
        (folder / name).unlink()
        missed_by = NEEDED_BY[name] | ({"source"} if name == "source.csv" else set())
        assert refusals(folder) == dict.fromkeys(missed_by, damaged(name, folder))

    @pytest.mark.parametrize("name", ["rounds.npz", *CHUNKS])
    def test_an_archive_that_lacks_any_array_is_named(self, folder, name):
        path = folder / name
        with np.load(path) as stored:
            arrays = dict(stored)
        unread = {"failures"} if "chance" in name else set()
        for lacking in arrays.keys() - unread:
            np.savez(path, **{key: array for key, array in arrays.items() if key != lacking})
            assert refusals(folder) == dict.fromkeys(NEEDED_BY[name], damaged(name, folder)), (
                lacking
            )

    @pytest.mark.parametrize("name", CHUNKS)
    def test_a_chunk_of_other_rounds_is_named(self, folder, name):
        path = folder / name
        with np.load(path) as stored:
            arrays = dict(stored)
        counted = {key for key in arrays if key.endswith(("scores", "bag", "auc", "all", "chance"))}
        assert len(counted) == (1 if "chance" in name else 3 * 7)
        for key in counted:
            more = np.concatenate([arrays[key], np.zeros((1, *arrays[key].shape[1:]))])
            np.savez(path, **arrays | {key: more})
            assert refusals(folder) == {"evaluation": damaged(name, folder)}, key

    @pytest.mark.parametrize("text", ["[]", "3", "null", "{}", "[" * 100_000])
    @pytest.mark.parametrize("name", ["about.json", "plan.json", "status.json"])
    def test_json_that_is_something_else_is_named(self, folder, name, text):
        (folder / name).write_text(text)
        said = refusals(folder)
        assert set(said) == NEEDED_BY[name]
        assert of_that_file(said, name, folder)

    @pytest.mark.parametrize(
        ("entry", "value"),
        [("name", None), ("table", 3), ("chunk", "ten"), ("chunk", 1e400), ("versions", [])],
    )
    def test_an_entry_of_another_kind_is_named(self, folder, entry, value):
        path = folder / "about.json"
        path.write_text(json.dumps(json.loads(path.read_text()) | {entry: value}))
        assert refusals(folder) == dict.fromkeys(READERS, damaged("about.json", folder))

    def test_a_plan_of_a_newer_format_says_so(self, folder):
        path = folder / "plan.json"
        path.write_text(json.dumps(json.loads(path.read_text()) | {"format": 9}))
        message = (
            f"The file 'plan.json' of record '{folder.name}' cannot be used. This plan is of "
            "format 9; this version reads format 1."
        )
        assert refusals(folder) == dict.fromkeys(NEEDED_BY["plan.json"], message)

    @pytest.mark.parametrize("name", ["rounds.npz", *CHUNKS])
    def test_bytes_changed_anywhere_are_noticed_or_harmless(self, folder, name):
        rng = np.random.default_rng(17)
        path = folder / name
        whole = path.read_bytes()
        figures, said = results_csv(Record(folder).evaluation()), []
        for _ in range(60):
            changed = bytearray(whole)
            for at in rng.integers(len(whole), size=rng.choice([1, 3, 30])):
                changed[at] = rng.integers(256)
            path.write_bytes(changed)
            try:
                assert results_csv(Record(folder).evaluation()) == figures
            except RecordError as error:
                said.append(str(error))
        assert len(said) > 30
        assert set(said) == {damaged(name, folder)}

    @pytest.mark.parametrize("kind", ["encrypted", "newer", "unknown_compression"])
    def test_an_archive_of_a_kind_that_is_not_read_is_named(self, folder, kind):
        # places in an entry of the directory at the end, by the published layout of ZIP files
        at, value = {"encrypted": (8, 1), "newer": (6, 99), "unknown_compression": (10, 77)}[kind]
        path = folder / "rounds.npz"
        changed = bytearray(path.read_bytes())
        changed[changed.index(b"PK\x01\x02") + at] = value
        path.write_bytes(changed)
        assert refusals(folder) == dict.fromkeys(
            NEEDED_BY["rounds.npz"], damaged("rounds.npz", folder)
        )

    def test_without_the_damaged_chunk_it_goes_on_to_the_same_figures(self, folder, complete):
        (folder / CHUNKS[1]).unlink()
        fill(Record(folder), jobs=1)
        assert (folder / "results.csv").read_bytes() == (
            complete.folder / "results.csv"
        ).read_bytes()


def test_writing_replaces_a_file_in_one_step(tmp_path, monkeypatch):
    path = tmp_path / "about.json"
    path.write_bytes(b"old")
    monkeypatch.setattr("evalcore.record.os.replace", lambda *_: pytest.fail("power cut"))
    with pytest.raises(BaseException, match="power cut"):
        write(path, b"new")
    assert path.read_bytes() == b"old"
    monkeypatch.undo()
    write(path, json.dumps({"a": 1}).encode())
    assert json.loads(path.read_bytes()) == {"a": 1}
