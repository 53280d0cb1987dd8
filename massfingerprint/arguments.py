"""Checks of plain arguments, each with one message that names the argument, what came and what is allowed."""

from typing import Any

import numpy as np

from massfingerprint.errors import InputError, nearest_names


def whole_number(value: Any, *, argument: str, lowest: int) -> int:
    """Return a whole number of at least ``lowest``.

    Raises
    ------
    InputError
        If it is not one; booleans are not numbers here.
    """
    if isinstance(value, bool | np.bool_) or not isinstance(value, int | np.integer) or value < lowest:
        raise InputError(f"{argument}: must be a whole number of {lowest} or more, got {value!r}.")
    return int(value)


def real_number(value: Any, *, argument: str, allowed: str, low: float = -np.inf, high: float = np.inf) -> float:
    """Return a finite number from ``low`` to ``high``.

    Parameters
    ----------
    value : any
        What the caller passed.
    argument : str
        Its name.
    allowed : str
        The range and unit in words: "a positive number of kg m-3".
    low, high : float
        Bounds, included.

    Raises
    ------
    InputError
        If it is not one.
    """
    real = isinstance(value, int | float | np.integer | np.floating) and not isinstance(value, bool)
    if not real or not np.isfinite(value) or not low <= value <= high:
        raise InputError(f"{argument}: must be {allowed}, got {value!r}.")
    return float(value)


def one_of(value: Any, known: tuple[str, ...], *, argument: str, kind: str) -> str:
    """Return a known word, or raise InputError that offers the nearest ones; ``kind`` says what the words name."""
    if not isinstance(value, str) or value not in known:
        raise InputError(f"{argument}: no {kind} {value!r}. {nearest_names(str(value), known)}")
    return value
