"""Settings picked inside the bag: folds that never part copies, and loops written out by hand."""

import itertools
import math
from collections import Counter
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal
from sklearn.base import clone
from sklearn.metrics import accuracy_score, balanced_accuracy_score, roc_auc_score

from evalcore import pipeline
from evalcore.candidates import CANDIDATES, estimator
from evalcore.choice import choose
from evalcore.cut_off import CutOffRule
from evalcore.engine import run, tasks, whole_rounds
from evalcore.groups import Groups, groups_of
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.schemes import ALL_SCHEMES, SCHEMES
from evalcore.tuning import Inner, SharedBags, inner_rounds, learn

from .checks import carried_out, table_of
from .test_cut_off import cheapest

NEAR = choose(CANDIDATES, "nearest_neighbours", k=(1, 5, 15))


@st.composite
def bags_of_units(draw):
    """A table of units with one to three rows each, and bags in which units were drawn."""
    size = draw(st.integers(2, 14))
    rows = draw(st.lists(st.integers(1, 3), min_size=size, max_size=size))
    classes = [0, 1, *draw(st.lists(st.integers(0, 2), min_size=size - 2, max_size=size - 2))]
    units = np.repeat(np.arange(size), rows)
    table = table_of(np.array(classes)[units].tolist(), units=units.tolist())
    times = st.lists(st.integers(0, 3), min_size=size, max_size=size).filter(any)
    drawn = np.array(draw(st.lists(times, min_size=1, max_size=3)), dtype=np.uint8)
    return table, drawn[:, units], draw(st.integers(0, 2**32))


def folds_of(groups: Groups, bags: np.ndarray, seed: int, *, units: Groups | None = None) -> Inner:
    """Inner rounds; what is kept together are the units unless these are given."""
    rngs = np.random.default_rng(seed).spawn(len(bags))
    return inner_rounds(groups, units or groups, bags, rngs=rngs)


class TestInnerFolds:
    @given(bags_of_units())
    def test_divide_units_never_copies_or_rows(self, given_):
        table, bags, seed = given_
        inner = folds_of(groups_of(table), bags, seed)
        assert inner.n_bags == len(bags)
        for at, bag in enumerate(bags):
            mine = inner.of_bag == at
            train, test = inner.rounds.train[mine], inner.rounds.test[mine]
            present = np.unique(table.units[bag > 0])
            if len(present) == 1:
                assert not mine.any()
                continue
            for learned, judged in zip(train, test, strict=True):
                # a case is learned from as often as it was drawn, or judged, or neither: never cut
                assert set(np.flatnonzero(learned)) | set(np.flatnonzero(judged)) == set(
                    np.flatnonzero(bag)
                )
                assert_array_equal(np.where(judged, 0, bag), learned)
                for unit in present:
                    assert len(set(judged[table.units == unit])) == 1
                assert judged.any()
                assert learned.any()
            # nobody from outside, everybody from inside once
            assert_array_equal(test.sum(axis=0), bag > 0)

    @given(bags_of_units())
    def test_number_and_evenness(self, given_):
        table, bags, seed = given_
        inner = folds_of(groups_of(table), bags, seed)
        first_row = np.unique(table.units, return_index=True)[1]
        for at, bag in enumerate(bags):
            test = inner.rounds.test[inner.of_bag == at][:, first_row]
            there = bag[first_row] > 0
            of_class = Counter(table.unit_labels[there].tolist())
            if there.sum() == 1:
                continue
            assert len(test) == min(5, max(2, min(of_class.values())), there.sum())
            assert np.ptp(test.sum(axis=1)) <= 1
            for k in of_class:
                assert np.ptp(test[:, table.unit_labels == k].sum(axis=1)) <= 1

    def test_a_row_outside_the_bag_is_not_judged_with_its_unit(self):
        table = table_of([0, 0, 1, 1, 0, 1], units=[0, 0, 1, 1, 2, 3])
        bag = np.array([[1, 0, 0, 2, 1, 1]], dtype=np.uint8)
        inner = folds_of(groups_of(table), bag, 1).rounds
        assert inner.test.sum(axis=0).tolist() == [1, 0, 0, 1, 1, 1]
        assert (inner.train[:, [1, 2]] == 0).all()

    def test_coarser_groups_stay_together(self):
        table = table_of([0, 1] * 10, entries={"site": list("aabbccddee" * 2)})
        bags = np.ones((4, 20), dtype=np.uint8)
        inner = folds_of(groups_of(table, "site"), bags, 1, units=groups_of(table))
        assert len(inner.rounds.test) == 4 * 5
        for judged in inner.rounds.test:
            sites = {table.entries["site"][case] for case in np.flatnonzero(judged)}
            assert judged.sum() == 4 * len(sites)

    @given(bags_of_units())
    def test_units_are_divided_where_a_bag_holds_one_group_only(self, given_):
        table, bags, seed = given_
        units, everything_ = groups_of(table), np.zeros(table.n_cases, dtype=np.intp)
        counts = units.counts.sum(axis=0, keepdims=True)
        one = Groups(everything_, ("here",), counts, counts.argmax(axis=1))
        inner = folds_of(one, bags, seed, units=units)
        for at, bag in enumerate(bags):
            test = inner.rounds.test[inner.of_bag == at]
            present = np.unique(table.units[bag > 0])
            rarest = min(Counter(table.unit_labels[present].tolist()).values())
            # one unit cannot be parted
            expected = min(5, max(2, rarest), len(present)) if len(present) > 1 else 0
            assert len(test) == expected
            for unit, judged in itertools.product(present, test):
                assert len(set(judged[table.units == unit])) == 1
            assert_array_equal(test.sum(axis=0), (bag > 0) & (expected > 0))

    def test_each_bag_is_asked_by_itself_how_many_groups_it_holds(self):
        # a bag of site p alone, one of both
        table = table_of([0, 0, 1, 1] * 4, entries={"site": list("pq" * 8)})
        site = np.array(table.entries["site"])
        bags = np.array([2 * (site == "p"), np.ones(16)], dtype=np.uint8)
        inner = folds_of(groups_of(table, "site"), bags, 4, units=groups_of(table))
        assert np.bincount(inner.of_bag).tolist() == [4, 2]
        for judged in inner.rounds.test[:4]:
            assert set(site[judged > 0]) == {"p"}
            assert np.bincount(table.labels[judged > 0]).tolist() == [1, 1]
        assert {"".join(site[judged > 0]) for judged in inner.rounds.test[4:]} == {
            "p" * 8, "q" * 8,
        }  # fmt: skip

    def test_each_bag_has_folds_of_its_own(self):
        groups = groups_of(table_of([0, 1] * 20))
        bags = np.ones((2, 40), dtype=np.uint8)
        test = folds_of(groups, bags, 1).rounds.test.reshape(2, 5, 40)
        assert (test[0] != test[1]).any()
        # and the same again from the same randomness
        assert_array_equal(folds_of(groups, bags, 1).rounds.test.reshape(2, 5, 40), test)

    def test_they_do_not_depend_on_the_bags_beside(self):
        groups, (one, two) = groups_of(table_of([0, 1] * 8)), np.random.default_rng(5).spawn(2)
        bags = np.random.default_rng(6).integers(0, 3, (2, 16)).astype(np.uint8)
        both = inner_rounds(groups, groups, bags, rngs=(one, two)).rounds
        again = np.random.default_rng(5).spawn(2)[1]
        alone = inner_rounds(groups, groups, bags[1:], rngs=(again,)).rounds
        assert_array_equal(both.train[-alone.n_rounds :], alone.train)
        assert_array_equal(both.test[-alone.n_rounds :], alone.test)


def picks(table, bags, choice, *, measure="balanced_accuracy", seed=0, **named):
    """What is picked in bags of single cases."""
    groups = groups_of(table)
    shared = SharedBags(table, bags, lambda: folds_of(groups, bags, seed))
    asked = {"engine": "fast", "counted_by": "case", "keep_inner": False} | named
    return learn(choice, shared, [7] * len(bags), measure=measure, **asked)


def stratified_bags(rng, labels, number):
    bags = np.zeros((number, len(labels)), dtype=np.uint8)
    for bag in bags:
        for k in np.unique(labels):
            own = np.flatnonzero(labels == k)
            np.add.at(bag, rng.choice(own, len(own)), 1)
    return bags


class TestPureNoise:
    """Labels that no feature knows of: nobody should find that single cases are worth copying."""

    @staticmethod
    def tables(number):
        for seed in range(number):
            rng = np.random.default_rng([40, seed])
            table = table_of([0, 1] * 20, features=rng.normal(size=(40, 10)))
            yield table, stratified_bags(rng, table.labels, 25), seed

    def test_one_neighbour_is_not_preferred(self):
        shares = [
            (picks(table, bags, NEAR, seed=seed).picked == 0).mean()
            for table, bags, seed in self.tables(20)
        ]
        error = np.std(shares, ddof=1) / np.sqrt(len(shares))
        assert np.mean(shares) <= 1 / 3 + 2 * error
        # a bound that a rule which always memorises would pass is none
        assert 1 / 3 + 2 * error < 0.5

    def test_folds_over_repeated_rows_would_prefer_it(self):
        """The same rule with every copy taken for a case of its own, as a loop over rows does."""
        shares = []
        for table, bags, seed in self.tables(20):
            memorised = []
            for bag in bags[:10]:
                rows = np.repeat(np.arange(40), bag)
                copied = table_of(table.labels[rows].tolist(), features=table.features[rows])
                once = np.ones((1, len(rows)), dtype=np.uint8)
                memorised.append(picks(copied, once, NEAR, seed=seed).picked[0] == 0)
            shares.append(np.mean(memorised))
        error = np.std(shares, ddof=1) / np.sqrt(len(shares))
        # about nine bags in ten, where a third would be fair
        assert np.mean(shares) - 2 * error > 0.75


def blurred(n, n_classes, *, shift, seed):
    rng = np.random.default_rng(seed)
    labels = np.arange(n) % n_classes
    features = rng.normal(size=(n, 3)) * [1, 5, 0.2] + shift * labels[:, None]
    return table_of(labels.tolist(), features=features), rng


MEASURED = {
    "accuracy": lambda true, scores: accuracy_score(true, scores.argmax(axis=1)),
    "balanced_accuracy": lambda true, scores: balanced_accuracy_score(true, scores.argmax(axis=1)),
}
GRIDS = {
    "neighbours": choose(
        CANDIDATES, "nearest_neighbours", k=(1, 4, 9, 30), scaling=("standard", "none")
    ),
    "logistic": choose(CANDIDATES, "logistic", C=(100.0, 0.01, 1.0)),
    "qda": choose(CANDIDATES, "qda", shrinkage=(0.01, 0.9)),
    "forest": choose(CANDIDATES, "forest", trees=(2, 9)),
    "svm": choose(CANDIDATES, "svm", C=(0.05, 1.0, 20.0)),
}
# which end of a setting follows single cases less (common practice, no source)
SMOOTH = {"k": -1, "C": 1, "shrinkage": -1}


def loop(choice, table, bag, inner, *, state, measure):
    """One bag by hand: rows repeated, a pipeline a fold, answers pooled, each case once."""

    def answers(option, counts):
        rows = np.repeat(np.arange(table.n_cases), counts)
        model = estimator(CANDIDATES[option.key], option.values(), table, state)
        model = clone(model).fit(table.features[rows], table.labels[rows])
        if hasattr(model, "predict_proba"):
            return model.predict_proba(table.features)
        value = model.decision_function(table.features)
        return np.column_stack([-value, value])

    tried = []
    for at, option in enumerate(choice.options):
        kept = np.full((table.n_cases, table.n_classes), np.nan)
        of_folds = []
        for learned, judged in zip(inner.train, inner.test, strict=True):
            out = judged == 1
            kept[out] = answers(option, learned)[out]
            if measure == "auc":
                of_folds.append(roc_auc_score(table.labels[out], kept[out, 1]))
        value = (
            np.mean(of_folds)
            if measure == "auc"
            else MEASURED[measure](table.labels[bag > 0], kept[bag > 0])
        )
        smooth = [SMOOTH[n] * option.values()[n] for n, _ in choice.grid if n in SMOOTH]
        tried.append((-round(value, 12), smooth, at, option, kept))
    _, _, picked, option, kept = min(tried, key=lambda each: each[:3])
    return picked, answers(option, bag), kept


class TestAgainstALoopByHand:
    @pytest.mark.parametrize(
        ("grid", "measure"),
        [
            ("neighbours", "balanced_accuracy"),
            ("neighbours", "auc"),
            ("logistic", "accuracy"),
            ("qda", "balanced_accuracy"),
            ("forest", "accuracy"),
            ("svm", "accuracy"),
            ("svm", "auc"),
        ],
    )
    def test_same_pick_and_scores(self, grid, measure):
        choice = GRIDS[grid]
        table, rng = blurred(36, 2, shift=0.7, seed=11)
        bags = stratified_bags(rng, table.labels, 3)
        groups = groups_of(table)
        shared = SharedBags(table, bags, lambda: folds_of(groups, bags, 3))
        states = [5, 6, 7]
        found = learn(
            choice,
            shared,
            states,
            engine="fast",
            measure=measure,
            counted_by="case",
            keep_inner=True,
        )
        for at, bag in enumerate(bags):
            inner = shared.inner
            mine = inner.of_bag == at
            rounds = Rounds(
                inner.rounds.train[mine], inner.rounds.test[mine], np.arange(mine.sum())
            )
            picked, scores, kept = loop(
                choice, table, bag, rounds, state=states[at], measure=measure
            )
            assert found.picked[at] == picked
            assert_allclose(found.scores[at], scores, rtol=0, atol=1e-9)
            assert_allclose(found.inner[at], kept, rtol=0, atol=1e-9)
            assert_array_equal(np.isnan(found.inner[at]).all(axis=1), bag == 0)

    def test_three_classes(self):
        table, rng = blurred(45, 3, shift=0.8, seed=12)
        bags = stratified_bags(rng, table.labels, 4)
        groups, inner = groups_of(table), folds_of(groups_of(table), bags, 0)
        found = picks(table, bags, GRIDS["neighbours"])
        assert groups.number == 45
        for at, bag in enumerate(bags):
            mine = inner.of_bag == at
            rounds = Rounds(
                inner.rounds.train[mine], inner.rounds.test[mine], np.arange(mine.sum())
            )
            picked, scores, _ = loop(
                GRIDS["neighbours"], table, bag, rounds, state=7, measure="balanced_accuracy"
            )
            assert found.picked[at] == picked
            assert_allclose(found.scores[at], scores, rtol=0, atol=1e-9)
        assert len(set(found.picked.tolist())) > 1

    def test_the_fit_on_all_cases_picks_too(self):
        table, _ = blurred(36, 2, shift=0.7, seed=13)
        ones = whole_rounds(36).train
        inner = folds_of(groups_of(table), ones, 0).rounds
        found = picks(table, ones, NEAR)
        picked, scores, _ = loop(NEAR, table, ones[0], inner, state=7, measure="balanced_accuracy")
        assert found.picked.tolist() == [picked]
        assert_allclose(found.scores[0], scores, rtol=0, atol=1e-9)

    def test_copies_of_a_case_count_once(self):
        """A case drawn forty times is one case among the inner answers."""
        labels, x = [0, 0, 0, 1, 1, 1, 0, 1], [0.0, 1, 2, 10, 11, 12, 10.4, 1.4]
        table = table_of(labels, features=np.array(x)[:, None])
        bag = np.array([[1, 1, 1, 1, 1, 1, 40, 1]], dtype=np.uint8)
        choice = choose(CANDIDATES, "nearest_neighbours", k=(1, 3), scaling="none")
        found = picks(table, bag, choice, keep_inner=True)
        predicted = found.inner[0].argmax(axis=1)
        right = predicted == table.labels
        assert not np.isnan(found.inner).any()
        # the two that lie among the others are wrong, once each
        assert not right[6]
        assert not right[7]


class TestUntuned:
    def test_nothing_is_learned_inside(self):
        table, rng = blurred(30, 2, shift=1, seed=2)
        bags = stratified_bags(rng, table.labels, 2)

        def never():
            pytest.fail("inner rounds were drawn")

        found = learn(
            choose(CANDIDATES, "lda"),
            SharedBags(table, bags, never),
            [0, 0],
            engine="fast",
            measure="accuracy",
            counted_by="case",
            keep_inner=False,
        )
        assert (found.picked, found.inner) == (None, None)

    def test_inner_scores_alone(self):
        table, rng = blurred(30, 2, shift=1, seed=2)
        bags = stratified_bags(rng, table.labels, 2)
        choice = choose(CANDIDATES, "lda")
        found = picks(table, bags, choice, keep_inner=True)
        assert found.picked is None
        inner = folds_of(groups_of(table), bags, 0)
        for at, bag in enumerate(bags):
            mine = inner.of_bag == at
            rounds = Rounds(
                inner.rounds.train[mine], inner.rounds.test[mine], np.arange(mine.sum())
            )
            _, scores, kept = loop(choice, table, bag, rounds, state=7, measure="accuracy")
            assert_allclose(found.scores[at], scores, rtol=0, atol=1e-9)
            assert_allclose(found.inner[at], kept, rtol=0, atol=1e-9)


class TestTies:
    """Two clusters far apart: every option is right throughout."""

    table = table_of(
        [0] * 12 + [1] * 12,
        features=np.arange(24)[:, None] * 0.01 + np.repeat([0, 100], 12)[:, None],
    )
    bags = np.ones((3, 24), dtype=np.uint8)

    @pytest.mark.parametrize(
        ("text", "values", "smoothest"),
        [
            ("nearest_neighbours", {"k": (1, 5, 3)}, 1),
            ("nearest_neighbours", {"k": (7, 2)}, 0),
            ("logistic", {"C": (1.0, 10.0, 0.1)}, 2),
            ("svm", {"C": (2.0, 1.0)}, 1),
            ("qda", {"shrinkage": (0.1, 0.9, 0.5)}, 1),
            # no end is smoother: the first as listed
            ("forest", {"trees": (5, 3)}, 0),
            ("nearest_neighbours", {"scaling": ("none", "standard")}, 0),
            # options 1 none, 1 standard, 5 none, 5 standard: the smoother k, then as listed
            ("nearest_neighbours", {"k": (1, 5), "scaling": ("none", "standard")}, 2),
        ],
    )
    def test_the_smoothest_then_as_listed(self, text, values, smoothest):
        choice = choose(CANDIDATES, text, **values)
        found = picks(self.table, self.bags, choice, measure="accuracy", keep_inner=True)
        right = found.inner.argmax(axis=2) == self.table.labels
        assert right.all()
        assert found.picked.tolist() == [smoothest] * 3

    @pytest.mark.parametrize("values", [*itertools.permutations([np.nan, 0.5, 0.25])])
    def test_an_undefined_value_never_wins(self, values, monkeypatch):
        given_ = iter(values)
        monkeypatch.setattr(
            "evalcore.tuning._inner_values", lambda *_, **__: np.full(3, next(given_))
        )
        found = picks(self.table, self.bags, NEAR)
        assert found.picked.tolist() == [values.index(0.5)] * 3

    @pytest.mark.parametrize("values", [(0.7, 0.7 - 1e-14, 0.6), (0.7 - 1e-14, 0.7, 0.6)])
    def test_equal_but_for_rounding_is_equal(self, values, monkeypatch):
        given_ = iter(values)
        monkeypatch.setattr(
            "evalcore.tuning._inner_values", lambda *_, **__: np.full(3, next(given_))
        )
        assert picks(self.table, self.bags, NEAR).picked.tolist() == [1] * 3

    def test_where_nothing_can_be_told_the_smoothest_is_taken(self):
        one_class = np.array([[1, 1, 2, 0, 1] + [0] * 19], dtype=np.uint8)
        one_case = np.array([[3] + [0] * 23], dtype=np.uint8)
        choice = choose(CANDIDATES, "nearest_neighbours", k=(1, 3, 2))
        for bag in (one_class, one_case):
            found = picks(self.table, bag, choice, keep_inner=True)
            assert found.picked.tolist() == [1]
            assert (found.scores[0].argmax(axis=1) == 0).all()
        assert np.isnan(found.inner).all()


class TestByUnit:
    """Units with one to six rows: each weighs one, and is answered by the mean of its rows."""

    @staticmethod
    def table():
        rng = np.random.default_rng(21)
        rows = rng.integers(1, 7, 30)
        units = np.repeat(np.arange(30), rows)
        labels = (np.arange(30) % 2)[units]
        own = rng.normal(size=(30, 2))[units] + 0.9 * labels[:, None]
        return table_of(
            labels.tolist(),
            units=units.tolist(),
            features=own + 0.8 * rng.normal(size=(len(units), 2)),
        )

    def test_units_are_counted(self):
        table, differ = self.table(), 0
        choice = choose(CANDIDATES, "nearest_neighbours", k=(1, 3, 9, 21))
        bags = np.random.default_rng(3).integers(0, 3, (12, 30)).astype(np.uint8)[:, table.units]
        by_unit = picks(table, bags, choice, counted_by="unit")
        by_case = picks(table, bags, choice, counted_by="case")
        tried = [
            picks(
                table,
                bags,
                choose(CANDIDATES, "nearest_neighbours", k=k),
                counted_by="unit",
                keep_inner=True,
            ).inner
            for k in (1, 3, 9, 21)
        ]
        for at, bag in enumerate(bags):
            present = np.unique(table.units[bag > 0])
            of_unit = [table.labels[table.units == unit][0] for unit in present]
            ranked = []
            for option, inner in enumerate(tried):
                answers = [inner[at, table.units == unit].mean(axis=0).argmax() for unit in present]
                value = balanced_accuracy_score(of_unit, answers)
                ranked.append((round(value, 12), option))
            # the grid rises, so the last of equals is the smoothest
            assert by_unit.picked[at] == max(ranked)[1]
            differ += by_unit.picked[at] != by_case.picked[at]
        assert differ > 0


def everything(table, candidates, *, schemes, **changes) -> Plan:
    return Plan(table.roles, schemes, candidates, seed=3, **changes)


UNTUNED = (
    choose(CANDIDATES, "logistic"),
    choose(CANDIDATES, "nearest_neighbours", k=3),
    choose(CANDIDATES, "forest", trees=3),
    choose(CANDIDATES, "svm"),
    choose(CANDIDATES, "qda"),
)
TUNED = (
    choose(CANDIDATES, "nearest_neighbours", k=(1, 5, 9)),
    choose(CANDIDATES, "logistic", C=(0.01, 10.0)),
)
BOTH = (choose(SCHEMES, "bootstrap", rounds=52), choose(SCHEMES, "cross_validation", repeats=2))
BESIDE = {
    "curve": choose(ALL_SCHEMES, "learning_curve", sizes=5),
    "cut_off": CutOffRule("a", "cost", miss=3.0),
    "permutations": 6,
}


class TestDigits:
    table = blurred(40, 2, shift=0.5, seed=9)[0]

    def finished(self, plan, *, backwards=False, jobs=1):
        rounds = plan.draw(self.table)
        todo = tasks(rounds, permutations=plan.permutations)
        todo = todo[::-1] if backwards else todo
        return {f.task: f for f in run(self.table, plan, rounds, todo=todo, jobs=jobs)}

    @staticmethod
    def digits(finished):
        """Every number of finished tasks, as bytes."""
        found = {}
        for task, part in finished.items():
            found[task, "chance"] = None if part.chance is None else part.chance.tobytes()
            for name, given_ in part.answers.items():
                arrays = [given_.scores, given_.picked, given_.inner, *given_.on_all.values()]
                for reduced in given_.in_bag.values():
                    arrays += [reduced.confusion, reduced.auc]
                found[task, name] = tuple(None if a is None else a.tobytes() for a in arrays)
        return found

    def test_nothing_beside_moves_an_untuned_candidate(self):
        alone = everything(self.table, UNTUNED, schemes=BOTH)
        beside = everything(self.table, (TUNED[0], *UNTUNED, TUNED[1]), schemes=BOTH, **BESIDE)
        before, _ = carried_out(self.table, alone)
        after, _ = carried_out(self.table, beside)
        assert [p.candidate for p in before.parts()] == list(alone.candidate_names)
        pairs = zip(alone.candidates, alone.candidate_names, strict=True)
        for choice, name in pairs:
            # two kinds now stand twice in the plan, and are named with their settings there
            there = beside.candidate_names[beside.candidates.index(choice)]
            for scheme in alone.scheme_names:
                old, new = before.part(name, scheme), after.part(there, scheme)
                assert old.held.scores.tobytes() == new.held.scores.tobytes()
                assert old.in_bag.confusion.tobytes() == new.in_bag.confusion.tobytes()
                assert old.in_bag.auc.tobytes() == new.in_bag.auc.tobytes()
                assert old.on_all.tobytes() == new.on_all.tobytes()
                assert old.whole.confusion.tobytes() == new.whole.confusion.tobytes()

    def test_neither_processes_nor_order_move_anything(self):
        candidates = (TUNED[0], UNTUNED[0], UNTUNED[2])
        plan = everything(self.table, candidates, schemes=BOTH[:1], **BESIDE)
        once = self.digits(self.finished(plan))
        # all cases, two chunks of bags, two of the curve: three candidates each; six permuted
        # tables, each a task of its own; and every task says what it has of these
        assert len(once) == 5 * 3 + (5 + 6)
        assert (
            sum(given_ is not None for (_, name), given_ in once.items() if name == "chance") == 6
        )
        assert self.digits(self.finished(plan, backwards=True)) == once
        assert self.digits(self.finished(plan, jobs=2)) == once

    def test_more_rounds_only_append(self):
        long = (choose(SCHEMES, "bootstrap", rounds=60),)
        short, more = (
            carried_out(self.table, everything(self.table, TUNED, schemes=given_))[1]
            for given_ in (BOTH[:1], long)
        )
        for name in TUNED[0].key, TUNED[1].key:
            one, other = short["bootstrap", name], more["bootstrap", name]
            assert (len(one.picked), len(other.picked)) == (52, 60)
            assert_array_equal(other.picked[:52], one.picked)
            assert other.scores.tobytes().startswith(one.scores.tobytes())

    def test_one_class_found_is_no_ground_for_a_pick(self):
        """It would be best for naming that class always: balanced accuracy stands in for it."""
        schemes = (choose(SCHEMES, "bootstrap", rounds=9),)
        found, balanced, ranking = (
            carried_out(
                self.table, everything(self.table, TUNED, schemes=schemes, measure=measure)
            )[1]["bootstrap", "nearest_neighbours"].picked.tolist()
            for measure in ("sensitivity", "balanced_accuracy", "auc")
        )
        assert found == balanced
        assert found != ranking

    def test_both_engines_pick_and_answer_alike(self):
        candidates = (
            *TUNED,
            choose(CANDIDATES, "svm", C=(0.1, 1.0, 10.0)),
            choose(CANDIDATES, "qda", shrinkage=(0.01, 0.5)),
            choose(CANDIDATES, "forest", trees=(2, 5)),
        )
        schemes = (choose(SCHEMES, "bootstrap", rounds=5),)
        found = {
            engine: carried_out(
                self.table,
                everything(
                    self.table,
                    candidates,
                    schemes=schemes,
                    engine=engine,
                    cut_off=BESIDE["cut_off"],
                ),
            )[1]
            for engine in ("fast", "plain")
        }
        for key, fast in found["fast"].items():
            plain = found["plain"][key]
            assert_array_equal(fast.picked, plain.picked)
            assert_allclose(fast.scores, plain.scores, rtol=0, atol=1e-9)
            assert_allclose(fast.inner, plain.inner, rtol=0, atol=1e-9)


class TestTwoBlocks:
    """Two sites, each learned from alone: its cases are divided, so settings are picked."""

    LABELS = np.array([0, 0, 1, 1] * 10)
    SITE = np.array(["p", "q"] * 20)
    COST, FLOOR = BESIDE["cut_off"], CutOffRule("a", "floor", floor=0.7)

    def evaluated(self, monkeypatch, rule):
        """The evaluation, its answers and the inner rounds that were drawn of both bags."""
        drawn, real = [], pipeline.inner_rounds

        def recording(*given_, **rest):
            drawn.append(real(*given_, **rest))
            return drawn[-1]

        monkeypatch.setattr(pipeline, "inner_rounds", recording)
        rng = np.random.default_rng(8)
        x = rng.normal(size=(40, 2)) + 0.9 * self.LABELS[:, None]
        table = table_of(self.LABELS.tolist(), features=x, entries={"site": self.SITE.tolist()})
        schemes = (choose(SCHEMES, "leave_block_out", column="site"),)
        plan = everything(table, TUNED, schemes=schemes, cut_off=rule)
        evaluation, answers = carried_out(table, plan)
        (of_bags,) = (inner for inner in drawn if inner.n_bags == 2)
        return evaluation, answers, of_bags

    @pytest.mark.parametrize("rule", [COST, FLOOR], ids=["cost", "floor"])
    def test_grid_and_cut_off_by_a_loop(self, monkeypatch, rule):
        evaluation, answers, inner = self.evaluated(monkeypatch, rule)
        table, plan = evaluation.table, evaluation.plan
        rounds = evaluation.rounds["leave_block_out"]
        of_bag = np.bincount(inner.of_bag)
        assert of_bag.tolist() == [5, 5]
        picked, finite = set(), 0
        for name, choice in zip(plan.candidate_names, plan.candidates, strict=True):
            found, at_work = answers["leave_block_out", name], evaluation.at_cut_off(name)
            called = []
            for r, bag in enumerate(rounds.train):
                assert len(set(self.SITE[bag > 0])) == 1
                mine = inner.of_bag == r
                of_round = Rounds(inner.rounds.train[mine], inner.rounds.test[mine], np.arange(5))
                assert_array_equal(of_round.test.sum(axis=0), bag > 0)
                option, scores, kept = loop(
                    choice, table, bag, of_round, state=0, measure="balanced_accuracy"
                )
                assert found.picked[r] == option
                picked.add((name, option))
                at = self.cut_off(kept[:, 0], rule)
                finite += math.isfinite(at)
                assert at_work.cut_offs[r] == pytest.approx(at, abs=1e-9)
                # nearest neighbours tie with their cut-off where it is one of their shares
                held = (scores[:, 0] >= at_work.cut_offs[r] - 1e-9)[rounds.test[r] > 0]
                called.append(np.where(held, 0, 1) == self.LABELS[rounds.test[r] > 0])
            assert at_work.undefined == 0
            # both sites hold some of the class
            assert at_work.learned_from == 2
            figure = evaluation.estimate("accuracy", name, estimator="at_cut_off")
            assert figure.value == pytest.approx(np.mean(called), abs=1e-12)
        # dear misses may make it cheapest to call all
        assert finite >= 2
        # not the smoothest throughout, as where nothing can be told
        assert picked - {(plan.candidate_names[0], 2), (plan.candidate_names[1], 0)}

    def cut_off(self, kept, rule):
        """Of class a from inner scores of one site, by other means."""
        known = ~np.isnan(kept)
        positive, scores = self.LABELS[known] == 0, kept[known]
        if rule.by == "floor":
            return np.quantile(scores[positive], 0.3, method="weibull")
        # scores of a loop differ from ours in the last digits, so equal ones are made equal
        tied = cheapest(positive, scores.round(12), rule=rule, share=Fraction(1, 2))
        return tied[(len(tied) - 1) // 2]

    def test_all_cases_learn_from_both_sites(self, monkeypatch):
        evaluation, _, _ = self.evaluated(monkeypatch, self.COST)
        assert all(np.isfinite(at.on_all) for at in evaluation.beside.cut_offs)
