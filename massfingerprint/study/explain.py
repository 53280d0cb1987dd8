"""Where a number of a study comes from: the inputs, the formula, the factor, the citation, the checksums."""

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfingerprint.errors import InputError, nearest_names
from massfingerprint.mass.covariance import component_sigmas
from massfingerprint.mass.summary import TOTAL
from massfingerprint.study.folder import Folder
from massfingerprint.study.tables import FIELD_LABELS

_PARTS = {
    "mass-change": ("window", "source"),
    "mass-rate": ("window", "source"),
    "global-change": ("window", "source"),
    "global-rate": ("window", "source"),
    "per-gigatonne": ("field", "site", "source"),
    "site-rate": ("field", "window", "site", "source"),
    "site-level": ("site", "source", "time"),
}
_TABLE = {
    "per-gigatonne": "per_gigatonne",
    "site-rate": "site_rates",
    "site-level": "site_levels",
}


@dataclass(frozen=True)
class Input:
    """One number, or list of numbers, that a formula takes; ``id`` is its own id where it has one."""

    name: str
    value: Any
    unit: str
    id: str = ""


@dataclass(frozen=True)
class Trace:
    """How one number came about.

    Parameters
    ----------
    id : str
        Of the number.
    words : str
        What it is.
    value, unit
        As in the table; ``uncertainty`` says how its half-width was found.
    formula : str
        In the names of the inputs.
    inputs : list of Input
        What the formula takes.
    origin : dict
        File, checksum, citation, settings behind the inputs.
    """

    id: str
    words: str
    value: float
    unit: str
    uncertainty: str
    formula: str
    inputs: list[Input]
    origin: dict[str, Any] = field(default_factory=dict)


def trace(folder: Folder, number: str) -> Trace:
    """Trace of one number of a study's tables.

    Parameters
    ----------
    folder : Folder
        From ``read_folder``.
    number : str
        Its id, from the column ``id`` of a table.

    Returns
    -------
    Trace

    Raises
    ------
    InputError
        If no number has this id; the part of it that is wrong is named.
    """
    kind, _, rest = number.partition(":")
    if kind not in _PARTS:
        raise InputError(f"id: no kind of number is called {kind!r}. {nearest_names(kind, tuple(_PARTS))}")
    table = folder.tables[_TABLE.get(kind, "mass")]
    rows = table[table["id"] == number]
    if rows.empty:
        raise InputError(_unknown(table, kind, rest))
    return _TRACES[kind](folder, rows.iloc[0])


def _unknown(table: pd.DataFrame, kind: str, rest: str) -> str:
    """Which part of an id does not occur."""
    known = [str(one).split(":")[1:] for one in table["id"] if str(one).startswith(f"{kind}:")]
    given, names = rest.split(":"), _PARTS[kind]
    form = f"{kind}:{':'.join(f'<{name}>' for name in names)}"
    if len(given) != len(names):
        return f"id: {kind} numbers are written {form}, got {len(given)} parts. Copy an id from the table."
    for place, (name, part) in enumerate(zip(names, given, strict=True)):
        words = tuple(dict.fromkeys(one[place] for one in known))
        if part not in words:
            return f"id: no {name} {part!r} among the {kind} numbers. {nearest_names(part, words[:40])}"
    return f"id: {kind}:{rest} has no value in this study (a gap in the record). Choose another."


def _record(folder: Folder, source: str) -> dict[str, Any]:
    """File, checksum, error model and citation of a source's mass record."""
    row = folder.ledger.sel(source=source)
    about = folder.provenance["inputs"]["mass"]
    out = {"mass record": about["file"], "sha256": about["sha256"], "error model": str(row["error_model"].item())}
    if "citation" in row:
        out["citation"] = str(row["citation"].item())
    return out


def _sum(folder: Folder, row: pd.Series, words: str, unit: str) -> Trace:
    """Total over sources: the parts stand in the same table."""
    kind, *pieces = str(row["id"]).split(":")
    table = folder.tables[_TABLE.get(kind, "mass")]
    keys = [name for name in ("quantity", "field", "window", "site", "time") if name in row.index]
    same = np.logical_and.reduce([(table[key] == row[key]).to_numpy() for key in keys])
    parts = table[same & (table["source"] != TOTAL).to_numpy()]
    inputs = [Input(str(r["source"]), float(r["value"]), unit, str(r["id"])) for _, r in parts.iterrows()]
    spread = "1 sigma of the sum from the covariance of the mass record, with correlations between sources"
    pieces[_PARTS[kind].index("source")] = "<source>"
    formula = f"sum over sources of {':'.join([kind, *pieces])}"
    return Trace(str(row["id"]), words, float(row["value"]), unit, spread, formula, inputs)


def _held(folder: Folder, source: str, window: str) -> NDArray[np.bool_]:
    """Times (ntime,) in a window at which a source has a value."""
    start, end = (np.datetime64(day, "ns") for day in folder.provenance["choices"]["windows"][window])
    row = folder.ledger["mass_change"].sel(source=source)
    time = row["time"].values
    return (time >= start) & (time <= end) & np.isfinite(row.values)


def _mass(folder: Folder, row: pd.Series) -> Trace:
    rate = str(row["quantity"]) == "mass-rate"
    unit = str(row["unit"])
    words = f"{'mean rate of' if rate else ''} mass change of {row['source']}, {row['window']}".strip()
    if row["source"] == TOTAL:
        return _sum(folder, row, words, unit)
    held = _held(folder, row["source"], row["window"])
    times = [str(t)[:10] for t in folder.ledger["time"].values[held]]
    values = [float(v) for v in folder.ledger["mass_change"].sel(source=row["source"]).values[held]]
    seasonal = folder.provenance["choices"]["seasonal"]
    if rate:
        fit = "level, slope" + (", yearly cosine and sine" if seasonal else "")
        formula = (
            f"slope of the least-squares fit of {fit} to mass_change(time), years of 365.25 days; weighted by "
            "1/sigma^2 where a sigma of independent errors is given below, else equally"
        )
    else:
        formula = "last minus first of mass_change(time)"
    inputs = [Input("time", times, "ISO date"), Input("mass_change", values, "Gt")]
    sigma = component_sigmas(folder.ledger, row["source"])["independent"][held]
    if rate and (sigma > 0.0).all():
        inputs.append(Input("sigma", [float(s) for s in sigma], "Gt"))
    spread = "1 sigma: square root of w C w, w the weights of the estimator, C the covariance of the error model"
    origin = _record(folder, row["source"]) | {"estimator": "weighted least squares" if rate else "difference"}
    return Trace(str(row["id"]), words, float(row["value"]), unit, spread, formula, inputs, origin)


def _global(folder: Folder, row: pd.Series) -> Trace:
    kind = str(row["quantity"]).replace("global", "mass")
    words = f"barystatic (global-mean) sea level from {row['source']}, {row['window']}"
    other = str(row["id"]).replace("global-", "mass-", 1)
    table = folder.tables["mass"]
    mass = table[table["id"] == other].iloc[0]
    factor = folder.provenance["factors"]["gigatonnes_per_millimetre"]
    inputs = [
        Input(kind.replace("-", "_"), float(mass["value"]), str(mass["unit"]), other),
        Input("gigatonnes_per_millimetre", factor, "Gt mm-1"),
    ]
    formula = f"-{inputs[0].name} / gigatonnes_per_millimetre"
    origin = {
        "factor": f"fresh water of 1000 kg m-3 over {folder.provenance['factors']['ocean_area_m2']:.6e} m2 of ocean"
    }
    spread = "that of the mass, divided by the factor"
    return Trace(str(row["id"]), words, float(row["value"]), str(row["unit"]), spread, formula, inputs, origin)


def _per_gigatonne(folder: Folder, row: pd.Series) -> Trace:
    choices, source = folder.provenance["choices"], str(row["source"])
    here = folder.sites.sel(site=row["site"])
    words = f"{FIELD_LABELS[row['field']]} at {row['site']} for one gigatonne lost from {source}"
    names = ("relative_sea_level", "bedrock_up") if row["field"] == "sea_surface" else (str(row["field"]),)
    held = " plus ".join(f"{name}_coefficients" for name in names)
    inputs = [
        Input("lat", float(here["lat"]), "degrees_north"),
        Input("lon", float(here["lon"]), "degrees_east"),
        Input("coefficients", f"{held} of {source} in patterns.nc", "mm Gt-1"),
    ]
    near = here.sel(source=source)
    formula = "-sum over degree, order of w(degree) (C cos(order lon) + S sin(order lon)) P(degree, order; lat), orthonormal; "
    if int(near["near_field"]) == 1:
        inputs.append(Input("near_field", float(near[f"{row['field']}_per_gigatonne_added_near_field"]), "mm Gt-1"))
        formula += "w = 1; - near_field (all degrees of the outline's direct elastic effect, for those of the cells)"
    else:
        half = choices["max_degree"] // 2
        formula += f"w = 1 up to degree {half}, then half a cosine to 0 above degree {choices['max_degree']}"
    origin = {
        "solved": f"sea-level equation to degree {choices['max_degree']}, rotation {choices['rotation']}, frame "
        f"{choices['reference_frame']}, ocean fraction at {choices['spacing']} degree",
        "Love numbers": choices["love_numbers"],
        "outline": folder.provenance["outlines"][source],
        "bundled": folder.provenance["bundled"],
    }
    spread = f"truncation {row['truncation']:+.3e} mm Gt-1 (what the taper or the rings change); Love numbers about 1 %"
    return Trace(str(row["id"]), words, float(row["value"]), "mm Gt-1", spread, formula, inputs, origin)


def _pattern(folder: Folder, name: str, row: pd.Series) -> Input:
    """The pattern at a site, per gigatonne added, with the id of its twin per gigatonne lost."""
    table = folder.tables["per_gigatonne"]
    held = (table["field"] == name) & (table["site"] == row["site"]) & (table["source"] == row["source"])
    one = table[held].iloc[0]
    return Input("per_gigatonne_lost", float(one["value"]), "mm Gt-1", str(one["id"]))


def _site_rate(folder: Folder, row: pd.Series) -> Trace:
    label = FIELD_LABELS[row["field"]]
    words = f"mean rate of {label} at {row['site']} from {row['source']}, {row['window']}"
    if row["source"] == TOTAL:
        return _sum(folder, row, words, "mm yr-1")
    table = folder.tables["mass"]
    held = (table["quantity"] == "mass-rate") & (table["window"] == row["window"]) & (table["source"] == row["source"])
    mass = table[held].iloc[0]
    inputs = [
        _pattern(folder, row["field"], row),
        Input("mass_rate", float(mass["value"]), "Gt yr-1", str(mass["id"])),
    ]
    formula, spread = "-per_gigatonne_lost * mass_rate", "1 sigma of the mass rate times the pattern"
    origin = _record(folder, row["source"])
    return Trace(str(row["id"]), words, float(row["value"]), "mm yr-1", spread, formula, inputs, origin)


def _site_level(folder: Folder, row: pd.Series) -> Trace:
    since = folder.provenance["choices"]["since"]
    start = since or "the first value of the record"
    words = f"relative sea level at {row['site']} from {row['source']} on {row['time']}, since {start}"
    if row["source"] == TOTAL:
        return _sum(folder, row, words, "mm")
    days = [str(time)[:10] for time in folder.ledger["time"].values]
    mass = dict(zip(days, folder.ledger["mass_change"].sel(source=row["source"]).values, strict=True))
    inputs = [
        _pattern(folder, "relative_sea_level", row),
        Input("mass_change", float(mass[row["time"]]), "Gt"),
    ]
    formula, spread = "-per_gigatonne_lost * mass_change", "1 sigma of the mass change times the pattern"
    if since:
        inputs.append(Input("mass_change_since", float(mass[since]), "Gt"))
        formula = "-per_gigatonne_lost * (mass_change - mass_change_since)"
    origin = _record(folder, row["source"])
    return Trace(str(row["id"]), words, float(row["value"]), "mm", spread, formula, inputs, origin)


_TRACES: dict[str, Callable[[Folder, pd.Series], Trace]] = {
    "mass-change": _mass,
    "mass-rate": _mass,
    "global-change": _global,
    "global-rate": _global,
    "per-gigatonne": _per_gigatonne,
    "site-rate": _site_rate,
    "site-level": _site_level,
}
