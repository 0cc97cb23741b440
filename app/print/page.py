"""The HTML page: one file that fetches nothing, runs nothing and prints with page numbers."""

import base64
import re
from collections.abc import Iterable
from html import escape

from app.print.content import Content, Groups, Picture
from evalcore.summary import NOT_STATED

POLICY = (
    "default-src 'none'; style-src 'unsafe-inline'; img-src data:; base-uri 'none'; "
    "form-action 'none'"
)
BELOW = 560  # px of width from which down the slim drawings are shown

# Verdict to its ground, its colour, and the ends of the bar; the stroke is the limit and stays.
LOOKS: dict[str, tuple[str, str, int, int]] = {
    "shown": ("shown", "#17494F", 14, 23),
    "not shown yet": ("open", "#7A5B00", 4, 21),
    "shown to fall short": ("short", "#FFFFFF", 1, 10),
}

STYLE = """
:root { color: #12181B; background: #FFFFFF; font: 16px/1.5 "Noto Sans", "Segoe UI", Helvetica,
  Arial, sans-serif; font-variant-numeric: tabular-nums; }
body { margin: 0 auto; padding: 24px 16px 48px; max-width: 704px; overflow-wrap: anywhere; }
h1 { font-size: 1.75rem; line-height: 1.2; margin: 8px 0 12px; }
h2 { font-size: 1.2rem; line-height: 1.3; margin: 36px 0 8px; }
h3 { font-size: 1.0625rem; line-height: 1.3; margin: 28px 0 4px; }
p { margin: 0 0 8px; }
.soft, .soft p { color: #4F5960; font-size: .9375rem; }
.lead { font-size: 1.1875rem; line-height: 1.45; }
figure { margin: 0; break-inside: avoid; }
figcaption { color: #4F5960; font-size: .9375rem; margin-bottom: 8px; }
figure img { display: block; width: 100%; height: auto; }
.limits { border-top: 2px solid #12181B; margin: 20px 0 0; padding: 0; list-style: none; }
.limits li { border-bottom: 1px solid #D9D6CE; padding: 8px 0; display: grid;
  grid-template-columns: 1fr 12.5rem 11.5rem; gap: 2px 16px; break-inside: avoid; }
.limits .soft { grid-column: 1 / -1; }
.verdict { justify-self: end; align-self: start; padding: 2px 8px; border-radius: 2px;
  font-weight: 600; white-space: nowrap; print-color-adjust: exact;
  -webkit-print-color-adjust: exact; }
.verdict img { width: 24px; height: 12px; margin-right: 6px; }
.is-shown { color: #17494F; background: #E6EFEF; }
.is-open { color: #7A5B00; background: #F7F0DC; }
.is-short { color: #FFFFFF; background: #7A1F3D; }
.findings { margin: 0; padding: 0; list-style: none; }
.findings li { border-bottom: 1px solid #D9D6CE; padding: 10px 0; break-inside: avoid; }
.findings p { margin: 0 0 2px; }
.severity { font-weight: 600; margin-right: .5em; }
.grave { color: #7A1F3D; }
.moderate { color: #7A5B00; }
.note { color: #4F5960; }
table { border-collapse: collapse; width: 100%; font-size: .875rem; line-height: 1.4; }
th, td { text-align: left; vertical-align: top; padding: 4px 12px 4px 0; font-weight: 400;
  border-bottom: 1px solid #D9D6CE; overflow-wrap: normal; }
thead th { color: #4F5960; vertical-align: bottom; }
tbody th[scope=rowgroup] { font-weight: 600; padding-top: 12px; }
.wide { overflow-x: auto; }
.wide table { min-width: 640px; }
.wide tbody th { min-width: 8.5rem; }
.wide + p { margin-top: 10px; }
.wide td { white-space: nowrap; }
.small { margin: 12px 0 0; }
dl { margin: 0; font-size: .9375rem; }
dl div { display: grid; grid-template-columns: 9rem 1fr; gap: 0 16px; padding: 4px 0;
  border-bottom: 1px solid #D9D6CE; break-inside: avoid; }
dt { color: #4F5960; }
dd { margin: 0; }
footer { margin-top: 36px; }
@media (max-width: 560px) {
  .lead { font-size: 1.0625rem; }
  .limits li { grid-template-columns: 1fr; }
  .verdict { justify-self: start; }
  dl div { grid-template-columns: 1fr; }
}
dl.counts div { grid-template-columns: 1fr auto; }
dl.numbered div { grid-template-columns: 1.5rem 1fr; }
@page { size: A4; margin: 17mm 20mm 19mm; @bottom-right {
  content: "page " counter(page) " of " counter(pages); font: 8pt sans-serif; color: #4F5960; } }
@media print {
  :root { font-size: 9.5pt; }
  body { max-width: none; padding: 0; }
  h2, h3 { break-after: avoid; }
  .wide { overflow: visible; }
  .wide table { min-width: 0; font-size: 8pt; }
}
"""


def page(content: Content) -> str:
    """The summary as one HTML page.

    Parameters
    ----------
    content : Content

    Returns
    -------
    str
        Every text of it escaped; no script, nothing fetched, and a policy that forbids both.
    """
    title = escape(content.summary.title)
    body = "\n".join(part for part in (*_answer(content), *_grounds(content)) if part)
    return (
        '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{POLICY}">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        f"<title>{title}</title>\n<style>{STYLE}</style>\n</head>\n<body>\n"
        f'<main>\n{body}\n</main>\n<footer class="soft">{escape(content.foot)}</footer>\n'
        "</body>\n</html>\n"
    )


def _answer(content: Content) -> list[str]:
    """What page 1 of the PDF holds: the answer, how sure it is, what to weigh."""
    said = content.summary
    return [
        f'<p class="soft">{_stated(said.question)} · evaluated {escape(content.evaluated)}</p>',
        f"<h1>{escape(said.title)}</h1>",
        f'<p class="lead">{escape(said.answer)}</p>',
        _limits(said.limits),
        _figure(content.first, level=2),
        "<h2>What to weigh before relying on this</h2>",
        _findings(content.findings),
        "<h2>Where this does not hold</h2>",
        *(f"<p>{_stated(text)}</p>" for text in (*said.does_not_hold, *said.cautions)),
    ]


def _grounds(content: Content) -> list[str]:
    """What all this rests on."""
    said = content.summary
    pictures = (content.limits, content.rounds, content.bags)
    return [
        "<h2>What the figures rest on</h2>",
        _figure(content.balance, level=3),
        f'<div class="small">{_table(said.balance.header, _rows(said.balance.rows))}</div>',
        *(_figure(picture, level=3) for picture in pictures if picture),
        "<h2>How cases were held out</h2>",
        *(f"<p>{escape(text)}</p>" for text in said.design),
        "<h2>From rows read to judged</h2>",
        _pairs(said.flow, kind="counts"),
        "<h2>The plan</h2>",
        _pairs(said.plan),
        "<h2>The figures</h2>",
        *(_groups(part) for part in content.figures),
        f'<p class="soft">{escape(content.rest)}</p>',
        "<h2>Sources of the thresholds</h2>" if content.sources else "",
        _pairs(content.sources, kind="numbered"),
        "<h2>Which evaluation this is</h2>",
        _pairs(said.identity),
    ]


def _stated(text: str) -> str:
    """Escaped, with what nobody has stated in bold: a reader must not overlook it."""
    return escape(text).replace(NOT_STATED, f"<strong>{NOT_STATED}</strong>")


def _image(svg: str) -> str:
    # As an image a drawing can neither run anything nor share ids with the next one.
    return f"data:image/svg+xml;base64,{base64.b64encode(svg.encode()).decode()}"


def _figure(picture: Picture, *, level: int) -> str:
    width, height = _size(picture.page_wide)
    return (
        f"<h{level}>{escape(picture.title)}</h{level}>\n"
        f"<figure>\n<figcaption>{escape(picture.caption)}</figcaption>\n<picture>"
        f'<source media="screen and (max-width: {BELOW}px)" '
        f'srcset="{_image(picture.page_slim)}">'
        f'<img src="{_image(picture.page_wide)}" width="{width}" height="{height}" '
        f'alt="{escape(picture.alt)}"></picture>\n</figure>'
    )


def _size(svg: str) -> tuple[str, str]:
    """Width and height, so that the page does not jump while it loads."""
    found = re.search(r'viewBox="0 0 (\d+)[\d.]* (\d+)', svg)
    return (found[1], found[2]) if found else ("640", "320")


def _mark(word: str) -> str:
    """The verdict in small: bar right of the stroke, across it, or left of it."""
    _, colour, start, end = LOOKS[word]
    return _image(
        '<svg xmlns="http://www.w3.org/2000/svg" width="24" height="12" viewBox="0 0 24 12">'
        f'<path d="M11 0h2v12h-2zM{start} 4h{end - start}v4h-{end - start}z" fill="{colour}"/>'
        "</svg>"
    )


def _limits(rows: Iterable[tuple[str, str, str, str]]) -> str:
    items = [
        f"<li><strong>{escape(name)}</strong> <span>{escape(figure)}</span> "
        f'<span class="verdict is-{LOOKS[word][0]}"><img src="{_mark(word)}" alt="">'
        f'{escape(word)}</span> <span class="soft">{escape(detail)}</span></li>'
        for name, figure, word, detail in rows
    ]
    return '<ul class="limits">\n' + "\n".join(items) + "\n</ul>" if items else ""


def _findings(rows: Iterable[tuple[str, str, str, str, str]]) -> str:
    items = [
        f'<li><p><span class="severity {escape(severity)}">{escape(severity)}</span> '
        f"{escape(title)}{f'. {escape(advice)}' if advice else ''}</p>"
        f'<p class="soft">{escape(seen)} [{escape(source)}]</p></li>'
        for severity, title, advice, seen, source in rows
    ]
    if not items:
        return "<p>None of the checks found anything to weigh.</p>"
    return '<ul class="findings">\n' + "\n".join(items) + "\n</ul>"


def _pairs(lines: Iterable[tuple[str, str]], *, kind: str = "") -> str:
    items = [
        f"<div><dt>{escape(what)}</dt><dd>{_stated(value)}</dd></div>" for what, value in lines
    ]
    if not items:
        return ""
    return f'<dl class="{kind}">\n' + "\n".join(items) + "\n</dl>"


def _groups(part: Groups) -> str:
    """A wide table; where it is wider than the screen it scrolls, and the page does not."""
    table = _table(
        part.header,
        "".join(_rows(rows, above=_line(line, len(part.header))) for line, rows in part.groups),
    )
    note = f'\n<p class="soft">{escape(part.note)}</p>' if part.note else ""
    return (
        f"<h3>{escape(part.title)}</h3>\n"
        f'<div class="wide" tabindex="0" role="region" aria-label="{escape(part.title)}">{table}'
        f"</div>{note}"
    )


def _line(text: str, width: int) -> str:
    if not text:
        return ""
    return f'<tr><th scope="rowgroup" colspan="{width}">{escape(text)}</th></tr>'


def _table(header: Iterable[str], bodies: str) -> str:
    heads = "".join(f'<th scope="col">{escape(word)}</th>' for word in header)
    return f"<table><thead><tr>{heads}</tr></thead>{bodies}</table>"


def _rows(rows: Iterable[tuple[str, ...]], *, above: str = "") -> str:
    return f"<tbody>{above}{''.join(_row(row) for row in rows)}</tbody>"


def _row(cells: tuple[str, ...]) -> str:
    first, *rest = cells
    return (
        f'<tr><th scope="row">{escape(first)}</th>'
        + "".join(f"<td>{escape(cell)}</td>" for cell in rest)
        + "</tr>"
    )
