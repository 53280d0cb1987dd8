"""Steric height on a climatology of the world ocean: against another library, a textbook contrast, the efficiency of heat.

Data: tests/published/levitus_1982_extract.nc, every tenth degree of the annual means of Levitus 1982, Climatological Atlas of the
World Ocean, NOAA Professional Paper 13 (public domain), packed to a thousandth of a degree and of salinity. Taken from
levitus_climatology.cdf of the Debian package ferret-datasets 7.6.0-5, sha256
6cf0c43e2b5b790a25547eb90194c0468ab508a40636c1e67b42e892c3b7596b.
"""

import hashlib
from pathlib import Path

import gsw
import numpy as np
import pytest
import xarray as xr

from massfingerprint.coast.steric import EXPANSION_EFFICIENCY, steric_height

EXTRACT = Path(__file__).parent.parent / "published" / "levitus_1982_extract.nc"
SHA256 = "00443794f022b85b535f4d1d1560f644030de2773dea8971eee3eb7b02cecb7e"


@pytest.fixture(scope="module")
def ocean():
    assert hashlib.sha256(EXTRACT.read_bytes()).hexdigest() == SHA256
    return xr.load_dataset(EXTRACT)


def weighted(values, lat, where):
    held = where & np.isfinite(values)
    weights = np.cos(np.deg2rad(lat[held]))
    return float(values[held] @ weights / weights.sum())


def test_differences_between_profiles_are_those_of_dynamic_height(ocean):
    """gsw's dynamic height over its constant of 9.7963 m s-2, 0 to 1000 dbar: it interpolates otherwise and ends 9 m higher up.

    335 profiles spread over 2.9 m; 1 % of their standard deviation in the mean, 3 % for the worst.
    """
    ours = steric_height(ocean, to_depth=1000.0)["total"].values
    rows = np.flatnonzero(np.isfinite(ours))
    theirs = np.array([dynamic_height(ocean.isel(profile=row)) for row in rows])
    left = (ours[rows] - ours[rows].mean()) - (theirs - theirs.mean())
    spread = ours[rows].std()
    assert rows.size == 335
    assert np.sqrt((left**2).mean()) < 0.01 * spread
    assert np.abs(left).max() < 0.03 * spread


def dynamic_height(one):
    held = np.isfinite(one["temperature"].values)
    lat, lon = float(one["lat"]), float(one["lon"])
    pressure = gsw.p_from_z(-one["depth"].values[held], lat)
    salinity = gsw.SA_from_SP(one["salinity"].values[held], pressure, lon, lat)
    temperature = gsw.CT_from_t(salinity, one["temperature"].values[held], pressure)
    return 1e3 * gsw.geo_strf_dyn_height(salinity, temperature, pressure, p_ref=1000.0)[0] / 9.7963


def test_the_pacific_stands_higher_than_the_atlantic(ocean):
    """Some 0.4 m above 1000 dbar (Reid 1961, Deep-Sea Res. 7:265, from memory, for all latitudes; here 40 S to 40 N)."""
    total, lat, lon = steric_height(ocean, to_depth=1000.0)["total"].values, ocean["lat"].values, ocean["lon"].values
    west_of_america = (lon > 130.0) | (lon < -100.0) | ((lon < -80.0) & (lat < 0.0))
    low = np.abs(lat) < 40.0
    pacific, atlantic = low & west_of_america, low & (lon > -60.0) & (lon < 12.0)
    contrast = weighted(total, lat, pacific) - weighted(total, lat, atlantic)
    assert contrast == pytest.approx(400.0, abs=120.0)


def test_heat_makes_as_much_height_as_the_assessments_say(ocean):
    """0.1 K in the upper 700 m of every profile: metres per YJ over the ocean's area, AR6 0.121.

    Where the heat goes matters: alpha is 1e-4 per K in cold water and 3e-4 in warm. 25 %."""
    warm = ocean.copy(deep=True)
    upper = (ocean["depth"] <= 700.0).values
    warm["temperature"][:, upper] += 0.1
    reached = np.isfinite(ocean["temperature"].sel(depth=1000.0).values)
    both = [data.isel(profile=reached) for data in (ocean, warm)]
    lat = both[0]["lat"].values
    heights = [steric_height(data, to_depth=700.0, reference=both[0].isel(profile=0)) for data in both]
    rise = weighted((heights[1]["total"] - heights[0]["total"]).values, lat, np.ones(lat.size, dtype=bool)) * 1e-3
    # 3992 J kg-1 K-1 of TEOS-10; 1027 kg m-3: the upper 700 m to 0.3 %, common practice
    joules = 0.1 * 700.0 * 3992.0 * 1027.0 * 361.84e12
    assert rise / (joules * 1e-24) == pytest.approx(EXPANSION_EFFICIENCY.value, rel=0.25)
