"""Files of a folder: written in one step, and read with a sentence where they are damaged."""

import os
import threading
import tokenize
import zipfile
import zlib
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np

from evalcore.errors import EvalError, RecordError

# what reading a cut or garbled file raises; a runtime error is an archive that claims to be
# encrypted or newer, or JSON nested without end; a token error is a garbled array header
_DAMAGE = (
    *(OSError, EOFError, RuntimeError, KeyError, TypeError, ValueError),
    *(zipfile.BadZipFile, zlib.error, tokenize.TokenError),
)


def write(path: Path, data: bytes) -> None:
    """Write a file in one step: a reader meets the old one or the new one, never half of it."""
    with beside(path) as place:
        place.write_bytes(data)


@contextmanager
def beside(path: Path) -> Iterator[Path]:
    """A place beside the path that takes its name once it is complete."""
    place = path.with_name(f".{path.stem}-{os.getpid()}-{threading.get_ident()}{path.suffix}")
    yield place
    os.replace(place, path)


@contextmanager
def undamaged(folder: Path, name: str) -> Iterator[Path]:
    """The place of a record's file; what its damage raises is turned into a sentence."""
    try:
        yield folder / name
    except RecordError:  # of another file, read in between
        raise
    except EvalError as error:
        raise RecordError(
            f"The file {name!r} of record {folder.name!r} cannot be used. {error}"
        ) from error
    except _DAMAGE as error:
        raise RecordError(
            f"The file {name!r} of record {folder.name!r} is missing or damaged; evaluate the "
            "table again."
        ) from error


@contextmanager
def stored(folder: Path, name: str) -> Iterator[Any]:
    """Arrays of a file; opened here, since a damaged one would be left open."""
    with undamaged(folder, name) as path, path.open("rb") as file, np.load(file) as found:
        yield found
