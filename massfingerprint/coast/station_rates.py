"""What the mass of a record does to stations: displacement at their epochs, its rate, and the covariance of all rates.

Elastic displacement at an epoch t is the sum over sources of p_s m_s(t), m_s by straight lines between the values of the record.
Outside the record there is no value, nor between two values farther apart than three usual (median) steps of that source. The
rate is the slope of a least-squares line over the station's own epochs. All of this is linear in the values of the record,

    rate = sum_s p_s sum_t w_s(t) m_s(t)

with w_s the weights of the slope handed on to the two values beside each epoch. So the covariance of the rates of any two stations
and components is the sum over pairs of sources of p_s w_s C_ss' w'_s' p'_s', C from ``mass.covariance``: exact, no sampling.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.coast._epochs import Times, design, slope_weights
from massfingerprint.coast._station_record import Epochs, Record, record_of, station_epochs
from massfingerprint.coast.stations import COMPONENTS

Array = NDArray[np.float64]
_PAIR = ("station", "component")
_SPEED = {"units": "mm yr-1"}


def _words(record: Record, epochs: Epochs, overlap: bool) -> tuple[str, str]:
    """Why a station has no rate (empty: it may have one), and what is to be known about its rate."""
    if not epochs.time.size:
        return "no epoch is left between start, end and gaps", ""
    span = f"its span is {_day(epochs.time[0])} to {_day(epochs.time[-1])}, the mass record covers {record.covered}"
    if not epochs.inside.any():
        return span, ""
    outside, hole = int((~epochs.inside).sum()), int((epochs.inside & ~epochs.held).sum())
    if outside and not overlap:
        return f"{span}; overlap takes the part they share", ""
    notes = []
    if outside:
        part = epochs.time[epochs.inside]
        notes.append(
            f"overlap alone, {_day(part[0])} to {_day(part[-1])}: {outside} of {epochs.time.size} epochs outside"
        )
    if hole:
        notes.append(f"{hole} of {epochs.time.size} epochs left out, in holes of the mass record")
    return "", "; ".join(notes)


def _day(time: np.datetime64) -> str:
    return str(time)[:10]


@dataclass
class _Slopes:
    """Weights of the slopes: ``which`` (station, component) points at rows of ``weights`` (source, row, time); -1: no rate.

    ``nepoch`` (station, component), ``used`` first and last epoch (station, 2), and of the stations' own observations ``seen``:
    rate and sigma (2, station, component).
    """

    which: NDArray[np.intp]
    weights: Array
    nepoch: NDArray[np.int64]
    used: NDArray[np.datetime64]
    seen: Array


def _slopes(record: Record, stations: list[Epochs], refused: list[str], seasonal: bool) -> _Slopes:
    """Weights on the record of every rate; those of stations with the same epochs are kept once."""
    count, ntime = len(stations), record.mass.shape[1]
    shape = (count, len(COMPONENTS))
    out = _Slopes(
        np.full(shape, -1),
        np.zeros((len(record.sources), 0, ntime)),
        np.zeros(shape, dtype=np.int64),
        np.full((count, 2), np.datetime64("NaT", "ns")),
        np.full((2, *shape), np.nan),
    )
    rows: list[Array] = []
    found: dict[bytes, int] = {}
    for i, epochs in enumerate(stations):
        for k, name in enumerate(COMPONENTS) if not refused[i] else ():
            seen, sigma = epochs.column(name), epochs.column(f"{name}_sigma")
            kept = epochs.held & (np.isfinite(seen) if np.isfinite(seen).any() else True)
            spread = sigma[kept] if kept.any() and np.isfinite(sigma[kept]).all() else None
            slope = slope_weights(epochs.time[kept], spread, seasonal=seasonal)
            if slope is None:
                continue
            whole = np.zeros(kept.size)
            whole[kept] = slope
            key = epochs.time.tobytes() + whole.tobytes()
            if key not in found:
                found[key] = len(rows)
                rows.append(np.stack([place.spread(whole, ntime) for place in epochs.places]))
            out.which[i, k], out.nepoch[i, k] = found[key], kept.sum()
            ends = epochs.time[kept][[0, -1]]
            out.used[i] = _widest(out.used[i], ends)
            out.seen[:, i, k] = _seen_rate(epochs.time[kept], seen[kept], (slope, spread), seasonal)
    if rows:
        out.weights = np.stack(rows, axis=1)
    return out


def _widest(held: Times, ends: Times) -> Times:
    return ends if np.isnat(held[0]) else np.array([min(held[0], ends[0]), max(held[1], ends[1])])


def _seen_rate(time: Times, seen: Array, how: tuple[Array, Array | None], seasonal: bool) -> tuple[float, float]:
    """Rate of the observations and its formal sigma: from theirs as white noise, without them from the scatter about the fit."""
    slope, spread = how
    if not np.isfinite(seen).all():
        return np.nan, np.nan
    if spread is not None:
        return float(slope @ seen), float(np.sqrt((slope**2 * spread**2).sum()))
    columns = design(time, seasonal=seasonal)
    rest = seen - columns @ np.linalg.lstsq(columns, seen, rcond=None)[0]
    free = time.size - columns.shape[1]
    scatter = np.sqrt(rest @ rest / free) if free else np.nan
    return float(slope @ seen), float(scatter * np.sqrt(slope @ slope))


def _covariances(record: Record, slopes: _Slopes) -> tuple[Array, Array]:
    """Covariance (rate, rate) of all rates in mm2 yr-2, station by station, and variance (source, rate) of each source's part."""
    which = slopes.which.ravel()
    held = which >= 0
    patterns = record.patterns.transpose(1, 2, 0).reshape(len(record.sources), -1)
    total = np.zeros((which.size, which.size))
    parts = np.zeros((len(record.sources), which.size))
    rows = np.where(held, which, 0)
    if not held.any():
        return np.full_like(total, np.nan), np.full_like(parts, np.nan)
    for i, j, matrix in record.related():
        between_rows = slopes.weights[i] @ matrix @ slopes.weights[j].T
        block = patterns[i][:, None] * between_rows[np.ix_(rows, rows)] * patterns[j][None, :]
        total += block if i == j else block + block.T
        if i == j:
            parts[i] = np.diag(block)
    total[~held] = total[:, ~held] = np.nan
    parts[:, ~held] = np.nan
    return total, parts


def station_rates(
    values: xr.Dataset,
    ledger: xr.Dataset,
    stations: pd.DataFrame,
    *,
    series: pd.DataFrame | None = None,
    seasonal: bool = False,
    overlap: bool = False,
) -> xr.Dataset:
    """Rates of elastic motion at stations over their own epochs, with the covariance of all of them.

    Parameters
    ----------
    values : Dataset (source, site)
        ``bedrock_up``, ``bedrock_north``, ``bedrock_east`` in mm Gt-1 at the stations, from ``at_sites`` or ``coast_values``.
    ledger : Dataset (source, time)
        Cumulative mass change in Gt, negative = loss, of the same sources.
    stations : DataFrame
        From ``read_stations``.
    series : DataFrame, optional
        From ``read_station_series``: the stations' own epochs, their weights 1/sigma^2, and observations. A component with
        observations is fitted at the epochs that have one. Stations without rows get epochs about monthly over their span.
    seasonal : bool
        Fit a yearly cycle beside the rate.
    overlap : bool
        Where the record does not cover the span, give the rate over the part that it covers; else there is none.

    Returns
    -------
    Dataset (station, component, source)
        ``rate``, ``rate_sigma`` by source; ``rate_total``, ``rate_total_sigma`` (station, component): mm yr-1, positive = up,
        north, east, 1 sigma of the mass record, a year is 365.25 days; ``covariance`` (station, component, station_other,
        component_other) of the totals, mm2 yr-2; ``nepoch``; ``first``, ``last`` epoch of the rate; ``reason`` why there is none,
        ``note`` what it leaves out. With ``series``, ``observed_rate``, ``residual_rate`` = observed minus elastic, and their
        sigmas: white noise of the observations, the mass record in quadrature. NaN where there is no rate.

    Raises
    ------
    InputError, UnitsError
        If values, ledger and stations do not fit together.
    """
    record = record_of(values, ledger, stations)
    epochs = station_epochs(record, stations, series)
    words = [_words(record, one, overlap) for one in epochs]
    slopes = _slopes(record, epochs, [reason for reason, _ in words], seasonal)
    per_row = np.einsum("srt,st->rs", slopes.weights, np.nan_to_num(record.mass))
    there = slopes.which >= 0
    amounts = np.full((*there.shape, len(record.sources)), np.nan)
    amounts[there] = per_row[slopes.which[there]]
    reasons = [
        (why or ("" if held.any() else "too few epochs with a value for a rate"), note)
        for (why, note), held in zip(words, there, strict=True)
    ]
    out = _dataset(record, stations, slopes, amounts * record.patterns.transpose(2, 0, 1))
    out["reason"] = ("station", np.array([why for why, _ in reasons], dtype=object))
    out["note"] = ("station", np.array([note if not why else "" for why, note in reasons], dtype=object))
    if series is not None:
        _add_observed(out, slopes.seen)
    return out.assign_attrs(
        **{name: values.attrs[name] for name in ("reference_frame",) if name in values.attrs},
        seasonal=int(seasonal),
        year="365.25 days",
    )


def _dataset(record: Record, stations: pd.DataFrame, slopes: _Slopes, rate: Array) -> xr.Dataset:
    covariance, parts = _covariances(record, slopes)
    count, ncomponent = slopes.which.shape
    names = stations["station"].to_numpy(dtype=object)
    labels = np.array(COMPONENTS, dtype=object)
    out = xr.Dataset(
        coords={
            "station": names,
            "component": labels,
            "source": record.ledger["source"].values,
            "station_other": names,
            "component_other": labels,
            "lat": ("station", stations["lat"].to_numpy(), {"units": "degrees_north"}),
            "lon": ("station", stations["lon"].to_numpy(), {"units": "degrees_east"}),
        }
    )
    each, pair = ("station", "component", "source"), ("station", "component")
    speed = {"units": "mm yr-1"}
    spread = np.sqrt(np.maximum(parts, 0.0)).T.reshape(rate.shape)
    out["rate"] = (each, rate, {**speed, "long_name": "rate of elastic motion by mass source"})
    out["rate_sigma"] = (each, spread, {**speed, "long_name": "its standard uncertainty (1 sigma)"})
    out["rate_total"] = (pair, rate.sum(axis=-1), {**speed, "long_name": "rate of elastic motion, all sources"})
    sigma = np.sqrt(np.maximum(np.diag(covariance), 0.0)).reshape(count, ncomponent)
    out["rate_total_sigma"] = (pair, sigma, {**speed, "long_name": "its standard uncertainty (1 sigma)"})
    out["covariance"] = (
        (*pair, "station_other", "component_other"),
        covariance.reshape(count, ncomponent, count, ncomponent),
        {"units": "mm2 yr-2", "long_name": "covariance of the rates of all sources"},
    )
    out["nepoch"] = (pair, slopes.nepoch, {"units": "1", "long_name": "epochs of the rate"})
    for place, name in enumerate(("first", "last")):
        out[name] = ("station", slopes.used[:, place], {"long_name": f"{name} epoch of the rate"})
    return out


def _add_observed(out: xr.Dataset, seen: Array) -> None:
    pair, speed = ("station", "component"), {"units": "mm yr-1"}
    out["observed_rate"] = (pair, seen[0], {**speed, "long_name": "rate of the observations at the same epochs"})
    out["observed_rate_sigma"] = (pair, seen[1], {**speed, "long_name": "its formal sigma, white noise"})
    rest, sigma = seen[0] - out["rate_total"].values, np.hypot(seen[1], out["rate_total_sigma"].values)
    out["residual_rate"] = (pair, rest, {**speed, "long_name": "rate of observed minus elastic motion"})
    out["residual_rate_sigma"] = (pair, sigma, {**speed, "long_name": "its sigma, errors taken as independent"})


def station_series(
    values: xr.Dataset, ledger: xr.Dataset, stations: pd.DataFrame, *, series: pd.DataFrame | None = None
) -> pd.DataFrame:
    """Elastic displacement of stations at their epochs since the reference epoch of the record.

    Parameters
    ----------
    values, ledger, stations, series
        As for :func:`station_rates`.

    Returns
    -------
    DataFrame
        ``station time``; per component ``<name>`` and ``<name>_sigma`` [mm], positive = up, north, east, 1 sigma of the mass
        record, NaN where the record has no value; with observations ``<name>_observed`` and ``<name>_residual``; ``missing``: why
        there is no value.

    Raises
    ------
    InputError, UnitsError
        As :func:`station_rates`.
    """
    record = record_of(values, ledger, stations)
    epochs = station_epochs(record, stations, series)
    spreads = _displacement_sigmas(record, epochs)
    tables = []
    for i, one in enumerate(epochs):
        table: dict[str, Any] = {"station": one.station, "time": one.time}
        mass = np.stack([place.values(row) for place, row in zip(one.places, record.mass, strict=True)])
        for k, name in enumerate(COMPONENTS):
            table[name] = record.patterns[k, :, i] @ mass
            table[f"{name}_sigma"] = spreads[i][k]
            if name in one.seen:
                table[f"{name}_observed"] = one.column(name)
                table[f"{name}_residual"] = table[f"{name}_observed"] - table[name]
        hole = np.where(one.inside, "hole of the mass record", "outside the mass record")
        table["missing"] = np.where(one.held, "", hole)
        tables.append(pd.DataFrame(table))
    return pd.concat(tables, ignore_index=True)


def _displacement_sigmas(record: Record, stations: list[Epochs]) -> list[Array]:
    """Standard uncertainty (component, epoch) in mm of each station's displacements."""
    out = [np.zeros((len(COMPONENTS), one.time.size)) for one in stations]
    for i, j, matrix in record.related():
        for column, one in enumerate(stations):
            first, second = one.places[i], one.places[j]
            ends = [[(p.lower, 1.0 - p.share), (p.upper, p.share)] for p in (first, second)]
            shared = sum(a * b * matrix[m, n] for m, a in ends[0] for n, b in ends[1])
            gain = record.patterns[:, i, column] * record.patterns[:, j, column] * (1 if i == j else 2)
            out[column] += gain[:, None] * shared
    return [np.where(one.held, np.sqrt(np.maximum(row, 0.0)), np.nan) for one, row in zip(stations, out, strict=True)]
