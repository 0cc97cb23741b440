"""Settings of schemes and candidates: kinds, bounds, defaults, and how they are read from text."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from evalcore.errors import PlanError
from evalcore.wording import listed

Value = float | int | str | bool
Settings = Mapping[str, Value]


@dataclass(frozen=True)
class Setting:
    """One setting of a scheme or a candidate: its kind, bounds and default.

    Attributes
    ----------
    key, title : str
    kind : {"whole", "number", "yes_no", "choice", "column"}
    default : int, float, bool or str
    low, high : float
        Bounds of a number, both included.
    choices : tuple of str
        For "choice"; a "column" is any column of the file, or none where it may be left empty.
    smoother : {"", "low", "high"}
        Which end of a number makes a candidate follow single cases less; taken among equals when
        the setting is tuned.
    """

    key: str
    title: str
    kind: Literal["whole", "number", "yes_no", "choice", "column"]
    default: Value
    low: float = 0
    high: float = 0
    choices: tuple[str, ...] = ()
    smoother: Literal["", "low", "high"] = ""

    def read(self, text: str) -> Value:
        """A value written as text, e.g. on the command line; raises `PlanError`."""
        if self.kind == "yes_no":
            if text not in ("yes", "no"):
                raise PlanError(f"`{self.key}` must be yes or no; got {text!r}.")
            return text == "yes"
        if self.kind in ("choice", "column"):
            return text
        try:
            return int(text) if self.kind == "whole" else float(text)
        except ValueError:
            wanted = "a whole number" if self.kind == "whole" else "a number"
            raise PlanError(f"`{self.key}` must be {wanted}; got {text!r}.") from None

    def check(self, value: Value) -> None:
        """Raise `PlanError` if a value is out of bounds or of another kind."""
        if self.kind == "yes_no" and not isinstance(value, bool):
            raise PlanError(f"`{self.key}` must be yes or no; got {value!r}.")
        if self.kind == "whole" and type(value) is not int:
            raise PlanError(f"`{self.key}` must be a whole number; got {value!r}.")
        if self.kind == "choice":
            if value not in self.choices:
                raise PlanError(
                    f"`{self.key}` must be {listed(self.choices, last='or')}; got {value!r}."
                )
        elif self.kind == "column":
            if not isinstance(value, str):
                raise PlanError(f"`{self.key}` must be the name of a column; got {value!r}.")
        elif self.kind != "yes_no" and not self.low <= float(value) <= self.high:
            raise PlanError(
                f"`{self.key}` must be between {self.low:g} and {self.high:g}; got {value}."
            )
