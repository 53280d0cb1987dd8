"""The figures of a study: which ones, from which numbers, under which names."""

from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pandas as pd

from massfingerprint.figures import bars, curves, maps, overview
from massfingerprint.mass.intervals import from_sigma
from massfingerprint.mass.summary import TOTAL
from massfingerprint.study.drawing import Job, draw_all
from massfingerprint.study.metadata import CAUTION, LEFT_OUT
from massfingerprint.study.patterns import Progress
from massfingerprint.study.run import Study
from massfingerprint.study.summary import site_sentence
from massfingerprint.study.tables import Identifiers
from massfingerprint.vocabulary import readable

_FIELD = "relative_sea_level"
_EXTENT = {"north": 60.0, "south": -60.0}  # a source beyond it gets a panel of its pole


def draw(study: Study, tables: dict[str, pd.DataFrame], folder: Path, *, progress: Progress) -> None:
    """Draw all figures of a study into a new folder, in every format asked for.

    Parameters
    ----------
    study : Study
        Results.
    tables : dict
        Of the study.
    folder : Path
        Where to make ``maps``, ``sites`` and the rest.
    progress : callable
        Told after every figure.
    """
    kinds = study.recipe.output.figure_formats
    jobs = [Job(function, given, folder / name, kinds) for name, function, given in pictures(study, tables)]
    draw_all(jobs, progress=progress)


Picture = tuple[str, Callable[..., Any], dict[str, Any]]
"""Name in the folder without ending, the function that draws it, its arguments."""


def pictures(study: Study, tables: dict[str, pd.DataFrame]) -> Iterator[Picture]:
    """Every figure of a study, in the order of the folder."""
    ids = Identifiers.of(study.rates)
    if _FIELD in study.patterns:
        yield ("maps/all_sources", maps.pattern_map, _sum_map(study, tables))
        for source in map(str, study.patterns["source"].values):
            yield (f"maps/{ids.sources[source]}", maps.pattern_map, _source_map(study, source))
    yield ("mass_record", curves.ledger_curves, _record(study))
    for site in map(str, study.at_sites["site"].values):
        short = ids.sites[site]
        yield (f"sites/{short}_in_time", curves.contributions, _curve(study, site))
        yield (f"sites/{short}_per_gigatonne", bars.per_gigatonne, _bars(study, tables, site))
        yield (f"sites/{short}_overview", overview.overview_sheet, _sheet(study, tables, site))


def _small_print(study: Study, what: str) -> str:
    recipe = study.recipe
    earth = recipe.earth.model.upper() if recipe.earth.file is None else recipe.earth.file.name
    solved = f"{earth}, degree {recipe.grid.max_degree}, rotation {'on' if recipe.earth.rotation else 'off'}"
    return f"{what} Mass record: {recipe.mass.file.name}. {solved}. {LEFT_OUT} {CAUTION}"


def _poles(study: Study, source: str) -> tuple[str, ...]:
    """Poles near which a source is a sheet or a part of one: all of its outline lies beyond 60 degrees."""
    outlines = study.inputs.outlines
    shape = outlines.geometry[outlines["source"] == source].iloc[0]
    south, north = shape.bounds[1], shape.bounds[3]
    if south >= 59.0 and "greenland" in source:
        return ("north",)
    return ("south",) if north <= _EXTENT["south"] else ()


def _source_map(study: Study, source: str) -> dict[str, Any]:
    ratio = (
        -study.patterns[_FIELD].sel(source=source, drop=True).astype("float32")
        * study.patterns.attrs["gigatonnes_per_millimetre"]
    )
    what = (
        "What a loss there does to relative sea level (frame-free), whatever its size; spread evenly over the outline."
    )
    return {
        "ratio": ratio,
        "title": f"Ice lost from {readable(source)}: where the sea rises, and how much",
        "caption": _small_print(study, what),
        "sites": study.inputs.sites,
        "poles": _poles(study, source),
    }


def _sum_map(study: Study, tables: dict[str, pd.DataFrame]) -> dict[str, Any]:
    window, (start, end) = list(study.inputs.windows.items())[-1]
    rows = tables["mass"]
    rows = rows[(rows["quantity"] == "mass-rate") & (rows["window"] == window)]
    rate = dict(zip(rows["source"], rows["value"], strict=True))
    rates = study.patterns["source"].copy(data=[rate[str(source)] for source in study.patterns["source"].values])
    total, factor = float(rates.sum()), study.patterns.attrs["gigatonnes_per_millimetre"]
    ratio = (study.patterns[_FIELD] * rates.astype(float)).sum("source") / (-total / factor)
    what = f"Mean rate {start} to {end}: {total:+.0f} Gt/yr, global mean {-total / factor:+.2f} mm/yr."
    return {
        "ratio": ratio,
        "title": f"All {rates.size} mass sources together, {window}",
        "caption": _small_print(study, what),
        "sites": study.inputs.sites,
        "poles": ("north", "south"),
    }


def _record(study: Study) -> dict[str, Any]:
    ledger, interval = study.inputs.since_zero, study.recipe.output.interval
    mass = ledger["mass_change"].transpose("time", "source").to_pandas()
    half = pd.DataFrame(from_sigma(ledger["mass_change_sigma"].transpose("time", "source").values, interval))
    half.index, half.columns = mass.index, mass.columns
    caption = (
        f"Cumulative since {_since(study)}, negative = loss. Mass record: {study.recipe.mass.file.name}. {CAUTION}"
    )
    return {
        "mass": mass,
        "half_width": half,
        "title": f"The mass record: {study.recipe.title}",
        "caption": caption,
        "interval": interval,
    }


def _since(study: Study) -> str:
    return study.recipe.output.since or str(study.inputs.ledger.attrs.get("reference_epoch", ""))


def _series(study: Study, site: str) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Parts (time, source) and total (time) with half-widths at a site, mm."""
    here = study.series.sel(site=site)
    time, level = here["time"].values, here[_FIELD].transpose("time", "source")
    parts = pd.DataFrame(level.values, index=pd.DatetimeIndex(time), columns=list(level["source"].values))
    total = pd.DataFrame({"value": here[f"{_FIELD}_total"].values}, index=parts.index)
    total["half_width"] = from_sigma(here[f"{_FIELD}_total_sigma"].values, study.recipe.output.interval)
    return parts, total


def _curve(study: Study, site: str) -> dict[str, Any]:
    parts, total = _series(study, site)
    return {
        "parts": parts,
        "total": total,
        "title": f"{site}: what each mass source added",
        "caption": _small_print(study, "Band: uncertainty of the mass record. Gaps are gaps of the record."),
        "interval": study.recipe.output.interval,
        "since": _since(study),
    }


def _lost(study: Study, tables: dict[str, pd.DataFrame], site: str) -> tuple[pd.DataFrame, float]:
    rows = tables["per_gigatonne"]
    rows = rows[(rows["field"] == _FIELD) & (rows["site"] == site)].set_index("source")
    return rows[["value", "lowest", "highest"]], 1.0 / float(study.patterns.attrs["gigatonnes_per_millimetre"])


def _bars(study: Study, tables: dict[str, pd.DataFrame], site: str) -> dict[str, Any]:
    lost, mean = _lost(study, tables, site)
    what = "Line: if the loss sat in one cell of the source, lowest to highest."
    return {
        "table": lost,
        "title": f"{site}: whose ice matters here",
        "caption": _small_print(study, what),
        "mean": mean,
    }


def _sheet(study: Study, tables: dict[str, pd.DataFrame], site: str) -> dict[str, Any]:
    window, span = list(study.inputs.windows.items())[-1]
    place = study.at_sites.sel(site=site)
    parts, total = _series(study, site)
    lost, mean = _lost(study, tables, site)
    interval = study.recipe.output.interval
    rates = tables["site_rates"]
    rates = rates[(rates["field"] == _FIELD) & (rates["site"] == site) & (rates["window"] == window)]
    mass = tables["mass"]
    mass = mass[(mass["quantity"] == "mass-rate") & (mass["window"] == window)].set_index("source")
    names = [*rates["source"][rates["source"] != TOTAL], TOTAL]
    rows = rates.set_index("source").loc[names]
    cells = pd.DataFrame(
        {
            "mass source": ["all sources" if n == TOTAL else readable(n) for n in names],
            "mass, Gt/yr": [f"{mass['value'][n]:+.1f} +- {mass['half_width'][n]:.1f}" for n in names],
            "here, mm/yr": [f"{rows['value'][n]:+.3f} +- {rows['half_width'][n]:.3f}" for n in names],
            f"mm per {bars.PER:.0f} Gt lost": [
                "" if n == TOTAL else f"{lost['value'][n] * bars.PER:+.2f}" for n in names
            ],
        }
    )
    sheet = overview.Sheet(
        site=site,
        lat=float(place["lat"]),
        lon=float(place["lon"]),
        sentence=site_sentence(tables, site, window, span, interval),
        table=cells,
        parts=parts,
        total=total,
        bars=lost,
        mean=mean,
        interval=interval,
        since=_since(study),
    )
    what = f"Table: {window}, {span[0]} to {span[1]}; +- {interval} of the mass record."
    return {"sheet": sheet, "title": study.recipe.title, "caption": _small_print(study, what)}
