"""Times of mass records: ISO dates, decimal years, months written as year + (month - 0.5)/12."""

import re

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfingerprint.errors import TableError

Times = NDArray[np.datetime64]
_DECIMAL = re.compile(r"^\d{4}(\.\d*)?$")
_MONTH_ROOM = 0.002  # years: room for three decimals, a third of the distance to anything else of the calendar
_YEARS = (1678, 2262)  # what datetime64[ns] holds


def decimal_years(years: NDArray[np.float64]) -> Times:
    """Times of decimal years: 2003.5 is half-way through calendar year 2003."""
    whole = np.floor(years).astype(int)
    start = (whole - 1970).astype("datetime64[Y]").astype("datetime64[ns]")
    length = (whole - 1969).astype("datetime64[Y]").astype("datetime64[ns]") - start
    return start + ((years - whole) * length.astype(np.float64)).astype("timedelta64[ns]")


def month_middles(years: NDArray[np.float64]) -> Times | None:
    """Middles of months if every value is year + (month - 0.5)/12 to three decimals, else None."""
    twelfth = (years - np.floor(years)) * 12.0 + 0.5
    month = np.round(twelfth)
    if (
        years.size < 2
        or (np.abs(twelfth - month) / 12.0 > _MONTH_ROOM).any()
        or (month < 1).any()
        or (month > 12).any()
    ):
        return None
    first = ((np.floor(years) - 1970) * 12 + month - 1).astype(int).astype("datetime64[M]")
    start, end = first.astype("datetime64[ns]"), (first + 1).astype("datetime64[ns]")
    return start + (end - start) // 2


def parse_times(cells: pd.Series, *, path: str, column: str) -> Times:
    """Times (nrow,) of text cells, indexed by line number; all of one kind.

    Raises
    ------
    TableError
        Naming the line of the first cell that is no date of the years 1678 to 2262.
    """
    decimal = cells.map(lambda cell: bool(_DECIMAL.match(cell)))
    for line, cell in cells.items():
        year = re.match(r"^(\d{4})\b", cell)
        if year and not _YEARS[0] <= int(year[1]) < _YEARS[1]:
            raise TableError(f"{path}: line {line}: {column} {cell!r} is outside the years {_YEARS[0]} to {_YEARS[1]}.")
    if decimal.all():
        years = np.asarray(cells, dtype=np.float64)
        middles = month_middles(years)
        return decimal_years(years) if middles is None else middles
    if decimal.any() and not decimal[cells.str.len() > 4].any():
        decimal = cells.map(lambda cell: False)  # a bare year among ISO dates is its first day
    if decimal.any():
        line = decimal.index[decimal][0]
        raise TableError(
            f"{path}: line {line}: {column} {cells[line]!r} is a decimal year among dates. Use one kind in a file."
        )
    values = pd.to_datetime(cells, errors="coerce", format="ISO8601")
    if values.isna().any():
        line = values.index[values.isna()][0]
        raise TableError(
            f"{path}: line {line}: {column} is {cells[line]!r}, not an ISO date such as 2003-01-31 or a decimal year."
        )
    return values.to_numpy().astype("datetime64[ns]")


def check_order(times: Times, lines: NDArray[np.int64], *, path: str, source: str) -> None:
    """Refuse times of one source that repeat or run backwards."""
    steps = np.diff(times)
    repeated = np.flatnonzero(steps == np.timedelta64(0, "ns"))
    if repeated.size:
        at = repeated[0] + 1
        raise TableError(
            f"{path}: line {lines[at]}: time {str(times[at])[:10]} of {source!r} stands there twice. Keep one."
        )
    backwards = np.flatnonzero(steps < np.timedelta64(0, "ns"))
    if backwards.size:
        at = backwards[0] + 1
        raise TableError(
            f"{path}: line {lines[at]}: time {str(times[at])[:10]} of {source!r} is before the line above. Sort by time."
        )
