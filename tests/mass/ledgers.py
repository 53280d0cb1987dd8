"""Ledgers made in memory, and draws from the definitions of the error models."""

import numpy as np
import xarray as xr

COMPONENTS = ("independent", "systematic", "random_walk")


def make_ledger(years, sources, *, epoch="2000-01-01", correlation=None):
    """Ledger at decimal years after 2000 (of 365.25 days): sources maps name -> dict(mass, model, sigma or parts)."""
    years = np.asarray(years, dtype=float)
    time = np.datetime64("2000-01-01", "ns") + (years * 365.25 * 86400e9).astype("timedelta64[ns]")
    names = list(sources)
    zero = np.zeros(years.size)
    parts = {c: np.stack([np.broadcast_to(sources[n].get(c, zero), years.shape) for n in names]) for c in COMPONENTS}
    whole = np.sqrt(sum(p**2 for p in parts.values()))
    mass = np.stack([np.broadcast_to(sources[n].get("mass", zero), years.shape) for n in names])
    models = []
    for name in names:
        held = [c for c in COMPONENTS if np.any(sources[name].get(c, 0.0))]
        models.append(held[0] if len(held) == 1 else "sum")
    variables = {
        "mass_change": (("source", "time"), mass),
        "mass_change_sigma": (("source", "time"), np.where(np.isnan(mass), np.nan, whole)),
        "error_model": ("source", np.array(models, dtype=object)),
    }
    if "sum" in models:
        variables |= {f"mass_change_sigma_{c}": (("source", "time"), parts[c]) for c in COMPONENTS}
    out = xr.Dataset(variables, coords={"source": np.array(names, dtype=object), "time": time})
    if correlation is not None:
        out["source_correlation"] = (("source", "source_other"), np.asarray(correlation, dtype=float))
        out = out.assign_coords(source_other=np.array(names, dtype=object))
    return out.assign_attrs(quantity="cumulative", reference_epoch=epoch)


def draws(ledger, count, seed=0):
    """Errors (count, source, time) drawn from the definitions: white noise, one shared number, cumulated independent steps."""
    rng = np.random.default_rng(seed)
    sources, times = ledger.sizes["source"], ledger.sizes["time"]
    related = ledger["source_correlation"].values if "source_correlation" in ledger else np.eye(sources)
    root = np.linalg.cholesky(related)
    elapsed = (ledger["time"].values - np.datetime64(ledger.attrs["reference_epoch"], "ns")) / np.timedelta64(1, "D")

    def noise():
        return np.einsum("ij,cjt->cit", root, rng.normal(size=(count, sources, times)))

    sigma = {c: _component(ledger, c) for c in COMPONENTS}
    shared = np.einsum("ij,cj->ci", root, rng.normal(size=(count, sources)))[..., None]
    out = sigma["independent"] * noise() + sigma["systematic"] * shared
    for side in (
        np.argsort(elapsed)[elapsed[np.argsort(elapsed)] > 0],
        np.argsort(-elapsed)[elapsed[np.argsort(-elapsed)] < 0],
    ):
        variance = sigma["random_walk"][:, side] ** 2
        steps = np.sqrt(np.diff(variance, axis=1, prepend=0.0))
        out[:, :, side] += np.cumsum(steps * noise()[:, :, : side.size], axis=2)
    return out


def _component(ledger, name):
    held = np.zeros((ledger.sizes["source"], ledger.sizes["time"]))
    for i, model in enumerate(ledger["error_model"].values):
        if model == name:
            held[i] = ledger["mass_change_sigma"].values[i]
        elif model == "sum":
            held[i] = ledger[f"mass_change_sigma_{name}"].values[i]
    return held
