"""Earth models from tables: a seismology package's own, export and reading back, and every refusal."""

import importlib.util
from pathlib import Path

import numpy as np
import pytest

from massfingerprint.earth._radial import numbers_at
from massfingerprint.earth.description import fluid_regions, report
from massfingerprint.earth.models import earth_model
from massfingerprint.earth.prem import prem
from massfingerprint.earth.table import earth_model_table, read_earth_model
from massfingerprint.errors import InputError, MissingFileError, TableError, UnitsError
from massfingerprint.files.tables import csv_text, read_columns

DEGREES = np.array([2.0, 3.0, 5.0, 10.0, 20.0, 50.0])
SPEEDS = "radius [km],density [g cm-3],p_speed [km s-1],s_speed [km s-1]"
MODULI = "radius [km],density [g cm-3],bulk_modulus [GPa],rigidity [GPa]"
PLAIN = ((0, 12.0, 11.0, 3.5), (1200, 12.0, 11.0, 3.5), (1200, 11.0, 9.5, 0), (3480, 10.0, 8.1, 0), (3480, 5.5, 13.0, 7.0),
         (6371, 3.3, 8.0, 4.5))  # fmt: skip


def written(folder: Path, header: str, rows, name: str = "own.csv") -> Path:
    path = folder / name
    path.write_text(
        "\n".join([header, *(",".join(str(cell) for cell in row) for row in rows)]) + "\n", encoding="utf-8"
    )
    return path


def seismology_rows(name: str, last: int) -> list[list[str]]:
    """Rows of numbers of a file of obspy's taup/data, read without importing obspy."""
    package = Path(importlib.util.find_spec("obspy").submodule_search_locations[0])
    lines = (package / "taup" / "data" / name).read_text().splitlines()
    return [cells[:last] for line in lines if len(cells := line.split()) >= 4 and cells[0][0].isdigit()]


def test_prem_as_a_seismology_package_tabulates_it(tmp_path):
    """obspy 1.5 taup/data/prem.nd, 88 rows, five digits, linear between rows 50 to 100 km apart.

    The mass between rows is low by the curvature of density, 2e-5 in all.

    A parabola of PREM's curvature over 100 km is off by 1e-4 of its value at most; its own isotropic lines of the uppermost mantle
    differ from the Voigt average by up to 3e-3 over 200 km. Of h', k', h and k that leaves 1e-4; l' and l are differences of two
    motions, five times as much.
    """
    header = "depth [km],p_speed [km s-1],s_speed [km s-1],density [g cm-3],q_shear"
    rows = [[*row[:4], row[5]] for row in seismology_rows("prem.nd", 6)]
    model = read_earth_model(written(tmp_path, header, rows))
    theirs, ours = numbers_at(model, DEGREES), numbers_at(prem(), DEGREES)
    for row, room in zip(range(6), (1e-4, 5e-4, 1e-4, 1e-4, 5e-4, 1e-4), strict=True):
        np.testing.assert_allclose(theirs[row], ours[row], rtol=room, atol=1e-6)
    assert fluid_regions(model) == [(1221.5e3, 3480e3)]
    assert model.mass == pytest.approx(prem().mass, rel=3e-5)
    # Q_mu 0 of the fluid is none; 143 stands in both rows of a shell of the transition zone
    assert {shell.q_shear for shell in model.layers if shell.fluid} == {None}
    assert next(shell.q_shear for shell in model.layers if shell.inner <= 5.9e6 < shell.outer) == pytest.approx(143.0)


def test_another_earth_apart_by_blanks(tmp_path):
    """ak135 (Kennett et al. 1995) from obspy 1.5 taup/data/ak135.tvel: another Earth, its h'_2 and k_2 within 1 % of PREM's (PREM
    with ak135's crust differs by 0.7 % in h'_2), its load numbers to degree 50 within 5 %; 35 km of crust are softer."""
    rows = seismology_rows("ak135.tvel", 4)
    path = tmp_path / "ak135.txt"
    header = "# invented comment\ndepth [km]  p_speed [km s-1]  s_speed [km s-1]  density [g cm-3]"
    path.write_text("\n".join([header, *("  ".join(row) for row in rows)]), encoding="utf-8")
    model = read_earth_model(path)
    assert model.name == "ak135"
    theirs, ours = numbers_at(model, DEGREES), numbers_at(prem(), DEGREES)
    np.testing.assert_allclose(theirs[[0, 2, 3, 5], 0], ours[[0, 2, 3, 5], 0], rtol=1e-2)
    np.testing.assert_allclose(theirs[[0, 2]], ours[[0, 2]], rtol=5e-2)
    assert "fluid from 1217.5 to 3479.5 km radius" in report(model)


@pytest.mark.parametrize(("spacing", "room"), [(100.0, 5e-5), (50.0, 1.25e-5)])
def test_export_and_reading_back(tmp_path, spacing, room):
    """PREM written in rows and read again: linear pieces are off by the square of the spacing (h', k', h, k; 1.8e-5 to 3e-5 at
    100 km), l' tenfold."""
    path = tmp_path / "prem.csv"
    path.write_text(csv_text(earth_model_table(prem(), spacing_km=spacing)), encoding="utf-8")
    again = numbers_at(read_earth_model(path), DEGREES[:4])
    ours = numbers_at(prem(), DEGREES[:4])
    np.testing.assert_allclose(again[[0, 2, 3, 5]], ours[[0, 2, 3, 5]], rtol=room)
    np.testing.assert_allclose(again[[1, 4]], ours[[1, 4]], rtol=10.0 * room, atol=1e-6)


@pytest.mark.parametrize("name", ["five_layer", "homogeneous"])
def test_linear_models_come_back_as_they_were(tmp_path, name):
    """Two rows a shell, exact: radii in km and back are good to the last digit of a double."""
    model = earth_model(name)
    table = earth_model_table(model)
    assert len(table) == 2 * len(model.layers)
    path = tmp_path / f"{name}.csv"
    path.write_text(csv_text(table), encoding="utf-8")
    again = read_earth_model(path)
    assert len(again.layers) == len(model.layers)
    np.testing.assert_allclose(numbers_at(again, DEGREES[:3]), numbers_at(model, DEGREES[:3]), rtol=1e-9)
    assert [shell.viscosity for shell in again.layers] == [shell.viscosity for shell in model.layers]


def test_quality_factors_come_back(tmp_path):
    model = earth_model("prem_200s")
    path = tmp_path / "q.csv"
    path.write_text(csv_text(earth_model_table(model, spacing_km=1000.0)), encoding="utf-8")
    again = read_earth_model(path, name="back")
    assert again.name == "back"
    for shell in model.layers:
        match = next(other for other in again.layers if other.inner == shell.inner)
        assert (match.q_shear is None) == (shell.q_shear is None)
        assert match.q_bulk == pytest.approx(shell.q_bulk, rel=1e-14)


def test_one_straight_line_is_one_shell(tmp_path):
    """Rows on the line between their neighbours leave no trace; a row off it, and a radius that stands twice, do."""
    inner = [(r, 12.0 - r / 1000.0, 11.0, 5.0) for r in (0, 500, 1000, 3000)]
    outer = [(3000, 5.0, 8.0, 4.5), (4000, 5.0, 8.0, 4.5), (5000, 5.0, 8.0, 4.5), (6371, 4.0, 8.0, 4.5)]
    model = read_earth_model(written(tmp_path, SPEEDS, inner + outer))
    assert [shell.outer for shell in model.layers] == [3e6, 5e6, 6.371e6]
    assert model.density(0, np.array([5e5, 2.9e6])) == pytest.approx([11500.0, 9100.0], rel=1e-13)
    assert model.density(2, np.array([5.6855e6])) == pytest.approx([4500.0], rel=1e-13)


def test_every_way_to_write_a_table_is_the_same_earth(tmp_path):
    """Surface first, depth, metres and kg m-3, blanks with a commented header, moduli: same mass and moduli to rounding."""
    reference = read_earth_model(written(tmp_path, SPEEDS, PLAIN))
    shown = [(6371 - r, rho, p, s) for r, rho, p, s in reversed(PLAIN)]
    metres = [(1e3 * r, 1e3 * rho, 1e3 * p, 1e3 * s) for r, rho, p, s in PLAIN]
    blanks = tmp_path / "blanks.txt"
    blanks.write_text(
        "# radius [km] density [g/cm3] p_speed [km/s] s_speed [km/s] note\n"
        + "\n".join(" ".join([*(str(cell) for cell in row), "-"]) for row in PLAIN)
    )
    others = [
        written(tmp_path, SPEEDS, reversed(PLAIN), "back.csv"),
        written(tmp_path, SPEEDS.replace("radius", "depth"), shown, "depth.csv"),
        written(tmp_path, "radius [m],density [kg m-3],p_speed [m s-1],s_speed [m s-1]", metres, "metres.csv"),
        blanks,
    ]
    for path in others:
        model = read_earth_model(path)
        assert model.mass == pytest.approx(reference.mass, rel=1e-14), path
        for number, shell in enumerate(reference.layers):
            radius = np.array([0.3 * shell.inner + 0.7 * shell.outer])
            assert model.layers[number].fluid == shell.fluid
            assert model.moduli(number, radius)[0] == pytest.approx(reference.moduli(number, radius)[0], rel=1e-13), (
                path
            )


def test_moduli(tmp_path):
    """Bulk modulus and first Lame parameter, GPa, linear between rows: kappa = lambda + 2/3 mu."""
    rows = ((0, 8.0, 600, 200), (6371, 4.0, 200, 50))
    bulk = read_earth_model(written(tmp_path, MODULI, rows))
    lame = read_earth_model(
        written(
            tmp_path, MODULI.replace("bulk_modulus", "first_lame"), [(r, d, k - 2 * m / 3, m) for r, d, k, m in rows]
        )
    )
    for model in (bulk, lame):
        first, rigidity = model.moduli(0, np.array([3.1855e6]))
        assert rigidity == pytest.approx(125e9, rel=1e-13)
        assert first == pytest.approx(400e9 - 2 / 3 * 125e9, rel=1e-13)


def test_optional_columns(tmp_path):
    """Between two rows the loss 1/Q is averaged (100 and none: 200), and so is the viscosity."""
    header = f"{SPEEDS},q_shear,q_bulk,viscosity [Pa s]"
    model = read_earth_model(
        written(
            tmp_path,
            header,
            [(0, 8, 9, 5, 100, "", "1e21"), (5000, 7, 9, 5, "inf", "", "3e21"), (6371, 3, 8, 4, "", "", "inf")],
        )
    )
    assert [shell.q_shear for shell in model.layers] == [200.0, None]
    assert [shell.q_bulk for shell in model.layers] == [None, None]
    assert [shell.viscosity for shell in model.layers] == [2e21, float("inf")]


def changed(row: int, column: int, cell):
    rows = [list(cells) for cells in PLAIN]
    rows[row][column] = cell
    return rows


OCEAN = [*PLAIN, (6371.0, 1.02, 1.45, 0), (6374.0, 1.02, 1.45, 0)]
BOTTOM_UP = SPEEDS.replace("radius", "depth")
REFUSED = {
    "not in order": (SPEEDS, [*PLAIN[:3], (1100, 11, 9, 0), *PLAIN[3:]],
                     r"line 5: radius is 1100, after 1200; rows must run one way"),
    "three times": (SPEEDS, [*PLAIN[:3], PLAIN[2], *PLAIN[3:]],
                    r"line 5: radius is 1200, for the third time; a boundary has two rows"),
    "twice at the end": (SPEEDS, [*PLAIN, PLAIN[-1]], r"line 8: radius is 6371, twice at the last place of the table"),
    "twice at the start": (SPEEDS, [PLAIN[0], *PLAIN], r"line 3: radius is 0, twice at the first place of the table"),
    "one row": (SPEEDS, PLAIN[:1], r"has one row; an Earth needs two or more"),
    "negative radius": (SPEEDS, changed(0, 0, -1), r"line 2: radius is -1, must be 0 or more"),
    "no centre": (SPEEDS, PLAIN[4:], r"line 2: radius is 3480, the smallest; the table must reach the centre, radius 0"),
    "depth without centre": (BOTTOM_UP, [(0, 3, 8, 4), (2891, 5, 13, 7)],
                             r"line 3: depth is 2891, the largest, which is the centre.*allowed are 6000 to 7000 km"),
    "metres for km": ("radius [m],density [g cm-3],p_speed [km s-1],s_speed [km s-1]", PLAIN,
                      r"line 7: radius is 6371, the largest, which is the surface; allowed are 6000 to 7000 km. Check its unit"),
    "no density": (SPEEDS, changed(1, 1, 0), r"line 3: density is 0, must be positive"),
    "density in the wrong unit": (SPEEDS.replace("g cm-3", "kg m-3"), PLAIN,
                                  r"column density: gives a mean of 5\.\d+ kg m-3; allowed are 1000 to 20000. The unit"),
    "speeds in the wrong unit": (SPEEDS.replace("km s-1", "m s-1"), PLAIN, r"column p_speed: is at most 13 m s-1, less than 1000"),
    "moduli in the wrong unit": (MODULI.replace("GPa", "Pa"), ((0, 8, 600, 200), (6371, 4, 200, 50)),
                                 r"column bulk_modulus: is at most 600 Pa, less than 1e\+09"),
    "negative shear": (SPEEDS, changed(5, 3, -4.5), r"line 7: s_speed is -4.5, must be 0 \(fluid\) or more"),
    "p too slow": (SPEEDS, changed(5, 2, 5.0),
                   r"line 7: p_speed is 5.0, too low for s_speed: the bulk modulus is positive only where"),
    "p negative": (SPEEDS, changed(5, 2, -8.0), r"line 7: p_speed is -8.0, must be positive"),
    "bulk negative": (MODULI, ((0, 8, 600, 200), (6371, 4, 0, 50)), r"line 3: bulk_modulus is 0, must be positive"),
    "lame too low": (MODULI.replace("bulk_modulus", "first_lame"), ((0, 8, 600, 200), (6371, 4, -40, 50)),
                     r"line 3: first_lame is -40, too low: the bulk modulus, first_lame \+ 2/3 rigidity, must be positive"),
    "half fluid": (SPEEDS, changed(3, 3, 2.0), r"line 4: s_speed is 0, while line 5, the next radius, has shear; .* twice"),
    "ocean": (SPEEDS, OCEAN, r"is fluid at the surface, from 6371 to 6374 km radius; .* Leave an ocean's rows out, or put crust"),
    "no unit": (SPEEDS.replace(" [km]", ""), PLAIN, r"column radius has no unit. Write it as 'radius \[km\]'"),
    "two places": (f"{SPEEDS},depth [km]", [(*row, 0) for row in PLAIN], r"needs one column of radius or depth, has both"),
    "no place": (SPEEDS.replace("radius [km]", "note"), PLAIN, r"needs one column of radius or depth, has neither"),
    "no elastic": ("radius [km],density [g cm-3]", [row[:2] for row in PLAIN],
                   r"needs p_speed and s_speed, or .*; has none of them"),
    "three elastic": (f"{SPEEDS},rigidity [GPa]", [(*row, 0) for row in PLAIN], r"no others; has p_speed and s_speed and rigidity"),
    "unknown column": (SPEEDS.replace("s_speed", "s_sped"), PLAIN, r"column 's_sped' is not known here. Did you mean s_speed"),
    "quality": (f"{SPEEDS},q_shear", [(*row, -1) for row in PLAIN],
                r"line 2: q_shear is -1, must be a positive number, empty or inf"),
    "viscosity": (f"{SPEEDS},viscosity [Pa s]", [(*row, "thick") for row in PLAIN],
                  r"line 2: viscosity is thick, must be 0, a positive"),
    "no number": (SPEEDS, changed(2, 1, "11:0"), r"line 4: density is '11:0', not a number"),
    "not finite": (SPEEDS, changed(2, 1, "inf"), r"line 4: density is 'inf', not a number. Give a finite number"),
    "no density column": (SPEEDS.replace("density", "note"), PLAIN, r"lacks the column density"),
}  # fmt: skip


@pytest.mark.parametrize("case", list(REFUSED))
def test_what_is_refused(tmp_path, case):
    header, rows, words = REFUSED[case]
    path = written(tmp_path, header, rows)
    with pytest.raises(TableError, match=words) as caught:
        read_earth_model(path)
    assert str(path) in str(caught.value)
    assert "\n" not in str(caught.value)


def test_a_unit_of_another_kind(tmp_path):
    with pytest.raises(UnitsError, match=r"column density: units must be 'kg m-3' or 'g cm-3', got 'km'"):
        read_earth_model(written(tmp_path, SPEEDS.replace("g cm-3", "km"), PLAIN))


def test_a_file_that_is_not_there(tmp_path):
    with pytest.raises(MissingFileError, match="there is no such file"):
        read_earth_model(tmp_path / "none.csv")


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("a b\n1 2\n3\n", r"line 3: has 1 cells, the header 2 columns. Write '-' for a gap"),
        ("1 2\n3 4\n", r"line 1: holds numbers where the names of the columns should stand"),
        ("a b\n", r"has a header but no rows"),
        ("a a\n1 2\n", r"column 'a' stands there twice"),
        ("b c\n1 2\n", r"lacks the column a; found b, c"),
        ("a;b\n1;2\n", r"header 'a;b' has no commas|lacks the column a"),
    ],
)
def test_tables_apart_by_blanks_that_cannot_be_read(tmp_path, text, words):
    path = tmp_path / "t.txt"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(TableError, match=words):
        read_columns(path, required=("a",))


def test_tables_apart_by_blanks(tmp_path):
    path = tmp_path / "t.txt"
    path.write_text("# first comment\n# a [km]   b\n 1.5  -\n# between\n2 x\n", encoding="utf-8")
    frame, units = read_columns(path, required=("a",))
    assert frame.to_dict("list") == {"a": ["1.5", "2"], "b": ["", "x"]}
    assert list(frame.index) == [3, 5]
    assert units == {"a": "km"}


@pytest.mark.parametrize("spacing", [0.5, 2000.0, float("nan")])
def test_spacing_that_cannot_be(spacing):
    with pytest.raises(InputError, match="spacing_km: must be 1 to 1000 km"):
        earth_model_table(prem(), spacing_km=spacing)
