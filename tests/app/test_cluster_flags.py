"""Flags of the console command that go with a cluster, and the one that does not; none is needed."""

from contextlib import contextmanager

import pytest

from .test_command import DATA, evaluate

ADDRESS = "tcp://10.0.0.5:8786"
ONE = ("--label", "species", "--scheme", "holdout", "--candidate", "majority")


@pytest.fixture
def filled(monkeypatch):
    """How rounds were asked for: the clusters and the processes, in order; none is carried out."""
    seen: list[object] = []

    @contextmanager
    def on_cluster(address):
        seen.append(address)
        yield

    monkeypatch.setattr("app.command.on_cluster", on_cluster)
    monkeypatch.setattr("app.command.fill", lambda _, *, jobs, tell: seen.append(jobs))
    return seen


@pytest.mark.parametrize("jobs", ["1", "4"])
def test_processes_of_this_machine_are_refused_beside_a_cluster(tmp_path, capsys, filled, jobs):
    out = tmp_path / "record"
    flags = ("--jobs", jobs, "--cluster", ADDRESS)
    assert evaluate(out, DATA / "penguins.csv", *ONE, *flags) == 1
    said = capsys.readouterr()
    assert said.out == ""
    assert said.err == (
        f"`jobs` counts processes on this machine and a cluster has its own; got {jobs} and the "
        f"cluster '{ADDRESS}'. Give one of the two.\n"
    )
    assert filled == []
    assert not out.exists()


@pytest.mark.parametrize(
    ("flags", "asked"),
    [(("--cluster", ADDRESS), [ADDRESS, -1]), (("--jobs", "4"), [4]), ((), [None])],
)
def test_either_alone_is_taken_as_given(tmp_path, filled, flags, asked):
    assert evaluate(tmp_path / "record", DATA / "penguins.csv", *ONE, *flags) == 0
    assert filled == asked
