"""An acceptance limit: what must be shown before the classifier goes to work."""

from dataclasses import dataclass

from evalcore.errors import PlanError


@dataclass(frozen=True)
class Limit:
    """An acceptance limit: the least share that must be shown.

    Attributes
    ----------
    measure : {"accuracy", "balanced_accuracy", "sensitivity"}
    least : float
        Share, strictly between 0 and 1.
    of_class : str
        For sensitivity, else empty.
    confidence : float
        One-sided.
    set_on : str
        Date it was set, as the user wrote it; empty if not stated.
    """

    measure: str
    least: float
    of_class: str = ""
    confidence: float = 0.95
    set_on: str = ""

    def __post_init__(self) -> None:
        if self.measure not in ("accuracy", "balanced_accuracy", "sensitivity"):
            raise PlanError(
                "An acceptance limit goes on accuracy, balanced_accuracy or sensitivity; got "
                f"{self.measure!r}."
            )
        if not 0 < self.least < 1 or not 0.5 < self.confidence < 1:
            raise PlanError(
                "An acceptance limit must lie between 0 and 1 and its confidence between 0.5 and "
                f"1; got {self.least:g} and {self.confidence:g}."
            )
