"""Plain text tables: comma-separated, UTF-8, units in the header as ``name [unit]``."""

import os
import re
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from massfingerprint import vocabulary
from massfingerprint.errors import MissingFileError, TableError, nearest_names

_HEADER = re.compile(r"^(?P<name>[^\[\]]+?)\s*(?:\[(?P<unit>[^\[\]]*)\])?$")
_SPACED_HEADER = re.compile(r"([^\s\[\]]+)\s*(\[[^\[\]]*\])?")
_RATE_COLUMNS = ("time_start", "time_end", "source", "mass_rate", "mass_rate_sigma", "citation")


def read_table(path: str | os.PathLike[str], *, required: tuple[str, ...]) -> tuple[pd.DataFrame, dict[str, str]]:
    """Read a comma-separated table as text.

    Parameters
    ----------
    path : path
        UTF-8, with or without a byte-order mark; the first line names the columns.
    required : tuple of str
        Column names, without unit, that must be there.

    Returns
    -------
    (DataFrame, dict)
        Cells as stripped strings, indexed by line number in the file; unit of each column whose header has one.

    Raises
    ------
    MissingFileError
        If there is no such file.
    TableError
        If it is not text, has no rows, repeats a column or lacks a required one.
    """
    source = Path(path)
    if not source.is_file():
        raise MissingFileError(f"{source}: there is no such file. Check the path; it is taken from the current folder.")
    try:
        frame = pd.read_csv(
            source, header=None, dtype=str, keep_default_na=False, encoding="utf-8-sig", skip_blank_lines=False
        )
    except UnicodeDecodeError as error:
        raise TableError(f"{source}: is not UTF-8 text (byte {error.start}). Save it as CSV UTF-8.") from error
    except (pd.errors.ParserError, pd.errors.EmptyDataError) as error:
        raise TableError(f"{source}: cannot be read as a comma-separated table: {str(error).strip()}.") from error
    frame.index = pd.RangeIndex(1, len(frame) + 1)
    frame, units = _split_headers(frame.iloc[1:].set_axis(frame.iloc[0], axis=1), source)
    _check_columns(frame, required, source)
    frame = frame.apply(lambda column: column.fillna("").str.strip())
    frame = frame[(frame != "").any(axis=1)]
    if frame.empty:
        raise TableError(f"{source}: has a header but no rows.")
    return frame, units


def read_columns(path: str | os.PathLike[str], *, required: tuple[str, ...]) -> tuple[pd.DataFrame, dict[str, str]]:
    """Read a table whose columns stand apart by commas or by blanks; which of them, the header tells.

    Parameters
    ----------
    path : path
        As :func:`read_table`. Apart by blanks: the header reads ``radius [km]  density [g cm-3]``, lines that start with ``#`` are
        comments, and the last comment above the numbers is the header if no other line is.
    required : tuple of str
        Column names, without unit, that must be there.

    Returns
    -------
    (DataFrame, dict)
        As :func:`read_table`.

    Raises
    ------
    MissingFileError, TableError
        As :func:`read_table`; also if a row has not as many cells as the header.
    """
    source = Path(path)
    data = source.read_bytes() if source.is_file() else b""
    lines = data.decode("utf-8-sig", errors="replace").splitlines()
    header = next((line for line in lines if line.strip() and not line.lstrip().startswith("#")), "")
    if "," in header or not header.strip() or "\ufffd" in "".join(lines):
        return read_table(source, required=required)
    rows = {number: line.split() for number, line in enumerate(lines, 1) if line.strip()}
    comments = [number for number, cells in rows.items() if cells[0].startswith("#")]
    cells = {number: row for number, row in rows.items() if number not in comments}
    first = min(cells)
    if _is_number(cells[first][0]):  # no plain header: the last comment above is one
        above = [lines[number - 1].lstrip("# \t") for number in comments if number < first]
        if not above:
            raise TableError(f"{source}: line {first}: holds numbers where the names of the columns should stand.")
        header = above[-1]
    else:
        del cells[first]
    names = [f"{name} {unit}".strip() for name, unit in _SPACED_HEADER.findall(header)]
    for number, row in cells.items():
        if len(row) != len(names):
            raise TableError(
                f"{source}: line {number}: has {len(row)} cells, the header {len(names)} columns. Write '-' for a gap."
            )
    frame = pd.DataFrame(list(cells.values()), index=list(cells), columns=names, dtype=str).replace("-", "")
    frame, units = _split_headers(frame, source)
    _check_columns(frame, required, source)
    if frame.empty:
        raise TableError(f"{source}: has a header but no rows.")
    return frame, units


def _is_number(cell: str) -> bool:
    try:
        float(cell)
    except ValueError:
        return False
    return True


def _split_headers(frame: pd.DataFrame, source: Path) -> tuple[pd.DataFrame, dict[str, str]]:
    if len(frame.columns) == 1 and any(mark in str(frame.columns[0]) for mark in ";\t|"):
        raise TableError(f"{source}: the header {str(frame.columns[0])!r} has no commas. Use commas between columns.")
    names, units = [], {}
    for header in frame.columns:
        match = _HEADER.match(str(header).strip())
        if match is None:
            raise TableError(
                f"{source}: column header {header!r} must be a name, or a name and a unit as in 'mass_rate [Gt yr-1]'."
            )
        names.append(match["name"])
        if match["unit"] is not None:
            units[match["name"]] = match["unit"].strip()
    repeated = sorted({name for name in names if names.count(name) > 1})
    if repeated:
        raise TableError(f"{source}: column {repeated[0]!r} stands there twice. Keep one.")
    return frame.set_axis(names, axis=1), units


def _check_columns(frame: pd.DataFrame, required: tuple[str, ...], source: Path) -> None:
    missing = [name for name in required if name not in frame.columns]
    if not missing:
        return
    found = [str(name) for name in frame.columns]
    hint = nearest_names(missing[0], found)
    raise TableError(
        f"{source}: lacks the column{'s' if len(missing) > 1 else ''} {', '.join(missing)}; found {', '.join(found)}. {hint}"
    )


def numbers(frame: pd.DataFrame, column: str, *, path: str | os.PathLike[str]) -> np.ndarray:
    """Cells of one text column as float64, or TableError naming the line and the cell."""
    values = pd.to_numeric(frame[column], errors="coerce").to_numpy(dtype=np.float64)
    bad = np.flatnonzero(~np.isfinite(values))
    if bad.size:
        cell = frame[column].iloc[bad[0]]
        cure = "Use a decimal point." if re.fullmatch(r"[-+]?\d+,\d+", cell) else "Give a finite number."
        raise TableError(f"{path}: line {frame.index[bad[0]]}: {column} is {cell!r}, not a number. {cure}")
    return values


def read_rates(path: str | os.PathLike[str]) -> pd.DataFrame:
    """Read a table of constant mass rates.

    Parameters
    ----------
    path : path
        CSV with ``time_start``, ``time_end`` (ISO dates), ``source``, ``mass_rate [Gt yr-1]``, ``mass_rate_sigma [Gt yr-1]``,
        ``citation`` and optionally ``scope``; any unit convertible to Gt yr-1.

    Returns
    -------
    DataFrame
        Same columns, rates in Gt yr-1 (negative = loss), sigma 1 standard uncertainty, times as datetime64; ``scope``, and
        ``error_group``, here each source its own: independent errors.

    Raises
    ------
    MissingFileError, TableError, UnitsError
        If the file, a column, a number, a date or a unit cannot be used.
    """
    frame, units = read_table(path, required=_RATE_COLUMNS)
    out = frame.loc[:, list(_RATE_COLUMNS)].copy()
    out["scope"], out["error_group"] = frame.get("scope", ""), frame["source"]
    for column in ("mass_rate", "mass_rate_sigma"):
        held = {"units": units[column]} if column in units else {}
        _, factor = vocabulary.require(held, ("Gt yr-1",), argument=f"{path}: column {column}")
        out[column] = numbers(frame, column, path=path) * factor
    for column in ("time_start", "time_end"):
        out[column] = _dates(frame, column, path)
    _check_rates(out, path)
    return out.reset_index(drop=True)


def _dates(frame: pd.DataFrame, column: str, path: str | os.PathLike[str]) -> pd.Series:
    values = pd.to_datetime(frame[column], errors="coerce", format="ISO8601")
    if values.isna().any():
        line = values.index[values.isna()][0]
        raise TableError(
            f"{path}: line {line}: {column} is {frame[column][line]!r}, not an ISO date such as 1992-01-01."
        )
    return values


def _check_rates(rates: pd.DataFrame, path: str | os.PathLike[str]) -> None:
    for line, row in rates.iterrows():
        if not row["source"]:
            raise TableError(f"{path}: line {line}: source is empty. Name the mass source.")
        if row["mass_rate_sigma"] < 0.0:
            raise TableError(
                f"{path}: line {line}: mass_rate_sigma is {row['mass_rate_sigma']:g}; it must be 0 or more."
            )
        if row["time_end"] <= row["time_start"]:
            raise TableError(f"{path}: line {line}: time_end must lie after time_start.")
    repeated = rates["source"][rates["source"].duplicated()]
    if not repeated.empty:
        raise TableError(
            f"{path}: line {repeated.index[0]}: source {repeated.iloc[0]!r} stands there twice. Keep one row each."
        )


def csv_text(table: pd.DataFrame) -> str:
    """Comma-separated text of a table, UTF-8, line feeds; numbers in full, gaps empty.

    A text cell or header that a spreadsheet would run as a formula (it starts with ``=``, ``+``, ``-``, ``@``, a tab or a carriage
    return) gets an apostrophe in front.
    """
    safe = table.rename(columns=_harmless)
    texts = {name: safe[name].map(_harmless) for name in safe.columns if safe[name].dtype.kind not in "iufbM"}
    return str(safe.assign(**texts).to_csv(index=False, lineterminator="\n"))


def _harmless(cell: Any) -> Any:
    return f"'{cell}" if isinstance(cell, str) and cell.startswith(("=", "+", "-", "@", "\t", "\r")) else cell


def read_plain_csv(path: str | os.PathLike[str], *, numeric: tuple[str, ...]) -> pd.DataFrame:
    """Table as :func:`csv_text` wrote it: the apostrophe of harmless formulas taken off.

    Parameters
    ----------
    path : path
        The file.
    numeric : tuple of str
        Columns that hold numbers where they are there, exact to the bit, gaps as NaN; all others are text.

    Raises
    ------
    MissingFileError
        If there is no such file.
    TableError
        If it is not such a table.
    """
    source = Path(path)
    if not source.is_file():
        raise MissingFileError(f"{source}: there is no such file. Check the path.")
    try:
        table = pd.read_csv(source, encoding="utf-8", dtype=str, keep_default_na=False)
        numbers_of = {name: [float(cell or "nan") for cell in table[name]] for name in numeric if name in table}
    except (UnicodeDecodeError, pd.errors.ParserError, pd.errors.EmptyDataError, ValueError) as error:
        raise TableError(f"{source}: cannot be read as a table: {str(error).strip()}. Write it again.") from error
    texts = {name: table[name].map(_plain) for name in table.columns if name not in numbers_of}
    return table.assign(**texts, **numbers_of).rename(columns=_plain)


def _plain(cell: str) -> str:
    return cell[1:] if cell.startswith("'") and _harmless(cell[1:]) == cell else cell
