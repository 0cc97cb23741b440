"""What is known about bootstrap bags beforehand, as formulas and in the bags that are drawn.

Drawn figures may differ from the exact ones by four Monte-Carlo standard errors; seeds are fixed.
"""

import math
from collections import Counter
from fractions import Fraction
from itertools import product

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from evalcore.bag_facts import (
    distinct_pmf,
    expected_distinct_share,
    never_drawn,
    never_out_of_bag,
    sd_shrink,
    stratified_distinct_share,
)
from evalcore.draws import bootstrap, subsample
from evalcore.estimates import WEIGHT_IN, WEIGHT_OUT
from evalcore.groups import groups_of
from evalcore.rounds import Rounds

from .checks import cases, table_of


def drawn(class_sizes: list[int], rounds: int, seed: int = 1) -> Rounds:
    """Bags of the bootstrap scheme, class by class; one size alone is drawn as a whole."""
    stratified = len(class_sizes) > 1
    # a table needs two classes; drawn as a whole, it does not matter which case is of which
    sizes = class_sizes if stratified else [class_sizes[0] - 1, 1]
    table = table_of(np.repeat(np.arange(len(sizes)), sizes).tolist())
    settings = {"rounds": rounds, "stratified": stratified}
    return bootstrap(table, groups_of(table), settings, rng=np.random.default_rng(seed))


def within_error(values: np.ndarray, exact: float) -> None:
    """The mean of independent values lies within four standard errors of the exact one."""
    error = values.std(ddof=1) / math.sqrt(len(values))
    assert error > 0
    assert abs(values.mean() - exact) < 4 * error


@pytest.mark.parametrize("case", cases("01", "bootfact"))
class TestOneBag:
    def test_formulas(self, case):
        n, expected, exact = case["inputs"]["n"], case["expected"], case["tolerance"]
        share = expected_distinct_share(n)
        assert never_drawn(n) == pytest.approx(expected["p_never_drawn"], rel=0, abs=exact)
        assert share == pytest.approx(expected["p_drawn"], rel=0, abs=exact)
        assert share == pytest.approx(expected["expected_distinct_fraction"], rel=0, abs=exact)
        assert n * share == pytest.approx(expected["expected_distinct"], rel=0, abs=n * exact)
        assert sd_shrink(n) == pytest.approx(expected["sd_shrink"], rel=0, abs=exact)
        assert sd_shrink(n) ** 2 == pytest.approx(expected["var_shrink"], rel=0, abs=exact)

    def test_bags_hold_that_share(self, case):
        rounds = drawn([case["inputs"]["n"]], 3000)
        within_error(rounds.distinct_share, case["expected"]["expected_distinct_fraction"])

    def test_bags_leave_out_the_rest(self, case):
        rounds = drawn([case["inputs"]["n"]], 3000, seed=2)
        left_out = rounds.test_sizes / rounds.n_cases
        within_error(left_out, case["expected"]["p_never_drawn"])
        assert_allclose(left_out + rounds.distinct_share, 1, rtol=0, atol=1e-15)


@pytest.mark.parametrize("case", cases("01", "const"))
def test_large_bags_tend_to_one_minus_one_over_e(case):
    expected, n = case["expected"], 10**5
    # (1 - 1/n)^n = (1/e)(1 - 1/(2n) + ...): the distance itself is known
    assert expected["p_never_drawn"] - never_drawn(n) == pytest.approx(
        expected["p_never_drawn"] / (2 * n), rel=1e-4
    )
    share = expected_distinct_share(n)
    assert share == pytest.approx(expected["expected_distinct_fraction"], rel=0, abs=1 / n)
    assert round(expected["expected_distinct_fraction"], 3) == WEIGHT_OUT
    assert round(expected["p_never_drawn"], 3) == WEIGHT_IN
    assert math.exp(-1) == pytest.approx(expected["p_never_drawn"], rel=0, abs=case["tolerance"])


@pytest.mark.parametrize("case", cases("01", "distinct"))
class TestDistinctCases:
    def test_distribution(self, case):
        n, expected, exact = case["inputs"]["n"], case["expected"], case["tolerance"]
        pmf = distinct_pmf(n)
        assert_allclose(pmf, expected["pmf"], rtol=0, atol=exact)
        mean = pmf @ np.arange(n + 1)
        sd = math.sqrt(pmf @ (np.arange(n + 1) - mean) ** 2)
        assert mean == pytest.approx(expected["mean"], rel=0, abs=exact)
        assert sd == pytest.approx(expected["sd"], rel=0, abs=exact)
        assert pmf[n] == pytest.approx(expected["prob_no_oob_case"], rel=0, abs=exact)

    def test_bags_follow_it(self, case):
        n, rounds = case["inputs"]["n"], 8000
        distinct = (drawn([n], rounds, seed=3).train > 0).sum(axis=1)
        for number, chance in enumerate(case["expected"]["pmf"]):
            error = math.sqrt(chance * (1 - chance) / rounds)
            assert abs((distinct == number).mean() - chance) <= 4 * error


def test_distinct_cases_by_writing_out_every_bag():
    # all 4^4 = 256 bags of four cases
    seen = Counter(len(set(bag)) for bag in product(range(4), repeat=4))
    assert_allclose(distinct_pmf(4), [seen[d] / 256 for d in range(5)], rtol=0, atol=1e-15)


@pytest.mark.parametrize("n", [2, 7, 23, 60])
def test_distinct_cases_agree_with_the_expected_share(n):
    pmf = distinct_pmf(n)
    assert pmf.sum() == pytest.approx(1, rel=0, abs=1e-12)
    assert pmf @ np.arange(n + 1) / n == pytest.approx(expected_distinct_share(n), abs=1e-12)
    assert pmf[n] == pytest.approx(math.factorial(n) / n**n, rel=1e-12)


@pytest.mark.parametrize("case", cases("01", "bootfact_strat"))
class TestStratifiedBags:
    def test_formulas(self, case):
        sizes, expected, exact = case["inputs"]["class_sizes"], case["expected"], case["tolerance"]
        missed = [never_drawn(size) for size in sizes]
        assert_allclose(missed, expected["p_never_drawn"], rtol=0, atol=exact)
        share, n = stratified_distinct_share(sizes), sum(sizes)
        assert share == pytest.approx(expected["expected_distinct_fraction"], rel=0, abs=exact)
        assert n * (1 - share) == pytest.approx(expected["expected_oob_total"], abs=n * exact)

    def test_bags_class_by_class(self, case):
        sizes, expected = case["inputs"]["class_sizes"], case["expected"]
        rounds = drawn(sizes, 3000, seed=4)
        within_error(rounds.distinct_share, expected["expected_distinct_fraction"])
        within_error(rounds.test_sizes.astype(float), expected["expected_oob_total"])
        parts = np.split(rounds.test, np.cumsum(sizes)[:-1], axis=1)
        for part, missed in zip(parts, expected["p_never_drawn"], strict=True):
            within_error(part.mean(axis=1), missed)

    def test_every_bag_keeps_every_class_at_its_size(self, case):
        sizes = case["inputs"]["class_sizes"]
        bags = np.split(drawn(sizes, 200, seed=5).train, np.cumsum(sizes)[:-1], axis=1)
        for bag, size in zip(bags, sizes, strict=True):
            assert (bag.sum(axis=1) == size).all()


@pytest.mark.parametrize("case", cases("01", "never_oob"))
def test_never_out_of_bag(case):
    n, expected = case["inputs"]["n"], case["expected"]
    chances = [never_out_of_bag(n, rounds) for rounds in case["inputs"]["B"]]
    assert_allclose(chances, expected["p_case"], rtol=1e-12)
    assert_allclose(n * np.array(chances), expected["expected_cases"], rtol=1e-12)


def test_never_out_of_bag_as_drawn():
    n, bags, evaluations = 30, 4, 1500
    rounds = drawn([n], bags * evaluations, seed=6)
    times_out = rounds.test.reshape(evaluations, bags, n).sum(axis=1)
    within_error((times_out == 0).mean(axis=1), never_out_of_bag(n, bags))


class TestWhatTheTradeSays:
    @pytest.mark.parametrize("n", [5, 12, 40, 180, 3000])
    def test_about_two_thirds_in_and_one_third_out(self, n):
        assert abs(expected_distinct_share(n) - 2 / 3) < 0.036
        assert abs(never_drawn(n) - 1 / 3) < 0.036

    def test_the_share_falls_with_n_and_stays_above_its_limit(self):
        shares = [expected_distinct_share(n) for n in (2, 3, 5, 10, 50, 1000)]
        assert shares == sorted(shares, reverse=True)
        assert min(shares) > 1 - 1 / math.e

    def test_small_classes_leave_fewer_out(self):
        # 0.2963, 0.3520 and 0.3626 of the classes of 3, 12 and 35: below 0.3642 of one bag of 50
        assert stratified_distinct_share([3, 12, 35]) > expected_distinct_share(50)

    def test_unstratified_bags_miss_a_rare_class_as_the_binomial_says(self):
        n, rare, rounds = 40, 2, 4000
        bags = drawn([n], rounds, seed=7).train
        chance = stats.binom.pmf(0, n, rare / n)
        missed = (bags[:, :rare].sum(axis=1) == 0).astype(float)
        assert chance == pytest.approx(0.12851, abs=5e-6)
        within_error(missed, chance)

    def test_unstratified_bags_hold_all_of_a_rare_class_as_counting_says(self):
        n, rare, rounds = 40, 3, 4000
        out = drawn([n], rounds, seed=8).test
        # inclusion and exclusion over the cases that are out
        chance = sum((-1) ** j * math.comb(rare, j) * (1 - j / n) ** n for j in range(rare + 1))
        within_error((out[:, :rare].sum(axis=1) == 0).astype(float), chance)

    def test_unstratified_parts_miss_a_rare_class_as_the_hypergeometric_says(self):
        n, rare, rounds = 40, 3, 4000
        table = table_of([0] * rare + [1] * (n - rare))
        settings = {"rounds": rounds, "test_share": 0.3, "stratified": False}
        drawn_parts = subsample(table, groups_of(table), settings, rng=np.random.default_rng(9))
        chance = stats.hypergeom.pmf(0, n, rare, 12)
        missed = (drawn_parts.test[:, :rare].sum(axis=1) == 0).astype(float)
        within_error(missed, chance)


class TestReplicasUnderstateASpread:
    def test_over_every_bag_exactly(self):
        values = [Fraction(v) for v in (3, 7, 8, 20)]

        def variance(x):
            mean = sum(x) / len(x)
            return sum((v - mean) ** 2 for v in x) / (len(x) - 1)

        bags = list(product(values, repeat=4))
        mean = sum(variance(bag) for bag in bags) / len(bags)
        assert mean / variance(values) == Fraction(3, 4)
        assert sd_shrink(4) ** 2 == pytest.approx(3 / 4, rel=1e-15)

    def test_in_the_bags_that_are_drawn(self):
        values = np.random.default_rng(10).gamma(2.0, size=12)
        bags = drawn([12], 6000, seed=11).train
        means = bags @ values / 12
        variances = (bags @ values**2 - 12 * means**2) / 11
        within_error(variances / values.var(ddof=1), sd_shrink(12) ** 2)
