"""Transforms against hand-written harmonics, pyshtools, round trips and shifts of longitude."""

import numpy as np
import pytest
import xarray as xr

from massfingerprint import set_options
from massfingerprint.errors import GridError, InputError
from massfingerprint.sphere import _transform
from massfingerprint.sphere.grids import Grid, regular_grid
from massfingerprint.sphere.harmonics import (
    analyse,
    from_gravity,
    from_shcoeffs,
    labelled,
    synthesise,
    to_gravity,
    to_shcoeffs,
)

GRID = regular_grid(5.0)
# Real orthonormal functions without Condon-Shortley phase, in x = sin(lat), s = cos(lat); closed forms, e.g. Wikipedia
# "Table of spherical harmonics", real form (from memory; orthonormality is checked below).
HAND = {
    (0, 0, "cos"): lambda x, s, lon: np.sqrt(1 / (4 * np.pi)) + 0 * x,
    (1, 0, "cos"): lambda x, s, lon: np.sqrt(3 / (4 * np.pi)) * x,
    (1, 1, "cos"): lambda x, s, lon: np.sqrt(3 / (4 * np.pi)) * s * np.cos(lon),
    (1, 1, "sin"): lambda x, s, lon: np.sqrt(3 / (4 * np.pi)) * s * np.sin(lon),
    (2, 0, "cos"): lambda x, s, lon: np.sqrt(5 / (16 * np.pi)) * (3 * x**2 - 1),
    (2, 1, "cos"): lambda x, s, lon: np.sqrt(15 / (4 * np.pi)) * s * x * np.cos(lon),
    (2, 1, "sin"): lambda x, s, lon: np.sqrt(15 / (4 * np.pi)) * s * x * np.sin(lon),
    (2, 2, "cos"): lambda x, s, lon: np.sqrt(15 / (16 * np.pi)) * s**2 * np.cos(2 * lon),
    (2, 2, "sin"): lambda x, s, lon: np.sqrt(15 / (16 * np.pi)) * s**2 * np.sin(2 * lon),
    (3, 2, "sin"): lambda x, s, lon: np.sqrt(105 / (16 * np.pi)) * s**2 * x * np.sin(2 * lon),
    (3, 3, "cos"): lambda x, s, lon: np.sqrt(35 / (32 * np.pi)) * s**3 * np.cos(3 * lon),
    (4, 0, "cos"): lambda x, s, lon: 3 / 16 / np.sqrt(np.pi) * (35 * x**4 - 30 * x**2 + 3),
}


def hand_field(key, grid=GRID):
    lat, lon = np.deg2rad(grid.latitudes)[:, None], np.deg2rad(grid.longitudes)
    values = HAND[key](np.sin(lat), np.cos(lat), lon) * np.ones((grid.nlat, grid.nlon))
    return xr.DataArray(values, dims=("lat", "lon"), coords={"lat": grid.latitudes, "lon": grid.longitudes})


def random_coefficients(max_degree, seed=1, lead=()):
    rng = np.random.default_rng(seed)
    pairs = rng.normal(size=(*lead, 2, _transform.coefficient_count(max_degree)))
    pairs[..., 1, : max_degree + 1] = 0.0
    return labelled(pairs, tuple(f"d{i}" for i in range(len(lead))), {})


@pytest.mark.parametrize("key", HAND, ids=str)
def test_low_degrees_written_by_hand(key):
    degree, order, part = key
    coefficients = analyse(hand_field(key), max_degree=6)
    expected = xr.zeros_like(coefficients)
    expected[{"part": ["cos", "sin"].index(part), "coefficient": _transform.index_of(degree, order, 6)}] = 1.0
    np.testing.assert_allclose(coefficients, expected, rtol=0, atol=1e-14)


def test_round_trip():
    coefficients = random_coefficients(35, lead=(2, 3))
    back = analyse(synthesise(coefficients, GRID))
    np.testing.assert_allclose(back, coefficients, rtol=0, atol=1e-12)
    assert back.dims == ("d0", "d1", "part", "coefficient")


@pytest.mark.parametrize("shift", [-360.0, 0.0, 360.0, -180.0])
@pytest.mark.parametrize("north_first", [False, True])
@pytest.mark.parametrize("westward", [False, True])
def test_the_same_field_on_any_grid_order_has_the_same_coefficients(shift, north_first, westward):
    coefficients = random_coefficients(20)
    lat = GRID.latitudes[::-1] if north_first else GRID.latitudes
    lon = (GRID.longitudes[::-1] if westward else GRID.longitudes) + shift
    field = synthesise(coefficients, Grid(lat, lon))
    np.testing.assert_allclose(analyse(field, max_degree=20), coefficients, rtol=0, atol=1e-12)
    at_place = synthesise(coefficients, GRID).sel(lat=42.5, lon=87.5)
    here = field.isel(lat=int(np.abs(lat - 42.5).argmin()), lon=int(np.abs((lon - 87.5 + 180) % 360 - 180).argmin()))
    assert float(here) == pytest.approx(float(at_place), abs=1e-12)


def test_float32_fields_are_analysed_in_double_precision():
    field = synthesise(random_coefficients(10), GRID)
    single = analyse(field.astype(np.float32), max_degree=10)
    assert single.dtype == np.float64
    np.testing.assert_allclose(single, analyse(field, max_degree=10), rtol=0, atol=2e-6)


def test_longitudes_of_another_count():
    """A grid of 24 x 30 cells determines degree 14 (30 cells a ring) and round-trips there."""
    grid = Grid(-90 + 7.5 * (np.arange(24) + 0.5), 12.0 * np.arange(30))
    assert grid.band_limit == 14
    coefficients = random_coefficients(14)
    np.testing.assert_allclose(analyse(synthesise(coefficients, grid)), coefficients, rtol=0, atol=1e-12)


def test_against_pyshtools():
    """pyshtools (registry package) expands our coefficients to the same values and back."""
    coefficients = random_coefficients(30)
    shcoeffs = to_shcoeffs(coefficients)
    lat, lon = np.array([-71.3, 0.4, 33.3, 88.0]), np.array([12.3, 181.0, 359.9, 77.7])
    ours = _transform.synthesise_at(
        _transform.complex_from_real(coefficients.values), np.deg2rad(90 - lat), np.deg2rad(lon)
    )
    np.testing.assert_allclose(shcoeffs.expand(lat=lat, lon=lon), ours, rtol=0, atol=1e-12)
    np.testing.assert_array_equal(from_shcoeffs(shcoeffs), coefficients)
    schmidt = shcoeffs.convert(normalization="schmidt", csphase=-1)
    np.testing.assert_allclose(from_shcoeffs(schmidt), coefficients, rtol=0, atol=1e-12)


def test_complex_shcoeffs_are_refused():
    with pytest.raises(InputError, match="must be of kind 'real', got 'complex'"):
        from_shcoeffs(to_shcoeffs(random_coefficients(3)).convert(kind="complex"))


@pytest.mark.parametrize(("part", "degree", "order", "lat", "lon"), [(0, 2, 1, 45.0, 0.0), (1, 2, 2, 0.0, 45.0)])
def test_gravity_coefficient_of_one(part, degree, order, lat, lon):
    """C21 = 1 gives +1.93649 at 45 N 0 E, S22 = 1 the same at 0 N 45 E: sqrt(15)/2 (closed form, fully normalised)."""
    square = np.zeros((2, 5, 5))
    square[part, degree, order] = 1.0
    coefficients = from_gravity(square)
    value = _transform.synthesise_at(
        _transform.complex_from_real(coefficients.values), np.deg2rad([90 - lat]), np.deg2rad([lon])
    )
    assert value[0] == pytest.approx(1.93649, abs=1e-5)
    np.testing.assert_allclose(to_gravity(coefficients), square, rtol=0, atol=1e-15)


def test_gauss_legendre_analysis_is_adjoint_and_exact_for_products():
    """Rings for a factor of degree 9: analysis of (factor x field) is exact, so <g, P(f h)> = <h, P(f g)> to rounding."""
    rings = _transform.GaussLegendreRings(12, 9)
    f, g, h = (
        _transform.complex_from_real(random_coefficients(n, seed).values) for n, seed in ((9, 3), (12, 4), (12, 5))
    )
    on_rings = rings.synthesise(f)
    product = [rings.analyse(on_rings * rings.synthesise(x)) for x in (g, h)]
    left, right = _transform.inner_product(h, product[0]), _transform.inner_product(g, product[1])
    assert left == pytest.approx(right, rel=1e-13)
    grid = regular_grid(3.0)  # 60 rings: exact for the whole product of degree 33
    fields = [_transform.synthesise(c, (grid.nlat, grid.nlon), grid.first_azimuth) for c in (f, g)]
    direct = _transform.analyse(fields[0] * fields[1], 12, grid.first_azimuth)
    np.testing.assert_allclose(product[0], direct, rtol=0, atol=1e-12)


def test_inner_product_is_the_integral():
    first, second = random_coefficients(17, 8), random_coefficients(17, 9)
    expected = float((first * second).sum())
    ours = _transform.inner_product(*(_transform.complex_from_real(c.values) for c in (first, second)))
    assert ours == pytest.approx(expected, rel=1e-13)


@pytest.mark.parametrize("max_degree", [0, 3, 12, 34, 35])
def test_lower_degrees_are_not_polluted_by_higher_ones(max_degree):
    """A field full to degree 35 on 36 rings: every cut gives the same low degrees."""
    coefficients = random_coefficients(35)
    found = analyse(synthesise(coefficients, GRID), max_degree=max_degree)
    kept = coefficients[:, coefficients["degree"].values <= max_degree]
    np.testing.assert_allclose(found, kept, rtol=0, atol=1e-12)


@pytest.mark.parametrize("target", [4, 9, 15])
def test_resizing_keeps_shared_degrees(target):
    coefficients = random_coefficients(9)
    resized = _transform.resized(_transform.complex_from_real(coefficients.values), target)
    grid = regular_grid(5.0)
    kept = coefficients.where(coefficients["degree"] <= target, 0.0)
    np.testing.assert_allclose(
        _transform.synthesise(resized, (36, 72), grid.first_azimuth),
        grid.to_rings(synthesise(kept, grid).values),
        rtol=0,
        atol=1e-13,
    )


def test_threads_do_not_matter():
    coefficients = random_coefficients(35)
    with set_options(threads=1):
        one = synthesise(coefficients, GRID)
    with set_options(threads=3):
        three = synthesise(coefficients, GRID)
    np.testing.assert_allclose(one, three, rtol=0, atol=1e-13)


@pytest.mark.parametrize("threads", [0, -1, 1.5, True, "two"])
def test_wrong_thread_counts(threads):
    with pytest.raises(InputError, match="threads: must be a whole number of 1 or more"):
        set_options(threads=threads)


def test_beyond_the_band_limit():
    with pytest.raises(GridError, match="a grid of 36 x 72 cells determines at most 35, got 36"):
        analyse(hand_field((2, 0, "cos")), max_degree=36)


def test_not_finite_values_are_placed():
    field = hand_field((2, 0, "cos")).rename("load")
    field[3, 5] = np.nan
    with pytest.raises(GridError, match=r"load: 1 values are not finite, the first at lat -72.5, lon 27.5"):
        analyse(field)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda c: c.T, "last dimensions must be"),
        (lambda c: c[:, :-1], "not a whole triangle"),
        (lambda c: c.drop_vars("order"), "coordinate 'order'"),
        (lambda c: c[:, ::-1], "coordinate 'degree' must run order by order"),
    ],
)
def test_other_layouts_are_refused(change, message):
    with pytest.raises(InputError, match=message):
        synthesise(change(random_coefficients(4)), GRID)


def test_one_field_at_a_time_for_other_conventions():
    with pytest.raises(InputError, match="one field at a time"):
        to_gravity(random_coefficients(4, lead=(2,)))
    with pytest.raises(InputError, match=r"must be real with shape \(2, degrees, degrees\)"):
        from_gravity(np.zeros((3, 4, 4)))
