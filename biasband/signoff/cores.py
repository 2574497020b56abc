"""All cores of this machine: processes that work for this one, and end with it.

Processes, since threads gain nothing: each array is small enough for the cache, so that numpy holds no
core for long before threads hand over the interpreter's lock (measured on two cores: 0.9 to 1.07 times
the speed of one). They are spawned, not forked: a copy of a process with threads may stand still.
"""

from __future__ import annotations

import multiprocessing
import os
import signal
import sys
from collections.abc import Iterator
from concurrent.futures import Executor, ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from contextlib import contextmanager
from threading import Thread, current_thread, main_thread

from biasband.errors import BiasbandError, UsageError

MOST = 61 if sys.platform == "win32" else 2**10
"""Processes at once: Windows cannot wait for more."""

NOT_STARTED = (
    "worker processes: they ended while they started. Each imports the calling script once more, so that it "
    'must be a file, and what it runs must stand below `if __name__ == "__main__":`. If it is and does, '
    "there is too little memory for {count} of them"
)

LOST = (
    "worker processes: one of {count} was stopped from outside, most likely because memory ran out. Fewer of "
    "them need less: give this process fewer cores (`taskset --cpu-list 0,1 ...`), or the Python call an "
    "executor of its own"
)


def cores() -> int:
    """Count the cores that this process may use, as many as `MOST` at most."""
    allowed = len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
    return min(allowed, MOST)


def may_have_children() -> bool:
    """Tell whether this process may start others; a worker of a pool that is a daemon may not."""
    return not multiprocessing.current_process().daemon


@contextmanager
def processes(count: int) -> Iterator[Executor]:
    """Start processes; Ctrl-C is this one's to deal with, and what they still do at the end is waited for.

    Raises UsageError where they do not start, BiasbandError where one dies later.
    """
    context = multiprocessing.get_context("spawn")
    pool = ProcessPoolExecutor(count, mp_context=context, initializer=_begin)
    try:
        _start(pool, count)
        yield pool
    except BrokenProcessPool as error:
        raise BiasbandError(LOST.format(count=count)) from error
    finally:
        with _interrupts_ignored():  # in the midst of it, one would leave workers and this process waiting
            pool.shutdown(cancel_futures=True)


def _start(pool: Executor, count: int) -> None:
    try:
        with _interrupts_later():
            started = [pool.submit(os.getpid) for _ in range(count)]
        for each in started:
            each.result()
    except BrokenProcessPool as error:
        raise UsageError(NOT_STARTED.format(count=count)) from error
    except RuntimeError:
        if not getattr(multiprocessing.current_process(), "_inheriting", False):
            raise
        # A worker that is still importing a script without a guard comes here, and may not start workers
        # of its own. It leaves without a word: the process that started it has the words.
        raise SystemExit(1) from None


@contextmanager
def _interrupts_later() -> Iterator[None]:
    """Hold back Ctrl-C; what is started meanwhile never gets one, not even before its initializer has run."""
    if not hasattr(signal, "pthread_sigmask"):
        yield
        return
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


@contextmanager
def _interrupts_ignored() -> Iterator[None]:
    """Be deaf to Ctrl-C; only a main thread hears it anyway."""
    if current_thread() is not main_thread():
        yield
        return
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)


def _begin() -> None:
    """Begin as a worker: deaf to Ctrl-C, and gone when the process that started it is gone."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    Thread(target=_end_with_parent, daemon=True).start()


def _end_with_parent() -> None:
    """End without delay; an idle worker would wait forever for one that was killed."""
    parent = multiprocessing.parent_process()
    if parent is not None:
        parent.join()
        os._exit(1)
