"""``massfingerprint choices``: how far values at coasts move with the Earth, the rotation, the water, the latitude and so on."""

import textwrap
from pathlib import Path

import click
import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.cli._mass_rates import mass_rates_options
from massfingerprint.cli._problem import Problem, problem_options
from massfingerprint.cli._progress import progress
from massfingerprint.cli._tables import as_json, rendered
from massfingerprint.files.atomic import write_text
from massfingerprint.files.tables import csv_text
from massfingerprint.load.regions import regions
from massfingerprint.sealevel.choices import FOR_CHECKS, Physics, choice_table, spread_by_group
from massfingerprint.sphere.points import read_sites
from massfingerprint.study.metadata import CAUTION

_WIDTH = 110
_SITES_A_ROW = 6
_LETTERS = 12  # a line of a site's name over its column


def _rows(table: xr.Dataset) -> pd.DataFrame:
    """One row per choice, full numbers, a column per site."""
    out = pd.DataFrame({"group": table["group"].values, "choice": table["chosen"].values})
    for number, site in enumerate(table["site"].values):
        out[f"{site} [mm yr-1]"] = table["change"].values[:, number]
    return out


def _printed(table: xr.Dataset, sites: list[str]) -> str:
    """Table of some sites: the usual value, then every choice's change, then what the groups amount to."""
    here, together = table.sel(site=sites), spread_by_group(table).sel(site=sites)
    rows = [("", "as usual", *(f"{value:+.3f}" for value in here["usual"].values))]
    for group, chosen, changes in zip(here["group"].values, here["chosen"].values, here["change"].values, strict=True):
        first = group if not any(group == row[0] for row in rows) else ""
        rows.append((first, chosen, *(f"{value:+.4f}" for value in changes)))
    rows.append(("all groups", "root of squares", *(f"{value:.4f}" for value in together["together"].values)))
    heads = [textwrap.fill(site, _LETTERS, break_long_words=True) for site in sites]
    return rendered(pd.DataFrame(rows, columns=["", "choice", *heads]), "plain")


def _notes(table: xr.Dataset) -> str:
    mean = float(table["mean"])
    worst = np.abs(table["change"].where(~table["chosen"].isin(["none", *FOR_CHECKS]), 0.0))
    place = worst.argmax(...)  # type: ignore[call-overload]
    most = f"{table['chosen'].values[int(place['choice'])]} at {table['site'].values[int(place['site'])]}"
    text = (
        f"mm/yr of relative sea level, global mean {mean:+.3f}. as usual: Earth {table.attrs['earth']}, degree "
        f"{table.attrs['max_degree']}, rotation by observed moments, water of 1000 kg m-3, geodetic latitudes used as spherical "
        "ones, the sea reaches the grounding line. Each row: what changes if that choice alone is made otherwise. root of squares: "
        "of the largest change of each group, without switching the rotation off and without homogeneous and five_layer, made for "
        "checks. The Earths are examples, not draws: this is no error bar. "
        f"Largest change: {float(worst.max()):.4f} by {most}."
    )
    return "\n".join(textwrap.wrap(text, _WIDTH))


@click.command(name="choices")
@mass_rates_options
@click.option(
    "--sites", "sites_file", required=True, type=click.Path(path_type=Path), help="CSV with columns site, lat, lon."
)
@problem_options
@click.option("--csv", "csv_file", type=click.Path(path_type=Path), help="Also write the table here, full numbers.")
@click.option("--json", "as_data", is_flag=True, help="Print the table as JSON with full numbers.")
@click.option("--quiet", is_flag=True, help="No talk on stderr.")
def command(
    rates: pd.DataFrame, sites_file: Path, problem: Problem, csv_file: Path | None, as_data: bool, quiet: bool
) -> None:
    """Print how relative sea level at coasts moves with each choice of physics: a table of choices.

    Everything is solved again for every choice: some seconds a mass source.

    Example: massfingerprint choices --rates data_small/published_rates.csv --sites data_small/coasts.csv
    """
    sites = read_sites(sites_file)
    usual = Physics(problem.earth, problem.max_degree, problem.spacing)
    amounts = dict(zip(rates["source"], rates["mass_rate"], strict=True))
    with progress(quiet=quiet) as report:
        table = choice_table(
            regions(*rates["source"]),
            amounts,
            sites,
            usual=usual,
            progress=lambda done, total: report("choices", done, total),
        )
    if csv_file is not None:
        write_text(csv_text(_rows(table)), csv_file)
    if as_data:
        usual_values = dict(zip(table["site"].values, map(float, table["usual"].values), strict=True))
        click.echo(as_json(_rows(table), {"usual [mm yr-1]": usual_values, "about": _notes(table), "caution": CAUTION}))
        return
    names = [str(name) for name in table["site"].values]
    for first in range(0, len(names), _SITES_A_ROW):
        click.echo(f"{_printed(table, names[first : first + _SITES_A_ROW])}\n")
    click.echo(f"{_notes(table)}\n{CAUTION}")
