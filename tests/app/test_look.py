"""Text from files is shown as it is: none of it becomes markup, a link, a colour or a script."""

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st
from streamlit.testing.v1 import AppTest

from app import look
from evalcore.figures import Finding

UNSEEN = "\u200b\u2060"  # characters without width, which keep others apart
CONTROL = re.compile(r"[\\`*_{}\[\]<>|$~&]")
HOSTILE = (
    "*b*", "**b**", "_i_", "__b__", "~~d~~", "`c`", "```c```", ":red[x]", ":blue-badge[x]",
    "[a](http://evil.example)", "![i](http://evil.example/x.png)", "<http://evil.example>", "# h",
    "###### h", "- item", "+ item", "* item", "1. item", "2) item", "> quote", "---", "===",
    "a\n# b", "a\n===", "a\n---", "a\n- b", "a | b\n--- | ---\nc | d", "$x^2$", "$$x$$", "&amp;",
    "<b>b</b>", "<script>alert(1)</script>", "a\\*b", "\\", "[^1]", "- [ ] task", "http://a.example",
    "https://a.example/b?c=d", "HTTP://A.EXAMPLE", "www.a.example", "a@b.example", ":smile:",
    ":material/home:", ":streamlit:", "a -- b", "a -> b", "a <- b", "a >= b", "a <= b", "a ~= b",
)  # fmt: skip
# what Streamlit makes something else of even where every character is escaped: it looks at the
# text once escapes are resolved (seen in the browser with Streamlit 1.67)
MADE_INTO_SOMETHING = re.compile(
    r"https?://|www\.|\w@\w|:\w+:|:material/|(?<!\S)(--|->|<-|>=|<=|~=)(?!\S)", re.IGNORECASE
)


def resolved(markdown: str) -> str:
    """Escapes resolved as Markdown does: a backslash before ASCII punctuation goes."""
    return re.sub(r"\\([!-/:-@\[-`{-~])", r"\1", markdown)


def seen(markdown: str) -> str:
    """What a reader sees of escaped text."""
    return resolved(markdown).translate(dict.fromkeys(map(ord, UNSEEN)))


@pytest.mark.parametrize("text", HOSTILE)
def test_hostile_text_is_shown_as_it_is(text):
    assert seen(look.safe(text)) == text


@pytest.mark.parametrize("text", HOSTILE)
def test_no_control_character_is_left_bare(text):
    bare = re.sub(r"\\[!-/:-@\[-`{-~]", "", look.safe(text))
    assert not CONTROL.search(bare)


@pytest.mark.parametrize("text", HOSTILE)
def test_nothing_is_left_that_becomes_something_else_once_escapes_are_resolved(text):
    assert not MADE_INTO_SOMETHING.search(resolved(look.safe(text)))


@pytest.mark.parametrize("text", HOSTILE)
def test_no_line_begins_like_a_heading_a_list_or_a_rule(text):
    for line in look.safe(text).splitlines():
        assert not re.match(r"\s*([#+>*=-]|\d+[.)])", line)


@given(st.text(alphabet=st.sampled_from("ab1 .:)(#*_`~[]<>|$&\\-+=@/!{}\n")))
def test_any_mixture_is_shown_as_it_is(text):
    made = look.safe(text)
    assert seen(made) == text
    assert not CONTROL.search(re.sub(r"\\[!-/:-@\[-`{-~]", "", made))


@pytest.mark.parametrize(
    "text", ["", "plain words, with commas", "failing lots: 38", "très sec", "80–95\u00a0%", "性別"]
)
def test_harmless_text_is_left_alone(text):
    assert look.safe(text) == text


NAME = "<img src=x onerror=alert(1)>&amp;"


def a_page() -> None:
    from app import look
    from evalcore.figures import Finding

    name = "<img src=x onerror=alert(1)>&amp;"
    look.page(f"# {name}", [(name, name)])
    look.lead(name)
    look.soft(name)
    look.caution(name)
    look.table([{name: "=1+1", "b": name}, {name: "-0.5"}], key="t")
    given = [
        Finding("failed", severity, name, f"{name} {i}", name, name, 1, 0, "elementary")
        for i, severity in enumerate(["grave"] * 6 + ["moderate", "note"])
    ]
    look.findings(given, empty="")


@pytest.fixture(scope="module")
def shown() -> AppTest:
    at = AppTest.from_function(a_page, default_timeout=30).run()
    assert not at.exception
    return at


def test_names_in_html_are_escaped(shown):
    bodies = [element.proto.body for element in shown.get("html")]
    assert sum("&lt;img src=x onerror=alert(1)&gt;&amp;amp;" in body for body in bodies) == 5
    assert not any("<img src=x" in body for body in bodies)


def test_names_in_markdown_are_escaped(shown):
    assert seen(shown.title[0].value) == f"# {NAME}"
    for text in [shown.title[0].value, *(m.value for m in shown.markdown)]:
        assert "<img" not in text.replace("\\<", "")


def test_five_findings_stand_open_and_the_rest_in_one_row(shown):
    labels = [e.label for e in shown.expander]
    assert len(labels) == 6
    assert all(label.startswith(":red-badge[grave] ") for label in labels[:5])
    assert labels[5] == ":gray-badge[more] 3 more"
    assert seen(labels[0]).endswith(f"{NAME} 0")


def test_without_findings_a_sentence_stands_there():
    def nothing() -> None:
        from app import look

        look.findings([], empty="No check raised a *doubt*.")

    at = AppTest.from_function(nothing, default_timeout=30).run()
    assert [seen(m.value) for m in at.markdown] == ["No check raised a *doubt*."]
    assert not at.expander


def test_a_severity_has_its_badge():
    from evalcore.figures import SEVERITIES

    assert set(look.BADGE) == set(SEVERITIES)
    assert Finding("x", "note", "", "", "", "", 0, 0, "elementary").severity in look.BADGE
