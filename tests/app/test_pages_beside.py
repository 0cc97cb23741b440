"""What was asked for beside the estimates, as pages and the summary show it; and its absence."""

import html
from dataclasses import replace
from pathlib import Path

import pytest
from streamlit.testing.v1 import AppTest

from app import choices
from app.print.content import Content, content
from app.print.page import page
from app.print.pdf import pdf
from evalcore.answer import answer, title
from evalcore.beside_answer import beside_in_sentences
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cut_off_rule import CutOffRule
from evalcore.limit import Limit
from evalcore.limit_rows import limit_rows
from evalcore.plan import Plan
from evalcore.record import Record, new_folder
from evalcore.schemes import ALL_SCHEMES, SCHEMES
from evalcore.summary import Summary, summary
from evalcore.table import Roles
from evalcore.wording import percent
from evalcore.worker import fill

from .test_command_beside import small_table
from .test_pages import ROOT, checked, look_safe, spaced, texts, visit

HEADER = "Settings picked, cut-off, more cases, chance"
LEFT_OUT = "The evaluation at hand was asked on the command line for "
BARE = Plan(
    Roles("verdict"),
    (choose(SCHEMES, "cross_validation", folds=4, repeats=2),),
    (choose(CANDIDATES, "majority"), choose(CANDIDATES, "lda")),
    limits=(Limit("sensitivity", 0.6, "failing"), Limit("accuracy", 0.5)),
)
ASKED = replace(
    BARE,
    candidates=(*BARE.candidates, choose(CANDIDATES, "nearest_neighbours", k=(1, 5))),
    cut_off=CutOffRule.read("failing:miss=8,share=0.1-0.3,undecided=0.6"),
    curve=choose(ALL_SCHEMES, "learning_curve"),
    permutations=5,
)


def made(root: Path, plan: Plan) -> Record:
    """A finished record of the small table."""
    data = small_table(root / "small.csv").read_bytes()
    record = Record.create(new_folder(root / "records"), data, "small.csv", plan)
    fill(record, jobs=1)
    return record


@pytest.fixture(scope="module")
def asked(tmp_path_factory) -> Record:
    return made(tmp_path_factory.mktemp("asked"), ASKED)


@pytest.fixture(scope="module")
def bare(tmp_path_factory) -> Record:
    return made(tmp_path_factory.mktemp("bare"), BARE)


def opened(record: Record, page_: str) -> AppTest:
    """A page of a record, opened by its address; it throws nothing."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("WITHHELD_RECORDS", str(record.folder.parent))
        at = AppTest.from_file(str(ROOT / "app" / "pages" / "main.py"), default_timeout=60)
        return visit(checked(at.run()), record, page_)


@pytest.fixture(scope="module")
def results(asked) -> AppTest:
    return opened(asked, "results")


@pytest.fixture(scope="module")
def printed(asked) -> Content:
    return content(asked)


@pytest.fixture(scope="module")
def said(asked) -> Summary:
    return summary(asked, asked.evaluation())


class TestResults:
    def test_every_sentence_under_its_header(self, results, asked):
        assert not results.error
        assert HEADER in [header.value for header in results.header]
        sentences = beside_in_sentences(asked.evaluation())
        assert len(sentences) == 11
        shown = [m.value for m in results.markdown]
        first = shown.index(look_safe(sentences[0]))
        assert shown[first : first + 11] == [look_safe(sentence) for sentence in sentences]

    def test_between_how_sure_and_why_it_varies(self, results):
        headers = [header.value for header in results.header]
        at = headers.index(HEADER)
        assert headers[at - 1 : at + 2] == ["How sure", HEADER, "Why it varies"]

    def test_title_answer_and_limits_are_about_the_cut_off(self, results, asked):
        evaluation = asked.evaluation()
        assert results.title[0].value == look_safe(title(evaluation))
        assert results.title[0].value.startswith("Failing cases at the cut-off: ")
        assert " Accuracy at the cut-off: " in results.title[0].value
        assert spaced(answer(evaluation)) in texts(results)
        assert "linear discriminant at the cut-off is expected to be right in" in texts(results)
        assert "Answered by the highest score, not at the cut-off." in texts(results)
        rows = limit_rows(evaluation, "lda")
        assert [row.name for row in rows] == [
            "Failing cases found (sensitivity) at the cut-off",
            "Share of cases right (accuracy) at the cut-off",
        ]
        for row in rows:
            assert spaced(row.figure) in texts(results)

    @pytest.mark.parametrize(
        ("measure", "of_class", "words"),
        [
            ("accuracy", "", "is expected to be right in {} ("),
            ("sensitivity", "failing", "failing cases found {} ("),
            ("sensitivity", "good", "good cases passed {} ("),
        ],
    )
    def test_the_answer_gives_the_figures_at_the_cut_off(self, asked, measure, of_class, words):
        evaluation = asked.evaluation()
        at_cut_off, highest = (
            words.format(percent(estimate.value, estimate.n))
            for estimate in (
                evaluation.estimate(measure, "lda", estimator=by, of_class=of_class)
                for by in ("at_cut_off", "held_out_by_case")
            )
        )
        assert at_cut_off != highest
        assert at_cut_off in answer(evaluation)

    def test_what_is_by_the_highest_score_says_so_in_the_summary_too(self, asked, bare):
        words = "Answered by the highest score, not at the cut-off."
        shown, plain_ = (content(record) for record in (asked, bare))
        for picture in (shown.first, shown.rounds, shown.bags):
            assert words in picture.caption
        for table in shown.figures:
            assert words in table.note
        assert words not in shown.limits.caption  # the classes are at the cut-off
        assert "by the highest score" not in str(plain_.as_data())

    def test_of_a_record_without_any_no_such_header(self, bare):
        page_ = opened(bare, "results")
        assert HEADER not in [header.value for header in page_.header]
        assert "at the cut-off" not in texts(page_) + page_.title[0].value
        assert "by the highest score" not in texts(page_)
        for word in ("Learning curve", "Chance check", "picked inside the bag"):
            assert word not in texts(page_)


class TestSettings:
    def test_says_what_it_leaves_out(self, asked):
        page_ = opened(asked, "settings")
        assert not page_.error
        assert (
            LEFT_OUT + "tuned settings, a cut-off, a learning curve and a chance check. An "
            "evaluation started here leaves that out."
        ) in texts(page_)

    def test_says_nothing_where_nothing_is_left_out(self, bare):
        assert LEFT_OUT not in texts(opened(bare, "settings"))

    @pytest.mark.parametrize(
        ("changes", "words"),
        [
            ({}, ()),
            ({"permutations": 1}, ("a chance check",)),
            ({"engine": "plain"}, ("every round fitted on its own",)),
            ({"cut_off": CutOffRule("failing", "cost")}, ("a cut-off",)),
            (
                {"candidates": tuple(choose(CANDIDATES, "svm", C=c) for c in (1.0, 2.0))},
                ("a candidate chosen twice",),
            ),
            (
                {"schemes": tuple(choose(SCHEMES, "bootstrap", rounds=r) for r in (5, 6))},
                ("a scheme chosen twice",),
            ),
            (
                {"candidates": (choose(CANDIDATES, "svm", C=(1.0, 2.0)),)},
                ("tuned settings",),
            ),
        ],
    )
    def test_every_choice_without_a_widget_is_named(self, changes, words, bare):
        plan = replace(BARE, **changes)
        assert choices.not_carried_over(plan) == words
        # all else comes back as it was
        values = {
            name.removeprefix(choices.PLAN): value for name, value in choices.of_plan(plan).items()
        }
        assert (choices.plan_of(values, bare.table) == plan) == (not words)


class TestSummary:
    def test_carries_the_sentences(self, said, asked):
        sentences = beside_in_sentences(asked.evaluation())
        assert said.design[-11:] == sentences
        assert said.title == title(asked.evaluation())
        assert "at the cut-off" in said.title
        assert [name.endswith(" at the cut-off") for name, *_ in said.limits] == [True, True]

    def test_carries_the_plan_s_lines(self, said):
        plan = dict(said.plan)
        assert spaced(plan["learning curve"]) == "learning_curve:sizes=6,subsets=20"
        assert plan["cut-off"] == "failing:miss=8,alarm=1,share=0.1-0.3,undecided=0.6"
        assert plan["chance check"] == "5 permutations of the labels"
        assert ("candidate", "nearest neighbours [nearest_neighbours:k=1/5,scaling=standard]") in (
            said.plan
        )

    def test_stands_on_paper_and_on_the_page(self, printed, said):
        text = html.unescape(page(printed)).replace("\u200b", "")
        for sentence in said.design[-11:]:
            assert sentence in text
        for line in ("learning_curve:sizes=6,subsets=20", "5 permutations of the labels"):
            assert line in text
        assert pdf(printed).startswith(b"%PDF-")

    def test_of_a_record_without_any_has_none(self, bare):
        given = summary(bare, bare.evaluation())
        asked_for = {"learning curve", "cut-off", "chance check"}
        assert not asked_for & {what for what, _ in given.plan}
        assert "at the cut-off" not in " ".join((given.title, given.answer, *given.design))
        assert not [s for s in given.design if s.startswith(("Learning curve", "Chance check"))]
