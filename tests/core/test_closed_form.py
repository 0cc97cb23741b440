"""Rounds from counts: against scikit-learn fitted bag by bag, by hand, and by their laws."""

import dataclasses
import subprocess
import sys
import warnings

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import minimize
from scipy.stats import multivariate_normal, norm
from sklearn.discriminant_analysis import (
    LinearDiscriminantAnalysis,
    QuadraticDiscriminantAnalysis,
)
from sklearn.dummy import DummyClassifier
from sklearn.feature_selection import VarianceThreshold
from sklearn.linear_model import LogisticRegression
from sklearn.naive_bayes import GaussianNB
from sklearn.pipeline import make_pipeline

from evalcore.closed_form import complete, majority, naive_bayes
from evalcore.discriminants import lda, qda
from evalcore.logistic_rounds import logistic
from evalcore.preparation import preparation
from evalcore.prepared import Prepared, prepare
from evalcore.table import Column, Roles, Table

from .checks import table_from, table_of

# what each function stands for: whether scaled, the public classes, its settings
PLAIN = {
    majority: (False, lambda: DummyClassifier(strategy="prior"), {}),
    naive_bayes: (False, GaussianNB, {}),
    lda: (False, lambda: make_pipeline(VarianceThreshold(), LinearDiscriminantAnalysis()), {}),
    qda: (
        True,
        lambda: QuadraticDiscriminantAnalysis(solver="eigen", shrinkage=0.01, tol=0.0),
        {"shrinkage": 0.01},
    ),
    logistic: (
        True,
        lambda: LogisticRegression(C=1.0, solver="newton-cholesky", tol=1e-12, max_iter=1000),
        {"C": 1.0},
    ),
}
EVERY = pytest.mark.parametrize("model", list(PLAIN), ids=lambda model: model.__name__)
LEARNS = pytest.mark.parametrize("model", list(PLAIN)[1:], ids=lambda model: model.__name__)

FILES = {
    "iris.csv": "class",
    "penguins.csv": "species",
    "penguins_nonascii.csv": "Espèce",
    "urine_missing.csv": "r",
    "groups_trap_constructed.csv": "label",
}


def bags_of(n: int, seed: int = 0, n_rounds: int = 2):
    """Bootstrap, hold-out, 5-fold and leave-one-out rounds, a few of each."""
    rng = np.random.default_rng(seed)
    boot = rng.multinomial(n, np.full(n, 1 / n), n_rounds)
    order = np.array([rng.permutation(n) for _ in range(n_rounds)])
    holdout = order < 2 * n // 3
    folds = np.arange(n) % 5 != np.arange(5)[:n_rounds, None]
    one_out = ~np.eye(n, dtype=bool)[:: max(1, n // n_rounds)]
    return np.concatenate([boot, holdout, folds, one_out]).astype(np.uint8)


def ours(model, table: Table, counts, **changed):
    scaled, _, given = PLAIN[model]
    prepared = prepare(table, counts, scaled=scaled)
    return model(prepared, table.labels, counts, n_classes=table.n_classes, **(given | changed))


def plain(model, table: Table, bag, make=None):
    scaled, usual, _ = PLAIN[model]
    rows = np.repeat(np.arange(table.n_cases), bag)
    pipeline = make_pipeline(preparation(table, scaled=scaled), (make or usual)())
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        fitted = pipeline.fit(table.features[rows], table.labels[rows])
    return fitted.predict_proba(table.features)


def assert_as_plain(model, table: Table, counts, *, left_to_plain: int = 0) -> None:
    counts = counts[complete(table.labels, counts, table.n_classes)]
    assert len(counts)
    found = ours(model, table, counts)
    assert found.shape == (*counts.shape, table.n_classes)
    missing = np.isnan(found).any(axis=(1, 2))
    # undefined throughout or not at all
    assert np.isnan(found[missing]).all()
    assert missing.sum() <= left_to_plain
    for r in np.flatnonzero(~missing):
        far = far_out(table, counts[r]) if model is naive_bayes else np.zeros(table.n_cases, bool)
        expected = plain(model, table, counts[r])
        assert_allclose(found[r][~far], expected[~far], atol=1e-9, rtol=0)
        assert_allclose(found[r][far], expected[far], atol=1e-7, rtol=0)


def far_out(table: Table, bag) -> np.ndarray:
    """Cases with another value where the bag never varies: 1e4 standard deviations and more.

    There squares of 1e8 cancel between the classes, and either computation is left with fewer
    digits (both were 1e-9 off the same sum in extended precision).
    """
    features = prepare(table, bag[None], scaled=False).features[0]
    inside = features[bag > 0]
    return np.any((np.ptp(inside, axis=0) == 0) & (features != inside[0]), axis=1)


def random_table(n_classes: int, n: int, p: int, *, seed: int, missing: float = 0.0) -> Table:
    """Unbalanced classes, scales from 0.001 to 1000, a constant, a copy, a rare flag, a text."""
    rng = np.random.default_rng(seed)
    y = np.minimum(rng.geometric(0.45, n) - 1, n_classes - 1)
    y[: 4 * n_classes] = np.arange(4 * n_classes) % n_classes
    x = rng.normal(size=(n, p)) + 0.8 * y[:, None] * (np.arange(p) < 2)
    x *= 10.0 ** rng.integers(-3, 4, p)
    x[:, -1] = 0.1
    x[:, -2] = x[:, 0]
    x[:, -3] = 0.1 * (rng.random(n) < 0.05)
    x[rng.random(x.shape) < missing] = np.nan
    codes = rng.integers(0, 4, n).astype(float)
    codes[rng.random(n) < missing] = np.nan
    table = table_of(y.tolist(), features=x, classes="abcde")
    text = Column("t", "text", codes, ("p", "q", "r", "s"))
    return dataclasses.replace(table, columns=(text, *table.columns))


@EVERY
@pytest.mark.parametrize("name", FILES)
def test_files_as_scikit_learn_answers(model, name):
    table = table_from(name, Roles(FILES[name]))
    assert_as_plain(model, table, bags_of(table.n_cases))


@EVERY
@pytest.mark.parametrize("n_classes", [2, 3, 5])
@pytest.mark.parametrize("missing", [0.0, 0.1])
@pytest.mark.parametrize(("n", "p"), [(80, 5), (200, 10), (45, 60)])
def test_random_tables_as_scikit_learn_answers(model, n_classes, missing, n, p):
    table = random_table(n_classes, n, p, seed=n_classes + n, missing=missing)
    # a class of four cases may come into a bag as one case, repeated
    left = 2 if model is qda else 0
    assert_as_plain(model, table, bags_of(n, n_classes, 2), left_to_plain=left)


@pytest.mark.parametrize("distance", [1e-1, 1e-2, 1e-3, 1e-4, 1e-5, 1e-7])
@LEARNS
def test_columns_that_are_almost_copies(model, distance):
    rng = np.random.default_rng(5)
    y = rng.integers(0, 3, 90)
    x = rng.normal(size=(90, 4)) + y[:, None]
    x = np.column_stack([x, x[:, 0] + distance * rng.normal(size=90)])
    assert_as_plain(model, table_of(y.tolist(), features=x), bags_of(90))


@pytest.mark.parametrize("C", [1e-4, 0.01, 100.0, 1e4])
@pytest.mark.parametrize("gap", [0.0, 1.0, 30.0])
@pytest.mark.parametrize("n_classes", [2, 3])
def test_logistic_where_classes_overlap_or_not(C, gap, n_classes):
    rng = np.random.default_rng(7)
    y = np.arange(60) % n_classes
    table = table_of(y.tolist(), features=rng.normal(size=(60, 3)) + gap * y[:, None])
    counts = bags_of(60)
    found = ours(logistic, table, counts, C=C)

    def make():
        return LogisticRegression(C=C, solver="newton-cholesky", tol=1e-13, max_iter=1000)

    for r, bag in enumerate(counts):
        assert_allclose(found[r], plain(logistic, table, bag, make), atol=1e-8, rtol=0)


@pytest.mark.parametrize("n_classes", [2, 3])
def test_logistic_is_the_minimum(n_classes):
    """Another minimiser, from the definition with a weight vector for each class."""
    rng = np.random.default_rng(11)
    y = rng.integers(0, n_classes, 40)
    table = table_of(y.tolist(), features=rng.normal(size=(40, 2)) + y[:, None])
    counts = rng.multinomial(40, np.full(40, 1 / 40), 1).astype(np.uint8)
    x = prepare(table, counts, scaled=True).features[0]
    C = 0.7

    def scores(flat):
        weights = flat.reshape(-1, 3)
        out = x @ weights[:, :2].T + weights[:, 2]
        return np.column_stack([np.zeros(40), out]) if n_classes == 2 else out

    def loss(flat):
        s = scores(flat)
        log_p = s - np.log(np.exp(s).sum(axis=1, keepdims=True))
        size = (flat.reshape(-1, 3)[:, :2] ** 2).sum() / 2
        return size - C * (counts[0] * log_p[np.arange(40), y]).sum()

    start = np.zeros(3 if n_classes == 2 else 3 * n_classes)
    best = minimize(loss, start, method="BFGS", options={"gtol": 1e-9})
    expected = np.exp(s := scores(best.x)) / np.exp(s).sum(axis=1, keepdims=True)
    assert_allclose(ours(logistic, table, counts, C=C)[0], expected, atol=1e-6)


def test_naive_bayes_from_its_densities():
    rng = np.random.default_rng(2)
    y = np.arange(12) % 2
    table = table_of(y.tolist(), features=rng.normal(size=(12, 2)))
    counts = np.array([[2, 1, 1, 1, 0, 1, 3, 1, 0, 1, 0, 2]], dtype=np.uint8)
    rows = np.repeat(np.arange(12), counts[0])
    x, joint = table.features, []
    extra = 1e-9 * x[rows].var(axis=0).max()
    for k in (0, 1):
        own = x[rows][y[rows] == k]
        density = norm(own.mean(axis=0), np.sqrt(own.var(axis=0) + extra)).pdf(x).prod(axis=1)
        joint.append(len(own) / len(rows) * density)
    assert_allclose(ours(naive_bayes, table, counts)[0, :, 1], joint[1] / sum(joint), rtol=1e-12)


def test_qda_from_its_densities():
    rng = np.random.default_rng(3)
    y = np.arange(20) % 2
    table = table_of(y.tolist(), features=rng.normal(size=(20, 3)) * (1 + y[:, None]))
    counts = rng.multinomial(20, np.full(20, 1 / 20), 1).astype(np.uint8)
    x = prepare(table, counts, scaled=True).features[0]
    rows = np.repeat(np.arange(20), counts[0])
    joint = []
    for k in (0, 1):
        own = x[rows][y[rows] == k]
        spread = np.cov(own.T, bias=True)
        shrunk = 0.7 * spread + 0.3 * np.trace(spread) / 3 * np.eye(3)
        joint.append(len(own) * multivariate_normal(own.mean(axis=0), shrunk).pdf(x))
    found = ours(qda, table, counts, shrinkage=0.3)[0, :, 1]
    assert_allclose(found, joint[1] / sum(joint), rtol=1e-11)


def test_lda_from_its_densities():
    rng = np.random.default_rng(4)
    y = np.arange(30) % 3
    table = table_of(y.tolist(), features=rng.normal(size=(30, 2)) + y[:, None])
    counts = rng.multinomial(30, np.full(30, 1 / 30), 1).astype(np.uint8)
    rows = np.repeat(np.arange(30), counts[0])
    x, own = table.features, [table.features[rows][y[rows] == k] for k in range(3)]
    pooled = sum(len(o) * np.cov(o.T, bias=True) for o in own) / len(rows)
    joint = np.array([len(o) * multivariate_normal(o.mean(axis=0), pooled).pdf(x) for o in own])
    assert_allclose(ours(lda, table, counts)[0], (joint / joint.sum(axis=0)).T, rtol=1e-11)


class TestEdges:
    def test_complete(self):
        labels = np.array([0, 1, 1, 2])
        bags = np.array([[1, 1, 0, 1], [1, 0, 0, 2], [0, 3, 1, 0]], dtype=np.uint8)
        assert complete(labels, bags, 3).tolist() == [True, False, False]

    def test_majority_of_a_bag_that_lacks_a_class(self):
        table = table_of([0, 0, 1, 2])
        bags = np.array([[3, 0, 1, 0], [1, 1, 1, 1]], dtype=np.uint8)
        found = ours(majority, table, bags)
        assert found[0].tolist() == [[0.75, 0.25, 0.0]] * 4
        assert found[1].tolist() == [[0.5, 0.25, 0.25]] * 4

    @pytest.mark.parametrize("model", [naive_bayes, logistic])
    def test_where_nothing_varies_the_shares_are_left(self, model):
        table = table_of([0, 0, 0, 1], features=np.full((4, 2), 0.1))
        found = ours(model, table, np.ones((1, 4), dtype=np.uint8))
        assert_allclose(found, np.tile([0.75, 0.25], (1, 4, 1)), rtol=1e-12)

    def test_where_nothing_varies_a_discriminant_is_undefined(self):
        table = table_of([0, 0, 0, 1], features=np.full((4, 2), 0.1))
        bags = np.ones((1, 4), dtype=np.uint8)
        assert np.isnan(ours(lda, table, bags)).all()
        assert np.isnan(ours(qda, table, bags)).all()

    def test_one_case_alone_has_no_covariance(self):
        rng = np.random.default_rng(0)
        table = table_of([0, 0, 0, 1, 1, 1], features=rng.normal(size=(6, 2)))
        bags = np.array([[1, 1, 1, 3, 0, 0], [1, 1, 1, 1, 2, 0]], dtype=np.uint8)
        assert np.isnan(ours(qda, table, bags)).all(axis=(1, 2)).tolist() == [True, False]

    def test_lda_leaves_out_what_is_constant_within_classes(self):
        """Whole numbers leave no rounding behind, so scikit-learn leaves the column out too."""
        rng = np.random.default_rng(1)
        y = np.arange(30) % 2
        x = np.column_stack([rng.normal(size=30) + y, 3.0 * y])
        assert_as_plain(lda, table_of(y.tolist(), features=x), bags_of(30))

    def test_lda_leaves_a_round_to_plain_where_rounding_decides(self):
        rng = np.random.default_rng(1)
        y = np.arange(30) % 2
        x = np.column_stack([rng.normal(size=30) + y, 0.1 + 0.2 * y])
        found = ours(lda, table_of(y.tolist(), features=x), bags_of(30))
        assert np.isnan(found).all()

    @LEARNS
    def test_features_far_from_zero(self, model):
        rng = np.random.default_rng(6)
        y = np.arange(50) % 2
        x = rng.integers(0, 64, (50, 3)) / 8 + y[:, None]
        near, far = (table_of(y.tolist(), features=x + shift) for shift in (0, 2.0**20))
        counts = bags_of(50)
        assert_allclose(ours(model, far, counts), ours(model, near, counts), atol=1e-9, rtol=0)


class TestLaws:
    @EVERY
    def test_probabilities(self, model):
        table = random_table(4, 100, 6, seed=8)
        counts = bags_of(100)
        found = ours(model, table, counts[complete(table.labels, counts, 4)])
        assert np.nanmin(found) >= 0
        total = found.sum(axis=2)
        assert_allclose(total[~np.isnan(total)], 1, rtol=1e-12)

    @LEARNS
    def test_a_case_counted_twice_is_two_cases(self, model):
        rng = np.random.default_rng(9)
        y = np.arange(24) % 3
        x = rng.normal(size=(24, 2)) + y[:, None]
        once = table_of(y.tolist(), features=x)
        twice = table_of([*y.tolist(), int(y[5])], features=np.vstack([x, x[5]]))
        bag = np.ones((1, 24), dtype=np.uint8)
        bag[0, 5] = 2
        found = ours(model, twice, np.ones((1, 25), dtype=np.uint8))[:, :24]
        assert_allclose(ours(model, once, bag), found, atol=1e-10)

    @LEARNS
    def test_renamed_classes_and_reordered_cases(self, model):
        table = random_table(3, 80, 5, seed=10)
        counts = bags_of(80)
        new = np.array([2, 0, 1])
        order = np.random.default_rng(0).permutation(80)
        moved = table_of(new[table.labels][order].tolist(), features=table.features[order][:, 1:])
        same = table_of(table.labels.tolist(), features=table.features[:, 1:])
        found = ours(model, moved, counts[:, order])[:, :, new]
        assert_allclose(found, ours(model, same, counts)[:, order], atol=1e-10)

    @LEARNS
    def test_a_round_does_not_depend_on_its_neighbours(self, model):
        table = random_table(2, 60, 5, seed=12)
        counts = bags_of(60)
        together = ours(model, table, counts)
        for r in range(0, len(counts), 3):
            alone = ours(model, table, counts[r : r + 1])
            assert_allclose(alone[0], together[r], atol=1e-11, equal_nan=True)

    @LEARNS
    def test_what_is_given_is_left_as_it_was(self, model):
        table = random_table(3, 50, 5, seed=13)
        scaled, _, settings = PLAIN[model]
        counts = np.ones((2, 50), dtype=np.uint8)
        prepared = prepare(table, counts, scaled=scaled)
        before = prepared.columns.copy()
        first = model(prepared, table.labels, counts, n_classes=3, **settings)
        again = model(prepared, table.labels, counts, n_classes=3, **settings)
        assert np.array_equal(prepared.columns, before)
        assert np.array_equal(first, again)

    @LEARNS
    def test_a_column_the_bags_lack_changes_nothing(self, model):
        table = random_table(2, 40, 5, seed=14)
        scaled, _, settings = PLAIN[model]
        counts = np.ones((2, 40), dtype=np.uint8)
        given = prepare(table, counts, scaled=scaled)
        columns = np.concatenate([given.columns, np.zeros((2, 1, 40))], axis=1)
        present = np.concatenate([given.present, np.zeros((2, 1), dtype=bool)], axis=1)
        wider = Prepared(columns, present, given.shared)
        found = model(wider, table.labels, counts, n_classes=2, **settings)
        expected = model(given, table.labels, counts, n_classes=2, **settings)
        assert_allclose(found, expected, atol=1e-11)


def test_no_scikit_learn_comes_along():
    script = (
        "import sys, numpy as np\n"
        "from evalcore import discriminants, logistic_rounds, prepared\n"
        "x = np.random.default_rng(0).normal(size=(1, 2, 8))\n"
        "given = prepared.Prepared(x, np.ones((1, 2), dtype=bool), True)\n"
        "y, bag = np.arange(8) % 2, np.ones((1, 8), dtype=np.uint8)\n"
        "discriminants.lda(given, y, bag, n_classes=2)\n"
        "discriminants.qda(given, y, bag, n_classes=2, shrinkage=0.1)\n"
        "logistic_rounds.logistic(given, y, bag, n_classes=2, C=1.0)\n"
        "print('sklearn' in sys.modules or 'scipy' in sys.modules)"
    )
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "False"
