"""``massfingerprint kernel``: what a gigatonne lost anywhere does at a coast."""

import textwrap
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import click
import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.cli._problem import Problem, problem_options
from massfingerprint.cli._progress import progress
from massfingerprint.cli._tables import as_json, rendered
from massfingerprint.constants import FRESH_WATER_DENSITY
from massfingerprint.earth.green import LEAST_DEGREE
from massfingerprint.errors import FolderError
from massfingerprint.files.atomic import write_binary, write_text
from massfingerprint.files.netcdf import write_cf_netcdf
from massfingerprint.files.tables import csv_text
from massfingerprint.load.regions import region_names, regions
from massfingerprint.load.spread import spread_mass
from massfingerprint.sealevel.kernels import apply_kernels, site_kernels
from massfingerprint.sealevel.nearfield import add_near_field, near_field, smoothed
from massfingerprint.sealevel.solver import Prepared
from massfingerprint.sealevel.within import range_of
from massfingerprint.sphere.points import read_sites
from massfingerprint.study.metadata import CAUTION, LEFT_OUT, now
from massfingerprint.study.names import short_names
from massfingerprint.vocabulary import readable

_PER = 1000.0  # Gt: a single one moves a coast by micrometres
_WIDTH = 110
_FIELDS = ("relative_sea_level", "sea_surface", "bedrock_up")


def _sources(named: tuple[str, ...]) -> list[str]:
    """Mass sources asked for; by default every built-in one that is no part of another and has an outline."""
    if named:
        return list(named)
    table = regions(*region_names())
    parents = set(table["parent"])
    kept = table[
        ~table["source"].isin(parents)
        & ~table.geometry.is_empty
        & ~table["source"].isin(["glaciers_05", "glaciers_19"])
    ]
    return [str(name) for name in kept["source"]]


@dataclass(frozen=True)
class _Kernels:
    """Kernels of all sites, as they are and tapered."""

    plain: xr.Dataset
    smooth: xr.Dataset


def _kernels(prepared: Prepared, sites: pd.DataFrame, *, quiet: bool) -> _Kernels:
    kinds: tuple[list[xr.Dataset], list[xr.Dataset]] = ([], [])
    with progress(quiet=quiet) as report:
        for number in range(len(sites)):
            for kind, tapered in zip(kinds, (False, True), strict=True):
                kind.append(site_kernels(prepared, sites.iloc[[number]], outputs=_FIELDS, tapered=tapered))
            report("kernels", number + 1, len(sites))
    return _Kernels(*(xr.concat(kind, dim="site", data_vars="minimal", combine_attrs="override") for kind in kinds))


def _values(
    kernels: _Kernels, prepared: Prepared, outlines: Any, load: xr.DataArray, sites: pd.DataFrame
) -> xr.Dataset:
    """Fields (source, site) in mm per gigatonne added, tapered or with the near field, and the range within each source."""
    found, smooth = apply_kernels(kernels.plain, load), apply_kernels(kernels.smooth, load)
    for name in _FIELDS:
        found[f"{name}_tapered"], found[f"{name}_truncation"] = smooth[name], found[name] - smooth[name]
    whole = smoothed(add_near_field(found, near_field(prepared, outlines, load, sites)))
    return whole.merge(range_of(kernels.smooth, load), compat="override")


def _table(values: xr.Dataset, site: str, mean: float) -> pd.DataFrame:
    """One row a source, ranked; mm for 1000 Gt lost."""
    here = values.sel(site=site)
    ends = [-here[f"relative_sea_level_{end}"].values * _PER for end in ("lowest", "highest")]
    out = pd.DataFrame(
        {
            "site": site,
            "source": [str(name) for name in here["source"].values],
            "relative sea level [mm]": -here["relative_sea_level"].values * _PER,
            "ratio to global mean [1]": -here["relative_sea_level"].values / mean,
            "lowest [mm]": np.minimum(*ends),
            "highest [mm]": np.maximum(*ends),
            "geocentric sea level, CM [mm]": -here["sea_surface"].values * _PER,
            "vertical land motion, elastic [mm]": -here["bedrock_up"].values * _PER,
            "near field": np.where(
                here["resolved"].values == 0, "too coarse", np.where(here["near_field"].values == 1, "in it", "")
            ),
        }
    )
    return out.sort_values("relative sea level [mm]", ascending=False, kind="stable").reset_index(drop=True)


def _shown(table: pd.DataFrame) -> str:
    cells = table.drop(columns="site").copy()
    for name in cells.columns[1:-1]:
        cells[name] = [f"{value:+.2f}" for value in cells[name]]
    return rendered(cells, "plain")


def _draw(folder: Path, kernels: xr.Dataset, tables: dict[str, pd.DataFrame], sites: pd.DataFrame, small: str) -> None:
    """Bars and map of every site into a folder."""
    from massfingerprint.figures import bars, look, maps  # noqa: PLC0415  plotting only where it is asked for

    if not folder.is_dir():
        raise FolderError(f"--figures: there is no folder {folder}. Create it first.")
    factor = kernels.attrs["gigatonnes_per_millimetre"]
    for site, short in short_names(tables).items():
        table = tables[site].set_index("source")
        rows = {"value": "relative sea level [mm]", "lowest": "lowest [mm]", "highest": "highest [mm]"}
        frame = pd.DataFrame({name: table[column] / _PER for name, column in rows.items()})
        place = sites[sites["site"] == site]
        with look.style():
            ranked = bars.per_gigatonne(
                frame, title=f"{site}: whose ice matters here", caption=small, mean=1.0 / factor
            )
            ratio = -kernels["relative_sea_level"].sel(site=site, drop=True) * factor
            words = f"{site}: what ice lost anywhere does here"
            chart = maps.pattern_map(
                ratio, title=words, caption=small, sites=place, poles=("north", "south"), everywhere=True
            )
        for name, figure in (("per_gigatonne", ranked), ("kernel", chart)):
            for kind in ("png", "pdf"):
                write_binary(look.file_content(figure, kind), folder / f"{short}_{name}.{kind}")


def _strip(folder: Path, tables: dict[str, pd.DataFrame], load: xr.DataArray, small: str) -> None:
    """One strip a site: a metre of water lost evenly from each region, added up."""
    from massfingerprint.figures import look, strip  # noqa: PLC0415  plotting only where it is asked for

    # a cell that lies wholly in the region carries kg m-2 per gigatonne: a metre of water is 1000 kg m-2
    density = load.max(("lat", "lon"))
    metre = {
        str(name): FRESH_WATER_DENSITY.value / float(value)
        for name, value in zip(load["source"].values, density, strict=True)
    }
    rows = {site: table.set_index("source")["relative sea level [mm]"] / _PER for site, table in tables.items()}
    frame = pd.DataFrame({site: row * pd.Series(metre) for site, row in rows.items()}).T
    with look.style():
        figure = strip.cumulative_strip(frame, title="A metre of water from every region, added up", caption=small)
    for kind in ("png", "pdf"):
        write_binary(look.file_content(figure, kind), folder / f"strip.{kind}")


@click.command(name="kernel")
@click.option(
    "--sites",
    "sites_file",
    required=True,
    type=click.Path(path_type=Path),
    help="CSV with columns site, lat, lon (degrees).",
)
@click.option(
    "--region",
    "named",
    multiple=True,
    help="A built-in region; may be repeated. Default: all that are no part of another.",
)
@problem_options
@click.option("--csv", "csv_file", type=click.Path(path_type=Path), help="Also write the table here, full numbers.")
@click.option(
    "--netcdf",
    "netcdf_file",
    type=click.Path(path_type=Path),
    help="Also write the kernels here: mm per Gt added anywhere.",
)
@click.option(
    "--figures",
    "folder",
    type=click.Path(path_type=Path),
    help="Also draw bars and a map of each site into this folder.",
)
@click.option("--json", "as_data", is_flag=True, help="Print the table as JSON with full numbers.")
@click.option("--quiet", is_flag=True, help="No talk on stderr.")
def command(sites_file: Path, named: tuple[str, ...], problem: Problem, **options: Any) -> None:
    """Rank what 1000 gigatonnes lost from each region do at a coast, in mm, with the range within each region.

    One solve a site and field, by reciprocity; the kernel is good for any mass anywhere (--netcdf).

    Example: massfingerprint kernel --sites data_small/coasts.csv --region greenland_southeast --region west_antarctica_amundsen
    """
    sites, sources = read_sites(sites_file), _sources(named)
    outlines, prepared = regions(*sources), problem.prepared(least_degree=LEAST_DEGREE)
    kernels, load = _kernels(prepared, sites, quiet=options["quiet"]), spread_mass(outlines, problem.ocean)
    values = _values(kernels, prepared, outlines, load, sites)
    tables = {
        str(site): _table(values, str(site), 1.0 / prepared.gigatonnes_per_millimetre) for site in values["site"].values
    }
    _print(tables, prepared, as_data=options["as_data"])
    solved = f"Earth {problem.earth}, degree {problem.max_degree}, rotation on."
    small = f"Spread evenly over each outline. {solved} {LEFT_OUT} {CAUTION}"
    if options["csv_file"] is not None:
        write_text(csv_text(pd.concat(tables.values(), ignore_index=True)), options["csv_file"])
    if options["netcdf_file"] is not None:
        about = {
            "title": "What a gigatonne added anywhere does at each site",
            "comment": small,
            "source": "reciprocity, one solve a site",
        }
        about["history"] = f"{now()} massfingerprint kernel"
        write_cf_netcdf(kernels.plain, options["netcdf_file"], attributes={**kernels.plain.attrs, **about})
    if options["folder"] is not None:
        _draw(options["folder"], kernels.smooth, tables, sites, small)
        _strip(options["folder"], tables, load, small)


def _print(tables: dict[str, pd.DataFrame], prepared: Prepared, *, as_data: bool) -> None:
    mean = _PER / prepared.gigatonnes_per_millimetre
    about = (
        f"mm at the site for {_PER:g} Gt lost from each region, spread evenly; global mean {mean:+.2f} mm. lowest, highest: if the "
        f"loss sat in one cell of the region, smoothed. Positive = rise, or land up. near field: in it within 300 km of the ice."
    )
    if as_data:
        whole = pd.concat(tables.values(), ignore_index=True)
        click.echo(as_json(whole, {"about": about, "left_out": LEFT_OUT, "caution": CAUTION}))
        return
    for site, table in tables.items():
        best = table.iloc[int(table["relative sea level [mm]"].abs().argmax())]
        click.echo(f"{site}: most by {readable(str(best['source']))}, {best['relative sea level [mm]']:+.2f} mm\n")
        click.echo(f"{_shown(table)}\n")
    for paragraph in (about, LEFT_OUT, CAUTION):
        click.echo("\n".join(textwrap.wrap(paragraph, _WIDTH)))
