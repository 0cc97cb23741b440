"""The demo tables, how they were made, and what they are (see README.md)."""
