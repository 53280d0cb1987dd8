"""The mass ledger: cumulative mass change of every source on one time axis, with its uncertainty.

Dataset(source, time): ``mass_change``, ``mass_change_sigma`` [Gt], negative = loss; ``error_model(source)``; NaN where a source has
no value. Nothing is interpolated.
"""

import os
from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.arguments import one_of
from massfingerprint.errors import InputError, TableError, nearest_names
from massfingerprint.files.netcdf import read_netcdf
from massfingerprint.files.tables import read_table
from massfingerprint.mass._record import Series, cumulative_series, rate_series
from massfingerprint.mass.covariance import COMPONENTS, MODELS

QUANTITIES = ("cumulative", "rate")
_NEEDED = {
    "cumulative": ("time", "source", "mass_change"),
    "rate": ("time_start", "time_end", "source", "mass_rate"),
}
# How the uncertainty of a value may be given; all but the first need a column 'interval'.
_UNCERTAINTY = (("_sigma",), ("_half_width",), ("_lower", "_upper"))
_TEXT_NOTES = {"citation": "", "scope": "", "gia_removed": ""}
_NUMBER_NOTES = {"grounding_netted": -1.0, "ocean_reaching_fraction": 1.0}


def read_ledger(
    path: str | os.PathLike[str],
    *,
    quantity: str,
    units: str | None = None,
    columns: Mapping[str, str] | None = None,
    error_model: str | None = None,
    reference_epoch: str | None = None,
) -> xr.Dataset:
    """Read a mass record.

    Parameters
    ----------
    path : path
        NetCDF as ``write_netcdf`` leaves a ledger, or CSV with units in the headers: long
        ``time,source,mass_change [Gt],mass_change_sigma [Gt]``, wide ``time,<source> [Gt],<source> sigma [Gt]``, or rates
        ``time_start,time_end,source,mass_rate [Gt yr-1],mass_rate_sigma [Gt yr-1]``. Times are ISO dates or decimal years (2003.5
        is half-way through 2003; year + (month - 0.5)/12 is the middle of that month). Units: Gt, kg, ..., km3 with a column
        ``material`` (ice or water) and, for ice, ``density [kg m-3]``, ``density_sigma [kg m-3]``; ``m w.e.`` or ``mm w.e.`` with a
        column ``area [km2]``; ``mm sle`` (positive = rise). Instead of a sigma, ``..._half_width``, or ``..._lower`` and
        ``..._upper``, with a column ``interval`` (``90 %``, ``very likely``, ...; bounds give half their distance). Optional
        columns per source: ``error_model``, ``citation``, ``scope``, ``gia_removed``, ``grounding_netted``,
        ``ocean_reaching_fraction``.
    quantity : str
        ``"cumulative"`` or ``"rate"``; rates are returned cumulated from each source's first interval.
    units : str, optional
        Unit of columns whose header has none.
    columns : mapping, optional
        Name in the file -> name expected here.
    error_model : str, optional
        ``independent``, ``systematic`` or ``random_walk`` where the file does not say; needed for a cumulative record, random
        walk for rates (independent errors of rates, cumulated).
    reference_epoch : str, optional
        ISO date at which the cumulative change is 0; the first time by default.

    Returns
    -------
    Dataset (source, time)
        The ledger; sources keep the order of the file, times are the union of theirs.

    Raises
    ------
    MissingFileError, TableError, UnitsError, InputError
        One line: file, line, what came, what to do.
    """
    one_of(quantity, QUANTITIES, argument="quantity", kind="quantity")
    if error_model is not None:
        one_of(error_model, COMPONENTS, argument="error_model", kind="error model")
    if str(path).endswith(".nc"):
        return check_ledger(read_netcdf(path), argument=str(path))
    series = _series(str(path), quantity, units, dict(columns or {}), error_model)
    ledger = _assembled(series)
    first = str(ledger["time"].values[0])[:10]
    return ledger.assign_attrs(reference_epoch=_epoch(reference_epoch) or first, source_file=os.path.basename(path))


def _epoch(text: str | None) -> str | None:
    if text is None:
        return None
    try:
        return str(np.datetime64(str(text), "D"))
    except ValueError as error:
        raise InputError(f"reference_epoch: must be an ISO date such as 2003-01-01, got {text!r}.") from error


def _series(path: str, quantity: str, units: str | None, columns: dict[str, str], model: str | None) -> list[Series]:
    frame, held = read_table(path, required=())
    frame = frame.rename(columns=columns)
    held = {columns.get(name, name): unit for name, unit in held.items()}
    if "time_start" in frame and quantity == "cumulative":
        raise TableError(f"{path}: holds intervals (time_start), so it is a record of rates. Pass quantity='rate'.")
    if quantity == "cumulative" and "source" not in frame and "time" in frame:
        frame, held = _long_of_wide(frame, held, path)
    missing = [name for name in _NEEDED[quantity] if name not in frame]
    if missing:
        found = [str(name) for name in frame.columns]
        raise TableError(
            f"{path}: lacks the column {missing[0]}; found {', '.join(found)}. {nearest_names(missing[0], found)}"
        )
    value = _NEEDED[quantity][-1]
    if not any(all(f"{value}{end}" in frame for end in ends) for ends in _UNCERTAINTY):
        forms = f"{value}_sigma, or {value}_half_width, or {value}_lower and {value}_upper with a column interval"
        raise TableError(f"{path}: lacks an uncertainty: give {forms}.")
    build = cumulative_series if quantity == "cumulative" else rate_series
    out = []
    for source, rows in frame.groupby("source", sort=False):
        if not source:
            raise TableError(f"{path}: line {rows.index[0]}: source is empty. Name the mass source.")
        unit = _unit(rows, held, value, units, path)
        out.append(
            build(
                rows, source=str(source), unit=unit, model=_model(rows, model, quantity, path, str(source)), path=path
            )
        )
    return out


def _unit(rows: pd.DataFrame, held: dict[str, str], value: str, units: str | None, path: str) -> str:
    """Unit of a value column and its sigma, which must agree."""
    if "unit" in rows and rows["unit"].iloc[0]:
        return str(rows["unit"].iloc[0])
    unit = held.get(value, units)
    if unit is None:
        raise TableError(f"{path}: column {value} has no unit. Write it as '{value} [Gt]', or pass units.")
    for end in ("_sigma", "_half_width", "_lower", "_upper"):
        other = held.get(f"{value}{end}", unit)
        if other != unit:
            raise TableError(f"{path}: {value} is in {unit!r} but {value}{end} in {other!r}. Give both in one unit.")
    if value == "mass_rate" and not unit.endswith(" yr-1"):
        raise TableError(f"{path}: column mass_rate must be per year, as 'Gt yr-1', got {unit!r}.")
    return unit


def _model(rows: pd.DataFrame, model: str | None, quantity: str, path: str, source: str) -> str:
    if "error_model" in rows:
        found = [cell for cell in rows["error_model"].unique() if cell]
        if found:
            return one_of(found[0], COMPONENTS, argument=f"{path}: {source!r}", kind="error model")
    if model is None and quantity == "cumulative":
        raise InputError(
            f"error_model: {path} does not say how its errors are related in time. Pass independent, systematic or random_walk."
        )
    return model or "random_walk"


def _long_of_wide(frame: pd.DataFrame, held: dict[str, str], path: str) -> tuple[pd.DataFrame, dict[str, str]]:
    """Rows of a long table from columns ``<source>`` and ``<source> sigma``; cells empty in both leave no row."""
    names = [str(name) for name in frame.columns if name != "time" and not str(name).endswith(" sigma")]
    if not names:
        raise TableError(
            f"{path}: has a time column and nothing else. Add columns '<source> [Gt]' and '<source> sigma [Gt]'."
        )
    pieces = []
    for name in names:
        if f"{name} sigma" not in frame:
            raise TableError(f"{path}: lacks the column '{name} sigma'. Every source needs its uncertainty beside it.")
        if held.get(name) != held.get(f"{name} sigma"):
            raise TableError(f"{path}: {name!r} and '{name} sigma' are in different units. Give both in one unit.")
        piece = pd.DataFrame(
            {
                "time": frame["time"],
                "source": name,
                "mass_change": frame[name],
                "mass_change_sigma": frame[f"{name} sigma"],
            }
        )
        empty = (piece[["mass_change", "mass_change_sigma"]] == "").sum(axis=1)
        if (empty == 1).any():
            line = piece.index[empty == 1][0]
            raise TableError(
                f"{path}: line {line}: of {name!r} only one of value and sigma is given. Give both or neither."
            )
        pieces.append(piece[empty == 0].assign(unit=held.get(name, "")))
    return pd.concat(pieces), {}


def _assembled(series: list[Series]) -> xr.Dataset:
    """Put series on the union of their times."""
    names = [one.source for one in series]
    time = np.unique(np.concatenate([one.time for one in series]))
    shape = (len(series), time.size)
    mass = np.full(shape, np.nan)
    parts = {name: np.full(shape, np.nan) for name in COMPONENTS}
    for row, one in enumerate(series):
        at = np.searchsorted(time, one.time)
        mass[row, at] = one.mass
        for name in COMPONENTS:
            parts[name][row, at] = one.sigmas[name]
    return (
        ledger_dataset(names, time, mass, parts)
        .assign(_notes(series))
        .assign_attrs(units_read="; ".join(sorted({s.words for s in series})))
    )


def ledger_dataset(names: list[str], time: np.ndarray, mass: np.ndarray, parts: dict[str, np.ndarray]) -> xr.Dataset:
    """Ledger from mass (source, time) and its error components; a source with one component gets that model."""
    models = []
    for row in range(len(names)):
        used = [name for name in COMPONENTS if np.nansum(parts[name][row]) > 0.0]
        models.append(used[0] if len(used) == 1 else "sum" if used else "independent")
    whole = np.sqrt(sum(part**2 for part in parts.values()))
    dims = ("source", "time")
    variables: dict[str, Any] = {
        "mass_change": (dims, mass, {"units": "Gt", "long_name": "cumulative mass change, negative = loss"}),
        "mass_change_sigma": (
            dims,
            whole,
            {"units": "Gt", "long_name": "standard uncertainty of mass change (1 sigma)"},
        ),
        "error_model": ("source", np.array(models, dtype=object)),
    }
    if "sum" in models:
        for name, part in parts.items():
            attrs = {"units": "Gt", "long_name": f"{name.replace('_', ' ')} part of the standard uncertainty"}
            variables[f"mass_change_sigma_{name}"] = (dims, part, attrs)
    coords = {"source": np.array(names, dtype=object), "time": time.astype("datetime64[ns]")}
    return xr.Dataset(variables, coords=coords, attrs={"quantity": "cumulative"})


def _notes(series: list[Series]) -> dict[str, Any]:
    out: dict[str, Any] = {}
    for name, default in _TEXT_NOTES.items():
        if any(name in one.notes for one in series):
            out[name] = ("source", np.array([one.notes.get(name) or default for one in series], dtype=object))
    for name, number in _NUMBER_NOTES.items():
        if any(name in one.notes for one in series):
            out[name] = ("source", np.array([_note_number(one, name, number) for one in series]))
    return out


def _note_number(one: Series, name: str, default: float) -> float:
    cell = one.notes.get(name, "")
    try:
        return float(cell) if cell else default
    except ValueError as error:
        raise TableError(f"{name}: of {one.source!r} must be a number, got {cell!r}.") from error


def check_ledger(ledger: xr.Dataset, *, argument: str = "ledger") -> xr.Dataset:
    """Return a ledger once its layout is sound.

    Raises
    ------
    InputError
        If a variable, a dimension or an error model is missing or wrong, times do not ascend, or an uncertainty is negative.
    """
    for name in ("mass_change", "mass_change_sigma", "error_model"):
        if name not in ledger:
            raise InputError(f"{argument}: lacks {name}. A ledger has mass_change, mass_change_sigma and error_model.")
    if set(ledger["mass_change"].dims) != {"source", "time"}:
        raise InputError(
            f"{argument}: mass_change must have dimensions (source, time), got {ledger['mass_change'].dims}."
        )
    for name in ledger["error_model"].values:
        one_of(str(name), MODELS, argument=f"{argument}: error_model", kind="error model")
    if (np.diff(ledger["time"].values) <= np.timedelta64(0, "ns")).any():
        raise InputError(f"{argument}: times must ascend without repeats. Sort by time.")
    if (ledger["mass_change_sigma"] < 0.0).any():
        raise InputError(f"{argument}: mass_change_sigma must be 0 or more.")
    if ledger.attrs.get("quantity") != "cumulative":
        raise InputError(f"{argument}: attribute quantity must be 'cumulative', got {ledger.attrs.get('quantity')!r}.")
    return ledger.transpose("source", "time", ...)


def check_sources(ledger: xr.Dataset, known: list[str]) -> None:
    """Refuse sources that are not among known names, offering the nearest ones."""
    for name in ledger["source"].values:
        if str(name) not in known:
            raise InputError(f"source: no mass source is called {str(name)!r}. {nearest_names(str(name), known)}")
