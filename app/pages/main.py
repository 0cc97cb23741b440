"""The dashboard: its pages in order.

It stands among them: beside a folder named `pages`, the library would take each file in it for a
page of its own, and show it so to a visit that begins anywhere but at the first.
"""

from pathlib import Path

import streamlit as st

HERE = Path(__file__).parent

st.set_page_config(
    page_title="Withheld", page_icon=str(HERE.parent / "icon.png"), layout="centered"
)
st.navigation(
    [
        st.Page(HERE / "upload.py", title="Upload", default=True),
        st.Page(HERE / "settings.py", title="Settings"),
        st.Page(HERE / "results.py", title="Results"),
        st.Page(HERE / "summary.py", title="Summary"),
    ],
    position="top",
).run()
