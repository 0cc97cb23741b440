"""The chance to show a limit: sums over all outcomes, each judged by the bounds themselves."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from evalcore.errors import EvalError
from evalcore.further_cases import (
    MOST,
    Goal,
    Needed,
    cases_for_chance,
    chances_to_show,
    more_cases,
)
from evalcore.intervals import effective_n, wilson, with_model_variance
from evalcore.sample_size import LEAST_UNITS, lower_bound

from .checks import exactly


def by_enumeration(goal, further):
    """Sum of the chances of all numbers right that show the limit, by the bounds of a verdict."""
    total, found = goal.n + further, 0.0
    for right in range(further + 1):
        share = (goal.right + right) / total if total else math.nan
        shows = (
            total >= LEAST_UNITS
            and lower_bound(goal.right + right, total, confidence=goal.confidence) >= goal.least
        )
        if shows and not math.isnan(goal.tau2):
            level = 2 * goal.confidence - 1
            shows = wilson(share, goal.counted(total), level=level).low >= goal.least
        found += shows * stats.binom.pmf(right, further, goal.rate)
    return found


class TestChance:
    @pytest.mark.parametrize(
        ("rate", "n", "percent"),
        [
            # own calculation of this project, recomputed with scipy.stats.binom here:
            # chance of passing a 90 % limit
            (0.95, 50, 28),
            (0.95, 100, 44),
            (0.95, 150, 66),
            (0.95, 200, 80),
            (0.97, 50, 56),
            (0.97, 100, 82),
            (0.97, 150, 96),
            (0.93, 300, 56),
            # the same for a limit of 90 % on a class of concern
            (0.97, 80, 78),
            (0.97, 120, 93),
        ],
    )
    def test_table(self, rate, n, percent):
        found = chances_to_show(Goal(0.9, rate), [n]).item()
        assert 100 * found == pytest.approx(percent, abs=0.5)
        misses = np.arange(n + 1)
        allowed = misses[stats.binom.cdf(misses, n, 0.1) <= 0.05][-1]
        assert found == pytest.approx(stats.binom.cdf(allowed, n, 1 - rate), abs=1e-12)

    @pytest.mark.parametrize(
        "goal",
        [
            Goal(0.9, 0.97),
            Goal(0.4, 0.5, 0.9),
            Goal(0.8, 1.0, right=20, n=22),
            Goal(0.8, 0.0, right=20, n=20),
            Goal(0.9, 0.96, 0.975, right=36, n=38),
            Goal(0.9, 0.96, 0.975, right=36, n=38, tau2=0.0),
            Goal(0.8, 0.93, right=17, n=20, tau2=0.02**2, share=0.85),
            Goal(0.3, 0.5, tau2=0.03**2),
        ],
    )
    def test_by_enumeration(self, goal):
        sizes = [0, 1, 5, 9, 10, 11, 30, 47, 90, 140]
        expected = [by_enumeration(goal, n) for n in sizes]
        np.testing.assert_allclose(chances_to_show(goal, sizes), expected, rtol=0, atol=1e-12)

    def test_as_a_verdict_where_the_rate_is_the_present_share(self):
        # with the present share as it is, the bound is the one `verdict` takes
        goal = Goal(0.8, 0.9, tau2=0.03**2, share=0.9)
        assert goal.counted(60) == pytest.approx(effective_n(0.9, 60, 0.03**2), rel=1e-12)
        assert goal.ceiling == pytest.approx(
            with_model_variance(0.9, 10**12, 0.03**2, level=0.9).low, abs=1e-6
        )

    def test_saw_tooth(self):
        # at 29 and 46 cases one miss more is allowed
        found = chances_to_show(Goal(0.9, 0.97), [28, 29, 30, 45, 46])
        assert found[0] == 0
        assert found[1] > found[2] > found[3] < found[4]

    @given(st.floats(0.5, 0.97), st.floats(0, 1), st.floats(0, 1), st.integers(0, 200))
    def test_a_better_rate_never_harms(self, least, one, other, n):
        worse, better = sorted((one, other))
        for tau2 in (math.nan, 0.01**2):
            chances = [
                chances_to_show(Goal(least, rate, tau2=tau2), [n]).item()
                for rate in (worse, better)
            ]
            assert chances[0] <= chances[1] + 1e-12

    @given(st.floats(0.5, 0.97), st.floats(0.5, 1), st.floats(0, 0.1), st.floats(0, 0.1))
    def test_model_variance_never_helps(self, least, rate, one, other):
        taus = (math.nan, min(one, other), max(one, other))
        goals = [Goal(least, rate, tau2=tau**2) for tau in taus]
        chances = [chances_to_show(goal, [150]).item() for goal in goals]
        assert chances == sorted(chances, reverse=True)
        assert goals[2].ceiling <= goals[1].ceiling <= goals[0].ceiling == rate

    @pytest.mark.parametrize(
        ("settings", "message"),
        [
            ({"least": 0.0}, "`least` must be between 0 and 1, both excluded; got 0."),
            ({"rate": 1.1}, "`rate` must be between 0 and 1; got 1.1."),
            (
                {"confidence": 1.0},
                "`confidence` must be between 0.5 and 1, both excluded; got 1.",
            ),
            ({"right": 3, "n": 2}, "`right` must be between 0 and the 2 cases; got 3."),
            ({"tau2": -0.1}, "`tau2` must be 0 or more; got -0.1."),
        ],
    )
    def test_refusals(self, settings, message):
        with pytest.raises(EvalError, match=exactly(message)):
            Goal(**({"least": 0.9, "rate": 0.95} | settings))


class TestCasesForChance:
    @pytest.mark.parametrize(("rate", "chance"), [(0.95, 0.8), (0.97, 0.8), (0.97, 0.5), (1, 0.9)])
    def test_by_search(self, rate, chance):
        sizes = np.arange(1, 1500)
        # scipy alone: allowed misses from the quantile, then one step back where it is too many
        allowed = stats.binom.ppf(0.05, sizes, 0.1)
        allowed -= stats.binom.cdf(allowed, sizes, 0.1) > 0.05
        enough = (allowed >= 0) & (stats.binom.cdf(allowed, sizes, 1 - rate) >= chance)
        found = cases_for_chance(Goal(0.9, rate), chance=chance)
        assert found.first == sizes[enough][0]
        assert found.cases == sizes[~enough][-1] + 1

    def test_certain_success(self):
        # every answer right: 29 cases show 90 %, and no number from there fails to
        assert cases_for_chance(Goal(0.9, 1.0)) == Needed(29, 29, "reached")

    def test_fewer_than_ten_units_show_nothing(self):
        assert cases_for_chance(Goal(0.5, 1.0)) == Needed(10, 10, "reached")

    @pytest.mark.parametrize("rate", [0.0, 0.5, 0.9])
    def test_never_at_or_below_the_limit(self, rate):
        assert cases_for_chance(Goal(0.9, rate)) == Needed(None, None, "never")
        assert chances_to_show(Goal(0.9, rate), np.arange(3000)).max() <= 0.05 + 1e-12

    @given(st.floats(0.55, 0.95), st.floats(0, 0.15), st.floats(0.5, 1), st.floats(0.01, 0.1))
    def test_never_within_the_models_own_spread(self, least, gain, share, tau):
        # rate - z tau < limit: no number of cases brings the bound up to the limit
        rate = min(1.0, least + gain)
        goal = Goal(least, rate, tau2=tau**2, share=share)
        z = stats.norm.ppf(0.95)
        if rate - z * tau < least:
            assert cases_for_chance(goal).outcome == "never"
        if goal.ceiling <= least:
            assert chances_to_show(goal, [10**4, 10**5]).max() < 0.8

    def test_too_many(self):
        assert cases_for_chance(Goal(0.9, 0.905)) == Needed(None, None, "too many")
        assert chances_to_show(Goal(0.9, 0.905), [MOST]).item() < 0.8

    def test_a_lead_that_is_used_up(self):
        # 100 of 100 show 90 % at once; further cases at 93 % take the lead back for a while
        goal = Goal(0.9, 0.93, right=100, n=100)
        found = cases_for_chance(goal, chance=0.97)
        assert found.first == 0
        assert found.cases > 100
        assert chances_to_show(goal, [found.cases - 1, found.cases]).tolist() == sorted(
            chances_to_show(goal, [found.cases - 1, found.cases]).tolist()
        )
        assert chances_to_show(goal, [found.cases - 1]).item() < 0.97

    def test_refusal(self):
        with pytest.raises(
            EvalError,
            match=exactly("`chance` must be between 0 and 1, both excluded; got 1."),
        ):
            cases_for_chance(Goal(0.9, 0.95), chance=1)


RATES = {"cautious": 0.9, "present": 36 / 38, "hopeful": 0.97}


class TestMoreCases:
    def test_each_rate_alone_and_together(self):
        found = more_cases(36.4, 38, least=0.9, rates=RATES)
        assert [(row.name, row.rate) for row in found] == list(RATES.items())
        assert found[0].alone.outcome == found[0].together.outcome == "never"
        for row in found[1:]:
            assert row.alone == cases_for_chance(Goal(0.9, row.rate, tau2=0.0))
            # two looks share the error of 5 %; right answers are whole
            together = Goal(0.9, row.rate, 0.975, 36, 38, 0.0)
            assert row.together == cases_for_chance(together)
            n = row.together.cases
            assert by_enumeration(together, n) >= 0.8 > by_enumeration(together, n - 1)

    def test_looks_cost_cases(self):
        needed = [
            more_cases(36, 38, least=0.9, rates={"a": 0.97}, looks=looks)[0] for looks in (1, 2, 5)
        ]
        sizes = [row.together.cases for row in needed]
        assert sizes == sorted(set(sizes))
        assert len({row.alone for row in needed}) == 1

    def test_model_variance(self):
        plain, varied, wild = (
            more_cases(36, 38, least=0.9, rates={"a": 0.97}, tau2=tau2)[0]
            for tau2 in (math.nan, 0.01**2, 0.08**2)
        )
        assert plain.together.cases < varied.together.cases
        assert wild.alone.outcome == wild.together.outcome == "never"

    @pytest.mark.parametrize(
        ("right", "n", "looks", "message"),
        [
            (5, 4, 2, "`right` must be between 0 and `n`, `n` at least 1; got 5 of 4."),
            (0, 0, 2, "`right` must be between 0 and `n`, `n` at least 1; got 0 of 0."),
            (3, 4, 0, "`looks` must be 1 or more; got 0."),
        ],
    )
    def test_refusals(self, right, n, looks, message):
        with pytest.raises(EvalError, match=exactly(message)):
            more_cases(right, n, least=0.9, rates=RATES, looks=looks)
