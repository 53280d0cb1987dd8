"""What a study file points at, opened and held against each other: record, outlines, coasts, windows."""

import os
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.errors import InputError, StudyError, nearest_names
from massfingerprint.load.regions import read_regions, region_names, regions
from massfingerprint.mass.barystatic import ocean_reaching_fraction
from massfingerprint.mass.combine import rebase
from massfingerprint.mass.correlation import read_correlation, with_correlation
from massfingerprint.mass.ledger import read_ledger
from massfingerprint.mass.rates import check_windows, rate_weights
from massfingerprint.mass.scope import check_scope, ledger_scopes
from massfingerprint.mass.summary import whole_record
from massfingerprint.sphere.points import read_sites
from massfingerprint.study.recipe import Reading, Recipe, RegionChoice, read_structure


@dataclass(frozen=True)
class Inputs:
    """What a study works on: ledger (source, time), outlines in the ledger's order, sites, windows by name.

    ``since_zero`` is the ledger referred to ``output.since``, for series; rates come from the record as it was given.
    """

    ledger: xr.Dataset
    since_zero: xr.Dataset
    outlines: gpd.GeoDataFrame
    sites: pd.DataFrame
    windows: dict[str, tuple[str, str]]


def read_study(path_or_recipe: str | os.PathLike[str] | Recipe) -> tuple[Recipe, Inputs]:
    """Read and check a study file and everything it names.

    Parameters
    ----------
    path_or_recipe : path or Recipe
        The TOML file, or a recipe made in Python.

    Returns
    -------
    (Recipe, Inputs)
        What to do, and the data to do it on.

    Raises
    ------
    StudyError
        With every problem of the file, one line each: line number, key, what came, what is allowed, what to do.
    MissingFileError, TableError
        If the file itself cannot be read.
    """
    if isinstance(path_or_recipe, Recipe):
        recipe, problems = path_or_recipe, _Collected()
        inputs = _opened(recipe, problems)
        if problems.found:
            words = f"recipe: {len(problems.found)} problems." if len(problems.found) > 1 else "recipe: 1 problem."
            raise StudyError("\n".join([words, *problems.found]), tuple(problems.found))
        return recipe, inputs
    reading, sound = read_structure(path_or_recipe)
    if "mass" in sound and "sites" in sound:
        recipe = Recipe(**sound, source_file=Path(path_or_recipe), raw=reading.source.raw)
        inputs = _opened(recipe, reading)
    reading.raise_if_any()
    return recipe, inputs


class _Collected:
    """Problems of a recipe that has no file behind it."""

    def __init__(self) -> None:
        self.found: list[str] = []

    def problem(self, words: str, *place: str | int) -> None:
        self.found.append(f"{' '.join(map(str, place))}: {words}")

    def attempt(self, place: tuple[str | int, ...], call: Callable[..., Any], *given: Any, **named: Any) -> Any:
        try:
            return call(*given, **named)
        except (InputError, OSError) as error:
            self.problem(str(error), *place)
            return None


def _opened(recipe: Recipe, notes: "Reading | _Collected") -> Inputs:
    ledger = notes.attempt(("mass", "file"), _ledger, recipe)
    since, moved = recipe.output.since, ledger
    if ledger is not None and since is not None:
        moved = notes.attempt(("output", "since"), _rebased, ledger, since)
    notes.attempt(("earth",), recipe.earth.chosen.love_numbers, max_degree=2)
    sites = notes.attempt(("sites", "file"), read_sites, recipe.sites.file)
    named = None if ledger is None else [str(name) for name in ledger["source"].values]
    outlines = _outlines(recipe.regions, named, notes)
    windows: dict[str, tuple[str, str]] = dict(recipe.windows)
    if ledger is not None:
        windows = windows or whole_record(ledger)
        for number, (name, span) in enumerate(windows.items()):
            notes.attempt(("windows", number), _check_window, ledger, name, span, recipe.rates.seasonal)
    return Inputs(ledger, moved, outlines, sites, windows)


def _ledger(recipe: Recipe) -> xr.Dataset:
    mass = recipe.mass
    choices: dict[str, Any] = {"quantity": mass.quantity, "error_model": mass.error_model, "units": mass.units}
    ledger = read_ledger(mass.file, **choices, reference_epoch=mass.reference_epoch)
    names = [str(name) for name in ledger["source"].values]
    kept = check_scope(names, scopes=ledger_scopes(ledger), drop=mass.drop)
    ledger = ledger.isel(source=[names.index(name) for name in kept])
    held = [name for name, share in zip(kept, ocean_reaching_fraction(ledger).values, strict=True) if share < 1.0]
    if held:
        raise InputError(
            f"ocean_reaching_fraction: of {held[0]!r} is below 1; a study does not know where the rest stays. "
            "Use retain_on_land in Python, or leave the source out with drop."
        )
    if mass.correlation is not None:
        ledger = with_correlation(ledger, read_correlation(mass.correlation))
    return ledger


def _rebased(ledger: xr.Dataset, since: str) -> xr.Dataset:
    try:
        return rebase(ledger, since)
    except InputError as error:
        raise InputError(f"[output] since: {str(error).removeprefix('epoch: ')}") from error


def _check_window(ledger: xr.Dataset, name: str, span: tuple[str, str], seasonal: bool) -> None:
    """Refuse a window in which a source has too few values for its rate."""
    weights = rate_weights(ledger, check_windows({name: span})[name], seasonal=seasonal)
    lacking = [source for source, w in weights.items() if w is None]
    if lacking:
        held = np.isfinite(ledger["mass_change"].sel(source=lacking[0]).values)
        time = ledger["time"].values[held]
        extent = f"{str(time[0])[:10]} to {str(time[-1])[:10]}" if time.size else "none"
        fit = "a rate and a yearly cycle" if seasonal else "a rate"
        raise InputError(
            f"[[windows]] {name!r}: {len(lacking)} of {len(weights)} sources have too few values for {fit} from {span[0]} to "
            f"{span[1]}, first {lacking[0]!r} (values {extent}). Move the window, or drop the source."
        )


def _outlines(choice: RegionChoice, named: list[str] | None, notes: "Reading | _Collected") -> gpd.GeoDataFrame | None:
    """Outlines in the order of the ledger's sources, once both have the same names."""
    tables = []
    builtin = choice.builtin
    if not builtin and not choice.outlines and named:
        builtin = tuple(named)
    for name in builtin:
        if name not in region_names():
            notes.problem(
                f"[regions] builtin: no region {name!r}. {nearest_names(name, region_names())}", "regions", "builtin"
            )
    sound = [name for name in builtin if name in region_names()]
    if sound:
        tables.append(regions(*sound))
    for path in choice.outlines:
        own = notes.attempt(("regions", "outlines"), read_regions, path, name_field=choice.name_field)
        if own is not None:
            tables.append(own)
    if named is None or not tables:
        return None
    table = pd.concat(tables, ignore_index=True)
    return _matched(table, named, notes) if len(sound) == len(builtin) else None


def _matched(table: gpd.GeoDataFrame, named: list[str], notes: "Reading | _Collected") -> gpd.GeoDataFrame | None:
    outlined = [str(name) for name in table["source"]]
    faults = [f"{name!r} stands there twice" for name in dict.fromkeys(outlined) if outlined.count(name) > 1]
    faults += [f"no outline for {name!r}. {nearest_names(name, outlined)}" for name in named if name not in outlined]
    faults += [f"no mass for outline {name!r}. {nearest_names(name, named)}" for name in outlined if name not in named]
    for fault in faults:
        notes.problem(f"[regions] {fault}", "regions")
    if faults:
        return None
    rows = table.iloc[[outlined.index(name) for name in named]]
    rows = rows.reset_index(drop=True)
    for name in rows["source"][rows.geometry.is_empty]:
        notes.problem(f"[regions] {name!r} is an empty outline; mass cannot be spread over it. Drop it.", "regions")
    return rows
