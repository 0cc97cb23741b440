"""Further units for a limit not shown yet, against the rates and counts written out."""

import numpy as np
import pytest

from evalcore.cut_off_rule import CutOffRule
from evalcore.further_cases import more_cases
from evalcore.limit import Limit
from evalcore.outlook import in_words, outlook
from evalcore.verdict import verdicts, verdicts_at_cut_off
from evalcore.wording import NBSP

from . import test_verdict
from .test_verdict import LIMIT, evaluation, first


def looked(found, candidate="lda"):
    """Each limit's verdict and outlook."""
    return [(v, outlook(found, candidate, v)) for v in verdicts(found, candidate)]


def one_off(n, wrong, *, labels=None, limits=(LIMIT,)):
    """One candidate, one repeat more wrong than the other where `wrong` is a pair."""
    right = first(n, *(n - w for w in wrong))
    return evaluation(right, labels=labels or [0, 1] * (n // 2), limits=limits)


def test_rates_lie_halfway_and_counts_are_those_of_further_cases():
    found = one_off(40, (6, 6))
    ((verdict, ahead),) = looked(found)
    assert verdict.word == "not shown yet"
    rates = {
        "cautious": (0.85 + verdict.at_least) / 2, "present": 0.85, "hopeful": 0.925,
    }  # fmt: skip
    assert [(m.name, m.rate) for m in ahead.needed] == [
        (name, pytest.approx(rate, rel=1e-12)) for name, rate in rates.items()
    ]
    exact = {m.name: m.rate for m in ahead.needed}
    assert ahead.needed == more_cases(
        34, 40, least=0.8, confidence=0.95, rates=exact, tau2=0.0, looks=2, chance=0.8
    )
    assert ahead.needed[2].alone.cases < ahead.needed[1].alone.cases
    assert ahead.verdict is verdict


def test_further_units_alone_keep_the_promise():
    from scipy.stats import beta, binom

    ((_, ahead),) = looked(one_off(40, (6, 6)))
    hopeful = ahead.needed[2].alone

    def chance(n):
        # Clopper and Pearson's one-sided bound, and Wilson's: here the exact one is the lower
        shows = [k for k in range(1, n + 1) if beta.ppf(0.05, k, n - k + 1) >= 0.8]
        return sum(binom.pmf(k, n, 0.925) for k in shows)

    assert chance(hopeful.first) >= 0.8 > chance(hopeful.first - 1)
    assert all(chance(n) >= 0.8 for n in range(hopeful.cases, hopeful.cases + 30))
    assert chance(hopeful.cases - 1) < 0.8


def test_a_class_counts_its_own_units_and_variance():
    labels = [0] * 20 + [1] * 40
    right = np.ones((1, 2, 60), dtype=bool)
    right[0, 0, 25:36:2] = False  # of b's half one repeat is wrong, the other right
    right[0, 0, 22:28:2] = False
    right[0, :, :1] = False
    limits = (Limit("sensitivity", 0.7, "b", confidence=0.9),)
    found = evaluation(right, labels=labels, limits=limits)
    ((verdict, ahead),) = looked(found)
    part = found.part("lda", found.scheme)
    assert (verdict.word, verdict.n) == ("not shown yet", 40)
    assert part.tau2_of(1) > 0
    assert part.tau2_of(1) != part.tau2
    rate = 1 - 9 / 80
    rates = {"cautious": (rate + verdict.at_least) / 2, "present": rate, "hopeful": (1 + rate) / 2}
    given = {"least": 0.7, "confidence": 0.9, "rates": rates}
    assert ahead.needed == more_cases(rate * 40, 40, tau2=part.tau2_of(1), **given)
    assert ahead.needed != more_cases(rate * 40, 40, tau2=part.tau2, **given)


def test_of_several_it_starts_from_the_corrected_rate():
    rng = np.random.default_rng(1)
    right = np.stack([[rng.random(60) < 0.82] * 2 for _ in range(3)])
    found = evaluation(right, labels=[0, 1] * 30)
    best = max(found.candidates, key=lambda name: found.estimate("accuracy", name).value)
    corrected = found.corrected("accuracy").value
    ((verdict, ahead),) = looked(found, best)
    assert corrected < verdict.value
    assert ahead.needed[1].rate == corrected
    assert ahead.needed[0].rate == pytest.approx((corrected + verdict.at_least) / 2, rel=1e-15)
    assert ahead.needed[2].rate == pytest.approx((1 + corrected) / 2, rel=1e-15)


def test_nothing_more_where_nothing_is_asked_for():
    limits = (LIMIT, Limit("balanced_accuracy", 0.9), Limit("sensitivity", 0.8, "b"))
    shown = evaluation(first(40, 40, 40), labels=[0, 1] * 20, limits=limits, never=range(1, 40, 2))
    seen = looked(shown)
    # the others are on no share of units, and of a class never held out
    assert [v.word for v, _ in seen] == ["shown", "not shown yet", "not shown yet"]
    for _, ahead in seen:
        assert ahead.needed == ()
        assert in_words(shown, ahead) == ""


@pytest.mark.parametrize(("set_on", "asked"), [("", False), ("2026-01-15", True)])
def test_no_further_cases_show_a_limit_with_a_cut_off_chosen_on_these(set_on, asked):
    right = np.ones((1, 2, 80), dtype=bool)
    right[..., ::8] = False  # ten wrong of 80: not shown, nor shown to fall short
    rule, limits = CutOffRule("b", "fixed", at=0.25, set_on=set_on), (Limit("accuracy", 0.85),)
    found = test_verdict.TestAtCutOff().found(right, rule, limits=limits)
    (verdict,) = verdicts_at_cut_off(found, "naive_bayes")
    ahead = outlook(found, "naive_bayes", verdict)
    assert verdict.word == "not shown yet"
    assert bool(ahead.needed) == asked
    assert bool(in_words(found, ahead)) == asked
    # by the highest score no cut-off is in it
    (by_highest,) = verdicts(found, "naive_bayes")
    assert by_highest.word == "shown to fall short"
    assert outlook(found, "naive_bayes", by_highest).needed


def test_a_limit_fallen_short_of_can_still_be_asked_about():
    ((verdict, ahead),) = looked(one_off(40, (20, 20)))
    assert verdict.word == "shown to fall short"
    assert [m.alone.outcome for m in ahead.needed] == ["never"] * 3


def plain(text):
    return text.replace(NBSP, " ")


def test_sentence():
    found = one_off(40, (6, 6))
    ((_, ahead),) = looked(found)
    cautious, present, hopeful = ahead.needed
    assert cautious.alone.outcome == "never"
    assert plain(in_words(found, ahead)) == (
        "Further cases judged alone that give four chances in five to show 80 %: no number if "
        f"79 % are truly right (cautious); {present.alone.cases} if 85 % are truly right "
        f"(present); {hopeful.alone.cases} if 92 % are truly right (hopeful)."
    )


def test_sentence_of_a_class_and_of_more_than_anyone_can_label():
    # 18 of 22 right: at the present rate a hair above the limit
    limits = (Limit("sensitivity", 0.815, "b"),)
    labels = [1] * 22 + [0] * 20
    right = np.arange(42)[None, None] >= np.array([4, 4])[:, None]
    found = evaluation(right, labels=labels, limits=limits)
    ((_, ahead),) = looked(found)
    assert ahead.needed[1].alone.outcome == "too many"
    text = plain(in_words(found, ahead))
    assert text.startswith("Further b cases judged alone that give four chances in five to show")
    assert "; over 5,000 if 82 % are truly right (present); " in text


def test_says_why_where_the_model_varies_too_much():
    labels = [0, 1] * 30
    found = evaluation(first(60, 60, 42), labels=labels)
    ((verdict, ahead),) = looked(found)
    hopeful = ahead.needed[2]
    assert hopeful.rate > 0.8
    assert hopeful.alone.outcome == "never"
    assert verdict.word == "not shown yet"
    why = " The model itself varies too much from round to round for that."
    assert in_words(found, ahead).endswith("." + why)


def test_a_perfect_answer_of_too_few_units():
    found = one_off(8, (0, 0))
    ((verdict, ahead),) = looked(found)
    assert verdict.word == "not shown yet"
    assert [m.rate for m in ahead.needed][1:] == [1.0, 1.0]
    # 14 of 14 right show 80 % at 95 %: 0.8^14 < 0.05 < 0.8^13
    assert [m.alone.cases for m in ahead.needed][1:] == [14, 14]
