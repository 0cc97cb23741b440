"""Charts on paper: a figure as SVG, with its title and caption, at a fixed width."""

import re
import textwrap
from typing import Any

from app.charts.style import SMALL_WORDS, Figure, config

# The converter ends the whole process when text holds a character that XML forbids.
FORBIDDEN = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ud800-\udfff\ufffe\uffff]")
TITLE_SIZE = 15


def svg(figure: Figure, width: int, *, font: str = "Noto Sans", titled: bool = True) -> str:
    """A figure as SVG text.

    Parameters
    ----------
    figure : Figure
    width : int
        Pixels; the heights are the chart's own.
    font : str
        Must be known to the converter (``vl_convert.register_font_directory``): with a font it
        cannot find it measures words wrongly and draws the chart too narrow.
    titled : bool
        Whether title and caption are set above the drawing; a page that sets them itself leaves
        them out.
    """
    import vl_convert

    return str(vl_convert.vegalite_to_svg(printed(figure, width, font=font, titled=titled)))


def printed(
    figure: Figure, width: int, *, font: str = "Noto Sans", titled: bool = True
) -> dict[str, Any]:
    """The specification that is printed: fixed width, print font, no forbidden characters."""
    spec: dict[str, Any] = figure.chart.to_dict()
    spec["width"] = width
    spec["config"] = config(font)
    if titled:
        spec["title"] = {
            "text": textwrap.wrap(figure.title, max(20, int(width / 9.2))),
            "subtitle": textwrap.wrap(figure.caption, max(20, int(width / 7))),
            "fontSize": TITLE_SIZE,
            "fontWeight": 600,
            "subtitleFontSize": SMALL_WORDS,
            "offset": 12,
        }
    cleaned: dict[str, Any] = without_forbidden(spec)
    return cleaned


def without_forbidden(value: Any) -> Any:
    """The same value with characters that XML forbids left out of all texts and keys.

    >>> without_forbidden({"a": ["b\\x00c"]})
    {'a': ['bc']}
    """
    if isinstance(value, str):
        return FORBIDDEN.sub("", value)
    if isinstance(value, list):
        return [without_forbidden(item) for item in value]
    if isinstance(value, dict):
        return {without_forbidden(k): without_forbidden(v) for k, v in value.items()}
    return value
