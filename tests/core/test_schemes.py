"""What every scheme promises, on tables of many shapes, and what it refuses."""

import dataclasses

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from sklearn.model_selection import LeaveOneGroupOut, LeaveOneOut, TimeSeriesSplit

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.draws import held_out_sizes, time_stretches
from evalcore.errors import PlanError
from evalcore.groups import groups_of
from evalcore.plan import Plan
from evalcore.schemes import SCHEMES, draw

from .checks import exactly, table_of


@st.composite
def tables(draw, least: int = 2, most_units: int = 12):
    """Two or three classes of `least` to `most_units` units each, of one to three cases, mixed."""
    sizes = draw(st.lists(st.integers(least, most_units), min_size=2, max_size=3))
    unit_labels = np.repeat(np.arange(len(sizes)), sizes)
    per_unit = draw(
        st.lists(st.integers(1, 3), min_size=len(unit_labels), max_size=len(unit_labels))
    )
    order = draw(st.permutations(np.repeat(np.arange(len(unit_labels)), per_unit).tolist()))
    # units are numbered in order of first appearance
    number = {unit: at for at, unit in enumerate(dict.fromkeys(order))}
    return table_of(
        [int(unit_labels[unit]) for unit in order], units=[number[unit] for unit in order]
    )


@st.composite
def placed_tables(draw):
    """Such tables with a producer and a day for each unit; every scheme fits them.

    The first two units of each class are from two producers, so that no producer has a class to
    itself; the first is of the earliest day and the second of a later one.
    """
    table = draw(tables())
    producers, days = (
        draw(st.lists(st.integers(0, 5), min_size=table.n_units, max_size=table.n_units))
        for _ in range(2)
    )
    for k in range(table.n_classes):
        one, other = np.flatnonzero(table.unit_labels == k)[:2]
        producers[one], producers[other] = 0, 1
        days[one], days[other] = -1, 6
    entries = {
        "producer": tuple(f"p{producers[unit]}" for unit in table.units),
        "day": tuple(str(days[unit]) for unit in table.units),
    }
    return dataclasses.replace(table, entries=entries)


def rounds_of(table, key, seed=1, **settings):
    choice = choose(SCHEMES, key, **settings)
    return draw(SCHEMES[key], table, choice.values(), np.random.default_rng(seed))


def some_rounds(table, seed=1):
    """Every scheme, stratified and not, with few rounds."""
    smallest = int(table.class_counts("unit").min())
    for stratified in (True, False):
        folds = min(5, smallest)
        yield rounds_of(
            table, "cross_validation", seed, folds=folds, repeats=3, stratified=stratified
        )
        yield rounds_of(table, "bootstrap", seed, rounds=7, stratified=stratified)
        yield rounds_of(table, "random_subsampling", seed, rounds=7, stratified=stratified)
        yield rounds_of(table, "holdout", seed, test_share=0.4, stratified=stratified)
    yield rounds_of(table, "leave_one_out", seed)


def placed_rounds(table, seed=1):
    """Every scheme with what it keeps together: column and rounds."""
    for stratified in (True, False):
        chosen = {"keep": "producer", "stratified": stratified}
        yield "producer", rounds_of(table, "cross_validation", seed, folds=2, repeats=3, **chosen)
        for key in ("bootstrap", "random_subsampling"):
            yield "producer", rounds_of(table, key, seed, rounds=7, **chosen)
        yield "producer", rounds_of(table, "holdout", seed, test_share=0.4, **chosen)
    yield "producer", rounds_of(table, "leave_block_out", seed, column="producer")
    yield "", rounds_of(table, "leave_one_out", seed)
    yield "day", rounds_of(table, "forward_in_time", seed, column="day")


seeds = st.integers(0, 1000)


@given(placed_tables(), seeds)
def test_what_is_kept_together_is_never_on_both_sides(table, seed):
    for column, rounds in placed_rounds(table, seed):
        for grouping in {"", column}:
            groups = groups_of(table, grouping)
            for group in range(groups.number):
                rows = groups.of_case == group
                for part in (rounds.train[:, rows], rounds.test[:, rows]):
                    assert (part == part[:, :1]).all()
        assert not ((rounds.train > 0) & (rounds.test > 0)).any()


@given(placed_tables(), seeds)
def test_all_that_is_kept_together_is_drawn_or_held_out(table, seed):
    for column, rounds in placed_rounds(table, seed):
        if column != "day":
            assert ((rounds.train > 0) | (rounds.test > 0)).all()


@given(tables(), seeds)
def test_cases_of_a_unit_are_never_on_both_sides(table, seed):
    for rounds in some_rounds(table, seed):
        for unit in range(table.n_units):
            rows = table.units == unit
            for part in (rounds.train[:, rows], rounds.test[:, rows]):
                assert (part == part[:, :1]).all()
        assert not ((rounds.train > 0) & (rounds.test > 0)).any()


@given(tables(), seeds)
def test_every_unit_is_either_drawn_or_held_out(table, seed):
    for rounds in some_rounds(table, seed):
        assert ((rounds.train > 0) | (rounds.test > 0)).all()


@given(placed_tables(), seeds, st.sampled_from(["", "producer"]))
def test_rounds_are_as_many_as_announced(table, seed, keep):
    for key, scheme in SCHEMES.items():
        offered = {setting.key for setting in scheme.settings}
        settings = {"folds": 2, "repeats": 3} if key == "cross_validation" else {}
        settings |= {"rounds": 6} if key in ("bootstrap", "random_subsampling") else {}
        settings |= {"keep": keep} if "keep" in offered else {}
        settings |= {"column": "producer"} if key == "leave_block_out" else {}
        settings |= {"column": "day", "parts": 3} if key == "forward_in_time" else {}
        values = choose(SCHEMES, key, **settings).values()
        rounds = rounds_of(table, key, seed, **settings)
        assert rounds.n_rounds == scheme.n_rounds(table, values)
        assert rounds.n_cases == table.n_cases


@given(tables(), seeds, st.booleans())
def test_folds(table, seed, stratified):
    folds = min(4, int(table.class_counts("unit").min()))
    rounds = rounds_of(
        table, "cross_validation", seed, folds=folds, repeats=3, stratified=stratified
    ).of_units(table.units)
    for repeat in range(3):
        held = rounds.test[rounds.repeat == repeat]
        assert len(held) == folds
        # each unit once, and part sizes that differ by at most one
        assert (held.sum(axis=0) == 1).all()
        assert np.ptp(held.sum(axis=1, dtype=int)) <= 1
        if stratified:
            for k in range(table.n_classes):
                of_class = held[:, table.unit_labels == k].sum(axis=1, dtype=int)
                assert np.ptp(of_class) <= 1
                assert of_class.min() >= 1
    assert (rounds.train + rounds.test == 1).all()


@given(tables(), seeds)
def test_leave_one_out(table, seed):
    rounds = rounds_of(table, "leave_one_out", seed).of_units(table.units)
    assert (rounds.test.sum(axis=1) == 1).all()
    assert (rounds.test.sum(axis=0) == 1).all()
    assert (rounds.repeat == 0).all()


def test_leave_one_out_as_scikit_learn_has_it():
    rounds = rounds_of(table_of([0, 1, 1, 0, 1, 0, 0]), "leave_one_out")
    expected = [test.tolist() for _, test in LeaveOneOut().split(np.zeros(7))]
    assert [np.flatnonzero(held).tolist() for held in rounds.test] == expected


@given(tables(), seeds, st.booleans())
def test_bags(table, seed, stratified):
    rounds = rounds_of(table, "bootstrap", seed, rounds=9, stratified=stratified)
    bags = rounds.of_units(table.units).train
    assert (bags.sum(axis=1) == table.n_units).all()
    if stratified:
        for k, size in enumerate(table.class_counts("unit")):
            assert (bags[:, table.unit_labels == k].sum(axis=1) == size).all()


@given(tables(), seeds, st.floats(0.05, 0.9))
def test_parts_of_random_subsampling(table, seed, share):
    rounds = rounds_of(table, "random_subsampling", seed, rounds=6, test_share=share)
    by_unit = rounds.of_units(table.units)
    sizes = table.class_counts("unit")
    expected = held_out_sizes(sizes, share)
    for k, size in enumerate(sizes):
        of_class = by_unit.test[:, table.unit_labels == k].sum(axis=1)
        assert (of_class == expected[k]).all()
        assert 1 <= expected[k] <= size - 1
    assert (by_unit.train + by_unit.test == 1).all()


@given(tables(), seeds, st.floats(0.05, 0.9))
def test_unstratified_parts_hold_out_the_share_of_all(table, seed, share):
    rounds = rounds_of(
        table, "random_subsampling", seed, rounds=6, test_share=share, stratified=False
    )
    sizes = rounds.of_units(table.units).test_sizes
    expected = min(max(round(share * table.n_units), 1), table.n_units - 1)
    assert sizes.tolist() == [expected] * 6


@given(tables(), seeds)
def test_hold_out_is_one_round_of_random_subsampling(table, seed):
    once = rounds_of(table, "holdout", seed, test_share=0.35)
    first = rounds_of(table, "random_subsampling", seed, rounds=1, test_share=0.35)
    assert once.test.tolist() == first.test.tolist()


class TestBlocks:
    @given(placed_tables(), seeds)
    def test_each_unit_once_and_one_block_a_round(self, table, seed):
        rounds = rounds_of(table, "leave_block_out", seed, column="producer")
        assert (rounds.times_tested == 1).all()
        assert (rounds.train + rounds.test == 1).all()
        assert (rounds.repeat == 0).all()
        producers = np.array(table.entries["producer"])
        assert rounds.n_rounds == len(set(producers))
        held = [set(producers[row > 0]) for row in rounds.test]
        assert all(len(names) == 1 for names in held)
        # in the order of their names
        assert [names.pop() for names in held] == sorted(set(producers))

    @given(placed_tables())
    def test_every_class_is_learned_from(self, table):
        rounds = rounds_of(table, "leave_block_out", column="producer")
        for k in range(table.n_classes):
            assert (rounds.train[:, table.labels == k].sum(axis=1) > 0).all()

    @given(placed_tables())
    def test_as_scikit_learn_has_it(self, table):
        rounds = rounds_of(table, "leave_block_out", column="producer")
        blocks = LeaveOneGroupOut().split(table.features, groups=table.entries["producer"])
        for row, (train, test) in zip(range(rounds.n_rounds), blocks, strict=True):
            assert np.flatnonzero(rounds.train[row]).tolist() == train.tolist()
            assert np.flatnonzero(rounds.test[row]).tolist() == test.tolist()

    @pytest.mark.parametrize("number", [2, 100])
    def test_two_to_a_hundred_blocks(self, number):
        years = [str(1900 + at // 2) for at in range(2 * number)]
        rounds = rounds_of(
            table_of([0, 1] * number, entries={"year": years}), "leave_block_out", column="year"
        )
        assert rounds.n_rounds == number

    def test_a_class_within_units_of_another_is_there_to_learn_from(self):
        # three rows a person, the last of class ‘b’; two persons a site
        table = table_of(
            [0, 0, 1] * 6,
            units=np.repeat(np.arange(6), 3),
            entries={"site": np.repeat(list("pqr"), 6).tolist()},
        )
        assert rounds_of(table, "leave_block_out", column="site").n_rounds == 3


class TestForwardInTime:
    @given(placed_tables(), st.integers(1, 9))
    def test_judged_is_later_than_all_that_is_trained_on(self, table, parts):
        rounds = rounds_of(table, "forward_in_time", column="day", parts=parts)
        day = np.array([int(entry) for entry in table.entries["day"]])
        for train, test in zip(rounds.train > 0, rounds.test > 0, strict=True):
            assert train.any()
            assert test.any()
            assert day[train].max() < day[test].min()
            # and nothing earlier is left unused
            assert (train == (day < day[test].min())).all()
            # one time is judged as a whole
            assert (test == np.isin(day, day[test])).all()
        assert rounds.n_rounds <= parts

    @given(placed_tables(), st.integers(1, 9))
    def test_each_unit_once_but_the_first_stretch_never(self, table, parts):
        rounds = rounds_of(table, "forward_in_time", column="day", parts=parts)
        first = rounds.train[0] > 0
        assert (rounds.times_tested == ~first).all()
        assert (rounds.train[:, first] == 1).all()
        assert (rounds.repeat == 0).all()
        day = np.array([int(entry) for entry in table.entries["day"]])
        assert first[day == day.min()].all()

    @given(placed_tables(), st.integers(1, 9))
    def test_what_was_judged_is_learned_from_afterwards(self, table, parts):
        rounds = rounds_of(table, "forward_in_time", column="day", parts=parts)
        for r in range(1, rounds.n_rounds):
            assert (rounds.train[r] == rounds.train[r - 1] + rounds.test[r - 1]).all()

    @given(placed_tables())
    def test_every_class_is_learned_from(self, table):
        rounds = rounds_of(table, "forward_in_time", column="day")
        for k in range(table.n_classes):
            assert (rounds.train[:, table.labels == k].sum(axis=1) > 0).all()

    @given(st.integers(2, 5), st.integers(2, 4), st.randoms(use_true_random=False))
    def test_as_scikit_learn_has_it(self, parts, each, random):
        # it cuts into equal stretches as well where they come out even
        n = each * (parts + 1)
        days = list(range(n))
        random.shuffle(days)
        in_time = np.argsort(days)
        table = table_of([day % 2 for day in days], entries={"day": [str(day) for day in days]})
        rounds = rounds_of(table, "forward_in_time", column="day", parts=parts)
        expected = TimeSeriesSplit(n_splits=parts).split(np.zeros(n))
        for row, (train, test) in zip(range(rounds.n_rounds), expected, strict=True):
            assert np.flatnonzero(rounds.train[row, in_time]).tolist() == train.tolist()
            assert np.flatnonzero(rounds.test[row, in_time]).tolist() == test.tolist()

    def test_dates(self):
        days = ["2021-03-01", "2020-12-31", "2021-02-28", "2020-01-15", "2020-01-15", "2021-01-01"]
        table = table_of([0, 1, 0, 0, 1, 1], entries={"day": days})
        rounds = rounds_of(table, "forward_in_time", column="day", parts=2)
        assert rounds.train.tolist() == [[0, 0, 0, 1, 1, 0], [0, 1, 0, 1, 1, 1]]
        assert rounds.test.tolist() == [[0, 1, 0, 0, 0, 1], [1, 0, 1, 0, 0, 0]]

    def test_a_class_within_units_of_another_is_there_to_learn_from(self):
        table = table_of(
            [0, 0, 1] * 6,
            units=np.repeat(np.arange(6), 3),
            entries={"year": np.repeat(["2019", "2020", "2021"], 6).tolist()},
        )
        assert rounds_of(table, "forward_in_time", column="year", parts=2).n_rounds == 2


class TestKeptTogether:
    @given(placed_tables(), seeds)
    def test_folds_hold_each_producer_once_a_repeat(self, table, seed):
        groups = groups_of(table, "producer")
        for stratified in (True, False):
            rounds = rounds_of(
                table,
                "cross_validation",
                seed,
                folds=2,
                repeats=3,
                stratified=stratified,
                keep="producer",
            ).of_units(groups.of_case)
            for repeat in range(3):
                held = rounds.test[rounds.repeat == repeat]
                assert (held.sum(axis=0) == 1).all()
                assert (held.sum(axis=1) >= 1).all()

    @given(placed_tables(), seeds)
    def test_bags_hold_as_many_producers_as_there_are(self, table, seed):
        groups = groups_of(table, "producer")
        for stratified in (True, False):
            rounds = rounds_of(
                table, "bootstrap", seed, rounds=7, stratified=stratified, keep="producer"
            )
            bags = rounds.of_units(groups.of_case).train
            assert (bags.sum(axis=1) == groups.number).all()

    @given(placed_tables(), seeds, st.floats(0.05, 0.9))
    def test_parts_are_the_share_of_producers(self, table, seed, share):
        rounds = rounds_of(
            table,
            "random_subsampling",
            seed,
            rounds=5,
            test_share=share,
            stratified=False,
            keep="producer",
        )
        groups = groups_of(table, "producer")
        expected = held_out_sizes(np.array([groups.number]), share)[0]
        assert (rounds.of_units(groups.of_case).test_sizes == expected).all()

    @given(tables(), seeds)
    def test_kept_by_unit_is_what_is_done_anyway(self, table, seed):
        # names that sort as units are numbered
        named = dataclasses.replace(
            table, entries={"id": tuple(f"{unit:03d}" for unit in table.units)}
        )
        for key in ("cross_validation", "bootstrap", "random_subsampling", "holdout"):
            settings = {"folds": 2} if key == "cross_validation" else {}
            kept = rounds_of(named, key, seed, keep="id", **settings)
            assert kept.train.tobytes() == rounds_of(table, key, seed, **settings).train.tobytes()

    def test_classes_are_spread_evenly_over_folds(self):
        # ten producers of 3 + 1 or 1 + 3 lots: two of each kind make no fold lopsided
        labels = ([0, 0, 0, 1] * 5) + ([0, 1, 1, 1] * 5)
        table = table_of(labels, entries={"producer": [f"p{at // 4}" for at in range(40)]})
        rounds = rounds_of(table, "cross_validation", folds=5, repeats=8, keep="producer")
        for k in (0, 1):
            assert (rounds.test[:, table.labels == k].sum(axis=1) == 4).all()

    @pytest.mark.parametrize("key", ["bootstrap", "random_subsampling"])
    def test_a_producer_that_is_alone_of_its_kind_is_held_out_too(self, key):
        labels = [0, 0, 1] * 5 + [1, 1, 0]
        table = table_of(labels, entries={"producer": [f"p{at // 3}" for at in range(18)]})
        rounds = rounds_of(table, key, rounds=60, keep="producer")
        assert (rounds.times_tested > 0).all()

    @pytest.mark.parametrize("key", ["bootstrap", "random_subsampling", "holdout"])
    def test_something_is_held_out(self, key):
        table = table_of([0, 0, 1, 0, 1, 1], entries={"producer": list("pppqqq")})
        assert rounds_of(table, key, keep="producer").test_sizes.max() > 0


def test_what_is_not_drawn_is_the_same_for_every_seed():
    days = [str(day) for day in range(12)]
    table = table_of([0, 1] * 6, entries={"site": list("ppqqrr") * 2, "day": days})
    columns = {"leave_block_out": "site", "forward_in_time": "day"}
    for key, scheme in SCHEMES.items():
        chosen = {"column": columns[key]} if key in columns else {}
        one, other = (rounds_of(table, key, seed, **chosen).test.tobytes() for seed in (1, 2))
        assert (one != other) == scheme.drawn


@given(tables(), seeds)
def test_the_same_seed_draws_the_same(table, seed):
    for one, other in zip(some_rounds(table, seed), some_rounds(table, seed), strict=True):
        assert one.train.tobytes() == other.train.tobytes()
        assert one.test.tobytes() == other.test.tobytes()


def test_another_seed_draws_others():
    table = table_of([0] * 15 + [1] * 11)
    pairs = zip(list(some_rounds(table, 1))[:-1], list(some_rounds(table, 2))[:-1], strict=True)
    assert all(one.test.tobytes() != other.test.tobytes() for one, other in pairs)


class TestThroughAPlan:
    table = table_of([0] * 9 + [1] * 14 + [2] * 6)

    def drawn(self, key, seed=1, others=(), **settings):
        choice = choose(SCHEMES, key, **settings)
        plan = Plan(
            self.table.roles, (*others, choice), (choose(CANDIDATES, "majority"),), seed=seed
        )
        return plan.draw(self.table)[plan.scheme_names[-1]]

    @pytest.mark.parametrize(
        ("key", "appending", "few", "many"),
        [
            ("cross_validation", "repeats", 2, 5),
            ("bootstrap", "rounds", 13, 40),
            ("random_subsampling", "rounds", 13, 40),
        ],
    )
    def test_more_rounds_only_append(self, key, appending, few, many):
        short, long = (self.drawn(key, **{appending: number}) for number in (few, many))
        assert short.n_rounds < long.n_rounds
        begin = long.first(short.n_rounds)
        assert begin.train.tobytes() == short.train.tobytes()
        assert begin.test.tobytes() == short.test.tobytes()
        assert begin.repeat.tobytes() == short.repeat.tobytes()

    def test_another_scheme_beside_it_moves_nothing(self):
        alone = self.drawn("bootstrap", rounds=11)
        beside = self.drawn("bootstrap", others=(choose(SCHEMES, "cross_validation"),), rounds=11)
        assert alone.train.tobytes() == beside.train.tobytes()
        # nor does a second bootstrap, beside which both go by longer names
        second = choose(SCHEMES, "bootstrap", rounds=11, stratified=False)
        named = self.drawn("bootstrap", others=(second,), rounds=11)
        assert alone.train.tobytes() == named.train.tobytes()

    def test_the_seed_moves_the_rounds(self):
        assert (
            self.drawn("bootstrap", seed=1, rounds=5).train.tobytes()
            != self.drawn("bootstrap", seed=2, rounds=5).train.tobytes()
        )

    def test_no_two_repeats_are_alike(self):
        rounds = self.drawn("cross_validation", repeats=6)
        parts = {rounds.test[rounds.repeat == repeat].tobytes() for repeat in range(6)}
        assert len(parts) == 6


class TestHeldOutSizes:
    @pytest.mark.parametrize(
        ("sizes", "share", "expected"),
        [
            # 11.4 and 42.6 of 54: the second has the larger remainder
            ([38, 142], 0.3, [11, 43]),
            # 3.3, 3.3, 3.3 of 10 (9.9): one more, to the first of equals
            ([11, 11, 11], 0.3, [4, 3, 3]),
            # 0.4 and 7.6 of 8; the small class keeps one on each side
            ([2, 38], 0.2, [1, 8]),
            # 1.8 and 9 of 11 (10.8): the class of two keeps one to learn from
            ([2, 10], 0.9, [1, 9]),
        ],
    )
    def test_by_hand(self, sizes, share, expected):
        assert held_out_sizes(np.array(sizes), share).tolist() == expected

    @given(st.lists(st.integers(2, 60), min_size=1, max_size=5), st.floats(0.05, 0.9))
    def test_within_one_of_the_share_and_one_on_each_side(self, sizes, share):
        found = held_out_sizes(np.array(sizes), share)
        for held, size in zip(found, sizes, strict=True):
            assert 1 <= held <= size - 1
            assert abs(held - share * size) <= 1 + 1e-9


# these refuse a class that cannot be learned from in words of their own
NEED_A_COLUMN = ("leave_block_out", "forward_in_time")


class TestRefusals:
    def refused(self, table, key, message, **settings):
        with pytest.raises(PlanError, match=exactly(message)):
            rounds_of(table, key, **settings)

    def test_more_folds_than_the_smallest_class_has(self):
        self.refused(
            table_of([0] * 12 + [1] * 7),
            "cross_validation",
            "`folds` must be between 2 and 7, because class ‘b’ has 7\u00a0cases; got 10.",
            folds=10,
        )

    def test_more_folds_than_units(self):
        self.refused(
            table_of([0] * 6 + [1] * 5),
            "cross_validation",
            "`folds` must be between 2 and 11, the number of cases; got 12.",
            folds=12,
            stratified=False,
        )

    def test_folds_up_to_the_number_of_units_are_drawn(self):
        rounds = rounds_of(
            table_of([0] * 6 + [1] * 5), "cross_validation", folds=11, repeats=1, stratified=False
        )
        assert (rounds.test_sizes == 1).all()

    @pytest.mark.parametrize("key", [key for key in SCHEMES if key not in NEED_A_COLUMN])
    def test_a_class_of_one(self, key):
        self.refused(
            table_of([0] * 6 + [1]),
            key,
            "Class ‘b’ has 1\u00a0case; at least 2 are needed, so that one can be learned from "
            "while another is held out. Leave the class out, join it to another, or add to it.",
        )

    def test_units_count_not_rows(self):
        self.refused(
            table_of([0, 0, 0, 1, 1, 1, 1], units=[0, 1, 2, 3, 3, 4, 4]),
            "cross_validation",
            "`folds` must be between 2 and 2, because class ‘b’ has 2\u00a0cases; got 3.",
            folds=3,
        )

    def test_units_that_hold_both_classes_can_be_drawn(self):
        # every person has readings of both classes: no class is short of persons
        table = table_of([0, 0, 1] * 6, units=np.repeat(np.arange(6), 3))
        rounds = rounds_of(table, "bootstrap", rounds=3)
        assert (rounds.of_units(table.units).train.sum(axis=1) == 6).all()

    def test_folds_are_bounded_by_the_units_that_hold_a_class(self):
        # five persons mostly of ‘a’ and one mostly of ‘b’; all six have readings of both
        table = table_of([0, 0, 1] * 5 + [1, 1, 0], units=np.repeat(np.arange(6), 3))
        assert rounds_of(table, "cross_validation", folds=5).n_rounds == 100


class TestRefusalsOfBlocks:
    def refused(self, table, message, **settings):
        with pytest.raises(PlanError, match=exactly(message)):
            rounds_of(table, "leave_block_out", **settings)

    def test_no_column(self):
        self.refused(
            table_of([0, 1] * 3, entries={"site": list("ppqqrr")}),
            "`column` must name the column whose blocks are left out (year, site, instrument); it "
            "is empty.",
        )

    def test_an_unknown_column(self):
        self.refused(
            table_of([0, 1] * 3, entries={"site": list("ppqqrr"), "year": list("121212")}),
            "There is no column ‘town’; the file has ‘site’ and ‘year’.",
            column="town",
        )

    @pytest.mark.parametrize(("number", "shown"), [(1, "1"), (101, "101"), (1200, "1,200")])
    def test_too_few_or_too_many_blocks(self, number, shown):
        entries = [str(at // 2) for at in range(2 * number)]
        self.refused(
            table_of([0, 1] * number, entries={"site": entries}),
            f"‘site’ has {shown} different entries; between 2 and 100 blocks can be left out one "
            "after the other.",
            column="site",
        )

    def test_a_block_that_has_a_class_to_itself(self):
        self.refused(
            table_of([0, 1, 0, 2, 0, 1], entries={"site": list("ppqqrr")}),
            "Without block ‘q’ of ‘site’ no ‘c’ is left to learn from.",
            column="site",
        )

    def test_a_class_of_one(self):
        self.refused(
            table_of([0] * 6 + [1], entries={"id": list("uvwxyzt")}),
            "Without block ‘t’ of ‘id’ no ‘b’ is left to learn from.",
            column="id",
        )

    def test_a_unit_in_two_blocks(self):
        self.refused(
            table_of(
                [0, 1, 0, 1, 0], units=[0, 1, 0, 2, 3], entries={"site": ["p", "p", "q", "q", "q"]}
            ),
            "The column ‘site’ splits case ‘u0’: its rows carry different entries. What is kept "
            "together must hold whole cases.",
            column="site",
        )

    @given(tables(), st.data())
    def test_refused_exactly_where_a_class_would_be_missing(self, table, data):
        sites = data.draw(
            st.lists(st.integers(0, 3), min_size=table.n_units, max_size=table.n_units)
        )
        sites[:2] = [0, 1]  # at least two
        table = dataclasses.replace(
            table, entries={"site": tuple(str(sites[unit]) for unit in table.units)}
        )
        of_class = [
            {sites[u] for u in np.flatnonzero(table.unit_labels == k)}
            for k in range(table.n_classes)
        ]
        if min(map(len, of_class)) == 1:
            with pytest.raises(PlanError, match="is left to learn from"):
                rounds_of(table, "leave_block_out", column="site")
        else:
            assert rounds_of(table, "leave_block_out", column="site").n_rounds == len(set(sites))


class TestRefusalsOfTime:
    def refused(self, table, message, **settings):
        with pytest.raises(PlanError, match=exactly(message)):
            rounds_of(table, "forward_in_time", **settings)

    def test_no_column(self):
        self.refused(
            table_of([0, 1] * 3, entries={"day": list("123456")}),
            "`column` must name the column that orders units in time; it is empty.",
        )

    def test_an_unknown_column(self):
        self.refused(
            table_of([0, 1] * 3, entries={"day": list("123456")}),
            "There is no column ‘date’; the file has ‘day’.",
            column="date",
        )

    def test_one_time_for_all(self):
        self.refused(
            table_of([0, 1] * 3, entries={"day": ["2020-05-17"] * 6}),
            "All cases share one time in ‘day’.",
            column="day",
        )

    def test_an_odd_entry(self):
        self.refused(
            table_of([0, 1] * 3, entries={"day": ["1", "2", "3", "later", "5", "6"]}),
            "The column ‘day’ cannot be put in order of time: it holds ‘later’. Numbers are "
            "allowed, and dates written year-month-day.",
            column="day",
        )

    def test_the_earliest_stretch_lacks_a_class(self):
        table = table_of(
            [0, 0, 0, 1, 1, 0, 1, 1, 0, 1], entries={"day": [str(day) for day in range(10)]}
        )
        self.refused(
            table,
            "The earliest cases by ‘day’ (2 of them) hold no ‘b’ to learn from; take fewer `parts`.",
            column="day",
        )
        # halves instead of fifths
        assert rounds_of(table, "forward_in_time", column="day", parts=1).n_rounds == 1

    @given(tables(), st.data(), st.integers(1, 6))
    def test_refused_exactly_where_the_earliest_lack_a_class(self, table, data, parts):
        days = data.draw(
            st.lists(st.integers(0, 9), min_size=table.n_units, max_size=table.n_units)
        )
        days[:2] = [0, 10]
        table = dataclasses.replace(
            table, entries={"day": tuple(str(days[unit]) for unit in table.units)}
        )
        first = time_stretches(table, {"column": "day", "parts": parts}) == 0
        assume(not first.all())
        lacks = len(set(table.unit_labels[first])) < table.n_classes
        if lacks:
            with pytest.raises(PlanError, match=r"hold no ‘[abc]’ to learn from"):
                rounds_of(table, "forward_in_time", column="day", parts=parts)
        else:
            rounds = rounds_of(table, "forward_in_time", column="day", parts=parts)
            assert (rounds.of_units(table.units).train[0] == first).all()

    @pytest.mark.parametrize("days", ["1112", "1111119", "112"])
    def test_two_times_are_enough(self, days):
        labels = [0, 1] * 4
        table = table_of(labels[: len(days)], entries={"day": list(days)})
        rounds = rounds_of(table, "forward_in_time", column="day", parts=1)
        assert rounds.train.tolist() == [[int(day == "1") for day in days]]


class TestRefusalsOfKeptTogether:
    KEYS = ("cross_validation", "bootstrap", "random_subsampling", "holdout")

    def refused(self, table, message, key="cross_validation", **settings):
        with pytest.raises(PlanError, match=exactly(message)):
            rounds_of(table, key, **settings)

    @pytest.mark.parametrize("key", KEYS)
    def test_an_unknown_column(self, key):
        self.refused(
            table_of([0, 1] * 5, entries={"site": list("ppqqrrsstt")}),
            "There is no column ‘town’; the file has ‘site’.",
            key,
            keep="town",
        )

    @pytest.mark.parametrize("key", KEYS)
    def test_a_column_that_splits_a_unit(self, key):
        self.refused(
            table_of(
                [0, 0, 1, 1, 0, 1],
                units=[0, 0, 1, 2, 3, 4],
                entries={"producer": ["p", "q", "p", "q", "q", "p"]},
            ),
            "The column ‘producer’ splits case ‘u0’: its rows carry different entries. What is "
            "kept together must hold whole cases.",
            key,
            keep="producer",
        )

    @pytest.mark.parametrize("key", KEYS)
    def test_a_class_of_one_producer(self, key):
        self.refused(
            table_of([0, 0, 0, 1, 1, 0], entries={"producer": list("pqrppq")}),
            "Class ‘b’ is found in 1 of 3 entries of ‘producer’; at least 2 are needed where these "
            "are kept together.",
            key,
            keep="producer",
        )

    def test_more_folds_than_producers_of_a_class(self):
        labels = [0, 1, 0, 1, 0, 1, 0, 0]
        self.refused(
            table_of(labels, entries={"producer": list("ppqqrrst")}),
            "`folds` must be between 2 and 3, because class ‘b’ is found in 3 entries of "
            "‘producer’; got 4.",
            folds=4,
            keep="producer",
        )

    def test_more_folds_than_producers(self):
        labels = [0, 1, 0, 1, 0, 1, 0, 0]
        self.refused(
            table_of(labels, entries={"producer": list("ppqqrrst")}),
            "`folds` must be between 2 and 5, the number of entries of ‘producer’; got 6.",
            folds=6,
            keep="producer",
            stratified=False,
        )
