"""What is kept together: units, groups that share an entry, and their order in time."""

import datetime
import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import rankdata

from evalcore.draws import _even_folds, time_stretches
from evalcore.errors import PlanError
from evalcore.groups import groups_of, order_of

from .checks import exactly, table_of


def dated(days, column="day"):
    """A table of one case per time, the classes taking turns."""
    return table_of([at % 2 for at in range(len(days))], entries={column: days})


class TestGroups:
    def test_units_by_hand(self):
        groups = groups_of(table_of([1, 0, 1, 0, 2], units=[0, 1, 0, 2, 3]))
        assert groups.of_case.tolist() == [0, 1, 0, 2, 3]
        assert groups.names == ("u0", "u1", "u2", "u3")
        assert groups.counts.tolist() == [[0, 1, 0], [1, 0, 0], [1, 0, 0], [0, 0, 1]]
        assert groups.number == 4
        assert groups.labels.tolist() == [1, 0, 0, 2]
        assert groups.alike

    def test_by_a_column_by_hand(self):
        table = table_of(
            [1, 0, 1, 0, 2, 0],
            units=[0, 1, 0, 2, 3, 4],
            entries={"site": ["q", "p", "q", "p", "q", "r"]},
        )
        groups = groups_of(table, "site")
        assert groups.names == ("p", "q", "r")
        assert groups.of_case.tolist() == [1, 0, 1, 0, 1, 2]
        # units, not rows: u0 counts once
        assert groups.counts.tolist() == [[2, 0, 0], [0, 1, 1], [1, 0, 0]]
        # ‘q’ has one unit of ‘b’ and one of ‘c’: the first of them
        assert groups.labels.tolist() == [0, 1, 0]
        assert not groups.alike

    def test_numbers_are_ordered_by_size_before_words(self):
        names = ["10", "9", "-1.5", "b", "2e1", "a"]
        table = table_of([0, 1] * 3, entries={"lot": names})
        assert groups_of(table, "lot").names == ("-1.5", "9", "10", "2e1", "a", "b")

    def test_entries_are_told_apart_as_they_are_written(self):
        table = table_of([0, 1] * 2, entries={"lot": ["07", "7", "7 ", "07"]})
        groups = groups_of(table, "lot")
        assert set(groups.names) == {"07", "7", "7 "}
        assert groups.of_case[0] == groups.of_case[3]

    def test_spellings_of_one_number_stand_in_one_order_each_time(self):
        # else a plan would draw other rounds in another process
        spelled = ["1", "1.0", "01", "1.00", "001", "1.000", "0001", "1.0000"]
        table = table_of([0, 1] * 4, entries={"lot": spelled})
        assert groups_of(table, "lot").names == tuple(sorted(spelled))

    @given(
        st.lists(st.tuples(st.sampled_from("pqrst"), st.integers(0, 2)), min_size=2, max_size=15)
    )
    def test_each_case_is_in_the_group_of_its_entry(self, rows):
        labels = [0, 1, *(label for _, label in rows)]
        sites = ["p", "q", *(site for site, _ in rows)]
        groups = groups_of(table_of(labels, entries={"site": sites}), "site")
        assert [groups.names[group] for group in groups.of_case] == sites
        for at, name in enumerate(groups.names):
            for k in range(groups.counts.shape[1]):
                here = [s == name and label == k for s, label in zip(sites, labels, strict=True)]
                assert groups.counts[at, k] == sum(here)

    def test_refusals(self):
        table = table_of(
            [0, 0, 1, 1],
            units=[0, 0, 1, 2],
            entries={"site": ["p", "q", "p", "q"], "full": ["p", "p", "q", "q"]},
        )
        message = (
            "The column ‘site’ splits case ‘u0’: its rows carry different entries. What is kept "
            "together must hold whole cases."
        )
        with pytest.raises(PlanError, match=exactly(message)):
            groups_of(table, "site")
        assert groups_of(table, "full").number == 2
        message = "There is no column ‘town’; the file has ‘site’ and ‘full’."
        with pytest.raises(PlanError, match=exactly(message)):
            groups_of(table, "town")

    @pytest.mark.parametrize("missing", ["", "NA", "nan"])
    def test_a_missing_entry_is_refused(self, missing):
        table = table_of([0, 1] * 2, entries={"site": ["p", missing, "q", missing]})
        with pytest.raises(PlanError, match="site"):
            groups_of(table, "site")

    def test_a_class_is_in_a_group_that_has_a_case_of_it(self):
        # three rows a person, the last of class ‘b’
        table = table_of(
            [0, 0, 1] * 4,
            units=np.repeat(np.arange(4), 3),
            entries={"site": np.repeat(["p", "q"], 6).tolist()},
        )
        assert ((groups_of(table, "site").counts > 0).sum(axis=0) == [2, 2]).all()
        assert not groups_of(table).alike


class TestOrderOfTime:
    @pytest.mark.parametrize(
        ("times", "ranks"),
        [
            (["3", "10", "-2", "3"], [1, 2, 0, 1]),
            (["2021", "2019", "2020", "2019"], [2, 0, 1, 0]),
            (["2020-12-31", "2021-01-01", "2020-02-29", "2020-12-31"], [1, 2, 0, 1]),
            (["2021-02", "2020-11", "2021-10", "2021-01"], [2, 0, 3, 1]),
            (["2021-02-03T07:45", "2021-02-03T07:05", "2021-02-02T23:59"], [2, 1, 0]),
            (["2021-02-03 07:45:10", "2021-02-03 07:45:09"], [1, 0]),
            # earlier than the year 1000 is still four digits
            (["0999-01-01", "2020-01-01"], [0, 1]),
        ],
    )
    def test_by_hand(self, times, ranks):
        assert order_of(dated(times), "day").tolist() == ranks

    @given(st.lists(st.dates(), min_size=2, max_size=20))
    def test_dates(self, days):
        found = order_of(dated([day.isoformat() for day in days]), "day")
        expected = rankdata([day.toordinal() for day in days], method="dense") - 1
        assert found.tolist() == expected.tolist()

    @given(st.lists(st.datetimes(), min_size=2, max_size=20))
    def test_times_of_day(self, times):
        seconds = [time.replace(microsecond=0) for time in times]
        found = order_of(dated([time.isoformat() for time in seconds]), "day")
        begin = datetime.datetime(1, 1, 1)
        expected = rankdata([(time - begin).total_seconds() for time in seconds], method="dense")
        assert found.tolist() == (expected - 1).tolist()

    @given(st.lists(st.floats(-1e9, 1e9), min_size=2, max_size=20))
    def test_numbers(self, numbers):
        numbers = [number + 0.0 for number in numbers]  # -0.0 becomes 0.0
        found = order_of(dated([repr(number) for number in numbers]), "day")
        assert found.tolist() == (rankdata(numbers, method="dense") - 1).tolist()

    def test_of_units_not_rows(self):
        table = table_of([0, 1, 0, 1], units=[0, 1, 0, 2], entries={"day": ["9", "10", "9", "8"]})
        assert order_of(table, "day").tolist() == [1, 2, 0]

    def test_one_time_written_in_two_ways(self):
        assert order_of(dated(["1.0", "2", "1", "02"]), "day").tolist() == [0, 1, 0, 1]

    def test_dates_without_leading_zeros(self):
        days = ["2020-1-5", "2020-01-12", "2020-2-1", "2020-10-1"]
        assert order_of(dated(days), "day").tolist() == [0, 1, 2, 3]

    def test_a_space_or_a_t_before_the_hour(self):
        days = ["2020-01-05T10:00", "2020-01-05 11:00"]
        assert order_of(dated(days), "day").tolist() == [0, 1]

    @pytest.mark.parametrize(
        "odd",
        ["05.01.2020", "5/1/2020", "2020/01/05", "spring", "2020-Q1", "2020-01-05x", "", "3,5"],
    )
    def test_odd_entries_are_refused(self, odd):
        message = (
            f"The column ‘day’ cannot be put in order of time: it holds ‘{odd}’. Numbers are "
            "allowed, and dates written year-month-day."
        )
        if odd == "":
            # refused as a missing entry or as an odd one, whichever is found first
            message = ""
        with pytest.raises(PlanError, match=exactly(message) if message else "‘day’"):
            order_of(dated(["2020-01-04", odd, "2020-01-06"]), "day")

    @pytest.mark.parametrize("odd", ["nan", "inf", "2020-13-01", "2020-02-30", "2020-00"])
    def test_what_is_no_time_is_refused(self, odd):
        with pytest.raises(PlanError, match="day"):
            order_of(dated(["2020-01-04", odd, "2020-01-06"]), "day")

    def test_numbers_among_dates_are_refused(self):
        with pytest.raises(PlanError, match="day"):
            order_of(dated(["2020-01-04", "2021", "2022-01-06"]), "day")

    def test_a_unit_of_two_times_is_refused(self):
        table = table_of([0, 0, 1, 1], units=[0, 0, 1, 2], entries={"day": list("1223")})
        message = (
            "The column ‘day’ splits case ‘u0’: its rows carry different entries. What is kept "
            "together must hold whole cases."
        )
        with pytest.raises(PlanError, match=exactly(message)):
            order_of(table, "day")


class TestStretches:
    def stretches(self, days, parts):
        table = dated([str(day) for day in days])
        return time_stretches(table, {"column": "day", "parts": parts}).tolist()

    @pytest.mark.parametrize(
        ("days", "parts", "expected"),
        [
            (range(10), 4, [0, 0, 1, 1, 2, 2, 3, 3, 4, 4]),
            # 2.5 units a stretch
            (range(5), 1, [0, 0, 1, 1, 1]),
            # more stretches than times: each time its own, without gaps
            ([3, 1, 1, 2], 9, [2, 0, 0, 1]),
            # day 1 reaches over the first cut: the next stretch begins after it
            ([1, 1, 1, 1, 2, 3, 4, 5], 3, [0, 0, 0, 0, 1, 1, 2, 2]),
            ([7, 7, 7], 4, [0, 0, 0]),
        ],
    )
    def test_by_hand(self, days, parts, expected):
        assert self.stretches(days, parts) == expected

    @given(st.lists(st.integers(0, 9), min_size=2, max_size=30), st.integers(1, 12))
    def test_laws(self, days, parts):
        found = np.array(self.stretches(days, parts))
        order = np.argsort(days, kind="stable")
        # never falling in time, one time never divided, without gaps, no more than asked for
        assert (np.diff(found[order]) >= 0).all()
        for one, other in itertools.pairwise(order):
            assert days[one] != days[other] or found[one] == found[other]
        assert set(found) == set(range(found.max() + 1))
        assert found.max() <= parts

    @given(st.permutations(range(23)), st.integers(1, 22))
    def test_different_times_are_cut_evenly(self, days, parts):
        sizes = np.bincount(self.stretches(days, parts))
        assert len(sizes) == parts + 1
        assert np.ptp(sizes) <= 1


@st.composite
def mixed_groups(draw, most_groups=14):
    """Units of each class in each group, none empty; and a number of folds they can fill."""
    n_classes = draw(st.integers(1, 3))
    row = st.lists(st.integers(0, 5), min_size=n_classes, max_size=n_classes).filter(any)
    counts = draw(st.lists(row, min_size=2, max_size=most_groups))
    n_folds = draw(st.integers(2, min(5, len(counts))))
    return np.array(counts), n_folds


def unevenness(counts, fold, n_folds):
    """Sum over folds and classes of squared class shares."""
    shares = counts / np.maximum(counts.sum(axis=0), 1)
    filled = [shares[fold == f].sum(axis=0) for f in range(n_folds)]
    return float((np.array(filled) ** 2).sum())


def mean_unevenness(counts, n_folds):
    """Its mean over all ways of putting groups in folds: two share a fold one time in `n_folds`."""
    shares = counts / np.maximum(counts.sum(axis=0), 1)
    alone = (shares**2).sum()
    return float(alone + ((shares.sum(axis=0) ** 2).sum() - alone) / n_folds)


def test_mean_unevenness_by_writing_out_every_way():
    counts = np.array([[3, 0], [1, 2], [2, 2], [1, 5]])
    ways = [np.array(way) for way in itertools.product(range(3), repeat=4)]
    mean = sum(unevenness(counts, way, 3) for way in ways) / len(ways)
    assert mean_unevenness(counts, 3) == pytest.approx(mean, rel=1e-12)


class TestEvenFolds:
    @given(mixed_groups(), st.integers(0, 1000))
    def test_every_group_in_one_fold_and_no_fold_empty(self, case, seed):
        counts, n_folds = case
        fold = _even_folds(counts, n_folds, np.random.default_rng(seed))
        assert fold.shape == (len(counts),)
        assert set(fold.tolist()) == set(range(n_folds))

    @given(mixed_groups(), st.integers(0, 1000))
    def test_never_worse_than_chance_is_on_average(self, case, seed):
        # each group goes where it adds least, so never more than a random fold does on average
        counts, n_folds = case
        fold = _even_folds(counts, n_folds, np.random.default_rng(seed))
        found = unevenness(counts, fold, n_folds)
        assert found <= mean_unevenness(counts, n_folds) + 1e-9
        rng = np.random.default_rng(seed + 1)
        ways = rng.integers(0, n_folds, size=(20, len(counts)))
        assert found <= max(unevenness(counts, way, n_folds) for way in ways) + 1e-9

    @given(mixed_groups(most_groups=6), st.integers(0, 1000))
    def test_close_to_the_best_of_all_ways(self, case, seed):
        counts, n_folds = case
        n_folds = min(n_folds, 3)
        fold = _even_folds(counts, n_folds, np.random.default_rng(seed))
        ways = [np.array(way) for way in itertools.product(range(n_folds), repeat=len(counts))]
        best = min(unevenness(counts, w, n_folds) for w in ways if len(set(w)) == n_folds)
        assert best - 1e-9 <= unevenness(counts, fold, n_folds) <= 1.5 * best

    @given(
        st.lists(st.integers(1, 12), min_size=1, max_size=4),
        st.integers(2, 6),
        st.integers(0, 1000),
    )
    def test_single_units_are_dealt_like_cards(self, sizes, n_folds, seed):
        labels = np.repeat(np.arange(len(sizes)), sizes)
        if len(labels) < n_folds:
            labels = np.concatenate([labels, np.zeros(n_folds, dtype=int)])
        counts = np.eye(len(sizes), dtype=int)[labels]
        fold = _even_folds(counts, n_folds, np.random.default_rng(seed))
        for k in range(len(sizes)):
            assert np.ptp(np.bincount(fold[labels == k], minlength=n_folds)) <= 1

    def test_by_hand(self):
        # 4a to the first fold; 3b to the empty one; 2a away from 4a; 1b away from 3b
        counts = np.array([[0, 1], [2, 0], [4, 0], [0, 3]])
        for seed in range(10):
            fold = _even_folds(counts, 2, np.random.default_rng(seed))
            assert fold.tolist() == [0, 1, 0, 1]

    def test_the_last_groups_fill_folds_that_are_still_empty(self):
        # the second group adds nothing to the first fold either, yet must open another
        counts = np.array([[9, 0, 0], [0, 5, 0], [0, 0, 1]])
        fold = _even_folds(counts, 3, np.random.default_rng(1))
        assert fold.tolist() == [0, 1, 2]

    def test_a_class_that_no_group_has_is_passed_over(self):
        counts = np.array([[2, 0], [1, 0], [1, 0]])
        fold = _even_folds(counts, 2, np.random.default_rng(1))
        assert fold[0] != fold[1] == fold[2]

    def test_which_group_is_where_is_drawn(self):
        counts = np.array([[2, 1], [1, 2]] * 5)
        ways = {_even_folds(counts, 5, np.random.default_rng(s)).tobytes() for s in range(10)}
        assert len(ways) == 10
