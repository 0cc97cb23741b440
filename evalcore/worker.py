"""The process that fills one record: ``python -m evalcore.worker FOLDER PARENT``.

It reports through the record alone, ends when it is told to or when its parent is gone, and leaves
every finished chunk behind.
"""

import multiprocessing
import os
import sys
import threading
import time
import traceback
from collections.abc import Callable
from pathlib import Path

from evalcore.engine import run
from evalcore.errors import EvalError
from evalcore.record import Record, State, Status
from evalcore.results import write_results

WORTH_PROCESSES = 8.0  # seconds of work left from which starting processes pays
BEAT = 0.5  # seconds between looks at the parent and the request to stop


def fill(
    record: Record,
    *,
    jobs: int | None = None,
    tell: Callable[[Status], None] = lambda status: None,
    ending: threading.Event | None = None,
) -> None:
    """Carry out what is unfinished, then write the results.

    Parameters
    ----------
    record : Record
    jobs : int, optional
        Processes; by default one until enough work is left to make more worth starting; -1 for
        all there are, e.g. of a cluster.
    tell : callable
        Called with each new status.
    ending : Event, optional
        Once set, nothing is said any more: whoever set it has the last word.
    """
    # read by processes started for rounds: a file of the user's in the working folder is no module
    os.environ["PYTHONSAFEPATH"] = "1"
    todo, rounds = record.unfinished(), record.rounds
    done, began = record.done(), time.monotonic()
    at_first = done

    def say(state: Status) -> None:
        if ending is None or not ending.is_set():
            record.set_status(state)
            tell(state)

    say(Status("running", done, record.total, process=os.getpid()))
    while todo:
        now, todo = (todo, []) if jobs else (todo[:1], todo[1:])
        seconds = _seconds_left(done - at_first, record.total - done, began)
        if not jobs and seconds is not None:
            worth = seconds > WORTH_PROCESSES
            now, todo = ([*now, *todo], []) if worth else (now, todo)
            jobs = (os.cpu_count() or 1) if worth else None
        for finished in run(record.table, record.plan, rounds, todo=now, jobs=jobs or 1):
            record.add(finished)
            done += record.rounds_in(finished.task)
            seconds = _seconds_left(done - at_first, record.total - done, began)
            say(Status("running", done, record.total, seconds, process=os.getpid()))
    write_results(record)
    say(Status("finished", record.total, record.total))


def _seconds_left(done: int, left: int, began: float) -> float | None:
    """None until enough rounds have finished to say anything."""
    return None if done < 5 else (time.monotonic() - began) / done * left


def _watch(record: Record, parent: int, ending: threading.Event) -> None:
    """End this process when asked to, or when the parent is gone; show signs of life meanwhile."""
    while True:
        time.sleep(BEAT)
        record.beat()
        state: State | None = (
            "cancelled"
            if record.cancelled()
            else "interrupted"
            if parent and os.getppid() != parent
            else None
        )
        if state:
            ending.set()
            _stop_processes()
            record.set_status(Status(state, record.done(), record.total))
            os._exit(0)


def _stop_processes() -> None:
    """Stop the processes that carry out rounds, if any were started."""
    for process in multiprocessing.active_children():
        process.terminate()


def main(folder: str, parent: str) -> None:
    """Fill the record of a folder on behalf of a parent process."""
    record = Record(Path(folder))
    ending = threading.Event()
    threading.Thread(target=_watch, args=(record, int(parent), ending), daemon=True).start()
    try:
        fill(record, ending=ending)
    except Exception as error:  # the boundary: whatever happens is kept in the log and told
        if ending.is_set():
            # processes that were stopped look like a failure from here; the watch has the word
            threading.Event().wait()
        traceback.print_exc()
        message = (
            str(error)
            if isinstance(error, EvalError)
            else (
                "The evaluation stopped on an error that was not foreseen; the record's log has it."
            )
        )
        record.set_status(_failed(record, message))


def _failed(record: Record, message: str) -> Status:
    """The status of a failure; nothing is counted where the record itself cannot be read."""
    try:
        return Status("failed", record.done(), record.total, message=message)
    except EvalError:
        return Status("failed", 0, 0, message=message)


if __name__ == "__main__":
    main(*sys.argv[1:3])
