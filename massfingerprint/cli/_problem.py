"""Options that every command with a solver shares: the Earth, the degree of the solution, the grid."""

from collections.abc import Callable
from dataclasses import dataclass, field
from functools import cached_property, wraps
from typing import Any

import click
import xarray as xr

from massfingerprint.earth.choice import ChosenEarth
from massfingerprint.earth.frames import FRAMES
from massfingerprint.load.ocean import ocean_fraction
from massfingerprint.sealevel.solver import Prepared, prepare_solver


@dataclass(frozen=True)
class Problem:
    """The choices, and what is made of them when it is first needed."""

    earth: ChosenEarth = field(default_factory=ChosenEarth)
    max_degree: int = 512
    spacing: float = 0.25

    @cached_property
    def ocean(self) -> xr.DataArray:
        """Ocean fraction (lat, lon) on the chosen grid."""
        return ocean_fraction(self.spacing)

    def prepared(self, *, least_degree: int = 0, max_degree: int | None = None) -> Prepared:
        """Sea-level problem of the chosen Earth; ``least_degree`` of its Love numbers, ``max_degree`` instead of the chosen one."""
        degree = self.max_degree if max_degree is None else max_degree
        love = self.earth.love_numbers(max_degree=max(degree, least_degree))
        return prepare_solver(self.ocean, love, max_degree=degree)


def earth_options(command: Callable[..., Any]) -> Callable[..., Any]:
    """Decorator that turns a word ``earth`` (an argument or an option), --period and --love-frame into one ``ChosenEarth``."""

    @click.option(
        "--period", type=float, help="Seconds, of an Earth with quality factors; default: as it is described."
    )
    @click.option("--love-frame", help=f"Frame of degree 1 in a file of Love numbers: {', '.join(FRAMES)}.")
    @wraps(command)
    def with_earth(*arguments: Any, earth: str, period: float | None, love_frame: str | None, **options: Any) -> Any:
        return command(*arguments, earth=ChosenEarth(earth, period, love_frame), **options)

    return with_earth


def problem_options(command: Callable[..., Any]) -> Callable[..., Any]:
    """Decorator that adds the options and passes them to the command as one ``problem``."""

    @click.option(
        "--earth",
        default="prem",
        show_default=True,
        help="A built-in Earth (massfingerprint earth list), or a CSV of its layers or Love numbers.",
    )
    @earth_options
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
    def with_problem(*arguments: Any, earth: ChosenEarth, max_degree: int, spacing: float, **options: Any) -> Any:
        return command(*arguments, problem=Problem(earth, max_degree, spacing), **options)

    return with_problem
