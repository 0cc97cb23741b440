"""The summary on paper: complete, the same each time, and safe with hostile names."""

import json
import logging
import re
import subprocess
from dataclasses import replace
from html import escape, unescape
from itertools import pairwise
from pathlib import Path
from typing import get_args

import pytest
import typst

from app.print import child
from app.print.build import build, main
from app.print.content import FONTS, Content, cleaned, content, flow_in_words
from app.print.lower import lowered
from app.print.page import LOOKS, page
from app.print.pdf import FIRST_FINDINGS, TEMPLATE, breakable, data, pdf
from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.errors import RecordError
from evalcore.figures import SEVERITIES
from evalcore.limit import Limit
from evalcore.plan import Plan
from evalcore.record import Record
from evalcore.schemes import SCHEMES
from evalcore.table import Roles, SetAside
from evalcore.verdict import Word
from evalcore.wording import Noun
from evalcore.worker import fill

DATA = Path(__file__).parents[1] / "data"
BEANS = Path(__file__).parents[2] / "demo_data" / "bean_lots.csv"
HOSTILE = "</td></table><script>alert(2)</script>"
QUESTION = "<script>alert(3)</script> #panic() $x$ *b* @ref \u202eturned\u0007"


def record_of(folder: Path, file: str, roles: Roles, **choices: object) -> Record:
    """A small record, not yet filled."""
    plan = Plan(
        roles=roles,
        schemes=(
            choose(SCHEMES, "cross_validation", folds=4, repeats=2),
            choose(SCHEMES, "bootstrap", rounds=8),
        ),
        candidates=(choose(CANDIDATES, "majority"), choose(CANDIDATES, "lda")),
        **choices,  # type: ignore[arg-type]
    )
    path = DATA / file
    return Record.create(folder / "record", path.read_bytes(), path.name, plan)


@pytest.fixture(scope="module")
def record(tmp_path_factory: pytest.TempPathFactory) -> Record:
    """Finished, with markup for names and a limit on each class."""
    made = record_of(
        tmp_path_factory.mktemp("hostile"),
        "odd_files/31_html_in_names.csv",
        Roles("<b>class</b>"),
        question=QUESTION,
        limits=(
            Limit("sensitivity", 0.95, "<i>ill</i>&amp;", set_on="<u>2 March</u>"),
            Limit("sensitivity", 0.2, HOSTILE),
        ),
    )
    fill(made, jobs=1)
    return made


@pytest.fixture(scope="module")
def beans(tmp_path_factory: pytest.TempPathFactory) -> Content:
    """An ordinary case: four candidates, two schemes, two limits, few rounds."""
    plan = Plan(
        roles=Roles(
            "verdict",
            unit="lot",
            leave_out=(
                "producer",
                "harvest_year",
                "instrument",
                "operator",
                "days_to_certificate",
                "present_practice",
            ),
            noun=Noun("lot", "lots"),
            copies="set_aside",
        ),
        schemes=(
            choose(SCHEMES, "cross_validation", folds=3, repeats=2),
            choose(SCHEMES, "bootstrap", rounds=4),
        ),
        candidates=(
            choose(CANDIDATES, "majority"),
            choose(CANDIDATES, "logistic"),
            choose(CANDIDATES, "nearest_neighbours"),
            choose(CANDIDATES, "forest", trees=10),
        ),
        question="May these lots be released without the certificate?",
        limits=(
            Limit("sensitivity", 0.9, "failing", set_on="2 March 2026"),
            Limit("sensitivity", 0.8, "good", set_on="2 March 2026"),
        ),
    )
    folder = tmp_path_factory.mktemp("beans") / "record"
    made = Record.create(folder, BEANS.read_bytes(), BEANS.name, plan)
    fill(made, jobs=1)
    return content(made)


@pytest.fixture(scope="module")
def given(record: Record) -> Content:
    return content(record)


@pytest.fixture(scope="module")
def html(given: Content) -> str:
    return page(given)


def headings(given: Content) -> list[tuple[int, str]]:
    """Level and text of the headings the template sets; compiles it without making a PDF."""
    found = typst.query(
        str(TEMPLATE),
        "heading",
        font_paths=[str(FONTS)],
        ignore_system_fonts=True,
        sys_inputs={"content": json.dumps(data(given, "a test"))},
    )
    return [(h["level"], plain(h["body"])) for h in json.loads(found)]


def plain(body: object) -> str:
    """The text of a piece of content, without places to break."""
    if isinstance(body, dict):
        return (
            " "
            if body.get("func") == "space"
            else "".join(
                plain(body[key]) for key in ("text", "children", "body", "child") if key in body
            ).replace("\u200b", "")
        )
    return "".join(map(plain, body)) if isinstance(body, list) else str(body)


def test_pdf_keeps_the_promises_of_archiving_and_of_accessibility(given: Content) -> None:
    made = pdf(given)
    assert made.startswith(b"%PDF-")
    assert b"pdfaid:part" in made
    assert b"pdfuaid:part" in made
    assert b"/MarkInfo" in made


def test_pdf_has_the_answer_first_and_no_level_of_headings_left_out(given: Content) -> None:
    found = headings(given)
    assert found[0] == (1, given.summary.title)
    assert [level for level, _ in found].count(1) == 1
    assert all(b - a <= 1 for (a, _), (b, _) in pairwise(found))
    titles = {text for _, text in found}
    for picture in (given.first, given.balance, given.limits, given.rounds, given.bags):
        assert picture is not None
        assert picture.title in titles


def test_markup_in_names_and_question_stays_text_in_the_pdf(given: Content) -> None:
    assert "#panic() $x$ *b* @ref turned" in data(given, "")["summary"]["question"]
    assert any("<i>ill</i>&amp;" in text for _, text in headings(given))


def test_an_ordinary_case_takes_two_pages(beans: Content) -> None:
    assert len(beans.findings) > 4
    assert len(re.findall(rb"/Type\s*/Page\b", pdf(beans))) == 2


def test_on_paper_findings_are_titles_and_the_html_page_has_the_rest(beans: Content) -> None:
    text = unescape(re.sub("<[^>]*>", "", page(beans)))
    for _, title, advice, seen, number in beans.findings:
        assert title in text
        assert advice in text
        assert f"{seen} [{number}]" in text
    assert "findings.csv" in beans.paper_rest


def test_charts_are_lower_on_paper_and_lose_no_words(beans: Content) -> None:
    for picture in (beans.first, beans.balance, beans.limits, beans.rounds, beans.bags):
        assert picture is not None
        low, full = (
            float(re.findall(r'viewBox="0 0 [\d.]+ ([\d.]+)', svg)[0])
            for svg in (picture.slim, picture.page_slim)
        )
        assert low < 0.9 * full
        words = [
            re.findall(r"<text[^>]*>([^<]*)", svg) for svg in (picture.slim, picture.page_slim)
        ]
        assert words[0] == words[1]


def test_lines_of_words_keep_their_height_and_bars_their_proportion() -> None:
    def layer(mark: str, *rows: dict[str, float]) -> dict[str, object]:
        return {"mark": {"type": mark}, "data": {"values": list(rows)}}

    words = layer("text", {"y": 13}, {"y": 113})
    bars = layer("rect", {"y": 97, "y2": 17}, {"y": 97, "y2": 57})
    lower = lowered({"height": 120, "layer": [words, bars]}, 0.5)
    first, second = lower["layer"][0]["data"]["values"]
    tall, half = lower["layer"][1]["data"]["values"]
    assert first["y"] == 13
    assert tall["y"] - tall["y2"] == 2 * (half["y"] - half["y2"]) == 40
    assert second["y"] - tall["y"] == 0.5 * 3 + 13
    assert lower["height"] == second["y"] + 4 + 0.5 * 3


def test_from_rows_read_to_judged_is_one_sentence(given: Content, record: Record) -> None:
    assert re.fullmatch(r"All \d+ rows read are judged on\.", given.flow)
    evaluation = record.evaluation()
    assert evaluation is not None
    some = replace(evaluation.table, set_aside=(SetAside("entered twice", 1),))
    assert " 1 is set aside (entered twice: 1) and " in flow_in_words(some)


def test_page_says_all_the_summary_says(given: Content, html: str) -> None:
    said = given.summary
    text = unescape(re.sub("<[^>]*>", "", html))
    assert f"<h1>{escape(said.title)}</h1>" in html
    assert said.answer in text
    for part in (
        *said.design,
        *said.does_not_hold,
        *said.cautions,
        *(row[3] for row in said.limits),
    ):
        assert part in text
    for _, title, seen, advice, source in said.findings:
        assert title in text
        assert seen in text
        assert advice in text
        assert source in text
    for what, value in (*said.identity, *said.plan, *said.flow):
        assert what in text
        assert value in text
    assert "<strong>not stated</strong>" in html


def test_page_holds_no_script_and_fetches_nothing(html: str) -> None:
    assert "<script" not in html
    assert "alert(2)" in html
    assert escape(HOSTILE) in html
    assert HOSTILE not in html
    assert "<i>ill" not in html
    assert "<u>" not in html
    assert "default-src 'none'" in html
    assert not re.search(r"""(?:src|href|srcset)="(?!data:)""", html)
    assert "url(" not in html


def test_page_has_headings_in_order_and_an_alternative_for_each_chart(
    given: Content, html: str
) -> None:
    levels = [int(level) for level in re.findall(r"<h(\d)>", html)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(b - a <= 1 for a, b in pairwise(levels))
    assert html.count("<picture>") == 5
    for picture in (given.first, given.balance, given.limits, given.rounds, given.bags):
        assert picture is not None
        assert f'alt="{escape(picture.alt)}"' in html


def test_characters_that_cannot_be_set_or_that_turn_the_text_are_left_out(html: str) -> None:
    assert "@ref turned" in html
    assert not {"\u202e", "\u0007"} & set(html)
    assert cleaned({"a": ("b\ufffe", ["c\u2067"])}) == {"a": ("b", ["c"])}


def test_every_verdict_and_severity_has_its_look_in_both_forms() -> None:
    template = TEMPLATE.read_text("utf-8")
    assert set(LOOKS) == set(get_args(Word))
    for word in get_args(Word):
        assert f'"{word}": (' in template
    for severity in SEVERITIES:
        assert f"{severity}: " in template


def test_held_out_figures_hold_every_candidate_and_measure(given: Content) -> None:
    held, by_estimator = given.figures
    ((_, rows),) = held.groups
    assert [row[0] for row in rows] == ["majority class", "linear discriminant"]
    assert all(cell for row in rows for cell in row)
    assert len(held.header) == 6  # name, accuracy, balanced accuracy, two classes, AUC
    assert [len(rows) for _, rows in by_estimator.groups] == [2, 2]
    assert {".632", ".632+"} <= set(by_estimator.header)


def test_more_findings_than_fit_on_page_1_are_told_and_follow(given: Content) -> None:
    some = given.findings[:1] * (FIRST_FINDINGS + 2)
    assert "Further findings" in [text for _, text in headings(replace(given, findings=some))]
    assert "Further findings" not in [
        text for _, text in headings(replace(given, findings=some[:FIRST_FINDINGS]))
    ]


def test_without_limits_and_findings_both_forms_still_stand(given: Content) -> None:
    bare = replace(given, findings=(), sources=(), limits=None)
    bare = replace(bare, summary=replace(bare.summary, limits=()))
    assert pdf(bare).startswith(b"%PDF-")
    assert '<ul class="limits">' not in page(bare)
    assert "None of the checks found anything" in page(bare)


def test_a_character_no_font_has_still_gives_a_pdf_that_says_so(
    given: Content, caplog: pytest.LogCaptureFixture
) -> None:
    rare = replace(given, summary=replace(given.summary, answer="A character of nobody: \ue123."))
    with caplog.at_level(logging.WARNING):
        assert pdf(rare).startswith(b"%PDF-")
    assert "without the promises of PDF/A" in caplog.text
    assert "\ue123" in page(rare)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("short words only", "short words only"),
        ("x" * 40, "x" * 32 + "\u200b" + "x" * 8),
        ("f" * 64, "f" * 64),  # a fingerprint is copied, so it stays whole
        ("cross_validation:folds=5,repeats=20", "cross_validation:\u200bfolds=5,\u200brepeats=20"),
    ],
)
def test_long_runs_may_break(text: str, expected: str) -> None:
    assert breakable([text]) == [expected]


def test_a_name_from_right_to_left_or_of_other_scripts_is_set(tmp_path: Path) -> None:
    made = record_of(tmp_path, "odd_files/33_rtl_and_combining.csv", Roles("class"))
    fill(made, jobs=1)
    paths = build(made.folder, tmp_path)
    assert "ملاحظة" in paths[1].read_text("utf-8")


def test_an_unfinished_record_is_refused_with_a_sentence(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    made = record_of(tmp_path, "odd_files/30_formula_injection.csv", Roles("class"))
    with pytest.raises(RecordError, match=r"has no finished rounds yet; a summary can be written"):
        build(made.folder, tmp_path)
    assert main(str(made.folder), str(tmp_path)) == 1
    assert capsys.readouterr().err.count("\n") == 1
    assert not (tmp_path / "summary.pdf").exists()


def test_child_writes_both_files_and_they_come_out_the_same_anywhere(
    record: Record, given: Content, html: str, tmp_path: Path
) -> None:
    made = child.build_in_child(record.folder, tmp_path / "out")
    assert made == (tmp_path / "out" / "summary.pdf", tmp_path / "out" / "summary.html")
    assert made[0].read_bytes() == pdf(given)
    assert made[1].read_text("utf-8") == html
    assert len(list((tmp_path / "out").iterdir())) == 2


def test_child_passes_its_sentence_on(tmp_path: Path) -> None:
    (tmp_path / "nothing").mkdir()
    with pytest.raises(RecordError, match=r"\AThere is no record in 'nothing'\.\Z"):
        child.build_in_child(tmp_path / "nothing", tmp_path)


@pytest.mark.parametrize("code", [-6, 134, 0])
def test_a_child_that_breaks_off_is_told_in_a_sentence(
    code: int, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    ended = subprocess.CompletedProcess[str]([], code, "", "Aborted")
    monkeypatch.setattr(subprocess, "run", lambda *_, **__: ended)
    with pytest.raises(RecordError, match="ended without finishing"):
        child.build_in_child(tmp_path, tmp_path)


def test_a_child_that_takes_too_long_is_given_up(
    record: Record, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(child, "LONGEST", 0.01)
    with pytest.raises(RecordError, match="was given up"):
        child.build_in_child(record.folder, tmp_path)
