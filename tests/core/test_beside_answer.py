"""What stands beside the estimates in sentences: each whole, on literal values."""

import ast
import math
import pathlib
import re
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import binom

from evalcore.beside import Beside
from evalcore.beside_answer import beside_in_sentences
from evalcore.candidates import CANDIDATES
from evalcore.checks_learned import still_rising
from evalcore.choice import choose
from evalcore.clusters import clusters
from evalcore.cut_off import WithUndecided
from evalcore.cut_off_rule import CutOffRule
from evalcore.evaluation import Evaluation
from evalcore.figures import Interval
from evalcore.learning_curve import Gain, Prediction
from evalcore.schemes import ALL_SCHEMES, SCHEMES
from evalcore.share_in_use import AtShare, Rate
from evalcore.table import Roles
from evalcore.wording import NBSP, Noun

from .learned_cases import a_curve, as_given, at_floor, at_literal, checked, picks
from .test_at_cut_off import scored

ROOT = pathlib.Path(__file__).parents[2]
NAN, INF = math.nan, math.inf
COST = CutOffRule("b", "cost", miss=10, share_low=0.08, share_high=0.08)
FLOOR = CutOffRule("b", "floor", floor=0.9)


def worth(share: float, called: float, *rates: tuple[float, ...]) -> AtShare:
    """How often right when called, when not, and the cost: a value with its ends, if any."""
    return AtShare(share, *(Rate(*rate) for rate in rates), called=called)


SHARES = (worth(0.08, 0.25, (0.6,), (0.97,), (0.4117,)),)
# 14 of 20 found and 60 of 60 passed; exact (scipy) 0.457 to 0.881 and 0.940 to 1
RATES = (
    "Held out, each round at its own cut-off: a cases passed (specificity) 100 % (94–100 %), "
    "n = 60; b cases found (sensitivity) 70 % (46–88 %), n = 20."
)
FIXED_RATES = (
    "Held out: a cases passed (specificity) 100 % (94–100 %), n = 60; b cases found (sensitivity) "
    "70 % (46–88 %), n = 20."
)
AGAINST = (
    "Against always giving the most frequent answer, by the highest score and on one answer each: "
)
LEAVES_OUT = "(exact binomial test; it leaves out that models vary)."


def said(evaluation: Evaluation) -> list[str]:
    """All sentences with plain spaces; before "%" and around "=" none may break."""
    given = beside_in_sentences(evaluation)
    for sentence in given:
        assert not re.search(r"[^\u00a0]%|[^\u00a0]=\u00a0|\u00a0=[^\u00a0]|[a-z] =", sentence)
        assert re.fullmatch(r"[A-Z].*\.", sentence)
        assert "nan" not in sentence.split()
        assert not re.search(r"\binf\b", sentence)
    return [sentence.replace(NBSP, " ") for sentence in given]


def at(rule: CutOffRule, *cut_offs: float, **parts: object) -> list[str]:
    """What is said of a cut-off: 14 of 20 of b called, none of 60 of a, the rest as given."""
    made = at_floor(6, others=60, rule=FLOOR)
    literal = {
        "rule": rule,
        "cut_offs": np.array(cut_offs or [0.3, 0.35, 0.4, 0.425]),
        "on_all": 0.35,
        "at_shares": (),
        "undecided": None,
    }
    return said(at_literal(made, **(literal | parts)))


def bare(**choices: object) -> Evaluation:
    """Nothing beside the estimates of eight cases, two of them b, right everywhere."""
    table_labels = [0] * 6 + [1] * 2
    out = np.array([np.arange(8) % 2 == half for half in (0, 1)])
    held = np.where(out, np.array(table_labels) * 0.8 + 0.1, NAN)
    given = {"naive_bayes": (held, np.full((2, 8), NAN), np.full(8, NAN))}
    return replace(scored(given, table_labels, COST, **choices), beside=Beside())


def test_nothing_asked_nothing_said():
    assert beside_in_sentences(bare()) == ()


def test_in_the_order_of_the_page():
    made = at_literal(at_floor(6, others=60, rule=FLOOR), undecided=None)
    given = as_given(made)
    everything = replace(
        made.beside, curves=(a_curve(given, 0.03),), chance=(checked(given, 0.9, [0.5] * 19),)
    )
    begins = [s.split(" ")[0] for s in said(replace(made, beside=everything))]
    assert begins == ["A", "Held", "Where", "Learning", "Chance", "Against"]


class TestPicked:
    K = choose(CANDIDATES, "nearest_neighbours", k=(1, 5, 15))

    def given(self, *shares: float, scheme: str = "cross_validation") -> Evaluation:
        found = bare()
        plan = replace(found.plan, candidates=(self.K, *found.plan.candidates))
        picked = (picks(self.K, *shares, scheme=scheme),)
        return replace(found, plan=plan, beside=Beside(picked=picked))

    def test_each_option_and_what_goes_to_work(self):
        # of two rounds
        assert said(self.given(0.5, 0.0, 0.5)) == [
            "Nearest neighbours (k tuned): picked inside the bag k=1 in 50 %, k=5 in 0 % and k=15 "
            "in 50 % of 2 rounds; all cases together pick k=15, which the final model takes."
        ]

    def test_of_the_headline_s_scheme_alone(self):
        assert said(self.given(0.5, 0.0, 0.5, scheme="bootstrap")) == []


class TestWhere:
    def test_learned_by_costs(self):
        rule = CutOffRule("b", "cost", miss=10, alarm=0.5)
        assert at(rule) == [
            "A case is called b from 0.350 up, learned from held-out scores inside the bag (a miss "
            "costs 10, a false alarm 0.5); in 90 % of rounds it fell between 0.300 and 0.425.",
            RATES,
        ]

    def test_learned_by_a_floor(self):
        assert at(CutOffRule("b", "floor", floor=0.975))[0] == (
            "A case is called b from 0.350 up, learned from held-out scores inside the bag (at "
            "least 97.5 % of b cases are to be found); in 90 % of rounds it fell between 0.300 "
            "and 0.425."
        )

    @pytest.mark.parametrize(
        ("rule", "says"),
        [
            (
                CutOffRule("b", "fixed", at=0.35, set_on="2026-05-04"),
                "A case is called b from 0.35 up (set on 2026-05-04).",
            ),
            (
                CutOffRule("b", "fixed", at=-1.25),
                "A case is called b from –1.25 up (chosen on these cases).",
            ),
            # as it was set, not rounded
            (
                CutOffRule("b", "fixed", at=0.00025),
                "A case is called b from 0.00025 up (chosen on these cases).",
            ),
        ],
    )
    def test_fixed_says_when(self, rule, says):
        assert at(rule, on_all=rule.at) == [says, FIXED_RATES]

    @pytest.mark.parametrize(
        ("on_all", "says"),
        [
            (-INF, "Every case is called b, whatever its score"),
            (INF, "No case is called b, whatever its score"),
            # one that is a number was learned
            (
                0.35,
                "A case is called b from 0.350 up, learned from held-out scores inside the bag",
            ),
        ],
    )
    def test_that_calls_all_or_none_in_words(self, on_all, says):
        assert at(FLOOR, on_all=on_all)[0] == (
            f"{says} (at least 90 % of b cases are to be found); in 90 % of rounds it fell between "
            "0.300 and 0.425."
        )

    @pytest.mark.parametrize(
        ("cut_offs", "says"),
        [
            ((-INF, 0.3, 0.4, 0.5), "it fell between calling all and 0.500."),
            ((0.3, 0.4, 0.5, INF), "it fell between 0.300 and calling none."),
            ((-INF, -INF, INF, INF), "it fell between calling all and calling none."),
            (
                (NAN, 0.3, NAN, 0.5),
                "it fell between 0.300 and 0.500, 2 of 4 left out in which it could not be "
                "learned.",
            ),
            # one in twenty-one falls outside each end: the second and the twentieth
            ((0.0, *[0.2] * 10, *[0.7] * 9, 1.0), "it fell between 0.200 and 0.700."),
            # both ends are one value, whether or not a round in twenty-one has another
            ((0.3, 0.3, 0.3), "or more: 0.300."),
            ((0.0, *[0.2] * 19, 1.0), "or more: 0.200."),
            ((-INF, -INF), "or more: calling all."),
            ((INF, INF), "or more: calling none."),
            (
                (NAN, 0.3, 0.3),
                "or more: 0.300, 1 of 3 left out in which it could not be learned.",
            ),
        ],
    )
    def test_between_which_ends(self, cut_offs, says):
        sentence = at(COST, *cut_offs)[0]
        assert sentence.endswith(f"; in 90 % of rounds {says}")

    def test_learned_in_no_round(self):
        ends = "it could be learned in none of 3 rounds."
        assert at(COST, NAN, NAN, NAN, at_shares=SHARES) == [
            "A case is called b from 0.350 up, learned from held-out scores inside the bag (a miss "
            f"costs 10, a false alarm 1); {ends}"
        ]
        assert at(COST, NAN, NAN, NAN, on_all=NAN) == [
            f"No cut-off for b could be learned from all cases (a miss costs 10, a false alarm 1); "
            f"{ends}"
        ]

    @pytest.mark.parametrize("rule", [COST, FLOOR, CutOffRule("b", "fixed", at=0.35)])
    @pytest.mark.parametrize(
        ("key", "title"), [("majority", "Majority class"), ("present_practice", "Present practice")]
    )
    def test_a_candidate_that_cannot_have_one(self, rule, key, title):
        made = bare()
        candidates = (choose(CANDIDATES, key), *made.plan.candidates)
        plan = replace(made.plan, candidates=candidates, about=key, cut_off=rule)
        assert said(replace(made, plan=plan)) == [
            f"{title} learns nothing from features, so it has no cut-off."
        ]
        assert said(replace(made, plan=replace(plan, cut_off=None))) == []
        # that of another is not that of the answer
        other = at_floor(6, others=60, rule=FLOOR)
        plan = replace(other.plan, candidates=(candidates[0], *other.plan.candidates), about=key)
        assert len(said(replace(other, plan=plan))) == 1

    def test_one_that_could_have_had_one_is_not_said_to_learn_nothing(self):
        """Naive Bayes, carried out without inner scores: then there is nothing to say."""
        assert bare().plan.cut_off == COST
        assert said(bare()) == []


class TestInUse:
    @pytest.mark.parametrize(
        ("rule", "shares", "says"),
        [
            (
                COST,
                SHARES,
                [
                    "Where 8 % of cases are b: 25 % are called b, rightly in 60 %; of those not "
                    "called 97 % are not b; the expected cost is 0.412 a case."
                ],
            ),
            (
                COST,
                (worth(0.08, 0.25, (0.6, 0.0, 0.85), (0.97, 0.94, 1.0), (0.4117, 0.25, 1.3)),),
                [
                    "Where 8 % of cases are b (95 % intervals in brackets, n = 60 a and 20 b): 25 % "
                    "are called b, rightly in 60 % (0–85 %); of those not called 97 % (94–100 %) "
                    "are not b; the expected cost is 0.412 (0.250–1.300) a case."
                ],
            ),
            (
                CutOffRule("b", "cost"),
                (worth(0.25, 0.0, (NAN,), (0.75,), (0.25, 0.125, 0.5)),),
                [
                    "Where 25 % of cases are b, the share of this table (95 % intervals in "
                    "brackets, n = 60 a and 20 b): 0 % are called b; of those not called 75 % are not "
                    "b; the expected cost is 0.250 (0.125–0.500) a case."
                ],
            ),
            (
                CutOffRule("b", "cost"),
                (worth(0.25, 0.125, (0.6,), (0.97,), (0.4117,)),),
                [
                    "Where 25 % of cases are b, the share of this table: 12 % are called b, "
                    "rightly in 60 %; of those not called 97 % are not b; the expected cost is "
                    "0.412 a case."
                ],
            ),
            (
                replace(FLOOR, share_low=0.004, share_high=0.125),
                (
                    worth(0.004, 0.25, (0.05, 0.0, 0.1), (1.0, 0.9, 1.0), (9.0, 8.0, 10.0)),
                    worth(0.125, 0.3, (0.7, 0.5, 0.9), (0.996, 0.9, 1.0), (9.0, 8.0, 10.0)),
                ),
                [
                    "Where 0.4 % of cases are b (95 % intervals in brackets, n = 60 a and 20 b): 25 % "
                    "are called b, rightly in 5 % (0–10 %); of those not called 100 % (90–100 %) "
                    "are not b.",
                    "Where 12.5 % of cases are b (95 % intervals in brackets, n = 60 a and 20 b): 30 % "
                    "are called b, rightly in 70 % (50–90 %); of those not called >99 % (90–100 %) "
                    "are not b.",
                ],
            ),
            (
                replace(FLOOR, share_low=0.08, share_high=0.08),
                (worth(0.08, 0.0, (NAN,), (0.92,), (NAN,)),),
                ["Where 8 % of cases are b: 0 % are called b; of those not called 92 % are not b."],
            ),
            (
                replace(FLOOR, share_low=0.08, share_high=0.08),
                (worth(0.08, 1.0, (0.08,), (NAN,), (NAN,)),),
                ["Where 8 % of cases are b: 100 % are called b, rightly in 8 %."],
            ),
        ],
        ids=[
            "stated",
            "with ends",
            "ends of a cost",
            "table",
            "range",
            "none called",
            "all called",
        ],
    )
    def test_at_each_share(self, rule, shares, says):
        assert at(rule, at_shares=shares)[2:] == says

    def test_undecided_counted_both_ways(self):
        rule = replace(COST, undecided_below=0.7)
        given = WithUndecided(0.25, 0.9, 0.68, 0.93)
        assert at(rule, undecided=given)[2:] == [
            "An answer with a probability below 0.7 is left to a person: 25 % of cases. Of the others "
            "(n = 60) 90 % are right; counting those left undecided as wrong, 68 % of all."
        ]

    @pytest.mark.parametrize(
        ("sent", "n"),
        [
            # of eighty; two repeats may leave half a case, which is rounded up
            (0.5, 40), (0.49375, 41), (0.50625, 40), (0.9875, 1),
            # one that was answered at all is behind it
            (0.9999, 1),
        ],
    )  # fmt: skip
    def test_how_many_are_decided(self, sent, n):
        rule = replace(COST, undecided_below=0.7)
        (_, _, sentence) = at(rule, undecided=WithUndecided(sent, 1.0, 1 - sent, 1.0))
        assert f"Of the others (n = {n}) 100 % are right; " in sentence

    def test_nothing_of_a_share_in_use_where_the_cut_off_was_not_judged(self):
        assert len(at(FLOOR, at_shares=SHARES)) == 3
        assert at(FLOOR, at_shares=SHARES, unlike="bags")[1:] == [RATES]

    def test_the_level_is_the_plan_s(self):
        made = at_floor(6, others=60, rule=FLOOR)
        made = replace(made, plan=replace(made.plan, level=0.9))
        (_, _, sentence) = said(at_literal(made, undecided=None))
        # of its own share: twenty of eighty
        begins = "Where 25 % of cases are b, the share of this table (90 % intervals in brackets, "
        assert sentence.startswith(f"{begins}n = 60 a and 20 b): ")
        assert sentence.count("intervals") == sentence.count("n = ") == 1

    def test_all_undecided(self):
        rule = replace(COST, undecided_below=0.999)
        assert at(rule, undecided=WithUndecided(1.0, NAN, 0.0, 1.0))[2:] == [
            "An answer with a probability below 0.999 is left to a person: 100 % of cases. Counting "
            "those left undecided as wrong, 0 % of all."
        ]

    def test_cases_never_held_out_are_not_behind_rates(self):
        made = at_floor(6, others=60, rule=FLOOR)
        part = made.beside.cut_offs[0].part
        first = part.held.rounds.first(1)
        held = replace(part.held, rounds=first, scores=part.held.scores[: first.test.sum()])
        sentences = said(at_literal(made, part=replace(part, held=held), undecided=None))
        # three of ten missed, none of thirty called: exact 0.348 to 0.933 and 0.884 to 1
        assert sentences[1] == (
            "Held out, each round at its own cut-off: a cases passed (specificity) 100 % "
            "(88–100 %), n = 30; b cases found (sensitivity) 70 % (35–93 %), n = 10."
        )


class TestUnitsAndRows:
    """Forty lots of two rows, twenty of them failing."""

    LOTS = Roles("verdict", "lot", noun=Noun("lot", "lots"))

    def given(self, **choices: object) -> Evaluation:
        units = np.repeat(np.arange(40), 2)
        labels = np.repeat([0] * 30 + [1] * 10, 2)
        out = np.array([units % 2 == half for half in (0, 1, 0, 1)])
        score = np.where(labels, 0.6, 0.2)
        rule = replace(COST, undecided_below=0.7)
        whole = (np.where(out, score, NAN), np.where(out, NAN, score), score)
        made = scored(
            {"naive_bayes": whole}, labels, rule, units=units, repeat=[0, 0, 1, 1], **choices
        )
        return replace(made, table=replace(made.table, roles=self.LOTS))

    def test_lots_are_answered(self):
        # half-way between 0.2 and 0.6; ten lots of 0.6 are left to a person, thirty have 0.8.
        # Exact bounds 0.025^(1/30) = 0.884 and 0.025^(1/10) = 0.692, so at most 0.116 alarms and
        # 0.308 missed; of the other share at least root(1 - 0.308^2) = 0.951 and 0.993 (see
        # `ratio_of_shares`): 0.08/(0.08 + 0.92 x 0.116/0.951), 0.92/(0.92 + 0.08 x 0.308/0.993),
        # root((0.8 x 0.308)^2 + (0.92 x 0.116)^2)
        assert said(self.given()) == [
            "A lot is called b from 0.400 up, learned from held-out scores inside the bag (a miss "
            "costs 10, a false alarm 1); in 90 % of rounds or more: 0.400.",
            "Held out, each round at its own cut-off: a lots passed (specificity) 100 % "
            "(88–100 %), n = 30; b lots found (sensitivity) 100 % (69–100 %), n = 10.",
            "Where 8 % of lots are b (95 % intervals in brackets, n = 30 a and 10 b): 8 % are called b, "
            "rightly in 100 % (42–100 %); of those not called 100 % (97–100 %) are not b; the "
            "expected cost is 0.000 (0.000–0.269) a lot.",
            "An answer with a probability below 0.7 is left to a person: 25 % of lots. Of the others "
            "(n = 30) 100 % are right; counting those left undecided as wrong, 75 % of all.",
        ]

    def test_rows_are_answered(self):
        sentences = said(self.given(answered_from="one"))
        assert sentences[0].startswith("A row is called b from 0.400 up,")
        assert "a rows passed (specificity) 100 % (" in sentences[1]
        assert sentences[1].endswith(", n = 20.")
        begins = "Where 8 % of rows are b (95 % intervals in brackets, n = 60 a and 20 b): "
        assert sentences[2].startswith(begins)
        assert sentences[2].endswith(" a row.")
        assert ": 25 % of rows. Of the others (n = 60) 100 %" in sentences[3]

    @pytest.mark.parametrize("answered_from", ["all", "one"])
    def test_a_curve_counts_lots(self, answered_from):
        made = self.given(answered_from=answered_from)
        found = replace(made, beside=Beside(curves=(a_curve(as_given(made), 0.03),)))
        assert "Continued to 50 lots: " in said(found)[0]

    @pytest.mark.parametrize("answered_from", ["all", "one"])
    def test_a_curve_that_keeps_sites_together_counts_sites(self, answered_from):
        made = kept(self.given(answered_from=answered_from), [f"s{at // 4}" for at in range(80)])
        found = replace(made, beside=Beside(curves=(a_curve(as_given(made), 0.03),)))
        (sentence,) = said(found)
        assert "Continued to 50 entries of ‘site’: " in sentence
        assert "Continued to 80 entries of ‘site’: " in sentence
        (finding,) = still_rising(*as_given(found))
        assert " still learns from more entries of ‘site’: " in finding.title
        assert finding.advice == "Add entries of ‘site’, and judge the model again."

    def test_against_the_majority_by_lots_alone(self):
        # of the first repeat: thirty lots of a and ten of b are all right
        assert binom.sf(39, 40, 30 / 40) < 1e-4
        for answered_from, says in (
            ("all", [f"{AGAINST}100 % against 75 %, p < 0.0001 {LEAVES_OUT}"]),
            ("one", []),
        ):
            made = self.given(answered_from=answered_from)
            check = checked(as_given(made), 0.9, [0.5] * 19)
            assert said(replace(made, beside=Beside(chance=(check,))))[1:] == says


class TestCurve:
    def test_call_reason_and_how_it_goes_on(self):
        made = bare()
        given = as_given(made)
        curves = (a_curve(given, 0.03), a_curve(given, 0.03, of_class="b", without_law=12))
        # ends at 87.5 and 91.25 %
        ahead = "Continued to 50 cases: 81 % (75–88 %). Continued to 80 cases: 84 % (76–91 %)."
        assert said(replace(made, beside=Beside(curves=curves))) == [
            "Learning curve, mean of the classes’ shares right (balanced accuracy) (by the highest "
            f"score): rising. Learning from 40 cases instead of 20 brought 10.0 points. {ahead}",
            "Learning curve, b cases found (sensitivity) (by the highest score): rising. Learning "
            f"from 40 cases instead of 20 brought 10.0 points. {ahead} 12 of 500 resamples that no "
            "curve fits are left out, so the band leans towards a rise.",
        ]
        # without a cut-off there is no other way to answer
        plan = replace(made.plan, cut_off=None)
        assert said(replace(made, plan=plan, beside=Beside(curves=curves[:1]))) == [
            "Learning curve, mean of the classes’ shares right (balanced accuracy): rising. "
            f"Learning from 40 cases instead of 20 brought 10.0 points. {ahead}"
        ]

    def test_without_a_law_it_goes_nowhere(self):
        made = bare()
        curve = a_curve(as_given(made), -0.1, call="cannot tell", reason="So be it.", ahead=())
        assert said(replace(made, beside=Beside(curves=(curve,)))) == [
            "Learning curve, mean of the classes’ shares right (balanced accuracy) (by the highest "
            "score): cannot tell. So be it."
        ]

    def test_a_band_that_is_undefined_is_left_out(self):
        made = bare()
        curve = a_curve(
            as_given(made),
            0.03,
            ahead=(Prediction(1200, 0.8125, NAN, NAN),),
            gain=Gain(0.1, Interval(0.03, 0.2, 0.9, "percentile"), 0),
        )
        assert said(replace(made, beside=Beside(curves=(curve,))))[0].endswith(
            " Continued to 1,200 cases: 81 %."
        )

    def test_tenths_of_a_percent_from_200_judged_on_not_from_200_learned_from(self):
        made = at_floor(0, of_class=100, others=150, rule=FLOOR)
        given = as_given(made)
        curves = (a_curve(given, 0.03), a_curve(given, 0.03, of_class="b"))
        every, of_b = said(replace(made, beside=Beside(curves=curves)))
        assert "Continued to 50 cases: 81.2 % (75.0–87.5 %)." in every
        assert "Continued to 50 cases: 81 % (75–88 %)." in of_b

    def test_of_the_candidate_of_the_answer(self):
        made = bare()
        curve = a_curve(as_given(made), 0.03)
        other = replace(curve, part=replace(curve.part, candidate="lda"))
        assert said(replace(made, beside=Beside(curves=(other,)))) == []


def kept(found: Evaluation, sites: Sequence[str]) -> Evaluation:
    """The same, these sites kept together by the headline's scheme and by the learning curve."""
    table = replace(found.table, entries={"site": tuple(sites)})
    scheme = choose(SCHEMES, "cross_validation", folds=2, keep="site")
    curve = choose(ALL_SCHEMES, "learning_curve", keep="site")
    plan = replace(found.plan, schemes=(scheme,), curve=curve)
    judged = tuple(
        replace(part, units=clusters(table, plan, part.scheme, counted_by=part.counted_by))
        for part in found.judged
    )
    return replace(found, table=table, plan=plan, judged=judged)


class TestChance:
    # of the first repeat: four of four right, three of them a, so (3/4)^4 = 81/256
    ALL_RIGHT = f"{AGAINST}100 % against 75 %, p = 0.3164 {LEAVES_OUT}"

    @pytest.mark.parametrize(
        ("as_good", "tables", "rounds", "says"),
        [
            # (k + 1)/(m + 1)
            (0, 199, 20, "in 0 of 199 tables: p = 0.0050 (20 rounds each,"),
            (10, 199, 25, "in 10 of 199 tables: p = 0.0550 (25 rounds each,"),
            (0, 9999, 1, "in 0 of 9,999 tables: p = 0.0001 (1 round each,"),
            (1499, 1999, 1500, "in 1,499 of 1,999 tables: p = 0.7500 (1,500 rounds each,"),
        ],
    )
    def test_of_the_candidate_of_the_answer(self, as_good, tables, rounds, says):
        made = bare(measure="balanced_accuracy")
        figures = [0.9] * as_good + [0.5] * (tables - as_good)
        check = checked(as_given(made), 0.9, figures, rounds=rounds)
        assert said(replace(made, beside=Beside(chance=(check,)))) == [
            "Chance check, by the highest score: with labels permuted, naive Bayes did at least as "
            f"well by balanced accuracy {says} whole pipeline repeated).",
            self.ALL_RIGHT,
        ]

    def test_of_the_best_of_all_whoever_that_is(self):
        made = bare(measure="auc")
        given = as_given(made)
        checks = (
            checked(given, 0.9, [0.5] * 4, candidate="lda"),
            checked(given, 0.9, [0.5] * 4, candidate="lda", best=True),
        )
        assert said(replace(made, beside=Beside(chance=checks))) == [
            "Chance check, by the highest score: with labels permuted, the best of all candidates, "
            "chosen anew on each, did at least as well by AUC in 0 of 4 tables: p = 0.2000 (20 "
            "rounds each, whole pipeline repeated).",
            self.ALL_RIGHT,
        ]

    @pytest.mark.parametrize(
        ("sites", "trades", "against"),
        [
            # six of a, then two of b: sites of one class, of both, and of one case each
            ("ppqqrrss", " between what is kept together", False),
            (
                "ppqqrsrs",
                " within what is kept together, so what that alone tells counts as chance",
                False,
            ),
            ("pqrstuvw", "", True),
        ],
    )
    def test_what_trades_labels(self, sites, trades, against):
        made = kept(bare(), sites)
        given = as_given(made)
        checks = (checked(given, 0.9, [0.5] * 19), checked(given, 0.9, [0.5] * 19, best=True))
        one, best, *rest = said(replace(made, beside=Beside(chance=checks)))
        begin = f"Chance check, by the highest score: with labels permuted{trades}, "
        assert one.startswith(f"{begin}naive Bayes did at least as well by accuracy in 0 of 19 ")
        assert best.startswith(f"{begin}the best of all candidates, chosen anew on each, did at ")
        # cases of a site are no independent trials
        assert rest == ([self.ALL_RIGHT] if against else [])

    def test_a_candidate_that_looks_at_nothing_is_held_against_nothing(self):
        made = bare()
        check = checked(as_given(made), 0.9, [0.5] * 19, best=True)
        majority = choose(CANDIDATES, "majority")
        plan = replace(
            made.plan, candidates=(majority, *made.plan.candidates), about="majority", cut_off=None
        )
        assert len(said(replace(made, plan=plan, beside=Beside(chance=(check,))))) == 1

    @pytest.mark.parametrize(
        ("repeat", "n", "digits"), [([0, 0], 250, 1), ([0, 1], 125, 0)], ids=["all", "half"]
    )
    def test_tenths_of_a_percent_from_200_answered_once(self, repeat, n, digits):
        """150 of a; two of b in five are called a. Where a repeat is one half, only that counts."""
        labels = [0] * 150 + [1] * 100
        score = np.where(labels, 0.75, 0.25)
        score[150:190] = 0.25
        out = np.array([np.arange(250) % 2 == half for half in (0, 1)])
        held = (np.where(out, score, NAN), np.full((2, 250), NAN), np.full(250, NAN))
        made = scored({"naive_bayes": held}, labels, None, repeat=repeat)
        check = checked(as_given(made), 0.9, [0.5] * 19)
        right, most = n * 210 // 250, n * 150 // 250
        assert binom.sf(right - 1, n, most / n) < 1e-6  # so it is no 0.0000
        assert said(replace(made, beside=Beside(chance=(check,))))[1] == (
            f"{AGAINST}{84:.{digits}f} % against {60:.{digits}f} %, p < 0.0001 {LEAVES_OUT}"
        )


@pytest.mark.parametrize(
    "name",
    [
        "evalcore/beside_answer",
        "evalcore/checks_cut_off",
        "evalcore/checks_learned",
        "app/pages/results",
        "app/pages/settings",
    ],
)
def test_no_number_is_formatted_outside_of_wording(name):
    tree = ast.parse((ROOT / f"{name}.py").read_text(encoding="utf-8"))
    filled = [node for node in ast.walk(tree) if isinstance(node, ast.FormattedValue)]
    assert filled
    assert [ast.unparse(node) for node in filled if node.format_spec] == []
    called = {ast.unparse(node.func) for node in ast.walk(tree) if isinstance(node, ast.Call)}
    assert not called & {"round", "format", "np.round"}
