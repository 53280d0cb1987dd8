"""Published mass rates that come with the package: sets of rows, of which a use picks one by name.

Sets overlap (several papers on the same ice), so they are never added up. A row gives what the paper printed; where only
millimetres are printed they become gigatonnes with the paper's own factor, and the row says so.
"""

import numpy as np
import pandas as pd

from massfingerprint.arguments import one_of
from massfingerprint.bundled import open_bundled_table
from massfingerprint.mass.intervals import sigma_of_bounds, to_sigma

_FILE = "published_rates_all.csv"
_NUMBERS = {
    "mass [Gt]": "mass",
    "mass_half_width [Gt]": "mass_half_width",
    "sea_level [mm]": "sea_level",
    "sea_level_lower [mm]": "sea_level_lower",
    "sea_level_upper [mm]": "sea_level_upper",
    "factor [Gt mm-1]": "factor",
}
_DAYS_PER_YEAR = 365.25


def published_rows() -> pd.DataFrame:
    """Every bundled row as printed.

    Returns
    -------
    DataFrame
        ``set source scope time_start time_end quantity`` (rate: per year; change: over the period), ``mass``,
        ``mass_half_width`` [Gt], ``sea_level``, ``sea_level_lower``, ``sea_level_upper`` [mm], ``interval``, ``factor``
        [Gt mm-1], ``error_group`` (rows of one group share one error; empty: its own), ``citation doi from_memory
        assumption``; NaN where the paper prints nothing.
    """
    table = open_bundled_table(_FILE).rename(columns=_NUMBERS)
    for name in _NUMBERS.values():
        table[name] = pd.to_numeric(table[name].replace("", np.nan))
    for name in ("time_start", "time_end"):
        table[name] = pd.to_datetime(table[name])
    return table


def published_sets() -> pd.DataFrame:
    """List the sets of published rates.

    Returns
    -------
    DataFrame
        One row per set: ``set``, ``sources``, ``period``, ``citation``, ``assumption``.
    """
    rows = []
    for name, group in published_rows().groupby("set", sort=False):
        sources = list(group["source"])
        shown = ", ".join(sources) if len(sources) <= 4 else f"{sources[0]} ... {sources[-1]} ({len(sources)})"
        period = f"{group['time_start'].min():%Y-%m-%d} to {group['time_end'].max():%Y-%m-%d}"
        assumption = group["assumption"].iloc[-1]
        rows.append(
            {
                "set": name,
                "sources": shown,
                "period": period,
                "citation": group["citation"].iloc[0],
                "assumption": assumption,
            }
        )
    return pd.DataFrame(rows)


def published_rates(set_name: str) -> pd.DataFrame:
    """Mean mass rates of one set.

    Parameters
    ----------
    set_name : str
        One of ``published_sets()``.

    Returns
    -------
    DataFrame
        ``time_start time_end source mass_rate mass_rate_sigma`` [Gt yr-1], negative = loss, 1 standard uncertainty;
        ``error_group``: sources of one group share one error, groups are independent; ``interval`` as published; ``scope
        citation doi from_memory assumption``. A change over a period is divided by its years of 365.25 days; an interval
        becomes a standard uncertainty by its factor, bounds by half their distance.

    Raises
    ------
    InputError
        If there is no such set; the nearest names are offered.
    """
    rows = published_rows()
    one_of(set_name, tuple(dict.fromkeys(rows["set"])), argument="set", kind="set of published rates named")
    chosen = rows[rows["set"] == set_name].reset_index(drop=True)
    days = (chosen["time_end"].to_numpy() - chosen["time_start"].to_numpy()) / np.timedelta64(1, "D")
    years = days / _DAYS_PER_YEAR
    per_year = np.where(chosen["quantity"] == "rate", 1.0, years)
    values = np.array([_mass(row) for _, row in chosen.iterrows()])
    out = chosen[["time_start", "time_end", "source"]].copy()
    out["mass_rate"], out["mass_rate_sigma"] = values[:, 0] / per_year, values[:, 1] / per_year
    out["error_group"] = chosen["error_group"].where(chosen["error_group"] != "", chosen["source"])
    return out.join(chosen[["interval", "scope", "citation", "doi", "from_memory", "assumption"]])


def _mass(row: pd.Series) -> tuple[float, float]:
    """Mass and standard uncertainty of one row, Gt or Gt per year; from millimetres where no mass is printed."""
    if np.isfinite(row["mass"]):
        return float(row["mass"]), float(to_sigma(row["mass_half_width"], row["interval"]))
    sigma = sigma_of_bounds(row["sea_level"], row["sea_level_lower"], row["sea_level_upper"], row["interval"])
    return -float(row["sea_level"] * row["factor"]), float(sigma * row["factor"])
