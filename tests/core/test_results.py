"""Every CSV file: its header, and rows written out by hand."""

import csv
import io
from types import SimpleNamespace

import numpy as np
import pytest
from statsmodels.stats.proportion import proportion_confint

from evalcore import results
from evalcore.beside import Beside
from evalcore.figures import Estimate, Finding, Interval
from evalcore.limit import Limit
from evalcore.outlook import outlook
from evalcore.picked import Picked
from evalcore.sources import SOURCES
from evalcore.verdict import verdicts

from .test_verdict import evaluation, first

NAN = float("nan")
LIMITS = (Limit("accuracy", 0.8, set_on="2026-01-05"), Limit("balanced_accuracy", 0.6))


@pytest.fixture(scope="module")
def found():
    """Two candidates right on the first 36 and the first 30 of 40, as often in each repeat."""
    right = [first(40, 36, 36)[0], first(40, 30, 30)[0]]
    return evaluation(right, labels=[0] * 20 + [1] * 20, limits=LIMITS)


def read(text: str) -> list[dict[str, str]]:
    assert text.endswith("\n")
    assert "\r" not in text
    return list(csv.DictReader(io.StringIO(text)))


def header(text: str) -> str:
    return text.split("\n", 1)[0]


def wilson(right, n):
    return proportion_confint(right, n, method="wilson")


def test_results_line_by_line():
    bounds = Interval(0.25, 0.9999999999999999, 0.9, "wilson")
    estimates = (
        Estimate(2 / 3, bounds, "sensitivity", "lda", "cross_validation", "held_out_by_case",
                 "a, b", "unit", 12, 100, 3),
        Estimate(NAN, None, "auc", "tree", "bootstrap", "mean_of_rounds", "", "case", 0, 200, 200),
        Estimate(np.float64(1), Interval(NAN, NAN, 0.95, "wilson"), "accuracy", "=cmd", "@x",
                 "apparent", "-b", "case", 5, 1, 0),
    )  # fmt: skip
    assert results.results_csv(SimpleNamespace(estimates=estimates, beside=Beside())) == (
        "candidate,scheme,estimator,measure,class,counted_by,value,low,high,level,interval,n,"
        "rounds,undefined_rounds\n"
        'lda,cross_validation,held_out_by_case,sensitivity,"a, b",unit,0.6666666666666666,0.25,'
        "0.9999999999999999,0.9,wilson,12,100,3\n"
        "tree,bootstrap,mean_of_rounds,auc,,case,nan,,,,,0,200,200\n"
        "'=cmd,'@x,apparent,accuracy,'-b,case,1.0,nan,nan,0.95,wilson,5,1,0\n"
    )


def test_results_of_an_evaluation(found):
    rows = read(results.results_csv(found))
    assert len(rows) == len(found.estimates)
    (row,) = [
        r for r in rows
        if (r["candidate"], r["estimator"], r["measure"]) == ("lda", "held_out_by_case", "accuracy")
    ]  # fmt: skip
    low, high = wilson(36, 40)
    assert float(row.pop("low")) == pytest.approx(low, abs=1e-12)
    assert float(row.pop("high")) == pytest.approx(high, abs=1e-12)
    assert row == {
        "candidate": "lda", "scheme": "cross_validation", "estimator": "held_out_by_case",
        "measure": "accuracy", "class": "", "counted_by": "case", "value": "0.9", "level": "0.95",
        "interval": "wilson_model_variance", "n": "40", "rounds": "4", "undefined_rounds": "0",
    }  # fmt: skip


def test_findings():
    given = Finding(
        "few_blocks", "note", "=A1", "Few, blocks", "Seen.", "-Do", np.float64(3), NAN, "wilson1927"
    )
    assert results.findings_csv([given]) == (
        "check,severity,subject,title,seen,advice,value,threshold,source\n"
        f"few_blocks,note,'=A1,\"Few, blocks\",Seen.,'-Do,3.0,nan,"
        f'"{SOURCES["wilson1927"].citation}"\n'
    )


def test_comparison(found):
    text = results.comparison_csv(found)
    assert header(text) == (
        "first,second,difference,low,high,level,interval,p,p_adjusted,call,only_first_right,"
        "only_second_right,n,mcnemar_p,corrected_t_p,posterior_worse,posterior_equal,"
        "posterior_better"
    )
    (row,) = read(text)
    (d,) = found.differences
    numbers = [float(row.pop(name)) for name in ("difference", "low", "high", "p", "p_adjusted")]
    assert numbers == [d.value, d.interval.low, d.interval.high, d.p, d.p_adjusted]
    assert numbers[0] == pytest.approx(6 / 40)
    assert numbers[1] < 6 / 40 < numbers[2]
    # one comparison: nothing to adjust
    assert numbers[3] == numbers[4] < 0.05
    assert float(row.pop("mcnemar_p")) == pytest.approx(2 * 0.5**6, rel=1e-14)
    # places 30 to 35 alone tell them apart: 3 of 20 in every round, so there is no t
    assert [row.pop(name) for name in list(row)[-4:]] == ["nan"] * 4
    assert row == {
        "first": "lda", "second": "qda", "level": repr(1 - (1 - 0.95) / 1), "interval": "paired_t",
        "call": "better", "only_first_right": "6", "only_second_right": "0", "n": "40",
    }  # fmt: skip


def test_intervals(found):
    text = results.intervals_csv(found)
    assert header(text) == (
        "candidate,scheme,measure,class,counted_by,value,low,high,level,interval,n"
    )
    rows = read(text)
    mine = [r for r in rows if (r["candidate"], r["measure"]) == ("lda", "accuracy")]
    assert [r["interval"] for r in mine] == [
        "wilson_model_variance", "wilson", "wilson_corrected", "clopper_pearson", "agresti_coull",
        "jeffreys", "cv_normal",
    ]  # fmt: skip
    exact = mine[3]
    low, high = proportion_confint(36, 40, method="beta")
    assert float(exact.pop("low")) == pytest.approx(low, abs=1e-12)
    assert float(exact.pop("high")) == pytest.approx(high, abs=1e-12)
    assert exact == {
        "candidate": "lda", "scheme": "cross_validation", "measure": "accuracy", "class": "",
        "counted_by": "case", "value": "0.9", "level": "0.95", "interval": "clopper_pearson",
        "n": "40",
    }  # fmt: skip
    classes = [r["class"] for r in rows if r["candidate"] == "qda" and r["measure"] != "accuracy"]
    assert sorted(set(classes)) == ["", "a", "b"]


def test_cases(found):
    text = results.cases_csv(found)
    assert header(text) == "candidate,name,class,times_held_out,share_wrong,named,flips"
    lines = text.splitlines()
    assert len(lines) == 1 + 2 * 40
    assert lines[1:6] == [
        "lda,u36,b,2,1.0,a,0.0",
        "lda,u37,b,2,1.0,a,0.0",
        "lda,u38,b,2,1.0,a,0.0",
        "lda,u39,b,2,1.0,a,0.0",
        "lda,u0,a,2,0.0,,0.0",
    ]
    assert lines[41] == "qda,u30,b,2,1.0,a,0.0"


def test_cases_never_held_out_are_nan():
    some = evaluation(first(40, 36, 36), labels=[0] * 20 + [1] * 20, never=[3])
    assert results.cases_csv(some).splitlines()[-1] == "lda,u3,a,0,nan,,nan"


def test_verdicts(found):
    text = results.verdicts_csv(found)
    assert header(text) == (
        "candidate,answers,measure,class,limit,confidence,set_on,verdict,value,at_least,at_most,n,"
        "cautious_rate,cautious_alone,cautious_together,present_rate,present_alone,"
        "present_together,hopeful_rate,hopeful_alone,hopeful_together"
    )
    accuracy, balanced = read(text)
    fixed = {"candidate": "lda", "answers": "highest_score", "class": "", "confidence": "0.95"}
    assert fixed.items() <= accuracy.items()
    assert {
        "measure": "accuracy", "limit": "0.8", "set_on": "2026-01-05", "verdict": "not shown yet",
        "value": "0.9", "n": "40",
    }.items() <= accuracy.items()  # fmt: skip
    from scipy.stats import beta

    rate = found.corrected("accuracy").value
    right = int(min(rate, 0.9) * 40 + 1e-9)
    at_least = float(accuracy["at_least"])
    assert at_least <= beta.ppf(0.05, right, 41 - right) + 1e-12
    assert float(accuracy["present_rate"]) == pytest.approx(min(rate, 0.9))
    assert float(accuracy["cautious_rate"]) == pytest.approx((min(rate, 0.9) + at_least) / 2)
    assert float(accuracy["hopeful_rate"]) == pytest.approx((1 + min(rate, 0.9)) / 2)
    assert int(accuracy["hopeful_alone"]) < int(accuracy["present_alone"])
    ahead = outlook(found, "lda", verdicts(found, "lda")[0]).needed[2]
    assert accuracy["hopeful_alone"] == str(ahead.alone.cases)
    assert accuracy["hopeful_together"] == str(ahead.together.cases)
    assert ahead.alone.cases != ahead.together.cases
    # of a limit on no share of units nothing more is asked
    assert fixed.items() <= balanced.items()
    assert (balanced["measure"], balanced["set_on"]) == ("balanced_accuracy", "")
    assert [balanced[name] for name in list(balanced)[12:]] == [""] * 9


def test_verdicts_say_never():
    poor = evaluation(first(40, 20, 20), labels=[0] * 20 + [1] * 20, limits=LIMITS[:1])
    (row,) = read(results.verdicts_csv(poor))
    assert (row["verdict"], row["present_rate"]) == ("shown to fall short", "0.5")
    assert [row[f"{name}_alone"] for name in ("cautious", "present", "hopeful")] == ["never"] * 3
    assert row["present_together"] == "never"


@pytest.mark.parametrize("text", ["=1+1", "+a", "-a", "@a", "\ta", "\ra", "=", "-", "-0.5.1"])
def test_formulas_get_an_apostrophe(text):
    assert results.plain(text) == "'" + text


@pytest.mark.parametrize("text", ["-0.5", "+1", "-1e-300", "-inf", "nan", "", "a=1", "1-2", " =1"])
def test_numbers_and_other_text_stay(text):
    assert results.plain(text) == text


def test_names_from_a_file_get_one_too():
    text = results.results_csv(
        SimpleNamespace(beside=Beside(), estimates=[
            Estimate(0.5, None, "sensitivity", "lda", "cross_validation", "apparent",
                     '=HYPERLINK("x")', "case", 4, 1, 0)
        ])
    )  # fmt: skip
    assert read(text)[0]["class"] == '\'=HYPERLINK("x")'


def test_what_each_round_learned():
    picked = Picked("svm", "bootstrap", ("C=1", "C=10"), np.array([1, 0, 1]), 1)
    part = SimpleNamespace(candidate="lda", scheme="cross_validation")
    cut_off = SimpleNamespace(part=part, cut_offs=np.array([0.25, NAN]))
    text = results.learned_csv(
        SimpleNamespace(beside=SimpleNamespace(picked=(picked,), cut_offs=(cut_off,)))
    )
    assert text == (
        "candidate,scheme,round,what,value\n"
        "svm,bootstrap,0,picked,C=10\n"
        "svm,bootstrap,1,picked,C=1\n"
        "svm,bootstrap,2,picked,C=10\n"
        "lda,cross_validation,0,cut_off,0.25\n"
        "lda,cross_validation,1,cut_off,nan\n"
    )
    assert picked.shares.tolist() == [1 / 3, 2 / 3]
