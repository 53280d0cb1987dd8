"""Profiles of sea water made sound: absolute salinity and conservative temperature on common levels, and what each row reaches."""

from dataclasses import dataclass

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.arguments import one_of
from massfingerprint.errors import InputError, UnitsError

Array = NDArray[np.float64]
ROWS = ("profile", "time")
DEEPEST = 12_000.0  # m: below every trench
_SALINITIES = {"practical": "sea_water_practical_salinity", "absolute": "sea_water_absolute_salinity"}
_TEMPERATURES = {
    "in situ": "sea_water_temperature",
    "potential": "sea_water_potential_temperature",
    "conservative": "sea_water_conservative_temperature",
}
_KINDS = {"salinity": _SALINITIES, "temperature": _TEMPERATURES}
_SALINITY_UNITS = {
    "practical": ("1", "psu", "PSU", "pss", "PSS-78", "1e-3", "0.001"),
    "absolute": ("g kg-1", "g/kg", "g kg^-1", "1e-3", "0.001"),
}
_CELSIUS = ("degC", "degree_Celsius", "degrees_Celsius", "degree_C", "degrees_C", "Celsius", "celsius", "°C")
_KELVIN = ("K", "kelvin", "Kelvin")
_SOUND = {"salinity": (0.0, 50.0), "temperature": (-3.0, 45.0)}  # wider than any sea; beyond is a code or another unit
_LATEST_START = 30.0  # m: what a first level may be extended over to the surface, within a usual mixed layer


@dataclass(frozen=True)
class Columns:
    """Profiles on common levels: absolute salinity and conservative temperature (row, level), NaN in gaps."""

    depth: Array
    salinity: Array
    temperature: Array
    lat: Array
    lon: Array

    @property
    def held(self) -> NDArray[np.bool_]:
        """Where (row, level) both are known."""
        return np.isfinite(self.salinity) & np.isfinite(self.temperature)

    def at(self, row: int, nodes: Array) -> tuple[Array, Array]:
        """Salinity and temperature of one row at depths: straight lines between its own levels, the first up to the surface."""
        own = self.held[row]
        levels = self.depth[own]
        return (
            np.interp(nodes, levels, self.salinity[row, own]),
            np.interp(nodes, levels, self.temperature[row, own]),
        )


def row_of(profiles: xr.Dataset, argument: str) -> str:
    """Name of the dimension beside depth: profile or time."""
    if not isinstance(profiles, xr.Dataset) or not {"salinity", "temperature"} <= set(profiles.data_vars):
        raise InputError(f"{argument}: must be a Dataset with salinity and temperature (profile or time, depth).")
    rows = {str(dim) for name in _KINDS for dim in profiles[name].dims} - {"depth"}
    if len(rows) != 1 or not rows <= set(ROWS):
        found = ", ".join(map(str, profiles["temperature"].dims))
        raise InputError(f"{argument}: needs the dimensions depth and one of {' or '.join(ROWS)}, got {found}.")
    return rows.pop()


def depths_of(data: xr.Dataset, argument: str) -> Array:
    """Levels (level,) in m, ascending."""
    if "depth" not in data.coords or data["depth"].dims != ("depth",):
        raise InputError(f"{argument}: needs the coordinate depth (depth) in m, positive down.")
    depth = data["depth"]
    _, factor = vocabulary.require({"units": depth.attrs.get("units", "m")}, ("m",), argument=f"{argument}: depth")
    values = np.asarray(depth.values, dtype=np.float64) * factor
    down = depth.attrs.get("positive", "down") == "down"
    if not down or not (np.diff(values) > 0.0).all() or not ((values >= 0.0) & (values <= DEEPEST)).all():
        raise InputError(
            f"{argument}: depth must ascend from 0 or more, m below the surface. Turn heights or pressures."
        )
    return values


def columns_of(data: xr.Dataset, rows: str, told: dict[str, str | None], argument: str) -> Columns:
    """Sound profiles as absolute salinity and conservative temperature."""
    import gsw  # noqa: PLC0415  as above

    depth = depths_of(data, argument)
    lat, lon = (_places(data, rows, name, argument) for name in ("lat", "lon"))
    kinds = {name: _kind(data[name], name, told[name], argument) for name in _KINDS}
    salt, heat = (_values(data[name].transpose(rows, "depth"), kinds[name], (name, argument)) for name in _KINDS)
    pressure = gsw.p_from_z(-depth[None, :], lat[:, None])
    if kinds["salinity"] == "practical":
        salt = gsw.SA_from_SP(salt, pressure, lon[:, None], lat[:, None])
    if kinds["temperature"] == "in situ":
        heat = gsw.CT_from_t(salt, heat, pressure)
    elif kinds["temperature"] == "potential":
        heat = gsw.CT_from_pt(salt, heat)
    return Columns(depth, salt, heat, lat, lon)


def _kind(values: xr.DataArray, name: str, told: str | None, argument: str) -> str:
    """Which salinity or temperature it is, told or by its standard name."""
    known = _KINDS[name]
    if told is not None:
        one_of(told, tuple(known), argument=name, kind=f"kind of {name}")
    said = next((kind for kind, word in known.items() if values.attrs.get("standard_name") == word), told)
    if said is None:
        raise InputError(f"{argument}: {name} does not say which it is. Pass {name}= one of {', '.join(known)}.")
    if told is not None and said != told and argument != "reference":
        raise InputError(f"{argument}: {name} is {said} by its standard name, {name}={told!r} was passed. Drop one.")
    return said


def _values(values: xr.DataArray, kind: str, names: tuple[str, str]) -> Array:
    """Numbers in the unit of gsw; refused outside what the sea has."""
    name, argument = names
    unit = values.attrs.get("units")
    out = np.asarray(values.values, dtype=np.float64)
    if name == "salinity":
        allowed = _SALINITY_UNITS[kind]
        if unit not in allowed and not (kind == "practical" and unit is None):
            raise UnitsError(f"{argument}: {kind} salinity must be in {allowed[0]!r}, got {unit!r}. Convert first.")
    elif unit in _KELVIN:
        out = out - 273.15
    elif unit not in _CELSIUS:
        raise UnitsError(f"{argument}: temperature must be in 'degC' or 'K', got {unit!r}. Set attrs['units'].")
    low, high = _SOUND[name]
    bad = ~np.isnan(out) & ~((out >= low) & (out <= high))
    if bad.any():
        row, level = np.argwhere(bad)[0]
        raise InputError(
            f"{argument}: {name} of row {row}, level {level} is {out[row, level]:g}; the sea has {low:g} to {high:g}. "
            "Mark gaps by NaN and check the unit."
        )
    return out


def _places(data: xr.Dataset, rows: str, name: str, argument: str) -> Array:
    if name not in data.variables or not set(data[name].dims) <= {rows}:
        raise InputError(f"{argument}: needs {name} in degrees, one for all or one per {rows}.")
    values = np.broadcast_to(np.asarray(data[name].values, dtype=np.float64), (data.sizes[rows],))
    low, high = (-90.0, 90.0) if name == "lat" else (-180.0, 360.0)
    if not ((values >= low) & (values <= high)).all():
        raise InputError(f"{argument}: {name} must lie between {low:g} and {high:g} everywhere.")
    return values.copy()


def reach(columns: Columns, deepest: float) -> dict[str, NDArray]:
    """What each row reaches, and why it cannot be used."""
    count = columns.lat.size
    reached, first, gap = (np.full(count, np.nan) for _ in range(3))
    reason = np.full(count, "", dtype=object)
    for row, own in enumerate(columns.held):
        levels = columns.depth[own]
        if levels.size == 0:
            reason[row] = "no level has both salinity and temperature"
            continue
        first[row], reached[row] = levels[0], levels[-1]
        used = levels[: int(np.searchsorted(levels, deepest)) + 1]
        gap[row] = np.diff(used, prepend=0.0).max()
        if reached[row] < deepest:
            reason[row] = f"reaches {reached[row]:g} m, not {deepest:g} m"
        elif first[row] > _LATEST_START:
            reason[row] = f"begins at {first[row]:g} m, deeper than {_LATEST_START:g} m"
    return {"depth_reached": reached, "first_level": first, "largest_gap": gap, "reason": reason}
