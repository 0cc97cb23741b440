"""Commands that look at one column or at no table at all: statistics and sample sizes."""

import argparse
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from evalcore.errors import PlanError, TableError
from evalcore.plan import generator
from evalcore.sample_size import cases_for_auc, cases_for_width, cases_to_show
from evalcore.sheet import read_sheet
from evalcore.statistic import bootstrap
from evalcore.statistic_formulas import STATISTICS
from evalcore.wording import NBSP, count, decimal, level, percent, quoted

MISSES = (0, 1, 2, 3, 5)


def statistic_parser(parser: argparse.ArgumentParser) -> None:
    """Options of ``withheld statistic``."""
    parser.add_argument("file", metavar="FILE", help="CSV with a header")
    parser.add_argument("--column", required=True, metavar="COLUMN")
    parser.add_argument(
        "--second", default="", metavar="COLUMN", help="of a correlation; the class of a difference"
    )
    parser.add_argument("--statistic", required=True, choices=list(STATISTICS))
    parser.add_argument("--share", type=float, default=0.5, help="which quantile")
    parser.add_argument("--unit", default="", metavar="COLUMN", help="what is independent")
    parser.add_argument("--rounds", type=int, default=2000, help="bootstrap rounds")
    parser.add_argument("--seed", type=int, default=1, metavar="N", help="random seed")
    parser.set_defaults(run=statistic)


def size_parser(parser: argparse.ArgumentParser) -> None:
    """Options of ``withheld sample-size``."""
    parser.add_argument("--limit", type=float, metavar="SHARE", help="to be shown, e.g. 0.9")
    parser.add_argument("--confidence", type=float, default=0.95, help="one-sided, of the limit")
    parser.add_argument("--share", type=float, metavar="SHARE", help="expected, with --width")
    parser.add_argument("--width", type=float, help="of a 95 %% interval around --share")
    parser.add_argument("--auc", type=float, help="expected, with --half-width")
    parser.add_argument("--half-width", type=float, help="of a 95 %% interval around --auc")
    parser.set_defaults(run=sample_size)


def statistic(given: argparse.Namespace) -> None:
    """Print a column's statistic with its bootstrap standard error, bias and intervals."""
    try:
        data = Path(given.file).read_bytes()
    except OSError as error:
        raise TableError(f"The file {given.file!r} cannot be read: {error.strerror}.") from error
    sheet = read_sheet(data, Path(given.file).name)
    first = _numbers(sheet.column(given.column), given.column, sheet.decimal)
    second = None
    if given.second:
        entries = sheet.column(given.second)
        names = sorted(set(entries))
        two = given.statistic == "mean_difference" and len(names) == 2
        second = (
            np.array([float(names.index(entry)) for entry in entries])
            if two
            else _numbers(entries, given.second, sheet.decimal)
        )
    found = bootstrap(
        first,
        second,
        statistic=given.statistic,
        rounds=given.rounds,
        generator=generator(given.seed, "statistic", given.statistic),
        units=sheet.column(given.unit) if given.unit else None,
        share=given.share,
    )
    print(
        f"{STATISTICS[found.statistic].title} of {quoted(given.column)}: {decimal(found.value, 6)}"
    )
    print(f"n{NBSP}={NBSP}{count(found.n)}, units {count(found.n_units)}, missing {found.missing}")
    print(f"standard error {decimal(found.standard_error, 6)}, bias {decimal(found.bias, 6)}")
    for name, bounds in (("percentile", found.percentile), ("BCa", found.bca)):
        print(
            f"{level(bounds.level)} {name} interval: {decimal(bounds.low, 6)} to "
            f"{decimal(bounds.high, 6)}"
        )
    if not np.isnan(found.shrink):
        print(f"bootstrap standard deviations fall short by the factor {decimal(found.shrink, 4)}")


def _numbers(entries: list[str], name: str, mark: str) -> NDArray[np.float64]:
    try:
        plain = [entry.replace(",", ".") if mark == "," else entry for entry in entries]
        return np.array([float(entry) if entry not in ("", "NA") else np.nan for entry in plain])
    except ValueError as error:
        raise TableError(f"The column {quoted(name)} must hold numbers; {error}.") from error


def _misses(number: int) -> str:
    return "miss" if number == 1 else "misses"


def sample_size(given: argparse.Namespace) -> None:
    """Print how many cases it takes to show a limit or to reach a width."""
    if given.limit is None and given.width is None and given.half_width is None:
        raise PlanError("Name what is wanted: --limit, --share with --width, or --auc with "
                        "--half-width.")  # fmt: skip
    if given.limit is not None:
        for misses in MISSES:
            exact = cases_to_show(given.limit, misses=misses, confidence=given.confidence)
            wilson = cases_to_show(
                given.limit, misses=misses, confidence=given.confidence, method="wilson"
            )
            print(
                f"{level(given.limit)} shown with {misses} {_misses(misses)}: "
                f"{count(exact)} cases (exact), {count(wilson)} (Wilson)"
            )
    if given.width is not None:
        if given.share is None:
            raise PlanError("`--width` needs the share it is around: --share.")
        found = cases_for_width(given.share, width=given.width)
        print(
            f"A 95{NBSP}% interval of width {percent(given.width, 1)} around "
            f"{percent(given.share, 1)}: {count(found.n)} cases (right answers not rounded)"
        )
    if given.half_width is not None:
        if given.auc is None:
            raise PlanError("`--half-width` needs the AUC it is around: --auc.")
        pairs = cases_for_auc(given.auc, half_width=given.half_width)
        print(
            f"AUC {decimal(given.auc)} give or take {decimal(given.half_width)}: "
            f"{count(pairs.n_positive)} and {count(pairs.n_negative)} cases of the two classes"
        )
