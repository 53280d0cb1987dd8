"""What is fitted beside the level and the rate of a gauge, on the epochs that are used. Arrays, and one public choice."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.coast import _noise
from massfingerprint.coast.gauge_corrections import NODAL_PERIOD, node
from massfingerprint.coast.gauges import SAMPLINGS, sampling_of
from massfingerprint.errors import InputError
from massfingerprint.mass.rates import DAYS_PER_YEAR

Array = NDArray[np.float64]
Times = NDArray[np.datetime64]
NODAL = ("none", "equilibrium", "fit")
_LEAST_YEARS = 5  # calendar years with a value; of fewer, one year's weather makes the trend
_NODAL_CYCLES = 2.0  # of the nodal tide that a record must hold to fit it
_DISTINCT = 1e-3  # smallest singular value of the normalised regressors


@dataclass(frozen=True, kw_only=True)
class TrendModel:
    """What is fitted beside a level and a rate.

    Parameters
    ----------
    acceleration : bool
        A quadratic; the rate is then that in the middle of the epochs used.
    seasonal : bool
        A yearly and a half-yearly cycle, of monthly means only.
    nodal : str
        ``"none"``; ``"equilibrium"``: the tide of ``nodal_tide`` is taken off, needs latitudes; ``"fit"``: a cycle of 18.6 years is
        fitted, needs a record of two cycles.
    steps : sequence of dates, or mapping of gauge to them
        Documented shifts of the datum, each at its first epoch after; a sequence counts for every gauge.
    """

    acceleration: bool = False
    seasonal: bool = True
    nodal: str = "none"
    steps: Sequence[Any] | Mapping[str, Sequence[Any]] = ()


@dataclass(frozen=True)
class Series:
    """Kept epochs of one gauge: where they are on the time axis, their times, whole-number steps, values in mm."""

    name: str
    places: NDArray[np.intp]
    time: Times
    index: _noise.Index
    values: Array
    monthly: bool


def kept_series(levels: xr.Dataset, row: int, span: tuple[np.datetime64, np.datetime64] | None) -> Series:
    """Epochs of one gauge with a value in the window."""
    name = str(levels["gauge"].values[row])
    level = levels["level"].transpose("gauge", "time").values[row].astype(np.float64)
    time = levels["time"].values.astype("datetime64[ns]")
    held = np.isfinite(level)
    if not held.any():
        raise InputError(f"levels: gauge {name!r} has no value at all. Leave it out.")
    sampling = levels.attrs.get("sampling") or sampling_of(time, argument="levels")
    if span is not None:
        first, last = (str(value)[:10] for value in time[held][[0, -1]])
        held &= (time >= span[0]) & (time <= span[1])
        if not held.any():
            words = f"{str(span[0])[:10]} to {str(span[1])[:10]}"
            raise InputError(f"window: gauge {name!r} has no value from {words}; it has some from {first} to {last}.")
    places = np.flatnonzero(held)
    kept = time[places]
    years = kept.astype("datetime64[Y]").astype(np.int64)
    if np.unique(years).size < _LEAST_YEARS:
        found = np.unique(years).size
        raise InputError(
            f"levels: gauge {name!r} has values in {found} calendar years of the window, {_LEAST_YEARS} at least are needed."
        )
    monthly = sampling == SAMPLINGS[0]
    index = kept.astype("datetime64[M]").astype(np.int64) if monthly else years
    if (np.diff(index) < 1).any():
        at = str(kept[1:][np.diff(index) < 1][0])[:10]
        raise InputError(
            f"levels: gauge {name!r} has two {sampling} means at {at}, or times out of order. Sort, keep one."
        )
    return Series(name, places, kept, index, level[places], monthly)


def steps_of(steps: Any, name: str, series: Series) -> Times:
    """Dates of the shifts of one gauge, each with epochs on both sides."""
    out = step_dates(steps, name)
    for date in out:
        if not series.time[0] < date <= series.time[-1]:
            first, last = (str(series.time[end])[:10] for end in (0, -1))
            raise InputError(
                f"steps: {str(date)[:10]} of gauge {name!r} is outside the epochs used, {first} to {last}. Leave it out or "
                "widen the window."
            )
    return out


def step_dates(steps: Any, name: str) -> Times:
    """Dates of the shifts of one gauge, sorted, in the epochs used or not."""
    given = steps.get(name, ()) if isinstance(steps, Mapping) else steps
    out = np.empty(len(given), dtype="datetime64[ns]")
    for place, value in enumerate(given):
        try:
            out[place] = np.datetime64(value, "ns")
        except (TypeError, ValueError) as error:
            raise InputError(f"steps: {value!r} of gauge {name!r} is no ISO date such as 1998-01-01.") from error
    return np.sort(out)


def design_of(series: Series, model: TrendModel, steps: Times) -> Array:
    """Columns (n, p): level, rate, acceleration, steps, cycles; checked to be told apart."""
    days = (series.time - series.time[0]) / np.timedelta64(1, "D")
    years = (days - 0.5 * days[-1]) / DAYS_PER_YEAR
    columns = [np.ones_like(years), years]
    if model.acceleration:
        columns.append(0.5 * years**2)
    columns += [(series.time >= step).astype(np.float64) for step in steps]
    if model.seasonal and series.monthly:
        for cycles in (1.0, 2.0):
            columns += [np.cos(2.0 * np.pi * cycles * years), np.sin(2.0 * np.pi * cycles * years)]
    if model.nodal == "fit":
        length, needed = days[-1] / DAYS_PER_YEAR, _NODAL_CYCLES * NODAL_PERIOD
        if length < needed:
            raise InputError(
                f"nodal: 'fit' needs {needed:.1f} years, gauge {series.name!r} has {length:.1f}. Use 'equilibrium'."
            )
        columns += [np.cos(node(series.time)), np.sin(node(series.time))]
    design = np.stack(columns, axis=1)
    if design.shape[0] <= design.shape[1]:
        raise InputError(
            f"levels: gauge {series.name!r} has {design.shape[0]} values in the window, more than {design.shape[1]} are needed "
            "for what is fitted. Fit less, or widen the window."
        )
    if np.linalg.svd(design / np.linalg.norm(design, axis=0), compute_uv=False)[-1] < _DISTINCT:
        raise InputError(
            f"model: the epochs of gauge {series.name!r} do not tell all of what is fitted apart. Leave out steps or cycles."
        )
    return design
