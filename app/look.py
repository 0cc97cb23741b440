"""Small pieces of a page that Streamlit has no widget for, and text made safe for it."""

import base64
import html
import re
from collections.abc import Sequence

import streamlit as st

from app.charts import Figure
from evalcore.figures import Finding
from evalcore.limit_rows import LimitRow
from evalcore.results import plain
from evalcore.sources import SOURCES
from evalcore.verdict import Word

BADGE = {"grave": "red", "moderate": "orange", "note": "gray"}
_VERDICT = {
    "shown": ("#17494F", "#E6EFEF"),
    "not shown yet": ("#7A5B00", "#F7F0DC"),
    "shown to fall short": ("#FFFFFF", "#7A1F3D"),
}
# where the bar of the mark starts, left to right of the stroke at 14
_BAR = {"shown": 16, "not shown yet": 6, "shown to fall short": 0}
SHOWN_FINDINGS = 5


# what is turned into links, icons, arrows or dashes after escapes are resolved: addresses,
# :names:, -- and <=; a word joiner, which nobody sees, keeps the characters apart
_REWRITTEN = re.compile(
    r"(?<=:)(?=\S)|(?<=@)(?=\S)|(?<=www)(?=\.)|(?<=-)(?=[->])|(?<=<)(?=[-=])|(?<=[>~])(?==)",
    re.IGNORECASE,
)


def safe(text: str) -> str:
    """Text as Markdown that shows exactly this text.

    Names come from files: no character of theirs may become markup, a link or a colour code.
    """
    text = _REWRITTEN.sub("\u2060", text)
    text = re.sub(r"([\\`*_{}\[\]<>|$~&])", r"\\\1", text)
    text = re.sub(r":(?=\S)", r"\\:", text)
    # only at the start of a line do these make headings and lists
    return re.sub(r"^(\s*)([#+\-=]|\d+(?=[.)]))", _escaped_start, text, flags=re.MULTILINE)


def _escaped_start(found: re.Match[str]) -> str:
    space, sign = found.groups()
    return f"{space}\\{sign}" if not sign.isdigit() else f"{space}{sign}\u200b"


def page(title: str, facts: Sequence[tuple[str, str]] = ()) -> None:
    """The head of a page: its title and a line of facts."""
    st.title(safe(title), anchor=False)
    if facts:
        parts = "".join(
            f"<span style='margin-right:1.5rem'>{html.escape(name)} "
            f"<strong style='font-weight:600;color:#12181B'>{html.escape(value)}</strong></span>"
            for name, value in facts
        )
        st.html(
            "<div style='color:#4F5960;font-size:0.9375rem;line-height:1.7;"
            f"border-bottom:1px solid #D9D6CE;padding-bottom:0.5rem'>{parts}</div>"
        )


def lead(text: str) -> None:
    """The sentence one reads first."""
    st.html(
        "<p style='font-size:clamp(1.0625rem,2.4vw,1.1875rem);line-height:1.5;margin:0'>"
        f"{html.escape(text)}</p>"
    )


def verdict_mark(word: Word) -> str:
    """The word of a verdict with its mark: the bar right of, across or left of the stroke."""
    ink, ground = _VERDICT[word]
    svg = (
        "<svg xmlns='http://www.w3.org/2000/svg' width='28' height='14'>"
        f"<rect x='{_BAR[word]}' y='5' width='12' height='4' fill='{ink}'/>"
        f"<rect x='13' y='1' width='2' height='12' fill='{ink}'/></svg>"
    )
    image = base64.b64encode(svg.encode()).decode()
    return (
        f"<span style='background:{ground};color:{ink};font-weight:600;padding:0.15rem 0.6rem;"
        "border-radius:2px;white-space:nowrap'>"
        f"<img alt='' src='data:image/svg+xml;base64,{image}' "
        f"style='vertical-align:-1px;margin-right:0.4rem'>{word}</span>"
    )


def limit_rows(rows: Sequence[LimitRow]) -> None:
    """A row a limit: measure, figure, verdict; under it what stands behind."""
    lines = "".join(
        "<div style='border-bottom:1px solid #D9D6CE;padding:0.5rem 0'>"
        "<div style='display:flex;flex-wrap:wrap;gap:0.25rem 1.5rem;align-items:baseline'>"
        f"<strong style='font-weight:600;flex:1 1 17rem'>{html.escape(row.name)}</strong>"
        f"<span style='flex:1 1 10rem'>{html.escape(row.figure)}</span>"
        f"<span>{verdict_mark(row.verdict.word)}</span></div>"
        "<div style='color:#4F5960;font-size:0.9375rem'>"
        f"{html.escape(f'{row.detail} {row.further}'.strip())}</div></div>"
        for row in rows
    )
    st.html(f"<div style='border-top:2px solid #12181B'>{lines}</div>")


def findings(found: Sequence[Finding], *, empty: str) -> None:
    """Doubts as closed rows, grave ones first; notes and what exceeds five in one row."""
    if not found:
        st.write(safe(empty))
    weighty = [f for f in found if f.severity != "note"]
    first, rest = weighty[:SHOWN_FINDINGS], weighty[SHOWN_FINDINGS:]
    notes = [f for f in found if f.severity == "note"]
    with st.container(gap="xsmall"):
        for finding in first:
            badge = f":{BADGE[finding.severity]}-badge[{finding.severity}]"
            with st.expander(f"{badge} {safe(finding.title)}"):
                _finding(finding)
        if rest + notes:
            more = " more" if first else ""
            with st.expander(
                f":gray-badge[{'more' if rest else 'note'}] {len(rest + notes)}{more}"
            ):
                for finding in rest + notes:
                    st.markdown(f"**{safe(finding.severity)}: {safe(finding.title)}**")
                    _finding(finding)


def _finding(finding: Finding) -> None:
    st.markdown(safe(finding.seen))
    st.markdown(f"**What to do:** {safe(finding.advice)}")
    st.html(
        "<p style='color:#4F5960;font-size:0.9375rem;margin:0'>Source: "
        f"{html.escape(SOURCES[finding.source].citation)}</p>"
    )


def figure(shown: Figure, *, key: str) -> None:
    """A chart with its sentence above and its figures as a table below."""
    with st.container(gap="xxsmall"):
        st.subheader(safe(shown.title), anchor=False)
        soft(shown.caption)
        st.altair_chart(shown.chart, theme=None, alt=shown.alt, key=key)
        with st.expander("These figures as a table"):
            table([{str(k): str(v) for k, v in row.items()} for row in shown.rows], key=key)


def soft(text: str) -> None:
    """A second line in soft ink."""
    st.html(
        "<p style='color:#4F5960;font-size:0.9375rem;line-height:1.45;margin:0 0 0.25rem'>"
        f"{html.escape(text)}</p>"
    )


def table(rows: Sequence[dict[str, str]], *, key: str) -> None:
    """A table of text, with a download as CSV."""
    if not rows:
        return
    header = list(dict.fromkeys(name for row in rows for name in row))
    head = "".join(f"<th style='{_CELL}font-weight:600'>{html.escape(h)}</th>" for h in header)
    body = "".join(
        "<tr>"
        + "".join(f"<td style='{_CELL}'>{html.escape(r.get(h, ''))}</td>" for h in header)
        + "</tr>"
        for r in rows
    )
    st.html(
        "<div style='overflow-x:auto' tabindex='0'><table style='border-collapse:collapse;"
        "font-size:0.875rem;font-variant-numeric:tabular-nums'>"
        f"<thead><tr>{head}</tr></thead><tbody>{body}</tbody></table></div>"
    )
    st.download_button(
        "Download as CSV",
        # made on the click: a file made in advance is gone where the page is drawn anew meanwhile
        lambda: _csv(header, rows),
        file_name=f"{key}.csv",
        mime="text/csv",
        key=f"{key}-csv",
        on_click="ignore",
        type="tertiary",
    )


def _csv(header: Sequence[str], rows: Sequence[dict[str, str]]) -> bytes:
    """The same rows as a file that a spreadsheet reads as text in UTF-8."""
    lines = (header, *([row.get(name, "") for name in header] for row in rows))
    quoted = (",".join('"' + plain(cell).replace('"', '""') + '"' for cell in x) for x in lines)
    return ("\ufeff" + "\n".join(quoted) + "\n").encode()


_CELL = "text-align:left;padding:0.3rem 1rem 0.3rem 0;border-bottom:1px solid #D9D6CE;"


def caution(text: str) -> None:
    """The caution at the foot of a page."""
    st.html(
        "<p style='color:#4F5960;font-size:0.9375rem;border-top:1px solid #D9D6CE;"
        f"padding-top:0.75rem;margin-top:1.5rem'>{html.escape(text)}</p>"
    )
