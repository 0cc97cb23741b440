"""Rounds on other machines: an existing Dask cluster in place of processes on this one."""

from collections.abc import Iterator
from contextlib import contextmanager

from evalcore.errors import PlanError

PATIENCE = 10.0  # seconds to wait for a scheduler to answer


@contextmanager
def on_cluster(address: str) -> Iterator[None]:
    """Within this block rounds that ask for processes run on a cluster.

    Every worker needs this package in the same version. Digits are those of one core on the same
    versions and kind of processor, whatever the number of workers or if one is lost.

    Parameters
    ----------
    address : str
        Of a running Dask scheduler, e.g. ``tcp://10.0.0.5:8786``.

    Raises
    ------
    PlanError
        The extra `cluster` is not installed, or nobody answers at the address.
    """
    try:
        from distributed import Client
    except ImportError as error:
        raise PlanError(
            "Rounds on a cluster need the extra `cluster`: pip install 'withheld[cluster]'."
        ) from error
    from joblib import parallel_config

    try:
        client = Client(address, timeout=PATIENCE)  # type: ignore[no-untyped-call]
    except (OSError, ValueError) as error:
        raise PlanError(
            f"No scheduler answers at {address!r}; start one and its workers, and give its "
            "address, such as tcp://10.0.0.5:8786."
        ) from error
    with client, parallel_config(backend="dask"):
        yield
