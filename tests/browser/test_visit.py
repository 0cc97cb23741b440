"""A visit in a real browser: from a table to the answer, and what may happen on the way."""

import csv
import re
import time
from pathlib import Path

import pytest
from playwright.sync_api import Page, expect

pytestmark = pytest.mark.browser

DATA = Path(__file__).parents[1] / "data"
AT_REST = "[data-testid=stApp][data-test-script-state=notRunning]"
ENDED = "Summary (PDF)"
EVALUATION = 120_000  # milliseconds a small evaluation may take on a slow machine
expect.set_options(timeout=60_000)


def at_rest(page: Page) -> None:
    page.wait_for_selector(AT_REST)


def press(page: Page, name: str) -> None:
    page.get_by_role("button", name=name, exact=True).first.click()


def see(page: Page, text: str | re.Pattern[str], timeout: float = 60_000) -> None:
    expect(page.get_by_text(text).first).to_be_visible(timeout=timeout)


def take_demo(page: Page, address: str) -> None:
    page.goto(address)
    press(page, "Take the demo table")
    see(page, "746 rows were read")
    at_rest(page)


def to_settings(page: Page) -> None:
    press(page, "Go on to Settings")
    see(page, "As set:")
    at_rest(page)


def unfold(page: Page, words: str) -> None:
    page.locator("summary").filter(has_text=words).first.click()


def fill(page: Page, label: str, value: str) -> None:
    box = page.get_by_role("spinbutton", name=label)
    box.fill(value)
    box.press("Tab")
    at_rest(page)


def turn(page: Page, *candidates: str) -> None:
    """Put candidates in that are out, and take out those that are in."""
    for name in candidates:
        page.get_by_role("button", name=name, exact=True).click()
        at_rest(page)


def few_rounds(page: Page, *, repeats: int, rounds: int) -> None:
    """Only the majority and logistic regression, and few rounds."""
    turn(page, "nearest neighbours", "random forest")
    unfold(page, "Cross-validation, repeated:")
    fill(page, "Repeats", str(repeats))
    unfold(page, "Bootstrap:")
    fill(page, "Rounds", str(rounds))
    see(page, "As set: 2 candidates, each answering for every")
    see(page, f"{(5 * repeats + rounds + 1) * 2:,} fits")


def fits_across(page: Page) -> None:
    """Nothing sticks out to the right."""
    wide = page.evaluate(
        "() => [document.documentElement, document.querySelector('[data-testid=stMain]')]"
        ".map(e => e.scrollWidth - e.clientWidth)"
    )
    assert wide == [0, 0]


def charts_are_drawn(page: Page) -> None:
    """Estimates by both measures, classes, rounds, and in-bag against out-of-bag scores."""
    charts = page.get_by_test_id("stVegaLiteChart").filter(visible=True)
    expect(charts).to_have_count(5)
    for at in range(5):
        chart = charts.nth(at)
        chart.scroll_into_view_if_needed()
        drawn = chart.locator("canvas, svg.marks")
        expect(drawn).to_be_visible()
        box = drawn.bounding_box()
        assert box is not None
        assert box["width"] > 200
        assert box["height"] > 60
        assert "Scheme: " in (chart.get_attribute("aria-label") or "")


def figures_are_taken_along(page: Page) -> None:
    """The file of a chart's figures holds what its table shows."""
    unfold(page, "These figures as a table")
    shown = page.locator("table").filter(visible=True).first
    expect(shown).to_be_visible()
    with page.expect_download() as download:
        page.get_by_role("button", name="Download as CSV").filter(visible=True).first.click()
    text = Path(download.value.path()).read_text("utf-8-sig")
    cells = shown.locator("th, td").all_inner_texts()
    assert len(cells) >= 8
    assert [cell for line in csv.reader(text.splitlines()) for cell in line] == cells


def answer_of(page: Page) -> str:
    return page.get_by_text("is expected to be right in").first.inner_text()


def test_from_the_demo_table_to_the_answer(page, dashboard):
    take_demo(page, dashboard.address)
    to_settings(page)
    fill(page, "Acceptance limit, failing lots found", "90")
    fill(page, "Acceptance limit, good lots passed", "80")
    few_rounds(page, repeats=4, rounds=40)
    press(page, "Evaluate")
    see(page, re.compile("rounds finished|First figures|" + re.escape(ENDED)))
    expect(page.get_by_role("button", name=ENDED)).to_be_visible(timeout=EVALUATION)
    at_rest(page)

    heading = page.get_by_role("heading", level=1)
    expect(heading).to_have_text("Failing lots: not shown yet. Good lots: shown.")
    answer = answer_of(page)
    assert "logistic regression is expected to be right in" in answer
    assert "Always answering ‘good’ would be right in 79" in answer
    see(page, "What to weigh before relying on this")
    see(page, "Few failing lots: 38, where a limit asks for 75")
    charts_are_drawn(page)
    see(page, "All figures")
    figures_are_taken_along(page)

    # the address finds it again, in the same tab and in another one
    assert re.search(r"/results\?record=\d{8}-\d{6}-[0-9a-f]{6}$", page.url)
    page.reload()
    expect(page.get_by_role("button", name=ENDED)).to_be_visible()
    at_rest(page)
    assert answer_of(page) == answer
    charts_are_drawn(page)

    # nothing sticks out on a telephone
    page.set_viewport_size({"width": 400, "height": 900})
    charts_are_drawn(page)
    fits_across(page)

    press(page, ENDED)
    expect(page.get_by_role("button", name="Summary as PDF")).to_be_visible(timeout=EVALUATION)
    fits_across(page)
    with page.expect_download() as download:
        press(page, "Summary as PDF")
    assert Path(download.value.path()).read_bytes().startswith(b"%PDF-")


def test_narrow_pages_do_not_scroll_sideways(page, dashboard):
    page.set_viewport_size({"width": 400, "height": 900})
    page.goto(dashboard.address)
    see(page, "No table yet.")
    fits_across(page)
    take_demo(page, dashboard.address)
    fits_across(page)
    to_settings(page)
    unfold(page, "Cross-validation, repeated:")
    unfold(page, "Settings of the candidates")
    at_rest(page)
    fits_across(page)


def test_a_file_of_ones_own_through_the_file_chooser(page, dashboard):
    page.goto(dashboard.address)
    at_rest(page)
    with page.expect_file_chooser() as chooser:
        page.get_by_role("button", name=re.compile("Upload|Browse")).first.click()
    chooser.value.set_files(DATA / "penguins.csv")
    see(page, "344 rows were read")
    expect(page.get_by_label("Label: the class of each case")).to_have_value("species")
    at_rest(page)
    to_settings(page)
    few_rounds(page, repeats=2, rounds=20)
    press(page, "Evaluate")
    expect(page.get_by_role("button", name=ENDED)).to_be_visible(timeout=EVALUATION)
    at_rest(page)
    expect(page.get_by_role("heading", level=1)).to_have_text(
        "Right on nearly all further cases like these."
    )
    answer = answer_of(page)
    for name in ("Adelie", "Chinstrap", "Gentoo"):
        assert f"{name} cases found" in answer
    charts_are_drawn(page)


def test_a_bad_file_says_why_and_the_table_stays(page, dashboard):
    take_demo(page, dashboard.address)
    page.locator("input[type=file]").set_input_files(DATA / "odd_files" / "09_ragged_rows.csv")
    see(page, "Rows of ‘09_ragged_rows.csv’ differ in width")
    see(page, "746 rows were read")


def test_cancelling_takes_less_than_five_seconds_and_it_can_go_on(page, dashboard):
    take_demo(page, dashboard.address)
    to_settings(page)
    turn(page, "boosted trees")
    press(page, "Evaluate")
    see(page, "rounds finished")
    expect(page.get_by_role("button", name="Cancel")).to_be_visible()
    began = time.monotonic()
    press(page, "Cancel")
    see(page, "This evaluation was cancelled", timeout=5_000)
    assert time.monotonic() - began < 5
    expect(page.get_by_role("button", name="Go on from the finished rounds")).to_be_visible()
    press(page, "Go on from the finished rounds")
    expect(page.get_by_role("button", name="Cancel")).to_be_visible()
    press(page, "Cancel")
    see(page, "This evaluation was cancelled", timeout=5_000)


def test_a_server_stopped_half_way_leaves_what_had_finished(page, dashboard):
    take_demo(page, dashboard.address)
    to_settings(page)
    few_rounds(page, repeats=2, rounds=60)
    turn(page, "boosted trees")  # the slowest, so that there is a half-way
    press(page, "Evaluate")
    see(page, re.compile(r"\b\d\d of 71 rounds finished"))
    address = page.url
    dashboard.stop()
    page.goto("about:blank")
    (record,) = dashboard.records.iterdir()
    ends = time.monotonic() + 10
    while '"interrupted"' not in (record / "status.json").read_text("utf-8"):
        assert time.monotonic() < ends, "the worker outlived its server"
    kept = {path.name for path in (record / "chunks").glob("[!.]*")}

    dashboard.start()
    page.goto(address)
    see(page, re.compile(r"This evaluation was interrupted; \d+ of 71 rounds had finished"))
    press(page, "Go on from the finished rounds")
    see(page, "rounds finished")
    expect(page.get_by_text("rounds finished")).to_be_hidden(timeout=EVALUATION)
    expect(page.get_by_role("button", name=ENDED)).to_be_visible()
    see(page, "is expected to be right in")
    expect(page.get_by_text("This evaluation was interrupted")).to_be_hidden()
    assert {path.name for path in (record / "chunks").glob("[!.]*")} > kept
    assert (record / "results.csv").is_file()


def test_an_address_of_no_record_says_so(page, dashboard):
    page.goto(f"{dashboard.address}/results?record=../x")
    see(page, "This address names no record kept here.")
    # a visit may begin at any page of a server just started: it is one dashboard all the same
    expect(page.get_by_test_id("stTopNavLinkContainer").first).to_be_visible()
    expect(page.get_by_test_id("stSidebarNav")).to_have_count(0)
    assert page.title() == "Withheld"


HOSTILE = ["<b>bold</b>", "www.a.example", ":smile: http://b.example", "# [c](http://c.example)"]


def test_names_from_a_file_stay_text(page, dashboard, tmp_path):
    header = ",".join(['"<img src=x onerror=alert(1)>"', "a@d.example", "class"])
    rows = [f"{i * 1.7},{i % 7},{HOSTILE[i % 4]}" for i in range(32)]
    (tmp_path / "hostile.csv").write_text("\n".join([header, *rows]), "utf-8")
    page.on("dialog", lambda dialog: pytest.fail(f"a script ran: {dialog.message}"))
    page.goto(dashboard.address)
    at_rest(page)
    page.locator("input[type=file]").set_input_files(tmp_path / "hostile.csv")
    see(page, "32 rows were read")
    at_rest(page)
    made_of_names = page.locator(
        "a[href*=example], [data-testid=stMain] img[src=x], [data-testid=stMain] b"
    )
    assert made_of_names.count() == 0
    see(page, re.compile("Few (‘)?# \\[c\\]"))
    to_settings(page)
    assert made_of_names.count() == 0
    assert page.get_by_text("😄").count() == 0
