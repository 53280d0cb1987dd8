"""Datasets to NetCDF, whole or not at all."""

import os

import xarray as xr

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
