"""A record on disk: what one evaluation leaves, so that it can be watched, resumed and repeated.

A folder with `source.csv` (the file as it came), `plan.json`, `rounds.npz` (the counts as drawn),
`chunks/` (answers, one file a finished task), `status.json`, `about.json`, and at the end
`results.csv` and `findings.csv`. Every file is written beside its place and then moved there, so a
reader never meets half a file.
"""

import json
import os
import re
import secrets
import time
from dataclasses import asdict, dataclass
from functools import cached_property
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any, Literal

import numpy as np

from evalcore.answers import Answers, joined
from evalcore.chunks import answers_in, arrays_of
from evalcore.engine import CHANCE, WHOLE, Finished, Task, chunk_rounds, tasks, whole_rounds
from evalcore.errors import RecordError
from evalcore.evaluation import Evaluation, evaluate
from evalcore.files import beside, stored, undamaged, write
from evalcore.intake import make_table
from evalcore.measures import Floats
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.sheet import read_sheet
from evalcore.table import Table

State = Literal["waiting", "running", "finished", "cancelled", "failed", "interrupted"]
NAME = re.compile(r"[0-9]{8}-[0-9]{6}-[0-9a-f]{6}")
SILENT = 30.0  # seconds without a sign of life after which a running worker counts as gone
PACKAGES = ("withheld", "scikit-learn", "numpy", "scipy", "pandas")
ABOUT = {"name": str, "table": str, "plan": str, "chunk": int, "begun": str, "versions": dict}


@dataclass(frozen=True)
class Status:
    """How far a record has come.

    Attributes
    ----------
    state : str
    done, total : int
        Rounds finished and planned, fits on all cases included.
    seconds_left : float or None
        None as long as too little has finished to tell.
    message : str
        For a failure.
    process : int
        Process number of the worker, 0 if there is none.
    """

    state: State
    done: int
    total: int
    seconds_left: float | None = None
    message: str = ""
    process: int = 0


class Record:
    """One record folder.

    Parameters
    ----------
    folder : Path
        Of an existing record; see `create` for a new one.

    Raises
    ------
    RecordError
        The folder holds no record, or one of its files is missing or damaged: each file is read
        when it is asked for, and the sentence names it.
    """

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        if not (folder / "about.json").is_file():
            raise RecordError(f"There is no record in {folder.name!r}.")
        with undamaged(folder, "about.json") as path:
            self.about: dict[str, Any] = json.loads(path.read_text("utf-8"))
            if not all(isinstance(self.about[key], kind) for key, kind in ABOUT.items()):
                raise TypeError("An entry is not of its kind.")

    @classmethod
    def create(cls, folder: Path, data: bytes, name: str, plan: Plan) -> "Record":
        """Start a record: checks the plan against the table, draws and stores the rounds.

        Raises
        ------
        EvalError
            The file, the table or the plan cannot be used; then nothing is written.
        RecordError
            The folder exists and holds something else.
        """
        table = make_table(read_sheet(data, name), plan.roles)
        plan.check(table)
        if folder.exists() and any(folder.iterdir()):
            raise RecordError(
                f"The folder {folder.name!r} is not empty; a new record needs a new folder."
            )
        (folder / "chunks").mkdir(parents=True, exist_ok=True)
        write(folder / "source.csv", data)
        write(folder / "plan.json", plan.to_json().encode())
        rounds = plan.draw(table)
        arrays: dict[str, Any] = {}
        for at, drawn in enumerate(rounds.values()):
            arrays |= {
                f"{at}-train": drawn.train,
                f"{at}-test": drawn.test,
                f"{at}-repeat": drawn.repeat,
            }
        with beside(folder / "rounds.npz") as place:
            np.savez_compressed(place, **arrays)
        about = {
            "name": name,
            "table": table.fingerprint,
            "plan": plan.fingerprint,
            "chunk": chunk_rounds(table.n_cases),
            "begun": time.strftime("%Y-%m-%d %H:%M"),
            "versions": {package: _version(package) for package in PACKAGES},
        }
        write(folder / "about.json", json.dumps(about, indent=1).encode())
        record = cls(folder)
        record.set_status(Status("waiting", 0, record.total))
        return record

    @property
    def name(self) -> str:
        """Name of the folder."""
        return self.folder.name

    @cached_property
    def plan(self) -> Plan:
        """The plan as stored."""
        with undamaged(self.folder, "plan.json") as path:
            return Plan.from_json(path.read_text("utf-8"))

    @cached_property
    def source(self) -> bytes:
        """The file as it came."""
        with undamaged(self.folder, "source.csv") as path:
            return path.read_bytes()

    @cached_property
    def table(self) -> Table:
        """The table, read again from the source and held against its fingerprint."""
        with undamaged(self.folder, "source.csv"):
            table = make_table(read_sheet(self.source, self.about["name"]), self.plan.roles)
        if table.fingerprint != self.about["table"]:
            raise RecordError(
                f"The table of record {self.name!r} reads differently now than when it was "
                "evaluated; its file was altered, or this version reads it otherwise."
            )
        return table

    @cached_property
    def rounds(self) -> dict[str, Rounds]:
        """The rounds as drawn, by scheme name."""
        with stored(self.folder, "rounds.npz") as found:
            return {
                name: Rounds(found[f"{at}-train"], found[f"{at}-test"], found[f"{at}-repeat"])
                for at, name in enumerate(self.plan.all_schemes)
            }

    @property
    def total(self) -> int:
        """Rounds planned, the fit on all cases and permuted tables included."""
        return sum(map(self.rounds_in, self.tasks()))

    def tasks(self) -> list[Task]:
        """All tasks, in the chunks this record was begun with."""
        size = int(self.about["chunk"])
        return tasks(self.rounds, size=size, permutations=self.plan.permutations)

    def unfinished(self) -> list[Task]:
        """Tasks that have no answers yet, in order."""
        return [task for task in self.tasks() if not self._chunk(task).exists()]

    def done(self) -> int:
        """Rounds finished."""
        return self.total - sum(map(self.rounds_in, self.unfinished()))

    def rounds_in(self, task: Task) -> int:
        """Rounds of a task; a permuted table goes through several."""
        of_each = self.plan.chance_rounds(self.table) if task.scheme == CHANCE else 1
        return (task.stop - task.start) * of_each

    def _chunk(self, task: Task) -> Path:
        # scheme names hold characters that file systems forbid: their place in the plan does not
        names = {WHOLE: "whole", CHANCE: "chance"}
        place = names.get(task.scheme) or list(self.plan.all_schemes).index(task.scheme)
        return self.folder / "chunks" / f"{place}-{task.start:05d}.npz"

    def add(self, finished: Finished) -> None:
        """Keep the answers of a finished task."""
        with beside(self._chunk(finished.task)) as place:
            np.savez(place, **arrays_of(finished, self.plan.candidate_names))

    def _read(self, task: Task) -> tuple[dict[str, Answers], dict[str, str]]:
        name = f"chunks/{self._chunk(task).name}"
        with stored(self.folder, name) as found:
            return answers_in(
                found, self.plan, self._rounds_of(task), scheme=task.scheme, of=self.table
            )

    def _rounds_of(self, task: Task) -> Rounds:
        if task.scheme == WHOLE:
            return whole_rounds(self.table.n_cases)
        return self.rounds[task.scheme].part(slice(task.start, task.stop))

    def evaluation(self) -> Evaluation | None:
        """All figures as far as rounds have finished; None before the first of a scheme has.

        Raises
        ------
        RecordError
            No candidate could be fitted.
        """
        finished: dict[str, list[Task]] = {}
        for task in self.tasks():
            if not self._chunk(task).exists():
                if task.scheme == WHOLE:
                    return None
                continue
            if task.scheme == CHANCE:
                continue
            tasks_of = finished.setdefault(task.scheme, [])
            if not task.start or (tasks_of and tasks_of[-1].stop == task.start):
                tasks_of.append(task)
        whole, failures = self._read(finished.pop(WHOLE)[0])
        rounds: dict[str, Rounds] = {}
        parts: dict[tuple[str, str], list[Answers]] = {}
        for scheme, done in finished.items():
            if not done:
                continue
            rounds[scheme] = self.rounds[scheme].first(done[-1].stop)
            for task in done:
                answers, failed = self._read(task)
                failures |= failed
                for candidate, given in answers.items():
                    parts.setdefault((scheme, candidate), []).append(given)
        if set(failures) == set(self.plan.candidate_names):
            raise RecordError(f"No candidate could be fitted: {next(iter(failures.values()))}")
        if all(map(self.plan.is_curve, rounds)):  # none, or only small bags that give no estimate
            return None
        return evaluate(
            self.table,
            self.plan,
            rounds,
            answers={key: joined(given) for key, given in parts.items() if key[1] not in failures},
            whole=whole,
            planned={name: drawn.n_rounds for name, drawn in self.rounds.items()},
            failures=failures,
            permuted=self._permuted(),
        )

    def _permuted(self) -> Floats:
        """Figures of permuted tables as far as they have finished, shape (m, C)."""
        found = [np.empty((0, len(self.plan.candidates)))]
        for task in self.tasks():
            path = self._chunk(task)
            if task.scheme == CHANCE and path.exists():
                with stored(self.folder, f"chunks/{path.name}") as arrays:
                    shape = task.stop - task.start, len(self.plan.candidates)
                    found.append(arrays["chance"].reshape(shape))  # refuses any other size
        return np.concatenate(found)

    def status(self) -> Status:
        """How far it has come; a worker that is gone without a word shows as interrupted."""
        if not (self.folder / "status.json").exists():
            return Status("interrupted", self.done(), self.total)
        with undamaged(self.folder, "status.json") as path:
            status = Status(**json.loads(path.read_text("utf-8")))
        beat = self.folder / "alive"
        silent = not beat.exists() or time.time() - beat.stat().st_mtime > SILENT
        if status.state in ("running", "waiting") and (silent or not _lives(status.process)):
            return Status("interrupted", self.done(), self.total)
        return status

    def set_status(self, status: Status) -> None:
        """Write the status, and give a sign of life."""
        write(self.folder / "status.json", json.dumps(asdict(status)).encode())
        self.beat()

    def beat(self) -> None:
        """Give a sign of life."""
        (self.folder / "alive").touch()

    def cancel(self) -> None:
        """Ask the worker to stop; what has finished stays."""
        (self.folder / "cancel").touch()

    def cancelled(self) -> bool:
        """Whether a stop was asked for."""
        return (self.folder / "cancel").exists()

    def clear_cancel(self) -> None:
        """Take the request to stop back."""
        (self.folder / "cancel").unlink(missing_ok=True)


def new_folder(root: Path) -> Path:
    """A fresh folder for a record, named by time and chance."""
    return root / f"{time.strftime('%Y%m%d-%H%M%S')}-{secrets.token_hex(3)}"


def find(root: Path, name: str) -> Record:
    """A record by name; raises `RecordError` for a name that is none, e.g. from a URL."""
    if not NAME.fullmatch(name) or not (root / name / "about.json").is_file():
        raise RecordError(
            "This address names no record kept here. A record's name has 22 characters, such as "
            "20260504-101200-0a1b2c."
        )
    return Record(root / name)


def _lives(process: int) -> bool:
    if not process or os.name == "nt":
        # not started yet; and on Windows signal 0 is not a question: the signs of life decide
        return True
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except PermissionError:
        return True
    return True


def _version(package: str) -> str:
    try:
        return version(package)
    except PackageNotFoundError:  # run from a checkout that was not installed
        return "unknown"
