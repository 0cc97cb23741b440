"""Preparation for many rounds at once, against scikit-learn's classes bag by bag and by hand."""

import warnings

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from evalcore.preparation import preparation
from evalcore.prepared import blocks, prepare
from evalcore.table import Column, Roles, Table

from .checks import table_from, table_of

FILES = (
    ("iris.csv", "class"),
    ("penguins.csv", "species"),
    ("penguins_nonascii.csv", "Espèce"),
    ("urine_missing.csv", "r"),
    ("groups_trap_constructed.csv", "label"),
)


def mixed(columns: dict[str, list[float]], *, texts: dict[str, int] | None = None) -> Table:
    """A table of number columns and, by number of categories, text columns."""
    base = table_of([0, 1] * (len(next(iter(columns.values()))) // 2 + 1))
    n = len(next(iter(columns.values())))
    made = tuple(
        Column(
            name,
            "text" if texts and name in texts else "number",
            np.array(values, dtype=float),
            tuple("pqrstu"[: (texts or {}).get(name, 0)]),
        )
        for name, values in columns.items()
    )
    return Table(
        name="made.csv",
        columns=made,
        labels=base.labels[:n],
        classes=base.classes,
        units=np.arange(n),
        unit_names=tuple(f"u{i}" for i in range(n)),
        roles=Roles("class"),
        lines=np.arange(2, n + 2),
        rows_read=n,
    )


def bags_of(n: int, n_rounds: int, *, size: int | None = None, seed: int = 0):
    rng = np.random.default_rng(seed)
    return rng.multinomial(size or n, np.full(n, 1 / n), n_rounds).astype(np.uint8)


def assert_as_plain(table: Table, counts) -> None:
    """Every round equals a ColumnTransformer fitted on the bag's rows with their repeats."""
    for scaled in (False, True):
        ours = prepare(table, counts, scaled=scaled)
        assert ours.features.shape == (*counts.shape, ours.present.shape[1])
        for r, bag in enumerate(counts):
            rows = np.repeat(np.arange(table.n_cases), bag)
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")
                plain = preparation(table, scaled=scaled).fit(table.features[rows])
                expected = plain.transform(table.features)
            found = ours.features[r][:, ours.present[r]]
            assert found.shape == expected.shape
            assert_allclose(found, expected, rtol=1e-10, atol=1e-11)
            assert not ours.features[r][:, ~ours.present[r]].any()


@pytest.mark.parametrize(("name", "label"), FILES)
def test_files_as_scikit_learn_prepares_them(name, label):
    table = table_from(name, Roles(label))
    n = table.n_cases
    assert_as_plain(table, bags_of(n, 6))
    # bags of five rows lack categories, and sometimes all values of a column
    assert_as_plain(table, bags_of(n, 10, size=5, seed=1))
    left_out = (1 - np.eye(n, dtype=np.uint8))[:: n // 4]
    assert_as_plain(table, left_out)


# as files hold them: six decimals at most, so that squares do not fall below the least number
READINGS = st.floats(-1e3, 1e3).map(lambda value: round(value, 6))
NUMBERS = st.one_of(st.just(float("nan")), st.integers(-3, 3).map(float), READINGS)
CODES = st.one_of(st.just(float("nan")), st.integers(0, 2).map(float))


@given(
    st.lists(st.tuples(NUMBERS, NUMBERS, CODES), min_size=3, max_size=12),
    st.integers(0, 2**32 - 1),
)
@settings(max_examples=60, deadline=None)
def test_any_table_as_scikit_learn_prepares_it(rows, seed):
    first, second, text = (list(column) for column in zip(*rows, strict=True))
    table = mixed({"a": first, "t": text, "b": second}, texts={"t": 3})
    assert_as_plain(table, bags_of(len(rows), 5, size=4, seed=seed))


class TestByHand:
    def test_a_median_counts_repeats(self):
        table = mixed({"x": [1.0, 4.0, 9.0, np.nan, 100.0]})
        counts = np.array([[1, 2, 1, 1, 0], [1, 1, 0, 3, 0], [0, 0, 0, 2, 0]], dtype=np.uint8)
        filled = prepare(table, counts, scaled=False).features[:, 3, 0]
        # 1 4 4 9; 1 4; nothing known
        assert filled.tolist() == [4.0, 2.5, 0.0]

    def test_text_ties_take_the_first_entry(self):
        table = mixed({"t": [2.0, 1.0, np.nan, 0.0]}, texts={"t": 3})
        counts = np.array([[1, 1, 1, 0], [2, 1, 1, 0], [0, 0, 1, 0]], dtype=np.uint8)
        ours = prepare(table, counts, scaled=False)
        assert ours.features[:, 2].tolist() == [[0, 1, 0], [0, 0, 1], [1, 0, 0]]
        assert ours.present.tolist() == [
            [False, True, True],
            [False, True, True],
            [True, False, False],
        ]

    def test_a_category_the_bag_lacks_is_zero_for_all(self):
        table = mixed({"t": [0.0, 1.0, 1.0, 0.0]}, texts={"t": 2})
        ours = prepare(table, np.array([[1, 0, 0, 1]], dtype=np.uint8), scaled=True)
        assert ours.features[0].tolist() == [[1, 0], [0, 0], [0, 0], [1, 0]]
        assert ours.present.tolist() == [[True, False]]
        assert not ours.shared

    def test_numbers_come_before_text(self):
        table = mixed({"t": [0.0, 1.0], "x": [5.0, 7.0]}, texts={"t": 2})
        ours = prepare(table, np.ones((1, 2), dtype=np.uint8), scaled=False)
        assert ours.features[0].tolist() == [[5, 1, 0], [7, 0, 1]]

    def test_standard_deviation_has_divisor_n(self):
        table = mixed({"x": [1.0, 3.0, 7.0]})
        ours = prepare(table, np.array([[1, 1, 0]], dtype=np.uint8), scaled=True)
        assert ours.features[0, :, 0].tolist() == [-1.0, 1.0, 5.0]

    def test_a_constant_column_is_only_centred(self):
        table = mixed({"x": [0.1] * 7 + [0.6]})
        ours = prepare(table, np.array([[1] * 7 + [0]], dtype=np.uint8), scaled=True)
        assert_allclose(ours.features[0, :, 0], [0.0] * 7 + [0.5], atol=1e-15)

    def test_columns_far_from_zero_keep_their_digits(self):
        table = mixed({"x": [1e8 + 1, 1e8 + 3, 1e8 + 5]})
        ours = prepare(table, np.array([[1, 1, 0]], dtype=np.uint8), scaled=True)
        assert ours.features[0, :, 0].tolist() == [-1.0, 1.0, 3.0]


def test_rounds_share_what_they_can():
    table = table_of([0, 1, 0, 1])
    ours = prepare(table, np.ones((3, 4), dtype=np.uint8), scaled=False)
    assert ours.shared
    assert ours.columns.strides[0] == 0
    assert not ours.columns.flags.writeable
    assert not prepare(table, np.ones((3, 4), dtype=np.uint8), scaled=True).shared


def test_the_table_is_left_as_it_was():
    table = mixed({"x": [1.0, np.nan, 3.0]})
    before = table.features.copy()
    prepare(table, np.ones((1, 3), dtype=np.uint8), scaled=True)
    assert np.array_equal(table.features, before, equal_nan=True)


@pytest.mark.parametrize(("n", "p", "n_rounds"), [(5, 1, 7), (3000, 10, 10), (50_000, 4, 3)])
def test_blocks_hold_every_round_once_and_stay_small(n, p, n_rounds):
    table = table_of([0, 1] * (n // 2), features=np.zeros((n // 2 * 2, p)))
    parts = blocks(n_rounds, table)
    assert [r for part in parts for r in range(n_rounds)[part]] == list(range(n_rounds))
    assert max(part.stop - part.start for part in parts) == min(
        n_rounds, max(1, 40_000 // (n // 2 * 2 * p))
    )


def test_rounds_prepared_apart_are_the_same():
    table = table_from("penguins.csv", Roles("species"))
    counts = bags_of(table.n_cases, 6, seed=3)
    whole = prepare(table, counts, scaled=True)
    for r in range(6):
        alone = prepare(table, counts[r : r + 1], scaled=True)
        assert_allclose(alone.features[0], whole.features[r], rtol=1e-12, atol=1e-13)
