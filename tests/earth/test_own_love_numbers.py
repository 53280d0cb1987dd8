"""Love numbers from a table: every frame, holes, tides that are missing, and every refusal."""

import numpy as np
import pytest

from massfingerprint.earth.frames import FRAMES, in_frame
from massfingerprint.earth.own_love import read_love_numbers
from massfingerprint.errors import InputError, TableError
from massfingerprint.files.tables import csv_text

LOAD, TIDE = ["h_load", "l_load", "k_load"], ["h_tide", "l_tide", "k_tide"]
# degrees as tables of Love numbers print them (those of Farrell 1972, from memory, cut at 2048)
PRINTED = [*range(1, 11), 12, 15, 18, 25, 32, 46, 56, 100, 180, 325, 550, 1000, 1800, 2048]


def table_of(love, columns, degrees, frame="CE"):
    return (
        in_frame(love, frame)
        .to_dataframe()
        .reset_index()[["degree", *columns]]
        .set_index("degree", drop=False)
        .loc[degrees]
    )


def saved(folder, table, name="love.csv"):
    path = folder / name
    path.write_text(csv_text(table), encoding="utf-8")
    return path


@pytest.mark.parametrize("frame", FRAMES)
def test_every_frame_comes_back_in_ce(tmp_path, love, frame):
    """PREM written in a frame and read again is PREM in CE: 1e-15 for adding and taking off alpha."""
    path = saved(tmp_path, table_of(love, LOAD + TIDE, range(41), frame))
    found = read_love_numbers(path, reference_frame=frame, mean_density=love.attrs["mean_density"])
    assert found.attrs["reference_frame"] == "CE"
    assert float(found["k_load"][1]) == 0.0
    for name in LOAD + TIDE:
        np.testing.assert_allclose(found[name], love[name][:41], rtol=0, atol=1e-15, err_msg=name)
        assert found[name].attrs == love[name].attrs
    assert (found.attrs["tide_source"], found.attrs["degree_zero"]) == ("as given", "as given")
    assert found.attrs["given_degrees"] == "all to 40"
    assert found.attrs["radius"] == love.attrs["radius"]
    assert found.attrs["surface_gravity"] == pytest.approx(love.attrs["surface_gravity"], rel=1e-14)


def test_what_is_missing_is_said(tmp_path, love):
    """Without degree 0 and tides: h'_0 = 0, and PREM's tides."""
    found = read_love_numbers(saved(tmp_path, table_of(love, LOAD, range(1, 21))), reference_frame="CE")
    assert float(found["h_load"][0]) == 0.0
    assert found.attrs["degree_zero"] == "not given, h'_0 set to 0"
    assert found.attrs["given_degrees"] == "all to 20"
    assert found.attrs["tide_source"] == "PREM"
    assert found.attrs["source"] == "table love.csv, degree 1 given in CE"
    for name in TIDE:
        np.testing.assert_array_equal(found[name], love[name][:21])


def test_one_tide_number_alone(tmp_path, love):
    table = table_of(love, [*LOAD, "k_tide"], range(1, 6))
    table["k_tide"] *= 1.01
    found = read_love_numbers(saved(tmp_path, table), reference_frame="CE")
    assert found.attrs["tide_source"] == "h_tide, l_tide of PREM, the others as given"
    np.testing.assert_allclose(found["k_tide"][2:], 1.01 * love["k_tide"][2:6], rtol=1e-15)
    assert float(found["k_tide"][1]) == 0.0
    np.testing.assert_array_equal(found["h_tide"], love["h_tide"][:6])


def test_numbers_printed_times_the_degree(tmp_path, love):
    table = table_of(love, LOAD, range(31), "CF")
    times = table.assign(**{f"degree_times_{name}": table[name] * table["degree"] for name in LOAD[1:]})
    found = read_love_numbers(saved(tmp_path, times.drop(columns=LOAD[1:])), reference_frame="CF")
    for name in LOAD:
        np.testing.assert_allclose(found[name], love[name][:31], rtol=1e-14, atol=1e-15, err_msg=name)


def test_holes_are_filled_by_a_smooth_curve(tmp_path, love):
    """24 printed degrees of PREM: between them h' and k' within 0.2 %, l' within 0.3 % (spacing of the degrees up to 1.8-fold);
    the given ones and what lies below 11 as they are."""
    path = saved(tmp_path, table_of(love, LOAD, PRINTED))
    found = read_love_numbers(path, reference_frame="CE", fill="interpolate")
    for name, room in zip(LOAD, (2e-3, 3e-3, 2e-3), strict=True):
        np.testing.assert_allclose(found[name][2:], love[name][2:2049], rtol=room, err_msg=name)
        np.testing.assert_array_equal(found[name].values[PRINTED], love[name].values[PRINTED])
    assert found.attrs["given_degrees"].startswith("24 of 1 to 2048: 1 2 3 4 5 6 7 8 9 10 12 15")
    assert found.attrs["given_degrees"].endswith("the others by a cubic spline in log degree")


def test_holes_in_any_frame_touch_no_other_degree(tmp_path, love):
    """Degree 1 is not part of the curve: a table in CM fills its holes with the same numbers."""
    plain = read_love_numbers(
        saved(tmp_path, table_of(love, LOAD + TIDE, PRINTED)), reference_frame="CE", fill="interpolate"
    )
    other = read_love_numbers(
        saved(tmp_path, table_of(love, LOAD + TIDE, PRINTED, "CM"), "cm.csv"), reference_frame="CM", fill="interpolate"
    )
    for name in LOAD + TIDE:
        np.testing.assert_allclose(other[name], plain[name], rtol=0, atol=1e-15)
    # of the tides h and k are as smooth; l_n n^2 crosses 0, so of its size at degree 11
    np.testing.assert_allclose(plain["h_tide"][2:], love["h_tide"][2:2049], rtol=2e-3)
    np.testing.assert_allclose(plain["k_tide"][2:], love["k_tide"][2:2049], rtol=2e-3)
    np.testing.assert_allclose(plain["l_tide"][11:], love["l_tide"][11:2049], rtol=0, atol=2e-6)


def rows(*cells):
    return "degree,h_load,l_load,k_load\n" + "\n".join(",".join(str(cell) for cell in row) for row in cells) + "\n"


CE = (1, -0.286, 0.104, 0.0)
TWO = (2, -0.99, 0.023, -0.305)
NOT_OF_THE_FRAME = {
    "CE given as CM": ("CM", CE, r"degree 1 \(h' -0.286, l' 0.104, k' 0\) is not that of CM: there k'_1 is -1"),
    "CM given as CE": ("CE", (1, -1.286, -0.896, -1.0), r"is not that of CE: there k'_1 is 0"),
    "CM given as CF": ("CF", (1, -1.286, -0.896, -1.0), r"not that of CF: there k'_1 is small but not 0; it is 0 in CE"),
    "CF without its k'": ("CF", (1, -0.268, 0.134, 0.0), r"not that of CF: there k'_1 is small but not 0"),
    "CE given as CF": ("CF", (1, -0.286, 0.104, 0.021), r"not that of CF: there h'_1 \+ 2 l'_1 is 0, got -0.078"),
    "CE given as CL": ("CL", (1, -0.286, 0.104, 0.021), r"not that of CL: there l'_1 is 0, got 0.104"),
    "CE given as CH": ("CH", (1, -0.286, 0.104, 0.021), r"not that of CH: there h'_1 is 0, got -0.286"),
    "CE with the k' of CM": ("CM", (1, -0.286, 0.104, -1.0), r"not that of CM: with k'_1 taken off, h'_1 and"),
}  # fmt: skip


@pytest.mark.parametrize("case", list(NOT_OF_THE_FRAME))
def test_a_degree_one_that_contradicts_its_frame(tmp_path, case):
    frame, one, words = NOT_OF_THE_FRAME[case]
    path = tmp_path / "love.csv"
    path.write_text(rows(one, TWO), encoding="utf-8")
    with pytest.raises(TableError, match=words):
        read_love_numbers(path, reference_frame=frame)


def test_three_printed_digits_are_enough(tmp_path):
    """Published in CM with k'_1 -1.000, and in CF with h' + 2 l' of 0.0005."""
    path = tmp_path / "love.csv"
    path.write_text(rows((1, -1.286, -0.896, -1.0005), TWO), encoding="utf-8")
    found = read_love_numbers(path, reference_frame="CM")
    assert float(found["h_load"][1]) == pytest.approx(-0.286, abs=1e-12)
    path.write_text(rows((1, -0.2695, 0.1345, 0.021), TWO), encoding="utf-8")
    assert float(read_love_numbers(path, reference_frame="CF")["h_load"][1]) == pytest.approx(-0.2905, abs=1e-12)


REFUSED = {
    "hole": ((CE, TWO, (4, -1.0, 0.05, -0.13)), r"lacks degree 3. Give every degree, or pass fill='interpolate'"),
    "not whole": ((CE, (2.5, *TWO[1:])), r"line 3: degree is 2.5; must be a whole number of 0 or more"),
    "not ascending": ((CE, TWO, TWO), r"line 4: degree is 2 after 2; degrees must ascend, each once"),
    "no degree 1": ((TWO, (3, -1.0, 0.07, -0.19)), r"lacks degree 1, which depends on the frame. Add its row"),
    "only degree 1": ((CE,), r"ends at degree 1; must go to degree 2 or more"),
    "h positive": ((CE, (2, 0.99, 0.023, -0.305)), r"line 3: h_load is 0.99 at degree 2; must be negative"),
    "k positive": ((CE, (2, -0.99, 0.023, 0.305)), r"line 3: k_load is 0.305 at degree 2; must be between -1 and 0"),
    "k times n": ((CE, (2, -0.99, 0.023, -1.2)), r"k_load is -1.2 at degree 2; .* printed as n k' it is degree_times_k_load"),
    "l times n": ((CE, (2, -0.99, 1.3, -0.305)), r"l_load is 1.3 at degree 2; .* printed as n l' it is degree_times_l_load"),
    "mass of degree 0": (((0, -0.2, 0.0, -0.1), CE, TWO), r"line 2: k_load is -0.1 at degree 0; must be 0 at degree 0"),
    "sideways at degree 0": (((0, -0.2, 0.1, 0.0), CE, TWO), r"line 2: l_load is 0.1 at degree 0; must be 0 at degree 0"),
    "no number": ((CE, (2, -0.99, "none", -0.305)), r"line 3: l_load is 'none', not a number"),
}  # fmt: skip


@pytest.mark.parametrize("case", list(REFUSED))
def test_what_is_refused(tmp_path, case):
    cells, words = REFUSED[case]
    path = tmp_path / "love.csv"
    path.write_text(rows(*cells), encoding="utf-8")
    with pytest.raises(TableError, match=words) as caught:
        read_love_numbers(path, reference_frame="CE")
    assert str(path) in str(caught.value)
    assert "\n" not in str(caught.value)


def test_low_degrees_are_not_invented(tmp_path, love):
    path = saved(tmp_path, table_of(love, LOAD, [1, 2, 3, 4, 6, 8, 10, 20]))
    with pytest.raises(TableError, match="lacks degree 5; degrees up to 10 are not interpolated"):
        read_love_numbers(path, reference_frame="CE", fill="interpolate")


def test_columns_that_are_missing_or_too_many(tmp_path, love):
    table = table_of(love, LOAD, range(1, 4))
    with pytest.raises(TableError, match="needs one column of k_load or degree_times_k_load, has neither"):
        read_love_numbers(saved(tmp_path, table.drop(columns="k_load")), reference_frame="CE")
    with pytest.raises(TableError, match="needs one column of l_load or degree_times_l_load, has both"):
        read_love_numbers(saved(tmp_path, table.assign(degree_times_l_load=0.1), "b.csv"), reference_frame="CE")
    with pytest.raises(TableError, match="lacks the column h_load"):
        read_love_numbers(saved(tmp_path, table.drop(columns="h_load"), "c.csv"), reference_frame="CE")


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ({"reference_frame": "CMB"}, "reference_frame: no frame 'CMB'"),
        ({"fill": "spline"}, "fill: no way to treat holes 'spline'. Known: refuse, interpolate"),
        ({"radius": 6371.0}, "radius: must be 6e6 to 7e6 m, got 6371"),
        ({"mean_density": 5.5}, "mean_density: must be 1000 to 20000 kg m-3, got 5.5"),
        ({"surface_gravity": 9.6}, r"surface_gravity: must be within 1 % of 9\.8\d+ m s-2, the gravity of this radius"),
    ],
)
def test_wrong_arguments(tmp_path, love, arguments, words):
    path = saved(tmp_path, table_of(love, LOAD, range(1, 4)))
    with pytest.raises(InputError, match=words):
        read_love_numbers(path, **{"reference_frame": "CE", **arguments})
