"""The pole as it was observed, its drift over a window, and the same record without its yearly and Chandler cycles.

Everything that moves mass moves it: the Earth still rising after the ice age, mantle convection, core, oceans, air, water on land,
earthquakes, and the ice. So the observed drift stands beside a computed one, and is no measure of its error.
"""

from functools import cache
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.bundled import open_bundled_table
from massfingerprint.constants import MILLIARCSECONDS_PER_RADIAN, SPHERE_RADIUS
from massfingerprint.errors import InputError
from massfingerprint.mass.rates import DAYS_PER_YEAR, check_windows

Array = NDArray[np.float64]
CHANDLER_DAYS = 433.0  # Adhikari & Ivins 2016
BEAT_YEARS = (
    6.4  # of the yearly and the Chandler cycle: 1 / (1/365.25 - 1/433) days; a shorter window cannot tell them apart
)
SOURCE = "International Earth Rotation and Reference Systems Service (IERS), EOP 20 C04"
_FILE = "observed_pole.csv"
_STEP = 0.1  # years between the means of the record
_MAS = {"x": "polar motion x, towards 0 E", "y": "polar motion y, towards 90 W"}


def centimetres(milliarcseconds: Any) -> Any:
    """Centimetres on the ground of milliarcseconds of the pole, or cm/yr of mas/yr: 3.09 cm a mas."""
    return np.asarray(milliarcseconds) / MILLIARCSECONDS_PER_RADIAN.value * SPHERE_RADIUS.value * 100.0


def observed_pole() -> xr.Dataset:
    """Observed polar motion since 1962.

    Returns
    -------
    Dataset (time)
        ``x``, ``y`` in mas (y towards 90 W), means over tenths of a year at the middle of their days; attribute ``source``.

    Raises
    ------
    MissingFileError, DamagedFileError
        If the bundled record is gone or is not what was shipped.
    """
    return _record()[list(_MAS)].copy(deep=True)


@cache
def _record() -> xr.Dataset:
    table = open_bundled_table(_FILE)
    out = xr.Dataset(coords={"time": pd.to_datetime(table["time"], format="ISO8601").to_numpy("datetime64[ns]")})
    for name, words in _MAS.items():
        out[name] = ("time", table[f"{name} [mas]"].to_numpy(dtype=np.float64), {"units": "mas", "long_name": words})
    out["days"] = ("time", table["days"].to_numpy(dtype=np.int64))
    return out.assign_attrs(source=SOURCE)


def record_span() -> tuple[np.datetime64, np.datetime64]:
    """First and last day of the observed record."""
    record = _record()
    first, last = record["time"].values[[0, -1]].astype("datetime64[h]")
    reach = [np.timedelta64(12 * (int(record["days"].values[at]) - 1), "h") for at in (0, -1)]  # half the days between
    return (first - reach[0]).astype("datetime64[D]"), (last + reach[1]).astype("datetime64[D]")


def smoothed_pole() -> xr.Dataset:
    """Observed polar motion without its cycles, for drawing.

    Each value is a weighted mean over 6.4 years: a mean over a year of means over a Chandler period of means over the rest. A
    plain mean over 6.4 years would leave a twentieth of both cycles, since neither fits into it a whole number of times.

    Returns
    -------
    Dataset (time)
        ``x``, ``y`` in mas; it starts 3.2 years after the record and ends 3.2 years before it.

    Raises
    ------
    MissingFileError, DamagedFileError
        As :func:`observed_pole`.
    """
    record, chandler = _record(), CHANDLER_DAYS / DAYS_PER_YEAR
    weights = np.ones(1)
    for years in (1.0, chandler, BEAT_YEARS - 1.0 - chandler):
        weights = np.convolve(weights, _mean_over(years / _STEP))
    reach = len(weights) // 2
    out = xr.Dataset(coords={"time": record["time"].values[reach:-reach]})
    for name in _MAS:
        values = np.convolve(record[name].values, weights, mode="valid")
        out[name] = ("time", values, record[name].attrs)
    return out.assign_attrs(record.attrs)


def _mean_over(steps: float) -> Array:
    """Weights of a mean over so many steps round a value, an odd number of them: both ends count by their share."""
    whole = int(np.floor((steps - 1.0) / 2.0))
    end = 0.5 * (steps - 1.0 - 2.0 * whole)
    return np.array([end, *np.ones(2 * whole + 1), end]) / steps


def observed_drift(window: tuple[Any, Any]) -> xr.Dataset:
    """Drift of the observed pole over a window: a line fitted beside a yearly and a Chandler cycle, by least squares.

    Parameters
    ----------
    window : (start, end)
        ISO dates or datetime64, within the record and at least 6.4 years long. Means whose middle lies in it take part.

    Returns
    -------
    Dataset
        ``x_rate``, ``y_rate`` in mas yr-1 (y towards 90 W), each with ``..._formal_sigma``, as if the residuals were white, which
        they are not, and ``..._sigma``, the formal one widened by sqrt((1 + r)/(1 - r)) with r the correlation of residuals a tenth
        of a year apart, still no full account of slow ones; ``x_start``, ``y_start`` in mas, the line at the start of the window;
        ``x_residual``, ``y_residual`` in mas, root mean square. Attributes ``start``, ``end``, ``source``.

    Raises
    ------
    InputError
        If the window cannot be used, leaves the record or is too short.
    """
    start, end = _checked(window)
    record = _record().sel(time=slice(start, end))
    years = (record["time"].values - start) / np.timedelta64(1, "D") / DAYS_PER_YEAR
    turns = 2.0 * np.pi * np.outer(years, [1.0, DAYS_PER_YEAR / CHANDLER_DAYS])
    design = np.hstack([np.ones((years.size, 1)), years[:, None], np.cos(turns), np.sin(turns)])
    spread = np.sqrt(np.linalg.inv(design.T @ design)[1, 1])
    out = xr.Dataset(attrs={"start": str(start)[:10], "end": str(end)[:10], "source": SOURCE})
    for name in _MAS:
        values = record[name].values
        level, slope = (found := np.linalg.lstsq(design, values, rcond=None)[0])[:2]
        left = values - design @ found
        formal = spread * np.sqrt(left @ left / (years.size - design.shape[1]))
        lagged = float(np.clip(left[1:] @ left[:-1] / (left @ left), 0.0, 0.999))
        rate, mas = {"units": "mas yr-1"}, {"units": "mas"}
        out[f"{name}_rate"] = ((), slope, rate)
        out[f"{name}_rate_formal_sigma"] = ((), formal, rate)
        out[f"{name}_rate_sigma"] = ((), formal * np.sqrt((1.0 + lagged) / (1.0 - lagged)), rate)
        out[f"{name}_start"] = ((), level, mas)
        out[f"{name}_residual"] = ((), np.sqrt(np.mean(left**2)), mas)
    return out


def _checked(window: tuple[Any, Any]) -> tuple[np.datetime64, np.datetime64]:
    """Start and end of a window that the record covers."""
    start, end = check_windows({"window": window})["window"]
    first, last = record_span()
    if start < first or end > last + np.timedelta64(1, "D"):
        raise InputError(
            f"window: the observed pole is known from {first} to {last}, got {str(start)[:10]} to {str(end)[:10]}. "
            "Choose a window within."
        )
    years = (end - start) / np.timedelta64(1, "D") / DAYS_PER_YEAR
    if years < BEAT_YEARS:
        raise InputError(
            f"window: must be {BEAT_YEARS} years or longer to tell the pole's drift from its cycles, got {years:.1f} years."
        )
    return start, end
