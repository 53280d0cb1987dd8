"""Modes of a load: exact where the load has few, the error told is the error made, answers follow."""

import numpy as np
import pytest
import xarray as xr

import massfingerprint as mf
from massfingerprint.errors import GridError, InputError


@pytest.fixture(scope="module")
def load():
    """Three sources with their own histories over 40 months."""
    ocean = mf.ocean_fraction(3.0)
    spread = mf.spread_mass(mf.regions("greenland", "west_antarctica", "glaciers_01"), ocean)
    history = xr.DataArray(np.random.default_rng(3).normal(size=(40, 3)).cumsum(axis=0), dims=("time", "source"),
                           coords={"source": spread["source"].values})  # fmt: skip
    return (spread * history).sum("source").transpose("time", "lat", "lon").assign_attrs(units="kg m-2")


def test_three_sources_are_three_modes(load):
    modes = mf.load_modes(load)
    assert modes.sizes["mode"] == 3
    assert modes.attrs["relative_error"] < 1e-6
    back = (modes["load"] * modes["amplitude"]).sum("mode").transpose(*load.dims)
    np.testing.assert_allclose(back.values, load.values, rtol=0, atol=1e-7 * float(abs(load).max()))


def test_the_error_told_is_the_error_made(load):
    """Noise on top: the root-mean-square of the rest, step by step, by the quadrature of the grid."""
    noisy = load + 0.05 * float(load.std()) * np.random.default_rng(4).normal(size=load.shape)
    modes = mf.load_modes(noisy.assign_attrs(load.attrs), tolerance=0.1)
    assert modes.sizes["mode"] < 40
    rest = noisy - (modes["load"] * modes["amplitude"]).sum("mode")
    from massfingerprint.sphere.grids import grid_of  # noqa: PLC0415

    weights = xr.DataArray(grid_of(load).quadrature_weights, dims=("lat", "lon")) / (4.0 * np.pi)
    made = np.sqrt((rest**2 * weights.values).sum(("lat", "lon")))
    np.testing.assert_allclose(modes["left_out"].values, made.values, rtol=1e-6)
    assert modes.attrs["relative_error"] <= 0.1


def test_fields_of_the_modes_are_those_of_the_months(load, love):
    prepared = mf.prepare_solver(mf.ocean_fraction(3.0), love, max_degree=20)
    modes = mf.load_modes(load, tolerance=1e-7)
    answer = mf.solve_fingerprints(prepared, modes["load"], tolerance=1e-12)["relative_sea_level"]
    whole = mf.solve_fingerprints(prepared, load, tolerance=1e-12)["relative_sea_level"]
    found = (answer * modes["amplitude"]).sum("mode").transpose(*whole.dims)
    np.testing.assert_allclose(found.values, whole.values, rtol=0, atol=1e-7 * float(abs(whole).max()))


def test_nothing_is_one_mode_of_nothing_and_bad_input_is_refused(load):
    assert mf.load_modes(load * 0.0).attrs["relative_error"] == 0.0
    kept = load.copy(deep=True)
    mf.load_modes(load)
    xr.testing.assert_identical(load, kept)
    with pytest.raises(InputError, match=r"load: must be a DataArray \(month, lat, lon\)"):
        mf.load_modes(load, dim="month")
    with pytest.raises(InputError, match="tolerance: must be a number from 1e-07 to 1, got 1e-09"):
        mf.load_modes(load, tolerance=1e-9)
    with pytest.raises(GridError, match="not finite"):
        mf.load_modes(load.where(load["lat"] > 0.0))
