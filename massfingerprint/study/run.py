"""The chain: mass, regions, patterns, sites, series; one study file in, a folder of answers out."""

import os
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path

import pandas as pd
import xarray as xr

from massfingerprint.mass.barystatic import barystatic
from massfingerprint.mass.summary import summarise
from massfingerprint.sealevel.series import sea_level_rates, sea_level_series
from massfingerprint.study.inputs import Inputs, read_study
from massfingerprint.study.patterns import Progress, prepare, silent, site_patterns, solve_patterns
from massfingerprint.study.recipe import Recipe

KEPT = "massfingerprint-cache"


@dataclass(frozen=True)
class Study:
    """All results of one study.

    Parameters
    ----------
    recipe : Recipe
        What was asked.
    inputs : Inputs
        Ledger, outlines, sites, windows.
    patterns : Dataset (source, lat, lon)
        mm Gt-1 per gigatonne added, with coefficients.
    at_sites : Dataset (source, site)
        The same at the sites, with truncation, distance and range within each source.
    series : Dataset (time, source, site)
        mm since the ledger's reference epoch, positive = rise or uplift, with totals and 1 sigma.
    rates : Dataset (window, source, site)
        mm yr-1 over each window, with totals and 1 sigma.
    global_mean : Dataset (source, time)
        Barystatic sea level in mm.
    summary : DataFrame
        Change and rate per window and source, from ``summarise``.
    account : dict
        ``seconds`` per stage, ``reused`` patterns, complaints about ``damaged`` kept ones.
    folder : Path or None
        Where it was written.
    """

    recipe: Recipe
    inputs: Inputs = field(repr=False)
    patterns: xr.Dataset = field(repr=False)
    at_sites: xr.Dataset = field(repr=False)
    series: xr.Dataset = field(repr=False)
    rates: xr.Dataset = field(repr=False)
    global_mean: xr.Dataset = field(repr=False)
    summary: pd.DataFrame = field(repr=False)
    account: dict
    folder: Path | None = None


class Clock:
    """Seconds spent in each named stage."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = {}

    @contextmanager
    def stage(self, name: str) -> Iterator[None]:
        """Count the time inside to a stage."""
        start = time.perf_counter()
        try:
            yield
        finally:
            self.seconds[name] = self.seconds.get(name, 0.0) + time.perf_counter() - start


def kept_folder(recipe: Recipe) -> Path:
    """Folder beside the output in which solved patterns are kept by content."""
    return recipe.output.folder.parent / KEPT


def compute_study(
    recipe: Recipe,
    inputs: Inputs,
    *,
    kept: str | os.PathLike[str] | None = None,
    progress: Progress = silent,
    clock: Clock | None = None,
) -> Study:
    """Run the chain on inputs that are sound; writes nothing but kept patterns.

    Parameters
    ----------
    recipe, inputs
        From ``read_study``.
    kept : path, optional
        Folder of solved patterns; None to keep and reuse nothing.
    progress : callable
        Told (stage, done, total).
    clock : Clock, optional
        Counts the time per stage.

    Returns
    -------
    Study

    Raises
    ------
    MassFingerprintError
        If an outline cannot carry mass or a solve fails.
    """
    clock = clock or Clock()
    with clock.stage("preparation"):
        problem = prepare(recipe)
    with clock.stage("patterns"):
        solved = solve_patterns(recipe, problem, inputs.outlines, kept=kept, progress=progress)
    with clock.stage("sites"):
        progress("sites", 0, 1)
        here = site_patterns(recipe, problem, solved, inputs)
        progress("sites", 1, 1)
    with clock.stage("series and rates"):
        progress("series", 0, 1)
        ledger, windows = inputs.ledger, inputs.windows
        series = sea_level_series(here, inputs.since_zero)
        rates = sea_level_rates(here, ledger, windows=windows, seasonal=recipe.rates.seasonal)
        factor = problem.prepared.gigatonnes_per_millimetre
        interval, seasonal = recipe.output.interval, recipe.rates.seasonal
        summary = summarise(ledger, windows=windows, interval=interval, gt_per_mm=factor, seasonal=seasonal)
        mean = barystatic(inputs.since_zero, gt_per_mm=factor)
        progress("series", 1, 1)
    account = {"seconds": clock.seconds, "reused": solved.reused, "damaged": list(solved.damaged)}
    return Study(recipe, inputs, solved.patterns, here, series, rates, mean, summary, account)


def run_study(
    path_or_recipe: str | os.PathLike[str] | Recipe,
    *,
    write: bool = True,
    replace: bool = False,
    progress: Progress = silent,
) -> Study:
    """Run a study: from one file to global mean, patterns, coasts, series, and a folder of answers.

    Parameters
    ----------
    path_or_recipe : path or Recipe
        The study file (TOML), or the same made in Python.
    write : bool
        Leave the folder ``output.folder`` (by default ``out`` beside the study file) and keep solved patterns beside it;
        False computes only.
    replace : bool
        Whether a folder that is there already may be replaced, once the new one is complete.
    progress : callable
        Told (stage, done, total) as work goes on.

    Returns
    -------
    Study
        All results; ``folder`` says where they were written.

    Raises
    ------
    StudyError
        With every problem of the study file and what it names, one line each.
    FolderError
        If the folder is there already, in use by another run, or cannot be written; the old one is kept.
    MassFingerprintError
        If a source cannot be spread or a solve fails.
    """
    clock = Clock()
    with clock.stage("reading"):
        recipe, inputs = read_study(path_or_recipe)
    if not write:
        return compute_study(recipe, inputs, progress=progress, clock=clock)
    from massfingerprint.study.folder import write_study  # noqa: PLC0415  figures only where they are drawn

    return write_study(recipe, inputs, replace=replace, progress=progress, clock=clock)
