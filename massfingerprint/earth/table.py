"""Earth models of the user's own: tables of radius or depth, density and speeds or moduli, read with checks and written again."""

import os
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.arguments import real_number
from massfingerprint.earth._rows import (
    check_model,
    check_places,
    check_rows,
    check_surface,
    optional_numbers,
    refuse,
)
from massfingerprint.earth.layers import EarthModel, Layer
from massfingerprint.errors import TableError, nearest_names
from massfingerprint.files.tables import numbers, read_columns

Array = NDArray[np.float64]
_SPEED = {"m s-1": 1.0, "km s-1": 1e3}
_LENGTH = {"m": 1.0, "km": 1e3}
_MODULUS = {"Pa": 1.0, "GPa": 1e9}
_UNITS = {
    "radius": _LENGTH,
    "depth": _LENGTH,
    "density": {"kg m-3": 1.0, "g cm-3": 1e3},
    "p_speed": _SPEED,
    "s_speed": _SPEED,
    "bulk_modulus": _MODULUS,
    "first_lame": _MODULUS,
    "rigidity": _MODULUS,
    "viscosity": {"Pa s": 1.0},
}
_OPTIONAL = ("q_shear", "q_bulk", "viscosity")
_KEYS = {"p_speed": "p", "s_speed": "s", "bulk_modulus": "bulk", "first_lame": "first_lame", "rigidity": "rigidity"}
_FORMS = (("p_speed", "s_speed"), ("bulk_modulus", "rigidity"), ("first_lame", "rigidity"))
_STRAIGHT = 1e-12  # rows this close to the line between their neighbours lie on it


def read_earth_model(path: str | os.PathLike[str], *, name: str | None = None) -> EarthModel:
    """Read a layered Earth from a table; ``description.report`` tells what it holds.

    Parameters
    ----------
    path : path
        Columns apart by commas or blanks, units in the header: ``radius [km]`` or ``depth [km]`` (or m), ``density [kg m-3]`` (or
        g cm-3), and ``p_speed [km s-1]`` with ``s_speed [km s-1]``, or ``bulk_modulus [GPa]`` or ``first_lame [GPa]`` with
        ``rigidity [GPa]`` (or Pa). Optional: ``q_shear``, ``q_bulk``, ``viscosity [Pa s]``; empty or ``inf`` where there is none,
        and ``note``, which is not read. Rows run from the centre to the surface or back; between rows everything is linear in
        radius; a radius that stands twice is a discontinuity. The largest depth is the centre.
    name : str, optional
        Of the model; the name of the file by default.

    Returns
    -------
    EarthModel
        One shell per pair of rows, rows on a straight line between their neighbours left out. A shell has the mean of 1/Q and
        of the viscosity of its two rows. There may be any number of fluid regions, but the surface is solid.

    Raises
    ------
    MissingFileError, TableError, UnitsError
        One line: file, line, column, what came, what is allowed, what to do.
    """
    frame, units = read_columns(path, required=("density",))
    place, form = _columns(frame, path)
    values = {column: _numbers(frame, units, column, path) for column in (place, "density", *form)}
    for column in _OPTIONAL:
        if column in frame:
            factor = _factor(units, column, path) if column in _UNITS else 1.0
            values[column] = optional_numbers(frame, column, path=path) * factor
    lines = frame.index.to_numpy()
    backwards = check_places(values[place], place, frame, path)
    if place == "depth":
        values["depth"] = values["depth"].max() - values["depth"]
    rows = _Rows(values.pop(place), values, form, lines)
    check_rows(values, form, frame, path)
    if backwards:
        rows = rows.take(np.arange(lines.size)[::-1])
    _check_phases(rows, frame, path)
    rows = rows.take(_corners(rows))
    model = EarthModel(
        name or Path(path).stem, _shells(rows), f"table {Path(path).name}, linear in radius between rows"
    )
    check_surface(model, path)
    check_model(model, path)
    return model


@dataclass(frozen=True)
class _Rows:
    """Radius, the other columns in SI, the pair of elastic columns, and line numbers; each array (row,)."""

    radius: Array
    values: dict[str, Array]
    form: tuple[str, str]
    lines: NDArray[np.int64]

    def take(self, chosen: NDArray[np.int64]) -> "_Rows":
        values = {name: column[chosen] for name, column in self.values.items()}
        return replace(self, radius=self.radius[chosen], values=values, lines=self.lines[chosen])


def _columns(frame: pd.DataFrame, path: str | os.PathLike[str]) -> tuple[str, tuple[str, str]]:
    """Which column tells the place, and which two the elastic properties."""
    found = [str(column) for column in frame.columns]
    known = (*_UNITS, *_OPTIONAL, "note")
    for column in found:
        if column not in known:
            raise TableError(f"{path}: column {column!r} is not known here. {nearest_names(column, known)}")
    places = [column for column in ("radius", "depth") if column in found]
    if len(places) != 1:
        came = "both" if places else "neither"
        raise TableError(
            f"{path}: needs one column of radius or depth, has {came}. Write 'radius [km]' or 'depth [km]'."
        )
    forms = [form for form in _FORMS if all(column in found for column in form)]
    given = [column for column in _KEYS if column in found]
    if len(forms) != 1 or len(given) != 2:
        raise TableError(
            f"{path}: needs p_speed and s_speed, or rigidity and one of bulk_modulus and first_lame, and no others; "
            f"has {' and '.join(given) or 'none of them'}."
        )
    return places[0], forms[0]


def _factor(units: dict[str, str], column: str, path: str | os.PathLike[str]) -> float:
    accepted = _UNITS[column]
    if column not in units:
        example = list(accepted)[-1]
        raise TableError(f"{path}: column {column} has no unit. Write it as '{column} [{example}]'.")
    unit, factor = vocabulary.require({"units": units[column]}, tuple(accepted), argument=f"{path}: column {column}")
    return accepted[unit] * factor


def _numbers(frame: pd.DataFrame, units: dict[str, str], column: str, path: str | os.PathLike[str]) -> Array:
    return numbers(frame, column, path=path) * _factor(units, column, path)


def _check_phases(rows: _Rows, frame: pd.DataFrame, path: str | os.PathLike[str]) -> None:
    """A shell is fluid at both of its rows or at neither."""
    shear = rows.values[rows.form[1]]
    apart = rows.radius[1:] > rows.radius[:-1]
    wrong = np.flatnonzero(apart & ((shear[1:] == 0.0) != (shear[:-1] == 0.0)))
    if wrong.size:
        zero = wrong[0] if shear[wrong[0]] == 0.0 else wrong[0] + 1
        other = rows.lines[2 * wrong[0] + 1 - zero]
        refuse(
            frame,
            int(rows.lines[zero]),
            rows.form[1],
            f"while line {other}, the next radius, has shear; a shell is fluid at both ends or at none. Give the radius of the "
            "boundary twice, once for each side",
            path=path,
        )


def _corners(rows: _Rows) -> NDArray[np.int64]:
    """Rows that are not on the straight line between their neighbours, ends and discontinuities."""
    count, kept = rows.radius.size, [0]
    twice = np.flatnonzero(rows.radius[1:] == rows.radius[:-1])
    sides = {*twice.tolist(), *(twice + 1).tolist(), count - 1}
    for row in range(1, count):
        if row in sides or not _straight(rows, kept[-1], row):
            kept.append(row)
    return np.array(kept, dtype=np.int64)


def _straight(rows: _Rows, before: int, row: int) -> bool:
    radius = rows.radius
    share = (radius[row] - radius[before]) / (radius[row + 1] - radius[before])
    for name, column in rows.values.items():
        three = column[[before, row, row + 1]]
        if name in _OPTIONAL:
            if not (three == three[0]).all() and not np.isnan(three).all():
                return False
        elif abs(three[1] - (1.0 - share) * three[0] - share * three[2]) > _STRAIGHT * np.abs(three).max():
            return False
    return True


def _shells(rows: _Rows) -> tuple[Layer, ...]:
    surface = rows.radius[-1]
    out = []
    for lower in np.flatnonzero(rows.radius[1:] > rows.radius[:-1]):
        two = slice(lower, lower + 2)
        x = rows.radius[two] / surface
        lines = {name: _line(x, rows.values[name][two]) for name in ("density", *rows.form)}
        extra = {name: _mean(name, rows.values[name][two]) for name in _OPTIONAL if name in rows.values}
        elastic = {_KEYS[name]: lines[name] for name in rows.form}
        shell = Layer(float(rows.radius[lower]), float(rows.radius[lower + 1]), lines["density"], elastic)
        out.append(
            replace(shell, q_shear=extra.get("q_shear"), q_bulk=extra.get("q_bulk"), viscosity=extra.get("viscosity"))
        )
    return tuple(out)


def _line(x: Array, values: Array) -> tuple[float, ...]:
    if values[0] == values[1]:
        return (float(values[0]),)
    slope = (values[1] - values[0]) / (x[1] - x[0])
    return float(values[0] - slope * x[0]), float(slope)


def _mean(name: str, values: Array) -> float | None:
    """Of the loss 1/Q, none being none, or of the viscosity, unknown staying unknown."""
    if name == "viscosity":
        return None if np.isnan(values).any() else float(values.mean())
    loss = float(np.where(np.isnan(values), 0.0, 1.0 / values).mean())
    return 1.0 / loss if loss > 0.0 else None


def earth_model_table(model: EarthModel, *, spacing_km: float = 50.0) -> pd.DataFrame:
    """A model as a table that :func:`read_earth_model` reads again: something to start from.

    Parameters
    ----------
    model : EarthModel
        Built in, or read.
    spacing_km : float
        Rows of a shell that is curved are at most this far apart, 1 to 1000 km; a shell that is linear has two rows.

    Returns
    -------
    DataFrame
        From the centre outwards, units in the column names; speeds, or first Lame parameter and rigidity where the model is
        given by moduli; Q and viscosity where some shell has them. Write it with ``files.tables.csv_text``.

    Raises
    ------
    InputError
        If the spacing cannot be used.
    """
    real_number(spacing_km, argument="spacing_km", allowed="1 to 1000 km", low=1.0, high=1000.0)
    moduli = any("rigidity" in shell.elastic for shell in model.layers)
    pieces = []
    for number, shell in enumerate(model.layers):
        intervals = 1 if _linear(shell) else int(np.ceil((shell.outer - shell.inner) / (spacing_km * 1e3)))
        radius = np.linspace(shell.inner, shell.outer, intervals + 1)
        first, second = model.moduli(number, radius) if moduli else model.wave_speeds(number, radius)
        elastic = (
            {"first_lame [Pa]": first, "rigidity [Pa]": second}
            if moduli
            else {"p_speed [m s-1]": first, "s_speed [m s-1]": second}
        )
        extra = {"q_shear": shell.q_shear, "q_bulk": shell.q_bulk, "viscosity [Pa s]": shell.viscosity}
        columns = {"radius [km]": radius / 1e3, "density [kg m-3]": model.density(number, radius), **elastic}
        rest = {name: np.full(radius.size, np.nan if value is None else value) for name, value in extra.items()}
        pieces.append(pd.DataFrame({**columns, **rest}))
    table = pd.concat(pieces, ignore_index=True)
    return table.dropna(axis=1, how="all")


def _linear(shell: Layer) -> bool:
    """Whether density, speeds or moduli as they stand in the table are straight lines."""
    plain = "rigidity" in shell.elastic or ("p" in shell.elastic and shell.factors == (1.0, 1.0))
    return plain and all(not any(c[2:]) for c in (shell.density, *shell.elastic.values()))
