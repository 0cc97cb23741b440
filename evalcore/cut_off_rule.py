"""How the cut-off of a class is to be found: by costs, by a floor, or fixed beforehand."""

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date
from typing import Any, Literal

from evalcore.errors import PlanError
from evalcore.settings import Setting
from evalcore.wording import listed

By = Literal["cost", "floor", "fixed"]

_GOES_WITH: dict[str, By] = {
    "miss": "cost",
    "alarm": "cost",
    "floor": "floor",
    "at": "fixed",
    "set_on": "fixed",
}
_WRITTEN = (*_GOES_WITH, "share", "undecided")


@dataclass(frozen=True)
class CutOffRule:
    """How the cut-off of a class is found; `dataclasses.asdict` gives its arguments back.

    Attributes
    ----------
    of_class : str
        The class that is called from the cut-off up.
    by : {"cost", "floor", "fixed"}
        The least expected cost; the highest that still finds a share of the class; or stated.
    miss, alarm : float
        By cost: what a missed case of the class costs, and a false alarm; above 0.
    share_low, share_high : float
        Share of the class where the answers will be used, strictly between 0 and 1; equal unless
        a range is all that is known. Both 0 if not stated, and then the table's share holds.
    floor : float
        By floor: least share of the class to be found, strictly between 0 and 1.
    at : float
        By fixed: the cut-off.
    set_on : str
        By fixed: the date, YYYY-MM-DD, on which it was set, before these cases were seen; empty
        if it was chosen on them. Nothing here can check it.
    undecided_below : float
        An answer whose own probability is below this is left to a person; above 0.5 and below 1,
        or 0 for no case.

    Raises
    ------
    PlanError
        A value is out of range, or does not go with `by`.
    """

    of_class: str
    by: By
    miss: float = 1.0
    alarm: float = 1.0
    share_low: float = 0.0
    share_high: float = 0.0
    floor: float = 0.0
    at: float = 0.0
    set_on: str = ""
    undecided_below: float = 0.0

    def __post_init__(self) -> None:
        if not self.of_class:
            raise PlanError("A cut-off needs the class that is called from it up; got none.")
        if self.by not in _GOES_WITH.values():
            raise PlanError(f"A cut-off is by cost, floor or fixed; got {self.by!r}.")
        for name, by in _GOES_WITH.items():
            if by != self.by and getattr(self, name) != getattr(CutOffRule, name):
                raise PlanError(
                    f"`{name}` goes with a cut-off by {by}; got it with one by {self.by}."
                )
        for name in ("miss", "alarm"):
            if not 0 < getattr(self, name) < math.inf:
                raise PlanError(f"`{name}` must be above 0 and finite; got {getattr(self, name)}.")
        if self.by == "floor":
            check_floor(self.floor)
        if not math.isfinite(self.at):
            raise PlanError(f"`at` must be finite; got {self.at}.")
        if self.set_on:
            _check_date(self.set_on)
        if (self.share_low, self.share_high) != (0, 0):
            _check_share(self.share_low, self.share_high)
        if self.undecided_below != 0 and not 0.5 < self.undecided_below < 1:
            raise PlanError(
                "`undecided` must be above 0.5 and below 1, or 0 for no case; got "
                f"{self.undecided_below}."
            )

    @property
    def chosen_on_these_cases(self) -> bool:
        """Whether it was picked with these cases in view, which flatters it."""
        return self.by == "fixed" and not self.set_on

    @classmethod
    def read(cls, text: str) -> "CutOffRule":
        """A rule as written on the command line: ``CLASS:name=value,name=value``.

        Costs (``miss``, ``alarm``), a ``floor`` or a fixed cut-off (``at``, ``set_on``), exactly
        one of the three; ``share`` is a number or a range, ``undecided`` stands for
        `undecided_below`. The class is what stands before the last colon.

        Raises
        ------
        PlanError
            It cannot be read, or a value is out of range.

        Examples
        --------
        >>> CutOffRule.read("failing:miss=10,share=0.05-0.2").written()
        'failing:miss=10,alarm=1,share=0.05-0.2'
        """
        of_class, _, rest = text.rpartition(":")
        if not of_class:
            raise PlanError(f"A cut-off is written CLASS:name=value,...; got {text!r}.")
        items = _items(rest, text)
        asked = [name for name in items if name in _GOES_WITH and name != "set_on"]
        by = {_GOES_WITH[name] for name in asked}
        if len(by) != 1:
            raise PlanError(
                "A cut-off takes costs (`miss`, `alarm`), a `floor` or a fixed `at`, exactly one "
                f"of the three; got {listed([f'`{n}`' for n in asked]) or 'none'} in {text!r}."
            )
        values: dict[str, Any] = {name: _number(name, items[name]) for name in asked}
        values["set_on"] = items.get("set_on", "")
        if "share" in items:
            values["share_low"], values["share_high"] = _read_share(items["share"])
        if "undecided" in items:
            values["undecided_below"] = _number("undecided", items["undecided"])
        return cls(of_class, by.pop(), **values)

    def written(self) -> str:
        """As on the command line; `read` gives back an equal rule."""
        names = [name for name, by in _GOES_WITH.items() if by == self.by and name != "set_on"]
        items = [f"{name}={_text(getattr(self, name))}" for name in names]
        if self.set_on:
            items.append(f"set_on={self.set_on}")
        if self.share_low:
            ends = dict.fromkeys((_text(self.share_low), _text(self.share_high)))
            items.append(f"share={'-'.join(ends)}")
        if self.undecided_below:
            items.append(f"undecided={_text(self.undecided_below)}")
        return f"{self.of_class}:{','.join(items)}"

    def share_used(self, table_share: float) -> float:
        """The share that costs are weighed by: the middle of what was stated, else the table's.

        Expected cost is linear in the share, so at the middle of a range it is its mean over it.
        """
        return (self.share_low + self.share_high) / 2 if self.share_low else table_share


def _text(value: float) -> str:
    return repr(float(value)).removesuffix(".0")


def _items(rest: str, text: str) -> Mapping[str, str]:
    items: dict[str, str] = {}
    for item in filter(None, rest.split(",")):
        name, equals, value = item.partition("=")
        if not equals:
            raise PlanError(f"{item!r} in {text!r} must be written name=value.")
        if name not in _WRITTEN:
            allowed = listed([f"`{known}`" for known in _WRITTEN], last="or")
            raise PlanError(f"A cut-off has no setting {name!r}; it takes {allowed}.")
        if name in items:
            raise PlanError(f"`{name}` stands twice in {text!r}; once is enough.")
        items[name] = value
    return items


def _number(name: str, text: str) -> float:
    return float(Setting(name, name, "number", 0.0).read(text))


def _read_share(text: str) -> tuple[float, float]:
    # the hyphen of a range, not that of -0.1 or 1e-05
    ends = re.split(r"(?<=[^eE])-(?=.)", text, maxsplit=1)
    low, high = _number("share", ends[0]), _number("share", ends[-1])
    _check_share(low, high)
    return low, high


def _check_share(low: float, high: float) -> None:
    if not 0 < low <= high < 1:
        shown = _text(low) if low == high else f"{_text(low)} to {_text(high)}"
        raise PlanError(
            "`share` must lie strictly between 0 and 1, the lower end of a range first; got "
            f"{shown}."
        )


def check_floor(floor: float) -> None:
    if not 0 < floor < 1:
        raise PlanError(f"`floor` must lie strictly between 0 and 1; got {_text(floor)}.")


def _check_date(text: str) -> None:
    try:
        known = date.fromisoformat(text).isoformat() == text
    except ValueError:
        known = False
    if known and text > date.today().isoformat():
        raise PlanError(f"`set_on` must be a date that has been; got {text}.")
    if not known:
        raise PlanError(f"`set_on` must be a date as YYYY-MM-DD; got {text!r}.")
