"""Every number of a table can be recomputed from its trace, by other means than the code that made it."""

import numpy as np
import pytest

from massfingerprint.errors import InputError
from massfingerprint.sphere.harmonics import to_shcoeffs
from massfingerprint.study.explain import trace
from massfingerprint.study.folder import read_folder


@pytest.fixture(scope="module")
def folder(done):
    return read_folder(done.folder)


def all_ids(folder):
    tables = ("mass", "per_gigatonne", "site_rates", "site_levels")
    return [str(one) for name in tables for one in folder.tables[name]["id"]]


def recomputed(folder, found):
    """Value of a trace from its inputs, with numpy's polynomial fit and pyshtools' expansion as the other means."""
    named = {one.name: one.value for one in found.inputs}
    if found.formula.startswith("sum over sources"):
        return sum(named.values())
    if found.formula.startswith("slope"):
        days = np.array(named["time"], dtype="datetime64[D]").astype(float)
        weights = 1.0 / np.array(named["sigma"]) if "sigma" in named else None
        return np.polyfit((days - days.mean()) / 365.25, named["mass_change"], 1, w=weights)[0]
    if found.formula.startswith("last minus first"):
        return named["mass_change"][-1] - named["mass_change"][0]
    if "per_gigatonne_lost *" in found.formula:
        mass = named.get("mass_rate", named.get("mass_change"))
        return -named["per_gigatonne_lost"] * mass
    if "gigatonnes_per_millimetre" in found.formula:
        return -next(v for k, v in named.items() if k.startswith("mass_")) / named["gigatonnes_per_millimetre"]
    fields, source = named["coefficients"].split(" of ")
    source = source.removesuffix(" in patterns.nc")
    patterns = folder.patterns()
    pairs = sum(patterns[name].sel(source=source) for name in fields.split(" plus "))
    if "near_field" not in named:
        degree = pairs["degree"]
        pairs = pairs * (0.5 * (1.0 + np.cos(np.pi * ((degree - 8) / (17.0 - 8)).clip(0.0, 1.0))))  # from 8 to above 16
    return -to_shcoeffs(pairs.transpose("part", "coefficient")).expand(lat=named["lat"], lon=named["lon"]) - named.get(
        "near_field", 0.0
    )


def test_twenty_random_numbers_are_recomputed_from_their_trace(folder):
    """1e-9 of the value: the tables hold full double precision, the fits differ by rounding."""
    rng = np.random.default_rng(20030101)
    ids = all_ids(folder)
    kinds = sorted({one.split(":")[0] for one in ids})
    assert len(kinds) == 7
    chosen = [rng.choice([one for one in ids if one.startswith(f"{kind}:")]) for kind in kinds] + list(
        rng.choice(ids, 13)
    )
    assert len(chosen) == 20
    for one in chosen:
        found = trace(folder, str(one))
        assert recomputed(folder, found) == pytest.approx(found.value, rel=1e-9, abs=1e-15), one
        for part in found.inputs:
            if part.id:
                assert trace(folder, part.id).value == part.value


def test_a_trace_names_unit_record_checksum_and_model(folder):
    found = trace(folder, "site-rate:relative_sea_level:all-years:1-1:greenland")
    assert found.unit == "mm yr-1"
    assert found.words == "mean rate of relative sea level at =1+1 from greenland, all years"
    assert found.origin["mass record"] == "mass.csv"
    assert found.origin["citation"] == "invented"
    assert found.origin["error model"] == "random_walk"
    assert len(found.origin["sha256"]) == 64
    assert [one.unit for one in found.inputs] == ["mm Gt-1", "Gt yr-1"]
    assert "PREM" in trace(folder, "per-gigatonne:bedrock_up:1-1:greenland").origin["Love numbers"]


@pytest.mark.parametrize(
    ("number", "words"),
    [
        ("site-rat:a", "no kind of number is called 'site-rat'. Did you mean site-rate"),
        (
            "site-rate:relative_sea_level:all-years:1-1",
            "are written site-rate:<field>:<window>:<site>:<source>, got 3 parts",
        ),
        ("site-rate:relative_sea_level:all-year:1-1:total", "no window 'all-year' .* Did you mean all-years"),
        ("site-level:1-1:total:2007-01-01", "has no value in this study|no time '2007-01-01'"),
        ("mass-rate:all-years:greenlan", "no source 'greenlan' .* Did you mean greenland"),
    ],
)
def test_an_unknown_id_says_which_part_is_wrong(folder, number, words):
    with pytest.raises(InputError, match=words):
        trace(folder, number)
