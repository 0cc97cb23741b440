"""Trees and forests from counts: not one bit apart from the public classes on repeated rows."""

import sys
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest
import sklearn.ensemble
import sklearn.tree
import sklearn.tree._criterion
import sklearn.tree._tree
from hypothesis import given, settings
from hypothesis import strategies as st
from sklearn.ensemble import RandomForestClassifier
from sklearn.tree import DecisionTreeClassifier

from evalcore import trees
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.fits import plain_scores
from evalcore.intake import make_table
from evalcore.preparation import preparation
from evalcore.sheet import read_sheet
from evalcore.table import Roles
from evalcore.trees import compiled_available, forest_scores, tree_scores

from .checks import DATA, table_of

TREES = (None, 1, 9)  # None is one tree, not a forest


def scores_of(trees, features, labels, counts, **rest):
    if trees is None:
        return tree_scores(features, labels, counts, **rest)
    return forest_scores(features, labels, counts, trees=trees, **rest)


def public(trees, features, labels, counts, *, n_classes, random_states, present=None):
    """The loop by hand: rows repeated in case order, the columns the round has."""
    scores = np.zeros((len(counts), len(labels), n_classes))
    for r, state in enumerate(random_states):
        x = features[r] if present is None else features[r][:, present[r]]
        rows = np.repeat(np.arange(len(labels)), counts[r])
        model = (
            DecisionTreeClassifier(random_state=state)
            if trees is None
            else RandomForestClassifier(trees, random_state=state, n_jobs=1)
        )
        model.fit(x[rows], labels[rows])
        scores[r][:, model.classes_] = model.predict_proba(x)
    return scores


def same_bits(found, expected):
    assert found.shape == expected.shape
    assert found.dtype == expected.dtype
    assert found.tobytes() == expected.tobytes()


def bootstrap(n, rounds, rng):
    return rng.multinomial(n, [1 / n] * n, rounds).astype(np.uint8)


def folds(n, k, rng):
    """Each case left out once; the last rounds leave one single case out."""
    left_out = rng.permutation(n) % k
    of_folds = left_out != np.arange(k)[:, None]
    of_one = np.arange(n) != np.array([[0], [n // 2]])
    return np.vstack([of_folds, of_one]).astype(np.uint8)


def some_rows(name, label, step):
    lines = (DATA / name).read_bytes().splitlines(keepends=True)
    return make_table(read_sheet(b"".join([lines[0], *lines[1::step]]), name), Roles(label))


def prepared(table, counts):
    """All columns any round could have, and which each has; the others hold nonsense."""
    features, present = [], []
    for bag in counts:
        rows = np.repeat(np.arange(table.n_cases), bag)
        columns = preparation(table, scaled=False).fit(table.features[rows])
        found = columns.transform(table.features)
        kinds = [column.kind for column in table.columns]
        has = [True] * kinds.count("number")
        if "text" in kinds:
            seen = columns.named_transformers_["texts"][-1].categories_
            texts = [column for column in table.columns if column.kind == "text"]
            for column, codes in zip(texts, seen, strict=True):
                has += [code in codes for code in range(len(column.categories))]
        x = np.linspace(-9.0, 9.0, table.n_cases * len(has)).reshape(table.n_cases, -1)
        x[:, has] = found
        features.append(x)
        present.append(has)
    return features, np.array(present)


def lettered():
    """A text column of which nearly every bag lacks some entries, and a rare class."""
    rng = np.random.default_rng(5)
    letters = rng.choice(list("abcdefghijklmnopqrstuvw"), 40)
    lines = ["kind,letter,size"] + [
        f"{k},{letter},{x:.1f}"
        for k, letter, x in zip("xyyyyyyyyz" * 4, letters, rng.normal(size=40), strict=True)
    ]
    return make_table(read_sheet("\n".join(lines).encode(), "made.csv"), Roles("kind"))


TABLES = {
    "iris": lambda: some_rows("iris.csv", "class", 2),
    "penguins": lambda: some_rows("penguins.csv", "species", 5),
    "urine": lambda: some_rows("urine_missing.csv", "r", 1),
    "letters": lettered,
}


class TestAgainstPlainScores:
    @pytest.mark.parametrize("trees", TREES)
    @pytest.mark.parametrize("scheme", ["bootstrap", "folds"])
    @pytest.mark.parametrize("name", TABLES)
    def test_not_one_bit_apart(self, name, scheme, trees):
        table, rng = TABLES[name](), np.random.default_rng(7)
        n = table.n_cases
        counts = bootstrap(n, 4, rng) if scheme == "bootstrap" else folds(n, 5, rng)
        features, present = prepared(table, counts)
        if name == "letters" and scheme == "bootstrap":
            assert not present.all()
        choice = (
            choose(CANDIDATES, "tree")
            if trees is None
            else choose(CANDIDATES, "forest", trees=trees)
        )
        states = list(range(3, 3 + len(counts)))
        expected = plain_scores(choice, table, counts, random_states=states)
        found = scores_of(
            trees,
            features,
            table.labels,
            counts,
            n_classes=table.n_classes,
            random_states=states,
            present=present,
        )
        same_bits(found, expected)

    def test_the_default_forest(self):
        table = TABLES["urine"]()
        counts = bootstrap(table.n_cases, 1, np.random.default_rng(8))
        features, _ = prepared(table, counts)
        found = forest_scores(
            features, table.labels, counts, n_classes=2, trees=200, random_states=[2**31 - 1]
        )
        choice = choose(CANDIDATES, "forest")
        assert choice.values()["trees"] == 200
        same_bits(found, plain_scores(choice, table, counts, random_states=[2**31 - 1]))

    @pytest.mark.parametrize("trees", TREES)
    def test_classes_a_bag_lacks(self, trees):
        table = table_of(
            [0, 0, 0, 1, 1, 1, 2, 2], features=np.random.default_rng(2).normal(size=(8, 2))
        )
        counts = np.array(
            [[2, 2, 1, 1, 1, 1, 0, 0], [0, 0, 0, 3, 1, 1, 2, 1], [0, 0, 0, 3, 2, 3, 0, 0]],
            dtype=np.uint8,
        )
        x = np.broadcast_to(table.features, (3, *table.features.shape))
        found = scores_of(trees, x, table.labels, counts, n_classes=3, random_states=[4, 5, 6])
        assert (found[0, :, 2] == 0).all()
        assert (found[1, :, 0] == 0).all()
        assert (found[2] == [0, 1, 0]).all()
        choice = choose(CANDIDATES, "forest", trees=trees) if trees else choose(CANDIDATES, "tree")
        same_bits(found, plain_scores(choice, table, counts, random_states=[4, 5, 6]))


@st.composite
def made(draw):
    """Few or many classes, unbalanced; ties and equal cases; more columns than cases."""
    rng = np.random.default_rng(draw(st.integers(0, 2**32)))
    n, q = draw(st.integers(4, 40)), draw(st.integers(1, 60))
    k, rounds = draw(st.integers(2, 5)), draw(st.integers(1, 3))
    labels = rng.choice(k, n, p=rng.dirichlet([0.6] * k))
    labels[:2] = 0, 1
    x = rng.normal(size=(n, q)) * 10.0 ** rng.integers(-9, 9, q)
    columns = rng.random(q) < 0.5
    x[:, columns] = np.round(rng.normal(size=(n, columns.sum())), draw(st.integers(0, 2)))
    x[rng.random(n) < 0.2] = x[0]
    present = rng.random((rounds, q)) < 0.8
    present[:, 0] = True
    if draw(st.booleans()):
        counts = bootstrap(n, rounds, rng)
    else:
        counts = (rng.random((rounds, n)) < 0.7).astype(np.uint8) * rng.integers(1, 4)
    counts[:, 0] += counts.sum(axis=1) == 0
    return x, labels, counts.astype(np.uint8), k, present


class TestAgainstThePublicClasses:
    @settings(max_examples=60, deadline=None)
    @given(made(), st.sampled_from((None, 1, 6)), st.integers(0, 2**31 - 1))
    def test_not_one_bit_apart(self, given, trees, state):
        x, labels, counts, k, present = given
        features = np.broadcast_to(x, (len(counts), *x.shape))
        rest = {
            "n_classes": k,
            "random_states": [state ^ r for r in range(len(counts))],
            "present": present,
        }
        found = scores_of(trees, features, labels, counts, **rest)
        same_bits(found, public(trees, features, labels, counts, **rest))

    @settings(max_examples=15, deadline=None)
    @given(made(), st.sampled_from((None, 6)))
    def test_a_case_counted_twice_is_two_cases(self, given, trees):
        x, labels, counts, k, _ = given
        n, bag = len(labels), counts[0]
        rows = np.repeat(np.arange(n), bag)
        once = np.ones((1, len(rows)), dtype=np.uint8)
        rest = {"n_classes": k, "random_states": [77]}
        (weighted,) = scores_of(trees, [x], labels, bag[None], **rest)
        (repeated,) = scores_of(trees, [x[rows]], labels[rows], once, **rest)
        same_bits(weighted[rows], repeated)


class TestByHand:
    def test_shares_of_a_leaf(self):
        # cases 0 and 1 look alike, so their leaf holds class 0 twice and class 1 once
        x, labels = np.array([[[1.0], [1.0], [5.0]]]), np.array([0, 1, 1])
        counts = np.array([[2, 1, 1]], dtype=np.uint8)
        (found,) = tree_scores(x, labels, counts, n_classes=2, random_states=[0])
        assert found.tolist() == [[2 / 3, 1 / 3], [2 / 3, 1 / 3], [0, 1]]

    def test_a_forest_is_the_mean_of_its_bootstraps(self):
        # no column to split on: a tree answers with the shares of its own draw of the bag
        labels = np.array([0, 1, 1, 2, 2, 2])
        bag = np.array([[3, 0, 2, 1, 1, 1]], dtype=np.uint8)
        x = np.ones((1, 6, 2))
        (found,) = forest_scores(x, labels, bag, n_classes=3, trees=3, random_states=[21])
        of_the_bag = np.repeat(labels, bag[0])
        seeds = np.random.RandomState(21)
        shares = []
        for _ in range(3):
            drawn = np.random.RandomState(seeds.randint(2**31 - 1)).randint(0, 8, 8)
            shares.append(np.bincount(of_the_bag[drawn], minlength=3) / 8)
        # eighths are exact, their sum too
        assert (found == sum(shares) / 3).all()


class TestRounds:
    rng = np.random.default_rng(9)
    n = 24
    labels = np.arange(24) % 3
    tables = rng.normal(size=(2, 24, 4)) + labels[:, None]
    counts = bootstrap(24, 4, rng)
    present = np.array([[1, 1, 1, 1], [1, 0, 1, 1], [1, 0, 1, 1], [1, 0, 1, 1]], dtype=bool)
    states = (5, 6, 7, 8)

    @pytest.mark.parametrize("trees", TREES)
    def test_alone_or_together(self, trees):
        # the table changes after round 2, the columns after round 0
        x = [self.tables[0], self.tables[0], self.tables[0], self.tables[1]]
        rest = {"n_classes": 3, "present": self.present, "random_states": self.states}
        together = scores_of(trees, x, self.labels, self.counts, **rest)
        same_bits(together, public(trees, x, self.labels, self.counts, **rest))
        for r in (3, 1, 2, 0):
            alone = scores_of(
                trees,
                [x[r]],
                self.labels,
                self.counts[r : r + 1],
                n_classes=3,
                random_states=self.states[r : r + 1],
                present=self.present[r : r + 1],
            )
            same_bits(alone[0], together[r])

    def test_a_table_shared_by_all_rounds_is_converted_once(self, monkeypatch):
        times = []
        single = trees._single
        monkeypatch.setattr(trees, "_single", lambda x: times.append(1) or single(x))
        shared = np.broadcast_to(self.tables[0], (4, self.n, 4))
        rest = {"n_classes": 3, "random_states": self.states}
        found = tree_scores(shared, self.labels, self.counts, **rest)
        assert len(times) == 1
        stacked = tree_scores(shared.copy(), self.labels, self.counts, **rest)
        assert len(times) == 1 + 4
        same_bits(found, stacked)

    def test_threads_do_not_share_random_numbers(self):
        def one(state):
            return forest_scores(
                [self.tables[0]],
                self.labels,
                self.counts[:1],
                n_classes=3,
                trees=40,
                random_states=[state],
            ).tobytes()

        expected = [one(state) for state in range(24)]
        with ThreadPoolExecutor(4) as pool:
            assert list(pool.map(one, range(24))) == expected

    @pytest.mark.filterwarnings("error")
    @pytest.mark.parametrize("trees", TREES)
    @pytest.mark.parametrize("value", [np.inf, 1e39])
    def test_numbers_too_large_are_refused_as_before(self, trees, value):
        x = self.tables[:1].copy()
        x[0, 0, 0] = value
        counts = np.ones((1, self.n), dtype=np.uint8)
        with pytest.raises(ValueError, match="infinity or a value too large"):
            scores_of(trees, x, self.labels, counts, n_classes=3, random_states=[0])
        # a bag of one class needs no fit, so nothing is looked at
        counts[0, self.labels != 2] = 0
        (found,) = scores_of(trees, x, self.labels, counts, n_classes=3, random_states=[0])
        assert (found == [0, 0, 1]).all()


class TestWhichPathRuns:
    rest = {"n_classes": 3, "random_states": TestRounds.states}  # noqa: RUF012
    given = (TestRounds.tables[[0, 0, 1, 1]], TestRounds.labels, TestRounds.counts)

    @pytest.fixture
    def anew(self):
        """Let the builder be tried again in the test, and once more after it."""
        compiled_available.cache_clear()
        yield
        compiled_available.cache_clear()

    @pytest.fixture
    def no_public(self, monkeypatch):
        compiled_available()  # compares with the public classes, once

        def refuse(*_, **__):
            raise AssertionError("a public class was fitted")

        for model in (RandomForestClassifier, DecisionTreeClassifier):
            monkeypatch.setattr(model, "fit", refuse)

    def test_compiled_with_the_installed_version(self, anew):
        assert compiled_available() is True

    @pytest.mark.parametrize("trees", TREES)
    def test_no_public_class_is_fitted(self, trees, no_public):
        assert scores_of(trees, *self.given, **self.rest).any()

    def test_the_fallback_is_the_public_class(self, no_public, monkeypatch):
        monkeypatch.setattr(trees, "compiled_available", lambda: False)
        with pytest.raises(AssertionError, match="a public class was fitted"):
            tree_scores(*self.given, **self.rest)

    def gone(self, monkeypatch):
        monkeypatch.setitem(sys.modules, "sklearn.tree._criterion", None)

    def other_arguments(self, monkeypatch):
        gini = sklearn.tree._criterion.Gini
        monkeypatch.setattr(sklearn.tree._criterion, "Gini", lambda classes: gini(1, classes))

    def no_such_method(self, monkeypatch):
        class Renamed:
            def __init__(self, *_):
                pass

        # the public classes keep the name they imported
        monkeypatch.setattr(sklearn.tree._tree, "DepthFirstTreeBuilder", Renamed)

    def refused(self, monkeypatch):
        def tree(*_):
            raise ValueError("Buffer dtype mismatch")

        monkeypatch.setattr(sklearn.tree._tree, "Tree", tree)

    def other_digits(self, monkeypatch):
        monkeypatch.setattr(sklearn.tree._criterion, "Gini", sklearn.tree._criterion.Entropy)

    def other_defaults(self, monkeypatch):
        def model(settings, state):
            return RandomForestClassifier(settings["trees"], random_state=state, max_features=None)

        candidate = CANDIDATES["forest"]
        monkeypatch.setitem(
            CANDIDATES, "forest", type(candidate)(**{**vars(candidate), "model": model})
        )

    @pytest.mark.parametrize(
        "change", [gone, other_arguments, no_such_method, refused, other_digits, other_defaults]
    )
    def test_a_later_scikit_learn_changes_no_digit(self, change, anew, monkeypatch):
        expected = [scores_of(t, *self.given, **self.rest) for t in (None, 9)]
        compiled_available.cache_clear()
        change(self, monkeypatch)
        assert compiled_available() is False
        for t, scores in zip((None, 9), expected, strict=True):
            if t and change.__name__ == "other_defaults":
                continue  # the candidate itself was changed, and its answers with it
            same_bits(scores_of(t, *self.given, **self.rest), scores)
