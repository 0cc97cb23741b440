"""Write a record's summary: ``python -m app.print.build RECORD OUT``."""

import logging
import sys
from pathlib import Path

from app.print.content import content
from app.print.page import page
from app.print.pdf import pdf
from evalcore.errors import EvalError
from evalcore.files import write
from evalcore.record import Record

PDF, HTML = "summary.pdf", "summary.html"


def build(record_folder: Path, out: Path) -> tuple[Path, Path]:
    """Write `summary.pdf` and `summary.html` of a record.

    Call it in a process of its own (`build_in_child`): drawing a chart can end the whole process.

    Parameters
    ----------
    record_folder : Path
    out : Path
        Folder to write into; made if it is missing.

    Returns
    -------
    tuple of Path
        Of the PDF and of the HTML page. Each appears whole or not at all.

    Raises
    ------
    RecordError
        The folder holds no record, or nothing in it can be summarised yet.
    """
    given = content(Record(record_folder))
    out.mkdir(parents=True, exist_ok=True)
    paths = out / PDF, out / HTML
    write(paths[0], pdf(given))
    write(paths[1], page(given).encode())
    return paths


def main(record_folder: str, out: str) -> int:
    """Build as a script; one sentence on stderr and 1 if nothing can be summarised."""
    logging.basicConfig(level=logging.WARNING, format="%(message)s")
    try:
        build(Path(record_folder), Path(out))
    except EvalError as error:
        print(error, file=sys.stderr)
        return 1
    return 0


if __name__ == "__main__":
    sys.exit(main(*sys.argv[1:3]))
