"""Fields of many loads, one after the other into a file: memory holds one step, however many there are."""

import os
from collections.abc import Callable

import xarray as xr

from massfingerprint.errors import InputError
from massfingerprint.files.netcdf import netcdf_steps
from massfingerprint.sealevel.fingerprints import solve_fingerprints
from massfingerprint.sealevel.solver import Prepared


def write_fingerprints(
    prepared: Prepared,
    load: xr.DataArray,
    path: str | os.PathLike[str],
    *,
    outputs: tuple[str, ...] = ("relative_sea_level",),
    reference_frame: str = "CM",
    progress: Callable[[int, int], None] | None = None,
) -> None:
    """Solve for every step of a load and append its fields to a NetCDF file.

    Parameters
    ----------
    prepared : Prepared
        From ``prepare_solver``.
    load : DataArray (step, ..., lat, lon)
        As for ``solve_fingerprints``; its first dimension, such as time, is walked along. A lazy (dask) load is computed step
        by step.
    path : path
        Target file, whole or not at all.
    outputs, reference_frame
        As for ``solve_fingerprints``. Coefficients are not written.
    progress : callable, optional
        Told (done, total) after every step.

    Raises
    ------
    InputError
        If the load has no dimension to walk along.
    GridError, UnitsError, NotConvergedError, MissingFileError
        As ``solve_fingerprints``, or if the folder is not there; no file is left then.
    """
    if not isinstance(load, xr.DataArray) or load.ndim < 3:
        raise InputError(
            "load: needs a first dimension, such as time, before lat and lon. Use solve_fingerprints for one."
        )
    dim = str(load.transpose(..., "lat", "lon").dims[0])
    steps = load if dim in load.coords else load.assign_coords({dim: range(load.sizes[dim])})
    with netcdf_steps(path, dim) as append:
        for number in range(load.sizes[dim]):
            one = steps.isel({dim: [number]}).compute()
            answer = solve_fingerprints(prepared, one, outputs=outputs, reference_frame=reference_frame)
            held = [
                name for name in answer.data_vars if not str(name).endswith("_coefficients") and name != "load_extent"
            ]
            append(answer[held].drop_dims("coefficient", errors="ignore"))
            if progress is not None:
                progress(number + 1, load.sizes[dim])
