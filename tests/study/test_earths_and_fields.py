"""A study with another Earth, another density of the moving water, and every field."""

import numpy as np
import pytest

import massfingerprint as mf
from massfingerprint.earth.models import MODELS
from massfingerprint.earth.table import earth_model_table
from massfingerprint.errors import StudyError
from massfingerprint.files.tables import csv_text
from massfingerprint.sealevel.fingerprints import FIELDS
from massfingerprint.study.inputs import read_study
from massfingerprint.study.metadata import input_files, provenance
from massfingerprint.study.run import KEPT, compute_study


def changed(study_file, earth, output=""):
    text = study_file.read_text(encoding="utf-8")
    study_file.write_text(text.replace("[output]", f"[earth]\n{earth}\n[output]\n{output}"), encoding="utf-8")
    return read_study(study_file)


def test_every_field_and_another_earth(study_file):
    """As the pieces called one by one, also from kept patterns; rounding only."""
    words = ", ".join(f'"{name}"' for name in FIELDS)
    earth = 'model = "prem_oceanic"\nredistributed_density = 1027'
    recipe, inputs = changed(study_file, earth, f"fields = [{words}]")
    kept = study_file.parent / KEPT
    compute_study(recipe, inputs, kept=kept)
    study = compute_study(recipe, inputs, kept=kept)
    assert study.account["reused"] == 3
    ocean = mf.ocean_fraction(3.0)
    love = mf.love_numbers("prem_oceanic", max_degree=16)
    solver = mf.prepare_solver(ocean, love, max_degree=16, redistributed_density=1027.0)
    load = mf.spread_mass(mf.regions("greenland", "west_antarctica", "glaciers_01"), ocean)
    patterns = mf.solve_fingerprints(solver, load, outputs=FIELDS)
    for name in FIELDS:
        expected = patterns[name].values
        np.testing.assert_allclose(
            study.patterns[name].values, expected, rtol=0, atol=1e-12 * abs(expected).max(), err_msg=name
        )
        assert study.patterns[name].attrs["units"] == patterns[name].attrs["units"]
    assert study.patterns.attrs["redistributed_density"] == 1027.0


def test_an_earth_from_a_file_is_used_hashed_and_told(study_file):
    path = study_file.parent / "layers.csv"
    path.write_text(csv_text(earth_model_table(MODELS["five_layer"].make())), encoding="utf-8")
    recipe, inputs = changed(study_file, 'file = "layers.csv"')
    study = compute_study(recipe, inputs)
    assert input_files(recipe)["earth"] == path
    told = provenance(recipe, inputs, study.patterns, made="now")
    assert told["choices"]["earth"] == "layers.csv"
    assert len(told["inputs"]["earth"]["sha256"]) == 64


@pytest.mark.parametrize(
    ("earth", "words"),
    [
        ('model = "moon"', r"\[earth\] model: no Earth 'moon'"),
        ('file = "no.csv"', r"\[earth\] file: there is no file"),
        ("period = -3", r"\[earth\] period: must be a positive number of seconds, got -3"),
        ('model = "five_layer"\nperiod = 20.0', "has no quality factors"),
        ('model = "prem"\nlove_frame = "CF"', "only a table of Love numbers has one"),
        ("redistributed_density = 0", "must be a positive number of kg m-3, got 0"),
    ],
)
def test_what_cannot_be_used_is_told_with_its_line(study_file, earth, words):
    with pytest.raises(StudyError, match=words):
        changed(study_file, earth)
