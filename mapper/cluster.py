"""Many processes or machines: a dask.distributed scheduler by address, or processes here."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import Any

from mapper.errors import JobError

LOCAL = "local"
CONNECT_SECONDS = "15s"


@contextmanager
def connected(address: str, processes: int) -> Iterator[Any]:
    """Give a client of the scheduler at ``address``.

    Parameters
    ----------
    address : such as ``tcp://host:8786``, or "local" for ``processes`` one-thread processes on
        this machine, which end with the block.

    Raises
    ------
    JobError where no scheduler answers.
    """
    from distributed import Client, LocalCluster  # noqa: PLC0415 - only where it is asked for

    if address == LOCAL:
        with (
            LocalCluster(
                n_workers=processes, threads_per_worker=1, dashboard_address=None
            ) as cluster,
            Client(cluster) as client,
        ):
            yield client
        return
    try:
        client = Client(address, timeout=CONNECT_SECONDS)
    except (OSError, ValueError) as cause:
        raise JobError(
            f"no scheduler answers at {address!r}",
            where="--scheduler",
            fix="the address that dask scheduler prints, or --scheduler local",
        ) from cause
    with client:
        yield client


def finished(futures: Sequence[Any]) -> Iterator[Any]:
    """Give results as they come in; the first error is raised and the rest are let go."""
    from distributed import as_completed  # noqa: PLC0415

    for future in as_completed(futures):
        yield future.result()
