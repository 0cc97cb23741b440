"""The packaged table's main figures as README has them: ``python -m tests.studies.evidence_in_words``."""

from collections.abc import Iterable, Iterator, Sequence

import numpy as np

from evalcore.evidence import WORDS, Line, lines
from tests.studies.mechanisms import TITLES

ROWS = (  # what README says, estimator, measure
    ("accuracy", "held_out_by_case", "accuracy"),
    ("balanced accuracy", "held_out_by_case", "balanced_accuracy"),
    ("the smallest class’s share right", "held_out_by_case", "sensitivity"),
    ("AUC", "mean_of_rounds", "auc"),
    ("accuracy of the best of several, corrected", "winner_corrected", "accuracy"),
    ("verdict: a limit equal to the true rate is not called *shown*", "verdict", ""),
    ("accuracy at a learned cut-off", "at_cut_off", "accuracy"),
    ("balanced accuracy at a learned cut-off", "at_cut_off", "balanced_accuracy"),
    ("the called class’s share found at a learned cut-off", "at_cut_off", "sensitivity"),
    ("how often the class is called rightly there", "at_cut_off", "right_when_called"),
    ("how often it is rightly not called", "at_cut_off", "right_when_not_called"),
    ("expected cost of a case there, by costs", "at_cut_off", "cost"),
    ("comparison: no false call", "comparison", "accuracy"),
)
NO_SHORT = "none"


def table(known: Sequence[Line]) -> str:
    """A Markdown table: least, mean and most over the cells of the default scheme that tell."""
    head = (
        "| of the default scheme, in % of tables | least | mean | most | cells | too low in | no "
        "interval in |\n|---|---|---|---|---|---|---|\n"
    )
    return head + "".join(_rows(known))


def _rows(known: Sequence[Line]) -> Iterator[str]:
    for title, estimator, measure in ROWS:
        every = [
            line
            for line in known
            if line.scheme == "default"
            and line.estimator == estimator
            and measure in ("", line.measure)
            # a floor has no costs
            and (measure != "cost" or "miss=" in line.cut_off)
        ]
        found = [line for line in every if line.tells]
        if not found:
            continue
        shares = 100 * np.array([line.coverage for line in found])
        lacking = 100 * np.mean([line.without_interval / line.tables for line in every])
        none = "" if estimator in WORDS else f"{lacking:.1f} %"
        yield (
            f"| {title} | {shares.min():.1f} | {shares.mean():.1f} | {shares.max():.1f} | "
            f"{len(found)} | {sum(line.short for line in found) or NO_SHORT} | {none} |\n"
        )


def too_low(known: Iterable[Line]) -> str:
    """The cells of the default scheme that fell short, a line each, worst first."""
    found = [line for line in known if line.scheme == "default" and line.short]
    return "".join(
        f"- {line.candidate}{f' with {line.cut_off}' if line.cut_off else ''}, "
        f"{line.measure} ({line.estimator}), {line.n} "
        f"{'units' if line.counted_by == 'unit' else 'cases'}, {TITLES[line.scenario]}: "
        f"{100 * line.coverage:.1f} % ± {100 * line.monte_carlo_error:.1f}\n"
        for line in sorted(found, key=lambda line: line.coverage)
    )


if __name__ == "__main__":
    print(table(lines()), too_low(lines()), sep="\n")
