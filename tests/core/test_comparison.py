"""Paired differences on the same rounds, and the calls of a family of them."""

import itertools
import math

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from statsmodels.stats.multitest import multipletests
from statsmodels.stats.proportion import proportion_confint

from evalcore.comparison import call, compare
from evalcore.paired_difference import paired_difference, unseen_share
from evalcore.rounds import Rounds

from .checks import exactly


def once(n: int, folds: int = 2) -> Rounds:
    """Each case held out once: nothing is known of the model's variance."""
    out = (np.arange(n) % folds == np.arange(folds)[:, None]).astype(np.uint8)
    return Rounds(1 - out, out, np.zeros(folds, dtype=np.intp))


def by_case(right, rounds: Rounds) -> np.ndarray:
    """Answers that are the same whenever a case is held out."""
    return np.asarray(right, dtype=bool)[rounds.pairs[1]]


def repeated(seed: int, n: int = 15, folds: int = 3, repeats: int = 4) -> Rounds:
    rng = np.random.default_rng(seed)
    fold = np.concatenate([rng.permutation(n) % folds + r * folds for r in range(repeats)])
    out = np.zeros((folds * repeats, n), dtype=np.uint8)
    out[fold, np.tile(np.arange(n), repeats)] = 1
    return Rounds(1 - out, out, np.repeat(np.arange(repeats), folds))


def unstable(rounds: Rounds, seed: int) -> np.ndarray:
    """Models that are good or bad as a whole."""
    rng = np.random.default_rng(seed)
    quality = rng.uniform(0.1, 0.95, rounds.n_rounds)[rounds.pairs[0]]
    return rng.random(len(quality)) < quality


def by_definition(a, b, rounds: Rounds, units=None) -> tuple[np.ndarray, float, float]:
    """Each case's mean difference; tau2 as a sum over pairs of cases in a round; its error."""
    grid = np.full(rounds.test.shape, np.nan)
    grid[rounds.pairs] = a.astype(float) - b.astype(float)
    d = np.nanmean(grid, axis=0)
    sums, numbers = np.zeros(rounds.n_rounds), np.zeros(rounds.n_rounds)
    for r, row in enumerate(grid - d):
        for i, j in itertools.permutations(np.flatnonzero(~np.isnan(row)), 2):
            if units is None or units[i] != units[j]:
                sums[r] += row[i] * row[j]
                numbers[r] += 1
    ratio = sums.sum() / numbers.sum()
    k = (~np.isnan(grid)).sum(axis=0).mean()
    # a ratio of sums over rounds: its influence in each round, squared and added up
    influence = (sums - ratio * numbers) / numbers.sum()
    return d, max(0.0, ratio) * k / (k - 1), math.sqrt((influence**2).sum()) * k / (k - 1)


class TestPairedDifference:
    @pytest.mark.parametrize("level", [0.8, 0.95, 0.99])
    def test_against_scipy_where_each_case_is_held_out_once(self, level):
        rounds = once(23)
        rng = np.random.default_rng(1)
        a, b = rng.random(23) < 0.8, rng.random(23) < 0.5
        found = paired_difference(by_case(a, rounds), by_case(b, rounds), rounds, level=level)
        theirs = stats.ttest_rel(a.astype(float), b.astype(float))
        ends = theirs.confidence_interval(level)
        assert (found.p, found.df, found.n) == (
            pytest.approx(theirs.pvalue, rel=1e-12),
            theirs.df,
            23,
        )
        assert (found.interval.low, found.interval.high) == pytest.approx(tuple(ends), rel=1e-12)
        assert found.interval.level == level

    @pytest.mark.parametrize("seed", [0, 2, 3, 4])
    def test_by_definition(self, seed):
        rounds = repeated(seed)
        a, b = unstable(rounds, 10 + seed), unstable(rounds, 20 + seed)
        d, tau2, its_error = by_definition(a, b, rounds)
        assert min(tau2, its_error) > 0.001
        error = math.sqrt(stats.sem(d) ** 2 + tau2 + its_error)
        found = paired_difference(a, b, rounds)
        assert (found.value, found.standard_error) == pytest.approx((d.mean(), error), rel=1e-12)
        p = 2 * stats.t.sf(abs(d.mean()) / error, len(d) - 1)
        ends = stats.t.interval(0.95, len(d) - 1, d.mean(), error)
        assert found.p == pytest.approx(p, rel=1e-12)
        assert (found.interval.low, found.interval.high) == pytest.approx(
            (max(-1, ends[0]), min(1, ends[1])), rel=1e-12
        )

    def test_by_hand(self):
        # folds {1, 2}, {3, 4} twice; the first right in folds 1 and 4, the second never:
        # every case differs by 1/2, tau2 = 1/2 (see test_model_variance), in each round alike
        out = np.array([[1, 1, 0, 0], [0, 0, 1, 1]] * 2, dtype=np.uint8)
        rounds = Rounds(1 - out, out, np.array([0, 0, 1, 1]))
        found = paired_difference([1, 1, 0, 0, 0, 0, 1, 1], [0] * 8, rounds)
        assert (found.value, found.df) == (0.5, 3)
        assert found.standard_error == pytest.approx(math.sqrt(1 / 2), rel=1e-15)
        # Student's t on 3 degrees of freedom in closed form
        u = math.sqrt(1 / 2) / math.sqrt(3)
        assert found.p == pytest.approx(
            1 - 2 / math.pi * (math.atan(u) + u / (1 + u * u)), rel=1e-12
        )
        assert (found.only_first, found.only_second, found.left_out) == (2, 0, 0)

    @pytest.mark.parametrize("seed", range(4))
    def test_rows_of_units(self, seed):
        units = np.array([0, 0, 0, 1, 1, 2, 3, 3, 3, 3, 4, 5, 5, 6])
        rounds = repeated(seed, n=7).of_cases(units)
        a, b = unstable(rounds, 30 + seed), unstable(rounds, 40 + seed)
        d, tau2, its_error = by_definition(a, b, rounds, units)
        fit = sm.OLS(d, np.ones(14)).fit(cov_type="cluster", cov_kwds={"groups": units})
        variance = max(fit.cov_params()[0, 0], stats.sem(d) ** 2) + tau2 + its_error
        found = paired_difference(a, b, rounds, units=units)
        assert found.standard_error == pytest.approx(math.sqrt(variance), rel=1e-12)
        assert (found.df, found.n) == (6, 14)

    def test_each_case_its_own_unit_changes_nothing(self):
        rounds = repeated(3)
        a, b = unstable(rounds, 1), unstable(rounds, 2)
        assert paired_difference(a, b, rounds, units=np.arange(15)) == paired_difference(
            a, b, rounds
        )

    @given(st.integers(0, 10_000))
    def test_order_of_candidates(self, seed):
        rounds = repeated(seed, n=8, folds=2, repeats=2)
        a, b = unstable(rounds, seed), unstable(rounds, seed + 1)
        there, back = paired_difference(a, b, rounds), paired_difference(b, a, rounds)
        assert (there.value, there.p, there.only_first) == (-back.value, back.p, back.only_second)
        assert there.interval.low == pytest.approx(-back.interval.high, rel=1e-15)

    @given(st.integers(0, 10_000), st.sampled_from([0.7, 0.9, 0.95]), st.integers(2, 12))
    def test_p_says_what_the_interval_says(self, seed, level, n):
        rng = np.random.default_rng(seed)
        rounds = once(n)
        a, b = rng.random(n) < 0.9, rng.random(n) < 0.2
        found = paired_difference(by_case(a, rounds), by_case(b, rounds), rounds, level=level)
        excluded = found.interval.low > 0 or found.interval.high < 0
        assert excluded == (found.p < 1 - level)

    @given(st.integers(0, 10_000), st.integers(2, 9))
    def test_a_higher_level_never_narrows(self, seed, n):
        rng = np.random.default_rng(seed)
        rounds = once(n)
        found = paired_difference(
            by_case(rng.random(n) < 0.7, rounds), by_case(rng.random(n) < 0.4, rounds), rounds
        )
        widths = [found.at(level).width for level in (0.5, 0.8, 0.95, 0.999)]
        assert widths == sorted(widths)

    def test_one_answer_per_case_from_the_first_repeat(self):
        # case 0 is in the first bag: no answer of the first repeat counts for it
        rounds = Rounds.of_bags([[2, 0, 0, 0], [0, 2, 1, 1], [1, 0, 1, 1]])
        assert rounds.pairs[1].tolist() == [1, 2, 3, 0, 1]
        found = paired_difference([1, 1, 0, 1, 0], [0, 0, 1, 0, 1], rounds)
        assert (found.only_first, found.only_second, found.left_out, found.n) == (2, 1, 1, 4)
        # cases: +1, (1 - 1)/2, +1, -1
        assert found.value == pytest.approx(1 / 4, rel=1e-15)

    def test_a_case_never_held_out_is_left_out(self):
        rounds = Rounds.of_bags([[2, 0, 1, 0, 0], [1, 1, 0, 0, 3]])
        a, b = np.array([1, 1, 1, 1, 0], bool), np.array([1, 0, 1, 0, 0], bool)
        found = paired_difference(a, b, rounds)
        assert rounds.pairs[1].tolist() == [1, 3, 4, 2, 3]
        # case 1: 0; case 2: 1; case 3: (1 + 0)/2; case 4: 0
        assert (found.n, found.left_out) == (4, 2)
        assert found.value == pytest.approx(3 / 8, rel=1e-15)

    def test_what_does_not_fit(self):
        message = (
            "Both candidates need one answer for each of the 4 held-out cases; got (4,) and (3,)."
        )
        with pytest.raises(ValueError, match=exactly(message)):
            paired_difference([1, 0, 1, 1], [1, 0, 1], once(4))


class TestWithoutSpread:
    """All cases differ alike: no t, but not certainty either."""

    @pytest.mark.parametrize("n", [2, 6, 40])
    def test_one_always_right_and_one_never(self, n):
        rounds = once(n)
        found = paired_difference([1] * n, [0] * n, rounds)
        assert found.p == pytest.approx(stats.binomtest(n, n).pvalue, rel=1e-12)
        low = proportion_confint(n, n, method="beta")[0]
        assert (found.interval.low, found.interval.high) == pytest.approx(
            (2 * low - 1, 1), rel=1e-12
        )

    @pytest.mark.parametrize("n", [2, 6, 40])
    def test_no_difference_at_all(self, n):
        found = paired_difference([1] * n, [1] * n, once(n))
        high = proportion_confint(0, n, method="beta")[1]
        assert (found.value, found.p) == (0.0, 1.0)
        assert (found.interval.low, found.interval.high) == pytest.approx((-high, high), rel=1e-12)

    def test_half_throughout(self):
        # both cases once right, once not; each round has one case, so no pairs and no tau2
        out = np.array([[1, 0], [0, 1]] * 2, dtype=np.uint8)
        rounds = Rounds(1 - out, out, np.array([0, 0, 1, 1]))
        found = paired_difference([1, 1, 0, 0], [0, 0, 0, 0], rounds, level=0.5)
        # u = 1 - sqrt(1/4) = 1/2: from 1/2 - 1/2 x 3/2 to 1/2 + 1/2 x 1/2; p = 2 (2/3)^2
        assert (found.interval.low, found.interval.high) == pytest.approx(
            (-1 / 4, 3 / 4), rel=1e-12
        )
        assert found.p == pytest.approx(8 / 9, rel=1e-12)

    def test_a_single_unit_says_nothing(self):
        rounds = once(2)
        found = paired_difference([1, 1], [0, 1], rounds, units=np.array([0, 0]))
        assert math.isnan(found.p)
        assert not found.interval.defined
        assert found.value == 0.5

    def test_nothing_held_out(self):
        rounds = Rounds.of_bags([[1, 1, 1]])
        found = paired_difference([], [], rounds)
        assert math.isnan(found.value)
        assert (found.n, found.left_out, found.interval.defined) == (0, 3, False)

    @given(st.floats(-1, 1), st.integers(1, 300))
    def test_unseen_units_go_no_further_than_all_the_way(self, value, groups):
        low, high = unseen_share(value, groups, 0.95)
        assert -1 - 1e-12 <= low <= value <= high <= 1 + 1e-12
        mirrored = unseen_share(-value, groups, 0.95)
        assert (-high, -low) == pytest.approx(mirrored, abs=1e-15)


@pytest.mark.parametrize(
    ("low", "high", "answer"),
    [
        (0.001, 0.4, "better"),
        (-0.4, -0.001, "worse"),
        (0.0, 0.4, "cannot tell"),
        (-0.4, 0.0, "cannot tell"),
        (-0.03, 0.01, "cannot tell"),
        (-0.02, 0.02, "practically equal"),
        (0.001, 0.019, "practically equal"),
        (-0.019, -0.001, "practically equal"),
        (0.001, 0.021, "better"),
        (-0.021, -0.001, "worse"),
        (math.nan, math.nan, "cannot tell"),
    ],
)
def test_four_answers(low, high, answer):
    assert call(low, high) == answer


def test_another_limit():
    assert call(-0.04, 0.04, delta=0.05) == "practically equal"
    assert call(0.001, 0.01, delta=0.0) == "better"


@pytest.mark.parametrize("delta", [-0.1, math.nan])
def test_limit_below_0(delta):
    with pytest.raises(ValueError, match="`delta` must be 0 or more"):
        call(0.0, 0.1, delta=delta)


def with_differences(n: int, **extra: tuple[int, int]):
    """Candidates that differ from a base: cases gained and cases lost."""
    rounds = once(n)
    base = np.arange(n) % 2 == 0
    right = {"base": base}
    for name, (gained, lost) in extra.items():
        own = base.copy()
        own[np.flatnonzero(~base)[:gained]] = True
        own[np.flatnonzero(base)[:lost]] = False
        right[name] = own
    return list(right), {name: by_case(r, rounds) for name, r in right.items()}, rounds


class TestCompare:
    def family(self, seed, n_candidates=4, **kind):
        rounds = repeated(seed, n=40, folds=4)
        rng = np.random.default_rng(seed)
        names = list("abcdefgh")[:n_candidates]
        correct = {name: rng.random(len(rounds.pairs[0])) < rng.uniform(0.2, 0.9) for name in names}
        return compare(names, correct, rounds, **kind), correct, rounds

    @pytest.mark.parametrize("seed", range(20))
    @pytest.mark.parametrize("about", ["", "c"])
    def test_family(self, seed, about):
        found, correct, rounds = self.family(seed, about=about)
        alone = [paired_difference(correct[d.first], correct[d.second], rounds) for d in found]
        assert [d.p for d in found] == [one.p for one in alone]
        rejected, adjusted, _, _ = multipletests([d.p for d in found], 0.05, method="holm")
        assert [d.p_adjusted for d in found] == pytest.approx(adjusted.tolist(), rel=1e-12)
        for d, one, no_chance in zip(found, alone, rejected, strict=True):
            assert (d.interval.low > 0 or d.interval.high < 0) == no_chance
            assert (d.call in ("better", "worse")) == no_chance
            assert (
                d.value
                == one.value
                == pytest.approx(np.mean(correct[d.first]) - np.mean(correct[d.second]), abs=1e-12)
            )
            # the end towards 0 is that of the difference alone, at the level shown
            plain = one.at(d.interval.level)
            if no_chance:
                near = (d.interval.low, plain.low) if d.value > 0 else (d.interval.high, plain.high)
                assert near[0] == near[1]

    def test_both_answers_occur_among_these_families(self):
        calls = {d.call for seed in range(20) for d in self.family(seed)[0]}
        assert calls == {"better", "worse", "cannot tell"}

    def test_which_pairs(self):
        found, _, _ = self.family(1, n_candidates=3)
        assert [(d.first, d.second) for d in found] == [("a", "b"), ("a", "c"), ("b", "c")]
        found, _, _ = self.family(1, n_candidates=3, about="b")
        assert [(d.first, d.second) for d in found] == [("b", "a"), ("b", "c")]

    def test_levels_by_the_step(self):
        names, correct, rounds = with_differences(60, strong=(25, 0), weak=(9, 2), alike=(2, 2))
        found = compare(names, correct, rounds, about="base")
        strong, weak, alike = found
        assert strong.p < 0.05 / 3
        assert 0.025 < weak.p < 0.05 < alike.p
        assert [d.interval.level for d in found] == pytest.approx([1 - 0.05 / 3] * 3, rel=1e-12)
        assert [d.call for d in found] == ["worse", "cannot tell", "cannot tell"]
        # without the third the second is the last step, at 95 %
        found = compare(names[:3], correct, rounds, about="base")
        assert [d.interval.level for d in found] == pytest.approx([0.975, 0.95], rel=1e-12)
        assert [d.call for d in found] == ["worse", "worse"]
        assert [d.only_second - d.only_first for d in found] == [25, 7]
        assert [round(d.value * 60) for d in found] == [-25, -7]

    def test_a_step_that_fails_stops_all_later_ones(self):
        # the smallest p fails at 0.025, so that the second may not pass at 0.05 either
        names, correct, rounds = with_differences(60, one=(9, 2), two=(9, 2))
        found = compare(names, correct, rounds, about="base")
        assert all(0.025 < d.p < 0.05 < d.p_adjusted for d in found)
        assert [d.interval.level for d in found] == pytest.approx([0.975, 0.975], rel=1e-12)
        assert [d.call for d in found] == ["cannot tell", "cannot tell"]

    @pytest.mark.parametrize(("n", "answer"), [(182, "cannot tell"), (183, "practically equal")])
    def test_how_many_cases_equality_takes(self, n, answer):
        # 1 - 0.025^(1/183) = 0.01996 and 1 - 0.025^(1/182) = 0.02007
        names, correct, rounds = with_differences(n, same=(0, 0))
        (found,) = compare(names, correct, rounds)
        assert found.call == answer
        assert found.interval.high == pytest.approx(1 - 0.025 ** (1 / n), rel=1e-12)

    def test_few_differences_among_few_cases_are_not_equality(self):
        # differing in a single repeat of a single case: a tiny standard error
        rounds = repeated(5, n=60, repeats=40)
        a = by_case(np.arange(60) % 3 > 0, rounds)
        b = a.copy()
        b[7] = ~b[7]
        plain = paired_difference(a, b, rounds)
        assert call(plain.interval.low, plain.interval.high) == "practically equal"
        (found,) = compare(["a", "b"], {"a": a, "b": b}, rounds)
        assert found.call == "cannot tell"
        assert found.p == plain.p

    def test_a_shorter_step_is_not_used_for_equality(self):
        # a small but steady difference, seen only at the last step, and there within the limit
        n = 3000
        names, correct, rounds = with_differences(n, strong=(900, 0), slight=(50, 30))
        strong, slight = compare(names, correct, rounds, about="base", delta=0.0127)
        assert 0.025 < slight.p < 0.05
        assert (strong.interval.level, slight.interval.level) == pytest.approx((0.975, 0.95))
        assert call(slight.interval.low, slight.interval.high, delta=0.0127) == "practically equal"
        assert slight.call == "worse"
        # with a limit that the interval for all at once keeps, it is
        assert (
            compare(names, correct, rounds, about="base", delta=0.0145)[1].call
            == "practically equal"
        )

    def test_undefined_pairs_do_not_count(self):
        rounds = Rounds.of_bags([[0, 1, 1], [0, 2, 1]])
        found = compare(["a", "b"], {"a": [1, 1], "b": [0, 1]}, rounds)
        assert (found[0].call, found[0].n, math.isnan(found[0].p_adjusted)) == (
            "cannot tell",
            1,
            True,
        )

    @pytest.mark.parametrize("names", [[], ["base"]])
    def test_nothing_to_compare(self, names):
        _, correct, rounds = with_differences(10)
        assert compare(names, correct, rounds) == ()

    def test_unknown_candidate(self):
        names, correct, rounds = with_differences(10, other=(1, 0))
        with pytest.raises(
            ValueError, match=exactly("`about` must be one of base, other; got 'x'.")
        ):
            compare(names, correct, rounds, about="x")
