"""The pages as a visitor meets them, without a browser: empty, filled, with bad input, and kept."""

import html
import json
import re
from pathlib import Path

import pytest
from streamlit.testing.v1 import AppTest

from app import state
from app.look import BADGE
from app.look import safe as look_safe
from evalcore.answer import answer, title
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.engine import run
from evalcore.findings import findings
from evalcore.intake import make_table
from evalcore.limit import Limit
from evalcore.limit_rows import limit_rows
from evalcore.plan import Plan, recommended_candidates, recommended_schemes
from evalcore.record import Record, Status, new_folder
from evalcore.schemes import SCHEMES
from evalcore.sheet import read_sheet
from evalcore.table import Roles
from evalcore.wording import Noun
from evalcore.worker import fill

ROOT = Path(__file__).parents[2]
DATA = ROOT / "tests" / "data"
PAGES = ("upload", "settings", "results", "summary")
MANIFEST = json.loads((DATA / "odd_files" / "manifest.json").read_text("utf-8"))
NO_SUCH = (
    "This address names no record kept here. A record's name has 22 characters, such as "
    "20260504-101200-0a1b2c."
)
ROLES = Roles(
    "verdict",
    "lot",
    (
        "producer",
        "harvest_year",
        "instrument",
        "operator",
        "days_to_certificate",
        "present_practice",
    ),
    Noun("lot", "lots"),
    "set_aside",
)


@pytest.fixture(autouse=True)
def records(tmp_path, monkeypatch) -> Path:
    """Records of a test lie in a folder of its own."""
    monkeypatch.setenv("WITHHELD_RECORDS", str(tmp_path))
    return tmp_path


@pytest.fixture
def app() -> AppTest:
    """A visitor who has just come."""
    return checked(
        AppTest.from_file(str(ROOT / "app" / "pages" / "main.py"), default_timeout=60).run()
    )


def checked(at: AppTest) -> AppTest:
    """The same, once no page has thrown anything."""
    assert [e.message for e in at.exception] == []
    return at


def go(at: AppTest, page: str) -> AppTest:
    return checked(at.switch_page(f"{page}.py").run())


def press(at: AppTest, label: str) -> AppTest:
    (button, *_) = [b for b in at.button if b.label == label]
    return checked(button.click().run())


def demo(at: AppTest) -> AppTest:
    return press(at, "Take the demo table")


def upload(at: AppTest, path: Path) -> AppTest:
    return checked(at.file_uploader[0].set_value((path.name, path.read_bytes(), "text/csv")).run())


def texts(at: AppTest) -> str:
    """All words in HTML and Markdown of a page, with plain spaces."""
    parts = [re.sub("<[^>]*>", " ", e.proto.body) for e in at.get("html")]
    return html.unescape(spaced(" ".join([*parts, *(m.value for m in at.markdown)])))


def spaced(text: str) -> str:
    return text.replace("\u00a0", " ")


def selected(at: AppTest, label: str):
    (found,) = [w for w in (*at.selectbox, *at.multiselect, *at.number_input, *at.radio, *at.text_input, *at.get("button_group"), *at.checkbox) if w.label == label]  # fmt: skip
    return found


class TestEmpty:
    def test_upload_offers_a_file_and_the_demo(self, app):
        assert app.title[0].value == "Which table?"
        assert len(app.file_uploader) == 1
        assert [b.label for b in app.button] == ["Take the demo table"]
        assert "No table yet." in texts(app)

    @pytest.mark.parametrize(
        ("page", "head", "says", "button", "leads_to"),
        [
            ("settings", "Settings", "No table yet", "Go to Upload", "Which table?"),
            ("results", "Results", "No evaluation yet.", "Go to Settings", "Settings"),
            ("summary", "Summary", "No evaluation yet.", "Go to Settings", "Settings"),
        ],
    )
    def test_the_others_say_where_to_go(self, app, page, head, says, button, leads_to):
        go(app, page)
        assert app.title[0].value == head
        assert says in texts(app)
        assert press(app, button).title[0].value == leads_to
        assert not app.error

    def test_nothing_is_kept_of_a_mere_visit(self, app, records):
        for page in PAGES:
            go(app, page)
        assert list(records.iterdir()) == []


class TestAnotherFile:
    def test_after_the_demo_a_new_file_gets_a_label_of_its_own_and_its_name(self, app):
        demo(app)
        upload(app, DATA / "iris.csv")
        assert selected(app, "Label: the class of each case").value == "class"
        assert "iris.csv" in texts(app)
        assert "150 rows were read; they are 150 cases." in spaced(texts(app))
        assert "iris.csv" in texts(go(app, "settings"))


class TestDemo:
    def test_roles_are_chosen_and_the_table_is_told(self, app):
        demo(app)
        assert selected(app, "Label: the class of each case").value == "verdict"
        assert selected(app, "Unit: what is independent").value == "lot"
        assert tuple(selected(app, "Columns to leave out").value) == ROLES.leave_out
        assert selected(app, "One unit is called").value == "lot"
        assert (
            "746 rows were read; they are 180 lots with 720 rows once 6 rows (entered twice) and "
            "5 lots (lots submitted twice) are set aside." in texts(app)
        )
        assert len(app.get("vega_lite_chart")) == 1

    def test_settings_lead_with_what_it_comes_to(self, app):
        demo(app)
        press(app, "Go on to Settings")
        assert app.title[0].value == "Settings"
        # (100 rounds + 200 rounds + all cases) x 4 candidates
        assert (
            "As set: 4 candidates, each answering for every lot while it is held out, 1,204 fits, "
            in texts(app)
        )
        assert "lot: 180 (38 failing, 142 good)" in texts(app)
        assert not app.error

    def test_the_label_can_be_changed_and_is_then_asked_about(self, app):
        demo(app)
        checked(selected(app, "Columns to leave out").set_value([]).run())
        labels = [e.label for e in app.expander]
        assert any("days\\_to\\_certificate" in label for label in labels), labels
        assert any(label.startswith(":red-badge[grave]") for label in labels)

    def test_a_label_without_classes_says_so_and_settings_wait(self, app):
        demo(app)
        checked(selected(app, "Label: the class of each case").set_value("nir_1").run())
        (error,) = app.error
        assert "looks like a measurement, not a class" in error.value
        go(app, "settings")
        assert "No table yet" in texts(app)


REFUSED = [m["file"] for m in MANIFEST if m["outcome"] == "refuse"]
# refused once it is known which column is the label
REFUSED_AS_A_TABLE = ("14_one_class.csv", "40_numeric_label.csv")


class TestUploading:
    def test_a_file_of_ones_own(self, app):
        upload(app, DATA / "penguins.csv")
        assert selected(app, "Label: the class of each case").value == "species"
        assert selected(app, "Unit: what is independent").value == ""
        assert "they are 3" in texts(app)
        assert not app.error

    def test_every_odd_file_is_taken_or_refused_as_listed(self):
        assert len(MANIFEST) == 23
        assert set(REFUSED_AS_A_TABLE) < set(REFUSED)

    @pytest.mark.parametrize("name", sorted(set(REFUSED) - set(REFUSED_AS_A_TABLE)))
    def test_a_file_that_cannot_be_read_says_why_and_changes_nothing(self, app, name):
        demo(app)
        before = state_of(app)
        upload(app, DATA / "odd_files" / name)
        (error,) = app.error
        assert name in error.value.replace("\\", "")
        assert "Traceback" not in error.value
        assert state_of(app) == before
        assert "746 rows were read" in texts(app)
        checked(app.run())
        assert not app.error
        assert "746 rows were read" in texts(app)

    @pytest.mark.parametrize("name", REFUSED_AS_A_TABLE)
    def test_a_file_without_classes_is_shown_with_the_reason(self, app, name):
        upload(app, DATA / "odd_files" / name)
        label = make_label(name)
        checked(selected(app, "Label: the class of each case").set_value(label).run())
        (error,) = app.error
        assert label in error.value.replace("\\", "")
        assert any(e.label.startswith("Preview") for e in app.expander)
        go(app, "settings")
        assert "No table yet" in texts(app)

    @pytest.mark.parametrize(
        "name", sorted(m["file"] for m in MANIFEST if m["outcome"] != "refuse")
    )
    def test_the_other_odd_files_come_through_both_pages(self, app, name):
        upload(app, DATA / "odd_files" / name)
        assert not app.error
        assert "rows were read" in texts(app)
        go(app, "settings")
        assert not app.error
        assert "As set: 4 candidates" in texts(app)

    def test_an_empty_file_before_anything_else(self, app, tmp_path):
        (tmp_path / "empty.csv").write_bytes(b"")
        upload(app, tmp_path / "empty.csv")
        assert [e.value for e in app.error] == [
            "‘empty.csv’ is empty; a header line and one line a case are needed."
        ]
        assert "No table yet." in texts(app)

    def test_another_file_starts_with_fresh_choices(self, app):
        demo(app)
        go(app, "settings")
        checked(selected(app, "Random seed").set_value(5).run())
        go(app, "upload")
        upload(app, DATA / "penguins.csv")
        assert selected(app, "Label: the class of each case").value == "species"
        assert selected(app, "Columns to leave out").value == []
        go(app, "settings")
        assert selected(app, "Random seed").value == 1


def make_label(name: str) -> str:
    return read_sheet((DATA / "odd_files" / name).read_bytes(), name).header[-1]


def state_of(at: AppTest) -> tuple:
    sheet, roles = at.session_state["sheet"], at.session_state["roles"]
    return sheet, roles


class TestChoices:
    def test_survive_a_walk_through_all_pages(self, app):
        demo(app)
        checked(selected(app, "Several are called").set_value("bean lots").run())
        go(app, "settings")
        wanted = {
            "Random seed": 7,
            "Parts (folds)": 4,
            "Trees": 20,
            "Class whose misses matter most": "failing",
            "First scheme (gives the headline)": "bootstrap",
            "The question, as it should stand on the summary": "Same day?",
        }
        for label, value in wanted.items():
            checked(selected(app, label).set_value(value).run())
        # the parts belong to a scheme that is now shown no more; it stands beside the first one
        checked(selected(app, "Beside it, as a second look").set_value(["cross_validation"]).run())
        checked(
            selected(app, "Each answers for every case, on the same rounds")
            .set_value(["logistic", "forest"])
            .run()
        )
        for page in ("results", "upload", "summary", "settings"):
            go(app, page)
        for label, value in wanted.items():
            assert selected(app, label).value == value, label
        assert selected(app, "Beside it, as a second look").value == ["cross_validation"]
        go(app, "upload")
        assert selected(app, "Several are called").value == "bean lots"
        assert tuple(selected(app, "Columns to leave out").value) == ROLES.leave_out

    def test_end_in_the_plan_that_is_started(self, app, monkeypatch):
        plans = []
        monkeypatch.setattr(state, "start", plans.append)
        demo(app)
        go(app, "settings")
        for label, value in {
            "Acceptance limit, failing lots found (sensitivity), in %": 90.0,
            "Acceptance limit, good lots passed (specificity), in %": 80.0,
            "Acceptance limit, balanced accuracy, in %": 72.5,
            "A future lot will be answered from": "one",
            "Class whose misses matter most": "failing",
            "First scheme (gives the headline)": "random_subsampling",
            "The answer is about": "forest",
            "Random seed": 11,
            "Confidence level of intervals, two-sided": 0.9,
            "Measure on which candidates are set side by side": "accuracy",
            "The question, as it should stand on the summary": "  Same day?  ",
        }.items():
            checked(selected(app, label).set_value(value).run())
        for label, value in {
            "Confidence of the limits, one-sided, in %": 90.0,
            "Date the limits were set": "4 May 2026",
            "Share held out": 0.25,
            "Trees": 30,
        }.items():
            checked(selected(app, label).set_value(value).run())
        checked(selected(app, "Beside it, as a second look").set_value(["leave_one_out"]).run())
        checked(
            selected(app, "Each answers for every case, on the same rounds")
            .set_value(["majority", "naive_bayes", "forest"])
            .run()
        )
        assert not app.error
        press(app, "Evaluate")
        limits = {"confidence": 0.9, "set_on": "4 May 2026"}
        assert plans == [
            Plan(
                roles=ROLES,
                schemes=(
                    choose(SCHEMES, "random_subsampling", test_share=0.25),
                    choose(SCHEMES, "leave_one_out"),
                ),
                candidates=(
                    choose(CANDIDATES, "majority"),
                    choose(CANDIDATES, "naive_bayes"),
                    choose(CANDIDATES, "forest", trees=30),
                ),
                answered_from="one",
                measure="accuracy",
                concern="failing",
                about="forest",
                limits=(
                    Limit("sensitivity", 0.9, "failing", **limits),
                    Limit("sensitivity", 0.8, "good", **limits),
                    Limit("balanced_accuracy", 0.725, **limits),
                ),
                level=0.9,
                seed=11,
                question="Same day?",
            )
        ]
        assert app.title[0].value == "Results"

    def test_untouched_are_the_recommended_ones(self, app, monkeypatch):
        plans = []
        monkeypatch.setattr(state, "start", plans.append)
        demo(app)
        go(app, "settings")
        press(app, "Evaluate")
        table = make_table(read_sheet(demo_bytes(), "bean_lots.csv"), ROLES)
        assert plans == [Plan(ROLES, recommended_schemes(table), recommended_candidates())]

    def test_lead_back_to_the_recommended_ones(self, app):
        demo(app)
        go(app, "settings")
        checked(selected(app, "Parts (folds)").set_value(3).run())
        checked(selected(app, "First scheme (gives the headline)").set_value("holdout").run())
        assert "1,204 fits" not in texts(app)
        press(app, "Back to the recommended settings")
        assert "1,204 fits" in texts(app)
        assert selected(app, "Parts (folds)").value == 5
        go(app, "upload")
        assert selected(app, "Label: the class of each case").value == "verdict"

    def test_more_folds_than_the_smallest_class_has_lots_say_so(self, app):
        demo(app)
        go(app, "settings")
        checked(selected(app, "Parts (folds)").set_value(39).run())
        assert [e.value.replace("\\", "").replace("\u00a0", " ") for e in app.error] == [
            "`folds` must be between 2 and 38, because class ‘failing’ has 38 lots; got 39."
        ]
        assert "Evaluate" not in [b.label for b in app.button]
        checked(selected(app, "Parts (folds)").set_value(38).run())
        assert not app.error
        assert "Evaluate" in [b.label for b in app.button]

    def test_no_candidate_says_so(self, app):
        demo(app)
        go(app, "settings")
        checked(
            selected(app, "Each answers for every case, on the same rounds").set_value([]).run()
        )
        assert [e.value for e in app.error] == ["A plan needs at least one candidate."]


def demo_bytes() -> bytes:
    return (ROOT / "demo_data" / "bean_lots.csv").read_bytes()


@pytest.fixture(scope="module")
def kept(tmp_path_factory) -> Path:
    """A folder with one finished record of the demo table."""
    root = tmp_path_factory.mktemp("kept")
    plan = Plan(
        ROLES,
        (
            choose(SCHEMES, "cross_validation", folds=4, repeats=3),
            choose(SCHEMES, "bootstrap", rounds=12),
        ),
        (
            choose(CANDIDATES, "majority"),
            choose(CANDIDATES, "logistic"),
            choose(CANDIDATES, "naive_bayes"),
        ),
        limits=(Limit("sensitivity", 0.9, "failing"), Limit("sensitivity", 0.7, "good")),
        question="Can it be said the same day?",
        seed=3,
    )
    fill(Record.create(new_folder(root), demo_bytes(), "bean_lots.csv", plan), jobs=1)
    return root


@pytest.fixture
def finished(kept, monkeypatch) -> Record:
    monkeypatch.setenv("WITHHELD_RECORDS", str(kept))
    (folder,) = kept.iterdir()
    return Record(folder)


def visit(app: AppTest, record: Record | str, page: str) -> AppTest:
    """Open a page of a record by its address."""
    app.query_params["record"] = record if isinstance(record, str) else record.name
    return go(app, page)


@pytest.fixture(scope="module")
def results(kept) -> AppTest:
    """The results of that record, opened by their address; only to look at."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("WITHHELD_RECORDS", str(kept))
        at = AppTest.from_file(str(ROOT / "app" / "pages" / "main.py"), default_timeout=60)
        return visit(checked(at.run()), Record(*kept.iterdir()), "results")


class TestResults:
    def test_the_answer_stands_first(self, results, finished):
        evaluation = finished.evaluation()
        assert results.title[0].value == look_safe(title(evaluation))
        assert spaced(answer(evaluation)) in texts(results)
        assert finished.name in texts(results)
        assert results.query_params["record"] == finished.name
        assert not results.error

    def test_limits_stand_with_their_verdicts(self, results, finished):
        rows = limit_rows(finished.evaluation(), "logistic")
        assert [row.verdict.word for row in rows] == ["not shown yet", "shown"]
        said = " ".join(texts(results).split())
        for row in rows:
            shown = spaced(f"{row.name} {row.figure} {row.verdict.word} {row.detail}")
            assert shown in said

    def test_charts_hold_what_they_are_about(self, results):
        charts = results.get("vega_lite_chart")
        # estimates by two measures, classes, rounds, in and out, rounds of the second scheme, and
        # training against held-out scores of the first
        assert len(charts) == 7
        for chart in charts:
            spec = json.loads(chart.proto.spec)
            assert {"mark", "layer", "hconcat", "vconcat", "concat", "facet"} & set(spec)
        titles = [heading.value for heading in results.subheader]
        assert len(set(titles)) == 7

    def test_findings_stand_grave_ones_first(self, results, finished):
        found = findings(finished.table, finished.plan, finished.evaluation())
        weighty = [f for f in found if f.severity != "note"][:5]
        assert weighty
        labels = [e.label for e in results.expander if "-badge[" in e.label]
        assert labels[: len(weighty)] == [
            f":{BADGE[f.severity]}-badge[{f.severity}] {look_safe(f.title)}" for f in weighty
        ]

    def test_tables_hold_every_estimate(self, results):
        for words in ("logistic regression", ".632+", "balanced accuracy"):
            assert words in texts(results)
        assert len(results.get("download_button")) == 7 + 2

    def test_lead_to_the_summary(self, app, finished, monkeypatch, tmp_path):
        def quickly(folder, out):
            paths = out / "summary.pdf", out / "summary.html"
            for path in paths:
                path.write_bytes(folder.name.encode())
            return paths

        monkeypatch.setattr("app.print.child.build_in_child", quickly)
        visit(app, finished, "results")
        press(app, "Summary (PDF)")
        assert app.title[0].value == "Summary"
        assert spaced(answer(finished.evaluation())) in texts(app)
        downloads = app.get("download_button")
        assert [button.label for button in downloads] == ["Summary as PDF", "Summary as HTML"]

    def test_a_fresh_visit_takes_file_and_choices_from_the_record(self, app, finished):
        visit(app, finished, "settings")
        assert selected(app, "Random seed").value == 3
        assert selected(app, "Parts (folds)").value == 4
        assert selected(app, "Rounds").value == 12
        assert selected(app, "Each answers for every case, on the same rounds").value == [
            "majority",
            "logistic",
            "naive_bayes",
        ]
        assert [n.value for n in app.number_input if n.label.startswith("Acceptance limit")] == [
            90, 70, None,
        ]  # fmt: skip
        # (12 + 12 rounds + all cases) x 3
        assert "75 fits" in texts(app)
        go(app, "upload")
        assert selected(app, "Unit: what is independent").value == "lot"
        assert tuple(selected(app, "Columns to leave out").value) == ROLES.leave_out

    @pytest.mark.parametrize("page", ["results", "summary"])
    @pytest.mark.parametrize("name", ["../x", "20260101-000000-abcdef", "<b>x</b>", "%00"])
    def test_an_address_of_no_record_says_so(self, app, page, name):
        visit(app, name, page)
        assert [e.value for e in app.error] == [look_safe(NO_SUCH)]

    @pytest.mark.parametrize("page", ["upload", "settings"])
    def test_an_address_of_no_record_leaves_the_other_pages_empty(self, app, page):
        visit(app, "../x", page)
        assert not app.error
        assert "No table yet" in texts(app)


class TestEndedEarly:
    def stopped(self, records: Path, state_: str, message: str = "") -> Record:
        plan = Plan(
            Roles("class"),
            (choose(SCHEMES, "cross_validation", folds=4, repeats=25),),
            (choose(CANDIDATES, "majority"), choose(CANDIDATES, "naive_bayes")),
        )
        data = (DATA / "iris.csv").read_bytes()
        record = Record.create(new_folder(records), data, "iris.csv", plan)
        for done in run(record.table, plan, record.rounds, todo=record.unfinished()[:2]):
            record.add(done)
        record.set_status(Status(state_, record.done(), record.total, message=message))
        return record

    @pytest.mark.parametrize(
        ("state_", "message", "says"),
        [
            (
                "cancelled",
                "",
                "This evaluation was cancelled; 51 of 101 rounds had finished and are kept.",
            ),
            (
                "interrupted",
                "",
                "This evaluation was interrupted; 51 of 101 rounds had finished and are kept.",
            ),
            (
                "failed",
                "The disk is *full*.",
                "This evaluation failed. The disk is *full*. 51 of 101 rounds had finished and are kept.",
            ),
        ],
    )
    def test_says_so_shows_what_there_is_and_offers_to_go_on(
        self, app, records, monkeypatch, state_, message, says
    ):
        record = self.stopped(records, state_, message)
        visit(app, record, "results")
        assert [w.value for w in app.warning] == [look_safe(says)]
        assert "naive Bayes is expected to be right in" in texts(app)
        assert any("Only 50 of 100 rounds" in e.label for e in app.expander)
        gone_on = []
        monkeypatch.setattr(state, "go_on", lambda given: gone_on.append(given.name))
        press(app, "Go on from the finished rounds")
        assert gone_on == [record.name]

    def test_while_it_runs_there_is_a_button_to_cancel(self, app, records, monkeypatch):
        record = self.stopped(records, "running")
        record.set_status(Status("running", 51, 101, 12.0, process=1))
        monkeypatch.setattr("evalcore.record._lives", lambda process: True)
        visit(app, record, "results")
        assert [b.label for b in app.button] == ["Cancel"]
        assert "naive Bayes is expected to be right in" in texts(app)
        record.cancel()
        checked(app.run())
        assert "Cancelling; what has finished is kept." in texts(app)
        assert not app.button
