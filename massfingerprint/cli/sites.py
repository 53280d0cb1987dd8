"""``massfingerprint sites``: millimetres per year at named coasts from a table of mass rates."""

import textwrap
from dataclasses import dataclass
from pathlib import Path

import click
import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.cli._mass_rates import mass_rates_options, spread
from massfingerprint.cli._problem import Problem, problem_options
from massfingerprint.constants import GIGATONNES_PER_MILLIMETRE
from massfingerprint.earth.green import LEAST_DEGREE
from massfingerprint.files.atomic import write_text
from massfingerprint.load.regions import regions
from massfingerprint.load.spread import spread_mass
from massfingerprint.mass.intervals import shown
from massfingerprint.sealevel.coasts import coast_values
from massfingerprint.sealevel.nearfield import WITHIN
from massfingerprint.sealevel.solver import Prepared
from massfingerprint.sealevel.within import range_within
from massfingerprint.sphere.points import read_sites

_MOST_COLUMNS = 5  # of mass sources on a printed row
_RANGE_DEGREE = 256  # of the range within each source, which is smoothed anyway
_CAUTION = "For screening only: local datums, surveys and licensed practice decide."
_LEFT_OUT = (
    "Not included: ocean dynamics, thermal expansion and salinity, atmosphere, glacial isostatic adjustment, local land motion, "
    "ice not in the table of rates."
)


@dataclass(frozen=True)
class Answer:
    """Rates at sites: table of mass rates, prepared problem, patterns at sites and their range within each source, mm per Gt."""

    rates: pd.DataFrame
    prepared: Prepared
    patterns: xr.Dataset
    elsewhere: xr.Dataset

    def by_source(self, name: str) -> np.ndarray:
        """Rate (source, site) in mm yr-1 of one field."""
        return self.patterns[name].values * self.rates["mass_rate"].to_numpy()[:, None]

    def sigma(self, name: str) -> np.ndarray:
        """Standard uncertainty (site,) in mm yr-1 of the total, from the mass rates alone."""
        return spread(self.rates, self.patterns[name].values)

    def range_by_source(self) -> tuple[np.ndarray, np.ndarray]:
        """Lowest and highest rate (source, site) in mm yr-1 if each source's mass sat in one cell of it."""
        scale = self.rates["mass_rate"].to_numpy()[:, None]
        ends = [self.elsewhere[f"relative_sea_level_{end}"].values * scale for end in ("lowest", "highest")]
        return np.minimum(*ends), np.maximum(*ends)

    @property
    def global_mean(self) -> tuple[float, float]:
        """Barystatic rate and its standard uncertainty, mm yr-1."""
        factor = self.prepared.gigatonnes_per_millimetre
        sigma = spread(self.rates, np.ones((len(self.rates), 1)))
        return -float(self.rates["mass_rate"].sum()) / factor, float(sigma[0]) / factor


def _answer(rates: pd.DataFrame, sites_file: Path, problem: Problem) -> Answer:
    sites = read_sites(sites_file)
    outlines = regions(*rates["source"])
    prepared = problem.prepared(least_degree=LEAST_DEGREE)
    load = spread_mass(outlines, problem.ocean)
    coarse = prepared
    if problem.max_degree > _RANGE_DEGREE:
        coarse = problem.prepared(max_degree=_RANGE_DEGREE)
    here = coast_values(prepared, outlines, load, sites)
    return Answer(rates, prepared, here, range_within(coarse, load, sites))


def _table(answer: Answer) -> pd.DataFrame:
    """One row per site, numbers in mm yr-1."""
    sea = answer.by_source("relative_sea_level")
    mean = answer.global_mean[0]
    out = pd.DataFrame(
        {"site": answer.patterns["site"].values, "lat": answer.patterns["lat"], "lon": answer.patterns["lon"]}
    )
    for source, values in zip(answer.rates["source"], sea, strict=True):
        out[f"{source} [mm yr-1]"] = values
    out["total [mm yr-1]"] = sea.sum(axis=0)
    out["total sigma [mm yr-1]"] = answer.sigma("relative_sea_level")
    out["ratio to global mean [1]"] = sea.sum(axis=0) / mean if mean else np.nan
    out["vertical land motion, elastic [mm yr-1]"] = answer.by_source("bedrock_up").sum(axis=0)
    out["truncation [mm yr-1]"] = answer.by_source("relative_sea_level_truncation").sum(axis=0)
    lowest, highest = answer.range_by_source()
    for source, low, high in zip(answer.rates["source"], lowest, highest, strict=True):
        out[f"{source} lowest [mm yr-1]"], out[f"{source} highest [mm yr-1]"] = low, high
    out["total lowest [mm yr-1]"], out["total highest [mm yr-1]"] = lowest.sum(axis=0), highest.sum(axis=0)
    out["not resolved"] = _unresolved(answer)
    return out


def _unresolved(answer: Answer) -> list[str]:
    """Name, per site, the mass sources whose outline is too coarse there for the near field."""
    near = answer.patterns["resolved"].values == 0
    distance = answer.patterns["distance_to_load"].values
    names = answer.rates["source"].to_numpy()
    return [
        "; ".join(f"{n} {d:.0f} km" for n, d in zip(names[k], distance[k, i], strict=True))
        for i, k in enumerate(near.T)
    ]


def _headline(answer: Answer) -> list[str]:
    mean, sigma = answer.global_mean
    first, last = answer.rates["time_start"].min(), answer.rates["time_end"].max()
    factor = answer.prepared.gigatonnes_per_millimetre
    return [
        f"Global mean (barystatic): {mean:+.3f} +- {sigma:.3f} mm/yr, {first:%Y-%m-%d} to {last:%Y-%m-%d}",
        f"1 mm over this ocean is {factor:.2f} Gt (tables often use {GIGATONNES_PER_MILLIMETRE.value}).",
    ]


def _split(source: str) -> tuple[str, str]:
    """Name of a mass source on two lines of a column head."""
    first, _, rest = source.partition("_")
    return (first, rest.replace("_", " ")) if rest else ("", first)


def _columns(answer: Answer, table: pd.DataFrame) -> dict[str, pd.Series]:
    """Rate per site of each source; of many sources the largest, and the others together."""
    sources = answer.rates["source"]
    largest = answer.rates["mass_rate"].abs().sort_values(ascending=False, kind="stable").index[:_MOST_COLUMNS]
    shown = sources if len(sources) <= _MOST_COLUMNS + 1 else sources[sources.index.isin(largest)]
    out = {str(name): table[f"{name} [mm yr-1]"] for name in shown}
    if len(shown) < len(sources):
        out["all_others"] = table["total [mm yr-1]"] - sum(out.values())
    return out


def _grid_of_words(answer: Answer, table: pd.DataFrame) -> list[str]:
    columns = _columns(answer, table)
    sources = list(columns)
    width = max(11, *(len(word) + 1 for source in sources for word in _split(source)))
    tail = (("", "ratio", "land", "trun-"), ("total", "to mean", "up", "cation", "lowest", "highest"))
    lines = []
    for line, title in enumerate(("Relative sea level,", "mm/yr")):
        total, *others = tail[line]
        heads = "".join(f"{_split(source)[line]:>{width}}" for source in sources)
        lines.append(f"{title:22}{heads}{total:>9}{'':9}{''.join(f'{word:>8}' for word in others)}")
    lines[0] += f"{'if elsewhere':>16}"
    for place, (_, row) in enumerate(table.iterrows()):
        parts = "".join(f"{values.iloc[place]:+{width}.3f}" for values in columns.values())
        lines.append(
            f"{row['site'][:21]:22}{parts}{row['total [mm yr-1]']:+9.3f} +- {row['total sigma [mm yr-1]']:5.3f}"
            f"{row['ratio to global mean [1]']:8.2f}{row['vertical land motion, elastic [mm yr-1]']:+8.3f}"
            f"{row['truncation [mm yr-1]']:+8.3f}{row['total lowest [mm yr-1]']:+8.2f}{row['total highest [mm yr-1]']:+8.2f}"
            f"{'  not resolved: ' + row['not resolved'] if row['not resolved'] else ''}"
        )
    return lines


def _rounding(answer: Answer) -> list[str]:
    """Footnote if, at any site, the rounded parts do not add to the rounded total."""
    parts = answer.by_source("relative_sea_level")
    names = [str(name) for name in answer.rates["source"]]
    notes = [shown(dict(zip(names, here, strict=True)), float(here.sum()), decimals=3)[2] for here in parts.T]
    return [note for note in dict.fromkeys(notes) if note]


def _notes(answer: Answer) -> list[str]:
    degree = answer.prepared.max_degree
    text = (
        "+-: 1 standard uncertainty (1 sigma) of the mass rates, independent between sources unless one published error was "
        "split over them; Love numbers add about 1 %. Where within a source the mass was lost is not in the table, it is spread "
        "evenly over its ice; if elsewhere: lowest and highest total if each source's mass sat in one cell of it. ratio to mean: "
        "total over the global mean. land up: vertical land motion, elastic, present-day, mm/yr, in "
        f"{answer.patterns.attrs['reference_frame']}. truncation: what fading out degrees {degree // 2} to {degree} takes off. "
        f"Within {WITHIN:g} km of ice the value has the near field of its outline in it, all degrees; not resolved: the outline "
        f"named is too coarse there. Earth: {answer.patterns.attrs['love_numbers']}; degree {degree}."
    )
    return [
        line for paragraph in (text, *_rounding(answer), _LEFT_OUT, _CAUTION) for line in textwrap.wrap(paragraph, 110)
    ]


@click.command(name="sites")
@mass_rates_options
@click.option(
    "--sites",
    "sites_file",
    required=True,
    type=click.Path(path_type=Path),
    help="CSV with columns site, lat, lon (degrees).",
)
@problem_options
@click.option(
    "--csv",
    "csv_file",
    type=click.Path(path_type=Path),
    help="Also write the table here, one row per site, full numbers.",
)
def command(
    rates: pd.DataFrame,
    sites_file: Path,
    problem: Problem,
    csv_file: Path | None,
) -> None:
    """Print relative sea level in mm/yr at coasts, by mass source, from mass rates in Gt/yr.

    Example: massfingerprint sites --rates data_small/published_rates.csv --sites data_small/coasts.csv
    """
    answer = _answer(rates, sites_file, problem)
    table = _table(answer)
    if csv_file is not None:
        write_text(table.to_csv(index=False, lineterminator="\n"), csv_file)
        click.echo(f"Table written to {csv_file}.", err=True)
    click.echo("\n".join([*_headline(answer), "", *_grid_of_words(answer, table), "", *_notes(answer)]))
    for line in sorted(set(answer.rates["citation"])):
        click.echo(f"Mass rates: {line}.", err=True)
