"""Rates of what mass change does to the whole Earth, from a mass record or from constant mass rates; the drift of the pole."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.cli._mass_rates import mass_rates, spread
from massfingerprint.cli._record import OF_A_RECORD, record_of
from massfingerprint.errors import InputError
from massfingerprint.mass.rates import DAYS_PER_YEAR, check_windows, rate_weights
from massfingerprint.sealevel.observed_pole import centimetres
from massfingerprint.sealevel.series import sea_level_rates, sea_level_series
from massfingerprint.sealevel.whole_earth import pole_direction

Array = NDArray[np.float64]
Window = tuple[np.datetime64, np.datetime64]
_POLE = ("polar_motion_x", "polar_motion_y")
_DIFFERENT = np.timedelta64(183, "D")  # sources whose epochs start or end farther apart than this do not share a window


@dataclass(frozen=True)
class Drift:
    """Drift of the pole: x and y (towards 90 W) in mas/yr, and their covariance (2, 2)."""

    x: float
    y: float
    covariance: Array

    @property
    def speed(self) -> tuple[float, float]:
        """Speed and its standard uncertainty, cm/yr."""
        return float(centimetres(np.hypot(self.x, self.y))), float(centimetres(self._sigma(self.x, self.y)))

    @property
    def direction(self) -> tuple[float, float]:
        """Longitude towards which the pole goes and its standard uncertainty, degrees east; NaN for a pole at rest."""
        size = np.hypot(self.x, self.y)
        if size == 0.0:
            return np.nan, np.nan
        return float(pole_direction(self.x, self.y)), float(np.rad2deg(self._sigma(-self.y, self.x) / size))  # type: ignore[arg-type]

    def sigma(self, axis: int) -> float:
        """Standard uncertainty of x (0) or y (1), mas/yr."""
        return float(np.sqrt(max(self.covariance[axis, axis], 0.0)))

    def without(self, other: "Drift") -> "Drift":
        """Difference to a drift of independent errors."""
        return Drift(self.x - other.x, self.y - other.y, self.covariance + other.covariance)

    def _sigma(self, along_x: float, along_y: float) -> float:
        """Standard uncertainty along a direction, mas/yr; the largest for a pole at rest."""
        size = np.hypot(along_x, along_y)
        if size == 0.0:
            return float(np.sqrt(np.linalg.eigvalsh(self.covariance).max()))
        way = np.array([along_x, along_y]) / size
        return float(np.sqrt(max(way @ self.covariance @ way, 0.0)))


@dataclass(frozen=True)
class Mass:
    """What is known of the mass: a record and the window of its epochs, or constant rates and the period they hold for."""

    sources: list[str]
    window: Window
    held: xr.Dataset | pd.DataFrame
    seasonal: bool = False

    def rates_of(self, numbers: xr.Dataset, names: Sequence[str]) -> xr.Dataset:
        """Rates per year: ``<name>``, ``<name>_sigma`` (source, ...), ``<name>_total``, ``<name>_total_sigma`` (...)."""
        if isinstance(self.held, pd.DataFrame):
            return _constant(self.held, numbers, names)
        spans = {"window": self.window}
        found = sea_level_rates(numbers, self.held, windows=spans, seasonal=self.seasonal, fields=tuple(names))
        return found.isel(window=0, drop=True)

    def drifts(self, numbers: xr.Dataset, found: xr.Dataset) -> dict[str, Drift]:
        """Drift of each source, and of all under ``total``."""
        out = {}
        for source in self.sources:
            x, y = (float(found[name].sel(source=source)) for name in _POLE)
            # a source has one mass, so its x and y have one error
            sigma = np.array([float(found[f"{name}_sigma"].sel(source=source)) for name in _POLE])
            signs = np.sign([float(numbers[name].sel(source=source)) for name in _POLE])
            out[source] = Drift(x, y, np.outer(sigma * signs, sigma * signs))
        x, y = (float(found[f"{name}_total"]) for name in _POLE)
        variance = [float(found[f"{name}_total_sigma"]) ** 2 for name in _POLE]
        both = (numbers[_POLE[0]] + numbers[_POLE[1]]).assign_attrs(numbers[_POLE[0]].attrs)
        together = self.rates_of(numbers.assign(polar_motion_x=both), _POLE[:1])
        shared = 0.5 * (float(together[f"{_POLE[0]}_total_sigma"]) ** 2 - sum(variance))
        out["total"] = Drift(x, y, np.array([[variance[0], shared], [shared, variance[1]]]))
        return out

    def track(self, numbers: xr.Dataset, drift: Drift) -> pd.DataFrame:
        """Pole of all sources (time; x, y) in mas since the start of the window: from the record, or straight from a drift."""
        if isinstance(self.held, xr.Dataset):
            series = sea_level_series(numbers, self.held, keep_source=False, fields=_POLE)
            values = {axis: series[f"polar_motion_{axis}_total"].values for axis in "xy"}
            frame = (
                pd.DataFrame(values, index=pd.DatetimeIndex(series["time"].values)).loc[slice(*self.window)].dropna()
            )
            if len(frame) > 1:
                return frame - frame.iloc[0]
        start, end = self.window
        years = (end - start) / np.timedelta64(1, "D") / DAYS_PER_YEAR
        return pd.DataFrame(
            {"x": [0.0, drift.x * years], "y": [0.0, drift.y * years]}, index=pd.DatetimeIndex([start, end])
        )

    @property
    def cited(self) -> str:
        """Where the mass comes from, each citation once."""
        cells = list(self.held["citation"].values) if "citation" in self.held else []
        found = [text for text in dict.fromkeys(str(cell).strip() for cell in cells) if text]
        return "; ".join(found) or "no citation in the file"

    @property
    def same_times(self) -> bool:
        """Whether all sources have about the same first and last value in the window."""
        if isinstance(self.held, pd.DataFrame):
            ends = self.held[["time_start", "time_end"]].to_numpy("datetime64[ns]").T
        else:
            ends = _extents(self.held, self.window)
        return bool((ends.max(axis=1) - ends.min(axis=1) <= _DIFFERENT).all())


def _constant(rates: pd.DataFrame, numbers: xr.Dataset, names: Sequence[str]) -> xr.Dataset:
    """As :meth:`Mass.rates_of`, of constant rates; errors are shared within an error group."""
    amount, sigma = (rates[name].to_numpy() for name in ("mass_rate", "mass_rate_sigma"))
    out = xr.Dataset(coords=dict(numbers.coords))
    for name in names:
        field = numbers[name].transpose("source", ...)
        lead, shape = field.dims[1:], field.shape[1:]
        per_gt = field.values.reshape(len(amount), -1)
        parts = {"": per_gt * amount[:, None], "_sigma": np.abs(per_gt) * sigma[:, None]}
        totals = {"_total": parts[""].sum(axis=0), "_total_sigma": spread(rates, per_gt)}
        for suffix, values in parts.items():
            out[f"{name}{suffix}"] = (("source", *lead), values.reshape(len(amount), *shape))
        for suffix, values in totals.items():
            out[f"{name}{suffix}"] = (lead, values.reshape(shape))
    return out


def days(window: Window) -> tuple[str, str]:
    """First and last day of a window as ISO dates."""
    return str(window[0])[:10], str(window[1])[:10]


def _extents(ledger: xr.Dataset, window: Window) -> NDArray[np.datetime64]:
    """First and last epoch (2, source) with a value in a window; sources without one are left out."""
    time = ledger["time"].values
    inside = (time >= window[0]) & (time <= window[1])
    held = [time[inside & row] for row in np.isfinite(ledger["mass_change"].transpose("source", "time").values)]
    return np.array([[times[at] for times in held if times.size] for at in (0, -1)], dtype="datetime64[ns]")


def _from_ledger(options: dict[str, Any]) -> Mass:
    ledger = record_of(options)
    time = ledger["time"].values
    given = options["window"]
    window = (time[0], time[-1]) if given is None else check_windows({"--window": given})["--window"]
    _check_values(ledger, window, options["seasonal"])
    ends = _extents(ledger, window)
    return Mass(
        [str(name) for name in ledger["source"].values], (ends[0].min(), ends[1].max()), ledger, options["seasonal"]
    )


def _check_values(ledger: xr.Dataset, window: Window, seasonal: bool) -> None:
    """Refuse a window in which a source has no rate, before anything is solved."""
    weights = rate_weights(ledger, window, seasonal=seasonal)
    short = next((name for name, found in weights.items() if found is None), None)
    if short is not None:
        start, end = days(window)
        cure = "Widen the window, leave --seasonal out" if seasonal else "Widen the window"
        raise InputError(
            f"--window: {short!r} has too few values from {start} to {end} for a rate. {cure}, or --drop it."
        )


def mass_of(options: dict[str, Any]) -> Mass:
    """Mass as the options --ledger, --rates or --published give it, no ice counted twice.

    Raises
    ------
    InputError
        If not exactly one of the three is given, or an option of a record comes without one.
    """
    given = [name for name in ("ledger_file", "rates_file", "published_set") if options[name] is not None]
    if len(given) != 1:
        raise InputError(
            f"mass: give one of --ledger FILE, --rates FILE or --published SET, got {len(given)} of them. "
            "massfingerprint ledger published lists the sets."
        )
    if options["ledger_file"] is not None:
        return _from_ledger(options)
    for name in ("window", *OF_A_RECORD, "seasonal"):
        if options[name]:
            raise InputError(
                f"--{name.replace('_', '-')}: goes with --ledger only; constant rates hold for their own period."
            )
    rates = mass_rates(options["rates_file"], options["published_set"])
    period = rates["time_start"].min().to_datetime64(), rates["time_end"].max().to_datetime64()
    return Mass([str(name) for name in rates["source"]], period, rates)
