"""The folder of a study: the names in it, how it is written, and how it is read again."""

import dataclasses
import json
import os
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd
import xarray as xr

from massfingerprint.errors import DamagedFileError, FolderError
from massfingerprint.files.atomic import write_text
from massfingerprint.files.folders import replacing_folder
from massfingerprint.files.json_files import json_content
from massfingerprint.files.netcdf import read_netcdf, write_cf_netcdf
from massfingerprint.files.tables import csv_text, read_plain_csv
from massfingerprint.study.inputs import Inputs
from massfingerprint.study.metadata import discovery, now, provenance
from massfingerprint.study.patterns import Progress, silent
from massfingerprint.study.recipe import Recipe
from massfingerprint.study.run import Clock, Study, compute_study, kept_folder
from massfingerprint.study.summary import folder_guide, summary_data, summary_text
from massfingerprint.study.tables import (
    Identifiers,
    mass_table,
    per_gigatonne_table,
    shown_site_rates,
    site_level_table,
    site_rate_table,
)

PATTERNS, SITES, LEDGER = "patterns.nc", "sites.nc", "ledger.nc"
SUMMARY_TEXT, SUMMARY_JSON, PROVENANCE, GUIDE = "summary.txt", "summary.json", "provenance.json", "README.txt"
TABLES, FIGURES = "tables", "figures"
NUMBERS = (
    "value",
    "sigma",
    "half_width",
    "lowest",
    "highest",
    "truncation",
    "distance_to_load",
    "near_field",
    "resolved",
)
TABLE_NAMES = ("mass", "per_gigatonne", "site_rates", "site_levels", "site_rates_shown")


def write_study(
    recipe: Recipe,
    inputs: Inputs,
    *,
    replace: bool = False,
    progress: Progress = silent,
    clock: Clock | None = None,
) -> Study:
    """Compute a study and leave its folder, whole or not at all.

    Parameters
    ----------
    recipe, inputs
        From ``read_study``.
    replace : bool
        Whether ``recipe.output.folder`` may be replaced if it is there.
    progress : callable
        Told (stage, done, total).
    clock : Clock, optional
        Counts the time per stage.

    Returns
    -------
    Study
        With ``folder`` set.

    Raises
    ------
    FolderError
        If the folder cannot be written; what was there before is unchanged.
    """
    clock = clock or Clock()
    target = Path(os.path.abspath(recipe.output.folder))
    with replacing_folder(target, replace=replace) as fresh:
        study = compute_study(recipe, inputs, kept=kept_folder(recipe), progress=progress, clock=clock)
        tables = study_tables(study)
        with clock.stage("files"):
            _write_files(study, tables, fresh, progress)
        with clock.stage("figures"):
            if recipe.output.maps:
                from massfingerprint.study.pictures import draw  # noqa: PLC0415  plotting only where it is asked for

                draw(study, tables, fresh / FIGURES, progress=progress)
    return dataclasses.replace(study, folder=target)


def study_tables(study: Study) -> dict[str, pd.DataFrame]:
    """All tables of a study by name, as in ``TABLE_NAMES``."""
    ids, interval = Identifiers.of(study.rates), study.recipe.output.interval
    out = {
        "mass": mass_table(study.summary, ids),
        "per_gigatonne": per_gigatonne_table(study.at_sites, ids),
        "site_rates": site_rate_table(study.rates, ids, interval=interval),
        "site_levels": site_level_table(study.series, ids, interval=interval),
    }
    return out | {"site_rates_shown": shown_site_rates(out["site_rates"], global_rates(out["mass"]))}


def global_rates(mass: pd.DataFrame) -> dict[str, float]:
    """Global-mean rate in mm yr-1 of the total, by window, from the table of mass."""
    rows = mass[(mass["quantity"] == "global-rate") & (mass["source"] == "total")]
    return {str(window): float(value) for window, value in zip(rows["window"], rows["value"], strict=True)}


def _write_files(study: Study, tables: dict[str, pd.DataFrame], fresh: Path, progress: Progress) -> None:
    recipe, inputs, made = study.recipe, study.inputs, now()
    held = {
        PATTERNS: (pattern_data(study), "patterns of each mass source per gigatonne added"),
        SITES: (site_data(study), "patterns, series and rates at sites"),
        LEDGER: (ledger_data(study), "mass record and its barystatic sea level"),
    }
    texts = {
        PROVENANCE: as_json(provenance(recipe, inputs, study.patterns, made=made)),
        SUMMARY_TEXT: summary_text(study, tables),
        SUMMARY_JSON: as_json(summary_data(study, tables)),
        GUIDE: folder_guide(study),
    }
    (fresh / TABLES).mkdir()
    texts |= {f"{TABLES}/{name}.csv": csv_text(tables[name]) for name in TABLE_NAMES}
    done, total = 0, len(held) + len(texts)
    for name, (dataset, what) in held.items():
        write_cf_netcdf(dataset, fresh / name, attributes=discovery(recipe, inputs, dataset, what=what, made=made))
        done += 1
        progress("files", done, total)
    for name, text in texts.items():
        write_text(text, fresh / name)
        done += 1
        progress("files", done, total)


def as_json(data: Any) -> str:
    """JSON text, readable, numbers in full."""
    return json.dumps(data, indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def pattern_data(study: Study) -> xr.Dataset:
    """What ``patterns.nc`` holds: fields in single precision, coefficients of all fields in double."""
    out = study.patterns.copy()
    for name in study.recipe.output.fields:
        out[name] = out[name].astype("float32")
    return out


def site_data(study: Study) -> xr.Dataset:
    """What ``sites.nc`` holds: ``<field>_per_gigatonne_added...``, ``<field>...`` in time, ``<field>_rate...`` by window."""
    here, series, rates = study.at_sites, study.series, study.rates
    fields = [str(name) for name in here.data_vars if f"{name}_near_field" in here]
    names = {}
    for label in map(str, here.data_vars):
        name = next((name for name in fields if label.startswith(name)), "")
        names[label] = f"{name}_per_gigatonne_added{label.removeprefix(name)}" if name else label
    by_window = {label: _with_rate(label, fields) for label in map(str, rates.data_vars)}
    out = here.rename(names)
    for part in (series, rates.rename(by_window)):
        out = out.merge(part, compat="equals", join="exact", combine_attrs="override")
    return out


def _with_rate(label: str, fields: list[str]) -> str:
    name = next(name for name in fields if label.startswith(name))
    return f"{name}_rate{label.removeprefix(name)}"


def ledger_data(study: Study) -> xr.Dataset:
    """What ``ledger.nc`` holds: the record, and the barystatic sea level it makes (``barystatic_...``)."""
    mean = study.global_mean
    names = {name: f"barystatic_{name}" for name in map(str, mean.data_vars)}
    out = study.inputs.ledger.merge(mean.rename(names), compat="equals", join="exact", combine_attrs="override")
    if "source_other" in out.coords:
        out = out.assign_coords(source_other=out["source_other"].astype(object))
    return out


@dataclass(frozen=True)
class Folder:
    """A study folder that was read: datasets as in memory, tables, provenance."""

    path: Path
    sites: xr.Dataset
    ledger: xr.Dataset
    tables: dict[str, pd.DataFrame]
    provenance: dict[str, Any]

    def patterns(self) -> xr.Dataset:
        """The patterns with their coefficients; read when asked for, they are large."""
        return read_netcdf(self.path / PATTERNS)


def read_folder(path: str | os.PathLike[str]) -> Folder:
    """Read a folder that a study left.

    Raises
    ------
    FolderError
        If it is not the folder of a study.
    DamagedFileError
        If a file in it cannot be read.
    """
    folder = Path(path)
    if not folder.is_dir():
        raise FolderError(f"{folder}: there is no such folder. Give the folder that a study left.")
    wanted = [PROVENANCE, SITES, LEDGER, *(f"{TABLES}/{name}.csv" for name in TABLE_NAMES)]
    missing = [name for name in wanted if not (folder / name).is_file()]
    if missing:
        raise FolderError(f"{folder}: is not the folder of a study, it lacks {missing[0]}. Run the study again.")
    tables = {name: read_plain_csv(folder / TABLES / f"{name}.csv", numeric=NUMBERS) for name in TABLE_NAMES}
    about = json_content(folder / PROVENANCE)
    if not isinstance(about, dict) or "choices" not in about:
        raise DamagedFileError(f"{folder / PROVENANCE}: is not what a study writes. Run the study again.")
    return Folder(folder, read_netcdf(folder / SITES), read_netcdf(folder / LEDGER), tables, about)
