"""From mass records in gigatonnes to local sea level.

Public names are loaded on first use, so that ``import massfingerprint`` costs next to nothing.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from massfingerprint.coast.budget import budget
    from massfingerprint.coast.closure import closure
    from massfingerprint.coast.components import component, mass_components, rate_component
    from massfingerprint.coast.gauge_corrections import inverse_barometer, nodal_tide
    from massfingerprint.coast.gauge_trend import gauge_trend
    from massfingerprint.coast.gauges import read_gauge, read_gauges
    from massfingerprint.coast.land_motion import Uplift, residual_land_motion, whole_land_motion
    from massfingerprint.coast.observers import View, observed_means
    from massfingerprint.coast.station_rates import station_rates, station_series
    from massfingerprint.coast.stations import read_station_series, read_stations
    from massfingerprint.coast.trend_model import TrendModel
    from massfingerprint.earth.frames import in_frame
    from massfingerprint.earth.love import compute_love_numbers, extend_love_numbers, love_numbers
    from massfingerprint.earth.models import earth_model
    from massfingerprint.earth.own_love import read_love_numbers
    from massfingerprint.earth.rotation import RotationConstants
    from massfingerprint.earth.table import read_earth_model
    from massfingerprint.files.netcdf import write_netcdf
    from massfingerprint.load.latitudes import geocentric_latitude
    from massfingerprint.load.modes import load_modes
    from massfingerprint.load.ocean import ocean_fraction
    from massfingerprint.load.regions import disc, read_regions, region_names, regions
    from massfingerprint.load.retained import retain_on_land
    from massfingerprint.load.spread import spread_mass
    from massfingerprint.mass.barystatic import barystatic
    from massfingerprint.mass.combine import align, rebase, sum_sources
    from massfingerprint.mass.correlation import read_correlation, with_correlation
    from massfingerprint.mass.covariance import covariance
    from massfingerprint.mass.ledger import read_ledger
    from massfingerprint.mass.published import published_rates, published_sets
    from massfingerprint.mass.rates import rates
    from massfingerprint.mass.scope import check_scope
    from massfingerprint.options import set_options
    from massfingerprint.sealevel.choices import choice_table
    from massfingerprint.sealevel.coasts import coast_values
    from massfingerprint.sealevel.fingerprints import solve_fingerprints
    from massfingerprint.sealevel.kernels import apply_kernels, site_kernels
    from massfingerprint.sealevel.nearfield import add_near_field, near_field
    from massfingerprint.sealevel.observed_pole import observed_drift
    from massfingerprint.sealevel.series import sea_level_rates, sea_level_series
    from massfingerprint.sealevel.sites import at_sites
    from massfingerprint.sealevel.solver import prepare_solver
    from massfingerprint.sealevel.streamed import write_fingerprints
    from massfingerprint.sealevel.whole_earth import earth_numbers
    from massfingerprint.sealevel.within import range_within
    from massfingerprint.sphere.points import read_sites
    from massfingerprint.study.run import run_study

__version__ = "0.1.0"

_HOMES = {
    "add_near_field": "sealevel.nearfield",
    "align": "mass.combine",
    "apply_kernels": "sealevel.kernels",
    "at_sites": "sealevel.sites",
    "barystatic": "mass.barystatic",
    "budget": "coast.budget",
    "check_scope": "mass.scope",
    "choice_table": "sealevel.choices",
    "closure": "coast.closure",
    "coast_values": "sealevel.coasts",
    "component": "coast.components",
    "compute_love_numbers": "earth.love",
    "covariance": "mass.covariance",
    "disc": "load.regions",
    "earth_model": "earth.models",
    "earth_numbers": "sealevel.whole_earth",
    "extend_love_numbers": "earth.love",
    "gauge_trend": "coast.gauge_trend",
    "geocentric_latitude": "load.latitudes",
    "in_frame": "earth.frames",
    "inverse_barometer": "coast.gauge_corrections",
    "load_modes": "load.modes",
    "love_numbers": "earth.love",
    "mass_components": "coast.components",
    "near_field": "sealevel.nearfield",
    "nodal_tide": "coast.gauge_corrections",
    "observed_drift": "sealevel.observed_pole",
    "observed_means": "coast.observers",
    "ocean_fraction": "load.ocean",
    "prepare_solver": "sealevel.solver",
    "published_rates": "mass.published",
    "published_sets": "mass.published",
    "range_within": "sealevel.within",
    "rate_component": "coast.components",
    "rates": "mass.rates",
    "read_correlation": "mass.correlation",
    "read_earth_model": "earth.table",
    "read_gauge": "coast.gauges",
    "read_gauges": "coast.gauges",
    "read_ledger": "mass.ledger",
    "read_love_numbers": "earth.own_love",
    "read_regions": "load.regions",
    "read_sites": "sphere.points",
    "read_station_series": "coast.stations",
    "read_stations": "coast.stations",
    "rebase": "mass.combine",
    "region_names": "load.regions",
    "regions": "load.regions",
    "residual_land_motion": "coast.land_motion",
    "retain_on_land": "load.retained",
    "RotationConstants": "earth.rotation",
    "run_study": "study.run",
    "sea_level_rates": "sealevel.series",
    "sea_level_series": "sealevel.series",
    "set_options": "options",
    "site_kernels": "sealevel.kernels",
    "solve_fingerprints": "sealevel.fingerprints",
    "spread_mass": "load.spread",
    "station_rates": "coast.station_rates",
    "station_series": "coast.station_rates",
    "sum_sources": "mass.combine",
    "TrendModel": "coast.trend_model",
    "Uplift": "coast.land_motion",
    "View": "coast.observers",
    "whole_land_motion": "coast.land_motion",
    "with_correlation": "mass.correlation",
    "write_fingerprints": "sealevel.streamed",
    "write_netcdf": "files.netcdf",
}

__all__ = [
    "RotationConstants",
    "TrendModel",
    "Uplift",
    "View",
    "add_near_field",
    "align",
    "apply_kernels",
    "at_sites",
    "barystatic",
    "budget",
    "check_scope",
    "choice_table",
    "closure",
    "coast_values",
    "component",
    "compute_love_numbers",
    "covariance",
    "disc",
    "earth_model",
    "earth_numbers",
    "extend_love_numbers",
    "gauge_trend",
    "geocentric_latitude",
    "in_frame",
    "inverse_barometer",
    "load_modes",
    "love_numbers",
    "mass_components",
    "near_field",
    "nodal_tide",
    "observed_drift",
    "observed_means",
    "ocean_fraction",
    "prepare_solver",
    "published_rates",
    "published_sets",
    "range_within",
    "rate_component",
    "rates",
    "read_correlation",
    "read_earth_model",
    "read_gauge",
    "read_gauges",
    "read_ledger",
    "read_love_numbers",
    "read_regions",
    "read_sites",
    "read_station_series",
    "read_stations",
    "rebase",
    "region_names",
    "regions",
    "residual_land_motion",
    "retain_on_land",
    "run_study",
    "sea_level_rates",
    "sea_level_series",
    "set_options",
    "site_kernels",
    "solve_fingerprints",
    "spread_mass",
    "station_rates",
    "station_series",
    "sum_sources",
    "whole_land_motion",
    "with_correlation",
    "write_fingerprints",
    "write_netcdf",
]


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'massfingerprint' has no attribute {name!r}")
    return getattr(import_module(f"massfingerprint.{_HOMES[name]}"), name)


def __dir__() -> list[str]:
    return sorted([*globals(), *__all__])
