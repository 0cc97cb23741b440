"""Bootstrap of column statistics: numpy on spelled-out bags, all bags of small samples, the mice.

Drawn figures may differ from exact ones by four Monte-Carlo standard errors; seeds are fixed.
"""

import math
from itertools import product

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy import stats

from evalcore import statistic as module
from evalcore.bag_facts import sd_shrink
from evalcore.bootstrap_intervals import bca, jackknife_acceleration, percentile
from evalcore.errors import EvalError
from evalcore.exact_bootstrap import exact_mean_error, exact_quantile_error, neighbours_pmf
from evalcore.statistic import bootstrap, value_of
from evalcore.statistic_formulas import STATISTICS

from .checks import cases, exactly

RNG = np.random.default_rng(11)
FIRST = RNG.normal(5, 2, 12).round(1)
SECOND = (FIRST + RNG.normal(0, 2, 12)).round(1)
CLASSES = np.array([0, 1, 1, 0, 1, 1, 0, 1, 0, 1, 1, 0])
YES = (FIRST > 4.5).astype(float)

# each statistic spelled out by numpy, from repeated rows
BY_NUMPY = {
    "mean": lambda x, y: np.mean(x),
    "median": lambda x, y: np.median(x),
    "sd": lambda x, y: np.std(x, ddof=1),
    "quantile": lambda x, y: np.quantile(x, 0.3),
    "proportion": lambda x, y: np.mean(x),
    "correlation": lambda x, y: np.corrcoef(x, y)[0, 1],
    "mean_difference": lambda x, y: x[y == 0].mean() - x[y == 1].mean(),
}


def columns(key):
    """Columns that a statistic reads."""
    reads = STATISTICS[key].reads
    first = YES if reads == "yes_no" else FIRST
    second = {"two_numbers": SECOND, "numbers_by_class": CLASSES}.get(reads)
    return (first,) if second is None else (first, second)


def drawn(key, rounds=199, seed=5, **more):
    generator = np.random.default_rng(seed)
    return bootstrap(
        *columns(key), statistic=key, rounds=rounds, generator=generator, share=0.3, **more
    )


@pytest.mark.parametrize("case", cases("03", "mouse"))
class TestMice:
    def test_exact_errors(self, case):
        x, expected = case["inputs"]["x"], case["expected"]
        numbers = {
            "mean": value_of(x, statistic="mean"),
            "median": value_of(x, statistic="median"),
            "se_mean_formula": exact_mean_error(x) / sd_shrink(len(x)),
            "se_mean_ideal_bootstrap": exact_mean_error(x),
            "se_median_ideal_bootstrap": exact_quantile_error(x),
        }
        assert set(numbers) == set(expected)
        for name, number in numbers.items():
            assert_allclose(number, expected[name], rtol=0, atol=case["tolerance"], err_msg=name)
        for name, published in case["published"].items():
            assert_allclose(numbers[name], published, rtol=0, atol=case["published_tolerance"])

    @pytest.mark.parametrize("key", ["mean", "median"])
    def test_bags_come_close(self, case, key):
        x, expected = case["inputs"]["x"], case["expected"]
        rounds = 20_000
        found = bootstrap(x, statistic=key, rounds=rounds, generator=np.random.default_rng(2))
        exact = expected[f"se_{key}_ideal_bootstrap"]
        spread = (found.replicas - found.replicas.mean()) ** 2
        error = spread.std() / math.sqrt(rounds) / (2 * exact)
        assert abs(found.standard_error - exact) < 4 * error


class TestAllBagsOfSmallSamples:
    @pytest.mark.parametrize("x", [[3.0, 1.0, 7.5, 2.0], [3.0, 1.0, 7.5, 2.0, 2.0], [1.0, 4.0]])
    def test_exact_errors(self, x):
        bags = np.array(list(product(x, repeat=len(x))))
        assert exact_mean_error(x) == pytest.approx(bags.mean(axis=1).std(), rel=1e-12)
        for share in (0.0, 0.1, 0.25, 0.5, 0.7, 1.0):
            expected = np.quantile(bags, share, axis=1).std()
            assert exact_quantile_error(x, share=share) == pytest.approx(expected, rel=1e-12)

    @pytest.mark.parametrize(("n", "k"), [(2, 1), (4, 1), (4, 2), (5, 4)])
    def test_neighbours(self, n, k):
        expected = np.zeros((n, n))
        for bag in product(range(n), repeat=n):
            ordered = sorted(bag)
            expected[ordered[k - 1], ordered[k]] += 1 / n**n
        assert_allclose(neighbours_pmf(n, k), expected, rtol=0, atol=1e-14)

    def test_sd_falls_short_by_the_known_factor(self):
        x = np.array([3.0, 1.0, 7.5, 2.0])
        bags = np.array(list(product(x, repeat=4)))
        rms = math.sqrt((bags.std(axis=1, ddof=1) ** 2).mean())
        assert rms / x.std(ddof=1) == pytest.approx(sd_shrink(4), rel=1e-12)

    def test_large_samples_stay_in_range(self):
        x = stats.norm.ppf((np.arange(2001) + 0.5) / 2001)
        # asymptotically sqrt(pi / 2) / sqrt n
        expected = math.sqrt(math.pi / 2 / 2001)
        assert exact_quantile_error(x) == pytest.approx(expected, rel=0.02)
        assert neighbours_pmf(2001, 1000).sum() == pytest.approx(1, rel=1e-9)

    def test_undefined_and_refused(self):
        assert math.isnan(exact_mean_error([3.0]))
        assert math.isnan(exact_quantile_error([3.0]))
        assert math.isnan(exact_quantile_error([3.0, math.nan]))
        with pytest.raises(ValueError, match=exactly("`share` must be between 0 and 1; got 1.1.")):
            exact_quantile_error([3.0, 4.0], share=1.1)


@pytest.mark.parametrize("key", STATISTICS)
class TestEveryStatistic:
    def test_replicas_are_numpys_on_spelled_out_bags(self, key):
        first, second = (*columns(key), np.zeros(12))[:2]
        found = drawn(key)
        strata = CLASSES if key == "mean_difference" else np.zeros(12, dtype=int)
        bags = np.concatenate(list(module._bags(strata, 199, np.random.default_rng(5), step=1000)))
        assert bags.shape == (199, 12)
        for counts, replica in zip(bags.astype(int), found.replicas, strict=True):
            rows = np.repeat(np.arange(12), counts)
            expected = BY_NUMPY[key](first[rows], second[rows])
            assert replica == pytest.approx(expected, rel=1e-12, abs=1e-12)

    def test_value(self, key):
        first, second = (*columns(key), np.zeros(12))[:2]
        expected = pytest.approx(BY_NUMPY[key](first, second), rel=1e-12)
        assert value_of(*columns(key), statistic=key, share=0.3) == expected
        assert drawn(key).value == expected

    def test_summaries(self, key):
        first, second = (*columns(key), np.zeros(12))[:2]
        found = drawn(key, rounds=999, level=0.9)
        r = found.replicas
        assert found.undefined == 0
        assert found.standard_error == pytest.approx(r.std(ddof=1), rel=1e-12)
        assert found.bias == pytest.approx(r.mean() - found.value, rel=1e-9, abs=1e-12)
        # 5 % and 95 % of 999 are the 50th and the 950th
        assert (found.percentile.low, found.percentile.high) == (np.sort(r)[49], np.sort(r)[949])
        left_out = [BY_NUMPY[key](np.delete(first, i), np.delete(second, i)) for i in range(12)]
        strata = CLASSES if key == "mean_difference" else None
        a = jackknife_acceleration(left_out, strata=strata)
        expected = bca(r, found.value, acceleration=a, level=0.9)
        assert_allclose((found.bca.low, found.bca.high), (expected.low, expected.high), rtol=1e-6)
        assert (found.bca.level, found.percentile.level) == (0.9, 0.9)
        assert (found.n, found.n_units, found.missing) == (12, 12, 0)

    def test_same_seed_same_digits_and_more_rounds_only_append(self, key, monkeypatch):
        few, many = drawn(key, rounds=59), drawn(key, rounds=200)
        assert np.array_equal(few.replicas, many.replicas[:59])
        monkeypatch.setattr(module, "CELLS", 37)
        assert_allclose(drawn(key, rounds=200).replicas, many.replicas, rtol=1e-12)
        assert not np.array_equal(drawn(key, rounds=200, seed=6).replicas, many.replicas)

    def test_a_missing_value_is_set_aside_and_counted(self, key):
        first, *rest = columns(key)
        longer = [np.append(first, math.nan), *(np.append(column, 1) for column in rest)]
        generator = np.random.default_rng(5)
        found = bootstrap(*longer, statistic=key, rounds=199, generator=generator, share=0.3)
        assert (found.n, found.missing) == (12, 1)
        assert np.array_equal(found.replicas, drawn(key).replicas)


class TestShrink:
    def test_known_where_it_is_exact(self):
        known = {key for key in STATISTICS if not math.isnan(drawn(key).shrink)}
        assert known == {"mean", "proportion", "sd"}
        assert drawn("sd").shrink == sd_shrink(12)

    def test_seen_in_bags(self):
        found = drawn("sd", rounds=20_000)
        squares = found.replicas**2 / found.value**2
        error = squares.std() / math.sqrt(20_000)
        assert abs(squares.mean() - found.shrink**2) < 4 * error
        mean = drawn("mean", rounds=20_000)
        ratio = mean.standard_error / (FIRST.std(ddof=1) / math.sqrt(12))
        assert ratio == pytest.approx(mean.shrink, abs=4 / math.sqrt(2 * 20_000))


class TestUnits:
    units = np.array(["a", "b", "c", "a", "b", "c", "d", "d", "e", "f", "f", "e"])

    def test_are_drawn_whole(self):
        # a column that holds the unit's number twice: each replica's mean is a mean of 6 draws
        code = np.unique(self.units, return_inverse=True)[1].astype(float)
        found = bootstrap(
            code,
            statistic="mean",
            rounds=500,
            generator=np.random.default_rng(1),
            units=self.units,
        )
        assert found.n_units == 6
        assert_allclose(found.replicas * 6, np.round(found.replicas * 6), atol=1e-9)
        assert found.shrink == sd_shrink(6)
        assert found.standard_error == pytest.approx(
            np.std(range(6)) / math.sqrt(6), rel=4 / math.sqrt(2 * 500)
        )

    def test_each_case_its_own_unit_changes_nothing(self):
        assert np.array_equal(
            drawn("median", units=np.arange(12)).replicas, drawn("median").replicas
        )

    def test_sd_has_no_known_factor_with_them(self):
        assert math.isnan(drawn("sd", units=self.units).shrink)

    def test_classes_keep_their_number_of_units(self):
        units = np.array([0, 1, 1, 0, 2, 2, 3, 4, 3, 4, 5, 6])
        sample = module._sample(STATISTICS["mean_difference"], FIRST, CLASSES, units, 0.5)
        assert sample.strata().tolist() == [0, 1, 1, 0, 1, 1, 0]
        for bag in module._bags(sample.strata(), 20, np.random.default_rng(1), step=7):
            assert_allclose(bag[:, [0, 3, 6]].sum(axis=1), 3)
            assert_allclose(bag[:, [1, 2, 4, 5]].sum(axis=1), 4)

    def test_units_with_both_classes_are_drawn_together(self):
        # pairs: the difference of a pair is 1 whatever is drawn, so nothing varies
        first = np.array([5.0, 4.0, 9.0, 8.0, 2.0, 1.0])
        found = bootstrap(
            first,
            [0, 1, 0, 1, 0, 1],
            statistic="mean_difference",
            rounds=99,
            generator=np.random.default_rng(1),
            units=[0, 0, 1, 1, 2, 2],
        )
        assert found.value == pytest.approx(1, abs=1e-12)
        assert found.standard_error == pytest.approx(0, abs=1e-12)

    def test_one_unit_says_nothing(self):
        with pytest.raises(EvalError, match=r"^Mean needs at least two units .* units vary\.$"):
            drawn("mean", units=np.zeros(12))


class TestNoValue:
    def test_replicas_without_one_are_counted(self):
        # one case in twelve differs: a bag that misses it has no correlation
        first = np.zeros(12)
        first[3] = 1.0
        found = bootstrap(
            first, SECOND, statistic="correlation", rounds=500, generator=np.random.default_rng(1)
        )
        assert found.undefined == np.isnan(found.replicas).sum()
        assert found.undefined / 500 == pytest.approx((11 / 12) ** 12, abs=4 * 0.5 / math.sqrt(500))
        assert found.percentile == percentile(found.replicas)
        assert found.percentile.defined
        # without that case there is no correlation either, hence no acceleration
        assert not found.bca.defined

    def test_a_column_that_never_changes(self):
        flat = np.full(12, 0.1)
        generator = np.random.default_rng(1)
        found = bootstrap(flat, SECOND, statistic="correlation", rounds=99, generator=generator)
        assert math.isnan(found.value)
        assert found.undefined == 99
        assert not found.percentile.defined
        found = bootstrap(flat, statistic="mean", rounds=99, generator=generator)
        assert found.value == 0.1
        assert np.array_equal(found.replicas, np.full(99, 0.1))
        assert found.standard_error == pytest.approx(0, abs=1e-15)
        assert (found.percentile.low, found.percentile.high) == (0.1, 0.1)
        assert not found.bca.defined


class TestRefused:
    def draw(self, *columns, statistic="mean", rounds=99, **more):
        generator = np.random.default_rng(1)
        return bootstrap(*columns, statistic=statistic, rounds=rounds, generator=generator, **more)

    @pytest.mark.parametrize(
        ("columns", "more", "message"),
        [
            (
                (FIRST,),
                {"statistic": "mode"},
                "`statistic` must be one of mean, median, sd, quantile, proportion, correlation, "
                "mean_difference; got 'mode'.",
            ),
            (
                (FIRST,),
                {"rounds": 38},
                "`rounds` must be at least 39 for an interval at level 0.95; got 38.",
            ),
            ((FIRST,), {"level": 1.0}, "`level` must be between 0 and 1, both excluded; got 1.0."),
            ((FIRST,), {"share": 1.5}, "`share` must be between 0 and 1; got 1.5."),
            ((FIRST, SECOND), {}, "Mean reads one column; got two."),
            ((FIRST,), {"statistic": "correlation"}, "Correlation reads two columns; got one."),
            (
                (FIRST, SECOND[:5]),
                {"statistic": "correlation"},
                "Columns and units must be equally long; got (12,), (5,), (12,).",
            ),
            ((FIRST,), {"statistic": "proportion"}, "Proportion needs values that are 0 or 1."),
            (
                (FIRST, CLASSES + 1),
                {"statistic": "mean_difference"},
                "Difference of means needs classes that are 0 or 1.",
            ),
            (([1.0, math.nan],), {}, "Mean needs at least 2 cases with a value; got 1."),
            (([],), {}, "Mean needs at least 2 cases with a value; got 0."),
            (
                ([1.0, 2.0, 3.0], [0, 0, 1]),
                {"statistic": "mean_difference"},
                "Difference of means needs at least 2 cases with a value in class 1; got 1.",
            ),
        ],
    )
    def test_with_a_sentence(self, columns, more, message):
        with pytest.raises(EvalError, match=exactly(message)):
            self.draw(*columns, **more)

    def test_least_number_of_rounds(self):
        assert len(self.draw(FIRST, rounds=39).replicas) == 39
        assert len(self.draw(FIRST, rounds=19, level=0.9).replicas) == 19


def test_registry():
    assert [entry.key for entry in STATISTICS.values()] == list(STATISTICS) == list(BY_NUMPY)
    titles = [entry.title for entry in STATISTICS.values()]
    assert len(set(titles)) == len(titles)


# numbers as files hold them, so that neighbours are not a hair's breadth apart
cells = st.lists(
    st.tuples(st.integers(-300, 300), st.integers(-300, 300), st.integers(0, 3)),
    min_size=5,
    max_size=25,
)


@given(cells)
def test_a_case_counted_twice_equals_two_cases(rows):
    first, second, counts = (np.array(column, dtype=float) for column in zip(*rows, strict=True))
    first, second = first / 10, second / 10
    twice = np.repeat(np.arange(len(rows)), counts.astype(int))
    for entry in STATISTICS.values():
        y = (second > 0).astype(float) if entry.reads == "numbers_by_class" else second
        found = entry.formula(first, y, counts[None, :], 0.3)[0]
        if not len(twice):
            assert math.isnan(found)
            continue
        spelled = entry.formula(first[twice], y[twice], np.ones((1, len(twice))), 0.3)[0]
        assert found == pytest.approx(spelled, rel=1e-9, abs=1e-9, nan_ok=True)


@given(cells, st.randoms())
def test_order_of_cases_does_not_matter(rows, random):
    shuffled = list(rows)
    random.shuffle(shuffled)
    for entry in STATISTICS.values():
        found = []
        for order in (rows, shuffled):
            x, y, c = (np.array(column, dtype=float) for column in zip(*order, strict=True))
            y = (y > 0).astype(float) if entry.reads == "numbers_by_class" else y
            found.append(entry.formula(x / 10, y, c[None, :], 0.3)[0])
        assert found[0] == pytest.approx(found[1], rel=1e-9, abs=1e-9, nan_ok=True)
