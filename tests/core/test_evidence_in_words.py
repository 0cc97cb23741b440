"""README quotes the packaged evidence as it is."""

from pathlib import Path

from evalcore.evidence import lines
from tests.studies.evidence_in_words import table, too_low

README = (Path(__file__).parents[2] / "README.md").read_text("utf-8")


def test_readme_has_the_table():
    assert table(lines()) in README


def test_readme_names_every_cell_that_fell_short():
    assert too_low(lines()) in README
    # a cell that fell short is in the packaged table, so this text can tell
    assert too_low(lines()).count("\n- ") + 1 == len(
        [line for line in lines() if line.scheme == "default" and line.short]
    )
