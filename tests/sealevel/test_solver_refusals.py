"""What the sea-level solver refuses, and what it says: argument, place, what came, what is allowed, what to do."""

import re

import numpy as np
import pytest
import xarray as xr

from massfingerprint.errors import GridError, InputError, MassFingerprintError, NotConvergedError, UnitsError
from massfingerprint.sealevel import _equation
from massfingerprint.sealevel.fingerprints import solve_fingerprints
from massfingerprint.sealevel.solver import prepare_solver
from massfingerprint.sphere.grids import regular_grid

DEGREE = 9
GRID = regular_grid(15.0)
WATER = xr.DataArray(
    np.ones((GRID.nlat, GRID.nlon)), dims=("lat", "lon"), coords={"lat": GRID.latitudes, "lon": GRID.longitudes}
)
LOAD = WATER.copy(data=np.random.default_rng(8).normal(size=WATER.shape)).assign_attrs(units="kg m-2")


def spoiled(field, value, lat=52.5, lon=127.5):
    return field.where((field["lat"] != lat) | (field["lon"] != lon), value)


@pytest.mark.parametrize(
    ("ocean", "error", "words"),
    [
        (spoiled(WATER, np.nan), GridError, "ocean: 1 values are not finite, the first at lat 52.5, lon 127.5"),
        (spoiled(WATER, np.inf), GridError, "ocean: 1 values are not finite, the first at lat 52.5, lon 127.5"),
        (100.0 * WATER, GridError, "between 0 and 1, got 100 to 100. Divide percentages by 100"),
        (spoiled(WATER, -0.01), GridError, "between 0 and 1, got -0.01 to 1"),
        (0.0 * WATER, GridError, "ocean: there is no water anywhere"),
        (WATER.values, InputError, "ocean: must be a DataArray (lat, lon), got ndarray"),
        (
            WATER.expand_dims(time=2),
            GridError,
            "ocean: must have the dimensions lat and lon, got ('time', 'lat', 'lon')",
        ),
        (WATER.isel(lat=slice(1, None)), GridError, "ocean: lat must be the 11 evenly spaced cell centres"),
        (WATER.isel(lon=slice(1, None)), GridError, "ocean: lon must be 23 evenly spaced values once round the globe"),
        (WATER.drop_vars("lon"), GridError, "ocean: needs a dimension coordinate 'lon'"),
    ],
)
def test_unusable_oceans_are_refused(ocean, error, words, love):
    with pytest.raises(error, match=re.escape(words)):
        prepare_solver(ocean, love, max_degree=DEGREE)


STACK = xr.concat([LOAD, spoiled(LOAD, np.nan)], dim="source").assign_coords(source=["greenland", "alaska"])


@pytest.mark.parametrize(
    ("load", "error", "words"),
    [
        (spoiled(LOAD, np.nan), GridError, "load: 1 values are not finite, the first at lat 52.5, lon 127.5"),
        (STACK.assign_attrs(units="kg m-2"), GridError, "the first at source alaska, lat 52.5, lon 127.5"),
        (LOAD.drop_attrs(), UnitsError, "load: has no units. Set attrs['units'] to 'kg m-2' or 'kg m-2 Gt-1'"),
        (LOAD.assign_attrs(units="Gt"), UnitsError, "load: units must be 'kg m-2' or 'kg m-2 Gt-1', got 'Gt'"),
        (LOAD.assign_attrs(units="mm"), UnitsError, "got 'mm'"),
        (LOAD.assign_attrs(units="gram per acre and so on"), UnitsError, "got 'gram per acre and so on'"),
        (LOAD.values, InputError, "load: must be a DataArray (..., lat, lon), got ndarray"),
        (LOAD.isel(lat=slice(1, None)), GridError, "load: lat must be the 11 evenly spaced cell centres"),
    ],
)
def test_unusable_loads_are_refused(load, error, words, love):
    with pytest.raises(error, match=re.escape(words)):
        solve_fingerprints(prepare_solver(WATER, love, max_degree=DEGREE), load)


@pytest.mark.parametrize(
    ("choice", "words"),
    [
        (
            {"outputs": ("relative_sea_levels",)},
            "outputs: no field 'relative_sea_levels'. Did you mean relative_sea_level?",
        ),
        ({"outputs": ()}, "outputs: name at least one of relative_sea_level"),
        ({"reference_frame": "ITRF"}, "reference_frame: no frame 'ITRF'. Known: CE, CM, CF, CL, CH"),
        ({"tolerance": 0.0}, "tolerance: must be a number from 1e-14 to 1, got 0.0"),
        ({"tolerance": np.nan}, "tolerance: must be a number from 1e-14 to 1, got nan"),
        ({"on_failure": "ignore"}, "on_failure: must be 'raise' or 'return', got 'ignore'"),
    ],
)
def test_unknown_choices_are_refused(choice, words, love):
    with pytest.raises(InputError, match=re.escape(words)):
        solve_fingerprints(prepare_solver(WATER, love, max_degree=DEGREE), LOAD, **choice)


@pytest.mark.parametrize("factor", [0.001, 10.0, 1000.0])
def test_units_that_convert_are_converted(factor, love):
    """g m-2, g cm-2 and t m-2 are 0.001, 10 and 1000 kg m-2 (definitions)."""
    prepared = prepare_solver(WATER, love, max_degree=DEGREE)
    units = {0.001: "g m-2", 10.0: "g cm-2", 1000.0: "t m-2"}[factor]
    plain, other = (solve_fingerprints(prepared, LOAD.assign_attrs(units=u)) for u in ("kg m-2", units))
    expected = factor * plain["relative_sea_level"].values
    np.testing.assert_allclose(other["relative_sea_level"], expected, rtol=0, atol=1e-14 * np.abs(expected).max())
    assert other["relative_sea_level"].attrs["units"] == "m"


# With water everywhere a round multiplies degree 2, order 1 by rho_w (T_2 + R_2), 0.265 for water of 1000 kg m-3 (check: T_2 and
# order-1 R of 1.834e-4 and 8.15e-5 m per kg m-2): beyond 3775 kg m-3 a bulge of water grows by its own pull.
@pytest.mark.parametrize("density", [3800.0, 4000.0, 1e6, 1e12])
def test_water_that_would_gather_without_bound_is_refused(density, love):
    with pytest.raises(InputError, match=r"water_density: water of \S+ kg m-3 would gather .* Use less than 377\d\."):
        prepare_solver(WATER, love, max_degree=DEGREE, water_density=density)


def test_an_unconverged_answer_is_not_passed_off(love, monkeypatch):
    """It raises naming the load, or comes back with converged 0 for that load alone."""
    monkeypatch.setattr(_equation, "MAX_ROUNDS", 1)
    prepared = prepare_solver(WATER.where(WATER["lat"] > 0.0, 0.2), love, max_degree=60)
    stack = xr.concat([0.0 * LOAD, LOAD], dim="source").assign_coords(source=["nothing", "greenland"])
    stack.attrs["units"] = "kg m-2"
    with pytest.raises(
        NotConvergedError, match=r"load at source greenland: residual \S+ after 1 rounds, tolerance 1e-14"
    ):
        solve_fingerprints(prepared, stack, tolerance=1e-14)
    answer = solve_fingerprints(prepared, stack, tolerance=1e-14, on_failure="return")
    assert answer["converged"].values.tolist() == [1, 0]
    assert not answer["residual"][1] <= 1e-14


def test_the_iteration_converges_below_that_density(love):
    prepared = prepare_solver(WATER, love, max_degree=DEGREE, water_density=3000.0)
    assert solve_fingerprints(prepared, LOAD)["converged"] == 1


ODD = {
    "a load of text": lambda love: solve_fingerprints(prepare_solver(WATER, love, max_degree=4), LOAD.astype(str)),
    "a complex load": lambda love: solve_fingerprints(prepare_solver(WATER, love, max_degree=4), LOAD.astype(complex)),
    "a tolerance of text": lambda love: solve_fingerprints(
        prepare_solver(WATER, love, max_degree=4), LOAD, tolerance="1e-8"
    ),
    "no outputs": lambda love: solve_fingerprints(prepare_solver(WATER, love, max_degree=4), LOAD, outputs=None),
    "an ocean instead of a solver": lambda love: solve_fingerprints(WATER, LOAD),
    "an ocean of text": lambda love: prepare_solver(WATER.astype(str), love, max_degree=4),
    "an ocean without rows": lambda love: prepare_solver(WATER.isel(lat=slice(0, 0)), love, max_degree=4),
    "less than no ocean": lambda love: prepare_solver(spoiled(0.0 * WATER - 1e-7, 1e-8), love, max_degree=4),
    "a density of text": lambda love: prepare_solver(WATER, love, max_degree=4, water_density="1000"),
    "Love numbers without degrees": lambda love: prepare_solver(WATER, love.isel(degree=slice(0, 0)), max_degree=4),
    "Love numbers of no radius": lambda love: prepare_solver(WATER, love.assign_attrs(radius=np.nan), max_degree=4),
    "a leading dimension of our own name": lambda love: solve_fingerprints(
        prepare_solver(WATER, love, max_degree=4), LOAD.expand_dims(part=2).assign_attrs(units="kg m-2")
    ),
}


@pytest.mark.parametrize("case", ODD)
def test_odd_input_meets_a_message_of_ours(case, love):
    """No traceback from deep inside, no warning of a library, no number."""
    with pytest.raises(MassFingerprintError, match=r"^[a-z_]+: .+"):
        ODD[case](love)


@pytest.mark.parametrize("rotation", ["off", None, 1])
def test_rotation_is_true_or_false(rotation, love):
    with pytest.raises(InputError, match="rotation: must be True, False or RotationConstants, got"):
        prepare_solver(WATER, love, max_degree=4, rotation=rotation)


def test_rotation_needs_degree_two(love):
    with pytest.raises(InputError, match="max_degree: must be a whole number of 2 or more, got 1"):
        prepare_solver(WATER, love, max_degree=1)
    assert prepare_solver(WATER, love, max_degree=1, rotation=False).max_degree == 1


def test_barystatic_is_fresh_water_whatever_moves(love):
    """4 pi a^2 of 1000 kg m-3 and 1 mm: 510.06 Gt on an all-water globe, also when salt water is moved."""
    prepared = prepare_solver(WATER, love, max_degree=4, water_density=1025.0)
    assert prepared.gigatonnes_per_millimetre == pytest.approx(4 * np.pi * 6.371e6**2 * 1e-12, rel=1e-12)
    assert prepared.barystatic_per_gigatonne == pytest.approx(-1.0 / 510.06, rel=1e-4)
