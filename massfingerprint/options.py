"""Settings of the running process: the only home of the thread count and of the memory limit."""

import os
import threading
from collections.abc import Iterator
from contextlib import AbstractContextManager, contextmanager

from massfingerprint.arguments import whole_number

_settings: dict[str, int] = {}
_own = threading.local()


def _available_processors() -> int:
    affinity = getattr(os, "sched_getaffinity", None)
    return len(affinity(0)) if affinity else os.cpu_count() or 1


def threads() -> int:
    """Return how many threads a transform may use (default: the processors this process may run on)."""
    return getattr(_own, "threads", None) or _settings.get("threads", _available_processors())


@contextmanager
def one_thread() -> Iterator[None]:
    """Inside, transforms of the calling thread use one thread: many of them run beside each other instead."""
    before = getattr(_own, "threads", None)
    _own.threads = 1
    try:
        yield
    finally:
        _own.threads = before


def memory_limit() -> int | None:
    """Bytes beyond which results of a solve go to a temporary file instead of memory; None: no limit."""
    return _settings.get("memory_limit")


@contextmanager
def _restored(previous: dict[str, int]) -> Iterator[None]:
    try:
        yield
    finally:
        _settings.clear()
        _settings.update(previous)


def set_options(*, threads: int | None = None, memory_limit: int | None = None) -> AbstractContextManager[None]:
    """Set process-wide options; used as a context manager it restores the old ones at the end.

    Parameters
    ----------
    threads : int, optional
        Threads a transform may use, 1 or more. Results do not depend on it beyond rounding.
    memory_limit : int, optional
        Bytes that the results of one ``solve_fingerprints`` may take in memory; larger ones are kept in a temporary file and
        read as they are used. 0 puts all of them there; by default nothing is.

    Returns
    -------
    context manager
        Leaving it restores the options that were in force before the call.

    Raises
    ------
    InputError
        If ``threads`` is not a positive whole number, or ``memory_limit`` not one of 0 or more.
    """
    previous = dict(_settings)
    if threads is not None:
        _settings["threads"] = whole_number(threads, argument="threads", lowest=1)
    if memory_limit is not None:
        _settings["memory_limit"] = whole_number(memory_limit, argument="memory_limit", lowest=0)
    return _restored(previous)
