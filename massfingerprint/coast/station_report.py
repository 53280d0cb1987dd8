"""Rates at stations as a table, beside what was observed there, and the words that belong to them."""

import numpy as np
import pandas as pd
import xarray as xr

from massfingerprint.coast._epochs import HOLE_STEPS
from massfingerprint.coast.stations import COMPONENTS
from massfingerprint.errors import InputError
from massfingerprint.mass.intervals import interval_factor
from massfingerprint.mass.ledger import ledger_dataset
from massfingerprint.sealevel.nearfield import WITHIN

FRAME_WORDS = {
    "CM": "CM is the centre of mass of the Earth with ice and water; its long-term mean is the origin of the ITRF, so rates in the "
    "ITRF compare with CM.",
    "CF": "CF is the centre of the Earth's surface, where a network's own solution or a seasonal one has its origin; rates in the "
    "ITRF compare with CM.",
    "CE": "CE is the centre of mass of the Earth without ice and water, in which Love numbers are tabulated; rates in the ITRF "
    "compare with CM.",
}
INTERPOLATION = (
    "Mass at an epoch: a straight line between the two values of the record beside it; nothing beyond the record, nor between two "
    f"values farther apart than {HOLE_STEPS:g} usual (median) steps of the source. Without epochs of its own a station has them "
    "about monthly from start to end, the gaps left out."
)
STATION_LEFT_OUT = (
    "Not included: glacial isostatic adjustment; loads of atmosphere, ocean and water on land; tectonics; viscoelastic, "
    "postglacial and postseismic motion; thermal and monument motion; draconitic errors; ice that is not in the mass record."
)


def constant_ledger(rates: pd.DataFrame) -> xr.Dataset:
    """Constant mass rates as a mass record: two values a source, 0 at the start of its period and the change at its end.

    Parameters
    ----------
    rates : DataFrame
        From ``read_rates`` or ``published_rates``: ``source time_start time_end mass_rate mass_rate_sigma error_group`` in Gt yr-1,
        negative = loss.

    Returns
    -------
    Dataset (source, time)
        Cumulative mass change and sigma in Gt. The error of a rate is one for all its epochs (systematic), and one for all sources
        of an error group (correlation 1), so that a rate over any part of the period has the sigma it was given.

    Raises
    ------
    InputError
        If there are no rates.
    """
    if rates.empty:
        raise InputError("rates: holds no rows. Give at least one source.")
    names = [str(name) for name in rates["source"]]
    start, end = (rates[name].to_numpy().astype("datetime64[ns]") for name in ("time_start", "time_end"))
    years = (end - start) / np.timedelta64(1, "D") / 365.25
    time = np.unique(np.concatenate([start, end]))
    values = {name: np.full((len(names), time.size), np.nan) for name in ("mass_rate", "mass_rate_sigma")}
    for name, held in values.items():
        for row, change in enumerate(rates[name].to_numpy() * years):
            held[row, np.searchsorted(time, [start[row], end[row]])] = 0.0, change
    nothing = values["mass_rate"] * 0.0
    parts = {"independent": nothing, "systematic": values["mass_rate_sigma"], "random_walk": nothing}
    out = ledger_dataset(names, time, values["mass_rate"], parts)
    groups = rates["error_group"].to_numpy()
    related = (groups[:, None] == groups[None, :]).astype(np.float64)
    out = out.assign_coords(source_other=np.array(names, dtype=object))
    out["source_correlation"] = (("source", "source_other"), related, {"units": "1"})
    if "citation" in rates:
        out["citation"] = ("source", rates["citation"].to_numpy(dtype=object))
    return out.assign_attrs(reference_epoch=str(time[0])[:10])


def station_flags(values: xr.Dataset) -> list[str]:
    """Word per site: ``not resolved`` if the outline of some source is too coarse there, ``near field added``, or ``far``.

    Parameters
    ----------
    values : Dataset (source, site)
        From ``coast_values``: ``resolved``, ``near_field``.
    """
    coarse = (values["resolved"] == 0).any("source").values
    near = (values["near_field"] == 1).any("source").values
    return [
        "not resolved" if c else "near field added" if n else f"far (> {WITHIN:g} km)"
        for c, n in zip(coarse, near, strict=True)
    ]


def station_table(rates: xr.Dataset, values: xr.Dataset, *, interval: str = "1 sigma") -> pd.DataFrame:
    """One row per station, full numbers.

    Parameters
    ----------
    rates : Dataset
        From ``station_rates``.
    values : Dataset (source, site)
        From ``coast_values``, sites in the order of the stations.
    interval : str
        Of the half-widths, see ``mass.intervals``.

    Returns
    -------
    DataFrame
        ``station lat lon first last epochs``; per component ``<name> [mm yr-1]`` and ``<name> half width [mm yr-1]``, positive =
        up, north, east; ``largest source`` (longest rate in space), ``distance to ice [km]``, ``flag``, ``remark``: why there is no
        rate, or what it leaves out.

    Raises
    ------
    InputError
        If the interval is not known.
    """
    factor = interval_factor(interval)
    out = pd.DataFrame(
        {"station": rates["station"].values, "lat": rates["lat"].values, "lon": rates["lon"].values},
    )
    for name in ("first", "last"):
        out[name] = ["" if np.isnat(time) else str(time)[:10] for time in rates[name].values]
    out["epochs"] = rates["nepoch"].values.max(axis=1)
    for k, name in enumerate(COMPONENTS):
        out[f"{name} [mm yr-1]"] = rates["rate_total"].values[:, k]
        out[f"{name} half width [mm yr-1]"] = factor * rates["rate_total_sigma"].values[:, k]
    length = np.sqrt((rates["rate"].transpose("station", "source", "component").fillna(0.0).values ** 2).sum(axis=-1))
    largest = rates["source"].values[length.argmax(axis=1)]
    out["largest source"] = np.where(length.max(axis=1) > 0.0, largest, "")
    out["distance to ice [km]"] = values["distance_to_load"].min("source").values
    out["flag"] = station_flags(values)
    words = zip(rates["reason"].values, rates["note"].values, strict=True)
    out["remark"] = [f"no rate: {reason}" if reason else note for reason, note in words]
    return out


def station_residuals(
    rates: xr.Dataset, velocities: pd.DataFrame | None = None, *, interval: str = "1 sigma"
) -> pd.DataFrame:
    """Observed minus elastic rates.

    Parameters
    ----------
    rates : Dataset
        From ``station_rates``; with observed series their rates come first.
    velocities : DataFrame, optional
        From ``read_station_velocities``.
    interval : str
        Of the half-widths.

    Returns
    -------
    DataFrame
        ``station component observed from``, and in mm yr-1 ``observed elastic residual`` with their half-widths. The half-width
        of the residual takes observed and modelled errors as independent. Rows without a residual are left out.

    Raises
    ------
    InputError
        If the interval is not known.
    """
    factor, rows = interval_factor(interval), []
    at = {str(name): place for place, name in enumerate(rates["station"].values)}
    if "observed_rate" in rates:
        pairs = [rates[name].values for name in ("observed_rate", "observed_rate_sigma")]
        for name, i in at.items():
            rows += [(name, i, k, "series", pairs[0][i, k], pairs[1][i, k]) for k in range(len(COMPONENTS))]
    if velocities is not None:
        for held in velocities.to_dict("records"):
            name = str(held["station"])
            for k, component in enumerate(COMPONENTS):
                seen = held.get(component, np.nan), held.get(f"{component}_sigma", np.nan)
                rows.append((name, at[name], k, "velocity", *seen))
    out = []
    for name, i, k, kind, seen_rate, spread in rows:
        elastic, sigma = (float(rates[label].values[i, k]) for label in ("rate_total", "rate_total_sigma"))
        numbers = {"observed": (seen_rate, spread), "elastic": (elastic, sigma)}
        numbers["residual"] = seen_rate - elastic, float(np.hypot(spread, sigma))
        if not np.isfinite(numbers["residual"][0]):
            continue
        row = {"station": name, "component": COMPONENTS[k], "observed from": kind}
        for label, (value, half) in numbers.items():
            row |= {f"{label} [mm yr-1]": value, f"{label} half width [mm yr-1]": factor * half}
        out.append(row)
    return pd.DataFrame(out)
