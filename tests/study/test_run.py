"""The chain is the earlier pieces, one after the other; kept patterns change nothing."""

import numpy as np
import pytest
import xarray as xr

import massfingerprint as mf
from massfingerprint.study.inputs import read_study
from massfingerprint.study.patterns import prepare
from massfingerprint.study.run import KEPT, compute_study, run_study


def test_the_chain_gives_what_its_pieces_give(done):
    """Every number against the public functions called one by one; rounding only."""
    ocean = mf.ocean_fraction(3.0)
    solver = mf.prepare_solver(ocean, mf.love_numbers(max_degree=16), max_degree=16)
    load = mf.spread_mass(mf.regions("greenland", "west_antarctica", "glaciers_01"), ocean)
    patterns = mf.solve_fingerprints(solver, load, outputs=("relative_sea_level", "sea_surface", "bedrock_up"))
    here = mf.at_sites(patterns, done.inputs.sites)
    for name in ("relative_sea_level", "sea_surface", "bedrock_up"):
        scale = float(abs(here[name]).max())
        np.testing.assert_allclose(done.at_sites[name].values, here[f"{name}_tapered"].values, atol=1e-12 * scale)
        change = here[name] - here[f"{name}_tapered"]
        np.testing.assert_allclose(done.at_sites[f"{name}_truncation"].values, change.values, atol=1e-12 * scale)
        here[name] = here[f"{name}_tapered"].assign_attrs(here[name].attrs)
    ledger = done.inputs.ledger
    series = mf.sea_level_series(here, ledger)["relative_sea_level_total"]
    np.testing.assert_allclose(done.series["relative_sea_level_total"].values, series.values, rtol=1e-10, atol=1e-12)
    rate = mf.sea_level_rates(here, ledger, windows=done.inputs.windows)["relative_sea_level_total"]
    np.testing.assert_allclose(done.rates["relative_sea_level_total"].values, rate.values, rtol=1e-10)
    np.testing.assert_allclose(
        done.patterns["relative_sea_level"].values, patterns["relative_sea_level"].values, rtol=0, atol=1e-12
    )
    mean = mf.barystatic(ledger, gt_per_mm=solver.gigatonnes_per_millimetre)
    np.testing.assert_allclose(done.global_mean["sea_level_total"].values, mean["sea_level_total"].values)


def test_kept_patterns_give_the_same_bits(study_file):
    recipe, inputs = read_study(study_file)
    kept = study_file.parent / KEPT
    fresh = compute_study(recipe, inputs)
    first = compute_study(recipe, inputs, kept=kept)
    again = compute_study(recipe, inputs, kept=kept)
    assert [fresh.account["reused"], first.account["reused"], again.account["reused"]] == [0, 0, 3]
    for study in (first, again):
        xr.testing.assert_identical(study.patterns, fresh.patterns)
        xr.testing.assert_identical(study.rates, fresh.rates)


def test_a_damaged_kept_pattern_is_noticed_and_solved_again(study_file):
    recipe, inputs = read_study(study_file)
    kept = study_file.parent / KEPT
    first = compute_study(recipe, inputs, kept=kept)
    entry = sorted(kept.iterdir())[1]
    content = bytearray(entry.read_bytes())
    content[-100] ^= 1
    entry.write_bytes(bytes(content))
    again = compute_study(recipe, inputs, kept=kept)
    assert again.account["reused"] == 2
    assert len(again.account["damaged"]) == 1
    assert entry.name in again.account["damaged"][0]
    xr.testing.assert_identical(again.patterns, first.patterns)
    assert compute_study(recipe, inputs, kept=kept).account == {**again.account, "reused": 3, "damaged": [],
        "seconds": pytest.approx(again.account["seconds"], abs=60.0)}  # fmt: skip


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("max_degree = 16", "max_degree = 15"),
        ("spacing = 3.0", "spacing = 5.0"),
        ("[output]", "[earth]\nrotation = false\n[output]"),
        ("[output]", '[output]\nreference_frame = "CF"'),
    ],
)
def test_another_problem_has_another_fingerprint(study_file, old, new):
    text = study_file.read_text(encoding="utf-8")
    recipe, _ = read_study(study_file)
    study_file.write_text(text.replace(old, new), encoding="utf-8")
    other, _ = read_study(study_file)
    assert prepare(recipe).fingerprint(recipe) != prepare(other).fingerprint(other)
    assert prepare(recipe).fingerprint(recipe) == prepare(recipe).fingerprint(recipe)


def test_kept_patterns_without_a_field_that_is_wanted_are_solved_again(study_file):
    kept = study_file.parent / KEPT
    compute_study(*read_study(study_file), kept=kept)
    text = study_file.read_text(encoding="utf-8")
    study_file.write_text(text.replace("[output]", '[output]\nfields = ["geoid"]'), encoding="utf-8")
    assert compute_study(*read_study(study_file), kept=kept).account["reused"] == 0


def test_since_moves_the_zero_and_not_the_rates(study_file):
    recipe, inputs = read_study(study_file)
    plain = compute_study(recipe, inputs)
    study_file.write_text(study_file.read_text(encoding="utf-8") + "since = 2005-01-01\n", encoding="utf-8")
    moved = compute_study(*read_study(study_file))
    at = {"time": "2005-01-01"}
    assert float(abs(moved.series["relative_sea_level_total"].sel(at)).max()) == 0.0
    assert moved.series.attrs["reference_epoch"] == "2005-01-01"
    np.testing.assert_allclose(
        moved.rates["relative_sea_level_total"].values, plain.rates["relative_sea_level_total"].values, rtol=1e-12
    )


def test_without_writing_nothing_is_left(study_file):
    before = sorted(study_file.parent.iterdir())
    study = run_study(study_file, write=False)
    assert study.folder is None
    assert sorted(study_file.parent.iterdir()) == before


def test_progress_goes_from_nothing_to_all(study_file):
    seen = []
    run_study(study_file, progress=lambda *step: seen.append(step))
    assert [step for step in seen if step[0] == "patterns"] == [("patterns", n, 3) for n in (1, 2, 3)]
    assert seen[-1][0] == "files"
    assert seen[-1][1] == seen[-1][2]
