"""The PDF: the content handed to the template as data, so that no name can become a command."""

import datetime as dt
import json
import logging
import re
from collections.abc import Callable, Sequence
from itertools import groupby
from operator import itemgetter
from pathlib import Path
from typing import TYPE_CHECKING, Any

import typst

from app.print.content import FONTS, Content

if TYPE_CHECKING:
    from typst import PDFStandard

TEMPLATE = Path(__file__).parent / "summary.typ"
STANDARDS: "tuple[PDFStandard, ...]" = ("a-2a", "ua-1")
FIRST_FINDINGS = 14  # on page 1
LONGEST, IN_HEADER = 32, 16  # characters without a space after which a line may break
PLACES = ("first", "balance", "limits", "rounds", "bags")
FINGERPRINT = re.compile("[0-9a-f]{64}")
LOG = logging.getLogger(__name__)

# Fonts and standards, in the order they are tried, with what the document says of itself. Fonts of
# the system come second, since with them the bytes are no longer the same on every machine.
ATTEMPTS: "tuple[tuple[bool, tuple[PDFStandard, ...], str], ...]" = (
    (True, STANDARDS, "PDF/A-2a and PDF/UA-1"),
    (False, STANDARDS, "PDF/A-2a and PDF/UA-1, with fonts of the computer it was made on"),
    (
        False,
        (),
        "PDF without the promises of PDF/A and PDF/UA, since the fonts at hand lack a character, "
        "shown as an empty box; the HTML page beside it has them all",
    ),
)


def pdf(content: Content) -> bytes:
    """The summary as PDF.

    Parameters
    ----------
    content : Content

    Returns
    -------
    bytes
        The same for the same record. Archivable and accessible (PDF/A-2a, PDF/UA-1) unless no font
        at hand has all characters; then the log and the document itself say so.
    """
    for ignore_system_fonts, standards, form in ATTEMPTS:
        try:
            made = typst.compile(
                str(TEMPLATE),
                format="pdf",
                font_paths=[str(FONTS)],
                ignore_system_fonts=ignore_system_fonts,
                pdf_standards=list(standards),
                sys_inputs={"content": json.dumps(data(content, form))},
                timestamp=_date(content),
            )
        except typst.TypstError as error:
            if not standards:
                raise
            LOG.info("Trying other fonts: %s", error)
            continue
        if not standards:
            LOG.warning("The summary was written as a %s.", form)
        return bytes(made)
    raise AssertionError("the last attempt either returns or raises")


def data(content: Content, form: str) -> dict[str, Any]:
    """What the template reads.

    Parameters
    ----------
    content : Content
    form : str
        What the document says of itself.
    """
    given = content.as_data()
    given["form"] = form
    given["date"] = [int(part) for part in re.findall(r"\d+", content.evaluated)]
    given["first_findings"] = FIRST_FINDINGS
    given["plan"] = in_one_line(content.summary.plan)
    given["references"] = references(content.sources)
    for place in PLACES:
        picture = given[place] or {}
        for unused in ("page_wide", "page_slim"):
            picture.pop(unused, None)
    for part in given["figures"]:
        part["header"] = breakable(part["header"], IN_HEADER)
    return dict(breakable(given))


def in_one_line(plan: Sequence[tuple[str, str]]) -> list[tuple[str, str]]:
    """The plan with what is chosen several times named once.

    >>> in_one_line([("label", "verdict"), ("scheme", "a"), ("scheme", "b")])
    [('label', 'verdict'), ('scheme', 'a; b')]
    """
    return [
        (what, "; ".join(choice for _, choice in choices))
        for what, choices in groupby(plan, key=itemgetter(0))
    ]


def references(sources: Sequence[tuple[str, str]]) -> list[tuple[str, str]]:
    """Sources by their short names; the HTML page has them in full.

    >>> references([("1", "Efron & Tibshirani 1993, An Introduction"), ("2", "own study: tables")])
    [('1', 'Efron & Tibshirani 1993'), ('2', 'own study')]
    """
    return [(number, re.split("[,:]", source)[0]) for number, source in sources]


def breakable(value: Any, longest: int = LONGEST) -> Any:
    """The same value; in long runs without a space, places where a line may break.

    Fingerprints stay whole, since they are copied, and so do drawings.

    >>> breakable(["a" * 40])[0].count("\\u200b")
    1
    """
    if isinstance(value, str):
        whole = FINGERPRINT.fullmatch(value) or value.startswith("<svg")
        return value if whole else re.sub(rf"\S{{{longest},}}", _broken(longest), value)
    if isinstance(value, list):
        return [breakable(item, longest) for item in value]
    if isinstance(value, dict):
        return {key: breakable(item, longest) for key, item in value.items()}
    return value


def _broken(longest: int) -> Callable[[re.Match[str]], str]:
    # after a comma or the like if there is one, else after so many characters
    place = re.compile(rf"([^\s,;:/]{{{longest}}}|[,;:/])(?=\S)")
    return lambda run: place.sub("\\1\u200b", run[0])


def _date(content: Content) -> dt.datetime:
    """The record's date, not today's: the same record gives the same bytes."""
    return dt.datetime.fromisoformat(content.evaluated).replace(tzinfo=dt.UTC)
