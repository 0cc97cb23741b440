"""Charts drawn lower for paper: words keep their height, and what lies between them gives way."""

from collections.abc import Iterator, Sequence
from typing import Any

ABOVE, BELOW = 13, 4  # px a line of words needs over and under its base line


def lowered(spec: dict[str, Any], share: float) -> dict[str, Any]:
    """A chart's specification with less height between its lines of words.

    All charts place everything downwards in pixels, so one rule serves them all, and a bar keeps
    its height in relation to the other bars.

    Parameters
    ----------
    spec : dict
        Of a chart composed by `app.charts.drawing`.
    share : float
        Of the height between lines of words, what is left.
    """
    zones = _zones(sorted({row["y"] for row in _rows_of_words(spec)}))
    height = _moved(spec["height"], zones, share)
    lower: dict[str, Any] = _placed(spec, zones, share, height)
    return {**lower, "height": height}


def _zones(lines: Sequence[float]) -> list[tuple[float, float]]:
    """From top to bottom of each line of words, those that touch made one."""
    zones: list[tuple[float, float]] = []
    for line in lines:
        top, bottom = max(0.0, line - ABOVE), line + BELOW
        if zones and top <= zones[-1][1]:
            top = zones.pop()[0]
        zones.append((top, bottom))
    return zones


def _moved(y: float, zones: Sequence[tuple[float, float]], share: float) -> float:
    """Where a place comes to lie: words count in full, all else by the share.

    >>> _moved(40, [(0, 20)], 0.5)
    30.0
    """
    words = sum(max(0.0, min(y, bottom) - top) for top, bottom in zones)
    return share * y + (1 - share) * words


def _placed(value: Any, zones: Sequence[tuple[float, float]], share: float, height: float) -> Any:
    if isinstance(value, list):
        return [_placed(item, zones, share, height) for item in value]
    if not isinstance(value, dict):
        return value
    moved = {key: _placed(item, zones, share, height) for key, item in value.items()}
    for key in ("y", "y2"):
        if isinstance(value.get(key), int | float):
            moved[key] = _moved(value[key], zones, share)
        scale = value[key].get("scale") if isinstance(value.get(key), dict) else None
        if scale:  # an encoding: the axis downwards ends where the chart does
            moved[key]["scale"] = {**scale, "domain": [0, height], "range": [0, height]}
    return moved


def _rows_of_words(spec: dict[str, Any]) -> Iterator[dict[str, Any]]:
    """The rows of all layers that write words."""
    for layer in spec.get("layer", ()):
        yield from _rows_of_words(layer | {"datasets": spec.get("datasets", {})})
    mark = spec.get("mark")
    if isinstance(mark, dict) and mark.get("type") == "text":
        data = spec["data"]
        yield from data["values"] if "values" in data else spec["datasets"][data["name"]]
