"""Options for a mass record, and the record they give: read, no ice counted twice, its sources correlated as told."""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import click
import xarray as xr

from massfingerprint.mass.correlation import read_correlation, with_correlation
from massfingerprint.mass.ledger import read_ledger
from massfingerprint.mass.scope import check_scope, corrections, ledger_scopes

# options that say something of a record, by their names in a command
OF_A_RECORD = ("error_model", "correlation", "drop")


def record_options(command: Callable[..., Any]) -> Callable[..., Any]:
    """Decorator that adds --ledger, --quantity, --error-model, --correlation, --drop and --seasonal."""
    options = (
        click.option(
            "--ledger",
            "ledger_file",
            type=click.Path(path_type=Path),
            help="Mass record, CSV or NetCDF, as of massfingerprint ledger.",
        ),
        click.option(
            "--quantity",
            default="cumulative",
            show_default=True,
            type=click.Choice(["cumulative", "rate"]),
            help="What the record holds.",
        ),
        click.option("--error-model", help="independent, systematic or random_walk, if the record does not say."),
        click.option("--correlation", type=click.Path(path_type=Path), help="CSV of correlations between sources."),
        click.option("--drop", multiple=True, help="Leave out this source of the record."),
        click.option("--seasonal", is_flag=True, help="Fit a yearly cycle beside the rates."),
    )
    for option in reversed(options):
        command = option(command)
    return command


def record_of(options: dict[str, Any]) -> xr.Dataset:
    """Ledger of the file that ``record_options`` named.

    Raises
    ------
    InputError, MissingFileError, TableError
        If the record cannot be used, or counts ice twice.
    """
    ledger = read_ledger(options["ledger_file"], quantity=options["quantity"], error_model=options["error_model"])
    corrections(ledger)
    names = [str(name) for name in ledger["source"].values]
    kept = check_scope(names, scopes=ledger_scopes(ledger), drop=options["drop"])
    ledger = ledger.isel(source=[names.index(name) for name in kept])
    table = options["correlation"]
    return ledger if table is None else with_correlation(ledger, read_correlation(table))
