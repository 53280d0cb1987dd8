"""What a study leaves: conventions, tables, words, provenance; whole or not at all."""

import hashlib
import json
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from massfingerprint.errors import DamagedFileError, FolderError, TableError
from massfingerprint.study.folder import TABLE_NAMES, read_folder
from massfingerprint.study.inputs import read_study
from massfingerprint.study.run import run_study

CHECKER = [str(Path(sys.executable).parent / "compliance-checker")]
# Attributes of ACDD-1.3 that have no meaning for these files: nothing vertical, no instrument, no standard name per gigatonne.
WITHOUT_MEANING = ("vertical", "instrument", "platform", "contributor", "program not", "metadata_link", "standard_name")


FILES = ("patterns.nc", "sites.nc", "ledger.nc")


def checked(folder, standard, place):
    """Report of the checker on each file, and its exit code; one process for all, its start takes seconds."""
    reports = [place / f"{name}.txt" for name in FILES]
    outputs = [word for report in reports for word in ("--output", str(report))]
    files = [str(folder / name) for name in FILES]
    run = [*CHECKER, f"--test={standard}", "--criteria=strict", *outputs, *files]
    done = subprocess.run(run, capture_output=True, text=True, check=False)
    texts = [report.read_text(encoding="utf-8") for report in reports]
    assert "exceptions occurred" not in done.stdout + done.stderr + "".join(texts)
    return done.returncode, dict(zip(FILES, texts, strict=True))


def test_files_pass_the_cf_checker_strictly(done, tmp_path):
    """CF-1.11 by the compliance-checker package, nothing tolerated."""
    code, reports = checked(done.folder, "cf:1.11", tmp_path)
    assert code == 0, reports
    assert all("All tests passed!" in text for text in reports.values())


def test_files_carry_every_discovery_attribute_that_applies(done, tmp_path):
    """ACDD-1.3 by the compliance-checker package: all that is missing is on the list of what has no meaning here."""
    places = ("geospatial_lat_resolution", "geospatial_lon_resolution")  # of single sites, or of no place
    absent = {"sites.nc": places, "patterns.nc": ("find time",), "ledger.nc": (*places, "find lat", "find lon")}
    for name, text in checked(done.folder, "acdd:1.3", tmp_path)[1].items():
        missing = [line for line in text.splitlines() if line.startswith("*")]
        assert [line for line in missing if not any(w in line for w in (*WITHOUT_MEANING, *absent[name]))] == [], name


def test_names_in_the_folder(done):
    found = sorted(str(p.relative_to(done.folder)) for p in done.folder.rglob("*") if p.is_file())
    tables = [f"tables/{name}.csv" for name in TABLE_NAMES]
    single = ["README.txt", "ledger.nc", "patterns.nc", "provenance.json", "sites.nc", "summary.json", "summary.txt"]
    assert found == sorted([*single, *tables])
    guide = (done.folder / "README.txt").read_text(encoding="utf-8")
    assert [name for name in found if name not in guide and name != "README.txt"] == []


def test_sites_of_the_file_are_those_of_the_study(done):
    """Double precision throughout: what is read is what was computed."""
    read = read_folder(done.folder)
    level = read.sites["relative_sea_level_total"].transpose("time", "site")
    np.testing.assert_array_equal(level.values, done.series["relative_sea_level_total"].values)
    np.testing.assert_array_equal(
        read.sites["bedrock_up_rate_total"].transpose("window", "site").values, done.rates["bedrock_up_total"].values
    )
    assert read.sites["site"].values.tolist() == done.at_sites["site"].values.tolist()
    assert read.ledger["error_model"].values.tolist() == ["random_walk", "systematic", "independent"]
    xr.testing.assert_allclose(read.patterns()["relative_sea_level"], done.patterns["relative_sea_level"], rtol=1e-6)


def test_patterns_of_the_file_can_be_evaluated_anywhere(done):
    import massfingerprint as mf  # noqa: PLC0415

    here = mf.at_sites(read_folder(done.folder).patterns(), done.inputs.sites)
    np.testing.assert_array_equal(here["bedrock_up_tapered"].values, done.at_sites["bedrock_up"].values)


def test_tables_hold_the_numbers_and_add_up(done):
    tables = read_folder(done.folder).tables
    rates = tables["site_rates"]
    assert rates["id"].is_unique
    one = rates[rates["id"] == "site-rate:relative_sea_level:all-years:1-1:total"].iloc[0]
    assert one["site"] == "=1+1"
    assert one["value"] == float(done.rates["relative_sea_level_total"].sel(window="all years", site="=1+1"))
    assert one["half_width"] == pytest.approx(1.6448536 * one["sigma"])
    for _, group in rates.groupby(["field", "window", "site"]):
        parts = group[group["source"] != "total"]["value"].sum()
        assert group[group["source"] == "total"]["value"].iloc[0] == pytest.approx(parts, rel=1e-12)
    levels = tables["site_levels"]
    assert levels["id"].is_unique
    assert not ((levels["time"] == "2007-01-01") & levels["source"].isin(["total", "glaciers_01"])).any()
    lost = tables["per_gigatonne"]
    level = lost[lost["field"] == "relative_sea_level"]
    assert (level["lowest"] <= level["highest"]).all()
    # the value, tapered, is a mean over the cells of the source, so it lies between the ends of the range
    assert ((level["lowest"] <= level["value"]) & (level["value"] <= level["highest"])).all()
    assert len(tables["site_rates_shown"]) == 6


def test_names_that_a_spreadsheet_or_a_browser_would_run_are_harmless(done):
    for path in (done.folder / "tables").iterdir():
        for line in path.read_text(encoding="utf-8").splitlines():
            for cell in line.split(","):
                text = cell.lstrip('"')
                assert not text.startswith(("=", "+", "@")), line
                assert not text.startswith("-") or text[1:2].isdigit(), line
    assert list(done.folder.rglob("*.htm*")) == []


def test_summary_says_what_is_and_what_is_not_in_it(done):
    text = (done.folder / "summary.txt").read_text(encoding="utf-8")
    for words in ("Small study", "Global mean (barystatic)", "90 %", "Écluse d'été", "glacial isostatic adjustment",
                  "thermal expansion", "For screening only", "1 mm over this ocean", "id global-rate:all-years:total"):  # fmt: skip
        assert words in text, words
    data = json.loads((done.folder / "summary.json").read_bytes())
    window = data["windows"][0]
    assert window["global_mean_rate"]["value"] == pytest.approx(
        375.0 / done.patterns.attrs["gigatonnes_per_millimetre"], rel=0.01
    )
    total = window["sites"][1]["relative_sea_level_rate"]["total"]["value"]
    assert total == float(done.rates["relative_sea_level_total"].sel(window="all years", site="=1+1"))
    assert "At =1+1, the mass sources together raised relative sea level by" in window["sites"][1]["sentence"]
    assert "atmosphere" in data["left_out"]


def test_provenance_names_inputs_by_checksum(done):
    about = json.loads((done.folder / "provenance.json").read_bytes())
    mass = done.recipe.mass.file
    assert about["inputs"]["mass"] == {"file": "mass.csv", "sha256": hashlib.sha256(mass.read_bytes()).hexdigest()}
    assert set(about["inputs"]) == {"study", "mass", "sites"}
    assert about["factors"]["gigatonnes_per_millimetre"] == pytest.approx(362.93, abs=0.02)
    assert about["choices"]["max_degree"] == 16
    assert set(about["outlines"]) == {"greenland", "west_antarctica", "glaciers_01"}
    assert about["constants"]["SPHERE_RADIUS"]["value"] == 6.371e6
    assert about["versions"]["ducc0"]
    assert str(mass.parent) not in (done.folder / "provenance.json").read_text(encoding="utf-8").split('"command"')[0]


def test_a_folder_that_is_there_is_kept_until_it_may_be_replaced(done, study_file):
    first = Path(shutil.copytree(done.folder, study_file.parent / "out"))
    stamp = (first / "summary.txt").stat().st_mtime_ns
    with pytest.raises(FolderError, match=r"is there already. Use --replace"):
        run_study(study_file)
    assert (first / "summary.txt").stat().st_mtime_ns == stamp
    run_study(study_file, replace=True)
    assert (first / "summary.txt").stat().st_mtime_ns > stamp


@pytest.mark.parametrize("at", ["ledger.nc", "README.txt"])
def test_a_full_disk_leaves_the_old_folder(done, study_file, monkeypatch, at):
    """A write that the disk refuses, at an early and at the last file."""
    folder = Path(shutil.copytree(done.folder, study_file.parent / "out"))
    before = {p: p.read_bytes() for p in folder.rglob("*") if p.is_file()}
    from massfingerprint.files import atomic, netcdf  # noqa: PLC0415

    real = atomic.replacing

    def full(path):
        if str(path).endswith(at):
            raise OSError(28, "No space left on device")
        return real(path)

    monkeypatch.setattr(atomic, "replacing", full)
    monkeypatch.setattr(netcdf, "replacing", full)
    with pytest.raises(FolderError, match=r"No space left on device.*unchanged"):
        run_study(study_file, replace=True)
    assert {p: p.read_bytes() for p in folder.rglob("*") if p.is_file()} == before
    assert [p.name for p in folder.parent.iterdir() if "new-" in p.name] == []


@pytest.mark.parametrize(
    ("name", "error"),
    [("sites.nc", DamagedFileError), ("tables/mass.csv", TableError), ("provenance.json", DamagedFileError)],
)
def test_a_damaged_folder_is_named(done, tmp_path, name, error):
    folder = Path(shutil.copytree(done.folder, tmp_path / "out"))
    path = folder / name
    path.write_bytes(path.read_bytes()[: path.stat().st_size // 3] if name != "tables/mass.csv" else b"")
    with pytest.raises(error, match=Path(name).name):
        read_folder(folder)
    path.unlink()
    with pytest.raises(FolderError, match=f"lacks {name}"):
        read_folder(folder)
    with pytest.raises(FolderError, match="no such folder"):
        read_folder(folder / "nowhere")


def test_inputs_are_left_as_they_were(study_file):
    before = {p: p.read_bytes() for p in study_file.parent.iterdir()}
    run_study(study_file)
    assert {p: p.read_bytes() for p in before} == before
    assert read_study(study_file)[0].raw == study_file.read_bytes()
