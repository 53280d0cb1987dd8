"""What must hold for any ocean and any load: symmetries, balances, layouts.

Relative limits: the solver is asked for 1e-12 and its answers are compared at 1e-10, a hundred times that, which leaves room
for sums of a few hundred terms and for differences of two answers.
"""

import numpy as np
import pytest
import xarray as xr
from hypothesis import Phase, given, settings
from hypothesis import strategies as st

from massfingerprint.sealevel.fingerprints import FIELDS, LEVELS, coefficients_name, solve_fingerprints
from massfingerprint.sealevel.solver import prepare_solver
from massfingerprint.sphere.grids import grid_of, regular_grid
from massfingerprint.sphere.harmonics import analyse, synthesise

SPACING = 15.0
DEGREE = 9
ASKED, LIMIT = 1e-12, 1e-10
SCALARS = ("polar_motion_x", "polar_motion_y", "length_of_day_change")
# seeds do not shrink to anything simpler, so a failure is shown as drawn
quick = settings(max_examples=7, deadline=None, derandomize=True, phases=(Phase.explicit, Phase.generate))


def gridded(values, spacing=SPACING, units=None):
    grid = regular_grid(spacing)
    return xr.DataArray(
        values,
        dims=("lat", "lon"),
        coords={"lat": grid.latitudes, "lon": grid.longitudes},
        attrs={"units": units} if units else {},
    )


def shape(spacing=SPACING):
    return round(180 / spacing), round(360 / spacing)


@st.composite
def oceans(draw, spacing=SPACING):
    """Waves between 0 and 1, cells of 0 and 1, shares of cells, water everywhere."""
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    kind = draw(st.sampled_from(["waves", "cells", "shares", "water everywhere"]))
    values = np.ones(shape(spacing))
    if kind == "cells":
        values = (rng.random(shape(spacing)) < draw(st.floats(0.2, 0.9))).astype(float)
    elif kind == "shares":
        values = rng.random(shape(spacing))
    elif kind == "waves":
        pairs = analyse(gridded(rng.normal(size=shape(spacing)), spacing), max_degree=4)
        waves = synthesise(pairs, regular_grid(spacing)).values
        values = 0.5 + 0.5 * waves / np.abs(waves).max()
    return gridded(values, spacing)


@st.composite
def loads(draw, spacing=SPACING):
    """Noise, or one to five cells, kg m-2; at times without net mass."""
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    values = rng.normal(size=shape(spacing)) * 10.0 ** draw(st.integers(-6, 6))
    if draw(st.booleans()):
        cells = np.zeros(values.size)
        chosen = rng.choice(values.size, size=draw(st.integers(1, 5)), replace=False)
        cells[chosen] = values.ravel()[chosen]
        values = cells.reshape(values.shape)
    out = gridded(values, spacing, "kg m-2")
    if draw(st.booleans()):
        out = out - mean(out)
    return out.assign_attrs(units="kg m-2")


def mean(field):
    return float((field * grid_of(field).quadrature_weights).sum()) / (4.0 * np.pi)


def solved(ocean, load, love, *, rotation=True, max_degree=DEGREE, **choices):
    prepared = prepare_solver(ocean, love, max_degree=max_degree, rotation=rotation)
    return solve_fingerprints(prepared, load, outputs=FIELDS, tolerance=ASKED, **choices)


def close(found, expected, scale=None, limit=LIMIT):
    """Arrays agree within `limit` of the largest value."""
    found, expected = np.asarray(found), np.asarray(expected)
    scale = np.abs(expected).max() if scale is None else scale
    return found.shape == expected.shape and bool(np.abs(found - expected).max() <= limit * scale)


@quick
@given(ocean=oceans(), first=loads(), second=loads(), a=st.floats(-3, 3), b=st.floats(-3, 3))
def test_linear(ocean, first, second, a, b, love):
    answers = [
        solved(ocean, load.assign_attrs(units="kg m-2"), love) for load in (first, second, a * first + b * second)
    ]
    for name in (*FIELDS, *SCALARS):
        one, two, both = (answer[name].values for answer in answers)
        size = (
            abs(a) * np.abs(answers[0]["relative_sea_level"]).max()
            + abs(b) * np.abs(answers[1]["relative_sea_level"]).max()
        )
        size = abs(a) * np.abs(one).max() + abs(b) * np.abs(two).max() if name in SCALARS else float(size)
        assert close(both, a * one + b * two, scale=size), name


@quick
@given(ocean=oceans(), rotation=st.booleans())
def test_no_load_no_answer(ocean, rotation, love):
    answer = solved(ocean, gridded(np.zeros(shape()), units="kg m-2"), love, rotation=rotation)
    assert all((answer[name] == 0.0).all() for name in (*FIELDS, *SCALARS, "residual", "mass_residual", "load_extent"))
    assert all((answer[coefficients_name(name)] == 0.0).all() for name in FIELDS)
    assert answer["converged"] == 1


@quick
@given(ocean=oceans(), load=loads(), cells=st.integers(1, 23), rotation=st.booleans())
def test_turning_the_globe_turns_the_answer(ocean, load, cells, rotation, love):
    """Ocean and load moved east by whole cells: the fields move along, the pole's motion turns by the same angle."""
    plain = solved(ocean, load, love, rotation=rotation)
    moved = solved(*(f.copy(data=np.roll(f.values, cells, axis=1)) for f in (ocean, load)), love, rotation=rotation)
    for name in FIELDS:
        assert close(moved[name], np.roll(plain[name].values, cells, axis=1)), name
    pole = [complex(a["polar_motion_x"], -a["polar_motion_y"]) for a in (plain, moved)]
    assert abs(pole[1] - pole[0] * np.exp(1j * np.deg2rad(cells * SPACING))) <= LIMIT * abs(pole[0])
    assert close(moved["length_of_day_change"], plain["length_of_day_change"])
    assert (abs(pole[0]) > 0.0) is rotation


@quick
@given(ocean=oceans(), load=loads(), axis=st.sampled_from([0, 1]))
def test_the_mirrored_globe_mirrors_the_answer(ocean, load, axis, love):
    """North for south: the pole moves the other way. East for west: it moves by the mirrored angle. The day is the same."""
    plain = solved(ocean, load, love)
    mirrored = solved(*(f.copy(data=np.flip(f.values, axis)) for f in (ocean, load)), love)
    for name in FIELDS:
        turned = -1.0 if name == ("bedrock_north", "bedrock_east")[axis] else 1.0
        assert close(mirrored[name], turned * np.flip(plain[name].values, axis)), name
    signs = (-1.0, -1.0, 1.0) if axis == 0 else (1.0, -1.0, 1.0)
    size = float(np.hypot(plain["polar_motion_x"], plain["polar_motion_y"]))
    for name, sign in zip(SCALARS, signs, strict=True):
        assert close(mirrored[name], sign * plain[name], scale=max(size, abs(float(plain[name])))), name


@quick
@given(ocean=oceans(), load=loads())
def test_inputs_stay_as_they_were(ocean, load, love):
    """Values, coordinates and attributes; arrays that forbid writing will do; later changes of the ocean reach nothing."""
    table = love.isel(degree=slice(0, DEGREE + 1)).copy(deep=True)
    ocean = ocean.assign_attrs(note="mine", units="1")
    before = [thing.copy(deep=True) for thing in (ocean, load, table)]
    for array in (ocean.values, load.values, table["k_load"].values):
        array.setflags(write=False)
    prepared = prepare_solver(ocean, table, max_degree=DEGREE)
    first = solve_fingerprints(prepared, load, outputs=FIELDS)
    for thing, copy in zip((ocean, load, table), before, strict=True):
        assert thing.identical(copy)
    ocean.values.setflags(write=True)
    ocean.values[:] = 0.0
    table["h_load"].values[:] = 0.0
    assert solve_fingerprints(prepared, load, outputs=FIELDS).identical(first)


LAYOUTS = {
    "north first": lambda f: f.isel(lat=slice(None, None, -1)),
    "-180 to 180": lambda f: f.assign_coords(lon=(f["lon"] + 180.0) % 360.0 - 180.0).sortby("lon"),
    "westward": lambda f: f.isel(lon=slice(None, None, -1)),
    "starting elsewhere": lambda f: f.roll(lon=5, roll_coords=True),
    "lon before lat": lambda f: f.transpose("lon", "lat"),
    "float32": lambda f: f.astype(np.float32).assign_coords(lat=f["lat"].astype(np.float32), lon=f["lon"].astype("f4")),
}


@quick
@given(
    ocean=oceans(), load=loads(), of_ocean=st.sampled_from(sorted(LAYOUTS)), of_load=st.sampled_from(sorted(LAYOUTS))
)
def test_the_layout_of_a_grid_is_of_no_account(ocean, load, of_ocean, of_load, love):
    """The same cells in another order give the same field at the same places; the answer keeps the load's order."""
    ocean, load = (f.astype(np.float32).astype(np.float64) for f in (ocean, load))  # so that float32 loses nothing
    load.attrs["units"] = "kg m-2"
    plain = solved(ocean, load, love)
    given_load = LAYOUTS[of_load](load)
    other = solved(LAYOUTS[of_ocean](ocean), given_load, love)
    np.testing.assert_array_equal(other["lat"], given_load["lat"])
    np.testing.assert_array_equal(other["lon"], given_load["lon"])
    for name in FIELDS:
        back = other[name].assign_coords(lon=other["lon"].astype(float) % 360.0).sortby(["lat", "lon"])
        assert close(back, plain[name]), name
        label = coefficients_name(name)
        assert close(other[label], plain[label]), name


@quick
@given(ocean=oceans(), seed=st.integers(0, 1000))
def test_leading_dimensions_are_kept(ocean, seed, love):
    """A stack is solved one by one; its dimensions and their coordinates come back on every variable."""
    stack = xr.DataArray(
        np.random.default_rng(seed).normal(size=(2, 2, *shape())),
        dims=("source", "member", "lat", "lon"),
        coords={"source": ["a", "b"], "member": [3, 2], "weight": ("member", [0.1, 0.9]), **ocean.coords},
        attrs={"units": "kg m-2 Gt-1"},
    )
    answer = solved(ocean, stack.transpose("lat", "source", "lon", "member"), love)
    assert answer["relative_sea_level"].dims == ("source", "member", "lat", "lon")
    assert answer["relative_sea_level"].attrs["units"] == "mm Gt-1"
    assert answer["relative_sea_level_coefficients"].dims == ("source", "member", "part", "coefficient")
    single = solved(ocean, stack.sel(source="b", member=2), love)
    for name in (*FIELDS, *SCALARS, "rounds", "converged"):
        assert set(answer[name].coords) >= {"source", "member", "weight"}, name
        assert close(answer[name].sel(source="b", member=2), single[name]), name
    assert single["relative_sea_level"].dims == ("lat", "lon")


def balance(ocean, load, sea_level):
    """rho_w int(O S) and int(I) over the unit sphere, from orthonormal coefficients, and int|I| to judge them by."""
    water = 1000.0 * float((analyse(ocean, max_degree=DEGREE) * sea_level).sum())
    weights = grid_of(load).quadrature_weights
    return water, float((load * weights).sum()), float(np.abs(load * weights).sum())


@quick
@given(ocean=oceans(), load=loads(), rotation=st.booleans())
def test_mass_is_closed(ocean, load, rotation, love):
    """The sea takes what the ice gives, to 1e-12 of the ice that moved: rounding, since every round closes it."""
    answer = solved(ocean, load, love, rotation=rotation)
    water, ice, moved = balance(ocean, load, answer["relative_sea_level_coefficients"])
    assert abs(water + ice) < 1e-12 * moved
    assert answer["mass_residual"] < 1e-12


@quick
@given(ocean=oceans(), load=loads(), frame=st.sampled_from(["CE", "CM", "CF", "CL", "CH"]))
def test_identities_of_the_fields_in_every_frame(ocean, load, frame, love):
    """To rounding, 1e-14 of the largest field: RSL = sea surface - bedrock; sea surface - geoid uniform; RSL frame-free."""
    answer = solved(ocean, load, love, reference_frame=frame)
    size = max(float(np.abs(answer[name]).max()) for name in LEVELS)
    rsl, surface, geoid, bedrock = (answer[name].values for name in LEVELS)
    assert close(rsl, surface - bedrock, scale=size, limit=1e-14)
    assert np.ptp(surface - geoid) <= 1e-14 * size
    assert close(solved(ocean, load, love)["relative_sea_level"], rsl, scale=size, limit=1e-14)
    assert abs(mean(answer["geoid"])) <= 1e-14 * size  # no degree 0


@quick
@given(load=loads(), rotation=st.booleans())
def test_water_everywhere_is_solved_degree_by_degree(load, rotation, love):
    """S_l = T_l I_l / (1 - rho_w T_l) (derived; exact); rotation may touch orders 0 and 1 of degree 2 only."""
    sea_level = solved(gridded(np.ones(shape())), load, love, rotation=rotation)["relative_sea_level_coefficients"]
    ice = analyse(load, max_degree=DEGREE)
    n = ice["degree"].values
    love = love.isel(degree=n)
    transfer = 3.0 * (1.0 + love["k_load"] - love["h_load"]).values / (love.attrs["mean_density"] * (2.0 * n + 1.0))
    exact = ice.values * transfer / (1.0 - 1000.0 * transfer)
    exact[:, n == 0] = -ice.values[:, n == 0] / 1000.0
    touched = (n == 2) & (ice["order"].values < 2)
    same = ~touched if rotation else slice(None)
    assert close(sea_level.values[:, same], exact[:, same], scale=np.abs(exact).max())
    assert not rotation or not close(sea_level.values[:, touched], exact[:, touched])


@quick
@given(seed=st.integers(0, 1000), cells=st.integers(1, 4), share=st.floats(1e-3, 1.0), load=loads())
def test_a_tiny_sea_converges_and_closes(seed, cells, share, load, love):
    ocean = np.zeros(shape())
    ocean.ravel()[np.random.default_rng(seed).choice(ocean.size, size=cells, replace=False)] = share
    answer = solved(gridded(ocean), load, love)
    water, ice, moved = balance(gridded(ocean), load, answer["relative_sea_level_coefficients"])
    assert answer["converged"] == 1
    assert abs(water + ice) < 1e-12 * moved


@quick
@given(ocean=oceans(), load=loads())
def test_a_load_without_net_mass_leaves_the_mean_of_the_sea(ocean, load, love):
    load = (load - mean(load)).assign_attrs(units="kg m-2")
    answer = solved(ocean, load, love)
    water, _, moved = balance(ocean, load, answer["relative_sea_level_coefficients"])
    assert abs(water) < 1e-12 * moved
    assert float(np.abs(answer["relative_sea_level"]).max()) > 0.0


@quick
@given(ocean=oceans(7.5), load=loads(7.5), max_degree=st.integers(2, 8))
def test_detail_beyond_the_degree_does_not_leak_in(ocean, load, max_degree, love):
    """On cells finer than the solution: the load cut at the degree, the ocean at twice the degree, give the same answer."""
    cut_load, cut_ocean = (
        synthesise(analyse(field, max_degree=n), regular_grid(7.5))
        for field, n in ((load, max_degree), (ocean, 2 * max_degree))
    )
    span = float(np.abs(cut_ocean - 0.5).max())  # a cut ocean may overshoot 0 and 1: both are drawn in alike
    squeezed, whole = (0.5 + (field - 0.5) * min(1.0, 0.5 / span) for field in (cut_ocean, ocean))
    answer = solved(whole, load, love, max_degree=max_degree)
    cut = solved(squeezed, cut_load.assign_attrs(units="kg m-2"), love, max_degree=max_degree)
    assert close(answer["relative_sea_level"], cut["relative_sea_level"])
    areas = [prepare_solver(ocean, love, max_degree=n).ocean_area for n in (max_degree, 23)]
    assert areas[0] == pytest.approx(areas[1], rel=1e-13)
    assert areas[0] == pytest.approx(4.0 * np.pi * 6.371e6**2 * mean(ocean), rel=1e-13)


@quick
@given(ocean=oceans(), load=loads(), spacing=st.sampled_from([5.0, 10.0, 12.0]))
def test_the_grid_of_the_load_is_free(ocean, load, spacing, love):
    """A band-limited load on other cells than the ocean's gives the same coefficients."""
    pairs = analyse(load, max_degree=DEGREE)
    answers = [
        solved(ocean, synthesise(pairs, regular_grid(step)).assign_attrs(units="kg m-2"), love)
        for step in (SPACING, spacing)
    ]
    assert close(*(answer["relative_sea_level_coefficients"] for answer in answers))
    assert answers[1]["relative_sea_level"].shape == shape(spacing)


@quick
@given(ocean=oceans(), load=loads(), exponent=st.integers(2, 9))
def test_the_tolerance_is_kept(ocean, load, exponent, love):
    """The residual is of the round before the last and rounds contract by 0.3 or better, so the error is below it."""
    prepared = prepare_solver(ocean, love, max_degree=DEGREE)
    exact = solve_fingerprints(prepared, load, tolerance=1e-13)
    rough = solve_fingerprints(prepared, load, tolerance=10.0**-exponent)
    name = "relative_sea_level_coefficients"
    assert float(np.linalg.norm(rough[name] - exact[name])) < 10.0**-exponent * float(np.linalg.norm(exact[name]))
    assert rough["residual"] <= 10.0**-exponent
    assert rough["rounds"] <= exact["rounds"]


def test_more_outputs_change_no_field(love):
    ocean = gridded(np.random.default_rng(3).random(shape()))
    load = gridded(np.random.default_rng(4).normal(size=shape()), units="kg m-2")
    prepared = prepare_solver(ocean, love, max_degree=DEGREE)
    whole = solve_fingerprints(prepared, load, outputs=FIELDS, reference_frame="CF")
    for name in FIELDS:
        one = solve_fingerprints(prepared, load, outputs=(name,), reference_frame="CF")
        assert set(FIELDS) & set(one.data_vars) == {name}
        xr.testing.assert_identical(one[name], whole[name])
