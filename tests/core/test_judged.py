"""One candidate under one scheme: intervals, optimism, .632+ and the model's variance, by hand."""

import itertools
import math
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
import statsmodels.api as sm
from scipy.stats import beta
from sklearn.discriminant_analysis import LinearDiscriminantAnalysis
from sklearn.metrics import accuracy_score, balanced_accuracy_score, recall_score
from sklearn.neighbors import KNeighborsClassifier

from evalcore.answers import HeldOut, Reduced
from evalcore.binomial import clopper_pearson, wilson
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.intervals import auc_score_type, square_and_add, with_model_variance
from evalcore.judged import Judged, plus_632, with_second_looks
from evalcore.judged_intervals import (
    at_rate,
    auc_interval,
    balanced_interval,
    offers_interval,
    share_interval,
)
from evalcore.model_variance import (
    auc_model_variance,
    cautious_model_variance,
    cluster_variance_by_repeat,
    model_variance,
)
from evalcore.plan import Plan
from evalcore.rounds import Rounds
from evalcore.schemes import SCHEMES

from .checks import carried_out, table_of
from .test_model_variance import centred, dense, mean_times, some_rounds

NAN = float("nan")


def judged_of(answers, labels, *, n_classes=2, scores=None, whole=None, **rest) -> Judged:
    """A candidate that named these classes, (R, n) with -1 where a case was not held out.

    `scores` are for class 1 of two and take the place of the answers where those are held out.
    """
    answers = np.asarray(answers)
    out = (answers >= 0).astype(np.uint8)
    rounds = Rounds(1 - out, out, np.asarray(rest.pop("repeat", np.arange(len(out)))))
    given = np.eye(n_classes)[answers[rounds.pairs]]
    if scores is not None:
        up = np.asarray(scores, dtype=float)[rounds.pairs]
        given = np.column_stack([1 - up, up])
    nothing = Reduced(np.ones((len(out), n_classes, n_classes)), np.full(len(out), NAN))
    names = {"scheme": "cross_validation", "candidate": "lda", "counted_by": "case"}
    return Judged(
        held=HeldOut(np.asarray(labels), rounds, given),
        in_bag=nothing,
        on_all=nothing.confusion,
        whole=Reduced(np.asarray([whole[0]], float), np.array([whole[1]])) if whole else nothing,
        units=rest.pop("units", None),
        **(names | rest),
    )


def varying_in_b() -> Judged:
    """Halves twice over; all of a right, of b all right the first time and all wrong then."""
    labels, half = np.repeat([0, 1], 10), np.arange(20) % 2
    answers = np.full((4, 20), -1)
    for r in range(4):
        mine = half == r % 2
        answers[r, mine] = labels[mine] if r < 2 else 0
    return judged_of(answers, labels, repeat=[0, 0, 1, 1])


MODELS = {
    "nearest_neighbours": lambda: KNeighborsClassifier(1),
    "lda": LinearDiscriminantAnalysis,
}


@pytest.fixture(scope="module")
def bootstrapped():
    rng = np.random.default_rng(8)
    labels = np.array([0] * 16 + [1] * 10)
    table = table_of(labels, features=rng.normal(size=(26, 3)) + 0.8 * labels[:, None])
    plan = Plan(
        table.roles,
        (choose(SCHEMES, "bootstrap", rounds=7),),
        (choose(CANDIDATES, "nearest_neighbours", k=1, scaling="none"), choose(CANDIDATES, "lda")),
    )  # fmt: skip
    return carried_out(table, plan)[0]


class TestOptimism:
    """Each bag's rows repeated, fitted and scored again with scikit-learn."""

    @pytest.mark.parametrize("name", MODELS)
    @pytest.mark.parametrize(
        ("measure", "of_class", "score"),
        [
            ("accuracy", "", accuracy_score),
            ("balanced_accuracy", "", balanced_accuracy_score),
            ("sensitivity", "a", lambda true, said: recall_score(true, said, pos_label=0)),
            ("sensitivity", "b", lambda true, said: recall_score(true, said, pos_label=1)),
        ],
    )
    def test_against_scikit_learn(self, bootstrapped, name, measure, of_class, score):
        x, y = bootstrapped.table.features, bootstrapped.table.labels
        differences = []
        for bag in bootstrapped.rounds["bootstrap"].train:
            rows = np.repeat(np.arange(26), bag)
            model = MODELS[name]().fit(x[rows], y[rows])
            differences.append(score(y[rows], model.predict(x[rows])) - score(y, model.predict(x)))
        apparent = score(y, MODELS[name]().fit(x, y).predict(x))
        value = bootstrapped.estimate(
            measure, name, estimator="optimism_corrected", of_class=of_class
        ).value
        assert abs(np.mean(differences)) > 0.005
        assert value == pytest.approx(apparent - np.mean(differences), rel=1e-12)

    def test_below_apparent_for_the_nearest_neighbour(self, bootstrapped):
        name = "nearest_neighbours"
        apparent = bootstrapped.estimate("accuracy", name, estimator="apparent").value
        assert apparent == 1.0
        assert bootstrapped.estimate("accuracy", name, estimator="optimism_corrected").value < 0.95
        assert bootstrapped.part(name, "bootstrap").optimism("accuracy") > 0.05

    def test_not_of_auc(self, bootstrapped):
        assert math.isnan(bootstrapped.part("lda", "bootstrap").optimism("auc"))
        with pytest.raises(KeyError, match="optimism_corrected"):
            bootstrapped.estimate("auc", "lda", estimator="optimism_corrected")


class TestAucInterval:
    labels = np.array([1] * 6 + [0] * 8)

    def part(self, wobble: float, *, never=(), **rest) -> Judged:
        """Halves six times over; models that rank alike but for a wobble of every second one."""
        rng = np.random.default_rng(3)
        case = rng.normal(size=14) + 1.2 * self.labels
        out = [np.arange(14) % 2 == r % 2 for r in range(12)]
        scores = [case + wobble * (-1) ** (r // 2) * self.labels for r in range(12)]
        answers = np.where(out, 0, -1)
        answers[:, list(never)] = -1
        return judged_of(answers, self.labels, scores=scores, **rest)

    def tau2(self, part: Judged) -> float:
        held = part.held
        return auc_model_variance(held.labels == 1, held.rounds, held.scores[:, 1])

    def test_takes_the_largest_variance_of_any_scheme(self):
        still, wobbling = self.part(0.1), self.part(1.5, scheme="bootstrap")
        small, large = self.tau2(still), self.tau2(wobbling)
        assert small < 0.3 * large
        expected = auc_score_type(0.8, 6, 8, large, level=0.9)
        for alike in ([still, wobbling], [wobbling, still]):
            for part in with_second_looks(alike):
                assert auc_interval(0.9, part, 0.8) == expected
        assert auc_score_type(0.8, 6, 8, small, level=0.9).width < expected.width

    def test_a_scheme_that_cannot_tell_does_not_count(self):
        once = judged_of(np.where(np.eye(14), 0, -1), self.labels, scores=np.eye(14))
        wobbling = self.part(1.5, scheme="bootstrap")
        assert math.isnan(once.tau2_auc)
        expected = auc_score_type(0.8, 6, 8, self.tau2(wobbling), level=0.95)
        for alike in ([once, wobbling], [wobbling, once]):
            for part in with_second_looks(alike):
                assert auc_interval(0.95, part, 0.8) == expected
        assert auc_interval(0.95, once, 0.8) == auc_score_type(0.8, 6, 8, level=0.95)

    def test_counts_cases_held_out_alone(self):
        part = self.part(1.5, never=[0, 13, 12])
        expected = auc_score_type(0.8, 5, 6, self.tau2(part), level=0.95)
        assert auc_interval(0.95, part, 0.8) == expected

    def test_none_where_none_keeps_its_word(self):
        part = self.part(1.5)
        assert auc_interval(0.95, part, NAN) is None
        dependent = self.part(1.5, units=np.arange(14) // 2)
        assert auc_interval(0.95, dependent, 0.8) is None
        three = judged_of([[0, 1, 2, 0]] * 2, [0, 1, 2, 0], n_classes=3)
        assert auc_interval(0.95, three, 0.8) is None

    def test_in_an_evaluation_of_two_schemes(self):
        rng = np.random.default_rng(2)
        labels = np.array([0, 1] * 9)
        table = table_of(labels, features=rng.normal(size=(18, 2)))
        schemes = (
            choose(SCHEMES, "cross_validation", folds=3, repeats=4),
            choose(SCHEMES, "bootstrap", rounds=25),
        )
        plan = Plan(table.roles, schemes, (choose(CANDIDATES, "lda"),))
        found = carried_out(table, plan)[0]
        tau2 = [self.tau2(part) for part in found.judged]
        assert tau2[0] != tau2[1]
        for scheme in found.rounds:
            e = found.estimate("auc", "lda", scheme=scheme, estimator="mean_of_rounds")
            assert e.interval == auc_score_type(e.value, 9, 9, max(tau2), level=0.95)


def one_of_each_class(*, first=1, second=1) -> Judged:
    """One of each class in a round, every case twice: all right or all wrong within a repeat."""
    labels, answers = np.repeat([0, 1], 10), np.full((20, 20), -1)
    for r in range(20):
        mine = np.arange(20) % 10 == r % 10
        right = first if r < 10 else second
        answers[r, mine] = labels[mine] if right else 1 - labels[mine]
    return judged_of(answers, labels, repeat=np.repeat([0, 1], 10), scheme="few_of_a_class")


class TestSecondLooks:
    """What rounds that hold out one of a class cannot tell; by hand, see `varying_in_b`."""

    def test_a_class_takes_it_from_the_scheme_that_can_tell(self):
        alone, elsewhere = one_of_each_class(), varying_in_b()
        few, _ = with_second_looks([alone, elsewhere])
        assert math.isnan(alone.tau2_of(0))
        assert math.isnan(alone.tau2_of(1))
        assert share_interval(0.9, alone, 1) == wilson(1.0, 10, level=0.9)
        assert few.tau2_of(0) == 0
        assert few.tau2_of(1) == pytest.approx(0.5, rel=1e-15)
        assert few.cautious_tau2(1) == elsewhere.cautious_tau2(1)
        expected = with_model_variance(1.0, 10, few.tau2_of(1), level=0.9)
        assert share_interval(0.9, few, 1) == expected
        assert expected.low < wilson(1.0, 10, level=0.9).low - 0.1

    def test_the_largest_of_several_that_can_tell(self):
        third = replace(varying_in_b(), scheme="other", held=one_of_each_class(second=0).held)
        parts = [one_of_each_class(), varying_in_b(), third]
        for order in ((0, 1, 2), (0, 2, 1)):
            few = with_second_looks([parts[i] for i in order])[0]
            assert few.tau2_of(1) == pytest.approx(0.5, rel=1e-15)

    def test_balanced_accuracy_takes_the_larger_where_a_class_cannot_be_told(self):
        # elsewhere (1/4)^2 - 5/4/25/4 = 1/20 a round, doubled by two repeats
        assert varying_in_b().tau2_balanced == pytest.approx(0.1, rel=1e-14)
        few, full = with_second_looks([one_of_each_class(), varying_in_b()])
        assert one_of_each_class().tau2_balanced == 0
        assert few.tau2_balanced == pytest.approx(0.1, rel=1e-14)
        # here (1/2)^2 - 2/4/4 = 1/8 a round between the classes, doubled
        few, full = with_second_looks([one_of_each_class(second=0), varying_in_b()])
        assert few.tau2_balanced == pytest.approx(0.25, rel=1e-14)
        # the other scheme tells both classes itself
        assert full.tau2_balanced == pytest.approx(0.1, rel=1e-14)
        ends = [share_interval(0.95, few, k, variance=False) for k in (0, 1)]
        assert balanced_interval(0.95, few) == square_and_add([0.5, 0.5], ends, few.tau2_balanced)

    def test_all_cases_take_their_own_where_it_can_be_told(self):
        few, _ = with_second_looks([one_of_each_class(), varying_in_b()])
        assert varying_in_b().tau2 > 0
        assert few.tau2 == 0
        once = judged_of(np.where(np.eye(20), 0, -1), np.repeat([0, 1], 10), scheme="once")
        borrowing, _ = with_second_looks([once, varying_in_b()])
        assert math.isnan(once.tau2)
        assert borrowing.tau2 == varying_in_b().tau2

    def test_only_of_the_same_candidate_counted_the_same_way(self):
        parts = [
            one_of_each_class(),
            replace(varying_in_b(), candidate="tree"),
            replace(varying_in_b(), counted_by="unit"),
        ]
        assert [part.second_looks for part in with_second_looks(parts)] == [(), (), ()]


class TestShareInterval:
    def test_a_class_takes_its_own_variance(self):
        part = varying_in_b()
        # in each round (m/2)^2 - m/4 over m(m - 1), m = 5, is 1/4; two repeats double it
        a, b = share_interval(0.95, part, 0), share_interval(0.95, part, 1)
        assert part.tau2_of(0) == 0
        assert part.tau2_of(1) == pytest.approx(0.5, rel=1e-15)
        assert 0 < part.tau2 < 0.5
        assert (a.low, a.high) == (pytest.approx(wilson(1, 10).low, rel=1e-14), 1.0)
        few = 10 * 0.25 / (0.25 + 10 * 0.5)
        expected = wilson(0.5, few)
        assert (b.low, b.high) == pytest.approx((expected.low, expected.high), rel=1e-13)
        assert share_interval(0.95, part) == with_model_variance(0.75, 20, part.tau2, level=0.95)

    def test_with_or_without_variance_or_its_error(self):
        part = varying_in_b()
        for k, p, n in ((None, 0.75, 20), (0, 1.0, 10), (1, 0.5, 10)):
            assert share_interval(0.9, part, k, variance=False) == wilson(p, n, level=0.9)
            chosen = None if k is None else part.held.labels == k
            tau2 = cautious_model_variance(part.held.correct, part.held.rounds, chosen=chosen)
            cautious = share_interval(0.9, part, k, cautious=True)
            assert cautious == with_model_variance(p, n, tau2, level=0.9)

    def test_the_error_of_the_variance_moves_the_ends(self):
        rng = np.random.default_rng(3)
        labels = np.repeat([0, 1], 12)
        rows = [np.where(rng.random(24) < rng.random(), labels, 1 - labels) for _ in range(5)]
        part = judged_of(rows, labels)
        for k in (None, 0, 1):
            plain, cautious = (
                share_interval(0.9, part, k),
                share_interval(0.9, part, k, cautious=True),
            )
            assert cautious.low < plain.low < plain.high < cautious.high
            chosen = None if k is None else labels == k
            tau2 = cautious_model_variance(part.held.correct, part.held.rounds, chosen=chosen)
            p = np.mean([row == labels for row in rows], axis=0)[
                labels == k if k is not None else ...
            ]
            expected = with_model_variance(p.mean(), len(p), tau2, level=0.9)
            assert (cautious.low, cautious.high) == pytest.approx((expected.low, expected.high))

    def test_cases_never_held_out_do_not_count(self):
        part = judged_of([[0, 1, 1, -1, -1, -1]], [0, 0, 1, 1, 0, 2], n_classes=3)
        assert share_interval(0.95, part) == wilson(2 / 3, 3)
        assert share_interval(0.95, part, 1) == wilson(1.0, 1)
        assert not share_interval(0.95, part, 2).defined

    def test_balanced(self):
        part = varying_in_b()
        # qbar of b is 1/2 or -1/2: (1/4)^2 less 5/4 / 25 / 4, twice for two repeats
        tau2 = 2 * (1 / 16 - 1 / 80)
        ends = [wilson(1.0, 10), wilson(0.5, 10)]
        z2 = 1.959963984540054**2
        low = 0.75 - math.sqrt(((1 - ends[0].low) ** 2 + (0.5 - ends[1].low) ** 2) / 4 + z2 * tau2)
        found = balanced_interval(0.95, part)
        assert found.low == pytest.approx(low, rel=1e-12)
        assert found.high == 1.0

    def test_rows_of_fewer_than_five_blocks_of_a_class(self):
        labels = np.repeat([0] * 5 + [1] * 4, 2)
        units = np.repeat(np.arange(9), 2)
        rng = np.random.default_rng(0)
        answers = np.where(rng.random((4, 18)) < 0.8, labels, 1 - labels)
        part = judged_of(answers, labels, units=units)
        assert share_interval(0.95, part, 0).defined
        assert share_interval(0.95, part).defined
        few = share_interval(0.95, part, 1)
        assert (few.defined, few.method) == (False, "rows_of_units")

    @pytest.mark.parametrize(("blocks", "offered"), [(4, False), (5, True)])
    def test_offered_from_five_blocks_on(self, blocks, offered):
        labels = np.arange(20) % 2
        part = judged_of([labels] * 2, labels, units=np.arange(20) % blocks)
        assert part.blocks == blocks
        assert offers_interval(part) is offered
        alone = judged_of([[0, 1]], [0, 1])
        assert alone.blocks == 2
        assert offers_interval(alone)

    @pytest.mark.parametrize(("blocks", "offered"), [(4, False), (5, True)])
    def test_none_in_an_evaluation_of_too_few(self, blocks, offered):
        labels = [0, 1] * 10
        site = [f"s{i // 2 % blocks}" for i in range(20)]
        table = table_of(labels, entries={"site": site})
        scheme = choose(SCHEMES, "leave_block_out", column="site")
        plan = Plan(table.roles, (scheme,), (choose(CANDIDATES, "naive_bayes"),))
        found = carried_out(table, plan)[0]
        for measure, of_class in (
            ("accuracy", ""), ("balanced_accuracy", ""), ("sensitivity", "b"),
        ):  # fmt: skip
            e = found.estimate(measure, "naive_bayes", of_class=of_class)
            assert (e.interval is not None) is offered


def exact(p, n, tau2, level):
    """Beta quantiles at the n of equal variance; p(1 - p) is not let below a thousandth."""
    spread = max(p * (1 - p), 0.001)
    n_equal = spread / (spread / n + tau2)
    right, tail = p * n_equal, (1 - level) / 2
    low = beta.ppf(tail, right, n_equal - right + 1) if p > 0 else 0.0
    high = beta.ppf(1 - tail, right + 1, n_equal - right) if p < 1 else 1.0
    return pytest.approx((low, high), rel=1e-9)


class TestAtLearnedCutOffs:
    """`varying_in_b`, its answers taken as if each round had learned a cut-off."""

    CLASSES = ((0, 1.0, 10, 0.0), (1, 0.5, 10, 0.5))  # the share right, of how many, tau2

    def part(self, cut_offs, **rest) -> Judged:
        return replace(varying_in_b(), cut_offs=cut_offs, **rest)

    @pytest.mark.parametrize("level", [0.8, 0.95])
    def test_a_class_takes_exact_bounds(self, level):
        part = self.part("learned")
        for k, p, n, tau2 in self.CLASSES:
            found = share_interval(level, part, k)
            assert (found.low, found.high) == exact(p, n, tau2, level)
            assert (found.method, found.level) == ("exact_model_variance", level)
            cautious = share_interval(level, part, k, cautious=True)
            assert (cautious.low, cautious.high) == exact(p, n, part.cautious_tau2(k), level)

    def test_a_fixed_cut_off_was_not_learned_from_the_class(self):
        for k in (None, 0, 1):
            fixed, none = (share_interval(0.9, self.part(by), k) for by in ("fixed", "none"))
            assert fixed == none
            assert fixed.method == "wilson_model_variance"

    def test_all_cases_keep_wilson_s(self):
        for cautious in (False, True):
            learned, none = (
                share_interval(0.95, self.part(cut_offs), cautious=cautious)
                for cut_offs in ("learned", "none")
            )
            assert learned == none
            assert learned.method == "wilson_model_variance"

    def test_balanced_accuracy_adds_the_exact_ones(self):
        part = self.part("learned")
        ends = [clopper_pearson(part.pooled_value("sensitivity", k) * 10, 10) for k in (0, 1)]
        values = [part.pooled_value("sensitivity", k) for k in (0, 1)]
        expected = square_and_add(values, ends, part.tau2_balanced)
        assert balanced_interval(0.95, part) == expected
        assert expected.low < balanced_interval(0.95, self.part("none")).low

    def test_rows_of_units_keep_their_own(self):
        labels, units = np.repeat([0, 1], 20), np.repeat(np.arange(20), 2)
        rng = np.random.default_rng(7)
        answers = np.where(rng.random((4, 40)) < 0.8, labels, 1 - labels)
        part = judged_of(answers, labels, units=units)
        for k in (None, 0, 1):
            found = share_interval(0.95, replace(part, cut_offs="learned"), k)
            assert found == share_interval(0.95, part, k)
            assert (found.method, found.defined) == ("rows_of_units", True)

    def test_at_any_rate(self):
        learned, none = self.part("learned"), self.part("none")
        for rate, n, tau2 in ((0.9, 20, 0.003), (0.35, 11, 0.0), (1.0, 12, 0.01)):
            given = {"tau2": tau2, "level": 0.9}
            wilson_s = with_model_variance(rate, n, tau2, level=0.9)
            found = at_rate(learned, rate, n, of_class=1, **given)
            assert (found.low, found.high) == exact(rate, n, tau2, 0.9)
            assert at_rate(learned, rate, n, of_class=0, **given) == found
            assert at_rate(learned, rate, n, of_class=None, **given) == wilson_s
            for of_class in (None, 0, 1):
                assert at_rate(none, rate, n, of_class=of_class, **given) == wilson_s
        unknown = {"tau2": NAN, "level": 0.9}
        assert at_rate(learned, 0.5, 8, of_class=0, **unknown).method == "clopper_pearson"
        assert at_rate(learned, 0.5, 8, of_class=None, **unknown) == wilson(0.5, 8, level=0.9)

    def test_unlike_the_one_in_use_nothing_is_offered(self):
        part = self.part("unlike")
        assert offers_interval(self.part("learned"))
        assert not offers_interval(part)
        for k in (None, 0, 1):
            for options in ({}, {"cautious": True}, {"variance": False}):
                assert not share_interval(0.95, part, k, **options).defined
        assert not balanced_interval(0.95, part).defined
        blocks = self.part("unlike", units=np.arange(20) // 2)
        assert not offers_interval(blocks)
        assert not share_interval(0.95, blocks).defined
        # values are there all the same
        assert part.pooled_value("sensitivity", 1) == 0.5


class TestPlus632:
    """The formula with each measure's own guess, in exact fractions."""

    counts = ((8, 1, 1), (2, 16, 2), (0, 0, 30))

    def expected(self, apparent, out, guess):
        a, o, g = (1 - Fraction(x) for x in (apparent, out, guess))
        o = min(o, g)
        r = (o - a) / (g - a)
        w = Fraction("0.632") / (1 - Fraction("0.368") * r)
        return float(1 - ((1 - w) * a + w * o))

    def part(self):
        return judged_of([[0, 1, 2]], [0, 1, 2], n_classes=3, whole=(self.counts, 0.9))

    def test_balanced_accuracy_guesses_one_in_three(self):
        apparent = (Fraction(8, 10) + Fraction(16, 20) + 1) / 3
        expected = self.expected(apparent, "0.6", Fraction(1, 3))
        found = plus_632(self.part(), "balanced_accuracy", 0.6)
        assert found.value == pytest.approx(expected, rel=1e-12)
        assert expected != pytest.approx(self.expected(apparent, "0.6", "0.5"), abs=0.002)

    def test_auc_guesses_a_half(self):
        found = plus_632(self.part(), "auc", 0.6)
        assert found.overfitting == pytest.approx(0.75, rel=1e-12)
        assert found.value == pytest.approx(self.expected("0.9", "0.6", "0.5"), rel=1e-12)

    def test_accuracy_guesses_as_often_as_it_answers(self):
        guess = Fraction(10 * 10 + 20 * 17 + 30 * 33, 60 * 60)
        found = plus_632(self.part(), "accuracy", 0.6)
        expected = self.expected(Fraction(54, 60), "0.6", guess)
        assert found.value == pytest.approx(expected, rel=1e-12)

    def test_none_without_an_out_of_bag_value(self):
        assert plus_632(self.part(), "accuracy", NAN) is None


class TestCautiousVariance:
    def brute(self, grid, units):
        """Products over pairs round by round, and the error of the ratio of their sums."""
        sums, pairs = [], []
        for row in centred(grid):
            tested = np.flatnonzero(~np.isnan(row))
            both = [(i, j) for i, j in itertools.permutations(tested, 2) if units[i] != units[j]]
            sums.append(sum(row[i] * row[j] for i, j in both))
            pairs.append(len(both))
        return np.array(sums, float), np.array(pairs, float), mean_times(grid)

    @pytest.mark.parametrize("seed", range(6))
    @pytest.mark.parametrize("in_units", [False, True])
    def test_over_pairs_and_by_a_sandwich(self, seed, in_units):
        units = np.arange(14) // 2 if in_units else np.arange(14)
        rounds = some_rounds(seed, n=7).of_cases(units) if in_units else some_rounds(seed)
        rng = np.random.default_rng(600 + seed)
        # good or bad as a whole for even seeds; else alike, where the ratio may be negative
        low = 0.1 if seed % 2 == 0 else 0.7
        quality = rng.uniform(low, 0.9, rounds.n_rounds)[rounds.pairs[0]]
        correct = rng.random(len(quality)) < quality
        grid = dense(correct, rounds)
        sums, pairs, k = self.brute(grid, units)
        ratio = sums.sum() / pairs.sum()
        error = math.sqrt(((sums - ratio * pairs) ** 2).sum()) / pairs.sum()
        # a ratio is a weighted slope through 0, its error White's
        used = pairs > 0
        fit = sm.WLS(sums[used], pairs[used], weights=1 / pairs[used]).fit(cov_type="HC0")
        assert error == pytest.approx(fit.bse[0], rel=1e-10)
        given = units if in_units else None
        found = cautious_model_variance(correct, rounds, units=given)
        assert found == pytest.approx((max(0, ratio) + error) * k / (k - 1), rel=1e-12)
        tau2 = model_variance(correct, rounds, units=given)
        assert found - tau2 == pytest.approx(error * k / (k - 1), rel=1e-10)

    def test_within_a_class(self):
        rounds = some_rounds(4)
        rng = np.random.default_rng(9)
        correct = rng.random(len(rounds.pairs[0])) < rng.random(9)[rounds.pairs[0]]
        chosen = np.arange(14) % 3 != 0
        grid = dense(correct, rounds)
        grid[:, ~chosen] = np.nan
        sums, pairs, k = self.brute(grid, np.arange(14))
        ratio = sums.sum() / pairs.sum()
        error = math.sqrt(((sums - ratio * pairs) ** 2).sum()) / pairs.sum()
        found = cautious_model_variance(correct, rounds, chosen=chosen)
        assert found == pytest.approx((max(0, ratio) + error) * k / (k - 1), rel=1e-12)

    def test_of_the_part_judged(self):
        part = varying_in_b()
        # every round of b has the ratio 1/4 exactly, so nothing is added to its 1/2
        assert part.cautious_tau2(1) == pytest.approx(0.5, rel=1e-14)
        assert part.cautious_tau2(0) == 0
        both = cautious_model_variance(part.held.correct, part.held.rounds)
        assert part.cautious_tau2(None) == both

    def test_undefined_where_each_case_is_held_out_once(self):
        part = judged_of(np.where(np.eye(4), 0, -1), [0, 1, 0, 1])
        assert math.isnan(part.cautious_tau2(None))


class TestClusterVarianceByRepeat:
    units = np.array([0, 0, 1, 1])

    def rounds(self, rows, repeat) -> Rounds:
        out = np.asarray(rows, dtype=np.uint8)
        return Rounds(1 - out, out, np.asarray(repeat))

    def test_by_hand(self):
        rounds = self.rounds([[1, 1, 1, 1]] * 2, [0, 1])
        # first 1 1 | 0 0: sums 1 and -1, 2/16 x 2/1 = 1/4; then 1 0 | 1 0: sums 0
        found = cluster_variance_by_repeat([1, 1, 0, 0, 1, 0, 1, 0], rounds, self.units)
        assert found == pytest.approx(1 / 8, rel=1e-15)

    def test_rounds_of_a_repeat_are_one(self):
        rounds = self.rounds([[1, 1, 0, 0], [0, 0, 1, 1]] * 2, [0, 0, 1, 1])
        found = cluster_variance_by_repeat([1, 1, 0, 0, 1, 0, 1, 0], rounds, self.units)
        assert found == pytest.approx(1 / 8, rel=1e-15)

    def test_repeats_that_judge_one_unit_are_left_out(self):
        rounds = self.rounds([[1, 1, 1, 1], [1, 1, 0, 0]], [0, 1])
        found = cluster_variance_by_repeat([1, 1, 0, 0, 0, 1], rounds, self.units)
        assert found == pytest.approx(1 / 4, rel=1e-15)
        alone = self.rounds([[1, 1, 0, 0]], [0])
        assert math.isnan(cluster_variance_by_repeat([1, 0], alone, self.units))

    def test_chosen_rows_against_statsmodels(self):
        rng = np.random.default_rng(5)
        units = np.repeat(np.arange(6), [1, 2, 3, 4, 3, 3])
        rounds = self.rounds(np.ones((3, 16)), [0, 1, 2])
        correct, chosen = rng.random((3, 16)) < 0.6, np.arange(16) % 5 != 0
        each = [
            sm.OLS(row[chosen].astype(float), np.ones(chosen.sum()))
            .fit(cov_type="cluster", cov_kwds={"groups": units[chosen]})
            .cov_params()[0, 0]
            for row in correct
        ]
        # statsmodels has (n - 1)/(n - k) too, which is 1 here
        found = cluster_variance_by_repeat(correct.ravel(), rounds, units, chosen=chosen)
        assert found == pytest.approx(np.mean(each), rel=1e-12)
