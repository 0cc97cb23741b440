"""Fits and their answers: known figures of real tables, and digits that nothing else can move."""

import dataclasses
import json
import os
import pathlib
import subprocess
import sys

import numpy as np
import pytest
from numpy.testing import assert_allclose
from sklearn.linear_model import LogisticRegression
from sklearn.naive_bayes import GaussianNB
from sklearn.neighbors import KNeighborsClassifier
from statsmodels.stats.proportion import proportion_confint

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.engine import CHUNK, WHOLE, Task, chunk_rounds, run, tasks, whole_rounds
from evalcore.fits import plain_scores
from evalcore.intake import make_table, noun_from
from evalcore.measures import predicted_class
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES
from evalcore.sheet import read_sheet
from evalcore.table import Roles
from evalcore.tuning import Learned

from .checks import DATA, carried_out, cases, table_from, table_of

CHOICES = {
    "linear discriminant analysis, priors = class shares": choose(CANDIDATES, "lda"),
    "1-nearest neighbour, raw Euclidean": choose(
        CANDIDATES, "nearest_neighbours", k=1, scaling="none"
    ),
    "1nn": choose(CANDIDATES, "nearest_neighbours", k=1, scaling="none"),
}
LEAVE_ONE_OUT = (choose(SCHEMES, "leave_one_out"),)


def wrong(confusion) -> int:
    return int(confusion.sum() - np.trace(confusion))


@pytest.mark.parametrize("case", cases("08", "loo"))
def test_leave_one_out_on_iris(case):
    given, expected = case["inputs"], case["expected"]
    table = table_from(given["data"], Roles(given["label"]))
    plan = Plan(table.roles, LEAVE_ONE_OUT, (CHOICES[given["classifier"]],))
    evaluation, _ = carried_out(table, plan)
    name = plan.candidate_names[0]
    part = evaluation.part(name, "leave_one_out")
    confusion = part.held.confusion.sum(axis=0)
    assert list(table.classes) == given["classes"]
    assert table.n_cases == expected["n"]
    assert wrong(confusion) == expected["loo_errors"]
    assert wrong(part.whole.confusion[0]) == expected["resub_errors"]
    assert confusion.tolist() == expected["loo_confusion"]
    # through to the estimate: no case is held out twice, so plain Wilson
    right = expected["n"] - expected["loo_errors"]
    estimate = evaluation.estimate("accuracy", name)
    assert estimate.value == pytest.approx(right / expected["n"], rel=1e-14)
    assert estimate.interval.method == "wilson"
    low, high = proportion_confint(right, expected["n"], method="wilson")
    assert_allclose((estimate.interval.low, estimate.interval.high), (low, high), rtol=1e-12)
    apparent = evaluation.estimate("accuracy", name, estimator="apparent")
    assert apparent.value == pytest.approx(1 - expected["resub_errors"] / expected["n"], rel=1e-14)


@pytest.mark.parametrize("case", cases("08", "logo"))
def test_rows_that_belong_together_are_held_out_together(case):
    given, expected = case["inputs"], case["expected"]
    sheet = read_sheet((DATA / given["data"]).read_bytes(), given["data"])
    together = Roles(given["label"], given["group"], (), noun_from(given["group"]))
    apart = Roles(given["label"], leave_out=(given["group"],))
    for roles, errors in ((together, "logo_errors"), (apart, "loo_errors")):
        table = make_table(sheet, roles)
        plan = Plan(roles, LEAVE_ONE_OUT, (CHOICES[given["classifier"]],), answered_from="one")
        evaluation, _ = carried_out(table, plan)
        part = evaluation.part(plan.candidate_names[0], "leave_one_out", "case")
        assert [c.name for c in table.columns] == given["features"]
        assert table.n_cases == expected["n"]
        assert wrong(part.held.confusion.sum(axis=0)) == expected[errors]
        assert part.held.rounds.n_rounds == table.n_units
        assert table.n_units == (expected["groups"] if roles is together else expected["n"])


def some_penguins():
    """Three classes, numbers and text, both with gaps; every seventh row."""
    name = "penguins.csv"
    lines = (DATA / name).read_bytes().splitlines(keepends=True)
    return make_table(read_sheet(b"".join([lines[0], *lines[4::7]]), name), Roles("species"))


class TestAgainstALoopByHand:
    table = some_penguins()
    bags = (
        np.random.default_rng(1)
        .multinomial(table.n_cases, [1 / table.n_cases] * table.n_cases, 3)
        .astype(np.uint8)
    )

    def prepared(self, rows, scaled):
        """Median or most frequent value, standardised, one column a category, all from the bag."""
        parts = []
        for column in self.table.columns:
            values, bag = column.values.copy(), column.values[rows]
            bag = bag[~np.isnan(bag)]
            if column.kind == "number":
                values[np.isnan(values)] = np.median(bag)
                mean, sd = values[rows].mean(), values[rows].std()
                parts.append(((values - mean) / sd if scaled else values)[:, None])
            else:
                seen, times = np.unique(bag, return_counts=True)
                values[np.isnan(values)] = seen[times.argmax()]
                parts.append((values[:, None] == seen).astype(float))
        return np.hstack(parts)

    @pytest.mark.parametrize(
        ("choice", "model", "scaled"),
        [
            (
                choose(CANDIDATES, "logistic", C=0.7),
                LogisticRegression(C=0.7, solver="newton-cg", tol=1e-12, max_iter=10_000),
                True,
            ),
            (choose(CANDIDATES, "naive_bayes"), GaussianNB(), False),
            (choose(CANDIDATES, "nearest_neighbours", k=3), KNeighborsClassifier(3), True),
            (
                choose(CANDIDATES, "nearest_neighbours", k=4, scaling="none"),
                KNeighborsClassifier(4),
                False,
            ),
        ],
        ids=["logistic", "naive_bayes", "neighbours", "unscaled_neighbours"],
    )
    def test_same_scores(self, choice, model, scaled):
        table, bags = self.table, self.bags
        assert np.isnan(table.features).any()
        assert {column.kind for column in table.columns} == {"number", "text"}
        found = plain_scores(choice, table, bags, random_states=[0, 0, 0])
        for scores, bag in zip(found, bags, strict=True):
            rows = np.repeat(np.arange(table.n_cases), bag)
            x = self.prepared(rows, scaled)
            expected = model.fit(x[rows], table.labels[rows]).predict_proba(x)
            assert_allclose(scores, expected, rtol=0, atol=1e-9)


class TestClassesABagLacks:
    table = table_of(
        [0, 0, 0, 1, 1, 1, 2, 2],
        features=np.random.default_rng(2).normal(size=(8, 2)),
    )

    @pytest.mark.parametrize("key", ["logistic", "naive_bayes", "forest"])
    def test_probability_0(self, key):
        bag = np.array([[2, 2, 1, 1, 1, 1, 0, 0]], dtype=np.uint8)
        (scores,) = plain_scores(choose(CANDIDATES, key), self.table, bag, random_states=[1])
        assert (scores[:, 2] == 0).all()
        assert_allclose(scores.sum(axis=1), 1, rtol=1e-12)

    @pytest.mark.parametrize("bag", [[2, 2, 1, 1, 1, 1, 0, 0], [0, 0, 0, 3, 1, 1, 2, 1]])
    def test_decision_values_below_all_others(self, bag):
        counts = np.array([bag], dtype=np.uint8)
        (scores,) = plain_scores(choose(CANDIDATES, "svm"), self.table, counts, random_states=[1])
        lacking = 2 if bag[-1] == 0 else 0
        others = np.delete(scores, lacking, axis=1)
        assert (scores[:, lacking] < others.min()).all()
        assert_allclose(others[:, 0], -others[:, 1], rtol=1e-15)

    @pytest.mark.parametrize("key", [k for k, c in CANDIDATES.items() if c.fixed is None])
    def test_one_class_alone_is_always_answered(self, key):
        bag = np.array([[0, 0, 0, 3, 2, 3, 0, 0]], dtype=np.uint8)
        (scores,) = plain_scores(choose(CANDIDATES, key), self.table, bag, random_states=[1])
        assert (predicted_class(scores) == 1).all()


SMALL_FOREST = choose(CANDIDATES, "forest", trees=4)
TREE = choose(CANDIDATES, "tree")


def blurred_classes():
    rng = np.random.default_rng(3)
    labels = rng.integers(0, 2, 30)
    return table_of(labels.tolist(), features=rng.normal(size=(30, 3)) + labels[:, None])


class TestDigits:
    table = blurred_classes()

    def scores(self, candidates, *, schemes=None, jobs=1, seed=1):
        schemes = schemes or (choose(SCHEMES, "bootstrap", rounds=CHUNK + 2),)
        plan = Plan(self.table.roles, schemes, candidates, seed=seed)
        _, answers = carried_out(self.table, plan, jobs=jobs)
        return {key: found.scores.tobytes() for key, found in answers.items()}

    def test_other_candidates_move_nothing(self):
        alone = self.scores((SMALL_FOREST,))
        beside = self.scores((TREE, SMALL_FOREST, choose(CANDIDATES, "lda")))
        assert beside["bootstrap", "forest"] == alone["bootstrap", "forest"]

    def test_other_schemes_move_nothing(self):
        bootstrap = choose(SCHEMES, "bootstrap", rounds=CHUNK + 2)
        alone = self.scores((SMALL_FOREST,))
        beside = self.scores(
            (SMALL_FOREST,),
            schemes=(choose(SCHEMES, "cross_validation", repeats=1), bootstrap),
        )
        assert beside["bootstrap", "forest"] == alone["bootstrap", "forest"]

    def test_more_rounds_only_append(self):
        short = self.scores((SMALL_FOREST,))
        more = (choose(SCHEMES, "bootstrap", rounds=CHUNK + 7),)
        long = self.scores((SMALL_FOREST,), schemes=more)
        assert long["bootstrap", "forest"].startswith(short["bootstrap", "forest"])
        assert len(long["bootstrap", "forest"]) > len(short["bootstrap", "forest"])

    def test_the_number_of_processes_moves_nothing(self):
        candidates = (SMALL_FOREST, choose(CANDIDATES, "logistic"))
        assert self.scores(candidates, jobs=2) == self.scores(candidates)

    def test_the_seed_moves_them(self):
        assert self.scores((SMALL_FOREST,)) != self.scores((SMALL_FOREST,), seed=2)

    def test_settings_have_their_own_randomness(self, monkeypatch):
        states = []

        def learned(choice, bags, given, **_):
            states.extend(given)
            shape = (len(given), self.table.n_cases, self.table.n_classes)
            return Learned(np.zeros(shape), None, None)

        monkeypatch.setattr("evalcore.pipeline.learn", learned)
        bootstrap = choose(SCHEMES, "bootstrap", rounds=CHUNK + 20)
        plan = Plan(self.table.roles, (bootstrap,), (SMALL_FOREST, TREE))
        drawn = plan.draw(self.table)
        for _ in run(self.table, plan, drawn, todo=tasks(drawn)):
            pass
        assert len(set(states)) == len(states) == 2 * (1 + CHUNK + 20)


def test_tasks_are_whole_fits_and_then_chunks_of_each_scheme():
    rounds = {
        "one": Rounds.of_bags(np.ones((CHUNK * 2 + 3, 4), int)),
        "two": Rounds.of_bags(np.ones((CHUNK, 4), int)),
    }
    assert tasks(rounds) == [
        Task(WHOLE, 0, 1),
        Task("one", 0, CHUNK),
        Task("one", CHUNK, 2 * CHUNK),
        Task("one", 2 * CHUNK, 2 * CHUNK + 3),
        Task("two", 0, CHUNK),
    ]


@pytest.mark.parametrize(
    ("n_cases", "step"),
    [
        (1, 50),
        (300, 50),
        (301, 49),
        (720, 20),
        (1363, 11),
        (1364, 10),
        (5_000, 10),
        (5_001, 9),
        (100_000, 1),
    ],
)
def test_a_larger_table_has_smaller_chunks(n_cases, step):
    assert chunk_rounds(n_cases) == step
    rounds = {"one": Rounds.of_bags(np.ones((2 * step + 1, n_cases), np.uint8))}
    assert tasks(rounds) == [
        Task(WHOLE, 0, 1),
        Task("one", 0, step),
        Task("one", step, 2 * step),
        Task("one", 2 * step, 2 * step + 1),
    ]


def test_whole_rounds():
    rounds = whole_rounds(5)
    assert rounds.train.tolist() == [[1] * 5]
    assert rounds.test.tolist() == [[0] * 5]


def test_a_candidate_that_fails_does_not_end_the_others(monkeypatch):
    def fails(*_):
        raise ArithmeticError("no luck today")

    broken = dataclasses.replace(CANDIDATES["lda"], model=fails)
    monkeypatch.setitem(CANDIDATES, "lda", broken)
    table = table_of([0, 1] * 8)
    plan = Plan(
        table.roles,
        (choose(SCHEMES, "holdout"),),
        (choose(CANDIDATES, "lda"), choose(CANDIDATES, "majority")),
        engine="plain",
    )
    rounds = plan.draw(table)
    with pytest.warns(UserWarning, match="lda failed") as warned:
        finished = list(run(table, plan, rounds, todo=tasks(rounds)))
    assert [str(warning.message) for warning in warned] == [
        "lda failed in the whole table: ArithmeticError('no luck today')",
        "lda failed in holdout: ArithmeticError('no luck today')",
    ]
    for part in finished:
        assert part.failures == {"lda": "ArithmeticError: no luck today"}
        assert set(part.answers) == {"majority"}
        assert part.seconds > 0


# one task in a process that has loaded nothing of scikit-learn yet; its thread pools are looked at
# from inside the fit, where a pool that was loaded on the way counts too
LOOKING = """
import dataclasses, json
import numpy as np
from threadpoolctl import threadpool_info
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.engine import Task, carry_out
from evalcore.plan import Plan
from evalcore.schemes import SCHEMES
from tests.core.checks import table_of

seen = []

def watched(settings, state):
    model = logistic.model(settings, state)
    fit = model.fit
    def looking(x, y):
        seen.append(threadpool_info())
        fitted = fit(x, y)
        seen.append(threadpool_info())
        return fitted
    model.fit = looking
    return model

logistic = CANDIDATES["logistic"]
CANDIDATES["logistic"] = dataclasses.replace(logistic, model=watched)
# so large that two threads of a linear algebra library give other last digits than one
rng = np.random.default_rng(5)
labels = rng.integers(0, 2, 600)
features = rng.normal(size=(600, 100)) + 0.3 * labels[:, None]
table = table_of(labels.tolist(), features=features)
choices = (choose(SCHEMES, "holdout"),), (choose(CANDIDATES, "logistic"),)
plan = Plan(table.roles, *choices, engine="plain")
rounds = plan.draw(table)
before = threadpool_info()
done = carry_out(table, plan, rounds, Task("holdout", 0, 1))
print(json.dumps([before, seen, done.answers["logistic"].scores.tobytes().hex()]))
"""
THREADS = ("OMP_", "OPENBLAS_", "GOTO_", "MKL_", "BLIS_", "VECLIB_", "NUMEXPR_", "KMP_")


def in_a_fresh_process(**given):
    """Thread pools before the task, those during its fit, and the digits."""
    root = str(pathlib.Path(__file__).parents[2])
    # tasks carried out by other tests leave some behind
    without = {name: value for name, value in os.environ.items() if not name.startswith(THREADS)}
    done = subprocess.run(
        [sys.executable, "-c", LOOKING],
        env=without | {"PYTHONPATH": root} | given,
        capture_output=True,
        text=True,
        check=True,
    )
    return json.loads(done.stdout)


@pytest.mark.skipif((os.cpu_count() or 1) < 2, reason="one core has one thread anyway")
def test_one_thread_inside_and_the_same_digits_whatever_is_set_outside():
    before, during, digits = in_a_fresh_process()
    assert max(pool["num_threads"] for pool in before) > 1
    assert len(during) == 2
    for pools in during:
        loaded = {pool["filepath"] for pool in pools} - {pool["filepath"] for pool in before}
        assert {pool["user_api"] for pool in pools if pool["filepath"] in loaded} >= {"openmp"}
        assert {pool["filepath"]: pool["num_threads"] for pool in pools} == {
            pool["filepath"]: 1 for pool in pools
        }
    assert in_a_fresh_process(OMP_NUM_THREADS="2")[2] == digits
