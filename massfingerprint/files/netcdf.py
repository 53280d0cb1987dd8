"""Datasets to NetCDF, whole or not at all."""

import os
from pathlib import Path

import xarray as xr

from massfingerprint.errors import DamagedFileError, MissingFileError
from massfingerprint.files.atomic import replacing


def write_netcdf(dataset: xr.Dataset, path: str | os.PathLike[str]) -> None:
    """Write a dataset as compressed NetCDF-4.

    Parameters
    ----------
    dataset : Dataset
        Real variables only.
    path : path
        Target file; its folder must exist. An existing file is replaced only once the new one is complete.

    Raises
    ------
    MissingFileError
        If the folder does not exist.
    """
    encoding = {
        name: {"zlib": True, "_FillValue": None} for name in dataset.variables if dataset[name].dtype.kind in "fiu"
    }
    with replacing(path) as temporary:
        dataset.to_netcdf(temporary, engine="netcdf4", format="NETCDF4", encoding=encoding)


def read_netcdf(path: str | os.PathLike[str]) -> xr.Dataset:
    """Read a NetCDF file into memory.

    Raises
    ------
    MissingFileError
        If there is no such file.
    DamagedFileError
        If it is not NetCDF or cannot be read.
    """
    source = Path(path)
    if not source.is_file():
        raise MissingFileError(f"{source}: there is no such file. Check the path; it is taken from the current folder.")
    try:
        with xr.open_dataset(source, engine="netcdf4") as stored:
            return stored.load()
    except (OSError, ValueError) as error:
        raise DamagedFileError(
            f"{source}: cannot be read as NetCDF ({str(error).splitlines()[0]}). Write it again."
        ) from error
