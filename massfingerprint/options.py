"""Settings of the running process: the only home of the thread count."""

import os
from collections.abc import Iterator
from contextlib import AbstractContextManager, contextmanager

from massfingerprint.arguments import whole_number

_settings: dict[str, int] = {}


def _available_processors() -> int:
    affinity = getattr(os, "sched_getaffinity", None)
    return len(affinity(0)) if affinity else os.cpu_count() or 1


def threads() -> int:
    """Return how many threads a transform may use (default: the processors this process may run on)."""
    return _settings.get("threads", _available_processors())


@contextmanager
def _restored(previous: dict[str, int]) -> Iterator[None]:
    try:
        yield
    finally:
        _settings.clear()
        _settings.update(previous)


def set_options(*, threads: int | None = None) -> AbstractContextManager[None]:
    """Set process-wide options; used as a context manager it restores the old ones at the end.

    Parameters
    ----------
    threads : int, optional
        Threads a transform may use, 1 or more. Results do not depend on it beyond rounding.

    Returns
    -------
    context manager
        Leaving it restores the options that were in force before the call.

    Raises
    ------
    InputError
        If ``threads`` is not a positive whole number.
    """
    previous = dict(_settings)
    if threads is not None:
        _settings["threads"] = whole_number(threads, argument="threads", lowest=1)
    return _restored(previous)
