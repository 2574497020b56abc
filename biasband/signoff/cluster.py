"""A cluster: a scheduler of dask.distributed and its workers, reached by its address."""

from __future__ import annotations

import asyncio
import logging
from collections.abc import Iterator
from concurrent.futures import CancelledError, ThreadPoolExecutor
from contextlib import contextmanager
from typing import Any
from urllib.parse import urlsplit

import numpy as np

from biasband.constants import VERSION
from biasband.errors import BiasbandError, UsageError

PATIENCE = 5.0
"""[s] A scheduler that has not answered by then is not there."""

LOGGERS = ("distributed", "distributed.client", "tornado.application")
"""Those of distributed's loggers that write to the terminal."""


@contextmanager
def scheduler_at(address: str) -> Iterator[Any]:
    """Connect to a scheduler as a `distributed.Client`, closed at the end.

    A task whose worker is lost is done again by another; the scheduler gives it up after three workers.

    Raises UsageError for an address that is none, a scheduler that does not answer within `PATIENCE`, or has
    no workers, or workers with other versions; BiasbandError where the cluster is lost on the way.
    """
    if not _is_address(address):
        raise UsageError(f"--cluster: no scheduler can be at {address!r}; allowed: tcp://host:port")
    distributed = _distributed()
    with _quiet():
        client = _connected(distributed, address)
        try:
            _check_workers(client, address)
            yield client
        except CancelledError as error:
            raise BiasbandError(f"--cluster: the scheduler at {address} is gone") from error
        except distributed.KilledWorker as error:
            raise BiasbandError(
                "--cluster: one task was begun on several workers, and each died of it, most likely because "
                "its memory ran out: give workers more memory or fewer threads"
            ) from error
        finally:
            client.close()


def _is_address(text: str) -> bool:
    try:
        parts = urlsplit(text)
        return parts.scheme == "tcp" and bool(parts.hostname) and parts.port is not None
    except ValueError:  # a port that is no number, or out of range
        return False


def _distributed() -> Any:
    try:
        import distributed
    except ImportError as error:
        raise UsageError(
            "--cluster: needs dask.distributed, which is not installed: pip install 'biasband[cluster]'"
        ) from error
    return distributed


@contextmanager
def _quiet() -> Iterator[None]:
    """Keep distributed from writing to the terminal: what goes wrong comes as an exception."""
    loggers = [logging.getLogger(name) for name in LOGGERS]
    before = [each.level for each in loggers]
    try:
        for each in loggers:
            each.setLevel(logging.CRITICAL + 1)
        yield
    finally:
        for each, level in zip(loggers, before, strict=True):
            each.setLevel(level)


def _connected(distributed: Any, address: str) -> Any:
    """Connect, after a handshake: where connections are taken and nothing is said, Client waits forever."""
    try:
        with ThreadPoolExecutor(1) as apart:  # this thread may have a running loop, as in a notebook
            apart.submit(lambda: asyncio.run(_shake_hands(distributed, address))).result()
        return distributed.Client(address, timeout=PATIENCE, set_as_default=False)
    except Exception as error:  # anything may answer: a greeting has been read as 3 EiB to come
        raise UsageError(f"--cluster: no scheduler answers at {address} within {PATIENCE:g} s") from error


async def _shake_hands(distributed: Any, address: str) -> None:
    connection = await asyncio.wait_for(distributed.comm.connect(address, timeout=PATIENCE), PATIENCE)
    await connection.close()


def _check_workers(client: Any, address: str) -> None:
    """Raise UsageError unless there are workers, and all would count the same bytes as this process."""
    found = client.run(versions, on_error="return")
    if not found:
        raise UsageError(f"--cluster: the scheduler at {address} has no workers yet")
    wanted = versions()
    others = sum(each != wanted for each in found.values())
    if others:
        ours = ", ".join(f"{name} {version}" for name, version in wanted.items())
        raise UsageError(f"--cluster: {others} of {len(found)} workers do not have what is here: {ours}")


def versions() -> dict[str, str]:
    """Name the versions of what decides the bytes of a result."""
    import scipy

    return {"biasband": VERSION, "numpy": np.__version__, "scipy": scipy.__version__}
