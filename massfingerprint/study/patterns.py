"""Patterns of a study's mass sources, solved once for the same inputs and kept by content."""

import os
from collections.abc import Callable
from dataclasses import dataclass, field

import geopandas as gpd
import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.earth.green import LEAST_DEGREE
from massfingerprint.errors import DamagedFileError
from massfingerprint.files.arrays import fetch, fingerprint_of, store
from massfingerprint.load.ocean import ocean_fraction
from massfingerprint.load.spread import spread_mass
from massfingerprint.sealevel.fingerprints import FIELDS, HORIZONTAL, coefficients_name, solve_fingerprints
from massfingerprint.sealevel.nearfield import add_near_field, near_field, smoothed
from massfingerprint.sealevel.sites import at_sites
from massfingerprint.sealevel.solver import Prepared, prepare_solver
from massfingerprint.sealevel.within import range_within
from massfingerprint.sphere.grids import grid_of
from massfingerprint.sphere.harmonics import gradient, labelled, synthesise
from massfingerprint.study.inputs import Inputs
from massfingerprint.study.recipe import Recipe

SITE_FIELDS = ("relative_sea_level", "bedrock_up")  # sea surface at a site is their sum
_RANGE_DEGREE = 256  # of the range within each source, which is smoothed anyway
_LAYOUT = "patterns 2"  # of a kept entry; raise it whenever the solver's numbers or the entry change
_SCALARS = (
    "polar_motion_x",
    "polar_motion_y",
    "length_of_day_change",
    "rounds",
    "residual",
    "mass_residual",
    "converged",
)

Progress = Callable[[str, int, int], None]
"""Called with the name of a stage, the steps done and the steps in all."""


def silent(stage: str, done: int, total: int) -> None:
    """Progress nobody watches."""


@dataclass(frozen=True)
class Problem:
    """The prepared sea-level equation of a recipe, with the ocean it was made for."""

    prepared: Prepared
    ocean: xr.DataArray = field(repr=False)

    def fingerprint(self, recipe: Recipe) -> str:
        """SHA-256 of all that the patterns depend on, the load apart."""
        love = self.prepared.love
        tables = [love[name].values for name in ("h_load", "l_load", "k_load", "h_tide", "l_tide", "k_tide")]
        scalars = [repr(love.attrs[name]) for name in ("radius", "mean_density", "surface_gravity", "reference_frame")]
        prepared = self.prepared
        settings = [prepared.max_degree, prepared.rotation, prepared.water_density, prepared.redistributed_density]
        frame = recipe.output.reference_frame
        return fingerprint_of(_LAYOUT, self.ocean.values, *tables, *scalars, *map(repr, settings), frame)


def prepare(recipe: Recipe) -> Problem:
    """Ocean, Love numbers and solver of a recipe."""
    ocean = ocean_fraction(recipe.grid.spacing)
    degree = recipe.grid.max_degree
    return Problem(_prepared(recipe, ocean, degree, LEAST_DEGREE), ocean)


def _prepared(recipe: Recipe, ocean: xr.DataArray, degree: int, least_degree: int = 0) -> Prepared:
    """Solver of a recipe to a degree, with Love numbers to ``least_degree`` or more."""
    earth = recipe.earth
    love = earth.chosen.love_numbers(max_degree=max(degree, least_degree))
    density = earth.redistributed_density
    return prepare_solver(ocean, love, max_degree=degree, rotation=earth.rotation, redistributed_density=density)


@dataclass(frozen=True)
class Solved:
    """Patterns (source, lat, lon) with coefficients of every field; where they came from; loads and their range at sites.

    ``damaged`` lists complaints about kept entries that had to be computed again; ``reused`` counts the sound ones.
    """

    patterns: xr.Dataset
    load: xr.DataArray
    reused: int
    damaged: tuple[str, ...]


def solve_patterns(
    recipe: Recipe,
    problem: Problem,
    outlines: gpd.GeoDataFrame,
    *,
    kept: str | os.PathLike[str] | None = None,
    progress: Progress = silent,
) -> Solved:
    """Solve one pattern per mass source, or take it from the folder of kept ones.

    Parameters
    ----------
    recipe : Recipe
        Fields, frame, degree.
    problem : Problem
        From :func:`prepare`.
    outlines : GeoDataFrame
        One row per source.
    kept : path, optional
        Folder of patterns kept by content; None to keep nothing.
    progress : callable
        Told after every source.

    Returns
    -------
    Solved
        Field grids for ``output.fields``, coefficients for these and for all fields at sites.

    Raises
    ------
    RegionError, NotConvergedError
        If a source's outline cannot carry mass or a solve fails.
    """
    fields = tuple(name for name in FIELDS if name in {*recipe.output.fields, *SITE_FIELDS})
    base = problem.fingerprint(recipe)
    pieces, loads, damaged, reused = [], [], [], 0
    for number in range(len(outlines)):
        load = spread_mass(outlines.iloc[[number]], problem.ocean)
        key, arrays = fingerprint_of(base, load.values), None
        try:
            arrays = fetch(kept, key) if kept is not None else None
        except DamagedFileError as error:
            damaged.append(str(error))
        if arrays is not None and all(coefficients_name(name) in arrays for name in fields):
            reused += 1
        else:
            arrays = _solved(problem, load, fields, recipe.output.reference_frame)
            if kept is not None:
                store(kept, key, arrays)
        pieces.append(arrays)
        loads.append(load)
        progress("patterns", number + 1, len(outlines))
    load = xr.concat(loads, dim="source", join="exact", coords="different", compat="equals")
    return Solved(_assembled(pieces, fields, load, problem, recipe), load, reused, tuple(damaged))


def _solved(problem: Problem, load: xr.DataArray, fields: tuple[str, ...], frame: str) -> dict[str, NDArray]:
    """Coefficients (part, coefficient) per field and the scalars of one source."""
    answer = solve_fingerprints(problem.prepared, load, outputs=fields, reference_frame=frame).isel(source=0)
    out = {label: answer[label].values for label in map(coefficients_name, fields)}
    return out | {name: answer[name].values for name in _SCALARS}


def _assembled(
    pieces: list[dict[str, NDArray]], fields: tuple[str, ...], load: xr.DataArray, problem: Problem, recipe: Recipe
) -> xr.Dataset:
    """The dataset ``solve_fingerprints`` would give for all sources, fields made from the coefficients."""
    grid, sources = grid_of(load), load["source"]
    out = xr.Dataset(coords={"source": sources.values, "lat": load["lat"], "lon": load["lon"]})
    for name in fields:
        label = coefficients_name(name)
        attrs = vocabulary.attributes(name, per_gigatonne=True)
        pairs = labelled(np.stack([piece[label] for piece in pieces]), ("source",), {"source": sources.values})
        if name in recipe.output.fields:
            made = gradient(pairs, grid)[HORIZONTAL.index(name)] if name in HORIZONTAL else synthesise(pairs, grid)
            out[name] = made.assign_attrs(attrs).reset_coords(drop=True)
        held = vocabulary.attributes(label.removesuffix("_coefficients"), per_gigatonne=True)
        own = {"units": held["units"], "long_name": f"orthonormal coefficients of {held['long_name']}"}
        out[label] = pairs.assign_attrs(own)
    units = {name: vocabulary.attributes(name, per_gigatonne=True) for name in _SCALARS[:3]}
    words = {name: {"units": "1", "long_name": name.replace("_", " ")} for name in _SCALARS[3:]}
    for name, attrs in (units | words).items():
        out[name] = ("source", np.stack([piece[name] for piece in pieces]), attrs)
    extent = {"units": "1", "long_name": "1 in cells that carry load"}
    out["load_extent"] = (("source", "lat", "lon"), (load.values != 0.0).astype(np.int8), extent)
    prepared = problem.prepared
    return out.assign_attrs(
        reference_frame=recipe.output.reference_frame,
        max_degree=prepared.max_degree,
        rotation="on" if prepared.rotation else "off",
        water_density=prepared.water_density,
        redistributed_density=prepared.redistributed_density,
        ocean_area=prepared.ocean_area,
        gigatonnes_per_millimetre=prepared.gigatonnes_per_millimetre,
        love_numbers=str(prepared.love.attrs.get("source", "")),
        comment="Geodetic latitudes are used as spherical latitudes. Fields are defined everywhere, land included.",
    )


def site_patterns(recipe: Recipe, problem: Problem, solved: Solved, inputs: Inputs) -> xr.Dataset:
    """Fields at sites per gigatonne added (source, site), near field, truncation, distance, and the range within each source."""
    named = {f"{name}_coefficients" for name in SITE_FIELDS}
    coefficients, sites = solved.patterns[[*sorted(named), "load_extent"]], inputs.sites
    out = at_sites(coefficients, sites)
    for end in ("", "_truncation", "_tapered"):
        level, up = out[f"relative_sea_level{end}"], out[f"bedrock_up{end}"]
        words = str(level.attrs["long_name"]).replace("relative sea level", "sea surface")
        out[f"sea_surface{end}"] = (level + up).assign_attrs(units=level.attrs["units"], long_name=words)
    frame = recipe.output.reference_frame
    near = near_field(problem.prepared, inputs.outlines, solved.load, sites, reference_frame=frame)
    out = smoothed(add_near_field(out, near))
    coarse = problem.prepared
    if coarse.max_degree > _RANGE_DEGREE:
        coarse = _prepared(recipe, problem.ocean, _RANGE_DEGREE)
    return out.merge(range_within(coarse, solved.load, sites), compat="equals", combine_attrs="override")
