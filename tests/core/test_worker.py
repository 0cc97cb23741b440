"""The process that fills a record: the same digits however it runs, and it ends when it should."""

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.engine import CHUNK
from evalcore.plan import Plan
from evalcore.record import Record, Status
from evalcore.schemes import SCHEMES
from evalcore.table import Roles
from evalcore.worker import fill

from .checks import DATA

ROOT = Path(__file__).parents[2]
PENGUINS = b"".join((DATA / "penguins.csv").read_bytes().splitlines(keepends=True)[::4])
SHORT = Plan(
    Roles("species"),
    (
        choose(SCHEMES, "cross_validation", folds=4, repeats=3),
        choose(SCHEMES, "bootstrap", rounds=4 * CHUNK),
    ),
    (choose(CANDIDATES, "forest", trees=3),),
)
TASKS, TOTAL = 1 + 1 + 4, 1 + 12 + 4 * CHUNK
# more work than any test waits for, so that none of it ends by itself
LONG = Plan(
    Roles("species"),
    (choose(SCHEMES, "bootstrap", rounds=10_000),),
    (choose(CANDIDATES, "forest", trees=300),),
)


def a_record(folder, plan=SHORT) -> Record:
    return Record.create(folder / "record", PENGUINS, "penguins.csv", plan)


def figures(record: Record) -> bytes:
    return (record.folder / "results.csv").read_bytes()


def chunks(record: Record) -> dict[str, bytes]:
    # files whose name starts with a point are not complete
    return {p.name: p.read_bytes() for p in (record.folder / "chunks").glob("[!.]*.npz")}


def until(true, *, seconds: float, what: str) -> None:
    """Wait for something; fail if it does not come about in time."""
    ends = time.monotonic() + seconds
    while not true():
        if time.monotonic() > ends:
            pytest.fail(f"not within {seconds:g} seconds: {what}")
        time.sleep(0.005)


# the same worker that takes its time over each chunk, so that a test can meet it half-way
SLOWLY = """
import sys, time
from evalcore import record, worker
add = record.Record.add
record.Record.add = lambda self, finished: (add(self, finished), time.sleep(0.5))[0]
worker.WORTH_PROCESSES = 1e9
worker.main(*sys.argv[1:])
"""


def started(record: Record, *, slowly: bool = False) -> subprocess.Popen:
    """A worker as the dashboard starts it."""
    record.beat()
    how = ["-c", SLOWLY] if slowly else ["-m", "evalcore.worker"]
    with (record.folder / "log.txt").open("ab") as log:
        return subprocess.Popen(
            [sys.executable, *how, record.folder, str(os.getpid())],
            cwd=ROOT,
            stdin=subprocess.DEVNULL,
            stdout=log,
            stderr=log,
            start_new_session=True,
        )


def log(record: Record) -> str:
    return (record.folder / "log.txt").read_text()


def in_session(session: int) -> list[int]:
    """Processes of a session that still run."""
    found = []
    for stat in Path("/proc").glob("[0-9]*/stat"):
        try:
            state, _, _, of_session = stat.read_text().rpartition(")")[2].split()[:4]
        except (OSError, ValueError):  # ended meanwhile
            continue
        if int(of_session) == session and state != "Z":
            found.append(int(stat.parent.name))
    return found


@pytest.fixture
def worker():
    """Starts workers, and ends those that are left when the test is over."""
    processes = []

    def start(record: Record, *, slowly: bool = False) -> subprocess.Popen:
        processes.append(started(record, slowly=slowly))
        return processes[-1]

    yield start
    for process in processes:
        for left in in_session(process.pid):
            os.kill(left, signal.SIGKILL)
        process.kill()
        process.wait()


@pytest.fixture(scope="module")
def uninterrupted(tmp_path_factory) -> Record:
    record = a_record(tmp_path_factory.mktemp("uninterrupted"))
    fill(record, jobs=1)
    return record


def test_two_processes_give_the_same_digits(uninterrupted, tmp_path):
    record = a_record(tmp_path)
    fill(record, jobs=2)
    assert figures(record) == figures(uninterrupted)


def test_killed_half_way_it_goes_on_to_the_same_digits(uninterrupted, tmp_path, worker):
    record = a_record(tmp_path)
    process = worker(record, slowly=True)
    until(lambda: len(chunks(record)) >= 3, seconds=60, what="three chunks finished")
    process.kill()
    process.wait()
    kept = chunks(record)
    status = record.status()
    assert 3 <= len(kept) < TASKS
    assert status == Status("interrupted", record.done(), TOTAL)
    assert 0 < status.done < TOTAL
    assert list(record.evaluation().rounds) == ["cross_validation"] or (
        record.evaluation().rounds["bootstrap"].n_rounds < 4 * CHUNK
    )

    again = Record(record.folder)
    fill(again, jobs=1)
    assert again.status() == Status("finished", TOTAL, TOTAL)
    assert chunks(again).items() >= kept.items()
    assert figures(again) == figures(uninterrupted)


def test_cancelled_it_ends_at_once_and_another_process_goes_on_to_the_same_digits(
    uninterrupted, tmp_path, worker
):
    record = a_record(tmp_path)
    process = worker(record, slowly=True)
    until(lambda: len(chunks(record)) >= 2, seconds=60, what="two chunks finished")
    record.cancel()
    assert process.wait(5) == 0
    status = record.status()
    assert status == Status("cancelled", record.done(), TOTAL)
    assert 0 < status.done < TOTAL
    kept = chunks(record)

    record.clear_cancel()
    assert worker(record).wait(60) == 0
    assert record.status() == Status("finished", TOTAL, TOTAL)
    assert log(record) == ""
    assert chunks(record).items() >= kept.items()
    assert figures(record) == figures(uninterrupted)


needs_proc = pytest.mark.skipif(
    not Path("/proc/self/stat").exists(), reason="processes can be listed under Linux only"
)


@needs_proc
def test_cancelled_with_much_left_it_takes_its_processes_along(tmp_path, worker):
    record = a_record(tmp_path, LONG)
    process = worker(record)
    until(
        lambda: len(chunks(record)) >= 3 and len(in_session(process.pid)) > 2,
        seconds=60,
        what="more processes, since much work is left",
    )
    record.cancel()
    assert process.wait(5) == 0
    until(lambda: not in_session(process.pid), seconds=5, what="its processes are gone")
    assert record.status() == Status("cancelled", record.done(), 10_001)
    assert "Traceback" not in log(record)


@needs_proc
def test_ends_when_its_parent_is_gone(tmp_path):
    record = a_record(tmp_path, LONG)
    record.beat()
    parent = (
        "import os, subprocess, sys\n"
        "worker = [sys.executable, '-m', 'evalcore.worker', sys.argv[1], str(os.getpid())]\n"
        "quiet = subprocess.DEVNULL\n"
        "print(subprocess.Popen(worker, stdout=quiet, stderr=quiet, start_new_session=True).pid,"
        " flush=True)\n"
        "sys.stdin.read()\n"
    )
    short_lived = subprocess.Popen(
        [sys.executable, "-c", parent, record.folder],
        cwd=ROOT,
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    )
    worker = int(short_lived.stdout.readline())
    try:
        until(lambda: len(chunks(record)) >= 1, seconds=60, what="the worker is at work")
        assert record.status().state == "running"
        short_lived.communicate("")
        until(lambda: worker not in in_session(worker), seconds=5, what="the worker is gone")
        written = (record.folder / "status.json").read_text()
        assert '"state": "interrupted"' in written
        assert record.status() == Status("interrupted", record.done(), 10_001)
    finally:
        short_lived.kill()
        short_lived.wait()
        for left in in_session(worker):
            os.kill(left, signal.SIGKILL)


def test_an_altered_file_is_told_in_the_status(tmp_path, worker):
    record = a_record(tmp_path)
    (record.folder / "source.csv").write_bytes(PENGUINS.replace(b"Adelie", b"Gentoo", 1))
    assert worker(record).wait(60) == 0
    status = record.status()
    assert (status.state, status.done) == ("failed", 0)
    assert status.message == (
        "The table of record 'record' reads differently now than when it was evaluated; its file "
        "was altered, or this version reads it otherwise."
    )


def test_an_error_nobody_foresaw_is_told_in_a_sentence_and_logged(tmp_path, worker):
    record = a_record(tmp_path)
    (record.folder / "chunks").rmdir()
    assert worker(record).wait(60) == 0
    assert "FileNotFoundError" in log(record)
    assert record.status() == Status(
        "failed",
        0,
        TOTAL,
        message=(
            "The evaluation stopped on an error that was not foreseen; the record's log has it."
        ),
    )


def test_a_record_that_cannot_be_read_is_told_in_the_status(tmp_path, worker):
    record = a_record(tmp_path)
    (record.folder / "rounds.npz").write_bytes(b"")
    assert worker(record).wait(60) == 0
    assert record.status() == Status(
        "failed",
        0,
        0,
        message=(
            "The file 'rounds.npz' of record 'record' is missing or damaged; evaluate the table "
            "again."
        ),
    )


# modules the worker needs, ours, the standard library's and others'
OURS = ("evalcore", "app")
OTHERS = ("json", "threading", "tokenize", "numpy", "scipy", "sklearn", "joblib", "threadpoolctl")
# says that it was imported, and would end whoever imports it
DECOY = """
from pathlib import Path
Path(__file__).with_suffix(".imported").touch()
raise SystemExit("a file of the user's was taken for a module")
"""


def lay_decoys(folder, names) -> None:
    for name in names:
        (folder / f"{name}.py").write_text(DECOY)


def taken(folder) -> list[str]:
    """Decoys that somebody imported."""
    return [path.name for path in folder.glob("*.imported")]


@pytest.mark.parametrize(
    ("place", "names"),
    [("working folder", (*OURS, *OTHERS)), ("PYTHONPATH", OURS)],
)
def test_started_by_the_dashboard_it_imports_none_of_the_users_files(
    uninterrupted, tmp_path, monkeypatch, place, names
):
    from app import state

    processes = []
    # what belongs to a visit in the browser; the process is started as for one
    monkeypatch.setattr(state, "remember", lambda record: None)
    monkeypatch.setattr(state, "_processes", lambda: processes)
    # a test before this one may have set it
    monkeypatch.delenv("PYTHONSAFEPATH", raising=False)
    if place == "PYTHONPATH":
        monkeypatch.setenv("PYTHONPATH", str(tmp_path))
    else:
        monkeypatch.delenv("PYTHONPATH", raising=False)
        monkeypatch.chdir(tmp_path)
    lay_decoys(tmp_path, names)
    record = a_record(tmp_path)
    state.go_on(record)
    try:
        assert processes[0].wait(60) == 0
    finally:
        processes[0].kill()
        processes[0].wait()
    assert taken(tmp_path) == []
    assert log(record) == ""
    assert record.status() == Status("finished", TOTAL, TOTAL)
    assert figures(record) == figures(uninterrupted)


def test_nor_do_the_processes_that_it_starts(uninterrupted, tmp_path):
    lay_decoys(tmp_path, (*OURS, *OTHERS))
    record = a_record(tmp_path)
    script = (
        "import sys; from pathlib import Path\n"
        "from evalcore.record import Record; from evalcore.worker import fill\n"
        "fill(Record(Path(sys.argv[1])), jobs=2)\n"
    )
    unsafe = {name: value for name, value in os.environ.items() if name != "PYTHONSAFEPATH"}
    done = subprocess.run(
        [sys.executable, "-P", "-c", script, record.folder],
        cwd=tmp_path,
        env=unsafe | {"PYTHONPATH": str(ROOT)},
        capture_output=True,
        text=True,
        timeout=60,
    )
    assert taken(tmp_path) == []
    assert (done.returncode, done.stderr) == (0, "")
    assert figures(record) == figures(uninterrupted)
