"""Fast paths against the plain adapter, and that they are the ones running."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from evalcore import fits
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.engine import run, tasks
from evalcore.exact_rounds import FAST, Preparations, exact_scores
from evalcore.fits import plain_scores, round_scores
from evalcore.plan import Plan
from evalcore.schemes import SCHEMES
from evalcore.table import Roles

from .checks import table_from, table_of

FILES = {
    "iris": ("iris.csv", Roles("class")),
    "penguins": ("penguins.csv", Roles("species")),
    "urine": ("urine_missing.csv", Roles("r")),
    "persons": ("groups_trap_constructed.csv", Roles("label", "person")),
}
SCHEMES_TRIED = {
    "stratified bags": choose(SCHEMES, "bootstrap", rounds=6),
    "plain bags": choose(SCHEMES, "bootstrap", rounds=6, stratified=False),
    "folds": choose(SCHEMES, "cross_validation", repeats=1),
    "hold-out": choose(SCHEMES, "holdout"),
}
# how far the two may be apart: bits for trees and votes, rounding for the others, and for logistic
# regression what two converged fits may differ by
EXACT = {"majority", "nearest_neighbours", "tree", "forest"}


def chosen(key):
    return choose(CANDIDATES, key, **({"trees": 5} if key == "forest" else {}))


def counts_of(table, scheme):
    answered = "one" if len(table.mixed_units) else "all"
    plan = Plan(table.roles, (scheme,), (chosen("majority"),), answered_from=answered)
    (rounds,) = plan.draw(table).values()
    return rounds.train


@pytest.mark.parametrize("key", FAST)
@pytest.mark.parametrize("scheme", SCHEMES_TRIED)
@pytest.mark.parametrize("file", FILES)
def test_the_same_answers_as_the_plain_adapter(file, scheme, key):
    table = table_from(*FILES[file])
    counts = counts_of(table, SCHEMES_TRIED[scheme])
    states = list(range(len(counts)))
    fast = round_scores(chosen(key), Preparations(table, counts), engine="fast", states=states)
    plain = plain_scores(chosen(key), table, counts, random_states=states)
    assert_allclose(fast, plain, rtol=0, atol=0 if key in EXACT else 1e-9)


@pytest.mark.parametrize("key", FAST)
@pytest.mark.parametrize("file", FILES)
def test_the_same_when_one_case_is_left_out(file, key):
    table = table_from(*FILES[file])
    counts = counts_of(table, choose(SCHEMES, "leave_one_out"))[::23]
    states = list(range(len(counts)))
    fast = round_scores(chosen(key), Preparations(table, counts), engine="fast", states=states)
    plain = plain_scores(chosen(key), table, counts, random_states=states)
    assert_allclose(fast, plain, rtol=0, atol=0 if key in EXACT else 1e-9)


def odd_table():
    """Nine rows, a gap in one, so small that bags lack classes, or all their cases look alike."""
    features = np.array([[2, 2, 2, 2, 2, 2, 5, np.nan, 2], [1, 1, 1, 1, 1, 1, 4, 1, np.nan]]).T
    return table_of([0, 1, 0, 1, 0, 1, 0, 1, 1], features=features)


@pytest.mark.parametrize("key", FAST)
def test_odd_bags_are_answered_alike_and_by_both(key):
    table = odd_table()
    counts = np.array(
        [
            [2, 1, 2, 1, 1, 1, 0, 0, 1],  # all alike
            [0, 1, 2, 1, 1, 1, 0, 2, 1],  # all alike once gaps are filled
            [0, 0, 2, 1, 1, 1, 0, 4, 0],
            [1, 0, 2, 0, 3, 0, 2, 1, 0],  # one case of a class, with a gap
            [3, 0, 3, 0, 3, 0, 0, 0, 0],  # one class
            [1, 1, 1, 1, 1, 1, 1, 1, 1],
        ],
        dtype=np.uint8,
    )
    states = list(range(len(counts)))
    fast = round_scores(
        choose(CANDIDATES, key, **({"k": 1} if key == "nearest_neighbours" else {})),
        Preparations(table, counts),
        engine="fast",
        states=states,
    )
    plain = plain_scores(
        choose(CANDIDATES, key, **({"k": 1} if key == "nearest_neighbours" else {})),
        table,
        counts,
        random_states=states,
    )
    assert not np.isnan(plain).any()
    assert_allclose(fast, plain, rtol=0, atol=0 if key in EXACT else 1e-9)
    assert_allclose(plain[0], np.tile([5 / 9, 4 / 9], (9, 1)), rtol=1e-12)


@pytest.mark.parametrize("key", FAST)
def test_the_fast_path_is_the_one_that_runs(key, monkeypatch):
    table = table_from(*FILES["urine"])
    plan = Plan(table.roles, (SCHEMES_TRIED["stratified bags"],), (chosen(key),))
    rounds = plan.draw(table)

    def never(*_, **__):
        raise AssertionError("the plain adapter was asked")

    monkeypatch.setattr(fits, "plain_scores", never)
    for finished in run(table, plan, rounds, todo=tasks(rounds)):
        assert finished.failures == {}


@pytest.mark.parametrize("key", FAST)
def test_plain_switches_every_fast_path_off(key, monkeypatch):
    table = table_from(*FILES["urine"])
    plan = Plan(table.roles, (SCHEMES_TRIED["hold-out"],), (chosen(key),), engine="plain")
    rounds = plan.draw(table)

    def never(*_, **__):
        raise AssertionError("a fast path was asked")

    monkeypatch.setattr(fits, "exact_scores", never)
    for finished in run(table, plan, rounds, todo=tasks(rounds)):
        assert finished.failures == {}


def test_bags_that_lack_a_class_are_left_to_the_plain_adapter():
    table = table_from(*FILES["iris"])
    counts = np.ones((3, table.n_cases), dtype=np.uint8)
    counts[1, table.labels == 2] = 0
    found = exact_scores(
        chosen("lda"), Preparations(table, counts), scaled=False, random_states=[0, 0, 0]
    )
    assert found is not None
    scores, covered = found
    assert covered.tolist() == [True, False, True]
    assert np.isnan(scores[1]).all()
    whole = round_scores(
        chosen("lda"), Preparations(table, counts), engine="fast", states=[0, 0, 0]
    )
    assert (whole[1, :, 2] == 0).all()


def test_every_other_candidate_has_no_fast_path():
    assert set(CANDIDATES) - set(FAST) == {"boosting", "one_feature", "present_practice"}
    table = table_from(*FILES["iris"])
    counts = np.ones((1, table.n_cases), dtype=np.uint8)
    assert (
        exact_scores(
            chosen("boosting"), Preparations(table, counts), scaled=False, random_states=[0]
        )
        is None
    )
