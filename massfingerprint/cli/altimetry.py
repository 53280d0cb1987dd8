"""``massfingerprint altimetry``: what a satellite, a mask, gauges or the open ocean see of the true mean rise."""

import textwrap
from pathlib import Path
from typing import Any

import click
import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.cli._mass_rates import mass_rates_options, spread
from massfingerprint.cli._problem import Problem, problem_options
from massfingerprint.cli._tables import as_json, rendered
from massfingerprint.coast.observers import View, check_views, observed_means
from massfingerprint.earth.frames import FRAMES, check_frame
from massfingerprint.earth.green import LEAST_DEGREE
from massfingerprint.errors import InputError
from massfingerprint.files.atomic import write_text
from massfingerprint.files.netcdf import read_netcdf
from massfingerprint.files.tables import csv_text, numbers, read_table
from massfingerprint.load.regions import regions
from massfingerprint.load.spread import spread_mass
from massfingerprint.sealevel.fingerprints import solve_fingerprints
from massfingerprint.sphere.points import read_sites
from massfingerprint.study.metadata import CAUTION, LEFT_OUT

_WIDTH = 110
_FIELDS = ("relative_sea_level", "sea_surface", "bedrock_up")
_WHOLE = "whole ocean"


def _mask(path: Path) -> xr.DataArray:
    """The one gridded variable of a NetCDF file."""
    found = [field for field in read_netcdf(path).data_vars.values() if set(field.dims) == {"lat", "lon"}]
    if len(found) != 1:
        held = ", ".join(str(field.name) for field in found) or "none"
        raise InputError(f"--mask: {path} must hold one variable on lat and lon, has {held}. Keep one.")
    return found[0]


def _gauges(path: Path) -> pd.DataFrame:
    """Sites of a CSV file, with the column weight if it has one."""
    sites = read_sites(path)
    frame, _ = read_table(path, required=("site",))
    return sites.assign(weight=numbers(frame, "weight", path=path)) if "weight" in frame else sites


def _views(options: dict[str, Any]) -> dict[str, View]:
    """Every view asked for, the whole ocean first."""
    out = {_WHOLE: View()}
    for south, north in options["bands"] or ((-66.0, 66.0),):
        out[f"belt {south:g} to {north:g}"] = View(south=south, north=north)
    for distance in options["distances"]:
        out[f"{distance:g} km off land"] = View(away_from_land=distance)
        for south, north in options["bands"]:
            belt = f"belt {south:g} to {north:g}, {distance:g} km off"
            out[belt] = View(south=south, north=north, away_from_land=distance)
    if options["mask_file"] is not None:
        out[f"mask {options['mask_file'].name}"] = View(mask=_mask(options["mask_file"]))
    if options["gauges_file"] is not None:
        gauges = _gauges(options["gauges_file"])
        out[f"{len(gauges)} gauges"] = View(gauges=gauges)
    return out


def _totals(seen: xr.Dataset, rates: pd.DataFrame) -> pd.DataFrame:
    """One row per view, mm/yr of all mass sources together; the ratio's error from the rates' errors."""
    amounts = rates["mass_rate"].to_numpy()
    true = float(seen["barystatic"])
    mean = true * amounts.sum()
    rows = []
    for number, view in enumerate(seen["view"].values):
        above, level, floor = (
            seen[name].values[number] for name in ("sea_surface", "relative_sea_level", "bedrock_up")
        )
        ratio = above @ amounts / mean
        # to first order: only sources seen differently from the sum move the ratio
        sigma = spread(rates, ((above - ratio * true) / mean)[:, None])[0]
        row = {
            "view": view,
            "seen from above [mm yr-1]": above @ amounts,
            "ratio to the true mean [1]": ratio,
            "ratio sigma [1]": abs(sigma),
            "sampling [1]": level @ amounts / mean - 1.0,
            "ocean floor [1]": floor @ amounts / mean,
            "seen by gauges [mm yr-1]": level @ amounts,
            "share of the ocean [1]": float(seen["seen_area"][number]) / float(seen["seen_area"][0]),
        }
        rows.append(row)
    return pd.DataFrame(rows)


def _by_source(seen: xr.Dataset) -> pd.DataFrame:
    """Ratio seen from above per source and view, full numbers."""
    out = pd.DataFrame({"source": [str(name) for name in seen["source"].values]})
    for number, view in enumerate(seen["view"].values):
        out[str(view)] = seen["ratio_sea_surface"].values[number]
    return out


def _signed(value: float) -> str:
    """Three decimals with a sign, and none of them a negative zero."""
    return f"{round(value, 3) + 0.0:+.3f}"


def _printed(totals: pd.DataFrame, sources: pd.DataFrame, mean: float, sigma: float) -> str:
    cells = pd.DataFrame({"view": totals["view"]})
    cells["share of the ocean"] = ["points" if np.isnan(v) else f"{v:.3f}" for v in totals["share of the ocean [1]"]]
    above = totals["seen from above [mm yr-1]"], totals["ratio to the true mean [1]"], totals["ratio sigma [1]"]
    cells["seen from above"] = [_signed(value) for value in above[0]]
    cells["ratio"] = [f"{value:.3f} +- {error:.3f}" for value, error in zip(*above[1:], strict=True)]
    for name in ("sampling", "ocean floor"):
        cells[f"of it {name}"] = [_signed(value) for value in totals[f"{name} [1]"]]
    cells["seen by gauges"] = [_signed(value) for value in totals["seen by gauges [mm yr-1]"]]
    ratios = sources.copy()
    for view in ratios.columns[1:]:
        ratios[view] = [f"{value:.3f}" for value in ratios[view]]
    head = f"True mean (barystatic): {mean:+.3f} +- {sigma:.3f} mm/yr"
    return "\n\n".join(
        [head, rendered(cells, "plain"), "Ratio seen from above, by mass source:", rendered(ratios, "plain")]
    )


def _notes(frame: str, problem: Problem) -> str:
    text = (
        f"mm/yr. seen from above: mean geocentric sea level in {frame} over the view, as an altimeter measures it, not relative "
        "sea level; ratio: over the true mean = 1 + sampling + ocean floor. ocean floor: the sea floor moves, as a rule down "
        "under the water that was added, which a satellite takes for less rise; under gauges it is their land, which rises "
        "beside lost ice. sampling: the view does not see the whole ocean. seen by gauges: mean relative sea level over the "
        "view; gauges within 300 km of ice have its near field. +-: 1 sigma of the mass rates. "
        f"Earth {problem.earth}, degree {problem.max_degree}. {LEFT_OUT} {CAUTION}"
    )
    return "\n".join(textwrap.wrap(text, _WIDTH))


@click.command(name="altimetry")
@mass_rates_options
@click.option(
    "--band", "bands", nargs=2, type=float, multiple=True, help="South and north of a belt; may be repeated. [-66 66]"
)
@click.option(
    "--off-land",
    "distances",
    type=float,
    multiple=True,
    help="Ocean farther from land than so many km, also within each --band.",
)
@click.option(
    "--mask",
    "mask_file",
    type=click.Path(path_type=Path),
    help="NetCDF with one variable 0 to 1 on the cells of the grid.",
)
@click.option(
    "--gauges",
    "gauges_file",
    type=click.Path(path_type=Path),
    help="CSV with columns site, lat, lon; weight if they count unequally.",
)
@click.option("--frame", default="CM", show_default=True, help=f"Frame of the satellite: {', '.join(FRAMES)}.")
@problem_options
@click.option("--csv", "csv_file", type=click.Path(path_type=Path), help="Also write the table here, full numbers.")
@click.option("--json", "as_data", is_flag=True, help="Print as JSON with full numbers.")
def command(
    rates: pd.DataFrame, problem: Problem, frame: str, csv_file: Path | None, as_data: bool, **options: Any
) -> None:
    """Print what observers see of the true mean rise that mass rates make: satellites, masks, gauges, the open ocean.

    Example: massfingerprint altimetry --published 'otosaka 2023' --band -66 66 --off-land 200 --gauges data_small/coasts.csv
    """
    if not rates["mass_rate"].sum():
        raise InputError(
            "rates: add to nothing, so that nothing can be compared with the true mean. Leave a source out."
        )
    check_frame(frame)
    views = _views(options)
    check_views(views, problem.ocean)
    near = options["gauges_file"] is not None
    prepared = problem.prepared(least_degree=LEAST_DEGREE if near else 0)
    outlines = regions(*rates["source"])
    load = spread_mass(outlines, problem.ocean)
    patterns = solve_fingerprints(prepared, load, outputs=_FIELDS, reference_frame=frame)
    beside = {"outlines": outlines, "load": load} if near else {}
    seen = observed_means(prepared, problem.ocean, patterns, views, **beside)
    totals, sources = _totals(seen, rates), _by_source(seen)
    factor = prepared.gigatonnes_per_millimetre
    mean = -float(rates["mass_rate"].sum()) / factor
    sigma = float(spread(rates, np.ones((len(rates), 1)))[0]) / factor
    if csv_file is not None:
        ratios = sources.set_index("source").T.add_prefix("ratio of ").add_suffix(" [1]")
        write_text(csv_text(totals.join(ratios, on="view")), csv_file)
        click.echo(f"Table written to {csv_file}.", err=True)
    if as_data:
        about = {"true mean [mm yr-1]": mean, "reference_frame": frame, "about": _notes(frame, problem)}
        click.echo(as_json(totals, {**about, "ratio by source": sources.set_index("source").T.to_dict()}))
        return
    click.echo(f"{_printed(totals, sources, mean, sigma)}\n\n{_notes(frame, problem)}")
    for line in sorted(set(rates["citation"])):
        click.echo(f"Mass rates: {line}.", err=True)
