"""The dashboard: its pages in order."""

from pathlib import Path

import streamlit as st

HERE = Path(__file__).parent

st.set_page_config(page_title="Withheld", page_icon=str(HERE / "icon.png"), layout="centered")
st.navigation(
    [
        st.Page(HERE / "pages" / "upload.py", title="Upload", default=True),
        st.Page(HERE / "pages" / "settings.py", title="Settings"),
        st.Page(HERE / "pages" / "results.py", title="Results"),
        st.Page(HERE / "pages" / "summary.py", title="Summary"),
    ],
    position="top",
).run()
