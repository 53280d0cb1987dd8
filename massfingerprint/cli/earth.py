"""``massfingerprint earth``: the Earths there are, their Love numbers, how they differ."""

import textwrap
from dataclasses import replace
from pathlib import Path
from typing import Any

import click
import pandas as pd

from massfingerprint.cli._figures import figure_kind
from massfingerprint.cli._mass_rates import mass_rates
from massfingerprint.cli._problem import earth_options
from massfingerprint.cli._progress import progress
from massfingerprint.cli._tables import as_json, rendered
from massfingerprint.earth.choice import ChosenEarth
from massfingerprint.earth.description import report
from massfingerprint.earth.frames import FRAMES, in_frame
from massfingerprint.earth.models import MODELS
from massfingerprint.earth.response import degree_factors
from massfingerprint.earth.table import earth_model_table
from massfingerprint.errors import InputError
from massfingerprint.files.atomic import write_binary, write_text
from massfingerprint.files.netcdf import write_cf_netcdf
from massfingerprint.files.tables import csv_text
from massfingerprint.load.regions import regions
from massfingerprint.sealevel.choices import FOR_CHECKS, Physics, choice_table
from massfingerprint.sphere.points import read_sites
from massfingerprint.study.metadata import CAUTION, now

_COLUMNS = ("h_load", "l_load", "k_load", "h_tide", "l_tide", "k_tide")
_WIDTH = 110
_DRAWN_DEGREE = 4096
_COAST_DEGREE, _COAST_SPACING = 512, 0.25


@click.group(name="earth")
def command() -> None:
    """Earths: list, compute, compare, export, plot.

    Example: massfingerprint earth compute prem --degrees 1,2,10
    """


def _degrees(text: str) -> list[int]:
    """Degrees of a comma-separated list, or InputError naming the piece that is not one."""
    out = []
    for piece in text.split(","):
        if not piece.strip().isdecimal():
            raise InputError(
                f"--degrees: must be whole numbers of 0 or more separated by commas, got {piece.strip()!r}."
            )
        out.append(int(piece))
    return out


degrees_option = click.option(
    "--degrees", default="1,2,3,10,100,1000", show_default=True, help="Spherical-harmonic degrees, comma-separated."
)
frame_option = click.option("--frame", default="CE", show_default=True, help=f"Frame of degree 1: {', '.join(FRAMES)}.")


@command.command(name="list")
@click.option("--json", "as_data", is_flag=True, help="Print as JSON with full numbers.")
def list_earths(as_data: bool) -> None:
    """Print the built-in Earths, with radius, mass and moment of inertia.

    Example: massfingerprint earth list
    """
    rows = []
    for name, entry in MODELS.items():
        model = entry.make()
        factor = model.moment_of_inertia / (model.mass * model.radius**2)
        rows.append((name, model.radius / 1e3, model.mass / 1e24, factor, entry.about))
    table = pd.DataFrame(rows, columns=["earth", "radius [km]", "mass [1e24 kg]", "C/(M a^2) [1]", "what it is"])
    note = "The Earth itself: 5.9722e24 kg, mean moment 0.3308."
    if as_data:
        click.echo(as_json(table, {"note": note}))
        return
    cells = table.copy()
    for column, digits in (("radius [km]", 0), ("mass [1e24 kg]", 4), ("C/(M a^2) [1]", 4)):
        cells[column] = [f"{value:.{digits}f}" for value in table[column]]
    click.echo(f"{rendered(cells, 'plain')}\n\n{note} A file of your own goes in the place of a name.")


@command.command()
@click.argument("earth", default="prem")
@earth_options
@degrees_option
@frame_option
@click.option("--recompute", is_flag=True, help="Integrate every degree, without table or interpolation.")
@click.option("--json", "as_data", is_flag=True, help="Print as JSON with full numbers.")
def compute(earth: ChosenEarth, degrees: str, frame: str, recompute: bool, as_data: bool) -> None:
    """Print load and tide Love numbers (dimensionless) of an EARTH: a built-in name, a layer table or a Love-number table.

    Example: massfingerprint earth compute prem_continental --degrees 2,10,100 --frame CF
    """
    wanted = _degrees(degrees)
    love = in_frame(earth.love_numbers(max_degree=max([*wanted, 1]), every_degree=recompute), frame)
    rows = pd.DataFrame({"degree": wanted} | {name: love[name].values[wanted] for name in _COLUMNS})
    if as_data:
        click.echo(as_json(rows, {"earth": str(love.attrs["source"]), "reference_frame": frame}))
        return
    click.echo(f"degree {' '.join(f'{name:>13}' for name in _COLUMNS)}")
    for row in rows.itertuples(index=False):
        click.echo(f"{row[0]:6d} {' '.join(f'{value:13.8f}' for value in row[1:])}")
    model = earth.model()
    for line in report(model) if model is not None else []:
        click.echo(line, err=True)
    click.echo(f"Earth: {love.attrs['source']}. Degree 1 in {frame}.", err=True)


def _responses(earths: list[ChosenEarth], max_degree: int) -> dict[str, pd.Series]:
    """T_l of each Earth, m per (kg m-2), indexed by degree."""
    out = {}
    for earth in earths:
        love = earth.love_numbers(max_degree=max_degree)
        out[str(earth)] = pd.Series(degree_factors(love, "relative_sea_level"), index=love["degree"].values)
    return out


def _compared(words: tuple[str, ...]) -> list[ChosenEarth]:
    """The Earths named, the first of them what the others are held against; by default prem and its kin."""
    names = words or tuple(name for name in MODELS if name not in FOR_CHECKS)
    if len(names) < 2:
        raise InputError(f"earths: name at least two, got {', '.join(names)}. massfingerprint earth list names them.")
    if len(set(names)) < len(names):
        raise InputError(f"earths: each only once, got {', '.join(names)}.")
    return [ChosenEarth(name) for name in names]


def _at_coasts(earths: list[ChosenEarth], rates: pd.DataFrame, sites_file: Path, quiet: bool) -> pd.DataFrame:
    """Change of relative sea level (site, Earth) in mm/yr, beside the value with the first Earth."""
    usual = Physics(earth=earths[0], max_degree=_COAST_DEGREE, spacing=_COAST_SPACING)
    others = {("Earth", str(earth)): replace(usual, earth=earth) for earth in earths[1:]}
    amounts = dict(zip(rates["source"], rates["mass_rate"], strict=True))
    with progress(quiet=quiet) as told:
        table = choice_table(
            regions(*rates["source"]),
            amounts,
            read_sites(sites_file),
            usual=usual,
            others=others,
            progress=lambda done, total: told("choices", done, total),
        )
    out = pd.DataFrame(table["change"].values.T, index=table["site"].values, columns=table["chosen"].values)
    out.insert(0, str(earths[0]), table["usual"].values)
    return out


_COMPARE = """T_l: how relative sea level answers a load of degree l, m per (kg m-2), before the water follows; in brackets how much
more than the first Earth."""


@command.command()
@click.argument("earths", nargs=-1)
@degrees_option
@click.option("--rates", "rates_file", type=click.Path(path_type=Path), help="With --sites: CSV of mass rates, Gt/yr.")
@click.option("--published", "published_set", help="With --sites: this set of published rates instead.")
@click.option("--sites", "sites_file", type=click.Path(path_type=Path), help="Compare coasts, too: CSV site, lat, lon.")
@click.option("--figure", type=click.Path(path_type=Path), help="Also draw the comparison: .png, .pdf or .svg.")
@click.option("--csv", "csv_file", type=click.Path(path_type=Path), help="Also write the response by degree here.")
@click.option("--quiet", is_flag=True, help="No talk on stderr.")
def compare(earths: tuple[str, ...], degrees: str, **options: Any) -> None:
    """Compare Earths: the response of sea level by degree, and at coasts if mass rates and sites are given.

    Example: massfingerprint earth compare prem prem_oceanic --published 'otosaka 2023' --sites data_small/coasts.csv
    """
    chosen, wanted = _compared(earths), [degree for degree in _degrees(degrees) if degree > 0]
    if not wanted:
        raise InputError(f"--degrees: at least one of 1 or more is needed to compare, got {degrees!r}.")
    responses = _responses(chosen, max([*wanted, _DRAWN_DEGREE]))
    click.echo(rendered(_response_table(responses, wanted), "plain"))
    click.echo("\n" + "\n".join(textwrap.wrap(_COMPARE, _WIDTH)))
    coasts = None
    if options["sites_file"] is not None:
        rates = mass_rates(options["rates_file"], options["published_set"])
        coasts = _at_coasts(chosen, rates, options["sites_file"], options["quiet"])
        click.echo(f"\n{_coast_words(coasts)}\n\n{CAUTION}")
    elif options["rates_file"] is not None or options["published_set"] is not None:
        raise InputError("--sites: coasts are compared at sites. Give --sites FILE, or leave the rates out.")
    if options["csv_file"] is not None:
        write_text(csv_text(pd.DataFrame(responses).rename_axis("degree").reset_index()), options["csv_file"])
    if options["figure"] is not None:
        changes = None if coasts is None else coasts.drop(columns=coasts.columns[0])
        _draw_comparison(responses, changes, options["figure"])


def _response_table(responses: dict[str, pd.Series], wanted: list[int]) -> pd.DataFrame:
    first, rows = next(iter(responses)), []
    for name, response in responses.items():
        cells = []
        for degree in wanted:
            value, usual = float(response.loc[degree]), float(responses[first].loc[degree])
            cells.append(f"{value:.4g}" if name == first else f"{value:.4g} ({100.0 * (value / usual - 1.0):+.2f} %)")
        rows.append((name, *cells))
    return pd.DataFrame(rows, columns=["Earth", *(f"T_{degree}" for degree in wanted)])


def _coast_words(coasts: pd.DataFrame) -> str:
    """Table of coasts, and what its columns are."""
    first, *others = coasts.columns
    cells = pd.DataFrame({"coast": coasts.index, first: [f"{value:+.3f}" for value in coasts[first]]})
    for name in others:
        cells[name] = [f"{value:+.4f}" for value in coasts[name]]
    about = (
        f"Relative sea level, mm/yr, with the Earth {first}, and by how much it changes with each other; degree {_COAST_DEGREE}, "
        "near field within 300 km of the ice."
    )
    return "\n".join([rendered(cells, "plain"), "", *textwrap.wrap(about, _WIDTH)])


def _draw_comparison(responses: dict[str, pd.Series], coasts: pd.DataFrame | None, path: Path) -> None:
    from massfingerprint.figures import earths, look  # noqa: PLC0415  plotting only where it is asked for

    words = (
        "Left: response of relative sea level to a load of each degree, before the water follows. "
        "Right: change of relative sea level at coasts for the mass rates given. "
        if coasts is not None
        else "Response of relative sea level to a load of each degree, before the water follows. "
    )
    with look.style():
        drawn = earths.sensitivity(
            responses, coasts, title="What the choice of the Earth changes", caption=words + CAUTION
        )
    write_binary(look.file_content(drawn, figure_kind(path)), path)


@command.command()
@click.argument("earth")
@click.argument("path", type=click.Path(path_type=Path))
@earth_options
@click.option("--max-degree", default=1024, show_default=True, type=click.IntRange(1, 40000), help="Highest degree.")
@frame_option
@click.option("--layers", is_flag=True, help="Write the layers themselves, as a table to change and read again.")
def export(earth: ChosenEarth, path: Path, max_degree: int, frame: str, layers: bool) -> None:
    """Write Love numbers of an EARTH to PATH, CSV or NetCDF by its ending; with --layers the table of its layers.

    Example: massfingerprint earth export prem love.csv --max-degree 512 --frame CF
    """
    kind = path.suffix.lower()
    if kind not in (".csv", ".nc") or (layers and kind != ".csv"):
        raise InputError(f"path: must end in .csv{'' if layers else ' or .nc'}, got {path.name!r}.")
    if layers:
        model = earth.model()
        if model is None:
            raise InputError(f"--layers: {earth} is a table of Love numbers and has no layers.")
        write_text(csv_text(earth_model_table(model)), path)
    else:
        love = in_frame(earth.love_numbers(max_degree=max_degree), frame)
        if kind == ".nc":
            title = f"Love numbers of {earth}"
            about = {"title": title, "history": f"{now()} massfingerprint earth export", "source": love.attrs["source"]}
            write_cf_netcdf(love, path, attributes={**love.attrs, **about})
        else:
            write_text(csv_text(love.to_dataframe().reset_index()), path)
    click.echo(f"{path} written.", err=True)


@command.command()
@click.argument("path", type=click.Path(path_type=Path))
@click.argument("earths", nargs=-1)
def plot(path: Path, earths: tuple[str, ...]) -> None:
    """Draw the load Love numbers of EARTHS (default: all built-in ones) by degree into PATH: .png, .pdf or .svg.

    Example: massfingerprint earth plot love.png prem prem_oceanic
    """
    from massfingerprint.figures import earths as drawing  # noqa: PLC0415  plotting only where it is asked for
    from massfingerprint.figures import look  # noqa: PLC0415

    kind = figure_kind(path)
    tables = {
        str(earth): in_frame(earth.love_numbers(max_degree=_DRAWN_DEGREE), "CE").to_dataframe()
        for earth in (ChosenEarth(word) for word in earths or MODELS)
    }
    words = f"Load Love numbers to degree {_DRAWN_DEGREE}, degree 1 in the frame of the solid Earth's centre (CE)."
    with look.style():
        drawn = drawing.love_curves(tables, title="Load Love numbers", caption=words)
    write_binary(look.file_content(drawn, kind), path)
    click.echo(f"{path} written.", err=True)
