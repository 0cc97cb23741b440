"""Records with grids, a cut-off, a learning curve and permuted tables: kept, resumed, the same."""

import csv
import io
import json
import random
from types import SimpleNamespace

import numpy as np
import pytest
from numpy.testing import assert_array_equal

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off import CutOffRule
from evalcore.engine import CHANCE, WHOLE, Task, run
from evalcore.intake import noun_from
from evalcore.permuted import permuted_figures
from evalcore.plan import Plan
from evalcore.record import Record, Status
from evalcore.results import results_csv
from evalcore.schemes import ALL_SCHEMES, SCHEMES
from evalcore.table import Roles
from evalcore.worker import fill

M = 7  # permutations, each a task of its own
OF_EACH = 20  # rounds of each: four whole repeats of five folds, of the eleven
FILES = (
    "results.csv", "findings.csv", "comparison.csv", "verdicts.csv", "intervals.csv", "cases.csv",
)  # fmt: skip


def source() -> bytes:
    """Twenty-four lots of two classes, some measured twice."""
    rng, lines = np.random.default_rng(31), ["lot,first,second,class"]
    for lot in range(24):
        sound = lot % 3 > 0
        for _ in range(1 + lot % 2):
            first, second = rng.normal(1.2 * sound), rng.normal()
            lines.append(f"L{lot:02d},{first:.4f},{second:.4f},{'sound' if sound else 'foul'}")
    return ("\n".join(lines) + "\n").encode()


PLAN = Plan(
    Roles("class", "lot", noun=noun_from("lot")),
    (choose(SCHEMES, "cross_validation", repeats=11), choose(SCHEMES, "bootstrap", rounds=6)),
    (
        choose(CANDIDATES, "majority"),
        choose(CANDIDATES, "nearest_neighbours", k=(1, 5)),
        choose(CANDIDATES, "logistic"),
    ),
    curve=choose(ALL_SCHEMES, "learning_curve", sizes=5),
    cut_off=CutOffRule("foul", "cost", miss=4.0),
    permutations=M,
)


def a_record(folder) -> Record:
    return Record.create(folder / "record", source(), "lots.csv", PLAN)


def carry_out(record: Record, wanted) -> None:
    for finished in run(record.table, record.plan, record.rounds, todo=wanted):
        record.add(finished)


@pytest.fixture(scope="module")
def filled(tmp_path_factory) -> Record:
    record = a_record(tmp_path_factory.mktemp("filled"))
    fill(record, jobs=1)
    return record


def p_values(evaluation) -> dict[str, tuple[float, int]]:
    return {
        e.candidate: (e.value, e.rounds)
        for e in evaluation.beside.estimates
        if (e.estimator, e.measure) == ("chance_check", "p")
    }


class TestWhatIsKept:
    def test_the_plan_as_it_was(self, filled):
        assert Record(filled.folder).plan == PLAN

    def test_the_rounds_of_the_curve_stand_beside_the_others(self, filled):
        drawn = PLAN.draw(filled.table)
        kept = Record(filled.folder).rounds
        assert list(kept) == list(drawn) == ["cross_validation", "bootstrap", "learning_curve"]
        for name, rounds in drawn.items():
            assert_array_equal(kept[name].train, rounds.train)
            assert_array_equal(kept[name].test, rounds.test)

    def test_every_task_has_its_file_and_is_counted(self, filled):
        curve = filled.rounds["learning_curve"].n_rounds
        names = {path.name for path in (filled.folder / "chunks").iterdir()}
        later = {f"2-{start:05d}.npz" for start in range(0, curve, 50)}
        assert names == later | {
            "whole-00000.npz", "0-00000.npz", "0-00050.npz", "1-00000.npz",
            *(f"chance-0000{number}.npz" for number in range(M)),
        }  # fmt: skip
        total = 1 + 55 + 6 + curve + M * OF_EACH
        assert filled.status() == Status("finished", total, total)

    def test_picks_inner_scores_and_permuted_figures(self, filled):
        table, n = filled.table, filled.table.n_cases
        with np.load(filled.folder / "chunks" / "0-00000.npz") as kept:
            assert kept["1-picked"].shape == (50,)
            assert "0-picked" not in kept
            assert "2-picked" not in kept
            # a cut-off is learned from scores; a rule that looks at nothing has none
            assert "0-inner" not in kept
            bags = filled.rounds["cross_validation"].train[:50]
            for at in (1, 2):
                assert kept[f"{at}-inner"].shape == (50, n)
                assert_array_equal(np.isnan(kept[f"{at}-inner"]), bags == 0)
        for name in ("1-00000.npz", "2-00000.npz"):
            with np.load(filled.folder / "chunks" / name) as kept:
                assert "1-picked" in kept
                # of the headline's scheme only
                assert not [key for key in kept if key.endswith("inner")]
        with np.load(filled.folder / "chunks" / "chance-00005.npz") as kept:
            assert kept["chance"].shape == (1, 3)
            assert_array_equal(kept["chance"][0], permuted_figures(table, PLAN, 5))

    def test_results_hold_everything_asked_for(self, filled):
        evaluation = filled.evaluation()
        text = (filled.folder / "results.csv").read_text("utf-8")
        assert text == results_csv(evaluation)
        rows = list(csv.DictReader(io.StringIO(text)))
        named = ("candidate", "scheme", "estimator", "measure", "class", "counted_by")
        keys = [tuple(row[column] for column in named) for row in rows]
        assert len(set(keys)) == len(keys)
        estimators = {row["estimator"] for row in rows}
        assert {
            "picked_in_rounds", "picked_on_all", "at_cut_off", "winner_corrected_at_cut_off",
            "chance_check", "chance_check_best", "majority_test",
        } <= estimators  # fmt: skip
        assert any(name.startswith("learned_from_") for name in estimators)
        # small bags give no estimate
        of_curve = {row["estimator"] for row in rows if row["scheme"] == "learning_curve"}
        assert of_curve
        assert all(e.startswith(("learned_from_", "continued_to_", "picked_")) for e in of_curve)


class TestResumed:
    def test_whatever_was_finished_first(self, filled, tmp_path):
        """Some tasks in any order, then a new process that knows only the folder."""
        record = a_record(tmp_path)
        todo = record.unfinished()
        assert {task.scheme for task in todo} == {WHOLE, CHANCE, *record.rounds}
        random.Random(4).shuffle(todo)
        carry_out(record, todo[:5])
        again = Record(record.folder)
        assert len(again.unfinished()) == len(todo) - 5
        fill(again, jobs=1)
        for name in FILES:
            assert (again.folder / name).read_bytes() == (filled.folder / name).read_bytes()
        assert again.status() == filled.status()

    def test_only_what_was_missing_is_carried_out(self, filled, tmp_path, monkeypatch):
        record = a_record(tmp_path)
        for path in (filled.folder / "chunks").iterdir():
            if path.name not in ("0-00050.npz", "chance-00003.npz"):
                (record.folder / "chunks" / path.name).write_bytes(path.read_bytes())
        carried_out = []

        def watched(table, plan, rounds, *, todo, jobs):
            carried_out.extend(todo)
            yield from run(table, plan, rounds, todo=todo, jobs=jobs)

        monkeypatch.setattr("evalcore.worker.run", watched)
        fill(record, jobs=1)
        assert carried_out == [Task("cross_validation", 50, 55), Task(CHANCE, 3, 4)]
        for name in FILES:
            assert (record.folder / name).read_bytes() == (filled.folder / name).read_bytes()


class TestPartOfIt:
    """Chunks of the filled record, as far as somebody had come."""

    def so_far(self, filled, folder, *wanted) -> Record:
        record = a_record(folder)
        for name in wanted:
            (record.folder / "chunks" / name).write_bytes(
                (filled.folder / "chunks" / name).read_bytes()
            )
        return record

    def test_before_the_permuted_tables_there_is_no_p(self, filled, tmp_path):
        record = self.so_far(filled, tmp_path, "whole-00000.npz", "0-00000.npz")
        evaluation = record.evaluation()
        assert evaluation.beside.chance == ()
        assert evaluation.beside.curves == ()
        assert {p.scheme for p in evaluation.beside.picked} == {"cross_validation"}
        assert {at.part.candidate for at in evaluation.beside.cut_offs} == {
            "nearest_neighbours",
            "logistic",
        }

    def test_the_curve_alone_gives_no_figures(self, filled, tmp_path):
        record = self.so_far(filled, tmp_path, "whole-00000.npz", "2-00000.npz")
        assert record.evaluation() is None

    def test_p_rests_on_those_that_have_finished(self, filled, tmp_path):
        cross = ("whole-00000.npz", "0-00000.npz", "0-00050.npz")
        complete = p_values(filled.evaluation())
        assert {m for _, m in complete.values()} == {M}
        record = self.so_far(filled, tmp_path, *cross, "chance-00005.npz", "chance-00006.npz")
        evaluation = record.evaluation()
        figures = np.array([permuted_figures(record.table, PLAN, number) for number in (5, 6)])
        for check in evaluation.beside.chance:
            if not check.best:
                at = PLAN.candidate_names.index(check.candidate)
                k = sum(value >= check.observed - 1e-12 for value in figures[:, at].tolist())
                assert p_values(evaluation)[check.candidate] == ((k + 1) / 3, 2)

    def test_a_permuted_table_is_done_with_all_its_rounds(self, filled, tmp_path):
        curve = filled.rounds["learning_curve"].n_rounds
        total = 1 + 55 + 6 + curve + M * OF_EACH
        came = [("whole-00000.npz", 1), ("0-00050.npz", 5)]
        came += [(f"chance-0000{number}.npz", OF_EACH) for number in (4, 0)]
        record, done = a_record(tmp_path), 0
        assert (record.done(), record.total) == (0, total)
        for name, rounds in came:
            (record.folder / "chunks" / name).write_bytes(
                (filled.folder / "chunks" / name).read_bytes()
            )
            done += rounds
            assert (record.done(), record.total) == (done, total)
            # the worker is gone without a word
            (record.folder / "status.json").unlink(missing_ok=True)
            assert record.status() == Status("interrupted", done, total)

    @pytest.mark.parametrize(("jobs", "handed"), [(1, [4]), (None, [1, 3])])
    def test_time_left_is_told_in_the_same_rounds(
        self, jobs, handed, filled, tmp_path, monkeypatch
    ):
        """Every round takes a quarter of a second here, in whatever task it stands."""
        left = {"0-00050.npz": 5} | {f"chance-0000{at}.npz": OF_EACH for at in (1, 2, 6)}
        names = [path.name for path in (filled.folder / "chunks").iterdir()]
        record = self.so_far(filled, tmp_path, *(name for name in names if name not in left))
        total, at_first = record.total, record.total - sum(left.values())
        now, told, tasks_of = [1000.0], [], []

        def timed(table, plan, rounds, *, todo, jobs):
            tasks_of.append(len(todo))
            for finished in run(table, plan, rounds, todo=todo, jobs=1):
                now[0] += 0.25 * (OF_EACH if finished.task.scheme == CHANCE else 5)
                yield finished

        monkeypatch.setattr("evalcore.worker.run", timed)
        monkeypatch.setattr("evalcore.worker.time", SimpleNamespace(monotonic=lambda: now[0]))
        fill(record, jobs=jobs, tell=told.append)
        # 15 seconds left after the first task are worth processes for all others
        assert tasks_of == handed
        # what had finished before it went on took none of this time
        done = [at_first + more for more in (0, 5, 25, 45, 65)]
        assert [(s.state, s.done, s.total) for s in told] == [
            *(("running", here, total) for here in done), ("finished", total, total),
        ]  # fmt: skip
        assert [s.seconds_left for s in told] == [None, 15.0, 10.0, 5.0, 0.0, None]

    def test_a_record_from_before_still_gives_its_figures(self, filled, tmp_path):
        """Neither the plan nor the chunks of older records know of any of this."""
        plain = Plan(PLAN.roles, PLAN.schemes, (PLAN.candidates[0], PLAN.candidates[2]))
        record = Record.create(tmp_path / "record", source(), "lots.csv", plain)
        fill(record, jobs=1)
        before = (record.folder / "results.csv").read_bytes()
        data = json.loads((record.folder / "plan.json").read_text("utf-8"))
        for name in ("curve", "cut_off", "permutations"):
            del data[name]
        for choice in (*data["schemes"], *data["candidates"]):
            del choice["grid"]
        (record.folder / "plan.json").write_text(json.dumps(data), encoding="utf-8")
        again = Record(record.folder)
        assert again.plan == plain
        assert again.unfinished() == []
        assert results_csv(again.evaluation()).encode() == before
