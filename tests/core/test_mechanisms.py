"""The study's tables with known truth are what they are said to be."""

import math

import numpy as np
import pytest

from tests.studies.mechanisms import FURTHER, MECHANISMS, further_cases


@pytest.mark.parametrize(("scenario", "bayes"), [("gauss", 0.85), ("p50", 0.85), ("sep", 0.98)])
def test_the_best_possible_rule_reaches_what_the_mechanism_promises(scenario, bayes):
    further = further_cases(scenario)
    right = (further.features[:, :5].sum(axis=1) > 0) == (further.labels == 1)
    assert abs(right.mean() - bayes) <= 3 * math.sqrt(bayes * (1 - bayes) / FURTHER)


def test_xor_needs_both_features_at_once():
    labels, features = further_cases("xor").labels, further_cases("xor").features
    chance = 3 * math.sqrt(0.25 / FURTHER)
    assert abs(((features[:, 0] > 0) == (labels == 1)).mean() - 0.5) <= chance
    # both signs read right, or both wrong: q^2 + (1 - q)^2 with q = Phi(1.5) = 0.93319
    both = 0.93319**2 + 0.06681**2
    assert abs(((features[:, 0] * features[:, 1] > 0) == (labels == 0)).mean() - both) <= chance


@pytest.mark.parametrize(("scenario", "n", "least"), [("imb", 30, 4), ("units", 10, 5)])
def test_every_table_has_enough_of_each_class(scenario, n, least):
    rng = np.random.default_rng(5)
    drawn = [MECHANISMS[scenario].draw(n, rng) for _ in range(300)]
    of_units = [cases.labels[:: MECHANISMS[scenario].rows] for cases in drawn]
    smallest = [int(np.bincount(labels, minlength=2).min()) for labels in of_units]
    assert min(smallest) == least
    assert len(set(smallest)) > 3 or n == 10


def test_rows_of_a_unit_share_half_of_their_variance():
    mechanism, further = MECHANISMS["units"], further_cases("units")
    assert len(further.labels) == FURTHER * mechanism.rows
    off = further.features - mechanism.centres[further.labels, 0]
    by_unit = off.reshape(FURTHER, mechanism.rows, -1)
    first, second = by_unit[:, 0].ravel(), by_unit[:, 1].ravel()
    # 50,000 pairs: a correlation of 0.5 is known to (1 - 0.25)/sqrt(50,000)
    assert np.corrcoef(first, second)[0, 1] == pytest.approx(0.5, abs=3 * 0.75 / math.sqrt(50_000))
    assert off.var() == pytest.approx(1, abs=0.02)
    assert (further.units == np.repeat(np.arange(FURTHER), mechanism.rows)).all()
