"""Mass through time as few spatial modes: what takes hundreds of solves month by month takes one a mode."""

import numpy as np
import xarray as xr

from massfingerprint.arguments import real_number
from massfingerprint.errors import InputError
from massfingerprint.sphere.grids import grid_of
from massfingerprint.sphere.harmonics import check_finite

_FINEST = 1e-7  # squares of it are still told from rounding in the sum of products


def load_modes(load: xr.DataArray, *, dim: str = "time", tolerance: float = 1e-6) -> xr.Dataset:
    """Split a load into spatial modes and their amplitudes in time (empirical orthogonal functions, not centred).

    A linear answer follows from that to the modes: for ``answer = solve_fingerprints(prepared, modes["load"])`` the field in time
    is ``(answer["relative_sea_level"] * modes["amplitude"]).sum("mode")``.

    Parameters
    ----------
    load : DataArray (dim, lat, lon)
        Surface mass with units, on any regular global cell-centred grid.
    dim : str
        The dimension to split off.
    tolerance : float
        Root-mean-square of what is left out over that of the whole, over the sphere and all steps; 1e-7 to 1.

    Returns
    -------
    Dataset
        ``load`` (mode, lat, lon) in the unit of the load, ``amplitude`` (dim, mode) [1], ``left_out`` (dim): root-mean-square over
        the sphere of what the modes miss of each step, in the unit of the load; attribute ``relative_error``.

    Raises
    ------
    InputError, GridError
        If the load has other dimensions, is not finite, or the tolerance is out of range.

    Source
    ------
    Eckart & Young 1936, Psychometrika 1:211: no other modes of their number leave less.
    """
    if not isinstance(load, xr.DataArray) or set(load.dims) != {dim, "lat", "lon"}:
        found = load.dims if isinstance(load, xr.DataArray) else type(load).__name__
        raise InputError(f"load: must be a DataArray ({dim}, lat, lon), got {found}. Name the dimension to split off.")
    real_number(tolerance, argument="tolerance", allowed=f"a number from {_FINEST:g} to 1", low=_FINEST, high=1.0)
    grid = grid_of(load, argument="load")
    check_finite(load, argument="load")
    ordered = load.transpose(dim, "lat", "lon")
    rows = ordered.values.astype(np.float64).reshape((load.sizes[dim], -1))
    weights = grid.quadrature_weights.ravel() / (4.0 * np.pi)
    size, shape = np.linalg.eigh((rows * weights) @ rows.T)
    size, shape = np.maximum(size[::-1], 0.0), shape[:, ::-1]
    left = np.append(np.cumsum(size[::-1])[::-1], 0.0)  # squares left out when so many modes are kept
    kept = max(1, int(np.argmax(left <= tolerance**2 * left[0])))
    amplitude = shape[:, :kept]
    missed = np.sqrt(np.maximum((shape[:, kept:] ** 2) @ size[kept:], 0.0))
    modes = (amplitude.T @ rows).reshape((kept, *ordered.shape[1:]))
    unit = {"units": load.attrs.get("units", "1")}
    out = xr.Dataset(
        coords={"lat": load["lat"], "lon": load["lon"], **({dim: load[dim]} if dim in load.coords else {})}
    )
    out["load"] = (("mode", "lat", "lon"), modes, {**unit, "long_name": "spatial mode of the load"})
    out["amplitude"] = ((dim, "mode"), amplitude, {"units": "1", "long_name": "amplitude of the mode"})
    out["left_out"] = (dim, missed, {**unit, "long_name": "root-mean-square over the sphere of what the modes miss"})
    whole = float(np.sqrt(left[0]))
    return out.assign_attrs(relative_error=float(np.sqrt(left[kept])) / whole if whole > 0.0 else 0.0)
