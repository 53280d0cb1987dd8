"""Sea level of an ocean model at a coast and as a load. All fields are invented."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import massfingerprint as mf
from massfingerprint.coast.dynamic import (
    distances_from,
    load_of_bottom_pressure,
    ratio_to_barystatic,
    sterodynamic,
    values_at_sites,
)
from massfingerprint.errors import GridError, InputError, SiteError, UnitsError
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import grid_of

TIMES = np.array(["2001-01-16", "2001-02-15"], dtype="datetime64[ns]")


@pytest.fixture(scope="module")
def ocean():
    return mf.ocean_fraction(5.0)


@pytest.fixture(scope="module")
def dynamic(ocean):
    """Metres (time, lat, lon) where a cell is mostly sea: a slope towards the poles that doubles, and a level of 0.3."""
    slope = np.sin(np.deg2rad(ocean["lat"])) ** 2 * (1.0 + 0.2 * np.cos(np.deg2rad(ocean["lon"])))
    field = xr.DataArray([1.0, 2.0], dims="time", coords={"time": TIMES}) * slope + 0.3
    return field.where(ocean >= 0.5).transpose("time", "lat", "lon").assign_attrs(units="m")


def rise(values=(5.0, 7.0), unit="mm"):
    return xr.DataArray(np.array(values), dims="time", coords={"time": TIMES}, attrs={"units": unit})


def over_ocean(field, share):
    """Plain weighted mean, cell by cell."""
    weights = np.where(np.isfinite(field), share, 0.0) * grid_of(share).quadrature_weights
    return np.nansum(np.where(np.isfinite(field), field, 0.0) * weights, axis=(-2, -1)) / weights.sum(axis=(-2, -1))


def test_the_ocean_mean_of_sterodynamic_is_the_thermosteric_rise(dynamic, ocean):
    for given in (ocean, None):
        found = sterodynamic(dynamic, rise(), ocean=given)
        share = xr.ones_like(ocean) if given is None else ocean
        np.testing.assert_allclose(over_ocean(found["sterodynamic"].values, share), [5.0, 7.0], rtol=1e-12)
        np.testing.assert_allclose(found["removed_mean"], 1e3 * over_ocean(dynamic.values, share), rtol=1e-12)
        differences = (found["sterodynamic"] - 1e3 * dynamic).max(("lat", "lon")) - rise() + found["removed_mean"]
        np.testing.assert_allclose(differences, 0.0, atol=1e-9)
        assert found["sterodynamic"].attrs["units"] == "mm"


def test_the_mean_takes_the_weights_of_the_grid_not_plain_cells(dynamic, ocean):
    """A field that is 1 poleward of 60 degrees: plain cells count it far too much."""
    polar = xr.where(abs(dynamic["lat"]) > 60.0, 1.0, 0.0) + 0.0 * dynamic
    found = sterodynamic(polar.transpose("time", "lat", "lon").assign_attrs(units="mm"), rise(), ocean=ocean)
    assert float(found["removed_mean"][0]) < 0.5 * float(polar.isel(time=0).mean())


def test_a_time_without_values_is_a_gap(dynamic):
    holed = dynamic.copy(deep=True)
    holed[0] = np.nan
    found = sterodynamic(holed, rise())
    assert np.isnan(found["removed_mean"].values).tolist() == [True, False]
    whole = sterodynamic(dynamic, rise())
    np.testing.assert_array_equal(found["sterodynamic"][1], whole["sterodynamic"][1])


def test_sites_need_their_mean_removed_before(dynamic):
    series = xr.DataArray(
        [[0.01, np.nan], [0.02, 0.04]], dims=("time", "site"), coords={"time": TIMES, "site": ["a", "b"]}
    ).assign_attrs(units="m")
    found = sterodynamic(series, rise((0.5, 0.7), "cm"), mean_removed=True)
    np.testing.assert_allclose(found["sterodynamic"], [[15.0, np.nan], [27.0, 47.0]], rtol=1e-12)
    assert "removed_mean" not in found
    for field, removed in ((series, False), (dynamic, True)):
        with pytest.raises(InputError, match="mean_removed: must be True for sites"):
            sterodynamic(field, rise(), mean_removed=removed)


@pytest.mark.parametrize(
    ("change", "world", "error", "words"),
    [
        (lambda d: d.assign_attrs(units="K"), rise(), UnitsError, "dynamic: units must be 'mm'"),
        (lambda d: d, rise(unit="Pa"), UnitsError, "global_thermosteric: units must be 'mm'"),
        (lambda d: d, rise().isel(time=[0]), InputError, "must have the times of dynamic"),
        (lambda d: d.isel(time=0), rise(), InputError, r"dynamic: must be a DataArray \(time, lat, lon\)"),
        (lambda d: d.isel(lat=slice(2, None)), rise(), GridError, "dynamic: lat must be"),
        (lambda d: d.fillna(np.inf), rise(), InputError, "got infinity"),
        (
            lambda d: d.where(d["time"] < TIMES[1], d.where(d["lat"] < 0.0)),
            rise(),
            InputError,
            "field 1 has .* would not compare",
        ),
        (lambda d: d * np.nan, rise(), InputError, "holds no value at all"),
    ],
)
def test_dynamic_fields_that_cannot_be_used_say_why(dynamic, change, world, error, words):
    with pytest.raises(error, match=words):
        sterodynamic(change(dynamic), world)


def test_an_ocean_of_other_cells_is_refused(dynamic, ocean):
    with pytest.raises(GridError, match="ocean: must have the cells of dynamic"):
        sterodynamic(dynamic, rise(), ocean=ocean[::-1])
    with pytest.raises(GridError, match="fractions must lie between 0 and 1"):
        sterodynamic(dynamic, rise(), ocean=100.0 * ocean)
    with pytest.raises(InputError, match="is 0 wherever dynamic has a value"):
        sterodynamic(dynamic, rise(), ocean=xr.where(np.isfinite(dynamic[0]), 0.0, 1.0))


def test_distances_are_great_circles():
    """A quarter of the sphere over the pole, a degree of the equator across the date line: 6371 km pi/2 and pi/180."""
    found = distances_from((0.0, 179.5), (np.array([90.0, 0.0, 0.0]), np.array([0.0, -179.5, 179.5])))
    np.testing.assert_allclose(found, [6371.0 * np.pi / 2.0, 6371.0 * np.pi / 180.0, 0.0], rtol=1e-12)


@pytest.fixture
def coast():
    """Half-degree cells (55.6 km) of a region, sea west of 1.25 E, two times, a hole at 0.25 N 0.25 W at the second."""
    lat, lon = np.arange(-1.75, 2.0, 0.5), np.arange(-1.75, 8.0, 0.5)
    field = xr.DataArray(
        10.0 * lat[:, None] + lon, dims=("lat", "lon"), coords={"lat": lat, "lon": lon}, attrs={"units": "mm"}
    )
    both = xr.concat([field, field + 100.0], pd.Index(TIMES, name="time")).where(field["lon"] < 1.25)
    both.loc[{"time": TIMES[1], "lat": 0.25, "lon": -0.25}] = np.nan
    return both.assign_attrs(units="mm")


def test_a_coast_is_the_mean_of_the_cells_around_or_the_nearest_one(coast):
    sites = pd.DataFrame({"site": ["open", "port", "far"], "lat": [0.0, 0.25, 0.25], "lon": [-1.0, 2.5, 7.0]})
    found = values_at_sites(coast, sites, radius_km=100.0)
    assert found["rule"].values.tolist() == ["mean within 100 km", "nearest cell", ""]
    assert found["reason"].values.tolist()[:2] == ["", ""]
    assert found["reason"].values[2].startswith("no cell with values within 300 km: the nearest is 695 km")
    assert found["cells"].values.tolist()[1:] == [1, 0]
    assert float(found["distance"][1]) == pytest.approx(1.75 * 111.195, rel=1e-4)
    np.testing.assert_allclose(found["value"].values[:, 1], [3.25, 103.25], rtol=1e-12)
    assert np.isnan(found["value"].values[:, 2]).all()
    # by hand: every sea cell within 100 km of 0 N 1 W except the one with a hole
    lat, lon = np.meshgrid(coast["lat"], coast["lon"], indexing="ij")
    near = (distances_from((0.0, -1.0), (lat, lon)) <= 100.0) & (lon < 1.25) & ~((lat == 0.25) & (lon == -0.25))
    area = np.cos(np.deg2rad(lat[near]))
    expected = (coast.values[0][near] * area).sum() / area.sum()
    assert int(found["cells"][0]) == near.sum()
    np.testing.assert_allclose(found["value"].values[:, 0], [expected, expected + 100.0], rtol=1e-12)
    assert found["value"].attrs["units"] == "mm"


def test_a_field_without_values_gives_reasons(coast):
    found = values_at_sites(coast * np.nan, pd.DataFrame({"site": ["a"], "lat": [0.0], "lon": [0.0]}))
    assert found["reason"].values.tolist() == ["no cell with values within 300 km: there is none"]
    assert np.isnan(found["value"]).all()
    assert found["value"].dims == ("time", "site")


def test_sites_and_radii_that_cannot_be_used_say_why(coast):
    sites = pd.DataFrame({"site": ["a"], "lat": [0.0], "lon": [0.0]})
    with pytest.raises(InputError, match="radius_km: must be a number of km, 0 to 300"):
        values_at_sites(coast, sites, radius_km=301.0)
    with pytest.raises(InputError, match=r"grid: must be a DataArray \(..., lat, lon\)"):
        values_at_sites(coast.rename(lat="y"), sites)
    with pytest.raises(SiteError, match="lat must lie between"):
        values_at_sites(coast, sites.assign(lat=99.0))


@pytest.fixture(scope="module")
def pressure(ocean):
    """Pa on the sea: 200 Pa more in the Arctic and half of it off everywhere, so some mass is left over."""
    field = xr.where(ocean["lat"] > 60.0, 200.0, -10.0) * xr.ones_like(ocean)
    return field.where(ocean > 0.0).assign_attrs(units="Pa")


def test_pressure_over_gravity_is_a_load(pressure, ocean):
    load = load_of_bottom_pressure(pressure)
    np.testing.assert_allclose(load.where(ocean > 0.0), pressure / 9.80665, rtol=1e-12)
    assert (load.values[ocean.values == 0.0] == 0.0).all()
    assert load.attrs["units"] == "kg m-2"
    hectopascals = load_of_bottom_pressure((pressure / 100.0).assign_attrs(units="hPa"))
    mass = load_of_bottom_pressure((pressure / 9.80665).assign_attrs(units="kg m-2"))
    np.testing.assert_allclose(hectopascals, load, rtol=1e-12)
    np.testing.assert_allclose(mass, load, rtol=1e-12)
    np.testing.assert_allclose(load_of_bottom_pressure(pressure, ocean=ocean), load * ocean, rtol=1e-12)


@pytest.mark.parametrize("with_ocean", [True, False])
def test_without_its_mean_a_load_carries_no_mass(pressure, ocean, with_ocean):
    load = load_of_bottom_pressure(pressure, ocean=ocean if with_ocean else None, zero_mean=True)
    weights = grid_of(load).quadrature_weights
    assert abs((load.values * weights).sum()) < 1e-12 * (abs(load.values) * weights).sum()
    with pytest.raises(InputError, match="ocean: must be passed with zero_mean"):
        load_of_bottom_pressure(pressure.fillna(0.0).assign_attrs(units="Pa"), zero_mean=True)


def test_a_load_without_mass_leaves_a_finite_pattern_whose_ocean_mean_is_zero(pressure, ocean, love):
    """Degree 32. The sea follows by millimetres (20 kg m-2 in the Arctic is 2 cm of water); its mean is 0 to rounding, and no
    ratio to a barystatic value that is not there is given."""
    prepared = mf.prepare_solver(ocean, love, max_degree=32)
    load = xr.concat(
        [load_of_bottom_pressure(pressure, ocean=ocean, zero_mean=zero) for zero in (True, False)],
        pd.Index([0, 1], name="case"),
    )
    everything = mf.solve_fingerprints(
        prepared,
        load,
        outputs=("relative_sea_level", "sea_surface", "geoid", "bedrock_up", "gravity_surface"),
        tolerance=1e-12,
    )
    for name, values in everything.data_vars.items():
        assert np.isfinite(values.values).all(), name
    levels = everything["relative_sea_level"]
    pair = _transform.complex_from_real(everything["relative_sea_level_coefficients"].values)
    means = np.array([_transform.inner_product(row, prepared.operator.ocean) for row in pair])
    means /= np.sqrt(4.0 * np.pi) * prepared.operator.ocean[0].real
    largest = float(abs(levels[0]).max())
    assert 1e-4 < largest < 2e-2
    assert abs(means[0]) < 1e-10 * largest
    ratio = ratio_to_barystatic(prepared, levels, load)
    assert np.isnan(ratio[0].values).all()
    assert np.isfinite(ratio[1].values).all()
    mass = (load[1].values * grid_of(load).quadrature_weights).sum() * 6.371e6**2
    np.testing.assert_allclose(means[1], -mass / (1000.0 * prepared.ocean_area), rtol=1e-9)
    np.testing.assert_allclose(ratio[1], levels[1] / means[1], rtol=1e-8)
    sites = pd.DataFrame({"site": ["Quay"], "lat": [52.0], "lon": [4.0]})
    at = mf.at_sites(everything, sites)["relative_sea_level"].assign_attrs(units="m")
    assert np.isnan(ratio_to_barystatic(prepared, at, load)[0].values).all()


@pytest.mark.parametrize(
    ("change", "error", "words"),
    [
        (lambda p: p.assign_attrs(units="m"), UnitsError, "field: units must be 'kg m-2' or 'Pa'"),
        (lambda p: p.drop_attrs(), UnitsError, "field: has no units"),
        (
            lambda p: (p + 101325.0).assign_attrs(units="Pa"),
            InputError,
            "field: reaches 1015 hPa, more than an anomaly",
        ),
        (lambda p: p.isel(lat=slice(1, None)), GridError, "field: lat must be"),
        (lambda p: (p * np.nan).assign_attrs(units="Pa"), InputError, "field: holds no value at all"),
        (lambda p: p.values, InputError, "field: must be a DataArray"),
        (
            lambda p: xr.concat([p, p * np.nan], "time").assign_attrs(units="Pa"),
            InputError,
            "field: field 1 has no value",
        ),
    ],
)
def test_pressures_that_cannot_be_used_say_why(pressure, change, error, words):
    with pytest.raises(error, match=words):
        load_of_bottom_pressure(change(pressure))
