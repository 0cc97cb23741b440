"""What a visit remembers: the only file that touches the session and the address.

An upload and the choices made on Upload and Settings live in the session, an evaluation in its
record on disk. The record's name stands in the address, so a reloaded tab finds it again and takes
the file and the choices from it.
"""

import os
import subprocess
import sys
from collections.abc import Collection, Mapping
from pathlib import Path
from typing import Any

import streamlit as st
from platformdirs import user_data_path

from app import choices
from app.print.child import own_environment
from evalcore.errors import EvalError
from evalcore.evaluation import Evaluation
from evalcore.intake import make_table
from evalcore.plan import Plan
from evalcore.record import Record, Status, find, new_folder
from evalcore.sheet import Sheet, read_sheet
from evalcore.table import Roles, Table

RECORD = "record"
LIVE = ("waiting", "running")


def records_folder() -> Path:
    """Where records are kept on this machine."""
    given = os.environ.get("WITHHELD_RECORDS")
    return Path(given) if given else user_data_path("withheld", "withheld") / "records"


# --- the file and what its columns are for ---


def keep_file(data: bytes, name: str) -> None:
    """Take a file as the table to judge on; a file that cannot be read leaves all as it was."""
    sheet = read_sheet(data, name)
    if st.session_state.get("file") != (data, name):
        forget_choices()
        for kept in ("roles", "table"):
            st.session_state.pop(kept, None)
        st.query_params.pop(RECORD, None)
    st.session_state["file"] = (data, name)
    st.session_state["sheet"] = sheet


def sheet() -> Sheet | None:
    """The file as read, if there is one."""
    _adopt_from_address()
    found = st.session_state.get("sheet")
    return found if isinstance(found, Sheet) else None


def source() -> tuple[bytes, str]:
    """The file as it came, and its name."""
    data, name = st.session_state["file"]
    return data, name


def keep_roles(roles: Roles) -> None:
    """Remember what the columns are for."""
    st.session_state["roles"] = roles


def roles() -> Roles | None:
    """What the columns are for, if that was said."""
    found = st.session_state.get("roles")
    return found if isinstance(found, Roles) else None


def table() -> Table | None:
    """The table of file and roles; None until both are there and fit."""
    read, chosen = sheet(), roles()
    if read is None or chosen is None:
        return None
    try:
        return _table(read, chosen)
    except EvalError:
        return None


def _table(read: Sheet, chosen: Roles) -> Table:
    kept = st.session_state.get("table")
    if kept is None or kept[0] is not read or kept[1] != chosen:
        st.session_state["table"] = (read, chosen, make_table(read, chosen))
    found: Table = st.session_state["table"][2]
    return found


def first_seen(upload: str) -> bool:
    """Whether this upload was not taken before: a page runs many times with the same one."""
    seen = st.session_state.get("upload") == upload
    st.session_state["upload"] = upload
    return not seen


# --- choices: values behind widgets, by the widget's key ---


def widget(key: str, default: Any, *, allowed: Collection[Any] | None = None) -> str:
    """The key of a widget that is about to be drawn, with a value behind it that it can show.

    Parameters
    ----------
    key : str
    default : object
        Set where the widget has no value yet, or one that is no longer allowed.
    allowed : collection, optional
        Values on offer; of a list, members that are no longer on offer are dropped.
    """
    value = st.session_state.get(key, default)
    if allowed is not None:
        if isinstance(value, list):
            value = [member for member in value if member in allowed]
        elif value not in allowed:
            value = default
    st.session_state[key] = value
    return key


def choice(key: str, default: Any) -> Any:
    """The value behind a widget that may be drawn later."""
    return st.session_state.get(key, default)


def set_choices(values: Mapping[str, Any]) -> None:
    """Put values behind widgets that have not been drawn in this run."""
    st.session_state.update(values)


def forget_choices(prefix: str = "") -> None:
    """Forget choices, so that widgets show what is recommended again."""
    kept = ("file", "sheet", "roles", "table", "upload")
    for key in list(st.session_state):
        if isinstance(key, str) and key.startswith(prefix) and (prefix or key not in kept):
            del st.session_state[key]


# --- the record ---


def start(plan: Plan) -> Record:
    """Start an evaluation of the present file: a new record and a process of its own."""
    data, name = source()
    record = Record.create(new_folder(records_folder()), data, name, plan)
    go_on(record)
    return record


def go_on(record: Record) -> None:
    """Start the process that fills a record, or goes on with it."""
    record.clear_cancel()
    # said at once: the worker takes a second to start, and the page must not look ended till then
    record.set_status(Status("waiting", record.done(), record.total))
    with (record.folder / "log.txt").open("ab") as log:
        process = subprocess.Popen(
            [sys.executable, "-P", "-m", "evalcore.worker", str(record.folder), str(os.getpid())],
            stdin=subprocess.DEVNULL,
            stdout=log,
            stderr=log,
            start_new_session=True,
            env=own_environment(),
        )
    _processes().append(process)
    remember(record)


@st.cache_resource
def _processes() -> list[subprocess.Popen[bytes]]:
    """Started processes; polled now and then, so that ended ones do not linger."""
    return []


def notice_ended() -> None:
    """Take note of processes that have ended: until then they look alive to the system."""
    for process in _processes():
        process.poll()


def remember(record: Record) -> None:
    """Show this record from now on, and name it in the address."""
    st.session_state[RECORD] = record.name
    st.query_params[RECORD] = record.name


def record() -> Record | None:
    """The record that is shown: the address's, else the session's.

    Raises
    ------
    RecordError
        The address names no record that is kept here.
    """
    notice_ended()
    name = st.query_params.get(RECORD) or st.session_state.get(RECORD)
    if not name:
        return None
    found = find(records_folder(), str(name))
    remember(found)
    return found


def _adopt_from_address() -> None:
    """In a fresh visit by address, take the file and the choices from the record."""
    if "sheet" in st.session_state or not st.query_params.get(RECORD):
        return
    try:
        found = find(records_folder(), str(st.query_params[RECORD]))
        keep_file(found.source, found.about["name"])
    except EvalError:
        return
    remember(found)
    keep_roles(found.plan.roles)
    set_choices(choices.of_roles(found.plan.roles) | choices.of_plan(found.plan))


@st.cache_resource(max_entries=8, show_spinner=False)
def _evaluation(folder: str, done: int) -> Evaluation | None:
    return Record(Path(folder)).evaluation()


def evaluation(shown: Record, done: int) -> Evaluation | None:
    """A record's figures after so many rounds, computed once."""
    return _evaluation(str(shown.folder), done)
