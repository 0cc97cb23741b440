"""The summary in a process of its own, since drawing a chart can end a whole process."""

import logging
import os
import subprocess
import sys
from pathlib import Path

from evalcore.errors import RecordError
from evalcore.wording import duration

LONGEST = 120.0  # seconds
ROOT = Path(__file__).parents[2]  # where `app` is imported from
LOG = logging.getLogger(__name__)


def build_in_child(record_folder: Path, out: Path) -> tuple[Path, Path]:
    """Write `summary.pdf` and `summary.html` of a record, in a child process.

    Parameters
    ----------
    record_folder : Path
    out : Path
        Folder to write into; made if it is missing.

    Returns
    -------
    tuple of Path
        Of the PDF and of the HTML page.

    Raises
    ------
    RecordError
        Nothing can be summarised yet, the child failed, or it took over two minutes.
    """
    try:
        ended = subprocess.run(
            # -P: a folder named `app` where the user happens to be is not ours
            [sys.executable, "-P", "-m", "app.print.build", str(record_folder), str(out)],
            stdin=subprocess.DEVNULL,
            capture_output=True,
            text=True,
            encoding="utf-8",
            errors="replace",
            timeout=LONGEST,
            env=own_environment(),
        )
    except subprocess.TimeoutExpired:
        raise RecordError(
            f"The summary took longer than {duration(LONGEST)} and was given up; the record is "
            "untouched."
        ) from None
    return _paths(ended, out)


def own_environment() -> dict[str, str]:
    """The child's, so that it finds the same `app` from any folder and writes UTF-8."""
    # an empty entry would stand for the working folder, and whatever lies in it
    paths = [str(ROOT), *filter(None, os.environ.get("PYTHONPATH", "").split(os.pathsep))]
    return {**os.environ, "PYTHONPATH": os.pathsep.join(paths), "PYTHONIOENCODING": "utf-8"}


def _paths(ended: subprocess.CompletedProcess[str], out: Path) -> tuple[Path, Path]:
    said = ended.stderr.strip()
    if said:
        LOG.warning("%s", said)
    made = out / "summary.pdf", out / "summary.html"
    if ended.returncode == 0 and all(path.is_file() for path in made):
        return made
    lines = said.splitlines()
    if ended.returncode == 1 and lines and "Traceback" not in said:
        raise RecordError(lines[-1])
    raise RecordError(
        "The summary could not be written: the process that sets it ended without finishing. The "
        "record is untouched, and the log says more."
    )
