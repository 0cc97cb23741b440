"""Adjusted p-values against statsmodels and published examples."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from statsmodels.stats.multitest import multipletests

from evalcore.multiplicity import benjamini_hochberg, bonferroni, holm

from .checks import cases

METHODS = {"holm": holm, "bonferroni": bonferroni, "BH": benjamini_hochberg}
THEIRS = {"holm": "holm", "bonferroni": "bonferroni", "BH": "fdr_bh"}
P = st.lists(st.floats(0, 1) | st.sampled_from([0.01, 0.04]), min_size=1, max_size=12)


@pytest.mark.parametrize("case", cases("04", "padjust"))
def test_check_cases(case):
    found = {name: method(case["inputs"]["p"]).tolist() for name, method in METHODS.items()}
    for name, expected in case["expected"].items():
        assert found[name] == pytest.approx(expected, rel=0, abs=case["tolerance"]), name


@pytest.mark.parametrize("name", METHODS)
@given(p=P)
def test_against_statsmodels(name, p):
    theirs = multipletests(p, method=THEIRS[name])[1]
    assert METHODS[name](p).tolist() == pytest.approx(theirs.tolist(), rel=1e-12)


@given(P)
def test_holm_lies_between_the_others(p):
    low, middle, high = benjamini_hochberg(p), holm(p), bonferroni(p)
    assert (low <= middle + 1e-15).all()
    assert (middle <= high).all()


@pytest.mark.parametrize("name", METHODS)
def test_undefined_ones_do_not_count(name):
    found = METHODS[name]([0.03, math.nan, 0.01])
    assert found[[0, 2]].tolist() == METHODS[name]([0.03, 0.01]).tolist()
    assert math.isnan(found[1])
    assert METHODS[name]([]).tolist() == []


def test_input_is_left_alone():
    p = np.array([0.2, 0.01])
    holm(p)
    assert p.tolist() == [0.2, 0.01]


def test_not_a_p_value():
    with pytest.raises(ValueError, match=r"between 0 and 1; got \[1\.5\]"):
        holm([1.5])
