"""Starts the dashboard on this machine alone."""

import os
import socket
import sys
import threading
import time
import webbrowser
from pathlib import Path

from evalcore.errors import EvalError

HOST = "127.0.0.1"
INK, SOFT, PAPER, PANEL, BORDER = "#12181B", "#4F5960", "#FFFFFF", "#F6F5F1", "#868C90"
PINE, STRAW_INK, STRAW, WINE, WINE_PALE, PINE_PALE = (
    "#17494F", "#7A5B00", "#F7F0DC", "#7A1F3D", "#F4E6EA", "#E6EFEF",
)  # fmt: skip

THEME = {
    "base": "light",
    "primaryColor": PINE,
    "backgroundColor": PAPER,
    "secondaryBackgroundColor": PANEL,
    "textColor": INK,
    "linkColor": PINE,
    "linkUnderline": True,
    "font": "sans-serif",
    "headingFont": "serif",
    "headingFontSizes": ["1.75rem", "1.3rem", "1.0625rem", "1rem", "1rem", "1rem"],
    "headingFontWeights": [600, 600, 600, 600, 600, 600],
    "baseRadius": "2px",
    "buttonRadius": "2px",
    "borderColor": BORDER,
    "showWidgetBorder": True,
    # badges: grave, moderate, note, shown
    "redColor": WINE,
    "redTextColor": WINE,
    "redBackgroundColor": WINE_PALE,
    "orangeColor": STRAW_INK,
    "orangeTextColor": STRAW_INK,
    "orangeBackgroundColor": STRAW,
    "grayColor": SOFT,
    "grayTextColor": SOFT,
    "grayBackgroundColor": PANEL,
    "blueColor": PINE,
    "blueTextColor": PINE,
    "blueBackgroundColor": PINE_PALE,
}
CONFIG = {
    "server.address": HOST,
    "server.allowedHosts": [HOST, "localhost"],
    "server.fileWatcherType": "none",
    "server.headless": True,
    "server.maxUploadSize": 50,
    "server.showEmailPrompt": False,
    "browser.gatherUsageStats": False,
    "client.toolbarMode": "minimal",
    "client.showErrorDetails": "none",
    "client.showErrorLinks": False,
    "logger.level": "warning",
}


def serve(*, port: int, records: Path | None, browser: bool) -> None:
    """Run the dashboard until it is stopped.

    Parameters
    ----------
    port : int
        First port to try; the next free one of twenty is taken.
    records : Path or None
        Where records are kept; the user's data folder by default.
    browser : bool
        Whether to open a browser window, where there is a display.

    Raises
    ------
    EvalError
        No free port, or the folder for records cannot be made.
    """
    # first: altair looks at pandas while another thread may still be importing it
    import pandas  # noqa: F401
    import streamlit as st

    if records is not None:
        try:
            records.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise EvalError(f"Records cannot be kept in {records}: {error.strerror}.") from error
        os.environ["WITHHELD_RECORDS"] = str(records.resolve())
    free = _free_port(port)
    address = f"http://{HOST}:{free}"
    print(f"Withheld is open at {address} (stop it with Ctrl+C)", file=sys.stderr, flush=True)
    if browser and _has_display():
        threading.Thread(target=_open, args=(address, free), daemon=True).start()
    config = CONFIG | {"server.port": free} | {f"theme.{k}": v for k, v in THEME.items()}
    st.App(Path(__file__).parent / "pages" / "main.py").run(config=config)


def _free_port(first: int) -> int:
    for port in range(first, first + 20):
        with socket.socket() as probe:
            probe.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
            try:
                probe.bind((HOST, port))
            except OSError:
                continue
            return port
    raise EvalError(
        f"No free port from {first} to {first + 19}; name another with --port, between 1 and 65535."
    )


def _has_display() -> bool:
    return sys.platform in ("win32", "darwin") or bool(
        os.environ.get("DISPLAY") or os.environ.get("WAYLAND_DISPLAY")
    )


def _open(address: str, port: int) -> None:
    """Open the browser once the server answers."""
    for _ in range(100):
        with socket.socket() as probe:
            if probe.connect_ex((HOST, port)) == 0:
                webbrowser.open(address)
                return
        time.sleep(0.1)
