"""The count matrix and its laws."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from evalcore.rounds import Rounds

from .checks import exactly


def rounds_of(train, test, repeat) -> Rounds:
    return Rounds(np.array(train, np.uint8), np.array(test, np.uint8), np.array(repeat))


@st.composite
def bags(draw) -> np.ndarray:
    n, n_rounds = draw(st.integers(1, 9)), draw(st.integers(1, 6))
    rows = st.lists(st.integers(0, 4), min_size=n, max_size=n)
    return np.array(draw(st.lists(rows, min_size=n_rounds, max_size=n_rounds)))


@given(bags())
def test_of_bags(counts):
    rounds = Rounds.of_bags(counts)
    assert rounds.train.tolist() == counts.tolist()
    assert rounds.test.tolist() == (counts == 0).astype(int).tolist()
    assert rounds.repeat.tolist() == list(range(len(counts)))
    assert (rounds.n_rounds, rounds.n_cases) == counts.shape
    assert_allclose(rounds.distinct_share, (counts > 0).mean(axis=1), rtol=1e-15)


@given(bags())
def test_pairs_run_by_round_and_then_by_case(counts):
    rounds = Rounds.of_bags(counts)
    expected = [(r, i) for r, row in enumerate(counts) for i, times in enumerate(row) if times == 0]
    assert list(zip(*(at.tolist() for at in rounds.pairs), strict=True)) == expected
    assert rounds.times_tested.tolist() == [
        sum(i == j for _, j in expected) for i in range(counts.shape[1])
    ]
    assert rounds.test_sizes.tolist() == [
        sum(r == s for s, _ in expected) for r in range(len(counts))
    ]


@given(bags(), st.data())
def test_units_and_cases_are_two_views_of_the_same_rounds(counts, data):
    by_unit = Rounds.of_bags(counts)
    sizes = data.draw(
        st.lists(st.integers(1, 3), min_size=counts.shape[1], max_size=counts.shape[1])
    )
    units = np.array(data.draw(st.permutations(np.repeat(np.arange(len(sizes)), sizes).tolist())))
    by_case = by_unit.of_cases(units)
    assert by_case.n_cases == sum(sizes)
    for case, unit in enumerate(units):
        assert by_case.train[:, case].tolist() == counts[:, unit].tolist()
    again = by_case.of_units(units)
    assert again.train.tolist() == by_unit.train.tolist()
    assert again.test.tolist() == by_unit.test.tolist()


def test_parts_keep_their_repeat():
    out = np.tile(np.eye(3, dtype=np.uint8), (2, 1))
    rounds = Rounds(1 - out, out, np.repeat([0, 1], 3))
    part = rounds.part(slice(2, 5))
    assert part.test.tolist() == out[2:5].tolist()
    assert part.train.tolist() == (1 - out[2:5]).tolist()
    assert part.repeat.tolist() == [0, 1, 1]
    assert rounds.first(4).test.tolist() == out[:4].tolist()


def test_the_largest_count_is_kept():
    assert Rounds.of_bags([[255, 0]]).train.tolist() == [[255, 0]]


@pytest.mark.parametrize("counts", [[[256, 0]], [[-1, 1]]])
def test_refuses_counts_out_of_range(counts):
    message = "A case cannot be drawn fewer than 0 or more than 255 times."
    with pytest.raises(ValueError, match=exactly(message)):
        Rounds.of_bags(counts)


def test_refuses_a_case_on_both_sides():
    message = "A case is trained on and judged in the same round."
    with pytest.raises(ValueError, match=exactly(message)):
        rounds_of([[1, 1, 0]], [[0, 1, 1]], [0])


def test_refuses_shapes_that_differ():
    message = "`train`, `test` and `repeat` must agree in shape; got (1, 3), (1, 2) and (1,)."
    with pytest.raises(ValueError, match=exactly(message)):
        rounds_of([[1, 1, 0]], [[0, 1]], [0])


def test_arrays_are_read_only():
    rounds = Rounds.of_bags([[2, 0, 1]])
    for array in (rounds.train, rounds.test, rounds.repeat):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 1
