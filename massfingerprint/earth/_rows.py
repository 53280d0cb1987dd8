"""Checks of the rows of an Earth model table: one line each, with file, line, column, value, what is allowed, what to do."""

import os
from typing import NoReturn

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfingerprint.earth.layers import EarthModel
from massfingerprint.errors import TableError

Array = NDArray[np.float64]
Path = str | os.PathLike[str]
_RADIUS = (6e6, 7e6)
_DENSITY = (1e3, 2e4)
# what the largest value of a column of some Earth lies between, SI; an incompressible model has no upper end
_LARGEST = {
    "p_speed": (1e3, np.inf),
    "s_speed": (5e2, 5e4),
    "rigidity": (1e9, 1e13),
    "bulk_modulus": (1e9, np.inf),
    "first_lame": (1e9, np.inf),
}
_SI = {"p_speed": "m s-1", "s_speed": "m s-1", "rigidity": "Pa", "bulk_modulus": "Pa", "first_lame": "Pa"}


def refuse(frame: pd.DataFrame, line: int, column: str, words: str, *, path: Path) -> NoReturn:
    """Raise TableError for one cell."""
    raise TableError(f"{path}: line {line}: {column} is {frame[column][line]}, {words}.")


def optional_numbers(frame: pd.DataFrame, column: str, *, path: Path) -> Array:
    """Cells of a column (row,) that may be empty (NaN) or infinite; of a quality factor 0 counts as empty."""
    quality = column.startswith("q_")
    cells = frame[column].replace("", "nan")
    values = pd.to_numeric(cells, errors="coerce").to_numpy(dtype=np.float64)
    wrong = (np.isnan(values) & (cells != "nan").to_numpy()) | (values < 0.0)
    if wrong.any():
        allowed = "a positive number, empty or inf for no loss" if quality else "0, a positive number, inf or empty"
        refuse(frame, frame.index[int(np.flatnonzero(wrong)[0])], column, f"must be {allowed}", path=path)
    return np.where((values == 0.0) | np.isinf(values), np.nan, values) if quality else values


def check_places(values: Array, column: str, frame: pd.DataFrame, path: Path) -> bool:
    """Whether radius or depth (row,) in m runs from the surface to the centre; raise TableError if it cannot be used."""
    lines = frame.index
    if values.size < 2:
        raise TableError(f"{path}: has one row; an Earth needs two or more, from the centre to the surface.")
    if (values < 0.0).any():
        refuse(frame, lines[int(np.flatnonzero(values < 0.0)[0])], column, "must be 0 or more", path=path)
    falling = bool(values[-1] < values[0])
    steps = np.diff(values) * (-1.0 if falling else 1.0)
    if (steps < 0.0).any():
        row = int(np.flatnonzero(steps < 0.0)[0]) + 1
        words = f"after {frame[column].iloc[row - 1]}; rows must run one way, from the centre to the surface or back"
        refuse(frame, lines[row], column, words, path=path)
    thrice = np.flatnonzero((steps[1:] == 0.0) & (steps[:-1] == 0.0))
    if thrice.size:
        words = "for the third time; a boundary has two rows, one for each side. Leave one out"
        refuse(frame, lines[int(thrice[0]) + 2], column, words, path=path)
    for row, end in ((1, "first"), (values.size - 1, "last")):
        if steps[row - 1] == 0.0:
            words = f"twice at the {end} place of the table, where nothing lies beyond. Leave one row out"
            refuse(frame, lines[row], column, words, path=path)
    _check_ends(values, column, frame, path)
    return falling if column == "radius" else not falling


def _check_ends(values: Array, column: str, frame: pd.DataFrame, path: Path) -> None:
    low, high = (edge / 1e3 for edge in _RADIUS)
    deepest, largest = int(np.argmin(values)), int(np.argmax(values))
    if column == "radius" and values[deepest] > 0.0:
        refuse(
            frame, frame.index[deepest], column, "the smallest; the table must reach the centre, radius 0", path=path
        )
    if not _RADIUS[0] <= values[largest] <= _RADIUS[1]:
        words = "the surface" if column == "radius" else "the centre, so that the table must reach it"
        refuse(
            frame,
            frame.index[largest],
            column,
            f"the largest, which is {words}; allowed are {low:g} to {high:g} km. Check its unit and its ends",
            path=path,
        )


def check_rows(values: dict[str, Array], form: tuple[str, str], frame: pd.DataFrame, path: Path) -> None:
    """Raise TableError if a density, speed or modulus (row,) in SI cannot be that of matter."""
    first, shear = form
    for column, wrong, allowed in (
        ("density", values["density"] <= 0.0, "must be positive"),
        (shear, values[shear] < 0.0, "must be 0 (fluid) or more"),
    ):
        if wrong.any():
            refuse(frame, frame.index[int(np.flatnonzero(wrong)[0])], column, allowed, path=path)
    bulk, cure = {
        "p_speed": (
            values[first] ** 2 - 4.0 / 3.0 * values[shear] ** 2,
            f"too low for {shear}: the bulk modulus is positive only where p_speed is more than 1.155 s_speed",
        ),
        "bulk_modulus": (values[first], "must be positive"),
        "first_lame": (
            values[first] + 2.0 / 3.0 * values[shear],
            "too low: the bulk modulus, first_lame + 2/3 rigidity, must be positive",
        ),
    }[first]
    wrong = (bulk <= 0.0) | ((values[first] <= 0.0) & (first == "p_speed"))
    if wrong.any():
        row = int(np.flatnonzero(wrong)[0])
        positive = values[first][row] > 0.0 or first != "p_speed"
        refuse(frame, frame.index[row], first, cure if positive else "must be positive", path=path)
    for column in form:
        _check_size(values[column], column, path)


def _check_size(values: Array, column: str, path: Path) -> None:
    low, high = _LARGEST[column]
    largest = float(values.max())
    if largest != 0.0 and not low <= largest <= high:
        side = f"less than {low:g}" if largest < low else f"more than {high:g}"
        raise TableError(
            f"{path}: column {column}: is at most {largest:g} {_SI[column]}, {side}. The unit in its header looks wrong."
        )


def check_surface(model: EarthModel, path: Path) -> None:
    """Raise TableError if the outermost shell is fluid: the equations carry fluid regions inside, not at the surface."""
    if not model.layers[-1].fluid:
        return
    bottom = next((shell.outer for shell in reversed(model.layers) if not shell.fluid), 0.0)
    raise TableError(
        f"{path}: is fluid at the surface, from {bottom / 1e3:g} to {model.radius / 1e3:g} km radius; the surface must be solid. "
        "Leave an ocean's rows out, or put crust in its place."
    )


def check_model(model: EarthModel, path: Path) -> None:
    """Raise TableError if the mean density is not that of a planet's rock and iron."""
    low, high = _DENSITY
    if not low <= model.mean_density <= high:
        raise TableError(
            f"{path}: column density: gives a mean of {model.mean_density:.4g} kg m-3; allowed are {low:g} to {high:g}. "
            "The unit in its header looks wrong."
        )
