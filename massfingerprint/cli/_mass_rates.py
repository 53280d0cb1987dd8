"""Options for constant mass rates, from a file or from a published set, and their errors."""

from collections.abc import Callable
from functools import wraps
from pathlib import Path
from typing import Any

import click
import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfingerprint.errors import InputError
from massfingerprint.files.tables import read_rates
from massfingerprint.load.regions import region_names
from massfingerprint.mass.published import published_rates
from massfingerprint.mass.scope import check_scope


def mass_rates_options(command: Callable[..., Any]) -> Callable[..., Any]:
    """Decorator that adds --rates and --published and passes the table to the command as ``rates``."""

    @click.option(
        "--rates", "rates_file", type=click.Path(path_type=Path), help="CSV of mass rates, Gt/yr, negative = loss."
    )
    @click.option("--published", "published_set", help="Use this set of published rates instead, e.g. 'otosaka 2023'.")
    @wraps(command)
    def with_rates(*arguments: Any, rates_file: Path | None, published_set: str | None, **options: Any) -> Any:
        return command(*arguments, rates=mass_rates(rates_file, published_set), **options)

    return with_rates


def mass_rates(rates_file: Path | None, published_set: str | None) -> pd.DataFrame:
    """Mass rates from a file or a published set, no ice counted twice."""
    if (rates_file is None) == (published_set is None):
        raise InputError(
            "rates: give either --rates FILE or --published SET. massfingerprint ledger published lists the sets."
        )
    rates = read_rates(rates_file) if rates_file is not None else published_rates(str(published_set))
    unknown = [source for source in rates["source"] if source not in region_names()]
    if published_set is not None and unknown:
        raise InputError(
            f"set {published_set!r}: {unknown[0]!r} has no outline to spread mass over. Choose a set by region."
        )
    scopes = {source: scope for source, scope in zip(rates["source"], rates["scope"], strict=True) if scope}
    check_scope(list(rates["source"]), scopes=scopes)
    return rates


def spread(rates: pd.DataFrame, per_gigatonne: NDArray[np.float64]) -> NDArray[np.float64]:
    """Sigma (n,) of the sum over sources of rate times ``per_gigatonne`` (source, n): shared within an error group."""
    parts = per_gigatonne * rates["mass_rate_sigma"].to_numpy()[:, None]
    groups = rates["error_group"].to_numpy()
    together = [parts[groups == group].sum(axis=0) for group in dict.fromkeys(groups)]
    return np.sqrt((np.stack(together) ** 2).sum(axis=0))
