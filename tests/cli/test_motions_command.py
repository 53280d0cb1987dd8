"""``massfingerprint motions``: numbers times rates, errors as the mass has them, the observed pole beside them."""

import contextlib
import csv
import io
import json

import numpy as np
import pandas as pd
import pytest

import massfingerprint as mf
from massfingerprint.cli import main
from massfingerprint.cli._earth_rates import Drift, mass_of
from massfingerprint.cli.motions import _observed
from massfingerprint.errors import InputError
from massfingerprint.sealevel.observed_pole import centimetres, observed_drift
from massfingerprint.sealevel.whole_earth import earth_numbers, pole_direction

SOURCES = ("greenland_southeast", "glaciers_17")
AMOUNTS, SIGMAS = np.array([-80.0, -25.0]), np.array([5.0, 3.0])
RATES = "time_start,time_end,source,mass_rate [Gt yr-1],mass_rate_sigma [Gt yr-1],citation\n" + "".join(
    f"2000-01-01,2012-01-01,{source},{amount:g},{sigma:g},an invented record\n"
    for source, amount, sigma in zip(SOURCES, AMOUNTS, SIGMAS, strict=True)
)
COARSE = ["--max-degree", "64", "--spacing", "2", "--quiet"]
WIDE = 1.959963984540054  # standard deviations of 95 %
AS_JSON = ["--interval", "95 %", "--stokes-degree", "3", "--json"]
RECORD = dict.fromkeys(("ledger_file", "rates_file", "published_set", "window", "error_model", "correlation"))
RECORD |= {"quantity": "cumulative", "drop": (), "seasonal": False}


def ledger(years, *, first=2000):
    """Yearly values of straight lines; the error is one shared by all epochs, growing with time."""
    rows = ["time,source,mass_change [Gt],mass_change_sigma [Gt],error_model,citation"]
    for source, amount, sigma in zip(SOURCES, AMOUNTS, SIGMAS, strict=True):
        rows += [
            f"{first + n}-01-01,{source},{amount * n},{sigma * n},systematic,an invented record"
            for n in range(years + 1)
        ]
    return "\n".join(rows) + "\n"


@pytest.fixture(scope="module")
def numbers():
    ocean = mf.ocean_fraction(2.0)
    prepared = mf.prepare_solver(ocean, mf.love_numbers(max_degree=64), max_degree=64)
    load = mf.spread_mass(mf.regions(*SOURCES), ocean)
    return earth_numbers(prepared, mf.solve_fingerprints(prepared, load, outputs=("surface_load",)))


@pytest.fixture(scope="module")
def constant(tmp_path_factory):
    """Rows of constant rates by source, quantity and frame."""
    path, printed = tmp_path_factory.mktemp("constant") / "rates.csv", io.StringIO()
    path.write_text(RATES, encoding="utf-8")
    with contextlib.redirect_stdout(printed):
        assert main(["motions", "--rates", str(path), *AS_JSON, *COARSE]) == 0
    return rows_of(printed.getvalue())


@pytest.fixture
def rates_file(tmp_path):
    path = tmp_path / "rates.csv"
    path.write_text(RATES, encoding="utf-8")
    return str(path)


@pytest.fixture
def ledger_file(tmp_path):
    path = tmp_path / "ledger.csv"
    path.write_text(ledger(12), encoding="utf-8")
    return str(path)


def run(capsys, *arguments):
    assert main(["motions", *arguments, *COARSE]) == 0
    captured = capsys.readouterr()
    assert captured.err == ""
    return captured.out


def rows_of(text):
    return {(row["source"], row["quantity"], row["frame"]): row for row in json.loads(text)["rows"]}


def test_values_are_numbers_times_rates(constant, numbers):
    rows = constant
    for quantity, name, frame, scale, unit in (
        ("geocentre_z", "geocentre_z", "CF", 1.0, "mm yr-1"),
        ("j2", "j2", "", 1e11, "1e-11 yr-1"),
        ("polar_motion_x", "polar_motion_x", "", 1.0, "mas yr-1"),
        ("length_of_day_change", "length_of_day_change", "", 100.0, "ms century-1"),
    ):
        field = numbers[name].sel(frame=frame) if frame else numbers[name]
        parts = field.values * AMOUNTS * scale
        spread = np.abs(field.values) * SIGMAS * scale * WIDE
        for source, part, sigma in zip((*SOURCES, "total"), (*parts, parts.sum()), (*spread, None), strict=True):
            row = rows[source, quantity, frame]
            assert row["rate"] == pytest.approx(part, rel=1e-9)
            assert row["unit"] == unit
            # sources of a file of rates have errors of their own
            assert row["half_width"] == pytest.approx(np.hypot(*spread) if sigma is None else sigma, rel=1e-9)
    assert all(rows[source, "geocentre_x", "CM"]["rate"] == pytest.approx(0.0, abs=1e-15) for source in SOURCES)


def test_stokes_coefficients_and_j2_agree(constant):
    rows = constant
    zonal, j2 = rows["total", "C20", ""]["rate"], rows["total", "j2", ""]["rate"]
    assert j2 * 1e-11 == pytest.approx(-np.sqrt(5.0) * zonal * 1e-12, rel=1e-12)
    names = [name for source, name, frame in rows if source == "total" and name[0] in "CS" and frame in ("", "CF")]
    assert " ".join(names) == "C10 C11 S11 C20 C21 S21 C22 S22 C30 C31 S31 C32 S32 C33 S33"
    # degree 1 is the centre of mass: C10 = z / (sqrt(3) a)
    length = rows["total", "geocentre_z", "CE"]["rate"] * 1e-3 / (np.sqrt(3.0) * 6.371e6)
    assert rows["total", "C10", "CE"]["rate"] * 1e-12 == pytest.approx(length, rel=1e-9)


def test_a_record_gives_what_its_rates_give(capsys, constant, ledger_file):
    """Straight lines whose error grows with time from their start are constant rates with that error."""
    record = rows_of(run(capsys, "--ledger", ledger_file, *AS_JSON))
    assert constant.keys() == record.keys()
    # yearly values are 365 and 366 days apart: 1e-3 of a rate
    for key, row in constant.items():
        assert record[key]["rate"] == pytest.approx(row["rate"], rel=1e-3, abs=1e-12)
        assert record[key]["half_width"] == pytest.approx(row["half_width"], rel=1e-3, abs=1e-6)


def test_speed_direction_and_their_errors(constant, numbers):
    rows = constant
    per_gt = np.stack([numbers[f"polar_motion_{axis}"].values for axis in "xy"])
    way = per_gt @ AMOUNTS
    covariance = (per_gt * SIGMAS**2) @ per_gt.T
    speed, direction = (rows["total", f"polar_motion_{name}", ""] for name in ("speed", "direction"))
    assert speed["rate"] == pytest.approx(float(centimetres(np.hypot(*way))))
    assert direction["rate"] == pytest.approx(float(pole_direction(*way)))
    along = way / np.hypot(*way)
    across = np.array([-along[1], along[0]])
    sigma = np.sqrt(along @ covariance @ along)
    assert speed["half_width"] == pytest.approx(WIDE * float(centimetres(sigma)), rel=1e-5)
    turn = np.rad2deg(np.sqrt(across @ covariance @ across) / np.hypot(*way))
    assert direction["half_width"] == pytest.approx(WIDE * turn, rel=1e-5)
    # the place of a source alone says where it moves the pole
    assert rows[SOURCES[0], "polar_motion_direction", ""]["half_width"] == pytest.approx(0.0, abs=1e-5)


def test_a_pole_at_rest_goes_nowhere():
    drift = Drift(0.0, 0.0, np.diag([1.0, 4.0]))
    assert drift.speed == pytest.approx((0.0, float(centimetres(2.0))))
    assert np.isnan(drift.direction).all()


def test_the_observed_pole_stands_beside_it(capsys, ledger_file):
    found = json.loads(run(capsys, "--ledger", ledger_file, "--window", "2002-01-01", "2010-01-01", "--json"))
    assert found["window"] == ["2002-01-01", "2010-01-01"]
    expected = observed_drift(("2002-01-01", "2010-01-01"))
    poles = found["pole"]
    for axis in "xy":
        label = f"{axis} [mas yr-1]"
        assert poles["observed"][label] == pytest.approx(float(expected[f"{axis}_rate"]))
        assert poles["difference"][label] == pytest.approx(poles["observed"][label] - poles["computed"][label])
        width = np.hypot(*(poles[name][f"{axis} half width [mas yr-1]"] for name in ("observed", "computed")))
        assert poles["difference"][f"{axis} half width [mas yr-1]"] == pytest.approx(width)
    # a straight record moves the pole straight
    rate, years = poles["computed"]["x [mas yr-1]"], 2922 / 365.25
    assert len(found["track"]["time"]) == 9
    assert found["track"]["x [mas]"][0] == 0.0
    assert found["track"]["x [mas]"][-1] == pytest.approx(rate * years, rel=1e-3)
    assert "reported, not asserted" in found["about"]


def test_printed(capsys, ledger_file, tmp_path):
    target = tmp_path / "out.csv"
    picture = tmp_path / "pole.svg"
    text = run(capsys, "--ledger", ledger_file, "--csv", str(target), "--figure", str(picture))
    for words in (
        "in CM 0 by definition",
        "J2 [1e-11/yr]",
        "speed [cm/yr]",
        "day [ms/century]",
        "S22",
        "observed, all causes",
        "slowly against the Chandler period",
        "Not in the computed numbers: glacial isostatic adjustment",
        "an invented record",
        "takes residuals as white, which they are not",
        "licensed practice decide",
    ):
        assert words in text.replace("\n", " ")
    assert max(map(len, text.splitlines())) <= 135
    assert "The sources do not all span the same time" not in text
    with target.open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    # 9 of the geocentre, 6 of figure, pole and spin, 3 coefficients of degree 1 in 3 frames, 21 of degrees 2 to 4
    assert len(rows) == 3 * (9 + 6 + 9 + 21)
    assert {row["interval"] for row in rows} == {"1 sigma"}
    drawn = picture.read_text(encoding="utf-8")
    assert "observed, without its cycles" in drawn
    assert "its drift" in drawn
    assert "an invented record" in drawn


def test_before_the_observed_record_the_computed_pole_is_printed(capsys, tmp_path):
    path, picture = tmp_path / "old.csv", tmp_path / "pole.svg"
    path.write_text(ledger(12, first=1930), encoding="utf-8")
    text = run(capsys, "--ledger", str(path), "--figure", str(picture))
    assert "Observed pole: not compared. window: the observed pole is known from 1962-01-01" in text.replace("\n", " ")
    assert "observed, all causes" not in text
    assert "Figure, pole and spin" in text
    drawn = picture.read_text(encoding="utf-8")
    assert ">computed</text>" in drawn
    assert "without its cycles" not in drawn


def test_a_short_window_is_not_compared(tmp_path):
    path = tmp_path / "short.csv"
    path.write_text(ledger(4), encoding="utf-8")
    found, why = _observed(mass_of({**RECORD, "ledger_file": path}))
    assert found is None
    assert "must be 6.4 years or longer" in why


def test_sources_of_different_times_are_told(rates_file, ledger_file, tmp_path):
    path = tmp_path / "earlier.csv"
    path.write_text(RATES.replace("2000-01-01", "1995-01-01", 1), encoding="utf-8")
    assert not mass_of({**RECORD, "rates_file": path}).same_times
    assert mass_of({**RECORD, "rates_file": rates_file}).same_times
    assert mass_of({**RECORD, "ledger_file": ledger_file}).same_times
    late = tmp_path / "late.csv"
    lines = [line for line in ledger(12).splitlines() if not line.startswith("2000-01-01,glaciers_17")]
    late.write_text("\n".join(lines) + "\n", encoding="utf-8")
    assert not mass_of({**RECORD, "ledger_file": late}).same_times


def test_errors_shared_within_a_group_add_up(rates_file, numbers):
    mass = mass_of({**RECORD, "rates_file": rates_file})
    apart = mass.rates_of(numbers, ["j2"])
    mass.held["error_group"] = "one paper"
    together = mass.rates_of(numbers, ["j2"])
    per_gt = np.abs(numbers["j2"].values)
    assert float(apart["j2_total_sigma"]) == pytest.approx(np.hypot(*(per_gt * SIGMAS)))
    assert float(together["j2_total_sigma"]) == pytest.approx((per_gt * SIGMAS).sum())


def test_a_record_without_shared_times_gives_a_straight_track(tmp_path, numbers):
    path = tmp_path / "ledger.csv"
    lines = ledger(12).splitlines()
    # the second source half a year later
    path.write_text("\n".join(x.replace("-01-01,glac", "-07-01,glac") for x in lines) + "\n", encoding="utf-8")
    mass = mass_of({**RECORD, "ledger_file": path})
    track = mass.track(numbers, Drift(1.0, -2.0, np.zeros((2, 2))))
    years = (pd.Timestamp("2012-07-01") - pd.Timestamp("2000-01-01")).days / 365.25
    assert list(track["x"]) == pytest.approx([0.0, years])
    assert list(track["y"]) == pytest.approx([0.0, -2.0 * years])


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ([], "give one of --ledger FILE, --rates FILE or --published SET, got 0"),
        (["--rates", "RATES", "--published", "otosaka 2023"], "got 2 of them"),
        (["--rates", "RATES", "--window", "2000-01-01", "2010-01-01"], "--window: goes with --ledger only"),
        (["--rates", "RATES", "--seasonal"], "--seasonal: goes with --ledger only"),
        (["--ledger", "LEDGER", "--window", "1980-01-01", "1990-01-01"], "too few values from 1980-01-01"),
        (["--ledger", "LEDGER", "--window", "2001-01-01", "2001-02-01"], "has too few values from 2001-01-01"),
        (["--ledger", "LEDGER", "--window", "2010-01-01", "2000-01-01"], "must end after it starts"),
        (["--ledger", "LEDGER", "--drop", "atlantis"], "'atlantis' is not among the sources"),
        (["--rates", "RATES", "--interval", "80 %"], "no interval '80 %'"),
        (["--rates", "RATES", "--figure", "pole.gif"], "figure: must end in .png, .pdf or .svg"),
        (["--rates", "RATES", "--stokes-degree", "65"], "--stokes-degree: must not be more than --max-degree 64"),
        (["--published", "nobody 1900"], "nobody 1900"),
        (["--rates", "RATES", "--earth", "moon"], "no Earth named 'moon'"),
    ],
)
def test_refusals(arguments, message, rates_file, ledger_file, capsys):
    files = {"RATES": rates_file, "LEDGER": ledger_file}
    assert main(["motions", *(files.get(word, word) for word in arguments), *COARSE]) == 1
    captured = capsys.readouterr()
    assert message in captured.err
    assert captured.err.count("\n") == 1
    assert captured.out == ""


def test_mass_of_says_what_it_lacks():
    with pytest.raises(InputError, match="give one of"):
        mass_of(RECORD)
