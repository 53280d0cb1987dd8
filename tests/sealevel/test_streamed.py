"""Fields written step by step are those solved together; nothing is left of a run that fails."""

import numpy as np
import pytest
import xarray as xr

import massfingerprint as mf
from massfingerprint.errors import GridError, InputError
from massfingerprint.files.netcdf import read_netcdf


@pytest.fixture(scope="module")
def problem(love):
    ocean = mf.ocean_fraction(3.0)
    prepared = mf.prepare_solver(ocean, love, max_degree=20)
    time = np.array(["2003-01-16", "2003-02-15", "2003-03-16", "2003-04-16"], dtype="datetime64[ns]")
    shape = mf.spread_mass(mf.regions("greenland"), ocean).isel(source=0, drop=True)
    load = shape * xr.DataArray([0.0, -10.0, -25.0, 5.0], dims="time", coords={"time": time})
    return prepared, load.assign_attrs(units="kg m-2")


@pytest.mark.parametrize("lazy", [False, True])
def test_steps_are_what_one_call_gives(problem, tmp_path, lazy):
    prepared, load = problem
    seen = []
    given = load.chunk({"time": 2}) if lazy else load
    fields = ("relative_sea_level", "bedrock_up")
    mf.write_fingerprints(prepared, given, tmp_path / "f.nc", outputs=fields, progress=lambda *step: seen.append(step))
    read, whole = read_netcdf(tmp_path / "f.nc"), mf.solve_fingerprints(prepared, load, outputs=fields)
    assert seen == [(n, 4) for n in (1, 2, 3, 4)]
    assert read["time"].values.tolist() == load["time"].values.tolist()
    for name in (*fields, "polar_motion_x", "residual"):
        np.testing.assert_array_equal(read[name].transpose(*whole[name].dims).values, whole[name].values)
    assert read["relative_sea_level"].attrs["units"] == "m"
    assert read.attrs["reference_frame"] == "CM"


def test_a_step_that_fails_leaves_no_file(problem, tmp_path):
    prepared, load = problem
    spoiled = load.transpose("time", ...).copy()
    spoiled[2, 10, 10] = np.nan
    with pytest.raises(GridError, match="not finite"):
        mf.write_fingerprints(prepared, spoiled, tmp_path / "f.nc")
    assert list(tmp_path.iterdir()) == []


def test_a_load_without_steps_is_refused(problem, tmp_path):
    prepared, load = problem
    with pytest.raises(InputError, match="load: needs a first dimension"):
        mf.write_fingerprints(prepared, load.isel(time=0, drop=True), tmp_path / "f.nc")
