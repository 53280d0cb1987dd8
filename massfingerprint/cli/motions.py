"""``massfingerprint motions``: what mass change does to the Earth as a whole, beside the observed drift of the pole."""

import textwrap
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

import click
import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.cli._earth_rates import Drift, Mass, days, mass_of
from massfingerprint.cli._figures import figure_kind
from massfingerprint.cli._problem import Problem, problem_options
from massfingerprint.cli._progress import progress
from massfingerprint.cli._record import record_options
from massfingerprint.cli._tables import as_json, rendered
from massfingerprint.errors import InputError
from massfingerprint.files.atomic import write_binary, write_text
from massfingerprint.files.tables import csv_text
from massfingerprint.load.regions import regions
from massfingerprint.load.spread import spread_mass
from massfingerprint.mass.intervals import INTERVALS, interval_factor
from massfingerprint.sealevel.fingerprints import solve_fingerprints
from massfingerprint.sealevel.observed_pole import BEAT_YEARS, SOURCE, observed_drift, observed_pole, smoothed_pole
from massfingerprint.sealevel.whole_earth import EARTH_NUMBERS, earth_numbers
from massfingerprint.study.metadata import CAUTION

_WIDTH = 110
_FIXED = 1e-3  # degrees: a direction that no error of the mass turns
_TOTAL = "total"
_POLES = {"observed": "observed, all causes", "computed": "computed, this mass", "difference": "difference"}
_AXES = ("geocentre_x", "geocentre_y", "geocentre_z")
_UNITS = {
    **dict.fromkeys(_AXES, ("mm yr-1", 1.0)),
    "j2": ("1e-11 yr-1", 1e11),
    "polar_motion_x": ("mas yr-1", 1.0),
    "polar_motion_y": ("mas yr-1", 1.0),
    "length_of_day_change": ("ms century-1", 100.0),
    "stokes": ("1e-12 yr-1", 1e12),
}
_WORDS = (
    "Geocentre: motion of the centre of mass of Earth, ice and water seen from the centre of the Earth's surface (CF) or of the "
    "mass of the Earth without them (CE): x towards 0 E, y towards 90 E, z north; seen from itself (CM) it is 0 by definition. "
    "J2: positive = flatter. Pole: x towards 0 E, y towards 90 W, 1 mas = 3.09 cm, direction in degrees east. It is where the axis "
    "goes if mass changes slowly against the Chandler period of 433 days; faster changes would swing it about. Length of day: "
    "positive = longer. Stokes coefficients: fully normalised (4 pi) to the radius 6371 km, the answer of the rotation in them; "
    "--csv and --json have degree 1 and higher ones, too."
)
_LEFT_OUT = (
    "Not in the computed numbers: glacial isostatic adjustment, core, mantle convection, earthquakes, water on land, atmosphere, "
    "ocean currents and pressure, ice that is not in the mass record. The Earth answers elastically."
)
_UNCERTAINTY = (
    "the uncertainty is that of the mass alone: Love numbers and where in a source the mass was lost are not in it"
)
_BESIDE = (
    "The difference is reported, not asserted: glacial isostatic adjustment, core, mantle convection, water on land, atmosphere "
    "and oceans move the observed pole and are not in the computed one."
)


@dataclass(frozen=True)
class _Answer:
    """Numbers per gigatonne, their rates, and the drift of the pole."""

    mass: Mass
    numbers: xr.Dataset
    interval: str

    @cached_property
    def rates(self) -> xr.Dataset:
        return self.mass.rates_of(self.numbers, EARTH_NUMBERS)

    @cached_property
    def drifts(self) -> dict[str, Drift]:
        return self.mass.drifts(self.numbers, self.rates)

    @cached_property
    def track(self) -> pd.DataFrame:
        """Pole of all sources (time; x, y) in mas since the start of the window."""
        return self.mass.track(self.numbers, self.drifts[_TOTAL])

    @property
    def factor(self) -> float:
        """Half-width of the interval in standard uncertainties."""
        return interval_factor(self.interval)

    def value(self, name: str, source: str, **at: Any) -> tuple[float, float]:
        """Rate and half-width of one number in the unit it is told in."""
        scale = _UNITS[name][1]
        pair = (f"{name}_total", f"{name}_total_sigma") if source == _TOTAL else (name, f"{name}_sigma")
        fields = [self.rates[label] if source == _TOTAL else self.rates[label].sel(source=source) for label in pair]
        rate, sigma = (float(field.sel(frame=at["frame"]) if "frame" in at else field) for field in fields)
        return rate * scale + 0.0, sigma * scale * self.factor

    def stokes(self, source: str) -> pd.DataFrame:
        """Coefficients of degree 1 (of each frame) and more: ``quantity frame rate half_width``."""
        labels = ("stokes_total", "stokes_total_sigma") if source == _TOTAL else ("stokes", "stokes_sigma")
        rate, sigma = (self.rates[n] if source == _TOTAL else self.rates[n].sel(source=source) for n in labels)
        scale, rows = _UNITS["stokes"][1], []
        for place, (degree, order) in enumerate(zip(rate["degree"].values, rate["order"].values, strict=True)):
            for part, letter in enumerate("CS"):
                if degree == 0 or (order == 0 and letter == "S"):
                    continue
                for frame in rate["frame"].values if degree == 1 else rate["frame"].values[:1]:
                    at = {"frame": frame}
                    pair = [float(f.sel(at).isel(part=part, coefficient=place)) * scale for f in (rate, sigma)]
                    label = f"{letter}{degree},{order}" if degree > 9 else f"{letter}{degree}{order}"
                    rows.append(
                        (
                            (degree, order, letter),
                            label,
                            str(frame) if degree == 1 else "",
                            pair[0] + 0.0,
                            pair[1] * self.factor,
                        )
                    )
        rows.sort(key=lambda row: row[0])
        return pd.DataFrame([row[1:] for row in rows], columns=["quantity", "frame", "rate", "half_width"])


def _solved(mass: Mass, problem: Problem, stokes_degree: int, *, quiet: bool) -> xr.Dataset:
    """Numbers per gigatonne of every source."""
    if stokes_degree > problem.max_degree:
        raise InputError(
            f"--stokes-degree: must not be more than --max-degree {problem.max_degree}, got {stokes_degree}."
        )
    outlines = regions(*mass.sources)
    with progress(quiet=quiet) as report:
        prepared = problem.prepared()
        patterns = solve_fingerprints(prepared, spread_mass(outlines, problem.ocean), outputs=("surface_load",))
        report("patterns", len(mass.sources), len(mass.sources))
    return earth_numbers(prepared, patterns, stokes_degree=stokes_degree)


def _rows(answer: _Answer) -> pd.DataFrame:
    """One row a source and number, full precision."""
    rows = []
    for source in [*answer.mass.sources, _TOTAL]:
        for frame in answer.numbers["frame"].values:
            rows += [(source, name, frame, *answer.value(name, source, frame=frame), _UNITS[name][0]) for name in _AXES]
        for name in ("j2", "polar_motion_x", "polar_motion_y"):
            rows.append((source, name, "", *answer.value(name, source), _UNITS[name][0]))
        drift = answer.drifts[source]
        for name, (value, sigma), unit in (
            ("polar_motion_speed", drift.speed, "cm yr-1"),
            ("polar_motion_direction", drift.direction, "degrees_east"),
        ):
            rows.append((source, name, "", value, sigma * answer.factor, unit))
        name = "length_of_day_change"
        rows.append((source, name, "", *answer.value(name, source), _UNITS[name][0]))
        for row in answer.stokes(source).itertuples(index=False):
            rows.append((source, row[0], row[1], row[2], row[3], _UNITS["stokes"][0]))
    out = pd.DataFrame(rows, columns=["source", "quantity", "frame", "rate", "half_width", "unit"])
    return out.assign(interval=answer.interval)


def _pair(value: float, half_width: float, decimals: int) -> str:
    return f"{value:+.{decimals}f} +- {half_width:.{decimals}f}" if np.isfinite(value) else "-"


def _pole_cells(drift: Drift, factor: float) -> list[str]:
    """x, y, speed and direction as printed; a direction as good as any other is left out."""
    speed, direction = drift.speed, drift.direction
    towards, turn = direction[0], factor * direction[1]
    fixed = f"{towards:+.0f}" if np.isfinite(towards) else "-"  # of one source: its place alone decides
    return [
        _pair(drift.x, factor * drift.sigma(0), 3),
        _pair(drift.y, factor * drift.sigma(1), 3),
        _pair(speed[0], factor * speed[1], 2).lstrip("+"),
        fixed if turn < _FIXED else _pair(towards, turn, 0) if turn < 180.0 else "-",
    ]


_POLE_HEADS = ("x [mas/yr]", "y [mas/yr]", "speed [cm/yr]", "towards [deg E]")


def _printed(answer: _Answer) -> str:
    """Tables of geocentre, figure and spin, and the coefficients of degree 2."""
    sources, factor = [*answer.mass.sources, _TOTAL], answer.factor
    frames = [frame for frame in answer.numbers["frame"].values if frame != "CM"]
    centre, spin, field = [], [], []
    for source in sources:
        cells = [_pair(*answer.value(name, source, frame=frame), 3) for frame in frames for name in _AXES]
        centre.append((source, *cells))
        length = _pair(*answer.value("length_of_day_change", source), 3)
        spin.append(
            (source, _pair(*answer.value("j2", source), 3), *_pole_cells(answer.drifts[source], factor), length)
        )
        table = answer.stokes(source)
        second = table[table["quantity"].str.fullmatch("[CS]2[0-2]")]
        field.append((source, *(_pair(row[2], row[3], 3) for row in second.itertuples(index=False))))
    names = list(second["quantity"])
    tables = (
        ("Geocentre [mm/yr]; in CM 0 by definition", centre, [f"{axis} {frame}" for frame in frames for axis in "xyz"]),
        ("Figure, pole and spin", spin, ["J2 [1e-11/yr]", *_POLE_HEADS, "day [ms/century]"]),
        ("Stokes coefficients of degree 2 [1e-12/yr]", field, names),
    )
    blocks = [
        f"{head}\n\n{rendered(pd.DataFrame(rows, columns=['source', *columns]), 'plain')}"
        for head, rows, columns in tables
    ]
    return "\n\n".join(blocks)


def _observed(mass: Mass) -> tuple[xr.Dataset | None, str]:
    """Observed drift over the window of the mass and what it is, or None and why it is not there."""
    try:
        found = observed_drift(mass.window)
    except InputError as error:
        return None, f"Observed pole: not compared. {error}"
    formal = [float(found[f"{axis}_rate_formal_sigma"]) for axis in "xy"]
    return found, (
        f"Observed: {SOURCE}, a line beside a yearly and a Chandler cycle. Its formal 1 sigma, {formal[0]:.2f} and "
        f"{formal[1]:.2f} mas/yr, takes residuals as white, which they are not; the one given is widened by their correlation from "
        f"a tenth of a year to the next, still no full account of slow ones. {_BESIDE}"
    )


def _compared(answer: _Answer, found: xr.Dataset | None) -> dict[str, Drift]:
    """Observed drift if there is one, the computed one, and what is left."""
    computed = answer.drifts[_TOTAL]
    if found is None:
        return {"computed": computed}
    variance = [float(found[f"{axis}_rate_sigma"]) ** 2 for axis in "xy"]
    observed = Drift(float(found["x_rate"]), float(found["y_rate"]), np.diag(variance))
    return {"observed": observed, "computed": computed, "difference": observed.without(computed)}


def _paragraphs(answer: _Answer, observed: str) -> list[str]:
    """What stands below the tables."""
    last = answer.track.iloc[-1]
    start, end = (str(time.date()) for time in answer.track.index[[0, -1]])
    out = [
        f"Mass: {answer.mass.cited}.",
        f"Computed track: from {start} to {end} the pole goes {last['x']:+.1f} mas in x and {last['y']:+.1f} mas in y.",
        observed,
        f"+-: {answer.interval}; {_UNCERTAINTY}. {_WORDS}",
    ]
    if not answer.mass.same_times:
        out.append("The sources do not all span the same time: the total adds rates of different periods.")
    return [*out, _LEFT_OUT, CAUTION]


def _print(answer: _Answer, found: xr.Dataset | None, observed: str) -> None:
    start, end = days(answer.mass.window)
    click.echo(f"What the mass does to the Earth as a whole, {start} to {end}\n\n{_printed(answer)}\n")
    if found is not None:
        rows = [(_POLES[name], *_pole_cells(drift, answer.factor)) for name, drift in _compared(answer, found).items()]
        table = rendered(pd.DataFrame(rows, columns=["pole", *_POLE_HEADS]), "plain")
        click.echo(f"The pole, observed and computed, {start} to {end}\n\n{table}\n")
    for paragraph in _paragraphs(answer, observed):
        click.echo("\n".join(textwrap.wrap(paragraph, _WIDTH)))


def _data(answer: _Answer, found: xr.Dataset | None, observed: str) -> str:
    """All of it as JSON: a row a source and number, the comparison, the track."""
    compared = {}
    for name, drift in _compared(answer, found).items():
        (speed, speed_sigma), (towards, turn) = drift.speed, drift.direction
        compared[name] = {
            "x [mas yr-1]": drift.x,
            "x half width [mas yr-1]": answer.factor * drift.sigma(0),
            "y [mas yr-1]": drift.y,
            "y half width [mas yr-1]": answer.factor * drift.sigma(1),
            "speed [cm yr-1]": speed,
            "speed half width [cm yr-1]": answer.factor * speed_sigma,
            # a pole at rest goes nowhere
            "direction [degrees_east]": towards if np.isfinite(towards) else None,
            "direction half width [degrees]": answer.factor * turn if np.isfinite(turn) else None,
        }
    track = {f"{axis} [mas]": [float(value) for value in answer.track[axis]] for axis in "xy"}
    about = {
        "window": list(days(answer.mass.window)),
        "interval": answer.interval,
        "pole": compared,
        "track": {"time": [str(time.date()) for time in answer.track.index], **track},
        "about": " ".join(_paragraphs(answer, observed)[:-1]),
        "caution": CAUTION,
    }
    return as_json(_rows(answer), about)


def _in_words(drift: Drift) -> str:
    """Drift for a legend: its drift, 14.5 cm/yr towards 9 W."""
    towards = drift.direction[0]
    if not np.isfinite(towards):
        return "its drift: none"
    return f"its drift, {drift.speed[0]:.1f} cm/yr towards {abs(towards):.0f} {'W' if towards < 0.0 else 'E'}"


def _draw(path: Path, answer: _Answer, found: xr.Dataset | None) -> None:
    """Track and observed pole into a file."""
    from massfingerprint.figures import look, pole  # noqa: PLC0415  plotting only where it is asked for

    start, end = days(answer.mass.window)
    drifts, record = _compared(answer, found), None
    drifts.pop("difference", None)
    words = f"{start} to {end}, seen from above the north. Mass: {answer.mass.cited}. Computed: where the axis goes "
    words += "if mass changes slowly against the Chandler period. 0: start of the computed track"
    if found is not None:
        parts = []
        for data in (observed_pole(), smoothed_pole()):
            held = data.sel(time=slice(*answer.mass.window))
            frame = pd.DataFrame({axis: held[axis].values - float(found[f"{axis}_start"]) for axis in "xy"})
            parts.append(frame.set_axis(pd.DatetimeIndex(held["time"].values)))
        record = parts[0].join(parts[1].add_prefix("smooth_"))
        words += (
            f" and of the line fitted to the observed pole. Observed: {SOURCE}, means over tenths of a year; without its cycles: "
            f"weighted means over {BEAT_YEARS:g} years"
        )
    rows = {name: (drift.x, drift.y, _in_words(drift)) for name, drift in drifts.items()}
    table = pd.DataFrame.from_dict(rows, orient="index", columns=["x", "y", "words"])
    small = f"{words}. {_LEFT_OUT} {CAUTION}"
    with look.style():
        figure = pole.pole_track(
            answer.track, record, drifts=table, title="The pole, and what this mass does to it", caption=small
        )
    write_binary(look.file_content(figure, figure_kind(path)), path)


@click.command(name="motions")
@record_options
@click.option("--window", nargs=2, default=None, help="START END of the record, ISO dates. Default: all of it.")
@click.option(
    "--rates", "rates_file", type=click.Path(path_type=Path), help="Instead: CSV of mass rates, Gt/yr, negative = loss."
)
@click.option("--published", "published_set", help="Instead: a set of published rates, e.g. 'otosaka 2023'.")
@problem_options
@click.option("--stokes-degree", default=4, show_default=True, type=click.IntRange(2), help="Highest Stokes degree.")
@click.option("--interval", default="1 sigma", show_default=True, help=f"Interval behind +-: {', '.join(INTERVALS)}.")
@click.option("--csv", "csv_file", type=click.Path(path_type=Path), help="Also write all rates here, full numbers.")
@click.option("--json", "as_data", is_flag=True, help="Print JSON with full numbers.")
@click.option(
    "--figure", type=click.Path(path_type=Path), help="Also draw track and observed pole: .png, .pdf or .svg."
)
@click.option("--quiet", is_flag=True, help="No talk on stderr.")
def command(problem: Problem, stokes_degree: int, **options: Any) -> None:
    """Print what mass change does to the Earth as a whole: geocentre, J2, pole, length of day, low-degree gravity.

    Rates by mass source and in total, from a mass record or from mass rates, and beside them the observed drift of the pole.

    Example: massfingerprint motions --ledger data_small/demo_mass.csv --max-degree 128 --spacing 1
    """
    interval_factor(options["interval"])
    if options["figure"] is not None:
        figure_kind(options["figure"])
    mass = mass_of(options)
    found, observed = _observed(mass)
    answer = _Answer(mass, _solved(mass, problem, stokes_degree, quiet=options["quiet"]), options["interval"])
    if options["csv_file"] is not None:
        write_text(csv_text(_rows(answer)), options["csv_file"])
    if options["figure"] is not None:
        _draw(options["figure"], answer, found)
    if options["as_data"]:
        click.echo(_data(answer, found, observed))
    else:
        _print(answer, found, observed)
