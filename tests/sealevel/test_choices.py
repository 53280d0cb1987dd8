"""The table of choices: every row is that choice alone, recomputed here by hand, and the groups add up as said."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

import massfingerprint as mf
from massfingerprint.earth.choice import ChosenEarth
from massfingerprint.earth.rotation import RotationConstants
from massfingerprint.errors import InputError
from massfingerprint.load.latitudes import geocentric_ocean, geocentric_outlines, geocentric_sites
from massfingerprint.sealevel.choices import Physics, choice_table, other_choices, spread_by_group
from massfingerprint.sealevel.coasts import coast_values

USUAL = Physics(max_degree=64, spacing=2.0)
SITES = pd.DataFrame({"site": ["near", "far"], "lat": [64.0, -34.0], "lon": [-22.0, 151.0]})
MASS = {"greenland_southeast": -80.0, "west_antarctica_amundsen": -120.0}


@pytest.fixture(scope="module")
def outlines():
    return mf.regions(*MASS)


@pytest.fixture(scope="module")
def told():
    return []


@pytest.fixture(scope="module")
def table(outlines, told):
    left_out = ("five_layer", "prem_200s", "prem_oceanic", "prem_no_crust", "prem_as_published")
    chosen = {key: physics for key, physics in other_choices(USUAL).items() if key[1] not in left_out}
    return choice_table(outlines, MASS, SITES, usual=USUAL, others=chosen, progress=lambda a, b: told.append((a, b)))


@pytest.fixture(scope="module")
def usual(outlines):
    return by_hand(outlines)


def by_hand(outlines, sites=SITES, *, ocean=None, earth="prem", **choices):
    ocean = mf.ocean_fraction(2.0) if ocean is None else ocean
    love = mf.love_numbers(earth, max_degree=2048)
    prepared = mf.prepare_solver(ocean, love, **{"max_degree": 64, **choices})
    here = coast_values(prepared, outlines, mf.spread_mass(outlines, ocean), sites)
    return np.array(list(MASS.values())) @ here["relative_sea_level"].values


def row(table, chosen):
    return table["change"].values[list(table["chosen"].values).index(chosen)]


def test_the_usual_is_what_the_commands_print(table, usual):
    assert table["usual"].values == pytest.approx(usual, rel=1e-12)
    assert float(table["mean"]) == pytest.approx(200.0 / 362.93, rel=2e-3)
    assert table["usual"].values[0] < 0.0 < table["usual"].values[1]


@pytest.mark.parametrize(
    ("chosen", "choices"),
    [
        ("prem_continental", {"earth": "prem_continental"}),
        ("k_s 0.930, hydrostatic", {"rotation": RotationConstants(secular_love_number=0.930)}),
        ("moved water 1027 kg m-3", {"redistributed_density": 1027.0}),
        ("degree 32", {"max_degree": 32}),
    ],
)
def test_every_row_is_that_choice_alone(table, outlines, usual, chosen, choices):
    assert row(table, chosen) == pytest.approx(by_hand(outlines, **choices) - usual, abs=1e-12)


def test_the_latitudes_and_the_coast(table, outlines, usual):
    moved = by_hand(
        geocentric_outlines(outlines), geocentric_sites(SITES), ocean=geocentric_ocean(mf.ocean_fraction(2.0))
    )
    assert row(table, "geocentric") == pytest.approx(moved - usual, abs=1e-12)
    front = by_hand(outlines, ocean=mf.ocean_fraction(2.0, coastline="ice front"))
    assert row(table, "ice front") == pytest.approx(front - usual, abs=1e-12)


def test_all_built_in_earths_and_one_of_each_group_stand_in_it():
    groups = [group for group, _ in other_choices(USUAL)]
    assert list(dict.fromkeys(groups)) == [
        "Earth",
        "rotation",
        "water",
        "latitude",
        "coast of Antarctica",
        "resolution",
    ]
    assert groups.count("Earth") == 7
    other = other_choices(replace(USUAL, earth=ChosenEarth("prem_oceanic")))
    assert ("Earth", "prem") in other
    assert ("Earth", "prem_oceanic") not in other


def test_groups_leave_out_what_nobody_doubts(table, told):
    spread = spread_by_group(table)
    kept = ~table["chosen"].isin(["none", "homogeneous", "five_layer"])
    earths = table["change"].values[(table["group"] == "Earth").values & kept.values]
    assert spread["highest"].sel(group="Earth").values == pytest.approx(np.maximum(earths.max(axis=0), 0.0))
    assert spread["lowest"].sel(group="Earth").values == pytest.approx(np.minimum(earths.min(axis=0), 0.0))
    largest = [
        np.abs(table["change"].values[(table["group"] == g).values & kept.values]).max(axis=0)
        for g in spread["group"].values
    ]
    assert spread["together"].values == pytest.approx(np.sqrt(np.sum(np.square(largest), axis=0)))
    assert told[-1] == (len(told), len(told))


def test_what_cannot_be_used_is_refused(outlines):
    with pytest.raises(
        InputError, match="mass: must be given for greenland_southeast, west_antarctica_amundsen, got greenland"
    ):
        choice_table(outlines, {"greenland": -1.0}, SITES, usual=USUAL)
    with pytest.raises(InputError, match="max_degree: must be a whole number of 4 or more, got 3"):
        choice_table(outlines, MASS, SITES, usual=replace(USUAL, max_degree=3))
