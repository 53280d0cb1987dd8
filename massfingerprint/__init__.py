"""From mass records in gigatonnes to local sea level.

Public names are loaded on first use, so that ``import massfingerprint`` costs next to nothing.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from massfingerprint.earth.frames import in_frame
    from massfingerprint.earth.love import love_numbers
    from massfingerprint.files.netcdf import write_netcdf
    from massfingerprint.load.ocean import ocean_fraction
    from massfingerprint.load.regions import disc, read_regions, regions
    from massfingerprint.load.spread import spread_mass
    from massfingerprint.options import set_options
    from massfingerprint.sealevel.fingerprints import solve_fingerprints
    from massfingerprint.sealevel.sites import at_sites
    from massfingerprint.sealevel.solver import prepare_solver
    from massfingerprint.sphere.points import read_sites

__version__ = "0.1.0"

_HOMES = {
    "at_sites": "sealevel.sites",
    "disc": "load.regions",
    "in_frame": "earth.frames",
    "love_numbers": "earth.love",
    "ocean_fraction": "load.ocean",
    "prepare_solver": "sealevel.solver",
    "read_regions": "load.regions",
    "read_sites": "sphere.points",
    "regions": "load.regions",
    "set_options": "options",
    "solve_fingerprints": "sealevel.fingerprints",
    "spread_mass": "load.spread",
    "write_netcdf": "files.netcdf",
}

__all__ = [
    "at_sites",
    "disc",
    "in_frame",
    "love_numbers",
    "ocean_fraction",
    "prepare_solver",
    "read_regions",
    "read_sites",
    "regions",
    "set_options",
    "solve_fingerprints",
    "spread_mass",
    "write_netcdf",
]


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'massfingerprint' has no attribute {name!r}")
    return getattr(import_module(f"massfingerprint.{_HOMES[name]}"), name)


def __dir__() -> list[str]:
    return sorted([*globals(), *__all__])
