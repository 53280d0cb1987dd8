"""The numbers of a study as tables: one value per row, each with an id by which its origin can be asked for."""

from dataclasses import dataclass

import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.mass.intervals import from_sigma
from massfingerprint.mass.summary import TOTAL
from massfingerprint.study.names import short_names

FIELD_LABELS = {
    "relative_sea_level": "relative sea level",
    "sea_surface": "geocentric sea level",
    "bedrock_up": "vertical land motion, elastic, present-day",
}


@dataclass(frozen=True)
class Identifiers:
    """Short names of sites, sources and windows of one study, as they stand in ids and file names."""

    sites: dict[str, str]
    sources: dict[str, str]
    windows: dict[str, str]

    @classmethod
    def of(cls, rates: xr.Dataset) -> "Identifiers":
        """Short names for the labels of a dataset (window, source, site)."""
        sources = [str(name) for name in rates["source"].values]
        return cls(
            short_names(str(name) for name in rates["site"].values),
            short_names([TOTAL, *sources]),
            short_names(str(name) for name in rates["window"].values),
        )


def mass_table(summary: pd.DataFrame, ids: Identifiers) -> pd.DataFrame:
    """Change and rate of each source and of the total, in Gt and in mm of global mean, from ``summarise``.

    Returns
    -------
    DataFrame
        ``id quantity window source value half_width unit first last``.
    """
    units = {"change": "Gt", "rate": "Gt yr-1", "sea_level": "mm", "sea_level_rate": "mm yr-1"}
    kinds = {
        "change": "mass-change",
        "rate": "mass-rate",
        "sea_level": "global-change",
        "sea_level_rate": "global-rate",
    }
    rows = []
    for _, row in summary.iterrows():
        window, source = ids.windows[str(row["window"])], ids.sources[str(row["source"])]
        for name, unit in units.items():
            rows.append(
                {
                    "id": f"{kinds[name]}:{window}:{source}",
                    "quantity": kinds[name],
                    "window": row["window"],
                    "source": row["source"],
                    "value": row[name],
                    "half_width": row[f"{name}_half_width"],
                    "unit": unit,
                    "first": row["first"],
                    "last": row["last"],
                }
            )
    return pd.DataFrame(rows)


def per_gigatonne_table(at_sites: xr.Dataset, ids: Identifiers) -> pd.DataFrame:
    """Millimetres here per gigatonne lost there, per field, site and source.

    Returns
    -------
    DataFrame
        ``id field site source value lowest highest truncation unit distance_to_load near_field resolved``; positive = rise or
        uplift for a loss; ``lowest`` and ``highest`` (relative sea level only): if the loss sat in one cell of the source;
        distance in km; ``near_field`` 1 where it is in the value.
    """
    rows = []
    for name in FIELD_LABELS:
        for site in at_sites["site"].values:
            here = at_sites.sel(site=site)
            for source in at_sites["source"].values:
                one = here.sel(source=source)
                ends = [np.nan, np.nan]
                if name == "relative_sea_level":
                    ends = sorted(-float(one[f"{name}_{end}"]) for end in ("lowest", "highest"))
                rows.append(
                    {
                        "id": f"per-gigatonne:{name}:{ids.sites[str(site)]}:{ids.sources[str(source)]}",
                        "field": name,
                        "site": site,
                        "source": source,
                        "value": -float(one[name]),
                        "lowest": ends[0],
                        "highest": ends[1],
                        "truncation": -float(one[f"{name}_truncation"]),
                        "unit": "mm Gt-1",
                        "distance_to_load": float(one["distance_to_load"]),
                        "near_field": int(one["near_field"]),
                        "resolved": int(one["resolved"]),
                    }
                )
    return pd.DataFrame(rows)


def site_rate_table(rates: xr.Dataset, ids: Identifiers, *, interval: str) -> pd.DataFrame:
    """Rates at sites by field, window, site and source, the total last.

    Returns
    -------
    DataFrame
        ``id field window site source value sigma half_width unit``, mm yr-1; half-widths of the named interval.
    """
    labels = [*map(str, rates["source"].values), TOTAL]
    frames = []
    for name in FIELD_LABELS:
        value = np.concatenate([rates[name].values, rates[f"{name}_total"].values[:, None]], axis=1)
        sigma = np.concatenate([rates[f"{name}_sigma"].values, rates[f"{name}_total_sigma"].values[:, None]], axis=1)
        rows = [
            (f"site-rate:{name}:{ids.windows[str(w)]}:{ids.sites[str(s)]}:{ids.sources[k]}", name, w, s, k)
            for w in rates["window"].values
            for s in rates["site"].values
            for k in labels
        ]
        frame = pd.DataFrame(rows, columns=["id", "field", "window", "site", "source"])
        frame["value"] = value.transpose(0, 2, 1).ravel()
        frame["sigma"] = sigma.transpose(0, 2, 1).ravel()
        frames.append(frame)
    out = pd.concat(frames, ignore_index=True)
    out["half_width"] = from_sigma(out["sigma"].to_numpy(), interval)
    return out.assign(unit="mm yr-1")


def site_level_table(series: xr.Dataset, ids: Identifiers, *, interval: str) -> pd.DataFrame:
    """Relative sea level in time at sites by source, the total last; times without a value are left out.

    Returns
    -------
    DataFrame
        ``id time site source value sigma half_width unit``, mm since the reference epoch.
    """
    name = "relative_sea_level"
    labels = [*map(str, series["source"].values), TOTAL]
    order = ("time", "source", "site")
    value = np.concatenate([series[name].transpose(*order).values, series[f"{name}_total"].values[:, None]], axis=1)
    sigma = np.concatenate(
        [series[f"{name}_sigma"].transpose(*order).values, series[f"{name}_total_sigma"].values[:, None]], axis=1
    )
    days = [str(time)[:10] for time in series["time"].values]
    rows = [
        (f"site-level:{ids.sites[str(s)]}:{ids.sources[k]}:{day}", day, s, k)
        for s in series["site"].values
        for k in labels
        for day in days
    ]
    out = pd.DataFrame(rows, columns=["id", "time", "site", "source"])
    out["value"], out["sigma"] = value.transpose(2, 1, 0).ravel(), sigma.transpose(2, 1, 0).ravel()
    out = out[np.isfinite(out["value"])].reset_index(drop=True)
    out["half_width"] = from_sigma(out["sigma"].to_numpy(), interval)
    return out.assign(unit="mm")


def shown_site_rates(table: pd.DataFrame, global_mean: dict[str, float]) -> pd.DataFrame:
    """Relative sea level at sites as shown to people: one row per window and site, mm yr-1, rounded.

    Parameters
    ----------
    table : DataFrame
        From :func:`site_rate_table`.
    global_mean : dict of window to float
        Barystatic rate in mm yr-1.

    Returns
    -------
    DataFrame
        ``window site total half_width ratio land_up``, then a column per source, then ``total_id``: the id of the total.
    """
    level = table[table["field"] == "relative_sea_level"]
    motion = table[(table["field"] == "bedrock_up") & (table["source"] == TOTAL)]
    up = dict(zip(zip(motion["window"], motion["site"], strict=True), motion["value"], strict=True))
    rows = []
    for (window, site), group in level.groupby(["window", "site"], sort=False):
        whole = group[group["source"] == TOTAL].iloc[0]
        mean = global_mean[str(window)]
        row = {
            "window": window,
            "site": site,
            "total [mm yr-1]": round(whole["value"], 3),
            "half-width [mm yr-1]": round(whole["half_width"], 3),
            "ratio to global mean [1]": round(whole["value"] / mean, 2) if mean else np.nan,
            "land up [mm yr-1]": round(up[(window, site)], 3),
        }
        parts = group[group["source"] != TOTAL]
        row |= {f"{s} [mm yr-1]": round(v, 3) for s, v in zip(parts["source"], parts["value"], strict=True)}
        rows.append(row | {"total_id": whole["id"]})
    return pd.DataFrame(rows)
