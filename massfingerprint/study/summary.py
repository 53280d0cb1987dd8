"""What a study found, in words and in a short table, for people and for programs."""

import textwrap
from typing import Any

import numpy as np
import pandas as pd
from tabulate import tabulate

from massfingerprint.mass.summary import TOTAL, sentence
from massfingerprint.study.metadata import CAUTION, LEFT_OUT, UNCERTAINTY
from massfingerprint.study.run import Study
from massfingerprint.vocabulary import readable

_WIDTH = 110


def _of(table: pd.DataFrame, **wanted: Any) -> pd.DataFrame:
    """Rows of a table in which columns have given values."""
    held = np.ones(len(table), dtype=bool)
    for column, value in wanted.items():
        held &= (table[column] == value).to_numpy()
    return table[held]


def site_sentence(tables: dict[str, pd.DataFrame], site: str, window: str, span: tuple[str, str], interval: str) -> str:
    """One sentence: how much relative sea level changed at a site over a window, against the global mean, and by which ice most.

    Parameters
    ----------
    tables : dict
        Of the study.
    site, window : str
        Their names.
    span : (str, str)
        Dates of the window.
    interval : str
        What +- stands for.
    """
    rows = _of(tables["site_rates"], field="relative_sea_level", window=window, site=site)
    whole = rows[rows["source"] == TOTAL].iloc[0]
    mean = _of(tables["mass"], quantity="global-rate", window=window, source=TOTAL)["value"].iloc[0]
    parts = rows[rows["source"] != TOTAL]
    largest = parts.iloc[int(np.argmax(np.abs(parts["value"].to_numpy())))]
    verb = "raised" if whole["value"] >= 0 else "lowered"
    ratio = f"{whole['value'] / mean:.2f} times the global mean" if mean else "the global mean is 0"
    return (
        f"At {site}, the mass sources together {verb} relative sea level by {abs(whole['value']):.2f} +- "
        f"{whole['half_width']:.2f} mm a year ({interval}) from {span[0]} to {span[1]}, {ratio}; the largest part is "
        f"{readable(str(largest['source']))} with {largest['value']:+.2f}."
    )


def near_ice(tables: dict[str, pd.DataFrame]) -> list[str]:
    """One line for each site and source beside each other: that the near field is in the value, or why it cannot be trusted."""
    rows = _of(tables["per_gigatonne"], field="relative_sea_level")
    beside = rows[rows["near_field"] == 1]
    return [
        f"{row['site']}: {row['source']} is {row['distance_to_load']:.0f} km away, its near field is in the value."
        if row["resolved"] == 1
        else f"{row['site']}: not resolved, {row['source']} is {row['distance_to_load']:.0f} km away, its outline too coarse there."
        for _, row in beside.iterrows()
    ]


def _site_block(study: Study, tables: dict[str, pd.DataFrame], window: str) -> str:
    """Table of one window: a row per site, numbers in mm a year."""
    rows = []
    shown = _of(tables["site_rates_shown"], window=window)
    for _, row in shown.iterrows():
        own = _of(tables["site_rates"], field="relative_sea_level", window=window, site=row["site"])
        parts = own[own["source"] != TOTAL]
        order = np.argsort(-np.abs(parts["value"].to_numpy()))[:3]
        most = ", ".join(f"{parts['source'].iloc[i]} {parts['value'].iloc[i]:+.3f}" for i in order)
        total = f"{row['total [mm yr-1]']:+.3f} +- {row['half-width [mm yr-1]']:.3f}"
        ratio = f"{row['ratio to global mean [1]']:.2f}"
        prefix, site, source = str(row["total_id"]).rsplit(":", maxsplit=2)
        rows.append([row["site"], total, ratio, f"{row['land up [mm yr-1]']:+.3f}", most, f"{site}:{source}"])
    heads = ["site", f"mm/yr ({study.recipe.output.interval})", "x mean", "land up", "largest parts, mm/yr", "id"]
    align = ("left", "right", "right", "right", "left", "left")
    table = tabulate(rows, headers=heads, tablefmt="simple", colalign=align, disable_numparse=True)
    return f"{table}\nids start with {prefix}:"


def summary_text(study: Study, tables: dict[str, pd.DataFrame]) -> str:
    """Text of ``summary.txt``: global mean, one table per window, what the numbers hold and what not."""
    factor, interval = study.patterns.attrs["gigatonnes_per_millimetre"], study.recipe.output.interval
    out = [study.recipe.title, "=" * len(study.recipe.title), ""]
    for window, span in study.inputs.windows.items():
        mean = _of(tables["mass"], quantity="global-rate", window=window, source=TOTAL).iloc[0]
        out.append(f"{window}, {span[0]} to {span[1]}")
        out.append(
            f"Global mean (barystatic): {mean['value']:+.3f} +- {mean['half_width']:.3f} mm/yr ({interval})   id {mean['id']}"
        )
        out += ["", _site_block(study, tables, window), ""]
    first = study.summary[study.summary["window"] == next(iter(study.inputs.windows))]
    words = [sentence(first, interval=interval, gt_per_mm=round(factor, 2))]
    words += near_ice(tables)
    words += [
        f"mm/yr: relative sea level, positive = rise. x mean: over the global mean. land up: vertical land motion, elastic, "
        f"present-day, in {study.recipe.output.reference_frame}. 1 mm over this ocean is {factor:.2f} Gt.",
        "Where a number comes from: massfingerprint explain FOLDER ID; for the part of one source put its name in place of "
        "'total' in the id.",
        UNCERTAINTY,
        LEFT_OUT,
        CAUTION,
    ]
    return "\n".join([*out, *(line for paragraph in words for line in textwrap.wrap(paragraph, _WIDTH)), ""])


def summary_data(study: Study, tables: dict[str, pd.DataFrame]) -> dict[str, Any]:
    """Content of ``summary.json``: the same with full numbers."""
    windows = []
    for window, span in study.inputs.windows.items():
        mean = _of(tables["mass"], quantity="global-rate", window=window, source=TOTAL).iloc[0]
        sites = [
            {
                "site": site,
                "sentence": site_sentence(tables, site, window, span, study.recipe.output.interval),
                "relative_sea_level_rate": _rows(tables, "relative_sea_level", window, site),
                "bedrock_up_rate": _rows(tables, "bedrock_up", window, site)[TOTAL],
            }
            for site in map(str, study.at_sites["site"].values)
        ]
        about = {"value": _number(mean["value"]), "half_width": _number(mean["half_width"]), "id": mean["id"]}
        windows.append({"window": window, "start": span[0], "end": span[1], "global_mean_rate": about, "sites": sites})
    return {
        "title": study.recipe.title,
        "unit": "mm yr-1",
        "interval": study.recipe.output.interval,
        "reference_frame": study.recipe.output.reference_frame,
        "gigatonnes_per_millimetre": study.patterns.attrs["gigatonnes_per_millimetre"],
        "windows": windows,
        "near_ice": near_ice(tables),
        "uncertainty": UNCERTAINTY,
        "left_out": LEFT_OUT,
        "caution": CAUTION,
    }


def _rows(tables: dict[str, pd.DataFrame], field: str, window: str, site: str) -> dict[str, dict[str, Any]]:
    rows = _of(tables["site_rates"], field=field, window=window, site=site)
    return {
        str(row["source"]): {"value": _number(row["value"]), "half_width": _number(row["half_width"]), "id": row["id"]}
        for _, row in rows.iterrows()
    }


def _number(value: Any) -> float | None:
    return float(value) if np.isfinite(value) else None


def folder_guide(study: Study) -> str:
    """Text of the folder's own README."""
    interval = study.recipe.output.interval
    lines = [
        study.recipe.title,
        "",
        "What is in this folder:",
        "  summary.txt, summary.json   the answer: global mean and each site, per window",
        "  sites.nc                    at the sites: per gigatonne added, in time [mm], rates [mm yr-1], 1 sigma",
        "  patterns.nc                 fields per gigatonne added [mm Gt-1], with their spherical-harmonic coefficients",
        "  ledger.nc                   the mass record [Gt] and the barystatic sea level it makes [mm]",
        "  tables/mass.csv             change and rate per source and window, Gt and mm of global mean",
        "  tables/per_gigatonne.csv    mm here per gigatonne lost there, with range and truncation",
        "  tables/site_rates.csv       rates per site, source and window; one value per row",
        "  tables/site_rates_shown.csv the same as shown to people, rounded",
        "  tables/site_levels.csv      relative sea level in time per site and source",
        "  figures/                    maps, curves, bars, one overview sheet per site (if asked for)",
        "  provenance.json             command, versions, checksums of inputs, factors, constants",
        "",
        f"Half-widths are those of the {interval} interval; sigma is one standard uncertainty.",
        "Negative mass = loss; positive sea level = rise; positive land motion = up.",
        "Every number in tables/ has an id: massfingerprint explain FOLDER ID tells where it comes from.",
        "",
    ]
    words = (UNCERTAINTY, LEFT_OUT, CAUTION)
    return "\n".join([*lines, *(line for text in words for line in textwrap.wrap(text, _WIDTH)), ""])
