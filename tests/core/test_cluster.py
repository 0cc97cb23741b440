"""Rounds on a local cluster of two workers: the same digits, and a lost worker survived."""

import os
import signal
import threading

import pytest
from distributed import Client, LocalCluster

from evalcore.candidates import CANDIDATES
from evalcore.choice import choose
from evalcore.cluster import on_cluster
from evalcore.errors import PlanError
from evalcore.plan import Plan
from evalcore.record import Record
from evalcore.schemes import SCHEMES
from evalcore.table import Roles
from evalcore.worker import fill

from .checks import DATA, exactly


@pytest.fixture(scope="module")
def cluster():
    with LocalCluster(n_workers=2, threads_per_worker=1, dashboard_address=None) as workers:
        yield workers


def a_record(folder) -> Record:
    plan = Plan(
        Roles("species"),
        (choose(SCHEMES, "cross_validation", repeats=30),),
        (choose(CANDIDATES, "forest", trees=20), choose(CANDIDATES, "logistic")),
    )
    return Record.create(folder, (DATA / "penguins.csv").read_bytes(), "penguins.csv", plan)


def results(record: Record) -> bytes:
    return (record.folder / "results.csv").read_bytes()


@pytest.fixture(scope="module")
def on_one_core(tmp_path_factory) -> bytes:
    record = a_record(tmp_path_factory.mktemp("alone") / "record")
    fill(record, jobs=1)
    return results(record)


def test_the_same_digits_as_on_one_core(cluster, on_one_core, tmp_path):
    record = a_record(tmp_path / "record")
    with on_cluster(cluster.scheduler_address):
        fill(record, jobs=-1)
    assert results(record) == on_one_core


def test_a_lost_worker_is_survived(cluster, on_one_core, tmp_path):
    record = a_record(tmp_path / "record")
    with Client(cluster.scheduler_address) as client:
        first = next(iter(client.run(os.getpid).values()))
    lost = threading.Event()

    def lose_one(status):
        # once some rounds have come back, so that others are under way
        if status.done > 1 and not lost.is_set():
            lost.set()
            os.kill(first, signal.SIGKILL)

    with on_cluster(cluster.scheduler_address):
        fill(record, jobs=-1, tell=lose_one)
    assert lost.is_set()
    assert results(record) == on_one_core


def test_nobody_at_the_address(monkeypatch):
    monkeypatch.setattr("evalcore.cluster.PATIENCE", 0.5)  # seconds; nobody comes anyway
    message = (
        "No scheduler answers at 'tcp://127.0.0.1:9'; start one and its workers, and give its "
        "address, such as tcp://10.0.0.5:8786."
    )
    with pytest.raises(PlanError, match=exactly(message)), on_cluster("tcp://127.0.0.1:9"):
        pass
