"""Steric height against TEOS-10's own numbers, closed forms and plain sums; expansion of the whole ocean against AR6."""

import gsw
import numpy as np
import pandas as pd
import pytest
import xarray as xr

from massfingerprint.coast.steric import (
    EXPANSION_EFFICIENCY,
    constant_expansion_check,
    global_thermosteric,
    shelf_mean,
    steric_height,
)
from massfingerprint.constants import Constant
from massfingerprint.errors import InputError, SiteError, UnitsError

# A column of the documentation of TEOS-10: absolute salinity, temperature in situ, pressure in dbar, and its expansion in 1e-3 K-1
SALT = np.array([34.7118, 34.8915, 35.0256, 34.8472, 34.7366, 34.7324])
WARM = np.array([28.7856, 28.4329, 22.8103, 10.2600, 6.8863, 4.4036])
PRESSURE = np.array([10.0, 50.0, 125.0, 250.0, 600.0, 1000.0])
EXPANSION = 1e-3 * np.array([0.325601747, 0.323448084, 0.281413883, 0.172825693, 0.145569942, 0.128362987])


def profiles(salt, warm, depth, *, lat=0.0, lon=180.0, words=("sea_water_absolute_salinity", "sea_water_temperature")):
    """Rows of profiles that say what they are."""
    salt, warm = np.broadcast_arrays(np.atleast_2d(salt), np.atleast_2d(warm))
    dims = ("profile", "depth")
    unit = "g kg-1" if "absolute" in words[0] else "1"
    return xr.Dataset(
        {
            "salinity": (dims, salt.copy(), {"standard_name": words[0], "units": unit}),
            "temperature": (dims, warm.copy(), {"standard_name": words[1], "units": "degC"}),
        },
        coords={"depth": np.asarray(depth, dtype=float), "lat": lat, "lon": lon},
    )


def one(data, row=0):
    return data.isel(profile=row)


def test_expansion_is_that_of_the_documentation():
    """To the nine digits printed there."""
    np.testing.assert_allclose(gsw.alpha_wrt_t_exact(SALT, WARM, PRESSURE), EXPANSION, rtol=0, atol=6e-13)


def test_fresh_water_expands_as_tables_of_physics_say():
    """88e-6 and 207e-6 per K at 10 and 20 C, to their rounding; it shrinks when warmed below 4 C."""
    cold, cool, warm = gsw.alpha_wrt_t_exact(0.0, np.array([2.0, 10.0, 20.0]), 0.0)
    assert cold < 0.0
    assert cool == pytest.approx(88e-6, abs=0.5e-6)
    assert warm == pytest.approx(207e-6, abs=0.5e-6)


def test_warming_fresh_water_by_hand():
    """10 m of fresh water: up at 20 C, down at 2 C; 75 terms were fitted to the sea and are within 5e-6 per K of fresh water."""
    depth, base = [0.0, 10.0], np.array([[2.0], [20.0]])
    warmed = profiles(0.0, np.repeat(np.vstack([base + 0.01, base]), 2, axis=1), depth)
    for row, expected in ((0, -32.6e-6), (1, 206.8e-6)):
        found = steric_height(warmed.isel(profile=[row]), reference=one(warmed, row + 2), to_depth=10.0)
        assert float(found["total"][0]) == pytest.approx(1e4 * expected * 0.01, abs=1e4 * 5e-6 * 0.01)


def test_a_small_warming_expands_by_alpha_times_depth():
    """Warmed by 1 mK in situ: alpha of the exact formula summed along straight lines of temperature in steps of 25 cm, to the 5e-4
    of 75 terms; and the documentation's six values summed by trapezoids, within 5e-3 for alpha bends between levels."""
    depth = -gsw.z_from_p(PRESSURE, 0.0)
    data = profiles(SALT, np.vstack([WARM + 1e-3, WARM]), depth)
    found = steric_height(data, reference=one(data, 1), to_depth=float(depth[-1]))
    plain = np.trapezoid(np.append(EXPANSION[0], EXPANSION), np.append(0.0, depth))
    assert float(found["thermosteric"][0]) == pytest.approx(plain, rel=5e-3)  # mm: 1e3 x 1e-3 K
    fine = np.linspace(0.0, depth[-1], 4001)
    alpha = gsw.alpha_wrt_t_exact(np.interp(fine, depth, SALT), np.interp(fine, depth, WARM), gsw.p_from_z(-fine, 0.0))
    assert float(found["thermosteric"][0]) == pytest.approx(np.trapezoid(alpha, fine), rel=5e-4)
    assert float(found["total"][1]) == 0.0


def test_each_layer_expands_by_its_own_alpha():
    """The metre around each level of columns that are the same all the way, where alpha is one number: 75 terms and the exact
    formula agree to 5e-4, the second order of 1 mK is 1e-5."""
    for salt, warm, pressure, alpha in zip(SALT, WARM, PRESSURE, EXPANSION, strict=True):
        middle = float(-gsw.z_from_p(pressure, 0.0))
        data = profiles(salt, np.array([[warm + 1e-3] * 3, [warm] * 3]), [0.0, middle - 0.5, middle + 0.5])
        above, below = (
            float(steric_height(data, reference=one(data, 1), to_depth=middle + half)["total"][0])
            for half in (-0.5, 0.5)
        )
        assert below - above == pytest.approx(alpha, rel=1e-3)


def test_second_order_of_the_parts_is_their_remainder():
    """Warming and freshening at once: halve both and the remainder falls to a quarter, within a tenth for the third order."""
    depth = np.linspace(0.0, 500.0, 26)
    warm, salt = 12.0 - depth / 100.0, 35.0 + depth / 1000.0
    data = profiles(
        np.vstack([salt - 0.8, salt - 0.4, salt]), np.vstack([warm + 2.0, warm + 1.0, warm]), depth, lat=40.0
    )
    found = steric_height(data, reference=one(data, 2), to_depth=500.0)
    whole, half, none = found["remainder"].values
    assert whole / half == pytest.approx(4.0, rel=0.1)
    assert none == 0.0
    np.testing.assert_allclose(
        found["thermosteric"] + found["halosteric"] + found["remainder"], found["total"], atol=1e-12
    )
    assert (found["thermosteric"][:2] > 0.0).all()
    assert (found["halosteric"][:2] > 0.0).all()
    assert abs(whole) < 0.05 * found["total"].values[0]


def test_kinds_of_salinity_and_temperature_are_one_water():
    """Practical salinity, temperature in situ, potential, in kelvin: each converted by gsw itself."""
    depth, place = np.array([5.0, 100.0, 400.0]), {"lat": 50.0, "lon": -30.0}
    pressure = gsw.p_from_z(-depth, place["lat"])
    practical, warm = np.array([35.0, 35.1, 35.2]), np.array([12.0, 10.0, 8.0])
    salt = gsw.SA_from_SP(practical, pressure, place["lon"], place["lat"])
    held = gsw.CT_from_t(salt, warm, pressure)
    base = profiles(salt - 0.1, held - 1.0, depth, **place, words=("sea_water_absolute_salinity",) * 2)
    base["temperature"].attrs["standard_name"] = "sea_water_conservative_temperature"
    waters = {
        "practical in situ": (practical, warm, "sea_water_practical_salinity", "sea_water_temperature"),
        "absolute conservative": (salt, held, "sea_water_absolute_salinity", "sea_water_conservative_temperature"),
        "absolute potential": (
            salt,
            gsw.pt_from_CT(salt, held),
            "sea_water_absolute_salinity",
            "sea_water_potential_temperature",
        ),
    }
    found = []
    for salinity, temperature, *words in waters.values():
        data = profiles(salinity, temperature, depth, **place, words=words)
        found.append(float(steric_height(data, reference=one(base), to_depth=400.0)["total"][0]))
    kelvin = profiles(practical, warm + 273.15, depth, **place, words=waters["practical in situ"][2:])
    kelvin["temperature"].attrs["units"] = "K"
    found.append(float(steric_height(kelvin, reference=one(base), to_depth=400.0)["total"][0]))
    np.testing.assert_allclose(found, found[0], rtol=1e-9)  # gsw inverts conservative temperature to 1e-14 K
    assert found[0] != 0.0


def test_kinds_may_be_told_instead():
    data = profiles(35.0, np.array([[11.0, 9.0], [10.0, 8.0]]), [0.0, 50.0], words=("sea_water_absolute_salinity",) * 2)
    said = steric_height(data.pipe(renamed, "sea_water_conservative_temperature"), to_depth=50.0)
    for name in ("salinity", "temperature"):
        del data[name].attrs["standard_name"]
    told = steric_height(data, to_depth=50.0, salinity="absolute", temperature="conservative")
    np.testing.assert_array_equal(told["total"], said["total"])


def renamed(data, word):
    data = data.copy()
    data["temperature"] = data["temperature"].assign_attrs(standard_name=word)
    return data


def test_profiles_too_short_too_late_or_empty_say_so():
    warm = np.full((4, 4), 10.0)
    warm[1, 3:] = np.nan
    warm[2, :2] = np.nan
    warm[3] = np.nan
    warm[0] += 1.0
    found = steric_height(profiles(35.0, warm, [5.0, 20.0, 60.0, 100.0]), to_depth=80.0)
    assert found["reason"].values.tolist() == [
        "",
        "reaches 60 m, not 80 m",
        "begins at 60 m, deeper than 30 m",
        "no level has both salinity and temperature",
    ]
    assert np.isfinite(found["total"].values).tolist() == [True, False, False, False]
    np.testing.assert_array_equal(found["depth_reached"], [100.0, 60.0, 100.0, np.nan])
    np.testing.assert_array_equal(found["first_level"], [5.0, 5.0, 60.0, np.nan])
    np.testing.assert_array_equal(found["largest_gap"][:2], [40.0, 40.0])
    assert found.attrs["reference"] == "mean of the 1 that can be used"


def test_the_first_level_reaches_to_the_surface_and_the_last_is_a_line():
    """A level at 0 that repeats the first, and one at to_depth on the line, change nothing."""
    plain = profiles(35.0, np.array([[12.0, 10.0, 6.0], [11.0, 9.0, 5.0]]), [10.0, 50.0, 90.0])
    full = profiles(35.0, np.array([[12.0, 12.0, 10.0, 8.0], [11.0, 11.0, 9.0, 7.0]]), [0.0, 10.0, 50.0, 70.0])
    for data in (plain, full):
        data["temperature"].attrs["standard_name"] = "sea_water_conservative_temperature"
    found = [steric_height(data, reference=one(plain, 1), to_depth=70.0) for data in (plain, full)]
    np.testing.assert_allclose(found[0]["total"], found[1]["total"], rtol=1e-9, atol=1e-9)  # other Gauss nodes


def test_a_gap_is_bridged_and_the_mean_is_the_reference():
    """The level left out lies on the line of its neighbours, so nothing changes; the mean of two is as far from both."""
    warm = np.array([[12.0, 10.0, 8.0], [10.0, 8.0, 6.0]])
    data = profiles(35.0, warm, [0.0, 50.0, 100.0], words=("sea_water_absolute_salinity",) * 2)
    data = renamed(data, "sea_water_conservative_temperature")
    whole = steric_height(data, to_depth=100.0)
    holed = data.copy(deep=True)
    holed["temperature"][0, 1] = np.nan
    np.testing.assert_allclose(steric_height(holed, to_depth=100.0)["total"], whole["total"], rtol=1e-12)
    given = steric_height(data, reference=data.mean("profile", keep_attrs=True), to_depth=100.0)
    np.testing.assert_allclose(given["total"], whole["total"], rtol=1e-12)
    above, below = whole["total"].values  # alpha changes by 6 % over the kelvin between them
    assert above == pytest.approx(-below, rel=0.08)
    assert above > 0.0


def test_rows_may_be_times():
    data = profiles(35.0, np.array([[11.0, 9.0], [10.0, 8.0]]), [0.0, 50.0]).rename(profile="time")
    data = data.assign_coords(time=np.array(["2001-01-16", "2002-01-16"], dtype="datetime64[ns]"))
    found = steric_height(data, to_depth=50.0)
    assert found["total"].dims == ("time",)
    assert float(found["total"][0]) > 0.0 > float(found["total"][1])


SOUND = profiles(35.0, np.array([[11.0, 9.0], [10.0, 8.0]]), [0.0, 50.0])


@pytest.mark.parametrize(
    ("change", "error", "words"),
    [
        (lambda d: d.drop_vars("salinity"), InputError, "with salinity and temperature"),
        (lambda d: d.rename(profile="cast"), InputError, "one of profile or time"),
        (lambda d: d.assign_coords(depth=[50.0, 0.0]), InputError, "depth must ascend"),
        (lambda d: d.assign_coords(depth=("depth", [0.0, 50.0], {"positive": "up"})), InputError, "depth must ascend"),
        (lambda d: d.assign_coords(depth=("depth", [0.0, 50.0], {"units": "dbar"})), UnitsError, "units must be 'm'"),
        (lambda d: d.assign_coords(lat=95.0), InputError, "lat must lie between -90 and 90"),
        (lambda d: d.drop_vars("lon"), InputError, "needs lon in degrees"),
        (lambda d: renamed(d, "sea_surface_temperature"), InputError, "temperature does not say which it is"),
        (
            lambda d: d.assign(temperature=d["temperature"] + 273.15),
            InputError,
            "row 0, level 0 is 284.15; the sea has -3 to 45",
        ),
        (
            lambda d: d.drop_attrs().pipe(renamed, "sea_water_temperature"),
            InputError,
            "salinity does not say which it is",
        ),
        (lambda d: d.assign(temperature=d["temperature"].assign_attrs(units="degF")), UnitsError, "got 'degF'"),
        (
            lambda d: d.assign(salinity=d["salinity"].assign_attrs(units="1")),
            UnitsError,
            "absolute salinity must be in",
        ),
        (
            lambda d: d.assign(temperature=d["temperature"].copy(data=[[11, 9], [10, -999]])),
            InputError,
            "row 1, level 1 is -999",
        ),
    ],
)
def test_profiles_that_cannot_be_used_say_why(change, error, words):
    with pytest.raises(error, match=words):
        steric_height(change(SOUND), to_depth=50.0)


@pytest.mark.parametrize(
    ("choices", "words"),
    [
        ({"to_depth": 0.0}, "to_depth: must be a depth in m"),
        ({"to_depth": 60.0}, "none can be used to 60 m. The first: reaches 50 m"),
        ({"to_depth": 50.0, "salinity": "practical"}, "absolute by its standard name, salinity='practical' was passed"),
        ({"to_depth": 50.0, "temperature": "insitu"}, "no kind of temperature 'insitu'"),
        ({"to_depth": 50.0, "reference": "median"}, "no reference profile 'median'"),
        ({"to_depth": 50.0, "reference": SOUND}, "must be one profile, got 2"),
        ({"to_depth": 50.0, "reference": one(SOUND).isel(depth=[0])}, "reference: reaches 0 m, not 50 m"),
    ],
)
def test_choices_that_cannot_be_used_say_why(choices, words):
    with pytest.raises(InputError, match=words):
        steric_height(SOUND, **choices)


@pytest.fixture
def shelf():
    """Five profiles on a line northwards from 50 N 0 E, half a degree (55.6 km) apart, the last of them too short."""
    warm = np.array([10.0, 11.0, 12.0, 15.0, 12.0])[:, None] + np.array([2.0, 0.0])
    warm[4, 1] = np.nan
    times = np.array(["2001-03-01", "2001-08-01", "2003-05-01", "2003-05-02", "2003-05-03"], dtype="datetime64[ns]")
    data = profiles(35.0, warm, [0.0, 80.0])
    data = data.assign_coords(lat=("profile", 50.0 + 0.5 * np.arange(5)), lon=0.0, time=("profile", times))
    return steric_height(data, to_depth=80.0)


SITES = pd.DataFrame({"site": ["Quay", "Pier"], "lat": [50.0, -50.0], "lon": [360.0, 0.0]})


def test_a_shelf_is_the_mean_of_the_profiles_around(shelf):
    found = shelf_mean(shelf, SITES, radius_km=120.0)
    assert found["profiles"].values.tolist() == [3, 0]
    for name in ("thermosteric", "halosteric", "total", "remainder"):
        assert float(found[name][0]) == pytest.approx(float(shelf[name][:3].mean()), rel=1e-12, abs=1e-15)
    assert float(found["total_spread"][0]) == pytest.approx(float(shelf["total"][:3].std(ddof=1)), rel=1e-12)
    assert np.isnan(found["total"].values[1])
    assert found["reason"].values.tolist() == ["", "no usable profile within 120 km"]
    assert "underestimates" in found.attrs["comment"]


def test_a_shelf_by_years(shelf):
    found = shelf_mean(shelf, SITES, radius_km=300.0, period="year")
    assert [str(time)[:10] for time in found["time"].values] == ["2001-07-02", "2003-07-02"]
    assert found["profiles"].values.tolist() == [[2, 2], [0, 0]]
    np.testing.assert_allclose(
        found["total"].values[0], [shelf["total"].values[:2].mean(), shelf["total"].values[2:4].mean()], rtol=1e-12
    )
    assert [str(t)[:10] for t in shelf_mean(shelf, SITES, period="month")["time"].values[:2]] == [
        "2001-03-16",
        "2001-08-16",
    ]


def test_shelves_that_cannot_be_averaged_say_why(shelf):
    with pytest.raises(InputError, match="radius_km: must be a positive number"):
        shelf_mean(shelf, SITES, radius_km=0.0)
    with pytest.raises(InputError, match="no period 'week'"):
        shelf_mean(shelf, SITES, period="week")
    with pytest.raises(InputError, match="need a coordinate time"):
        shelf_mean(shelf.drop_vars("time"), SITES, period="year")
    with pytest.raises(InputError, match="one place already"):
        shelf_mean(shelf.drop_vars("time").rename(profile="time"), SITES)
    with pytest.raises(SiteError, match="lacks the column lat"):
        shelf_mean(shelf, SITES.drop(columns="lat"))


def heat(values, unit="ZJ"):
    times = np.array(["1992-07-01", "1993-07-01", "1994-07-01"], dtype="datetime64[ns]")[: len(values)]
    return xr.DataArray(np.asarray(values, dtype=float), dims="time", coords={"time": times}, attrs={"units": unit})


@pytest.mark.parametrize(("rate", "rise"), [(8.42, 1.01), (10.52, 1.31)])
def test_published_heat_makes_the_published_rise(rate, rise):
    """AR6 ch. 2 Table 2.7, 1971-2018 and 1993-2018, a year. Its own pairs imply 0.1200 and 0.1245 mm per ZJ, up to 3 % from 0.1210;
    other estimates of the efficiency, 0.113 +- 0.013 and 0.116 +- 0.011, are less sure. Within 0.011 and rounding."""
    found = global_thermosteric(heat([rate]), heat([0.0]))
    assert float(found["thermosteric"][0]) == pytest.approx(rise, abs=0.011 * rate + 0.005)
    assert float(found["thermosteric"][0]) == pytest.approx(rise, rel=0.03 + 0.005 / rise)


def test_heat_and_efficiency_err_in_squares():
    found = global_thermosteric(heat([0.0, 100.0, np.nan]), heat([3.0, 4.0, np.nan]))
    np.testing.assert_allclose(found["thermosteric"], [0.0, 12.1, np.nan], rtol=1e-12)
    np.testing.assert_allclose(found["sigma_of_efficiency"], [0.0, 0.14, np.nan], rtol=1e-12)
    np.testing.assert_allclose(found["thermosteric_sigma"], [0.363, np.hypot(0.484, 0.14), np.nan], rtol=1e-12)
    joules = global_thermosteric(heat([0.0, 1e23, np.nan], "J"), heat([3e21, 4e21, np.nan], "J"))
    xr.testing.assert_allclose(joules, found)
    other = global_thermosteric(heat([100.0]), heat([0.0]), efficiency=Constant(0.116, "m YJ-1", 0.011, "another"))
    np.testing.assert_allclose([other["thermosteric"][0], other["thermosteric_sigma"][0]], [11.6, 1.1], rtol=1e-12)


@pytest.mark.parametrize(
    ("arguments", "error", "words"),
    [
        ((heat([1.0], "W"), heat([1.0])), UnitsError, "heat: units must be 'ZJ'"),
        ((heat([1.0]), heat([-1.0])), InputError, "sigma: must be 0 or more"),
        ((heat([1.0, 2.0]), heat([1.0])), InputError, "sigma: must have the times"),
        ((heat([np.inf]), heat([1.0])), InputError, "heat: must be finite"),
        ((heat([1.0]).isel(time=0), heat([1.0])), InputError, r"heat: must be a DataArray \(time\)"),
    ],
)
def test_heat_that_cannot_be_used_says_why(arguments, error, words):
    with pytest.raises(error, match=words):
        global_thermosteric(*arguments)
    with pytest.raises(InputError, match="efficiency: must be a Constant in m YJ-1"):
        global_thermosteric(heat([1.0]), heat([1.0]), efficiency=0.12)


def test_one_coefficient_for_all_water_is_only_a_check():
    """By hand: 0.1 K over 1.332e18 m3 on 3.618e14 m2 at 207e-6 per K is 76.2 mm; the heat, 550.4 ZJ, makes 66.6 mm."""
    found = constant_expansion_check(0.1, coefficient=207e-6)
    assert found.constant_coefficient == pytest.approx(76.2, abs=0.05)
    assert found.by_efficiency == pytest.approx(66.6, abs=0.05)
    assert found.error == pytest.approx(found.constant_coefficient - found.by_efficiency, rel=1e-12)
    assert found.relative_error == pytest.approx(207e-6 / 1.8087e-4 - 1.0, abs=1e-4)
    assert np.isnan(constant_expansion_check(0.0, coefficient=207e-6).relative_error)
    assert EXPANSION_EFFICIENCY.uncertainty == 0.0014
    with pytest.raises(InputError, match="coefficient: must be a number of K-1"):
        constant_expansion_check(0.1, coefficient=207.0)
