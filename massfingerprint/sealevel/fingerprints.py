"""Fingerprints: the patterns of relative sea level, sea surface, geoid, land motion and gravity that a load leaves."""

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import options, vocabulary
from massfingerprint.arguments import one_of, real_number
from massfingerprint.earth.frames import check_frame
from massfingerprint.earth.response import coefficient_factors
from massfingerprint.earth.rotation import length_of_day_change, polar_motion, rotation_vector
from massfingerprint.errors import InputError, NotConvergedError
from massfingerprint.files.scratch import scratch_array
from massfingerprint.sealevel._equation import Solution, solve
from massfingerprint.sealevel.solver import Prepared
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import Grid, grid_of
from massfingerprint.sphere.harmonics import check_finite, labelled

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

LEVELS = ("relative_sea_level", "sea_surface", "geoid", "bedrock_up")
HORIZONTAL = ("bedrock_north", "bedrock_east")
FIELDS = (
    *LEVELS,
    *HORIZONTAL,
    "gravity_fixed",
    "gravity_surface",
    "surface_load",
)
_SCALARS = ("polar_motion_x", "polar_motion_y", "length_of_day_change")
_ACCOUNT = {
    "rounds": "products with the ocean formed",
    "residual": "relative residual of the sea-level equation",
    "mass_residual": "relative mass left unbalanced",
    "converged": "1 where the tolerance was reached",
}
_OWN_DIMENSIONS = {"part", "coefficient", "site"}
_SMALLEST_TOLERANCE = 1e-14  # below, rounding keeps the residual from falling


def _check_load(load: xr.DataArray) -> tuple[xr.DataArray, Grid, bool, float]:
    """Load as (..., lat, lon), its grid, whether it is per gigatonne, and the factor to kg m-2 (Gt-1)."""
    if not isinstance(load, xr.DataArray):
        raise InputError(f"load: must be a DataArray (..., lat, lon), got {type(load).__name__}. Use spread_mass(...).")
    unit, scale = vocabulary.require(load.attrs, ("kg m-2", "kg m-2 Gt-1"), argument="load")
    grid = grid_of(load, argument="load")
    check_finite(load, argument="load")
    taken = sorted(_OWN_DIMENSIONS & set(load.dims))
    if taken:
        raise InputError(f"load: the dimension name {taken[0]!r} is used by the answer. Rename it first.")
    return load.transpose(..., "lat", "lon"), grid, unit == "kg m-2 Gt-1", scale


def _check_choices(outputs: tuple[str, ...], frame: str, tolerance: float, on_failure: str) -> tuple[str, ...]:
    names = (outputs,) if isinstance(outputs, str) else tuple(outputs or ())
    for name in names:
        one_of(name, FIELDS, argument="outputs", kind="field")
    if not names:
        raise InputError(f"outputs: name at least one of {', '.join(FIELDS)}.")
    check_frame(frame)
    between = f"a number from {_SMALLEST_TOLERANCE:g} to 1"
    real_number(tolerance, argument="tolerance", allowed=between, low=_SMALLEST_TOLERANCE, high=1.0)
    if on_failure not in ("raise", "return"):
        raise InputError(f"on_failure: must be 'raise' or 'return', got {on_failure!r}.")
    return names


def _field_coefficients(prepared: Prepared, name: str, frame: str, solution: Solution) -> Complex:
    """Coefficients (n,) in SI units of one field, each from its own sum."""
    if name == "surface_load":
        return solution.load
    degree, order = _transform.degrees_and_orders(prepared.max_degree)
    if name == "relative_sea_level":
        factors = prepared.operator.response
    else:
        kind = "geoid" if name == "sea_surface" else name
        turning = prepared.turning
        factors = coefficient_factors(prepared.love, kind, degree, order, rotation=turning, reference_frame=frame)
    out = factors * solution.load
    if name in ("relative_sea_level", "sea_surface"):
        out[0] += solution.uniform * np.sqrt(4.0 * np.pi)
    return out


def _scalars(prepared: Prepared, solution: Solution) -> tuple[float, float, float]:
    if not prepared.rotation:
        return 0.0, 0.0, 0.0
    load = _transform.resized(solution.load, 2)
    pairs = _transform.real_from_complex(load)[:, [2, 4, 5]]
    vector = rotation_vector(pairs, prepared.love, prepared.rotation_constants)
    x, y = polar_motion(vector)
    return float(x), float(y), float(length_of_day_change(vector))


def _refuse_unconverged(solution: Solution, place: dict[str, Any], tolerance: float) -> None:
    where = ", ".join(f"{dim} {value}" for dim, value in place.items())
    raise NotConvergedError(
        f"load{f' at {where}' if where else ''}: residual {solution.residual:.3g} after {solution.rounds} rounds, "
        f"tolerance {tolerance:g}. Check water_density and the Love numbers if it grows, loosen tolerance if it falls slowly."
    )


def solve_fingerprints(
    prepared: Prepared,
    load: xr.DataArray,
    *,
    outputs: tuple[str, ...] = ("relative_sea_level",),
    reference_frame: str = "CM",
    tolerance: float = 1e-8,
    on_failure: str = "raise",
) -> xr.Dataset:
    """Solve the sea-level equation for each load.

    Parameters
    ----------
    prepared : Prepared
        From :func:`prepare_solver`.
    load : DataArray (..., lat, lon)
        Surface mass, positive = added, units ``kg m-2`` or ``kg m-2 Gt-1`` (or convertible to them), on any regular global
        cell-centred grid. Degrees beyond its band limit are 0.
    outputs : tuple of str
        Any of ``relative_sea_level``, ``sea_surface``, ``geoid``, ``bedrock_up``, ``bedrock_north``, ``bedrock_east``,
        ``gravity_fixed`` (at a fixed point just above the load), ``gravity_surface`` (on the moving surface, the load's
        attraction from below), ``surface_load`` (ice and water together).
    reference_frame : str
        Frame of degree 1 of all but relative sea level: ``CM``, ``CF``, ``CE``, ``CL`` or ``CH``.
    tolerance : float
        On the relative residual, 1e-14 to 1.
    on_failure : str
        ``"raise"``, or ``"return"`` to get unconverged answers with ``converged`` 0.

    Returns
    -------
    Dataset (..., lat, lon)
        On the load's grid, fields defined everywhere: m for a load in kg m-2, mm Gt-1 for kg m-2 Gt-1 (gravity m s-2 and
        nm s-2 Gt-1), positive = rise, uplift, north, east, stronger; ``<name>_coefficients`` (..., part, coefficient), of the
        horizontal motion ``bedrock_horizontal_coefficients``, whose gradient on the unit sphere it is; ``polar_motion_x``,
        ``polar_motion_y`` [mas], ``length_of_day_change`` [ms] (per Gt likewise; 0 without rotation); the account ``rounds``,
        ``residual``, ``mass_residual``, ``converged``; ``load_extent``, 1 in cells that carry load.

    Raises
    ------
    GridError
        If the load's grid is not regular and global, or a value is not finite (its place is named).
    UnitsError
        If the load has no units or the wrong ones.
    InputError
        If a choice is not known.
    NotConvergedError
        If a solve misses its tolerance and ``on_failure`` is ``"raise"``.
    """
    if not isinstance(prepared, Prepared):
        raise InputError(f"prepared: must come from prepare_solver, got {type(prepared).__name__}.")
    names = _check_choices(outputs, reference_frame, tolerance, on_failure)
    load, grid, per_gigatonne, scale = _check_load(load)
    lead = load.dims[:-2]
    shape = load.shape[:-2]
    band = min(grid.band_limit, prepared.max_degree)
    flat = load.values.reshape((-1, grid.nlat, grid.nlon))
    store = _Store(names, flat.shape[0], prepared.max_degree, grid)

    def one(position: int) -> None:
        ice = _transform.analyse(grid.to_rings(flat[position]) * scale, band, grid.first_azimuth)
        solution = solve(
            prepared.operator,
            prepared.with_melt(_transform.resized(ice, prepared.max_degree)),
            tolerance=tolerance,
            correction=prepared.correction,
        )
        if not solution.converged and on_failure == "raise":
            index = np.unravel_index(position, shape) if shape else ()
            place = {str(d): load[d].values[i] if d in load.coords else i for d, i in zip(lead, index, strict=True)}
            _refuse_unconverged(solution, place, tolerance)
        store.put(position, prepared, solution, reference_frame)

    _for_each(one, flat.shape[0])
    out = store.dataset(load, per_gigatonne)
    out["load_extent"] = (
        (*lead, "lat", "lon"),
        (load.values != 0.0).astype(np.int8),
        {"long_name": "1 in cells that carry load", "units": "1"},
    )
    return out.assign_attrs(_attributes(prepared, reference_frame, band))


def _for_each(one: Callable[[int], None], count: int) -> None:
    """Solve loads beside each other, a thread each, where there are enough; else one after the other with all threads."""
    threads = options.threads()
    if threads == 1 or count < 2 * threads:
        for position in range(count):
            one(position)
        return

    def alone(position: int) -> None:
        with options.one_thread():
            one(position)

    one(0)  # what is made when first used is made once
    with ThreadPoolExecutor(threads) as pool:
        try:
            for _ in pool.map(alone, range(1, count)):
                pass
        except BaseException:
            pool.shutdown(cancel_futures=True)  # an interrupt or a failure does not wait for the rest
            raise


def _attributes(prepared: Prepared, frame: str, load_degree: int) -> dict[str, Any]:
    return {
        "reference_frame": frame,
        "max_degree": prepared.max_degree,
        "load_max_degree": load_degree,
        "rotation": "on" if prepared.rotation else "off",
        "water_density": prepared.water_density,
        "redistributed_density": prepared.redistributed_density,
        "ocean_area": prepared.ocean_area,
        "gigatonnes_per_millimetre": prepared.gigatonnes_per_millimetre,
        "love_numbers": str(prepared.love.attrs.get("source", "given by the user")),
        "comment": "Geodetic latitudes are used as spherical latitudes. Fields are defined everywhere, land included.",
    }


def _held(name: str) -> str:
    """Name of the coefficients that a field is made from."""
    return "bedrock_horizontal" if name in HORIZONTAL else name


def coefficients_name(field: str) -> str:
    """Name of the variable with the coefficients that a field is made from."""
    return f"{_held(field)}_coefficients"


class _Store:
    """Arrays of the results, filled load by load."""

    def __init__(self, names: tuple[str, ...], count: int, max_degree: int, grid: Grid) -> None:
        self._names, self._grid = names, grid
        held = list(dict.fromkeys(_held(name) for name in names))
        shapes = (count, grid.nlat, grid.nlon), (count, 2, _transform.coefficient_count(max_degree))
        size = 8 * (len(names) * int(np.prod(shapes[0])) + len(held) * int(np.prod(shapes[1])))
        limit = options.memory_limit()
        new = np.empty if limit is None or size <= limit else scratch_array
        self._fields = {name: new(shapes[0]) for name in names}
        self._pairs = {name: new(shapes[1]) for name in held}
        self._scalars = np.empty((count, len(_SCALARS)))
        self._account: dict[str, NDArray] = {
            "rounds": np.empty(count, dtype=np.int32),
            "residual": np.empty(count),
            "mass_residual": np.empty(count),
            "converged": np.empty(count, dtype=np.int8),
        }

    def put(self, position: int, prepared: Prepared, solution: Solution, frame: str) -> None:
        for name in self._pairs:
            coefficients = _field_coefficients(prepared, name, frame, solution)
            for label, rings in self._rings(name, coefficients).items():
                self._fields[label][position] = self._grid.from_rings(rings)
            self._pairs[name][position] = _transform.real_from_complex(coefficients)
        self._scalars[position] = _scalars(prepared, solution)
        for name, values in self._account.items():
            values[position] = getattr(solution, name)

    def _rings(self, name: str, coefficients: Complex) -> dict[str, Array]:
        grid = self._grid
        shape = (grid.nlat, grid.nlon)
        if name != "bedrock_horizontal":
            return {name: _transform.synthesise(coefficients, shape, grid.first_azimuth)}
        both = _transform.gradient(coefficients, shape, grid.first_azimuth)
        return {label: part for label, part in zip(HORIZONTAL, both, strict=True) if label in self._names}

    def dataset(self, load: xr.DataArray, per_gigatonne: bool) -> xr.Dataset:
        lead, shape = load.dims[:-2], load.shape[:-2]
        coords = {k: v for k, v in load.coords.items() if set(v.dims) <= set(lead)}
        out = xr.Dataset(coords={**coords, "lat": load["lat"], "lon": load["lon"]})
        for name in self._names:
            unit = vocabulary.to_rim(name, per_gigatonne=per_gigatonne)
            attrs = vocabulary.attributes(name, per_gigatonne=per_gigatonne)
            field = self._fields[name] if unit == 1.0 else self._fields[name].__imul__(unit)
            out[name] = ((*lead, "lat", "lon"), field.reshape((*shape, *field.shape[-2:])), attrs)
        for name, pairs in self._pairs.items():
            np.multiply(pairs, vocabulary.to_rim(name, per_gigatonne=per_gigatonne), out=pairs)
            attrs = vocabulary.attributes(name, per_gigatonne=per_gigatonne)
            own = {"units": attrs["units"], "long_name": f"orthonormal coefficients of {attrs['long_name']}"}
            out[f"{name}_coefficients"] = labelled(
                pairs.reshape((*shape, *pairs.shape[1:])), lead, coords
            ).assign_attrs(own)
        for column, name in enumerate(_SCALARS):
            attrs = vocabulary.attributes(name, per_gigatonne=per_gigatonne)
            out[name] = (lead, self._scalars[:, column].reshape(shape), attrs)
        for name, meaning in _ACCOUNT.items():
            out[name] = (lead, self._account[name].reshape(shape), {"long_name": meaning, "units": "1"})
        return out
