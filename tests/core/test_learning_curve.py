"""The learning curve: laws of its rounds, a curve worked by hand, planted curves, refusals."""

import itertools
import json
import math
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy import optimize

from evalcore import draws, power_law
from evalcore.answers import HeldOut, Reduced
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose, choose_written
from evalcore.errors import EvalError, PlanError
from evalcore.groups import groups_of
from evalcore.judged import Judged
from evalcore.learning_curve import Prediction, learning_curve
from evalcore.plan import Plan
from evalcore.power_law import NoPowerLaw, PowerLaw
from evalcore.rounds import Rounds
from evalcore.schemes import ALL_SCHEMES, LEARNING_CURVE, SCHEMES, draw
from evalcore.wording import NBSP, Noun, tenths

from .checks import carried_out, exactly, table_of
from .test_schemes import tables


def rounds_of(table, seed=1, *, sizes=6, subsets=20, keep="") -> Rounds:
    settings = {"sizes": sizes, "subsets": subsets} | ({"keep": keep} if keep else {})
    return draw(LEARNING_CURVE, table, settings, np.random.default_rng(seed))


def part_of(rounds: Rounds, labels, right, *, units=None, n_classes=2) -> Judged:
    """A candidate whose held-out answers were right or wrong, in the order of `rounds.pairs`."""
    labels = np.asarray(labels)
    true = labels[rounds.pairs[1]]
    answers = np.where(right, true, (true + 1) % n_classes)
    held = HeldOut(labels, rounds, np.eye(n_classes)[answers])
    n = rounds.n_rounds
    nothing = Reduced(np.ones((n, n_classes, n_classes)), np.full(n, math.nan))
    by = "unit" if units is None else "case"
    names = ("learning_curve", "made", by)
    return Judged(*names, held, nothing, nothing.confusion, nothing, units)


def curve_of(part, measure="accuracy", *, seed=1, **rest):
    return learning_curve(
        part, measure, level=rest.pop("level", 0.95), rng=np.random.default_rng(seed), **rest
    )


def at_sites(labels, sites, *, features=None, rows=1):
    """A case of this class at each of these sites; two rows of it each where `rows` is 2."""
    turn = np.tile(np.arange(len(labels)), rows)
    return table_of(
        np.asarray(labels)[turn].tolist(),
        units=None if rows == 1 else turn.tolist(),
        features=None if features is None else features[turn],
        entries={"site": [f"s{at}" for at in np.asarray(sites)[turn]]},
    )


class TestRounds:
    """What `draws.nested_bags` promises, by size (rank) and subset."""

    settings = st.fixed_dictionaries({"sizes": st.integers(5, 12), "subsets": st.integers(20, 31)})

    @staticmethod
    def by_subset(table, rounds, settings):
        """Train and test counts of units, (subsets, sizes, units)."""
        n_sizes = len(draws.nested_sizes(groups_of(table), settings["sizes"]))
        of_units = rounds.of_units(table.units)
        shape = (-1, n_sizes, table.n_units)
        return of_units.train.reshape(shape).astype(int), of_units.test.reshape(shape).astype(int)

    @given(tables(least=7, most_units=16), settings, st.integers(0, 1000))
    def test_laws(self, table, settings, seed):
        rounds = rounds_of(table, seed, **settings)
        assert rounds.n_rounds == LEARNING_CURVE.n_rounds(table, settings)
        train, test = self.by_subset(table, rounds, settings)
        subsets, n_sizes, _ = train.shape
        assert draws.LEAST_SIZES <= n_sizes <= settings["sizes"]
        assert settings["subsets"] <= subsets < settings["subsets"] + 5
        assert train.max() == test.max() == 1
        # nested, and larger each time
        assert (train[:, 1:] >= train[:, :-1]).all()
        assert (np.diff(train.sum(axis=2), axis=1) > 0).all()
        # judged by the same others at every size, who are all that the largest bag leaves out
        assert (test == test[:, :1]).all()
        assert (train[:, -1] + test[:, -1] == 1).all()
        assert not (train * test).any()
        of_class = np.stack([table.unit_labels == k for k in range(table.n_classes)], axis=1)
        assert (train @ of_class >= 2).all()
        # folds of one repeat differ by one unit of a class at most, and no other size differs
        sizes, out = train @ of_class, test @ of_class
        assert (np.ptp(out, axis=0) <= 1).all()
        assert (sizes[:, :-1] == sizes[:1, :-1]).all()
        # the smallest is at most about half of what can be learned from, rounding aside
        assert (sizes[:, 0] <= sizes[:, -1] / 2 + 0.5).all()

    @given(tables(least=7, most_units=16), settings, st.integers(0, 1000))
    def test_a_repeat_and_size_judge_every_unit_once(self, table, settings, seed):
        rounds = rounds_of(table, seed, **settings)
        train, _ = self.by_subset(table, rounds, settings)
        repeats, n_sizes = len(train) // 5, train.shape[1]
        assert set(rounds.repeat.tolist()) == set(range(repeats * n_sizes))
        for one in range(repeats * n_sizes):
            rows = rounds.repeat == one
            assert rows.sum() == 5
            assert (rounds.test[rows].sum(axis=0) == 1).all()
            assert len(set(rounds.of_units(table.units).train[rows].sum(axis=1))) <= (
                1 if one % n_sizes < n_sizes - 1 else table.n_classes + 1
            )

    @given(tables(least=7, most_units=10), st.integers(0, 1000))
    def test_seeds_and_more_subsets(self, table, seed):
        one, same, other = (rounds_of(table, s) for s in (seed, seed, seed + 1))
        for name in ("train", "test", "repeat"):
            assert np.array_equal(getattr(one, name), getattr(same, name))
        assert not np.array_equal(one.train, other.train)
        more = rounds_of(table, seed, subsets=33).first(one.n_rounds)
        for name in ("train", "test", "repeat"):
            assert np.array_equal(getattr(one, name), getattr(more, name))

    def test_subsets_are_of_chance_within_a_fold_too(self):
        table = table_of([0, 1] * 20)
        train = rounds_of(table, subsets=1000).train.astype(int)
        # each of the 40 is held out in a fifth of subsets and is in the smallest bag alike often
        smallest = train[::6].mean(axis=0)
        bags = train[::6].sum(axis=1)
        assert set(bags.tolist()) == {4}
        # 1000 draws of 0.1: within five standard deviations
        assert_allclose(smallest, 0.1, atol=5 * math.sqrt(0.1 * 0.9 / 1000))

    def test_sizes_by_hand(self):
        # 38 and 142 units: 8 and 29 are held out at most, 30 and 113 are left. Shares are
        # 0.15^(1 - j/5) = 0.15, 0.2192, 0.3203, 0.4682, 0.6843, 1: 4.5 (to even), 6.58, 9.61,
        # 14.05, 20.53 of 30 and 16.95, 24.77, 36.20, 52.91, 77.32 of 113
        groups = groups_of(table_of([0] * 38 + [1] * 142))
        expected = [[4, 17], [7, 25], [10, 36], [14, 53], [21, 77], [30, 113]]
        assert draws.nested_sizes(groups, 6).tolist() == expected
        # 5 and 100: 4 and 80 are left, so the first share is 2/4: 0.5, 0.5946, 0.7071, 0.8409, 1
        groups = groups_of(table_of([0] * 5 + [1] * 100))
        expected = [[2, 40], [2, 48], [3, 57], [3, 67], [4, 80]]
        assert draws.nested_sizes(groups, 5).tolist() == expected

    def test_equal_sizes_are_made_one(self):
        # 5 of 7 are left in each class; shares 0.4, 0.48, 0.58, 0.69, 0.83, 1
        groups = groups_of(table_of([0, 1] * 7))
        assert draws.nested_sizes(groups, 6).tolist() == [[2, 2], [3, 3], [4, 4], [5, 5]]

    def test_a_unit_of_several_classes_goes_with_its_most_frequent_one(self):
        # seven units of one a and two b, then seven of one a
        labels, units = [0, 1, 1] * 7 + [0] * 7, [*np.repeat(range(7), 3), *range(7, 14)]
        table = table_of(labels, units=units)
        rounds = rounds_of(table)
        train, _ = self.by_subset(table, rounds, {"sizes": 6})
        assert train[:, :-1, :7].sum(axis=2).tolist() == [[2, 3, 4]] * 20
        assert train[:, :-1, 7:].sum(axis=2).tolist() == [[2, 3, 4]] * 20

    def test_stands_beside_the_schemes(self):
        assert LEARNING_CURVE.key not in SCHEMES
        assert LEARNING_CURVE.title not in {scheme.title for scheme in SCHEMES.values()}
        assert [(s.key, s.default, s.low, s.high) for s in LEARNING_CURVE.settings] == [
            ("sizes", 6, 5, 12),
            ("subsets", 20, 20, 1000),
            ("keep", "", 0, 0),
        ]
        assert draws.LEAST_SIZES == power_law.LEAST_SIZES


class TestRefusedTables:
    said = (
        "Class ‘{}’ has {} of {}. A learning curve takes 4 sizes, the largest about twice the "
        "smallest or more, each with 2 {of} of every class; 7 of each always do, and fewer than 5 "
        "never."
    )

    @pytest.mark.parametrize(
        ("numbers", "has"),
        [
            ((4, 200), ("a", f"4{NBSP}cases", 204)),
            ((9, 1), ("b", f"1{NBSP}case", 10)),
            ((6, 5), ("b", f"5{NBSP}cases", 11)),
            ((6, 6), ("a", f"6{NBSP}cases", 12)),
        ],
    )
    def test_too_few(self, numbers, has):
        table = table_of(np.repeat([0, 1], numbers).tolist())
        with pytest.raises(PlanError, match=exactly(self.said.format(*has, of="cases"))):
            rounds_of(table)
        # asked before it is refused
        assert LEARNING_CURVE.n_rounds(table, {"sizes": 6, "subsets": 20}) % 20 == 0

    @pytest.mark.parametrize(
        ("numbers", "has"),
        [
            ((4, 30), ("a", f"4{NBSP}entries of ‘site’", 34)),
            ((9, 1), ("b", f"1{NBSP}entry of ‘site’", 10)),
            ((6, 6), ("a", f"6{NBSP}entries of ‘site’", 12)),
        ],
    )
    def test_too_few_that_are_kept_together(self, numbers, has):
        """However many cases they hold."""
        sites = np.repeat(np.arange(sum(numbers)), 10)
        table = at_sites((np.arange(len(sites)) >= 10 * numbers[0]).astype(int), sites)
        message = self.said.format(*has, of="entries of ‘site’")
        with pytest.raises(PlanError, match=exactly(message)):
            rounds_of(table, keep="site")
        assert LEARNING_CURVE.n_rounds(table, {"sizes": 6, "subsets": 20, "keep": "site"}) % 20 == 0
        assert rounds_of(table).n_rounds == 120

    def test_a_class_that_is_most_frequent_nowhere(self):
        """Two of a and one of b in each of ten sites."""
        table = at_sites([0, 0, 1] * 10, np.repeat(np.arange(10), 3))
        message = self.said.format("b", f"0{NBSP}entries of ‘site’", 10, of="entries of ‘site’")
        with pytest.raises(PlanError, match=exactly(message)):
            rounds_of(table, keep="site")

    def test_seven_always_do_and_so_do_five_among_many(self):
        for sizes, one, other in itertools.product(range(5, 13), range(7, 30), range(7, 30)):
            groups = groups_of(table_of([0] * one + [1] * other))
            assert len(draws.nested_sizes(groups, sizes)) >= 4
        assert rounds_of(table_of([0] * 5 + [1] * 20)).n_rounds == 20 * 6
        sites = np.repeat(np.arange(25), 2)
        table = at_sites((sites >= 5).astype(int), sites)
        assert rounds_of(table, keep="site").n_rounds == 20 * 6


# four units of a, two of b; halves held out, twice. Right (1) or wrong, in the order of pairs
LABELS = [0, 0, 0, 0, 1, 1]
HALVES = ([0, 1, 4], [2, 3, 5])
BAGS = (([2, 5], [2, 3, 5]), ([0, 4], [0, 1, 4]))
RIGHT = {  # by unit: both repeats at the smaller size, both at the larger
    0: ((1, 0), (1, 1)),
    1: ((0, 0), (1, 0)),
    2: ((1, 1), (1, 1)),
    3: ((1, 1), (1, 1)),
    4: ((1, 0), (1, 1)),
    5: ((0, 0), (0, 1)),
}


def by_hand() -> Judged:
    train, test, repeat, right = [], [], [], []
    for turn, half, size in itertools.product(range(2), range(2), range(2)):
        train.append(np.isin(np.arange(6), BAGS[half][size]))
        test.append(np.isin(np.arange(6), HALVES[half]))
        repeat.append(2 * turn + size)
        right += [RIGHT[unit][size][turn] for unit in HALVES[half]]
    counts = [np.array(part, dtype=np.uint8) for part in (train, test)]
    return part_of(Rounds(*counts, np.array(repeat)), LABELS, np.array(right) == 1)


SHARES = [{u: Fraction(sum(r[size]), 2) for u, r in RIGHT.items()} for size in range(2)]


def measured(size, drawn_a=range(4), drawn_b=(4, 5)):
    """Accuracy, balanced accuracy and both sensitivities of some units, as fractions."""
    e = SHARES[size]
    a = sum(e[u] for u in drawn_a) / len(drawn_a)
    b = sum(e[u] for u in drawn_b) / len(drawn_b)
    accuracy = (len(drawn_a) * a + len(drawn_b) * b) / (len(drawn_a) + len(drawn_b))
    return accuracy, (a + b) / 2, a, b


MEASURES = [("accuracy", 0), ("balanced_accuracy", 0), ("sensitivity", 0), ("sensitivity", 1)]


class TestByHand:
    def test_the_fractions(self):
        # a: 1/2 + 0 + 1 + 1 of 4, then 1 + 1/2 + 1 + 1; b: 1/2 + 0 of 2, then 1 + 1/2
        assert measured(0) == (Fraction(1, 2), Fraction(7, 16), Fraction(5, 8), Fraction(1, 4))
        assert measured(1) == (Fraction(5, 6), Fraction(13, 16), Fraction(7, 8), Fraction(3, 4))

    @pytest.mark.parametrize(("at", "asked"), list(enumerate(MEASURES)))
    def test_values(self, at, asked):
        curve = curve_of(by_hand(), asked[0], of_class=asked[1])
        assert (curve.measure, curve.of_class) == asked
        assert curve.sizes.tolist() == [2, 3]
        assert curve.rounds.tolist() == [4, 4]
        assert curve.not_judged.tolist() == [0, 0]
        assert_allclose(curve.values, [float(measured(s)[at]) for s in range(2)], rtol=1e-15)
        assert curve.gain.start == 0
        assert curve.gain.value == pytest.approx(float(measured(1)[at] - measured(0)[at]))

    @pytest.mark.parametrize(("at", "asked"), list(enumerate(MEASURES)))
    def test_bands_by_all_resamples_there_are(self, at, asked):
        """4^4 draws of a times 2^2 of b, all of one chance; both sizes move together."""
        every = [
            [measured(size, a, b)[at] for size in range(2)]
            for a in itertools.product(range(4), repeat=4)
            for b in itertools.product((4, 5), repeat=2)
        ]
        level = 0.77  # its quantiles lie well inside single values, so that luck moves none
        curve = curve_of(by_hand(), asked[0], of_class=asked[1], level=level, resamples=40_000)
        of_gain = sorted(late - early for early, late in every)
        columns = [sorted(column) for column in zip(*every, strict=True)]
        gained = [curve.gain.interval.low, curve.gain.interval.high]
        if of_gain[0] == of_gain[-1]:
            # both of b gain alike: as many may differ as none of two tells
            beyond = 1 - ((1 - level) / 2) ** (1 / 2)
            assert gained == pytest.approx([of_gain[0] - beyond, min(1, of_gain[0] + beyond)])
            gained = [of_gain[0]] * 2
        found = [*zip(curve.low, curve.high, strict=True), gained]
        for ordered, ends in zip([*columns, of_gain], found, strict=True):
            for end, p in zip(ends, ((1 - level) / 2, (1 + level) / 2), strict=True):
                near = {ordered[math.floor(1024 * q)] for q in (p - 0.009, p, p + 0.009)}
                assert len(near) == 1, "another level is needed"
                assert end == pytest.approx(float(near.pop()), abs=1e-12)
        assert curve.gain.interval.level == level

    def test_two_sizes_make_no_law(self):
        curve = curve_of(by_hand())
        assert isinstance(curve.law, NoPowerLaw)
        assert (curve.ahead, curve.without_law, curve.resamples) == ((), 0, 500)


def planted(errors, *, n=100, subsets=20, seed=3, steady=False):
    """Two classes of n units, drawn as the scheme does; of each size as many wrong as planted.

    Which answers are wrong is by chance within a class, or by unit where `steady`: then the first
    of a class are wrong at every size.
    """
    table = table_of([0, 1] * n)
    rounds = rounds_of(table, seed, sizes=len(errors), subsets=subsets)
    round_at, case_at = rounds.pairs
    rank = rounds.repeat[round_at] % len(errors)
    right, rng = np.ones(len(case_at), dtype=bool), np.random.default_rng(seed)
    for size, k in itertools.product(range(len(errors)), range(2)):
        pairs = np.flatnonzero((rank == size) & (table.labels[case_at] == k))
        order = np.argsort(case_at[pairs], kind="stable") if steady else rng.permutation(len(pairs))
        right[pairs[order[: round(errors[size] * len(pairs))]]] = False
    return part_of(rounds, table.labels, right)


SIZES = [24, 36, 52, 74, 110, 160]  # of 200: 0.15 x 80 = 12, 17.5, 25.6, 37.5, 54.7 and 80, twice


def law_of(a, b, c):
    return [a + b * n**-c for n in SIZES]


class TestPlanted:
    def test_sizes_of_the_design(self):
        curve = curve_of(planted([0.2] * 6))
        assert curve.sizes.tolist() == SIZES
        assert curve.rounds.tolist() == [20] * 6

    @pytest.mark.parametrize("measure", ["accuracy", "balanced_accuracy", "sensitivity"])
    @pytest.mark.parametrize(("a", "b", "c"), [(0.05, 2.0, 0.7), (0.1, 6.0, 1.0), (0.0, 1.5, 0.5)])
    def test_recovers_the_law(self, measure, a, b, c):
        curve = curve_of(planted(law_of(a, b, c)), measure, resamples=60)
        # 400 answers of a class at each size: the planted error is met to half of 1/400
        assert_allclose(1 - curve.values, law_of(a, b, c), atol=1 / 800 + 1e-12)
        law = curve.law
        assert isinstance(law, PowerLaw)
        best, _ = optimize.curve_fit(
            lambda n, a, b, c: a + b * n**-c,
            np.array(SIZES, dtype=float),
            1 - curve.values,
            p0=(a, b, c),
            bounds=([0, 0, 1e-3], [1, 50, 3]),
            ftol=1e-14,
            xtol=1e-14,
            gtol=1e-14,
        )
        assert (law.a, law.b, law.c) == pytest.approx(best, rel=1e-3, abs=1e-4)
        for found in curve.ahead:
            assert found.value == pytest.approx(1 - (a + b * found.n**-c), abs=0.006)
            assert found.low < found.value < found.high

    def test_predicts_at_the_table_and_at_twice_the_largest_size(self):
        curve = curve_of(planted(law_of(0.05, 2.0, 0.7)), resamples=20)
        assert [found.n for found in curve.ahead] == [200, 320]
        assert all(isinstance(found, Prediction) for found in curve.ahead)
        with pytest.raises(EvalError, match="not continued"):
            curve.law.predict(curve.ahead[-1].n + 1)

    @pytest.mark.parametrize(("n", "sizes", "reach"), [(7, 5, 22), (33, 9, 106)])
    def test_never_beyond_twice(self, n, sizes, reach):
        # 14 units in folds of 3, 3, 3, 3, 2 leave 11.2 on average, so 11; 66 leave 52.8, so 53
        table = table_of([0, 1] * n)
        rounds = rounds_of(table, sizes=sizes)
        rank = rounds.repeat[rounds.pairs[0]] % (int(rounds.repeat.max() + 1) // 4)
        right = np.random.default_rng(1).random(len(rank)) > 0.6 - 0.55 * rank / rank.max()
        curve = curve_of(part_of(rounds, table.labels, right), resamples=10)
        assert curve.sizes[-1] == pytest.approx(2 * n * 0.8, rel=1e-15)
        assert [found.n for found in curve.ahead] == [2 * n, reach]

    def test_rising(self):
        curve = curve_of(planted(law_of(0.1, 6.0, 1.0)), noun=Noun("lot", "lots"))
        gain, ends = curve.gain.value, curve.gain.interval
        assert (curve.call, curve.gain.start) == ("rising", 3)
        # 6/74 - 6/160
        assert gain == pytest.approx(0.0436, abs=1 / 400)
        assert curve.reason == (
            f"Learning from 160{NBSP}lots instead of 74 brought {100 * gain:.1f}{NBSP}points "
            f"(95{NBSP}% interval: {100 * ends.low:.1f}{NBSP}points to "
            f"{100 * ends.high:.1f}{NBSP}points), so the curve was still rising."
        )

    def test_resamples_without_a_law_are_counted(self):
        errors = [0.29, 0.285, 0.28, 0.275, 0.27, 0.265]
        part = planted(errors)
        curve = curve_of(part, resamples=80)
        shares = double_loop(part)
        assert_allclose(curve.values, shares.mean(axis=1), rtol=1e-14)
        # the same draws of units, class by class; the curve of each by its own loop
        rng, lost, seen = np.random.default_rng(1), 0, []
        members = [np.flatnonzero(part.held.labels == k) for k in range(2)]
        bags = np.zeros((80, 200), dtype=int)
        for units in members:
            bags[:, units] = rng.multinomial(100, [0.01] * 100, size=80)
        for bag in bags:
            errors = [1 - sum(bag * row) / 200 for row in shares]
            found = power_law.power_law(SIZES, errors)
            lost += isinstance(found, NoPowerLaw)
            seen += [] if isinstance(found, NoPowerLaw) else [1 - found.predict(200)]
        assert 5 < lost < 75
        assert curve.without_law == lost
        low, high = np.quantile(seen, [0.025, 0.975], method="weibull")
        assert curve.ahead[0].low == pytest.approx(low, abs=5e-3)
        assert curve.ahead[0].high == pytest.approx(high, abs=5e-3)


class TestCalls:
    def test_flat(self):
        """Every unit is answered alike at every size: errors are ties, gains exactly 0."""
        curve = curve_of(planted([0.2] * 6, steady=True))
        assert isinstance(curve.law, NoPowerLaw)
        assert "15 of 15 pairs" in curve.law.reason
        assert (curve.call, curve.ahead) == ("flat", ())
        # none of 200 differs: the exact bound is 1 - 0.025^(1/200)
        beyond = 1 - 0.025 ** (1 / 200)
        ends = curve.gain.interval.low, curve.gain.interval.high
        assert ends == (pytest.approx(-beyond, rel=1e-12), pytest.approx(beyond, rel=1e-12))
        assert curve.reason == (
            f"Learning from 160{NBSP}units instead of 74 brought 1.8{NBSP}points at most (upper "
            f"end of the 95{NBSP}% interval), less than the 2{NBSP}points that would matter. "
            f"{curve.law.reason}"
        )

    @pytest.mark.parametrize(("n", "call"), [(91, "cannot tell"), (92, "flat")])
    def test_as_many_as_none_of_them_tells_may_differ(self, n, call):
        # 1 - 0.025^(1/units) falls below 0.02 from 183 units on
        curve = curve_of(planted([0.2] * 6, n=n, steady=True))
        assert (curve.call, 1 - 0.025 ** (1 / (2 * n)) < 0.02) == (call, call == "flat")

    def test_equal_errors_are_ties_in_whatever_order_they_are_added(self):
        """The same shares, fifths, at every size, each time on other units."""
        table = table_of([0, 1] * 50)
        rounds = rounds_of(table, subsets=25)
        round_at, case_at = rounds.pairs
        turn, rank = np.divmod(rounds.repeat[round_at], 6)
        right = turn < ((case_at // 2) * 7 + 11 * rank) % 50 % 6
        curve = curve_of(part_of(rounds, table.labels, right), "balanced_accuracy")
        assert_allclose(curve.values, curve.values[0], rtol=1e-14)
        assert "15 of 15 pairs" in curve.law.reason

    def test_a_loss_is_flat_too(self):
        curve = curve_of(planted([0.1, 0.12, 0.15, 0.2, 0.25, 0.3]))
        assert curve.gain.interval.high < 0
        assert curve.call == "flat"

    def test_noise(self):
        errors = [0.31, 0.33, 0.29, 0.34, 0.3, 0.32]
        curve = curve_of(planted(errors))
        assert isinstance(curve.law, NoPowerLaw)
        assert curve.call == "cannot tell"
        assert curve.gain.value == pytest.approx(0.02, abs=1 / 400)
        assert curve.reason.startswith(
            f"Learning from 160{NBSP}units instead of 74 brought +2{NBSP}points, and anything from "
        )
        assert curve.reason.endswith(f" cannot be told. {curve.law.reason}")

    def test_a_law_alone_is_no_rise_and_a_small_gain_alone_is_not_flat(self):
        curve = curve_of(planted([0.29, 0.285, 0.28, 0.275, 0.27, 0.265]), resamples=60)
        assert isinstance(curve.law, PowerLaw)
        assert 0 < curve.gain.value < 0.02 < curve.gain.interval.high
        assert curve.gain.interval.low < 0
        assert curve.call == "cannot tell"
        assert curve.reason.endswith(", so whether more would help cannot be told.")

    def test_never_rising_without_a_law(self):
        """The last doubling brings much, but before it the error rose."""
        curve = curve_of(planted([0.3, 0.34, 0.38, 0.42, 0.3, 0.2]))
        assert isinstance(curve.law, NoPowerLaw)
        assert curve.gain.interval.low > 0.1
        assert curve.call == "cannot tell"
        ends = curve.gain.interval
        assert curve.reason == (
            f"Learning from 160{NBSP}units instead of 74 brought {tenths(curve.gain.value)} "
            f"(95{NBSP}% interval: {tenths(ends.low)} to {tenths(ends.high)}); whether that goes on "
            f"cannot be told. {curve.law.reason}"
        )

    def test_rising_comes_before_flat(self):
        """Whoever is right at one size is right at all larger ones: a small gain, but a sure one."""
        part = planted([0.03, 0.026, 0.023, 0.02, 0.0165, 0.012], n=400, steady=True)
        curve = curve_of(part, level=0.9, resamples=60)
        assert isinstance(curve.law, PowerLaw)
        assert 0 < curve.gain.interval.low < curve.gain.interval.high < 0.02
        assert curve.call == "rising"


class TestUndefined:
    def test_rounds_that_are_still_to_come(self):
        part = planted([0.3, 0.2, 0.16, 0.14, 0.12, 0.1])
        held = part.held

        def first(n):
            pairs = held.rounds.pairs[0] < n
            return part_of(held.rounds.first(n), held.labels, held.correct[pairs])

        one = curve_of(first(1))
        assert one.sizes.tolist() == SIZES[:1]
        assert math.isnan(one.gain.value)
        assert one.call == "cannot tell"
        assert one.reason.startswith("What learning from more units brought cannot be told yet. ")
        # 40 of 200 are held out in each fold
        assert one.not_judged.tolist() == [160]
        assert curve_of(first(1), "sensitivity").not_judged.tolist() == [80]
        some = curve_of(first(8), resamples=20)
        assert some.rounds.tolist() == [2, 2, 1, 1, 1, 1]
        assert some.not_judged.tolist() == [120, 120, 160, 160, 160, 160]
        assert_allclose(some.values, np.nanmean(double_loop(first(8)), axis=1), rtol=1e-14)

    def test_a_class_that_nobody_was_judged_of(self):
        part = by_hand()
        curve = curve_of(part_of(part.held.rounds, LABELS, part.held.correct, n_classes=3))
        assert_allclose(curve.values, [0.5, 5 / 6], rtol=1e-15)
        for measure in ("balanced_accuracy", "sensitivity"):
            three = part_of(part.held.rounds, LABELS, part.held.correct, n_classes=3)
            curve = curve_of(three, measure, of_class=2)
            assert np.isnan([*curve.values, *curve.low, *curve.high, curve.gain.value]).all()
            assert curve.law == NoPowerLaw("At 2 of 2 sizes there is no value.")
            assert curve.call == "cannot tell"
            assert curve.reason.endswith(curve.law.reason)

    @pytest.mark.parametrize("key", ["cross_validation", "bootstrap", "leave_one_out"])
    def test_rounds_of_another_scheme(self, key):
        table = table_of([0, 1] * 10)
        settings = {s.key: s.default for s in SCHEMES[key].settings}
        rounds = draw(SCHEMES[key], table, settings, np.random.default_rng(1))
        part = part_of(rounds, table.labels, np.ones(len(rounds.pairs[0]), dtype=bool))
        with pytest.raises(EvalError, match="these are of another scheme"):
            curve_of(part)


class TestBlocks:
    """Three rows of each unit that are answered alike: units are what counts."""

    def test_same_curve_by_row_as_by_unit(self):
        part = planted([0.3, 0.2, 0.16, 0.14, 0.12, 0.1], n=20)
        rows = np.repeat(np.arange(40), 3)
        rounds = part.held.rounds.of_cases(rows)
        grid = np.zeros(part.held.rounds.test.shape, dtype=bool)
        grid[part.held.rounds.pairs] = part.held.correct
        spread = part_of(rounds, part.held.labels[rows], grid[:, rows][rounds.pairs], units=rows)
        by_unit, by_row = (curve_of(p, "balanced_accuracy", resamples=50) for p in (part, spread))
        assert by_row.sizes.tolist() == by_unit.sizes.tolist()
        for name in ("values", "low", "high"):
            assert_allclose(getattr(by_row, name), getattr(by_unit, name), rtol=1e-13)
        assert [found.n for found in by_row.ahead] == [found.n for found in by_unit.ahead]
        apart = part_of(rounds, part.held.labels[rows], grid[:, rows][rounds.pairs])
        narrow = curve_of(apart, "balanced_accuracy", resamples=50)
        assert ((narrow.high - narrow.low) < 0.8 * (by_row.high - by_row.low)).all()

    def test_a_block_goes_with_its_most_frequent_class(self):
        """Of each four rows three are a; so all blocks are drawn from one lot."""
        part = planted([0.3, 0.2, 0.16, 0.14, 0.12, 0.1], n=20)
        rounds = part.held.rounds.of_cases(np.repeat(np.arange(40), 4))
        labels, units = np.tile([0, 0, 0, 1], 40), np.repeat(np.arange(40), 4)
        right = np.random.default_rng(1).random(len(rounds.pairs[0])) < 0.7
        curve = curve_of(part_of(rounds, labels, right, units=units), resamples=200)
        drawn = np.random.default_rng(1).multinomial(40, [1 / 40] * 40, size=200)
        shares = double_loop(part_of(rounds, labels, right)).reshape(6, 40, 4).mean(axis=2)
        replicates = drawn @ shares.T / 40
        ends = np.quantile(replicates, [0.025, 0.975], axis=0, method="weibull")
        # the core reads between two ranks on the scale of normal quantiles
        gaps = np.diff(np.sort(replicates, axis=0), axis=0)[[4, 194]]
        assert (np.abs(np.stack([curve.low, curve.high]) - ends) <= gaps).all()


SETTINGS = {"sizes": 6, "subsets": 20}
NEAREST = choose(CANDIDATES, "nearest_neighbours", k=1)


def planned(table, keep, **changes) -> Plan:
    scheme = choose(SCHEMES, "cross_validation", folds=5, repeats=4, keep=keep)
    curve = choose(ALL_SCHEMES, "learning_curve", keep=keep)
    return Plan(table.roles, (scheme,), (NEAREST,), curve=curve, **changes)


class TestKeptTogether:
    """Sites take the place of units: bags, sizes and bands are of them."""

    @given(tables(least=7, most_units=12), st.integers(0, 1000))
    def test_laws(self, at_units, seed):
        """Every unit of the drawn table is a site, and each of its cases a unit of two rows."""
        table = at_sites(at_units.labels, at_units.units, rows=2)
        rounds, groups = rounds_of(table, seed, keep="site"), groups_of(table, "site")
        assert groups.number == at_units.n_units <= table.n_units
        assert rounds.n_rounds == LEARNING_CURVE.n_rounds(table, SETTINGS | {"keep": "site"})
        for site in range(groups.number):
            rows = groups.of_case == site
            for counts in (rounds.train[:, rows], rounds.test[:, rows]):
                assert (counts == counts[:, :1]).all()
        assert not ((rounds.train > 0) & (rounds.test > 0)).any()
        # the same as for a table that has the sites for units, whatever their number of rows
        wanted = draws.nested_sizes(groups, 6)
        shape = (-1, len(wanted), groups.number)
        by_site = rounds.of_units(groups.of_case)
        train, test = (part.reshape(shape).astype(int) for part in (by_site.train, by_site.test))
        of_class = np.stack([groups.labels == k for k in range(table.n_classes)], axis=1)
        assert ((train @ of_class)[:, :-1] == wanted[:-1]).all()
        assert (train @ of_class >= 2).all()
        assert (train[:, 1:] >= train[:, :-1]).all()
        assert (train[:, -1] + test[:, -1] == 1).all()
        assert (test == test[:, :1]).all()

    def test_sites_of_one_case_draw_as_cases_do(self):
        labels = [0, 1] * 15
        table = at_sites(labels, np.arange(30))
        alone, as_sites = rounds_of(table), rounds_of(table, keep="site")
        assert alone.n_rounds == as_sites.n_rounds
        assert (as_sites.train.sum(axis=1) == alone.train.sum(axis=1)).all()

    def test_a_site_goes_with_the_most_frequent_class_of_its_units(self):
        # of seven sites two in three are b, and seven more hold a alone
        labels, sites = [0, 1, 1] * 7 + [0] * 7, [*np.repeat(range(7), 3), *range(7, 14)]
        table = at_sites(labels, sites, rows=2)
        groups = groups_of(table, "site")
        train = rounds_of(table, keep="site").of_units(groups.of_case).train.reshape(20, 4, 14)
        for k in range(2):
            assert train[:, :-1, groups.labels == k].sum(axis=2).tolist() == [[2, 3, 4]] * 20


@pytest.fixture(scope="module", params=["all", "one"])
def signatures(request):
    """Sixty sites of four lots of two rows; features are the site's signature and tell no class.

    All lots of a site are of one class. The evaluation with sites kept together, and the one
    with lots dealt singly.
    """
    rng, site = np.random.default_rng(4), np.repeat(np.arange(60), 4)
    features = rng.normal(size=(60, 3))[site] + 1e-3 * rng.normal(size=(240, 3))
    table = at_sites(site % 2, site, features=features, rows=2)
    changes = {"answered_from": request.param, "measure": "accuracy"}
    return [carried_out(table, planned(table, keep, **changes))[0] for keep in ("site", "")]


class TestSignatures:
    def test_single_lots_are_known_by_their_site_and_new_sites_are_not(self, signatures):
        kept, alone = (found.beside.curves[0].found for found in signatures)
        assert alone.values[-1] > 0.99
        # sixty coins: 0.5 within three standard deviations of sqrt(0.25/60) = 0.0645
        assert abs(kept.values - 0.5).max() < 3 * 0.0645
        assert (kept.low < 0.5).all()
        assert (kept.high > 0.5).all()
        assert kept.call != "rising"

    def test_it_agrees_with_the_headline(self, signatures):
        for found in signatures:
            headline = found.estimate("accuracy", "nearest_neighbours").value
            # the same design, dealt anew: four repeats of folds
            assert found.beside.curves[0].found.values[-1] == pytest.approx(headline, abs=0.04)

    def test_sizes_count_sites(self, signatures):
        kept, alone = (found.beside.curves[0].found for found in signatures)
        # thirty of a class, 24 in the largest bags, of which 0.15 are 3.6, 0.219 5.3, and so on
        assert kept.sizes.tolist() == [8, 10, 16, 22, 32, 48]
        assert alone.sizes.tolist() == [28, 42, 62, 90, 132, 192]
        names = [{e.estimator for e in f.beside.estimates} for f in signatures]
        assert names[0] >= {f"learned_from_{n}" for n in (8, 10, 16, 22, 32, 48)}
        assert names[1] >= {f"learned_from_{n}" for n in (28, 42, 62, 90, 132, 192)}
        assert f"48{NBSP}entries of ‘site’ instead of 22 brought" in kept.reason
        assert f"192{NBSP}cases instead of 90 brought" in alone.reason

    def test_the_band_is_of_sites(self, signatures):
        """Shares of sites drawn anew, class by class, against the ends."""
        evaluation = signatures[0]
        part, found = evaluation.beside.curves[0].part, evaluation.beside.curves[0].found
        n = len(part.held.labels)
        assert n == (240 if evaluation.counted_by == "unit" else 480)
        site = np.tile(np.repeat(np.arange(60), 4), n // 240)
        shares = double_loop(part)
        of_site = np.array([shares[:, site == at].mean(axis=1) for at in range(60)])
        rng = np.random.default_rng(8)
        counts = [rng.multinomial(30, [1 / 30] * 30, size=4000) for _ in range(2)]
        replicates = sum(c @ of_site[k::2] for k, c in enumerate(counts)) / 60
        # ends of 500 resamples and of 4000: each within four standard errors of a quantile
        error = replicates.std(axis=0) * math.sqrt(0.025 * 0.975 / 500) / 0.0584
        for ends, p in ((found.low, 0.025), (found.high, 0.975)):
            assert (abs(ends - np.quantile(replicates, p, axis=0)) < 4 * error).all()
        # lots drawn one by one would make it half as wide
        single = learning_curve(
            replace(part, units=None), "accuracy", level=0.95, rng=np.random.default_rng(1)
        )
        assert ((single.high - single.low) < 0.65 * (found.high - found.low)).all()


class TestPlanKeepsTheSame:
    said = (
        "The learning curve must keep together what the first scheme keeps together, or it judges "
        "something else; got {!r} and {!r}."
    )
    table = at_sites([0, 1] * 20, np.repeat(np.arange(20), 2))

    def plan(self, curve, *schemes):
        made = tuple(choose_written(SCHEMES, scheme) for scheme in schemes)
        return Plan(self.table.roles, made, (NEAREST,), curve=choose_written(ALL_SCHEMES, curve))

    @pytest.mark.parametrize(
        ("curve", "schemes", "got"),
        [
            ("learning_curve", ["bootstrap:keep=site"], ("", "site")),
            ("learning_curve:keep=site", ["bootstrap"], ("site", "")),
            ("learning_curve:keep=site", ["holdout:keep=year"], ("site", "year")),
            ("learning_curve:keep=site", ["bootstrap", "holdout:keep=site"], ("site", "")),
            # a block or a time is not what a scheme keeps together by `keep`
            ("learning_curve:keep=site", ["leave_block_out:column=site"], ("site", "")),
            ("learning_curve:keep=site", ["leave_one_out"], ("site", "")),
        ],
    )
    def test_refused(self, curve, schemes, got):
        with pytest.raises(PlanError, match=exactly(self.said.format(*got))):
            self.plan(curve, *schemes)

    @pytest.mark.parametrize(
        ("curve", "schemes"),
        [
            ("learning_curve:keep=site", ["cross_validation:keep=site", "bootstrap"]),
            ("learning_curve:keep=site", ["random_subsampling:keep=site"]),
            ("learning_curve", ["cross_validation", "bootstrap:keep=site"]),
            ("learning_curve", ["leave_block_out:column=site"]),
            ("learning_curve", ["forward_in_time:column=site"]),
        ],
    )
    def test_taken(self, curve, schemes):
        plan = self.plan(curve, *schemes)
        assert Plan.from_json(plan.to_json()) == plan
        assert plan.keep == ("site" if "keep" in curve else "")

    def test_plans_from_before_keep_together_nothing(self):
        data = json.loads(self.plan("learning_curve", "bootstrap").to_json())
        data["curve"]["settings"] = [["sizes", 6], ["subsets", 20]]
        old = Plan.from_json(json.dumps(data))
        assert old.curve.values() == SETTINGS
        rounds = old.draw(self.table)["learning_curve"]
        new = self.plan("learning_curve", "bootstrap").draw(self.table)["learning_curve"]
        assert (rounds.train == new.train).all()
        assert (rounds.test == new.test).all()


class TestARealCandidate:
    def test_nearest_mean_on_drawn_rounds(self):
        """Fitted bag by bag to ten features of which three tell; judged by the definition."""
        rng = np.random.default_rng(5)
        labels = np.repeat([0, 1], [40, 60])
        x = rng.normal(size=(100, 10))
        x[:, :3] += 0.9 * labels[:, None]
        table = table_of(labels.tolist(), features=x)
        rounds = rounds_of(table)
        right = []
        for train, test in zip(rounds.train, rounds.test, strict=True):
            means = [x[(train > 0) & (labels == k)].mean(axis=0) for k in range(2)]
            far = [((x[test > 0] - mean) ** 2).sum(axis=1) for mean in means]
            right += ((far[1] < far[0]) == labels[test > 0]).tolist()
        part = part_of(rounds, labels, np.array(right))
        shares = double_loop(part)
        assert not np.isnan(shares).any()
        expected = {
            "accuracy": shares.mean(axis=1),
            "sensitivity": shares[:, :40].mean(axis=1),
            "balanced_accuracy": (shares[:, :40].mean(axis=1) + shares[:, 40:].mean(axis=1)) / 2,
        }
        for measure, values in expected.items():
            curve = curve_of(part, measure, resamples=50)
            assert_allclose(curve.values, values, rtol=1e-13)
            assert (curve.low < curve.values).all()
            assert (curve.values < curve.high).all()
        # seven of ten features tell nothing: means of 6 and 9 units are worse than of 32 and 48
        assert expected["accuracy"][-1] > expected["accuracy"][0]


def double_loop(part: Judged) -> np.ndarray:
    """e(s, i) as defined, answer by answer; nan where no round of the size held i out."""
    rounds, rank = part.held.rounds, []
    for r in range(rounds.n_rounds):
        inside = r > 0 and (rounds.train[r] >= rounds.train[r - 1]).all()
        rank.append(rank[-1] + 1 if inside else 0)
    answered = {(s, i): [] for s in range(max(rank) + 1) for i in range(rounds.n_cases)}
    for r, i, ok in zip(*rounds.pairs, part.held.correct, strict=True):
        answered[rank[r], int(i)].append(bool(ok))
    found = [sum(given) / len(given) if given else math.nan for given in answered.values()]
    return np.array(found).reshape(-1, rounds.n_cases)
