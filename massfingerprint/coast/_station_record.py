"""A mass record with the patterns that take it to stations, and where the stations' epochs stand in it."""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np
import pandas as pd
import xarray as xr
from numpy.typing import NDArray

from massfingerprint import vocabulary
from massfingerprint.coast._epochs import Between, Times, between, monthly
from massfingerprint.coast.stations import COMPONENTS
from massfingerprint.errors import InputError, nearest_names
from massfingerprint.mass.covariance import cross_covariance, source_correlation
from massfingerprint.mass.ledger import check_ledger

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Record:
    """A mass record, and patterns (component, source, station) in mm per gigatonne."""

    ledger: xr.Dataset
    patterns: Array

    @cached_property
    def sources(self) -> list[str]:
        """Names of the sources."""
        return [str(name) for name in self.ledger["source"].values]

    @cached_property
    def mass(self) -> Array:
        """Gt (source, time), NaN where there is none."""
        return np.asarray(self.ledger["mass_change"].transpose("source", "time").values, dtype=np.float64)

    @cached_property
    def ends(self) -> NDArray[np.datetime64]:
        """First and last time (source, 2) of each source's record."""
        time = self.ledger["time"].values
        return np.array([time[held][[0, -1]] for held in np.isfinite(self.mass)])

    @property
    def span(self) -> tuple[np.datetime64, np.datetime64]:
        """First and last time at which every source's record has begun and not ended."""
        return self.ends[:, 0].max(), self.ends[:, 1].min()

    @property
    def covered(self) -> str:
        """The span in words, with the sources that bound it where not all do."""
        words = []
        for column, (time, kind) in enumerate(zip(self.span, ("starts", "ends"), strict=True)):
            bounding = [name for name, end in zip(self.sources, self.ends[:, column], strict=True) if end == time]
            alone = len(bounding) < len(self.sources)
            words.append(f"{str(time)[:10]}{f' ({bounding[0]} {kind})' if alone else ''}")
        return " to ".join(words)

    def places(self, epochs: Times) -> list[Between]:
        """Where epochs stand in each source's record."""
        time = self.ledger["time"].values
        return [between(time, held, epochs) for held in np.isfinite(self.mass)]

    def related(self) -> Iterator[tuple[int, int, Array]]:
        """Pairs of sources with related errors, and their covariance (time, time) in Gt2, 0 where there is no value."""
        for i, first in enumerate(self.sources):
            for j, second in enumerate(self.sources[: i + 1]):
                if first == second or source_correlation(self.ledger, first, second) != 0.0:
                    yield i, j, np.nan_to_num(cross_covariance(self.ledger, first, second).values)


@dataclass(frozen=True)
class Epochs:
    """Epochs of one station, what it saw at them, and where they stand in the record of each source."""

    station: str
    time: Times
    seen: pd.DataFrame
    places: list[Between]

    @cached_property
    def held(self) -> NDArray[np.bool_]:
        """Epochs (n,) at which every source has a value."""
        return np.all([place.held for place in self.places], axis=0)

    @cached_property
    def inside(self) -> NDArray[np.bool_]:
        """Epochs (n,) within the record of every source, in a hole or not."""
        return np.all([place.inside for place in self.places], axis=0)

    def column(self, name: str) -> Array:
        """What was seen (n,), NaN where nothing was."""
        if name not in self.seen:
            return np.full(self.time.size, np.nan)
        return self.seen[name].to_numpy(dtype=np.float64)


def record_of(values: xr.Dataset, ledger: xr.Dataset, stations: pd.DataFrame) -> Record:
    """Record and patterns, in the order of its sources and of the stations.

    Raises
    ------
    InputError, UnitsError
        If values, ledger and stations do not fit together.
    """
    ledger = check_ledger(ledger)
    names = [f"bedrock_{name}" for name in COMPONENTS]
    missing = [name for name in names if not isinstance(values, xr.Dataset) or name not in values]
    if missing:
        raise InputError(f"values: lacks {missing[0]}. Solve with outputs {', '.join(names)} and take at_sites.")
    sources = [str(name) for name in ledger["source"].values]
    orders = [_order(values, "source", sources), _order(values, "site", [str(name) for name in stations["station"]])]
    stray = [str(name) for name in values["source"].values if str(name) not in sources]
    if stray:
        raise InputError(f"ledger: no mass for {stray[0]!r} of the values. {nearest_names(stray[0], sources)}")
    empty = [name for name, row in zip(sources, ledger["mass_change"].values, strict=True) if np.isnan(row).all()]
    if empty:
        raise InputError(f"ledger: {empty[0]!r} has no value at all. Leave it out.")
    fields = []
    for name in names:
        _, factor = vocabulary.require(values[name].attrs, ("mm Gt-1",), argument=f"values: {name}")
        fields.append(values[name].transpose("source", "site").values[np.ix_(*orders)] * factor)
    out = Record(ledger, np.stack(fields))
    if out.span[1] < out.span[0]:
        late, early = out.sources[int(out.ends[:, 0].argmax())], out.sources[int(out.ends[:, 1].argmin())]
        raise InputError(f"ledger: {early!r} ends before {late!r} starts: no time has both. Leave one out.")
    return out


def _order(values: xr.Dataset, dim: str, wanted: list[str]) -> list[int]:
    """Places of names along a dimension."""
    field = values[f"bedrock_{COMPONENTS[0]}"]
    if dim not in field.dims or dim not in field.coords:
        raise InputError(f"values: has no named dimension {dim!r}, only {field.dims}.")
    known = [str(name) for name in field[dim].values]
    lacking = [name for name in wanted if name not in known]
    if lacking:
        raise InputError(f"values: none for {dim} {lacking[0]!r}. {nearest_names(lacking[0], known)}")
    return [known.index(name) for name in wanted]


def station_epochs(record: Record, stations: pd.DataFrame, series: pd.DataFrame | None) -> list[Epochs]:
    """Epochs of each station: its own within its span, else about monthly over it; the gaps are taken out of both."""
    out = []
    spans = stations[["start", "end"]].to_numpy(dtype="datetime64[ns]")
    for name, (start, end), gaps in zip(stations["station"], spans, stations["gaps"], strict=True):
        own = pd.DataFrame() if series is None else series[series["station"] == name]
        if len(own):
            time = own["time"].to_numpy().astype("datetime64[ns]")
        else:
            first, last = record.span[0] if np.isnat(start) else start, record.span[1] if np.isnat(end) else end
            # a station that starts after the record ends, or ends before it starts, is left with its own end alone
            time = monthly(first, last) if last > first else np.array([last if np.isnat(start) else first])
        kept = ~((time < start) | (time > end))  # nothing is before or after an end that is not given
        for first, last in gaps:
            kept &= (time < first) | (time > last)
        seen = own[kept].reset_index(drop=True) if len(own) else pd.DataFrame()
        out.append(Epochs(str(name), time[kept], seen, record.places(time[kept])))
    return out
