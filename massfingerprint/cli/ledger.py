"""``massfingerprint ledger``: what a mass record says, in gigatonnes and millimetres."""

import textwrap
from pathlib import Path
from typing import Any

import click
import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.cli._tables import as_json, rendered
from massfingerprint.constants import GIGATONNES_PER_MILLIMETRE
from massfingerprint.errors import InputError
from massfingerprint.files.atomic import write_text
from massfingerprint.mass.barystatic import AR6_GIGATONNES_PER_MILLIMETRE
from massfingerprint.mass.correlation import read_correlation, with_correlation
from massfingerprint.mass.intervals import INTERVALS, shown
from massfingerprint.mass.ledger import read_ledger
from massfingerprint.mass.published import published_rates, published_sets
from massfingerprint.mass.scope import check_scope, corrections, ledger_scopes
from massfingerprint.mass.summary import TOTAL, sentence, summarise

_GLOSSARY = (
    "Mass change: negative = loss. Sea level: barystatic, the global mean of fresh water spread over the ocean; positive = rise. "
    "Rate: slope over the window in years of 365.25 days."
)
_CAUTION = "For screening only: local datums, surveys and licensed practice decide."
_DECIMALS = {"change": 0, "rate": 1, "sea_level": 2, "sea_level_ar6": 2, "sea_level_rate": 3, "sea_level_rate_ar6": 3}


def _windows(texts: tuple[str, ...]) -> dict[str, tuple[str, str]] | None:
    """Windows from ``START/END`` or ``NAME=START/END`` (ISO 8601 intervals)."""
    out = {}
    for text in texts:
        name, _, span = text.rpartition("=")
        start, slash, end = span.partition("/")
        if not slash or not start or not end:
            raise InputError(f"--window: must be START/END or NAME=START/END in ISO dates, got {text!r}.")
        out[name.strip() or f"{start} to {end}"] = (start.strip(), end.strip())
    return out or None


def _cells(table: pd.DataFrame, gt_per_mm: float) -> tuple[pd.DataFrame, list[str]]:
    """Rounded cells for people, and footnotes where rounded parts do not add to the rounded total."""
    heads = {
        "change": "change [Gt]",
        "sea_level": f"[mm] at {gt_per_mm:g}",
        "sea_level_ar6": f"[mm] at {AR6_GIGATONNES_PER_MILLIMETRE:g} (AR6)",
        "rate": "rate [Gt/yr]",
        "sea_level_rate": f"[mm/yr] at {gt_per_mm:g}",
        "sea_level_rate_ar6": "[mm/yr] AR6",
    }
    out = table[["window", "source", "first", "last"]].copy()
    for name, head in heads.items():
        pairs = zip(table[name], table[f"{name}_half_width"], strict=True)
        out[head] = [_pair(value, half, _DECIMALS[name]) for value, half in pairs]
    notes = {note for _, group in table.groupby("window", sort=False) for note in _footnotes(group, heads)}
    return out, sorted(notes)


def _pair(value: float, half_width: float, decimals: int) -> str:
    return f"{value:+.{decimals}f} +- {half_width:.{decimals}f}" if np.isfinite(value) else "-"


def _footnotes(group: pd.DataFrame, heads: dict[str, str]) -> list[str]:
    parts, whole = group[group["source"] != TOTAL], group[group["source"] == TOTAL].iloc[0]
    out = []
    for name in heads:
        # change of the total is between times that all share: only then are the parts its parts
        same = np.isfinite(whole[name]) and abs(parts[name].sum() - whole[name]) < 1e-9 * max(1.0, abs(whole[name]))
        if same:
            out.append(
                shown(dict(zip(parts["source"], parts[name], strict=True)), whole[name], decimals=_DECIMALS[name])[2]
            )
    return [note for note in out if note]


def _preview(ledger: xr.Dataset, path: str) -> str:
    """What was understood of a file, source by source."""
    rows = []
    for name in ledger["source"].values:
        row = ledger.sel(source=name)
        held = np.isfinite(row["mass_change"].values)
        time = ledger["time"].values[held]
        rows.append(
            {
                "source": str(name),
                "values": int(held.sum()),
                "empty": int((~held).sum()),
                "first": str(time[0])[:10] if time.size else "",
                "last": str(time[-1])[:10] if time.size else "",
                "lowest [Gt]": f"{np.nanmin(row['mass_change'].values):.1f}" if time.size else "",
                "highest [Gt]": f"{np.nanmax(row['mass_change'].values):.1f}" if time.size else "",
                "largest sigma [Gt]": f"{np.nanmax(row['mass_change_sigma'].values):.1f}" if time.size else "",
                "error model": str(row["error_model"].item()),
            }
        )
    about = "; ".join(f"{key}: {value}" for key, value in ledger.attrs.items() if value not in ("", None))
    table = rendered(pd.DataFrame(rows), "plain")
    return f"{path}: understood as cumulative mass change in Gt, negative = loss\n\n{table}\n\n{about}"


def _published(set_name: str | None, style: str) -> str:
    """The list of published sets, or one set with its sources below the table."""
    table = published_sets() if set_name is None else published_rates(set_name)
    if style == "json":
        text = table.assign(**{name: table[name].astype(str) for name in table.columns if name.startswith("time_")})
        return as_json(text, {"set": set_name, "glossary": _GLOSSARY, "caution": _CAUTION})
    if set_name is None:
        notes = (
            "One set is used at a time, never the sum: sets overlap. massfingerprint ledger published SET shows one."
        )
        return f"{rendered(table.drop(columns='assumption'), style)}\n\n{notes}"
    cells = pd.DataFrame(
        {
            "source": table["source"],
            "from": table["time_start"].dt.strftime("%Y-%m-%d"),
            "to": table["time_end"].dt.strftime("%Y-%m-%d"),
            "rate [Gt/yr]": [f"{value:+.1f}" for value in table["mass_rate"]],
            "1 sigma [Gt/yr]": [f"{value:.1f}" for value in table["mass_rate_sigma"]],
            "interval as published": table["interval"],
            "scope": table["scope"],
        }
    )
    below = [f"Source: {c}, doi:{d}." for c, d in dict.fromkeys(zip(table["citation"], table["doi"], strict=True))]
    below += [f"Not seen on the page, from memory: {words}." for words in dict.fromkeys(table["from_memory"]) if words]
    below += [f"Assumed: {words}." for words in dict.fromkeys(table["assumption"]) if words]
    return "\n".join([rendered(cells, style), "", *_wrapped(_GLOSSARY, *below, _CAUTION)])


def _wrapped(*paragraphs: str) -> list[str]:
    return [line for paragraph in paragraphs for line in textwrap.wrap(paragraph, 110)]


@click.command(name="ledger")
@click.argument("file", type=str)
@click.argument("published_set", required=False)
@click.option(
    "--quantity",
    default="cumulative",
    show_default=True,
    type=click.Choice(["cumulative", "rate"]),
    help="What the file holds.",
)
@click.option(
    "--window",
    "windows",
    multiple=True,
    help="START/END or NAME=START/END, ISO dates; may be repeated. Default: the whole record.",
)
@click.option("--interval", default="1 sigma", show_default=True, help=f"Interval behind +-: {', '.join(INTERVALS)}.")
@click.option(
    "--gt-per-mm",
    default=GIGATONNES_PER_MILLIMETRE.value,
    show_default=True,
    type=float,
    help="Gigatonnes per millimetre.",
)
@click.option("--error-model", default=None, help="independent, systematic or random_walk, if the file does not say.")
@click.option(
    "--correlation", type=click.Path(path_type=Path), help="CSV of correlations between sources (square table)."
)
@click.option(
    "--drop", multiple=True, help="Leave out this source, e.g. the part of a region that is there as a whole."
)
@click.option("--seasonal", is_flag=True, help="Fit a yearly cycle beside the rate.")
@click.option("--preview", is_flag=True, help="Only show what was understood of the file.")
@click.option("--markdown", "style", flag_value="markdown", help="Print a Markdown table.")
@click.option("--latex", "style", flag_value="latex", help="Print a LaTeX table.")
@click.option("--json", "style", flag_value="json", help="Print JSON with unrounded numbers.")
@click.option("--csv", "csv_file", type=click.Path(path_type=Path), help="Also write the unrounded table here.")
def command(file: str, published_set: str | None, **options: Any) -> None:
    """Print mass change in Gt and sea level in mm, per mass source and in total, from a mass record FILE.

    FILE is CSV or NetCDF. With FILE = "published", print the bundled published rates: their sets, or one SET of them.

    Example: massfingerprint ledger mass.csv --window 2003-01-01/2023-01-01 --interval "90 %"
    """
    options["style"] = options["style"] or "plain"
    if file == "published":
        click.echo(_published(published_set, options["style"]))
        return
    if published_set is not None:
        raise InputError(
            f"arguments: {published_set!r} after FILE is only for 'published'. Quote file names with blanks."
        )
    ledger = read_ledger(file, quantity=options["quantity"], error_model=options["error_model"])
    corrections(ledger)
    if options["preview"]:
        click.echo(_preview(ledger, file))
        return
    names = [str(name) for name in ledger["source"].values]
    kept = check_scope(names, scopes=ledger_scopes(ledger), drop=options["drop"])
    ledger = ledger.isel(source=[names.index(name) for name in kept])
    if options["correlation"] is not None:
        ledger = with_correlation(ledger, read_correlation(options["correlation"]))
    table = summarise(
        ledger,
        windows=_windows(options["windows"]),
        interval=options["interval"],
        gt_per_mm=options["gt_per_mm"],
        seasonal=options["seasonal"],
    )
    _print(table, options)
    if options["csv_file"] is not None:
        write_text(table.to_csv(index=False, lineterminator="\n"), options["csv_file"])
        click.echo(f"Table written to {options['csv_file']}.", err=True)


def _print(table: pd.DataFrame, options: dict[str, Any]) -> None:
    interval, factor = options["interval"], options["gt_per_mm"]
    if options["style"] == "json":
        about = {"interval": interval, "gigatonnes_per_millimetre": factor, "glossary": _GLOSSARY, "caution": _CAUTION}
        click.echo(as_json(table, about))
        return
    cells, notes = _cells(table, factor)
    click.echo(rendered(cells, options["style"]))
    paragraphs = (
        f"+-: {interval}. {_GLOSSARY}",
        *notes,
        sentence(table, interval=interval, gt_per_mm=factor),
        _CAUTION,
    )
    click.echo("\n".join(["", *_wrapped(*paragraphs)]))
