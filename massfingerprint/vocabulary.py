"""The one table of variables: unit, sign, label, long name, CF name. Also the only home of pint (CF unit strings).

No arithmetic carries units along by accident: results get their attributes from here.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

from massfingerprint.errors import InputError, UnitsError, nearest_names


@dataclass(frozen=True)
class Variable:
    """What one variable is.

    Parameters
    ----------
    unit : str
        CF unit for an answer to a load in kg m-2, or the only unit.
    per_gigatonne : str
        CF unit for an answer to a load in kg m-2 Gt-1; empty if there is none.
    positive : str
        What a positive value means.
    label : str
        Words for tables and figures.
    long_name : str
        Words for files.
    standard_name : str
        CF standard name, only used with units of m or mm; empty if CF has none.
    """

    unit: str
    per_gigatonne: str
    positive: str
    label: str
    long_name: str
    standard_name: str = ""


VARIABLES: dict[str, Variable] = {
    "ocean_fraction": Variable(
        "1", "", "share of a cell that is sea", "ocean fraction", "sea area fraction", "sea_area_fraction"
    ),
    "surface_load": Variable("kg m-2", "kg m-2 Gt-1", "mass added", "surface load", "surface mass load"),
    "relative_sea_level": Variable(
        "m",
        "mm Gt-1",
        "rise",
        "relative sea level",
        "change in sea surface minus sea floor",
        "change_in_mean_sea_level_wrt_solid_surface",
    ),
    "sea_surface": Variable("m", "mm Gt-1", "rise", "geocentric sea level", "change in geocentric sea surface height"),
    "geoid": Variable("m", "mm Gt-1", "rise", "geoid", "change in geoid height, centrifugal potential included"),
    "bedrock_up": Variable(
        "m",
        "mm Gt-1",
        "uplift",
        "vertical land motion, elastic, present-day",
        "elastic vertical motion of the solid surface",
    ),
    "bedrock_north": Variable(
        "m", "mm Gt-1", "north", "land motion north, elastic", "elastic motion of the solid surface to the north"
    ),
    "bedrock_east": Variable(
        "m", "mm Gt-1", "east", "land motion east, elastic", "elastic motion of the solid surface to the east"
    ),
    "bedrock_horizontal": Variable(
        "m",
        "mm Gt-1",
        "moves towards higher values",
        "potential of horizontal land motion",
        "potential whose gradient on the unit sphere is the elastic motion north and east",
    ),
    "gravity_fixed": Variable(
        "m s-2",
        "nm s-2 Gt-1",
        "stronger",
        "gravity at a fixed point",
        "change in gravity at a fixed point just above the load",
    ),
    "gravity_surface": Variable(
        "m s-2",
        "nm s-2 Gt-1",
        "stronger",
        "gravity at the moving surface",
        "change in gravity on the moving solid surface, attraction of the load from below",
    ),
    "geocentre_x": Variable(
        "m", "mm Gt-1", "towards 0 N 0 E", "geocentre x", "motion of the centre of mass towards 0 N 0 E"
    ),
    "geocentre_y": Variable(
        "m", "mm Gt-1", "towards 0 N 90 E", "geocentre y", "motion of the centre of mass towards 0 N 90 E"
    ),
    "geocentre_z": Variable(
        "m", "mm Gt-1", "towards north", "geocentre z", "motion of the centre of mass to the north"
    ),
    "j2": Variable("1", "Gt-1", "flatter", "J2", "change in the dynamic form factor J2"),
    "stokes": Variable(
        "1", "Gt-1", "as printed", "Stokes coefficients", "change in fully normalised gravity coefficients"
    ),
    "polar_motion_x": Variable(
        "mas", "mas Gt-1", "towards 0 E", "polar motion x", "polar motion x_p caused by the load"
    ),
    "polar_motion_y": Variable(
        "mas", "mas Gt-1", "towards 90 W", "polar motion y", "polar motion y_p caused by the load"
    ),
    "length_of_day_change": Variable(
        "ms", "ms Gt-1", "longer day", "length of day", "change in length of day caused by the load"
    ),
}


def attributes(name: str, *, per_gigatonne: bool = False) -> dict[str, Any]:
    """Attributes of one variable for a result.

    Parameters
    ----------
    name : str
        A key of ``VARIABLES``.
    per_gigatonne : bool
        Whether the result is per gigatonne.

    Returns
    -------
    dict
        ``units``, ``long_name``, ``comment`` (meaning of the sign) and, for lengths and fractions, ``standard_name``.

    Raises
    ------
    InputError
        If the name is not in the table.
    """
    if name not in VARIABLES:
        raise InputError(f"variable: no {name!r} in the vocabulary. {nearest_names(name, tuple(VARIABLES))}")
    variable = VARIABLES[name]
    out = {"units": variable.per_gigatonne if per_gigatonne else variable.unit, "long_name": variable.long_name}
    out["comment"] = f"positive = {variable.positive}"
    if variable.standard_name and not per_gigatonne:
        out["standard_name"] = variable.standard_name
    return out


_TO_RIM = {("m", "mm Gt-1"): 1e3, ("m s-2", "nm s-2 Gt-1"): 1e9, ("kg m-2", "kg m-2 Gt-1"): 1.0}


def to_rim(name: str, *, per_gigatonne: bool) -> float:
    """Factor from SI inside to the unit of a field at the rim: millimetres or nanometres where it is per gigatonne."""
    variable = VARIABLES[name]
    return _TO_RIM[variable.unit, variable.per_gigatonne] if per_gigatonne else 1.0


@lru_cache(maxsize=1)
def _registry() -> Any:
    from cf_xarray.units import units  # noqa: PLC0415  a second of imports, needed only for unusual spellings

    return units


def _factor(given: str, wanted: str) -> float | None:
    """Factor from one unit to another; None if the first cannot be read or has another dimension."""
    import pint  # noqa: PLC0415  as above

    registry = _registry()
    try:
        return float(registry.Quantity(1.0, registry.Unit(given)).to(registry.Unit(wanted)).magnitude)
    except (pint.PintError, ValueError, TypeError, AttributeError, SyntaxError):
        return None


def require(attrs: Mapping[Any, Any], accepted: tuple[str, ...], *, argument: str) -> tuple[str, float]:
    """Find which accepted unit a field carries and the factor that converts it.

    Parameters
    ----------
    attrs : mapping
        Attributes of the field; ``units`` is a CF string.
    accepted : tuple of str
        Units the caller can work with; the first of the right dimension is chosen.
    argument : str
        Name of the field in an error.

    Returns
    -------
    (str, float)
        The accepted unit, and the factor from the field's unit to it.

    Raises
    ------
    UnitsError
        If units are missing, cannot be read or have another dimension.
    """
    allowed = " or ".join(repr(unit) for unit in accepted)
    given = attrs.get("units")
    if given is None:
        raise UnitsError(f"{argument}: has no units. Set attrs['units'] to {allowed}.")
    if given in accepted:
        return str(given), 1.0
    factors = {unit: _factor(str(given), unit) for unit in accepted}
    matches = [(unit, factor) for unit, factor in factors.items() if factor is not None]
    if not matches:
        raise UnitsError(f"{argument}: units must be {allowed}, got {given!r}. Set attrs['units'] or convert first.")
    return matches[0]


# words of built-in names that are names themselves
_PROPER = {"antarctica", "peninsula", "amundsen", "bellingshausen", "marie", "byrd", "dronning", "maud", "queen", "mary", "siple",
           "ronne", "filchner", "enderby", "amery", "wilkes", "george", "v", "graham", "palmer"}  # fmt: skip


def readable(source: str) -> str:
    """Name of a mass source for people: ``west_antarctica_amundsen`` as ``West Antarctica Amundsen``; own letters are kept."""
    words = source.replace("_", " ").split()
    return " ".join(word[:1].upper() + word[1:] if n == 0 or word in _PROPER else word for n, word in enumerate(words))
