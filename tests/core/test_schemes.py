"""What every scheme promises, on tables of many shapes, and what it refuses."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from evalcore.candidates import CANDIDATES
from evalcore.draws import held_out_sizes
from evalcore.errors import PlanError
from evalcore.plan import Plan, choose
from evalcore.schemes import SCHEMES, draw
from evalcore.settings import Setting

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


seeds = st.integers(0, 1000)


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


@given(tables(), seeds)
def test_rounds_are_as_many_as_announced(table, seed):
    for key, scheme in SCHEMES.items():
        settings = {"folds": 2, "repeats": 3} if key == "cross_validation" else {}
        settings |= {"rounds": 6} if key in ("bootstrap", "random_subsampling") else {}
        values = choose(SCHEMES, key, **settings).values()
        rounds = rounds_of(table, key, seed, **settings)
        assert rounds.n_rounds == scheme.n_rounds(values, table.n_units)
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

    @pytest.mark.parametrize("key", SCHEMES)
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


class TestSettings:
    whole = Setting("folds", "Parts", "whole", 5, 2, 100)
    number = Setting("C", "Strength", "number", 1.0, 1e-4, 1e4)
    yes_no = Setting("stratified", "Keep shares", "yes_no", True)
    choice = Setting("scaling", "Scaling", "choice", "standard", choices=("standard", "none"))

    def test_read(self):
        assert self.whole.read("12") == 12
        assert self.number.read("0.25") == 0.25
        assert self.yes_no.read("yes") is True
        assert self.yes_no.read("no") is False
        assert self.choice.read("none") == "none"

    @pytest.mark.parametrize(
        ("setting", "text", "message"),
        [
            (whole, "3.5", "`folds` must be a whole number; got '3.5'."),
            (number, "much", "`C` must be a number; got 'much'."),
            (yes_no, "true", "`stratified` must be yes or no; got 'true'."),
        ],
    )
    def test_refuses_to_read(self, setting, text, message):
        with pytest.raises(PlanError, match=exactly(message)):
            setting.read(text)

    @pytest.mark.parametrize(
        ("setting", "value", "message"),
        [
            (whole, 1, "`folds` must be between 2 and 100; got 1."),
            (whole, 101, "`folds` must be between 2 and 100; got 101."),
            (number, 2e4, "`C` must be between 0.0001 and 10000; got 20000.0."),
            (number, float("nan"), "`C` must be between 0.0001 and 10000; got nan."),
            (choice, "robust", "`scaling` must be standard or none; got 'robust'."),
        ],
    )
    def test_refuses_values(self, setting, value, message):
        with pytest.raises(PlanError, match=exactly(message)):
            setting.check(value)

    def test_both_bounds_are_allowed(self):
        for value in (2, 100):
            assert self.whole.check(value) is None
