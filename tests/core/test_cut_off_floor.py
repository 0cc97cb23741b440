"""Cut-offs by a floor: ranks by hand and by other libraries, and what they find, simulated."""

import math
from fractions import Fraction
from itertools import combinations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.stats import beta, norm, uniform
from scipy.stats.mstats import mquantiles
from sklearn.model_selection import StratifiedKFold

from evalcore.cut_off import calls, learned, learned_by_round, least_units
from evalcore.cut_off_rule import CutOffRule
from evalcore.errors import PlanError

from .checks import exactly

SPREADS = (norm(1, 1), uniform(0.2, 0.7))


def by_floor(floor):
    return CutOffRule("failing", "floor", floor=floor)


def rank_of(m, floor):
    """Rank among m scores at which a floor cuts, as a fraction."""
    return (m + 1) * (1 - Fraction(str(floor)))


def found_by_rank(m, floor):
    """Chance that a further score is called: it takes each of the m + 1 ranks alike often."""
    rule = by_floor(floor)
    called = []
    for rank in range(m + 1):
        inner = [float(r) for r in range(m + 1) if r != rank]
        cut_off = learned([True] * m + [False], [*inner, -1.0], rule=rule, share=0.5)
        called.append(rank >= cut_off)
    return Fraction(sum(called), m + 1)


class TestByFloor:
    @pytest.mark.parametrize("floor", [0.05, 0.3, 0.5, 0.6, 0.75, 0.8, 0.9, 0.95])
    @pytest.mark.parametrize("m", [1, 2, 3, 4, 8, 9, 10, 18, 19, 20, 39, 59])
    def test_a_further_score_is_found_often_enough(self, m, floor):
        exact = Fraction(str(floor))
        rank, found = rank_of(m, floor), found_by_rank(m, floor)
        if rank < 1:
            assert found == 1
        elif rank > m:
            # the highest is called, and nothing further down
            assert exact < found == Fraction(1, m + 1)
        else:
            # exactly where the rank is whole; the step of a rank is cut where its half is passed
            assert abs(found - exact) <= Fraction(1, 2) / (m + 1)
            assert rank.denominator > 1 or found == exact

    @pytest.mark.parametrize("floor", [0.05, 0.3, 0.5, 0.6, 0.75, 0.8, 0.9, 0.95])
    @pytest.mark.parametrize("m", [1, 2, 3, 4, 8, 9, 10, 18, 19, 20, 39, 59])
    def test_rank_by_other_libraries(self, m, floor):
        # both take the place (m + 1) q, and the lowest and the highest beyond the ends
        rng = np.random.default_rng([m, round(100 * floor)])
        score = rng.normal(size=m)
        positive, mixed = np.append([True] * m, [False] * 3), np.append(score, rng.normal(size=3))
        found = learned(positive, mixed, rule=by_floor(floor), share=0.5)
        if rank_of(m, floor) < 1:
            assert found == -math.inf
            return
        by_numpy = np.quantile(score, 1 - floor, method="weibull")
        by_scipy = mquantiles(score, 1 - floor, alphap=0, betap=0)[0]
        assert_allclose([found, found], [by_numpy, by_scipy], rtol=0, atol=1e-12)

    @pytest.mark.parametrize("floor", [0.3, 0.5, 0.6, 0.75, 0.8, 0.9, 0.95])
    @pytest.mark.parametrize("m", range(1, 60))
    def test_one_level_for_every_number(self, m, floor):
        # of m uniform scores the i-th smallest is i/(m + 1) on average (David & Nagaraja, Order
        # Statistics; value from memory), so what lies between two of them is as well
        rank = rank_of(m, floor)
        inner = [*(float(Fraction(i, m + 1)) for i in range(1, m + 1)), -1.0]
        cut_off = learned([True] * m + [False], inner, rule=by_floor(floor), share=0.5)
        if 1 <= rank <= m:
            assert cut_off == pytest.approx(float(1 - Fraction(str(floor))), abs=1e-8 / (m + 1))
        else:
            assert cut_off == (-math.inf if rank < 1 else inner[m - 1])

    @pytest.mark.parametrize("floor", [0.4, 0.5, 0.75])
    def test_ties_only_find_more(self, floor):
        # all ways in which six scores take two values, each of the six once the further one; a
        # cut-off between two scores misses no more than the upper one would
        rule, least = by_floor(floor), 1 - Fraction(math.ceil(rank_of(5, floor)), 6)
        shares = []
        for ups in (set(c) for k in range(7) for c in combinations(range(6), k)):
            score = np.array([float(i in ups) for i in range(6)])
            found = 0
            for further in range(6):
                inner = np.append(np.delete(score, further), -1.0)
                cut_off = learned([True] * 5 + [False], inner, rule=rule, share=0.5)
                found += score[further] >= cut_off
            shares.append(Fraction(int(found), 6))
        assert min(shares) == least
        assert rank_of(5, floor).denominator > 1 or least == Fraction(str(floor))

    def test_by_hand(self):
        # m = 9: the smallest at a floor of 0.9, the second at 0.8, the fifth at 0.5
        positive = [True] * 9 + [False]
        score = [0.5, 0.1, 0.9, 0.3, 0.7, 0.2, 0.8, 0.4, 0.6, 0.45]
        for floor, expected in ((0.91, -math.inf), (0.9, 0.1), (0.8, 0.2), (0.5, 0.5), (0.1, 0.9)):
            assert learned(positive, score, rule=by_floor(floor), share=0.5) == expected
        # half of the way from the second to the third, a fifth from the first to the second
        for floor, expected in ((0.75, 0.25), (0.88, 0.12), (0.89, 0.11)):
            found = learned(positive, score, rule=by_floor(floor), share=0.5)
            assert found == pytest.approx(expected, abs=1e-9)

    def test_a_floor_next_to_nothing_takes_the_highest_score(self):
        rule = by_floor(1e-12)
        assert learned([1, 1, 0], [0.2, 0.6, 0.9], rule=rule, share=0.5) == 0.6
        assert least_units(1e-12) == 1

    @pytest.mark.parametrize("hundredths", range(1, 100))
    def test_least_units(self, hundredths):
        missed = 1 - Fraction(hundredths, 100)
        least = next(m for m in range(1, 200) if (m + 1) * missed >= 1)
        assert least_units(hundredths / 100) == least
        rule = by_floor(hundredths / 100)
        for m, all_called in ((least - 1, True), (least, False)):
            if m:
                score = np.linspace(0.1, 0.9, m + 1)
                cut_off = learned([True] * m + [False], score, rule=rule, share=0.5)
                assert (cut_off == -math.inf) == all_called

    def test_no_floor_for_least_units(self):
        message = "`floor` must lie strictly between 0 and 1; got 1."
        with pytest.raises(PlanError, match=exactly(message)):
            least_units(1.0)

    @pytest.mark.parametrize("of_class", SPREADS, ids=["normal", "uniform"])
    @pytest.mark.parametrize(
        ("m", "floor"), [(12, 0.9), (16, 0.9), (24, 0.9), (29, 0.9), (15, 0.75), (7, 0.9)]
    )
    def test_simulated_share_found(self, m, floor, of_class):
        rng = np.random.default_rng(2)
        ours = of_class.rvs((4000, m), random_state=rng)
        inner = np.column_stack([ours, rng.normal(0, 1, (4000, 5))])
        positive = np.arange(m + 5) < m
        cut_offs = learned_by_round(positive, inner, rule=by_floor(floor), share=0.5)
        found = of_class.sf(cut_offs)
        error = found.std() / math.sqrt(len(found))
        assert found.mean() >= floor - 3 * error
        # the share above the j-th smallest of m follows a beta distribution, with mean 1 - j/(m+1)
        rank = rank_of(m, floor)
        j = math.floor(rank)
        expected = beta(m + 1 - j, j).mean() if j else 1.0
        if rank == j or not j:
            assert abs(found.mean() - expected) <= 4 * error
        elif of_class is SPREADS[1]:
            # where the share falls evenly between two scores it is the floor itself
            assert abs(found.mean() - floor) <= 4 * error
        else:
            assert found.mean() <= expected + 4 * error
            assert found.mean() <= floor + 0.01


class TestBagsAndTheWholeTable:
    """Five bags of four fifths learn a cut-off each for what is held out; all cases learn another.

    Floor 0.9, scores that no model gave, so nothing but the number differs. With ranks rounded
    down, 20 of the class would be cut at 1 of 17 in bags and at 2 of 21 in all (3.6 points apart),
    24 at 2 of 20 or 21 and 2 of 25, 29 at 2 of 24 or 25 and 3 of 30.
    """

    RULE = by_floor(0.9)

    def rates(self, of_class, m, tables):
        """Share found: held out, expected of these cut-offs, and of the one of all cases."""
        rng, positive = np.random.default_rng([9, m]), np.arange(2 * m) < m
        for at in range(tables):
            score = np.append(of_class.rvs(m, random_state=rng), rng.normal(size=m))
            folds = StratifiedKFold(5, shuffle=True, random_state=at).split(score, positive)
            out = np.zeros((5, 2 * m), dtype=bool)
            for fold, (_, held) in enumerate(folds):
                out[fold, held] = True
            inner = np.where(out, math.nan, score)
            cut_offs = learned_by_round(positive, inner, rule=self.RULE, share=0.5)
            ours = out & positive
            expected = (of_class.sf(cut_offs) * ours.sum(axis=1)).sum() / m
            on_all = learned(positive, score, rule=self.RULE, share=0.5)
            yield (calls(score, cut_offs[:, None]) * ours).sum() / m, expected, of_class.sf(on_all)

    @pytest.mark.parametrize("of_class", SPREADS, ids=["normal", "uniform"])
    @pytest.mark.parametrize("m", [20, 24, 29])
    def test_are_cut_at_one_level(self, of_class, m):
        held, expected, on_all = np.array([*self.rates(of_class, m, 800)]).T
        for rate in (held, expected):
            error = np.std(rate - on_all, ddof=1) / math.sqrt(len(rate))
            apart = abs(np.mean(rate - on_all))
            assert error < 0.003
            if of_class is SPREADS[1]:
                assert apart <= 3 * error
            else:
                # between two scores of a bell the share does not fall evenly
                assert apart <= 0.0055 + 3 * error
            assert abs(rate.mean() - 0.9) < 0.012
        assert abs(on_all.mean() - 0.9) < 0.007
