"""Shared by all tests: where the data lie, and property tests that draw the same examples each time."""

import pathlib

import pytest
from hypothesis import settings

settings.register_profile("fixed", derandomize=True, deadline=None, max_examples=40)
settings.load_profile("fixed")


@pytest.fixture(scope="session")
def data() -> pathlib.Path:
    """The folder of test data."""
    return pathlib.Path(__file__).parent / "data"
