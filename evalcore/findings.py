"""The registry of checks: every doubt the tool knows to raise, grave ones first."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass

from evalcore import checks_candidates as candidates
from evalcore import checks_cut_off as at_cut_off
from evalcore import checks_evidence as of_evidence
from evalcore import checks_learned as learned
from evalcore import checks_models as models
from evalcore import checks_rounds as rounds
from evalcore import checks_table as of_table
from evalcore.evaluation import Evaluation
from evalcore.figures import SEVERITIES, Finding
from evalcore.plan import Plan
from evalcore.table import Table

Look = Callable[[Table, Plan, Evaluation | None], Iterator[Finding]]


@dataclass(frozen=True)
class Check:
    """One check: what it looks for and the function that looks."""

    key: str
    title: str
    look: Look


CHECKS: dict[str, Check] = {
    check.key: check
    for check in (
        Check("failed", "a candidate could not be fitted", candidates.failed),
        Check("unfinished", "rounds are missing", rounds.unfinished),
        Check(
            "tells_classes_apart_alone",
            "one feature tells the classes apart alone",
            of_table.tells_classes_apart_alone,
        ),
        Check(
            "units_not_kept_together",
            "rows of one unit may be on both sides",
            of_table.units_not_kept_together,
        ),
        Check("copies_left", "the same case under two names", of_table.copies_left),
        Check(
            "not_better_than_majority",
            "no better than the most frequent answer",
            candidates.not_better_than_majority,
        ),
        Check("class_too_small", "too few units of a class", of_table.class_too_small),
        Check("wide_interval", "the interval leaves much open", candidates.wide_interval),
        Check(
            "interval_falls_short",
            "the interval did not keep its word in simulations",
            of_evidence.interval_falls_short,
        ),
        Check(
            "verdict_falls_short",
            "verdicts like this were wrong too often",
            of_evidence.verdict_falls_short,
        ),
        Check("unstable_model", "the model varies from round to round", models.unstable_model),
        Check(
            "model_variance_unknown",
            "the model's variance cannot be told",
            models.model_variance_unknown,
        ),
        Check("schemes_disagree", "two schemes are apart", candidates.schemes_disagree),
        Check("best_of_several", "the best is partly the luckiest", candidates.best_of_several),
        Check("misleading_632", ".632 misleads here", models.misleading_632),
        Check("never_held_out", "cases never held out", rounds.never_held_out),
        Check("too_few_rounds", "a redraw would move the estimate", rounds.too_few_rounds),
        Check("class_missing", "rounds that lack a class", rounds.class_missing),
        Check("class_shares_reached", "classes uneven over parts", rounds.class_shares_reached),
        Check("rows_agree", "rows of a unit are answered alike", candidates.rows_agree),
        Check("few_blocks", "too few blocks for an interval", rounds.few_blocks),
        Check("always_the_same", "a model that names one class", models.always_the_same),
        Check("memorises", "right on all it was trained on", models.memorises),
        Check("missing_values", "gaps in the table", of_table.missing_values),
        Check("share_of_classes", "the mix of classes is assumed", rounds.share_of_classes),
        Check(
            "cut_off_chosen_here", "a cut-off chosen on these cases", at_cut_off.cut_off_chosen_here
        ),
        Check("cut_off_calls_all", "a cut-off calls everything", at_cut_off.cut_off_calls_all),
        Check("cut_off_costs_more", "a cut-off may cost more", at_cut_off.cut_off_costs_more),
        Check("floor_from_few", "too few units for a floor", at_cut_off.floor_from_few),
        Check("cut_off_apart", "the cut-off in use lies apart", at_cut_off.cut_off_apart),
        Check("cut_off_not_judged", "a cut-off that was not judged", at_cut_off.cut_off_not_judged),
        Check("floor_not_delivered", "a floor is not delivered", at_cut_off.floor_not_delivered),
        Check("not_told_from_chance", "chance does as well", learned.not_told_from_chance),
        Check("few_arrangements", "few ways to deal the labels", learned.few_arrangements),
        Check(
            "permuted_off_chance", "permuted labels are off guessing", learned.permuted_off_chance
        ),
        Check("settings_unsteady", "rounds pick different settings", learned.settings_unsteady),
        Check("grid_too_narrow", "a grid may end too early", learned.grid_too_narrow),
        Check("curve_deals_units", "a curve of single units", learned.curve_deals_units),
        Check("still_rising", "more cases would help", learned.still_rising),
        Check("bags_as_expected", "what a bag holds", rounds.bags_as_expected),
    )
}


def findings(table: Table, plan: Plan, evaluation: Evaluation | None = None) -> tuple[Finding, ...]:
    """Every doubt, grave ones first and otherwise in the order of the registry.

    Parameters
    ----------
    table : Table
    plan : Plan
    evaluation : Evaluation, optional
        Without one, only what the table alone gives rise to.
    """
    found = [f for check in CHECKS.values() for f in check.look(table, plan, evaluation)]
    return tuple(sorted(found, key=lambda f: SEVERITIES.index(f.severity)))
