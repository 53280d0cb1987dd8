"""Ledgers brought to chosen times, to another reference epoch, or from parts to a whole; errors follow by component."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfingerprint.errors import InputError, nearest_names
from massfingerprint.mass.covariance import COMPONENTS, component_sigmas, covariance, source_correlation
from massfingerprint.mass.ledger import ledger_dataset

Array = NDArray[np.float64]
_PER_SOURCE = ("citation", "scope", "gia_removed", "grounding_netted", "ocean_reaching_fraction")


def _names(ledger: xr.Dataset) -> list[str]:
    return [str(name) for name in ledger["source"].values]


def _parts(ledger: xr.Dataset) -> dict[str, Array]:
    """Error components (source, time) of a whole ledger."""
    rows = [component_sigmas(ledger, name) for name in _names(ledger)]
    return {name: np.stack([row[name] for row in rows]) for name in COMPONENTS}


def _times(values: Sequence[Any], argument: str) -> NDArray[np.datetime64]:
    try:
        times = np.array([np.datetime64(value, "ns") for value in values])
    except (TypeError, ValueError) as error:
        raise InputError(f"{argument}: must be ISO dates or datetime64, got {list(values)[:3]!r}.") from error
    if times.size == 0 or (np.diff(times) <= np.timedelta64(0, "ns")).any():
        raise InputError(f"{argument}: must hold at least one time and ascend without repeats.")
    return times


def align(ledger: xr.Dataset, times: Sequence[Any], *, tolerance_days: float = 0.5) -> xr.Dataset:
    """Put a ledger on chosen times, without inventing data.

    Parameters
    ----------
    ledger : Dataset (source, time)
        From ``read_ledger``.
    times : sequence of ISO dates or datetime64
        Ascending.
    tolerance_days : float
        A source's value counts for a time if it lies within so many days of it; the nearest one is taken.

    Returns
    -------
    Dataset (source, time)
        On ``times``; NaN where a source has no value close enough.

    Raises
    ------
    InputError
        If the times cannot be used.
    """
    wanted = _times(times, "times")
    own = ledger["time"].values
    mass = ledger["mass_change"].transpose("source", "time").values
    parts = _parts(ledger)
    out = np.full((mass.shape[0], wanted.size), np.nan)
    taken = {name: np.full(out.shape, np.nan) for name in COMPONENTS}
    room = np.timedelta64(round(tolerance_days * 86400e9), "ns")
    for row in range(mass.shape[0]):
        held = np.flatnonzero(np.isfinite(mass[row]))
        if not held.size:
            continue
        distance = np.abs(own[held][None, :] - wanted[:, None])
        nearest = held[distance.argmin(axis=1)]
        close = distance.min(axis=1) <= room
        out[row, close] = mass[row, nearest[close]]
        for name in COMPONENTS:
            taken[name][row, close] = parts[name][row, nearest[close]]
    return _rebuilt(ledger, _names(ledger), wanted, out, taken)


def rebase(ledger: xr.Dataset, epoch: Any) -> xr.Dataset:
    """Refer cumulative mass change to another epoch: subtract each source's value there.

    The new uncertainty is that of the difference, by component. Independent errors: the shared error of the epoch becomes
    systematic, exactly. Random walk: exact. Systematic: the new size is |s(t) - s(epoch)|; where s(t) - s(epoch) changes sign
    the covariance of times on both sides loses its sign (said in ``attrs["rebased"]``).

    Parameters
    ----------
    ledger : Dataset (source, time)
        From ``read_ledger``.
    epoch : ISO date or datetime64
        A time at which every source has a value.

    Returns
    -------
    Dataset (source, time)
        Value and uncertainty 0 at the epoch.

    Raises
    ------
    InputError
        If a source has no value at the epoch; its nearest time is named.
    """
    at_time = _times([epoch], "epoch")[0]
    time = ledger["time"].values
    mass = ledger["mass_change"].transpose("source", "time").values
    for name, row in zip(_names(ledger), mass, strict=True):
        held = time[np.isfinite(row)]
        if at_time not in held:
            nearest = str(held[np.abs(held - at_time).argmin()])[:10] if held.size else "none"
            raise InputError(f"epoch: {name!r} has no value at {str(at_time)[:10]}; its nearest time is {nearest}.")
    place = int(np.flatnonzero(time == at_time)[0])
    parts = _parts(ledger)
    shifted = {name: np.zeros(mass.shape) for name in COMPONENTS}
    for row, source in enumerate(_names(ledger)):
        independent, systematic = parts["independent"][row], parts["systematic"][row]
        walk = covariance(ledger, source, component="random_walk").values
        spread = np.diag(walk) + walk[place, place] - 2.0 * walk[place]
        shifted["random_walk"][row] = np.sqrt(np.maximum(spread, 0.0))
        moved = np.abs(systematic - systematic[place])
        shared = np.where(np.arange(time.size) == place, 0.0, independent[place])
        shifted["systematic"][row] = np.hypot(moved, shared)
        shifted["independent"][row] = np.where(np.arange(time.size) == place, 0.0, independent)
    gone = ~np.isfinite(mass)
    for values in shifted.values():
        values[gone] = np.nan
    out = _rebuilt(ledger, _names(ledger), time, mass - mass[:, [place]], shifted)
    words = "sizes exact; signs between times on both sides of an extreme of a systematic error are lost"
    return out.assign_attrs(reference_epoch=str(at_time)[:10], rebased=words)


def sum_sources(ledger: xr.Dataset, members: Mapping[str, Sequence[str]]) -> xr.Dataset:
    """Add sources up, such as sectors to their parent.

    Parameters
    ----------
    ledger : Dataset (source, time)
        From ``read_ledger``; a ``source_correlation`` in it counts.
    members : mapping of new name to source names
        What to add up.

    Returns
    -------
    Dataset (source, time)
        The new sources; NaN at times at which a member has no value. The variance at each time is exact; between times the
        components keep their models.

    Raises
    ------
    InputError
        If a member is unknown, named twice, or a sum has none.
    """
    names, parts = _names(ledger), _parts(ledger)
    mass = ledger["mass_change"].transpose("source", "time").values
    rows: list[Array] = []
    sums: dict[str, list[Array]] = {name: [] for name in COMPONENTS}
    for new, chosen in members.items():
        places = [_place(name, names, new) for name in chosen]
        if not places or len(set(places)) < len(places):
            raise InputError(f"members: {new!r} must name at least one source, each once, got {list(chosen)!r}.")
        related = np.array([[source_correlation(ledger, names[i], names[j]) for j in places] for i in places])
        rows.append(mass[places].sum(axis=0))
        for name in COMPONENTS:
            part = parts[name][places]
            sums[name].append(np.sqrt(np.maximum(np.einsum("it,ij,jt->t", part, related, part), 0.0)))
    stacked = {name: np.stack(values) for name, values in sums.items()}
    out = ledger_dataset(list(members), ledger["time"].values, np.stack(rows), stacked)
    return out.assign_attrs({**ledger.attrs, "summed": "; ".join(f"{n} = {' + '.join(m)}" for n, m in members.items())})


def _place(name: str, names: list[str], new: str) -> int:
    if name not in names:
        raise InputError(f"members: of {new!r}: no source {name!r} in the ledger. {nearest_names(str(name), names)}")
    return names.index(name)


def _rebuilt(ledger: xr.Dataset, names: list[str], time: NDArray, mass: Array, parts: dict[str, Array]) -> xr.Dataset:
    """Ledger of the same sources with other times or values; per-source notes and correlations are kept."""
    out = ledger_dataset(names, time, mass, parts).assign_attrs(ledger.attrs)
    kept = {name: ledger[name] for name in (*_PER_SOURCE, "source_correlation") if name in ledger}
    return out.assign(kept)
