"""``massfingerprint stations``: elastic motion of permanent geodetic stations over their own epochs."""

import textwrap
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import click
import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.cli._mass_rates import mass_rates
from massfingerprint.cli._problem import Problem, problem_options
from massfingerprint.cli._progress import progress
from massfingerprint.cli._record import OF_A_RECORD, record_of, record_options
from massfingerprint.cli._tables import as_json, rendered
from massfingerprint.coast.station_rates import station_rates, station_series
from massfingerprint.coast.station_report import (
    FRAME_WORDS,
    INTERPOLATION,
    STATION_LEFT_OUT,
    constant_ledger,
    station_residuals,
    station_table,
)
from massfingerprint.coast.stations import COMPONENTS, read_station_series, read_station_velocities, read_stations
from massfingerprint.earth.green import LEAST_DEGREE
from massfingerprint.errors import InputError
from massfingerprint.files.atomic import write_text
from massfingerprint.files.netcdf import write_cf_netcdf
from massfingerprint.files.tables import csv_text
from massfingerprint.load.regions import regions
from massfingerprint.load.spread import spread_mass
from massfingerprint.mass.intervals import INTERVALS, interval_factor
from massfingerprint.sealevel.coasts import coast_values
from massfingerprint.study.metadata import CAUTION, now

_WIDTH = 110
_OUTPUTS = tuple(f"bedrock_{name}" for name in COMPONENTS)


@dataclass(frozen=True)
class _Given:
    """Everything read from the user's files."""

    stations: pd.DataFrame
    series: pd.DataFrame | None
    velocities: pd.DataFrame | None
    ledger: xr.Dataset
    constant: bool


@dataclass(frozen=True)
class _Answer:
    """Values per gigatonne at the stations, rates, and the tables made of them."""

    values: xr.Dataset
    rates: xr.Dataset
    table: pd.DataFrame
    residuals: pd.DataFrame


def _ledger(options: dict[str, Any]) -> xr.Dataset:
    """Mass record, no ice counted twice."""
    if options["published_set"] is not None:
        for name in OF_A_RECORD:
            if options[name]:
                raise InputError(f"--{name.replace('_', '-')}: goes with --ledger only, not with --published.")
        return constant_ledger(mass_rates(None, options["published_set"]))
    return record_of(options)


def _read(options: dict[str, Any]) -> _Given:
    if (options["ledger_file"] is None) == (options["published_set"] is None):
        raise InputError(
            "mass: give either --ledger FILE or --published SET. massfingerprint ledger published lists the sets."
        )
    stations = read_stations(options["stations_file"])
    series, velocities = options["series_file"], options["velocities_file"]
    return _Given(
        stations,
        None if series is None else read_station_series(series, stations=stations),
        None if velocities is None else read_station_velocities(velocities, stations=stations),
        _ledger(options),
        options["published_set"] is not None,
    )


def _values(given: _Given, problem: Problem, frame: str, *, quiet: bool) -> xr.Dataset:
    """Elastic motion per gigatonne (source, site), the near field in it."""
    sites = given.stations.rename(columns={"station": "site"})[["site", "lat", "lon"]]
    sources = [str(name) for name in given.ledger["source"].values]
    outlines = regions(*sources)
    with progress(quiet=quiet) as report:
        prepared = problem.prepared(least_degree=LEAST_DEGREE)
        load = spread_mass(outlines, problem.ocean)
        out = coast_values(prepared, outlines, load, sites, outputs=_OUTPUTS, reference_frame=frame)
        report("patterns", len(sources), len(sources))
    return out


def _pair(value: float, half_width: float) -> str:
    if not np.isfinite(value):
        return "-"
    return f"{value + 0.0:+.3f} +- {half_width:.3f}" if np.isfinite(half_width) else f"{value + 0.0:+.3f}"


def _pairs(table: pd.DataFrame, name: str) -> list[str]:
    halves = table[f"{name} half width [mm yr-1]"]
    return [_pair(value, half) for value, half in zip(table[f"{name} [mm yr-1]"], halves, strict=True)]


def _rate_cells(table: pd.DataFrame) -> pd.DataFrame:
    """Rounded cells of the rates."""
    spans = zip(table["first"], table["last"], strict=True)
    cells: dict[str, Any] = {"station": table["station"]}
    cells |= {axis: [f"{value:.2f}" for value in table[axis]] for axis in ("lat", "lon")}
    cells["span"] = [f"{first} to {last}" if first else "-" for first, last in spans]
    cells["epochs"] = [str(count) for count in table["epochs"]]
    cells |= {f"{name} [mm/yr]": _pairs(table, name) for name in COMPONENTS}
    return pd.DataFrame({**cells, "largest source": table["largest source"], "ice": table["flag"]})


def _printed(answer: _Answer) -> str:
    """Tables of rates and residuals, and a line for each station that has a remark."""
    table, residuals = answer.table, answer.residuals
    blocks = [rendered(_rate_cells(table), "plain")]
    words = zip(table["station"], table["remark"], strict=True)
    remarks = [textwrap.fill(f"{name}: {text}.", _WIDTH, subsequent_indent="      ") for name, text in words if text]
    if remarks:
        blocks.append("\n".join(remarks))
    if len(residuals):
        cells = residuals[["station", "component", "observed from"]].copy()
        for name in ("observed", "elastic", "residual"):
            cells[f"{name} [mm/yr]"] = _pairs(residuals, name)
        blocks.append(f"Observed minus elastic\n\n{rendered(cells, 'plain')}")
    return "\n\n".join(blocks)


def _paragraphs(given: _Given, answer: _Answer, options: dict[str, Any]) -> list[str]:
    """What stands below the tables."""
    frame, seasonal = options["frame"], " beside a yearly cycle" if options["seasonal"] else ""
    out = [
        f"Rates of elastic motion in mm/yr, positive = up, north, east, in {frame}. {FRAME_WORDS[frame]}",
        f"Rate: slope of a least-squares line{seasonal} over the station's epochs, in years of 365.25 days; weights 1/sigma^2 of "
        f"its own series, else equal. +-: {options['interval']} of the mass record, its errors as they are related in time and "
        "between sources; Love numbers (about 1 %) and where in a source the mass was lost are not in it.",
        INTERPOLATION,
        "ice: far, the near field of the outlines added, or an outline too coarse for the station (not resolved: do not use).",
    ]
    if given.constant:
        out.append(
            "Constant rates: the mass goes straight from start to end of each source's period; outside it there is none."
        )
    if len(answer.residuals):
        out.append(
            "Observed minus elastic: observed and modelled errors are taken as independent. The error of a rate from a series is "
            "formal, of white noise; a real series is correlated in time, which can make it several times as large."
        )
    return [*out, f"Mass: {_cited(given.ledger)}.", STATION_LEFT_OUT, CAUTION]


def _cited(ledger: xr.Dataset) -> str:
    cells = list(ledger["citation"].values) if "citation" in ledger else []
    found = dict.fromkeys(str(cell).strip() for cell in cells if str(cell).strip())
    return "; ".join(found) or "no citation in the file"


def _write(given: _Given, answer: _Answer, options: dict[str, Any]) -> None:
    """Files that were asked for."""
    if options["csv_file"] is not None:
        write_text(csv_text(answer.table.assign(interval=options["interval"])), options["csv_file"])
    if options["covariance_file"] is not None:
        names = ("covariance", "rate_total", "rate_total_sigma", "rate", "rate_sigma", "nepoch", "first", "last")
        about = {
            "title": "Rates of elastic motion at stations and their covariance",
            "reference_frame": options["frame"],
            "source": _cited(given.ledger),
            "comment": f"{INTERPOLATION} {STATION_LEFT_OUT} {CAUTION}",
            "history": f"{now()} massfingerprint stations",
        }
        write_cf_netcdf(answer.rates[list(names)], options["covariance_file"], attributes=about)
    if options["series_out"] is not None:
        series = station_series(answer.values, given.ledger, given.stations, series=given.series)
        units = {name: f"{name} [mm]" for name in series.columns if name.startswith(COMPONENTS)}
        series["time"] = series["time"].dt.strftime("%Y-%m-%dT%H:%M:%S")
        write_text(csv_text(series.rename(columns=units)), options["series_out"])


def _data(answer: _Answer, paragraphs: list[str], options: dict[str, Any]) -> str:
    """All of it as JSON, values that are not there as null."""
    residuals = answer.residuals.astype(object)
    about = {
        "reference_frame": options["frame"],
        "interval": options["interval"],
        "residuals": residuals.where(residuals.notna(), None).to_dict("records"),
        "about": " ".join(paragraphs[:-1]),
        "caution": CAUTION,
    }
    return as_json(answer.table, about)


@click.command(name="stations")
@click.option(
    "--stations",
    "stations_file",
    required=True,
    type=click.Path(path_type=Path),
    help="CSV with station, and lat, lon or x [m], y [m], z [m]; optional start, end, gaps.",
)
@record_options
@click.option("--published", "published_set", help="Instead: a set of published rates, e.g. 'otosaka 2023'.")
@click.option(
    "--series",
    "series_file",
    type=click.Path(path_type=Path),
    help="CSV of the stations' own epochs: station, time; optional up [mm], up_sigma [mm], north, east.",
)
@click.option(
    "--velocities",
    "velocities_file",
    type=click.Path(path_type=Path),
    help="CSV of observed rates: station, up [mm yr-1], up_sigma [mm yr-1], north, east.",
)
@click.option(
    "--frame",
    default="CM",
    show_default=True,
    type=click.Choice(list(FRAME_WORDS)),
    help="Origin the motion refers to.",
)
@click.option(
    "--overlap", is_flag=True, help="Where the record is shorter than a station: the rate over what they share."
)
@click.option("--interval", default="1 sigma", show_default=True, help=f"Interval behind +-: {', '.join(INTERVALS)}.")
@problem_options
@click.option("--csv", "csv_file", type=click.Path(path_type=Path), help="Also write the table here, full numbers.")
@click.option("--json", "as_data", is_flag=True, help="Print JSON with full numbers.")
@click.option(
    "--covariance",
    "covariance_file",
    type=click.Path(path_type=Path),
    help="Also write rates and their covariance between all stations and components here, NetCDF.",
)
@click.option(
    "--series-out", type=click.Path(path_type=Path), help="Also write displacements at the stations' epochs here, CSV."
)
@click.option("--quiet", is_flag=True, help="No talk on stderr.")
def command(problem: Problem, **options: Any) -> None:
    """Print elastic rates up, north and east of permanent stations over their own epochs, with uncertainty, from mass change.

    Example: massfingerprint stations --stations data_small/demo_stations.csv --ledger data_small/demo_mass.csv --overlap
    """
    interval_factor(options["interval"])
    given = _read(options)
    values = _values(given, problem, options["frame"], quiet=options["quiet"])
    rates = station_rates(
        values,
        given.ledger,
        given.stations,
        series=given.series,
        seasonal=options["seasonal"],
        overlap=options["overlap"],
    )
    answer = _Answer(
        values,
        rates,
        station_table(rates, values, interval=options["interval"]),
        station_residuals(rates, given.velocities, interval=options["interval"]),
    )
    _write(given, answer, options)
    paragraphs = _paragraphs(given, answer, options)
    if options["as_data"]:
        click.echo(_data(answer, paragraphs, options))
        return
    click.echo(f"{_printed(answer)}\n")
    for paragraph in paragraphs:
        click.echo("\n".join(textwrap.wrap(paragraph, _WIDTH)))
