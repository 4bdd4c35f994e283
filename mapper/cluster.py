"""Many processes or machines: a dask.distributed scheduler by address, or processes here."""

from __future__ import annotations

import logging
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import Any

from mapper.errors import JobError

LOCAL = "local"
CONNECT_SECONDS = 15.0


@contextmanager
def connected(address: str, processes: int) -> Iterator[Any]:
    """Give a client of the scheduler at ``address``.

    Parameters
    ----------
    address : such as ``tcp://host:8786``, or "local" for ``processes`` one-thread processes on
        this machine, which end with the block.

    Raises
    ------
    JobError where no scheduler answers, or it has no workers.
    """
    from distributed import Client, LocalCluster  # noqa: PLC0415 - only where it is asked for

    logging.getLogger("distributed").setLevel(logging.CRITICAL)  # what matters is raised
    if address == LOCAL:
        with (
            LocalCluster(
                n_workers=processes,
                threads_per_worker=1,
                dashboard_address=None,
                silence_logs=logging.CRITICAL,
            ) as cluster,
            Client(cluster, set_as_default=False) as client,
        ):
            yield client
        return
    try:
        client = Client(address, timeout=CONNECT_SECONDS, set_as_default=False)
    except (OSError, ValueError) as cause:
        raise JobError(
            f"no scheduler answers at {address!r}",
            where="--scheduler",
            fix="the address that dask scheduler prints, or --scheduler local",
        ) from cause
    with client:
        _wait_for_workers(client, address)
        yield client


def _wait_for_workers(client: Any, address: str) -> None:
    try:
        client.wait_for_workers(1, timeout=CONNECT_SECONDS)
    except TimeoutError as cause:
        raise JobError(
            f"the scheduler at {address!r} has no workers",
            where="--scheduler",
            fix=f"start some with: dask worker {address}",
        ) from cause


def finished(futures: Sequence[Any]) -> Iterator[Any]:
    """Give results as they come in; the first error is raised and the rest are let go.

    Raises
    ------
    JobError where one task has ended several workers; whatever else a task raised.
    """
    from distributed import KilledWorker, as_completed  # noqa: PLC0415

    if not futures:
        return
    for future in as_completed(futures, loop=futures[0].client.loop):
        try:
            yield future.result()
        except KilledWorker as cause:
            raise JobError(
                "several workers ended while they computed the same block",
                where="--scheduler",
                fix="a smaller --memory and the same command again, or workers with more memory",
            ) from cause
