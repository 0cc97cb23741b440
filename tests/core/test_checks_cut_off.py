"""Doubts about a cut-off: where each begins and ends."""

import dataclasses
import math

import numpy as np
import pytest
from scipy.stats import beta

from evalcore.at_cut_off import why_unlike
from evalcore.choice import choose
from evalcore.cut_off_rule import CutOffRule
from evalcore.limit import Limit
from evalcore.schemes import SCHEMES
from evalcore.table import Roles
from evalcore.wording import NBSP, Noun

from .learned_cases import as_given, at_floor, at_literal
from .test_at_cut_off import scored
from .test_findings import FLOOR, alone, found, only

LOW = CutOffRule("b", "floor", floor=0.95)
COST, FIXED = CutOffRule("b", "cost"), CutOffRule("b", "fixed", at=0.3)


class TestCutOffs:
    def test_one_chosen_on_these_cases_is_grave_where_a_limit_is_set(self):
        limits = (Limit("accuracy", 0.8),)
        given = alone(cut_off=CutOffRule("b", "fixed", at=0.35), limits=limits)
        assert only("cut_off_chosen_here", *given).severity == "grave"

    def test_learned_ones_are_not_chosen_here(self):
        given = alone(cut_off=CutOffRule("b", "cost", miss=10))
        assert found("cut_off_chosen_here", *given) == []

    @pytest.mark.parametrize(
        ("floor", "of_class", "needed", "every"),
        [
            # nine for 9 of 10 and nineteen for 19 of 20, in all
            (0.9, 8, 9, True),
            (0.95, 18, 19, True),
            # and in the bags, each half of all: eight and nine of seventeen
            (0.9, 9, None, True),
            (0.9, 16, None, True),
            (0.9, 17, None, False),
            (0.9, 18, None, False),
            (0.95, 36, None, True),
            (0.95, 38, None, False),
        ],
    )
    def test_too_few_in_all_or_in_the_bags(self, floor, of_class, needed, every):
        rule = CutOffRule("b", "floor", floor=floor)
        given = as_given(at_floor(0, of_class=of_class, rule=rule))
        numbers = {
            check: [(f.value, f.threshold) for f in found(check, *given)]
            for check in ("floor_from_few", "cut_off_calls_all")
        }
        assert numbers == {
            "floor_from_few": [(of_class, needed)] if needed else [],
            "cut_off_calls_all": [(1, 0.5)] if every else [],
        }

    def test_too_few_in_the_bags_says_that_held_out_figures_are_of_something_else(self):
        given = as_given(at_floor(0, of_class=9, rule=FLOOR))
        finding = only("cut_off_calls_all", *given)
        assert finding.severity == "grave"
        assert finding.title.replace(NBSP, " ") == (
            "In 100 % of rounds the cut-off calls every case b"
        )
        assert finding.seen.replace(NBSP, " ") == (
            "So held-out figures are those of a constant answer there (4 of 4 rounds; threshold: "
            "50 %)."
        )
        assert only("cut_off_not_judged", *given).value == 1

    @pytest.mark.parametrize(
        ("rule", "advice"),
        [
            (FIXED, "State another cut-off."),
            *(
                (
                    rule,
                    "Take other costs or another floor, or add b cases: a cut-off that is learned "
                    "needs scores that tell the classes apart, and a floor enough of its class in "
                    "every bag.",
                )
                for rule in (COST, FLOOR)
            ),
        ],
        ids=["fixed", "cost", "floor"],
    )
    def test_one_that_calls_all_is_stated_or_taught_anew(self, rule, advice):
        given = at_literal(at_floor(0, rule=rule), cut_offs=np.full(4, 0.125))
        assert only("cut_off_calls_all", *as_given(given)).advice == advice

    def test_without_a_round_at_a_cut_off_nothing_is_called(self):
        given = at_floor(0, rule=FLOOR)
        (at,) = given.beside.cut_offs
        held = at.part.held
        none = dataclasses.replace(held, rounds=held.rounds.first(0), scores=held.scores[:0])
        part = dataclasses.replace(at.part, held=none)
        nothing = at_literal(given, part=part, cut_offs=np.full(20, math.nan))
        for check in ("cut_off_calls_all", "cut_off_apart"):
            assert found(check, *as_given(nothing)) == []

    def test_a_floor_counts_what_is_independent(self):
        # twenty cases of b in two blocks
        given = at_floor(0, rule=FLOOR)
        (at,) = given.beside.cut_offs
        part = dataclasses.replace(at.part, units=np.arange(40) % 2)
        assert found("floor_from_few", *as_given(given)) == []
        blocked = at_literal(given, part=part, learned_from=2)
        site = tuple("xy"[i % 2] for i in range(40))
        kept = choose(SCHEMES, "cross_validation", folds=2, keep="site")
        blocked = dataclasses.replace(
            blocked,
            table=dataclasses.replace(blocked.table, entries={"site": site}),
            plan=dataclasses.replace(blocked.plan, schemes=(kept,)),
        )
        finding = only("floor_from_few", *as_given(blocked))
        assert (finding.severity, finding.value, finding.threshold) == ("grave", 2, 9)
        assert finding.title.replace(NBSP, " ") == (
            "2 entries of ‘site’ with b cases cannot teach a floor of 90 %"
        )
        assert finding.seen.replace(NBSP, " ") == (
            "A cut-off that finds 90 % of further entries of ‘site’ with b cases takes at least 9 "
            "of them; there are 2 (threshold: 9)."
        )
        assert finding.advice == "Take a lower floor, or add entries of ‘site’ with b cases."

    def test_rows_of_lots_are_counted_in_lots(self):
        labels, units = np.repeat([0, 1], 20), np.repeat(np.arange(20), 2)
        out = np.array([units % 2 == half for half in (0, 1)])
        score = np.where(labels, 0.5, 0.25)
        literal = np.where(out, score, math.nan), np.where(out, math.nan, score), score
        made = scored({"naive_bayes": literal}, labels, LOW, units=units, answered_from="one")
        roles = Roles("verdict", "lot", noun=Noun("lot", "lots"))
        made = dataclasses.replace(made, table=dataclasses.replace(made.table, roles=roles))
        # ten lots of two rows each: nineteen lots are needed for 19 of 20
        finding = only("floor_from_few", *as_given(made))
        assert (finding.value, finding.threshold) == (10, 19)
        title = "10 lots with b rows cannot teach a floor of 95 %"
        assert finding.title.replace(NBSP, " ") == title
        assert finding.advice == "Take a lower floor, or add lots with b rows."

    def test_lots_counted_as_such_are_lots_of_a_class(self):
        given = at_floor(0, of_class=8, rule=FLOOR)
        roles = dataclasses.replace(given.table.roles, noun=Noun("lot", "lots"))
        given = dataclasses.replace(given, table=dataclasses.replace(given.table, roles=roles))
        finding = only("floor_from_few", *as_given(given))
        assert finding.title.replace(NBSP, " ") == "8 b lots cannot teach a floor of 90 %"
        assert finding.advice == "Take a lower floor, or add b lots."

    @pytest.mark.parametrize(
        ("on_all", "threshold"),
        [
            (0.2, 0.3), (0.3, None), (0.35, None), (0.5, None), (0.6, 0.5),
        ],
    )  # fmt: skip
    def test_a_cut_off_beyond_either_end_was_not_judged(self, on_all, threshold):
        cut_offs = np.repeat([0.3, 0.4, 0.5, math.nan], [5, 10, 5, 1])
        given = at_literal(at_floor(0, rule=FLOOR), on_all=on_all, cut_offs=cut_offs)
        raised = found("cut_off_apart", *as_given(given))
        assert [f.threshold for f in raised] == ([] if threshold is None else [threshold])
        assert all((f.severity, f.subject, f.value) == ("moderate", "b", on_all) for f in raised)
        for finding in raised:
            assert f"work, {on_all:.3f}, lies" in finding.title
            assert "fell between 0.300 and 0.500 (" in finding.seen

    def test_ends_that_call_all_or_none_in_words(self):
        cut_offs = np.repeat([-math.inf, 0.4], 10)
        given = at_literal(at_floor(0, rule=FLOOR), on_all=0.6, cut_offs=cut_offs)
        finding = only("cut_off_apart", *as_given(given))
        assert "it fell between calling all and 0.400 (" in finding.seen

    @pytest.mark.parametrize(
        ("learned", "without", "raised"), [(19, 0, 0), (19, 1, 0), (20, 0, 1), (20, 5, 1)]
    )
    def test_ends_of_nine_rounds_in_ten_take_twenty_that_learned(self, learned, without, raised):
        cut_offs = np.repeat([0.5, math.nan], [learned, without])
        given = at_literal(at_floor(0, rule=FLOOR), cut_offs=cut_offs, on_all=0.625)
        assert len(found("cut_off_apart", *as_given(given))) == raised

    @pytest.mark.parametrize(("rule", "raised"), [(FIXED, 0), (COST, 1), (FLOOR, 1)])
    def test_a_fixed_cut_off_goes_to_work_as_it_was_judged(self, rule, raised):
        given = at_literal(at_floor(0, rule=rule), on_all=0.9, cut_offs=np.full(20, 0.3))
        assert len(found("cut_off_apart", *as_given(given))) == raised

    @pytest.mark.parametrize("check", ["floor_from_few", "floor_not_delivered"])
    def test_a_floor_is_asked_of_a_floor_alone(self, check):
        for rule in (CutOffRule("b", "cost"), CutOffRule("b", "fixed", at=0.6)):
            assert found(check, *as_given(at_floor(6, of_class=8, rule=rule))) == []

    # Clopper and Pearson at 14 of 20 end at 0.881, at 15 of 20 at 0.913
    @pytest.mark.parametrize(
        ("below", "severity"), [(3, "note"), (5, "note"), (6, "grave"), (7, "grave")]
    )
    def test_a_floor_above_the_interval_is_grave_and_one_within_a_note(self, below, severity):
        finding = only("floor_not_delivered", *as_given(at_floor(below, rule=FLOOR)))
        assert (finding.severity == "grave") == (beta.ppf(0.975, 21 - below, below) < 0.9)
        assert finding.severity == severity
        where = "lies above" if severity == "grave" else "is within"
        assert f"90{NBSP}%, which {where} the interval." in finding.seen

    def test_a_share_just_short_is_not_rounded_up_to_the_floor(self):
        # 224 of 250 are 89.6 %
        finding = only("floor_not_delivered", *as_given(at_floor(26, of_class=250, rule=FLOOR)))
        assert finding.value == pytest.approx(0.896, rel=1e-12)
        assert finding.title.replace(NBSP, " ") == (
            "The cut-off for at least 90 % of b cases finds 0.4 points less while they are held out"
        )

    def test_cases_never_held_out_are_not_behind_it(self):
        # in two of four rounds no cut-off was learned: ten of b were never answered
        found_ = at_floor(6, rule=FLOOR)
        (at,) = found_.beside.cut_offs
        held = at.part.held
        half = held.rounds.first(1)
        kept = dataclasses.replace(held, rounds=half, scores=held.scores[: half.test.sum()])
        part = dataclasses.replace(at.part, held=kept)
        finding = only("floor_not_delivered", *as_given(at_literal(found_, part=part)))
        # three of the ten even ones
        assert finding.value == pytest.approx(0.7, rel=1e-12)
        assert f"n{NBSP}={NBSP}10;" in finding.seen

    def test_without_an_interval_none_is_spoken_of(self):
        found_ = at_floor(6, rule=FLOOR)
        (at,) = found_.beside.cut_offs
        # two blocks, as of two sites, are too few to tell their variance
        part = dataclasses.replace(at.part, units=np.arange(40) % 2)
        finding = only("floor_not_delivered", *as_given(at_literal(found_, part=part)))
        assert finding.severity == "moderate"
        assert "interval" not in finding.seen

    def test_of_the_candidate_of_the_answer(self):
        table, plan, made = as_given(at_floor(6, of_class=8, rule=FLOOR))
        nobody = dataclasses.replace(made, beside=dataclasses.replace(made.beside, cut_offs=()))
        for check in (
            "cut_off_calls_all",
            "cut_off_costs_more",
            "floor_from_few",
            "floor_not_delivered",
            "cut_off_apart",
            "cut_off_not_judged",
        ):
            assert found(check, table, plan, nobody) == []


SEEN = (
    "Held-out figures are those of the rounds’ own cut-offs and say little about the one that goes "
    "to work: they have no interval and show no limit."
)
ADVICE = {
    FLOOR: "Take a lower floor, add b cases, or take a candidate whose scores tell the classes apart.",
    COST: "Take other costs, add b cases, or take a candidate whose scores tell the classes apart.",
}


class TestNotJudged:
    @pytest.mark.parametrize("rule", [FLOOR, COST], ids=["floor", "cost"])
    @pytest.mark.parametrize(
        ("unlike", "on_all", "why", "seen", "value", "threshold"),
        [
            (
                "not learned", math.nan, "none could be learned from all 40 cases",
                "Cut-offs learned from all: 0; threshold: 1.", 0, 1,
            ),
            (
                "all", -math.inf, "it calls all of 40 cases b",
                "Share of those it was learned from that is called: 1; threshold: 1.", 1, 1,
            ),
            (
                "none", math.inf, "it calls none of 40 cases b",
                "Share of those it was learned from that is called: 0; threshold: 0.", 0, 0,
            ),
            (
                "bags", 0.3, "in 15 of 20 rounds the bag cannot teach one like it",
                "There it calls all or none, or is not learned (threshold: 50 % of rounds); learned "
                "from all 40 cases it is 0.300.", 0.75, 0.5,
            ),
        ],
    )  # fmt: skip
    def test_each_reason_whole(self, unlike, on_all, why, seen, value, threshold, rule):
        cut_offs = np.repeat([-math.inf, math.inf, -math.inf, 0.3], 5)
        made = at_literal(at_floor(0, rule=rule), unlike=unlike, on_all=on_all, cut_offs=cut_offs)
        finding = only("cut_off_not_judged", *as_given(made))
        assert (finding.severity, finding.subject) == ("grave", "b")
        assert (finding.value, finding.threshold) == (value, threshold)
        title = f"No interval is offered at the cut-off: {why}"
        assert finding.title.replace(NBSP, " ") == title
        assert finding.seen.replace(NBSP, " ") == f"{seen} {SEEN}"
        assert finding.advice == ADVICE[rule]
        assert finding.source == "own_simulation"

    @pytest.mark.parametrize(
        ("unlike", "on_all"), [("not learned", math.nan), ("all", -math.inf), ("none", math.inf)]
    )
    def test_that_it_lies_apart_from_those_judged_goes_without_saying(self, unlike, on_all):
        apart = at_literal(at_floor(0, rule=FLOOR), on_all=on_all, cut_offs=np.full(20, 0.5))
        assert len(found("cut_off_apart", *as_given(apart))) == 1
        assert found("cut_off_apart", *as_given(at_literal(apart, unlike=unlike))) == []

    def test_a_fixed_one_was_judged_though_it_calls_none(self):
        given = as_given(at_floor(0, rule=CutOffRule("b", "fixed", at=0.9)))
        assert only("cut_off_calls_all", *given).title.endswith("the cut-off calls no case b")
        assert found("cut_off_not_judged", *given) == []

    def test_not_of_one_that_was_judged(self):
        for on_all in (0.5, 0.9):
            made = at_literal(at_floor(0, rule=FLOOR), on_all=on_all)
            assert found("cut_off_not_judged", *as_given(made)) == []

    def test_rounds_without_a_cut_off_count_as_unlike(self):
        """Of five rounds two call all and two learned none: four."""
        cut_offs = np.array([-math.inf, -math.inf, 0.3, math.nan, math.nan])
        assert why_unlike(cut_offs, 0.3, np.array([0.2, 0.4])) == "bags"
        made = at_literal(at_floor(0, rule=FLOOR), unlike="bags", on_all=0.3, cut_offs=cut_offs)
        finding = only("cut_off_not_judged", *as_given(made))
        assert (finding.value, finding.threshold) == (0.8, 0.5)
        assert ": in 4 of 5 rounds the bag cannot teach one like it" in finding.title
