"""The console command with grids, a cut-off, a learning curve, a chance check and flags."""

import csv
import math
import re
from itertools import product
from pathlib import Path

import numpy as np
import pytest

from app.command import main
from evalcore.choice import choose
from evalcore.estimated import ESTIMATORS
from evalcore.record import Record
from evalcore.schemes import ALL_SCHEMES
from evalcore.share_in_use import Rate
from tests.core.test_share_in_use import by_roots

from .test_command import ROOT, evaluate, rows_of

# four folds twice, the whole table, five tables and the learning curve's 120 rounds
FEW = ("--label", "verdict", "--scheme", "cross_validation:folds=4,repeats=2", "--jobs", "1")
CANDIDATES = ("--candidate", "majority", "--candidate", "lda", "--candidate", "nearest_neighbours:k=1/5")  # fmt: skip
ASKED = (
    *("--cut-off", "failing:miss=3,share=0.1-0.3,undecided=0.6"),
    *("--chance-check", "5"),
    *("--limit", "sensitivity:failing=0.6", "--limit", "accuracy=0.5"),
)
# what README's table names under each key
MEASURES = {
    "picked_in_rounds": {"k=1", "k=5"},
    "picked_on_all": {"k=1", "k=5"},
    "at_cut_off": {"cut_off", "accuracy", "balanced_accuracy", "sensitivity", "share_undecided"},
    "at_cut_off_share_S": {"precision", "share_called", "cost_per_case"},
    "right_of_decided": {"accuracy"},
    "right_counting_undecided_wrong": {"accuracy"},
    "winner_corrected_at_cut_off": {"accuracy", "balanced_accuracy", "sensitivity"},
    "learned_from_N": {"balanced_accuracy", "sensitivity"},
    "continued_to_N": {"balanced_accuracy", "sensitivity"},
    "chance_check": {"p", "balanced_accuracy", "balanced_accuracy_permuted_median"},
    "chance_check_best": {"p", "balanced_accuracy", "balanced_accuracy_permuted_median"},
    "majority_test": {"p", "accuracy", "majority_share"},
}


def small_table(path: Path) -> Path:
    """Sixty lots, a third of them failing; six readings that are shifted by 0.7 where they fail."""
    rng, labels = np.random.default_rng(3), np.repeat([0, 1], [40, 20])
    readings = rng.normal(size=(60, 6)) + 0.7 * labels[:, None]
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        writer.writerow([*(f"x{j}" for j in range(6)), "verdict"])
        for row, k in zip(readings, labels, strict=True):
            writer.writerow([*(f"{value:.4f}" for value in row), ("good", "failing")[k]])
    return path


@pytest.fixture(scope="module")
def table(tmp_path_factory) -> Path:
    return small_table(tmp_path_factory.mktemp("table") / "small.csv")


@pytest.fixture(scope="module")
def asked(table, tmp_path_factory) -> Path:
    """A record of all that can be asked for beside the estimates."""
    out = tmp_path_factory.mktemp("asked") / "record"
    # no value for the learning curve before another option
    assert evaluate(out, table, *FEW, *CANDIDATES, "--learning-curve", *ASKED) == 0
    return out


def keys_of_readme() -> dict[str, re.Pattern[str]]:
    """The keys of README's table beside the estimates, S and N standing for numbers."""
    lines = (ROOT / "README.md").read_text("utf-8").partition("| beside the estimates |")[2]
    table = lines.partition("\n\n")[0].splitlines()[2:]
    keys = [key for line in table for key in re.findall(r"`([^`]+)`", line.split("|")[1])]
    numbers = {"S": r"0\.\d+", "N": r"\d+"}
    return {
        key: re.compile(re.sub(r"_([SN])$", lambda found: f"_{numbers[found[1]]}", key))
        for key in keys
    }


def beside(folder: Path) -> dict[str, list[dict[str, str]]]:
    """Figures that are no estimator's, by the key of README that each stands under."""
    found: dict[str, list[dict[str, str]]] = {}
    for row in rows_of(folder):
        if row["estimator"] in ESTIMATORS:
            continue
        (key,) = (k for k, p in keys_of_readme().items() if p.fullmatch(row["estimator"]))
        found.setdefault(key, []).append(row)
    return found


class TestResults:
    def test_every_key_of_the_readme_and_no_other(self, asked):
        assert set(beside(asked)) == set(keys_of_readme()) == set(MEASURES)

    def test_measures_are_those_the_readme_names(self, asked):
        found = {key: {row["measure"] for row in rows} for key, rows in beside(asked).items()}
        assert found == MEASURES
        lines = (ROOT / "README.md").read_text("utf-8").splitlines()
        for key in ("at_cut_off", "at_cut_off_share_S", "right_of_decided", "majority_test"):
            (line,) = (x for x in lines if x.startswith("|") and f"`{key}`" in x.split("|")[1])
            for measure in MEASURES[key]:
                assert f"`{measure}`" in line

    def test_each_is_found_by_its_keys(self, asked):
        columns = ("candidate", "scheme", "estimator", "measure", "class", "counted_by")
        keys = [tuple(row[c] for c in columns) for row in rows_of(asked)]
        assert len(set(keys)) == len(keys)

    def test_shares_picked_come_to_one(self, asked):
        found = beside(asked)
        for key in ("picked_in_rounds", "picked_on_all"):
            assert {row["candidate"] for row in found[key]} == {"nearest_neighbours"}
            assert sum(float(row["value"]) for row in found[key]) == 1
        assert {row["rounds"] for row in found["picked_in_rounds"]} == {"8"}
        assert {float(row["value"]) for row in found["picked_on_all"]} == {0, 1}

    def test_a_cut_off_with_where_it_falls_in_nine_rounds_of_ten(self, asked):
        rows = [row for row in beside(asked)["at_cut_off"] if row["measure"] == "cut_off"]
        assert [row["candidate"] for row in rows] == ["lda", "nearest_neighbours"]
        for row in rows:
            assert (row["class"], row["level"], row["interval"], row["n"]) == (
                "failing", "0.9", "spread_of_rounds", "20",
            )  # fmt: skip
            assert float(row["low"]) <= float(row["high"])

    def test_worth_in_use_follows_from_the_rates(self, asked):
        # Bayes by hand at both ends of the stated range
        found = beside(asked)
        rate = {
            row["class"]: float(row["value"])
            for row in found["at_cut_off"]
            if (row["candidate"], row["measure"]) == ("lda", "sensitivity")
        }
        value = {
            (row["estimator"], row["measure"], row["class"]): float(row["value"])
            for row in found["at_cut_off_share_S"]
            if row["candidate"] == "lda"
        }
        for share in (0.1, 0.3):
            key = f"at_cut_off_share_{share}"
            hit, alarm = share * rate["failing"], (1 - share) * (1 - rate["good"])
            cost = 3 * (share - hit) + alarm
            passed = (1 - share) * rate["good"]
            for measure, of_class, expected in (
                ("share_called", "failing", hit + alarm),
                ("precision", "failing", hit / (hit + alarm)),
                ("precision", "good", passed / (passed + share - hit)),
                ("cost_per_case", "", cost),
            ):
                assert value[key, measure, of_class] == pytest.approx(expected, abs=1e-12)

    def test_worth_in_use_has_ends_that_follow_from_those_of_the_rates(self, asked):
        found = beside(asked)
        ends = {
            row["class"]: Rate(*(float(row[c]) for c in ("value", "low", "high")))
            for row in found["at_cut_off"]
            if (row["candidate"], row["measure"]) == ("lda", "sensitivity")
        }
        right, passed = ends["failing"], ends["good"]
        missed, alarms = (
            Rate(1 - rate.value, 1 - rate.high, 1 - rate.low) for rate in (right, passed)
        )
        rows = {
            (row["estimator"], row["measure"], row["class"]): row
            for row in found["at_cut_off_share_S"]
            if row["candidate"] == "lda"
        }
        for share in (0.1, 0.3):
            key = f"at_cut_off_share_{share}"
            for of_class, of_share, ratio in (
                ("failing", share, by_roots(alarms, right)),
                ("good", 1 - share, by_roots(missed, passed)),
            ):
                row = rows[key, "precision", of_class]
                expected = [of_share / (of_share + (1 - of_share) * end) for end in ratio[::-1]]
                assert (row["interval"], row["level"]) == ("ratio_of_shares", "0.95")
                assert [float(row[c]) for c in ("low", "high")] == pytest.approx(expected, rel=1e-9)
            row = rows[key, "cost_per_case", ""]
            a, b = 3 * share, 1 - share
            value = a * missed.value + b * alarms.value
            below = math.hypot(a * (missed.value - missed.low), b * (alarms.value - alarms.low))
            above = math.hypot(a * (missed.high - missed.value), b * (alarms.high - alarms.value))
            assert (row["interval"], row["level"]) == ("sum_of_shares", "0.95")
            expected = [value - below, value + above]
            assert [float(row[c]) for c in ("low", "high")] == pytest.approx(expected, rel=1e-9)
            assert rows[key, "share_called", "failing"]["interval"] == ""

    def test_undecided_both_ways(self, asked):
        found = beside(asked)

        def of(rows, measure):
            return [float(r["value"]) for r in rows if (r["candidate"], r["measure"]) == ("lda", measure)]  # fmt: skip

        (sent,) = of(found["at_cut_off"], "share_undecided")
        (kept,) = of(found["right_of_decided"], "accuracy")
        (wrong,) = of(found["right_counting_undecided_wrong"], "accuracy")
        assert 0 < sent < 1
        assert wrong == pytest.approx(kept * (1 - sent), abs=1e-12)

    def test_the_curve_runs_to_the_largest_bag_and_on_to_twice_that(self, asked):
        found = beside(asked)
        sizes = {int(row["estimator"].split("_")[-1]) for row in found["learned_from_N"]}
        ahead = {int(row["estimator"].split("_")[-1]) for row in found["continued_to_N"]}
        # four fifths of sixty; the table, and twice four fifths of it
        assert (len(sizes), max(sizes), ahead) == (6, 48, {60, 96})
        assert {row["scheme"] for row in found["learned_from_N"]} == {"learning_curve"}
        assert {int(row["rounds"]) for row in found["learned_from_N"]} == {20}

    def test_p_is_a_whole_number_of_sixths(self, asked):
        found = beside(asked)
        for key in ("chance_check", "chance_check_best"):
            for row in found[key]:
                assert row["rounds"] == "5"
                if row["measure"] == "p":
                    sixths = 6 * float(row["value"])
                    assert sixths == pytest.approx(round(sixths), abs=1e-12)
                    assert 1 <= round(sixths) <= 6
        assert {row["candidate"] for row in found["chance_check"]} == {"lda", "nearest_neighbours"}

    def test_of_the_majority_share_on_one_answer_a_case(self, asked):
        for row in beside(asked)["majority_test"]:
            assert row["n"] == "60"
            if row["measure"] == "majority_share":
                assert float(row["value"]) == 40 / 60

    def test_verdicts_of_both_ways_to_answer(self, asked):
        rows = rows_of(asked, "verdicts.csv")
        assert [(row["answers"], row["measure"]) for row in rows] == list(
            product(("highest_score", "at_cut_off"), ("sensitivity", "accuracy"))
        )
        value = {
            row["measure"]: row["value"]
            for row in beside(asked)["at_cut_off"]
            if row["candidate"] == "lda" and row["class"] in ("", "failing")
        }
        for row in rows[2:]:
            assert float(row["value"]) == pytest.approx(float(value[row["measure"]]), abs=1e-12)


class TestPlan:
    def test_what_was_asked_stands_in_it(self, asked):
        plan = Record(asked).plan
        assert plan.curve == choose(ALL_SCHEMES, "learning_curve")
        assert plan.cut_off.written() == "failing:miss=3,alarm=1,share=0.1-0.3,undecided=0.6"
        assert plan.permutations == 5
        assert plan.candidates[2].written() == "nearest_neighbours:k=1/5,scaling=standard"
        assert plan.engine == "fast"

    def test_the_learning_curve_with_settings(self, table, tmp_path, monkeypatch):
        plans = []
        monkeypatch.setattr("app.command.fill", lambda record, **_: plans.append(record.plan))
        for at, given in enumerate(([], ["sizes=5,subsets=30"])):
            arguments = (*FEW, "--candidate", "majority", "--learning-curve", *given)
            assert evaluate(tmp_path / str(at), table, *arguments) == 0
        assert [plan.curve for plan in plans] == [
            choose(ALL_SCHEMES, "learning_curve"),
            choose(ALL_SCHEMES, "learning_curve", sizes=5, subsets=30),
        ]

    def test_the_same_command_goes_on_and_another_cut_off_does_not(self, asked, table, capsys):
        arguments = (*FEW, *CANDIDATES, "--learning-curve", *ASKED)
        before = (asked / "results.csv").read_bytes()
        assert evaluate(asked, table, *arguments) == 0
        assert (asked / "results.csv").read_bytes() == before
        capsys.readouterr()
        other = [a.replace("miss=3", "miss=4") for a in arguments]
        assert evaluate(asked, table, *other) == 1
        assert capsys.readouterr().err == (
            "The folder 'record' is not empty; a new record needs a new folder.\n"
        )


class TestSaying:
    def test_sentences_after_the_limits(self, asked, table, capsys):
        assert evaluate(asked, table, *FEW, *CANDIDATES, "--learning-curve", *ASKED) == 0
        lines = capsys.readouterr().out.replace("\u00a0", " ").splitlines()
        assert lines[0].startswith("Failing cases at the cut-off: ")
        assert " Accuracy at the cut-off: shown." in lines[0]
        assert "linear discriminant at the cut-off is expected to be right in" in lines[1]
        begins = (
            "Nearest neighbours (k tuned): picked inside the bag k=1 in ",
            "A case is called failing from 0.",
            "Held out, each round at its own cut-off: failing cases found (sensitivity) ",
            "Where 10 % of cases are failing (95 % intervals in brackets, n = 20 failing and 40 good): ",
            "Where 30 % of cases are failing (95 % intervals in brackets, n = 20 failing and 40 good): ",
            "An answer with a probability below 0.6 is left to a person: ",
            "Learning curve, mean of the classes’ shares right (balanced accuracy) (by the highest score): ",
            "Learning curve, failing cases found (sensitivity) (by the highest score): ",
            "Chance check, by the highest score: with labels permuted, linear discriminant did at ",
            "Chance check, by the highest score: with labels permuted, the best of all candidates, ",
            "Against always giving the most frequent answer, by the highest score and on one ",
        )
        first = next(at for at, line in enumerate(lines) if line.startswith(begins[0]))
        for line, begin in zip(lines[first:], begins, strict=False):
            assert line.startswith(begin)
        for where in lines[first + 3 : first + 5]:
            # how often right when called and when not, and what a case costs, each with ends
            assert len(re.findall(r" % \(\d+–>?\d+ %\)", where)) == 2
            assert re.search(r"cost is 0\.\d{3} \(0\.\d{3}–[0-3]\.\d{3}\) a case\.", where)
        last = lines[first + len(begins) : -1]
        assert all(x.partition(":")[0] in ("grave", "moderate", "note") for x in last)

    def test_a_class_too_small_for_a_learning_curve(self, table, tmp_path, capsys):
        lines = table.read_text("utf-8").splitlines()
        (tmp_path / "tiny.csv").write_text("\n".join(lines[:5] + lines[-8:]), "utf-8")
        out = tmp_path / "record"
        arguments = (*FEW, "--candidate", "lda")
        assert evaluate(out, tmp_path / "tiny.csv", *arguments, "--learning-curve") == 1
        assert not out.exists()
        said = capsys.readouterr()
        assert said.out == ""
        assert said.err.replace("\u00a0", " ") == (
            "Class ‘good’ has 4 cases of 12. A learning curve takes 4 sizes, the largest about "
            "twice the smallest or more, each with 2 cases of every class; 7 of each always do, "
            "and fewer than 5 never.\n"
        )
        assert evaluate(out, tmp_path / "tiny.csv", *arguments) == 0

    def test_a_chance_check_of_nothing_to_permute_says_nothing(self, table, tmp_path):
        out = tmp_path / "record"
        assert evaluate(out, table, *FEW, "--candidate", "majority", "--chance-check", "0") == 0
        assert beside(out) == {}


def with_sites(table: Path, path: Path, *, name: str = "site", mixed: bool = False) -> Path:
    """The small table, two lots a site: of one class, or one of each as far as they go."""
    header, *lines = table.read_text("utf-8").splitlines()
    # forty good lots stand first: 0 and 40, 1 and 41 share a site where mixed
    site = [at % 40 if mixed else at // 2 for at in range(len(lines))]
    rows = [f"{line},s{number}" for line, number in zip(lines, site, strict=True)]
    path.write_text("\n".join([f"{header},{name}", *rows]), "utf-8")
    return path


KEPT = ("--label", "verdict", "--leave-out", "site", "--candidate", "lda", "--jobs", "1")
OF_SITES = ("--scheme", "cross_validation:folds=4,repeats=2,keep=site")


class TestKeptTogether:
    @pytest.mark.parametrize(
        ("schemes", "written", "keep"),
        [
            (["bootstrap:rounds=9,keep=site"], [], "site"),
            (["bootstrap:rounds=9,keep=site"], ["sizes=5"], "site"),
            (["bootstrap:rounds=9,keep=site"], ["subsets=30,keep=site"], "site"),
            (["holdout:keep=site", "bootstrap:rounds=9"], [], "site"),
            (["holdout", "bootstrap:rounds=9,keep=site"], [], ""),
            (["leave_block_out:column=site"], [], ""),
            ([], [], ""),
        ],
    )
    def test_the_curve_keeps_what_the_headline_does(
        self, table, tmp_path, monkeypatch, schemes, written, keep
    ):
        plans = []
        monkeypatch.setattr("app.command.fill", lambda record, **_: plans.append(record.plan))
        chosen = [part for scheme in schemes for part in ("--scheme", scheme)]
        file = with_sites(table, tmp_path / "sites.csv")
        arguments = (*KEPT, *chosen, "--learning-curve", *written)
        assert evaluate(tmp_path / "record", file, *arguments) == 0
        (plan,) = plans
        given = {
            "sizes": 5 if written == ["sizes=5"] else 6,
            "subsets": 30 if written and "30" in written[0] else 20,
        }
        assert plan.curve == choose(ALL_SCHEMES, "learning_curve", **given, keep=keep)

    def test_a_column_of_two_words(self, table, tmp_path, monkeypatch):
        plans = []
        monkeypatch.setattr("app.command.fill", lambda record, **_: plans.append(record.plan))
        file = with_sites(table, tmp_path / "sites.csv", name="where from: a/b")
        arguments = ("--scheme", "holdout:keep=where from: a/b", "--learning-curve")
        assert evaluate(tmp_path / "record", file, *FEW[:2], *arguments) == 0
        assert plans[0].curve.values()["keep"] == "where from: a/b"

    @pytest.mark.parametrize(
        ("scheme", "written", "got"),
        [
            ("holdout", "keep=site", "'site' and ''"),
            ("holdout:keep=site", "keep=verdict", "'verdict' and 'site'"),
            ("holdout:keep=site", "keep=", "'' and 'site'"),
        ],
    )
    def test_nothing_else_is_kept(self, table, tmp_path, capsys, scheme, written, got):
        file = with_sites(table, tmp_path / "sites.csv")
        out = tmp_path / "record"
        assert evaluate(out, file, *KEPT, "--scheme", scheme, "--learning-curve", written) == 1
        assert capsys.readouterr().err == (
            "The learning curve must keep together what the first scheme keeps together, or it "
            f"judges something else; got {got}.\n"
        )
        assert not out.exists()

    def test_sizes_and_sentences_count_sites(self, table, tmp_path, capsys):
        out, file = tmp_path / "record", with_sites(table, tmp_path / "sites.csv")
        arguments = (*KEPT, *OF_SITES, "--learning-curve", "--chance-check", "5")
        assert evaluate(out, file, *arguments) == 0
        said = capsys.readouterr().out.replace("\u00a0", " ")
        found = beside(out)
        # thirty sites, twenty good: four fifths are learned from at most, and none of a class
        # under two
        sizes = [int(row["estimator"].split("_")[-1]) for row in found["learned_from_N"]]
        assert (min(sizes), max(sizes)) == (6, 24)
        ahead = {int(row["estimator"].split("_")[-1]) for row in found["continued_to_N"]}
        assert ahead == {30, 48}
        assert " Continued to 30 entries of ‘site’: " in said
        assert "Learning from 24 entries of ‘site’ instead of " in said
        drawn = Record(out).rounds["learning_curve"]
        assert (drawn.train[:, ::2] == drawn.train[:, 1::2]).all()
        assert (drawn.test[:, ::2] == drawn.test[:, 1::2]).all()
        assert "with labels permuted between what is kept together, linear discriminant " in said
        # lots of a site are no independent trials
        assert "majority_test" not in found
        assert "Against always giving" not in said

    def test_labels_trade_within_sites_that_hold_both(self, table, tmp_path, capsys):
        file = with_sites(table, tmp_path / "sites.csv", mixed=True)
        arguments = (*KEPT, *OF_SITES, "--chance-check", "5")
        assert evaluate(tmp_path / "record", file, *arguments) == 0
        assert (
            "with labels permuted within what is kept together, so what that alone tells counts "
            "as chance, linear discriminant "
        ) in capsys.readouterr().out

    def test_too_few_sites_of_a_class(self, table, tmp_path, capsys):
        lines = table.read_text("utf-8").splitlines()
        (tmp_path / "few.csv").write_text("\n".join(lines[: 1 + 40 + 8]), "utf-8")
        file = with_sites(tmp_path / "few.csv", tmp_path / "sites.csv")
        assert evaluate(tmp_path / "record", file, *KEPT, *OF_SITES, "--learning-curve") == 1
        assert capsys.readouterr().err.replace("\u00a0", " ") == (
            "Class ‘failing’ has 4 entries of ‘site’ of 24. A learning curve takes 4 sizes, the "
            "largest about twice the smallest or more, each with 2 entries of ‘site’ of every "
            "class; 7 of each always do, and fewer than 5 never.\n"
        )


class TestReadme:
    """What README's section on all this promises, tried."""

    def test_what_stays_by_the_highest_score(self, asked, table, tmp_path):
        """Picking, comparing, the learning curve and the chance check, whatever the cut-off."""
        out = tmp_path / "record"
        arguments = (*FEW, *CANDIDATES, "--learning-curve", *ASKED[2:])
        assert ASKED[0] == "--cut-off"
        assert evaluate(out, table, *arguments) == 0
        with_, without = beside(asked), beside(out)
        assert {key for key in with_ if with_[key] == without.get(key)} == {
            "picked_in_rounds", "picked_on_all", "learned_from_N", "continued_to_N",
            "chance_check", "chance_check_best", "majority_test",
        }  # fmt: skip
        assert set(with_) - set(without) == {
            "at_cut_off", "at_cut_off_share_S", "right_of_decided",
            "right_counting_undecided_wrong", "winner_corrected_at_cut_off",
        }  # fmt: skip
        assert (asked / "comparison.csv").read_bytes() == (out / "comparison.csv").read_bytes()
        # and the verdicts by the highest score are those there are without one
        highest = rows_of(asked, "verdicts.csv")[:2]
        assert rows_of(out, "verdicts.csv") == highest

    @pytest.mark.parametrize(
        ("measure", "of_curve"),
        [
            ("accuracy", "accuracy"),
            ("balanced_accuracy", "balanced_accuracy"),
            ("auc", "balanced_accuracy"),
            ("sensitivity", "balanced_accuracy"),
        ],
    )
    def test_the_curve_is_of_two_measures_and_the_class_of_concern(
        self, table, tmp_path, measure, of_curve
    ):
        arguments = (*FEW, "--candidate", "lda", "--measure", measure, "--concern", "good")
        assert evaluate(tmp_path / "record", table, *arguments, "--learning-curve") == 0
        found = {(r["measure"], r["class"]) for r in beside(tmp_path / "record")["learned_from_N"]}
        assert found == {(of_curve, ""), ("sensitivity", "good")}

    @pytest.mark.parametrize(
        "arguments",
        [
            ("--chance-chek", "5"),
            ("--chance-check", "many"),
            ("--seed", "1.5"),
            ("--chance-check",),
        ],
    )
    def test_a_misspelt_option_or_no_number_is_answered_by_the_usage_and_2(
        self, table, tmp_path, capsys, arguments
    ):
        with pytest.raises(SystemExit, match=r"\A2\Z"):
            evaluate(tmp_path / "record", table, *FEW, *arguments)
        said = capsys.readouterr()
        assert said.out == ""
        assert said.err.startswith("usage: withheld")
        assert not (tmp_path / "record").exists()

    def test_undecided_needs_probabilities(self, table, tmp_path, capsys):
        arguments = (*FEW, "--candidate", "svm", "--cut-off", "failing:miss=3,undecided=0.7")
        assert evaluate(tmp_path / "record", table, *arguments) == 1
        assert capsys.readouterr().err == (
            "`undecided` goes by probabilities, and there are none from support vectors (SVM); "
            "leave it "
            "out, or let the answer be about another candidate.\n"
        )


class TestEngine:
    def test_plain_gives_the_same_decisions_and_figures(self, table, tmp_path):
        outs = tmp_path / "fast", tmp_path / "plain"
        for out in outs:
            arguments = (*FEW, *CANDIDATES, *ASKED, "--engine", out.name)
            assert evaluate(out, table, *arguments) == 0
            assert Record(out).plan.engine == out.name
        assert (outs[0] / "cases.csv").read_bytes() == (outs[1] / "cases.csv").read_bytes()
        fast, plain = map(rows_of, outs)
        numbers = ("value", "low", "high")
        for one, other in zip(fast, plain, strict=True):
            for column in one:
                if column in numbers and one[column]:
                    given = float(one[column]), float(other[column])
                    np.testing.assert_allclose(*given, rtol=0, atol=1e-9)
                else:
                    assert one[column] == other[column]
        assert [row["verdict"] for row in rows_of(outs[0], "verdicts.csv")] == [
            row["verdict"] for row in rows_of(outs[1], "verdicts.csv")
        ]

    def test_plain_fits_with_scikit_learn_s_classes(self, table, tmp_path, monkeypatch):
        from sklearn.discriminant_analysis import LinearDiscriminantAnalysis as Lda

        fits, fit = [], Lda.fit
        monkeypatch.setattr(Lda, "fit", lambda self, x, y: fits.append(len(y)) or fit(self, x, y))
        for engine, times in (("fast", 0), ("plain", 8 + 1)):
            arguments = (*FEW, "--candidate", "lda", "--engine", engine)
            assert evaluate(tmp_path / engine, table, *arguments) == 0
            assert len(fits) == times

    def test_no_other_engine(self, capsys):
        with pytest.raises(SystemExit, match=r"\A2\Z"):
            main(["evaluate", "x.csv", "--label", "y", "--out", "z", "--engine", "turbo"])
        assert "'fast', 'plain'" in capsys.readouterr().err


class TestCluster:
    def test_nobody_at_the_address(self, table, tmp_path, capsys, monkeypatch):
        monkeypatch.setattr("evalcore.cluster.PATIENCE", 0.2)
        out = tmp_path / "record"
        # a cluster has processes of its own
        arguments = (*FEW[: FEW.index("--jobs")], "--candidate", "majority")
        assert evaluate(out, table, *arguments, "--cluster", "tcp://127.0.0.1:9") == 1
        said = capsys.readouterr()
        assert said.out == ""
        assert said.err == (
            "No scheduler answers at 'tcp://127.0.0.1:9'; start one and its workers, and give its "
            "address, such as tcp://10.0.0.5:8786.\n"
        )
        # nothing was lost: the same command without a cluster goes on
        assert evaluate(out, table, *arguments) == 0
        assert (out / "results.csv").is_file()
