"""Summary: the evaluation as PDF and as one HTML file."""

import tempfile
from pathlib import Path

import streamlit as st

from app import look, state
from app.print.child import build_in_child
from evalcore.answer import CAUTION, answer, title
from evalcore.errors import EvalError
from evalcore.record import Record


@st.cache_data(max_entries=8, show_spinner="Setting the summary …")
def built(folder: str, done: int) -> tuple[bytes, bytes]:
    """PDF and HTML of a record after so many rounds."""
    with tempfile.TemporaryDirectory() as place:
        pdf, page = build_in_child(Path(folder), Path(place))
        return pdf.read_bytes(), page.read_bytes()


def offer(record: Record) -> None:
    """Both files to take away."""
    done = record.status().done
    evaluation = state.evaluation(record, done)
    if evaluation is None:
        look.page("Summary")
        st.write("No round has finished yet; the summary needs at least one.")
        return
    look.page("Summary", [("Record", record.name), ("Table", record.about["name"])])
    look.lead(f"{title(evaluation)} {answer(evaluation)}")
    pdf, html = built(str(record.folder), done)
    with st.container(horizontal=True):
        st.download_button(
            "Summary as PDF", pdf, f"summary-{record.name}.pdf", "application/pdf",
            type="primary", on_click="ignore",
        )  # fmt: skip
        st.download_button(
            "Summary as HTML", html, f"summary-{record.name}.html", "text/html", on_click="ignore"
        )
    st.write(
        "Both hold the same: the question, the answer, acceptance limits, estimates with "
        "intervals, the spread of rounds, in-bag against out-of-bag scores, what to weigh, the "
        "design, the plan, and what a reviewer needs to repeat it. What nobody stated is printed "
        "as not stated."
    )


def main() -> None:
    """The page."""
    try:
        record = state.record()
        if record is not None:
            offer(record)
    except EvalError as error:
        st.error(look.safe(str(error)))
        return
    if record is None:
        look.page("Summary")
        st.write("No evaluation yet. Choose a table and settings, then Evaluate.")
        if st.button("Go to Settings", type="primary"):
            st.switch_page("settings.py")
    look.caution(CAUTION)


main()
