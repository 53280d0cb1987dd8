"""Correlation of errors between mass sources: a square table, read, checked, and put into a ledger."""

import os

import numpy as np
import xarray as xr

from massfingerprint.errors import InputError, TableError, nearest_names
from massfingerprint.files.tables import numbers, read_table

_ROOM = 1e-9  # of a table rounded to decimals


def read_correlation(path: str | os.PathLike[str]) -> xr.DataArray:
    """Read a square table of correlations.

    Parameters
    ----------
    path : path
        CSV: a column ``source``, then one column per source, in the same order.

    Returns
    -------
    DataArray (source, source_other)
        Between -1 and 1.

    Raises
    ------
    MissingFileError, TableError, InputError
        If the file cannot be read, is not square, or is no correlation table.
    """
    frame, _ = read_table(path, required=("source",))
    names, others = list(frame["source"]), [str(name) for name in frame.columns if name != "source"]
    if names != others:
        raise TableError(
            f"{path}: must be square, rows and columns in one order; rows {', '.join(names)}, columns {', '.join(others)}."
        )
    values = np.stack([numbers(frame, name, path=path) for name in others], axis=1)
    table = xr.DataArray(values, dims=("source", "source_other"), coords={"source": names, "source_other": names})
    return check_correlation(table, argument=str(path))


def check_correlation(table: xr.DataArray, *, argument: str = "correlation") -> xr.DataArray:
    """Return a correlation table once it is one: symmetric, 1 on the diagonal, no combination of negative variance."""
    if (
        table.dims != ("source", "source_other")
        or table["source"].values.tolist() != table["source_other"].values.tolist()
    ):
        raise InputError(
            f"{argument}: must have dimensions (source, source_other) with the same names, got {table.dims}."
        )
    values = np.asarray(table.values, dtype=np.float64)
    if not np.isfinite(values).all() or np.abs(values).max() > 1.0 + _ROOM:
        raise InputError(
            f"{argument}: must hold numbers between -1 and 1, got {np.nanmin(values):g} to {np.nanmax(values):g}."
        )
    if np.abs(np.diag(values) - 1.0).max() > _ROOM:
        raise InputError(f"{argument}: a source is fully correlated with itself: the diagonal must be 1.")
    if np.abs(values - values.T).max() > _ROOM:
        raise InputError(f"{argument}: must be symmetric.")
    lowest = float(np.linalg.eigvalsh(values)[0])
    if lowest < -1e-6:
        raise InputError(
            f"{argument}: is no correlation table, some sum of sources would have a negative variance ({lowest:.3g})."
        )
    return table


def with_correlation(ledger: xr.Dataset, table: xr.DataArray) -> xr.Dataset:
    """Put correlations between sources into a ledger.

    Parameters
    ----------
    ledger : Dataset (source, time)
        From ``read_ledger``.
    table : DataArray (source, source_other)
        Every source of the ledger in it; sources the ledger does not have are left out.

    Returns
    -------
    Dataset (source, time)
        A new ledger with ``source_correlation``; every total, sum and rate of it then counts the correlation.

    Raises
    ------
    InputError
        If the table is no correlation table or lacks a source.
    """
    check_correlation(table)
    known = [str(name) for name in table["source"].values]
    wanted = [str(name) for name in ledger["source"].values]
    for name in wanted:
        if name not in known:
            raise InputError(f"correlation: has no row for {name!r}. {nearest_names(name, known)}")
    places = [known.index(name) for name in wanted]
    values = np.asarray(table.values, dtype=np.float64)[np.ix_(places, places)]
    labels = np.array(wanted, dtype=object)
    attrs = {"units": "1", "long_name": "correlation of errors between sources"}
    return ledger.assign_coords(source_other=labels).assign(
        source_correlation=(("source", "source_other"), values, attrs)
    )
