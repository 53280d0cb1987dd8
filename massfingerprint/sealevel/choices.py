"""How far a coast's value moves with choices of physics: the Earth, its rotation, the water, the latitude, the coast, the degree.

Each choice takes the place of the usual one, all else kept, and everything is solved again. The spread of a group is no error bar
of its own: the built-in Earths are examples, not draws. It says which choice matters where.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace

import geopandas as gpd
import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint import constants
from massfingerprint.arguments import whole_number
from massfingerprint.earth.choice import ChosenEarth
from massfingerprint.earth.green import LEAST_DEGREE
from massfingerprint.earth.models import MODELS
from massfingerprint.earth.rotation import OBSERVED, RotationConstants
from massfingerprint.errors import InputError
from massfingerprint.load.latitudes import geocentric_ocean, geocentric_outlines, geocentric_sites
from massfingerprint.load.ocean import ocean_fraction
from massfingerprint.load.spread import spread_mass
from massfingerprint.sealevel.coasts import coast_values
from massfingerprint.sealevel.solver import prepare_solver

SEA_WATER_DENSITY = 1027.0
_HYDROSTATIC = 0.930  # fluid Love number of PREM under a thin lithosphere (from memory)
FOR_CHECKS = ("homogeneous", "five_layer")  # Earths nobody believes


@dataclass(frozen=True)
class Physics:
    """One full set of choices.

    Parameters
    ----------
    earth : ChosenEarth
        Built-in Earth, or a file.
    max_degree : int
        Of the solution.
    spacing : float
        Of the grid, degrees.
    rotation : bool or RotationConstants
        As in ``prepare_solver``.
    redistributed_density : float or None
        As in ``prepare_solver``.
    geocentric : bool
        Whether geodetic latitudes are turned into geocentric ones, of sites, ice and ocean.
    coastline : str
        As in ``ocean_fraction``.
    """

    earth: ChosenEarth = field(default_factory=ChosenEarth)
    max_degree: int = 512
    spacing: float = 0.25
    rotation: bool | RotationConstants = True
    redistributed_density: float | None = None
    geocentric: bool = False
    coastline: str = "grounding line"


def other_choices(usual: Physics) -> dict[tuple[str, str], Physics]:
    """Every choice beside the usual one, by (group, what is chosen)."""
    flattening = (
        3.0
        * constants.GRAVITATIONAL_CONSTANT.value
        * OBSERVED.moment_excess
        / (constants.SPHERE_RADIUS.value**5 * OBSERVED.rotation_rate**2)
    )
    half = max(usual.max_degree // 2, 2)
    out = {("Earth", name): replace(usual, earth=ChosenEarth(name)) for name in MODELS if name != usual.earth.word}
    for label, value in (("from the moments", flattening), ("hydrostatic", _HYDROSTATIC)):
        turned = RotationConstants(secular_love_number=value)
        out["rotation", f"k_s {value:.3f}, {label}"] = replace(usual, rotation=turned)
    out["rotation", "none"] = replace(usual, rotation=False)
    heavy = f"moved water {SEA_WATER_DENSITY:g} kg m-3"
    out["water", heavy] = replace(usual, redistributed_density=SEA_WATER_DENSITY)
    out["latitude", "geocentric"] = replace(usual, geocentric=True)
    out["coast of Antarctica", "ice front"] = replace(usual, coastline="ice front")
    out["resolution", f"degree {half}"] = replace(usual, max_degree=half)
    return out


def choice_table(
    outlines: gpd.GeoDataFrame,
    mass: Mapping[str, float],
    sites: pd.DataFrame,
    *,
    usual: Physics | None = None,
    others: Mapping[tuple[str, str], Physics] | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> xr.Dataset:
    """Relative sea level at sites with the usual physics, and how each other choice changes it.

    Parameters
    ----------
    outlines : GeoDataFrame
        Columns source, geometry.
    mass : mapping of source to float
        Mass change (or its rate) of every outline in Gt (Gt yr-1), negative = loss.
    sites : DataFrame
        Columns site, lat, lon.
    usual : Physics, optional
        What the others are held against.
    others : mapping of (group, chosen) to Physics, optional
        By default :func:`other_choices` of the usual.
    progress : callable, optional
        Told (done, total) after every choice.

    Returns
    -------
    Dataset (choice, site)
        ``usual`` (site): relative sea level in mm (mm yr-1), positive = rise; ``change`` (choice, site): that of the choice minus
        the usual, same unit; ``mean`` the usual's barystatic value; coordinates ``group`` and ``chosen`` (choice). Values have the
        near field within 300 km of the ice and are tapered elsewhere.

    Raises
    ------
    InputError, SiteError, RegionError
        If masses and outlines differ, or a piece cannot be used.
    """
    usual = usual or Physics()
    whole_number(usual.max_degree, argument="max_degree", lowest=4)
    names = [str(name) for name in outlines["source"]]
    if sorted(names) != sorted(mass):
        raise InputError(f"mass: must be given for {', '.join(names)}, got {', '.join(mass) or 'nothing'}.")
    amounts = np.array([float(mass[name]) for name in names])
    others = other_choices(usual) if others is None else others
    rows: list[np.ndarray] = []
    mean = np.nan
    for number, physics in enumerate((usual, *others.values())):
        level, factor = _levels(physics, outlines, amounts, sites)
        rows.append(level)
        mean = -amounts.sum() / factor if number == 0 else mean
        if progress is not None:
            progress(number + 1, len(others) + 1)
    words = {"units": "mm", "long_name": "relative sea level", "comment": "mm yr-1 where mass is a rate"}
    coords = {
        "site": sites["site"].to_numpy(dtype=object),
        "group": ("choice", np.array([group for group, _ in others], dtype=object)),
        "chosen": ("choice", np.array([chosen for _, chosen in others], dtype=object)),
    }
    out = xr.Dataset(coords=coords)
    out["usual"] = ("site", rows[0], words)
    changed = np.stack(rows[1:]) - rows[0]
    out["change"] = (("choice", "site"), changed, words | {"long_name": "change of relative sea level with the choice"})
    out["mean"] = ((), mean, words | {"long_name": "barystatic sea level"})
    return out.assign_attrs(earth=str(usual.earth), max_degree=usual.max_degree, spacing=usual.spacing)


def _levels(
    physics: Physics, outlines: gpd.GeoDataFrame, amounts: np.ndarray, sites: pd.DataFrame
) -> tuple[np.ndarray, float]:
    """Relative sea level (site,) in mm and Gt per mm of the ocean."""
    ocean = ocean_fraction(physics.spacing, coastline=physics.coastline)
    if physics.geocentric:
        ocean, outlines, sites = geocentric_ocean(ocean), geocentric_outlines(outlines), geocentric_sites(sites)
    love = physics.earth.love_numbers(max_degree=max(physics.max_degree, LEAST_DEGREE))
    prepared = prepare_solver(
        ocean,
        love,
        max_degree=physics.max_degree,
        rotation=physics.rotation,
        redistributed_density=physics.redistributed_density,
    )
    here = coast_values(
        prepared, outlines, spread_mass(outlines, ocean), sites, outputs=("relative_sea_level", "bedrock_up")
    )
    return amounts @ here["relative_sea_level"].values, prepared.gigatonnes_per_millimetre


def spread_by_group(table: xr.Dataset) -> xr.Dataset:
    """Lowest and highest change of each group at each site, and the root of the sum of squares of each group's largest.

    Parameters
    ----------
    table : Dataset (choice, site)
        From :func:`choice_table`.

    Returns
    -------
    Dataset (group, site)
        ``lowest`` (0 or less), ``highest`` (0 or more), ``together`` (site), in the unit of the table; all leave out
        the Earths made for checks and switching the rotation off, which no one doubts.
    """
    groups = list(dict.fromkeys(table["group"].values))
    kept = table["change"].where(~table["chosen"].isin(["none", *FOR_CHECKS]), 0.0)
    parts = [kept.where(table["group"] == group, 0.0) for group in groups]
    out = xr.Dataset(coords={"group": np.array(groups, dtype=object), "site": table["site"].values})
    for name, ends in (("lowest", [p.min("choice") for p in parts]), ("highest", [p.max("choice") for p in parts])):
        values = np.stack([end.values for end in ends])
        out[name] = (("group", "site"), np.minimum(values, 0.0) if name == "lowest" else np.maximum(values, 0.0))
    largest = xr.where(-out["lowest"] > out["highest"], -out["lowest"], out["highest"])
    out["together"] = np.sqrt((largest**2).sum("group"))
    return out
