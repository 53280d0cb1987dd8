"""Kernels: the equation turned round gives the forward answer at a site, for every field and frame."""

import numpy as np
import pandas as pd
import pytest
import xarray as xr

import massfingerprint as mf
from massfingerprint.errors import GridError, InputError, NotConvergedError, SiteError, UnitsError
from massfingerprint.sealevel import _equation
from massfingerprint.sealevel.kernels import KERNEL_FIELDS
from massfingerprint.sphere.grids import regular_grid
from massfingerprint.sphere.harmonics import analyse, synthesise

SITES = pd.DataFrame(
    {"site": ["Hudson", "Cape", "ice edge"], "lat": [40.70, -33.91, 69.2], "lon": [-74.01, 18.43, 308.9]}
)
DEGREE = 64


@pytest.fixture(scope="module")
def problem(love):
    ocean = mf.ocean_fraction(1.0)
    return mf.prepare_solver(ocean, love, max_degree=DEGREE), mf.spread_mass(
        mf.regions("greenland", "glaciers_01"), ocean
    )


def forward(prepared, load, frame="CM"):
    patterns = mf.solve_fingerprints(prepared, load, outputs=KERNEL_FIELDS, reference_frame=frame, tolerance=1e-12)
    return mf.at_sites(patterns, SITES)


@pytest.mark.parametrize("frame", ["CM", "CF"])
def test_kernels_give_what_the_forward_solve_gives_at_the_sites(problem, frame):
    """1e-8 of the largest value, the tolerance of both solves; the ice edge is where values are largest."""
    prepared, load = problem
    kernels = mf.site_kernels(prepared, SITES, outputs=KERNEL_FIELDS, reference_frame=frame)
    found, expected = mf.apply_kernels(kernels, load), forward(prepared, load, frame)
    for name in KERNEL_FIELDS:
        want = expected[name].transpose("source", "site")
        assert found[name].dims == ("source", "site")
        assert found[name].attrs["units"] == "mm Gt-1"
        np.testing.assert_allclose(found[name].values, want.values, rtol=0, atol=1e-8 * float(np.abs(want).max()))
    np.testing.assert_allclose(
        found["relative_sea_level"].values, (found["sea_surface"] - found["bedrock_up"]).values, rtol=0, atol=1e-12
    )


def test_tapered_kernels_give_the_tapered_values(problem):
    """The taper sits at the site, in the kernel as in at_sites: 1e-8 of the largest value."""
    prepared, load = problem
    kernels = mf.site_kernels(prepared, SITES, outputs=KERNEL_FIELDS, tapered=True)
    found, expected = mf.apply_kernels(kernels, load), forward(prepared, load)
    for name in KERNEL_FIELDS:
        want = expected[f"{name}_tapered"].transpose("source", "site")
        np.testing.assert_allclose(found[name].values, want.values, rtol=0, atol=1e-8 * float(np.abs(want).max()))


@pytest.mark.parametrize("rotation", [True, False])
def test_without_rotation_too_and_in_metres(love, rotation):
    ocean = mf.ocean_fraction(3.0)
    prepared = mf.prepare_solver(ocean, love, max_degree=20, rotation=rotation)
    values = np.random.default_rng(2).normal(size=(2, 2, 60, 120))
    load = xr.DataArray(values, dims=("member", "time", "lat", "lon"), coords={"lat": ocean["lat"], "lon": ocean["lon"]},
                        attrs={"units": "kg m-2"})  # fmt: skip
    found = mf.apply_kernels(mf.site_kernels(prepared, SITES, outputs=KERNEL_FIELDS), load)
    expected = forward(prepared, load)
    for name in KERNEL_FIELDS:
        assert found[name].dims == ("member", "time", "site")
        assert found[name].attrs["units"] == "m"
        scale = float(np.abs(expected[name]).max())
        np.testing.assert_allclose(found[name].values, expected[name].values, rtol=0, atol=1e-8 * scale)


def test_a_load_on_other_cells_and_of_another_orientation(problem):
    """Band-limited to degree 20 it is the same load on a grid of 2 degrees, north first, longitudes from -180."""
    prepared, load = problem
    smooth = analyse(load, max_degree=20)
    kernels = mf.site_kernels(prepared, SITES)
    one = synthesise(smooth, regular_grid(1.0)).assign_attrs(load.attrs)
    two = synthesise(smooth, regular_grid(2.0)).assign_attrs(load.attrs).isel(lat=slice(None, None, -1))
    two = two.assign_coords(lon=(two["lon"] + 180.0) % 360.0 - 180.0).sortby("lon")
    first, second = (mf.apply_kernels(kernels, field)["relative_sea_level"].values for field in (one, two))
    np.testing.assert_allclose(first, second, rtol=0, atol=1e-12 * np.abs(first).max())


def test_the_field_is_what_a_gigatonne_there_does_here(problem):
    """A smooth mound of mass: the kernel's field integrated under it is the value at the site, by the quadrature of the grid."""
    prepared, _ = problem
    kernels = mf.site_kernels(prepared, SITES)
    mound = mf.disc("mound", -20.0, 60.0, 2000.0)
    spread = mf.spread_mass(mound, mf.ocean_fraction(1.0), allow_ocean=True).isel(source=0)
    load = synthesise(analyse(spread, max_degree=DEGREE), regular_grid(1.0)).assign_attrs(spread.attrs)
    weights = prepared.grid.quadrature_weights * 6.371e6**2 / 1e12
    direct = (kernels["relative_sea_level"] * load * weights).sum(("lat", "lon"))
    found = mf.apply_kernels(kernels, load)["relative_sea_level"]
    np.testing.assert_allclose(found.values, direct.values, rtol=1e-9)
    assert kernels["relative_sea_level"].attrs["units"] == "mm Gt-1"
    assert kernels["site_lat"].values.tolist() == SITES["lat"].tolist()


def test_many_loads_are_summed_and_few_are_analysed_to_the_same(problem):
    """Fifty months of mass: by weights on the cells; one of them: by its coefficients; 1e-12 of the largest."""
    prepared, load = problem
    rng = np.random.default_rng(9)
    months = (load.isel(source=0, drop=True) * xr.DataArray(rng.normal(size=50), dims="time")).assign_attrs(
        units="kg m-2"
    )
    kernels = mf.site_kernels(prepared, SITES, outputs=("relative_sea_level", "bedrock_up"))
    whole = mf.apply_kernels(kernels, months)
    for name in ("relative_sea_level", "bedrock_up"):
        single = mf.apply_kernels(kernels, months.isel(time=[7]))[name]
        assert whole[name].dims == ("time", "site")
        np.testing.assert_allclose(
            whole[name].isel(time=[7]).values, single.values, rtol=0, atol=1e-12 * float(np.abs(whole[name]).max())
        )


def test_a_lazy_load_stays_lazy(problem):
    prepared, load = problem
    kernels = mf.site_kernels(prepared, SITES)
    lazy = mf.apply_kernels(kernels, load.chunk({"source": 1, "lat": 60}))["relative_sea_level"]
    assert lazy.chunks is not None
    now = mf.apply_kernels(kernels, load)["relative_sea_level"]
    np.testing.assert_allclose(lazy.compute().values, now.values, rtol=0, atol=1e-12 * float(np.abs(now).max()))
    spoiled = load.where(load["lat"] > 0.0).assign_attrs(load.attrs).chunk({"source": 1})
    with pytest.raises(GridError, match="not finite"):
        mf.apply_kernels(kernels, spoiled)["relative_sea_level"].compute()


def test_inputs_are_left_alone(problem):
    prepared, load = problem
    before = load.copy(deep=True), SITES.copy(deep=True)
    kernels = mf.site_kernels(prepared, SITES)
    kept = kernels.copy(deep=True)
    mf.apply_kernels(kernels, load)
    xr.testing.assert_identical(load, before[0])
    xr.testing.assert_identical(kernels, kept)
    pd.testing.assert_frame_equal(SITES, before[1])


def test_what_cannot_be_used_is_refused(problem, monkeypatch):
    prepared, load = problem
    kernels = mf.site_kernels(prepared, SITES)
    with pytest.raises(InputError, match="prepared: must come from prepare_solver, got int"):
        mf.site_kernels(3, SITES)
    with pytest.raises(InputError, match="outputs: no field with kernels 'geoid'"):
        mf.site_kernels(prepared, SITES, outputs=("geoid",))
    with pytest.raises(InputError, match="outputs: name at least one"):
        mf.site_kernels(prepared, SITES, outputs=())
    with pytest.raises(InputError, match="no frame 'XX'"):
        mf.site_kernels(prepared, SITES, reference_frame="XX")
    with pytest.raises(SiteError, match="lat must lie between"):
        mf.site_kernels(prepared, SITES.assign(lat=[100.0, 0.0, 0.0]))
    with pytest.raises(InputError, match="kernels: hold no"):
        mf.apply_kernels(load, load)
    with pytest.raises(InputError, match="load: must be a DataArray"):
        mf.apply_kernels(kernels, load.values)
    with pytest.raises(UnitsError, match="load: units must be"):
        mf.apply_kernels(kernels, load.assign_attrs(units="m"))
    with pytest.raises(InputError, match="dimension name 'site' is used"):
        mf.apply_kernels(kernels, load.rename(source="site"))
    with pytest.raises(GridError, match="not finite"):
        mf.apply_kernels(kernels, load.where(load["lat"] > 0.0).assign_attrs(load.attrs))
    monkeypatch.setattr(_equation, "MAX_ROUNDS", 1)
    with pytest.raises(NotConvergedError, match=r"site 'Hudson': residual .* tolerance 1e-14"):
        mf.site_kernels(prepared, SITES, tolerance=1e-14)
