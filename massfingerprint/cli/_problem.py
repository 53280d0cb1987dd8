"""Options that every command with a solver shares: the Earth, the degree of the solution, the grid."""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property, wraps
from typing import Any

import click
import xarray as xr

from massfingerprint.earth.choice import earth_love_numbers
from massfingerprint.load.ocean import ocean_fraction
from massfingerprint.sealevel.solver import Prepared, prepare_solver


@dataclass(frozen=True)
class Problem:
    """The choices, and what is made of them when it is first needed."""

    earth: str
    max_degree: int
    spacing: float

    @cached_property
    def ocean(self) -> xr.DataArray:
        """Ocean fraction (lat, lon) on the chosen grid."""
        return ocean_fraction(self.spacing)

    def prepared(self, *, least_degree: int = 0, max_degree: int | None = None) -> Prepared:
        """Sea-level problem of the chosen Earth; ``least_degree`` of its Love numbers, ``max_degree`` instead of the chosen one."""
        degree = self.max_degree if max_degree is None else max_degree
        love = earth_love_numbers(self.earth, max_degree=max(degree, least_degree))
        return prepare_solver(self.ocean, love, max_degree=degree)


def problem_options(command: Callable[..., Any]) -> Callable[..., Any]:
    """Decorator that adds the options and passes them to the command as one ``problem``."""

    @click.option("--earth", default="prem", show_default=True, help="Earth; massfingerprint earth list names them.")
    @click.option(
        "--max-degree",
        default=512,
        show_default=True,
        type=click.IntRange(2, 4096),
        help="Spherical-harmonic degree of the solution.",
    )
    @click.option(
        "--spacing", default=0.25, show_default=True, type=float, help="Grid spacing in degrees; must divide 180."
    )
    @wraps(command)
    def with_problem(*arguments: Any, earth: str, max_degree: int, spacing: float, **options: Any) -> Any:
        return command(*arguments, problem=Problem(earth, max_degree, spacing), **options)

    return with_problem
