"""The inverse power law: check cases, scipy's least squares, and what is refused."""

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import optimize

from evalcore.errors import EvalError
from evalcore.power_law import (
    NoPowerLaw,
    PowerLaw,
    _chance_of_falling,
    _pairs_against,
    power_law,
    power_laws,
)

from .checks import cases, exactly

LAW = PowerLaw(0.05, 0.8, 0.6, 20, 240, 0.0)
SIZES = (15, 25, 40, 70, 110, 180, 300)


def points(a, b, c, sizes=SIZES):
    return [a + b * n**-c for n in sizes]


@pytest.mark.parametrize("case", cases("06", "lc"))
def test_check_cases(case):
    given_, expected, tolerance = case["inputs"], case["expected"], case["tolerance"]
    law = power_law(given_["n"], given_["err"])
    assert isinstance(law, PowerLaw)
    for name in "abc":
        assert getattr(law, name) == pytest.approx(expected[name], abs=tolerance)
    for n, error in zip(given_["predict_at"], expected["pred"], strict=True):
        assert law.predict(n, beyond=True) == pytest.approx(error, abs=tolerance)
    assert law.n_for(given_["target"], beyond=True) == expected["n_for_target"]


@pytest.mark.parametrize("case", cases("06", "lc_refuse"))
def test_refusal_check_cases(case):
    found = power_law(case["inputs"]["n"], case["inputs"]["err"])
    assert isinstance(found, PowerLaw) == case["expected"]["fit_possible"]


class TestFit:
    @given(
        st.sampled_from([0.0, 0.02, 0.1, 0.3]),
        st.floats(0.1, 2),
        st.floats(0.15, 2.5),
    )
    def test_recovers_what_it_was_made_of(self, a, b, c):
        law = power_law(SIZES, points(a, b, c))
        assert (law.a, law.b, law.c) == pytest.approx((a, b, c), rel=1e-4, abs=1e-5)
        assert law.residual < 1e-8

    @pytest.mark.parametrize("seed", range(6))
    @pytest.mark.parametrize("weighted", [False, True])
    def test_least_squares_as_scipy_finds_it(self, seed, weighted):
        rng = np.random.default_rng(seed)
        error = np.array(points(0.08, 0.9, 0.7)) + rng.normal(0, 0.004, len(SIZES))
        weight = rng.uniform(0.5, 4, len(SIZES)) if weighted else np.ones(len(SIZES))
        law = power_law(SIZES, error, weights=weight if weighted else None)
        n = np.array(SIZES, dtype=float)

        def distance(p):
            return np.sqrt(weight) * (p[0] + p[1] * n ** -p[2] - error)

        best = min(
            (
                optimize.least_squares(
                    distance,
                    (a, 0.5, c),
                    bounds=([0, 0, 1e-3], [1, np.inf, 3]),
                    xtol=1e-15,
                    ftol=1e-15,
                    gtol=1e-15,
                    x_scale=(0.1, 1, 1),
                )
                for a, c in itertools.product((0.01, 0.1), (0.3, 1.0))
            ),
            key=lambda fit: fit.cost,
        )
        ours = float((distance((law.a, law.b, law.c)) ** 2).sum() / 2)
        assert ours <= best.cost * (1 + 1e-9)
        assert [law.predict(m) for m in (20, 150, 600)] == pytest.approx(
            [best.x[0] + best.x[1] * m ** -best.x[2] for m in (20, 150, 600)], abs=1e-5
        )
        assert law.residual == pytest.approx(np.sqrt(2 * ours / weight.sum()), rel=1e-9)

    def test_no_floor_below_zero(self):
        # these fall towards -0.05: the floor stays at 0
        law = power_law(SIZES, [max(0, e) for e in points(-0.05, 1.5, 0.5)])
        assert law.a == 0
        assert law.b > 0

    def test_a_weight_of_two_is_a_point_that_counts_double(self):
        error = points(0.1, 0.7, 0.6)
        error[3] += 0.02
        light, equal, heavy = (
            power_law(SIZES, error, weights=[1, 1, 1, w, 1, 1, 1]) for w in (1e-9, 1, 1e6)
        )
        assert light.predict(70) == pytest.approx(error[3] - 0.02, abs=1e-6)
        assert light.predict(70) < equal.predict(70) < heavy.predict(70)
        assert heavy.predict(70) == pytest.approx(error[3], abs=1e-4)

    @given(st.permutations(range(len(SIZES))))
    def test_order_does_not_matter(self, order):
        error = np.array(points(0.1, 0.7, 0.6)) + 0.002 * np.cos(np.arange(len(SIZES)))
        law = power_law([SIZES[i] for i in order], [error[i] for i in order])
        assert law == power_law(SIZES, error)


class TestRefused:
    @pytest.mark.parametrize(
        ("errors", "rising"),
        [
            ((0.2, 0.21, 0.2, 0.22), 5),  # a tie does not fall
            ((0.2, 0.2, 0.2, 0.2), 6),
            ((0.0, 0.0, 0.0, 0.0), 6),
            ((0.1, 0.2, 0.3, 0.4), 6),
            ((0.3, 0.2, 0.1, 0.15), 1),  # of 24 orders of four, 4 have at most one such pair
        ],
    )
    def test_points_that_do_not_fall(self, errors, rising):
        assert power_law((20, 40, 80, 160), errors) == NoPowerLaw(
            "The error does not clearly fall as cases are added: it is no lower at the larger "
            f"size in {rising} of 6 pairs of sizes. So no curve is drawn beyond the points."
        )

    def test_few_sizes(self):
        found = power_law((20, 40, 80), (0.3, 0.2, 0.1))
        assert found == NoPowerLaw("A curve needs at least 4 sizes; there are 3.")
        assert isinstance(power_law((), ()), NoPowerLaw)

    @pytest.mark.parametrize("m", [2, 4, 5, 6])
    def test_chance_by_all_orders(self, m):
        orders = [np.array(order, dtype=float) for order in itertools.permutations(range(m))]
        against = [
            sum(o[i] <= o[j] for i, j in itertools.combinations(range(m), 2)) for o in orders
        ]
        for order, own in list(zip(orders, against, strict=True))[:: max(1, len(orders) // 20)]:
            expected = sum(k <= own for k in against) / len(orders)
            assert _pairs_against(order[None])[0] == own
            assert _chance_of_falling(m)[own] == pytest.approx(expected, abs=1e-12)

    def test_many_at_once_are_fitted_as_one_by_one(self):
        rng = np.random.default_rng(6)
        errors = 0.1 + 2.0 * np.array(SIZES) ** -0.7 + rng.normal(0, 0.004, (40, len(SIZES)))
        errors[3], errors[5, 0] = errors[3, ::-1], np.nan
        together = power_laws(SIZES, errors)
        for at, series in enumerate(errors):
            alone = NoPowerLaw("nan") if at == 5 else power_law(SIZES, series)
            if isinstance(alone, PowerLaw):
                # the sum of squares is flat at its least: the curve is sharper than its parts
                for n in (SIZES[0], SIZES[-1], 600):
                    assert together.predict(n)[at] == pytest.approx(alone.predict(n), abs=1e-8)
            else:
                assert np.isnan(together.c[at])
        assert np.isnan(together.c[[3, 5]]).all()
        assert 30 < (~np.isnan(together.c)).sum() < 40

    def test_seldom_fitted_to_points_without_a_trend(self):
        rng = np.random.default_rng(5)
        fitted = sum(
            isinstance(power_law(SIZES, rng.uniform(0.1, 0.3, len(SIZES))), PowerLaw)
            for _ in range(400)
        )
        # 174 of 5,040 orders of seven pass: 13.8 expected, standard deviation 3.7
        assert 2 <= fitted <= 26

    @pytest.mark.parametrize(
        ("sizes", "errors", "weights", "message"),
        [
            (
                (20, 40),
                (0.1,),
                None,
                "Sizes, errors and weights must be lists of one length; got 2, 1 and 2.",
            ),
            (
                (20, 20),
                (0.1, 0.2),
                None,
                "Each size must come once; take the mean of its repeats first.",
            ),
            ((0, 20), (0.1, 0.2), None, "Each size must be 1 or more; got 0."),
            ((10, 20), (0.1, np.nan), None, "Each error must be 0 or more; got nan."),
            ((10, 20), (0.1, 0.2), (1, 0), "Each weight must be above 0; got 0."),
        ],
    )
    def test_unusable(self, sizes, errors, weights, message):
        with pytest.raises(EvalError, match=exactly(message)):
            power_law(sizes, errors, weights=weights)


class TestCurve:
    def test_predict_by_hand(self):
        # 1/4 + 3 * 16^(-1/2) = 1
        assert PowerLaw(0.25, 3.0, 0.5, 4, 9, 0.0).predict(16) == 1.0

    def test_not_beyond_twice_the_largest(self):
        assert LAW.predict(480) == LAW.predict(480, beyond=True)
        message = (
            "The curve was measured up to 240 cases and is not continued beyond 480, because a "
            "further guess has no support; got 481."
        )
        with pytest.raises(EvalError, match=exactly(message)):
            LAW.predict(481)
        assert LAW.predict(481, beyond=True) < LAW.predict(480)

    @pytest.mark.parametrize("n", [0, -3, np.nan, np.inf])
    def test_no_such_size(self, n):
        with pytest.raises(EvalError, match=exactly(f"`n` must be 1 or more; got {n:g}.")):
            LAW.predict(n, beyond=True)

    def test_n_for(self):
        assert LAW.n_for(0.08) == 239
        assert LAW.n_for(5.0) == 1
        # 1/4 + 3 n^(-1/2) = 1 at 16 exactly
        assert PowerLaw(0.25, 3.0, 0.5, 4, 9, 0.0).n_for(1.0) == 16
        message = (
            "By the curve an error of 0.06 takes more than 480 cases, twice the largest size "
            "measured, and it is not continued beyond."
        )
        with pytest.raises(EvalError, match=exactly(message)):
            LAW.n_for(0.06)
        # (0.8/0.01)^(1/0.6) = 1485.7
        assert LAW.n_for(0.06, beyond=True) == 1486

    @pytest.mark.parametrize("c", [0.25, 0.35, 0.5, 1.0, 2.0])
    def test_n_for_gives_back_the_size_of_an_error(self, c):
        law = PowerLaw(0.25, 0.9, c, 1, 400, 0.0)
        assert [law.n_for(law.predict(n)) for n in range(1, 400)] == list(range(1, 400))

    @pytest.mark.parametrize("target", [0.04, 0.05, 0.0, np.nan, 0.05 + 1e-9])
    def test_never(self, target):
        assert LAW.n_for(target) is None

    @given(st.floats(0, 0.2), st.floats(0.1, 2), st.floats(0.3, 2), st.floats(0.01, 0.3))
    def test_smallest(self, a, b, c, above):
        law = PowerLaw(a, b, c, 10, 100, 0.0)
        n = law.n_for(a + above, beyond=True)
        assert law.predict(n, beyond=True) <= a + above
        assert n == 1 or law.predict(n - 1, beyond=True) > a + above
