"""Doubts about the rounds: too few, incomplete, cases never judged, what bags are like."""

import math
from collections.abc import Iterator

import numpy as np

from evalcore import bag_facts
from evalcore.evaluation import Evaluation
from evalcore.figures import Finding
from evalcore.judged import Judged
from evalcore.plan import Plan
from evalcore.schemes import LEAST_BLOCKS, SCHEMES
from evalcore.table import Table
from evalcore.wording import capitalised, class_name, count, decimal, percent, quoted, tenths

UNEVEN = 0.10  # a share of a class in a held-out part may be this far from the table's
MONTE_CARLO = 0.01  # an estimate that a redraw would move by more than this has too few rounds


def unfinished(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Figures rest on part of the rounds."""
    if evaluation is None:
        return
    for scheme, planned in evaluation.planned.items():
        done = evaluation.rounds[scheme].n_rounds if scheme in evaluation.rounds else 0
        if done < planned:
            yield Finding(
                "unfinished",
                "moderate",
                scheme,
                f"Only {count(done)} of {count(planned)} rounds of {title(plan, scheme)} are "
                "finished",
                f"{count(done)} rounds have finished, {count(planned)} were planned.",
                "Wait, or go on from the finished rounds.",
                done,
                planned,
                "common_practice",
            )


def title(plan: Plan, scheme: str) -> str:
    """A scheme's name inside a sentence."""
    name = SCHEMES[plan.scheme(scheme).key].title
    return name[:1].lower() + name[1:]


def never_held_out(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Units that no round judged."""
    if evaluation is None:
        return
    for scheme, rounds in evaluation.rounds.items():
        by_unit = rounds.of_units(table.units)
        never = int((by_unit.times_tested == 0).sum())
        if not never:
            continue
        expected = ""
        if SCHEMES[plan.scheme(scheme).key].repeats_cases:
            chance = bag_facts.never_out_of_bag(table.n_units, rounds.n_rounds)
            expected = f" About {decimal(chance * table.n_units, 1)} are expected by chance."
        yield Finding(
            "never_held_out",
            "moderate" if SCHEMES[plan.scheme(scheme).key].drawn else "note",
            scheme,
            f"{count(never)} of {table.noun.counted(table.n_units)} were never held out in "
            f"{title(plan, scheme)}; to know about every one takes 0",
            f"{count(never)} {table.noun.plural} were in every bag, so nothing is known about "
            f"them (threshold: 0).{expected}",
            "Add rounds, or choose a scheme that holds every one out.",
            never,
            0,
            "elementary",
        )


def too_few_rounds(_: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Drawing the rounds anew would move the estimate."""
    if evaluation is None:
        return
    for scheme in evaluation.rounds:
        if not SCHEMES[plan.scheme(scheme).key].drawn:
            continue
        first = scheme == evaluation.scheme
        parts = (
            evaluation.part_in_use(c) if first else evaluation.part(c, scheme)
            for c in evaluation.candidates
        )
        worst = max(
            ((_redraw(part), part.candidate) for part in parts),
            key=lambda pair: math.inf if math.isnan(pair[0]) else pair[0],
        )
        if worst[0] <= MONTE_CARLO:
            continue
        once = math.isnan(worst[0])
        done = evaluation.rounds[scheme].n_rounds
        moved = "unknown" if once else f"about {tenths(worst[0])}"
        yield Finding(
            "too_few_rounds",
            "moderate",
            scheme,
            f"Too few rounds of {title(plan, scheme)}: drawing them anew would move an estimate "
            f"by {'an unknown amount' if once else moved}; the threshold is "
            f"{tenths(MONTE_CARLO)}",
            f"The standard error from the draw alone is {moved} for "
            f"{plan.title(worst[1])} ({count(done)} {'round' if done == 1 else 'rounds'}). "
            + (
                "A single part cannot say how far the next one would be from it."
                if once
                else "More rounds narrow this, never the interval."
            ),
            "Take more rounds or repeats.",
            worst[0],
            MONTE_CARLO,
            "own_simulation",
        )


def _redraw(part: Judged) -> float:
    """Standard error of the share right from the draw of the rounds; nan for a single one.

    Rounds of one repeat judge different cases, so it is repeats that are independent.
    """
    rounds = part.held.rounds
    values = part.held_values("accuracy")
    sizes = rounds.test_sizes.astype(np.float64)
    right = np.bincount(rounds.repeat, np.nan_to_num(values) * sizes)
    judged = np.bincount(rounds.repeat, sizes)
    shares = right[judged > 0] / judged[judged > 0]
    return float(shares.std(ddof=1) / math.sqrt(len(shares))) if len(shares) > 1 else math.nan


def class_missing(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Rounds whose bag or whose held-out part lacks a class."""
    if evaluation is None:
        return
    for scheme, rounds in evaluation.rounds.items():
        if not SCHEMES[plan.scheme(scheme).key].drawn:
            continue  # a part that is one unit or one block may well lack a class
        by_unit = rounds.of_units(table.units)
        for k, name in enumerate(table.classes):
            of_class = table.unit_labels == k
            bag = int((by_unit.train[:, of_class].sum(axis=1) == 0).sum())
            out = int((by_unit.test[:, of_class].sum(axis=1) == 0).sum())
            if not bag + out:
                continue
            yield Finding(
                "class_missing",
                "moderate",
                name,
                f"Class {quoted(name)} was missing from {count(bag)} bags and {count(out)} "
                f"held-out parts of {count(rounds.n_rounds)}, where none should lack it",
                f"Under {title(plan, scheme)} {count(bag)} rounds had no {quoted(name)} to learn "
                f"from and {count(out)} none to judge (threshold: 0). Measures that need the "
                "class are undefined there and left out of means.",
                "Keep every class's share in each round (stratified), or take larger parts.",
                bag + out,
                0,
                "elementary",
            )


def bags_as_expected(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """How much of the table a bag holds, and how much a bootstrap standard deviation shrinks."""
    if evaluation is None:
        return
    for scheme, rounds in evaluation.rounds.items():
        choice = plan.scheme(scheme)
        if not SCHEMES[choice.key].repeats_cases:
            continue
        sizes = table.class_counts("unit").tolist()
        stratified = bool(choice.values()["stratified"])
        expected = bag_facts.stratified_distinct_share(sizes if stratified else [table.n_units])
        shares = rounds.of_units(table.units).distinct_share
        seen, n = float(shares.mean()), table.n_units
        # the share of one bag varies by about 0.3/sqrt(n); four standard errors of the mean
        allowed = 4 * 0.32 / math.sqrt(n * rounds.n_rounds)
        smallest = min(sizes)
        yield Finding(
            "bags_as_expected",
            "note" if abs(seen - expected) <= allowed else "moderate",
            scheme,
            f"A bag held {percent(seen, n)} of the {table.noun.plural} on average, "
            f"{percent(expected, n)} expected",
            f"Mean distinct share of {count(rounds.n_rounds)} bags: {decimal(seen, 4)}; expected "
            f"{decimal(expected, 4)}, give or take {decimal(allowed, 4)}. Standard deviations "
            f"taken from bags fall short by the factor {decimal(bag_facts.sd_shrink(n), 3)} for "
            f"all {table.noun.plural}"
            + (
                f", {decimal(bag_facts.sd_shrink(smallest), 3)} within the smallest class"
                if stratified
                else ""
            )
            + ".",
            "Nothing; it explains why out-of-bag figures are a little strict.",
            seen,
            expected,
            "efron_tibshirani1993",
        )


def share_of_classes(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Figures for all cases assume the table's mix of classes."""
    if evaluation is None or plan.measure != "accuracy":
        return
    largest = int(table.class_counts(evaluation.counted_by).argmax())
    counts = table.class_counts(evaluation.counted_by)
    share = float(counts[largest] / counts.sum())
    yield Finding(
        "share_of_classes",
        "note",
        table.classes[largest],
        f"The share right assumes that {percent(share, int(counts.sum()))} of further "
        f"{table.noun.plural} are {quoted(table.classes[largest])}, as here",
        f"{capitalised(table.noun.plural)} that come with another mix of classes give another "
        "share right; the classes' own shares and balanced accuracy do not change.",
        "Judge by class where the mix in use differs.",
        share,
        share,
        "own_simulation",
    )


def few_blocks(table: Table, plan: Plan, evaluation: Evaluation | None) -> Iterator[Finding]:
    """Too few blocks, of all or of one class, to say how much one differs from the next."""
    if evaluation is None:
        return
    for scheme in evaluation.rounds:
        part = evaluation.part(evaluation.about, scheme)
        if part.units is None:
            continue
        held_out = part.blocks_with(None)
        if held_out < LEAST_BLOCKS:
            yield _few_blocks(scheme, "", held_out, of=title(plan, scheme))
            continue
        for k, name in enumerate(table.classes):
            blocks = part.blocks_with(k)
            if blocks < LEAST_BLOCKS:
                noun = table.noun_for(evaluation.counted_by)
                with_class = f" with {class_name(name)} {noun.plural}"
                yield _few_blocks(name, with_class, blocks, of=title(plan, scheme))


def _few_blocks(subject: str, with_class: str, blocks: int, *, of: str) -> Finding:
    return Finding(
        "few_blocks",
        "moderate",
        subject,
        f"Only {count(blocks)} blocks{with_class} in {of}, where an interval needs {LEAST_BLOCKS}",
        f"Cases of one block share what is particular to it, so {count(blocks)} blocks are "
        f"{count(blocks)} observations of how it carries over (threshold: {LEAST_BLOCKS}).",
        "Read the figure as an example, not as an estimate; judge more blocks.",
        blocks,
        LEAST_BLOCKS,
        "own_simulation",
    )


def class_shares_reached(
    table: Table, plan: Plan, evaluation: Evaluation | None
) -> Iterator[Finding]:
    """How even the classes are over held-out parts, where groups allow no better."""
    if evaluation is None:
        return
    for scheme, rounds in evaluation.rounds.items():
        choice = plan.scheme(scheme)
        groups = SCHEMES[choice.key].groups(table, choice.values())
        if not choice.values().get("stratified") or groups.alike:
            continue
        by_unit = rounds.of_units(table.units)
        sizes = np.maximum(by_unit.test_sizes, 1)
        k = int(table.class_counts("unit").argmin())
        reached = by_unit.test[:, table.unit_labels == k].sum(axis=1) / sizes
        wanted = float(table.class_counts("unit")[k] / table.n_units)
        widest = float(np.abs(reached - wanted).max())
        if widest == 0:
            continue
        n = table.n_units
        yield Finding(
            "class_shares_reached",
            "moderate" if widest > UNEVEN else "note",
            scheme,
            f"Held-out parts of {title(plan, scheme)} hold {percent(float(reached.min()), n)} to "
            f"{percent(float(reached.max()), n)} {class_name(table.classes[k])} "
            f"{table.noun.plural}, {percent(wanted, n)} in the table",
            f"What is kept together does not divide evenly; the widest distance is "
            f"{tenths(widest)}, moderate from {tenths(UNEVEN)}.",
            "Take fewer folds, or keep less together, if that suits the question.",
            widest,
            UNEVEN,
            "common_practice",
        )
