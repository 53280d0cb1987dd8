"""What a gigatonne anywhere does at a site: one solve per site and field, by reciprocity.

For any two loads, int(I2 S1) = int(I1 S2): the relative sea level at a site from mass anywhere is the pattern of a unit point mass
at the site. For the bedrock, B being the response of the solid Earth to that point mass alone, it is B plus the relative sea level
of the load rho_w O B; for the sea surface it is the sum of the two. Exact for the discrete problem: its operator is self-adjoint.
"""

from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.arguments import one_of
from massfingerprint.constants import KILOGRAMS_PER_GIGATONNE
from massfingerprint.earth.frames import check_frame
from massfingerprint.earth.response import coefficient_factors
from massfingerprint.errors import GridError, InputError, NotConvergedError
from massfingerprint.sealevel._equation import solve
from massfingerprint.sealevel.sites import taper
from massfingerprint.sealevel.solver import Prepared
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import Grid, grid_of
from massfingerprint.sphere.harmonics import check_finite, labelled, max_degree_of
from massfingerprint.sphere.points import check_sites

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]
KERNEL_FIELDS = ("relative_sea_level", "sea_surface", "bedrock_up")


def point_mass(prepared: Prepared, lat: float, lon: float) -> Complex:
    """Coefficients (n,) in kg m-2 of one gigatonne added at a point, up to the degree of the solution."""
    unit = _transform.point_coefficients(np.deg2rad(90.0 - lat), np.deg2rad(lon % 360.0), prepared.max_degree)
    return unit * (KILOGRAMS_PER_GIGATONNE.value / float(prepared.love.attrs["radius"]) ** 2)


def sea_level_of(prepared: Prepared, ice: Complex, *, tolerance: float, label: str) -> Complex:
    """Relative sea level (n,) in m that a load (n,) in kg m-2 makes.

    Raises
    ------
    NotConvergedError
        If the solve misses its tolerance; ``label`` says of what.
    """
    solution = solve(prepared.operator, ice, tolerance=tolerance, correction=prepared.correction)
    if not solution.converged:
        raise NotConvergedError(f"{label}: residual {solution.residual:.3g}, tolerance {tolerance:g}. Loosen it.")
    out = prepared.operator.response * solution.load
    out[0] += solution.uniform * np.sqrt(4.0 * np.pi)
    return out


def _kernels_of_site(
    prepared: Prepared, point: Complex, names: tuple[str, ...], frame: str, tolerance: float, label: str
) -> dict[str, Complex]:
    """Coefficients (n,) in m per gigatonne added, over the place of the mass, of each field at one site."""
    out: dict[str, Complex] = {}
    if "relative_sea_level" in names or "sea_surface" in names:
        out["relative_sea_level"] = sea_level_of(prepared, point, tolerance=tolerance, label=label)
    if "bedrock_up" in names or "sea_surface" in names:
        degree, order = _transform.degrees_and_orders(prepared.max_degree)
        factors = coefficient_factors(
            prepared.love, "bedrock_up", degree, order, rotation=prepared.turning, reference_frame=frame
        )
        bedrock = factors * point
        follows = sea_level_of(prepared, prepared.operator.ocean_load(bedrock), tolerance=tolerance, label=label)
        out["bedrock_up"] = bedrock + follows
    out = {name: prepared.with_melt_adjoint(kernel) for name, kernel in out.items()}
    if "sea_surface" in names:
        out["sea_surface"] = out["relative_sea_level"] + out["bedrock_up"]
    return {name: out[name] for name in names}


def site_kernels(
    prepared: Prepared,
    sites: pd.DataFrame,
    *,
    outputs: tuple[str, ...] = ("relative_sea_level",),
    reference_frame: str = "CM",
    tolerance: float = 1e-8,
    tapered: bool = False,
) -> xr.Dataset:
    """Solve for what one gigatonne added anywhere does at each site.

    Parameters
    ----------
    prepared : Prepared
        From ``prepare_solver``.
    sites : DataFrame
        Columns site, lat, lon.
    outputs : tuple of str
        Any of ``relative_sea_level``, ``sea_surface``, ``bedrock_up``. One solve a site for each of the first and the last; the
        sea surface needs both.
    reference_frame : str
        Of sea surface and bedrock.
    tolerance : float
        Of the solves.
    tapered : bool
        Fade the upper half of the degrees out at the site: the kernel is smooth, and its values are those that ``at_sites``
        calls ``<name>_tapered``.

    Returns
    -------
    Dataset (site, lat, lon)
        mm Gt-1 on the prepared ocean's grid, positive = rise or uplift at the site for mass *added* at (lat, lon), with
        ``<name>_coefficients`` (site, part, coefficient); ``site_lat``, ``site_lon``. Untapered, coefficients are cut at the
        degree of the solution and the field ripples; apply it to loads rather than reading it.

    Raises
    ------
    InputError, SiteError, NotConvergedError
        If a choice or a site cannot be used, or a solve misses its tolerance.
    """
    if not isinstance(prepared, Prepared):
        raise InputError(f"prepared: must come from prepare_solver, got {type(prepared).__name__}.")
    names = (outputs,) if isinstance(outputs, str) else tuple(outputs or ())
    for name in names:
        one_of(name, KERNEL_FIELDS, argument="outputs", kind="field with kernels")
    if not names:
        raise InputError(f"outputs: name at least one of {', '.join(KERNEL_FIELDS)}.")
    check_frame(reference_frame)
    table, grid = check_sites(sites), prepared.grid
    shape = (len(table), _transform.coefficient_count(prepared.max_degree))
    degree, _ = _transform.degrees_and_orders(prepared.max_degree)
    weights = taper(degree, prepared.max_degree) if tapered else np.ones(shape[1])
    pairs = {name: np.empty((shape[0], 2, shape[1])) for name in names}
    fields = {name: np.empty((shape[0], grid.nlat, grid.nlon)) for name in names}
    for row, (site, lat, lon) in enumerate(table.itertuples(index=False)):
        point = point_mass(prepared, float(lat), float(lon)) * weights
        found = _kernels_of_site(prepared, point, names, reference_frame, tolerance, f"site {site!r}")
        for name, coefficients in found.items():
            pairs[name][row] = _transform.real_from_complex(coefficients) * 1e3
            rings = _transform.synthesise(coefficients * 1e3, (grid.nlat, grid.nlon), grid.first_azimuth)
            fields[name][row] = grid.from_rings(rings)
    return _dataset(prepared, table, fields, pairs).assign_attrs(reference_frame=reference_frame)


def _dataset(prepared: Prepared, table: pd.DataFrame, fields: dict[str, Array], pairs: dict[str, Array]) -> xr.Dataset:
    grid, names = prepared.grid, table["site"].to_numpy(dtype=object)
    coords: dict[str, Any] = {
        "site": names,
        "site_lat": ("site", table["lat"].to_numpy(), {"units": "degrees_north", "long_name": "latitude of the site"}),
        "site_lon": ("site", table["lon"].to_numpy(), {"units": "degrees_east", "long_name": "longitude of the site"}),
        "lat": ("lat", grid.latitudes, {"units": "degrees_north", "standard_name": "latitude"}),
        "lon": ("lon", grid.longitudes, {"units": "degrees_east", "standard_name": "longitude"}),
    }
    out = xr.Dataset(coords=coords)
    for name, field in fields.items():
        attrs = vocabulary.attributes(name, per_gigatonne=True)
        attrs["long_name"] = f"{attrs['long_name']} at the site per gigatonne added here"
        out[name] = (("site", "lat", "lon"), field, attrs)
        own = {"units": attrs["units"], "long_name": f"orthonormal coefficients of {attrs['long_name']}"}
        out[f"{name}_coefficients"] = labelled(pairs[name], ("site",), {"site": names}).assign_attrs(own)
    return out.assign_attrs(
        max_degree=prepared.max_degree,
        rotation="on" if prepared.rotation else "off",
        gigatonnes_per_millimetre=prepared.gigatonnes_per_millimetre,
        radius=float(prepared.love.attrs["radius"]),
    )


def apply_kernels(kernels: xr.Dataset, load: xr.DataArray) -> xr.Dataset:
    """Values at the kernels' sites that a load makes, without solving anything.

    Parameters
    ----------
    kernels : Dataset
        From :func:`site_kernels`.
    load : DataArray (..., lat, lon)
        Surface mass, positive = added, in kg m-2 or kg m-2 Gt-1, on any regular global cell-centred grid; a lazy (dask) one stays
        lazy.

    Returns
    -------
    Dataset (..., site)
        Every field of the kernels: m for a load in kg m-2, mm Gt-1 for kg m-2 Gt-1; what ``solve_fingerprints`` and ``at_sites``
        give, to the tolerance of the kernels.

    Raises
    ------
    InputError, GridError, UnitsError
        If the kernels hold no coefficients, or the load cannot be used.
    """
    names = [name for name in KERNEL_FIELDS if isinstance(kernels, xr.Dataset) and f"{name}_coefficients" in kernels]
    if not names or "radius" not in kernels.attrs:
        raise InputError("kernels: hold no '<name>_coefficients' with a radius. Pass what site_kernels returned.")
    if not isinstance(load, xr.DataArray):
        raise InputError(f"load: must be a DataArray (..., lat, lon), got {type(load).__name__}. Use spread_mass(...).")
    unit, scale = vocabulary.require(load.attrs, ("kg m-2", "kg m-2 Gt-1"), argument="load")
    grid = grid_of(load, argument="load")
    load = load.transpose(..., "lat", "lon")
    if "site" in load.dims:
        raise InputError("load: the dimension name 'site' is used by the answer. Rename it first.")
    degree = min(grid.band_limit, max_degree_of(kernels[f"{names[0]}_coefficients"]))
    held = _coefficients(kernels, names, degree)
    # mm per gigatonne times kg m-2: the area element is a^2, a gigatonne 1e12 kg
    factor = scale * float(kernels.attrs["radius"]) ** 2 / KILOGRAMS_PER_GIGATONNE.value
    held *= factor * (1.0 if unit == "kg m-2 Gt-1" else 1e-3)
    lazy = load.chunks is not None
    if lazy or int(np.prod(load.shape[:-2])) > held.shape[0]:
        weights = grid.from_rings(_transform.adjoint_analyse(held, (grid.nlat, grid.nlon), grid.first_azimuth))
        values = _summed(load, weights)
    else:
        check_finite(load, argument="load")
        values = _contracted(load, grid, held, degree)
    return _at_sites(values, kernels, names, unit == "kg m-2 Gt-1")


def _coefficients(kernels: xr.Dataset, names: list[str], degree: int) -> Complex:
    """Coefficients (field times site, n) up to a degree."""
    rows = [kernels[f"{name}_coefficients"].transpose("site", "part", "coefficient").values for name in names]
    cut = _transform.resized(np.concatenate(rows), degree)
    return _transform.complex_from_real(cut)


def _contracted(load: xr.DataArray, grid: Grid, held: Complex, degree: int) -> xr.DataArray:
    """Values (..., kernel) by one analysis a load: cheapest for few loads."""
    flat = load.values.reshape((-1, grid.nlat, grid.nlon))
    pairs = _transform.real_from_complex(held).reshape((held.shape[0], -1))  # real ones contract by a plain sum
    out = np.empty((flat.shape[0], held.shape[0]))
    for row, one in enumerate(flat):
        alm = _transform.analyse(grid.to_rings(one), degree, grid.first_azimuth)
        out[row] = pairs @ _transform.real_from_complex(alm).ravel()
    lead = load.dims[:-2]
    coords = {key: value for key, value in load.coords.items() if set(value.dims) <= set(lead)}
    return xr.DataArray(out.reshape((*load.shape[:-2], -1)), dims=(*lead, "kernel"), coords=coords)


def _summed(load: xr.DataArray, weights: Array) -> xr.DataArray:
    """Values (..., kernel) by weights (kernel, lat, lon) on the cells, block by block if the load is lazy."""
    flat = weights.reshape((weights.shape[0], -1)).T

    def block(values: NDArray) -> Array:
        rows = np.asarray(values, dtype=np.float64).reshape((-1, flat.shape[0]))
        out = rows @ flat
        if not np.isfinite(out).all():
            raise GridError("load: holds values that are not finite. Fill or remove them first.")
        return out.reshape((*values.shape[:-2], flat.shape[1]))

    return xr.apply_ufunc(
        block,
        load.chunk(dict.fromkeys(("lat", "lon"), -1)) if load.chunks is not None else load,
        input_core_dims=[["lat", "lon"]],
        output_core_dims=[["kernel"]],
        dask="parallelized",
        output_dtypes=[np.float64],
        dask_gufunc_kwargs={"output_sizes": {"kernel": flat.shape[1]}},
    )


def _at_sites(values: xr.DataArray, kernels: xr.Dataset, names: list[str], per_gigatonne: bool) -> xr.Dataset:
    """The kernels' own dimension parted into fields and sites."""
    count = kernels.sizes["site"]
    places = {str(axis): ("site", kernels[f"site_{axis}"].values) for axis in ("lat", "lon")}
    places["site"] = ("site", kernels["site"].values)
    out = xr.Dataset(attrs=dict(kernels.attrs))
    for number, name in enumerate(names):
        part = values.isel(kernel=slice(number * count, (number + 1) * count)).rename(kernel="site")
        part = part.assign_coords(places)
        out[name] = part.assign_attrs(vocabulary.attributes(name, per_gigatonne=per_gigatonne))
    return out
