"""The summary of a record on paper: a PDF, and beside it one self-contained HTML page."""
