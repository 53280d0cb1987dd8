"""Rows of a mass record, one source at a time, before they stand on a common time axis."""

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfingerprint.errors import TableError
from massfingerprint.mass._time import check_order, parse_times
from massfingerprint.mass.intervals import sigma_of_bounds, to_sigma
from massfingerprint.mass.units import Conversion, conversion, to_gigatonnes

Array = NDArray[np.float64]
Times = NDArray[np.datetime64]
NOTES = ("citation", "scope", "gia_removed", "grounding_netted", "ocean_reaching_fraction", "error_model")
_YEAR = np.timedelta64(31_557_600_000_000_000, "ns")  # 365.25 days
_SEAM = np.timedelta64(36, "h")  # intervals meet if the next starts within this of the end of the last


@dataclass(frozen=True)
class Series:
    """Cumulative record of one source: times (n,), mass and error components in Gt (n,), and its notes."""

    source: str
    time: Times
    mass: Array
    sigmas: dict[str, Array]
    notes: dict[str, str]
    words: str


def _numbers(cells: pd.Series, column: str, path: str) -> Array:
    values = pd.to_numeric(cells, errors="coerce").to_numpy(dtype=np.float64)
    bad = np.flatnonzero(~np.isfinite(values))
    if bad.size:
        line, cell = cells.index[bad[0]], cells.iloc[bad[0]]
        cure = (
            "Use a decimal point."
            if "," in cell
            else "Give a finite number."
            if cell
            else "Fill it, or take the row out."
        )
        raise TableError(f"{path}: line {line}: {column} is {cell!r}, not a number. {cure}")
    return values


def _sigmas(cells: pd.Series, column: str, path: str) -> Array:
    values = _numbers(cells, column, path)
    if (values < 0.0).any():
        at = int(np.flatnonzero(values < 0.0)[0])
        raise TableError(
            f"{path}: line {cells.index[at]}: {column} is {cells.iloc[at]}; an uncertainty must be 0 or more."
        )
    return values


def _spread(rows: pd.DataFrame, value: str, path: str) -> Array:
    """Standard uncertainty (n,) of a value column: given as such, as a half-width, or as bounds of a named interval."""
    if f"{value}_sigma" in rows:
        return _sigmas(rows[f"{value}_sigma"], f"{value}_sigma", path)
    interval = _constant(rows, "interval", path, str(rows["source"].iloc[0])) if "interval" in rows else ""
    if not interval:
        raise TableError(
            f"{path}: needs a column 'interval' (such as 90 %) beside half-widths or bounds, or {value}_sigma."
        )
    if f"{value}_half_width" in rows:
        return to_sigma(_sigmas(rows[f"{value}_half_width"], f"{value}_half_width", path), interval)
    low, high = (_numbers(rows[f"{value}_{end}"], f"{value}_{end}", path) for end in ("lower", "upper"))
    return sigma_of_bounds(_numbers(rows[value], value, path), low, high, interval)


def _constant(rows: pd.DataFrame, column: str, path: str, source: str) -> str:
    """Value of a column that must be the same in all rows of a source; empty cells repeat it."""
    found = [cell for cell in rows[column].unique() if cell != ""]
    if len(found) > 1:
        line = rows.index[rows[column] == found[1]][0]
        raise TableError(
            f"{path}: line {line}: {column} of {source!r} is {found[1]!r}, above it {found[0]!r}. Use one per source."
        )
    return found[0] if found else ""


def _how(rows: pd.DataFrame, unit: str, path: str, source: str, per_year: bool) -> Conversion:
    """Conversion of one source's rows to gigatonnes (a year)."""
    argument = f"{path}: {source!r}"
    density = None
    if "density" in rows:
        cell = _constant(rows, "density", path, source)
        sigma = _constant(rows, "density_sigma", path, source) if "density_sigma" in rows else ""
        if cell:
            density = float(cell), float(sigma or 0.0)
    return conversion(
        unit.removesuffix(" yr-1") if per_year else unit,
        argument=argument,
        material=_constant(rows, "material", path, source) if "material" in rows else "",
        density=density,
        area=_numbers(rows["area"], "area", path) if "area" in rows else None,
    )


def _components(model: str, sigma: Array, shared: Array) -> dict[str, Array]:
    """Error components (n,) from one model and an additional systematic part."""
    out = {name: np.zeros(sigma.size) for name in ("independent", "systematic", "random_walk")}
    out[model] = sigma
    if shared.any():
        out["systematic"] = np.hypot(out["systematic"], shared)
    return out


def cumulative_series(rows: pd.DataFrame, *, source: str, unit: str, model: str, path: str) -> Series:
    """Series of one source from rows with time, mass_change and its uncertainty."""
    time = parse_times(rows["time"], path=path, column="time")
    check_order(time, rows.index.to_numpy(), path=path, source=source)
    raw = _numbers(rows["mass_change"], "mass_change", path)
    raw_sigma = _spread(rows, "mass_change", path)
    how = _how(rows, unit, path, source, per_year=False)
    mass = to_gigatonnes(raw, how)
    sigma = raw_sigma * np.abs(np.broadcast_to(np.asarray(how.factor), raw.shape))
    sigmas = _components(model, sigma, np.abs(mass) * how.density_sigma)
    return Series(source, time, mass, sigmas, _notes(rows, path, source), how.words)


def rate_series(rows: pd.DataFrame, *, source: str, unit: str, model: str, path: str) -> Series:
    """Series of one source from rows with time_start, time_end, mass_rate and its uncertainty, cumulated from its first start."""
    start = parse_times(rows["time_start"], path=path, column="time_start")
    end = parse_times(rows["time_end"], path=path, column="time_end")
    _check_intervals(start, end, rows, path, source)
    how = _how(rows, unit, path, source, per_year=True)
    factor = np.broadcast_to(np.asarray(how.factor, dtype=np.float64), start.shape)
    years = (end - start) / _YEAR
    change = _numbers(rows["mass_rate"], "mass_rate", path) * factor * years
    spread = _spread(rows, "mass_rate", path) * np.abs(factor) * years
    mass = np.concatenate([[0.0], np.cumsum(change)])
    walk = np.concatenate([[0.0], np.sqrt(np.cumsum(spread**2))])
    shared = np.concatenate([[0.0], np.cumsum(spread)])
    sigma = shared if model == "systematic" else walk
    name = "random_walk" if model == "independent" else model  # independent errors of rates, cumulated
    sigmas = _components(name, sigma, np.abs(mass) * how.density_sigma)
    return Series(source, np.concatenate([start[:1], end]), mass, sigmas, _notes(rows, path, source), how.words)


def _check_intervals(start: Times, end: Times, rows: pd.DataFrame, path: str, source: str) -> None:
    lines = rows.index.to_numpy()
    wrong = np.flatnonzero(~(end > start))
    if wrong.size:
        raise TableError(f"{path}: line {lines[wrong[0]]}: time_end must lie after time_start.")
    check_order(start, lines, path=path, source=source)
    gap = np.flatnonzero(np.abs(start[1:] - end[:-1]) > _SEAM)
    if gap.size:
        at = int(gap[0])
        kind = "overlap" if start[at + 1] < end[at] else "gap"
        raise TableError(
            f"{path}: line {lines[at + 1]}: {kind} in the intervals of {source!r} between {str(end[at])[:10]} and "
            f"{str(start[at + 1])[:10]}: rates cannot be cumulated across it. Fill it, or split the record."
        )


def _notes(rows: pd.DataFrame, path: str, source: str) -> dict[str, Any]:
    return {name: _constant(rows, name, path, source) for name in NOTES if name in rows}
