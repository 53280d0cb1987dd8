"""Reciprocity on the real ocean: int(I2 S1) = int(I1 S2) over the sphere, for any two loads.

Exact for the continuous equation and for any real diagonal response; the discrete operator keeps it only if analysis is the
adjoint of synthesis and the product with the ocean is formed without aliasing. It does not check the response itself.
"""

import itertools

import numpy as np
import pytest
import xarray as xr

from massfingerprint.load.ocean import ocean_fraction
from massfingerprint.sealevel.fingerprints import solve_fingerprints
from massfingerprint.sealevel.solver import prepare_solver
from massfingerprint.sphere._transform import GaussLegendreRings, degrees_and_orders
from massfingerprint.sphere.grids import grid_of
from massfingerprint.sphere.harmonics import analyse, synthesise

LIMIT = 1e-10  # of the pairing |int(I2 S1)|; the solver is asked for 1e-12, quadrature and sums round at 1e-13
ASKED = 1e-12
CAPS = {"greenland": (72.0, -40.0, 8.0), "west antarctica": (-79.0, -110.0, 7.0), "alaska": (60.0, -145.0, 4.0)}
SCATTERED = ("scattered", "scattered without net mass")
PAIRS = list(itertools.combinations((*CAPS, *SCATTERED), 2))


@pytest.fixture(scope="module")
def ocean():
    return ocean_fraction(1.0)


def cap(ocean, lat, lon, radius):
    """-1000 kg m-2 on the cells within `radius` degrees of a point."""
    place = np.deg2rad(lat)
    phi, gap = np.deg2rad(ocean["lat"]), np.deg2rad(ocean["lon"] - lon)
    cosine = np.sin(phi) * np.sin(place) + np.cos(phi) * np.cos(place) * np.cos(gap)
    return xr.where(cosine > np.cos(np.deg2rad(radius)), -1000.0, 0.0).transpose("lat", "lon")


@pytest.fixture(scope="module")
def loads(ocean):
    rng = np.random.default_rng(5)
    fields = {name: cap(ocean, *place) for name, place in CAPS.items()}
    weights = xr.DataArray(grid_of(ocean).quadrature_weights, dims=("lat", "lon"))
    # lumps of some degrees: cell noise would leave the pairing of two loads to chance
    for name in SCATTERED:
        field = sum(
            float(rng.normal()) * cap(ocean, *(float(number) for number in place))
            for place in zip(rng.uniform(-80, 80, 12), rng.uniform(0, 360, 12), rng.uniform(2, 20, 12), strict=True)
        )
        fields[name] = field - float((weights * field).sum()) / (4.0 * np.pi) if "without" in name else field
    stack = xr.concat(fields.values(), dim="source", coords="minimal", compat="override")
    return stack.assign_coords(source=list(fields)).assign_attrs(units="kg m-2")


def defect(forth, back):
    return abs(forth - back) / max(abs(forth), abs(back))


@pytest.fixture(scope="module", params=[(64, True), (64, False), (90, True), (90, False)], ids=str)
def solved(request, ocean, loads, love):
    """Coefficients of load and answer (source, ...), and the answer itself."""
    max_degree, rotation = request.param
    prepared = prepare_solver(ocean, love, max_degree=max_degree, rotation=rotation)
    return analyse(loads, max_degree=max_degree), solve_fingerprints(prepared, loads, tolerance=ASKED)


def pairing(loads, answers, first, second):
    """int(I_first S_second) from orthonormal coefficients."""
    return float((loads.sel(source=first) * answers.sel(source=second)).sum())


@pytest.mark.parametrize(("first", "second"), PAIRS, ids=[" and ".join(pair) for pair in PAIRS])
def test_coefficients_are_reciprocal(solved, first, second):
    load, answer = solved
    sea_level = answer["relative_sea_level_coefficients"]
    forth, back = (pairing(load, sea_level, *pair) for pair in ((first, second), (second, first)))
    own = pairing(load, sea_level, first, first) * pairing(load, sea_level, second, second)
    assert abs(forth) > 1e-3 * abs(own) ** 0.5  # not a chance zero, which no relative limit could judge
    assert defect(forth, back) < LIMIT


def test_grids_are_reciprocal(ocean, loads, love):
    """The same on the published grid with the transform's weights, exact while the two degrees add to less than 180."""
    grid = grid_of(ocean)
    limited = synthesise(analyse(loads, max_degree=64), grid).assign_attrs(units="kg m-2")
    answer = solve_fingerprints(prepare_solver(ocean, love, max_degree=90), limited, tolerance=ASKED)
    weighted = limited * grid.quadrature_weights
    for first, second in PAIRS:
        forth, back = (
            pairing(weighted, answer["relative_sea_level"], *pair) for pair in ((first, second), (second, first))
        )
        assert defect(forth, back) < LIMIT, (first, second)


def test_units_per_gigatonne_do_not_break_it(ocean, loads, love):
    """One load in kg m-2, the other in kg m-2 Gt-1: the answers differ by the 1000 mm in a metre and nothing else."""
    prepared = prepare_solver(ocean, love, max_degree=64)
    load = analyse(loads, max_degree=64)
    plain = solve_fingerprints(prepared, loads, tolerance=ASKED)["relative_sea_level_coefficients"]
    per_gigatonne = solve_fingerprints(prepared, loads.assign_attrs(units="kg m-2 Gt-1"), tolerance=ASKED)
    scaled = per_gigatonne["relative_sea_level_coefficients"]
    assert scaled.attrs["units"] == "mm Gt-1"
    forth = 1e3 * pairing(load, plain, "greenland", "alaska")
    assert defect(forth, pairing(load, scaled, "alaska", "greenland")) < LIMIT


def worst(load, sea_level):
    return max(defect(*(pairing(load, sea_level, *pair) for pair in (p, p[::-1]))) for p in PAIRS)


@pytest.mark.parametrize("shift", [1e-6, 1e-3])
def test_a_shifted_pattern_is_noticed(solved, shift):
    """The check can fail: one answer turned eastward by a millionth of a degree (0.1 m) breaks the symmetry."""
    load, answer = solved
    sea_level = answer["relative_sea_level_coefficients"]
    assert worst(load, sea_level) < LIMIT
    angle = np.deg2rad(shift) * sea_level["order"]
    cos, sin = sea_level.sel(part="cos", drop=True), sea_level.sel(part="sin", drop=True)
    turned = xr.concat(
        [cos * np.cos(angle) - sin * np.sin(angle), sin * np.cos(angle) + cos * np.sin(angle)], dim="part"
    ).assign_coords(part=["cos", "sin"])
    one = xr.where(sea_level["source"] == "west antarctica", turned, sea_level)
    assert worst(load, one) > 10.0 * LIMIT


def test_an_analysis_that_is_not_the_adjoint_is_noticed(ocean, loads, love, monkeypatch):
    """The check can fail: an analysis that loses up to a millionth of the highest degrees breaks the symmetry."""
    plain = GaussLegendreRings.analyse
    load = analyse(loads, max_degree=64)
    sea_level = {}
    for name, loss in (("adjoint", 0.0), ("lossy", 1e-6)):
        monkeypatch.setattr(
            GaussLegendreRings,
            "analyse",
            lambda self, field, loss=loss: (
                plain(self, field) * (1.0 - loss * degrees_and_orders(self.max_degree)[0] / self.max_degree)
            ),
        )
        answer = solve_fingerprints(prepare_solver(ocean, love, max_degree=64), loads, tolerance=ASKED)
        sea_level[name] = answer["relative_sea_level_coefficients"]
    assert worst(load, sea_level["adjoint"]) < LIMIT
    assert worst(load, sea_level["lossy"]) > 10.0 * LIMIT
